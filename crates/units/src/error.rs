//! What can be wrong with units and axes.

use thiserror::Error;

const NM_PER_M: f64 = 1e9;

/// Errors of this crate; each message says what was found, what is needed and what to do.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum UnitsError {
    /// Not the name of a medium.
    #[error(
        "medium \"{got}\" is not known, \"vacuum\" or \"air\" is needed\nhint: most ground-based optical tables are in \"air\""
    )]
    UnknownMedium {
        /// The text found.
        got: String,
    },
    /// Too few channels for channel widths.
    #[error(
        "{got} wavelength(s) are too few, at least {need} are needed\nhint: a channel's width comes from its neighbours"
    )]
    AxisTooShort {
        /// Channels found.
        got: usize,
        /// Channels needed.
        need: usize,
    },
    /// A wavelength that is not finite or not positive.
    #[error("wavelength {} nm at channel {index} (from 0) is not a positive number\nhint: remove the channel, or check the wavelength unit", .wavelength_m * NM_PER_M)]
    BadWavelength {
        /// Channel, from 0.
        index: usize,
        /// The value, m.
        wavelength_m: f64,
    },
    /// The order changes.
    #[error("wavelength {} nm at channel {index} (from 0) does not {} from {} nm before it\nhint: sort the channels by wavelength and drop doubles", .wavelength_m * NM_PER_M, if *.falling { "fall" } else { "rise" }, .previous_m * NM_PER_M)]
    NotMonotonic {
        /// Channel, from 0.
        index: usize,
        /// The channel before, m.
        previous_m: f64,
        /// The value, m.
        wavelength_m: f64,
        /// Whether the axis fell at its start.
        falling: bool,
    },
    /// The first channel, symmetric about its centre, reaches below zero.
    #[error("the first channel would reach down to {} nm, above 0 nm is needed\nhint: check the first two wavelengths", .edge_m * NM_PER_M)]
    ChannelBelowZero {
        /// Lower edge, m.
        edge_m: f64,
    },
    /// A word in a unit that is not a unit.
    #[error(
        "\"{word}\" in the intensity unit \"{text}\" is not known\nhint: write it as \"W m-2 sr-1 nm-1\", or \"relative\" if the scale is not calibrated"
    )]
    UnknownUnit {
        /// The whole text.
        text: String,
        /// The part that is not understood.
        word: String,
    },
    /// A unit whose dimension is not that of light per wavelength.
    #[error(
        "intensity unit \"{text}\" is not a power per area and wavelength (with or without per solid angle)\nhint: convert to \"W m-2 sr-1 nm-1\" or \"W m-2 nm-1\"; per-frequency units (Jy, Hz-1) are not taken"
    )]
    NotSpectralRadiance {
        /// The whole text.
        text: String,
    },
}
