//! Temperature, width and columns from the areas of the lines, by the curve of growth on a grid.

use super::filter::{Filtered, strongest};
use super::velocity::contrast;
use crate::problem::Problem;
use backlit_forward::sightline::CloudLayout;
use backlit_forward::transition::{Transition, doppler_width_squared};
use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;
use backlit_units::doppler::wavelength_factor;

/// Lines that the search looks at.
const LINES: usize = 48;
/// Temperatures, widths and columns of the grid.
const TEMPERATURES: usize = 16;
const WIDTHS: usize = 4;
const COLUMNS: usize = 20;
/// States of one cloud that are followed.
const KEPT: usize = 4;
/// Error of the grid itself, relative to a line's area.
const GRID_ERROR: f64 = 0.05;

/// Temperatures of a cloud within its bounds, evenly in the logarithm; one if it is known.
pub fn temperatures_k(problem: &Problem, base: &[f64], cloud: usize, count: usize) -> Vec<f64> {
    let (low, high) = problem.range_of(problem.engine.layout().clouds[cloud].temperature(), base);
    if high <= low {
        return vec![low.exp()];
    }
    (0..count)
        .map(|k| (low + (high - low) * (k as f64 + 0.5) / count as f64).exp())
        .collect()
}

/// One point of the grid.
pub struct State {
    badness: f64,
    ln_temperature: f64,
    turbulence_squared: f64,
    columns: Vec<f64>,
    /// Brighter or darker than the background.
    bright: bool,
}

impl State {
    /// Writes the state into a set of parameters.
    pub fn put(&self, place: &CloudLayout, parameters: &mut [f64]) {
        parameters[place.temperature()] = self.ln_temperature;
        parameters[place.turbulence_squared()] = self.turbulence_squared;
        for (s, &column) in self.columns.iter().enumerate() {
            parameters[place.column(s)] = column;
        }
    }
}

/// Full sets of parameters for given velocities of the clouds; the best first.
pub fn candidates(
    problem: &Problem,
    filtered: &[Filtered],
    base: &[f64],
    velocities: &[f64],
) -> Vec<Vec<f64>> {
    let layout = problem.engine.layout();
    let mut sets = vec![base.to_vec()];
    for (cloud, (place, &velocity)) in layout.clouds.iter().zip(velocities).enumerate() {
        let states = search(problem, filtered, base, cloud, velocity);
        let mut longer = Vec::new();
        for state in &states {
            for set in &sets {
                let mut set = set.clone();
                set[place.velocity()] = velocity;
                state.put(place, &mut set);
                longer.push(set);
            }
        }
        // With every further cloud fewer combinations of each.
        longer.truncate(2 * KEPT);
        sets = longer;
    }
    sets
}

/// States of one cloud at a velocity, the best first.
pub fn search(
    problem: &Problem,
    filtered: &[Filtered],
    base: &[f64],
    cloud: usize,
    velocity: f64,
) -> Vec<State> {
    let place = problem.engine.layout().clouds[cloud];
    let sightline_cloud = &problem.engine.sightline().clouds[cloud];
    let species = &sightline_cloud.species;
    let factor = wavelength_factor(velocity);
    let temperatures = temperatures_k(problem, base, cloud, TEMPERATURES);
    let lines = strongest(problem, cloud, &temperatures, LINES);
    let (xi_low, xi_high) = problem.range_of(place.turbulence_squared(), base);
    let turbulences: Vec<f64> = if xi_high > xi_low {
        let floor = xi_low.max(1e-3 * xi_high);
        (0..WIDTHS)
            .map(|k| floor * (xi_high / floor).powf((k as f64 + 0.5) / WIDTHS as f64))
            .collect()
    } else {
        vec![xi_low]
    };
    let mut states = Vec::new();
    for &temperature_k in &temperatures {
        let figures: Vec<(f64, f64)> = lines
            .iter()
            .map(|line| {
                let q = species[line.species].partition_function(temperature_k);
                let cross = line.integrated_cross_section(temperature_k, q.ln_q, 0.0).0;
                (
                    cross,
                    contrast(problem, base, line.wavelength_vac_m * factor, temperature_k),
                )
            })
            .collect();
        let bright = figures.iter().map(|f| f.1).sum::<f64>() > 0.0;
        for &turbulence_squared in &turbulences {
            let kinetic_k = if sightline_cloud.own_doppler_temperature {
                base[place.doppler_temperature()].exp()
            } else {
                temperature_k
            };
            let mut badness = 0.0;
            let mut columns = Vec::new();
            for (s, species) in species.iter().enumerate() {
                let b =
                    doppler_width_squared(kinetic_k, species.mass_kg, turbulence_squared).sqrt();
                let filter = nearest(problem, filtered, b);
                let areas: Vec<Area> = lines
                    .iter()
                    .zip(&figures)
                    .filter(|(line, _)| line.species == s)
                    .filter_map(|(line, figures)| Area::new(filter, line, factor, b, *figures))
                    .collect();
                let (column, chi_square) = best_column(problem, &areas, place.column(s), base);
                columns.push(column);
                badness += chi_square;
            }
            states.push(State {
                badness,
                ln_temperature: temperature_k.ln(),
                turbulence_squared,
                columns,
                bright,
            });
        }
    }
    states.sort_by(|a, b| a.badness.total_cmp(&b.badness));
    diverse(states)
}

/// The area of one line in the data, and what fixes it in the model.
struct Area {
    found: f64,
    weight: f64,
    /// Optical depth at the centre of a unit column, before the damping.
    depth_per_column: f64,
    damping: f64,
    /// Area of a black line of one 1/e half-width.
    unit: f64,
}

impl Area {
    fn new(
        filter: &Filtered,
        line: &Transition,
        factor: f64,
        b: f64,
        (cross, contrast): (f64, f64),
    ) -> Option<Self> {
        let wavelength_m = line.wavelength_vac_m * factor;
        let (product, power) = filter.at(wavelength_m);
        if power <= 0.0 {
            return None;
        }
        let found = product / power;
        let doppler_hz = line.frequency_hz * b / SPEED_OF_LIGHT_M_PER_S;
        Some(Area {
            found,
            weight: 1.0 / (1.0 / power + (GRID_ERROR * found).powi(2)),
            depth_per_column: cross / (std::f64::consts::PI.sqrt() * doppler_hz),
            damping: line.gamma_per_s / (4.0 * std::f64::consts::PI * doppler_hz),
            unit: contrast * wavelength_m * b / SPEED_OF_LIGHT_M_PER_S,
        })
    }

    fn misfit(&self, column: f64) -> f64 {
        let depth = column * self.depth_per_column;
        self.weight * (self.found - self.unit * curve_of_growth(depth, self.damping)).powi(2)
    }
}

/// Equivalent width in units of the 1/e half-width (Draine 2011, eq. 9.27, with the damping part of eq. 9.24
/// added in square; good to 5 %: enough for a start).
fn curve_of_growth(depth: f64, damping: f64) -> f64 {
    let core = if depth < 1.254_393 {
        std::f64::consts::PI.sqrt() * depth / (1.0 + depth / (2.0 * std::f64::consts::SQRT_2))
    } else {
        2.0 * (depth / std::f64::consts::LN_2).ln().sqrt()
    };
    let wings = 2.0 * (std::f64::consts::PI.sqrt() * depth * damping).sqrt();
    if depth > 1.254_393 {
        core.hypot(wings)
    } else {
        core
    }
}

/// The column with the smallest misfit over a grid, then between its neighbours.
fn best_column(problem: &Problem, areas: &[Area], parameter: usize, base: &[f64]) -> (f64, f64) {
    let misfit = |ln_column: f64| {
        areas
            .iter()
            .map(|area| area.misfit(ln_column.exp()))
            .sum::<f64>()
    };
    let (low, high) = problem.range_of(parameter, base);
    let mut best = (low, misfit(low));
    if high > low {
        let mut width = (high - low) / COLUMNS as f64;
        for k in 1..=COLUMNS {
            let ln_column = low + width * k as f64;
            let value = misfit(ln_column);
            if value < best.1 {
                best = (ln_column, value);
            }
        }
        while width > 0.02 {
            for side in [best.0 - 0.5 * width, best.0 + 0.5 * width] {
                let side = side.clamp(low, high);
                let value = misfit(side);
                if value < best.1 {
                    best = (side, value);
                }
            }
            width *= 0.5;
        }
    }
    best
}

/// The filter whose width is nearest to that of a line.
fn nearest<'a>(problem: &Problem, filtered: &'a [Filtered], b: f64) -> &'a Filtered {
    let wavelength_m = problem.centres_m[problem.centres_m.len() / 2];
    let sightline = problem.engine.sightline();
    let blur = sightline
        .line_spread
        .sigma_m(wavelength_m)
        .hypot(sightline.channels.mean_width_m() / 12.0_f64.sqrt());
    let width = wavelength_m * b / SPEED_OF_LIGHT_M_PER_S * std::f64::consts::FRAC_1_SQRT_2;
    let sigma_m = blur.hypot(width);
    let mut best = &filtered[0];
    for filter in filtered {
        if (filter.sigma_m / sigma_m).ln().abs() < (best.sigma_m / sigma_m).ln().abs() {
            best = filter;
        }
    }
    best
}

/// The best state, the best on the other side of the background, and the best that differ from those.
fn diverse(states: Vec<State>) -> Vec<State> {
    let first_bright = states.first().is_some_and(|state| state.bright);
    let other = states.iter().position(|state| state.bright != first_bright);
    let mut kept: Vec<State> = Vec::new();
    for (rank, state) in states.into_iter().enumerate() {
        let far = |kept: &State| {
            let columns = kept
                .columns
                .iter()
                .zip(&state.columns)
                .map(|(a, b)| ((a - b) / 1.5).abs())
                .fold(0.0, f64::max);
            let temperature = ((kept.ln_temperature - state.ln_temperature) / 0.4).abs();
            temperature.max(columns) > 1.0
        };
        let wanted = Some(rank) == other || kept.iter().all(far);
        if wanted && (kept.len() < KEPT || Some(rank) == other) {
            kept.push(state);
        }
    }
    kept
}
