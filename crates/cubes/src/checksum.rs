//! The checksum of an input, kept in the maps so that a changed input is noticed.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use sha2::{Digest, Sha256};

use crate::error::{Action, CubesError};

/// The SHA-256 of a whole file as 64 hexadecimal digits, read in pieces of 1 MiB.
///
/// It uses the processor's SHA instructions where they exist; the caller chooses when to pay for it.
///
/// # Errors
/// [`CubesError::Io`] if the file cannot be read.
pub fn checksum(path: impl AsRef<Path>) -> Result<String, CubesError> {
    let path = path.as_ref();
    let mut file = File::open(path).map_err(CubesError::io(path, Action::Read))?;
    let mut hash = Sha256::new();
    let mut piece = vec![0; 1 << 20];
    loop {
        let n = file
            .read(&mut piece)
            .map_err(CubesError::io(path, Action::Read))?;
        if n == 0 {
            break;
        }
        hash.update(&piece[..n]);
    }
    Ok(hash
        .finalize()
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// FIPS 180-2, appendix B.1: the message "abc".
    #[test]
    fn the_standard_message_has_its_published_digest() {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("abc");
        std::fs::write(&path, "abc").unwrap();
        assert_eq!(
            checksum(&path).unwrap(),
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
        assert!(
            checksum(dir.path().join("none"))
                .unwrap_err()
                .to_string()
                .contains("hint:")
        );
    }
}
