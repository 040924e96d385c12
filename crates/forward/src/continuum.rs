//! The smooth background through the instrument, for many temperatures on the same channels.
//!
//! The background is smooth, so it is known everywhere from its values at a few Chebyshev nodes. What the
//! instrument does to the interpolating polynomial does not depend on the temperature: it is worked out
//! once, as the weight of each node in each channel.

use crate::lanes::{Kernel, dispatch};
use crate::oracle::{GAUSS_LEGENDRE_10, legendre};
use crate::planck::{radiance, radiance_slope};
use crate::sightline::{Channels, Layout, LineSpread};
use crate::voigt::Arithmetic;
use std::ops::Range;

/// Nodes of a panel.
const NODES: usize = 9;
/// Wanted accuracy of the interpolation, relative to the value, at the extremes of the temperature.
const ACCURACY: f64 = 2e-11;

/// A blackbody with Legendre terms, seen through the instrument in every channel.
pub struct Continuum {
    panels: Vec<Panel>,
    shape_terms: usize,
}

struct Panel {
    channels: Range<usize>,
    wavelength_m: [f64; NODES],
    /// P_k at the nodes.
    legendre: Vec<[f64; NODES]>,
    /// `weights[node][channel]`.
    weights: Vec<Vec<f64>>,
}

/// The background's part of each channel: its value and its derivatives.
#[derive(Debug, Default, Clone)]
pub struct ContinuumColumns {
    /// Radiance with scale and dilution.
    pub value: Vec<f64>,
    /// Derivative by the logarithm of the background's temperature.
    pub temperature: Vec<f64>,
    /// Derivative by the dilution.
    pub dilution: Vec<f64>,
    /// Derivative by each Legendre coefficient.
    pub shape: Vec<Vec<f64>>,
}

impl Continuum {
    /// Works out the weights.
    ///
    /// * `temperatures_k`: the range of temperatures that the interpolation must serve.
    pub fn new(
        channels: &Channels,
        line_spread: LineSpread,
        shape_terms: usize,
        temperatures_k: (f64, f64),
    ) -> Self {
        let bounds: Vec<(f64, f64)> = channels.bounds_vac_m().collect();
        let span = channels.span_vac_m().unwrap_or((1.0, 2.0));
        let mut open: Vec<Range<usize>> = Vec::new();
        open.push(0..bounds.len());
        let mut panels = Vec::new();
        while let Some(range) = open.pop() {
            if range.is_empty() {
                continue;
            }
            let (low, high) = (bounds[range.start].0, bounds[range.end - 1].1);
            let sigma = line_spread.sigma_m(high);
            let divisible = range.len() > 1 && high - low > 12.0 * sigma;
            let nodes = chebyshev(low, high);
            if divisible && !serves(&nodes, low, high, temperatures_k) {
                let middle = 0.5 * (low + high);
                let split = bounds[range.clone()].partition_point(|bound| bound.1 <= middle);
                let split = range.start + split.clamp(1, range.len() - 1);
                open.push(split..range.end);
                open.push(range.start..split);
                continue;
            }
            let barycentric = barycentric_weights(&nodes);
            let mut weights = vec![vec![0.0; range.len()]; NODES];
            for (index, &(low, high)) in bounds[range.clone()].iter().enumerate() {
                let means = channel_means(&nodes, &barycentric, low, high, line_spread);
                for (node, mean) in means.into_iter().enumerate() {
                    weights[node][index] = mean;
                }
            }
            let place = |wavelength: f64| (2.0 * wavelength - span.0 - span.1) / (span.1 - span.0);
            panels.push(Panel {
                channels: range,
                wavelength_m: nodes,
                legendre: (1..=shape_terms)
                    .map(|k| nodes.map(|wavelength| legendre(k, place(wavelength))))
                    .collect(),
                weights,
            });
        }
        Continuum {
            panels,
            shape_terms,
        }
    }

    /// The background in every channel at a point of the parameter space; `columns` is resized as needed.
    pub fn evaluate(&self, parameters: &[f64], channels: usize, columns: &mut ContinuumColumns) {
        let scale = parameters[Layout::SCALE].exp();
        let temperature_k = parameters[Layout::BACKGROUND_TEMPERATURE].exp();
        let dilution = parameters[Layout::DILUTION];
        let shape = &parameters[Layout::SHAPE..Layout::SHAPE + self.shape_terms];
        columns.value.resize(channels, 0.0);
        columns.temperature.resize(channels, 0.0);
        columns.dilution.resize(channels, 0.0);
        columns.shape.resize_with(self.shape_terms, Vec::new);
        for column in &mut columns.shape {
            column.resize(channels, 0.0);
        }
        for panel in &self.panels {
            let mut full = [0.0; NODES];
            let mut slope = [0.0; NODES];
            let mut pure = [0.0; NODES];
            for node in 0..NODES {
                let wavelength = panel.wavelength_m[node];
                let bend: f64 = shape
                    .iter()
                    .zip(&panel.legendre)
                    .map(|(a, p)| a * p[node])
                    .sum();
                pure[node] = scale * radiance(wavelength, temperature_k);
                full[node] = pure[node] * (1.0 + bend);
                slope[node] =
                    scale * dilution * (1.0 + bend) * radiance_slope(wavelength, temperature_k);
            }
            let range = panel.channels.clone();
            panel.spread(&full, &mut columns.dilution[range.clone()]);
            panel.spread(&slope, &mut columns.temperature[range.clone()]);
            for (value, full) in columns.value[range.clone()]
                .iter_mut()
                .zip(&columns.dilution[range.clone()])
            {
                *value = dilution * full;
            }
            for (column, p) in columns.shape.iter_mut().zip(&panel.legendre) {
                let mut bent = pure;
                for node in 0..NODES {
                    bent[node] *= dilution * p[node];
                }
                panel.spread(&bent, &mut column[range.clone()]);
            }
        }
    }
}

impl Panel {
    /// Channel values of the polynomial through the node values.
    fn spread(&self, nodes: &[f64; NODES], channels: &mut [f64]) {
        dispatch(Spread {
            weights: &self.weights,
            nodes,
            channels,
        });
    }
}

struct Spread<'a> {
    weights: &'a [Vec<f64>],
    nodes: &'a [f64; NODES],
    channels: &'a mut [f64],
}

impl Kernel for Spread<'_> {
    #[inline(always)]
    fn run<R: Arithmetic>(self) {
        let count = self.channels.len();
        let mut columns: [&[f64]; NODES] = [&[]; NODES];
        for (column, weights) in columns.iter_mut().zip(self.weights) {
            *column = &weights[..count];
        }
        for (channel, value) in self.channels.iter_mut().enumerate() {
            let mut sum = 0.0;
            for (column, node) in columns.iter().zip(self.nodes) {
                sum = R::mul_add(column[channel], *node, sum);
            }
            *value = sum;
        }
    }
}

/// Chebyshev nodes of the first kind on an interval.
fn chebyshev(low: f64, high: f64) -> [f64; NODES] {
    std::array::from_fn(|k| {
        let angle = std::f64::consts::PI * (2 * k + 1) as f64 / (2 * NODES) as f64;
        0.5 * (low + high) - 0.5 * (high - low) * angle.cos()
    })
}

fn barycentric_weights(nodes: &[f64; NODES]) -> [f64; NODES] {
    std::array::from_fn(|k| {
        let sign = if k % 2 == 0 { 1.0 } else { -1.0 };
        sign * (std::f64::consts::PI * (2 * k + 1) as f64 / (2 * nodes.len()) as f64).sin()
    })
}

/// The interpolating polynomial's weight of each node at a wavelength (barycentric formula; Berrut &
/// Trefethen 2004, SIAM Rev. 46, 501).
fn cardinal(nodes: &[f64; NODES], barycentric: &[f64; NODES], wavelength: f64) -> [f64; NODES] {
    let mut values = [0.0; NODES];
    let mut sum = 0.0;
    for k in 0..NODES {
        let distance = wavelength - nodes[k];
        if distance == 0.0 {
            let mut unit = [0.0; NODES];
            unit[k] = 1.0;
            return unit;
        }
        values[k] = barycentric[k] / distance;
        sum += values[k];
    }
    values.map(|value| value / sum)
}

/// True if the polynomial reproduces the blackbody between the nodes at both ends of the temperature range.
fn serves(nodes: &[f64; NODES], low: f64, high: f64, temperatures_k: (f64, f64)) -> bool {
    let barycentric = barycentric_weights(nodes);
    [temperatures_k.0, temperatures_k.1]
        .into_iter()
        .all(|temperature_k| {
            (0..=20).all(|step| {
                let wavelength = low + (high - low) * f64::from(step) / 20.0;
                let expected = radiance_slope(wavelength, temperature_k);
                let weights = cardinal(nodes, &barycentric, wavelength);
                let got: f64 = weights
                    .iter()
                    .zip(nodes)
                    .map(|(w, &node)| w * radiance_slope(node, temperature_k))
                    .sum();
                let largest =
                    radiance_slope(high, temperature_k).max(radiance_slope(low, temperature_k));
                (got - expected).abs() <= ACCURACY * expected.abs().max(1e-6 * largest)
            })
        })
}

/// Mean over a channel of each node's cardinal function after the line spread.
fn channel_means(
    nodes: &[f64; NODES],
    barycentric: &[f64; NODES],
    low: f64,
    high: f64,
    line_spread: LineSpread,
) -> [f64; NODES] {
    // Gauss-Hermite for the spread, nodes and weights of order 5 (Abramowitz & Stegun 1964, table 25.10)
    // for exp(-x²): exact to the ninth power of the width.
    const SPREAD: [(f64, f64); 5] = [
        (-2.020_182_870_456_085_6, 0.019_953_242_059_045_91),
        (-0.958_572_464_613_818_5, 0.393_619_323_152_241_2),
        (0.0, 0.945_308_720_482_941_9),
        (0.958_572_464_613_818_5, 0.393_619_323_152_241_2),
        (2.020_182_870_456_085_6, 0.019_953_242_059_045_91),
    ];
    let mut means = [0.0; NODES];
    for (place, weight) in GAUSS_LEGENDRE_10 {
        let wavelength = 0.5 * (low + high) + 0.5 * (high - low) * place;
        for (t, part) in SPREAD {
            let t = t * std::f64::consts::SQRT_2;
            // Light that arrives here came with the width of its own wavelength: λ' = λ - t σ(λ').
            let (source, stretch) = match line_spread {
                LineSpread::ResolvingPower { .. } => {
                    let relative = line_spread.sigma_m(1.0);
                    (
                        wavelength / (1.0 + t * relative),
                        1.0 / (1.0 + t * relative),
                    )
                }
                _ => (wavelength - t * line_spread.sigma_m(wavelength), 1.0),
            };
            let share = 0.5 * weight * part / std::f64::consts::PI.sqrt() * stretch;
            for (mean, value) in means.iter_mut().zip(cardinal(nodes, barycentric, source)) {
                *mean += share * value;
            }
        }
    }
    means
}
