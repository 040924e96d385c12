//! The setup file: what a user knows about the light, the gas and the instrument, and what is to be found.
//!
//! [`Setup::read`] turns the TOML text into checked values in the user's own units; nothing here computes physics.
//! Every refusal is a [`SetupError`] that names the file, the line and the key, says what was found and what is allowed,
//! and ends with a hint. The files of the house:
//!
//! - [`model`](self): the plain structures that the text becomes
//! - `place`: where in the text a thing stands
//! - `section`: one table of the text, read key by key with its spans
//! - `read`: the sections of the file, one function each
//! - `resolve`: the names of species against a catalogue

mod domains;
mod error;
mod model;
mod place;
mod read;
mod resolve;
mod section;

pub use error::SetupError;
pub use model::{
    Background, CloudSetup, Excitation, FitChoices, Instrument, Light, Setup, SpectrumSetup,
    UserSpecies, Value,
};
pub use place::Place;

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests;
