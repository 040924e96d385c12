//! The store of maps: quantities over the pixels of a cube.
//!
//! While a run goes on, finished tiles go to a journal beside the wanted file (`MAPS.h5.journal`), each complete
//! with its checksum. Only when all tiles are there is the HDF5 file assembled, under a temporary name, and moved
//! to its own. So a killed run never leaves a torn HDF5 file, and loses nothing but the tiles in work. The order
//! in which tiles arrive does not show in the result.

mod assemble;
mod journal;
mod read;
mod spec;
mod write;

pub use read::Maps;
pub use spec::{FlagName, MapsSpec, Quantity};
pub use write::MapsWriter;
