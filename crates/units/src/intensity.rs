//! Units of spectral radiance and of spectral flux density, read from their text.

use std::fmt;
use std::str::FromStr;

use crate::UnitsError;

/// Radians in one second of arc.
const ARCSECOND_RAD: f64 = std::f64::consts::PI / 648_000.0;

/// The unit of a file's intensities.
///
/// Products of unit symbols with whole powers, such as `W m-2 sr-1 nm-1`, `erg/s/cm^2/Angstrom`,
/// `1e-20 erg s-1 cm-2 Angstrom-1`, `W / (m2 sr um)`. `relative`, `counts` and the like say that there is no
/// calibration.
///
/// ```
/// let unit: backlit_units::IntensityUnit = "W m-2 sr-1 nm-1".parse()?;
/// assert!(unit.per_steradian && (unit.to_si / 1e9 - 1.0).abs() < 1e-15);
/// # Ok::<(), backlit_units::UnitsError>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct IntensityUnit {
    text: String,
    /// Factor to W m^-2 m^-1, or to W m^-2 sr^-1 m^-1 if `per_steradian`; 1 if `is_relative`.
    pub to_si: f64,
    /// Whether the unit is per solid angle.
    pub per_steradian: bool,
    /// Whether the scale is arbitrary.
    pub is_relative: bool,
}

/// Words for a scale without calibration.
const RELATIVE: [&str; 10] = [
    "relative",
    "counts",
    "count",
    "ct",
    "adu",
    "dn",
    "electron",
    "electrons",
    "arbitrary",
    "arb",
];

/// A factor and powers of kilogram, metre, second and radian.
#[derive(Clone, Copy)]
struct Quantity {
    factor: f64,
    powers: [i32; 4],
}

impl Quantity {
    const ONE: Quantity = Quantity {
        factor: 1.0,
        powers: [0; 4],
    };

    fn times_power(self, other: Quantity, power: i32) -> Quantity {
        let mut powers = self.powers;
        for (mine, theirs) in powers.iter_mut().zip(other.powers) {
            *mine += theirs * power;
        }
        Quantity {
            factor: self.factor * other.factor.powi(power),
            powers,
        }
    }
}

const WATT: [i32; 4] = [1, 2, -3, 0];
const JOULE: [i32; 4] = [1, 2, -2, 0];
const METRE: [i32; 4] = [0, 1, 0, 0];
const SECOND: [i32; 4] = [0, 0, 1, 0];
const HERTZ: [i32; 4] = [0, 0, -1, 0];
const RADIAN: [i32; 4] = [0, 0, 0, 1];
const STERADIAN: [i32; 4] = [0, 0, 0, 2];

fn symbol(word: &str) -> Option<Quantity> {
    let whole = |factor, powers| Some(Quantity { factor, powers });
    match word {
        "erg" | "ergs" => return whole(1e-7, JOULE),
        "sr" | "ster" | "steradian" => return whole(1.0, STERADIAN),
        "arcsec" | "as" => return whole(ARCSECOND_RAD, RADIAN),
        "rad" => return whole(1.0, RADIAN),
        "Angstrom" | "angstrom" | "Angstroms" | "angstroms" | "Ang" | "AA" | "A" | "Å" => {
            return whole(1e-10, METRE);
        }
        "micron" | "microns" => return whole(1e-6, METRE),
        "sec" | "second" => return whole(1.0, SECOND),
        "Jy" => return whole(1e-26, [1, 0, -2, 0]),
        _ => {}
    }
    let base = |unit: &str| match unit {
        "W" | "Watt" | "watt" => Some(WATT),
        "J" => Some(JOULE),
        "m" => Some(METRE),
        "s" => Some(SECOND),
        "Hz" => Some(HERTZ),
        _ => None,
    };
    if let Some(powers) = base(word) {
        return whole(1.0, powers);
    }
    let first = word.chars().next()?;
    let factor = match first {
        'p' => 1e-12,
        'n' => 1e-9,
        'u' | 'µ' | 'μ' => 1e-6,
        'm' => 1e-3,
        'c' => 1e-2,
        'k' => 1e3,
        'M' => 1e6,
        'G' => 1e9,
        _ => return None,
    };
    whole(factor, base(&word[first.len_utf8()..])?)
}

/// Reads a product of symbols from left to right; recursion only for brackets.
struct Reader<'a> {
    text: &'a str,
    rest: &'a str,
}

impl Reader<'_> {
    fn unknown(&self, word: &str) -> UnitsError {
        UnitsError::UnknownUnit {
            text: self.text.to_owned(),
            word: word.to_owned(),
        }
    }

    /// A signed whole number after an optional `^` or `**`, with or without brackets; 1 if there is none.
    fn power(&mut self) -> Result<i32, UnitsError> {
        let marked = ["**", "^"]
            .iter()
            .find_map(|mark| self.rest.strip_prefix(mark));
        let body = marked.unwrap_or(self.rest);
        let (body, bracket) = match body.strip_prefix('(') {
            Some(inner) if marked.is_some() => (inner, true),
            _ => (body, false),
        };
        let end = body
            .char_indices()
            .find(|&(i, c)| !(c.is_ascii_digit() || (i == 0 && (c == '-' || c == '+'))))
            .map_or(body.len(), |(i, _)| i);
        if end == 0 && marked.is_none() {
            return Ok(1);
        }
        let power = body[..end]
            .parse::<i32>()
            .map_err(|_| self.unknown(self.rest))?;
        self.rest = &body[end..];
        if bracket {
            self.rest = self
                .rest
                .strip_prefix(')')
                .ok_or_else(|| self.unknown(self.rest))?;
        }
        if power.abs() > 400 {
            Err(self.unknown(&power.to_string()))
        } else {
            Ok(power)
        }
    }

    /// A number in front: `1e-20`, `10^-20`, `10**(-20)`, `2.5`.
    fn number(&mut self) -> Result<Quantity, UnitsError> {
        let bytes = self.rest.as_bytes();
        let mut end = 0;
        while end < bytes.len() && (bytes[end].is_ascii_digit() || bytes[end] == b'.') {
            end += 1;
        }
        if end < bytes.len() && (bytes[end] | 32) == b'e' {
            let sign = usize::from(
                end + 1 < bytes.len() && (bytes[end + 1] == b'-' || bytes[end + 1] == b'+'),
            );
            let digits = bytes[end + 1 + sign..]
                .iter()
                .take_while(|b| b.is_ascii_digit())
                .count();
            if digits > 0 {
                end += 1 + sign + digits;
            }
        }
        let word = &self.rest[..end];
        let factor: f64 = word.parse().map_err(|_| self.unknown(word))?;
        self.rest = &self.rest[end..];
        // "10-20" is a power of ten in FITS headers; "2-3" is nothing.
        let raised = self.rest.starts_with('^') || self.rest.starts_with("**");
        let power = if raised || (factor == 10.0 && self.rest.starts_with(['-', '+'])) {
            self.power()?
        } else {
            1
        };
        Ok(Quantity {
            factor: factor.powi(power),
            powers: [0; 4],
        })
    }

    fn product(&mut self, inside: bool) -> Result<Quantity, UnitsError> {
        let mut total = Quantity::ONE;
        let mut divide = false;
        loop {
            let trimmed = self
                .rest
                .trim_start_matches([' ', '\t', '*', '.', '·', '_']);
            self.rest = trimmed;
            let Some(first) = self.rest.chars().next() else {
                return if inside || divide {
                    Err(self.unknown("("))
                } else {
                    Ok(total)
                };
            };
            if first == ')' {
                self.rest = &self.rest[1..];
                return if inside && !divide {
                    Ok(total)
                } else {
                    Err(self.unknown(")"))
                };
            }
            if first == '/' {
                if divide {
                    return Err(self.unknown("//"));
                }
                self.rest = &self.rest[1..];
                divide = true;
                continue;
            }
            let (quantity, power) = if first == '(' {
                self.rest = &self.rest[1..];
                (self.product(true)?, self.power()?)
            } else if first.is_ascii_digit() {
                (self.number()?, 1)
            } else {
                let end = self
                    .rest
                    .find(|c: char| !c.is_alphabetic())
                    .unwrap_or(self.rest.len());
                if end == 0 {
                    return Err(self.unknown(self.rest));
                }
                let word = &self.rest[..end];
                let quantity = symbol(word).ok_or_else(|| self.unknown(word))?;
                self.rest = &self.rest[end..];
                (quantity, self.power()?)
            };
            total = total.times_power(quantity, if divide { -power } else { power });
            divide = false;
        }
    }
}

impl IntensityUnit {
    /// The unit without calibration.
    pub fn relative() -> Self {
        IntensityUnit {
            text: "relative".to_owned(),
            to_si: 1.0,
            per_steradian: false,
            is_relative: true,
        }
    }

    /// The text as the user gave it.
    pub fn text(&self) -> &str {
        &self.text
    }
}

impl FromStr for IntensityUnit {
    type Err = UnitsError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let trimmed = text.trim();
        if RELATIVE
            .iter()
            .any(|word| trimmed.eq_ignore_ascii_case(word))
        {
            return Ok(IntensityUnit {
                text: trimmed.to_owned(),
                ..IntensityUnit::relative()
            });
        }
        let quantity = Reader {
            text: trimmed,
            rest: trimmed,
        }
        .product(false)?;
        let per_steradian = quantity.powers == [1, -1, -3, -2];
        let flux_density = quantity.powers == [1, -1, -3, 0];
        let usable = quantity.factor.is_finite() && quantity.factor > 0.0;
        if !(per_steradian || flux_density) || !usable {
            return Err(UnitsError::NotSpectralRadiance {
                text: trimmed.to_owned(),
            });
        }
        Ok(IntensityUnit {
            text: trimmed.to_owned(),
            to_si: quantity.factor,
            per_steradian,
            is_relative: false,
        })
    }
}

impl fmt::Display for IntensityUnit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.text)
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    fn si(text: &str) -> (f64, bool) {
        let unit: IntensityUnit = text.parse().unwrap();
        assert_eq!(unit.to_string(), text.trim());
        (unit.to_si, unit.per_steradian)
    }

    fn assert_si(text: &str, want: f64, per_steradian: bool) {
        let (got, got_per_steradian) = si(text);
        assert!(
            (got / want - 1.0).abs() < 1e-13,
            "{text}: {got:e}, want {want:e}"
        );
        assert_eq!(got_per_steradian, per_steradian, "{text}");
    }

    #[test]
    fn radiances_and_fluxes_convert_to_si() {
        assert_si("W m-2 sr-1 nm-1", 1e9, true);
        assert_si("W m-2 nm-1", 1e9, false);
        assert_si("W m^-2 um^-1", 1e6, false);
        assert_si("W/m2/sr/µm", 1e6, true);
        assert_si("W / (m2 sr um)", 1e6, true);
        assert_si("W m-3 sr-1", 1.0, true);
        assert_si("mW m-2 nm-1", 1e6, false);
        // 1 erg/s = 1e-7 W, 1 cm^-2 = 1e4 m^-2, 1 A^-1 = 1e10 m^-1.
        assert_si("erg s-1 cm-2 Angstrom-1", 1e7, false);
        assert_si("erg/s/cm^2/Angstrom", 1e7, false);
        assert_si("1e-20 erg s-1 cm-2 Angstrom-1", 1e-13, false);
        assert_si("10**(-20)*erg/s/cm**2/Angstrom", 1e-13, false);
        assert_si("10-17 erg.s-1.cm-2.AA-1", 1e-10, false);
        // One square arcsecond is 2.350443e-11 sr.
        assert!(
            (si("W m-2 arcsec-2 nm-1").0 / (1e9 / 2.350_443_053_909_788e-11) - 1.0).abs() < 1e-12
        );
    }

    #[test]
    fn uncalibrated_scales_say_so() {
        for text in ["relative", "counts", "ADU"] {
            let unit: IntensityUnit = text.parse().unwrap();
            assert!(unit.is_relative && !unit.per_steradian && unit.to_si == 1.0);
        }
    }

    #[test]
    fn other_units_are_refused_with_the_word_or_the_reason() {
        let refuse = |text: &str| text.parse::<IntensityUnit>().unwrap_err();
        assert!(
            matches!(refuse("W furlong-2 nm-1"), UnitsError::UnknownUnit { word, .. } if word == "furlong")
        );
        for text in [
            "Jy",
            "W m-2 Hz-1",
            "K m",
            "W m-2",
            "W m-2 sr-2 nm-1",
            "",
            "W m-2 nm",
            "1e400 W m-3",
        ] {
            let message = refuse(text).to_string();
            assert!(message.contains("hint:"), "{message}");
        }
        for text in [
            "W/(m2 nm",
            "W//m3",
            "W m-3)",
            "W m^ nm-1",
            "W m-3 /",
            "W m-99999999999",
            "é",
            "W ²",
        ] {
            refuse(text);
        }
    }
}
