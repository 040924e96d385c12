//! Benchmark F: the fit against SciPy's `least_squares`, same spectra, same starts, same run, one thread.
//!
//! `cargo bench -p backlit-inverse --bench fit` prints a table, asserts that the answers are the same and exits with 1 where a
//! target is missed. With `-- --keep FOLDER` the spectra stay there, for `reference-checks/race/race.py`.
//!
//! Times of one thread are processor time, so that other work on the machine disturbs them little; ratios are medians over rounds
//! that measure everything in turn. Only the step from one core to two needs the clock on the wall and a quiet machine.

#![allow(clippy::print_stdout, clippy::print_stderr, clippy::unwrap_used)]

mod case;
mod scipy;

use std::hint::black_box;
use std::path::PathBuf;
use std::time::Instant;

use backlit_forward::oracle;
use backlit_inverse::solver::{Descent, Room, Target, descend};
use backlit_inverse::uncertainty::Covariance;
use backlit_inverse::{Fit, Observation, Workspace};
use case::{CHANNELS, Case, DEEPEST_IN_SIGMAS, FREE, SPECTRA};
use scipy::{Answer, SciPy};

const ROUNDS: usize = 15;
/// Spectra that SciPy fits in a round, with and without windows.
const WINDOWED: usize = 24;
const UNWINDOWED: usize = 3;
/// Spectra that are fitted without a start in a round.
const COLD: usize = 40;
const EVALUATIONS: usize = 400;
/// Spectra that SciPy's finest model fits, to judge the answers.
const JUDGED: usize = 24;
/// More than any descent of this benchmark takes.
const BUDGET: u32 = 200;

/// The same minimum: chi-square relative to SciPy's, and values in standard deviations.
const SAME_CHI_SQUARE: f64 = 1e-6;
const SAME_VALUE_SIGMAS: f64 = 0.01;
/// Part of the spectra in which a start off by 0.8 FWHM may lead either programme elsewhere; without a start.
const ASTRAY: f64 = 0.005;
const ASTRAY_COLD: f64 = 0.01;

const WINDOWED_TARGET: f64 = 170.0;
const UNWINDOWED_TARGET: f64 = 1900.0;
const PER_SECOND_TARGET: f64 = 20_000.0;
const TWO_CORES_TARGET: f64 = 1.9;

fn main() {
    let arguments: Vec<String> = std::env::args().collect();
    // `cargo test --benches` runs this too, without the argument: nothing to measure then.
    if !arguments.iter().any(|argument| argument == "--bench") {
        return;
    }
    let temporary = tempfile::tempdir().unwrap();
    let kept = arguments.iter().position(|argument| argument == "--keep");
    let folder = kept.map_or(temporary.path().to_path_buf(), |place| {
        PathBuf::from(&arguments[place + 1])
    });
    std::fs::create_dir_all(&folder).unwrap();
    let case = Case::new(&folder);
    let mut scipy = SciPy::start(&folder);
    println!(
        "benchmark F: {CHANNELS} channels, 12 lines, {FREE} free values, {SPECTRA} spectra; load of the machine: {}",
        load()
    );
    let mut missed = Vec::new();
    let near = compare(&case, &mut scipy, &mut missed);
    race(&case, &near, &mut scipy, &mut missed);
    two_cores(&case, &near, &mut missed);
    for target in &missed {
        eprintln!("missed: {target}");
    }
    if !missed.is_empty() {
        std::process::exit(1);
    }
}

/// Everything that a thread needs to fit.
struct Worker<'a> {
    case: &'a Case,
    workspace: Workspace,
    evaluation: backlit_forward::Evaluation,
    room: Room,
    target: Target,
    mask: Vec<bool>,
    uncertainty: Vec<f64>,
}

impl<'a> Worker<'a> {
    fn new(case: &'a Case) -> Self {
        Worker {
            case,
            workspace: case.problem.workspace(),
            evaluation: case.engine.evaluation(&case.limits.parameter),
            room: Room::default(),
            target: Target {
                data: vec![0.0; CHANNELS],
                weight: vec![case.sigma.powi(-2); CHANNELS],
            },
            mask: vec![false; CHANNELS],
            uncertainty: vec![case.sigma; CHANNELS],
        }
    }

    /// One descent from the spectrum's perturbed start.
    fn descend(&mut self, spectrum: usize, parameters: &mut [f64]) -> Descent {
        parameters.copy_from_slice(&self.case.starts[spectrum]);
        self.target
            .data
            .copy_from_slice(&self.case.spectra[spectrum]);
        descend(
            &self.case.engine,
            &mut self.evaluation,
            &self.target,
            &self.case.limits,
            parameters,
            BUDGET,
            &mut self.room,
        )
    }

    /// The whole fit, as a map does it for each pixel.
    fn fit(&mut self, spectrum: usize, near: Option<&Fit>) -> Fit {
        let data = Observation {
            intensity: &self.case.spectra[spectrum],
            uncertainty: Some(&self.uncertainty),
            mask: &self.mask,
        };
        self.case.problem.fit(&mut self.workspace, &data, near)
    }

    /// One standard deviation of each free value, in the units of [`Case::free_of`].
    fn sigma(&mut self) -> [f64; FREE] {
        let mut parameters = self.case.truth.clone();
        self.descend(0, &mut parameters);
        let covariance = Covariance::of(self.room.gram()).unwrap();
        let mut sigma: [f64; FREE] = std::array::from_fn(|i| covariance.sigma(i));
        sigma[2] *= 1e-3;
        sigma[3] *= 0.5e-6 / self.case.free_of(&parameters)[3];
        sigma
    }

    /// Error of the model at the truth: the largest relative to the deepest line, and that of all channels in
    /// standard deviations of the noise.
    fn error_in_sigmas(&mut self) -> (f64, f64) {
        self.case
            .engine
            .evaluate(&mut self.evaluation, &self.case.truth);
        let plain = oracle::observed(self.case.engine.sightline(), &self.case.truth);
        let off = plain
            .iter()
            .enumerate()
            .map(|(k, value)| (self.evaluation.value(k) - value) / self.case.sigma);
        let (mut most, mut sum) = (0.0_f64, 0.0);
        for off in off {
            most = most.max(off.abs());
            sum += off * off;
        }
        (most / DEEPEST_IN_SIGMAS, sum.sqrt())
    }

    /// Nanoseconds of model, Jacobian and normal equations.
    fn evaluate(&mut self) -> f64 {
        self.target.data.copy_from_slice(&self.case.spectra[0]);
        let mut gram = backlit_forward::engine::Gram::default();
        time(EVALUATIONS, |k| {
            self.case
                .engine
                .evaluate(&mut self.evaluation, black_box(&self.case.starts[k]));
            self.evaluation
                .gram(&self.target.data, &self.target.weight, &mut gram);
            black_box(&gram);
        })
    }
}

/// All spectra, each way, against SciPy; returns the answers that a map would have.
fn compare(case: &Case, scipy: &mut SciPy, missed: &mut Vec<String>) -> Vec<Fit> {
    let mut worker = Worker::new(case);
    let error = worker.error_in_sigmas();
    println!(
        "model against the plain one, at the truth: {:.1e} of the deepest line, {:.1e} sigma over all channels",
        error.0, error.1
    );
    let sigma = worker.sigma();
    let mut parameters = case.truth.clone();
    let mut descents = Vec::new();
    let mut cold = Vec::new();
    for spectrum in 0..SPECTRA {
        let descent = worker.descend(spectrum, &mut parameters);
        descents.push((case.free_of(&parameters), descent.chi_square));
        cold.push(worker.fit(spectrum, None));
    }
    let near: Vec<Fit> = (0..SPECTRA)
        .map(|spectrum| worker.fit(spectrum, Some(before(&cold, spectrum))))
        .collect();
    let of = |fits: &[Fit]| -> Vec<([f64; FREE], f64)> {
        let degrees = (CHANNELS - FREE) as f64;
        fits.iter()
            .map(|fit| (case.free_of(&fit.parameters), fit.chi2_reduced * degrees))
            .collect()
    };
    let ways = [
        ("descent", descents, ASTRAY),
        ("fit without a start", of(&cold), ASTRAY_COLD),
        ("fit from a neighbour", of(&near), ASTRAY),
    ];
    for (kind, count) in [
        ("fine", JUDGED),
        ("windowed", SPECTRA),
        ("unwindowed", JUDGED),
    ] {
        let theirs = scipy.fit(kind, 0..count).answers;
        let values: Vec<[f64; FREE]> = theirs.iter().map(|answer| answer.values).collect();
        let theirs_judged = scipy.judge(&values);
        for (way, ours, astray) in &ways {
            let values: Vec<[f64; FREE]> = ours[..count].iter().map(|answer| answer.0).collect();
            let ours_judged = scipy.judge(&values);
            let mut agreement = Agreement::default();
            for (spectrum, answer) in theirs.iter().enumerate() {
                let judged = (ours_judged[spectrum], theirs_judged[spectrum]);
                agreement.add(&ours[spectrum], judged, answer, &sigma);
            }
            agreement.report(
                &format!("{way}, SciPy {kind}"),
                kind == "fine",
                *astray,
                missed,
            );
        }
    }
    cold
}

/// How near the answers are to SciPy's.
#[derive(Default)]
struct Agreement {
    count: usize,
    /// In another minimum than SciPy: with the smaller chi-square, with the larger.
    better: usize,
    worse: usize,
    /// Largest relative difference of chi-square among the others, each by its own model, and both by SciPy's finest.
    chi_square: f64,
    judged: f64,
    sigmas: f64,
}

impl Agreement {
    fn add(
        &mut self,
        (values, chi_square): &([f64; FREE], f64),
        judged: (f64, f64),
        theirs: &Answer,
        sigma: &[f64; FREE],
    ) {
        self.count += 1;
        // Two minima of one spectrum differ by far more than the two programmes do in one minimum.
        let off = judged.0 - judged.1;
        if off.is_nan() || off.abs() > 0.1 {
            *(if off < 0.0 {
                &mut self.better
            } else {
                &mut self.worse
            }) += 1;
            return;
        }
        self.judged = self.judged.max(off.abs() / judged.1);
        let own = (chi_square / theirs.chi_square - 1.0).abs();
        self.chi_square = self.chi_square.max(own);
        for i in 0..FREE {
            let off = ((values[i] - theirs.values[i]) / sigma[i]).abs();
            self.sigmas = self.sigmas.max(off);
        }
    }

    fn report(&self, what: &str, is_judge: bool, astray: f64, missed: &mut Vec<String>) {
        println!(
            "{what:38} chi-square within {:.1e} (own models {:.1e}), values within {:.1e} sigma; elsewhere {} better, {} worse of {}",
            self.judged, self.chi_square, self.sigmas, self.better, self.worse, self.count
        );
        if self.judged > SAME_CHI_SQUARE || self.sigmas > SAME_VALUE_SIGMAS {
            missed.push(format!(
                "{what}: chi-square differs by {:.1e}, values by {:.1e} sigma",
                self.judged, self.sigmas
            ));
        }
        if is_judge && self.chi_square > SAME_CHI_SQUARE {
            missed.push(format!(
                "{what}: chi-square by the own models differs by {:.1e}",
                self.chi_square
            ));
        }
        if self.worse as f64 > astray * self.count as f64 {
            missed.push(format!("{what}: {} of {} astray", self.worse, self.count));
        }
    }
}

/// The answer that a map would have at hand for a spectrum.
fn before(fits: &[Fit], spectrum: usize) -> &Fit {
    &fits[(spectrum + SPECTRA - 1) % SPECTRA]
}

fn race(case: &Case, near: &[Fit], scipy: &mut SciPy, missed: &mut Vec<String>) {
    let mut worker = Worker::new(case);
    let mut parameters = case.truth.clone();
    let mut ours: [Vec<f64>; 4] = Default::default();
    let mut theirs: [Vec<f64>; 2] = Default::default();
    let mut ratios: [Vec<f64>; 2] = Default::default();
    let mut laps = [0.0; 2];
    let mut evaluations = 0;
    for round in 0..ROUNDS {
        for (kind, (name, count)) in [("windowed", WINDOWED), ("unwindowed", UNWINDOWED)]
            .into_iter()
            .enumerate()
        {
            let first = round * WINDOWED % (SPECTRA - WINDOWED);
            let lap = scipy.fit(name, first..first + count);
            theirs[kind].push(lap.ns_a_spectrum);
            laps[kind] += lap.evaluations / ROUNDS as f64;
        }
        ours[0].push(worker.evaluate());
        evaluations = 0;
        ours[1].push(time(SPECTRA, |spectrum| {
            evaluations += worker.descend(spectrum, &mut parameters).evaluations;
        }));
        ours[2].push(time(COLD, |spectrum| {
            black_box(worker.fit(spectrum, None));
        }));
        ours[3].push(time(SPECTRA, |spectrum| {
            black_box(worker.fit(spectrum, Some(before(near, spectrum))));
        }));
        for kind in 0..2 {
            ratios[kind].push(theirs[kind][round] / ours[1][round]);
        }
    }
    let [evaluation, descent, cold, neighbour] = ours.map(median);
    let [windowed, unwindowed] = theirs.map(median);
    let [windowed_ratio, unwindowed_ratio] = ratios.map(median);
    println!(
        "(a) model, Jacobian, normal equations {:9.2} us",
        evaluation * 1e-3
    );
    println!(
        "(b) descent from a perturbed start    {:9.2} us a spectrum, {:.2} evaluations, {:.0} a second",
        descent * 1e-3,
        f64::from(evaluations) / SPECTRA as f64,
        1e9 / descent
    );
    println!(
        "(c) fit without a start               {:9.2} us a spectrum, {:.0} a second",
        cold * 1e-3,
        1e9 / cold
    );
    println!(
        "(d) fit from a neighbour's answer     {:9.2} us a spectrum, {:.0} a second",
        neighbour * 1e-3,
        1e9 / neighbour
    );
    println!(
        "    SciPy, windowed                   {:9.2} us a spectrum, {:.1} evaluations: (b) is {windowed_ratio:.0} times faster",
        windowed * 1e-3,
        laps[0]
    );
    println!(
        "    SciPy, unwindowed                 {:9.2} us a spectrum, {:.1} evaluations: (b) is {unwindowed_ratio:.0} times faster",
        unwindowed * 1e-3,
        laps[1]
    );
    for (what, ratio, target) in [
        ("times SciPy windowed", windowed_ratio, WINDOWED_TARGET),
        (
            "times SciPy unwindowed",
            unwindowed_ratio,
            UNWINDOWED_TARGET,
        ),
        ("descents a second", 1e9 / descent, PER_SECOND_TARGET),
        (
            "fits a second from a neighbour",
            1e9 / neighbour,
            PER_SECOND_TARGET,
        ),
    ] {
        if ratio < target {
            missed.push(format!("{ratio:.0} {what}, target {target}"));
        }
    }
}

/// The same work on one core and on two at once.
fn two_cores(case: &Case, near: &[Fit], missed: &mut Vec<String>) {
    const REPEATS: usize = 5;
    let run = |threads: usize| -> (f64, f64) {
        let began = Instant::now();
        let spent: f64 = std::thread::scope(|scope| {
            let workers: Vec<_> = (0..threads)
                .map(|_| {
                    scope.spawn(|| {
                        let mut worker = Worker::new(case);
                        time(REPEATS * SPECTRA, |k| {
                            let spectrum = k % SPECTRA;
                            black_box(worker.fit(spectrum, Some(before(near, spectrum))));
                        })
                    })
                })
                .collect();
            workers.into_iter().map(|w| w.join().unwrap()).sum()
        });
        let done = (threads * REPEATS * SPECTRA) as f64;
        (done / began.elapsed().as_secs_f64(), spent / threads as f64)
    };
    let (mut wall, mut processor) = (Vec::new(), Vec::new());
    for _ in 0..ROUNDS {
        let (one, two) = (run(1), run(2));
        wall.push(two.0 / one.0);
        processor.push(2.0 * one.1 / two.1);
    }
    let (wall, processor) = (median(wall), median(processor));
    println!(
        "(d) on two cores                      {wall:9.2} times by the wall, {processor:.2} by processor time; load {}",
        load()
    );
    if wall < TWO_CORES_TARGET {
        missed.push(format!(
            "two cores give {wall:.2} times one, target {TWO_CORES_TARGET}; is the machine quiet?"
        ));
    }
}

/// Nanoseconds of processor time of this thread that `work` takes, a repetition.
fn time(repetitions: usize, mut work: impl FnMut(usize)) -> f64 {
    let began = processor_ns();
    for k in 0..repetitions {
        work(k);
    }
    (processor_ns() - began) / repetitions as f64
}

fn processor_ns() -> f64 {
    let time = rustix::time::clock_gettime(rustix::time::ClockId::ThreadCPUTime);
    time.tv_sec as f64 * 1e9 + time.tv_nsec as f64
}

fn load() -> String {
    let text = std::fs::read_to_string("/proc/loadavg").unwrap_or_default();
    text.split(' ').next().unwrap_or("unknown").to_owned()
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}
