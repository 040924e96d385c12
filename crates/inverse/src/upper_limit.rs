//! How much of a species could be there without showing.

use crate::problem::{Problem, Workspace};
use crate::start::without_gas_of;

/// Change of chi-square at three standard deviations.
const THREE_SIGMA: f64 = 9.0;

/// The column (coordinate) of a free value at which chi-square is 9 above its least, with all else held.
///
/// * `parameters`: the state at which the limit is asked for.
/// * `free`: index of the column among the free values.
///
/// Saturation is in it, because the whole model is evaluated. `None` if no column within the bounds shows:
/// the gas is as hot as the background, or has no line in the data.
pub fn column(
    problem: &Problem,
    workspace: &mut Workspace,
    parameters: &[f64],
    free: usize,
) -> Option<f64> {
    let value = &problem.free[free];
    let mut at = parameters.to_vec();
    let mut chi_square = |ln_column: f64| {
        at[value.parameter] = ln_column;
        problem.chi_square(workspace, &at)
    };
    let none = chi_square(without_gas_of());
    let mut least = none;
    let (mut below, mut above) = (value.low, None);
    const STEPS: usize = 48;
    for k in 0..=STEPS {
        let ln_column = value.low + (value.high - value.low) * k as f64 / STEPS as f64;
        let here = chi_square(ln_column);
        if here < least {
            least = here;
        }
        if here > least + THREE_SIGMA {
            above = Some(ln_column);
            break;
        }
        below = ln_column;
    }
    let mut above = above?;
    for _ in 0..30 {
        let middle = 0.5 * (below + above);
        if chi_square(middle) > least + THREE_SIGMA {
            above = middle
        } else {
            below = middle
        }
    }
    Some(above)
}
