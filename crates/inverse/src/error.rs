//! What can be wrong with a problem before any data are looked at.

use crate::setup::SetupError;
use std::path::PathBuf;

/// Reasons why a setup and a spectral axis make no problem.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum InverseError {
    /// The setup itself is wrong.
    #[error(transparent)]
    Setup(#[from] SetupError),
    /// No channel lies in the ranges to be used.
    #[error(
        "no channel lies within the ranges of `spectrum.use_nm` ({}): the data reach from {low_nm:.4} to {high_nm:.4} nm\nhint: give ranges in nm, in the medium of the data, that the data cover", path.display()
    )]
    NoChannels {
        /// The setup file.
        path: PathBuf,
        /// First wavelength of the data in vacuum.
        low_nm: f64,
        /// Last wavelength of the data in vacuum.
        high_nm: f64,
    },
    /// A measured background has another number of channels than the data.
    #[error(
        "the measured background has {got} values, the data have {need} channels\nhint: give `background.file` on the wavelengths of the data"
    )]
    BackgroundLength {
        /// Values of the background.
        got: usize,
        /// Channels of the data.
        need: usize,
    },
    /// A prediction needs a number that the setup leaves open.
    #[error("`{name}` has no number to predict with ({})\nhint: give it a known value, or `start = ...` beside `find`", path.display())]
    NoStart {
        /// The quantity.
        name: String,
        /// The setup file.
        path: PathBuf,
    },
    /// More clouds than the model passes.
    #[error("{got} clouds on one sightline, at most {most} ({})\nhint: leave out clouds that the data cannot tell apart", path.display())]
    TooManyClouds {
        /// Clouds of the setup.
        got: usize,
        /// The most that are possible.
        most: usize,
        /// The setup file.
        path: PathBuf,
    },
    /// The number of clouds is to be found, but the setup does not have one cloud to copy.
    #[error("{got} clouds where the number of clouds is to be found, exactly 1 is needed ({})\nhint: describe one [[cloud]]; the others get the same bounds", path.display())]
    CloudToCopy {
        /// Clouds of the setup.
        got: usize,
        /// The setup file.
        path: PathBuf,
    },
}
