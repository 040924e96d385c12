//! The forward model: what slabs of gas in front of a continuum source show to an instrument.
//!
//! A [`Sightline`] says what is there (channels, line-spread function, background, clouds and their
//! species); a point in its parameter space is a plain slice laid out by [`Layout`]. Two models give the
//! spectrum at a point: [`oracle`], plain and slow, and [`engine`], fast, which gives the derivatives in
//! the same pass. The fast one proves itself against the plain one.
//!
//! This crate reads no files and knows nothing of data, noise or fits.

pub mod continuum;
pub mod engine;
mod lanes;
mod nodes;
pub mod oracle;
pub mod planck;
pub mod sightline;
pub mod transition;
pub mod voigt;

pub use engine::{Engine, Evaluation};
pub use sightline::{Background, Channels, Cloud, Layout, LineSpread, Sightline};
