//! Published values beside their sources: one file a subject in `tests/`.
//!
//! What those files share is here: gas that nobody has to look up ([`case`], [`scene`], [`invented`]), what the plain reference
//! model makes of it ([`plain`]), what the program makes of it ([`program`]), the Python that runs the general-purpose libraries ([`python`]), random numbers that
//! are the same every time ([`chance`]), noisy spectra and their fits ([`draws`]), and the best that any fit could do ([`bound`]).

#![allow(clippy::unwrap_used, clippy::print_stderr)]

pub mod bound;
pub mod case;
pub mod chance;
pub mod draws;
pub mod invented;
pub mod plain;
pub mod program;
pub mod python;
pub mod scene;
