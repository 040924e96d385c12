//! Where in a setup file a thing stands.

use std::fmt;
use std::path::{Path, PathBuf};

/// A key of a setup file and the line on which it stands; shown in every message.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Place {
    /// The file as the user named it.
    pub path: PathBuf,
    /// The line, counted from 1.
    pub line: usize,
    /// The key with its section, for example `cloud.temperature_K`; empty for the file as a whole.
    pub key: String,
}

impl Place {
    pub(super) fn new(path: &Path, line: usize, key: impl Into<String>) -> Box<Self> {
        // Boxed, so that an error stays small on the way up.
        Box::new(Place {
            path: path.to_path_buf(),
            line,
            key: key.into(),
        })
    }
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if !self.key.is_empty() {
            write!(f, "key `{}`, ", self.key)?;
        }
        write!(f, "{} line {}", self.path.display(), self.line)
    }
}

/// The line, counted from 1, on which the byte at `offset` stands.
pub(super) fn line_of(text: &str, offset: usize) -> usize {
    let end = offset.min(text.len());
    1 + text.as_bytes()[..end]
        .iter()
        .filter(|&&b| b == b'\n')
        .count()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_are_counted_from_one_and_an_offset_past_the_end_is_the_last_line() {
        let text = "a\nb\nc";
        assert_eq!(line_of(text, 0), 1);
        assert_eq!(line_of(text, 1), 1);
        assert_eq!(line_of(text, 2), 2);
        assert_eq!(line_of(text, 400), 3);
    }
}
