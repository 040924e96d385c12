//! The wavelength axis of a spectrum: channel centres and channel edges.

use crate::{Medium, UnitsError};

/// Channel centres and edges of a spectrum in vacuum metres, rising, whatever the file's order and medium.
///
/// A channel reaches half-way to its neighbours; the first and the last are symmetric about their centres.
/// Half-way is taken in the file's own medium, then converted.
#[derive(Debug, Clone, PartialEq)]
pub struct SpectralAxis {
    centres_vac_m: Vec<f64>,
    edges_vac_m: Vec<f64>,
    medium: Medium,
    reversed: bool,
}

impl SpectralAxis {
    /// Axis from the channel centres of a file, in metres in `medium`, rising or falling.
    ///
    /// Errors: fewer than two channels, a centre that is not finite or not positive, an order that is not strictly
    /// monotonic (index and both values given), a first channel that would reach below zero.
    ///
    /// ```
    /// use backlit_units::{Medium, SpectralAxis};
    /// let axis = SpectralAxis::from_centres_m(&[590e-9, 589e-9, 588e-9], Medium::Vacuum)?;
    /// assert!(axis.is_reversed());
    /// assert!((axis.edges_vac_m()[0] - 587.5e-9).abs() < 1e-20);
    /// # Ok::<(), backlit_units::UnitsError>(())
    /// ```
    pub fn from_centres_m(centres_m: &[f64], medium: Medium) -> Result<Self, UnitsError> {
        if centres_m.len() < 2 {
            return Err(UnitsError::AxisTooShort {
                got: centres_m.len(),
                need: 2,
            });
        }
        for (index, &value) in centres_m.iter().enumerate() {
            if !value.is_finite() || value <= 0.0 {
                return Err(UnitsError::BadWavelength {
                    index,
                    wavelength_m: value,
                });
            }
        }
        let reversed = centres_m[1] < centres_m[0];
        for index in 1..centres_m.len() {
            let (before, after) = (centres_m[index - 1], centres_m[index]);
            let in_order = if reversed {
                after < before
            } else {
                after > before
            };
            if !in_order {
                return Err(UnitsError::NotMonotonic {
                    index,
                    previous_m: before,
                    wavelength_m: after,
                    falling: reversed,
                });
            }
        }
        let mut centres: Vec<f64> = centres_m.to_vec();
        if reversed {
            centres.reverse();
        }
        let n = centres.len();
        let mut edges = Vec::with_capacity(n + 1);
        edges.push(1.5 * centres[0] - 0.5 * centres[1]);
        for pair in centres.windows(2) {
            edges.push(0.5 * (pair[0] + pair[1]));
        }
        edges.push(1.5 * centres[n - 1] - 0.5 * centres[n - 2]);
        if edges[0] <= 0.0 {
            return Err(UnitsError::ChannelBelowZero { edge_m: edges[0] });
        }
        for value in centres.iter_mut().chain(edges.iter_mut()) {
            *value = medium.to_vacuum_m(*value);
        }
        Ok(SpectralAxis {
            centres_vac_m: centres,
            edges_vac_m: edges,
            medium,
            reversed,
        })
    }

    /// Number of channels; at least two.
    pub fn len(&self) -> usize {
        self.centres_vac_m.len()
    }

    /// Never true: an axis has at least two channels.
    pub fn is_empty(&self) -> bool {
        self.centres_vac_m.is_empty()
    }

    /// Channel centres, vacuum metres, rising.
    pub fn centres_vac_m(&self) -> &[f64] {
        &self.centres_vac_m
    }

    /// Channel edges, vacuum metres, rising, one more than there are channels.
    pub fn edges_vac_m(&self) -> &[f64] {
        &self.edges_vac_m
    }

    /// Widths of the channels, vacuum metres.
    pub fn widths_vac_m(&self) -> Vec<f64> {
        self.edges_vac_m
            .windows(2)
            .map(|pair| pair[1] - pair[0])
            .collect()
    }

    /// The medium of the file's wavelengths.
    pub fn medium(&self) -> Medium {
        self.medium
    }

    /// Whether the file's wavelengths fall: then data must be reversed to go with this axis.
    pub fn is_reversed(&self) -> bool {
        self.reversed
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    #[test]
    fn channels_reach_half_way_to_their_neighbours() {
        let axis = SpectralAxis::from_centres_m(&[1e-7, 2e-7, 4e-7], Medium::Vacuum).unwrap();
        let want = [0.5e-7, 1.5e-7, 3e-7, 5e-7];
        for (got, want) in axis.edges_vac_m().iter().zip(want) {
            assert!((got - want).abs() < 1e-21);
        }
        assert_eq!((axis.len(), axis.is_reversed()), (3, false));
    }

    #[test]
    fn a_falling_axis_is_turned_round() {
        let up = SpectralAxis::from_centres_m(&[5e-7, 6e-7, 7e-7], Medium::Air).unwrap();
        let down = SpectralAxis::from_centres_m(&[7e-7, 6e-7, 5e-7], Medium::Air).unwrap();
        assert_eq!(up.centres_vac_m(), down.centres_vac_m());
        assert_eq!(up.edges_vac_m(), down.edges_vac_m());
        assert!(down.is_reversed() && !up.is_reversed());
    }

    #[test]
    fn air_axes_are_halved_in_air_and_then_converted() {
        let axis = SpectralAxis::from_centres_m(&[500e-9, 900e-9], Medium::Air).unwrap();
        assert_eq!(axis.edges_vac_m()[1], crate::air::air_to_vacuum_m(700e-9));
        assert!(axis.centres_vac_m()[0] > 500.13e-9);
    }

    #[test]
    fn bad_wavelengths_are_refused_with_their_place() {
        let refuse =
            |values: &[f64]| SpectralAxis::from_centres_m(values, Medium::Vacuum).unwrap_err();
        assert_eq!(
            refuse(&[5e-7]),
            UnitsError::AxisTooShort { got: 1, need: 2 }
        );
        assert!(matches!(
            refuse(&[5e-7, f64::NAN]),
            UnitsError::BadWavelength { index: 1, .. }
        ));
        assert!(matches!(
            refuse(&[-5e-7, 1e-7]),
            UnitsError::BadWavelength { index: 0, .. }
        ));
        assert!(matches!(
            refuse(&[5e-7, 6e-7, 6e-7]),
            UnitsError::NotMonotonic { index: 2, .. }
        ));
        assert!(matches!(
            refuse(&[6e-7, 5e-7, 5.5e-7]),
            UnitsError::NotMonotonic {
                index: 2,
                falling: true,
                ..
            }
        ));
        assert!(matches!(
            refuse(&[1e-9, 1e-7]),
            UnitsError::ChannelBelowZero { .. }
        ));
        let message = refuse(&[5e-7, 6e-7, 5.9e-7]).to_string();
        assert!(
            message.contains("590") && message.contains("600") && message.contains("hint:"),
            "{message}"
        );
    }
}
