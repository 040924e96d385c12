//! The index of standard air and air wavelengths against published formulas and pairs.

use backlit_units::air::{air_to_vacuum_m, refractive_index, vacuum_to_air_m};

/// Peck and Reeder, J. Opt. Soc. Am. 62, 958 (1972), eq. 2: standard air, 15 C, 330 ppm CO2, from memory.
fn peck_and_reeder(wavelength_vac_m: f64) -> f64 {
    let s2 = (1e-6 / wavelength_vac_m).powi(2);
    1.0 + 1e-8 * (8060.51 + 2_480_990.0 / (132.274 - s2) + 17_455.7 / (39.32957 - s2))
}

/// Edlen, Metrologia 2, 71 (1966), eq. 1: standard air, 15 C, 300 ppm CO2, from memory.
fn edlen(wavelength_vac_m: f64) -> f64 {
    let s2 = (1e-6 / wavelength_vac_m).powi(2);
    1.0 + 1e-8 * (8342.13 + 2_406_030.0 / (130.0 - s2) + 15_997.0 / (38.9 - s2))
}

/// More CO2 makes air denser in light: n - 1 grows by 0.534e-6 a ppm (Edlen 1966, Ciddor 1996).
fn for_co2(index: f64, from_ppm: f64) -> f64 {
    1.0 + (index - 1.0) * (1.0 + 0.534e-6 * (450.0 - from_ppm))
}

#[test]
fn the_index_of_air_is_that_of_the_older_measurements_within_their_accuracy() {
    // Ciddor (1996) states 1e-8 for Peck and Reeder's data from 230 nm to 1690 nm; Edlen's formula is older.
    for nm in [230.0, 300.0, 400.0, 500.0, 633.0, 800.0, 1000.0, 1690.0] {
        let got = refractive_index(nm * 1e-9);
        let off_peck = got - for_co2(peck_and_reeder(nm * 1e-9), 330.0);
        let off_edlen = got - for_co2(edlen(nm * 1e-9), 300.0);
        assert!(
            off_peck.abs() < 1e-8,
            "{nm} nm: {off_peck:e} from Peck and Reeder"
        );
        assert!(off_edlen.abs() < 4e-8, "{nm} nm: {off_edlen:e} from Edlen");
    }
}

#[test]
fn the_index_of_air_for_sodium_light_is_1_000277() {
    // CRC Handbook of Chemistry and Physics, index of refraction of air (589.3 nm, 15 C, 1 atm): 1.0002765, from memory.
    assert!((refractive_index(589.3e-9) - 1.000_276_5).abs() < 1e-6);
}

#[test]
fn spectroscopic_pairs_of_air_and_vacuum_wavelengths_come_out() {
    // NIST Atomic Spectra Database: Ritz wavelength in vacuum and in air (nm), from memory.
    for (vacuum_nm, air_nm) in [
        (589.158_33, 588.995_095), // Na D2
        (589.755_81, 589.592_424), // Na D1
        (766.700_90, 766.489_91),  // K D2
        (656.452_256, 656.270_97), // H alpha, 2p1/2 - 3d3/2
        (393.477_7, 393.366_3),    // Ca II K
    ] {
        let air = vacuum_to_air_m(vacuum_nm * 1e-9) * 1e9;
        assert!(
            (air / air_nm - 1.0).abs() < 3e-7,
            "{vacuum_nm}: {air}, published {air_nm}"
        );
        let vacuum = air_to_vacuum_m(air_nm * 1e-9) * 1e9;
        assert!(
            (vacuum / vacuum_nm - 1.0).abs() < 3e-7,
            "{air_nm}: {vacuum}, published {vacuum_nm}"
        );
    }
}
