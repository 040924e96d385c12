//! The noise of a spectrum that comes without uncertainties.

/// Standard deviation of the noise of a spectrum, from the spectrum itself.
///
/// `σ = 1.482602/√6 · median |2 y_i - y_(i-2) - y_(i+2)|`: what is smooth over five channels drops out, what
/// is not (lines) touches few channels and does not move a median. Assumes independent noise of one size in
/// all channels. Source: Stoehr et al. 2008 (ADASS XVII, ASP Conf. Ser. 394, 505). Accuracy: about 1.4/√n of the
/// value for n channels of pure noise (measured on draws); `the_noise_of_noise_is_found`.
///
/// * `values`: one a channel, in order; NaN where there is none.
///
/// Returns `None` with fewer than 8 usable differences.
pub fn estimate(values: &[f64]) -> Option<f64> {
    let mut differences: Vec<f64> = values
        .windows(5)
        .map(|w| (2.0 * w[2] - w[0] - w[4]).abs())
        .filter(|difference| difference.is_finite())
        .collect();
    if differences.len() < 8 {
        return None;
    }
    let middle = differences.len() / 2;
    let (_, median, _) = differences.select_nth_unstable_by(middle, f64::total_cmp);
    Some(1.482_602 / 6.0_f64.sqrt() * *median)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_noise_of_noise_is_found() {
        // A sum of twelve uniform numbers from a linear congruential generator: nearly normal, σ = 1.
        let mut state = 1_u64;
        let mut uniform = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 / (1_u64 << 53) as f64
        };
        let values: Vec<f64> = (0..20_000)
            .map(|k| {
                let noise: f64 = (0..12).map(|_| uniform()).sum::<f64>() - 6.0;
                let line = if k % 200 < 6 { 50.0 } else { 0.0 };
                100.0 + 1e-3 * f64::from(k) + noise + line
            })
            .collect();
        let found = estimate(&values);
        assert!(
            found.is_some_and(|sigma| (sigma - 1.0).abs() < 0.08),
            "{found:?}"
        );
    }
}
