//! Spectra as comma-separated text.
//!
//! Lines are split here and not by a CSV library because every message names a line, comments in between
//! included, and because a field is never more than a number.

use std::path::Path;

use super::Spectrum;
use crate::archive;
use crate::decimal;
use crate::error::{CubesError, Place};
use crate::wavelengths;

const WAVELENGTH: &str = "wavelength_nm";
const INTENSITY: &str = "intensity";
const UNCERTAINTY: &str = "uncertainty";
const MASK: &str = "mask";

/// Where the columns stand in a row.
struct Columns {
    wavelength: usize,
    intensity: usize,
    uncertainty: Option<usize>,
    mask: Option<usize>,
    count: usize,
}

/// Reads a whole CSV file.
pub fn parse(bytes: &[u8], path: &Path) -> Result<Spectrum, CubesError> {
    let text = std::str::from_utf8(bytes).map_err(|e| CubesError::NotText {
        path: path.into(),
        line: 1 + bytes[..e.valid_up_to()]
            .iter()
            .filter(|b| **b == b'\n')
            .count(),
    })?;
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);

    let mut spectrum = Spectrum {
        path: path.into(),
        ..Spectrum::default()
    };
    let mut sigma = Vec::new();
    let mut lines = Vec::new();
    let mut columns: Option<(usize, Columns)> = None;
    for (index, line) in text.lines().enumerate() {
        let (number, line) = (index + 1, line.trim());
        if let Some(comment) = line.strip_prefix('#') {
            read_comment(&mut spectrum, comment, number)?;
            continue;
        }
        // Spreadsheets leave rows of bare commas at the end.
        if line.chars().all(|c| c == ',' || c.is_whitespace()) {
            continue;
        }
        let fields: Vec<&str> = line.split(',').map(bare).collect();
        match &columns {
            None => columns = Some((number, read_header(&fields, path, number)?)),
            Some((_, columns)) => {
                read_row(&mut spectrum, &mut sigma, columns, &fields, number)?;
                lines.push(number);
            }
        }
    }
    let Some((header, columns)) = columns else {
        return Err(CubesError::Empty { path: path.into() });
    };
    if columns.uncertainty.is_some() {
        spectrum.uncertainty = Some(sigma);
    }
    let cell = |line: usize, column: &str| Place::Cell {
        line,
        column: column.into(),
    };
    wavelengths::verify(path, &spectrum.wavelength, Place::Line(header), |i| {
        cell(lines[i], WAVELENGTH)
    })?;
    spectrum.settle(cell(header, INTENSITY), cell(header, UNCERTAINTY))
}

fn bare(field: &str) -> &str {
    let field = field.trim();
    field
        .strip_prefix('"')
        .and_then(|f| f.strip_suffix('"'))
        .unwrap_or(field)
        .trim()
}

fn read_comment(spectrum: &mut Spectrum, comment: &str, line: usize) -> Result<(), CubesError> {
    let Some((key, value)) = comment.split_once(':') else {
        return Ok(());
    };
    match key.trim() {
        "medium" => {
            spectrum.medium = Some(archive::medium(&spectrum.path, Place::Line(line), value)?);
        }
        "intensity_unit" => {
            let unit = archive::intensity_unit(&spectrum.path, Place::Line(line), value)?;
            spectrum.intensity_unit = Some(unit);
        }
        _ => {}
    }
    Ok(())
}

fn read_header(fields: &[&str], path: &Path, line: usize) -> Result<Columns, CubesError> {
    let find = |column: &'static str| {
        let mut at = fields
            .iter()
            .enumerate()
            .filter(|(_, f)| **f == column)
            .map(|(i, _)| i);
        match (at.next(), at.next()) {
            (_, Some(_)) => Err(CubesError::RepeatedColumn {
                path: path.into(),
                line,
                column,
            }),
            (first, None) => Ok(first),
        }
    };
    let need = |column: &'static str| {
        find(column)?.ok_or_else(|| CubesError::MissingColumn {
            path: path.into(),
            line,
            column,
            found: fields.iter().map(|f| (*f).to_owned()).collect(),
        })
    };
    Ok(Columns {
        wavelength: need(WAVELENGTH)?,
        intensity: need(INTENSITY)?,
        uncertainty: find(UNCERTAINTY)?,
        mask: find(MASK)?,
        count: fields.len(),
    })
}

fn read_row(
    spectrum: &mut Spectrum,
    sigma: &mut Vec<f64>,
    columns: &Columns,
    fields: &[&str],
    line: usize,
) -> Result<(), CubesError> {
    let path = &spectrum.path;
    if fields.len() != columns.count {
        let (found, expected) = (fields.len(), columns.count);
        return Err(CubesError::FieldCount {
            path: path.clone(),
            line,
            found,
            expected,
        });
    }
    let number = |at: usize, column: &str, exponent: i32| {
        let found = fields[at];
        decimal::parse_shifted(found, exponent).ok_or_else(|| CubesError::NotANumber {
            path: path.clone(),
            place: Place::Cell {
                line,
                column: column.into(),
            },
            found: found.chars().take(60).collect(),
        })
    };
    // An empty cell is a value that is not there.
    let optional = |at: usize, column: &str| {
        if fields[at].is_empty() {
            Ok(f64::NAN)
        } else {
            number(at, column, 0)
        }
    };
    let wavelength = number(columns.wavelength, WAVELENGTH, -9)?;
    let intensity = optional(columns.intensity, INTENSITY)?;
    if let Some(at) = columns.uncertainty {
        sigma.push(optional(at, UNCERTAINTY)?);
    }
    let masked = match columns.mask.map(|at| fields[at]) {
        None | Some("" | "0" | "0.0" | "false" | "False") => false,
        Some("1" | "1.0" | "true" | "True") => true,
        Some(found) => {
            return Err(CubesError::NotAMask {
                path: path.clone(),
                place: Place::Cell {
                    line,
                    column: MASK.into(),
                },
                found: found.chars().take(60).collect(),
            });
        }
    };
    spectrum.wavelength.push(wavelength);
    spectrum.intensity.push(intensity);
    spectrum.mask.push(masked);
    Ok(())
}

/// The text of a spectrum, shortest digits that are read back bit for bit.
pub fn format(spectrum: &Spectrum) -> String {
    let mut text = String::new();
    if let Some(medium) = spectrum.medium {
        text += &format!("# medium: {medium}\n");
    }
    if let Some(unit) = &spectrum.intensity_unit {
        text += &format!("# intensity_unit: {unit}\n");
    }
    let masked = spectrum.mask.iter().any(|m| *m);
    text += &[WAVELENGTH, INTENSITY].join(",");
    if spectrum.uncertainty.is_some() {
        text += &format!(",{UNCERTAINTY}");
    }
    if masked {
        text += &format!(",{MASK}");
    }
    text.push('\n');
    for i in 0..spectrum.wavelength.len() {
        text += &decimal::text_shifted(spectrum.wavelength[i], 9);
        text.push(',');
        text += &decimal::text_shifted(spectrum.intensity[i], 0);
        if let Some(sigma) = &spectrum.uncertainty {
            text.push(',');
            text += &decimal::text_shifted(sigma[i], 0);
        }
        if masked {
            text += if spectrum.mask[i] { ",1" } else { ",0" };
        }
        text.push('\n');
    }
    text
}
