//! Planck's law: the light of a dense hot body.

use backlit_units::constants::{BOLTZMANN_J_PER_K, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};

/// First radiation constant for spectral radiance, `2 h c²`, in W m² sr⁻¹.
pub const FIRST_RADIATION_W_M2_PER_SR: f64 =
    2.0 * PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S * SPEED_OF_LIGHT_M_PER_S;
/// Second radiation constant, `h c / k`, in m K.
pub const SECOND_RADIATION_M_K: f64 = PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / BOLTZMANN_J_PER_K;

/// Spectral radiance of a blackbody, in W m⁻² sr⁻¹ m⁻¹.
///
/// `B_λ(T) = 2 h c² / λ⁵ / (exp(h c / λ k T) - 1)`
///
/// * `wavelength_vac_m`: vacuum wavelength, above 0.
/// * `temperature_k`: above 0; at 0 or below the radiance is 0.
///
/// Source: Planck's law with the exact constants of the SI. Accuracy: 1e-15 relative, better than the
/// argument of the exponential allows; held by `planck.rs` of the reference checks.
pub fn radiance(wavelength_vac_m: f64, temperature_k: f64) -> f64 {
    if temperature_k <= 0.0 {
        return 0.0;
    }
    let x = SECOND_RADIATION_M_K / (wavelength_vac_m * temperature_k);
    FIRST_RADIATION_W_M2_PER_SR / wavelength_vac_m.powi(5) / x.exp_m1()
}

/// Derivative of [`radiance`] by the logarithm of the temperature, in W m⁻² sr⁻¹ m⁻¹.
///
/// `dB/d ln T = B x / (1 - exp(-x))`, `x = h c / λ k T`; arguments and domain as for [`radiance`].
pub fn radiance_slope(wavelength_vac_m: f64, temperature_k: f64) -> f64 {
    if temperature_k <= 0.0 {
        return 0.0;
    }
    let x = SECOND_RADIATION_M_K / (wavelength_vac_m * temperature_k);
    radiance(wavelength_vac_m, temperature_k) * x / -(-x).exp_m1()
}

/// Brightness temperature of a radiance: the inverse of [`radiance`], in K.
///
/// `T = (h c / λ k) / ln(1 + 2 h c² / λ⁵ I)`; 0 for a radiance of 0 or below.
pub fn brightness_temperature(wavelength_vac_m: f64, radiance: f64) -> f64 {
    if radiance <= 0.0 {
        return 0.0;
    }
    let ratio = FIRST_RADIATION_W_M2_PER_SR / wavelength_vac_m.powi(5) / radiance;
    SECOND_RADIATION_M_K / wavelength_vac_m / ratio.ln_1p()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_slope_is_the_derivative() {
        for (wavelength, temperature) in [(5e-7, 300.0), (5e-7, 6000.0), (2.1e-1, 100.0)] {
            let h = 1e-5_f64;
            let finite = (radiance(wavelength, temperature * h.exp())
                - radiance(wavelength, temperature * (-h).exp()))
                / (2.0 * h);
            let slope = radiance_slope(wavelength, temperature);
            assert!(
                (finite / slope - 1.0).abs() < 1e-6,
                "{wavelength} {temperature}"
            );
        }
    }

    #[test]
    fn the_brightness_temperature_is_the_inverse() {
        for (wavelength, temperature) in [(5e-7, 3000.0), (2.1e-1, 100.0), (1e-4, 1e6)] {
            let back = brightness_temperature(wavelength, radiance(wavelength, temperature));
            assert!((back / temperature - 1.0).abs() < 1e-11);
        }
    }
}
