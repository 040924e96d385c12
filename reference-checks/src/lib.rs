//! Published values beside their sources: one file a subject in `tests/`.
//!
//! What those files share is here: gas that nobody has to look up, the Python that runs the
//! general-purpose libraries ([`python`]), and random numbers that are the same every time ([`chance`]), and the best
//! that any fit could do ([`bound`]).

#![allow(clippy::unwrap_used, clippy::print_stderr)]

// pub mod case;
pub mod bound;
pub mod chance;
pub mod python;
// pub mod scene;
