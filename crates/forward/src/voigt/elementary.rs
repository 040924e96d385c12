//! Exponential, sine and cosine as straight-line code that becomes vector code.

use super::accuracy::Accuracy;
use super::arithmetic::Arithmetic;

/// Adding and subtracting this rounds to an integer, which then stands in the low bits of the sum.
pub(super) const ROUNDER: f64 = 6_755_399_441_055_744.0; // 1.5 * 2^52

/// `ln 2` in two parts; the first has 21 trailing zero bits, so that its product with a small integer is exact.
const LN_2_HEAD: f64 = 6.931_471_803_691_238e-1;
const LN_2_TAIL: f64 = 1.908_214_929_270_587_7e-10;

/// `pi / 2` in two parts, the first with 33 significant bits.
pub(super) const HALF_PI_HEAD: f64 = 1.570_796_326_734_125_6;
pub(super) const HALF_PI_TAIL: f64 = 6.077_100_506_506_192e-11;

/// A polynomial with the constant first.
#[inline(always)]
fn polynomial<R: Arithmetic>(coefficients: &[f64], x: f64) -> f64 {
    let mut value = coefficients[coefficients.len() - 1];
    for &coefficient in coefficients[..coefficients.len() - 1].iter().rev() {
        value = R::mul_add(value, x, coefficient);
    }
    value
}

/// `exp(exponent)` for `exponent <= 0`; below -700 the value at -700.
#[inline(always)]
pub(super) fn exp<A: Accuracy, R: Arithmetic>(exponent: f64) -> f64 {
    let exponent = if exponent > -700.0 { exponent } else { -700.0 };
    let shifted = R::mul_add(exponent, std::f64::consts::LOG2_E, ROUNDER);
    let power = shifted - ROUNDER;
    let rest = R::mul_add(-power, LN_2_TAIL, R::mul_add(-power, LN_2_HEAD, exponent));
    let mantissa = polynomial::<R>(A::EXP, rest);
    // The integer in the low bits of `shifted` is added to the exponent of the mantissa.
    f64::from_bits(mantissa.to_bits().wrapping_add(shifted.to_bits() << 52))
}

/// Sine of an angle and one minus its cosine.
#[derive(Clone, Copy)]
pub(super) struct Angle {
    pub sin: f64,
    pub one_minus_cos: f64,
}

impl Angle {
    /// Of twice `half`, for `|half| <= pi/4`.
    #[inline(always)]
    pub fn twice<A: Accuracy, R: Arithmetic>(half: f64) -> Self {
        let square = half * half;
        let sin = half * polynomial::<R>(A::SIN, square);
        let one_minus_cos = square * polynomial::<R>(A::COS, square);
        let twice_sin = sin + sin;
        Self {
            sin: R::mul_add(-twice_sin, one_minus_cos, twice_sin),
            one_minus_cos: twice_sin * sin,
        }
    }
}
