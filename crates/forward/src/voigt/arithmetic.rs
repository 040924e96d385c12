//! How a kernel multiplies and adds: fused where the processor has the instruction, in two steps where it has not.
//!
//! `f64::mul_add` is one instruction inside code compiled for it and a slow library call elsewhere, so the choice must be made together
//! with the instruction set, by the caller that knows it.

/// The multiply-add of a kernel.
pub trait Arithmetic: Copy + Send + Sync + 'static {
    /// `a * b + c`.
    fn mul_add(a: f64, b: f64, c: f64) -> f64;
}

/// One rounding: for code that is compiled with the FMA instructions.
#[derive(Clone, Copy, Debug)]
pub struct Fused;

/// Two roundings: for code that must run anywhere.
#[derive(Clone, Copy, Debug)]
pub struct Separate;

impl Arithmetic for Fused {
    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }
}

impl Arithmetic for Separate {
    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a * b + c
    }
}
