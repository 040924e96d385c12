//! Diatomic molecules from published constants: levels, rotation-vibration lines and pure rotation.
//!
//! Covered: the electronic ground states 1-Sigma, 2-Sigma and 2-Pi, the latter two with their spin splitting, from Hund's
//! case (a) to case (b), and Lambda doubling. Not covered: hyperfine structure (its components are one line here, with the
//! weights 2J + 1 of a molecule without nuclear spins), electronic transitions, the decay of levels by collisions.
//!
//! Isotopologues share the constants of the first one in their table, scaled by the reduced mass; a relative correction of
//! B stands in the table where Born-Oppenheimer breakdown shows. Accuracy against measured lines, rotation: 1e-7 (CO),
//! 1e-6 (13CO, C18O, HF), 1e-5 (HCl), 1e-4 (OH, NO, CN), 1e-3 (CH); fundamentals 0.001 cm^-1 (CO), 0.005 to 0.02 cm^-1
//! (HCl, HF, 13CO), 0.1 cm^-1 (OH): `reference-checks`, `rotation_lines_are_where_they_were_measured_and_as_strong` and
//! `vibration_lines_are_where_they_were_measured`.

mod lines;
mod molecule;
mod strength;
mod term;

use std::sync::Arc;

use backlit_units::constants::{ATOMIC_MASS_KG, ELEMENTARY_CHARGE_C, JOULE_PER_WAVENUMBER_CM};

use crate::{Level, Species, SpeciesError};
use molecule::Molecule;

/// Levels above this, cm^-1, do not count: the constants do not reach there, and no molecule lives where they matter.
const HIGHEST_LEVEL_PER_CM: f64 = 40_000.0;
/// Levels within this part of their energy are one group: 4e-5 of the partition function at most.
const GROUP_WITHIN: f64 = 0.01;
/// More rotation than any level of a bound ground state has.
const MOST_J: u32 = 400;
/// More vibration than any ground state here has.
const MOST_V: u32 = 60;

/// The isotopologue `name` of a molecule's table.
///
/// Lines: the table's bands. Levels: all below the dissociation energy or 40 000 cm^-1, whichever is lower, whose
/// energy still rises with v and J, near ones in one group. Energies count from the lowest level.
/// Errors: a table that cannot be read.
pub(crate) fn species(table: &str, text: &str, name: &str) -> Result<Species, SpeciesError> {
    let molecule = Molecule::parse(table, text)?.isotopologue(name)?;
    let zero_per_cm = molecule.ground_per_cm();
    let levels = levels(&molecule, zero_per_cm);
    let lines = lines::all(&molecule, zero_per_cm);
    let mut species = Species::new(name, molecule.mass_u() * ATOMIC_MASS_KG, lines, levels)
        .with_ionization_energy_j(molecule.ionization_ev * ELEMENTARY_CHARGE_C);
    species.sources = molecule.sources.iter().cloned().collect::<Vec<Arc<str>>>();
    Ok(species)
}

/// Names of a table's isotopologues, in its order.
#[cfg(test)]
pub(crate) fn names(table: &str, text: &str) -> Result<Vec<String>, SpeciesError> {
    Ok(Molecule::parse(table, text)?
        .isotopologues
        .into_iter()
        .map(|isotopologue| isotopologue.name)
        .collect())
}

fn levels(molecule: &Molecule, zero_per_cm: f64) -> Vec<Level> {
    let limit_per_cm = molecule.dissociation_per_cm().min(HIGHEST_LEVEL_PER_CM);
    let mut all: Vec<(f64, f64)> = Vec::new();
    let mut origin_before = f64::NEG_INFINITY;
    for v in 0..=MOST_V {
        let constants = molecule.constants(v);
        // The polynomial turns over, or the limit is reached: no more levels that one may believe in.
        if constants.origin <= origin_before || constants.origin - zero_per_cm > limit_per_cm {
            break;
        }
        origin_before = constants.origin;
        let mut lowest_before = f64::NEG_INFINITY;
        for twice_j in molecule.state.twice_j(MOST_J) {
            let terms = term::terms(molecule.state, &constants, v, twice_j);
            let lowest = terms
                .iter()
                .map(|term| term.energy_per_cm)
                .fold(f64::INFINITY, f64::min);
            if lowest <= lowest_before && twice_j > 4 || lowest - zero_per_cm > limit_per_cm {
                break;
            }
            lowest_before = lowest;
            all.extend(
                terms
                    .iter()
                    .map(|term| (term.energy_per_cm - zero_per_cm, f64::from(twice_j + 1))),
            );
        }
    }
    all.sort_by(|a, b| a.0.total_cmp(&b.0));
    grouped(&all)
}

/// Neighbours within [`GROUP_WITHIN`] of the first of them become one level at their mean energy.
fn grouped(sorted: &[(f64, f64)]) -> Vec<Level> {
    let mut groups: Vec<Level> = Vec::new();
    let mut first_per_cm = f64::NEG_INFINITY;
    let mut weighted = 0.0;
    for &(energy_per_cm, g) in sorted {
        match groups.last_mut() {
            Some(group) if energy_per_cm <= first_per_cm * (1.0 + GROUP_WITHIN) => {
                group.g += g;
                weighted += g * energy_per_cm;
                group.energy_j = weighted / group.g * JOULE_PER_WAVENUMBER_CM;
            }
            _ => {
                first_per_cm = energy_per_cm;
                weighted = g * energy_per_cm;
                groups.push(Level {
                    g,
                    energy_j: energy_per_cm * JOULE_PER_WAVENUMBER_CM,
                });
            }
        }
    }
    groups
}
