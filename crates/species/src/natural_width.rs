//! Natural broadening of lines from the decays that a list holds.

use crate::Line;

/// Relative tolerance, in the line's own energy, within which two energies are one level.
const SAME_LEVEL: f64 = 2e-6;

/// For each line, the sum of the listed A of its upper and of its lower level, s^-1.
///
/// `gamma = sum_j A(u -> j) + sum_j A(l -> j)`. Source: Weisskopf and Wigner, Z. Phys. 63, 54 (1930). Two lines share a
/// level if energies agree within 2e-6 of the line's energy and the statistical weights are equal.
pub(crate) fn from_listed_decays(lines: &[Line]) -> Vec<f64> {
    let mut decays: Vec<(f64, f64, f64)> = lines
        .iter()
        .map(|l| (l.e_upper_j, l.g_upper, l.a_ki_per_s))
        .collect();
    decays.sort_by(|a, b| a.0.total_cmp(&b.0));
    let decay_rate = |energy_j: f64, g: f64, tolerance_j: f64| -> f64 {
        let start = decays.partition_point(|decay| decay.0 < energy_j - tolerance_j);
        let near = decays[start..]
            .iter()
            .take_while(|decay| decay.0 <= energy_j + tolerance_j);
        near.filter(|decay| decay.1 == g).map(|decay| decay.2).sum()
    };
    lines
        .iter()
        .map(|line| {
            let tolerance_j = SAME_LEVEL * (line.e_upper_j - line.e_lower_j).abs();
            decay_rate(line.e_upper_j, line.g_upper, tolerance_j)
                + decay_rate(line.e_lower_j, line.g_lower, tolerance_j)
        })
        .collect()
}
