//! The relativistic Doppler shift along the line of sight.

use crate::constants::SPEED_OF_LIGHT_M_PER_S;

/// Observed wavelength over rest wavelength of gas that recedes at `velocity_m_per_s`.
///
/// `lambda_obs / lambda_rest = sqrt((1 + v/c) / (1 - v/c))`, v > 0 receding.
///
/// Domain: |v| < c; at and beyond the speed of light the result is 0, infinite or NaN, as the formula says.
/// Source: Einstein, Ann. Phys. 322, 891 (1905), section 7.
pub fn wavelength_factor(velocity_m_per_s: f64) -> f64 {
    let beta = velocity_m_per_s / SPEED_OF_LIGHT_M_PER_S;
    ((1.0 + beta) / (1.0 - beta)).sqrt()
}

/// Velocity in m/s that stretches wavelengths by `factor`: the inverse of [`wavelength_factor`].
///
/// `v/c = (f^2 - 1) / (f^2 + 1)`; written so that a factor near 1 loses no digits. Domain: factor > 0.
pub fn velocity_from_factor(factor: f64) -> f64 {
    SPEED_OF_LIGHT_M_PER_S * (factor - 1.0) * (factor + 1.0) / (factor * factor + 1.0)
}

/// Derivative of [`wavelength_factor`] by the velocity, per (m/s): `f / (c (1 - beta^2))`.
pub fn wavelength_factor_slope(velocity_m_per_s: f64) -> f64 {
    let beta = velocity_m_per_s / SPEED_OF_LIGHT_M_PER_S;
    wavelength_factor(velocity_m_per_s) / (SPEED_OF_LIGHT_M_PER_S * (1.0 - beta * beta))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn at_0_6_c_the_wavelength_doubles() {
        // beta = 3/5 gives sqrt(1.6/0.4) = 2, and -3/5 gives 1/2.
        assert!((wavelength_factor(0.6 * SPEED_OF_LIGHT_M_PER_S) - 2.0).abs() < 1e-15);
        assert!((wavelength_factor(-0.6 * SPEED_OF_LIGHT_M_PER_S) - 0.5).abs() < 1e-15);
    }

    #[test]
    fn the_inverse_undoes_the_shift() {
        for velocity_m_per_s in [-2.9e8, -3.0e5, -1.0, 0.0, 12.0, 4.5e6, 2.9e8] {
            let back = velocity_from_factor(wavelength_factor(velocity_m_per_s));
            // The factor itself carries 1.1e-16, which is 3e-8 m/s.
            let allowed = 1e-7 + 1e-13 * f64::abs(velocity_m_per_s);
            assert!(
                (back - velocity_m_per_s).abs() < allowed,
                "{velocity_m_per_s} came back as {back}"
            );
        }
    }

    #[test]
    fn the_slope_is_the_finite_difference() {
        for velocity_m_per_s in [-1e8, -2e4, 0.0, 3e5, 2e8] {
            let step_m_per_s = 1e3;
            let difference = (wavelength_factor(velocity_m_per_s + step_m_per_s)
                - wavelength_factor(velocity_m_per_s - step_m_per_s))
                / (2.0 * step_m_per_s);
            let slope = wavelength_factor_slope(velocity_m_per_s);
            assert!(
                (slope / difference - 1.0).abs() < 1e-8,
                "{slope:e} {difference:e}"
            );
        }
    }
}
