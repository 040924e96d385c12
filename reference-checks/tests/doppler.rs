//! Doppler widths and shifts against published figures.

use backlit_forward::transition::doppler_width_squared;
use backlit_units::doppler::{velocity_from_factor, wavelength_factor};

const ATOMIC_MASS_KG: f64 = 1.660_539_068_92e-27;

/// Common practice, as in Draine (2011), eq. 6.35: b = 12.9 km/s sqrt(T4 / A), T4 in 10^4 K, A in atomic mass units.
#[test]
fn thermal_widths_follow_the_formula_of_common_practice() {
    // Three digits are published.
    const ALLOWED: f64 = 5e-3;
    for mass_u in [1.008_f64, 4.0026, 22.990, 39.948, 137.33] {
        for temperature_k in [80.0_f64, 1e3, 1e4, 1e5] {
            let published_km_s = 12.9 * (temperature_k / 1e4 / mass_u).sqrt();
            let b_km_s =
                doppler_width_squared(temperature_k, mass_u * ATOMIC_MASS_KG, 0.0).sqrt() * 1e-3;
            assert!(
                (b_km_s / published_km_s - 1.0).abs() < ALLOWED,
                "{mass_u} u at {temperature_k} K: {b_km_s}"
            );
        }
    }
}

/// Physics of Gaussians: variances add, so b² = thermal² + ξ².
#[test]
fn turbulence_adds_in_squares() {
    let thermal = doppler_width_squared(300.0, 39.948 * ATOMIC_MASS_KG, 0.0);
    let both = doppler_width_squared(300.0, 39.948 * ATOMIC_MASS_KG, 2e3 * 2e3);
    assert!((both - thermal - 4e6).abs() < 1e-8 * both);
}

/// Einstein (1905), Ann. Phys. 322, 891, section 7: a source that recedes with half the speed of light is seen at
/// sqrt(3) times its wavelength, with 0.6 of it at twice; approaching, at the inverse of that.
#[test]
fn shifts_are_relativistic() {
    const C: f64 = 299_792_458.0;
    assert!((wavelength_factor(0.5 * C) - 3.0_f64.sqrt()).abs() < 1e-15);
    assert!((wavelength_factor(0.6 * C) - 2.0).abs() < 1e-15);
    assert!((wavelength_factor(-0.6 * C) - 0.5).abs() < 1e-15);
    // Slow gas: v/c to first order, and away is red.
    assert!((wavelength_factor(3e4) - 1.0 - 3e4 / C).abs() < 1e-8);
    assert!((velocity_from_factor(2.0) / C - 0.6).abs() < 1e-15);
}
