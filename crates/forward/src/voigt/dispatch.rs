//! The slice form and the choice of the instruction set.

use std::sync::OnceLock;

#[cfg(target_arch = "x86_64")]
use {
    pulp::{Simd, WithSimd},
    std::marker::PhantomData,
};

use super::accuracy::{Accuracy, Fast, Full};
use super::arithmetic::{Arithmetic, Separate};
#[cfg(target_arch = "x86_64")]
use super::arithmetic::{Fused, FusedWide};
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
                return Simd::vectorize(simd, Compiled(blocks, PhantomData::<FusedWide>));
            }
        }
        InstructionSet::Avx2 => {
            if let Some(simd) = pulp::x86::V3::try_new() {
                return Simd::vectorize(simd, Compiled(blocks, PhantomData::<Fused>));
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

/// The same with its arithmetic.
#[cfg(target_arch = "x86_64")]
struct Compiled<'a, A, R>(Blocks<'a, A>, PhantomData<R>);

#[cfg(target_arch = "x86_64")]
impl<A: Accuracy, R: Arithmetic> WithSimd for Compiled<'_, A, R> {
    type Output = ();

    /// Inlined by `pulp` into a function that is compiled for the instruction set.
    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        self.0.evaluate::<R>();
    }
}

impl<A: Accuracy> Blocks<'_, A> {
    /// Whole blocks; the last one reaches back over points that are done already, so that there is one copy of the kernel and no tail.
    #[inline(always)]
    fn evaluate<R: Arithmetic>(self) {
        let length = self.x.len();
        let Some(&last) = self.x.last() else { return };
        let mut padded_x = [last; LANES];
        let (mut padded_re, mut padded_im) = ([0.0; LANES], [0.0; LANES]);
        let short = length < LANES;
        let (x, re, im) = if short {
            padded_x[..length].copy_from_slice(self.x);
            (&padded_x[..], &mut padded_re[..], &mut padded_im[..])
        } else {
            (self.x, &mut *self.re, &mut *self.im)
        };
        let mut start = 0;
        while start < length {
            let first = start.min(x.len() - LANES);
            if let (Some(x), Some(re), Some(im)) = (
                x[first..].first_chunk(),
                re[first..].first_chunk_mut(),
                im[first..].first_chunk_mut(),
            ) {
                w_lanes::<A, R, LANES>(x, self.damping, re, im);
            }
            start += LANES;
        }
        if short {
            self.re.copy_from_slice(&padded_re[..length]);
            self.im.copy_from_slice(&padded_im[..length]);
        }
    }
}
