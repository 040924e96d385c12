//! The 160-character records of molecular line lists.
//!
//! Source: Rothman and others, JQSRT 96, 139 (2005), table 1. A stands in the record; it belongs to the statistical weights
//! beside it, and not to the natural abundance that the record's intensity holds. Pressure broadening is not read.

use std::path::Path;
use std::sync::Arc;

use backlit_units::constants::JOULE_PER_WAVENUMBER_CM;

use super::Tagged;
use super::fixed::{Field, FixedRow};
use crate::{Grade, Kind, Line, SpeciesError};

const MOLECULE: Field = ("molecule, characters 1-2", 0, 2);
const ISOTOPOLOGUE: Field = ("isotopologue, character 3", 2, 3);
const WAVENUMBER: Field = ("wavenumber, characters 4-15", 3, 15);
const A: Field = ("A, characters 26-35", 25, 35);
const E_LOWER: Field = ("lower energy, characters 46-55", 45, 55);
const G_UPPER: Field = ("upper weight, characters 147-153", 146, 153);
const G_LOWER: Field = ("lower weight, characters 154-160", 153, 160);

pub(super) fn read(path: &Path, text: &str) -> Result<Vec<Tagged>, SpeciesError> {
    let source: Arc<str> = path.display().to_string().into();
    FixedRow::all(path, text)
        .map(|row| record(&row, &source))
        .collect()
}

fn record(row: &FixedRow<'_>, source: &Arc<str>) -> Result<Tagged, SpeciesError> {
    let molecule = row
        .field(MOLECULE)
        .parse()
        .map_err(|_| row.refuse(MOLECULE))?;
    // One character: 1-9, then 0 for the tenth and letters from the eleventh on.
    let isotopologue = match row.field(ISOTOPOLOGUE).chars().next() {
        Some('0') => 10,
        Some(letter) => letter
            .to_digit(36)
            .map(|digit| if digit > 9 { digit + 1 } else { digit })
            .ok_or_else(|| row.refuse(ISOTOPOLOGUE))?,
        None => return Err(row.refuse(ISOTOPOLOGUE)),
    };
    let wavenumber_per_cm = row.above_zero(WAVENUMBER)?;
    let a_ki_per_s = row.above_zero(A)?;
    let e_lower_per_cm = row.zero_or_above(E_LOWER)?;
    Ok(Tagged {
        molecule,
        isotopologue,
        line: Line {
            wavelength_vac_m: 0.01 / wavenumber_per_cm,
            a_ki_per_s,
            e_lower_j: e_lower_per_cm * JOULE_PER_WAVENUMBER_CM,
            e_upper_j: (e_lower_per_cm + wavenumber_per_cm) * JOULE_PER_WAVENUMBER_CM,
            g_lower: row.weight(G_LOWER)?,
            g_upper: row.weight(G_UPPER)?,
            gamma_per_s: 0.0,
            grade: Grade::Unknown,
            source: source.clone(),
            kind: Kind::ElectricDipole,
        },
    })
}
