//! Elements, levels, lines and partition functions: the built-in catalogue and readers of line lists.
//!
//! A [`Species`] is one atom, ion or diatomic molecule with its lines, its levels and its mass; [`Catalogue::builtin`] holds the ones
//! that the program knows, [`user::species`] reads one of the user's own. What light such a gas absorbs is not
//! known here: see the crate above.

pub mod catalogue;
mod diatomic;
mod error;
pub mod hydrogenic;
mod line;
pub mod line_list;
mod natural_width;
mod partition;
mod partition_table;
mod species;
mod table;
pub mod user;

pub use catalogue::Catalogue;
pub use error::SpeciesError;
pub use line::{Grade, Kind, Line};
pub use partition::{PARTITION_T_HIGH_K, PARTITION_T_LOW_K, Partition};
pub use partition_table::PartitionTable;
pub use species::{Level, Species};
