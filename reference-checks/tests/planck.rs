//! Planck's law against what has been published about it.

use backlit_forward::planck::{SECOND_RADIATION_M_K, radiance};

/// Wavelength of the highest radiance: where two points 1e-4 to its left and right are equal.
fn peak_m(temperature_k: f64) -> f64 {
    const STEP: f64 = 1e-4;
    let rises = |wavelength_m: f64| {
        radiance(wavelength_m * (1.0 + STEP), temperature_k)
            > radiance(wavelength_m * (1.0 - STEP), temperature_k)
    };
    let (mut low, mut high) = (1e-4 / temperature_k, 1.0 / temperature_k);
    for _ in 0..200 {
        let middle = (low * high).sqrt();
        if rises(middle) {
            low = middle
        } else {
            high = middle
        }
    }
    (low * high).sqrt()
}

/// CODATA 2022, Wien wavelength displacement law constant: b = 2.897 771 955 e-3 m K (exact digits shown).
#[test]
fn the_peak_follows_wiens_displacement_law() {
    // The search's step of 1e-4 shifts the peak by its square times 1.6.
    const ALLOWED: f64 = 3e-8;
    for temperature_k in [3.0, 300.0, 2856.0, 5772.0, 60_000.0] {
        let product = peak_m(temperature_k) * temperature_k;
        assert!(
            (product / 2.897_771_955e-3 - 1.0).abs() < ALLOWED,
            "{temperature_k} K: {product} m K"
        );
    }
}

/// Common practice: 2.9 million over the peak in nanometres gives kelvin; a peak at 497 nm is a body of about
/// 5840 K.
#[test]
fn the_rule_of_thumb_of_common_practice_holds() {
    let by_rule_k = 2.9e6 / 497.0;
    assert!((by_rule_k - 5840.0_f64).abs() < 10.0, "{by_rule_k} K");
    let peak_nm = peak_m(by_rule_k) * 1e9;
    assert!((peak_nm - 497.0).abs() < 0.5, "{peak_nm} nm");
}

/// CODATA 2022, Stefan-Boltzmann constant: 5.670 374 419 e-8 W m-2 K-4 (exact digits shown).
#[test]
fn all_of_it_together_is_the_stefan_boltzmann_law() {
    for temperature_k in [77.0, 1000.0, 5772.0, 1e5] {
        // In the logarithm of the wavelength the integrand dies off at both ends, and the plain sum
        // converges faster than any power of the step.
        const STEP: f64 = 0.02;
        let middle_m = 3e-3 / temperature_k;
        let integral: f64 = (-300..=900)
            .map(|k| middle_m * (f64::from(k) * STEP).exp())
            .map(|wavelength_m| radiance(wavelength_m, temperature_k) * wavelength_m * STEP)
            .sum();
        let constant = std::f64::consts::PI * integral / temperature_k.powi(4);
        assert!(
            (constant / 5.670_374_419e-8 - 1.0).abs() < 1e-9,
            "{temperature_k} K: {constant}"
        );
    }
}

/// ISO 11664-2:2007 (CIE S 014-2), table 1: relative power of CIE standard illuminant A, from memory, which is
/// defined as a Planck radiator with c2 = 1.435e-2 m K at 2848 K; with today's c2 that is 2855.5 K.
#[test]
fn cie_standard_illuminant_a_is_a_planck_radiator() {
    const PUBLISHED: [(f64, f64); 8] = [
        (300.0, 0.930_483),
        (380.0, 9.795_10),
        (450.0, 33.0859),
        (500.0, 59.8611),
        (560.0, 100.0),
        (600.0, 129.043),
        (700.0, 198.261),
        (780.0, 241.675),
    ];
    // Six digits are published: the last one may be off by half.
    const ALLOWED: f64 = 0.6e-5;
    let temperature_k = 2848.0 * SECOND_RADIATION_M_K / 1.435e-2;
    assert!((temperature_k - 2855.5).abs() < 0.1, "{temperature_k} K");
    let at_560 = radiance(560e-9, temperature_k);
    for (wavelength_nm, published) in PUBLISHED {
        let power = 100.0 * radiance(wavelength_nm * 1e-9, temperature_k) / at_560;
        assert!(
            (power / published - 1.0).abs() < ALLOWED,
            "{wavelength_nm} nm: {power}, not {published}"
        );
    }
}

/// The two ends of the law: Rayleigh-Jeans `2 c k T / λ⁴` at long wavelengths, Wien `2 h c² / λ⁵ exp(-c2 / λT)` at
/// short ones (Planck 1901, Ann. Phys. 309, 553).
#[test]
fn both_ends_are_the_laws_of_rayleigh_jeans_and_wien() {
    let (c, k, h) = (299_792_458.0_f64, 1.380_649e-23, 6.626_070_15e-34);
    // 21 cm at 100 K: x = hc/λkT = 7e-4, and the law is 1 - x/2 of Rayleigh-Jeans.
    let (wavelength_m, temperature_k) = (0.211_061_f64, 100.0);
    let x = h * c / (wavelength_m * k * temperature_k);
    let rayleigh_jeans = 2.0 * c * k * temperature_k / wavelength_m.powi(4);
    let ratio = radiance(wavelength_m, temperature_k) / rayleigh_jeans;
    assert!((ratio - (1.0 - x / 2.0)).abs() < 1e-7, "{ratio}");

    let (wavelength_m, temperature_k) = (200e-9_f64, 1000.0);
    let wien = 2.0 * h * c * c / wavelength_m.powi(5)
        * (-h * c / (wavelength_m * k * temperature_k)).exp();
    assert!((radiance(wavelength_m, temperature_k) / wien - 1.0).abs() < 1e-13);
}
