//! The Voigt kernel against 50-digit values, on every path that this machine has.
//!
//! Source of the expected values: `voigt/table.csv`, written by `voigt/make_table.py` with mpmath (50 digits). A second, independent
//! comparison with SciPy is `voigt/compare_scipy.py`.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_forward::voigt::{
    Arithmetic, InstructionSet, Precision, Separate, scalar, slope_lanes, w_slice_with,
};

/// The promise of `Full`, with the spread that goes with it: half of the points are good to a few roundings.
const FULL: Bounds = Bounds {
    median: 5e-16,
    percentile_99: 1e-14,
    maximum: 1e-13,
};
/// The promise of `Fast`.
const FAST: Bounds = Bounds {
    median: 3e-8,
    percentile_99: 8e-7,
    maximum: 1e-6,
};

/// `dw/dz` from `w` at full accuracy: absolute error over `max(1, |z|) |w|`, and over `max(1, |x|) Re w` for the real part.
const SLOPE_OF_SIZE: f64 = 1e-13;
const SLOPE_OF_REAL_PART: f64 = 1e-13;
/// Widest vector, times three, and one more: every combination of whole blocks and tail.
const LONGEST: usize = 25;

struct Bounds {
    median: f64,
    percentile_99: f64,
    maximum: f64,
}

#[derive(Clone, Copy)]
struct Row {
    x: f64,
    y: f64,
    re: f64,
    im: f64,
    slope_re: f64,
    slope_im: f64,
}

fn table() -> Vec<Row> {
    let rows: Vec<Row> = include_str!("../voigt/table.csv")
        .lines()
        .filter(|line| !line.starts_with(['#', 'x']))
        .map(|line| {
            let numbers: Vec<f64> = line
                .split(',')
                .map(|field| field.parse().unwrap())
                .collect();
            let [x, y, re, im, slope_re, slope_im] = numbers.try_into().unwrap();
            Row {
                x,
                y,
                re,
                im,
                slope_re,
                slope_im,
            }
        })
        .collect();
    assert!(rows.len() > 2000, "the table has lost rows: {}", rows.len());
    rows
}

/// Relative error, infinite where the value is no number; absolute where the component is zero or below the normal numbers.
fn error(got: f64, expected: f64) -> f64 {
    let difference = (got - expected).abs();
    let error = if expected.abs() < f64::MIN_POSITIVE {
        difference
    } else {
        difference / expected.abs()
    };
    if error.is_nan() { f64::INFINITY } else { error }
}

fn assert_within(what: &str, mut errors: Vec<f64>, bounds: &Bounds) {
    errors.sort_by(f64::total_cmp);
    let at = |part: f64| errors[((errors.len() - 1) as f64 * part) as usize];
    let (median, percentile_99, maximum) = (at(0.5), at(0.99), at(1.0));
    println!("{what}: median {median:.1e}, 99 % {percentile_99:.1e}, maximum {maximum:.1e}");
    assert!(median <= bounds.median, "{what}: median {median:e}");
    assert!(
        percentile_99 <= bounds.percentile_99,
        "{what}: 99th percentile {percentile_99:e}"
    );
    assert!(maximum <= bounds.maximum, "{what}: maximum {maximum:e}");
}

fn one_by_one(set: InstructionSet, row: &Row, precision: Precision) -> (f64, f64) {
    let (mut re, mut im) = ([f64::NAN], [f64::NAN]);
    w_slice_with(set, &[row.x], row.y, &mut re, &mut im, precision);
    (re[0], im[0])
}

fn available() -> Vec<InstructionSet> {
    InstructionSet::ALL
        .into_iter()
        .filter(|set| set.is_available())
        .collect()
}

#[test]
fn every_path_meets_the_oracle_table() {
    let table = table();
    let check = |what: String, bounds: &Bounds, value: &dyn Fn(&Row) -> (f64, f64)| {
        let errors = table.iter().map(|row| {
            let (re, im) = value(row);
            (error(re, row.re), error(im, row.im))
        });
        let (re, im) = errors.unzip();
        assert_within(&format!("{what}, real part"), re, bounds);
        assert_within(&format!("{what}, imaginary part"), im, bounds);
    };
    check("scalar".into(), &FULL, &|row| scalar::w(row.x, row.y));
    for set in available() {
        check(format!("{set:?}, full"), &FULL, &|row| {
            one_by_one(set, row, Precision::Full)
        });
        check(format!("{set:?}, fast"), &FAST, &|row| {
            one_by_one(set, row, Precision::Fast)
        });
    }
}

fn assert_slopes<R: Arithmetic>(what: &str) {
    let (mut of_size, mut of_real_part) = (0.0_f64, 0.0_f64);
    for row in table() {
        let (re, im) = one_by_one(InstructionSet::best(), &row, Precision::Full);
        let (mut slope_re, mut slope_im) = ([f64::NAN; 8], [f64::NAN; 8]);
        slope_lanes::<R, 8>(
            &[row.x; 8],
            row.y,
            &[re; 8],
            &[im; 8],
            &mut slope_re,
            &mut slope_im,
        );
        let size = row.re.hypot(row.im) * row.x.hypot(row.y).max(1.0);
        for (slope_re, slope_im) in slope_re.into_iter().zip(slope_im) {
            let (error_re, error_im) = (
                (slope_re - row.slope_re).abs(),
                (slope_im - row.slope_im).abs(),
            );
            let error = error_re.max(error_im) / size;
            of_size = of_size.max(if error.is_nan() { f64::INFINITY } else { error });
            if row.y <= 1.0 && row.re > f64::MIN_POSITIVE {
                of_real_part = of_real_part.max(error_re / (row.re * row.x.abs().max(1.0)));
            }
        }
    }
    println!(
        "slope, {what}: {of_size:.1e} of max(1, |z|) |w|, real part {of_real_part:.1e} of max(1, |x|) Re w"
    );
    assert!(of_size <= SLOPE_OF_SIZE, "{what}: {of_size:e}");
    assert!(
        of_real_part <= SLOPE_OF_REAL_PART,
        "{what}: {of_real_part:e}"
    );
}

#[test]
fn slopes_keep_the_promised_accuracy() {
    assert_slopes::<Separate>("portable");
    #[cfg(target_arch = "x86_64")]
    {
        // Without the instructions these fall back to scalar code, and must be as good.
        assert_slopes::<backlit_forward::voigt::Fused>("AVX2");
        assert_slopes::<backlit_forward::voigt::FusedWide>("AVX-512");
    }
}

#[test]
fn the_result_does_not_depend_on_where_a_point_stands_in_the_slice() {
    // All blocks and tails: a slice of core, wing and far points in turn, each against the same point in the middle of its like. A point of
    // the wing may be served by the rule of its neighbours, so the comparison is to the accuracy, not to the bit.
    let points: Vec<f64> = (0..LONGEST)
        .map(|k| [0.3, -2.0, 9.0, 40.0, -3e3, 1e5, 7.649, 7.651][k % 8] * (1.0 + 1e-3 * k as f64))
        .collect();
    for set in available() {
        for start in 0..8 {
            for length in 0..=LONGEST - start {
                let x = &points[start..start + length];
                for y in [0.0, 1e-7, 0.3, 6.5, 50.0] {
                    let (mut re, mut im) = (vec![f64::NAN; length + 1], vec![f64::NAN; length + 1]);
                    w_slice_with(set, x, y, &mut re, &mut im, Precision::Full);
                    for k in 0..length {
                        let (expected_re, expected_im) = scalar::w(x[k], y);
                        assert!(
                            error(re[k], expected_re) <= FULL.maximum,
                            "{set:?}, {} of {length}, y = {y}: {} is not {expected_re}",
                            x[k],
                            re[k]
                        );
                        assert!(
                            error(im[k], expected_im) <= FULL.maximum,
                            "{set:?}, {} of {length}, y = {y}: {} is not {expected_im}",
                            x[k],
                            im[k]
                        );
                    }
                    assert!(
                        re[length].is_nan() && im[length].is_nan(),
                        "{set:?} wrote beyond the end of {length}"
                    );
                }
            }
        }
    }
}

#[test]
fn extreme_magnitudes_give_the_limit_and_never_a_wrong_number() {
    for set in available() {
        for precision in [Precision::Full, Precision::Fast] {
            let value = |x: f64, y: f64| {
                // Beside points of the core and of the wings, which is where an extreme lane could do harm.
                let mut result = (f64::NAN, f64::NAN);
                for near in [0.5, 9.0, 5000.0] {
                    let (mut re, mut im) = ([f64::NAN; 8], [f64::NAN; 8]);
                    let points = [near, x, near, x, near, x, near, x];
                    w_slice_with(set, &points, y, &mut re, &mut im, precision);
                    for k in 0..8 {
                        let expected = scalar::w(points[k], y);
                        let same = |got: f64, expected: f64| {
                            error(got, expected) <= FAST.maximum
                                || expected.is_nan() && got.is_nan()
                        };
                        assert!(
                            same(re[k], expected.0) && same(im[k], expected.1),
                            "{set:?} at {:e} among {near} and {x:e}, y = {y:e}: {:e} {:e}",
                            points[k],
                            re[k],
                            im[k]
                        );
                    }
                    result = (re[1], im[1]);
                }
                result
            };
            for exponent in (4..308).step_by(2) {
                let x = 10_f64.powi(exponent);
                let (re, im) = value(-x, 0.5);
                // Leading term of the asymptotic series, exact to 1e-8 from |x| = 1e4.
                let wing = std::f64::consts::FRAC_2_SQRT_PI / 2.0;
                assert!(error(im, -wing / x) < 1e-6, "{set:?}: Im w({x:e}) = {im:e}");
                assert!(
                    error(re, wing * 0.5 / x / x) < 1e-6,
                    "{set:?}: Re w({x:e}) = {re:e}"
                );
                let (re, im) = value(0.0, x);
                assert!(
                    error(re, wing / x) < 1e-6 && im == 0.0,
                    "{set:?}: w(i {x:e}) = {re:e} {im:e}"
                );
            }
            for x in [f64::MIN_POSITIVE, 5e-324, -1e-200] {
                let (re, im) = value(x, 0.0);
                assert!(
                    (re - 1.0).abs() <= FAST.maximum && im.signum() == x.signum(),
                    "{set:?}: w({x:e}) = {re} {im}"
                );
            }
            assert_eq!(value(f64::INFINITY, 1.0), (0.0, 0.0));
            assert_eq!(value(f64::NEG_INFINITY, 0.0), (0.0, 0.0));
            let (re, im) = value(f64::NAN, 1.0);
            assert!(re.is_nan() && im.is_nan(), "{set:?}: w(NaN) = {re} {im}");
        }
        let (mut re, mut im) = ([0.0], [0.0]);
        w_slice_with(set, &[1.0], -1.0, &mut re, &mut im, Precision::Full);
        assert!(
            re[0].is_nan() && im[0].is_nan(),
            "the lower half plane is outside of the domain"
        );
    }
}

#[test]
fn on_the_real_axis_it_is_the_gaussian_and_the_dawson_integral() {
    // Dawson's integral at its maximum, F(0.924138873) = 0.541044225: Abramowitz & Stegun 1964, section 7.1.17 (from memory, ten digits
    // checked with mpmath).
    let (re, im) = scalar::w(0.924_138_873_004_591_8, 0.0);
    assert!((re - (-0.924_138_873_004_591_8_f64.powi(2)).exp()).abs() < 1e-15);
    assert!(
        (im / std::f64::consts::FRAC_2_SQRT_PI - 0.541_044_224_635_182).abs() < 1e-15,
        "{im}"
    );
}

#[test]
fn the_profile_has_area_one() {
    // The integral of Re w over x is sqrt(pi) whatever y: the trapezoidal rule does it, and the wing law the rest.
    for y in [0.01, 0.5, 3.0] {
        let (step, reach) = (0.05, 2000.0);
        let x: Vec<f64> = (0..(2.0 * reach / step) as usize)
            .map(|k| step * (k as f64 + 0.5) - reach)
            .collect();
        let (mut re, mut im) = (vec![0.0; x.len()], vec![0.0; x.len()]);
        w_slice_with(
            InstructionSet::best(),
            &x,
            y,
            &mut re,
            &mut im,
            Precision::Full,
        );
        let area = step * re.iter().sum::<f64>() + std::f64::consts::FRAC_2_SQRT_PI * y / reach;
        assert!(
            (area / std::f64::consts::PI.sqrt() - 1.0).abs() < 1e-6,
            "y = {y}: {area}"
        );
    }
}
