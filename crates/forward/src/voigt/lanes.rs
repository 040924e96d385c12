//! The lane body: a block of points with one damping parameter, ready to be inlined into a larger vector kernel.

use std::f64::consts::{FRAC_2_PI, LOG2_E, PI};
use std::marker::PhantomData;

use super::accuracy::Accuracy;
use super::arithmetic::Arithmetic;
use super::elementary::{Angle, Split, power_of_two};
use super::quadrature::{Fraction, Node, Nodes, Point};
use super::{rules, scalar};

/// `2/sqrt(pi)`.
const TWO_OVER_SQRT_PI: f64 = std::f64::consts::FRAC_2_SQRT_PI;

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
/// `x`: distances from the line centre in Gaussian 1/e half-widths, any order, any size. `R` must be [`super::Fused`] exactly where the
/// calling code is compiled with FMA instructions. Not finite `x` gives NaN or the limit 0.
///
/// Method: modified trapezoidal rule (Matta & Reichel 1971, Math. Comp. 25, 339; Hunter & Regan 1972, Math. Comp. 26, 539; Al Azah &
/// Chandler-Wilde 2021, SIAM J. Numer. Anal. 59, 2346; citations from memory) within the core radius of `A`, Gauss-Hermite rules beyond
/// (Gautschi 1970, SIAM J. Numer. Anal. 7, 187). The block takes the core rule if one of its points needs it: that rule holds in the wings
/// as well.
///
/// Accuracy: that of `A`, component by component, for `y = 0` and `1e-8 <= y <= 1e3`, `|x| <= 1e4`: `every_path_meets_the_oracle_table`.
#[inline(always)]
pub fn w_lanes<A: Accuracy, R: Arithmetic, const L: usize>(
    x: &[f64; L],
    damping: &Damping<A>,
    re: &mut [f64; L],
    im: &mut [f64; L],
) {
    let mut radius_squared = [0.0; L];
    for lane in 0..L {
        radius_squared[lane] = R::mul_add(x[lane], x[lane], damping.y_squared);
    }
    let outside_core = all_at_least(&radius_squared, A::CORE_RADIUS_SQUARED);
    if !outside_core && all_below(&radius_squared, CORE_OVERFLOW_RADIUS_SQUARED) {
        if damping.amplitude == 0.0 {
            rule::<A, R, L>(x, damping, A::between(), re, im);
        } else {
            for lane in 0..L {
                (re[lane], im[lane]) = core::<A, R>(x[lane], damping);
            }
        }
    } else if outside_core && all_below(&radius_squared, WING_OVERFLOW_RADIUS_SQUARED) {
        wing::<A, R, L>(x, damping, &radius_squared, re, im);
    } else if all_at_least(&radius_squared, A::WING_RADII_SQUARED[0])
        && all_below(&radius_squared, FAR_OVERFLOW_RADIUS_SQUARED)
    {
        rule::<A, R, L>(x, damping, &rules::HERMITE_2, re, im);
    } else {
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
/// part also below `1e-12 max(1, |x|) Re w` for `y <= 1`: `slopes_keep_the_promised_accuracy`. The rounding is of no consequence in a
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
    for lane in 0..L {
        slope_re[lane] = -2.0 * R::mul_add(x[lane], re[lane], -(y * im[lane]));
        slope_im[lane] = R::mul_add(
            -2.0,
            R::mul_add(x[lane], im[lane], y * re[lane]),
            TWO_OVER_SQRT_PI,
        );
    }
}

/// Blocks that no rule serves as a whole, with huge or undefined points among others.
///
/// A call, so that the vector code around it need not take its lanes apart.
#[cold]
#[inline(never)]
fn one_by_one<const L: usize>(x: &[f64; L], y: f64, re: &mut [f64; L], im: &mut [f64; L]) {
    for lane in 0..L {
        (re[lane], im[lane]) = scalar::w(x[lane], y);
    }
}

/// What the wing rules do not know of. A call for the same reason.
#[cold]
#[inline(never)]
fn add_gaussian<const L: usize>(x: &[f64; L], re: &mut [f64; L]) {
    for lane in 0..L {
        re[lane] += scalar::gaussian(x[lane]);
    }
}

/// False if a value is NaN.
#[inline(always)]
fn all_at_least<const L: usize>(values: &[f64; L], bound: f64) -> bool {
    let mut all = true;
    for &value in values {
        all &= value >= bound;
    }
    all
}

/// False if a value is NaN.
#[inline(always)]
fn all_below<const L: usize>(values: &[f64; L], bound: f64) -> bool {
    let mut all = true;
    for &value in values {
        all &= value < bound;
    }
    all
}

#[inline(always)]
fn point<A>(x: f64, damping: &Damping<A>) -> (f64, Point) {
    let x_squared = x * x;
    let point = Point {
        re_z_squared: x_squared - damping.y_squared,
        im_z_squared_squared: x_squared * damping.four_y_squared,
    };
    (x_squared + damping.y_squared, point)
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
fn core<A: Accuracy, R: Arithmetic>(x: f64, damping: &Damping<A>) -> (f64, f64) {
    let half_steps = Split::of(x * (2.0 / A::STEP));
    let phase = Angle::of_half_turns::<A, R>(half_steps.rest);
    let half_turns = Split::of(x * damping.half_turns_per_x);
    let rotation = Angle::of_half_turns::<A, R>(half_turns.rest);
    let gauss = damping.amplitude * power_of_two::<A, R>(x * x * -LOG2_E);
    // An odd number of half turns changes the sign of the rotation.
    let gauss = f64::from_bits(gauss.to_bits() ^ (half_turns.integer_bits << 63));

    // (p + cos + i sin)(cos - i sin), and the square of the first factor.
    let sum = (1.0 + damping.image) - phase.one_minus_cos;
    let cos = 1.0 - rotation.one_minus_cos;
    let residue_re = R::mul_add(sum, cos, phase.sin * rotation.sin);
    let residue_im = R::mul_add(phase.sin, cos, -(sum * rotation.sin));
    let residue_divisor = R::mul_add(
        -2.0 * damping.image,
        phase.one_minus_cos,
        damping.one_plus_image_squared,
    );

    let (radius_squared, point) = point(x, damping);
    let nodes = EitherRule {
        odd: half_steps.is_odd(),
        on: A::on(),
        between: A::between(),
    };
    let total = Fraction::sum::<R>(point, nodes, nodes.on.len());
    let inverse = 1.0 / total.divisor;
    let gauss = gauss / residue_divisor;
    let rule_re = damping.y * R::mul_add(radius_squared, total.s0, total.s1);
    let rule_im = x * R::mul_add(radius_squared, total.s0, -total.s1);
    (
        R::mul_add(rule_re, inverse, gauss * residue_re),
        R::mul_add(rule_im, inverse, gauss * residue_im),
    )
}

/// The two rules of the core, and which of them a point takes.
#[derive(Clone, Copy)]
struct EitherRule {
    odd: bool,
    on: &'static [Node],
    between: &'static [Node],
}

impl Nodes for EitherRule {
    #[inline(always)]
    fn at(self, k: usize) -> Node {
        let (on, between) = (self.on[k], self.between[k]);
        Node {
            t_squared: if self.odd {
                on.t_squared
            } else {
                between.t_squared
            },
            inverse_weight: if self.odd {
                on.inverse_weight
            } else {
                between.inverse_weight
            },
        }
    }
}

/// A rule of nodes alone: the wings, and the core where `y` is so large that the residue does not count and any set of nodes will do.
#[inline(always)]
fn rule<A, R: Arithmetic, const L: usize>(
    x: &[f64; L],
    damping: &Damping<A>,
    nodes: &'static [Node],
    re: &mut [f64; L],
    im: &mut [f64; L],
) {
    for lane in 0..L {
        let (radius_squared, point) = point(x[lane], damping);
        let total = Fraction::sum::<R>(point, nodes, nodes.len());
        let inverse = 1.0 / total.divisor;
        re[lane] = damping.y * R::mul_add(radius_squared, total.s0, total.s1) * inverse;
        im[lane] = x[lane] * R::mul_add(radius_squared, total.s0, -total.s1) * inverse;
    }
}

/// The shortest rule that serves the nearest point of the block.
#[inline(always)]
fn wing<A: Accuracy, R: Arithmetic, const L: usize>(
    x: &[f64; L],
    damping: &Damping<A>,
    radius_squared: &[f64; L],
    re: &mut [f64; L],
    im: &mut [f64; L],
) {
    let [one, two, three, four] = A::WING_RADII_SQUARED;
    // Every rule has its own copy of the code, with its nodes as constants in it.
    if all_at_least(radius_squared, one) {
        rule::<A, R, L>(x, damping, &rules::HERMITE_2, re, im);
    } else if all_at_least(radius_squared, two) {
        rule::<A, R, L>(x, damping, &rules::HERMITE_4, re, im);
    } else if all_at_least(radius_squared, three) {
        rule::<A, R, L>(x, damping, &rules::HERMITE_6, re, im);
    } else if all_at_least(radius_squared, four) {
        rule::<A, R, L>(x, damping, &rules::HERMITE_8, re, im);
    } else {
        rule::<A, R, L>(x, damping, &rules::HERMITE_12, re, im);
    }
    if damping.y < A::GAUSSIAN_IN_WING_BELOW_Y {
        add_gaussian(x, re);
    }
}
