//! The wavelengths of a prediction for which no data exist yet.

use backlit_inverse::setup::{Instrument, Setup};
use backlit_species::Species;
use backlit_units::constants::{BOLTZMANN_J_PER_K, WIEN_M_K};
use backlit_units::{Medium, air};
use std::sync::Arc;

use crate::failure::Failure;
use crate::range::RangeNm;

/// Channels of a grid whose step nobody gave.
const CHANNELS: usize = 2000;
/// Channels per FWHM: an instrument that samples its own line-spread function well.
const CHANNELS_PER_FWHM: f64 = 4.0;
/// More channels than this only come from a wrong step.
const MOST_CHANNELS: f64 = 1e7;
/// A default grid may grow to this to sample the instrument.
const MOST_DEFAULT_CHANNELS: f64 = 2e5;

/// Channel centres in metres, in the setup's medium, evenly spaced.
///
/// `range` or else the hull of `use_nm`, or else the strongest lines with 2 % on each side.
pub fn centres_m(
    setup: &Setup,
    species: &[Arc<Species>],
    medium: Medium,
    range: Option<RangeNm>,
    step_nm: Option<f64>,
) -> Result<Vec<f64>, Failure> {
    let range = range
        .or_else(|| hull_of_ranges(setup))
        .unwrap_or_else(|| around_lines(setup, species, medium));
    let width_nm = range.high_nm - range.low_nm;
    let channels = match step_nm {
        Some(step_nm) => {
            let channels = (width_nm / step_nm * (1.0 + 1e-12)).floor() + 1.0;
            if !(2.0..=MOST_CHANNELS).contains(&channels) {
                return Err(Failure::Grid {
                    step_nm,
                    low_nm: range.low_nm,
                    high_nm: range.high_nm,
                    channels,
                });
            }
            channels
        }
        None => {
            let fwhm_nm = match setup.instrument {
                Instrument::None => f64::INFINITY,
                Instrument::FwhmNm(fwhm_nm) => fwhm_nm,
                Instrument::ResolvingPower(power) => range.low_nm / power,
            };
            (CHANNELS_PER_FWHM * width_nm / fwhm_nm)
                .ceil()
                .clamp(CHANNELS as f64, MOST_DEFAULT_CHANNELS)
        }
    };
    let step_nm = step_nm.unwrap_or(width_nm / (channels - 1.0));
    Ok((0..channels as usize)
        .map(|i| metres(range.low_nm + i as f64 * step_nm))
        .collect())
}

/// A wavelength in metres, to 1e-9 nm, as a reader of the decimal number has it.
///
/// The way through text leaves no digits that only rounding made: a file shows 588.96 and not 588.9600000000002.
fn metres(wavelength_nm: f64) -> f64 {
    format!("{wavelength_nm:.9}e-9")
        .parse()
        .unwrap_or(wavelength_nm / 1e9)
}

fn hull_of_ranges(setup: &Setup) -> Option<RangeNm> {
    let ranges = setup.spectrum.use_nm.as_ref()?;
    Some(RangeNm {
        low_nm: ranges.iter().map(|r| r.0).fold(f64::INFINITY, f64::min),
        high_nm: ranges.iter().map(|r| r.1).fold(0.0, f64::max),
    })
}

/// The lines within a factor 100 of the strongest, judged by `g_u A λ² exp(-E_l/kT)`, to which thin optical depth goes;
/// for a setup without gas the visible hump of the black body.
fn around_lines(setup: &Setup, species: &[Arc<Species>], medium: Medium) -> RangeNm {
    const WEAKEST: f64 = 0.01;
    const MARGIN: f64 = 0.02;
    let temperature_k = |value: backlit_inverse::setup::Value| match value {
        backlit_inverse::setup::Value::Known(known) => known,
        backlit_inverse::setup::Value::Find { low, high, start } => {
            start.unwrap_or((low * high).sqrt())
        }
    };
    let gas_k = setup
        .clouds
        .iter()
        .map(|cloud| temperature_k(cloud.temperature_k))
        .fold(0.0, f64::max);
    let strengths: Vec<(f64, f64)> = species
        .iter()
        .flat_map(|entry| &entry.lines)
        .map(|line| {
            let occupied = (-line.e_lower_j / (BOLTZMANN_J_PER_K * gas_k)).exp();
            let strength =
                line.g_upper * line.a_ki_per_s * line.wavelength_vac_m.powi(2) * occupied;
            (strength, line.wavelength_vac_m)
        })
        .collect();
    let strongest = strengths.iter().map(|s| s.0).fold(0.0, f64::max);
    let strong = strengths.iter().filter(|s| s.0 >= WEAKEST * strongest);
    let (low_m, high_m) = strong.fold((f64::INFINITY, 0.0_f64), |(low, high), (_, at)| {
        (low.min(*at), high.max(*at))
    });
    let in_medium_nm = |wavelength_vac_m: f64| match medium {
        Medium::Air => air::vacuum_to_air_m(wavelength_vac_m) * 1e9,
        Medium::Vacuum => wavelength_vac_m * 1e9,
    };
    if low_m < high_m || (low_m == high_m && low_m > 0.0) {
        return RangeNm {
            low_nm: in_medium_nm(low_m) * (1.0 - MARGIN),
            high_nm: in_medium_nm(high_m) * (1.0 + MARGIN),
        };
    }
    let background_k = temperature_k(setup.background.temperature_k);
    let peak_nm = if background_k > 0.0 {
        WIEN_M_K / background_k * 1e9
    } else {
        // A measured light without gas: only a grid of the user's own makes sense, this one is merely visible light.
        500.0
    };
    RangeNm {
        low_nm: 0.4 * peak_nm,
        high_nm: 3.0 * peak_nm,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn wavelengths_show_no_digits_of_rounding() {
        // 588 + 96 × 0.01 is 588.9600000000001 or so in binary numbers.
        assert_eq!(metres(588.0 + 96.0 * 0.01), 588.96e-9);
        assert_eq!(metres(700.0 + 0.2), 700.2e-9);
    }
}
