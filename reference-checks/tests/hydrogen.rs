//! Hydrogen-like spectra, which the program computes, against the published figures.

#![allow(clippy::unwrap_used)]

use backlit_species::Catalogue;
use backlit_species::hydrogenic::{Nucleus, components, level_energy_j};
use backlit_units::constants::JOULE_PER_WAVENUMBER_CM;

/// A state within its shell: l and 2j.
type State = (u32, u32);

/// Fine-structure components of H I: upper n, (l, 2j), lower n, (l, 2j), vacuum wavelength (nm), A (s^-1).
/// Source: NIST Atomic Spectra Database, doi 10.18434/T4W30F; A of Wiese and Fuhr, J. Phys. Chem. Ref. Data 38, 565 (2009).
#[rustfmt::skip]
const H_COMPONENTS: [(u32, State, u32, State, f64, f64); 59] = [
    (5, (1, 3), 1, (0, 1), 94.97429095, 3.4375e7),
    (5, (1, 1), 1, (0, 1), 94.97431207, 3.4375e7),
    (3, (1, 3), 1, (0, 1), 102.572182505, 1.6725e8),
    (3, (1, 1), 1, (0, 1), 102.572296565, 1.6725e8),
    (2, (1, 3), 1, (0, 1), 121.566823731, 6.2647e8),
    (2, (1, 1), 1, (0, 1), 121.5673644608, 6.2648e8),
    (6, (2, 3), 2, (1, 1), 410.285985517, 4.2877e6),
    (6, (0, 1), 2, (1, 1), 410.286191087, 2.4501e5),
    (6, (1, 3), 2, (0, 1), 410.286579132, 2.8583e6),
    (6, (1, 1), 2, (0, 1), 410.28680725, 2.8584e6),
    (6, (2, 5), 2, (1, 3), 410.292068748, 5.145e6),
    (6, (2, 3), 2, (1, 3), 410.292144772, 8.5748e5),
    (6, (0, 1), 2, (1, 3), 410.292350348, 4.9006e5),
    (4, (2, 3), 2, (1, 1), 486.26365622, 1.7188e7),
    (4, (1, 3), 2, (0, 1), 486.264488968, 9.668e6),
    (4, (0, 1), 2, (1, 1), 486.264631087, 8.5941e5),
    (4, (1, 1), 2, (0, 1), 486.265570389, 9.6682e6),
    (4, (2, 5), 2, (1, 3), 486.271947584, 2.0625e7),
    (4, (2, 3), 2, (1, 3), 486.27230788, 3.4375e6),
    (4, (0, 1), 2, (1, 3), 486.273282785, 1.719e6),
    (3, (2, 3), 2, (1, 1), 656.4522556, 5.3877e7),
    (3, (1, 3), 2, (0, 1), 656.4537685, 2.2448e7),
    (3, (0, 1), 2, (1, 1), 656.4564672, 2.1046e6),
    (3, (1, 1), 2, (0, 1), 656.4584403, 2.2449e7),
    (3, (2, 5), 2, (1, 3), 656.466466, 6.4651e7),
    (3, (2, 3), 2, (1, 3), 656.4680232, 1.0775e7),
    (3, (0, 1), 2, (1, 3), 656.4722349, 4.2097e6),
    (4, (2, 3), 3, (1, 1), 1875.580357, 5.8647e6),
    (4, (1, 3), 3, (0, 1), 1875.5840276, 3.065e6),
    (4, (0, 1), 3, (1, 1), 1875.5948609, 6.1182e5),
    (4, (1, 1), 3, (0, 1), 1875.6001165, 3.0652e6),
    (4, (3, 5), 3, (2, 3), 1875.613071, 1.2869e7),
    (4, (2, 5), 3, (1, 3), 1875.6131346, 7.0376e6),
    (4, (1, 3), 3, (2, 3), 1875.618409, 34754.0),
    (4, (2, 3), 3, (1, 3), 1875.618495, 1.1729e6),
    (4, (3, 7), 3, (2, 5), 1875.623108, 1.3788e7),
    (4, (3, 5), 3, (2, 5), 1875.625782, 9.1919e5),
    (4, (1, 3), 3, (2, 5), 1875.63112, 3.128e5),
    (4, (0, 1), 3, (1, 3), 1875.6329991, 1.2238e6),
    (4, (1, 1), 3, (2, 3), 1875.634498, 3.4759e5),
    (5, (2, 3), 4, (1, 1), 4052.18664, 1.2381e6),
    (5, (1, 3), 4, (0, 1), 4052.19376, 7.3716e5),
    (5, (0, 1), 4, (1, 1), 4052.22121, 2.1503e5),
    (5, (1, 1), 4, (0, 1), 4052.23222, 7.3721e5),
    (5, (3, 5), 4, (2, 3), 4052.248747, 2.4121e6),
    (5, (2, 5), 4, (1, 3), 4052.24892, 1.4858e6),
    (5, (1, 3), 4, (2, 3), 4052.26147, 18846.0),
    (5, (2, 3), 4, (1, 3), 4052.26174, 2.4763e5),
    (5, (4, 7), 4, (3, 5), 4052.26738, 4.1023e6),
    (5, (3, 7), 4, (2, 5), 4052.26742, 2.5844e6),
    (5, (3, 5), 4, (2, 5), 4052.2737678, 1.7229e5),
    (5, (2, 5), 4, (3, 5), 4052.27384, 2403.7),
    (5, (4, 9), 4, (3, 7), 4052.276012, 4.2542e6),
    (5, (4, 7), 4, (3, 7), 4052.279858, 1.5193e5),
    (5, (2, 5), 4, (3, 7), 4052.28632, 48075.0),
    (5, (1, 3), 4, (2, 5), 4052.28649, 1.6962e5),
    (5, (2, 3), 4, (3, 5), 4052.28665, 50480.0),
    (5, (0, 1), 4, (1, 3), 4052.29631, 4.301e5),
    (5, (1, 1), 4, (2, 3), 4052.29992, 1.8849e5),
];

/// Averages of H I from shell to shell: upper n, lower n, vacuum wavelength (nm), A (s^-1). Source: the same.
#[rustfmt::skip]
const H_SHELLS: [(u32, u32, f64, f64); 17] = [
    (12, 1, 91.81293, 50659.0),
    (8, 1, 92.6225605, 3.8694e5),
    (4, 1, 97.25365, 1.2785e7),
    (2, 1, 121.56701, 4.6986e8),
    (12, 2, 375.12244, 28337.0),
    (8, 2, 389.01577, 2.2148e5),
    (5, 2, 434.1691, 2.5304e6),
    (3, 2, 656.4632, 4.4101e7),
    (12, 3, 875.2876, 20207.0),
    (6, 3, 1094.1082, 7.7829e5),
    (12, 4, 1641.1692, 16205.0),
    (4, 3, 1875.6096, 8.986e6),
    (7, 4, 2166.121, 3.0415e5),
    (9, 5, 3296.991, 69078.0),
    (5, 4, 4052.269, 2.6993e6),
    (11, 6, 4672.512, 21096.0),
    (6, 5, 7459.84, 1.0254e6),
];

/// Levels of He II: n, l, 2j, energy (cm^-1). Source: the same database.
#[rustfmt::skip]
const HE_II_LEVELS: [(u32, u32, u32, f64); 24] = [
    (2, 1, 1, 329179.2939406),
    (2, 1, 3, 329185.15110923),
    (2, 0, 1, 329179.762313),
    (3, 1, 1, 390140.8249696),
    (3, 1, 3, 390142.5604306),
    (3, 0, 1, 390140.964517),
    (3, 2, 3, 390142.55757536),
    (3, 2, 5, 390143.13600712),
    (4, 1, 1, 411477.122755),
    (4, 1, 3, 411477.8548989),
    (4, 0, 1, 411477.1817529),
    (4, 2, 3, 411477.85368),
    (4, 2, 5, 411478.097707),
    (4, 3, 5, 411478.097267),
    (4, 3, 7, 411478.219277),
    (5, 1, 1, 421352.6789311),
    (5, 1, 3, 421353.05378699),
    (5, 0, 1, 421352.709172),
    (5, 2, 3, 421353.053159),
    (5, 2, 5, 421353.178101),
    (5, 3, 5, 421353.177874),
    (5, 3, 7, 421353.240343),
    (5, 4, 7, 421353.2402246),
    (5, 4, 9, 421353.2777059),
];

/// The database's levels of one shell scatter by this much about theory, cm^-1; measured: 8.4e-5 at most.
const LEVEL_SCATTER_PER_CM: f64 = 1e-4;
/// Relative difference of A: relativistic corrections, which the exact radial integrals lack; measured: 1.2e-4 at most.
const A_TOLERANCE: f64 = 2e-4;

#[test]
fn hydrogen_wavelengths_are_the_published_ones() {
    for (n_upper, upper, n_lower, lower, published_nm, _) in H_COMPONENTS {
        let parts = components(Nucleus::Proton, n_upper, n_lower);
        let part = parts
            .iter()
            .find(|part| (part.upper, part.lower) == (upper, lower))
            .unwrap();
        let off_per_cm = 1e-2 / part.wavelength_vac_m - 1e7 / published_nm;
        assert!(
            off_per_cm.abs() < LEVEL_SCATTER_PER_CM,
            "{n_upper}{upper:?} -> {n_lower}{lower:?}: {off_per_cm:e} cm-1 off {published_nm} nm"
        );
    }
}

#[test]
fn hydrogen_a_values_are_the_published_ones() {
    for (n_upper, upper, n_lower, lower, published_nm, published_per_s) in H_COMPONENTS {
        let parts = components(Nucleus::Proton, n_upper, n_lower);
        let part = parts
            .iter()
            .find(|part| (part.upper, part.lower) == (upper, lower))
            .unwrap();
        let off = (part.a_ki_per_s / published_per_s - 1.0).abs();
        assert!(
            off < A_TOLERANCE,
            "{published_nm} nm {n_upper}{upper:?} -> {n_lower}{lower:?}: A off by {off:e}"
        );
    }
}

#[test]
fn the_lines_of_the_catalogue_hold_each_shell_to_shell_strength_once() {
    // g_u A of the average (g_u = 2 n^2) must be the sum over all merged lines of that pair of shells.
    let hydrogen = Catalogue::builtin().get("H I").unwrap();
    for (n_upper, n_lower, published_nm, published_per_s) in H_SHELLS {
        let near = 3e-5 * published_nm * 1e-9;
        let lines = hydrogen.lines_between(published_nm * 1e-9 - near, published_nm * 1e-9 + near);
        let strength: f64 = lines
            .iter()
            .map(|line| line.g_upper * line.a_ki_per_s)
            .sum();
        let average_per_s = strength / f64::from(2 * n_upper * n_upper);
        let off = (average_per_s / published_per_s - 1.0).abs();
        assert!(
            off < A_TOLERANCE,
            "{n_upper} -> {n_lower} at {published_nm} nm: A off by {off:e}"
        );
    }
}

#[test]
fn ionized_helium_levels_are_the_published_ones() {
    for (n, l, twice_j, published_per_cm) in HE_II_LEVELS {
        let got = level_energy_j(Nucleus::AlphaParticle, n, l, twice_j) / JOULE_PER_WAVENUMBER_CM;
        let off = (got / published_per_cm - 1.0).abs();
        assert!(
            off < 1e-8,
            "n={n} l={l} 2j={twice_j}: {got}, published {published_per_cm}, off {off:e}"
        );
    }
}

#[test]
fn ionization_energies_are_the_published_ones() {
    // NIST, eV: H I 13.598 434 599 702, He II 54.417 765 528 2; D I 13.602 134 636 (from memory).
    let ev_j = 1.602_176_634e-19;
    for (name, published_ev, tolerance) in [
        ("H I", 13.598_434_599_702, 2e-9),
        ("D I", 13.602_134_636, 2e-9),
        ("He II", 54.417_765_528_2, 1e-8),
    ] {
        let got_ev = Catalogue::builtin()
            .get(name)
            .unwrap()
            .ionization_energy_j
            .unwrap()
            / ev_j;
        assert!(
            (got_ev / published_ev - 1.0).abs() < tolerance,
            "{name}: {got_ev}, published {published_ev}"
        );
    }
}

#[test]
fn deuterium_lies_82_km_per_s_to_the_blue() {
    // The isotope shift of the Lyman and Balmer lines is the ratio of reduced masses: -81.6 km/s (common practice).
    let alpha = |nucleus| components(nucleus, 3, 2)[0].wavelength_vac_m;
    let shift_km_per_s = (alpha(Nucleus::Deuteron) / alpha(Nucleus::Proton) - 1.0) * 299_792.458;
    assert!((shift_km_per_s + 81.6).abs() < 0.1, "{shift_km_per_s}");
}
