//! The smallest column of a species that a noise would show, and the noise that a wanted column needs.

use crate::error::InverseError;
use crate::problem::{Problem, Workspace};
use crate::setup::{CloudSetup, Excitation, Setup, Value};
use backlit_species::{Catalogue, Species};
use backlit_units::doppler::wavelength_factor;
use backlit_units::{IntensityUnit, SpectralAxis};

/// Columns that are tried, log10 of cm⁻².
const LOG10_COLUMNS: (f64, f64) = (4.0, 20.0);
/// Steps of the first look.
const STEP_DEX: f64 = 1.0;
/// Width of the last bracket, in dex.
const EXACT_DEX: f64 = 1e-3;
/// Gas that at this column (log10 of cm⁻²) shows less than this part of what is wanted has no contrast.
const HOPELESS_LOG10_COLUMN: f64 = 15.0;
/// See above: no line grows by so much from there to the last column.
const HOPELESS: f64 = 1e-6;
/// Temperatures that are tried where the setup leaves the temperature open.
const TEMPERATURES: usize = 6;

/// What the limits of all species share: the data's channels and their noise.
#[derive(Debug, Clone, Copy)]
pub struct Noise<'a> {
    /// The channels.
    pub axis: &'a SpectralAxis,
    /// The unit of `sigma`.
    pub unit: &'a IntensityUnit,
    /// 1 sigma of each channel, rising wavelength; not finite or not positive: the channel is not used.
    pub sigma: &'a [f64],
    /// The light without the gas, if the setup asks for it; in the same unit.
    pub measured: Option<&'a [f64]>,
}

/// The answer for one species at one temperature.
#[derive(Debug, Clone, PartialEq)]
pub struct Limit {
    /// Temperature of the gas, K.
    pub temperature_k: f64,
    /// The column that reaches the wanted significance, cm⁻²; `None` if none up to 1e20 does.
    pub column_per_cm2: Option<f64>,
    /// Rest wavelength in vacuum, m, of the line that shows it best.
    pub line_vac_m: Option<f64>,
    /// Significance that the wanted column would have in this noise, if one was given.
    pub significance_of_wanted: Option<f64>,
}

/// The smallest columns of a species, one for each temperature that the setup allows (one if it is known).
///
/// A column N shows with `S² = Σ ((I(N) - I(0)) / σ)²` over the channels: the matched filter of the whole pattern, if
/// all else is known. Solved for S = `significance` by bisection on log N, with saturation, to 0.1 %.
///
/// * `name`: a species of the setup's own or of the catalogue.
/// * `cloud`: index of the cloud whose temperature, velocity and turbulence the gas has; other clouds are left out.
/// * `wanted_per_cm2`: a column whose significance is asked for.
///
/// Values that the setup leaves open take their start, or else the middle of their range; the temperature is tried
/// over all of its range. Method: the likelihood-ratio statistic of a known signal in normal noise (Kay 1998,
/// Fundamentals of Statistical Signal Processing II, ch. 4). Errors: as [`Problem::new`].
pub fn smallest_columns(
    setup: &Setup,
    noise: &Noise<'_>,
    catalogue: &Catalogue,
    name: &str,
    cloud: usize,
    significance: f64,
    wanted_per_cm2: Option<f64>,
) -> Result<Vec<Limit>, InverseError> {
    let Some(template) = setup.clouds.get(cloud) else {
        return Ok(Vec::new());
    };
    temperatures_k(template.temperature_k)
        .into_iter()
        .map(|temperature_k| {
            let alone = alone(setup, template, name, temperature_k);
            let species = alone.resolve_columns(catalogue)?;
            let problem = Problem::new(&alone, noise.axis, noise.unit, catalogue, noise.measured)?;
            let mut search = Search::new(&problem, noise.sigma);
            let log10_column = search.column(significance);
            let line_vac_m = log10_column.and_then(|log10| {
                let shift = wavelength_factor(1e3 * middle(template.velocity_km_s, false));
                search.best_line_m(log10, &species[0][0], shift, noise.axis.centres_vac_m())
            });
            Ok(Limit {
                temperature_k,
                column_per_cm2: log10_column.map(|log10| 10.0_f64.powf(log10)),
                line_vac_m,
                significance_of_wanted: wanted_per_cm2
                    .map(|column| search.significance(column.log10())),
            })
        })
        .collect()
}

/// The best of several temperatures: the smallest column.
pub fn best(limits: &[Limit]) -> Option<&Limit> {
    limits
        .iter()
        .filter(|limit| limit.column_per_cm2.is_some())
        .min_by(|a, b| {
            let column = |limit: &Limit| limit.column_per_cm2.unwrap_or(f64::INFINITY);
            column(a).total_cmp(&column(b))
        })
}

fn temperatures_k(value: Value) -> Vec<f64> {
    match value {
        Value::Known(known) => vec![known],
        Value::Find { low, high, .. } => (0..TEMPERATURES)
            .map(|k| low * (high / low).powf(k as f64 / (TEMPERATURES - 1) as f64))
            .collect(),
    }
}

/// The known number, the start, or the middle of the range, in the logarithm for what cannot be negative.
fn middle(value: Value, positive: bool) -> f64 {
    match value {
        Value::Known(known) => known,
        Value::Find {
            start: Some(start), ..
        } => start,
        Value::Find { low, high, .. } if positive && low > 0.0 => (low * high).sqrt(),
        Value::Find { low, high, .. } => 0.5 * (low + high),
    }
}

/// The setup with one cloud of one species, whose column alone is open.
fn alone(setup: &Setup, template: &CloudSetup, name: &str, temperature_k: f64) -> Setup {
    let known = |value: Value| Value::Known(middle(value, true));
    let mut alone = setup.clone();
    alone.spectrum.scale = known(setup.spectrum.scale);
    alone.background.temperature_k = known(setup.background.temperature_k);
    alone.background.dilution = Value::Known(middle(setup.background.dilution, false));
    alone.background.shape_terms = 0;
    alone.clouds = vec![CloudSetup {
        temperature_k: Value::Known(temperature_k),
        velocity_km_s: Value::Known(middle(template.velocity_km_s, false)),
        turbulence_km_s: known(template.turbulence_km_s),
        doppler_temperature_k: template.doppler_temperature_k.map(known),
        excitation: match template.excitation {
            Excitation::Split {
                excitation_temperature_k,
            } => Excitation::Split {
                excitation_temperature_k: known(excitation_temperature_k),
            },
            other => other,
        },
        columns: vec![(
            name.to_owned(),
            Value::Find {
                low: 10.0_f64.powf(LOG10_COLUMNS.0),
                high: 10.0_f64.powf(LOG10_COLUMNS.1),
                start: None,
            },
        )],
        column_lines: vec![template.column_lines.first().copied().unwrap_or(1)],
    }];
    alone
}

struct Search<'a> {
    problem: &'a Problem,
    workspace: Workspace,
    sigma: &'a [f64],
    without: Vec<f64>,
}

impl<'a> Search<'a> {
    fn new(problem: &'a Problem, sigma: &'a [f64]) -> Self {
        let mut workspace = problem.workspace();
        // A column that nobody sees.
        let without = problem.predict_at(&mut workspace, &[-200.0]);
        Search {
            problem,
            workspace,
            sigma,
            without,
        }
    }

    /// Contributions of the channels to S².
    fn parts(&mut self, log10_column: f64) -> Vec<f64> {
        let with = self
            .problem
            .predict_at(&mut self.workspace, &[log10_column]);
        with.iter()
            .zip(&self.without)
            .zip(self.sigma)
            .map(|((with, without), sigma)| {
                let part = ((with - without) / sigma).powi(2);
                if *sigma > 0.0 && part.is_finite() {
                    part
                } else {
                    0.0
                }
            })
            .collect()
    }

    fn significance(&mut self, log10_column: f64) -> f64 {
        self.parts(log10_column).iter().sum::<f64>().sqrt()
    }

    fn column(&mut self, significance: f64) -> Option<f64> {
        let (mut below, last) = LOG10_COLUMNS;
        let mut above = below;
        loop {
            let here = self.significance(above);
            if here >= significance {
                break;
            }
            // Gas without any contrast: damping wings over all channels would cost much and show nothing.
            let hopeless = above >= HOPELESS_LOG10_COLUMN && here < HOPELESS * significance;
            if above >= last || hopeless {
                return None;
            }
            below = above;
            above += STEP_DEX;
        }
        while above - below > EXACT_DEX {
            let middle = 0.5 * (above + below);
            if self.significance(middle) < significance {
                below = middle;
            } else {
                above = middle;
            }
        }
        Some(above)
    }

    fn best_line_m(
        &mut self,
        log10_column: f64,
        species: &Species,
        shift: f64,
        centres_m: &[f64],
    ) -> Option<f64> {
        let parts = self.parts(log10_column);
        let (channel, _) = parts.iter().enumerate().max_by(|a, b| a.1.total_cmp(b.1))?;
        let at_m = centres_m[channel] / shift;
        species
            .lines
            .iter()
            .map(|line| line.wavelength_vac_m)
            .min_by(|a, b| (a - at_m).abs().total_cmp(&(b - at_m).abs()))
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;
    use backlit_units::Medium;

    const SODIUM: &str = "[instrument]\nfwhm_nm = 0.05\n[background]\ntemperature_K = 5800\n[[cloud]]\n\
        temperature_K = 1500\nvelocity_km_s = 0\nturbulence_km_s = 3\n[cloud.column_cm2]\n\"Na I\" = 1e11\n";

    fn limits(text: &str, sigma: f64, wanted: Option<f64>) -> Vec<Limit> {
        let setup = Setup::parse(text, "s.toml").unwrap();
        let centres_m: Vec<f64> = (0..400)
            .map(|k| (588.0 + 0.0075 * f64::from(k)) * 1e-9)
            .collect();
        let axis = SpectralAxis::from_centres_m(&centres_m, Medium::Vacuum).unwrap();
        let unit: IntensityUnit = "W m-2 sr-1 nm-1".parse().unwrap();
        let sigma = vec![sigma; 400];
        let noise = Noise {
            axis: &axis,
            unit: &unit,
            sigma: &sigma,
            measured: None,
        };
        smallest_columns(&setup, &noise, Catalogue::builtin(), "Na I", 0, 3.0, wanted).unwrap()
    }

    #[test]
    fn the_limit_is_that_of_the_curve_of_growths_linear_part() {
        // W = N f λ² π e²/(m_e c²), with 8.853e-13 cm (Draine 2011, eq. 9.15, from memory); f = 0.641 and 0.320 for
        // D2 and D1 (Steck 2000, Sodium D line data, from memory).
        let sigma = 100.0;
        let column = limits(SODIUM, sigma, None)[0].column_per_cm2.unwrap();
        let planck = |kelvin: f64| {
            let w: f64 = 589.3e-9;
            1.191_042_972e-16 / w.powi(5) / (1.438_776_877e-2 / (w * kelvin)).exp_m1() * 1e-9
        };
        let (light, gas) = (planck(5800.0), planck(1500.0));
        let sigma_lsf_nm = 0.05 / 2.354_82;
        let area_nm = |f: f64| 8.853e-13 * 1e-7 * column * f * 589.3_f64.powi(2);
        // Σ of the squares of a Gaussian of unit area on channels of width d: 1/(2 √π σ d).
        let power = 1.0 / (2.0 * std::f64::consts::PI.sqrt() * sigma_lsf_nm * 0.0075);
        let s = (light - gas) / sigma
            * (power * (area_nm(0.641).powi(2) + area_nm(0.320).powi(2))).sqrt();
        assert!((s / 3.0 - 1.0).abs() < 0.05, "{s} at {column:e}");
    }

    #[test]
    fn twice_the_noise_hides_twice_the_thin_column_and_the_wanted_one_scales() {
        let one = limits(SODIUM, 20.0, Some(1e10));
        let two = limits(SODIUM, 40.0, Some(1e10));
        let ratio = two[0].column_per_cm2.unwrap() / one[0].column_per_cm2.unwrap();
        assert!((ratio - 2.0).abs() < 0.02, "{ratio}");
        let ratio = one[0].significance_of_wanted.unwrap() / two[0].significance_of_wanted.unwrap();
        assert!((ratio - 2.0).abs() < 1e-9, "{ratio}");
        assert!((one[0].line_vac_m.unwrap() - 589.158e-9).abs() < 1e-12);
    }

    #[test]
    fn gas_as_hot_as_its_background_shows_at_no_column() {
        let hot = limits(&SODIUM.replace("= 1500", "= 5800"), 100.0, None);
        assert_eq!(hot[0].column_per_cm2, None);
        assert_eq!(best(&hot), None);
    }

    #[test]
    fn an_open_temperature_is_tried_over_its_range() {
        let open = SODIUM.replace("= 1500", "= { find = [500, 5000] }");
        let all = limits(&open, 100.0, None);
        assert_eq!(all.len(), TEMPERATURES);
        assert_eq!(
            (
                all[0].temperature_k,
                all[TEMPERATURES - 1].temperature_k.round()
            ),
            (500.0, 5000.0)
        );
        // The cooler the gas, the darker its lines against the same light.
        let least = best(&all).unwrap();
        assert_eq!(least.temperature_k, 500.0);
    }
}
