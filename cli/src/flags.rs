//! What each flag means, in words, with what to do about it.

/// The meaning of a flag and the remedy; `None` for a name that this version does not know.
pub fn explain(name: &str) -> Option<&'static str> {
    Some(match name {
        "not_converged" => {
            "the fit did not settle: give a `start`, narrow the bounds, or free fewer values"
        }
        "at_bound" => "a value lies at the edge of its range: widen `find`, or doubt the model",
        "no_contrast" => {
            "gas and background look equally hot, so the lines vanish: the columns are not measured; fix the temperature from elsewhere"
        }
        "saturated" => {
            "the lines are opaque: the column is a lower limit at best; add weaker lines of the same species"
        }
        "not_detected" => "no line stands out of the noise: use the 3-sigma upper limit",
        "degenerate" => {
            "the data cannot tell some values apart: fix one of them, or add lines from other levels"
        }
        "too_little_data" => {
            "fewer usable channels than free values, or none near the lines: widen `use_nm` or fix values"
        }
        "poor_fit" => {
            "the model does not describe the data within the noise: another excitation, a second cloud, or larger uncertainties"
        }
        _ => return None,
    })
}
