//! What stands out of the smooth light: peaks of either sign, and how wide the instrument makes them.

use super::continuum::{Flattened, median};

/// A local extremum of the matched filter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Peak {
    /// Channel, with a fraction.
    pub channel: f64,
    /// Height over its standard deviation, positive for either sign of peak.
    pub snr: f64,
}

/// The spectrum through a filter of the instrument's width.
#[derive(Debug, Clone)]
pub struct Features {
    /// Full width at half maximum, in channels.
    pub fwhm_channels: Vec<f64>,
    /// Filter output over its standard deviation, one a channel; negative for dips.
    pub snr: Vec<f64>,
    /// Noise of a line's peak height over that of one channel: the filter averages.
    pub gain: Vec<f64>,
    /// Peaks of bright lines, by channel.
    pub bright: Vec<Peak>,
    /// Peaks of dark lines, by channel.
    pub dark: Vec<Peak>,
}

/// Widths, in channels, that an instrument is believed to have.
const WIDTHS: (f64, f64) = (1.5, 40.0);
/// The width where nothing tells it.
const USUAL_WIDTH: f64 = 2.5;
/// Peaks must be this far above the noise to show their width.
const CLEAR: f64 = 8.0;
/// Among clear peaks the narrower ones show the instrument: this quantile.
const NARROW_QUANTILE: f64 = 0.3;
/// Peaks lower than this are noise like any other.
pub const LOWEST_SNR: f64 = 2.5;

/// The instrument's full width at half maximum in channels, from the clear peaks of the data.
///
/// The lower third of their widths at half height: blends and broad lines are wider than the instrument, never
/// narrower. Where fewer than four peaks are clear, 2.5 channels are assumed.
pub fn estimate_fwhm_channels(flattened: &Flattened) -> f64 {
    let data = &flattened.residual_sigmas;
    let mut best: Vec<f64> = Vec::new();
    for sign in [1.0, -1.0] {
        let mut widths: Vec<f64> = (3..data.len().saturating_sub(3))
            .filter(|&k| {
                let here = sign * data[k];
                here > CLEAR
                    && (1..=3).all(|d| sign * data[k - d] < here && sign * data[k + d] <= here)
            })
            .filter_map(|k| width_at_half_height(data, k, sign))
            .collect();
        if widths.len() > best.len() {
            std::mem::swap(&mut best, &mut widths);
        }
    }
    if best.len() < 4 {
        return USUAL_WIDTH;
    }
    best.sort_by(f64::total_cmp);
    let at = (NARROW_QUANTILE * best.len() as f64) as usize;
    best[at.min(best.len() - 1)].clamp(WIDTHS.0, WIDTHS.1)
}

fn width_at_half_height(data: &[f64], peak: usize, sign: f64) -> Option<f64> {
    let half = 0.5 * sign * data[peak];
    let reach = |step: isize| -> Option<f64> {
        let mut k = peak as isize;
        for gone in 0..WIDTHS.1 as isize {
            let here = sign * data.get(k as usize)?;
            let next = sign * data.get(usize::try_from(k + step).ok()?)?;
            if next <= half {
                return Some(gone as f64 + (here - half) / (here - next));
            }
            // A neighbour's flank: this peak does not show a width.
            if next > 1.2 * sign * data[peak] {
                return None;
            }
            k += step;
        }
        None
    };
    Some(reach(1)? + reach(-1)?)
}

/// Filters the residuals with a Gaussian of the given widths and finds the peaks of both signs.
pub fn find(flattened: &Flattened, fwhm_channels: Vec<f64>) -> Features {
    let data = &flattened.residual_sigmas;
    let count = data.len();
    let mut snr = vec![0.0; count];
    let mut gain = vec![1.0; count];
    for k in 0..count {
        let sigma = fwhm_channels[k] / 2.354_82;
        let reach = (3.0 * sigma).ceil() as usize;
        let (mut product, mut power) = (0.0, 0.0);
        let from = k.saturating_sub(reach);
        let to = (k + reach).min(count - 1);
        for (j, own) in flattened.sigma.iter().enumerate().take(to + 1).skip(from) {
            if own.is_finite() {
                let u = (j as f64 - k as f64) / sigma;
                // The noise may differ from channel to channel: the shape is that of the line in units of sigma.
                let shape = (-0.5 * u * u).exp() * (flattened.sigma[k].min(1e300) / own).min(3.0);
                product += shape * data[j];
                power += shape * shape;
            }
        }
        if power > 0.0 && flattened.sigma[k].is_finite() {
            snr[k] = product / power.sqrt();
            gain[k] = power.sqrt().recip();
        }
    }
    let peaks = |sign: f64| -> Vec<Peak> {
        (1..count.saturating_sub(1))
            .filter_map(|k| {
                let (left, here, right) = (sign * snr[k - 1], sign * snr[k], sign * snr[k + 1]);
                if here < LOWEST_SNR || here <= left || here < right {
                    return None;
                }
                let curvature = left - 2.0 * here + right;
                let shift = if curvature < 0.0 {
                    (0.5 * (left - right) / curvature).clamp(-0.5, 0.5)
                } else {
                    0.0
                };
                Some(Peak {
                    channel: k as f64 + shift,
                    snr: here,
                })
            })
            .collect()
    };
    Features {
        bright: peaks(1.0),
        dark: peaks(-1.0),
        fwhm_channels,
        snr,
        gain,
    }
}

/// The middle of a list of widths.
pub fn middle(widths: &[f64]) -> f64 {
    let mut widths = widths.to_vec();
    if widths.is_empty() {
        return f64::NAN;
    }
    median(&mut widths)
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::continuum::flatten;
    use super::*;

    /// Gaussian lines of one width and sign, every 60 channels, on a floor with a small ripple.
    fn comb(fwhm: f64, height: f64) -> Flattened {
        let sigma = fwhm / 2.354_82;
        let data: Vec<f64> = (0..1500)
            .map(|k| {
                let from_line = f64::from(k % 60) - 30.3;
                100.0
                    + [1.0, -1.0, 0.5, -0.5][k as usize % 4]
                    + height * (-0.5 * (from_line / sigma).powi(2)).exp()
            })
            .collect();
        flatten(&data, Some(&vec![1.0; 1500]), &vec![false; 1500]).unwrap()
    }

    #[test]
    fn the_width_of_the_instrument_is_read_off_its_lines() {
        for fwhm in [2.5, 4.0, 8.0] {
            for height in [90.0, -90.0] {
                let found = estimate_fwhm_channels(&comb(fwhm, height));
                assert!((found / fwhm - 1.0).abs() < 0.12, "{found}, not {fwhm}");
            }
        }
    }

    #[test]
    fn peaks_stand_where_the_lines_are_with_their_significance() {
        let flat = comb(4.0, 20.0);
        let features = find(&flat, vec![4.0; 1500]);
        let strong: Vec<&Peak> = features.bright.iter().filter(|p| p.snr > 20.0).collect();
        assert_eq!(strong.len(), 25);
        assert!(features.dark.iter().all(|p| p.snr < 5.0));
        for (n, peak) in strong.iter().enumerate() {
            assert!((peak.channel - (60.0 * n as f64 + 30.3)).abs() < 0.2);
            // A matched filter: height times the root of the sum of squares of the shape, σ √π channels.
            let expected = 20.0 * (4.0 / 2.354_82 * std::f64::consts::PI.sqrt()).sqrt();
            assert!(
                (peak.snr / expected - 1.0).abs() < 0.06,
                "{} {expected}",
                peak.snr
            );
        }
    }
}
