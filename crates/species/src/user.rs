//! Lines and levels of the user's own, from CSV.
//!
//! `lines`: columns `wavelength_vac_nm, a_ki_per_s, e_lower_per_cm, g_lower, g_upper`, optional `gamma_per_s` and
//! `e_upper_per_cm` (checked against the wavelength). `levels`: columns `g, energy_per_cm`. Any column order, extra
//! columns are ignored, rows that start with `#` are comments.

use std::fs::File;
use std::path::Path;
use std::sync::Arc;

use backlit_units::constants::{ATOMIC_MASS_KG, JOULE_PER_WAVENUMBER_CM};

use crate::line_list::{self, Choice};
use crate::{Grade, Kind, Level, Line, Species, SpeciesError, natural_width};

/// Energies may contradict the wavelength by this much, relative.
const ENERGY_TOLERANCE: f64 = 1e-3;

/// A species of the user's own.
///
/// `mass_u`: mass of one particle in atomic mass units, above 0. The format of the lines is recognised by their content.
/// Errors: those of [`read_lines`] and [`read_levels`],
/// an empty name, an impossible mass.
pub fn species(
    name: &str,
    mass_u: f64,
    lines_path: &Path,
    levels_path: &Path,
) -> Result<Species, SpeciesError> {
    chosen_species(name, mass_u, lines_path, levels_path, &Choice::default())
}

/// A species of the user's own whose lines come from a list of any format, of which `choice` may name a part.
///
/// Errors: those of [`species`] and of [`line_list::read`].
pub fn chosen_species(
    name: &str,
    mass_u: f64,
    lines_path: &Path,
    levels_path: &Path,
    choice: &Choice,
) -> Result<Species, SpeciesError> {
    if name.trim().is_empty() {
        return Err(SpeciesError::NoName);
    }
    if !(mass_u.is_finite() && mass_u > 0.0) {
        return Err(SpeciesError::BadMass {
            name: name.to_owned(),
            mass_u,
        });
    }
    let levels = read_levels(levels_path)?;
    let lines = line_list::read(lines_path, choice, &levels)?;
    Ok(Species::new(
        name.trim(),
        mass_u * ATOMIC_MASS_KG,
        lines,
        levels,
    ))
}

/// Lines from CSV, sorted by wavelength; the file's own order does not matter.
///
/// Errors: a file that cannot be read, a missing column, text instead of a number, A or wavelength <= 0, weights that
/// are not whole numbers from 1, energies that contradict the wavelength by more than 0.1 %; each with row and column.
pub fn read_lines(path: &Path) -> Result<Vec<Line>, SpeciesError> {
    let mut sheet = Sheet::open(path)?;
    let wavelength = sheet.column("wavelength_vac_nm")?;
    let a_ki = sheet.column("a_ki_per_s")?;
    let e_lower = sheet.column("e_lower_per_cm")?;
    let g_lower = sheet.column("g_lower")?;
    let g_upper = sheet.column("g_upper")?;
    let gamma = sheet.optional("gamma_per_s");
    let e_upper = sheet.optional("e_upper_per_cm");
    let source: Arc<str> = path.display().to_string().into();
    let mut lines = Vec::new();
    let mut without_gamma = Vec::new();
    while sheet.next_row()? {
        let wavelength_vac_nm = sheet.above_zero(wavelength)?;
        let a_ki_per_s = sheet.above_zero(a_ki)?;
        let e_lower_per_cm = sheet.zero_or_above(e_lower)?;
        let g_lower = sheet.weight(g_lower)?;
        let g_upper = sheet.weight(g_upper)?;
        let from_wavelength_per_cm = 1e7 / wavelength_vac_nm;
        if let Some(column) = e_upper.filter(|column| !sheet.is_blank(*column)) {
            let from_levels_per_cm = sheet.zero_or_above(column)? - e_lower_per_cm;
            if (from_levels_per_cm / from_wavelength_per_cm - 1.0).abs() > ENERGY_TOLERANCE {
                return Err(SpeciesError::Contradiction {
                    path: path.to_owned(),
                    row: sheet.row,
                    wavelength_vac_nm,
                    from_wavelength_per_cm,
                    from_levels_per_cm,
                });
            }
        }
        let gamma_per_s = match gamma.filter(|column| !sheet.is_blank(*column)) {
            Some(column) => sheet.zero_or_above(column)?,
            None => {
                without_gamma.push(lines.len());
                0.0
            }
        };
        lines.push(Line {
            wavelength_vac_m: wavelength_vac_nm * 1e-9,
            a_ki_per_s,
            e_lower_j: e_lower_per_cm * JOULE_PER_WAVENUMBER_CM,
            e_upper_j: (e_lower_per_cm + from_wavelength_per_cm) * JOULE_PER_WAVENUMBER_CM,
            g_lower,
            g_upper,
            gamma_per_s,
            grade: Grade::Unknown,
            source: source.clone(),
            kind: Kind::ElectricDipole,
        });
    }
    if lines.is_empty() {
        return Err(SpeciesError::NoRows {
            path: path.to_owned(),
            what: "line",
        });
    }
    let natural = natural_width::from_listed_decays(&lines);
    for index in without_gamma {
        lines[index].gamma_per_s = natural[index];
    }
    lines.sort_by(|a, b| a.wavelength_vac_m.total_cmp(&b.wavelength_vac_m));
    Ok(lines)
}

/// Levels from CSV, sorted by energy. Errors as [`read_lines`].
pub fn read_levels(path: &Path) -> Result<Vec<Level>, SpeciesError> {
    let mut sheet = Sheet::open(path)?;
    let g = sheet.column("g")?;
    let energy = sheet.column("energy_per_cm")?;
    let mut levels = Vec::new();
    while sheet.next_row()? {
        let g = sheet.weight(g)?;
        let energy_j = sheet.zero_or_above(energy)? * JOULE_PER_WAVENUMBER_CM;
        levels.push(Level { g, energy_j });
    }
    if levels.is_empty() {
        return Err(SpeciesError::NoRows {
            path: path.to_owned(),
            what: "level",
        });
    }
    levels.sort_by(|a, b| a.energy_j.total_cmp(&b.energy_j));
    Ok(levels)
}

#[derive(Clone, Copy)]
struct Column {
    name: &'static str,
    index: usize,
}

/// A CSV file with the row that is being read.
struct Sheet<'a> {
    path: &'a Path,
    reader: csv::Reader<File>,
    headers: Vec<String>,
    record: csv::StringRecord,
    row: u64,
}

impl<'a> Sheet<'a> {
    fn open(path: &'a Path) -> Result<Self, SpeciesError> {
        let file = File::open(path).map_err(|source| SpeciesError::Read {
            path: path.to_owned(),
            source,
        })?;
        let mut reader = csv::ReaderBuilder::new()
            .comment(Some(b'#'))
            .trim(csv::Trim::All)
            .from_reader(file);
        let headers = reader.headers().map_err(|source| SpeciesError::Csv {
            path: path.to_owned(),
            source,
        })?;
        // Spreadsheets put a byte-order mark in front of the first name.
        let headers = headers
            .iter()
            .map(|name| name.trim_start_matches('\u{feff}').to_owned())
            .collect();
        Ok(Sheet {
            path,
            reader,
            headers,
            record: csv::StringRecord::new(),
            row: 1,
        })
    }

    fn optional(&self, name: &'static str) -> Option<Column> {
        self.headers
            .iter()
            .position(|header| header == name)
            .map(|index| Column { name, index })
    }

    fn column(&self, name: &'static str) -> Result<Column, SpeciesError> {
        self.optional(name)
            .ok_or_else(|| SpeciesError::MissingColumn {
                path: self.path.to_owned(),
                column: name,
                found: self.headers.clone(),
                nearest: self
                    .headers
                    .iter()
                    .map(|header| (strsim::jaro_winkler(&header.to_lowercase(), name), header))
                    .filter(|(likeness, _)| *likeness > 0.8)
                    .max_by(|a, b| a.0.total_cmp(&b.0))
                    .map(|(_, header)| header.clone()),
            })
    }

    fn next_row(&mut self) -> Result<bool, SpeciesError> {
        let more = self
            .reader
            .read_record(&mut self.record)
            .map_err(|source| SpeciesError::Csv {
                path: self.path.to_owned(),
                source,
            })?;
        self.row = self.record.position().map_or(self.row, csv::Position::line);
        Ok(more)
    }

    fn is_blank(&self, column: Column) -> bool {
        self.record.get(column.index).is_none_or(str::is_empty)
    }

    fn number(&self, column: Column) -> Result<f64, SpeciesError> {
        let text = self.record.get(column.index).unwrap_or("");
        text.parse().map_err(|_| SpeciesError::NotANumber {
            path: self.path.to_owned(),
            row: self.row,
            column: column.name,
            got: text.to_owned(),
        })
    }

    fn checked(
        &self,
        column: Column,
        ok: impl Fn(f64) -> bool,
        need: &'static str,
    ) -> Result<f64, SpeciesError> {
        let value = self.number(column)?;
        if value.is_finite() && ok(value) {
            return Ok(value);
        }
        Err(SpeciesError::OutOfRange {
            path: self.path.to_owned(),
            row: self.row,
            column: column.name,
            value,
            need,
        })
    }

    fn above_zero(&self, column: Column) -> Result<f64, SpeciesError> {
        self.checked(column, |value| value > 0.0, "above 0")
    }

    fn zero_or_above(&self, column: Column) -> Result<f64, SpeciesError> {
        self.checked(column, |value| value >= 0.0, "0 or above")
    }

    fn weight(&self, column: Column) -> Result<f64, SpeciesError> {
        self.checked(
            column,
            |value| value >= 1.0 && value.fract() == 0.0,
            "a whole number from 1",
        )
    }
}
