//! An output file that appears under its name only when it is complete.

use std::fs::{self, File};
use std::path::{Path, PathBuf};

use crate::error::{Action, CubesError};

/// A temporary file beside the wanted one; dropped without [`Staged::commit`] it vanishes.
#[derive(Debug)]
pub struct Staged {
    target: PathBuf,
    temporary: PathBuf,
    overwrite: bool,
    committed: bool,
}

impl Staged {
    /// Refuses an existing target unless `overwrite`, and creates the empty temporary file beside it.
    pub fn begin(target: &Path, overwrite: bool) -> Result<Self, CubesError> {
        refuse_existing(target, overwrite)?;
        let name = target.file_name().unwrap_or_default().to_string_lossy();
        let temporary = target.with_file_name(format!(".{name}.{}.tmp", std::process::id()));
        Self::begin_at(target, temporary, overwrite)
    }

    /// As [`Staged::begin`], with a name for the temporary file.
    pub fn begin_at(
        target: &Path,
        temporary: PathBuf,
        overwrite: bool,
    ) -> Result<Self, CubesError> {
        refuse_existing(target, overwrite)?;
        File::create(&temporary).map_err(CubesError::io(target, Action::Create))?;
        Ok(Self {
            target: target.into(),
            temporary,
            overwrite,
            committed: false,
        })
    }

    /// Where to write.
    pub fn temporary(&self) -> &Path {
        &self.temporary
    }

    /// Syncs the temporary file and moves it to the target.
    pub fn commit(mut self) -> Result<(), CubesError> {
        let at = |action| CubesError::io(&self.target, action);
        let file = File::options()
            .write(true)
            .open(&self.temporary)
            .map_err(at(Action::Write))?;
        file.sync_all().map_err(at(Action::Write))?;
        drop(file);
        refuse_existing(&self.target, self.overwrite)?;
        fs::rename(&self.temporary, &self.target).map_err(at(Action::Rename))?;
        self.committed = true;
        sync_folder(&self.target);
        Ok(())
    }
}

impl Drop for Staged {
    fn drop(&mut self) {
        if !self.committed {
            // Nothing can be done about a failure here, and the first error is the one to report.
            let _ = fs::remove_file(&self.temporary);
        }
    }
}

/// Makes a new name in a folder durable. Some systems cannot open folders; then the rename is merely atomic.
pub fn sync_folder(path: &Path) {
    let folder = path
        .parent()
        .filter(|p| !p.as_os_str().is_empty())
        .unwrap_or(Path::new("."));
    if let Ok(folder) = File::open(folder) {
        let _ = folder.sync_all();
    }
}

/// Refuses a folder always, and an existing file unless `overwrite`.
pub fn refuse_existing(target: &Path, overwrite: bool) -> Result<(), CubesError> {
    if target.is_dir() {
        let source = std::io::Error::from(std::io::ErrorKind::IsADirectory);
        return Err(CubesError::Io {
            path: target.into(),
            action: Action::Create,
            source,
        });
    }
    if !overwrite && target.symlink_metadata().is_ok() {
        return Err(CubesError::Exists {
            path: target.into(),
        });
    }
    Ok(())
}
