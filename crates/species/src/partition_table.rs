//! The partition function tabulated once, for callers that need it at every pixel.

use crate::{PARTITION_T_HIGH_K, PARTITION_T_LOW_K, Partition, Species};

/// Largest error of ln Q between the nodes that the table accepts when it is built.
const LN_Q_TOLERANCE: f64 = 1e-9;
/// First number of intervals; doubled until the tolerance holds.
const FIRST_INTERVALS: usize = 32;
/// Last number of intervals: beyond it rounding, not the step, sets the error.
const MOST_INTERVALS: usize = 1 << 15;

/// ln Q on a grid in ln T with cubic Hermite interpolation, so that value and slope belong to one smooth curve.
///
/// Accuracy: 2e-9 in ln Q against the plain sum over the whole range it was built for
/// (`the_table_is_the_sum`). Source of the interpolation: Fritsch and Carlson, SIAM J. Numer. Anal. 17, 238 (1980), eq. 2.
#[derive(Debug, Clone, PartialEq)]
pub struct PartitionTable {
    ln_t_low: f64,
    ln_t_high: f64,
    per_step: f64,
    /// ln Q and its derivative by the grid index, node by node.
    nodes: Vec<[f64; 2]>,
}

impl PartitionTable {
    /// Tabulates the partition function of `species` from `t_low_k` to `t_high_k`, K.
    ///
    /// The range is brought inside the domain of [`Partition`] and, if reversed, turned round.
    pub fn new(species: &Species, t_low_k: f64, t_high_k: f64) -> Self {
        let inside = |t_k: f64| t_k.clamp(PARTITION_T_LOW_K, PARTITION_T_HIGH_K).ln();
        let (a, b) = (inside(t_low_k), inside(t_high_k));
        // A range of one temperature still needs an interval.
        let (ln_t_low, ln_t_high) = (a.min(b), a.max(b).max(a.min(b) + 1e-6));
        let mut intervals = FIRST_INTERVALS;
        loop {
            let table = Self::with_intervals(species, ln_t_low, ln_t_high, intervals);
            if intervals >= MOST_INTERVALS || table.worst_between_nodes(species) <= LN_Q_TOLERANCE {
                return table;
            }
            intervals *= 2;
        }
    }

    fn with_intervals(species: &Species, ln_t_low: f64, ln_t_high: f64, intervals: usize) -> Self {
        let step = (ln_t_high - ln_t_low) / intervals as f64;
        let nodes = (0..=intervals)
            .map(|i| {
                let t_k = (ln_t_low + step * i as f64).exp();
                let exact = species.partition_function(t_k);
                [exact.ln_q, exact.dlnq_dt_per_k * t_k * step]
            })
            .collect();
        PartitionTable {
            ln_t_low,
            ln_t_high,
            per_step: 1.0 / step,
            nodes,
        }
    }

    fn worst_between_nodes(&self, species: &Species) -> f64 {
        let mut worst: f64 = 0.0;
        for i in 0..self.nodes.len() - 1 {
            let t_k = (self.ln_t_low + (i as f64 + 0.5) / self.per_step).exp();
            worst = worst
                .max((self.ln_q_and_slope(t_k).ln_q - species.partition_function(t_k).ln_q).abs());
        }
        worst
    }

    /// ln Q and its slope by the temperature at `temperature_k`.
    ///
    /// Outside the range of the table: value and slope at the nearer end. NaN in gives NaN out.
    pub fn ln_q_and_slope(&self, temperature_k: f64) -> Partition {
        let ln_t = temperature_k.ln().clamp(self.ln_t_low, self.ln_t_high);
        if temperature_k.is_nan() {
            return Partition {
                ln_q: f64::NAN,
                dlnq_dt_per_k: f64::NAN,
            };
        }
        // ln of a negative temperature is NaN and passes the clamp: it belongs to the lower end.
        let ln_t = if ln_t.is_nan() { self.ln_t_low } else { ln_t };
        let place = (ln_t - self.ln_t_low) * self.per_step;
        let i = (place as usize).min(self.nodes.len() - 2);
        let x = place - i as f64;
        let ([y0, d0], [y1, d1]) = (self.nodes[i], self.nodes[i + 1]);
        let rise = y1 - y0;
        let c2 = 3.0 * rise - 2.0 * d0 - d1;
        let c3 = d0 + d1 - 2.0 * rise;
        let ln_q = y0 + x * (d0 + x * (c2 + x * c3));
        let per_index = d0 + x * (2.0 * c2 + x * 3.0 * c3);
        Partition {
            ln_q,
            dlnq_dt_per_k: per_index * self.per_step / ln_t.exp(),
        }
    }

    /// The temperatures that the table spans, K.
    pub fn range_k(&self) -> (f64, f64) {
        (self.ln_t_low.exp(), self.ln_t_high.exp())
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;
    use crate::Catalogue;

    #[test]
    fn the_table_is_the_sum() {
        let (mut worst, mut worst_slope): (f64, f64) = (0.0, 0.0);
        for name in ["Na I", "Fe I", "O I", "H I", "Ca II"] {
            let species = Catalogue::builtin().get(name).unwrap();
            let table = PartitionTable::new(&species, 50.0, 1e5);
            for i in 0..5000 {
                let t_k = 50.0 * (1e5_f64 / 50.0).powf((f64::from(i) + 0.37) / 5000.0);
                let (got, want) = (table.ln_q_and_slope(t_k), species.partition_function(t_k));
                worst = worst.max((got.ln_q - want.ln_q).abs());
                worst_slope = worst_slope.max((got.dlnq_dt_per_k - want.dlnq_dt_per_k).abs() * t_k);
            }
        }
        assert!(worst < 2e-9, "ln Q off by {worst:e}");
        assert!(worst_slope < 1e-6, "T d ln Q/dT off by {worst_slope:e}");
    }

    #[test]
    fn outside_its_range_the_table_holds_its_ends() {
        let species = Catalogue::builtin().get("Na I").unwrap();
        let table = PartitionTable::new(&species, 9000.0, 300.0);
        assert_eq!(table.ln_q_and_slope(-5.0), table.ln_q_and_slope(299.0));
        assert_eq!(
            table.ln_q_and_slope(f64::INFINITY),
            table.ln_q_and_slope(9001.0)
        );
        assert!(table.ln_q_and_slope(f64::NAN).ln_q.is_nan());
        assert!(
            (table.range_k().0 - 300.0).abs() < 1e-9 && (table.range_k().1 - 9000.0).abs() < 1e-9
        );
    }
}
