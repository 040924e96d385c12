//! Constants, intensity units, spectral axes, air and vacuum wavelengths, Doppler shifts.
//!
//! Everything that the rest of the program needs to turn a number of a file into SI, and back.
//! It reads no files and knows no atoms.

pub mod air;
pub mod axis;
pub mod constants;
pub mod doppler;
mod error;
pub mod intensity;
mod medium;

pub use axis::SpectralAxis;
pub use error::UnitsError;
pub use intensity::IntensityUnit;
pub use medium::Medium;
