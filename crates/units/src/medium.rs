//! The medium that a file's wavelengths are given in.

use std::fmt;
use std::str::FromStr;

use crate::UnitsError;
use crate::air;

/// Vacuum, or standard air (15 C, 101 325 Pa, dry, 450 ppm CO2).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub enum Medium {
    /// Vacuum wavelengths.
    #[default]
    Vacuum,
    /// Wavelengths in standard air; below 200 nm they are vacuum wavelengths all the same.
    Air,
}

impl Medium {
    /// Vacuum wavelength in metres of a wavelength in this medium.
    pub fn to_vacuum_m(self, wavelength_m: f64) -> f64 {
        match self {
            Medium::Vacuum => wavelength_m,
            Medium::Air => air::air_to_vacuum_m(wavelength_m),
        }
    }

    /// Wavelength in this medium, in metres, of a vacuum wavelength.
    pub fn from_vacuum_m(self, wavelength_vac_m: f64) -> f64 {
        match self {
            Medium::Vacuum => wavelength_vac_m,
            Medium::Air => air::vacuum_to_air_m(wavelength_vac_m),
        }
    }
}

impl fmt::Display for Medium {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Medium::Vacuum => "vacuum",
            Medium::Air => "air",
        })
    }
}

impl FromStr for Medium {
    type Err = UnitsError;

    /// `vacuum` or `air`, in any case, with blanks around.
    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let word = text.trim();
        if word.eq_ignore_ascii_case("vacuum") || word.eq_ignore_ascii_case("vac") {
            Ok(Medium::Vacuum)
        } else if word.eq_ignore_ascii_case("air") {
            Ok(Medium::Air)
        } else {
            Err(UnitsError::UnknownMedium {
                got: text.to_owned(),
            })
        }
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    #[test]
    fn a_medium_reads_back_what_it_writes() {
        for medium in [Medium::Vacuum, Medium::Air] {
            assert_eq!(medium.to_string().parse::<Medium>().unwrap(), medium);
        }
        assert_eq!(" Air ".parse::<Medium>().unwrap(), Medium::Air);
    }

    #[test]
    fn an_unknown_medium_is_named_in_the_message() {
        let message = "water".parse::<Medium>().unwrap_err().to_string();
        assert!(
            message.contains("\"water\"") && message.contains("hint:"),
            "{message}"
        );
    }
}
