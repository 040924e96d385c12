//! What one line costs, and how exact it is, whatever the ratio of its width to that of the line-spread function.
//!
//! `cargo bench -p backlit-forward --bench instrument` prints a table and exits with 1 where a target is missed. The error is that of the
//! fast model against the plain one ([`oracle`]) relative to the deepest channel; the cost that of the line in an evaluation with all
//! derivatives: with the line minus without, processor time.

#![allow(clippy::print_stdout, clippy::print_stderr, clippy::unwrap_used)]

use std::f64::consts::PI;
use std::hint::black_box;
use std::sync::Arc;

use backlit_forward::transition::Transition;
use backlit_forward::{
    Background, Channels, Cloud, Engine, Evaluation, Layout, LineSpread, Sightline, oracle, voigt,
};
use backlit_species::{Grade, Kind, Level, Line, Species};
use backlit_units::constants::{ATOMIC_MASS_KG, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};

const CHANNELS: usize = 512;
const CHANNELS_PER_FWHM: f64 = 2.5;
const CENTRE_M: f64 = 500e-9;
const FWHM_M: f64 = 0.02e-9;
/// 1/e half-width over FWHM.
const WIDTHS: [f64; 11] = [
    1e-3, 3e-3, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 100.0,
];
const DEPTHS: [f64; 4] = [0.01, 1.0, 100.0, 1e4];
/// Damping parameter: without wings, and with such as strong resonance lines have.
const DAMPINGS: [f64; 2] = [0.0, 1e-3];
const TOLERANCE: f64 = 1e-5;
/// Dearest line over the cheapest one of the same depth, of those that the line-spread function widens.
const SPREAD_TARGET: f64 = 2.0;
/// Places of the line within a channel at which the error is taken.
const PLACES: usize = 3;
const ROUNDS: usize = 11;
const REPEATS: usize = 50;

fn main() {
    // `cargo test --benches` runs this too, without the argument: nothing to measure then.
    if !std::env::args().any(|argument| argument == "--bench") {
        return;
    }
    println!(
        "one line on {CHANNELS} channels, {CHANNELS_PER_FWHM} a FWHM; channels: those that it changes by more than 1e-5 of its depth"
    );
    println!(
        "{:>8} {:>8} {:>8} {:>9} {:>9} {:>9}",
        "tau0", "damping", "b/FWHM", "channels", "us", "error"
    );
    let mut missed = Vec::new();
    for damping in DAMPINGS {
        for depth in DEPTHS {
            let (mut costs, mut fewest) = (Vec::new(), CHANNELS);
            for width in WIDTHS {
                let scene = Scene::new(width, depth, damping);
                let (error, touched) = scene.error();
                let us = scene.cost() * 1e-3;
                println!("{depth:8} {damping:8} {width:8} {touched:9} {us:9.2} {error:9.1e}");
                if error > TOLERANCE {
                    missed.push(format!(
                        "tau0 {depth}, damping {damping}, b/FWHM {width}: error {error:.1e}, target {TOLERANCE:e}"
                    ));
                }
                // A line that is wider than the line-spread function has more channels to pay for.
                fewest = fewest.min(touched);
                if touched <= 2 * fewest {
                    costs.push(us);
                }
            }
            let (least, most) = costs.iter().fold((f64::INFINITY, 0.0_f64), |(l, m), &us| {
                (l.min(us), m.max(us))
            });
            println!(
                "{depth:8} {damping:8} dearest over cheapest of {} lines that the instrument widens: {:.2}",
                costs.len(),
                most / least
            );
            if most > SPREAD_TARGET * least {
                missed.push(format!(
                    "tau0 {depth}, damping {damping}: the dearest line costs {:.2} times the cheapest, target {SPREAD_TARGET}",
                    most / least
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

/// One cloud with one line in the middle of the data.
struct Scene {
    sightline: Sightline,
    parameters: Vec<f64>,
}

impl Scene {
    fn new(width: f64, depth: f64, damping: f64) -> Scene {
        let b_m_per_s = width * FWHM_M / CENTRE_M * SPEED_OF_LIGHT_M_PER_S;
        let frequency_hz = SPEED_OF_LIGHT_M_PER_S / CENTRE_M;
        let doppler_hz = frequency_hz * b_m_per_s / SPEED_OF_LIGHT_M_PER_S;
        let line = Line {
            wavelength_vac_m: CENTRE_M,
            a_ki_per_s: 1e7,
            e_lower_j: 0.0,
            e_upper_j: PLANCK_J_S * frequency_hz,
            g_lower: 2.0,
            g_upper: 4.0,
            gamma_per_s: damping * 4.0 * PI * doppler_hz,
            grade: Grade::default(),
            source: "invented".into(),
            kind: Kind::default(),
        };
        let transition = Transition::new(&line, 0);
        let levels = vec![Level {
            g: 2.0,
            energy_j: 0.0,
        }];
        let species = Species::new("Xx I", 23.0 * ATOMIC_MASS_KG, vec![line], levels);
        let channel_m = FWHM_M / CHANNELS_PER_FWHM;
        let edges: Vec<f64> = (0..=CHANNELS)
            .map(|k| CENTRE_M + (k as f64 - 0.5 * CHANNELS as f64) * channel_m)
            .collect();
        let gas_k = 2500.0_f64;
        let sightline = Sightline {
            channels: Channels::new(&edges, &[true; CHANNELS]),
            line_spread: LineSpread::Fwhm { fwhm_m: FWHM_M },
            background: Background::Blackbody { shape_terms: 0 },
            clouds: vec![Cloud {
                species: vec![Arc::new(species)],
                own_doppler_temperature: true,
            }],
            tolerance: TOLERANCE,
        };
        let layout = sightline.layout();
        let cloud = layout.clouds[0];
        let mut parameters = vec![0.0; layout.len()];
        parameters[Layout::BACKGROUND_TEMPERATURE] = 5000.0_f64.ln();
        parameters[Layout::DILUTION] = 1.0;
        parameters[cloud.temperature()] = gas_k.ln();
        // The width is that of the turbulence alone.
        parameters[cloud.doppler_temperature()] = 1e-6_f64.ln();
        parameters[cloud.turbulence_squared()] = b_m_per_s.powi(2);
        let (cross_section, _) = transition.integrated_cross_section(gas_k, 2.0_f64.ln(), 0.0);
        let at_centre = voigt::scalar::w(0.0, damping).0 / (PI.sqrt() * doppler_hz);
        parameters[cloud.column(0)] = (depth / (cross_section * at_centre)).ln();
        Scene {
            sightline,
            parameters,
        }
    }

    /// The same with its line moved by a part of a channel.
    fn moved(&self, channels: f64) -> Vec<f64> {
        let mut parameters = self.parameters.clone();
        let channel_m = FWHM_M / CHANNELS_PER_FWHM;
        parameters[self.sightline.layout().clouds[0].velocity()] =
            channels * channel_m / CENTRE_M * SPEED_OF_LIGHT_M_PER_S;
        parameters
    }

    /// The same without gas.
    fn bare(&self) -> Vec<f64> {
        let mut parameters = self.parameters.clone();
        parameters[self.sightline.layout().clouds[0].column(0)] = -700.0;
        parameters
    }

    fn engine(&self) -> (Engine, Evaluation) {
        let cloud = self.sightline.layout().clouds[0];
        let free = [
            Layout::BACKGROUND_TEMPERATURE,
            cloud.temperature(),
            cloud.velocity(),
            cloud.turbulence_squared(),
            cloud.column(0),
        ];
        let (mut low, mut high) = (self.parameters.clone(), self.parameters.clone());
        for (parameter, off) in free.into_iter().zip([0.3, 0.3, 1e5, 0.0, 1.0]) {
            low[parameter] -= off;
            high[parameter] += off;
        }
        let engine = Engine::new(self.sightline.clone(), &low, &high);
        let evaluation = engine.evaluation(&free);
        (engine, evaluation)
    }

    /// Largest error relative to the deepest channel, and channels that see the line.
    fn error(&self) -> (f64, usize) {
        let (engine, mut evaluation) = self.engine();
        let bare = oracle::observed(&self.sightline, &self.bare());
        let (mut error, mut touched) = (0.0_f64, 0);
        for place in 0..PLACES {
            let parameters = self.moved(place as f64 / PLACES as f64 + 0.1);
            engine.evaluate(&mut evaluation, &parameters);
            let plain = oracle::observed(&self.sightline, &parameters);
            let changes = || {
                plain
                    .iter()
                    .zip(&bare)
                    .map(|(with, without)| (with - without).abs())
            };
            let deepest = changes().fold(0.0, f64::max);
            touched = changes().filter(|&change| change > 1e-5 * deepest).count();
            for (channel, value) in plain.iter().enumerate() {
                error = error.max((evaluation.value(channel) - value).abs() / deepest);
            }
        }
        (error, touched)
    }

    /// Nanoseconds that the line adds to an evaluation with derivatives.
    fn cost(&self) -> f64 {
        let (engine, mut evaluation) = self.engine();
        let places: Vec<Vec<f64>> = (0..REPEATS)
            .map(|k| self.moved(k as f64 / REPEATS as f64))
            .collect();
        let bare = self.bare();
        let mut time = |with: bool| {
            let began = processor_ns();
            for place in &places {
                let parameters = if with { place } else { &bare };
                engine.evaluate(&mut evaluation, black_box(parameters));
                black_box(evaluation.value(0));
            }
            (processor_ns() - began) / REPEATS as f64
        };
        let mut differences: Vec<f64> = (0..ROUNDS).map(|_| time(true) - time(false)).collect();
        differences.sort_by(f64::total_cmp);
        differences[ROUNDS / 2]
    }
}

fn processor_ns() -> f64 {
    let time = rustix::time::clock_gettime(rustix::time::ClockId::ThreadCPUTime);
    time.tv_sec as f64 * 1e9 + time.tv_nsec as f64
}
