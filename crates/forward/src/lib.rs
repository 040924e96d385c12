//! The forward model: what a slab of gas in front of a continuum source shows to an instrument.
