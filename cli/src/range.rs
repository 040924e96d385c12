//! A range of wavelengths on the command line: `588..591`.

use std::str::FromStr;

/// From one wavelength to another, in nm.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RangeNm {
    /// The short end.
    pub low_nm: f64,
    /// The long end.
    pub high_nm: f64,
}

impl RangeNm {
    /// Whether a wavelength lies inside, ends included.
    pub fn contains(&self, wavelength_nm: f64) -> bool {
        (self.low_nm..=self.high_nm).contains(&wavelength_nm)
    }
}

/// Why a text is no range.
#[derive(Debug, thiserror::Error, PartialEq)]
#[non_exhaustive]
pub enum RangeError {
    /// There are not two numbers with two dots between.
    #[error("expected two wavelengths in nm with two dots between, for example 588..591")]
    NotARange,
    /// The order is wrong, or a number is not positive.
    #[error(
        "{low_nm} nm to {high_nm} nm does not rise from above 0 nm; the short wavelength comes first"
    )]
    NotRising {
        /// The first number.
        low_nm: f64,
        /// The second number.
        high_nm: f64,
    },
}

impl FromStr for RangeNm {
    type Err = RangeError;

    fn from_str(text: &str) -> Result<Self, RangeError> {
        let (low, high) = text.split_once("..").ok_or(RangeError::NotARange)?;
        let number = |part: &str| {
            part.trim()
                .parse::<f64>()
                .map_err(|_| RangeError::NotARange)
        };
        let (low_nm, high_nm) = (number(low)?, number(high)?);
        if low_nm > 0.0 && low_nm < high_nm && high_nm.is_finite() {
            Ok(RangeNm { low_nm, high_nm })
        } else {
            Err(RangeError::NotRising { low_nm, high_nm })
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_range_has_two_rising_wavelengths() {
        let range = RangeNm::from_str("588..591.5");
        assert_eq!(
            range,
            Ok(RangeNm {
                low_nm: 588.0,
                high_nm: 591.5
            })
        );
        assert_eq!(RangeNm::from_str("588-591"), Err(RangeError::NotARange));
        assert_eq!(RangeNm::from_str("a..b"), Err(RangeError::NotARange));
        assert!(matches!(
            RangeNm::from_str("591..588"),
            Err(RangeError::NotRising { .. })
        ));
        assert!(matches!(
            RangeNm::from_str("-1..588"),
            Err(RangeError::NotRising { .. })
        ));
        assert!(matches!(
            RangeNm::from_str("NaN..588"),
            Err(RangeError::NotRising { .. })
        ));
    }
}
