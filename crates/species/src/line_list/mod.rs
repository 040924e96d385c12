//! Line lists of others, recognised by their content or named by the user.
//!
//! Three formats: CSV with named columns ([`crate::user::read_lines`]); the 160-character records of molecular lists
//! (Rothman and others, JQSRT 96, 139 (2005), table 1); the catalogue format of millimetre lines (Pickett and others, JQSRT
//! 60, 883 (1998), table 2). Weights of such lists hold the nuclear spins, so the levels given beside them must too.

mod fixed;
mod millimetre;
mod record_160;

use std::collections::BTreeSet;
use std::fs;
use std::path::Path;
use std::str::FromStr;

use crate::{Level, Line, SpeciesError, natural_width, user};

/// The format of a line list.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Format {
    /// Comma-separated values with named columns.
    Csv,
    /// Records of 160 characters.
    Record160,
    /// The catalogue format of millimetre lines.
    Millimetre,
}

impl Format {
    /// All names that [`Format::from_str`] takes.
    pub const NAMES: [&str; 3] = ["csv", "record-160", "millimetre"];
}

impl FromStr for Format {
    type Err = ();

    fn from_str(text: &str) -> Result<Self, ()> {
        match text {
            "csv" => Ok(Format::Csv),
            "record-160" => Ok(Format::Record160),
            "millimetre" => Ok(Format::Millimetre),
            _ => Err(()),
        }
    }
}

/// What to take from a list that may hold more than one species.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Choice {
    /// Format; by default what the content looks like.
    pub format: Option<Format>,
    /// Number of the molecule in 160-character records, or the tag of the millimetre catalogue.
    pub molecule: Option<u32>,
    /// Number of the isotopologue in 160-character records.
    pub isotopologue: Option<u32>,
}

/// Lines of one species from a list of any format, sorted by wavelength.
///
/// `levels`: those of the species; millimetre lists need them, as their intensities belong to a partition function.
/// Errors: those of [`crate::user::read_lines`], and a list that holds several species where `choice` leaves more than
/// one, or none.
pub fn read(path: &Path, choice: &Choice, levels: &[Level]) -> Result<Vec<Line>, SpeciesError> {
    let bytes = fs::read(path).map_err(|source| SpeciesError::Read {
        path: path.to_owned(),
        source,
    })?;
    // Byte by byte: what is no ASCII becomes one character, so that columns keep their places.
    let text: String = bytes
        .iter()
        .map(|&byte| {
            if byte.is_ascii() {
                char::from(byte)
            } else {
                '?'
            }
        })
        .collect();
    let found = match choice.format.unwrap_or_else(|| sniff(&text)) {
        Format::Csv => return user::read_lines(path),
        Format::Record160 => record_160::read(path, &text)?,
        Format::Millimetre => millimetre::read(path, &text, levels)?,
    };
    let mut lines = chosen(path, choice, found)?;
    let natural = natural_width::from_listed_decays(&lines);
    for (line, gamma_per_s) in lines.iter_mut().zip(natural) {
        line.gamma_per_s = gamma_per_s;
    }
    lines.sort_by(|a, b| a.wavelength_vac_m.total_cmp(&b.wavelength_vac_m));
    Ok(lines)
}

/// A line with what tells its species: molecule or tag, and isotopologue.
struct Tagged {
    molecule: u32,
    isotopologue: u32,
    line: Line,
}

fn chosen(path: &Path, choice: &Choice, found: Vec<Tagged>) -> Result<Vec<Line>, SpeciesError> {
    if found.is_empty() {
        return Err(SpeciesError::NoRows {
            path: path.to_owned(),
            what: "line",
        });
    }
    let all: BTreeSet<(u32, u32)> = found.iter().map(|t| (t.molecule, t.isotopologue)).collect();
    let wanted = |key: &(u32, u32)| {
        choice.molecule.is_none_or(|molecule| molecule == key.0)
            && choice
                .isotopologue
                .is_none_or(|isotopologue| isotopologue == key.1)
    };
    if all.iter().filter(|key| wanted(key)).count() != 1 {
        return Err(SpeciesError::WhichSpecies {
            path: path.to_owned(),
            found: all.into_iter().collect(),
        });
    }
    Ok(found
        .into_iter()
        .filter(|t| wanted(&(t.molecule, t.isotopologue)))
        .map(|t| t.line)
        .collect())
}

/// The format that the first row looks like; CSV if it is none of the others.
fn sniff(text: &str) -> Format {
    let Some(first) = text
        .lines()
        .find(|row| !row.trim().is_empty() && !row.starts_with('#'))
    else {
        return Format::Csv;
    };
    let number = |from: usize, to: usize| {
        first
            .get(from..to)
            .is_some_and(|field| field.trim().parse::<f64>().is_ok())
    };
    if first.len() >= 160 && number(3, 15) && number(15, 25) && number(25, 35) {
        Format::Record160
    } else if !first.contains(',')
        && number(0, 13)
        && number(13, 21)
        && number(21, 29)
        && number(31, 41)
    {
        Format::Millimetre
    } else {
        Format::Csv
    }
}
