//! The velocity by a matched filter over all lines at once: one line may stand anywhere, a pattern only in
//! its place.

use super::filter::{Filtered, strongest};
use super::state::temperatures_k;
use crate::problem::Problem;
use backlit_forward::planck::radiance;
use backlit_forward::{Background, Layout};
use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;
use backlit_units::doppler::wavelength_factor;

/// Lines that the search looks at.
const LINES: usize = 48;
/// Steps of the search at most.
const STEPS: usize = 4000;
/// Velocities that are followed.
const KEPT: usize = 3;
/// How saturated the pattern is taken to be: depth of its strongest line.
const DEPTHS: [f64; 3] = [0.1, 10.0, 1000.0];

/// Sets of velocities, one a cloud, worth following; the best first.
pub fn candidates(problem: &Problem, filtered: &[Filtered], base: &[f64]) -> Vec<Vec<f64>> {
    let layout = problem.engine.layout();
    let mut by_cloud: Vec<Vec<(f64, f64)>> = Vec::new();
    for (cloud, place) in layout.clouds.iter().enumerate() {
        let (low, high) = problem.range_of(place.velocity(), base);
        by_cloud.push(if high > low {
            search(problem, filtered, base, cloud, low, high)
        } else {
            vec![(low, 1.0)]
        });
    }
    if by_cloud.len() == 1 {
        let best = by_cloud[0].first().map_or(0.0, |peak| peak.1);
        return by_cloud[0]
            .iter()
            .filter(|peak| peak.1 > 0.25 * best)
            .map(|peak| vec![peak.0])
            .collect();
    }
    // Several clouds: no two at the same place unless there is no other, each order tried.
    let mut sets: Vec<(f64, Vec<f64>)> = vec![(0.0, Vec::new())];
    for peaks in &by_cloud {
        let mut longer = Vec::new();
        for (score, set) in &sets {
            let before = longer.len();
            for &(velocity, strength) in peaks {
                if !set.contains(&velocity) {
                    let mut set = set.clone();
                    set.push(velocity);
                    longer.push((score + strength, set));
                }
            }
            if longer.len() == before {
                let mut set = set.clone();
                set.push(peaks[0].0);
                longer.push((*score, set));
            }
        }
        sets = longer;
    }
    sets.sort_by(|a, b| b.0.total_cmp(&a.0));
    sets.truncate(2 * KEPT);
    sets.into_iter().map(|(_, set)| set).collect()
}

/// Peaks of the matched filter between two velocities, with their strength (a squared signal-to-noise).
pub fn search(
    problem: &Problem,
    filtered: &[Filtered],
    base: &[f64],
    cloud: usize,
    low: f64,
    high: f64,
) -> Vec<(f64, f64)> {
    let temperatures = temperatures_k(problem, base, cloud, 6);
    let lines = strongest(problem, cloud, &temperatures, LINES);
    let species = &problem.engine.sightline().clouds[cloud].species;
    let wavelength_m = problem.centres_m[problem.centres_m.len() / 2];
    let narrow = filtered
        .iter()
        .map(|f| f.sigma_m)
        .fold(f64::INFINITY, f64::min);
    let step =
        (0.6 * narrow / wavelength_m * SPEED_OF_LIGHT_M_PER_S).max((high - low) / STEPS as f64);
    let count = ((high - low) / step).ceil() as usize + 1;
    // The patterns: what each line would show at a temperature and a saturation.
    let mut patterns: Vec<Vec<f64>> = Vec::new();
    for &t in &temperatures {
        let strengths: Vec<f64> = lines
            .iter()
            .map(|line| {
                let q = species[line.species].partition_function(t);
                line.integrated_cross_section(t, q.ln_q, 0.0).0 * line.wavelength_vac_m
            })
            .collect();
        let contrasts: Vec<f64> = lines
            .iter()
            .map(|line| contrast(problem, base, line.wavelength_vac_m, t))
            .collect();
        let mut strongest = vec![1e-300_f64; species.len()];
        for (line, &strength) in lines.iter().zip(&strengths) {
            strongest[line.species] = strongest[line.species].max(strength);
        }
        for depth in DEPTHS {
            patterns.push(
                lines
                    .iter()
                    .zip(strengths.iter().zip(&contrasts))
                    .map(|(line, (strength, contrast))| {
                        contrast
                            * -(-depth * strength / strongest[line.species]).exp_m1()
                            * line.wavelength_vac_m
                    })
                    .collect(),
            );
        }
    }
    let mut scores = vec![0.0_f64; count];
    let mut seen = vec![(0.0, 0.0); lines.len()];
    for filter in filtered {
        for (k, score) in scores.iter_mut().enumerate() {
            let factor = wavelength_factor((low + k as f64 * step).min(high));
            for (seen, line) in seen.iter_mut().zip(&lines) {
                *seen = filter.at(line.wavelength_vac_m * factor);
            }
            for pattern in &patterns {
                let mut total = 0.0;
                for s in 0..species.len() {
                    let (mut product, mut power) = (0.0, 0.0);
                    for ((line, seen), a) in lines.iter().zip(&seen).zip(pattern) {
                        if line.species == s {
                            product += a * seen.0;
                            power += a * a * seen.1;
                        }
                    }
                    if product > 0.0 && power > 0.0 {
                        total += product * product / power;
                    }
                }
                *score = score.max(total);
            }
        }
    }
    let mut peaks: Vec<(f64, f64)> = (0..count)
        .filter(|&k| {
            (k == 0 || scores[k] >= scores[k - 1]) && (k + 1 == count || scores[k] > scores[k + 1])
        })
        .map(|k| {
            // The vertex of the parabola through the peak and its neighbours.
            let mut shift = 0.0;
            if k > 0 && k + 1 < count {
                let curvature = scores[k - 1] - 2.0 * scores[k] + scores[k + 1];
                if curvature < 0.0 {
                    shift = (0.5 * (scores[k - 1] - scores[k + 1]) / curvature).clamp(-0.5, 0.5);
                }
            }
            (
                (low + (k as f64 + shift) * step).clamp(low, high),
                scores[k],
            )
        })
        .collect();
    peaks.sort_by(|a, b| b.1.total_cmp(&a.1));
    peaks.truncate(KEPT);
    if peaks.is_empty() {
        peaks.push((0.5 * (low + high), 0.0));
    }
    peaks
}

/// What an opaque cloud would add to the background at a wavelength.
pub fn contrast(problem: &Problem, base: &[f64], wavelength_m: f64, temperature_k: f64) -> f64 {
    let scale = base[Layout::SCALE].exp();
    let behind = match &problem.engine.sightline().background {
        Background::Dark => 0.0,
        Background::Blackbody { .. } => {
            scale
                * base[Layout::DILUTION]
                * radiance(wavelength_m, base[Layout::BACKGROUND_TEMPERATURE].exp())
        }
        Background::Measured { radiance } => {
            let after = problem
                .centres_m
                .partition_point(|&centre| centre < wavelength_m);
            radiance[after.min(radiance.len() - 1)]
        }
    };
    scale * radiance(wavelength_m, temperature_k) - behind
}
