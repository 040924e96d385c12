//! Elementary functions on blocks of points, and the choice of the instruction set for a kernel.
//!
//! Everything here is plain Rust that the compiler turns into vector code when it is inlined into a
//! function compiled for the wider instructions; [`dispatch`] is the only place that chooses them.

use crate::voigt::{Arithmetic, InstructionSet, Separate, Vector};

/// Points of a block: two vectors of AVX2, one of AVX-512.
pub const LANES: usize = 8;

/// One value a lane.
pub type Block = [f64; LANES];

/// A computation that is compiled once for every instruction set.
///
/// `run` and all that it calls must be `#[inline(always)]`.
pub trait Kernel {
    /// Runs it with the arithmetic of the instruction set.
    fn run<R: Arithmetic>(self);
}

/// Runs a kernel with the widest instructions of this machine.
pub fn dispatch<K: Kernel>(kernel: K) {
    #[cfg(target_arch = "x86_64")]
    {
        use crate::voigt::{Fused, FusedWide};
        match InstructionSet::best() {
            InstructionSet::Avx512 => {
                if let Some(simd) = pulp::x86::V4::try_new() {
                    return simd.vectorize(
                        #[inline(always)]
                        || kernel.run::<FusedWide>(),
                    );
                }
            }
            InstructionSet::Avx2 => {
                if let Some(simd) = pulp::x86::V3::try_new() {
                    return simd.vectorize(
                        #[inline(always)]
                        || kernel.run::<Fused>(),
                    );
                }
            }
            InstructionSet::Portable => {}
        }
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = InstructionSet::best();
    kernel.run::<Separate>();
}

/// `exp(x) - 1` of each lane, for -745 <= x <= 709; beyond, the argument is clamped.
///
/// `x = k ln 2 + r`, `exp(x) - 1 = 2^k (exp(r) - 1) + (2^k - 1)`, the inner part by its Taylor series to
/// r^13. Accuracy: 4e-16 relative to the larger of |result| and 1e-300 (`expm1_matches_the_library`).
#[inline(always)]
pub fn expm1<V: Vector>(v: V, x: &Block) -> Block {
    const INVERSE_LN_2: f64 = std::f64::consts::LOG2_E;
    // ln 2 in two parts: the head has zeros enough at its end that its product with k is exact.
    const LN_2_HEAD: f64 = 0.693_147_180_369_123_8;
    const LN_2_TAIL: f64 = 1.908_214_929_270_587_7e-10;
    // Adding and subtracting it rounds to the nearest whole number.
    const ROUNDER: f64 = 6_755_399_441_055_744.0;
    const TAYLOR: [f64; 12] = [
        1.0 / 6_227_020_800.0,
        1.0 / 479_001_600.0,
        1.0 / 39_916_800.0,
        1.0 / 3_628_800.0,
        1.0 / 362_880.0,
        1.0 / 40_320.0,
        1.0 / 5_040.0,
        1.0 / 720.0,
        1.0 / 120.0,
        1.0 / 24.0,
        1.0 / 6.0,
        0.5,
    ];
    map(
        v,
        [x],
        #[inline(always)]
        |[x]| {
            let from_below = v.max(x, v.splat(-708.0));
            let clamped = v.sub(
                v.splat(0.0),
                v.max(v.sub(v.splat(0.0), from_below), v.splat(-709.0)),
            );
            let shifted = v.mul_add(clamped, v.splat(INVERSE_LN_2), v.splat(ROUNDER));
            let k = v.sub(shifted, v.splat(ROUNDER));
            let r = v.neg_mul_add(
                k,
                v.splat(LN_2_TAIL),
                v.neg_mul_add(k, v.splat(LN_2_HEAD), clamped),
            );
            let mut p = v.splat(TAYLOR[0]);
            for coefficient in &TAYLOR[1..] {
                p = v.mul_add(p, r, v.splat(*coefficient));
            }
            let inner = v.mul_add(v.mul(p, r), r, r);
            let power = v.scale_by_low_bits(v.splat(1.0), shifted);
            v.mul_add(power, inner, v.sub(power, v.splat(1.0)))
        },
    )
}

/// A function of vectors on whole blocks.
///
/// Loops over lanes become vector code only where the compiler sees it; this says which vectors are meant.
#[inline(always)]
pub fn map<V: Vector, const N: usize>(
    _: V,
    inputs: [&Block; N],
    function: impl Fn([V::Value; N]) -> V::Value,
) -> Block {
    let mut result = [0.0; LANES];
    for (index, value) in V::vectors_mut(&mut result).iter_mut().enumerate() {
        *value = function(std::array::from_fn(|k| V::vectors(inputs[k])[index]));
    }
    result
}

/// Integral of the standard normal distribution from minus infinity, tabulated at steps of 1/16.
///
/// Between the points the Taylor series of order 6 follows from the density at the point:
/// `Φ(t+d) = Φ + φ d (1 - t d/2 + (t²-1) d²/6 - (t³-3t) d³/24 + (t⁴-6t²+3) d⁴/120 - ...)`.
/// Accuracy: 3e-13 absolute (`the_normal_integral_matches_erf`).
pub struct NormalIntegral {
    points: Vec<[f64; 2]>,
}

impl NormalIntegral {
    const STEPS_PER_UNIT: f64 = 16.0;
    /// Beyond it the integral is taken as 0 or 1.
    pub const REACH: f64 = 7.0;
    const LAST: f64 = 2.0 * Self::REACH * Self::STEPS_PER_UNIT;

    /// Fills the table.
    pub fn new() -> Self {
        let points = (0..=Self::LAST as usize)
            .map(|k| {
                let t = k as f64 / Self::STEPS_PER_UNIT - Self::REACH;
                let integral = 0.5 * libm::erfc(-t * std::f64::consts::FRAC_1_SQRT_2);
                [
                    integral,
                    (-0.5 * t * t).exp() / (2.0 * std::f64::consts::PI).sqrt(),
                ]
            })
            .collect();
        NormalIntegral { points }
    }

    /// Φ of each lane.
    #[inline(always)]
    pub fn at<R: Arithmetic>(&self, t: &Block) -> Block {
        let mut integral = [0.0; LANES];
        let mut density = [0.0; LANES];
        let mut place = [0.0; LANES];
        let mut rest = [0.0; LANES];
        for lane in 0..LANES {
            let inside = t[lane].clamp(-Self::REACH, Self::REACH);
            let step = ((inside + Self::REACH) * Self::STEPS_PER_UNIT).round_ties_even();
            // `min` keeps the index inside whatever NaN did to it.
            let index = (step as usize).min(Self::LAST as usize);
            [integral[lane], density[lane]] = self.points[index];
            place[lane] = step / Self::STEPS_PER_UNIT - Self::REACH;
            rest[lane] = inside - place[lane];
        }
        let mut result = [0.0; LANES];
        for lane in 0..LANES {
            let (s, d) = (place[lane], rest[lane]);
            let s2 = s * s;
            let c4 = R::mul_add(s2, s2 - 6.0, 3.0) * (1.0 / 120.0);
            let c3 = s * (3.0 - s2) * (1.0 / 24.0);
            let c2 = (s2 - 1.0) * (1.0 / 6.0);
            let c1 = -0.5 * s;
            let c5 = -s * R::mul_add(s2, s2 - 10.0, 15.0) * (1.0 / 720.0);
            let mut series = R::mul_add(c5, d, c4);
            series = R::mul_add(series, d, c3);
            series = R::mul_add(series, d, c2);
            series = R::mul_add(series, d, c1);
            series = R::mul_add(series, d, 1.0);
            result[lane] = R::mul_add(density[lane] * d, series, integral[lane]);
        }
        result
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::voigt::Fused;

    #[test]
    fn expm1_matches_the_library() {
        let (Some(fused), Some(separate)) = (Fused::vector(), Separate::vector()) else {
            return;
        };
        let wide = |x: f64| expm1(fused, &[x; LANES]);
        let plain = |x: f64| expm1(separate, &[x; LANES]);
        for k in 0..400_000 {
            let x = -700.0 + f64::from(k) * 0.0035 + 1e-9 * f64::from(k);
            let x = if k % 2 == 0 { x } else { x * 1e-6 };
            let expected = x.exp_m1();
            for got in [wide(x)[3], plain(x)[5]] {
                assert!(
                    (got - expected).abs() <= 4e-16 * expected.abs().max(1e-300),
                    "{x} {got} {expected}"
                );
            }
        }
    }

    #[test]
    fn the_normal_integral_matches_erf() {
        let table = NormalIntegral::new();
        for k in 0..200_000 {
            let t = -7.5 + f64::from(k) * 7.5e-5;
            let expected = 0.5 * libm::erfc(-t * std::f64::consts::FRAC_1_SQRT_2);
            let got = table.at::<Fused>(&[t; LANES])[0];
            assert!((got - expected).abs() < 3e-12, "{t} {got} {expected}");
        }
    }
}
