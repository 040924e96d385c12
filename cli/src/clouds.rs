//! The choice of a number of clouds and its evidence, for the eye and for programs.

use std::fmt::Write as _;

use backlit_inverse::clouds::Tried;
use serde_json::{Value, json};

/// Which number of clouds was chosen out of which.
pub struct Evidence {
    /// Clouds chosen.
    pub chosen: usize,
    /// What each number cost.
    pub tried: Vec<Tried>,
}

/// The N of `up-to-N`.
pub fn most(text: &str) -> Result<usize, String> {
    text.strip_prefix("up-to-")
        .and_then(|number| number.parse().ok())
        .filter(|most| (1..=3).contains(most))
        .ok_or_else(|| "expected up-to-1, up-to-2 or up-to-3".to_owned())
}

impl Evidence {
    /// As the field `clouds` of the answer.
    pub fn json(&self) -> Value {
        let tried: Vec<Value> = self
            .tried
            .iter()
            .map(|tried| {
                json!({
                    "clouds": tried.clouds,
                    "chi2": tried.chi_square,
                    "free_values": tried.free_values,
                    "channels": tried.channels,
                    "bic": tried.bic,
                    "all_detected": tried.all_detected,
                    "price_of_search": tried.price_of_search,
                })
            })
            .collect();
        json!({ "chosen": self.chosen, "tried": tried })
    }

    /// As a table below the answer.
    pub fn table(&self) -> String {
        let mut text = format!(
            "\n{:<8}  {:>14}  {:>11}  {:>14}  detected\n",
            "clouds", "chi-square", "free values", "BIC"
        );
        for tried in &self.tried {
            let mark = if tried.clouds == self.chosen {
                "  <- chosen"
            } else {
                ""
            };
            let _ = writeln!(
                text,
                "{:<8}  {:>14.2}  {:>11}  {:>14.2}  {:<8}{mark}",
                tried.clouds,
                tried.chi_square,
                tried.free_values,
                tried.bic,
                if tried.all_detected { "all" } else { "not all" },
            );
        }
        let _ = writeln!(
            text,
            "a further cloud must lower BIC, and chi-square by more than {:.1}, which a search finds in noise",
            self.tried.last().map_or(0.0, |tried| tried.price_of_search)
        );
        text
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_number_of_clouds_is_one_to_three() {
        assert_eq!(most("up-to-3"), Ok(3));
        for wrong in ["3", "up-to-0", "up-to-4", "up-to-", "up-to-x"] {
            assert!(most(wrong).is_err(), "{wrong}");
        }
    }
}
