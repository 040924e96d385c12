//! The two accuracies of the lane kernel, each with the rules that reach it.

use super::quadrature::Node;
use super::rules;

/// What the kernel needs to know to reach an accuracy.
///
/// The radii are those beyond which a Gauss-Hermite rule errs less than a tenth (`Full`) or a third (`Fast`) of the bound, component by
/// component, found with 45-digit arithmetic.
pub trait Accuracy: Copy + Send + Sync + 'static {
    /// Step of the trapezoidal rule; its half has few bits, so that multiples of it are exact.
    const STEP: f64;
    /// At this `y` and above, the residue of the pole is below the accuracy, and left out.
    const POLE_TERM_BELOW_Y: f64;
    /// Below this `y`, `exp(-x²)` counts beside the damping wing outside of the core.
    const GAUSSIAN_IN_WING_BELOW_Y: f64;
    /// `|z|²` from which the Gauss-Hermite rules hold: the edge of the core.
    const CORE_RADIUS_SQUARED: f64;
    /// `|z|²` from which the Gauss-Hermite rules with 1, 2, 3 and 4 pairs of nodes hold; where none does, that with 6 is taken.
    const WING_RADII_SQUARED: [f64; 4];
    /// Coefficients of `2^r`, `|r| <= 1/2`.
    const EXP: &'static [f64];
    /// Coefficients of `sin(pi r/2)/r` in `r²`, `|r| <= 1/2`.
    const SIN: &'static [f64];
    /// Coefficients of `(1 - cos(pi r/2))/r²` in `r²`, `|r| <= 1/2`.
    const COS: &'static [f64];

    #[doc(hidden)]
    fn on() -> &'static [Node];
    #[doc(hidden)]
    fn between() -> &'static [Node];
}

/// Each of real and imaginary part within `1e-13` of its own size.
#[derive(Clone, Copy, Debug)]
pub struct Full;

/// Each of real and imaginary part within `1e-6` of its own size.
#[derive(Clone, Copy, Debug)]
pub struct Fast;

impl Accuracy for Full {
    const STEP: f64 = 33.0 / 64.0;
    const POLE_TERM_BELOW_Y: f64 = 5.9;
    const GAUSSIAN_IN_WING_BELOW_Y: f64 = 1e-9;
    const CORE_RADIUS_SQUARED: f64 = 7.65 * 7.65;
    const WING_RADII_SQUARED: [f64; 4] = [4000.0 * 4000.0, 80.0 * 80.0, 22.5 * 22.5, 12.5 * 12.5];
    const EXP: &'static [f64] = &rules::EXP_FULL;
    const SIN: &'static [f64] = &rules::SIN_FULL;
    const COS: &'static [f64] = &rules::COS_FULL;

    #[inline(always)]
    fn on() -> &'static [Node] {
        &rules::TRAPEZOID_FULL_ON
    }
    #[inline(always)]
    fn between() -> &'static [Node] {
        &rules::TRAPEZOID_FULL_BETWEEN
    }
}

impl Accuracy for Fast {
    const STEP: f64 = 0.75;
    const POLE_TERM_BELOW_Y: f64 = 4.0;
    const GAUSSIAN_IN_WING_BELOW_Y: f64 = 1e-8;
    const CORE_RADIUS_SQUARED: f64 = 6.25 * 6.25;
    const WING_RADII_SQUARED: [f64; 4] = [
        60.0 * 60.0,
        9.7 * 9.7,
        Self::CORE_RADIUS_SQUARED,
        Self::CORE_RADIUS_SQUARED,
    ];
    const EXP: &'static [f64] = &rules::EXP_FAST;
    const SIN: &'static [f64] = &rules::SIN_FAST;
    const COS: &'static [f64] = &rules::COS_FAST;

    #[inline(always)]
    fn on() -> &'static [Node] {
        &rules::TRAPEZOID_FAST_ON
    }
    #[inline(always)]
    fn between() -> &'static [Node] {
        &rules::TRAPEZOID_FAST_BETWEEN
    }
}
