//! Constants against the published recommended values, digit by digit.

use backlit_units::constants as c;

#[test]
fn constants_are_the_recommended_values_of_codata_2022() {
    // CODATA 2022 (NIST SP 961, May 2024): value, and its standard uncertainty (0 = exact).
    for (name, ours, published, uncertainty) in [
        ("h", c::PLANCK_J_S, 6.626_070_15e-34, 0.0),
        ("c", c::SPEED_OF_LIGHT_M_PER_S, 299_792_458.0, 0.0),
        ("k", c::BOLTZMANN_J_PER_K, 1.380_649e-23, 0.0),
        ("e", c::ELEMENTARY_CHARGE_C, 1.602_176_634e-19, 0.0),
        (
            "u",
            c::ATOMIC_MASS_KG,
            1.660_539_068_92e-27,
            0.000_000_000_52e-27,
        ),
        (
            "m_e",
            c::ELECTRON_MASS_KG,
            9.109_383_713_9e-31,
            0.000_000_002_8e-31,
        ),
        ("R_inf", c::RYDBERG_PER_M, 10_973_731.568_157, 0.000_012),
        (
            "alpha",
            c::FINE_STRUCTURE,
            7.297_352_564_3e-3,
            0.000_000_001_1e-3,
        ),
        (
            "eps0",
            c::VACUUM_PERMITTIVITY_F_PER_M,
            8.854_187_818_8e-12,
            0.000_000_001_4e-12,
        ),
        (
            "a0",
            c::BOHR_RADIUS_M,
            5.291_772_105_44e-11,
            0.000_000_000_82e-11,
        ),
        // Exact, published with ten digits.
        (
            "sigma",
            c::STEFAN_BOLTZMANN_W_PER_M2_K4,
            5.670_374_419e-8,
            0.000_000_000_5e-8,
        ),
        ("b", c::WIEN_M_K, 2.897_771_955e-3, 0.000_000_000_5e-3),
    ] {
        assert!(
            (ours - published).abs() <= uncertainty,
            "{name}: {ours:e}, published {published:e}"
        );
    }
}

#[test]
fn alpha_inverse_is_137_036() {
    // CODATA 2022: 137.035 999 177(21).
    assert!((1.0 / c::FINE_STRUCTURE - 137.035_999_177).abs() < 21e-9);
}
