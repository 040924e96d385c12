//! What lies on the line of sight, without the values: channels, instrument, background, clouds.

use backlit_species::Species;
use std::ops::Range;
use std::sync::Arc;

/// The channels in use: runs of adjacent channels on a rising vacuum-wavelength axis.
///
/// A run of n channels has n + 1 edges; where the use of the axis is interrupted a new run starts.
#[derive(Debug, Clone)]
pub struct Channels {
    edges_vac_m: Vec<f64>,
    runs: Vec<Run>,
    mean_width_m: f64,
    centres_m: Vec<f64>,
}

/// One stretch of adjacent channels.
#[derive(Debug, Clone, PartialEq)]
pub struct Run {
    /// Indices of its channels among all channels in use.
    pub channels: Range<usize>,
    /// Index of its first edge in the list of all edges.
    pub first_edge: usize,
}

impl Channels {
    /// The channels whose `used` is true, from the `used.len() + 1` rising edges of the whole axis.
    ///
    /// # Panics
    /// If `edges_vac_m` is not one longer than `used` (a mistake of the program, not of data).
    pub fn new(edges_vac_m: &[f64], used: &[bool]) -> Self {
        assert_eq!(
            edges_vac_m.len(),
            used.len() + 1,
            "one edge more than channels"
        );
        let mut channels = Channels {
            edges_vac_m: Vec::new(),
            runs: Vec::new(),
            mean_width_m: 0.0,
            centres_m: Vec::new(),
        };
        let mut count = 0;
        for (index, _) in used.iter().enumerate().filter(|&(_, used)| *used) {
            let continues = index > 0 && used[index - 1];
            if continues {
                if let Some(run) = channels.runs.last_mut() {
                    run.channels.end += 1;
                }
            } else {
                channels.runs.push(Run {
                    channels: count..count + 1,
                    first_edge: channels.edges_vac_m.len(),
                });
                channels.edges_vac_m.push(edges_vac_m[index]);
            }
            channels.edges_vac_m.push(edges_vac_m[index + 1]);
            count += 1;
        }
        let total: f64 = channels.bounds_vac_m().map(|(low, high)| high - low).sum();
        channels.mean_width_m = total / count.max(1) as f64;
        channels.centres_m = channels
            .bounds_vac_m()
            .map(|(low, high)| 0.5 * (low + high))
            .collect();
        channels
    }

    /// Number of channels in use.
    pub fn len(&self) -> usize {
        self.runs.last().map_or(0, |run| run.channels.end)
    }

    /// True where no channel is in use.
    pub fn is_empty(&self) -> bool {
        self.runs.is_empty()
    }

    /// The stretches of adjacent channels, rising.
    pub fn runs(&self) -> &[Run] {
        &self.runs
    }

    /// The edges of one run: one more than it has channels.
    pub fn edges_of(&self, run: &Run) -> &[f64] {
        &self.edges_vac_m[run.first_edge..=run.first_edge + run.channels.len()]
    }

    /// Lower and upper edge of every channel.
    pub fn bounds_vac_m(&self) -> impl Iterator<Item = (f64, f64)> + '_ {
        self.runs
            .iter()
            .flat_map(|run| self.edges_of(run).windows(2).map(|edge| (edge[0], edge[1])))
    }

    /// Centre of every channel.
    pub fn centres_m(&self) -> &[f64] {
        &self.centres_m
    }

    /// Mean width of a channel, in m; 0 without channels.
    pub fn mean_width_m(&self) -> f64 {
        self.mean_width_m
    }

    /// First and last edge in use; `None` without channels.
    pub fn span_vac_m(&self) -> Option<(f64, f64)> {
        Some((*self.edges_vac_m.first()?, *self.edges_vac_m.last()?))
    }
}

/// The Gaussian line-spread function.
///
/// Its width is that at the wavelength of the light, so that what a line loses in one channel it gives to
/// others: energy is neither lost nor made.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum LineSpread {
    /// No spread: the mean over each channel is all that the instrument does.
    None,
    /// The same full width at half maximum everywhere, in m.
    Fwhm {
        /// Full width at half maximum.
        fwhm_m: f64,
    },
    /// Full width at half maximum λ/R.
    ResolvingPower {
        /// R = λ/FWHM.
        resolving_power: f64,
    },
}

/// FWHM of a Gaussian in units of its standard deviation, `2 sqrt(2 ln 2)`.
pub const FWHM_PER_SIGMA: f64 = 2.354_820_045_030_949_3;

impl LineSpread {
    /// Standard deviation at a vacuum wavelength, in m.
    pub fn sigma_m(&self, wavelength_vac_m: f64) -> f64 {
        match *self {
            LineSpread::None => 0.0,
            LineSpread::Fwhm { fwhm_m } => fwhm_m / FWHM_PER_SIGMA,
            LineSpread::ResolvingPower { resolving_power } => {
                wavelength_vac_m / (resolving_power * FWHM_PER_SIGMA)
            }
        }
    }
}

/// The light behind the gas.
#[derive(Debug, Clone)]
pub enum Background {
    /// `W B_λ(T) (1 + Σ a_k P_k(x))`, x from -1 to 1 over the channels in use.
    Blackbody {
        /// Number of Legendre terms a_1..a_n.
        shape_terms: usize,
    },
    /// A spectrum measured without the gas, as the data show it (`scale` does not apply to it), one value a
    /// channel in use.
    Measured {
        /// Radiance a channel.
        radiance: Vec<f64>,
    },
    /// No light: the gas is seen against nothing.
    Dark,
}

impl Background {
    /// Number of Legendre terms.
    pub fn shape_terms(&self) -> usize {
        match self {
            Background::Blackbody { shape_terms } => *shape_terms,
            _ => 0,
        }
    }
}

/// One uniform slab: which species it holds and which lines of them matter.
#[derive(Debug, Clone)]
pub struct Cloud {
    /// The species, in the order of their columns in the parameters.
    pub species: Vec<Arc<Species>>,
    /// True where the line width has a temperature of its own.
    pub own_doppler_temperature: bool,
}

/// Everything about a sightline except the values of its parameters.
#[derive(Debug, Clone)]
pub struct Sightline {
    /// The channels in use.
    pub channels: Channels,
    /// The instrument's line-spread function.
    pub line_spread: LineSpread,
    /// The light behind the gas.
    pub background: Background,
    /// The slabs, the one nearest the background first.
    pub clouds: Vec<Cloud>,
    /// Wanted accuracy of a channel, relative to the strongest feature of the spectrum.
    pub tolerance: f64,
}

impl Sightline {
    /// Where each parameter stands.
    pub fn layout(&self) -> Layout {
        let mut clouds = Vec::new();
        let mut next = Layout::SHAPE + self.background.shape_terms();
        for cloud in &self.clouds {
            clouds.push(CloudLayout {
                first: next,
                species: cloud.species.len(),
            });
            next += CloudLayout::COLUMNS + cloud.species.len();
        }
        Layout {
            shape_terms: self.background.shape_terms(),
            clouds,
            len: next,
        }
    }
}

/// Where each parameter of a sightline stands in its parameter slice.
///
/// All of them are kept in the coordinates in which the model is smoothest: logarithms of positive
/// quantities, the square of the turbulence (which adds to the thermal width as a square).
#[derive(Debug, Clone, PartialEq)]
pub struct Layout {
    /// Number of Legendre terms of the background.
    pub shape_terms: usize,
    /// One entry a cloud.
    pub clouds: Vec<CloudLayout>,
    len: usize,
}

impl Layout {
    /// Natural logarithm of the scale (data = scale × radiance).
    pub const SCALE: usize = 0;
    /// Natural logarithm of the background's temperature in K.
    pub const BACKGROUND_TEMPERATURE: usize = 1;
    /// Dilution W, linear.
    pub const DILUTION: usize = 2;
    /// First of the Legendre coefficients, linear.
    pub const SHAPE: usize = 3;

    /// Number of parameters. Never empty: scale, background temperature and dilution always have a place.
    #[allow(clippy::len_without_is_empty)]
    pub fn len(&self) -> usize {
        self.len
    }
}

/// Where the parameters of one cloud stand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CloudLayout {
    first: usize,
    species: usize,
}

impl CloudLayout {
    const COLUMNS: usize = 4;

    /// Natural logarithm of the (excitation) temperature in K.
    pub fn temperature(&self) -> usize {
        self.first
    }
    /// Velocity in m/s, linear, positive = receding.
    pub fn velocity(&self) -> usize {
        self.first + 1
    }
    /// Square of the microturbulent 1/e half-width, in m² s⁻².
    pub fn turbulence_squared(&self) -> usize {
        self.first + 2
    }
    /// Natural logarithm of the temperature of the line width in K; unused unless the cloud has its own.
    pub fn doppler_temperature(&self) -> usize {
        self.first + 3
    }
    /// Natural logarithm of the column of a species in m⁻².
    pub fn column(&self, species: usize) -> usize {
        self.first + Self::COLUMNS + species
    }
    /// Number of species.
    pub fn species(&self) -> usize {
        self.species
    }
}
