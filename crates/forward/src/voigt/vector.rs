//! The few vector operations of the kernel, for each instruction set.
//!
//! Loops over arrays become vector code only when the compiler recognises them, and inside a large kernel it often does not. So the
//! kernel says which vectors it means. The tokens of `pulp` are the proof that the machine has the instructions.

/// A vector of doubles, and what the kernel does with it.
///
/// Implemented by zero-sized tokens; all methods are to be inlined into code that is compiled for the instructions.
#[doc(hidden)]
pub trait Vector: Copy {
    /// [`Self::LANES`] doubles.
    type Value: Copy;
    /// One truth value a lane.
    type Mask: Copy;
    /// Doubles in a vector.
    const LANES: usize;

    /// The vectors of a slice whose length is a multiple of [`Self::LANES`].
    fn vectors(values: &[f64]) -> &[Self::Value];
    /// The same, to write to.
    fn vectors_mut(values: &mut [f64]) -> &mut [Self::Value];

    /// The same number in each lane.
    fn splat(self, value: f64) -> Self::Value;
    /// `a + b`.
    fn add(self, a: Self::Value, b: Self::Value) -> Self::Value;
    /// `a - b`.
    fn sub(self, a: Self::Value, b: Self::Value) -> Self::Value;
    /// `a * b`.
    fn mul(self, a: Self::Value, b: Self::Value) -> Self::Value;
    /// `a / b`.
    fn div(self, a: Self::Value, b: Self::Value) -> Self::Value;
    /// `a * b + c`, with one rounding where there is an instruction for it.
    fn mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value;
    /// `c - a * b`, likewise.
    fn neg_mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value;
    /// The larger of both.
    fn max(self, a: Self::Value, b: Self::Value) -> Self::Value;
    /// `yes` where the mask is true.
    fn select(self, mask: Self::Mask, yes: Self::Value, no: Self::Value) -> Self::Value;
    /// Which lanes are below the bound, or NaN?
    fn not_at_least(self, values: Self::Value, bound: f64) -> Self::Mask;
    /// Which lanes are at the bound or above, or NaN?
    fn not_below(self, values: Self::Value, bound: f64) -> Self::Mask;
    /// Where at least one of both is true.
    fn or(self, a: Self::Mask, b: Self::Mask) -> Self::Mask;
    /// Is a lane true?
    fn any(self, mask: Self::Mask) -> bool;
    /// Are all lanes `>= bound`? Not if one is NaN.
    #[inline(always)]
    fn all_at_least(self, values: Self::Value, bound: f64) -> bool {
        !self.any(self.not_at_least(values, bound))
    }
    /// Are all lanes `< bound`? Not if one is NaN.
    #[inline(always)]
    fn all_below(self, values: Self::Value, bound: f64) -> bool {
        !self.any(self.not_below(values, bound))
    }

    /// Is the lowest bit set?
    fn has_low_bit(self, bits: Self::Value) -> Self::Mask;
    /// `value` with its sign changed where the lowest bit of `bits` is set.
    fn flip_by_low_bit(self, value: Self::Value, bits: Self::Value) -> Self::Value;
    /// `value * 2^n`, with `n` in the lowest bits of `bits`.
    fn scale_by_low_bits(self, value: Self::Value, bits: Self::Value) -> Self::Value;
}

#[cfg(target_arch = "x86_64")]
macro_rules! implement {
    ($token: ty, $lanes: expr, $shift_left: ident, $not_at_least: ident, $not_below: ident) => {
        impl Vector for $token {
            type Value = <$token as Simd>::f64s;
            type Mask = <$token as Simd>::m64s;
            const LANES: usize = $lanes;

            #[inline(always)]
            fn vectors(values: &[f64]) -> &[Self::Value] {
                <$token as Simd>::as_simd_f64s(values).0
            }
            #[inline(always)]
            fn vectors_mut(values: &mut [f64]) -> &mut [Self::Value] {
                <$token as Simd>::as_mut_simd_f64s(values).0
            }
            #[inline(always)]
            fn splat(self, value: f64) -> Self::Value {
                self.splat_f64s(value)
            }
            #[inline(always)]
            fn add(self, a: Self::Value, b: Self::Value) -> Self::Value {
                self.add_f64s(a, b)
            }
            #[inline(always)]
            fn sub(self, a: Self::Value, b: Self::Value) -> Self::Value {
                self.sub_f64s(a, b)
            }
            #[inline(always)]
            fn mul(self, a: Self::Value, b: Self::Value) -> Self::Value {
                self.mul_f64s(a, b)
            }
            #[inline(always)]
            fn div(self, a: Self::Value, b: Self::Value) -> Self::Value {
                self.div_f64s(a, b)
            }
            #[inline(always)]
            fn mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value {
                self.mul_add_f64s(a, b, c)
            }
            #[inline(always)]
            fn neg_mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value {
                self.negate_mul_add_f64s(a, b, c)
            }
            #[inline(always)]
            fn max(self, a: Self::Value, b: Self::Value) -> Self::Value {
                self.max_f64s(a, b)
            }
            #[inline(always)]
            fn select(self, mask: Self::Mask, yes: Self::Value, no: Self::Value) -> Self::Value {
                self.select_f64s(mask, yes, no)
            }
            #[inline(always)]
            fn not_at_least(self, values: Self::Value, bound: f64) -> Self::Mask {
                self.$not_at_least(values, self.splat_f64s(bound))
            }
            #[inline(always)]
            fn not_below(self, values: Self::Value, bound: f64) -> Self::Mask {
                self.$not_below(values, self.splat_f64s(bound))
            }
            #[inline(always)]
            fn or(self, a: Self::Mask, b: Self::Mask) -> Self::Mask {
                self.or_m64s(a, b)
            }
            #[inline(always)]
            fn any(self, mask: Self::Mask) -> bool {
                self.first_true_m64s(mask) < $lanes
            }
            #[inline(always)]
            fn has_low_bit(self, bits: Self::Value) -> Self::Mask {
                let one = self.splat_u64s(1);
                self.equal_u64s(self.and_u64s(self.transmute_u64s_f64s(bits), one), one)
            }
            #[inline(always)]
            fn flip_by_low_bit(self, value: Self::Value, bits: Self::Value) -> Self::Value {
                let sign = self.$shift_left::<63>(self.transmute_u64s_f64s(bits));
                self.xor_f64s(value, self.transmute_f64s_u64s(sign))
            }
            #[inline(always)]
            fn scale_by_low_bits(self, value: Self::Value, bits: Self::Value) -> Self::Value {
                let exponent = self.$shift_left::<52>(self.transmute_u64s_f64s(bits));
                self.transmute_f64s_u64s(self.add_u64s(self.transmute_u64s_f64s(value), exponent))
            }
        }
    };
}

#[cfg(target_arch = "x86_64")]
use pulp::Simd;
#[cfg(target_arch = "x86_64")]
implement!(
    pulp::x86::V4,
    8,
    shl_const_u64x8,
    cmp_not_ge_f64x8,
    cmp_not_lt_f64x8
);
#[cfg(target_arch = "x86_64")]
implement!(
    pulp::x86::V3,
    4,
    shl_const_u64x4,
    cmp_not_ge_f64x4,
    cmp_not_lt_f64x4
);

/// One lane, for any machine.
#[doc(hidden)]
#[derive(Clone, Copy, Debug)]
pub struct OneLane;

impl Vector for OneLane {
    type Value = f64;
    /// All bits set for true: a choice by bits costs nothing where a branch would often be guessed wrong.
    type Mask = u64;
    const LANES: usize = 1;

    #[inline(always)]
    fn vectors(values: &[f64]) -> &[f64] {
        values
    }
    #[inline(always)]
    fn vectors_mut(values: &mut [f64]) -> &mut [f64] {
        values
    }
    #[inline(always)]
    fn splat(self, value: f64) -> f64 {
        value
    }
    #[inline(always)]
    fn add(self, a: f64, b: f64) -> f64 {
        a + b
    }
    #[inline(always)]
    fn sub(self, a: f64, b: f64) -> f64 {
        a - b
    }
    #[inline(always)]
    fn mul(self, a: f64, b: f64) -> f64 {
        a * b
    }
    #[inline(always)]
    fn div(self, a: f64, b: f64) -> f64 {
        a / b
    }
    #[inline(always)]
    fn mul_add(self, a: f64, b: f64, c: f64) -> f64 {
        a * b + c
    }
    #[inline(always)]
    fn neg_mul_add(self, a: f64, b: f64, c: f64) -> f64 {
        c - a * b
    }
    #[inline(always)]
    fn max(self, a: f64, b: f64) -> f64 {
        if a > b { a } else { b }
    }
    #[inline(always)]
    fn select(self, mask: u64, yes: f64, no: f64) -> f64 {
        f64::from_bits(no.to_bits() ^ ((yes.to_bits() ^ no.to_bits()) & mask))
    }
    #[inline(always)]
    fn not_at_least(self, value: f64, bound: f64) -> u64 {
        u64::from(value < bound || value.is_nan()).wrapping_neg()
    }
    #[inline(always)]
    fn not_below(self, value: f64, bound: f64) -> u64 {
        u64::from(value >= bound || value.is_nan()).wrapping_neg()
    }
    #[inline(always)]
    fn or(self, a: u64, b: u64) -> u64 {
        a | b
    }
    #[inline(always)]
    fn any(self, mask: u64) -> bool {
        mask != 0
    }
    #[inline(always)]
    fn has_low_bit(self, bits: f64) -> u64 {
        (bits.to_bits() & 1).wrapping_neg()
    }
    #[inline(always)]
    fn flip_by_low_bit(self, value: f64, bits: f64) -> f64 {
        f64::from_bits(value.to_bits() ^ (bits.to_bits() << 63))
    }
    #[inline(always)]
    fn scale_by_low_bits(self, value: f64, bits: f64) -> f64 {
        f64::from_bits(value.to_bits().wrapping_add(bits.to_bits() << 52))
    }
}

/// Two vectors side by side: twice the independent work, half the branches.
#[doc(hidden)]
#[derive(Clone, Copy, Debug)]
pub struct Pair<V>(pub(super) V);

impl<V: Vector> Vector for Pair<V> {
    type Value = [V::Value; 2];
    type Mask = [V::Mask; 2];
    const LANES: usize = 2 * V::LANES;

    #[inline(always)]
    fn vectors(values: &[f64]) -> &[Self::Value] {
        V::vectors(values).as_chunks().0
    }
    #[inline(always)]
    fn vectors_mut(values: &mut [f64]) -> &mut [Self::Value] {
        V::vectors_mut(values).as_chunks_mut().0
    }
    #[inline(always)]
    fn splat(self, value: f64) -> Self::Value {
        [self.0.splat(value); 2]
    }
    #[inline(always)]
    fn add(self, a: Self::Value, b: Self::Value) -> Self::Value {
        [self.0.add(a[0], b[0]), self.0.add(a[1], b[1])]
    }
    #[inline(always)]
    fn sub(self, a: Self::Value, b: Self::Value) -> Self::Value {
        [self.0.sub(a[0], b[0]), self.0.sub(a[1], b[1])]
    }
    #[inline(always)]
    fn mul(self, a: Self::Value, b: Self::Value) -> Self::Value {
        [self.0.mul(a[0], b[0]), self.0.mul(a[1], b[1])]
    }
    #[inline(always)]
    fn div(self, a: Self::Value, b: Self::Value) -> Self::Value {
        [self.0.div(a[0], b[0]), self.0.div(a[1], b[1])]
    }
    #[inline(always)]
    fn mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value {
        [
            self.0.mul_add(a[0], b[0], c[0]),
            self.0.mul_add(a[1], b[1], c[1]),
        ]
    }
    #[inline(always)]
    fn neg_mul_add(self, a: Self::Value, b: Self::Value, c: Self::Value) -> Self::Value {
        [
            self.0.neg_mul_add(a[0], b[0], c[0]),
            self.0.neg_mul_add(a[1], b[1], c[1]),
        ]
    }
    #[inline(always)]
    fn max(self, a: Self::Value, b: Self::Value) -> Self::Value {
        [self.0.max(a[0], b[0]), self.0.max(a[1], b[1])]
    }
    #[inline(always)]
    fn select(self, mask: Self::Mask, yes: Self::Value, no: Self::Value) -> Self::Value {
        [
            self.0.select(mask[0], yes[0], no[0]),
            self.0.select(mask[1], yes[1], no[1]),
        ]
    }
    #[inline(always)]
    fn not_at_least(self, values: Self::Value, bound: f64) -> Self::Mask {
        [
            self.0.not_at_least(values[0], bound),
            self.0.not_at_least(values[1], bound),
        ]
    }
    #[inline(always)]
    fn not_below(self, values: Self::Value, bound: f64) -> Self::Mask {
        [
            self.0.not_below(values[0], bound),
            self.0.not_below(values[1], bound),
        ]
    }
    #[inline(always)]
    fn or(self, a: Self::Mask, b: Self::Mask) -> Self::Mask {
        [self.0.or(a[0], b[0]), self.0.or(a[1], b[1])]
    }
    #[inline(always)]
    fn any(self, mask: Self::Mask) -> bool {
        self.0.any(self.0.or(mask[0], mask[1]))
    }
    #[inline(always)]
    fn has_low_bit(self, bits: Self::Value) -> Self::Mask {
        [self.0.has_low_bit(bits[0]), self.0.has_low_bit(bits[1])]
    }
    #[inline(always)]
    fn flip_by_low_bit(self, value: Self::Value, bits: Self::Value) -> Self::Value {
        [
            self.0.flip_by_low_bit(value[0], bits[0]),
            self.0.flip_by_low_bit(value[1], bits[1]),
        ]
    }
    #[inline(always)]
    fn scale_by_low_bits(self, value: Self::Value, bits: Self::Value) -> Self::Value {
        [
            self.0.scale_by_low_bits(value[0], bits[0]),
            self.0.scale_by_low_bits(value[1], bits[1]),
        ]
    }
}
