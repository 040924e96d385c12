//! Cubes of spectra in HDF5: opened without reading, read and written tile by tile.

pub(crate) mod masks;
mod read;
mod tile;
mod write;

pub use read::{Cube, TileData, TileUncertainty};
pub use tile::Tile;
pub(crate) use tile::divide;
pub use write::{CubeLayout, CubeUncertainty, CubeWriter, Storage};
