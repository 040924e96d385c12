//! Exponential, sine and cosine as straight-line code that becomes vector code.

use super::accuracy::Accuracy;
use super::arithmetic::Arithmetic;

/// Adding and subtracting this rounds to an integer, which then stands in the low bits of the sum.
const ROUNDER: f64 = 6_755_399_441_055_744.0; // 1.5 * 2^52

/// A polynomial with the constant first.
#[inline(always)]
fn polynomial<R: Arithmetic>(coefficients: &[f64], x: f64) -> f64 {
    let mut value = coefficients[coefficients.len() - 1];
    for &coefficient in coefficients[..coefficients.len() - 1].iter().rev() {
        value = R::mul_add(value, x, coefficient);
    }
    value
}

/// A number in units in which its integer part can be split off exactly.
#[derive(Clone, Copy)]
pub(super) struct Split {
    /// The nearest integer stands in the lowest bits.
    pub integer_bits: u64,
    /// In `-1/2..=1/2`.
    pub rest: f64,
}

impl Split {
    #[inline(always)]
    pub fn of(value: f64) -> Self {
        let shifted = value + ROUNDER;
        Self {
            integer_bits: shifted.to_bits(),
            rest: value - (shifted - ROUNDER),
        }
    }

    #[inline(always)]
    pub fn is_odd(self) -> bool {
        self.integer_bits & 1 == 1
    }
}

/// `2^exponent` for `exponent <= 0`; below -1000 the value at -1000.
///
/// The rounding of the exponent is that of the result: 1e-16 of it for each unit.
#[inline(always)]
pub(super) fn power_of_two<A: Accuracy, R: Arithmetic>(exponent: f64) -> f64 {
    let split = Split::of(if exponent > -1000.0 {
        exponent
    } else {
        -1000.0
    });
    let mantissa = polynomial::<R>(A::EXP, split.rest);
    f64::from_bits(mantissa.to_bits().wrapping_add(split.integer_bits << 52))
}

/// Sine of an angle and one minus its cosine.
#[derive(Clone, Copy)]
pub(super) struct Angle {
    pub sin: f64,
    pub one_minus_cos: f64,
}

impl Angle {
    /// Of `pi * half_turns`, for `|half_turns| <= 1/2`.
    #[inline(always)]
    pub fn of_half_turns<A: Accuracy, R: Arithmetic>(half_turns: f64) -> Self {
        // From half the angle, whose polynomials are short.
        let square = half_turns * half_turns;
        let sin = half_turns * polynomial::<R>(A::SIN, square);
        let one_minus_cos = square * polynomial::<R>(A::COS, square);
        let twice_sin = sin + sin;
        Self {
            sin: R::mul_add(-twice_sin, one_minus_cos, twice_sin),
            one_minus_cos: twice_sin * sin,
        }
    }
}
