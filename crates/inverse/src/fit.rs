//! The fit of one spectrum, from data to answer.

use crate::coordinate::Kind;
use crate::intervals::{self, Interval, Intervals};
use crate::problem::{Observation, Problem, Workspace};
use crate::solver::{Descent, Limits, StopReason, descend};
use crate::start;
use crate::uncertainty::Covariance;
use crate::verdict::{self, Flags};
use crate::{noise, upper_limit};
use backlit_forward::engine::PeakDepth;

/// The answer for one spectrum; vectors in the order of [`Problem::quantities`].
#[derive(Debug, Clone)]
pub struct Fit {
    /// Values in the user's units, NaN where there is no answer.
    pub values: Vec<f64>,
    /// One standard deviation of each.
    pub sigma: Vec<f64>,
    /// 3-sigma upper limits of log10 columns that are not detected, NaN elsewhere.
    pub upper: Vec<f64>,
    /// What the values are worth.
    pub flags: Flags,
    /// Chi-square over degrees of freedom, NaN without data.
    pub chi2_reduced: f64,
    /// Evaluations of the model on the way that led to the answer.
    pub iterations: u32,
    /// Why the descent stopped.
    pub stop: StopReason,
    /// Why each flag was raised, and what else the reader should know.
    pub messages: Vec<String>,
    /// Parameters of the forward model at the answer.
    pub parameters: Vec<f64>,
    /// Profile-likelihood intervals of 68.3 %, where they were asked for.
    pub intervals: Vec<Option<Interval>>,
    /// Chi-square with the noise as given, over the channels that count.
    pub chi_square: f64,
    /// Usable channels, outliers included.
    pub channels: usize,
    /// Channels that a robust fit left out.
    pub outliers: usize,
    /// Clouds of which nothing is detected.
    pub absent: Vec<usize>,
}

/// What a fit may start from, and what it should give beyond values and covariance.
#[derive(Debug, Clone, Copy, Default)]
pub struct Ask<'a> {
    /// The answer of a neighbouring pixel, tried first.
    pub near: Option<&'a Fit>,
    /// Further starts: full sets of parameters of the forward model.
    pub starts: &'a [Vec<f64>],
    /// Which values get a profile-likelihood interval.
    pub intervals: Intervals,
}

/// What the verdict looks at.
pub(crate) struct Found {
    pub parameters: Vec<f64>,
    /// Indices of the free values that the fit moved, in the order of the covariance.
    pub free: Vec<usize>,
    pub covariance: Covariance,
    /// Each line's depth, and whether it stands out of the noise.
    pub depths: Vec<(PeakDepth, bool)>,
    /// Clouds of which nothing is detected.
    pub absent: Vec<usize>,
    /// Free columns that are not detected.
    pub absent_columns: Vec<usize>,
    /// Other minima that describe the data as well.
    pub rivals: Vec<Vec<f64>>,
}

/// Evaluations that each start gets before the field is narrowed, and the best few after it.
const FIRST_ROUND: u32 = 9;
pub(crate) const LAST_ROUND: u32 = 120;
/// Starts that go on to the last round.
const FINALISTS: usize = 3;
/// Chi-square within this many of its standard deviations says that a neighbour's answer fits here too.
const ACCEPTABLE: f64 = 3.0;
/// A minimum whose chi-square is this little above the least describes the data as well.
const AS_GOOD: f64 = 4.0;
/// Standard deviations by which a line must stand out to count as seen.
const SEEN: f64 = 3.0;

impl Problem {
    /// Fits one spectrum.
    ///
    /// * `near`: the answer of a neighbouring pixel, tried first.
    ///
    /// Least squares by [`crate::solver`] from several starts; the one with the smallest chi-square is the
    /// answer. Never panics on data: what cannot be fitted comes back with NaN and a flag.
    pub fn fit(
        &self,
        workspace: &mut Workspace,
        data: &Observation<'_>,
        near: Option<&Fit>,
    ) -> Fit {
        let ask = Ask {
            near,
            ..Ask::default()
        };
        self.fit_with(workspace, data, &ask)
    }

    /// Fits one spectrum as [`Problem::fit`], with more to start from and more to answer.
    pub fn fit_with(
        &self,
        workspace: &mut Workspace,
        data: &Observation<'_>,
        ask: &Ask<'_>,
    ) -> Fit {
        let mut messages = Vec::new();
        let usable = self.load(workspace, data, &mut messages);
        let mut flags = Flags::default();
        if usable < self.free.len() + 1 {
            flags.raise(Flags::TOO_LITTLE_DATA);
            messages.push(format!(
                "{usable} usable channels for {} free values",
                self.free.len()
            ));
            return self.nothing(flags, messages);
        }
        let channels = usable;
        let (best, outliers) = if self.choices.robust {
            self.best_despite_outliers(workspace, ask, usable, &mut messages)
        } else {
            let degrees = (usable - self.free.len()) as f64;
            (self.best(workspace, ask, degrees), 0)
        };
        let usable = usable - outliers;
        let Best {
            mut parameters,
            mut descent,
            rivals,
        } = best;
        let noise_squared =
            self.scale_noise(workspace, usable, &mut descent.chi_square, &mut messages);
        let rivals = rivals
            .into_iter()
            .filter(|(_, other)| other / noise_squared - descent.chi_square < AS_GOOD)
            .map(|(parameters, _)| parameters)
            .collect();
        let absent = self.detections(workspace, &parameters, descent.chi_square, &mut messages);
        let mut upper = vec![f64::NAN; self.free.len()];
        let clouds = self.engine.sightline().clouds.len();
        let nothing_there = clouds > 0 && absent.clouds.len() == clouds;
        // Without gas the background is fitted on its own: values of absent gas must not pull at it.
        let free: Vec<usize> = if nothing_there {
            let own: Vec<usize> = (0..self.free.len())
                .filter(|&i| self.free[i].cloud.is_none())
                .collect();
            let mut bare = start::without_gas(self, &parameters);
            descent = self.descend_on(workspace, &own, &mut bare);
            parameters = bare;
            own
        } else {
            (0..self.free.len()).collect()
        };
        if !absent.columns.is_empty() {
            flags.raise(Flags::NOT_DETECTED);
            for &i in &absent.columns {
                let mut state = parameters.clone();
                if self.free[i]
                    .cloud
                    .is_some_and(|cloud| absent.clouds.contains(&cloud))
                {
                    self.set_to_middle(&mut state, self.free[i].cloud);
                }
                if let Some(limit) = upper_limit::column(self, workspace, &state, i) {
                    upper[i] = self.free[i].kind.reported(limit);
                }
                messages.push(format!("{} is not detected", self.quantities()[i].name));
            }
            self.hidden_by_temperature(&parameters, &absent.clouds, &mut flags, &mut messages);
        }
        if !descent.stop.is_minimum() {
            flags.raise(Flags::NOT_CONVERGED);
            messages.push(format!("stopped after {} evaluations", descent.evaluations));
        }
        let degrees = (usable - free.len()).max(1) as f64;
        let near_lines = self.misfit_near_lines(workspace, &parameters, free.len());
        verdict::misfit(
            descent.chi_square,
            degrees,
            near_lines,
            &mut flags,
            &mut messages,
        );
        let mut answer = self.nothing(flags, messages);
        answer.upper = upper;
        answer.chi_square = descent.chi_square * noise_squared;
        answer.chi2_reduced = answer.chi_square / degrees;
        answer.channels = channels;
        answer.outliers = outliers;
        answer.absent.clone_from(&absent.clouds);
        answer.iterations = descent.evaluations;
        answer.stop = descent.stop;
        let Some(covariance) = self.covariance(workspace, &free, &parameters) else {
            answer.flags.raise(Flags::NOT_CONVERGED);
            answer.parameters = parameters;
            return answer;
        };
        for (position, &i) in free.iter().enumerate() {
            let value = &self.free[i];
            let hidden = value
                .cloud
                .is_some_and(|cloud| absent.clouds.contains(&cloud));
            if !hidden && !absent.columns.contains(&i) {
                let at = parameters[value.parameter];
                answer.values[i] = value.kind.reported(at);
                answer.sigma[i] = covariance.sigma(position) * value.kind.slope(at).abs();
            }
        }
        let depths = self.depths(workspace, &parameters);
        let found = Found {
            parameters,
            free,
            covariance,
            depths,
            absent: absent.clouds,
            absent_columns: absent.columns,
            rivals,
        };
        let doubtful = verdict::judge(self, &found, &mut answer.flags, &mut answer.messages);
        let wanted: Vec<usize> = match ask.intervals {
            Intervals::None => Vec::new(),
            Intervals::Doubtful => doubtful,
            Intervals::All => found.free.clone(),
        };
        if let Some(better) = intervals::fill(
            self,
            workspace,
            &found,
            descent.chi_square,
            &wanted,
            &mut answer,
        ) && ask.starts.last() != Some(&better)
        {
            // A walk along the profile came into a deeper valley than all starts did.
            let starts = [ask.starts, std::slice::from_ref(&better)].concat();
            let ask = Ask {
                starts: &starts,
                near: None,
                ..*ask
            };
            return self.fit_with(workspace, data, &ask);
        }
        answer.parameters = found.parameters;
        answer
    }

    /// Brings the data into the workspace; returns the number of usable channels.
    pub(crate) fn load(
        &self,
        workspace: &mut Workspace,
        data: &Observation<'_>,
        messages: &mut Vec<String>,
    ) -> usize {
        let target = &mut workspace.target;
        target.data.clear();
        target.weight.clear();
        let channels = self.channels();
        let usable = |k: usize| !data.mask[k] && data.intensity[k].is_finite();
        let common = match data.uncertainty {
            Some(_) => 0.0,
            None => {
                let values: Vec<f64> = channels
                    .iter()
                    .map(|&k| {
                        if usable(k) {
                            data.intensity[k]
                        } else {
                            f64::NAN
                        }
                    })
                    .collect();
                let largest = values
                    .iter()
                    .filter(|v| v.is_finite())
                    .fold(0.0_f64, |m, v| m.max(v.abs()));
                // Data without any noise still carry the model's own error.
                let floor = largest * self.engine.sightline().tolerance * 1e-3;
                let sigma = noise::estimate(&values).unwrap_or(0.0).max(floor);
                messages.push(format!(
                    "no uncertainties given: noise estimated from the data, 1 sigma = {sigma:.4e}"
                ));
                sigma
            }
        };
        let mut count = 0;
        for &k in channels {
            let sigma = data
                .uncertainty
                .map_or(common, |uncertainty| uncertainty[k]);
            let good = usable(k) && sigma > 0.0 && sigma.is_finite();
            target.data.push(if good {
                data.intensity[k] * self.to_si
            } else {
                0.0
            });
            target.weight.push(if good {
                (sigma * self.to_si).powi(-2)
            } else {
                0.0
            });
            count += usize::from(good);
        }
        count
    }

    /// The best minimum that any start leads to, and the others that fit as well.
    pub(crate) fn best(&self, workspace: &mut Workspace, ask: &Ask<'_>, degrees: f64) -> Best {
        let mut field: Vec<(Vec<f64>, Descent)> = Vec::new();
        if let Some(near) = ask.near {
            let mut parameters = near.parameters.clone();
            self.clamp(&mut parameters);
            let descent = self.descend_with(workspace, &mut parameters, LAST_ROUND);
            let acceptable = descent.chi_square < degrees + ACCEPTABLE * (2.0 * degrees).sqrt();
            field.push((parameters, descent));
            if descent.stop.is_minimum() && acceptable {
                // A neighbour may sit in a twin of the minimum that describes the data within the noise as
                // well: what the data themselves suggest first must lead to the same place, or wins.
                if let Some(mut challenger) = start::starts(self, workspace).into_iter().next() {
                    let descent = self.descend_with(workspace, &mut challenger, LAST_ROUND);
                    field.push((challenger, descent));
                }
                return self.ranked(workspace, field);
            }
        }
        for mut start in ask
            .starts
            .iter()
            .cloned()
            .chain(start::starts(self, workspace))
        {
            let descent = self.descend_with(workspace, &mut start, FIRST_ROUND);
            field.push((start, descent));
        }
        field.sort_by(|a, b| a.1.chi_square.total_cmp(&b.1.chi_square));
        field.truncate(FINALISTS);
        for (parameters, descent) in &mut field {
            if !descent.stop.is_minimum() {
                *descent = self.descend_with(workspace, parameters, LAST_ROUND);
            }
        }
        self.ranked(workspace, field)
    }

    /// The best of a field, the others as its rivals.
    fn ranked(&self, workspace: &mut Workspace, mut field: Vec<(Vec<f64>, Descent)>) -> Best {
        field.sort_by(|a, b| a.1.chi_square.total_cmp(&b.1.chi_square));
        let mut ranked = field.into_iter();
        let Some((parameters, descent)) = ranked.next() else {
            let stop = StopReason::NoData;
            let descent = Descent {
                chi_square: f64::NAN,
                evaluations: 0,
                stop,
                promised: f64::NAN,
            };
            return Best {
                parameters: self.middle.clone(),
                descent,
                rivals: Vec::new(),
            };
        };
        let rivals = ranked
            .map(|(parameters, other)| (parameters, other.chi_square))
            .collect();
        let mut best = Best {
            parameters,
            descent,
            rivals,
        };
        self.number_twins_by_velocity(workspace, &mut best);
        best
    }

    pub(crate) fn descend_with(
        &self,
        workspace: &mut Workspace,
        parameters: &mut [f64],
        budget: u32,
    ) -> Descent {
        let Workspace {
            evaluation,
            target,
            room,
            ..
        } = workspace;
        descend(
            &self.engine,
            evaluation,
            target,
            &self.limits,
            parameters,
            budget,
            room,
        )
    }

    /// A descent in some of the free values only.
    fn descend_on(
        &self,
        workspace: &mut Workspace,
        free: &[usize],
        parameters: &mut [f64],
    ) -> Descent {
        let limits = self.limits_of(free);
        let mut evaluation = self.engine.evaluation(&limits.parameter);
        descend(
            &self.engine,
            &mut evaluation,
            &workspace.target,
            &limits,
            parameters,
            LAST_ROUND,
            &mut workspace.room,
        )
    }

    pub(crate) fn limits_of(&self, free: &[usize]) -> Limits {
        let pick = |values: &[f64]| free.iter().map(|&i| values[i]).collect::<Vec<f64>>();
        Limits {
            parameter: free.iter().map(|&i| self.limits.parameter[i]).collect(),
            low: pick(&self.limits.low),
            high: pick(&self.limits.high),
            stride: pick(&self.limits.stride),
        }
    }

    fn covariance(
        &self,
        workspace: &mut Workspace,
        free: &[usize],
        parameters: &[f64],
    ) -> Option<Covariance> {
        if free.len() == self.free.len() {
            self.chi_square(workspace, parameters);
        } else {
            let mut evaluation = self.engine.evaluation(&self.limits_of(free).parameter);
            self.engine.evaluate(&mut evaluation, parameters);
            let target = &workspace.target;
            evaluation.gram(&target.data, &target.weight, &mut workspace.gram);
        }
        Covariance::of(&workspace.gram)
    }

    /// Chi-square at a place; the gram matrix stays in the workspace.
    pub(crate) fn chi_square(&self, workspace: &mut Workspace, parameters: &[f64]) -> f64 {
        self.engine.evaluate(&mut workspace.evaluation, parameters);
        let target = &workspace.target;
        workspace
            .evaluation
            .gram(&target.data, &target.weight, &mut workspace.gram);
        workspace.gram.chi_square()
    }

    /// Which clouds and columns could be left out without harm to the fit.
    fn detections(
        &self,
        workspace: &mut Workspace,
        parameters: &[f64],
        chi_square: f64,
        _: &mut [String],
    ) -> Absent {
        let mut absent = Absent::default();
        let layout = self.engine.layout();
        for (cloud, place) in layout.clouds.iter().enumerate() {
            let needed = self.needed(place.velocity(), cloud);
            let mut without = parameters.to_vec();
            for s in 0..place.species() {
                without[place.column(s)] = start::without_gas_of();
            }
            let all_gone = self.chi_square(workspace, &without) - chi_square < needed;
            if all_gone {
                absent.clouds.push(cloud);
            }
            for (i, value) in self.free.iter().enumerate() {
                if value.kind != Kind::Column || value.cloud != Some(cloud) {
                    continue;
                }
                let mut without = parameters.to_vec();
                without[value.parameter] = start::without_gas_of();
                // With the velocity known from the others a species has only one place to be.
                let needed = if place.species() > 1 {
                    SEEN * SEEN
                } else {
                    needed
                };
                if all_gone || self.chi_square(workspace, &without) - chi_square < needed {
                    absent.columns.push(i);
                }
            }
        }
        absent
    }

    /// Improvement of chi-square below which noise alone could have made it: three standard deviations, and
    /// more where the velocity was searched for, by the number of places looked at.
    pub(crate) fn needed(&self, velocity: usize, cloud: usize) -> f64 {
        let Some(value) = self.free.iter().find(|value| value.parameter == velocity) else {
            return SEEN * SEEN;
        };
        let places = (value.high - value.low) / self.limits.stride_of(velocity).max(1.0);
        let states = if self
            .free
            .iter()
            .any(|v| v.cloud == Some(cloud) && v.kind == Kind::Temperature)
        {
            3.0
        } else {
            1.0
        };
        SEEN * SEEN + 2.0 * (states * places).max(1.0).ln()
    }

    /// Gas that does not show may be as hot as the background, if its temperature may be that.
    fn hidden_by_temperature(
        &self,
        parameters: &[f64],
        absent: &[usize],
        flags: &mut Flags,
        messages: &mut Vec<String>,
    ) {
        use backlit_forward::{Background, Layout};
        if !matches!(
            self.engine.sightline().background,
            Background::Blackbody { .. }
        ) {
            return;
        }
        let behind = parameters[Layout::BACKGROUND_TEMPERATURE];
        for &cloud in absent {
            let (low, high) =
                self.range_of(self.engine.layout().clouds[cloud].temperature(), parameters);
            if low <= behind + 1e-3 && high >= behind - 1e-3 {
                flags.raise(Flags::NO_CONTRAST);
                messages.push(format!(
                    "cloud {} may be absent, or as hot as the background",
                    cloud + 1
                ));
            }
        }
    }

    /// Chi-square and degrees of freedom of the channels within reach of the deepest lines.
    fn misfit_near_lines(
        &self,
        workspace: &mut Workspace,
        parameters: &[f64],
        free: usize,
    ) -> (f64, f64) {
        let depths = self.depths(workspace, parameters);
        let line_spread = self.engine.sightline().line_spread;
        let mut near = vec![false; self.centres_m.len()];
        for (depth, _) in depths.iter().filter(|(_, seen)| *seen) {
            let reach = 2.0 * line_spread.sigma_m(depth.centre_m)
                + 2.0 * depth.width_m
                + self.engine.sightline().channels.mean_width_m();
            let first = self
                .centres_m
                .partition_point(|&c| c < depth.centre_m - reach);
            let last = self
                .centres_m
                .partition_point(|&c| c <= depth.centre_m + reach);
            near[first..last].fill(true);
        }
        let mut sums = (0.0, -(free as f64));
        for (k, _) in near.iter().enumerate().filter(|(_, near)| **near) {
            let weight = workspace.target.weight[k];
            let residual = workspace.target.data[k] - workspace.evaluation.value(k);
            sums.0 += weight * residual * residual;
            sums.1 += f64::from(u8::from(weight > 0.0));
        }
        sums
    }

    /// Depth of every line, and whether it stands out of the noise; the evaluation stays at the place.
    fn depths(&self, workspace: &mut Workspace, parameters: &[f64]) -> Vec<(PeakDepth, bool)> {
        let bare = start::without_gas(self, parameters);
        self.engine.evaluate(&mut workspace.evaluation, &bare);
        workspace.residual.clear();
        for k in 0..self.centres_m.len() {
            workspace.residual.push(workspace.evaluation.value(k));
        }
        self.engine.evaluate(&mut workspace.evaluation, parameters);
        workspace
            .evaluation
            .peak_depths()
            .map(|depth| {
                let after = self.centres_m.partition_point(|&c| c < depth.centre_m);
                let seen = [after.saturating_sub(1), after.min(self.centres_m.len() - 1)]
                    .iter()
                    .any(|&k| {
                        let change = workspace.evaluation.value(k) - workspace.residual[k];
                        change * change * workspace.target.weight[k] > SEEN * SEEN
                    });
                (depth, seen)
            })
            .collect()
    }

    fn set_to_middle(&self, parameters: &mut [f64], cloud: Option<usize>) {
        for value in self
            .free
            .iter()
            .filter(|value| value.cloud == cloud && value.kind != Kind::Column)
        {
            parameters[value.parameter] = value.middle();
        }
    }

    fn nothing(&self, flags: Flags, messages: Vec<String>) -> Fit {
        let none = vec![f64::NAN; self.free.len()];
        Fit {
            values: none.clone(),
            sigma: none.clone(),
            upper: none,
            flags,
            chi2_reduced: f64::NAN,
            iterations: 0,
            stop: StopReason::NoData,
            messages,
            parameters: self.middle.clone(),
            intervals: vec![None; self.free.len()],
            chi_square: f64::NAN,
            channels: 0,
            outliers: 0,
            absent: Vec::new(),
        }
    }
}

/// Where the starts have led.
pub(crate) struct Best {
    pub parameters: Vec<f64>,
    pub descent: Descent,
    /// Other minima, each with its chi-square.
    pub rivals: Vec<(Vec<f64>, f64)>,
}

/// What could be left out.
#[derive(Default)]
struct Absent {
    clouds: Vec<usize>,
    columns: Vec<usize>,
}
