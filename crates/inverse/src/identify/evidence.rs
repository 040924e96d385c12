//! What a pattern is worth: the logarithm of how much better it foretells the peaks than chance does.

use super::map::{BLENDED, CLASS_EDGES, CLASSES, CODES, Map, OUTSIDE, STRETCHES};
use super::pattern::{Pattern, STEPS, STEPS_PER_OCTAVE};

/// Share of lines whose height has nothing to do with what was expected: wrong A, another line on top.
const STRANGE: f64 = 0.08;
/// Spread of ln height about the expectation, and the share of lines that have it: thermal gas, then gas that is not.
const SPREADS: [(f64, f64); 2] = [(0.35, 0.62), (1.3, 0.30)];

/// Logarithm of the likelihood ratio of a line, by expected height and by what is found.
#[derive(Debug, Clone)]
pub struct Worth {
    rows: Vec<[f32; CODES]>,
}

/// Probability of each class of height for a line expected at each step; shared by all spectra.
#[derive(Debug, Clone)]
pub struct Expectation {
    rows: Vec<[f64; CLASSES]>,
}

impl Expectation {
    /// Normal noise on a log-normal height.
    pub fn of_normal_noise() -> Expectation {
        let rows = (0..STEPS)
            .map(|step| {
                let expected = (step as f64 / STEPS_PER_OCTAVE).exp2();
                let mut row = [0.0; CLASSES];
                for (spread, share) in SPREADS {
                    const POINTS: usize = 61;
                    let weight = |u: f64| (-0.5 * u * u).exp();
                    let grid = |i: usize| 6.0 * (i as f64 / (POINTS - 1) as f64) - 3.0;
                    let norm: f64 = (0..POINTS).map(|i| weight(grid(i))).sum();
                    for i in 0..POINTS {
                        let u = grid(i);
                        let height = expected * (spread * u).exp();
                        let mut below = 0.0;
                        for (c, cell) in row.iter_mut().enumerate() {
                            let upper = CLASS_EDGES.get(c).map_or(1.0, |edge| {
                                0.5 * libm::erfc((height - edge) / std::f64::consts::SQRT_2)
                            });
                            *cell += share * weight(u) / norm * (upper - below).max(0.0);
                            below = upper;
                        }
                    }
                }
                row
            })
            .collect();
        Expectation { rows }
    }

    /// The worth of lines against the chances of a map.
    pub fn worth(&self, map: &Map) -> Worth {
        let shares: f64 = SPREADS.iter().map(|s| s.1).sum();
        let rows = self
            .rows
            .iter()
            .map(|row| {
                let mut out = [0.0_f32; CODES];
                for stretch in 0..STRETCHES {
                    for (c, expected) in row.iter().enumerate() {
                        let code = stretch * CLASSES + c;
                        let chance = map.chance[code];
                        let there = expected * (1.0 - STRANGE) / shares + STRANGE * chance;
                        out[code] = (there / chance).ln() as f32;
                    }
                }
                out[usize::from(BLENDED)] = 0.0;
                out[usize::from(OUTSIDE)] = 0.0;
                out
            })
            .collect();
        Worth { rows }
    }
}

impl Worth {
    /// The worth of one line.
    pub fn of(&self, step: usize, code: u8) -> f64 {
        f64::from(self.rows[step][usize::from(code)])
    }
}

/// The best that a species makes of a map.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Best {
    /// Evidence in nats.
    pub evidence: f64,
    /// Which pattern.
    pub pattern: usize,
    /// Step of the strongest line's expected height.
    pub top: usize,
    /// Shift in cells.
    pub shift: i32,
}

impl Best {
    /// Nothing found.
    pub const NONE: Best = Best {
        evidence: f64::NEG_INFINITY,
        pattern: 0,
        top: 0,
        shift: 0,
    };
}

/// The lowest step of a strongest line: 2.8 sigma.
const LOWEST_TOP: usize = 3;

/// Searches patterns, heights and the given shifts. `place` moves each rest cell (the identity for the real thing).
pub fn search(
    map: &Map,
    worth: &Worth,
    patterns: &[Pattern],
    shifts: &[i32],
    highest_top: usize,
    place: &impl Fn(i32) -> i32,
    each: &mut impl FnMut(usize, f64),
) -> Best {
    let mut best = Best::NONE;
    let mut found: Vec<(u8, u8)> = Vec::new();
    for (nth, &shift) in shifts.iter().enumerate() {
        let mut here = f64::NEG_INFINITY;
        for (index, pattern) in patterns.iter().enumerate() {
            found.clear();
            found.extend(pattern.lines.iter().filter_map(|line| {
                let code = map.at(place(line.cell) + shift);
                (code < BLENDED).then_some((line.below, code))
            }));
            if found.is_empty() {
                continue;
            }
            for top in LOWEST_TOP..=highest_top {
                let mut sum = 0.0_f32;
                for &(below, code) in &found {
                    let below = usize::from(below);
                    if below > top {
                        break;
                    }
                    sum += worth.rows[top - below][usize::from(code)];
                }
                let sum = f64::from(sum);
                here = here.max(sum);
                if sum > best.evidence {
                    best = Best {
                        evidence: sum,
                        pattern: index,
                        top,
                        shift,
                    };
                }
            }
        }
        each(nth, here);
    }
    best
}
