//! How many clouds stand on a sightline: fits with one, two, three, compared by what they cost.
//!
//! `BIC = χ² + k ln n` for k free values and n channels (Schwarz 1978, Ann. Statist. 6, 461) for noise of known size;
//! `n ln(χ²/n) + k ln n` where the setup lets the misfit size the noise. A further cloud was also looked for at many
//! velocities, each a chance for the noise, so it must besides improve chi-square by the price of that search (the
//! look-elsewhere effect: Gross & Vitells 2010, Eur. Phys. J. C 70, 525) and be detected by itself.

use crate::error::InverseError;
use crate::fit::{Ask, Best, Fit};
use crate::intervals::Intervals;
use crate::problem::{Observation, Problem, Workspace};
use crate::robust::BISQUARE;
use crate::setup::{FitChoices, Setup};
use crate::start;
use backlit_forward::Layout;
use backlit_forward::engine::MOST_CLOUDS;
use backlit_species::Catalogue;
use backlit_units::{IntensityUnit, SpectralAxis};

/// Problems with one cloud, two, and so on, all clouds described alike.
pub struct Ladder {
    problems: Vec<Problem>,
}

/// One number of clouds and what it cost.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tried {
    /// Clouds on the sightline.
    pub clouds: usize,
    /// Chi-square; an outlier that a robust fit left out counts with the square at which it was.
    pub chi_square: f64,
    /// Free values.
    pub free_values: usize,
    /// Usable channels.
    pub channels: usize,
    /// Bayesian information criterion: smaller is better.
    pub bic: f64,
    /// Whether every cloud is detected.
    pub all_detected: bool,
    /// Improvement of chi-square that a search of this kind finds in noise alone, a cloud.
    pub price_of_search: f64,
}

/// The fit with the number of clouds that the data ask for.
#[derive(Debug, Clone)]
pub struct Choice {
    /// Clouds chosen.
    pub clouds: usize,
    /// Its fit.
    pub fit: Fit,
    /// All that were compared, by rising number of clouds.
    pub tried: Vec<Tried>,
}

impl Ladder {
    /// Problems with 1 to `most` copies of the setup's one cloud; the other arguments as in [`Problem::new`].
    ///
    /// # Errors
    ///
    /// [`InverseError::CloudToCopy`] if the setup has no cloud or several, [`InverseError::TooManyClouds`], and those of
    /// [`Problem::new`].
    pub fn new(
        setup: &Setup,
        most: usize,
        axis: &SpectralAxis,
        data_unit: &IntensityUnit,
        catalogue: &Catalogue,
        measured: Option<&[f64]>,
    ) -> Result<Ladder, InverseError> {
        let [cloud] = setup.clouds.as_slice() else {
            return Err(InverseError::CloudToCopy {
                got: setup.clouds.len(),
                path: setup.path.clone(),
            });
        };
        if !(1..=MOST_CLOUDS).contains(&most) {
            return Err(InverseError::TooManyClouds {
                got: most,
                most: MOST_CLOUDS,
                path: setup.path.clone(),
            });
        }
        let problems = (1..=most).map(|count| {
            let several = Setup {
                clouds: vec![cloud.clone(); count],
                ..setup.clone()
            };
            Problem::new(&several, axis, data_unit, catalogue, measured)
        });
        Ok(Ladder {
            problems: problems.collect::<Result<_, _>>()?,
        })
    }

    /// The problem with this number of clouds.
    ///
    /// # Panics
    /// If the ladder does not reach that far, or for no clouds.
    pub fn problem(&self, clouds: usize) -> &Problem {
        &self.problems[clouds - 1]
    }

    /// Room for the fits of one thread.
    pub fn workspaces(&self) -> Vec<Workspace> {
        self.problems.iter().map(Problem::workspace).collect()
    }

    /// Fits one spectrum with every number of clouds and chooses.
    ///
    /// * `workspaces`: from [`Ladder::workspaces`].
    pub fn fit(
        &self,
        workspaces: &mut [Workspace],
        data: &Observation<'_>,
        intervals: Intervals,
    ) -> Choice {
        let mut tried: Vec<Tried> = Vec::new();
        let mut before: Option<Fit> = None;
        let mut chosen: Option<(usize, Fit)> = None;
        for (problem, workspace) in self.problems.iter().zip(workspaces) {
            let starts = match &before {
                Some(fit) => {
                    problem.load(workspace, data, &mut Vec::new());
                    start::one_more_cloud(problem, workspace, &fit.parameters)
                }
                None => Vec::new(),
            };
            let ask = Ask {
                starts: &starts,
                intervals,
                near: None,
            };
            let fit = problem.fit_with(workspace, data, &ask);
            let here = problem.cost(&fit);
            let better = match &chosen {
                None => true,
                Some((index, _)) => here.is_better_than(&tried[*index], problem.choices),
            };
            tried.push(here);
            before = Some(fit.clone());
            if better {
                chosen = Some((tried.len() - 1, fit));
            }
        }
        // A ladder has at least one problem, and the first is always better than nothing.
        let (index, fit) = chosen.unwrap_or_else(|| {
            let problem = &self.problems[0];
            (0, problem.fit(&mut problem.workspace(), data, None))
        });
        Choice {
            clouds: index + 1,
            fit,
            tried,
        }
    }
}

impl Tried {
    fn is_better_than(&self, fewer: &Tried, choices: FitChoices) -> bool {
        let further = (self.clouds - fewer.clouds) as f64;
        let improvement = if choices.scale_noise {
            self.channels as f64 * (fewer.chi_square / self.chi_square).ln()
        } else {
            fewer.chi_square - self.chi_square
        };
        self.all_detected && self.bic < fewer.bic && improvement > further * self.price_of_search
    }
}

impl Problem {
    fn cost(&self, fit: &Fit) -> Tried {
        let clouds = self.engine.layout().clouds.len();
        let chi_square = fit.chi_square + fit.outliers as f64 * BISQUARE * BISQUARE;
        let (free_values, channels) = (self.free.len(), fit.channels);
        let (k, n) = (free_values as f64, channels as f64);
        let misfit = if self.choices.scale_noise {
            n * (chi_square / n).ln()
        } else {
            chi_square
        };
        Tried {
            clouds,
            chi_square,
            free_values,
            channels,
            bic: misfit + k * n.ln(),
            all_detected: fit.absent.is_empty(),
            price_of_search: self
                .engine
                .layout()
                .clouds
                .last()
                .map_or(0.0, |place| self.needed(place.velocity(), clouds - 1)),
        }
    }

    /// Numbers clouds that are described alike by rising velocity, if the data do not mind.
    pub(crate) fn number_twins_by_velocity(&self, workspace: &mut Workspace, best: &mut Best) {
        /// A change of chi-square that nobody minds.
        const INDIFFERENT: f64 = 0.01;
        let Some(mut sorted) = self.twins_in_order(&best.parameters) else {
            return;
        };
        let descent = self.descend_with(workspace, &mut sorted, crate::fit::LAST_ROUND);
        if descent.chi_square - best.descent.chi_square < INDIFFERENT
            && self.twins_in_order(&sorted).is_none()
        {
            best.parameters = sorted;
            best.descent = descent;
        }
    }

    /// The same clouds by rising velocity; `None` if they stand so already, or are not described alike.
    pub(crate) fn twins_in_order(&self, parameters: &[f64]) -> Option<Vec<f64>> {
        let layout = self.engine.layout();
        let first = Layout::SHAPE + layout.shape_terms;
        if !self.twins {
            return None;
        }
        let block = (parameters.len() - first) / layout.clouds.len();
        let offset = layout.clouds[0].velocity() - first;
        let mut blocks: Vec<&[f64]> = parameters[first..].chunks_exact(block).collect();
        if blocks.is_sorted_by(|a, b| a[offset] <= b[offset]) {
            return None;
        }
        blocks.sort_by(|a, b| a[offset].total_cmp(&b[offset]));
        Some([&parameters[..first], &blocks.concat()].concat())
    }
}
