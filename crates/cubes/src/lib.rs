//! Spectra and cubes from files, tiles of them, and the store of maps.
//!
//! This crate turns files into arrays and arrays into files: [`Spectrum`] (CSV, HDF5), [`Cube`] and
//! [`CubeWriter`] (HDF5, read and written tile by tile), and the maps store ([`MapsWriter`], [`Maps`]) whose
//! journal makes every finished tile durable. It checks what a file says of itself and refuses what cannot be
//! right, with the place in the file.
//!
//! It does not convert intensities to SI, move wavelengths between air and vacuum, or fit anything; wavelengths
//! are handed on in metres, in the medium and in the order of the file.

#![cfg_attr(test, allow(clippy::unwrap_used))]

mod archive;
mod checksum;
mod cube;
mod decimal;
mod error;
mod maps;
mod spectrum;
mod staging;
mod wavelengths;

pub use checksum::checksum;
pub use cube::{
    Cube, CubeLayout, CubeUncertainty, CubeWriter, Storage, Tile, TileData, TileUncertainty,
};
pub use error::{Action, CubesError, Difference, Place};
pub use maps::{FlagName, Maps, MapsSpec, MapsWriter, Quantity};
pub use spectrum::Spectrum;
