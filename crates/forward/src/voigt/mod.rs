//! The Voigt function: `w(z) = exp(-z²) erfc(-i z)` for `z = x + i y` in the upper half plane.
//!
//! Its real part is the Voigt profile shape, its imaginary part the dispersion that goes with it. With `x` the distance from the line
//! centre and `y` the Lorentzian half-width, both in units of the Gaussian 1/e half-width, `Re w / (sqrt(pi) * doppler_width)` is the
//! profile of area 1.
//!
//! Three layers, one job each:
//!
//! - [`scalar::w`]: one point at a time in plain words, slow and kept for good: the oracle of the others on any machine.
//! - [`w_lanes`]: a block of points on a line, without calls, dispatch or memory; it becomes vector code inside whatever kernel it is
//!   inlined into. [`Damping`] holds what depends on `y` only.
//! - [`w_slice`]: a slice of points, with the instruction set chosen at run time.
//!
//! The lane body uses the modified trapezoidal rule near the origin and Gauss-Hermite rules (the convergents of the Laplace continued
//! fraction) outside, both as a sum of positive terms, so that the real part keeps its relative accuracy in the far wings, where it is
//! many orders smaller than the imaginary part, and where a damping wing absorbs.

mod accuracy;
mod arithmetic;
mod dispatch;
mod elementary;
mod lanes;
mod quadrature;
mod rules;
pub mod scalar;
mod vector;

pub use accuracy::{Accuracy, Fast, Full};
pub use arithmetic::{Arithmetic, Separate};
#[cfg(target_arch = "x86_64")]
pub use arithmetic::{Fused, FusedWide};
pub use dispatch::{InstructionSet, Precision, w_slice, w_slice_with};
pub use lanes::{Damping, slope_lanes, w_lanes};
pub(crate) use vector::Vector;
