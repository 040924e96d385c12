//! Diatomic molecules against measured frequencies, published transition probabilities and published partition functions.

#![allow(clippy::unwrap_used)]

use backlit_species::{Catalogue, Line};
use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;

fn nearest(name: &str, wavenumber_per_cm: f64) -> Line {
    let species = Catalogue::builtin().get(name).unwrap();
    let off = |line: &&Line| (0.01 / line.wavelength_vac_m - wavenumber_per_cm).abs();
    species
        .lines
        .iter()
        .min_by(|a, b| off(a).total_cmp(&off(b)))
        .unwrap()
        .clone()
}

fn wavenumber_of_ghz(ghz: f64) -> f64 {
    ghz * 1e9 / SPEED_OF_LIGHT_M_PER_S / 100.0
}

/// (species, measured GHz, allowed relative error of it, published A in s^-1, allowed relative error of it).
/// Frequencies and A from memory: JPL and CDMS catalogues of millimetre lines; of hyperfine components the strongest.
const ROTATION: [(&str, f64, f64, f64, f64); 17] = [
    ("CO", 115.271_202, 2e-7, 7.203e-8, 5e-3),
    ("CO", 230.538_000, 2e-7, 6.910e-7, 5e-3),
    ("CO", 345.795_990, 2e-7, 2.497e-6, 5e-3),
    ("13CO", 110.201_354, 2e-6, 6.294e-8, 1e-2),
    ("13CO", 220.398_684, 2e-6, 6.038e-7, 1e-2),
    ("C18O", 109.782_173, 2e-6, 6.266e-8, 1e-2),
    ("C18O", 219.560_354, 2e-6, 6.011e-7, 1e-2),
    ("H35Cl", 625.918_8, 5e-6, 1.17e-3, 1e-2),
    ("H37Cl", 624.977_8, 1e-5, 1.17e-3, 1e-2),
    ("HF", 1_232.476_3, 1e-6, 2.42e-2, 1e-2),
    ("OH", 2_514.31, 5e-5, 0.138, 2e-2),
    ("OH", 1_834.75, 1e-4, 0.0645, 3e-2),
    ("CH", 536.761, 1e-3, 6.4e-4, 5e-2),
    ("CH", 532.724, 1e-3, 6.2e-4, 5e-2),
    ("NO", 150.176_5, 1e-4, 3.3e-7, 5e-2),
    ("NO", 150.546_5, 1e-4, 3.3e-7, 5e-2),
    ("CN", 113.495, 3e-5, 1.19e-5, 3e-2),
];

#[test]
fn rotation_lines_are_where_they_were_measured_and_as_strong() {
    let mut wrong = Vec::new();
    for (name, ghz, bound, a_per_s, a_bound) in ROTATION {
        let line = nearest(name, wavenumber_of_ghz(ghz));
        let got_ghz = SPEED_OF_LIGHT_M_PER_S / line.wavelength_vac_m / 1e9;
        let (off, a_off) = (got_ghz / ghz - 1.0, line.a_ki_per_s / a_per_s - 1.0);
        if off.abs() > bound || a_off.abs() > a_bound {
            wrong.push(format!(
                "{name} {ghz} GHz: {got_ghz:.6} ({off:.1e}), A {:.4e} ({a_off:.1e})",
                line.a_ki_per_s
            ));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

/// (species, measured cm^-1, allowed error of it in cm^-1). From memory: CO: Guelachvili and Rao, Handbook of Infrared
/// Standards (1986); HCl: Rank, Rao and Wiggins, J. Mol. Spectrosc. 17, 122 (1965); HF: Guelachvili, Opt. Commun. 19, 150 (1976).
const VIBRATION: [(&str, f64, f64); 11] = [
    ("CO", 2_147.081_1, 0.001),
    ("CO", 2_139.426_1, 0.001),
    ("CO", 4_263.837_2, 0.002),
    ("CO", 4_256.217_2, 0.002),
    ("13CO", 2_099.709_8, 0.02),
    ("H35Cl", 2_906.247_2, 0.005),
    ("H35Cl", 2_865.098_4, 0.005),
    ("H37Cl", 2_904.111_1, 0.02),
    ("H37Cl", 2_863.023_0, 0.02),
    ("HF", 4_000.989, 0.01),
    ("OH", 3_407.61, 0.1),
];

#[test]
fn vibration_lines_are_where_they_were_measured() {
    let mut wrong = Vec::new();
    for (name, per_cm, bound) in VIBRATION {
        let got = 0.01 / nearest(name, per_cm).wavelength_vac_m;
        if (got - per_cm).abs() > bound {
            wrong.push(format!("{name} {per_cm}: {got:.4}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

/// (species, weight of the nuclear spins that the published sum holds, T in K, published Q, allowed relative error).
/// From memory: total internal partition sums of Gamache and others, JQSRT 203, 70 (2017); CO at 300 K: JPL catalogue.
const PARTITION: [(&str, f64, f64, f64, f64); 9] = [
    ("CO", 1.0, 300.0, 108.865, 1e-3),
    ("CO", 1.0, 296.0, 107.42, 1e-3),
    ("13CO", 2.0, 296.0, 224.69, 1e-3),
    ("C18O", 1.0, 296.0, 112.77, 1e-3),
    ("H35Cl", 8.0, 296.0, 160.65, 1e-3),
    ("H37Cl", 8.0, 296.0, 160.89, 1e-3),
    ("HF", 4.0, 296.0, 41.47, 1e-3),
    ("OH", 2.0, 296.0, 80.35, 2e-3),
    ("NO", 3.0, 296.0, 1_142.13, 2e-3),
];

#[test]
fn partition_functions_are_the_published_ones() {
    let mut wrong = Vec::new();
    for (name, spins, temperature_k, want, bound) in PARTITION {
        let species = Catalogue::builtin().get(name).unwrap();
        let got = species.partition_function(temperature_k).ln_q.exp() * spins;
        if (got / want - 1.0).abs() > bound {
            wrong.push(format!(
                "{name} {temperature_k} K: {got:.3}, published {want}"
            ));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn band_strengths_are_the_published_ones() {
    // Integrated absorption of a band at 296 K, cm per molecule: sum of g A exp(-E/kT) (1 - exp(-hc nu/kT)) / (8 pi c nu^2 Q).
    // Published, from memory, in natural abundance divided out: CO 1-0 9.9e-18, CO 2-0 7.6e-20, HCl 1-0 5.3e-18 (130 cm^-2
    // atm^-1 at 300 K, good to 5 %: Babrov, Ameer and Benesch 1960; ours is 12 % above), HF 1-0 1.55e-17, NO 1-0 4.5e-18.
    let strength = |name: &str, low_per_cm: f64, high_per_cm: f64| -> f64 {
        let species = Catalogue::builtin().get(name).unwrap();
        let kt_j = 1.380_649e-23 * 296.0;
        let q = species.partition_function(296.0).ln_q.exp();
        species
            .lines_between(0.01 / high_per_cm, 0.01 / low_per_cm)
            .iter()
            .map(|line| {
                let per_cm = 0.01 / line.wavelength_vac_m;
                line.g_upper
                    * line.a_ki_per_s
                    * (-line.e_lower_j / kt_j).exp()
                    * (1.0 - (-(line.e_upper_j - line.e_lower_j) / kt_j).exp())
                    / (8.0 * std::f64::consts::PI * 2.997_924_58e10 * per_cm.powi(2) * q)
            })
            .sum()
    };
    let mut wrong = Vec::new();
    for (name, low, high, want, bound) in [
        ("CO", 2_000.0, 2_300.0, 9.9e-18, 0.03),
        ("CO", 4_100.0, 4_400.0, 7.6e-20, 0.03),
        ("H35Cl", 2_400.0, 3_200.0, 5.3e-18, 0.13),
        ("HF", 3_300.0, 4_500.0, 1.55e-17, 0.05),
        ("NO", 1_700.0, 2_050.0, 4.5e-18, 0.06),
    ] {
        let got = strength(name, low, high);
        if (got / want - 1.0_f64).abs() > bound {
            wrong.push(format!(
                "{name} {low}-{high}: {got:.3e}, published {want:.3e}"
            ));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn the_21_cm_line_has_the_usual_optical_depth() {
    // N(H I) = 1.823e18 cm^-2 K^-1 (km/s)^-1 T_spin times the integral of tau over velocity, the
    // usual factor, which belongs to A = 2.8688e-15 s^-1; the A of Gould (1994) makes it 1.8133e18 (from memory).
    let hydrogen = Catalogue::builtin().get("H I").unwrap();
    let line = hydrogen.lines.last().unwrap();
    let frequency_hz = SPEED_OF_LIGHT_M_PER_S / line.wavelength_vac_m;
    assert!((frequency_hz / 1e6 - 1_420.405_75).abs() < 1e-5);
    for spin_temperature_k in [20.0, 100.0, 8_000.0] {
        let kt_j = 1.380_649e-23 * spin_temperature_k;
        let q = hydrogen.partition_function(spin_temperature_k).ln_q.exp();
        assert!((q - 2.0).abs() < 0.01, "{q}");
        let column_m2 = 1e24;
        let lower_m2 = column_m2 * line.g_lower / q * (-line.e_lower_j / kt_j).exp();
        let stimulated = 1.0 - (-6.626_070_15e-34 * frequency_hz / kt_j).exp();
        // Optical depth times velocity, m/s: the integral over frequency times the wavelength.
        let depth_m_per_s = lower_m2 * line.g_upper / line.g_lower * line.wavelength_vac_m.powi(3)
            / (8.0 * std::f64::consts::PI)
            * line.a_ki_per_s
            * stimulated;
        let column_cm2 =
            1.823e18 * (2.8688e-15 / 2.8843e-15) * spin_temperature_k * depth_m_per_s / 1e3;
        assert!(
            (column_cm2 / 1e20 - 1.0).abs() < 2e-3,
            "{spin_temperature_k} K: {column_cm2:e}"
        );
    }
}
