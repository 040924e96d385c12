//! Random numbers that are the same on every machine, for tests with fixed seeds.

use std::f64::consts::TAU;

/// SplitMix64 (Steele, Lea & Flood 2014, OOPSLA, 453): small, well tested, the same everywhere.
#[derive(Debug, Clone)]
pub struct Chance {
    state: u64,
}

impl Chance {
    /// A stream of its own for each seed.
    pub fn new(seed: u64) -> Self {
        Chance {
            state: seed.wrapping_mul(0x9E37_79B9_7F4A_7C15),
        }
    }

    fn next(&mut self) -> u64 {
        self.state = self.state.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.state;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// Uniform in the open interval from 0 to 1.
    pub fn unit(&mut self) -> f64 {
        ((self.next() >> 11) as f64 + 0.5) / (1_u64 << 53) as f64
    }

    /// Uniform between two bounds.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.unit()
    }

    /// Uniform in the logarithm between two positive bounds.
    pub fn between_in_log(&mut self, low: f64, high: f64) -> f64 {
        (self.between(low.ln(), high.ln())).exp()
    }

    /// Standard normal, by Box & Muller (1958, Ann. Math. Statist. 29, 610).
    pub fn normal(&mut self) -> f64 {
        (-2.0 * self.unit().ln()).sqrt() * (TAU * self.unit()).cos()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_normal_deviates_have_the_moments_of_a_normal_distribution() {
        const DRAWS: usize = 200_000;
        let mut chance = Chance::new(7);
        let draws: Vec<f64> = (0..DRAWS).map(|_| chance.normal()).collect();
        let moment = |power| draws.iter().map(|x| x.powi(power)).sum::<f64>() / DRAWS as f64;
        // Five standard errors of each moment.
        let error = 5.0 / (DRAWS as f64).sqrt();
        assert!(moment(1).abs() < error);
        assert!((moment(2) - 1.0).abs() < error * 2.0_f64.sqrt());
        assert!((moment(4) - 3.0).abs() < error * 96.0_f64.sqrt());
    }
}
