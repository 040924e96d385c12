//! Profile-likelihood intervals: how far a value may go while all others follow it.
//!
//! The covariance is a parabola laid into the minimum. Where the valley is no parabola (an opaque line, a bound, gas
//! as hot as its background, two values that stand for each other) the interval is walked out instead.
//! Source: Venzon & Moolgavkar 1988 (J. R. Stat. Soc. C 37, 87); the rise of 1 for one value at a time:
//! Wilks 1938 (Ann. Math. Statist. 9, 60).

use crate::coordinate::FreeValue;
use crate::fit::{Fit, Found, LAST_ROUND};
use crate::problem::{Problem, Workspace};
use crate::solver::{Limits, descend};
use backlit_forward::Evaluation;

/// Probability that an interval covers the truth: one standard deviation to both sides of a normal one.
pub const LEVEL: f64 = 0.683;

/// Rise of the profiled chi-square at the ends of an interval.
const RISE: f64 = 1.0;
/// An end is known when the rise there is this close to [`RISE`]: a twentieth of a percent of the interval.
const CLOSE: f64 = 1e-3;
/// Fits on the way to one end, at most.
const STEPS: usize = 40;
/// A fall of chi-square by more than this means that the walk started beside the least.
const DEEPER: f64 = 0.05;

/// Which values get an interval.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Intervals {
    /// None: the covariance has to do.
    #[default]
    None,
    /// Those of which a flag says that the covariance is not valid.
    Doubtful,
    /// All that were found.
    All,
}

/// Where the profiled chi-square is 1 above its least, in the user's unit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Interval {
    /// The lower end; `None` if the value may go down to its bound.
    pub low: Option<f64>,
    /// The upper end; `None` if the value may go up to its bound.
    pub high: Option<f64>,
}

/// Walks out the intervals of the `wanted` free values and says in words which ends are open.
///
/// * `chi_square`: at the place found.
///
/// Returns a place with a clearly smaller chi-square if a walk comes through one: then the fit itself was not done.
pub(crate) fn fill(
    problem: &Problem,
    workspace: &mut Workspace,
    found: &Found,
    chi_square: f64,
    wanted: &[usize],
    answer: &mut Fit,
) -> Option<Vec<f64>> {
    for &i in wanted {
        // A value that is not reported has an upper limit or nothing.
        let Some(position) = found.free.iter().position(|&j| j == i) else {
            continue;
        };
        if !answer.values[i].is_finite() {
            continue;
        }
        let mut profile = Profile::new(problem, found, i, chi_square);
        let value = &problem.free[i];
        let first = match found.covariance.sigma(position) {
            sigma if sigma.is_finite() && sigma > 0.0 => sigma,
            _ => 0.25 * (value.high - value.low),
        };
        let ends = [-1.0, 1.0].map(|way| profile.end(workspace, first, way));
        if profile.least < chi_square - DEEPER {
            return Some(profile.lowest);
        }
        let name = &problem.quantities()[i].name;
        for (end, word) in ends.iter().zip(["lower", "upper"]) {
            if end.is_none() {
                answer.messages.push(format!(
                    "{name}: the interval has no {word} end within the bounds"
                ));
            }
        }
        let [low, high] = ends.map(|end| end.map(|at| value.kind.reported(at)));
        answer.intervals[i] = Some(Interval { low, high });
    }
    None
}

/// Chi-square along one value, all others refitted.
struct Profile<'a> {
    problem: &'a Problem,
    value: &'a FreeValue,
    limits: Limits,
    evaluation: Evaluation,
    /// The place found, and chi-square there.
    centre: &'a [f64],
    chi_square: f64,
    /// The least that was seen on the way, and where.
    least: f64,
    lowest: Vec<f64>,
}

impl<'a> Profile<'a> {
    fn new(problem: &'a Problem, found: &'a Found, i: usize, chi_square: f64) -> Self {
        let others: Vec<usize> = found.free.iter().copied().filter(|&j| j != i).collect();
        let limits = problem.limits_of(&others);
        let evaluation = problem.engine.evaluation(&limits.parameter);
        Profile {
            problem,
            value: &problem.free[i],
            limits,
            evaluation,
            centre: &found.parameters,
            chi_square,
            least: chi_square,
            lowest: found.parameters.clone(),
        }
    }

    /// Rise of chi-square at a value; `place` holds the others' start and then their answer.
    fn rise(&mut self, workspace: &mut Workspace, place: &mut [f64], at: f64) -> f64 {
        place[self.value.parameter] = at;
        let descent = descend(
            &self.problem.engine,
            &mut self.evaluation,
            &workspace.target,
            &self.limits,
            place,
            LAST_ROUND,
            &mut workspace.room,
        );
        if descent.chi_square < self.least {
            self.least = descent.chi_square;
            self.lowest = place.to_vec();
        }
        descent.chi_square - self.chi_square
    }

    /// The end to one side (`way` is -1 or 1), as a coordinate; `None` if the rise stays below 1 up to the bound.
    fn end(&mut self, workspace: &mut Workspace, first: f64, way: f64) -> Option<f64> {
        let wall = if way < 0.0 {
            self.value.low
        } else {
            self.value.high
        };
        // The last place inside and its rise; each fit starts from the one nearest to it.
        let mut inside = self.centre.to_vec();
        let mut inner = (self.centre[self.value.parameter], 0.0);
        let mut stride = first;
        let mut outer = loop {
            let at = inner.0 + way * stride;
            let at = if (wall - at) * way <= 0.0 { wall } else { at };
            if at == inner.0 {
                return None;
            }
            let mut place = inside.clone();
            let rise = self.rise(workspace, &mut place, at);
            if rise >= RISE || rise.is_nan() {
                break (at, rise);
            }
            inside = place;
            inner = (at, rise);
            if at == wall {
                return None;
            }
            stride *= 1.6;
        };
        // Chi-square rises about as the square: its root is nearly straight, so the secant does well. Every other
        // step halves, for valleys with a kink.
        for step in 0..STEPS {
            let span = outer.0 - inner.0;
            let (a, b) = (inner.1.max(0.0).sqrt(), outer.1.sqrt());
            let secant = (RISE.sqrt() - a) / (b - a);
            let part = if step % 3 == 2 || !secant.is_finite() {
                0.5
            } else {
                secant.clamp(0.02, 0.98)
            };
            let at = inner.0 + part * span;
            let mut place = inside.clone();
            let rise = self.rise(workspace, &mut place, at);
            if (rise - RISE).abs() < CLOSE || span.abs() < 1e-6 * first {
                return Some(at);
            }
            if rise < RISE {
                inside = place;
                inner = (at, rise);
            } else {
                outer = (at, rise);
            }
        }
        Some(0.5 * (inner.0 + outer.0))
    }
}
