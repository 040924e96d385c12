//! The inverse: from a spectrum and a setup to values, uncertainties and flags.

pub mod setup;
