//! Exponential, sine and cosine as straight-line vector code.

use super::accuracy::Accuracy;
use super::vector::Vector;

/// Adding and subtracting this rounds to an integer, which then stands in the low bits of the sum.
const ROUNDER: f64 = 6_755_399_441_055_744.0; // 1.5 * 2^52

/// A polynomial with the constant first.
#[inline(always)]
fn polynomial<V: Vector>(v: V, coefficients: &[f64], x: V::Value) -> V::Value {
    let mut value = v.splat(coefficients[coefficients.len() - 1]);
    for &coefficient in coefficients[..coefficients.len() - 1].iter().rev() {
        value = v.mul_add(value, x, v.splat(coefficient));
    }
    value
}

/// A number in units in which its integer part can be split off exactly.
#[derive(Clone, Copy)]
pub(super) struct Split<V: Vector> {
    /// The nearest integer stands in the lowest bits.
    pub integer_bits: V::Value,
    /// In `-1/2..=1/2`.
    pub rest: V::Value,
}

impl<V: Vector> Split<V> {
    #[inline(always)]
    pub fn of(v: V, value: V::Value) -> Self {
        let integer_bits = v.add(value, v.splat(ROUNDER));
        Self {
            integer_bits,
            rest: v.sub(value, v.sub(integer_bits, v.splat(ROUNDER))),
        }
    }
}

/// `2^exponent` for `exponent <= 0`; below -1000 the value at -1000.
///
/// The rounding of the exponent is that of the result: 1e-16 of it for each unit.
#[inline(always)]
pub(super) fn power_of_two<A: Accuracy, V: Vector>(v: V, exponent: V::Value) -> V::Value {
    let split = Split::of(v, v.max(exponent, v.splat(-1000.0)));
    v.scale_by_low_bits(polynomial(v, A::EXP, split.rest), split.integer_bits)
}

/// Sine of an angle and one minus its cosine.
#[derive(Clone, Copy)]
pub(super) struct Angle<V: Vector> {
    pub sin: V::Value,
    pub one_minus_cos: V::Value,
}

impl<V: Vector> Angle<V> {
    /// Of `pi * half_turns`, for `|half_turns| <= 1/2`.
    #[inline(always)]
    pub fn of_half_turns<A: Accuracy>(v: V, half_turns: V::Value) -> Self {
        // From half the angle, whose polynomials are short.
        let square = v.mul(half_turns, half_turns);
        let sin = v.mul(half_turns, polynomial(v, A::SIN, square));
        let one_minus_cos = v.mul(square, polynomial(v, A::COS, square));
        let twice_sin = v.add(sin, sin);
        Self {
            sin: v.neg_mul_add(twice_sin, one_minus_cos, twice_sin),
            one_minus_cos: v.mul(twice_sin, sin),
        }
    }
}
