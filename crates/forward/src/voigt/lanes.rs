//! The lane body: a block of points with one damping parameter, ready to be inlined into a larger vector kernel.

use std::f64::consts::{FRAC_2_PI, FRAC_2_SQRT_PI, LOG2_E, PI};
use std::marker::PhantomData;

use super::accuracy::Accuracy;
use super::arithmetic::Arithmetic;
use super::elementary::{Angle, Split, power_of_two};
use super::quadrature::{Fraction, Node, Nodes, Point};
use super::vector::Vector;
use super::{rules, scalar};

/// Beyond this `|z|²` the product of all denominators of a rule could overflow: the core rule, the first wing rules, the last one.
const CORE_OVERFLOW_RADIUS_SQUARED: f64 = 1e8;
const WING_OVERFLOW_RADIUS_SQUARED: f64 = 1e20;
const FAR_OVERFLOW_RADIUS_SQUARED: f64 = 1e120;

/// What depends on `y` alone, computed once for a line.
#[derive(Clone, Copy, Debug)]
pub struct Damping<A> {
    y: f64,
    y_squared: f64,
    four_y_squared: f64,
    /// `2 y / pi`: `exp(-2 i x y)` makes so many half turns for each unit of `x`.
    half_turns_per_x: f64,
    /// `p = exp(-2 pi y / h)`, the size of the pole's image.
    image: f64,
    /// `(1 + p)²`.
    one_plus_image_squared: f64,
    /// `2 exp(y² - 2 pi y / h)`, or 0 where the residue of the pole does not count.
    amplitude: f64,
    accuracy: PhantomData<A>,
}

impl<A: Accuracy> Damping<A> {
    /// For `y >= 0`, the Lorentzian half-width in units of the Gaussian 1/e half-width; a negative `y` gives NaN everywhere.
    #[inline]
    #[must_use]
    pub fn new(y: f64) -> Self {
        let y = if y < 0.0 { f64::NAN } else { y };
        let decay = -2.0 * PI * y / A::STEP;
        let image = decay.exp();
        let amplitude = if y < A::POLE_TERM_BELOW_Y {
            2.0 * (y * y + decay).exp()
        } else {
            0.0
        };
        Self {
            y,
            y_squared: y * y,
            four_y_squared: 4.0 * y * y,
            half_turns_per_x: FRAC_2_PI * y,
            image,
            one_plus_image_squared: (1.0 + image) * (1.0 + image),
            amplitude,
            accuracy: PhantomData,
        }
    }

    /// The `y` it was made for.
    #[inline(always)]
    #[must_use]
    pub fn y(&self) -> f64 {
        self.y
    }
}

/// `w(x + i y)` of `L` points with the same `y`.
///
/// ```text
/// re + i im = exp(-z²) erfc(-i z)
/// ```
///
/// `x`: distances from the line centre in Gaussian 1/e half-widths, any order, any size; one that is not finite gives NaN or the limit 0.
/// `L` is best a multiple of 8. `R` must be [`super::FusedWide`] or [`super::Fused`] exactly where the calling code is compiled for
/// x86-64-v4 or -v3: elsewhere they give the same numbers, slowly.
///
/// Method: modified trapezoidal rule (Matta & Reichel 1971, Math. Comp. 25, 339; Hunter & Regan 1972, Math. Comp. 26, 539; Al Azah &
/// Chandler-Wilde 2021, SIAM J. Numer. Anal. 59, 2346; citations from memory) within the core radius of `A`, Gauss-Hermite rules beyond
/// (Gautschi 1970, SIAM J. Numer. Anal. 7, 187). A vector takes the rule that its nearest point needs: each rule holds farther out as
/// well. Vectors that no rule serves go to the scalar path: `|z|` beyond 1e60, beyond 1e10 beside a point within the radius of the first
/// wing rule, or beyond 1e4 beside one in the core; and the wings of a line with `y < 1e-9`, where `exp(-x²)` counts.
///
/// Accuracy: that of `A`, component by component, for `y = 0` and `1e-8 <= y <= 1e3`, `|x| <= 1e4`: `every_path_meets_the_oracle_table`.
#[inline(always)]
pub fn w_lanes<A: Accuracy, R: Arithmetic, const L: usize>(
    x: &[f64; L],
    damping: &Damping<A>,
    re: &mut [f64; L],
    im: &mut [f64; L],
) {
    let mut done = L.is_multiple_of(R::Vector::LANES);
    if let Some(vector) = R::vector() {
        let (re, im) = (R::Vector::vectors_mut(re), R::Vector::vectors_mut(im));
        for ((&x, re), im) in R::Vector::vectors(x).iter().zip(re).zip(im) {
            match w_vector(vector, x, damping) {
                Some(value) => (*re, *im) = value,
                None => done = false,
            }
        }
    } else {
        done = false;
    }
    if !done {
        one_by_one(x, damping.y, re, im);
    }
}

/// `dw/dz` of `L` points, from `w` at the same points: `dw/dx = dw/dz`, `dw/dy = i dw/dz`.
///
/// ```text
/// dw/dz = -2 z w + 2 i / sqrt(pi)
/// ```
///
/// Accuracy: the sum cancels in the wings. With `w` at `Full`, the absolute error is below `1e-13 max(1, |z|) |w|`, and that of the real
/// part also below `1e-13 max(1, |x|) Re w` for `y <= 1`: `slopes_keep_the_promised_accuracy`. The rounding is of no consequence in a
/// Jacobian; it is in the ratio `w'/w` beyond `|x| = 1e6`.
#[inline(always)]
pub fn slope_lanes<R: Arithmetic, const L: usize>(
    x: &[f64; L],
    y: f64,
    re: &[f64; L],
    im: &[f64; L],
    slope_re: &mut [f64; L],
    slope_im: &mut [f64; L],
) {
    let vector = R::vector().filter(|_| L.is_multiple_of(R::Vector::LANES));
    let Some(v) = vector else {
        for lane in 0..L {
            (slope_re[lane], slope_im[lane]) = scalar::slope(x[lane], y, re[lane], im[lane]);
        }
        return;
    };
    let (minus_two, y) = (v.splat(-2.0), v.splat(y));
    let (x, re, im) = (
        R::Vector::vectors(x),
        R::Vector::vectors(re),
        R::Vector::vectors(im),
    );
    let slopes = R::Vector::vectors_mut(slope_re)
        .iter_mut()
        .zip(R::Vector::vectors_mut(slope_im));
    for (k, (slope_re, slope_im)) in slopes.enumerate() {
        let (x, re, im) = (x[k], re[k], im[k]);
        *slope_re = v.mul(minus_two, v.neg_mul_add(y, im, v.mul(x, re)));
        *slope_im = v.mul_add(
            minus_two,
            v.mul_add(x, im, v.mul(y, re)),
            v.splat(FRAC_2_SQRT_PI),
        );
    }
}

/// The function for one vector of points, or nothing where no rule serves all of them.
#[inline(always)]
fn w_vector<A: Accuracy, V: Vector>(
    v: V,
    x: V::Value,
    damping: &Damping<A>,
) -> Option<(V::Value, V::Value)> {
    let radius_squared = v.mul_add(x, x, v.splat(damping.y_squared));
    if !v.all_at_least(radius_squared, A::CORE_RADIUS_SQUARED) {
        return if !v.all_below(radius_squared, CORE_OVERFLOW_RADIUS_SQUARED) {
            None
        } else if damping.amplitude == 0.0 {
            Some(rule(v, x, damping, A::between()))
        } else {
            Some(core(v, x, damping))
        };
    }
    // Every rule has its own copy of the code, with its nodes as constants in it.
    let [one, two, three, four] = A::WING_RADII_SQUARED;
    if v.all_at_least(radius_squared, one) {
        if v.all_below(radius_squared, FAR_OVERFLOW_RADIUS_SQUARED) {
            Some(rule(v, x, damping, &rules::HERMITE_2))
        } else {
            None
        }
    } else if !v.all_below(radius_squared, WING_OVERFLOW_RADIUS_SQUARED)
        || damping.y < A::GAUSSIAN_IN_WING_BELOW_Y
    {
        None
    } else if v.all_at_least(radius_squared, two) {
        Some(rule(v, x, damping, &rules::HERMITE_4))
    } else if v.all_at_least(radius_squared, three) {
        Some(rule(v, x, damping, &rules::HERMITE_6))
    } else if v.all_at_least(radius_squared, four) {
        Some(rule(v, x, damping, &rules::HERMITE_8))
    } else {
        Some(rule(v, x, damping, &rules::HERMITE_12))
    }
}

/// Blocks that no rule serves as a whole: huge or undefined points among others, wings without damping.
///
/// A call, so that the vector code around it need not take its lanes apart.
#[cold]
#[inline(never)]
fn one_by_one<const L: usize>(x: &[f64; L], y: f64, re: &mut [f64; L], im: &mut [f64; L]) {
    for lane in 0..L {
        (re[lane], im[lane]) = scalar::w(x[lane], y);
    }
}

#[inline(always)]
fn point<A, V: Vector>(v: V, x: V::Value, damping: &Damping<A>) -> (V::Value, Point<V>) {
    let x_squared = v.mul(x, x);
    let y_squared = v.splat(damping.y_squared);
    let point = Point {
        vector: v,
        re_z_squared: v.sub(x_squared, y_squared),
        im_z_squared_squared: v.mul(x_squared, v.splat(damping.four_y_squared)),
    };
    (v.add(x_squared, y_squared), point)
}

/// The trapezoidal rule and the residue of the pole.
///
/// Of the two rules, with nodes on the multiples of the step or half-way between them, the one whose nodes are farther from `x` is taken,
/// so that the terms of the sum and the residue stay of the size of their sum. With `f = x/h - m/2`, `m = round(2 x / h)`, `p = exp(-2 pi y/h)`:
///
/// ```text
/// C = 2 exp(-z²) / (1 + exp(-2 pi i f)/p) = 2 p exp(y² - x²) exp(-2 i x y) (p + exp(2 pi i f)) / |p + exp(2 pi i f)|²
/// ```
#[inline(always)]
fn core<A: Accuracy, V: Vector>(v: V, x: V::Value, damping: &Damping<A>) -> (V::Value, V::Value) {
    let half_steps = Split::of(v, v.mul(x, v.splat(2.0 / A::STEP)));
    let phase = Angle::of_half_turns::<A>(v, half_steps.rest);
    let half_turns = Split::of(v, v.mul(x, v.splat(damping.half_turns_per_x)));
    let rotation = Angle::of_half_turns::<A>(v, half_turns.rest);
    let gauss = power_of_two::<A, V>(v, v.mul(v.mul(x, x), v.splat(-LOG2_E)));
    // An odd number of half turns changes the sign of the rotation.
    let gauss = v.flip_by_low_bit(
        v.mul(v.splat(damping.amplitude), gauss),
        half_turns.integer_bits,
    );

    // (p + cos + i sin)(cos - i sin), and the square of the first factor.
    let sum = v.sub(v.splat(1.0 + damping.image), phase.one_minus_cos);
    let cos = v.sub(v.splat(1.0), rotation.one_minus_cos);
    let residue_re = v.mul_add(sum, cos, v.mul(phase.sin, rotation.sin));
    let residue_im = v.neg_mul_add(sum, rotation.sin, v.mul(phase.sin, cos));
    let residue_divisor = v.neg_mul_add(
        v.splat(2.0 * damping.image),
        phase.one_minus_cos,
        v.splat(damping.one_plus_image_squared),
    );
    let residue = v.div(gauss, residue_divisor);

    let nodes = EitherRule::<V> {
        on_the_steps: v.has_low_bit(half_steps.integer_bits),
        on: A::on(),
        between: A::between(),
    };
    let (rule_re, rule_im) = sum_of_nodes(v, x, damping, nodes, nodes.on.len());
    (
        v.mul_add(residue, residue_re, rule_re),
        v.mul_add(residue, residue_im, rule_im),
    )
}

/// The two rules of the core, and which of them a point takes.
#[derive(Clone, Copy)]
struct EitherRule<V: Vector> {
    on_the_steps: V::Mask,
    on: &'static [Node],
    between: &'static [Node],
}

impl<V: Vector> Nodes<V> for EitherRule<V> {
    #[inline(always)]
    fn at(self, v: V, k: usize) -> (V::Value, V::Value) {
        let (on, between) = (self.on[k], self.between[k]);
        (
            v.select(
                self.on_the_steps,
                v.splat(on.t_squared),
                v.splat(between.t_squared),
            ),
            v.select(
                self.on_the_steps,
                v.splat(on.inverse_weight),
                v.splat(between.inverse_weight),
            ),
        )
    }
}

/// A rule of nodes alone: the wings, and the core where `y` is so large that the residue does not count and any set of nodes will do.
#[inline(always)]
fn rule<A, V: Vector>(
    v: V,
    x: V::Value,
    damping: &Damping<A>,
    nodes: &'static [Node],
) -> (V::Value, V::Value) {
    sum_of_nodes(v, x, damping, nodes, nodes.len())
}

#[inline(always)]
fn sum_of_nodes<A, V: Vector>(
    v: V,
    x: V::Value,
    damping: &Damping<A>,
    nodes: impl Nodes<V>,
    count: usize,
) -> (V::Value, V::Value) {
    let (radius_squared, point) = point(v, x, damping);
    let total = Fraction::sum(point, nodes, count);
    let inverse = v.div(v.splat(1.0), total.divisor);
    let product = v.mul(radius_squared, total.s0);
    (
        v.mul(v.mul(v.splat(damping.y), v.add(product, total.s1)), inverse),
        v.mul(v.mul(x, v.sub(product, total.s1)), inverse),
    )
}
