//! The inverse: from a spectrum and a setup to values, uncertainties and flags.
//!
//! [`setup`] reads what the user wants to know; [`Problem`] joins it with the channels of some data, once
//! for all pixels; [`Problem::fit`] answers for one spectrum with a [`Fit`]. Inside: starting values
//! (`start`), the descent ([`solver`]), the covariance ([`uncertainty`]) and what the numbers are worth
//! (`verdict`). This crate reads no data files, prints nothing and never panics on data.

pub mod clouds;
pub mod coordinate;
mod error;
mod fit;
pub mod identify;
mod intervals;
pub mod limits;
pub mod noise;
mod problem;
mod robust;
pub mod setup;
pub mod solver;
mod start;
pub mod uncertainty;
mod upper_limit;
mod verdict;

pub use error::InverseError;
pub use fit::{Ask, Fit};
pub use intervals::{Interval, Intervals, LEVEL};
pub use problem::{Observation, Problem, Quantity, Workspace};
pub use solver::StopReason;
pub use verdict::Flags;
