//! The background alone: Wien's law and a scan for the temperature, then a fit that leaves the lines out.

use crate::coordinate::Kind;
use crate::problem::{Problem, Workspace};
use crate::solver::{Limits, descend};
use backlit_forward::planck::radiance;
use backlit_forward::{Background, Layout};
use backlit_units::constants::WIEN_M_K;

/// Channels that a scan looks at.
const SAMPLES: usize = 160;
/// Temperatures of a scan.
const TEMPERATURES: usize = 24;
/// Residuals beyond this many robust standard deviations are taken for lines.
const CLIP: f64 = 4.0;
/// Natural logarithm of a column in m⁻² that nobody sees.
const NO_GAS: f64 = -600.0;

/// Sets the background's parameters in `base`.
pub fn fit(problem: &Problem, workspace: &mut Workspace, base: &mut [f64]) {
    let is_blackbody = matches!(
        problem.engine.sightline().background,
        Background::Blackbody { .. }
    );
    if !is_blackbody {
        return;
    }
    scan(problem, workspace, base);
    let own: Vec<usize> = (0..problem.free.len())
        .filter(|&i| problem.free[i].cloud.is_none())
        .collect();
    if own.is_empty() {
        return;
    }
    let pick = |values: &[f64]| own.iter().map(|&i| values[i]).collect::<Vec<f64>>();
    let limits = Limits {
        parameter: own.iter().map(|&i| problem.limits.parameter[i]).collect(),
        low: pick(&problem.limits.low),
        high: pick(&problem.limits.high),
        stride: pick(&problem.limits.stride),
    };
    let mut evaluation = problem.engine.evaluation(&limits.parameter);
    let mut bare = without_gas(problem, base);
    let mut target = workspace.target.clone();
    // Cut what sticks out, fit, and again: lines drop out after a few rounds.
    for _ in 0..4 {
        problem.engine.evaluate(&mut evaluation, &bare);
        let residual: Vec<f64> = target
            .data
            .iter()
            .enumerate()
            .map(|(k, data)| data - evaluation.value(k))
            .collect();
        let size = robust_size(&residual, &workspace.target.weight);
        for (k, residual) in residual.iter().enumerate() {
            let whole = workspace.target.weight[k];
            let sigma = size.max(whole.sqrt().recip());
            target.weight[k] = if residual.abs() < CLIP * sigma {
                whole
            } else {
                0.0
            };
        }
        let seen = target.weight.iter().filter(|&&w| w > 0.0).count();
        if seen < limits.parameter.len() + 3 {
            break;
        }
        descend(
            &problem.engine,
            &mut evaluation,
            &target,
            &limits,
            &mut bare,
            12,
            &mut workspace.room,
        );
    }
    for &parameter in &limits.parameter {
        base[parameter] = bare[parameter];
    }
}

/// Leaves data minus background in the workspace.
pub fn residual(problem: &Problem, workspace: &mut Workspace, base: &[f64]) {
    let bare = without_gas(problem, base);
    problem.engine.evaluate(&mut workspace.evaluation, &bare);
    workspace.residual.clear();
    for (k, data) in workspace.target.data.iter().enumerate() {
        workspace
            .residual
            .push(data - workspace.evaluation.value(k));
    }
}

/// The column of a species that is not there.
pub(crate) fn without_gas_of() -> f64 {
    NO_GAS
}

/// The same place in the parameter space without any gas.
pub(crate) fn without_gas(problem: &Problem, parameters: &[f64]) -> Vec<f64> {
    let mut bare = parameters.to_vec();
    for place in &problem.engine.layout().clouds {
        for s in 0..place.species() {
            bare[place.column(s)] = NO_GAS;
        }
    }
    bare
}

/// The temperature with the smallest sum of absolute residuals: lines do not move it as they move squares.
fn scan(problem: &Problem, workspace: &Workspace, base: &mut [f64]) {
    let target = &workspace.target;
    let step = target.data.len().div_ceil(SAMPLES);
    let samples: Vec<(f64, f64)> = (0..target.data.len())
        .step_by(step)
        .filter(|&k| target.weight[k] > 0.0)
        .map(|k| (problem.centres_m[k], target.data[k]))
        .collect();
    if samples.is_empty() {
        return;
    }
    let find = |parameter: usize| {
        problem
            .free
            .iter()
            .find(|value| value.parameter == parameter)
    };
    let (low, high) = match find(Layout::BACKGROUND_TEMPERATURE) {
        Some(value) => (value.low, value.high),
        None => (
            base[Layout::BACKGROUND_TEMPERATURE],
            base[Layout::BACKGROUND_TEMPERATURE],
        ),
    };
    let scale = find(Layout::SCALE);
    let dilution = find(Layout::DILUTION);
    let amplitude_is_free = scale.is_some() || dilution.is_some();
    let known_amplitude = base[Layout::SCALE].exp() * base[Layout::DILUTION];
    let amplitude_at = |ln_t: f64| {
        if !amplitude_is_free {
            return known_amplitude;
        }
        let mut ratios: Vec<f64> = samples
            .iter()
            .map(|&(wavelength, data)| data / radiance(wavelength, ln_t.exp()))
            .filter(|ratio| ratio.is_finite())
            .collect();
        if ratios.is_empty() {
            return 1.0;
        }
        let middle = ratios.len() / 2;
        *ratios.select_nth_unstable_by(middle, f64::total_cmp).1
    };
    let badness = |ln_t: f64| {
        let amplitude = amplitude_at(ln_t);
        samples
            .iter()
            .map(|&(w, data)| (data - amplitude * radiance(w, ln_t.exp())).abs())
            .sum::<f64>()
    };
    let mut tried: Vec<f64> = if high > low {
        (0..=TEMPERATURES)
            .map(|k| low + (high - low) * k as f64 / TEMPERATURES as f64)
            .collect()
    } else {
        vec![low]
    };
    let brightest = samples.iter().max_by(|a, b| a.1.total_cmp(&b.1));
    if let Some(&(peak_m, _)) = brightest {
        tried.push((WIEN_M_K / peak_m).ln().clamp(low, high));
    }
    let mut best = tried[0];
    let mut least = f64::INFINITY;
    for ln_t in tried {
        let value = badness(ln_t);
        if value < least {
            (best, least) = (ln_t, value);
        }
    }
    // Golden section between the neighbours of the best.
    let mut width = (high - low) / TEMPERATURES as f64;
    while width > 1e-4 {
        for side in [best - 0.5 * width, best + 0.5 * width] {
            let side = side.clamp(low, high);
            let value = badness(side);
            if value < least {
                (best, least) = (side, value);
            }
        }
        width *= 0.6;
    }
    base[Layout::BACKGROUND_TEMPERATURE] = best;
    let amplitude = amplitude_at(best).max(1e-300);
    match (scale, dilution) {
        (Some(scale), Some(dilution)) => {
            base[Layout::DILUTION] = Kind::Dilution.coordinate(dilution.middle());
            let share = base[Layout::DILUTION].max(1e-3);
            base[Layout::SCALE] = (amplitude / share).ln().clamp(scale.low, scale.high);
        }
        (Some(scale), None) => {
            let share = base[Layout::DILUTION].max(1e-300);
            base[Layout::SCALE] = (amplitude / share).ln().clamp(scale.low, scale.high);
        }
        (None, Some(dilution)) => {
            base[Layout::DILUTION] =
                (amplitude / base[Layout::SCALE].exp()).clamp(dilution.low, dilution.high);
        }
        (None, None) => {}
    }
}

/// 1.4826 times the median absolute residual of the usable channels.
fn robust_size(residual: &[f64], weight: &[f64]) -> f64 {
    let mut sizes: Vec<f64> = residual
        .iter()
        .zip(weight)
        .filter(|(_, w)| **w > 0.0)
        .map(|(r, _)| r.abs())
        .collect();
    if sizes.is_empty() {
        return 0.0;
    }
    let middle = sizes.len() / 2;
    1.4826 * *sizes.select_nth_unstable_by(middle, f64::total_cmp).1
}
