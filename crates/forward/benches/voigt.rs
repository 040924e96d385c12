//! The Voigt kernel against SciPy's `wofz`: same points, same run, one thread, medians of ratios measured in turn.
//!
//! `cargo bench -p backlit-forward --bench voigt` prints a table, asserts the answers and exits with 1 where a target is missed.

#![allow(clippy::print_stdout, clippy::print_stderr, clippy::unwrap_used)]

use std::hint::black_box;
use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};
use std::time::Instant;

use backlit_forward::voigt::{InstructionSet, Precision, w_slice_with};

/// Floating-point operations of a core point at full accuracy, a multiply-add counted as two:
/// two splits 8, two angles 58, power of two 24, residue 12, point 4, nodes 12 * 4, pairs 6 * 5, joins 5 * 7, end 12. The choice of the
/// rule, blends and integer operations are not counted.
const CORE_FLOPS: f64 = 231.0;
/// Rounds, each of which measures everything once.
const ROUNDS: usize = 21;
/// Points of one line.
const POINTS: usize = 1024;
/// The lines.
const DAMPINGS: [f64; 5] = [1e-3, 1e-2, 0.1, 0.4, 1.0];

/// Targets: times faster than `wofz`, and share of the FMA peak on cores.
const TARGETS: [(InstructionSet, &str, f64); 4] = [
    (InstructionSet::Avx512, CORES, 14.0),
    (InstructionSet::Avx512, WINGS, 24.0),
    (InstructionSet::Avx2, CORES, 10.0),
    (InstructionSet::Avx2, WINGS, 20.0),
];
const PEAK_SHARE_TARGET: f64 = 0.65;

const CORES: &str = "line cores, |x| < 5";
const WINGS: &str = "wings, 10 < |x| < 100";
/// Where `wofz` has a shortcut too. No target of their own.
const FAR_WINGS: &str = "wings, 100 < |x| < 1e4";
/// Neighbours of different size share the rule of the nearest one. No target of their own.
const SHUFFLED_WINGS: &str = "wings, shuffled";

fn main() {
    // `cargo test --benches` runs this too, without the argument: nothing to measure then.
    if !std::env::args().any(|argument| argument == "--bench") {
        return;
    }
    let python = python();
    let peak_of = InstructionSet::best();
    println!(
        "Voigt function; widest instruction set here: {peak_of:?}; {ROUNDS} rounds of {} points",
        POINTS * DAMPINGS.len()
    );
    let mut missed = Vec::new();
    println!(
        "{:24} {:9} {:9} {:>8} {:>8} {:>8}",
        "points", "accuracy", "path", "ns", "wofz ns", "ratio"
    );
    for (region, points) in regions() {
        let mut reference = Reference::start(&python, region, &points);
        let cases: Vec<(InstructionSet, Precision)> = InstructionSet::ALL
            .into_iter()
            .filter(|set| set.is_available())
            .flat_map(|set| [(set, Precision::Full), (set, Precision::Fast)])
            .collect();
        for &(set, precision) in &cases {
            assert_answer(set, precision, &points, &reference.values);
        }
        let mut times = vec![Vec::new(); cases.len()];
        let (mut ratios, mut shares) = (vec![Vec::new(); cases.len()], Vec::new());
        let mut reference_times = Vec::new();
        for _ in 0..ROUNDS {
            let reference_ns = reference.time();
            reference_times.push(reference_ns);
            for (case, &(set, precision)) in cases.iter().enumerate() {
                let ns = time(set, precision, &points);
                times[case].push(ns);
                ratios[case].push(reference_ns / ns);
                if (set, precision, region) == (peak_of, Precision::Full, CORES) {
                    shares.push(CORE_FLOPS / ns / peak_flops_per_ns());
                }
            }
        }
        for (case, &(set, precision)) in cases.iter().enumerate() {
            let ratio = median(&mut ratios[case]);
            println!(
                "{region:24} {:9} {:9} {:8.2} {:8.1} {ratio:8.1}",
                format!("{precision:?}"),
                format!("{set:?}"),
                median(&mut times[case]),
                median(&mut reference_times),
            );
            for &(target_set, target_region, target) in &TARGETS {
                if (target_set, target_region, Precision::Full) == (set, region, precision)
                    && ratio < target
                {
                    missed.push(format!(
                        "{region}, {set:?}: {ratio:.1} times faster than wofz, target {target}"
                    ));
                }
            }
        }
        if !shares.is_empty() {
            let share = median(&mut shares);
            println!(
                "{region:24} full      {peak_of:?}: {:.0} % of the FMA peak of this run",
                100.0 * share
            );
            if share < PEAK_SHARE_TARGET && peak_of != InstructionSet::Portable {
                missed.push(format!(
                    "{region}: {share:.2} of the FMA peak, target {PEAK_SHARE_TARGET}"
                ));
            }
        }
    }
    for target in &missed {
        eprintln!("missed: {target}");
    }
    if !missed.is_empty() {
        std::process::exit(1);
    }
}

/// Lines of points: `x` in rising order, as on a spectrum's grid, and the `y` they share.
type Points = Vec<(f64, Vec<f64>)>;

fn regions() -> Vec<(&'static str, Points)> {
    let lines = |x: &dyn Fn(f64) -> f64| -> Points {
        let grid: Vec<f64> = (0..POINTS)
            .map(|k| x((k as f64 + 0.5) / POINTS as f64))
            .collect();
        DAMPINGS.iter().map(|&y| (y, grid.clone())).collect()
    };
    let mut shuffled = lines(&|part| 10_f64.powf(1.0 + part));
    for (_, x) in &mut shuffled {
        // A stride that shares no factor with the length: neighbours are far apart.
        *x = (0..POINTS).map(|k| x[k * 389 % POINTS]).collect();
    }
    vec![
        (CORES, lines(&|part| 10.0 * part - 5.0)),
        (WINGS, lines(&|part| 10_f64.powf(1.0 + part))),
        (FAR_WINGS, lines(&|part| 10_f64.powf(2.0 + 2.0 * part))),
        (SHUFFLED_WINGS, shuffled),
    ]
}

fn time(set: InstructionSet, precision: Precision, points: &Points) -> f64 {
    let (mut re, mut im) = (vec![0.0; POINTS], vec![0.0; POINTS]);
    let repeats = 16;
    let began = Instant::now();
    for _ in 0..repeats {
        for (y, x) in points {
            w_slice_with(set, black_box(x), *y, &mut re, &mut im, precision);
            black_box((&mut re, &mut im));
        }
    }
    began.elapsed().as_nanos() as f64 / (repeats * points.len() * POINTS) as f64
}

fn assert_answer(set: InstructionSet, precision: Precision, points: &Points, values: &[f64]) {
    // SciPy itself is good to 3e-13 in the smaller component.
    let bound = if precision == Precision::Full {
        1e-12
    } else {
        1e-6
    };
    let (mut re, mut im) = (vec![0.0; POINTS], vec![0.0; POINTS]);
    for ((y, x), expected) in points.iter().zip(values.chunks(2 * POINTS)) {
        w_slice_with(set, x, *y, &mut re, &mut im, precision);
        for k in 0..POINTS {
            let error = (re[k] / expected[2 * k] - 1.0)
                .abs()
                .max((im[k] / expected[2 * k + 1] - 1.0).abs());
            assert!(
                error <= bound,
                "{set:?}, {precision:?}: w({} + {y} i) is off by {error:e}",
                x[k]
            );
        }
    }
}

/// Floating-point operations a nanosecond of nothing but independent multiply-adds.
fn peak_flops_per_ns() -> f64 {
    const CHAINS: usize = 12;
    const LANES: usize = 8;
    const STEPS: usize = 200_000;
    #[inline(always)]
    fn chains() -> [[f64; LANES]; CHAINS] {
        let mut sums = [[1.0_f64; LANES]; CHAINS];
        let (factor, term) = (black_box([0.999_999; LANES]), black_box([1e-7; LANES]));
        for _ in 0..STEPS {
            for sum in &mut sums {
                for lane in 0..LANES {
                    sum[lane] = sum[lane].mul_add(factor[lane], term[lane]);
                }
            }
        }
        sums
    }
    struct Chains;
    impl pulp::WithSimd for Chains {
        type Output = [[f64; LANES]; CHAINS];
        #[inline(always)]
        fn with_simd<S: pulp::Simd>(self, _: S) -> Self::Output {
            chains()
        }
    }
    let began = Instant::now();
    black_box(pulp::Arch::new().dispatch(Chains));
    (2 * CHAINS * LANES * STEPS) as f64 / began.elapsed().as_nanos() as f64
}

fn median(values: &mut [f64]) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

/// SciPy in a process of its own, which waits to be asked.
struct Reference {
    child: Child,
    ask: ChildStdin,
    answer: BufReader<ChildStdout>,
    files: [PathBuf; 2],
    /// `re, im` of all points.
    values: Vec<f64>,
}

impl Reference {
    fn start(python: &Path, region: &str, points: &Points) -> Self {
        let name: String = region.chars().filter(char::is_ascii_alphanumeric).collect();
        let file = |what: &str| {
            std::env::temp_dir().join(format!(
                "backlit-voigt-{}-{name}-{what}",
                std::process::id()
            ))
        };
        let files = [file("points"), file("values")];
        let pairs = points
            .iter()
            .flat_map(|(y, x)| x.iter().flat_map(|x| [*x, *y]));
        std::fs::write(
            &files[0],
            pairs.flat_map(f64::to_ne_bytes).collect::<Vec<u8>>(),
        )
        .unwrap();
        let mut child = Command::new(python)
            .arg(Path::new(env!("CARGO_MANIFEST_DIR")).join("benches/voigt_reference.py"))
            .args(&files)
            .env("OMP_NUM_THREADS", "1")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let (ask, answer) = (
            child.stdin.take().unwrap(),
            BufReader::new(child.stdout.take().unwrap()),
        );
        let mut reference = Self {
            child,
            ask,
            answer,
            files,
            values: Vec::new(),
        };
        assert_eq!(reference.line(), "ready");
        let bytes = std::fs::read(&reference.files[1]).unwrap();
        reference.values = bytes
            .chunks_exact(8)
            .map(|bytes| f64::from_ne_bytes(bytes.try_into().unwrap()))
            .collect();
        assert_eq!(reference.values.len(), 2 * POINTS * points.len());
        reference
    }

    fn line(&mut self) -> String {
        let mut line = String::new();
        self.answer.read_line(&mut line).unwrap();
        line.trim().to_owned()
    }

    /// Nanoseconds a point of one pass.
    fn time(&mut self) -> f64 {
        writeln!(self.ask).unwrap();
        self.line().parse().unwrap()
    }
}

impl Drop for Reference {
    fn drop(&mut self) {
        // It ends by itself when its input ends; the files are of no use then.
        let _ = self.child.kill();
        let _ = self.child.wait();
        for file in &self.files {
            let _ = std::fs::remove_file(file);
        }
    }
}

/// A Python with the versions of `reference-checks/requirements.txt`: `BACKLIT_PYTHON`, or the environment that the tests use.
fn python() -> PathBuf {
    if let Some(python) = std::env::var_os("BACKLIT_PYTHON") {
        return python.into();
    }
    let script = "set -e; source tests/prepare; prepare_rust >&2; prepare_python >&2; printf %s \"$BACKLIT_PYTHON\"";
    let output = Command::new("bash")
        .args(["-c", script])
        .current_dir(Path::new(env!("CARGO_MANIFEST_DIR")).join("../.."))
        .stderr(Stdio::inherit())
        .output()
        .unwrap();
    assert!(
        output.status.success(),
        "no Python environment for the comparison; set BACKLIT_PYTHON to a Python with numpy and scipy"
    );
    String::from_utf8(output.stdout).unwrap().into()
}
