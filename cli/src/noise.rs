//! Gaussian noise for invented data, the same for the same seed whatever the order of the pixels.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal};

/// Noise of one width for all channels.
#[derive(Debug, Clone, Copy)]
pub struct Noise {
    /// 1 sigma in the unit of the data.
    pub sigma: f64,
    /// The seed of the whole cube.
    pub seed: u64,
}

impl Noise {
    /// Adds noise to the spectrum of one pixel; each pixel has a stream of its own.
    pub fn add(&self, spectrum: &mut [f64], pixel: u64) {
        let mut generator = ChaCha8Rng::seed_from_u64(self.seed);
        generator.set_stream(pixel);
        for value in spectrum {
            let draw: f64 = StandardNormal.sample(&mut generator);
            *value += self.sigma * draw;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_million_draws_have_the_width_that_was_asked_for() {
        let mut draws = vec![0.0; 1_000_000];
        let noise = Noise {
            sigma: 2.0,
            seed: 7,
        };
        noise.add(&mut draws, 0);
        let count = draws.len() as f64;
        let mean = draws.iter().sum::<f64>() / count;
        let variance = draws.iter().map(|d| (d - mean).powi(2)).sum::<f64>() / count;
        // Five standard errors: 2 sigma/sqrt(n) for the mean, sqrt(2/n) relative for the variance.
        assert!(mean.abs() < 5.0 * 2.0 / count.sqrt());
        assert!((variance / 4.0 - 1.0).abs() < 5.0 * (2.0 / count).sqrt());
    }

    #[test]
    fn pixels_differ_and_a_pixel_repeats() {
        let draw = |pixel| {
            let mut values = [0.0; 8];
            Noise {
                sigma: 1.0,
                seed: 3,
            }
            .add(&mut values, pixel);
            values
        };
        assert_eq!(draw(5), draw(5));
        assert_ne!(draw(5), draw(6));
    }
}
