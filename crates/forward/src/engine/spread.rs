//! From nodes to channels: each node's light through the line-spread function.

use super::field::Field;
use crate::lanes::{Block, Kernel, LANES, NormalIntegral};
use crate::sightline::{Channels, LineSpread};
use crate::voigt::Arithmetic;

/// A run of channels, its edges and widths filled up to whole blocks so that no block ends early.
pub struct RunOfChannels {
    first_channel: usize,
    channels: usize,
    /// Edges, then copies of the last one.
    edges_m: Vec<f64>,
    /// 1/width of each channel, then zeros.
    per_width: Vec<f64>,
}

impl RunOfChannels {
    /// All runs of the channels in use.
    pub fn all(channels: &Channels) -> Vec<Self> {
        channels
            .runs()
            .iter()
            .map(|run| {
                let mut edges_m = channels.edges_of(run).to_vec();
                let mut per_width: Vec<f64> = edges_m
                    .windows(2)
                    .map(|edge| 1.0 / (edge[1] - edge[0]))
                    .collect();
                let last = edges_m[edges_m.len() - 1];
                edges_m.resize(edges_m.len() + 2 * LANES, last);
                per_width.resize(per_width.len() + 2 * LANES, 0.0);
                RunOfChannels {
                    first_channel: run.channels.start,
                    channels: run.channels.len(),
                    edges_m,
                    per_width,
                }
            })
            .collect()
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
}

/// Parts of a Gaussian beyond it are below 2e-8 and left out.
const REACH_IN_SIGMAS: f64 = 5.5;

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
        } = self;
        let edges = &run.edges_m;
        let mut first = 0;
        for (&wavelength, light) in field
            .wavelength_m
            .iter()
            .zip(field.rows.chunks_exact(stride))
        {
            let sigma = line_spread.sigma_m(wavelength);
            let reach = REACH_IN_SIGMAS * sigma;
            // Nodes rise, and their reach with them: the first channel only moves forward.
            while first + 1 < run.channels && edges[first + 1] <= wavelength - reach {
                first += 1;
            }
            let mut channel = first;
            if sigma == 0.0 {
                if edges[first] <= wavelength && wavelength < edges[first + 1] {
                    add::<R>(
                        rows,
                        run.first_channel + channel,
                        stride,
                        run.per_width[first],
                        light,
                    );
                }
                continue;
            }
            let per_sigma = 1.0 / sigma;
            let mut below = normal.at::<R>(&[(edges[first] - wavelength) * per_sigma; LANES])[0];
            while channel < run.channels && edges[channel] < wavelength + reach {
                let mut t: Block = [0.0; LANES];
                for (t, &edge) in t.iter_mut().zip(&edges[channel + 1..channel + 1 + LANES]) {
                    *t = (edge - wavelength) * per_sigma;
                }
                let integral = normal.at::<R>(&t);
                let per_width = &run.per_width[channel..channel + LANES];
                for lane in 0..LANES {
                    let share = (integral[lane] - below) * per_width[lane];
                    below = integral[lane];
                    add::<R>(
                        rows,
                        run.first_channel + channel + lane,
                        stride,
                        share,
                        light,
                    );
                }
                channel += LANES;
            }
        }
    }
}

/// Adds a share of a node's light and derivatives to a channel.
#[inline(always)]
fn add<R: Arithmetic>(rows: &mut [f64], channel: usize, stride: usize, share: f64, light: &[f64]) {
    let row = &mut rows[channel * stride..(channel + 1) * stride];
    if stride == LANES {
        for lane in 0..LANES {
            row[lane] = R::mul_add(share, light[lane], row[lane]);
        }
    } else {
        for (value, light) in row.iter_mut().zip(light) {
            *value = R::mul_add(share, *light, *value);
        }
    }
}
