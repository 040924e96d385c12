//! The smooth light under the lines, and the noise on it.

use crate::noise;

/// Channels of a spectrum with the smooth part taken away.
#[derive(Debug, Clone)]
pub struct Flattened {
    /// The smooth part, in the data's unit.
    pub continuum: Vec<f64>,
    /// Data minus smooth part over sigma; 0 in channels that cannot be used.
    pub residual_sigmas: Vec<f64>,
    /// 1 sigma of each channel, in the data's unit; infinite where there is no datum.
    pub sigma: Vec<f64>,
    /// Whether sigma was estimated from the data.
    pub noise_is_estimated: bool,
}

/// Knots of the smooth part across the spectrum, if every window is to hold enough channels.
const WINDOWS: usize = 24;
/// The smallest window, in channels.
const SHORTEST_WINDOW: usize = 41;
/// Rounds of clipping.
const ROUNDS: usize = 6;
/// What lies further off the middle of its window, in robust standard deviations, is taken for a line.
const CLIP: f64 = 2.5;
/// Pieces of the spectrum with a noise of their own, where it has to be estimated.
const NOISE_PIECES: usize = 20;

/// Takes the smooth part away: medians of overlapping windows, clipped until lines of either sign are out, joined
/// by straight lines.
///
/// * `intensity`: one a channel, rising wavelength, the data's unit; not finite where unknown.
/// * `sigma`: 1 sigma of each, the same unit; `None`: estimated piece by piece by [`noise::estimate`].
/// * `mask`: true for a channel not to be used.
///
/// Lines may cover up to half of a window. `None` with fewer than `SHORTEST_WINDOW` usable channels.
pub fn flatten(intensity: &[f64], sigma: Option<&[f64]>, mask: &[bool]) -> Option<Flattened> {
    let count = intensity.len();
    let usable = |k: usize| !mask[k] && intensity[k].is_finite();
    if (0..count).filter(|&k| usable(k)).count() < SHORTEST_WINDOW {
        return None;
    }
    let half = (count / WINDOWS).max(SHORTEST_WINDOW) / 2;
    let mut knots: Vec<(f64, f64)> = Vec::new();
    let mut middle = 0;
    while middle < count + half {
        let from = middle.saturating_sub(half);
        let to = (middle + half + 1).min(count);
        let mut window: Vec<f64> = (from..to)
            .filter(|&k| usable(k))
            .map(|k| intensity[k])
            .collect();
        if window.len() >= 5 {
            knots.push((middle.min(count - 1) as f64, clipped_median(&mut window)));
        }
        middle += half;
    }
    let continuum: Vec<f64> = (0..count).map(|k| joined(&knots, k as f64)).collect();
    let noise_is_estimated = sigma.is_none();
    let sigma = match sigma {
        Some(sigma) => (0..count)
            .map(|k| if usable(k) { sigma[k] } else { f64::INFINITY })
            .collect(),
        None => estimated(intensity, &usable),
    };
    let residual_sigmas = (0..count)
        .map(|k| {
            if usable(k) {
                (intensity[k] - continuum[k]) / sigma[k]
            } else {
                0.0
            }
        })
        .collect();
    Some(Flattened {
        continuum,
        residual_sigmas,
        sigma,
        noise_is_estimated,
    })
}

fn clipped_median(values: &mut Vec<f64>) -> f64 {
    let mut middle = median(values);
    for _ in 0..ROUNDS {
        let mut sizes: Vec<f64> = values.iter().map(|v| (v - middle).abs()).collect();
        let limit = CLIP * 1.4826 * median(&mut sizes);
        let kept: Vec<f64> = values
            .iter()
            .copied()
            .filter(|v| (v - middle).abs() <= limit)
            .collect();
        if kept.len() < 5 || kept.len() == values.len() {
            break;
        }
        *values = kept;
        middle = median(values);
    }
    middle
}

pub(super) fn median(values: &mut [f64]) -> f64 {
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

fn joined(knots: &[(f64, f64)], at: f64) -> f64 {
    let right = knots.partition_point(|knot| knot.0 < at);
    match (
        right.checked_sub(1).and_then(|k| knots.get(k)),
        knots.get(right),
    ) {
        (Some(left), Some(right)) => {
            left.1 + (right.1 - left.1) * (at - left.0) / (right.0 - left.0).max(1e-9)
        }
        (Some(only), None) | (None, Some(only)) => only.1,
        (None, None) => 0.0,
    }
}

fn estimated(intensity: &[f64], usable: &impl Fn(usize) -> bool) -> Vec<f64> {
    let count = intensity.len();
    let known: Vec<f64> = (0..count)
        .map(|k| if usable(k) { intensity[k] } else { f64::NAN })
        .collect();
    let largest = known.iter().fold(0.0_f64, |a, b| a.max(b.abs()));
    // Data without any noise would make every rounding error a line.
    let floor = (1e-6 * largest).max(f64::MIN_POSITIVE);
    let whole = noise::estimate(&known).unwrap_or(largest).max(floor);
    let piece = count.div_ceil(NOISE_PIECES).max(2 * SHORTEST_WINDOW);
    let knots: Vec<(f64, f64)> = (0..count)
        .step_by(piece)
        .map(|from| {
            let to = (from + piece).min(count);
            let own = noise::estimate(&known[from..to]).unwrap_or(whole);
            (0.5 * (from + to) as f64, own.max(0.1 * whole).max(floor))
        })
        .collect();
    (0..count)
        .map(|k| {
            if usable(k) {
                joined(&knots, k as f64)
            } else {
                f64::INFINITY
            }
        })
        .collect()
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    #[test]
    fn lines_do_not_move_the_smooth_light() {
        // A slope with lines of one sign over a third of the channels.
        let truth = |k: usize| 100.0 + 0.01 * k as f64;
        for height in [50.0, -50.0] {
            let data: Vec<f64> = (0..2000)
                .map(|k| truth(k) + if k % 12 < 4 { height } else { 0.0 } + [0.3, -0.3][k % 2])
                .collect();
            let flat = flatten(&data, None, &vec![false; 2000]).unwrap();
            for k in 100..1900 {
                assert!(
                    (flat.continuum[k] - truth(k)).abs() < 1.0,
                    "{k}: {}",
                    flat.continuum[k]
                );
            }
        }
    }

    #[test]
    fn masked_channels_say_nothing_and_too_few_give_no_answer() {
        let mut data = vec![1.0; 200];
        data[50] = f64::NAN;
        let mut mask = vec![false; 200];
        mask[60] = true;
        let flat = flatten(&data, Some(&vec![0.1; 200]), &mask).unwrap();
        assert_eq!(
            (flat.residual_sigmas[50], flat.residual_sigmas[60]),
            (0.0, 0.0)
        );
        assert!(flat.sigma[50].is_infinite() && flat.sigma[60].is_infinite());
        assert!(!flat.noise_is_estimated);
        assert!(flatten(&data[..40], None, &mask[..40]).is_none());
    }
}
