//! One damped step after the other: Levenberg-Marquardt with bounds.
//!
//! Roles: the engine evaluates, `propose` gives one step, [`descend`] runs the loop and says why it stopped.
//! Sources: Levenberg 1944 (Quart. Appl. Math. 2, 164), Marquardt 1963 (SIAM J. 11, 431); damping schedule of
//! Madsen, Nielsen & Tingleff 2004 (Methods for non-linear least squares problems, section 3.2); bounds by
//! holding those values that a bound stops and the gradient pushes outwards.

use backlit_forward::engine::Gram;
use backlit_forward::{Engine, Evaluation};

/// Why a descent stopped.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum StopReason {
    /// The next step would change chi-square by less than the tolerance.
    Converged,
    /// No step improves chi-square any more: the limit of rounding.
    Rounding,
    /// Too many evaluations.
    Budget,
    /// There was nothing to fit.
    NoData,
}

impl StopReason {
    /// In words.
    pub fn name(self) -> &'static str {
        match self {
            StopReason::Converged => "converged",
            StopReason::Rounding => "rounding",
            StopReason::Budget => "budget",
            StopReason::NoData => "no_data",
        }
    }

    /// True if the place reached is a minimum.
    pub fn is_minimum(self) -> bool {
        matches!(self, StopReason::Converged | StopReason::Rounding)
    }
}

/// Bounds and largest single steps of the free coordinates.
#[derive(Debug, Clone)]
pub struct Limits {
    /// Index of each free value in the parameters.
    pub parameter: Vec<usize>,
    /// Lower bounds.
    pub low: Vec<f64>,
    /// Upper bounds.
    pub high: Vec<f64>,
    /// Largest single step.
    pub stride: Vec<f64>,
}

impl Limits {
    /// The largest single step of a parameter; infinite if it is not free.
    pub fn stride_of(&self, parameter: usize) -> f64 {
        let place = self.parameter.iter().position(|&p| p == parameter);
        place.map_or(f64::INFINITY, |i| self.stride[i])
    }
}

/// The data of one spectrum, ready for the fit.
#[derive(Debug, Default, Clone)]
pub struct Target {
    /// Values of the channels in use, in SI × scale.
    pub data: Vec<f64>,
    /// 1/σ² of each, 0 for one not to be used.
    pub weight: Vec<f64>,
}

/// What a descent reached.
#[derive(Debug, Clone, Copy)]
pub struct Descent {
    /// Chi-square there.
    pub chi_square: f64,
    /// Evaluations of the model.
    pub evaluations: u32,
    /// Why it stopped.
    pub stop: StopReason,
    /// Decrease of chi-square that the last quadratic model still promised.
    pub promised: f64,
}

/// Room for a descent: nothing is allocated inside once it has been used.
#[derive(Debug, Default)]
pub struct Room {
    here: Gram,
    there: Gram,
    trial: Vec<f64>,
    step: Vec<f64>,
    matrix: Vec<f64>,
    held: Vec<bool>,
    /// The step of a value that is held: to the wall, or none.
    fixed: Vec<f64>,
}

impl Room {
    /// Chi-square, gradient and normal matrix at the place reached.
    pub fn gram(&self) -> &Gram {
        &self.here
    }
}

/// Predicted change of chi-square below which a place counts as the minimum: a ten-thousandth of a standard
/// deviation. The step that promises it is still taken.
pub const STOP_CHI_SQUARE: f64 = 1e-8;

/// The same for a step that is taken unseen: what it leaves is its square.
const LAST_CHI_SQUARE: f64 = 1e-11;

/// Goes down from `parameters` to the nearest minimum; `parameters` ends there.
pub fn descend(
    engine: &Engine,
    evaluation: &mut Evaluation,
    target: &Target,
    limits: &Limits,
    parameters: &mut [f64],
    budget: u32,
    room: &mut Room,
) -> Descent {
    let count = limits.parameter.len();
    room.trial.clear();
    room.trial.extend_from_slice(parameters);
    room.step.resize(count, 0.0);
    room.held.resize(count, false);
    engine.evaluate(evaluation, parameters);
    evaluation.gram(&target.data, &target.weight, &mut room.here);
    let mut evaluations = 1;
    let (mut damping, mut growth) = (1e-3, 2.0);
    let mut promised = f64::INFINITY;
    let stop = loop {
        if evaluations >= budget {
            break StopReason::Budget;
        }
        let before = room.here.chi_square();
        promised = propose(room, limits, parameters, damping);
        if promised.is_nan() {
            // Not even the damped matrix is definite: damp harder, or give up.
            damping *= 100.0;
            if damping > 1e12 {
                break StopReason::Rounding;
            }
            continue;
        }
        if promised <= 1e-15 * before || promised <= 0.0 {
            break StopReason::Converged;
        }
        for (i, &parameter) in limits.parameter.iter().enumerate() {
            room.trial[parameter] = parameters[parameter] + room.step[i];
        }
        if promised < LAST_CHI_SQUARE && damping < 1e-2 {
            // So near the quadratic model is the model: the last step needs no look at where it led.
            parameters.copy_from_slice(&room.trial);
            break StopReason::Converged;
        }
        engine.evaluate(evaluation, &room.trial);
        evaluation.gram(&target.data, &target.weight, &mut room.there);
        evaluations += 1;
        let after = room.there.chi_square();
        let gain = (before - after) / promised;
        if gain > 1e-4 && after.is_finite() {
            for &parameter in &limits.parameter {
                parameters[parameter] = room.trial[parameter];
            }
            std::mem::swap(&mut room.here, &mut room.there);
            damping = (damping * (1.0 - (2.0 * gain - 1.0).powi(3)).max(1.0 / 20.0)).max(1e-14);
            growth = 2.0;
            if promised < STOP_CHI_SQUARE && damping < 1.0 {
                break StopReason::Converged;
            }
        } else {
            if promised < 1e-10 * before.max(1e-20) || (promised < STOP_CHI_SQUARE && damping > 1e4)
            {
                break StopReason::Rounding;
            }
            damping *= growth;
            growth *= 2.0;
            if damping > 1e14 {
                break StopReason::Rounding;
            }
        }
    };
    Descent {
        chi_square: room.here.chi_square(),
        evaluations,
        stop,
        promised,
    }
}

/// Fills `room.step` with the damped step; returns the decrease of chi-square that it promises.
///
/// A value that would leave the box goes to the wall, and the others are solved again with it there: cut alone, without
/// the values that it is tied to, it could promise a rise. Should even that promise nothing, it stays where it is.
fn propose(room: &mut Room, limits: &Limits, parameters: &[f64], damping: f64) -> f64 {
    let count = limits.parameter.len();
    for i in 0..count {
        let value = parameters[limits.parameter[i]];
        let down = room.here.descent(i);
        room.held[i] = (value <= limits.low[i] && down < 0.0)
            || (value >= limits.high[i] && down > 0.0)
            || room.here.normal(i, i) <= 0.0;
    }
    let mut promised = f64::NAN;
    for to_wall in [true, false] {
        room.fixed.clear();
        room.fixed.resize(count, 0.0);
        if !solve_in_box(room, limits, parameters, damping, to_wall) {
            return f64::NAN;
        }
        promised = 0.0;
        for i in 0..count {
            let mut curved = 0.0;
            for j in 0..count {
                curved += room.here.normal(i, j) * room.step[j];
            }
            promised += room.step[i] * (2.0 * room.here.descent(i) - curved);
        }
        if promised > 0.0 || room.fixed.iter().all(|&step| step == 0.0) {
            break;
        }
    }
    promised
}

/// The damped step of the values that are not held; false if the matrix is not definite.
///
/// * `to_wall`: values that would leave the box are held at the wall; otherwise they are held where they are.
fn solve_in_box(
    room: &mut Room,
    limits: &Limits,
    parameters: &[f64],
    damping: f64,
    to_wall: bool,
) -> bool {
    let count = limits.parameter.len();
    let gram = &room.here;
    for _ in 0..=count {
        room.matrix.clear();
        room.matrix.resize(count * count, 0.0);
        for i in 0..count {
            let mut right = gram.descent(i);
            for j in 0..count {
                room.matrix[i * count + j] = match (room.held[i] || room.held[j], i == j) {
                    (true, true) => 1.0,
                    (true, false) => 0.0,
                    (false, true) => gram.normal(i, i) * (1.0 + damping),
                    (false, false) => gram.normal(i, j),
                };
                right -= gram.normal(i, j) * room.fixed[j];
            }
            room.step[i] = if room.held[i] { room.fixed[i] } else { right };
        }
        if !cholesky_solve(&mut room.matrix, &mut room.step) {
            return false;
        }
        let shrink = (0..count)
            .filter(|&i| !room.held[i])
            .map(|i| (limits.stride[i] / room.step[i].abs()).min(1.0))
            .fold(1.0, f64::min);
        let mut hit = false;
        for i in 0..count {
            if room.held[i] {
                continue;
            }
            room.step[i] *= shrink;
            let value = parameters[limits.parameter[i]];
            let moved = value + room.step[i];
            if moved < limits.low[i] || moved > limits.high[i] {
                room.held[i] = true;
                hit = true;
                if to_wall {
                    room.fixed[i] = moved.clamp(limits.low[i], limits.high[i]) - value;
                }
            }
        }
        if !hit {
            break;
        }
    }
    true
}

/// Solves a small symmetric definite system in place, scaled to a unit diagonal; false if it is not definite.
///
/// Written out here because it runs at every step on a matrix of a dozen rows: a library call would spend
/// more on its way in than on the work. Decompositions of the answer go through LAPACK.
fn cholesky_solve(matrix: &mut [f64], right: &mut [f64]) -> bool {
    let n = right.len();
    for i in 0..n {
        for j in 0..=i {
            let mut sum = matrix[i * n + j];
            for k in 0..j {
                sum -= matrix[i * n + k] * matrix[j * n + k];
            }
            if i == j {
                // The diagonal of the factor against that of the matrix: lost to rounding, or not definite.
                if sum.is_nan() || sum <= 1e-15 * matrix[i * n + i] {
                    return false;
                }
                matrix[i * n + i] = sum.sqrt();
            } else {
                matrix[i * n + j] = sum / matrix[j * n + j];
            }
        }
    }
    for i in 0..n {
        for k in 0..i {
            right[i] -= matrix[i * n + k] * right[k];
        }
        right[i] /= matrix[i * n + i];
    }
    for i in (0..n).rev() {
        for k in i + 1..n {
            right[i] -= matrix[k * n + i] * right[k];
        }
        right[i] /= matrix[i * n + i];
    }
    true
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cholesky_solves_and_refuses() {
        let mut matrix = vec![4.0, 2.0, 2.0, 3.0];
        let mut right = vec![2.0, 1.0];
        assert!(cholesky_solve(&mut matrix, &mut right));
        assert!((right[0] - 0.5).abs() < 1e-15 && right[1].abs() < 1e-15);
        assert!(!cholesky_solve(&mut [1.0, 1.0, 1.0, 1.0], &mut [1.0, 1.0]));
    }
}
