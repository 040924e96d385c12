//! Moving the decimal point exactly, so that 589.1583 nm in any file is the same number of metres.
//!
//! Multiplying by 1e-9 rounds twice and is off by a unit in the last place for about a third of all values. Here
//! the decimal digits are kept and only their exponent changes, so that a value is rounded once, and a wavelength
//! that was written is read back bit for bit.

/// Parses a decimal number and multiplies it by a power of ten, rounded once.
pub fn parse_shifted(text: &str, exponent: i32) -> Option<f64> {
    let text = text.trim();
    let plain: f64 = text.parse().ok()?;
    if !text.contains(|c: char| c.is_ascii_digit()) {
        return Some(plain); // nan, inf
    }
    let (digits, own) = match text.split_once(['e', 'E']) {
        Some((digits, own)) => match own.parse::<i64>() {
            Ok(own) => (digits, own),
            // An exponent beyond all integers: zero or infinity, which a shift does not change.
            Err(_) => return Some(plain),
        },
        None => (text, 0),
    };
    format!("{digits}e{}", own.saturating_add(exponent.into()))
        .parse()
        .ok()
}

/// A number times a power of ten, taken of its shortest decimal form.
pub fn shifted(value: f64, exponent: i32) -> f64 {
    parse_shifted(&format!("{value:e}"), exponent).unwrap_or(f64::NAN)
}

/// The shortest text that [`parse_shifted`] with the opposite exponent turns into the same number.
pub fn text_shifted(value: f64, exponent: i32) -> String {
    let text = format!("{value:e}");
    let Some((digits, own)) = text.split_once('e') else {
        return text; // nan, inf
    };
    let total = own.parse::<i32>().unwrap_or(0) + exponent;
    let (sign, digits) = digits.strip_prefix('-').map_or(("", digits), |d| ("-", d));
    let bare: String = digits.chars().filter(|c| *c != '.').collect();
    // Plain notation where people expect it, scientific elsewhere.
    match usize::try_from(total) {
        Ok(point) if point < 7 => {
            let mut plain = bare;
            while plain.len() <= point {
                plain.push('0');
            }
            if plain.len() > point + 1 {
                plain.insert(point + 1, '.');
            }
            format!("{sign}{plain}")
        }
        _ => format!("{sign}{digits}e{total}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn a_shift_rounds_once() {
        assert_eq!(parse_shifted("589.1583", -9), Some(589.1583e-9));
        assert_eq!(parse_shifted(" 5.891583E2 ", -9), Some(589.1583e-9));
        assert_eq!(shifted(5891.583, -10), 589.1583e-9);
        assert_eq!(shifted(589.1583e-9, 9), 589.1583);
        assert_eq!(parse_shifted("five", -9), None);
        assert_eq!(parse_shifted("0x10", -9), None);
        assert!(parse_shifted("nan", -9).unwrap().is_nan());
        assert_eq!(
            parse_shifted("1e99999999999999999999", -9).map(f64::is_infinite),
            Some(true)
        );
    }

    #[test]
    fn text_is_plain_where_people_expect_it() {
        assert_eq!(text_shifted(589.1583e-9, 9), "589.1583");
        assert_eq!(text_shifted(1e-6, 9), "1000");
        assert_eq!(text_shifted(1.5e-12, 9), "1.5e-3");
        assert_eq!(text_shifted(-2.5, 0), "-2.5");
        assert_eq!(text_shifted(f64::NAN, 0), "NaN");
    }

    proptest! {
        #[test]
        fn every_number_survives_the_text(value in proptest::num::f64::NORMAL, exponent in -12..12i32) {
            let text = text_shifted(value, exponent);
            let back = parse_shifted(&text, -exponent).unwrap();
            prop_assert_eq!(back.to_bits(), value.to_bits(), "{}", text);
        }
    }
}
