//! From nodes to channels: each node's light through the line-spread function.

use super::field::Field;
use super::shares::{REACH_IN_SIGMAS, Shares};
use crate::lanes::{Block, Kernel, LANES, NormalIntegral};
use crate::sightline::{Channels, LineSpread, Run};
use crate::voigt::{Arithmetic, Vector};

/// A run of channels, its edges and widths filled up to whole blocks so that no block ends early.
pub struct RunOfChannels {
    first_channel: usize,
    channels: usize,
    /// Edges, then copies of the last one.
    edges_m: Vec<f64>,
    /// 1/width of each channel, then zeros.
    per_width: Vec<f64>,
    /// Where all channels within the reach of the line-spread function are as wide as this one.
    even: Vec<bool>,
    shares: Option<Shares>,
}

/// Channels count as evenly spaced if their edges are off by less than this part of a channel.
const EVEN: f64 = 1e-7;

impl RunOfChannels {
    /// All runs of the channels in use.
    pub fn all(channels: &Channels, line_spread: LineSpread) -> Vec<Self> {
        channels
            .runs()
            .iter()
            .map(|run| Self::new(channels, run, line_spread))
            .collect()
    }

    fn new(channels: &Channels, run: &Run, line_spread: LineSpread) -> Self {
        let mut edges_m = channels.edges_of(run).to_vec();
        let mut per_width: Vec<f64> = edges_m
            .windows(2)
            .map(|edge| 1.0 / (edge[1] - edge[0]))
            .collect();
        let count = per_width.len();
        let mut even = vec![false; count];
        let mut ratios = (f64::INFINITY, 0.0_f64);
        if line_spread != LineSpread::None {
            for channel in 0..count {
                let width = edges_m[channel + 1] - edges_m[channel];
                let sigma = line_spread.sigma_m(edges_m[channel]);
                let reach = (REACH_IN_SIGMAS * sigma / width).ceil() as usize + 1;
                let around = channel.saturating_sub(reach)..(channel + reach + 1).min(count);
                even[channel] = around.end - around.start < 200
                    && edges_m[around.start..=around.end]
                        .iter()
                        .zip(around.start..)
                        .all(|(edge, k)| {
                            let expected = edges_m[channel] + (k as f64 - channel as f64) * width;
                            (edge - expected).abs() < EVEN * width
                        });
                if even[channel] {
                    // A ratio anywhere in the channel: σ may change across it.
                    let other = line_spread.sigma_m(edges_m[channel + 1]);
                    ratios = (
                        ratios.0.min(width / sigma.max(other)),
                        ratios.1.max(width / sigma.min(other)),
                    );
                }
            }
        }
        let shares = Shares::new(ratios.0, ratios.1);
        let last = edges_m[count];
        edges_m.resize(edges_m.len() + 2 * LANES, last);
        per_width.resize(count + 2 * LANES, 0.0);
        RunOfChannels {
            first_channel: run.channels.start,
            channels: count,
            edges_m,
            per_width,
            even,
            shares,
        }
    }

    /// The lowest edge.
    pub fn first_edge_m(&self) -> f64 {
        self.edges_m[0]
    }

    /// The highest edge.
    pub fn last_edge_m(&self) -> f64 {
        self.edges_m[self.channels]
    }
}

/// Adds the rows of a field to the rows of the channels.
pub struct Spread<'a> {
    pub field: &'a Field,
    pub run: &'a RunOfChannels,
    pub stride: usize,
    pub normal: &'a NormalIntegral,
    pub line_spread: LineSpread,
    pub rows: &'a mut [f64],
    pub room: &'a mut Vec<Block>,
}

impl Kernel for Spread<'_> {
    #[inline(always)]
    fn run<R: Arithmetic>(self) {
        let Spread {
            field,
            run,
            stride,
            normal,
            line_spread,
            rows,
            room,
        } = self;
        let Some(vector) = R::vector() else { return };
        let edges = &run.edges_m;
        let wavelengths = &field.wavelength_m.as_flattened()[..field.nodes];
        let Some(&nearest) = wavelengths.first() else {
            return;
        };
        let channel_of =
            |wavelength: f64| edges[..run.channels].partition_point(|&edge| edge <= wavelength);
        let mut own = channel_of(nearest).saturating_sub(1);
        let mut first =
            channel_of(nearest - REACH_IN_SIGMAS * line_spread.sigma_m(nearest)).saturating_sub(1);
        for (&wavelength, light) in wavelengths.iter().zip(field.rows.chunks_exact(stride)) {
            let sigma = line_spread.sigma_m(wavelength);
            let reach = REACH_IN_SIGMAS * sigma;
            // Nodes rise, and their reach with them: both places only move forward.
            while own + 1 < run.channels && edges[own + 1] <= wavelength {
                own += 1;
            }
            if let (Some(shares), true, true) = (
                &run.shares,
                run.even[own],
                edges[own] <= wavelength && wavelength < edges[own + 1],
            ) {
                let per_width = run.per_width[own];
                let phase = (wavelength - edges[own]) * per_width;
                let found = shares.at(vector, phase, 1.0 / (per_width * sigma), room);
                let from = own.saturating_sub(found.below);
                let skipped = from + found.below - own;
                let to = (from + found.shares.len() - skipped).min(run.channels);
                let channels =
                    (run.first_channel + from) * stride..(run.first_channel + to) * stride;
                add(
                    vector,
                    &mut rows[channels],
                    &found.shares[skipped..],
                    per_width,
                    light,
                );
                continue;
            }
            while first + 1 < run.channels && edges[first + 1] <= wavelength - reach {
                first += 1;
            }
            if sigma == 0.0 {
                if edges[first] <= wavelength && wavelength < edges[first + 1] {
                    let channel = (run.first_channel + first) * stride;
                    add(
                        vector,
                        &mut rows[channel..channel + stride],
                        &[run.per_width[first]],
                        1.0,
                        light,
                    );
                }
                continue;
            }
            let per_sigma = 1.0 / sigma;
            let mut channel = first;
            let mut below = normal.at::<R>(&[(edges[first] - wavelength) * per_sigma; LANES])[0];
            while channel < run.channels && edges[channel] < wavelength + reach {
                let mut t: Block = [0.0; LANES];
                for (t, &edge) in t.iter_mut().zip(&edges[channel + 1..channel + 1 + LANES]) {
                    *t = (edge - wavelength) * per_sigma;
                }
                let mut shares = normal.at::<R>(&t);
                for (share, per_width) in shares
                    .iter_mut()
                    .zip(&run.per_width[channel..channel + LANES])
                {
                    (*share, below) = ((*share - below) * per_width, *share);
                }
                let start = (run.first_channel + channel) * stride;
                add(
                    vector,
                    &mut rows[start..start + LANES * stride],
                    &shares,
                    1.0,
                    light,
                );
                channel += LANES;
            }
        }
    }
}

/// Adds shares of a node's light and derivatives to adjacent channels.
///
/// In explicit vectors: left to itself the compiler joins rows instead of the columns of one.
#[inline(always)]
fn add<V: Vector>(vector: V, rows: &mut [f64], shares: &[f64], factor: f64, light: &[f64]) {
    if let Ok(light) = <&Block>::try_from(light) {
        for (row, &share) in rows.as_chunks_mut::<LANES>().0.iter_mut().zip(shares) {
            let share = vector.splat(share * factor);
            for (value, light) in V::vectors_mut(row).iter_mut().zip(V::vectors(light)) {
                *value = vector.mul_add(share, *light, *value);
            }
        }
        return;
    }
    for (row, share) in rows.chunks_exact_mut(light.len()).zip(shares) {
        let share = vector.splat(share * factor);
        for (value, light) in V::vectors_mut(row).iter_mut().zip(V::vectors(light)) {
            *value = vector.mul_add(share, *light, *value);
        }
    }
}
