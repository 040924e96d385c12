//! Text files that the program writes: whole or not at all.

use std::fs;
use std::io::Write;
use std::path::Path;

use crate::failure::Failure;

/// Refuses a file that exists unless it may be replaced; called before the work that the file is for.
pub fn refuse_existing(path: &Path, overwrite: bool) -> Result<(), Failure> {
    if !overwrite && fs::symlink_metadata(path).is_ok() {
        return Err(Failure::Exists {
            path: path.to_path_buf(),
        });
    }
    Ok(())
}

/// Writes a text to a temporary file beside `path`, then gives it its name.
pub fn write_text(path: &Path, text: &str, overwrite: bool) -> Result<(), Failure> {
    refuse_existing(path, overwrite)?;
    let failed = |source| Failure::Write {
        path: path.to_path_buf(),
        source,
    };
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    let mut builder = tempfile::Builder::new();
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // The default of the library is for secrets; this is a file like any other, under the user's umask.
        builder.permissions(fs::Permissions::from_mode(0o666));
    }
    let mut file = builder.tempfile_in(folder).map_err(failed)?;
    file.write_all(text.as_bytes()).map_err(failed)?;
    file.as_file().sync_all().map_err(failed)?;
    file.persist(path)
        .map(drop)
        .map_err(|error| failed(error.error))
}
