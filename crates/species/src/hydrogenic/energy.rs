//! Energies of one electron about a point nucleus.

use backlit_units::constants::{ELECTRON_MASS_KG, FINE_STRUCTURE, SPEED_OF_LIGHT_M_PER_S};

use super::Nucleus;

/// Bethe logarithms ln k0(n, s), n = 1 to 8. Source: Drake and Swainson, Phys. Rev. A 41, 1243 (1990), from memory.
const BETHE_LOGARITHM_S: [f64; 8] = [
    2.984_128_556,
    2.811_769_893,
    2.767_663_612,
    2.749_811_840,
    2.740_823_728,
    2.735_664_207,
    2.732_429_129,
    2.730_267_261,
];
/// Their limit for large n, and how they approach it: limit + 0.487 / n^2 meets the tabulated n = 8.
const BETHE_LOGARITHM_S_LIMIT: (f64, f64) = (2.722_654_335, 0.487);
/// Bethe logarithms of p states: the tabulated n = 2 and the limit, joined by 1 / n^2 (0.002 off at n = 3, or 20 kHz).
const BETHE_LOGARITHM_P_LIMIT: (f64, f64) = (-0.049_05, 0.076_1);

/// The pairs (l, 2j) of shell n.
pub(super) fn states(n: u32) -> impl Iterator<Item = (u32, u32)> {
    (0..n).flat_map(|l| {
        let lower = (l > 0).then(|| (l, 2 * l - 1));
        lower.into_iter().chain(std::iter::once((l, 2 * l + 1)))
    })
}

/// Energy of the level (n, l, j) above 1s, J.
///
/// `E = m_r c^2 (f - 1) - m_r^2 c^2 (f - 1)^2 / 2 (m + M) + recoil + Lamb shift`, f the Dirac function of n and j.
///
/// `twice_j`: 2j, that is 2l - 1 or 2l + 1. Domain: n >= 1, l < n; anything else gives a number without meaning.
/// Source: Mohr, Newell, Taylor and Tiesinga, CODATA 2022, section on hydrogen (eqs. for E_M and the one-photon
/// terms to order alpha (Z alpha)^5). Accuracy: 2e-9 of the energy of 2p in H I (`hydrogen_levels_are_the_published_ones`).
pub fn level_energy_j(nucleus: Nucleus, n: u32, l: u32, twice_j: u32) -> f64 {
    from_limit_j(nucleus, n, l, twice_j) - from_limit_j(nucleus, 1, 0, 1)
}

/// Energy of the ionization limit above 1s, J.
pub(super) fn limit_j(nucleus: Nucleus) -> f64 {
    -from_limit_j(nucleus, 1, 0, 1)
}

fn from_limit_j(nucleus: Nucleus, n: u32, l: u32, twice_j: u32) -> f64 {
    let rest_energy_j = ELECTRON_MASS_KG * SPEED_OF_LIGHT_M_PER_S.powi(2);
    let z_alpha = f64::from(nucleus.charge()) * FINE_STRUCTURE;
    let reduced = nucleus.reduced_mass();
    let mass = nucleus.mass_in_electrons();
    let (n_f, j_half) = (f64::from(n), (f64::from(twice_j) + 1.0) / 2.0);

    // f - 1 without the loss of digits of sqrt(1 + small) - 1.
    let defect = z_alpha.powi(2) / (j_half + (j_half.powi(2) - z_alpha.powi(2)).sqrt());
    let x = (z_alpha / (n_f - defect)).powi(2);
    let root = (1.0 + x).sqrt();
    let f_minus_1 = -x / (root * (1.0 + root));

    let mut energy =
        reduced * f_minus_1 - reduced.powi(2) / (2.0 * (1.0 + mass)) * f_minus_1.powi(2);
    let fourth = z_alpha.powi(4) * reduced.powi(3) / (2.0 * n_f.powi(3));
    if l > 0 {
        let kappa = if twice_j > 2 * l {
            -(f64::from(l) + 1.0)
        } else {
            f64::from(l)
        };
        energy += fourth / (mass * mass) / (kappa * (2.0 * f64::from(l) + 1.0));
    }
    energy += lamb_shift(z_alpha, reduced, n, l, twice_j);
    energy * rest_energy_j
}

/// Self-energy and vacuum polarization to order alpha (Z alpha)^5, in units of the electron's rest energy.
fn lamb_shift(z_alpha: f64, reduced: f64, n: u32, l: u32, twice_j: u32) -> f64 {
    use std::f64::consts::{LN_2, PI};
    let n_f = f64::from(n);
    let scale = FINE_STRUCTURE / PI * z_alpha.powi(4) / n_f.powi(3) * reduced.powi(3);
    let bracket = if l == 0 {
        let (limit, slope) = BETHE_LOGARITHM_S_LIMIT;
        let bethe = BETHE_LOGARITHM_S
            .get(n as usize - 1)
            .copied()
            .unwrap_or(limit + slope / n_f.powi(2));
        // ln of (m / m_r) (Z alpha)^-2, as the Coulomb field reaches as far as the reduced mass allows.
        let logarithm = -(z_alpha.powi(2) * reduced).ln();
        let fifth = 4.0 * PI * (139.0 / 128.0 - LN_2 / 2.0) + 5.0 * PI / 48.0;
        4.0 / 3.0 * (logarithm - bethe) + 10.0 / 9.0 - 4.0 / 15.0 + fifth * z_alpha
    } else {
        let (limit, slope) = BETHE_LOGARITHM_P_LIMIT;
        let bethe = if l == 1 {
            limit + slope / n_f.powi(2)
        } else {
            0.0
        };
        let l_f = f64::from(l);
        let kappa = if twice_j > 2 * l { -(l_f + 1.0) } else { l_f };
        -4.0 / 3.0 * bethe - 1.0 / (2.0 * kappa * (2.0 * l_f + 1.0)) / reduced
    };
    scale * bracket
}

#[cfg(test)]
mod tests {
    use super::*;
    use backlit_units::constants::JOULE_PER_WAVENUMBER_CM;

    #[test]
    fn hydrogen_levels_are_the_published_ones() {
        // NIST Atomic Spectra Database, H I levels, cm^-1.
        for (n, l, twice_j, published_per_cm) in [
            (2, 1, 1, 82_258.919_113_3),
            (2, 0, 1, 82_258.954_399_282_1),
            (2, 1, 3, 82_259.285_001_4),
            (3, 1, 1, 97_492.211_2),
            (3, 0, 1, 97_492.221_701),
            (3, 1, 3, 97_492.319_611),
        ] {
            let got = level_energy_j(Nucleus::Proton, n, l, twice_j) / JOULE_PER_WAVENUMBER_CM;
            let off = got / published_per_cm - 1.0;
            assert!(
                off.abs() < 2e-9,
                "n={n} l={l} 2j={twice_j}: {got:.7}, published {published_per_cm}, off {off:e}"
            );
        }
    }

    #[test]
    fn a_shell_has_two_n_squared_states() {
        for n in 1..=12 {
            assert_eq!(
                states(n).map(|(_, twice_j)| twice_j + 1).sum::<u32>(),
                2 * n * n
            );
        }
    }
}
