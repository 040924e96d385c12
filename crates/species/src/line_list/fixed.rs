//! A row of a list whose fields stand in fixed columns.

use std::path::Path;

use crate::SpeciesError;

/// A field: its name in messages, its first character (from 0) and the one behind its last.
pub(super) type Field = (&'static str, usize, usize);

pub(super) struct FixedRow<'a> {
    pub(super) path: &'a Path,
    pub(super) row: u64,
    pub(super) text: &'a str,
}

impl<'a> FixedRow<'a> {
    /// The rows that hold something, with their numbers from 1.
    pub(super) fn all(path: &'a Path, text: &'a str) -> impl Iterator<Item = FixedRow<'a>> {
        text.lines()
            .zip(1..)
            .filter(|(text, _)| !text.trim().is_empty() && !text.starts_with('#'))
            .map(move |(text, row)| FixedRow { path, row, text })
    }

    /// The text of a field without blanks; empty behind the end of the row.
    pub(super) fn field(&self, (_, from, to): Field) -> &'a str {
        let end = to.min(self.text.len());
        self.text.get(from..end).unwrap_or("").trim()
    }

    pub(super) fn refuse(&self, field: Field) -> SpeciesError {
        SpeciesError::NotANumber {
            path: self.path.to_owned(),
            row: self.row,
            column: field.0,
            got: self.field(field).to_owned(),
        }
    }

    pub(super) fn out_of_range(
        &self,
        field: Field,
        value: f64,
        need: &'static str,
    ) -> SpeciesError {
        SpeciesError::OutOfRange {
            path: self.path.to_owned(),
            row: self.row,
            column: field.0,
            value,
            need,
        }
    }

    pub(super) fn number(&self, field: Field) -> Result<f64, SpeciesError> {
        match self.field(field).parse::<f64>() {
            Ok(value) if value.is_finite() => Ok(value),
            _ => Err(self.refuse(field)),
        }
    }

    pub(super) fn above_zero(&self, field: Field) -> Result<f64, SpeciesError> {
        match self.number(field)? {
            value if value > 0.0 => Ok(value),
            value => Err(self.out_of_range(field, value, "above 0")),
        }
    }

    pub(super) fn zero_or_above(&self, field: Field) -> Result<f64, SpeciesError> {
        match self.number(field)? {
            value if value >= 0.0 => Ok(value),
            value => Err(self.out_of_range(field, value, "0 or above")),
        }
    }

    pub(super) fn weight(&self, field: Field) -> Result<f64, SpeciesError> {
        match self.number(field)? {
            value if value >= 1.0 && value.fract() == 0.0 => Ok(value),
            value => Err(self.out_of_range(field, value, "a whole number from 1")),
        }
    }
}
