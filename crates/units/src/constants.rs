//! Physical constants in SI, CODATA 2022.
//!
//! Source of every measured figure: Mohr, Newell, Taylor and Tiesinga, "CODATA recommended values of the
//! fundamental physical constants: 2022", Rev. Mod. Phys. 97, 025002 (2025). The exact ones are the definition
//! of the SI (BIPM, SI Brochure, 9th edition, 2019). No other file holds a physical literal of this kind.

/// Planck constant, J s (exact).
pub const PLANCK_J_S: f64 = 6.626_070_15e-34;
/// Speed of light in vacuum, m/s (exact).
pub const SPEED_OF_LIGHT_M_PER_S: f64 = 299_792_458.0;
/// Boltzmann constant, J/K (exact).
pub const BOLTZMANN_J_PER_K: f64 = 1.380_649e-23;
/// Elementary charge, C (exact).
pub const ELEMENTARY_CHARGE_C: f64 = 1.602_176_634e-19;
/// Atomic mass constant u, kg (CODATA 2022).
pub const ATOMIC_MASS_KG: f64 = 1.660_539_068_92e-27;
/// Electron mass, kg (CODATA 2022).
pub const ELECTRON_MASS_KG: f64 = 9.109_383_713_9e-31;
/// Electron mass in atomic mass units (CODATA 2022); better known than the two masses themselves.
pub const ELECTRON_MASS_U: f64 = 5.485_799_090_441e-4;
/// Proton mass in atomic mass units (CODATA 2022).
pub const PROTON_MASS_U: f64 = 1.007_276_466_578_9;
/// Deuteron mass in atomic mass units (CODATA 2022).
pub const DEUTERON_MASS_U: f64 = 2.013_553_212_544;
/// Alpha particle mass in atomic mass units (CODATA 2022).
pub const ALPHA_PARTICLE_MASS_U: f64 = 4.001_506_179_129;
/// Rydberg constant for infinite nuclear mass, 1/m (CODATA 2022).
pub const RYDBERG_PER_M: f64 = 10_973_731.568_157;
/// Fine-structure constant, dimensionless (CODATA 2022).
pub const FINE_STRUCTURE: f64 = 7.297_352_564_3e-3;
/// Vacuum electric permittivity, F/m (CODATA 2022).
pub const VACUUM_PERMITTIVITY_F_PER_M: f64 = 8.854_187_818_8e-12;
/// Bohr radius, m (CODATA 2022).
pub const BOHR_RADIUS_M: f64 = 5.291_772_105_44e-11;
/// Stefan-Boltzmann constant, W m^-2 K^-4 (exact, rounded to double precision).
pub const STEFAN_BOLTZMANN_W_PER_M2_K4: f64 = 5.670_374_419_184_429e-8;
/// Wien wavelength displacement constant, m K (exact, rounded to double precision).
pub const WIEN_M_K: f64 = 2.897_771_955_185_172_7e-3;

/// Energy of one wavenumber (1 cm^-1), J: `h c / (1 cm)`.
pub const JOULE_PER_WAVENUMBER_CM: f64 = PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S * 100.0;

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    fn close(got: f64, want: f64, relative: f64) {
        assert!(
            (got / want - 1.0).abs() <= relative,
            "got {got:e}, want {want:e}, off by {:e}",
            got / want - 1.0
        );
    }

    #[test]
    fn stefan_boltzmann_follows_from_h_c_k() {
        let by_formula = 2.0 * PI.powi(5) * BOLTZMANN_J_PER_K.powi(4)
            / (15.0 * PLANCK_J_S.powi(3) * SPEED_OF_LIGHT_M_PER_S.powi(2));
        close(STEFAN_BOLTZMANN_W_PER_M2_K4, by_formula, 1e-14);
    }

    #[test]
    fn wien_follows_from_the_root_of_x_equals_5_minus_5_exp_minus_x() {
        let mut x: f64 = 5.0;
        for _ in 0..60 {
            x = 5.0 - 5.0 * (-x).exp();
        }
        close(
            WIEN_M_K,
            PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / (BOLTZMANN_J_PER_K * x),
            1e-14,
        );
    }

    #[test]
    fn rydberg_follows_from_electron_mass_and_alpha() {
        let by_formula =
            FINE_STRUCTURE.powi(2) * ELECTRON_MASS_KG * SPEED_OF_LIGHT_M_PER_S / (2.0 * PLANCK_J_S);
        // The electron mass carries 3.1e-10.
        close(RYDBERG_PER_M, by_formula, 4e-10);
    }

    #[test]
    fn bohr_radius_follows_from_alpha_and_rydberg() {
        close(
            BOHR_RADIUS_M,
            FINE_STRUCTURE / (4.0 * PI * RYDBERG_PER_M),
            3e-10,
        );
    }

    #[test]
    fn permittivity_follows_from_alpha() {
        let by_formula = ELEMENTARY_CHARGE_C.powi(2)
            / (2.0 * FINE_STRUCTURE * PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S);
        close(VACUUM_PERMITTIVITY_F_PER_M, by_formula, 3e-10);
    }

    #[test]
    fn alpha_follows_from_charge_permittivity_h_and_c() {
        let by_formula = ELEMENTARY_CHARGE_C.powi(2)
            / (2.0 * VACUUM_PERMITTIVITY_F_PER_M * PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S);
        close(FINE_STRUCTURE, by_formula, 3e-10);
    }

    #[test]
    fn electron_mass_in_kg_and_in_u_agree() {
        close(ELECTRON_MASS_KG, ELECTRON_MASS_U * ATOMIC_MASS_KG, 5e-10);
    }

    #[test]
    fn atomic_mass_follows_from_rydberg_alpha_and_the_relative_electron_mass() {
        let by_formula = 2.0 * RYDBERG_PER_M * PLANCK_J_S
            / (SPEED_OF_LIGHT_M_PER_S * FINE_STRUCTURE.powi(2) * ELECTRON_MASS_U);
        close(ATOMIC_MASS_KG, by_formula, 4e-10);
    }

    #[test]
    fn nuclei_and_electrons_make_the_published_atoms() {
        // Atomic masses of H-1, H-2 and He-4 (AME2020, Chinese Phys. C 45, 030003: from memory); the atom is lighter than its parts
        // by its electrons' binding energy (13.598 eV, 13.602 eV, 79.005 eV; 1 u = 931.494 103 72 MeV).
        let u_in_ev = 931.494_103_72e6;
        close(
            PROTON_MASS_U + ELECTRON_MASS_U - 13.598_4 / u_in_ev,
            1.007_825_031_898,
            2e-10,
        );
        close(
            DEUTERON_MASS_U + ELECTRON_MASS_U - 13.602_1 / u_in_ev,
            2.014_101_777_844,
            2e-10,
        );
        close(
            ALPHA_PARTICLE_MASS_U + 2.0 * ELECTRON_MASS_U - 79.005 / u_in_ev,
            4.002_603_254_13,
            2e-10,
        );
    }

    #[test]
    fn exact_constants_are_those_of_the_si_and_a_wavenumber_is_its_known_part_of_an_electron_volt()
    {
        assert_eq!(SPEED_OF_LIGHT_M_PER_S, 299_792_458.0);
        // 1 eV = 8065.543 937 cm^-1 and k = 0.695 034 800 4 cm^-1/K (CODATA 2022): two routes over h, c, e and k.
        close(
            ELEMENTARY_CHARGE_C / JOULE_PER_WAVENUMBER_CM,
            8_065.543_937_349_21,
            1e-12,
        );
        close(
            BOLTZMANN_J_PER_K / JOULE_PER_WAVENUMBER_CM,
            0.695_034_800_4,
            1e-9,
        );
    }
}
