//! The plain reference: one point at a time, as the formulas stand, with nothing shared with the vector code but the formulas.

use std::f64::consts::{FRAC_1_SQRT_2, PI};

/// Step of the trapezoidal rule.
const STEP: f64 = 0.5;
/// Nodes on each side.
const NODES: usize = 13;
/// `|z|` from which the continued fraction is used.
const CORE_RADIUS: f64 = 7.5;
/// Levels of the continued fraction.
const LEVELS: u32 = 16;
/// Beyond this `|z|`, `w = i/(sqrt(pi) z)` to the last bit.
const FAR_RADIUS: f64 = 1e10;
/// `1/sqrt(pi)`.
const ONE_OVER_SQRT_PI: f64 = std::f64::consts::FRAC_2_SQRT_PI / 2.0;

/// `w(x + i y) = exp(-z²) erfc(-i z)` at one point, as `(re, im)`.
///
/// `x`: any; `y >= 0`: a negative one gives NaN. At `y = 0` exactly, `re = exp(-x²)` and `im` is `2/sqrt(pi)` times Dawson's integral.
///
/// Method: modified trapezoidal rule, Laplace continued fraction outside of `|z| = 7.5`, as in [`super::w_lanes`], with other parameters.
///
/// Accuracy: each component within 1e-13 of its own size for `y = 0` and `1e-8 <= y <= 1e3`, `|x| <= 1e4`:
/// `every_path_meets_the_oracle_table`.
#[must_use]
pub fn w(x: f64, y: f64) -> (f64, f64) {
    if x.is_nan() || y.is_nan() || y < 0.0 {
        return (f64::NAN, f64::NAN);
    }
    let radius = x.hypot(y);
    if radius >= FAR_RADIUS {
        far(x, y)
    } else if radius >= CORE_RADIUS {
        continued_fraction(x, y)
    } else {
        trapezoid(x, y)
    }
}

/// `dw/dz = -2 z w + 2 i / sqrt(pi)`, from `w` at the same point.
///
/// Accuracy: as [`super::slope_lanes`].
#[must_use]
pub fn slope(x: f64, y: f64, re: f64, im: f64) -> (f64, f64) {
    (
        -2.0 * (x * re - y * im),
        std::f64::consts::FRAC_2_SQRT_PI - 2.0 * (x * im + y * re),
    )
}

/// `exp(-x²)` with the rounding of the square made good.
#[must_use]
pub fn gaussian(x: f64) -> f64 {
    if !x.is_finite() {
        return if x.is_nan() { x } else { 0.0 };
    }
    // The head has 24 bits, so its square is exact.
    let head = f64::from(x as f32);
    if !head.is_finite() {
        return 0.0;
    }
    (-head * head).exp() * (-(x - head) * (x + head)).exp()
}

fn far(x: f64, y: f64) -> (f64, f64) {
    if x.is_infinite() || y.is_infinite() {
        return (0.0, 0.0);
    }
    let scale = x.abs().max(y);
    let (u, v) = (x / scale, y / scale);
    let factor = ONE_OVER_SQRT_PI / (u * u + v * v);
    (v * factor / scale, u * factor / scale)
}

/// `w = (i/sqrt(pi)) / (z - (1/2)/(z - 1/(z - (3/2)/(z - ...))))`.
fn continued_fraction(x: f64, y: f64) -> (f64, f64) {
    let (mut u, mut v) = (x, y);
    for level in (1..LEVELS).rev() {
        let factor = 0.5 * f64::from(level) / (u * u + v * v);
        (u, v) = (x - factor * u, y + factor * v);
    }
    let factor = ONE_OVER_SQRT_PI / (u * u + v * v);
    let re = v * factor;
    // On the real axis the fraction knows nothing of the Gaussian.
    let gaussian = if y < FRAC_1_SQRT_2 { gaussian(x) } else { 0.0 };
    (if y < 1e-6 { re + gaussian } else { re }, u * factor)
}

fn trapezoid(x: f64, y: f64) -> (f64, f64) {
    let half_steps = (2.0 * x / STEP).round();
    let fraction = x / STEP - 0.5 * half_steps;
    let odd = half_steps.rem_euclid(2.0) == 1.0;
    let radius_squared = x * x + y * y;
    let (mut sum_0, mut sum_1) = (0.0, 0.0);
    for k in (0..NODES).rev() {
        let t = STEP * if odd { k as f64 } else { k as f64 + 0.5 };
        let weight = 2.0 * STEP / PI * (-t * t).exp() * if t == 0.0 { 0.5 } else { 1.0 };
        let divisor = ((x - y) * (x + y) - t * t).powi(2) + (2.0 * x * y).powi(2);
        sum_0 += weight / divisor;
        sum_1 += t * t * weight / divisor;
    }
    let mut re = y * (radius_squared * sum_0 + sum_1);
    let mut im = x * (radius_squared * sum_0 - sum_1);
    if y < PI / STEP {
        // 2 exp(-z²) / (1 + q exp(-2 pi i f)) with q = exp(2 pi y / h), times the conjugate of the divisor above and below.
        let q = (2.0 * PI * y / STEP).exp();
        let (sin_f, cos_f) = (2.0 * PI * fraction).sin_cos();
        let (sin_z, cos_z) = (2.0 * x * y).sin_cos();
        let (a, b) = (1.0 + q * cos_f, q * sin_f);
        let factor = 2.0 * gaussian(x) * (y * y).exp() / (a * a + b * b);
        re += factor * (a * cos_z + b * sin_z);
        im += factor * (b * cos_z - a * sin_z);
    }
    (re, im)
}
