//! The lines at one point of the parameter space: where, how wide, how deep, and how that changes.

use super::{Engine, PeakDepth};
use crate::lanes::LANES;
use crate::nodes::Shape;
use crate::sightline::{FWHM_PER_SIGMA, Layout, Sightline};
use crate::transition::{Transition, doppler_width_squared};
use crate::voigt::{Damping, Full};
use backlit_units::constants::{BOLTZMANN_J_PER_K, SPEED_OF_LIGHT_M_PER_S};
use backlit_units::doppler::wavelength_factor;
use std::f64::consts::PI;

/// What the lines of a cloud have in common.
#[derive(Debug, Clone, Copy, Default)]
pub struct CloudState {
    pub temperature_k: f64,
    pub factor: f64,
    /// d ln(observed wavelength) / dv, in s/m.
    pub shift_per_velocity: f64,
    pub species: usize,
}

/// One line at the current point.
#[derive(Debug, Clone)]
pub struct LineState {
    pub cloud: usize,
    pub species: usize,
    pub centre_m: f64,
    /// Width over wavelength: b/c.
    pub relative_width: f64,
    /// Optical depth = depth × K(x, a).
    pub depth: f64,
    pub damping: Damping<Full>,
    /// d ln(cross-section)/d ln T of the excitation.
    pub excitation_slope: f64,
    /// d ln b / d ln T_D and d ln b / d ξ².
    pub width_by_temperature: f64,
    pub width_by_turbulence: f64,
    /// dx/dv at the centre.
    pub x_by_velocity: f64,
    pub own_doppler_temperature: bool,
    /// Upper bound of what it changes in any channel, relative to a black line that fills the channel.
    pub visibility: f64,
    pub shape: Shape,
}

impl LineState {
    pub fn peak_depth(&self) -> PeakDepth {
        PeakDepth {
            cloud: self.cloud,
            species: self.species,
            centre_m: self.centre_m,
            width_m: self.centre_m * self.relative_width,
            optical_depth: self.depth * crate::voigt::scalar::w(0.0, self.damping.y()).0,
        }
    }
}

/// Works out every line at a point. `states` and `lines` keep their room between calls.
pub fn update(
    engine: &Engine,
    parameters: &[f64],
    states: &mut Vec<CloudState>,
    lines: &mut Vec<LineState>,
) {
    states.clear();
    lines.clear();
    let line_spread = engine.sightline.line_spread;
    for (index, (cloud, place)) in engine
        .sightline
        .clouds
        .iter()
        .zip(&engine.layout.clouds)
        .enumerate()
    {
        let temperature_k = parameters[place.temperature()].exp();
        let kinetic_k = if cloud.own_doppler_temperature {
            parameters[place.doppler_temperature()].exp()
        } else {
            temperature_k
        };
        let velocity = parameters[place.velocity()];
        let beta = velocity / SPEED_OF_LIGHT_M_PER_S;
        let state = CloudState {
            temperature_k,
            factor: wavelength_factor(velocity),
            shift_per_velocity: 1.0 / (SPEED_OF_LIGHT_M_PER_S * (1.0 - beta * beta)),
            species: cloud.species.len(),
        };
        states.push(state);
        let mut current = None;
        for transition in &engine.transitions[index] {
            let s = transition.species;
            let species = match current {
                Some(species) if s == SpeciesState::index(&species) => species,
                _ => {
                    let partition = engine.partitions[index][s].ln_q_and_slope(temperature_k);
                    let mass_kg = cloud.species[s].mass_kg;
                    let width_squared = doppler_width_squared(
                        kinetic_k,
                        mass_kg,
                        parameters[place.turbulence_squared()],
                    );
                    SpeciesState {
                        index: s,
                        ln_q: partition.ln_q,
                        slope_q: partition.dlnq_dt_per_k * temperature_k,
                        ln_column: parameters[place.column(s)],
                        b: width_squared.sqrt(),
                        thermal_part: BOLTZMANN_J_PER_K * kinetic_k / mass_kg / width_squared,
                        width_by_turbulence: 0.5 / width_squared,
                    }
                }
            };
            current = Some(species);
            let relative_width = species.b / SPEED_OF_LIGHT_M_PER_S;
            let doppler_hz = transition.frequency_hz * relative_width;
            let (cross_section, slope) = transition.integrated_cross_section(
                temperature_k,
                species.ln_q - species.ln_column,
                species.slope_q,
            );
            let depth = cross_section / (PI.sqrt() * doppler_hz);
            if depth < 1e-14 {
                continue;
            }
            let damping = transition.gamma_per_s / (4.0 * PI * doppler_hz);
            let centre_m = transition.wavelength_vac_m * state.factor;
            let sigma = engine.blur_m(centre_m) / (centre_m * relative_width);
            lines.push(LineState {
                cloud: index,
                species: s,
                centre_m,
                relative_width,
                depth,
                damping: Damping::new(damping),
                excitation_slope: slope / cross_section,
                width_by_temperature: species.thermal_part,
                width_by_turbulence: species.width_by_turbulence,
                x_by_velocity: state.shift_per_velocity / relative_width,
                own_doppler_temperature: cloud.own_doppler_temperature,
                visibility: visibility(depth, damping, sigma),
                shape: Shape::rounded(relative_width, depth, damping),
            });
        }
    }
    let strongest = lines
        .iter()
        .fold(0.0_f64, |most, line| most.max(line.visibility));
    // Rounded, so that the reach of a line does not follow every small change of the strongest one.
    let floor = engine.sightline.tolerance * 0.2 * strongest.max(1e-300).log2().floor().exp2();
    let span = engine.sightline.channels.span_vac_m().unwrap_or((0.0, 0.0));
    lines.retain_mut(|line| {
        // The reach follows from the rounded shape, so that it adds few kinds of plans of its own.
        let width_m = line.centre_m * line.shape.relative_width();
        let (depth, damping) = (line.shape.rounded_depth(), line.shape.rounded_damping());
        let blur = engine.blur_m(line.centre_m) / width_m;
        let Some(reach) = reach(depth, damping, blur, floor) else {
            return false;
        };
        // Light further away than the line-spread function reaches from the last channel is not seen.
        let (first_m, last_m) = span;
        let away_m = (line.centre_m - first_m).max(last_m - line.centre_m);
        let seen = (away_m + 8.0 * line_spread.sigma_m(last_m)) / width_m;
        line.shape = line.shape.reaching(
            reach.min(seen.max(1.5)),
            line_spread.sigma_m(line.centre_m) / line.centre_m,
        );
        true
    });
}

#[derive(Clone, Copy)]
struct SpeciesState {
    index: usize,
    ln_q: f64,
    slope_q: f64,
    ln_column: f64,
    b: f64,
    thermal_part: f64,
    width_by_turbulence: f64,
}

impl SpeciesState {
    fn index(&self) -> usize {
        self.index
    }
}

/// Roughly what a line changes in its best channel: at most its depth, at most its equivalent width over
/// the width of the line-spread function (`sigma` in units of the 1/e half-width).
fn visibility(depth: f64, damping: f64, sigma: f64) -> f64 {
    let black = depth.min(1.0);
    let wings = (depth * damping).sqrt() * 2.0;
    let width = (2.0 * (1.0 + depth.max(1.0).ln())).sqrt() + wings;
    black * (width / (sigma * FWHM_PER_SIGMA)).min(1.0)
}

/// Distance in 1/e half-widths beyond which a line changes no channel by more than `floor`; `None` if it
/// never does.
fn reach(depth: f64, damping: f64, sigma: f64, floor: f64) -> Option<f64> {
    // Light taken from a stretch narrower than the line-spread function is spread over it.
    let diluted = (1.0 / sigma).min(1.0);
    let gaussian = depth * diluted / floor;
    if gaussian <= 1.0 {
        return None;
    }
    let wing = depth * damping / PI.sqrt();
    let local = (wing / floor).sqrt();
    let integrated = 2.0 * wing * diluted / floor;
    Some(gaussian.ln().sqrt().max(local.min(integrated)).max(1.5))
}

/// The lines that can change a channel in use anywhere between two corners of the parameter space.
pub fn relevant(
    sightline: &Sightline,
    layout: &Layout,
    low: &[f64],
    high: &[f64],
) -> Vec<Vec<Transition>> {
    let mut relevant = Vec::new();
    for (cloud, place) in sightline.clouds.iter().zip(&layout.clouds) {
        let mut kept = Vec::new();
        for (s, species) in cloud.species.iter().enumerate() {
            let ln_column = high[place.column(s)];
            let kinetic = if cloud.own_doppler_temperature {
                place.doppler_temperature()
            } else {
                place.temperature()
            };
            let width = |corner: &[f64]| {
                doppler_width_squared(
                    corner[kinetic].exp(),
                    species.mass_kg,
                    corner[place.turbulence_squared()],
                )
                .sqrt()
                    / SPEED_OF_LIGHT_M_PER_S
            };
            let (narrow, wide) = (width(low).max(1e-9), width(high));
            let temperatures_k: Vec<f64> = (0..=LANES)
                .map(|k| {
                    let part = k as f64 / LANES as f64;
                    (low[place.temperature()] * (1.0 - part) + high[place.temperature()] * part)
                        .exp()
                })
                .collect();
            let ln_q: Vec<f64> = temperatures_k
                .iter()
                .map(|&t| species.partition_function(t).ln_q)
                .collect();
            for line in &species.lines {
                let transition = Transition::new(line, s);
                let strongest = temperatures_k
                    .iter()
                    .zip(&ln_q)
                    .map(|(&t, ln_q)| {
                        transition
                            .integrated_cross_section(t, ln_q - ln_column, 0.0)
                            .0
                    })
                    .fold(0.0, f64::max);
                let doppler_hz = transition.frequency_hz * narrow;
                let depth = strongest / (PI.sqrt() * doppler_hz);
                let damping = transition.gamma_per_s / (4.0 * PI * doppler_hz);
                let floor = 0.01 * sightline.tolerance;
                if depth < floor {
                    continue;
                }
                let in_gaussian = (depth / floor).max(1.0).ln().sqrt() * wide;
                let in_wing = (depth * damping / PI.sqrt() / floor).sqrt() * narrow;
                let from = transition.wavelength_vac_m * wavelength_factor(low[place.velocity()]);
                let to = transition.wavelength_vac_m * wavelength_factor(high[place.velocity()]);
                let reach = to * in_gaussian.max(in_wing) + 7.0 * sightline.line_spread.sigma_m(to);
                let touches = sightline.channels.runs().iter().any(|run| {
                    let edges = sightline.channels.edges_of(run);
                    from - reach < edges[edges.len() - 1] && to + reach > edges[0]
                });
                if touches {
                    kept.push(transition);
                }
            }
        }
        relevant.push(kept);
    }
    relevant
}
