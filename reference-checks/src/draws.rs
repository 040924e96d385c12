//! Noisy spectra of a truth and their fits, the same every time.

use crate::case::Case;
use crate::chance::Chance;
use backlit_inverse::{Ask, Fit, Observation, Problem};

/// A truth by the plain reference model, a question, and noise.
pub struct Draws {
    /// The question on the channels of the truth.
    pub problem: Problem,
    /// The spectrum without noise.
    pub exact: Vec<f64>,
    /// One standard deviation of every channel.
    pub noise: f64,
}

impl Draws {
    /// * `signal_to_noise`: largest value of the exact spectrum over the noise of a channel.
    pub fn new(truth: &Case, question: &Case, signal_to_noise: f64) -> Draws {
        let exact = truth.observe_plainly();
        Draws {
            problem: question.problem(),
            noise: exact.iter().copied().fold(0.0, f64::max) / signal_to_noise,
            exact,
        }
    }

    /// * `bare`: the truth without its gas.
    /// * `sigmas`: how far the deepest line stands out of the noise of a channel.
    pub fn of_lines(truth: &Case, bare: &Case, question: &Case, sigmas: f64) -> Draws {
        let exact = truth.observe_plainly();
        let deepest = exact
            .iter()
            .zip(bare.observe_plainly())
            .map(|(with, without)| (with - without).abs())
            .fold(0.0, f64::max);
        Draws {
            problem: question.problem(),
            noise: deepest / sigmas,
            exact,
        }
    }

    /// One spectrum more.
    pub fn spectrum(&self, chance: &mut Chance) -> Vec<f64> {
        self.exact
            .iter()
            .map(|value| value + self.noise * chance.normal())
            .collect()
    }

    /// Hands a spectrum over with the noise that it has.
    pub fn observe<T>(&self, intensity: &[f64], see: impl FnOnce(&Observation<'_>) -> T) -> T {
        see(&Observation {
            intensity,
            uncertainty: Some(&vec![self.noise; intensity.len()]),
            mask: &vec![false; intensity.len()],
        })
    }

    /// Fits of `count` spectra.
    pub fn fits(&self, count: usize, seed: u64, ask: &Ask<'_>) -> Vec<Fit> {
        let mut chance = Chance::new(seed);
        let mut workspace = self.problem.workspace();
        (0..count)
            .map(|_| {
                let intensity = self.spectrum(&mut chance);
                self.observe(&intensity, |data| {
                    self.problem.fit_with(&mut workspace, data, ask)
                })
            })
            .collect()
    }
}

/// Whether the long tests are asked for: the environment says `BACKLIT_LONG=1`.
pub fn long() -> bool {
    std::env::var("BACKLIT_LONG").is_ok_and(|value| value == "1")
}
