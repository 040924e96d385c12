//! The catalogue format of millimetre lines: frequency, intensity at 300 K, lower energy, upper weight.
//!
//! Source: Pickett, Poynter, Cohen, Delitsky, Pearson and Müller, JQSRT 60, 883 (1998).

use std::path::Path;
use std::sync::Arc;

use backlit_units::constants::{
    BOLTZMANN_J_PER_K, JOULE_PER_WAVENUMBER_CM, SPEED_OF_LIGHT_M_PER_S,
};

use super::Tagged;
use super::fixed::{Field, FixedRow};
use crate::{Grade, Kind, Level, Line, SpeciesError, partition};

const FREQUENCY: Field = ("frequency, characters 1-13", 0, 13);
const ERROR: Field = ("error, characters 14-21", 13, 21);
const LOG_INTENSITY: Field = ("log10 intensity, characters 22-29", 21, 29);
const E_LOWER: Field = ("lower energy, characters 32-41", 31, 41);
const G_UPPER: Field = ("upper weight, characters 42-44", 41, 44);
const TAG: Field = ("tag, characters 45-51", 44, 51);

/// Temperature of the listed intensities, K.
const REFERENCE_K: f64 = 300.0;
/// A in s^-1 from nm^2 MHz and MHz^2: `8 pi / c^2` in these units.
const PER_INTENSITY: f64 = 8.0 * std::f64::consts::PI * 1e-18 * 1e6 * 1e12
    / (SPEED_OF_LIGHT_M_PER_S * SPEED_OF_LIGHT_M_PER_S);
/// Levels closer than this are one, J: the lists give 1e-4 cm^-1.
const SAME_LEVEL_J: f64 = 2e-4 * JOULE_PER_WAVENUMBER_CM;

/// Reads all rows, with A from the intensity:
///
/// `A = I nu^2 (8 pi / c^2) (Q / g_u) / (exp(-E_l/kT) - exp(-E_u/kT))` at 300 K, Q from `levels`. The format has no lower
/// weight: it is that of the lower level where another row or `levels` knows it, and else the upper one. In thermal
/// excitation it cancels.
pub(super) fn read(path: &Path, text: &str, levels: &[Level]) -> Result<Vec<Tagged>, SpeciesError> {
    let source: Arc<str> = path.display().to_string().into();
    let q = partition::sum(levels, REFERENCE_K).ln_q.exp();
    let mut found = Vec::new();
    for row in FixedRow::all(path, text) {
        found.push(entry(&row, q, &source)?);
    }
    let mut known: Vec<(f64, f64)> = levels
        .iter()
        .map(|level| (level.energy_j, level.g))
        .collect();
    known.extend(
        found
            .iter()
            .map(|t: &Tagged| (t.line.e_upper_j, t.line.g_upper)),
    );
    known.sort_by(|a, b| a.0.total_cmp(&b.0));
    for Tagged { line, .. } in &mut found {
        let start = known.partition_point(|level| level.0 < line.e_lower_j - SAME_LEVEL_J);
        let near = known[start..]
            .iter()
            .take_while(|level| level.0 <= line.e_lower_j + SAME_LEVEL_J);
        let nearest = near.min_by(|a, b| {
            let off = |level: &(f64, f64)| (level.0 - line.e_lower_j).abs();
            off(a).total_cmp(&off(b))
        });
        line.g_lower = nearest.map_or(line.g_upper, |level| level.1);
    }
    Ok(found)
}

fn entry(row: &FixedRow<'_>, q: f64, source: &Arc<str>) -> Result<Tagged, SpeciesError> {
    let position = row.above_zero(FREQUENCY)?;
    // A negative error says that the row is in cm^-1.
    let frequency_mhz = if row.number(ERROR)? < 0.0 {
        position * SPEED_OF_LIGHT_M_PER_S * 1e-4
    } else {
        position
    };
    let log_intensity = row.number(LOG_INTENSITY)?;
    let e_lower_j = row.zero_or_above(E_LOWER)? * JOULE_PER_WAVENUMBER_CM;
    let g_upper = weight(row)?;
    let tag: i64 = row.field(TAG).parse().map_err(|_| row.refuse(TAG))?;
    let molecule = u32::try_from(tag.unsigned_abs()).map_err(|_| row.refuse(TAG))?;
    let wavelength_vac_m = SPEED_OF_LIGHT_M_PER_S / (frequency_mhz * 1e6);
    let e_upper_j = e_lower_j + JOULE_PER_WAVENUMBER_CM * 0.01 / wavelength_vac_m;
    let kt_j = BOLTZMANN_J_PER_K * REFERENCE_K;
    let populated = (-e_lower_j / kt_j).exp() * -(-(e_upper_j - e_lower_j) / kt_j).exp_m1();
    let a_ki_per_s = 10_f64.powf(log_intensity) * frequency_mhz.powi(2) * PER_INTENSITY * q
        / g_upper
        / populated;
    if !(a_ki_per_s.is_finite() && a_ki_per_s > 0.0) {
        return Err(row.out_of_range(
            LOG_INTENSITY,
            log_intensity,
            "an intensity that gives an A above 0",
        ));
    }
    Ok(Tagged {
        molecule,
        isotopologue: 0,
        line: Line {
            wavelength_vac_m,
            a_ki_per_s,
            e_lower_j,
            e_upper_j,
            g_lower: g_upper,
            g_upper,
            gamma_per_s: 0.0,
            grade: Grade::Unknown,
            source: source.clone(),
            kind: Kind::ElectricDipole,
        },
    })
}

/// Three characters; above 999 the first is a letter, A for 10.
fn weight(row: &FixedRow<'_>) -> Result<f64, SpeciesError> {
    let text = row.field(G_UPPER);
    match text.chars().next() {
        Some(letter @ 'A'..='Z') => {
            let tens = f64::from(u32::from(letter) - u32::from('A') + 10);
            let rest: u32 = text
                .get(1..)
                .unwrap_or("")
                .parse()
                .map_err(|_| row.refuse(G_UPPER))?;
            Ok(tens * 100.0 + f64::from(rest))
        }
        _ => row.weight(G_UPPER),
    }
}
