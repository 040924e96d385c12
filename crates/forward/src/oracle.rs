//! The plain scalar model: every channel by brute quadrature, one point after the other.
//!
//! It is kept simple for good, because the fast model proves itself against it. Nothing in here is shared
//! with the fast path except the constants of a line and Planck's law: the Voigt function is the scalar
//! one, the quadrature is Gauss-Legendre between breakpoints at every place where something changes.

use crate::planck::radiance;
use crate::sightline::{Background, Layout, Sightline};
use crate::transition::{Transition, doppler_width_squared};
use crate::voigt;
use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;
use backlit_units::doppler::wavelength_factor;
use std::f64::consts::PI;

/// A line of one cloud at one point in the parameter space.
struct Line {
    cloud: usize,
    centre_m: f64,
    /// 1/e half-width in wavelength.
    width_m: f64,
    /// Rest frequency over Doppler width, so that x = reduced - ratio/λ.
    frequency_hz: f64,
    doppler_hz: f64,
    damping: f64,
    /// Optical depth = depth × K(x, a).
    depth: f64,
    factor: f64,
}

/// Optical depth of each cloud and radiance at any wavelength, without the instrument.
pub struct Exact<'a> {
    sightline: &'a Sightline,
    parameters: &'a [f64],
    temperatures_k: Vec<f64>,
    lines: Vec<Line>,
}

impl<'a> Exact<'a> {
    /// The model at a point of the parameter space laid out by [`Sightline::layout`].
    pub fn new(sightline: &'a Sightline, parameters: &'a [f64]) -> Self {
        let layout = sightline.layout();
        let mut lines = Vec::new();
        let mut temperatures_k = Vec::new();
        for (index, (cloud, place)) in sightline.clouds.iter().zip(&layout.clouds).enumerate() {
            let temperature_k = parameters[place.temperature()].exp();
            temperatures_k.push(temperature_k);
            let kinetic_k = if cloud.own_doppler_temperature {
                parameters[place.doppler_temperature()].exp()
            } else {
                temperature_k
            };
            let factor = wavelength_factor(parameters[place.velocity()]);
            for (s, species) in cloud.species.iter().enumerate() {
                let column_per_m2 = parameters[place.column(s)].exp();
                let partition = species.partition_function(temperature_k);
                let b = doppler_width_squared(
                    kinetic_k,
                    species.mass_kg,
                    parameters[place.turbulence_squared()],
                )
                .sqrt();
                for line in &species.lines {
                    let transition = Transition::new(line, s);
                    let doppler_hz = transition.frequency_hz * b / SPEED_OF_LIGHT_M_PER_S;
                    let (cross_section, _) = transition.integrated_cross_section(
                        temperature_k,
                        partition.ln_q,
                        partition.dlnq_dt_per_k * temperature_k,
                    );
                    let centre_m = transition.wavelength_vac_m * factor;
                    lines.push(Line {
                        cloud: index,
                        centre_m,
                        width_m: centre_m * b / SPEED_OF_LIGHT_M_PER_S,
                        frequency_hz: transition.frequency_hz,
                        doppler_hz,
                        damping: transition.gamma_per_s / (4.0 * PI * doppler_hz),
                        depth: column_per_m2 * cross_section / (PI.sqrt() * doppler_hz),
                        factor,
                    });
                }
            }
        }
        Exact {
            sightline,
            parameters,
            temperatures_k,
            lines,
        }
    }

    /// Optical depth of one cloud at a wavelength: `τ = Σ N_s s_l φ_l(ν)`.
    pub fn optical_depth(&self, cloud: usize, wavelength_vac_m: f64) -> f64 {
        self.lines
            .iter()
            .filter(|line| line.cloud == cloud)
            .map(|line| {
                let frequency_hz = SPEED_OF_LIGHT_M_PER_S / wavelength_vac_m * line.factor;
                let x = (frequency_hz - line.frequency_hz) / line.doppler_hz;
                line.depth * voigt::scalar::w(x, line.damping).0
            })
            .sum()
    }

    /// Radiance of the background at a wavelength, with the scale, in W m⁻² sr⁻¹ m⁻¹ × scale.
    pub fn background(&self, wavelength_vac_m: f64) -> f64 {
        let scale = self.parameters[Layout::SCALE].exp();
        match &self.sightline.background {
            Background::Dark => 0.0,
            Background::Measured { radiance } => {
                interpolate_channels(&self.sightline.channels, radiance, wavelength_vac_m)
            }
            Background::Blackbody { shape_terms } => {
                let shape = &self.parameters[Layout::SHAPE..Layout::SHAPE + shape_terms];
                let x = self.legendre_argument(wavelength_vac_m);
                let bend: f64 = shape
                    .iter()
                    .enumerate()
                    .map(|(k, a)| a * legendre(k + 1, x))
                    .sum();
                scale
                    * self.parameters[Layout::DILUTION]
                    * radiance(
                        wavelength_vac_m,
                        self.parameters[Layout::BACKGROUND_TEMPERATURE].exp(),
                    )
                    * (1.0 + bend)
            }
        }
    }

    /// What the clouds change: radiance minus background, with the scale.
    pub fn excess(&self, wavelength_vac_m: f64) -> f64 {
        let scale = self.parameters[Layout::SCALE].exp();
        let background = self.background(wavelength_vac_m);
        let mut excess = 0.0;
        for (cloud, &temperature_k) in self.temperatures_k.iter().enumerate() {
            let depth = self.optical_depth(cloud, wavelength_vac_m);
            let absorbed = -(-depth).exp_m1();
            let contrast = scale * radiance(wavelength_vac_m, temperature_k) - background;
            excess = excess * (-depth).exp() + contrast * absorbed;
        }
        excess
    }

    /// -1..1 over the channels in use.
    fn legendre_argument(&self, wavelength_vac_m: f64) -> f64 {
        let (low, high) = self.sightline.channels.span_vac_m().unwrap_or((0.0, 1.0));
        (2.0 * wavelength_vac_m - low - high) / (high - low)
    }

    /// Places between which the integrand is smooth: line structure and channel edges.
    fn breakpoints(&self) -> Vec<f64> {
        const IN_WIDTHS: [f64; 18] = [
            0.0, 0.4, 0.8, 1.2, 1.6, 2.0, 2.4, 2.8, 3.2, 3.6, 4.0, 4.4, 5.0, 6.0, 7.5, 10.0, 14.0,
            20.0,
        ];
        const IN_SIGMAS: [f64; 9] = [0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 9.0];
        let mut points = Vec::new();
        let Some((first, last)) = self.sightline.channels.span_vac_m() else {
            return points;
        };
        for (low, high) in self.sightline.channels.bounds_vac_m() {
            let sigma = self.sightline.line_spread.sigma_m(low);
            for steps in IN_SIGMAS {
                points.extend([low - steps * sigma, low + steps * sigma]);
                points.extend([high - steps * sigma, high + steps * sigma]);
            }
            points.push(0.5 * (low + high));
        }
        let spread = 9.5 * self.sightline.line_spread.sigma_m(last);
        let (first, last) = (first - spread, last + spread);
        points.extend([first, last]);
        for line in &self.lines {
            let mut widths: Vec<f64> = IN_WIDTHS.to_vec();
            while widths
                .last()
                .is_some_and(|w| w * line.width_m < 2.0 * (last - first))
            {
                widths.push(widths[widths.len() - 1] * 1.4);
            }
            for step in widths {
                points.extend([
                    line.centre_m - step * line.width_m,
                    line.centre_m + step * line.width_m,
                ]);
            }
        }
        points.retain(|&point| point >= first && point <= last);
        points.sort_by(f64::total_cmp);
        points.dedup_by(|b, a| *b - *a < 1e-14 * *a);
        points
    }
}

/// The spectrum in every channel in use: scale × radiance through the instrument.
///
/// `y_j = 1/Δ_j ∫_channel dλ ∫ dλ' I(λ') G(λ - λ'; σ(λ'))`
///
/// * `parameters`: laid out by [`Sightline::layout`].
///
/// Returns one value a channel in use, in W m⁻² sr⁻¹ m⁻¹ × scale. Accuracy: 1e-9 of the strongest feature
/// (`doubling_the_order_changes_nothing`), 1e-7 against the brute-force script of the reference checks.
pub fn observed(sightline: &Sightline, parameters: &[f64]) -> Vec<f64> {
    observed_with(sightline, parameters, &GAUSS_LEGENDRE_10)
}

fn observed_with(sightline: &Sightline, parameters: &[f64], rule: &[(f64, f64)]) -> Vec<f64> {
    let exact = Exact::new(sightline, parameters);
    let bounds: Vec<(f64, f64)> = sightline.channels.bounds_vac_m().collect();
    let mut spectrum: Vec<f64> = bounds
        .iter()
        .enumerate()
        .map(|(channel, &(low, high))| match &sightline.background {
            Background::Measured { radiance } => radiance[channel],
            Background::Dark => 0.0,
            Background::Blackbody { .. } => smooth_mean(&exact, low, high),
        })
        .collect();
    for panel in exact.breakpoints().windows(2) {
        let (middle, half) = (0.5 * (panel[0] + panel[1]), 0.5 * (panel[1] - panel[0]));
        for &(node, weight) in rule {
            let wavelength = middle + half * node;
            let excess = exact.excess(wavelength) * weight * half;
            if excess == 0.0 {
                continue;
            }
            let sigma = sightline.line_spread.sigma_m(wavelength);
            let reach = 9.0 * sigma;
            let first = bounds.partition_point(|&(_, high)| high < wavelength - reach);
            for (channel, &(low, high)) in bounds.iter().enumerate().skip(first) {
                if low > wavelength + reach {
                    break;
                }
                spectrum[channel] += excess * share(low, high, wavelength, sigma) / (high - low);
            }
        }
    }
    spectrum
}

/// The part of a Gaussian at `wavelength` that falls between two edges.
fn share(low: f64, high: f64, wavelength: f64, sigma: f64) -> f64 {
    if sigma == 0.0 {
        return if low <= wavelength && wavelength < high {
            1.0
        } else {
            0.0
        };
    }
    let unit = 1.0 / (sigma * std::f64::consts::SQRT_2);
    0.5 * (libm::erf((high - wavelength) * unit) - libm::erf((low - wavelength) * unit))
}

/// Channel mean of the smooth background: a quadrature over the channel times one over the spread.
fn smooth_mean(exact: &Exact, low: f64, high: f64) -> f64 {
    let centre = 0.5 * (low + high);
    let mut sum = 0.0;
    for &(node, weight) in &GAUSS_LEGENDRE_10 {
        let wavelength = centre + 0.5 * (high - low) * node;
        // The spread of light of another wavelength has that wavelength's width: solve for the source.
        let mut spread = 0.0;
        for k in -32..=32_i32 {
            let t = f64::from(k) * 0.25;
            let mut source = wavelength;
            for _ in 0..8 {
                source = wavelength - t * exact.sightline.line_spread.sigma_m(source);
            }
            let sigma = exact.sightline.line_spread.sigma_m(source);
            // t = (λ - λ')/σ(λ'): dλ' G = dt φ(t) / (1 + t dσ/dλ').
            let slope = match exact.sightline.line_spread {
                crate::LineSpread::ResolvingPower { .. } => sigma / source,
                _ => 0.0,
            };
            spread += 0.25 * (-0.5 * t * t).exp() / (2.0 * PI).sqrt() / (1.0 + t * slope)
                * exact.background(source);
        }
        sum += 0.5 * weight * spread;
    }
    sum
}

/// Legendre polynomial P_n(x), by Bonnet's recursion.
pub(crate) fn legendre(n: usize, x: f64) -> f64 {
    let (mut previous, mut current) = (1.0, x);
    if n == 0 {
        return 1.0;
    }
    for k in 1..n {
        let k = k as f64;
        (previous, current) = (
            current,
            ((2.0 * k + 1.0) * x * current - k * previous) / (k + 1.0),
        );
    }
    current
}

/// A channel spectrum between channel centres: linear, constant beyond the ends.
pub(crate) fn interpolate_channels(
    channels: &crate::Channels,
    values: &[f64],
    wavelength_vac_m: f64,
) -> f64 {
    let centres = channels.centres_m();
    let after = centres.partition_point(|&centre| centre <= wavelength_vac_m);
    if after == 0 || after == centres.len() {
        return values[after.saturating_sub(1).min(values.len() - 1)];
    }
    let part = (wavelength_vac_m - centres[after - 1]) / (centres[after] - centres[after - 1]);
    values[after - 1] * (1.0 - part) + values[after] * part
}

/// Nodes and weights on -1..1, Abramowitz & Stegun (1964), table 25.4, n = 10.
pub(crate) const GAUSS_LEGENDRE_10: [(f64, f64); 10] = [
    (-0.973_906_528_517_171_7, 0.066_671_344_308_688_14),
    (-0.865_063_366_688_984_5, 0.149_451_349_150_580_6),
    (-0.679_409_568_299_024_4, 0.219_086_362_515_982_04),
    (-0.433_395_394_129_247_2, 0.269_266_719_309_996_36),
    (-0.148_874_338_981_631_2, 0.295_524_224_714_752_87),
    (0.148_874_338_981_631_2, 0.295_524_224_714_752_87),
    (0.433_395_394_129_247_2, 0.269_266_719_309_996_36),
    (0.679_409_568_299_024_4, 0.219_086_362_515_982_04),
    (0.865_063_366_688_984_5, 0.149_451_349_150_580_6),
    (0.973_906_528_517_171_7, 0.066_671_344_308_688_14),
];
