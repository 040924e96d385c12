//! The curve of growth: how the equivalent width of a line grows with the column, in its three parts.
//!
//! A cold slab (it does not shine) in front of a hot background takes out of the continuum the equivalent width
//! `W_λ = ∫ (1 - exp(-τ)) dλ`. Sources: Draine (2011), Physics of the Interstellar and Intergalactic Medium, chapter 9;
//! constants of the formulas in the units in which they are published (Gaussian cgs).

use backlit_reference_checks::case::{Case, Line, Species, channels};
use std::path::Path;

const WAVELENGTH_NM: f64 = 500.0;
const B_KM_S: f64 = 2.0;
const LIGHT_KM_S: f64 = 299_792.458;
/// π e²/(m_e c) in cm² /s, Draine (2011), eq. 9.4 and 6.24: 0.02654.
const CLASSICAL_CM2_HZ: f64 = 0.026_540_08;

/// Equivalent width over wavelength of one line, as the program's spectrum shows it.
fn equivalent_width(name: &str, line: Line, column_cm2: f64, reach_km_s: f64, fwhm_nm: f64) -> f64 {
    let reach_nm = reach_km_s / LIGHT_KM_S * WAVELENGTH_NM;
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("curve-of-growth");
    // 30 K: b is all turbulence, and hc/λkT is near a thousand, so neither light nor stimulated emission.
    let setup = |column: f64| {
        format!(
            "[instrument]\nfwhm_nm = {fwhm_nm}\n[background]\nlight = \"blackbody\"\ntemperature_K = 5000\n\
             [[cloud]]\ntemperature_K = 30\ndoppler_temperature_K = 0.001\nvelocity_km_s = 0\n\
             turbulence_km_s = {B_KM_S}\n[cloud.column_cm2]\n\"Xx I\" = {column:e}\n"
        )
    };
    let count = 401;
    let wavelength_nm = channels(WAVELENGTH_NM - reach_nm, WAVELENGTH_NM + reach_nm, count);
    let species = [Species::simple(vec![line])];
    let with = Case::write(
        &folder,
        name,
        &setup(column_cm2),
        &species,
        wavelength_nm.clone(),
    )
    .predict();
    let without = Case::write(&folder, name, &setup(1e-3), &species, wavelength_nm).predict();
    let step_nm = 2.0 * reach_nm / (count - 1) as f64;
    with.iter()
        .zip(&without)
        .map(|(i, continuum)| (1.0 - i / continuum) * step_nm)
        .sum::<f64>()
        / WAVELENGTH_NM
}

/// Draine (2011), eq. 9.15, the linear part: W = π e²/(m_e c²) N f λ; here at τ0 = 1e-4, where it is 1 - τ0/(2 sqrt 2) of it.
#[test]
fn thin_lines_grow_with_the_column() {
    let line = Line::at_nm(WAVELENGTH_NM);
    let column_cm2 = line.column_for_depth_cm2(1e-4, B_KM_S);
    let published = CLASSICAL_CM2_HZ / 2.997_924_58e10
        * column_cm2
        * line.oscillator_strength()
        * WAVELENGTH_NM
        * 1e-7;
    for (name, fwhm_nm) in [("linear-resolved", 0.001), ("linear-unresolved", 0.1)] {
        let width = equivalent_width(name, line, column_cm2, 300.0, fwhm_nm);
        // The factor from A to f has five digits.
        assert!(
            (width / published - 1.0).abs() < 1e-4,
            "{name}: {width:e}, not {published:e}"
        );
    }
}

/// Draine (2011), eq. 9.21: W = 2 (b/c) sqrt(ln(τ0 / ln 2)) on the flat part, good to a few per cent.
#[test]
fn the_flat_part_is_within_two_percent_of_the_published_formula() {
    let line = Line {
        gamma_per_s: Some(1.0),
        ..Line::at_nm(WAVELENGTH_NM)
    };
    for depth in FLAT_DEPTHS {
        let column_cm2 = line.column_for_depth_cm2(depth, B_KM_S);
        let published = 2.0 * B_KM_S / LIGHT_KM_S * (depth / 2.0_f64.ln()).ln().sqrt();
        for (name, fwhm_nm) in [("flat-resolved", 0.001), ("flat-unresolved", 0.1)] {
            let width = equivalent_width(name, line, column_cm2, 300.0, fwhm_nm);
            assert!(
                (width / published - 1.0).abs() < 0.02,
                "{name}, tau0 = {depth}: {:.4}",
                width / published
            );
        }
    }
}

/// Central depths at which the formula of the flat part applies within 2 %.
const FLAT_DEPTHS: [f64; 5] = [3.0, 30.0, 100.0, 1e3, 1e4];

/// Draine (2011), eq. 9.22 and 9.24, the damping part: W = sqrt((b/c) (γ λ/c) τ0 / sqrt(π)), which is the square root of
/// the column; the Lorentzian approximation of the wing is good to b/v at the wing's velocity v, squared.
#[test]
fn thick_lines_grow_with_the_root_of_the_column() {
    let gamma_per_s = 1e9;
    let line = Line {
        gamma_per_s: Some(gamma_per_s),
        ..Line::at_nm(WAVELENGTH_NM)
    };
    let mut widths = Vec::new();
    for depth in [1e5, 1e6] {
        let column_cm2 = line.column_for_depth_cm2(depth, B_KM_S);
        let published = (B_KM_S / LIGHT_KM_S * gamma_per_s * WAVELENGTH_NM * 1e-12 / LIGHT_KM_S
            * depth
            / std::f64::consts::PI.sqrt())
        .sqrt();
        // The wing goes on beyond the range; what it takes out there is added.
        let reach_km_s = 60.0 * published * LIGHT_KM_S;
        let width = equivalent_width("damped", line, column_cm2, reach_km_s, 0.001);
        let beyond = tail(published * LIGHT_KM_S, reach_km_s) / LIGHT_KM_S;
        let total = width + beyond;
        assert!(
            (total / published - 1.0).abs() < 5e-3,
            "tau0 = {depth}: {}",
            total / published
        );
        widths.push(total);
    }
    assert!((widths[1] / widths[0] - 10.0_f64.sqrt()).abs() < 0.01);
}

/// Both wings beyond `reach`: there τ = (W/2)² / (π v²), from W = ∫ (1 - exp(-k/v²)) dv = 2 sqrt(π k); all in km/s.
fn tail(width_km_s: f64, reach_km_s: f64) -> f64 {
    let k = width_km_s * width_km_s / (4.0 * std::f64::consts::PI);
    2.0 * k / reach_km_s
}
