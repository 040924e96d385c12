//! Who owns a blend: a joint non-negative fit of the patterns that were found.

/// One line of a species as the fit sees it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shape {
    /// Index of the species.
    pub species: usize,
    /// Channel of its middle, with a fraction.
    pub channel: f64,
    /// Full width at half maximum, in channels.
    pub fwhm_channels: f64,
    /// Height that the pattern expects, in the unit of the data.
    pub height: f64,
}

/// Rounds of coordinate descent.
const ROUNDS: usize = 200;
/// Change of a coefficient, relative to the largest, that ends the descent.
const SETTLED: f64 = 1e-9;

/// Coefficients `x >= 0` that minimise `|A x - b|²`, where column j of A is the sum of the Gaussian lines of species j.
///
/// * `data`: one a channel, divided by sigma, of the sign of the lines positive; 0 where there is none.
/// * `species`: how many species the shapes belong to.
///
/// Coordinate descent on the normal equations, each coefficient held at or above 0: Franc, Hlaváč & Navara (2005,
/// Computer Analysis of Images and Patterns, 407). A species without a shape gets 0.
pub fn shares(data: &[f64], shapes: &[Shape], species: usize) -> Vec<f64> {
    let mut columns: Vec<Vec<(usize, f64)>> = vec![Vec::new(); species];
    for shape in shapes {
        let sigma = shape.fwhm_channels / 2.354_82;
        let reach = 4.0 * sigma;
        let from = (shape.channel - reach).ceil().max(0.0) as usize;
        let to = (shape.channel + reach).floor().min(data.len() as f64 - 1.0);
        for k in from..=(to.max(0.0) as usize) {
            let u = (k as f64 - shape.channel) / sigma;
            columns[shape.species].push((k, shape.height * (-0.5 * u * u).exp()));
        }
    }
    let mut dense = vec![0.0; data.len()];
    let mut gram = vec![vec![0.0; species]; species];
    let mut right = vec![0.0; species];
    for j in 0..species {
        for &(k, value) in &columns[j] {
            dense[k] += value;
        }
        for (i, column) in columns.iter().enumerate() {
            gram[i][j] = column.iter().map(|&(k, value)| value * dense[k]).sum();
        }
        right[j] = columns[j].iter().map(|&(k, value)| value * data[k]).sum();
        for &(k, _) in &columns[j] {
            dense[k] = 0.0;
        }
    }
    let mut x = vec![0.0_f64; species];
    for _ in 0..ROUNDS {
        let mut moved: f64 = 0.0;
        for j in 0..species {
            if gram[j][j] <= 0.0 {
                continue;
            }
            let slope: f64 = (0..species).map(|i| gram[j][i] * x[i]).sum::<f64>() - right[j];
            let next = (x[j] - slope / gram[j][j]).max(0.0);
            moved = moved.max((next - x[j]).abs());
            x[j] = next;
        }
        if moved <= SETTLED * x.iter().copied().fold(0.0, f64::max) {
            break;
        }
    }
    x
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(species: usize, channel: f64, height: f64) -> Shape {
        Shape {
            species,
            channel,
            fwhm_channels: 3.0,
            height,
        }
    }

    fn drawn(shapes: &[Shape], amounts: &[f64]) -> Vec<f64> {
        (0..200)
            .map(|k| {
                shapes
                    .iter()
                    .map(|s| {
                        let u = (f64::from(k) - s.channel) / (s.fwhm_channels / 2.354_82);
                        amounts[s.species] * s.height * (-0.5 * u * u).exp()
                    })
                    .sum()
            })
            .collect()
    }

    #[test]
    fn a_blend_goes_to_its_owners_in_their_amounts() {
        let shapes = [
            line(0, 50.0, 4.0),
            line(0, 120.0, 2.0),
            line(1, 51.0, 3.0),
            line(1, 160.0, 1.0),
        ];
        let found = shares(&drawn(&shapes, &[2.0, 0.5]), &shapes, 2);
        assert!(
            (found[0] - 2.0).abs() < 1e-3 && (found[1] - 0.5).abs() < 2e-3,
            "{found:?}"
        );
    }

    #[test]
    fn who_only_borrows_gets_nothing_and_never_less() {
        let shapes = [
            line(0, 50.0, 4.0),
            line(0, 120.0, 2.0),
            line(1, 50.0, 1.0),
            line(1, 160.0, 3.0),
        ];
        let mut data = drawn(&shapes, &[1.0, 0.0]);
        // A dip where the second one expects a peak.
        data[160] = -3.0;
        let found = shares(&data, &shapes, 2);
        assert_eq!(found[1], 0.0);
        assert!((found[0] - 1.0).abs() < 1e-3);
    }

    #[test]
    fn nobody_gets_nothing() {
        assert_eq!(shares(&[1.0; 10], &[], 1), [0.0]);
        assert_eq!(shares(&[], &[], 0), Vec::<f64>::new());
    }
}
