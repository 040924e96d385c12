//! The Python with the general-purpose libraries of `requirements.txt`; `tests/run` makes it.

use std::path::Path;
use std::process::Command;

/// Runs a script of this folder with arguments; `None`, with a message, where there is no such Python.
///
/// # Panics
/// If the script fails: a comparison that cannot be made is not one that holds.
pub fn run(script: &str, arguments: &[&Path]) -> Option<String> {
    let Some(python) = std::env::var_os("BACKLIT_PYTHON") else {
        eprintln!("skipped: BACKLIT_PYTHON is not set (tests/run sets it)");
        return None;
    };
    let output = Command::new(&python)
        .arg(Path::new(env!("CARGO_MANIFEST_DIR")).join(script))
        .args(arguments)
        .env("OPENBLAS_NUM_THREADS", "1")
        .output()
        .unwrap_or_else(|error| panic!("{}: {error}", python.display()));
    assert!(
        output.status.success(),
        "{script}: {}",
        String::from_utf8_lossy(&output.stderr)
    );
    Some(String::from_utf8_lossy(&output.stdout).into_owned())
}
