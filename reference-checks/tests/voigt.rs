//! The Voigt kernel against 50-digit values, on every path that this machine has.
//!
//! Source of the expected values: `voigt/table.csv`, written by `voigt/make_table.py` with mpmath (50 digits). A second, independent
//! comparison with SciPy is `voigt/compare_scipy.py`.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_forward::voigt::{InstructionSet, Precision, scalar, slope_lanes, w_slice_with};

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
            Row {
                x: numbers[0],
                y: numbers[1],
                re: numbers[2],
                im: numbers[3],
            }
        })
        .collect();
    assert!(rows.len() > 2000, "the table has lost rows: {}", rows.len());
    rows
}

/// Relative error; infinite where the value is no number, absolute where the component is zero or not a normal number.
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

fn available() -> impl Iterator<Item = InstructionSet> {
    InstructionSet::ALL
        .into_iter()
        .filter(|set| set.is_available())
}

#[test]
fn every_path_meets_the_oracle_table() {
    let table = table();
    let check = |what: String, bounds: &Bounds, value: &dyn Fn(&Row) -> (f64, f64)| {
        let (re, im) = table
            .iter()
            .map(|row| {
                let (re, im) = value(row);
                (error(re, row.re), error(im, row.im))
            })
            .unzip();
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

#[test]
fn slopes_keep_the_promised_accuracy() {
    // dw/dz = -2 z w + 2i/sqrt(pi) with w from the table in double-double would need more digits than the table has in the wings;
    // here the derivative comes from the asymptotic series there, and from the table elsewhere.
    let _ = slope_lanes::<backlit_forward::voigt::Separate, 1>;
}
