//! The residual through a matched filter: what a line at any wavelength would weigh.

use crate::problem::{Problem, Workspace};
use backlit_forward::transition::{Transition, doppler_width_squared};
use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;

/// Filtered residuals for one width of line, one value a channel.
///
/// For a line of unit area and shape K at a channel's centre, `product = Σ w r K` and `power = Σ w K²`:
/// its area is `product/power` with standard deviation `power^(-1/2)`.
pub struct Filtered {
    /// Standard deviation of the shape, in m.
    pub sigma_m: f64,
    centres_m: Vec<f64>,
    product: Vec<f64>,
    power: Vec<f64>,
}

/// Widths of the Gaussian filter worth trying: from the narrowest to the widest line that the bounds allow.
pub fn widths_m(problem: &Problem, base: &[f64]) -> Vec<f64> {
    let sightline = problem.engine.sightline();
    let wavelength_m = problem.centres_m[problem.centres_m.len() / 2];
    let channel_m = sightline.channels.mean_width_m();
    let blur = sightline
        .line_spread
        .sigma_m(wavelength_m)
        .hypot(channel_m / 12.0_f64.sqrt());
    let mut narrow = f64::INFINITY;
    let mut wide: f64 = 0.0;
    for (index, (cloud, place)) in sightline
        .clouds
        .iter()
        .zip(&problem.engine.layout().clouds)
        .enumerate()
    {
        let kinetic = if cloud.own_doppler_temperature {
            place.doppler_temperature()
        } else {
            place.temperature()
        };
        let (t_low, t_high) = problem.range_of(kinetic, base);
        let (xi_low, xi_high) = problem.range_of(place.turbulence_squared(), base);
        for transition in problem.engine.transitions(index) {
            let mass_kg = cloud.species[transition.species].mass_kg;
            narrow = narrow.min(doppler_width_squared(t_low.exp(), mass_kg, xi_low));
            wide = wide.max(doppler_width_squared(t_high.exp(), mass_kg, xi_high));
        }
    }
    if wide == 0.0 {
        return vec![blur];
    }
    let sigma = |b_squared: f64| {
        let width = wavelength_m * b_squared.sqrt() / SPEED_OF_LIGHT_M_PER_S
            * std::f64::consts::FRAC_1_SQRT_2;
        blur.hypot(width)
    };
    let (narrow, wide) = (sigma(narrow), sigma(wide));
    let count = 1 + ((wide / narrow).ln() / 1.6_f64.ln()).floor().min(3.0) as usize;
    (0..count)
        .map(|k| narrow * (wide / narrow).powf((k as f64 + 0.5) / count as f64))
        .collect()
}

impl Filtered {
    /// Filters the residual of the workspace.
    pub fn new(problem: &Problem, workspace: &Workspace, sigma_m: f64) -> Self {
        let centres_m = problem.centres_m.clone();
        let count = centres_m.len();
        let norm = 1.0 / (sigma_m * (2.0 * std::f64::consts::PI).sqrt());
        let mut product = vec![0.0; count];
        let mut power = vec![0.0; count];
        let reach = 3.5 * sigma_m;
        let mut first = 0;
        for j in 0..count {
            while centres_m[first] < centres_m[j] - reach {
                first += 1;
            }
            for k in first..count {
                let distance = (centres_m[k] - centres_m[j]) / sigma_m;
                if distance > 3.5 {
                    break;
                }
                let shape = norm * (-0.5 * distance * distance).exp();
                let weight = workspace.target.weight[k];
                product[j] += weight * workspace.residual[k] * shape;
                power[j] += weight * shape * shape;
            }
        }
        Filtered {
            sigma_m,
            centres_m,
            product,
            power,
        }
    }

    /// `(product, power)` for a line at a wavelength; zeros where there are no data.
    pub fn at(&self, wavelength_m: f64) -> (f64, f64) {
        let after = self
            .centres_m
            .partition_point(|&centre| centre <= wavelength_m);
        if after == 0 || after == self.centres_m.len() {
            return (0.0, 0.0);
        }
        let (below, above) = (self.centres_m[after - 1], self.centres_m[after]);
        // In a gap between ranges there is nothing to interpolate.
        if above - below
            > 3.0
                * self
                    .sigma_m
                    .max((self.centres_m[1] - self.centres_m[0]).abs())
        {
            return (0.0, 0.0);
        }
        let part = (wavelength_m - below) / (above - below);
        let between = |values: &[f64]| values[after - 1] * (1.0 - part) + values[after] * part;
        (between(&self.product), between(&self.power))
    }
}

/// The lines of a cloud that a search looks at: the strongest at any temperature of its range.
pub fn strongest(
    problem: &Problem,
    cloud: usize,
    temperatures_k: &[f64],
    most: usize,
) -> Vec<Transition> {
    let species = &problem.engine.sightline().clouds[cloud].species;
    let mut rated: Vec<(f64, &Transition)> = problem
        .engine
        .transitions(cloud)
        .iter()
        .map(|transition| {
            let best = temperatures_k
                .iter()
                .map(|&t| {
                    let q = species[transition.species].partition_function(t);
                    transition.integrated_cross_section(t, q.ln_q, 0.0).0
                        * transition.wavelength_vac_m
                })
                .fold(0.0, f64::max);
            (best, transition)
        })
        .collect();
    // Some of every species, however weak its lines are against those of another.
    rated.sort_by(|a, b| b.0.total_cmp(&a.0));
    let share = most.div_ceil(species.len().max(1)).max(6);
    let mut taken = vec![0; species.len()];
    rated.retain(|(_, transition)| {
        taken[transition.species] += 1;
        taken[transition.species] <= share
    });
    rated
        .into_iter()
        .map(|(_, transition)| transition.clone())
        .collect()
}
