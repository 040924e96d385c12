//! What must be so whatever the numbers: equal temperatures, thick gas, energy.

use backlit_reference_checks::case::{Case, Line, Species, channels};
use std::path::Path;

const C: f64 = 299_792_458.0;

/// Planck's law, written out once more so that this file does not lean on the program's.
fn planck_w_m2_sr_nm(wavelength_nm: f64, temperature_k: f64) -> f64 {
    const H: f64 = 6.626_070_15e-34;
    const K: f64 = 1.380_649e-23;
    let wavelength_m = wavelength_nm * 1e-9;
    2e-9 * H * C * C / wavelength_m.powi(5) / (H * C / (wavelength_m * K * temperature_k)).exp_m1()
}

fn species() -> [Species; 1] {
    [Species {
        name: "Xx I",
        mass_u: 40.0,
        lines: vec![
            Line {
                gamma_per_s: Some(1e9),
                ..Line::at_nm(500.0)
            },
            Line {
                a_ki_per_s: 2e7,
                e_lower_per_cm: 9000.0,
                ..Line::at_nm(500.21)
            },
        ],
        levels: vec![(2.0, 0.0), (4.0, 9000.0)],
    }]
}

fn spectrum(name: &str, setup: &str, wavelength_nm: &[f64]) -> Vec<f64> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("limits");
    Case::write(&folder, name, setup, &species(), wavelength_nm.to_vec()).predict()
}

/// With a model tolerance below what the limits ask for: a channel may be off by that part of the deepest line.
fn setup(instrument: &str, background_k: f64, gas_k: f64, column_cm2: f64) -> String {
    format!(
        "[instrument]\n{instrument}\n[background]\nlight = \"blackbody\"\ntemperature_K = {background_k}\n\
         [[cloud]]\ntemperature_K = {gas_k}\nvelocity_km_s = 30\nturbulence_km_s = 2\n\
         [cloud.column_cm2]\n\"Xx I\" = {column_cm2:e}\n[fit]\nmodel_tolerance = 1e-8\n"
    )
}

/// Kirchhoff's law (1860, Ann. Phys. 185, 275): gas as hot as a background that fills the beam cannot be seen.
#[test]
fn gas_as_hot_as_its_background_shows_no_line() {
    let wavelength_nm = channels(499.6, 500.6, 201);
    for instrument in [
        "fwhm_nm = 0.01",
        "fwhm_nm = 0.1",
        "resolving_power = 4000",
        "fwhm_nm = 0",
    ] {
        for column_cm2 in [1e11, 1e14, 1e18] {
            let with = spectrum(
                "equal",
                &setup(instrument, 5000.0, 5000.0, column_cm2),
                &wavelength_nm,
            );
            let without = spectrum(
                "equal-none",
                &setup(instrument, 5000.0, 5000.0, 1e-3),
                &wavelength_nm,
            );
            for (one, other) in with.iter().zip(&without) {
                assert!(
                    (one / other - 1.0).abs() <= 1e-12,
                    "{instrument}, {column_cm2:e}: {one} and {other}"
                );
            }
        }
    }
}

/// Kirchhoff's law again: where no light comes through, the gas shines as a blackbody of its own temperature.
#[test]
fn thick_gas_shines_as_a_blackbody() {
    // So much gas that the damping wings alone are thick over all of the range and beyond.
    let wavelength_nm = channels(499.99, 500.11, 61);
    for (background_k, gas_k) in [(5000.0, 2500.0), (3000.0, 8000.0)] {
        let intensity = spectrum(
            "thick",
            &setup("fwhm_nm = 0.01", background_k, gas_k, 1e20),
            &wavelength_nm,
        );
        for (nm, value) in wavelength_nm.iter().zip(&intensity) {
            let expected = planck_w_m2_sr_nm(*nm, gas_k);
            // Of the depth of the line: the light that is missing or added.
            let depth = (expected - planck_w_m2_sr_nm(*nm, background_k)).abs();
            assert!(
                (value - expected).abs() < 1e-6 * depth,
                "{nm} nm at {gas_k} K: {value}, not {expected}"
            );
        }
    }
}

/// Hotter gas is seen in emission, cooler gas in absorption, at every line.
#[test]
fn hotter_gas_shines_and_cooler_gas_absorbs() {
    let wavelength_nm = channels(499.6, 500.6, 201);
    for (gas_k, sign) in [(5100.0, 1.0), (4900.0, -1.0), (9000.0, 1.0), (1500.0, -1.0)] {
        let with = spectrum(
            "sign",
            &setup("fwhm_nm = 0.05", 5000.0, gas_k, 1e15),
            &wavelength_nm,
        );
        let without = spectrum(
            "sign-none",
            &setup("fwhm_nm = 0.05", 5000.0, gas_k, 1e-3),
            &wavelength_nm,
        );
        let contrast: Vec<f64> = with
            .iter()
            .zip(&without)
            .map(|(one, other)| sign * (one - other))
            .collect();
        let largest = contrast.iter().copied().fold(0.0, f64::max);
        assert!(largest > 0.0);
        // Nowhere the other sign, but for the rounding of the sum.
        let smallest = contrast.iter().copied().fold(f64::INFINITY, f64::min);
        assert!(
            smallest > -1e-9 * largest,
            "{gas_k} K: {smallest:e} of {largest:e}"
        );
    }
}

/// A line-spread function moves light, it makes none: what a line takes out of the range is the same for all widths.
#[test]
fn the_instrument_neither_makes_nor_loses_energy() {
    let wavelength_nm = channels(498.0, 502.4, 1101);
    let removed = |instrument: &str| -> f64 {
        // Thin wings: hardly anything of the line reaches the ends of the range.
        let with = spectrum(
            "energy",
            &setup(instrument, 5000.0, 2500.0, 1e13),
            &wavelength_nm,
        );
        let without = spectrum(
            "energy-none",
            &setup(instrument, 5000.0, 2500.0, 1e-3),
            &wavelength_nm,
        );
        with.iter()
            .zip(&without)
            .map(|(one, other)| one - other)
            .sum()
    };
    let sharp = removed("fwhm_nm = 0");
    for instrument in [
        "fwhm_nm = 0.002",
        "fwhm_nm = 0.02",
        "fwhm_nm = 0.2",
        "resolving_power = 2500",
    ] {
        let blurred = removed(instrument);
        assert!(
            (blurred / sharp - 1.0).abs() < 2e-6,
            "{instrument}: {:e}",
            blurred / sharp - 1.0
        );
    }
}

/// Thin lines are linear in the column.
#[test]
fn thin_lines_are_linear_in_the_column() {
    let wavelength_nm = channels(499.6, 500.6, 201);
    let contrast = |column_cm2: f64| -> Vec<f64> {
        let with = spectrum(
            "linear",
            &setup("fwhm_nm = 0.05", 5000.0, 2500.0, column_cm2),
            &wavelength_nm,
        );
        let without = spectrum(
            "linear-none",
            &setup("fwhm_nm = 0.05", 5000.0, 2500.0, 1e-3),
            &wavelength_nm,
        );
        with.iter()
            .zip(&without)
            .map(|(one, other)| one - other)
            .collect()
    };
    // At most 2e-6 deep, so that exp(-τ) bends by half of that.
    let (single, double) = (contrast(3e5), contrast(6e5));
    let largest = double
        .iter()
        .fold(0.0, |largest: f64, value| largest.max(value.abs()));
    for (one, two) in single.iter().zip(&double) {
        let bend = (two - 2.0 * one).abs() / largest;
        assert!(bend < 1e-5, "{bend:.1e} of the deepest line");
    }
}
