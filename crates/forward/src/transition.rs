//! One spectral line as the forward model needs it: the figures of the catalogue turned into factors.

use backlit_species::Line;
use backlit_units::constants::{BOLTZMANN_J_PER_K, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};
use std::f64::consts::PI;

/// A line of one species with everything in it that does not depend on the state of the gas.
#[derive(Debug, Clone)]
pub struct Transition {
    /// Vacuum wavelength at rest.
    pub wavelength_vac_m: f64,
    /// Frequency at rest.
    pub frequency_hz: f64,
    /// `g_u A c² / (8 π ν0²)`: times `exp(-E_l/kT)/Q`, the stimulated-emission factor and the profile
    /// (in s), the cross-section of one atom in m².
    pub strength_m2_hz: f64,
    /// Energy of the lower level.
    pub e_lower_j: f64,
    /// Total natural broadening of both levels, FWHM in angular frequency.
    pub gamma_per_s: f64,
    /// Index of the species in its cloud.
    pub species: usize,
}

impl Transition {
    /// The factors of a catalogue line that belongs to the `species`-th species of a cloud.
    pub fn new(line: &Line, species: usize) -> Self {
        let frequency_hz = SPEED_OF_LIGHT_M_PER_S / line.wavelength_vac_m;
        Transition {
            wavelength_vac_m: line.wavelength_vac_m,
            frequency_hz,
            strength_m2_hz: line.g_upper * line.a_ki_per_s * line.wavelength_vac_m.powi(2)
                / (8.0 * PI),
            e_lower_j: line.e_lower_j,
            gamma_per_s: line.gamma_per_s,
            species,
        }
    }

    /// Integrated cross-section of one atom of the species, in m² Hz, and its derivative by ln T.
    ///
    /// `s = g_u A c²/(8πν0²) exp(-E_l/kT)/Q(T) (1 - exp(-hν0/kT))`: the optical depth is `N s φ(ν)`.
    ///
    /// * `temperature_k`: excitation temperature, above 0.
    /// * `ln_q`, `dlnq_dlnt`: the partition function and its logarithmic slope at that temperature.
    pub fn integrated_cross_section(
        &self,
        temperature_k: f64,
        ln_q: f64,
        dlnq_dlnt: f64,
    ) -> (f64, f64) {
        let kt = BOLTZMANN_J_PER_K * temperature_k;
        let lower = self.e_lower_j / kt;
        let photon = PLANCK_J_S * self.frequency_hz / kt;
        let net = -(-photon).exp_m1();
        let value = self.strength_m2_hz * (-lower - ln_q).exp() * net;
        // d ln(net)/d ln T = -photon / (exp(photon) - 1), written so that a large photon gives 0.
        let slope = lower - dlnq_dlnt - photon * (-photon).exp() / net;
        (value, value * slope)
    }
}

/// Square of the 1/e half-width of the velocity distribution, in m² s⁻².
///
/// `b² = 2 k T_D / m + ξ²`, T_D the kinetic temperature, ξ the microturbulence.
pub fn doppler_width_squared(
    temperature_k: f64,
    mass_kg: f64,
    turbulence_squared_m2_per_s2: f64,
) -> f64 {
    2.0 * BOLTZMANN_J_PER_K * temperature_k / mass_kg + turbulence_squared_m2_per_s2
}
