//! One cloud more than an answer has: what is left over says where it may be.

use super::filter::{self, Filtered};
use super::{state, velocity, without_gas_of};
use crate::problem::{Problem, Workspace};
use backlit_forward::Layout;

/// Velocities and states of the further cloud that are followed.
const VELOCITIES: usize = 3;
const STATES: usize = 2;

/// Starts for `problem`, whose clouds are alike, from the answer with one cloud less.
///
/// * `parameters`: that answer.
///
/// The workspace is that of `problem`, with the data loaded. The further cloud is tried nearest the observer and nearest
/// the background.
pub(crate) fn one_more_cloud(
    problem: &Problem,
    workspace: &mut Workspace,
    parameters: &[f64],
) -> Vec<Vec<f64>> {
    let new = problem.engine.layout();
    let last = new.clouds.len() - 1;
    // Clouds come after the background, one block of parameters each, so that those of fewer clouds come first.
    let mut base = problem.middle.clone();
    base[..parameters.len()].copy_from_slice(parameters);
    let place = &new.clouds[last];
    for s in 0..place.species() {
        base[place.column(s)] = without_gas_of();
    }
    problem.engine.evaluate(&mut workspace.evaluation, &base);
    workspace.residual.clear();
    for (k, data) in workspace.target.data.iter().enumerate() {
        workspace
            .residual
            .push(data - workspace.evaluation.value(k));
    }
    let filtered: Vec<Filtered> = filter::widths_m(problem, &base)
        .iter()
        .map(|&width| Filtered::new(problem, workspace, width))
        .collect();
    let (low, high) = problem.range_of(place.velocity(), &base);
    let velocities = if high > low {
        velocity::search(problem, &filtered, &base, last, low, high)
    } else {
        vec![(low, 1.0)]
    };
    let mut starts = Vec::new();
    for &(velocity_m_per_s, _) in velocities.iter().take(VELOCITIES) {
        for state in state::search(problem, &filtered, &base, last, velocity_m_per_s)
            .iter()
            .take(STATES)
        {
            let mut start = base.clone();
            start[place.velocity()] = velocity_m_per_s;
            state.put(place, &mut start);
            let mut behind = start.clone();
            behind[Layout::SHAPE + new.shape_terms..].rotate_right(start.len() - parameters.len());
            starts.push(start);
            starts.push(behind);
        }
    }
    starts
}
