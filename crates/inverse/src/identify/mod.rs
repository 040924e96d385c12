//! Which species a spectrum shows, judged by whole line patterns.
//!
//! One line proves nothing: another species may have a line there, or a Doppler shift may put one there. Here every
//! species of a catalogue is compared with all peaks at once. The smooth light is taken away ([`continuum`]), peaks of
//! either sign are found at the instrument's width ([`features`]) and laid on a grid of ln wavelength, where a velocity
//! is a shift ([`map`]). A [`pattern`] says how strong the lines of a species are beside each other; its [`evidence`] is
//! how much better it foretells the peaks than chance does, over all temperatures, heights and velocities. What the
//! strongest species explain is taken from the others (a joint fit, [`blend`], shares out what several explain), and the same search with misplaced lines ([`decoys`]) says how
//! often such evidence comes by chance.

pub mod blend;
pub mod continuum;
pub mod decoys;
pub mod evidence;
pub mod features;
mod finding;
pub mod map;
pub mod pattern;
mod search;

pub use finding::{Finding, Identification, LineFound, LineState, Verdict};
pub use search::identify;

/// One spectrum in rising wavelength.
#[derive(Debug, Clone, Copy)]
pub struct Observed<'a> {
    /// Channel centres in vacuum, m, rising.
    pub centres_vac_m: &'a [f64],
    /// Measured values in any linear unit; not finite where there is none.
    pub intensity: &'a [f64],
    /// 1 sigma of each, the same unit; `None` if not known.
    pub uncertainty: Option<&'a [f64]>,
    /// True for a channel not to be used.
    pub mask: &'a [bool],
}

/// Width of the instrument's line-spread function.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Width {
    /// To be estimated from the data.
    Unknown,
    /// Constant full width at half maximum.
    Fwhm {
        /// In m.
        fwhm_m: f64,
    },
    /// Full width at half maximum of wavelength over this.
    ResolvingPower {
        /// Wavelength over width.
        resolving_power: f64,
    },
}

/// What is known beforehand.
#[derive(Debug, Clone, PartialEq)]
pub struct Choices {
    /// Velocities to search, m/s, positive receding.
    pub velocity_m_per_s: (f64, f64),
    /// The instrument.
    pub width: Width,
    /// Error of the data's wavelengths to allow for, m.
    pub scale_error_m: f64,
    /// Species that the user says are there: one line is enough for them.
    pub expected: Vec<String>,
    /// The wanted share of false ones among those called present.
    pub false_discovery_rate: f64,
}

impl Default for Choices {
    /// ±500 km/s, 0.03 nm, 5 % false, nothing known.
    fn default() -> Self {
        Choices {
            velocity_m_per_s: (-5e5, 5e5),
            width: Width::Unknown,
            scale_error_m: 3e-11,
            expected: Vec::new(),
            false_discovery_rate: 0.05,
        }
    }
}
