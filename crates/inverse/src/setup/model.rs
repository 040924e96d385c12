//! The plain structures that a setup becomes: checked, in the units of the file's keys.

use std::path::PathBuf;

use backlit_species::line_list::Choice;
use backlit_units::Medium;

/// A quantity of the setup: known, or to be found between two bounds.
///
/// The unit is that of the field that holds it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Value {
    /// A number that the user knows.
    Known(f64),
    /// A number to be found, `low < high`, with the user's guess if there is one.
    Find {
        /// The lowest allowed value.
        low: f64,
        /// The highest allowed value.
        high: f64,
        /// The user's guess, within the bounds.
        start: Option<f64>,
    },
}

impl Value {
    /// Whether this value is to be found.
    pub fn is_free(&self) -> bool {
        matches!(self, Value::Find { .. })
    }

    /// The known number, or the user's guess; `None` if there is neither.
    pub fn known_or_start(&self) -> Option<f64> {
        match self {
            Value::Known(value) => Some(*value),
            Value::Find { start, .. } => *start,
        }
    }
}

/// Everything that a setup file says.
#[derive(Debug, Clone, PartialEq)]
pub struct Setup {
    /// How to read the data.
    pub spectrum: SpectrumSetup,
    /// How the instrument spreads the light.
    pub instrument: Instrument,
    /// The light behind the gas.
    pub background: Background,
    /// The clouds, the one nearest the background first.
    pub clouds: Vec<CloudSetup>,
    /// Species of the user's own.
    pub species: Vec<UserSpecies>,
    /// Accuracy of the model, relative to the highest line contrast (key `fit.model_tolerance`), 1e-9..=1e-2.
    pub tolerance: f64,
    /// How to fit.
    pub fit: FitChoices,
    /// The text as it was read.
    pub text: String,
    /// The file that it came from.
    pub path: PathBuf,
}

/// The section `[spectrum]`.
#[derive(Debug, Clone, PartialEq)]
pub struct SpectrumSetup {
    /// The medium of the data's wavelengths, if the setup says it.
    pub medium: Option<Medium>,
    /// The unit of the data, if the setup says it; already known to be a unit.
    pub intensity_unit: Option<String>,
    /// Model radiance times this is the data; above 0.
    pub scale: Value,
    /// The ranges to use, in nm and in the medium of the data; `None` = all.
    pub use_nm: Option<Vec<(f64, f64)>>,
    /// The line of the key `scale`, if it is written.
    pub scale_line: Option<usize>,
}

/// The line-spread function of the instrument.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Instrument {
    /// No spread beyond the channel itself.
    None,
    /// A Gaussian of constant full width at half maximum, in nm.
    FwhmNm(f64),
    /// A Gaussian whose full width at half maximum is the wavelength divided by this number.
    ResolvingPower(f64),
}

/// What shines behind the gas.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Light {
    /// A black body, diluted.
    Blackbody,
    /// A measured spectrum of the light without the gas.
    Measured {
        /// The spectrum's file, with the setup's folder already in front.
        file: PathBuf,
    },
    /// Nothing.
    Dark,
}

/// The section `[background]`.
#[derive(Debug, Clone, PartialEq)]
pub struct Background {
    /// The kind of light.
    pub light: Light,
    /// Its temperature in K; `Known(0.0)` unless the light is a black body.
    pub temperature_k: Value,
    /// The part of the beam that it fills, 0..=1; `Known(0.0)` for a dark background.
    pub dilution: Value,
    /// How many Legendre terms (order 1..=n) may bend it.
    pub shape_terms: usize,
}

/// How the levels of a cloud's gas are populated.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Excitation {
    /// Boltzmann's law at the temperature of the cloud.
    Thermal,
    /// Boltzmann's law at a temperature of its own.
    Split {
        /// The excitation temperature in K.
        excitation_temperature_k: Value,
    },
}

/// One `[[cloud]]`.
#[derive(Debug, Clone, PartialEq)]
pub struct CloudSetup {
    /// Temperature in K.
    pub temperature_k: Value,
    /// Velocity in km/s, positive = receding.
    pub velocity_km_s: Value,
    /// Microturbulence in km/s, the 1/e half-width of its Gaussian.
    pub turbulence_km_s: Value,
    /// The temperature of the line width in K, where it is not that of the gas.
    pub doppler_temperature_k: Option<Value>,
    /// How the levels are populated.
    pub excitation: Excitation,
    /// Column densities in cm⁻² by the name of the species, in the order of the file.
    pub columns: Vec<(String, Value)>,
    /// The line of each column in the file, in the order of `columns`.
    pub column_lines: Vec<usize>,
}

impl CloudSetup {
    /// Whether two clouds are described alike, wherever in the file they stand.
    pub fn describes_the_same_as(&self, other: &CloudSetup) -> bool {
        let CloudSetup { column_lines, .. } = self;
        let moved = CloudSetup {
            column_lines: column_lines.clone(),
            ..other.clone()
        };
        *self == moved
    }
}

/// One `[[species]]`: a table of the user's own.
#[derive(Debug, Clone, PartialEq)]
pub struct UserSpecies {
    /// The name by which the columns call it.
    pub name: String,
    /// Mass in unified atomic mass units.
    pub mass_u: f64,
    /// The table of lines, with the setup's folder already in front.
    pub lines: PathBuf,
    /// The table of levels, with the setup's folder already in front.
    pub levels: PathBuf,
    /// Format of the table of lines, and which part of it to take.
    pub choice: Choice,
    /// The line of the section in the file.
    pub line: usize,
}

/// The section `[fit]`, apart from the tolerance.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct FitChoices {
    /// Scale the uncertainties by the square root of the reduced chi-square.
    pub scale_noise: bool,
    /// Weigh outliers down.
    pub robust: bool,
}
