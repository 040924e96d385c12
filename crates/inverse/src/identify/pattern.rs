//! How strong the lines of a species are beside each other, at several temperatures and thicknesses.

use super::continuum::Flattened;
use super::features::Features;
use super::map::Grid;
use backlit_forward::planck::radiance;
use backlit_species::Species;
use backlit_units::constants::{BOLTZMANN_J_PER_K, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};

/// Excitation temperatures that are tried, K.
pub const TEMPERATURES_K: [f64; 7] = [300.0, 1000.0, 2000.0, 3500.0, 6000.0, 10_000.0, 18_000.0];
/// Optical depths of the strongest line that are tried: thin, and on the flat part of the curve of growth.
const DEPTHS: [f64; 2] = [0.01, 200.0];
/// Steps of expected height: two to an octave.
pub const STEPS_PER_OCTAVE: f64 = 2.0;
/// Steps of expected height, the first at 1 sigma.
pub const STEPS: usize = 30;
/// Lines weaker than the strongest by more than this many steps are left out.
const DEEPEST: f64 = 16.0;
/// Lines of a pattern, the strongest ones.
const MOST_LINES: usize = 70;

/// A line of a pattern, or several that the instrument cannot tell apart.
#[derive(Debug, Clone, Copy)]
pub struct PatternLine {
    /// Where it lies at rest.
    pub cell: i32,
    /// Steps below the strongest line, by signal-to-noise.
    pub below: u8,
    /// Index of its strongest component among the species' lines.
    pub line: u32,
}

/// Relative strengths at one temperature and thickness.
#[derive(Debug, Clone)]
pub struct Pattern {
    /// Excitation temperature, K.
    pub temperature_k: f64,
    /// The lines, strongest first.
    pub lines: Vec<PatternLine>,
}

/// Equivalent width over Doppler width of a line of central depth `depth`.
///
/// `√π τ / (1 + τ/2√2)` below 1.25393, `2 √(ln(τ/ln 2))` above. Source: Draine (2011), Physics of the Interstellar
/// and Intergalactic Medium, eq. 9.27, without its damping term; within 2 %, from memory.
fn growth(depth: f64) -> f64 {
    const JOINT: f64 = 1.253_93;
    if depth < JOINT {
        std::f64::consts::PI.sqrt() * depth / (1.0 + depth / (2.0 * std::f64::consts::SQRT_2))
    } else {
        2.0 * (depth / std::f64::consts::LN_2).ln().sqrt()
    }
}

/// The patterns of a species within the data; `bright`: seen in emission.
///
/// Heights of unresolved lines over the noise of a peak: equivalent width over instrument width times what a wide
/// opaque line would show, the light behind it (dark lines) or the black body of the gas (bright ones).
pub fn patterns(
    species: &Species,
    centres_m: &[f64],
    flattened: &Flattened,
    features: &Features,
    grid: &Grid,
    bright: bool,
) -> Vec<Pattern> {
    let inside = species.lines_between(centres_m[0], centres_m[centres_m.len() - 1]);
    let Some(first) = inside.first() else {
        return Vec::new();
    };
    let offset = species
        .lines
        .partition_point(|l| l.wavelength_vac_m < first.wavelength_vac_m);
    // (cell, index, noise-weighted factor) of each line; lines without a usable channel drop out.
    let places: Vec<(i32, usize, f64)> = inside
        .iter()
        .enumerate()
        .filter_map(|(index, line)| {
            let cell = grid.cell(line.wavelength_vac_m);
            let channel = *grid.channel.get(usize::try_from(cell).ok()?)?;
            let k = (channel.round() as usize).min(centres_m.len() - 1);
            let sigma = flattened.sigma[k] * features.gain[k];
            if !sigma.is_finite() {
                return None;
            }
            let neighbour = if k + 1 < centres_m.len() { k } else { k - 1 };
            let width_m =
                (centres_m[neighbour + 1] - centres_m[neighbour]) * features.fwhm_channels[k];
            let light = if bright {
                1.0
            } else {
                flattened.continuum[k].max(0.0)
            };
            Some((
                cell,
                index,
                light * line.wavelength_vac_m / (width_m * sigma),
            ))
        })
        .collect();
    let mut out: Vec<Pattern> = Vec::new();
    for temperature_k in TEMPERATURES_K {
        let kt = BOLTZMANN_J_PER_K * temperature_k;
        let ln_depth: Vec<f64> = places
            .iter()
            .map(|&(_, index, _)| {
                let line = &inside[index];
                let photon = PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / (line.wavelength_vac_m * kt);
                (line.g_upper * line.a_ki_per_s).ln() + 3.0 * line.wavelength_vac_m.ln()
                    - line.e_lower_j / kt
                    + (-(-photon).exp()).ln_1p()
            })
            .collect();
        let thickest = ln_depth.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        for depth in DEPTHS {
            let heights: Vec<(i32, usize, f64)> = places
                .iter()
                .zip(&ln_depth)
                .map(|(&(cell, index, factor), ln)| {
                    let source = if bright {
                        radiance(inside[index].wavelength_vac_m, temperature_k)
                    } else {
                        1.0
                    };
                    (
                        cell,
                        index,
                        source * factor * growth(depth * (ln - thickest).exp()),
                    )
                })
                .collect();
            let lines = merged(grid, &heights, offset);
            if lines.is_empty() || out.last().is_some_and(|last| same(&last.lines, &lines)) {
                continue;
            }
            out.push(Pattern {
                temperature_k,
                lines,
            });
        }
    }
    out
}

fn same(one: &[PatternLine], other: &[PatternLine]) -> bool {
    one.len() == other.len()
        && one
            .iter()
            .zip(other)
            .all(|(a, b)| a.cell == b.cell && a.below.abs_diff(b.below) <= 1)
}

/// Joins what the instrument cannot tell apart and keeps the strongest.
fn merged(grid: &Grid, heights: &[(i32, usize, f64)], offset: usize) -> Vec<PatternLine> {
    let strongest = heights.iter().map(|h| h.2).fold(0.0, f64::max);
    if !(strongest > 0.0 && strongest.is_finite()) {
        return Vec::new();
    }
    let weakest = strongest * (-DEEPEST / STEPS_PER_OCTAVE).exp2();
    // Start cell, strongest (cell, index, height), sum.
    let mut groups: Vec<(i32, (i32, usize, f64), f64)> = Vec::new();
    for &(cell, index, height) in heights.iter().filter(|h| h.2 > 0.25 * weakest) {
        let apart = i32::from(grid.apart[cell as usize]);
        match groups.last_mut() {
            Some((start, top, sum)) if cell - *start < apart => {
                *sum += height;
                if height > top.2 {
                    *top = (cell, index, height);
                }
            }
            _ => groups.push((cell, (cell, index, height), height)),
        }
    }
    let top = groups.iter().map(|g| g.2).fold(0.0, f64::max);
    let mut lines: Vec<PatternLine> = groups
        .iter()
        .filter_map(|&(_, (cell, index, _), sum)| {
            let below = STEPS_PER_OCTAVE * (top / sum).log2();
            (below < DEEPEST).then_some(PatternLine {
                cell,
                below: below.round() as u8,
                line: (offset + index) as u32,
            })
        })
        .collect();
    lines.sort_by_key(|line| line.below);
    lines.truncate(MOST_LINES);
    lines
}
