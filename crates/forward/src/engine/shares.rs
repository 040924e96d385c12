//! Tabulated shares: what part of a node's light each channel near it receives.
//!
//! On evenly spaced channels the share depends on two numbers alone: where in its channel the node stands
//! (the phase p, 0..1) and how wide a channel is against the line-spread function (h = width/σ):
//! `share_k = Φ((k+1-p) h) - Φ((k-p) h)`. It is tabulated once as polynomials in p, and in ln h where h
//! varies along the axis, so that a node costs a few multiplications a channel instead of an error function.

use crate::lanes::{Block, LANES};
use crate::voigt::Vector;

/// Pieces of the phase, and coefficients of the polynomial on each.
const PIECES: usize = 8;
const PHASE_TERMS: usize = 6;
/// Half of the stretch of ln h that one table serves, and coefficients in it.
const HALF_STRETCH: f64 = 0.006;
const RATIO_TERMS: usize = 3;
/// Channels wider than this many σ change too much with the phase for the polynomials.
const WIDEST: f64 = 2.2;
/// Finer channels than this need tables larger than they are worth.
const NARROWEST: f64 = 0.08;
/// More tables than this are not made: the channels' width varies too much.
const MOST_TABLES: usize = 120;
/// Beyond it a Gaussian holds less than 2e-8.
pub const REACH_IN_SIGMAS: f64 = 5.5;

/// Shares for all ratios of channel to σ that occur on an axis.
pub struct Shares {
    ln_first: f64,
    tables: Vec<Table>,
}

struct Table {
    /// True if the ratio is the same on the whole axis: terms in it are left out.
    fixed: bool,
    /// Channels below the node's own.
    below: usize,
    blocks: usize,
    /// `[piece][phase term][ratio term][block of channels]`
    coefficients: Vec<Block>,
}

/// Shares of one node: of channels `first..first + shares.len()` relative to the node's own.
pub struct NodeShares<'a> {
    /// Channels below the node's own at which the shares begin.
    pub below: usize,
    /// One a channel.
    pub shares: &'a [f64],
}

impl Shares {
    /// Tables for ratios between two ends; `None` where direct evaluation serves better.
    pub fn new(lowest: f64, highest: f64) -> Option<Self> {
        let usable = lowest >= NARROWEST && highest <= WIDEST && lowest <= highest;
        if !usable {
            return None;
        }
        if highest / lowest - 1.0 < 1e-9 {
            return Some(Shares {
                ln_first: lowest.ln(),
                tables: vec![Table::new(lowest, true)],
            });
        }
        let count = ((highest / lowest).ln() / (2.0 * HALF_STRETCH)).ceil() as usize + 1;
        if count > MOST_TABLES {
            return None;
        }
        let ln_first = lowest.ln();
        let tables = (0..count)
            .map(|k| Table::new((ln_first + 2.0 * HALF_STRETCH * k as f64).exp(), false))
            .collect();
        Some(Shares { ln_first, tables })
    }

    /// The shares of a node at a phase in its channel, for a ratio of channel to σ.
    #[inline(always)]
    pub fn at<'a, V: Vector>(
        &self,
        vector: V,
        phase: f64,
        ratio: f64,
        room: &'a mut Vec<Block>,
    ) -> NodeShares<'a> {
        let (table, part) = if self.tables.len() == 1 {
            (&self.tables[0], 0.0)
        } else {
            let place = (ratio.ln() - self.ln_first) / (2.0 * HALF_STRETCH);
            let index = (place.round().max(0.0) as usize).min(self.tables.len() - 1);
            (&self.tables[index], 2.0 * (place - index as f64))
        };
        let scaled = (phase * PIECES as f64).clamp(0.0, PIECES as f64 - 1e-9);
        let piece = scaled as usize;
        let x = 2.0 * (scaled - piece as f64) - 1.0;
        let blocks = table.blocks;
        let ratio_terms = if table.fixed { 1 } else { RATIO_TERMS };
        let of_piece = PHASE_TERMS * ratio_terms * blocks;
        let coefficients = &table.coefficients[piece * of_piece..(piece + 1) * of_piece];
        room.resize(blocks.max(room.len()), [0.0; LANES]);
        let (x, part) = (vector.splat(x), vector.splat(part));
        for (block, share) in room[..blocks].iter_mut().enumerate() {
            let term_of = |term: usize, ratio_term: usize| {
                V::vectors(&coefficients[(term * ratio_terms + ratio_term) * blocks + block])
            };
            for (index, share) in V::vectors_mut(share).iter_mut().enumerate() {
                let mut sum = vector.splat(0.0);
                for term in (0..PHASE_TERMS).rev() {
                    let mut value = term_of(term, 0)[index];
                    if !table.fixed {
                        let slope =
                            vector.mul_add(term_of(term, 2)[index], part, term_of(term, 1)[index]);
                        value = vector.mul_add(slope, part, value);
                    }
                    sum = vector.mul_add(sum, x, value);
                }
                *share = sum;
            }
        }
        NodeShares {
            below: table.below,
            shares: room[..blocks].as_flattened(),
        }
    }
}

impl Table {
    fn new(ratio: f64, fixed: bool) -> Self {
        let below = (REACH_IN_SIGMAS / ratio).ceil() as usize;
        let channels = 2 * below + 1;
        let blocks = channels.div_ceil(LANES);
        let ratio_terms = if fixed { 1 } else { RATIO_TERMS };
        let mut coefficients = Vec::with_capacity(PIECES * PHASE_TERMS * ratio_terms * blocks);
        for piece in 0..PIECES {
            let terms: Vec<[[f64; RATIO_TERMS]; PHASE_TERMS]> = (0..blocks * LANES)
                .map(|channel| {
                    let offset = channel as f64 - below as f64;
                    let polynomial = |ratio: f64| phase_polynomial(piece, offset, ratio);
                    let middle = polynomial(ratio);
                    if fixed {
                        return middle.map(|value| [value, 0.0, 0.0]);
                    }
                    let low = polynomial(ratio * (-HALF_STRETCH).exp());
                    let high = polynomial(ratio * HALF_STRETCH.exp());
                    std::array::from_fn(|term| {
                        let (low, middle, high) = (low[term], middle[term], high[term]);
                        [middle, 0.5 * (high - low), 0.5 * (high + low) - middle]
                    })
                })
                .collect();
            for term in 0..PHASE_TERMS {
                for ratio_term in 0..ratio_terms {
                    for block in terms.chunks_exact(LANES) {
                        coefficients
                            .push(std::array::from_fn(|lane| block[lane][term][ratio_term]));
                    }
                }
            }
        }
        Table {
            fixed,
            below,
            blocks,
            coefficients,
        }
    }
}

/// The polynomial in x = -1..1 over one piece of the phase, from its values at Chebyshev's nodes.
fn phase_polynomial(piece: usize, offset: f64, ratio: f64) -> [f64; PHASE_TERMS] {
    // Monomials of T_0..T_5.
    const CHEBYSHEV: [[f64; PHASE_TERMS]; PHASE_TERMS] = [
        [1.0, 0.0, 0.0, 0.0, 0.0, 0.0],
        [0.0, 1.0, 0.0, 0.0, 0.0, 0.0],
        [-1.0, 0.0, 2.0, 0.0, 0.0, 0.0],
        [0.0, -3.0, 0.0, 4.0, 0.0, 0.0],
        [1.0, 0.0, -8.0, 0.0, 8.0, 0.0],
        [0.0, 5.0, 0.0, -20.0, 0.0, 16.0],
    ];
    let mut monomials = [0.0; PHASE_TERMS];
    for node in 0..PHASE_TERMS {
        let angle = std::f64::consts::PI * (node as f64 + 0.5) / PHASE_TERMS as f64;
        let phase = (piece as f64 + 0.5 * (angle.cos() + 1.0)) / PIECES as f64;
        let value = share((offset - phase) * ratio, (offset + 1.0 - phase) * ratio);
        for (order, polynomial) in CHEBYSHEV.iter().enumerate() {
            let norm = if order == 0 { 1.0 } else { 2.0 } / PHASE_TERMS as f64;
            let part = norm * value * (order as f64 * angle).cos();
            for (monomial, coefficient) in monomials.iter_mut().zip(polynomial) {
                *monomial += part * coefficient;
            }
        }
    }
    monomials
}

/// Part of a standard normal distribution between two places.
fn share(low: f64, high: f64) -> f64 {
    let unit = std::f64::consts::FRAC_1_SQRT_2;
    // On the side away from the centre differences of the complement keep their digits.
    if low > 0.0 {
        0.5 * (libm::erfc(low * unit) - libm::erfc(high * unit))
    } else {
        0.5 * (libm::erfc(-high * unit) - libm::erfc(-low * unit))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::voigt::{Arithmetic, Separate};

    #[test]
    fn tabulated_shares_match_the_error_function() {
        let mut room = Vec::new();
        let Some(vector) = Separate::vector() else {
            unreachable!("runs anywhere")
        };
        for (lowest, highest) in [(0.4, 0.4), (0.9, 0.95), (2.0, 2.1), (0.1, 0.1)] {
            let Some(shares) = Shares::new(lowest, highest) else {
                unreachable!("within the range")
            };
            for k in 0..2000 {
                let phase = f64::from(k) / 2000.0;
                let ratio = lowest + (highest - lowest) * (f64::from(k) * 0.618).fract();
                let got = shares.at(vector, phase, ratio, &mut room);
                let mut worst: f64 = 0.0;
                for (channel, value) in got.shares.iter().enumerate() {
                    let offset = channel as f64 - got.below as f64;
                    let expected = share((offset - phase) * ratio, (offset + 1.0 - phase) * ratio);
                    worst = worst.max((value - expected).abs());
                }
                assert!(worst < 2e-8, "ratio {ratio} phase {phase}: {worst:e}");
            }
        }
    }
}
