//! What can be wrong with a species or a list of lines.

use std::path::PathBuf;

use thiserror::Error;

/// Errors of this crate; each message names the place, what was found, what is needed and what to do.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum SpeciesError {
    /// The catalogue has no such name.
    #[error("species \"{name}\" is not in the catalogue\nhint: {}", did_you_mean(.suggestions))]
    Unknown {
        /// The name asked for.
        name: String,
        /// The nearest names, best first.
        suggestions: Vec<String>,
    },
    /// A name without a blank that can be read in two ways.
    #[error("species \"{name}\" can be read as {}\nhint: put the blank between element and stage, such as \"N II\"", .candidates.join(" or "))]
    Ambiguous {
        /// The name asked for.
        name: String,
        /// What it can mean.
        candidates: Vec<String>,
    },
    /// A row of a species table that cannot be read.
    #[error(
        "\"{got}\" is not {expected} (column {column}, {table} line {line})\nhint: the columns are explained in sources.txt beside the table"
    )]
    Table {
        /// Name of the table.
        table: String,
        /// Line in the table, from 1.
        line: usize,
        /// Name of the column.
        column: &'static str,
        /// The text found.
        got: String,
        /// What belongs there.
        expected: &'static str,
    },
    /// A species table that lacks a part.
    #[error("{part} is missing ({table})\nhint: compare with another table of the catalogue")]
    Incomplete {
        /// Name of the table.
        table: String,
        /// What is missing.
        part: &'static str,
    },
    /// A file that cannot be opened or read.
    #[error("cannot read {}: {source}\nhint: paths in a setup file are relative to the setup file", .path.display())]
    Read {
        /// The file.
        path: PathBuf,
        /// What the system says.
        source: std::io::Error,
    },
    /// A file that is no CSV.
    #[error("{} is not a readable CSV file: {source}\nhint: every row needs as many fields as the header row", .path.display())]
    Csv {
        /// The file.
        path: PathBuf,
        /// What the CSV reader says.
        source: csv::Error,
    },
    /// A column that the list needs.
    #[error("column `{column}` is missing in {}, found: {}\nhint: {}", .path.display(), .found.join(", "), missing_column_hint(.nearest.as_deref()))]
    MissingColumn {
        /// The file.
        path: PathBuf,
        /// The column needed.
        column: &'static str,
        /// The columns found.
        found: Vec<String>,
        /// A column found whose name is close.
        nearest: Option<String>,
    },
    /// A field that is not a number.
    #[error("\"{got}\" is not a number (column `{column}`, {} row {row})\nhint: use a point as decimal sign, no unit and no thousands separator", .path.display())]
    NotANumber {
        /// The file.
        path: PathBuf,
        /// Line of the file, from 1, the header counted.
        row: u64,
        /// The column.
        column: &'static str,
        /// The text found.
        got: String,
    },
    /// A number that cannot be.
    #[error("{value} is not {need} (column `{column}`, {} row {row})\nhint: correct the row or remove it", .path.display())]
    OutOfRange {
        /// The file.
        path: PathBuf,
        /// Line of the file, from 1, the header counted.
        row: u64,
        /// The column.
        column: &'static str,
        /// The value found.
        value: f64,
        /// What is needed, such as "above 0".
        need: &'static str,
    },
    /// Energies and wavelength that tell different lines.
    #[error("{wavelength_vac_nm} nm is {from_wavelength_per_cm} cm-1, the levels are {from_levels_per_cm} cm-1 apart: more than 0.1 % off ({} row {row})\nhint: wavelengths must be vacuum nm and energies cm-1", .path.display())]
    Contradiction {
        /// The file.
        path: PathBuf,
        /// Line of the file, from 1, the header counted.
        row: u64,
        /// The wavelength found, nm.
        wavelength_vac_nm: f64,
        /// Its wavenumber, cm^-1.
        from_wavelength_per_cm: f64,
        /// The difference of the levels, cm^-1.
        from_levels_per_cm: f64,
    },
    /// A line list that holds several species, or not the one asked for.
    #[error("{} holds {}: one must be chosen\nhint: name it in [[species]] with `molecule` and, for 160-character records, `isotopologue`", .path.display(), numbered(.found))]
    WhichSpecies {
        /// The file.
        path: PathBuf,
        /// Molecule or tag, and isotopologue, of what it holds.
        found: Vec<(u32, u32)>,
    },
    /// A list without rows.
    #[error("{} has no rows below its header\nhint: one row is needed for each {what}", .path.display())]
    NoRows {
        /// The file.
        path: PathBuf,
        /// "line" or "level".
        what: &'static str,
    },
    /// A species of the user's own with an impossible mass.
    #[error(
        "mass {mass_u} u of species \"{name}\" is not above 0 (key `mass_u`)\nhint: give the atomic weight, such as 22.99"
    )]
    BadMass {
        /// The species.
        name: String,
        /// The mass found, u.
        mass_u: f64,
    },
    /// A species of the user's own without a name.
    #[error(
        "a species of your own has no name (key `name`)\nhint: write an element and its stage, such as \"Xx I\""
    )]
    NoName,
}

fn numbered(found: &[(u32, u32)]) -> String {
    const MOST: usize = 8;
    let mut names: Vec<String> = found
        .iter()
        .take(MOST)
        .map(|(molecule, isotopologue)| match isotopologue {
            0 => format!("molecule {molecule}"),
            _ => format!("molecule {molecule} isotopologue {isotopologue}"),
        })
        .collect();
    if found.len() > MOST {
        names.push(format!("{} more", found.len() - MOST));
    }
    names.join(", ")
}

fn did_you_mean(suggestions: &[String]) -> String {
    if suggestions.is_empty() {
        "`backlit species` lists every name; a species of your own goes into `[[species]]`"
            .to_owned()
    } else {
        format!(
            "did you mean {}? `backlit species` lists every name",
            suggestions.join(" or ")
        )
    }
}

fn missing_column_hint(nearest: Option<&str>) -> String {
    match nearest {
        Some(name) => format!("is it the column `{name}`? rename it in the header row"),
        None => "the first row that is no comment must hold the column names".to_owned(),
    }
}
