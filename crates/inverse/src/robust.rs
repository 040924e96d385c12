//! Spectra with outliers (cosmic rays), and noise of unknown size: both only if the setup asks for it.
//!
//! Outliers: iteratively reweighted least squares with the bisquare weights of Beaton & Tukey 1974 (Technometrics 16,
//! 147), after two rounds with those of Huber 1964 (Ann. Math. Statist. 35, 73), whose loss has one minimum only. The
//! constants give 95 % efficiency on normal noise: Holland & Welsch 1977 (Commun. Statist. A6, 813). What the bisquare
//! gives no weight is then left out, and plain least squares ends the fit (Rousseeuw & Leroy 1987, Robust Regression
//! and Outlier Detection, ch. 1), so that chi-square, covariance and flags keep their meaning.

use crate::fit::{Ask, Best, LAST_ROUND};
use crate::problem::{Problem, Workspace};

/// Standard deviations beyond which the bisquare gives no weight (Holland & Welsch 1977, table 1).
pub(crate) const BISQUARE: f64 = 4.685;
/// Standard deviations beyond which Huber's loss is linear (same source).
const HUBER: f64 = 1.345;
/// Rounds of reweighting, the first of them with Huber's weights.
const ROUNDS: usize = 30;
const HUBER_ROUNDS: usize = 2;
/// The loss has settled when it changes by less than this.
const SETTLED: f64 = 1e-3;
/// From a median residual to a standard deviation of normal noise: 1/Φ⁻¹(3/4).
const SIGMA_PER_MEDIAN: f64 = 1.482_602_2;
/// A channel that stands out of its neighbours by this many standard deviations ...
const SPIKE: f64 = 6.0;
/// ... while its flanks reach less than this part of it is too sharp for the instrument.
const FLANK: f64 = 0.3;
/// Reduced chi-square up to which a clean fit needs no second opinion ...
const GOOD: f64 = 1.3;
/// ... where the line-spread function has this standard deviation in channels (a FWHM of 2), so that no line is sharp.
const RESOLVED: f64 = 0.85;
/// Scaling by less than this would be division by nothing: data without noise.
const NO_NOISE: f64 = 1e-12;

impl Problem {
    /// The best minimum with outliers left out, and their number; the target's weights of outliers end at 0.
    ///
    /// Started twice: from the spectrum without its sharp spikes, which would draw the matched filters to
    /// themselves, and from the spectrum as it is, because a line may be as sharp. The smaller bisquare loss wins.
    pub(crate) fn best_despite_outliers(
        &self,
        workspace: &mut Workspace,
        ask: &Ask<'_>,
        usable: usize,
        messages: &mut Vec<String>,
    ) -> (Best, usize) {
        let whole = workspace.target.weight.clone();
        let middle_m = self.centres_m[self.centres_m.len() / 2];
        let sightline = self.engine.sightline();
        let resolved =
            sightline.line_spread.sigma_m(middle_m) > RESOLVED * sightline.channels.mean_width_m();
        let mut least = f64::INFINITY;
        let mut chosen: Option<(Best, Vec<f64>)> = None;
        for weight in [
            without_spikes(&workspace.target.data, &whole),
            whole.clone(),
        ] {
            let counted = weight.iter().filter(|&&w| w > 0.0).count();
            if counted <= self.free.len() + 1 {
                continue;
            }
            workspace.target.weight = weight;
            let degrees = (counted - self.free.len()) as f64;
            let mut best = self.best(workspace, ask, degrees);
            let loss = self.reweigh(workspace, &whole, &mut best.parameters);
            let kept = self.without_outliers(workspace, &whole, &best.parameters);
            workspace.target.weight.clone_from(&kept);
            best.descent = self.descend_with(workspace, &mut best.parameters, LAST_ROUND);
            let degrees = kept.iter().filter(|&&w| w > 0.0).count() as f64 - self.free.len() as f64;
            let good = best.descent.chi_square < GOOD * degrees;
            if loss < least {
                least = loss;
                chosen = Some((best, kept));
            }
            if good && resolved {
                break;
            }
        }
        let Some((mut best, kept)) = chosen else {
            workspace.target.weight = whole;
            let degrees = (usable - self.free.len()) as f64;
            return (self.best(workspace, ask, degrees), 0);
        };
        workspace.target.weight = kept;
        // Rivals were judged with other weights.
        for (parameters, chi_square) in &mut best.rivals {
            *chi_square = self
                .descend_with(workspace, parameters, LAST_ROUND)
                .chi_square;
        }
        if let Some(deeper) = (0..best.rivals.len())
            .min_by(|&a, &b| best.rivals[a].1.total_cmp(&best.rivals[b].1))
            .filter(|&rival| best.rivals[rival].1 < best.descent.chi_square)
        {
            let (other, chi_square) = &mut best.rivals[deeper];
            std::mem::swap(other, &mut best.parameters);
            *chi_square = best.descent.chi_square;
            best.descent = self.descend_with(workspace, &mut best.parameters, LAST_ROUND);
        }
        let counted = workspace.target.weight.iter().filter(|&&w| w > 0.0).count();
        let outliers = usable - counted;
        messages.push(format!(
            "robust: {outliers} of {usable} channels are left out as outliers"
        ));
        (best, outliers)
    }

    /// Sizes the noise by the misfit, if the setup asks for it: the target's weights and `chi_square` are divided by the
    /// reduced chi-square, which is returned.
    pub(crate) fn scale_noise(
        &self,
        workspace: &mut Workspace,
        usable: usize,
        chi_square: &mut f64,
        messages: &mut Vec<String>,
    ) -> f64 {
        let degrees = usable.saturating_sub(self.free.len()) as f64;
        let reduced = *chi_square / degrees;
        let noisy = reduced > NO_NOISE && reduced.is_finite();
        if !(self.choices.scale_noise && noisy) {
            return 1.0;
        }
        for weight in &mut workspace.target.weight {
            *weight /= reduced;
        }
        *chi_square /= reduced;
        messages.push(format!(
            "scale_noise: all uncertainties are {:.4} times those of the given noise, the root of reduced chi-square",
            reduced.sqrt()
        ));
        reduced
    }

    /// Rounds of reweighted least squares; returns the bisquare loss reached.
    fn reweigh(&self, workspace: &mut Workspace, whole: &[f64], parameters: &mut [f64]) -> f64 {
        let mut before = f64::INFINITY;
        for round in 0..ROUNDS {
            let (sizes, scale) = self.sizes(workspace, whole, parameters);
            let loss: f64 = sizes.iter().map(|size| bisquare_loss(size / scale)).sum();
            if round > HUBER_ROUNDS && (before - loss).abs() < SETTLED {
                return loss;
            }
            before = loss;
            for ((weight, &full), size) in workspace.target.weight.iter_mut().zip(whole).zip(&sizes)
            {
                let z = size / scale;
                *weight = full
                    * if round < HUBER_ROUNDS {
                        (HUBER / z).min(1.0)
                    } else {
                        (1.0 - (z / BISQUARE).powi(2)).max(0.0).powi(2)
                    };
            }
            self.descend_with(workspace, parameters, LAST_ROUND);
        }
        before
    }

    fn without_outliers(
        &self,
        workspace: &mut Workspace,
        whole: &[f64],
        parameters: &[f64],
    ) -> Vec<f64> {
        let (sizes, scale) = self.sizes(workspace, whole, parameters);
        whole
            .iter()
            .zip(sizes)
            .map(|(&full, size)| if size < BISQUARE * scale { full } else { 0.0 })
            .collect()
    }

    /// Each residual in standard deviations, and how many of them the residuals' own size is: 1 or more.
    fn sizes(
        &self,
        workspace: &mut Workspace,
        whole: &[f64],
        parameters: &[f64],
    ) -> (Vec<f64>, f64) {
        self.engine.evaluate(&mut workspace.evaluation, parameters);
        let sizes: Vec<f64> = whole
            .iter()
            .enumerate()
            .map(|(k, full)| {
                (workspace.target.data[k] - workspace.evaluation.value(k)).abs() * full.sqrt()
            })
            .collect();
        let mut used: Vec<f64> = sizes
            .iter()
            .zip(whole)
            .filter(|(_, full)| **full > 0.0)
            .map(|(&size, _)| size)
            .collect();
        let middle = used.len() / 2;
        let scale = if used.is_empty() {
            1.0
        } else {
            SIGMA_PER_MEDIAN * *used.select_nth_unstable_by(middle, f64::total_cmp).1
        };
        (sizes, scale.max(1.0))
    }
}

/// Bisquare loss with the scale of half a square: c²/6 (1 - (1 - (z/c)²)³).
fn bisquare_loss(z: f64) -> f64 {
    let inside = (1.0 - (z / BISQUARE).powi(2)).max(0.0);
    BISQUARE * BISQUARE / 6.0 * (1.0 - inside.powi(3))
}

/// The weights without the channels, one or two side by side, that are sharper than any line through an instrument.
fn without_spikes(data: &[f64], weight: &[f64]) -> Vec<f64> {
    const AROUND: usize = 4;
    let used: Vec<usize> = (0..data.len()).filter(|&k| weight[k] > 0.0).collect();
    let mut cleaned = weight.to_vec();
    for first in 0..used.len() {
        for length in [1, 2] {
            let after = first + length;
            if after > used.len() {
                continue;
            }
            let window = first.saturating_sub(AROUND)..(after + AROUND).min(used.len());
            let mut around: Vec<f64> = window
                .filter(|place| !(first..after).contains(place))
                .map(|place| data[used[place]])
                .collect();
            if around.len() < AROUND {
                continue;
            }
            around.sort_by(f64::total_cmp);
            let middle = around[around.len() / 2];
            let way = (data[used[first]] - middle).signum();
            let height = |place: usize| (data[used[place]] - middle) * way;
            let least = (first..after).map(height).fold(f64::INFINITY, f64::min);
            let flanks = [
                first.checked_sub(1),
                Some(after).filter(|&a| a < used.len()),
            ];
            let flank = flanks
                .iter()
                .flatten()
                .map(|&place| height(place))
                .fold(0.0, f64::max);
            let stands_out = |place: usize| (height(place) - flank) * weight[used[place]].sqrt();
            if flank < FLANK * least && (first..after).all(|place| stands_out(place) > SPIKE) {
                used[first..after].iter().for_each(|&k| cleaned[k] = 0.0);
            }
        }
    }
    cleaned
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_loss_is_half_a_square_for_small_residuals_and_flat_for_large_ones() {
        assert!((bisquare_loss(0.01) / 0.5e-4 - 1.0).abs() < 1e-4);
        assert_eq!(bisquare_loss(5.0), bisquare_loss(50.0));
    }

    #[test]
    fn a_spike_is_cut_and_a_resolved_line_is_not() {
        // A Gaussian line with a FWHM of 2.5 channels, 40 standard deviations high, and three spikes.
        let mut data: Vec<f64> = (0..60)
            .map(|k| 40.0 * (-2.7726 * ((f64::from(k) - 30.0) / 2.5).powi(2)).exp())
            .collect();
        for spike in [12, 44, 45] {
            data[spike] += 50.0;
        }
        let cleaned = without_spikes(&data, &[1.0; 60]);
        let cut: Vec<usize> = (0..60).filter(|&k| cleaned[k] == 0.0).collect();
        assert_eq!(cut, [12, 44, 45]);
    }
}
