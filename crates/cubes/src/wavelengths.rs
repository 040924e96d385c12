//! What every list of wavelengths must fulfil, wherever it was read.

use std::path::Path;

use crate::decimal;
use crate::error::{CubesError, Place};

/// Refuses fewer than two channels, values that are not finite and positive, and order that is not strict.
///
/// `wavelength` is in metres; `place` says where element `i` stands in the file.
pub fn verify(
    path: &Path,
    wavelength: &[f64],
    whole: Place,
    place: impl Fn(usize) -> Place,
) -> Result<(), CubesError> {
    if wavelength.len() < 2 {
        let found = wavelength.len();
        return Err(CubesError::TooFewChannels {
            path: path.into(),
            place: whole,
            found,
        });
    }
    if let Some(i) = wavelength.iter().position(|w| !w.is_finite() || *w <= 0.0) {
        let found_nm = decimal::shifted(wavelength[i], 9);
        return Err(CubesError::BadWavelength {
            path: path.into(),
            place: place(i),
            found_nm,
        });
    }
    let rising = wavelength[1] >= wavelength[0];
    for (i, pair) in wavelength.windows(2).enumerate() {
        let ordered = if rising {
            pair[1] > pair[0]
        } else {
            pair[1] < pair[0]
        };
        if !ordered {
            return Err(CubesError::NotMonotonic {
                path: path.into(),
                place: place(i + 1),
                found_nm: decimal::shifted(pair[1], 9),
                previous_nm: decimal::shifted(pair[0], 9),
                rising,
            });
        }
    }
    Ok(())
}
