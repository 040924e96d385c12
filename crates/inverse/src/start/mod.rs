//! Starting values without a guess from the user: background, then velocity, then the state of the gas.
//!
//! Least squares finds the nearest minimum, and there are many: a line may be taken for another one at
//! another velocity, hot thin gas for cold thick gas. So several starts are made, and all are followed
//! until it is clear which wins.

mod background;
mod filter;
mod further;
mod state;
mod velocity;

pub(crate) use background::{without_gas, without_gas_of};
pub(crate) use further::one_more_cloud;

use crate::problem::{Problem, Workspace};
use filter::Filtered;

/// Starts that are worth following, the most likely first; each a full set of parameters.
pub(crate) fn starts(problem: &Problem, workspace: &mut Workspace) -> Vec<Vec<f64>> {
    let mut base = problem.middle.clone();
    background::fit(problem, workspace, &mut base);
    if problem.engine.sightline().clouds.is_empty() {
        return vec![base];
    }
    background::residual(problem, workspace, &base);
    let widths = filter::widths_m(problem, &base);
    let filtered: Vec<Filtered> = widths
        .iter()
        .map(|&width| Filtered::new(problem, workspace, width))
        .collect();
    let mut starts: Vec<Vec<f64>> = Vec::new();
    for velocities in velocity::candidates(problem, &filtered, &base) {
        starts.extend(state::candidates(problem, &filtered, &base, &velocities));
    }
    // What the user says is tried as it stands, with everything else from the best of the others.
    if problem.free.iter().any(|value| value.start.is_some()) {
        let mut given = starts.first().unwrap_or(&base).clone();
        for value in &problem.free {
            if let Some(start) = value.start {
                given[value.parameter] = start;
            }
        }
        starts.push(given);
    }
    for start in &mut starts {
        problem.clamp(start);
    }
    starts
}
