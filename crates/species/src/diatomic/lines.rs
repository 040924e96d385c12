//! The lines of a molecule's bands.

use backlit_units::constants::{
    JOULE_PER_WAVENUMBER_CM, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S, VACUUM_PERMITTIVITY_F_PER_M,
};

use super::molecule::{Band, Molecule};
use super::strength::honl_london;
use super::term::{self, Term};
use crate::{Kind, Line, natural_width};

/// One debye, 1e-18 esu cm, in C m: 1e-21 over the speed of light's number.
const DEBYE_C_M: f64 = 1e-21 / SPEED_OF_LIGHT_M_PER_S;
/// Lines with less than this part of their level's whole strength are left out.
const WEAKEST_PART: f64 = 1e-4;

/// All lines of all bands; energies count from `zero_per_cm`.
pub(super) fn all(molecule: &Molecule, zero_per_cm: f64) -> Vec<Line> {
    let mut lines = Vec::new();
    for band in &molecule.bands {
        let upper = levels(molecule, band.v_upper);
        let lower = levels(molecule, band.v_lower);
        for from in &lower {
            // Levels rise with J: only neighbours can be partners.
            let start = upper.partition_point(|level| level.twice_j + 2 < from.twice_j);
            let near = upper[start..]
                .iter()
                .take_while(|level| level.twice_j <= from.twice_j + 2);
            lines.extend(near.filter_map(|to| line(band, from, to, zero_per_cm)));
        }
    }
    let natural = natural_width::from_listed_decays(&lines);
    for (line, gamma_per_s) in lines.iter_mut().zip(natural) {
        line.gamma_per_s = gamma_per_s;
    }
    lines
}

fn levels(molecule: &Molecule, v: u32) -> Vec<Term> {
    let constants = molecule.constants(v);
    molecule
        .state
        .twice_j(molecule.line_j_max)
        .flat_map(|twice_j| term::terms(molecule.state, &constants, v, twice_j))
        .collect()
}

/// One line, if it is allowed and goes up.
///
/// `A = omega^3 S mu^2 F / (3 pi eps0 hbar c^3 g_u)`, S the Hönl-London factor, `F = (1 + c m + d m^2)^2` the Herman-Wallis
/// factor with m = J + 1 (R), -J (P), 0 (Q), J that of the lower level. Sources: Hilborn, Am. J. Phys. 50, 982 (1982); Herman and
/// Wallis, J. Chem. Phys. 23, 637 (1955).
fn line(band: &Band, lower: &Term, upper: &Term, zero_per_cm: f64) -> Option<Line> {
    let wavenumber_per_cm = upper.energy_per_cm - lower.energy_per_cm;
    let factor = honl_london(lower, upper);
    let weight = |term: &Term| f64::from(term.twice_j + 1);
    if wavenumber_per_cm <= 0.0 || factor < WEAKEST_PART * weight(lower) {
        return None;
    }
    let m = match upper.twice_j.cmp(&lower.twice_j) {
        std::cmp::Ordering::Greater => f64::from(lower.twice_j) / 2.0 + 1.0,
        std::cmp::Ordering::Less => -f64::from(lower.twice_j) / 2.0,
        std::cmp::Ordering::Equal => 0.0,
    };
    debug_assert!(upper.v == band.v_upper && lower.v == band.v_lower);
    let [linear, quadratic] = band.herman_wallis;
    let moment_c_m = band.moment_debye * DEBYE_C_M * (1.0 + m * (linear + m * quadratic));
    let wavelength_vac_m = 0.01 / wavenumber_per_cm;
    // omega^3 / (3 pi hbar c^3) = 16 pi^3 / (3 h lambda^3).
    let per_strength = 16.0 * std::f64::consts::PI.powi(3)
        / (3.0 * PLANCK_J_S * VACUUM_PERMITTIVITY_F_PER_M * wavelength_vac_m.powi(3));
    let energy_j = |term: &Term| (term.energy_per_cm - zero_per_cm) * JOULE_PER_WAVENUMBER_CM;
    Some(Line {
        wavelength_vac_m,
        a_ki_per_s: per_strength * factor * moment_c_m * moment_c_m / weight(upper),
        e_lower_j: energy_j(lower),
        e_upper_j: energy_j(upper),
        g_lower: weight(lower),
        g_upper: weight(upper),
        gamma_per_s: 0.0,
        grade: band.grade,
        source: band.source.clone(),
        kind: Kind::ElectricDipole,
    })
}
