//! Wavelengths in standard air and in vacuum.
//!
//! Standard air: dry, 15 C, 101 325 Pa, 450 ppm of CO2. Below 200 nm spectroscopists measure in vacuum and give
//! vacuum wavelengths, so both conversions leave a wavelength below 200 nm as it is. A vacuum wavelength between
//! 200 and 200.065 nm therefore lands below 200 nm in air and does not convert back.

/// Below this wavelength, "air" wavelengths are vacuum wavelengths by convention, m.
pub const VACUUM_BELOW_M: f64 = 200e-9;

/// Refractive index of standard air.
///
/// `n - 1 = 1e-8 [5 792 105 / (238.0185 - s^2) + 167 917 / (57.362 - s^2)]`, s = 1 / (vacuum wavelength in um).
///
/// `wavelength_vac_m`: vacuum wavelength, m. Domain: fitted from 230 nm to 1690 nm, smooth beyond; below 200 nm
/// the formula is still evaluated here (it has a pole at 132 nm), the two conversions do not use it there.
/// Source: Ciddor, Appl. Opt. 35, 1566 (1996), eq. 1 and appendix A.
/// Accuracy: 1e-8 of the index by the paper; `published_pairs_of_air_and_vacuum_wavelengths` holds it to 4e-7.
pub fn refractive_index(wavelength_vac_m: f64) -> f64 {
    let wavelength_um = wavelength_vac_m * 1e6;
    let s2 = 1.0 / (wavelength_um * wavelength_um);
    1.0 + 1e-8 * (5_792_105.0 / (238.0185 - s2) + 167_917.0 / (57.362 - s2))
}

/// Wavelength in standard air, m, of a vacuum wavelength in m; the identity below 200 nm.
pub fn vacuum_to_air_m(wavelength_vac_m: f64) -> f64 {
    if wavelength_vac_m < VACUUM_BELOW_M {
        wavelength_vac_m
    } else {
        wavelength_vac_m / refractive_index(wavelength_vac_m)
    }
}

/// Vacuum wavelength, m, of a wavelength in standard air in m; the identity below 200 nm.
///
/// Solves `vac = air * n(vac)` by fixed-point iteration: the index changes so slowly that each step gains four to
/// five digits. Accuracy: 1e-15 relative (`air_and_vacuum_undo_each_other`). NaN in gives NaN out.
pub fn air_to_vacuum_m(wavelength_air_m: f64) -> f64 {
    if wavelength_air_m < VACUUM_BELOW_M {
        return wavelength_air_m;
    }
    let mut wavelength_vac_m = wavelength_air_m;
    for _ in 0..12 {
        let next_m = wavelength_air_m * refractive_index(wavelength_vac_m);
        let change = (next_m - wavelength_vac_m).abs();
        wavelength_vac_m = next_m;
        if change <= 1e-16 * next_m {
            break;
        }
    }
    wavelength_vac_m
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn air_and_vacuum_undo_each_other() {
        let mut worst: f64 = 0.0;
        for step in 0..4000 {
            let vacuum_m = 200.07e-9 * (5000.0_f64 / 200.07).powf(f64::from(step) / 3999.0);
            worst = worst.max((air_to_vacuum_m(vacuum_to_air_m(vacuum_m)) / vacuum_m - 1.0).abs());
        }
        assert!(worst <= 1e-15, "worst {worst:e}");
    }

    #[test]
    fn below_200_nm_nothing_changes() {
        for wavelength_m in [91.2e-9, 121.567e-9, 199.99e-9] {
            assert_eq!(vacuum_to_air_m(wavelength_m), wavelength_m);
            assert_eq!(air_to_vacuum_m(wavelength_m), wavelength_m);
        }
    }

    #[test]
    fn published_pairs_of_air_and_vacuum_wavelengths() {
        // Table of optical lines, air and vacuum, in angstrom, of the Sloan Digital Sky Survey (two decimals and
        // three), which rests on Morton, ApJS 77, 119 (1991): from memory.
        for (air, vacuum) in [
            (3933.663, 3934.777),
            (4861.325, 4862.683),
            (4958.911, 4960.295),
            (5006.843, 5008.240),
            (5889.950, 5891.583),
            (5895.924, 5897.558),
        ] {
            let got = air_to_vacuum_m(air * 1e-10) * 1e10;
            assert!(
                (got - vacuum).abs() < 2e-3,
                "{air} gave {got}, published {vacuum}"
            );
        }
    }
}
