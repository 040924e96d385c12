//! False alarms, measured: the same search with patterns whose lines stand in the wrong places.

use super::map::Grid;

/// Decoys for each species.
pub const DECOYS: usize = 24;

/// Moves each line of a pattern on its own, by more than the search reaches and by less than the spectrum changes.
#[derive(Debug, Clone, Copy)]
pub struct Displacement {
    seed: u64,
    least: i32,
    most: i32,
    cells: i32,
}

impl Displacement {
    /// The displacement of one decoy of one species.
    pub fn new(grid: &Grid, species: usize, decoy: usize) -> Displacement {
        let cells = grid.len() as i32;
        let least = 3 * grid.usual_reach();
        Displacement {
            seed: ((species as u64) << 20) | decoy as u64,
            least,
            most: (cells / 8).max(2 * least),
            cells,
        }
    }

    /// Where a line of that rest cell goes; the same for every pattern of the decoy.
    pub fn place(&self, cell: i32) -> i32 {
        // SplitMix64 (Steele, Lea & Flood 2014, OOPSLA, 453) on seed and cell.
        let mut z = self
            .seed
            .wrapping_mul(0x9E37_79B9_7F4A_7C15)
            .wrapping_add((cell as u64).wrapping_mul(0xD1B5_4A32_D192_ED03));
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^= z >> 31;
        let part = (z >> 11) as f64 / (1_u64 << 53) as f64;
        let span = f64::from(self.most - self.least);
        let away = self.least + (span * (2.0 * part).fract()) as i32;
        let there = if part < 0.5 { cell - away } else { cell + away };
        // Beyond an end the line goes to the other side.
        if (0..self.cells).contains(&there) {
            there
        } else {
            2 * cell - there
        }
    }
}

/// The evidence that decoys reach, all species pooled.
#[derive(Debug, Clone)]
pub struct Null {
    /// Mean and standard deviation of each species' own decoys.
    own: Vec<(f64, f64)>,
    /// Standardised evidence of all decoys, falling.
    pooled: Vec<f64>,
    /// Where the exponential tail begins, its share of decoys, its scale.
    tail: (f64, f64, f64),
    decoys: Vec<Reached>,
}

/// What one decoy reaches.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Reached {
    /// Its best evidence, in nats.
    pub evidence: f64,
    /// How many of its lines count as seen.
    pub seen: usize,
}

/// Share of the decoys that the tail is fitted to.
const TAIL_SHARE: f64 = 0.03;

impl Null {
    /// From the evidence of each species' decoys; a species without decoys has an empty row.
    pub fn new(decoys: &[Vec<Reached>]) -> Null {
        let moments = |row: &[Reached]| {
            let mean = row.iter().map(|d| d.evidence).sum::<f64>() / row.len() as f64;
            let variance =
                row.iter().map(|d| (d.evidence - mean).powi(2)).sum::<f64>() / row.len() as f64;
            (mean, variance)
        };
        let rows: Vec<&Vec<Reached>> = decoys.iter().filter(|row| !row.is_empty()).collect();
        let usual = rows.iter().map(|row| moments(row).1).sum::<f64>() / rows.len().max(1) as f64;
        // Two dozen draws know their own spread badly: half of it is everybody's.
        let spread = |variance: f64| (0.5 * (variance + usual)).sqrt().max(0.3);
        let own: Vec<(f64, f64)> = decoys
            .iter()
            .map(|row| {
                if row.is_empty() {
                    return (0.0, 1.0);
                }
                let (mean, variance) = moments(row);
                (mean, spread(variance))
            })
            .collect();
        // Each decoy against the others of its species, as the real pattern will be: one that belonged to its own
        // yardstick could never stick out far.
        let mut pooled: Vec<f64> = Vec::new();
        for row in rows.iter().filter(|row| row.len() > 2) {
            for left_out in 0..row.len() {
                let others = [&row[..left_out], &row[left_out + 1..]].concat();
                let (mean, variance) = moments(&others);
                pooled.push((row[left_out].evidence - mean) / spread(variance));
            }
        }
        pooled.sort_by(|a, b| b.total_cmp(a));
        let count = ((TAIL_SHARE * pooled.len() as f64) as usize).max(5);
        let tail = if pooled.len() > 2 * count {
            let start = pooled[count];
            let scale = pooled[..count].iter().map(|z| z - start).sum::<f64>() / count as f64;
            (start, count as f64 / pooled.len() as f64, scale.max(0.25))
        } else {
            (0.0, 1.0, 1.0)
        };
        Null {
            own,
            pooled,
            tail,
            decoys: decoys.iter().flatten().copied().collect(),
        }
    }

    /// How many species chance makes reach a rate, an evidence and two lines, together.
    pub fn expected_by_chance(
        &self,
        species: impl Iterator<Item = usize>,
        rate: f64,
        least_evidence: f64,
    ) -> f64 {
        let strong = || self.decoys.iter().filter(|d| d.evidence >= least_evidence);
        // One of two where no decoy tells.
        let with_two_lines = (strong().filter(|d| d.seen >= 2).count() as f64 + 1.0)
            / (strong().count() as f64 + 2.0);
        with_two_lines
            * species
                .map(|index| self.rate(index, least_evidence).min(rate))
                .sum::<f64>()
    }

    /// How often a decoy of that species reaches this evidence.
    pub fn rate(&self, species: usize, evidence: f64) -> f64 {
        let (mean, sd) = self.own[species];
        let z = (evidence - mean) / sd;
        let (start, share, scale) = self.tail;
        if z > start {
            share * (-(z - start) / scale).exp()
        } else {
            let above = self.pooled.partition_point(|p| *p >= z);
            ((above as f64 + 1.0) / (self.pooled.len() as f64 + 1.0)).min(1.0)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn grid() -> Grid {
        let centres_m: Vec<f64> = (0..1000).map(|k| 500e-9 + 5e-11 * f64::from(k)).collect();
        Grid::new(&centres_m, &[3.0; 1000], 3e-11)
    }

    #[test]
    fn every_line_leaves_its_place_and_stays_in_the_data() {
        let grid = grid();
        let cells = grid.len() as i32;
        for decoy in 0..20 {
            let moved = Displacement::new(&grid, 3, decoy);
            for cell in (0..cells).step_by(7) {
                let there = moved.place(cell);
                assert!((0..cells).contains(&there), "{cell} to {there}");
                assert!((there - cell).abs() >= 3 * grid.usual_reach());
                assert_eq!(there, moved.place(cell));
            }
        }
    }

    #[test]
    fn the_tail_of_an_exponential_is_continued_beyond_the_decoys() {
        // Evidence with P(> x) = exp(-x) by its quantiles, the same for 50 species.
        let rows: Vec<Vec<Reached>> = (0..50)
            .map(|s| {
                (0..DECOYS)
                    .map(|d| {
                        let part = (f64::from(s) + 50.0 * d as f64 + 0.5) / (50.0 * DECOYS as f64);
                        Reached {
                            evidence: -(1.0 - part).ln(),
                            seen: 2,
                        }
                    })
                    .collect()
            })
            .collect();
        let null = Null::new(&rows);
        for x in [1.0_f64, 3.0, 5.0, 9.0] {
            let ratio = null.rate(7, x) / (-x).exp();
            assert!((0.4..2.5).contains(&ratio), "{x}: {ratio}");
        }
    }
}
