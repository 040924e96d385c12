//! From a setup to a problem: what is shared by all spectra that are fitted with it.

use crate::coordinate::{FreeValue, Kind};
use crate::error::InverseError;
use crate::setup::{Excitation, FitChoices, Instrument, Light, Setup, Value};
use crate::solver::{Limits, Room, Target};
use backlit_forward::engine::{Gram, MOST_CLOUDS};
use backlit_forward::sightline::FWHM_PER_SIGMA;
use backlit_forward::{
    Background, Channels, Cloud, Engine, Evaluation, Layout, LineSpread, Sightline,
};
use backlit_species::Catalogue;
use backlit_units::{IntensityUnit, Medium, SpectralAxis, air};

/// A quantity that a fit reports.
#[derive(Debug, Clone, PartialEq)]
pub struct Quantity {
    /// Its name in maps and JSON, such as `cloud1_temperature`.
    pub name: String,
    /// Its unit.
    pub units: String,
    /// What it is, in words.
    pub long_name: String,
}

/// A setup on the channels of some data: everything that all pixels share.
pub struct Problem {
    pub(crate) engine: Engine,
    pub(crate) free: Vec<FreeValue>,
    quantities: Vec<Quantity>,
    /// All parameters, free ones at the middle of their bounds.
    pub(crate) middle: Vec<f64>,
    /// Index in the whole axis of each channel in use.
    channels: Vec<usize>,
    axis_len: usize,
    /// Factor from the data's unit to W m⁻² [sr⁻¹] m⁻¹.
    pub(crate) to_si: f64,
    pub(crate) limits: Limits,
    pub(crate) centres_m: Vec<f64>,
    /// Name of each cloud's species.
    pub(crate) species: Vec<Vec<String>>,
    path: std::path::PathBuf,
    pub(crate) choices: FitChoices,
    /// All clouds are described alike: any order of them is the same question.
    pub(crate) twins: bool,
}

/// Room for the fits of one thread.
pub struct Workspace {
    pub(crate) evaluation: Evaluation,
    pub(crate) target: Target,
    pub(crate) room: Room,
    pub(crate) gram: Gram,
    pub(crate) parameters: Vec<f64>,
    pub(crate) residual: Vec<f64>,
}

/// One spectrum: rising wavelength, the data's own unit, one value a channel of the whole axis.
#[derive(Debug, Clone, Copy)]
pub struct Observation<'a> {
    /// Measured values; NaN where there is none.
    pub intensity: &'a [f64],
    /// 1 sigma of each; `None` if not known.
    pub uncertainty: Option<&'a [f64]>,
    /// True for a channel not to be used.
    pub mask: &'a [bool],
}

impl Problem {
    /// Joins a setup and a spectral axis.
    ///
    /// * `data_unit`: the unit of the data, which the answer's scale refers to.
    /// * `measured`: the light without the gas on the same axis, rising, in the data's unit, if the setup
    ///   asks for it.
    pub fn new(
        setup: &Setup,
        axis: &SpectralAxis,
        data_unit: &IntensityUnit,
        catalogue: &Catalogue,
        measured: Option<&[f64]>,
    ) -> Result<Problem, InverseError> {
        if setup.clouds.len() > MOST_CLOUDS {
            return Err(InverseError::TooManyClouds {
                got: setup.clouds.len(),
                most: MOST_CLOUDS,
                path: setup.path.clone(),
            });
        }
        let species = setup.resolve_columns(catalogue)?;
        let used = used_channels(setup, axis);
        let channels: Vec<usize> = (0..used.len()).filter(|&k| used[k]).collect();
        if channels.is_empty() {
            let centres = axis.centres_vac_m();
            return Err(InverseError::NoChannels {
                path: setup.path.clone(),
                low_nm: centres[0] * 1e9,
                high_nm: centres[centres.len() - 1] * 1e9,
            });
        }
        // A relative calibration counts as radiance in W m-2 sr-1 nm-1: its scale takes the rest.
        let to_si = if data_unit.is_relative {
            1e9
        } else {
            data_unit.to_si
        };
        let background = match &setup.background.light {
            Light::Blackbody => Background::Blackbody {
                shape_terms: setup.background.shape_terms,
            },
            Light::Dark => Background::Dark,
            Light::Measured { .. } => {
                let values = measured.unwrap_or(&[]);
                if values.len() != axis.len() {
                    return Err(InverseError::BackgroundLength {
                        got: values.len(),
                        need: axis.len(),
                    });
                }
                Background::Measured {
                    radiance: channels.iter().map(|&k| values[k] * to_si).collect(),
                }
            }
        };
        let sightline = Sightline {
            channels: Channels::new(axis.edges_vac_m(), &used),
            line_spread: match setup.instrument {
                Instrument::None => LineSpread::None,
                Instrument::FwhmNm(fwhm_nm) => LineSpread::Fwhm {
                    fwhm_m: fwhm_nm * 1e-9,
                },
                Instrument::ResolvingPower(resolving_power) => {
                    LineSpread::ResolvingPower { resolving_power }
                }
            },
            background,
            clouds: setup
                .clouds
                .iter()
                .zip(&species)
                .map(|(cloud, species)| Cloud {
                    species: species.clone(),
                    own_doppler_temperature: cloud.doppler_temperature_k.is_some()
                        || matches!(cloud.excitation, Excitation::Split { .. }),
                })
                .collect(),
            tolerance: setup.tolerance,
        };
        let layout = sightline.layout();
        let mut table = Table::new(layout.len(), data_unit.text());
        table.background(setup, &layout);
        for (index, (cloud, place)) in setup.clouds.iter().zip(&layout.clouds).enumerate() {
            let number = index + 1;
            let (excitation, kinetic) = match cloud.excitation {
                Excitation::Split {
                    excitation_temperature_k,
                } => (
                    excitation_temperature_k,
                    Some(cloud.doppler_temperature_k.unwrap_or(cloud.temperature_k)),
                ),
                _ => (cloud.temperature_k, cloud.doppler_temperature_k),
            };
            let split = matches!(cloud.excitation, Excitation::Split { .. });
            let of = |name: &str| format!("cloud{number}_{name}");
            let words = |what: &str| format!("cloud {number}: {what}");
            let place_of = Some(index);
            table.add(
                Kind::Temperature,
                place.temperature(),
                place_of,
                None,
                excitation,
                of(if split {
                    "excitation_temperature"
                } else {
                    "temperature"
                }),
                words(if split {
                    "excitation temperature"
                } else {
                    "temperature"
                }),
            );
            table.add(
                Kind::Velocity,
                place.velocity(),
                place_of,
                None,
                cloud.velocity_km_s,
                of("velocity"),
                words("velocity, positive = receding"),
            );
            table.add(
                Kind::Turbulence,
                place.turbulence_squared(),
                place_of,
                None,
                cloud.turbulence_km_s,
                of("turbulence"),
                words("microturbulence, 1/e half-width"),
            );
            let own = cloud.doppler_temperature_k.is_some();
            table.add(
                Kind::Temperature,
                place.doppler_temperature(),
                place_of,
                None,
                kinetic.unwrap_or(Value::Known(1.0)),
                of(if split && !own {
                    "temperature"
                } else {
                    "doppler_temperature"
                }),
                words("temperature of the line width"),
            );
            for (s, ((_, value), species)) in cloud.columns.iter().zip(&species[index]).enumerate()
            {
                table.add(
                    Kind::Column,
                    place.column(s),
                    place_of,
                    Some(s),
                    *value,
                    of(&format!("log10_column_{}", species.name.replace(' ', "_"))),
                    words(&format!("column of {}", species.name)),
                );
            }
        }
        let Table {
            free,
            quantities,
            middle,
            low,
            high,
            ..
        } = table;
        let bounds: Vec<(f64, f64)> = sightline.channels.bounds_vac_m().collect();
        let centres_m: Vec<f64> = bounds
            .iter()
            .map(|(low, high)| 0.5 * (low + high))
            .collect();
        let stride = free
            .iter()
            .map(|value| largest_step(value, &sightline, &centres_m))
            .collect();
        let limits = Limits {
            parameter: free.iter().map(|value| value.parameter).collect(),
            low: free.iter().map(|value| value.low).collect(),
            high: free.iter().map(|value| value.high).collect(),
            stride,
        };
        Ok(Problem {
            engine: Engine::new(sightline, &low, &high),
            free,
            quantities,
            middle,
            channels,
            axis_len: axis.len(),
            to_si,
            limits,
            centres_m,
            species: species
                .iter()
                .map(|cloud| cloud.iter().map(|s| s.name.clone()).collect())
                .collect(),
            path: setup.path.clone(),
            choices: setup.fit,
            twins: setup.clouds.len() > 1
                && setup
                    .clouds
                    .windows(2)
                    .all(|pair| pair[0].describes_the_same_as(&pair[1])),
        })
    }

    /// The values to be found, in the order of the answers.
    pub fn quantities(&self) -> &[Quantity] {
        &self.quantities
    }

    /// Room for the fits of one thread.
    pub fn workspace(&self) -> Workspace {
        Workspace {
            evaluation: self.engine.evaluation(&self.limits.parameter),
            target: Target::default(),
            room: Room::default(),
            gram: Gram::default(),
            parameters: self.middle.clone(),
            residual: Vec::new(),
        }
    }

    /// The spectrum at the setup's known values and starts, in the data's unit, one value a channel of the
    /// whole axis; NaN outside the ranges in use.
    pub fn predict(&self) -> Result<Vec<f64>, InverseError> {
        let mut values = Vec::new();
        for (value, quantity) in self.free.iter().zip(&self.quantities) {
            let coordinate = match (value.start, value.kind) {
                (Some(start), _) => start,
                (None, Kind::Shape) => 0.0,
                (None, _) => {
                    return Err(InverseError::NoStart {
                        name: quantity.name.clone(),
                        path: self.path.clone(),
                    });
                }
            };
            values.push(value.kind.reported(coordinate));
        }
        Ok(self.predict_at(&mut self.workspace(), &values))
    }

    /// The reported number of each free value's start; NaN where the setup gives none.
    pub fn starts(&self) -> Vec<f64> {
        let start = |value: &FreeValue| match (value.start, value.kind) {
            (Some(start), kind) => kind.reported(start),
            (None, Kind::Shape) => 0.0,
            (None, _) => f64::NAN,
        };
        self.free.iter().map(start).collect()
    }

    /// The spectrum at given numbers of the free values, as [`Problem::predict`].
    ///
    /// * `values`: in the order and units of [`Problem::quantities`]; they may lie outside the bounds.
    pub fn predict_at(&self, workspace: &mut Workspace, values: &[f64]) -> Vec<f64> {
        workspace.parameters = self.parameters_at(values);
        self.engine
            .evaluate(&mut workspace.evaluation, &workspace.parameters);
        let mut spectrum = vec![f64::NAN; self.axis_len];
        for (channel, &k) in self.channels.iter().enumerate() {
            spectrum[k] = workspace.evaluation.value(channel) / self.to_si;
        }
        spectrum
    }

    /// The parameters of the forward model at given numbers of the free values, for [`crate::Ask::starts`].
    ///
    /// * `values`: in the order and units of [`Problem::quantities`].
    pub fn parameters_at(&self, values: &[f64]) -> Vec<f64> {
        let mut parameters = self.middle.clone();
        for (value, &reported) in self.free.iter().zip(values) {
            parameters[value.parameter] = value.kind.from_reported(reported);
        }
        parameters
    }

    /// Bounds of a parameter's coordinate; twice its value in `base` where it is known.
    pub(crate) fn range_of(&self, parameter: usize, base: &[f64]) -> (f64, f64) {
        match self.free.iter().find(|value| value.parameter == parameter) {
            Some(value) => (value.low, value.high),
            None => (base[parameter], base[parameter]),
        }
    }

    /// Brings the free values of a set of parameters inside their bounds.
    pub(crate) fn clamp(&self, parameters: &mut [f64]) {
        for value in &self.free {
            let at = parameters[value.parameter];
            let at = if at.is_finite() { at } else { value.middle() };
            parameters[value.parameter] = at.clamp(value.low, value.high);
        }
    }

    /// Channels of the axis that are in use.
    pub fn channels(&self) -> &[usize] {
        &self.channels
    }
}

/// Which channels the setup's ranges take in, by their centres in the data's medium.
fn used_channels(setup: &Setup, axis: &SpectralAxis) -> Vec<bool> {
    let Some(ranges) = &setup.spectrum.use_nm else {
        return vec![true; axis.len()];
    };
    axis.centres_vac_m()
        .iter()
        .map(|&centre_m| {
            let centre_nm = 1e9
                * match axis.medium() {
                    Medium::Air => air::vacuum_to_air_m(centre_m),
                    Medium::Vacuum => centre_m,
                };
            ranges
                .iter()
                .any(|&(low, high)| (low..=high).contains(&centre_nm))
        })
        .collect()
}

/// The largest step of one iteration: far enough to cross the bounds in a few, not so far that lines jump
/// over the data that should guide them.
fn largest_step(value: &FreeValue, sightline: &Sightline, centres_m: &[f64]) -> f64 {
    match value.kind {
        Kind::Temperature => 0.7,
        Kind::Column => 2.5,
        Kind::Scale => 1.0,
        Kind::Dilution | Kind::Shape => 0.5,
        Kind::Turbulence => 0.5 * (value.high - value.low),
        Kind::Velocity => {
            let middle_m = centres_m[centres_m.len() / 2];
            let channel_m = sightline.channels.mean_width_m();
            let fwhm_m = sightline.line_spread.sigma_m(middle_m) * FWHM_PER_SIGMA;
            fwhm_m.max(channel_m) / middle_m * backlit_units::constants::SPEED_OF_LIGHT_M_PER_S
        }
    }
}

/// Collects the parameters of a problem, known and free.
struct Table<'a> {
    free: Vec<FreeValue>,
    quantities: Vec<Quantity>,
    middle: Vec<f64>,
    low: Vec<f64>,
    high: Vec<f64>,
    data_unit: &'a str,
}

/// Legendre coefficients of the background may go from minus to plus this.
const SHAPE_BOUND: f64 = 2.0;

impl<'a> Table<'a> {
    fn new(len: usize, data_unit: &'a str) -> Self {
        Table {
            free: Vec::new(),
            quantities: Vec::new(),
            middle: vec![0.0; len],
            low: vec![0.0; len],
            high: vec![0.0; len],
            data_unit,
        }
    }

    fn background(&mut self, setup: &Setup, layout: &Layout) {
        let background = &setup.background;
        if background.light == Light::Blackbody {
            self.add(
                Kind::Temperature,
                Layout::BACKGROUND_TEMPERATURE,
                None,
                None,
                background.temperature_k,
                "background_temperature".into(),
                "temperature of the background".into(),
            );
            self.add(
                Kind::Dilution,
                Layout::DILUTION,
                None,
                None,
                background.dilution,
                "background_dilution".into(),
                "part of the beam that the background fills".into(),
            );
            for k in 0..layout.shape_terms {
                self.add(
                    Kind::Shape,
                    Layout::SHAPE + k,
                    None,
                    None,
                    Value::Find {
                        low: -SHAPE_BOUND,
                        high: SHAPE_BOUND,
                        start: None,
                    },
                    format!("background_shape_{}", k + 1),
                    format!("Legendre term {} of the background", k + 1),
                );
            }
        }
        self.add(
            Kind::Scale,
            Layout::SCALE,
            None,
            None,
            setup.spectrum.scale,
            "scale".into(),
            "data over model radiance".into(),
        );
    }

    #[allow(clippy::too_many_arguments)]
    fn add(
        &mut self,
        kind: Kind,
        parameter: usize,
        cloud: Option<usize>,
        species: Option<usize>,
        value: Value,
        name: String,
        long_name: String,
    ) {
        if let Some(free) = FreeValue::of(kind, parameter, cloud, species, value) {
            self.middle[parameter] = free.middle();
            self.low[parameter] = free.low;
            self.high[parameter] = free.high;
            self.free.push(free);
            self.quantities.push(Quantity {
                name,
                units: kind.unit(self.data_unit),
                long_name,
            });
        } else if let Value::Known(known) = value {
            // A known zero of a logarithmic quantity (no gas of a species) is a very small number.
            let coordinate = kind.coordinate(known);
            let coordinate = if coordinate == f64::NEG_INFINITY {
                -700.0
            } else {
                coordinate
            };
            self.middle[parameter] = coordinate;
            self.low[parameter] = coordinate;
            self.high[parameter] = coordinate;
        }
    }
}
