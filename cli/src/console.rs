//! What goes to standard output and what to standard error.

use std::io::{self, IsTerminal, Write};

use serde::Serialize;

use crate::failure::Failure;

/// Data on standard output, everything else on standard error.
pub struct Console {
    json: bool,
    quiet: bool,
}

impl Console {
    /// `json`: one document and nothing else on standard output. `quiet`: no notes and no progress.
    pub fn new(json: bool, quiet: bool) -> Self {
        Console { json, quiet }
    }

    /// Whether a JSON document was asked for.
    pub fn json(&self) -> bool {
        self.json
    }

    /// Whether somebody looks at the progress.
    pub fn shows_progress(&self) -> bool {
        !self.quiet && io::stderr().is_terminal()
    }

    /// Writes text to standard output.
    pub fn print(&self, text: &str) -> Result<(), Failure> {
        let mut stdout = io::stdout().lock();
        stdout
            .write_all(text.as_bytes())
            .and_then(|()| stdout.flush())
            .map_err(Failure::stdout)
    }

    /// Writes one JSON document to standard output.
    pub fn print_json(&self, document: &impl Serialize) -> Result<(), Failure> {
        self.print(&json_text(document)?)
    }

    /// A note on standard error, unless quiet. What is said here is also in the result where it matters.
    pub fn note(&self, text: &str) {
        if !self.quiet {
            self.complain("note", text);
        }
    }

    /// A plain line on standard error, unless quiet.
    pub fn tell(&self, text: &str) {
        if !self.quiet {
            let _ = writeln!(io::stderr().lock(), "{text}");
        }
    }

    /// The reason why the program ends, on standard error.
    pub fn failure(&self, failure: &Failure) {
        self.complain("error", &failure.to_string());
    }

    fn complain(&self, kind: &str, text: &str) {
        // Where standard error is gone there is nobody left to tell.
        let _ = writeln!(io::stderr().lock(), "{kind}: {text}");
    }
}

/// A document as indented text with a line end; numbers that are not finite become `null`.
pub fn json_text(document: &impl Serialize) -> Result<String, Failure> {
    serde_json::to_string_pretty(document)
        .map(|text| text + "\n")
        .map_err(|source| Failure::Json { source })
}
