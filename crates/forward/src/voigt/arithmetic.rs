//! How a kernel computes: fused multiply-adds and vectors where the processor has them, plain operations where it has not.
//!
//! `f64::mul_add` is one instruction inside code compiled for it and a slow library call elsewhere, so the choice must be made together
//! with the instruction set, by the caller that knows it.

use super::vector::{OneLane, Pair, Vector};

/// The arithmetic of a kernel, chosen together with the instruction set that its code is compiled for.
pub trait Arithmetic: Copy + Send + Sync + 'static {
    /// The token of the vectors.
    #[doc(hidden)]
    type Vector: Vector;

    /// The token, if this machine has the instructions.
    #[doc(hidden)]
    fn vector() -> Option<Self::Vector>;

    /// `a * b + c`.
    fn mul_add(a: f64, b: f64, c: f64) -> f64;
}

/// One rounding and vectors of eight: for code that is compiled for x86-64-v4.
#[cfg(target_arch = "x86_64")]
#[derive(Clone, Copy, Debug)]
pub struct FusedWide;

/// One rounding and vectors of four: for code that is compiled for x86-64-v3, with AVX2 and FMA.
#[cfg(target_arch = "x86_64")]
#[derive(Clone, Copy, Debug)]
pub struct Fused;

/// Two roundings, two points side by side, which compilers join where they can: for code that must run anywhere.
#[derive(Clone, Copy, Debug)]
pub struct Separate;

#[cfg(target_arch = "x86_64")]
impl Arithmetic for FusedWide {
    type Vector = pulp::x86::V4;

    #[inline(always)]
    fn vector() -> Option<Self::Vector> {
        pulp::x86::V4::try_new()
    }

    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }
}

#[cfg(target_arch = "x86_64")]
impl Arithmetic for Fused {
    type Vector = Pair<pulp::x86::V3>;

    #[inline(always)]
    fn vector() -> Option<Self::Vector> {
        pulp::x86::V3::try_new().map(Pair)
    }

    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }
}

impl Arithmetic for Separate {
    type Vector = Pair<OneLane>;

    #[inline(always)]
    fn vector() -> Option<Self::Vector> {
        Some(Pair(OneLane))
    }

    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a * b + c
    }
}
