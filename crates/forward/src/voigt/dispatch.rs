//! The slice form and the choice of the instruction set.

use std::sync::OnceLock;

use pulp::{Simd, WithSimd};

use super::accuracy::{Accuracy, Fast, Full};
use super::arithmetic::{Arithmetic, Fused, Separate};
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
    let length = x.len().min(re.len()).min(im.len());
    let (x, re, im) = (&x[..length], &mut re[..length], &mut im[..length]);
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
    let blocks = Blocks { x, damping, re, im };
    #[cfg(target_arch = "x86_64")]
    match set {
        InstructionSet::Avx512 => {
            if let Some(simd) = pulp::x86::V4::try_new() {
                return Simd::vectorize(simd, blocks);
            }
        }
        InstructionSet::Avx2 => {
            if let Some(simd) = pulp::x86::V3::try_new() {
                return Simd::vectorize(simd, blocks);
            }
        }
        InstructionSet::Portable => {}
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = set;
    blocks.evaluate::<Separate>();
}

/// The slices of a call.
struct Blocks<'a, A> {
    x: &'a [f64],
    damping: &'a Damping<A>,
    re: &'a mut [f64],
    im: &'a mut [f64],
}

impl<A: Accuracy> WithSimd for Blocks<'_, A> {
    type Output = ();

    /// Inlined by `pulp` into a function that is compiled for the instruction set; all of those used here have FMA.
    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        self.evaluate::<Fused>();
    }
}

impl<A: Accuracy> Blocks<'_, A> {
    /// Whole blocks, then the tail in a padded one.
    #[inline(always)]
    fn evaluate<R: Arithmetic>(self) {
        let (x_blocks, x_tail) = self.x.as_chunks::<LANES>();
        let (re_blocks, re_tail) = self.re.as_chunks_mut::<LANES>();
        let (im_blocks, im_tail) = self.im.as_chunks_mut::<LANES>();
        for ((x, re), im) in x_blocks.iter().zip(re_blocks).zip(im_blocks) {
            w_lanes::<A, R, LANES>(x, self.damping, re, im);
        }
        if let Some(&last) = x_tail.last() {
            let mut padded = [last; LANES];
            padded[..x_tail.len()].copy_from_slice(x_tail);
            let (mut re, mut im) = ([0.0; LANES], [0.0; LANES]);
            w_lanes::<A, R, LANES>(&padded, self.damping, &mut re, &mut im);
            re_tail.copy_from_slice(&re[..x_tail.len()]);
            im_tail.copy_from_slice(&im[..x_tail.len()]);
        }
    }
}
