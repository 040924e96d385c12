//! The slice form and the choice of the instruction set.

use std::sync::OnceLock;

use super::accuracy::{Accuracy, Fast, Full};
use super::arithmetic::{Arithmetic, Separate};
use super::lanes::{Damping, w_lanes};

/// Points of a block: two vectors of AVX2, one of AVX-512.
const LANES: usize = 8;

/// The accuracy of [`w_slice`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Precision {
    /// 1e-13 component by component: [`Full`].
    Full,
    /// 1e-6 component by component: [`Fast`].
    Fast,
}

/// The instruction sets the kernel is compiled for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum InstructionSet {
    /// AVX-512 (x86-64-v4).
    Avx512,
    /// AVX2 with FMA (x86-64-v3).
    Avx2,
    /// What every machine of the architecture has.
    Portable,
}

impl InstructionSet {
    /// All of them, the widest first.
    pub const ALL: [Self; 3] = [Self::Avx512, Self::Avx2, Self::Portable];

    /// Does this machine have it?
    #[must_use]
    pub fn is_available(self) -> bool {
        match self {
            #[cfg(target_arch = "x86_64")]
            Self::Avx512 => pulp::x86::V4::try_new().is_some(),
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => pulp::x86::V3::try_new().is_some(),
            #[cfg(not(target_arch = "x86_64"))]
            Self::Avx512 | Self::Avx2 => false,
            Self::Portable => true,
        }
    }

    /// The widest one that this machine has.
    #[must_use]
    pub fn best() -> Self {
        static BEST: OnceLock<InstructionSet> = OnceLock::new();
        *BEST.get_or_init(|| {
            Self::ALL
                .into_iter()
                .find(|set| set.is_available())
                .unwrap_or(Self::Portable)
        })
    }
}

/// `w(x + i y)` for a slice of `x` and one `y`, with the widest instructions of the machine.
///
/// `x`, `re`, `im` have the same length: what is beyond the shortest of them is left alone. See [`w_lanes`] for method, domain and accuracy.
///
/// ```
/// use backlit_forward::voigt::{Precision, w_slice};
///
/// let x = [0.0, 1.0, 30.0];
/// let (mut re, mut im) = ([0.0; 3], [0.0; 3]);
/// w_slice(&x, 0.0, &mut re, &mut im, Precision::Full);
/// assert!((re[1] - (-1.0_f64).exp()).abs() < 1e-15);
/// ```
pub fn w_slice(x: &[f64], y: f64, re: &mut [f64], im: &mut [f64], precision: Precision) {
    w_slice_with(InstructionSet::best(), x, y, re, im, precision);
}

/// [`w_slice`] with the instruction set chosen by the caller; one that the machine lacks is replaced by the portable one.
pub fn w_slice_with(
    set: InstructionSet,
    x: &[f64],
    y: f64,
    re: &mut [f64],
    im: &mut [f64],
    precision: Precision,
) {
    match precision {
        Precision::Full => run(set, x, &Damping::<Full>::new(y), re, im),
        Precision::Fast => run(set, x, &Damping::<Fast>::new(y), re, im),
    }
}

fn run<A: Accuracy>(
    set: InstructionSet,
    x: &[f64],
    damping: &Damping<A>,
    re: &mut [f64],
    im: &mut [f64],
) {
    #[cfg(target_arch = "x86_64")]
    {
        use super::arithmetic::Fused;
        match set {
            InstructionSet::Avx512 => {
                if let Some(simd) = pulp::x86::V4::try_new() {
                    return simd.vectorize(
                        #[inline(always)]
                        || blocks::<A, Fused>(x, damping, re, im),
                    );
                }
            }
            InstructionSet::Avx2 => {
                if let Some(simd) = pulp::x86::V3::try_new() {
                    return simd.vectorize(
                        #[inline(always)]
                        || blocks::<A, Fused>(x, damping, re, im),
                    );
                }
            }
            InstructionSet::Portable => {}
        }
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = set;
    blocks::<A, Separate>(x, damping, re, im);
}

/// Whole blocks, then the tail in a padded one.
#[inline(always)]
fn blocks<A: Accuracy, R: Arithmetic>(
    x: &[f64],
    damping: &Damping<A>,
    re: &mut [f64],
    im: &mut [f64],
) {
    let (x_blocks, x_tail) = x.as_chunks::<LANES>();
    let (re_blocks, re_tail) = re[..x.len()].as_chunks_mut::<LANES>();
    let (im_blocks, im_tail) = im[..x.len()].as_chunks_mut::<LANES>();
    for ((x, re), im) in x_blocks.iter().zip(re_blocks).zip(im_blocks) {
        w_lanes::<A, R, LANES>(x, damping, re, im);
    }
    if let Some(&last) = x_tail.last() {
        let mut padded = [last; LANES];
        padded[..x_tail.len()].copy_from_slice(x_tail);
        let (mut padded_re, mut padded_im) = ([0.0; LANES], [0.0; LANES]);
        w_lanes::<A, R, LANES>(&padded, damping, &mut padded_re, &mut padded_im);
        re_tail.copy_from_slice(&padded_re[..x_tail.len()]);
        im_tail.copy_from_slice(&padded_im[..x_tail.len()]);
    }
}
