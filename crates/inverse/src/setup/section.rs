//! One table of a setup file, read key by key; every value keeps its line.

use std::cell::RefCell;
use std::path::Path;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::place::line_of;
use super::{Place, SetupError, Value};

/// What a number must satisfy, with the words that say so.
#[derive(Clone, Copy)]
pub(super) struct Domain {
    /// The name of the quantity in messages.
    pub quantity: &'static str,
    /// Its unit in messages, empty for a pure number.
    pub unit: &'static str,
    /// The allowed range in messages.
    pub allowed: &'static str,
    /// What to do about a number outside.
    pub hint: &'static str,
    /// The test itself.
    pub holds: fn(f64) -> bool,
}

/// The text of the setup and its name: what a line number needs.
#[derive(Clone, Copy)]
pub(super) struct Source<'a> {
    pub text: &'a str,
    pub path: &'a Path,
}

/// One table, with the keys that it may have.
pub(super) struct Section<'a, 't> {
    source: Source<'a>,
    name: String,
    line: usize,
    table: &'a DeTable<'t>,
    asked: RefCell<Vec<&'static str>>,
}

/// A value and the key where it stands.
pub(super) struct Entry<'a, 't> {
    pub place: Box<Place>,
    pub value: &'a DeValue<'t>,
}

impl<'a, 't> Section<'a, 't> {
    pub fn new(source: Source<'a>, name: &str, line: usize, table: &'a DeTable<'t>) -> Self {
        Section {
            source,
            name: name.to_owned(),
            line,
            table,
            asked: RefCell::new(Vec::new()),
        }
    }

    /// The line on which the section starts.
    pub fn line(&self) -> usize {
        self.line
    }

    /// The place of a key that may or may not be there.
    pub fn place(&self, key: &str) -> Box<Place> {
        let line = self.table.get_key_value(key).map_or(self.line, |(key, _)| {
            line_of(self.source.text, key.span().start)
        });
        Place::new(self.source.path, line, self.full_key(key))
    }

    fn full_key(&self, key: &str) -> String {
        let bare = !key.is_empty()
            && key
                .chars()
                .all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '-');
        let quoted = if bare {
            key.to_owned()
        } else {
            format!("{key:?}")
        };
        if self.name.is_empty() {
            quoted
        } else {
            format!("{}.{quoted}", self.name)
        }
    }

    /// The value of a key, if it is there; the key is from now on known.
    pub fn get(&self, key: &'static str) -> Option<Entry<'a, 't>> {
        self.asked.borrow_mut().push(key);
        let value = self.table.get(key)?;
        Some(Entry {
            place: self.place(key),
            value: value.get_ref(),
        })
    }

    /// The value of a key that must be there.
    pub fn need(&self, key: &'static str, hint: &'static str) -> Result<Entry<'a, 't>, SetupError> {
        self.get(key).ok_or_else(|| SetupError::MissingKey {
            place: self.place(key),
            hint,
        })
    }

    /// A table inside this one.
    pub fn section(
        &self,
        key: &'static str,
        hint: &'static str,
    ) -> Result<Option<Section<'a, 't>>, SetupError> {
        let Some(entry) = self.get(key) else {
            return Ok(None);
        };
        let table = entry.table("a section", hint)?;
        Ok(Some(Section::new(
            self.source,
            &self.full_key(key),
            entry.place.line,
            table,
        )))
    }

    /// The tables of a repeated section.
    pub fn sections(
        &self,
        key: &'static str,
        hint: &'static str,
    ) -> Result<Vec<Section<'a, 't>>, SetupError> {
        let Some(entry) = self.get(key) else {
            return Ok(Vec::new());
        };
        let need = "a repeated section";
        let DeValue::Array(items) = entry.value else {
            return Err(entry.wrong_kind(need, hint));
        };
        items
            .iter()
            .map(|item| {
                let line = line_of(self.source.text, item.span().start);
                match item.get_ref() {
                    DeValue::Table(table) => Ok(Section::new(self.source, key, line, table)),
                    other => Err(SetupError::WrongKind {
                        place: Place::new(self.source.path, line, key),
                        got: describe(other),
                        need,
                        hint,
                    }),
                }
            })
            .collect()
    }

    /// All entries in the order of the file, whatever their keys.
    pub fn entries(&self) -> Vec<(String, Entry<'a, 't>)> {
        let mut items: Vec<_> = self.table.iter().collect();
        items.sort_by_key(|(key, _)| key.span().start);
        items
            .into_iter()
            .map(|(key, value): (&Spanned<_>, &'a Spanned<DeValue<'t>>)| {
                let name: &str = key.get_ref();
                let entry = Entry {
                    place: self.place(name),
                    value: value.get_ref(),
                };
                (name.to_owned(), entry)
            })
            .collect()
    }

    /// Refuses every key that was never asked for. `elsewhere` says to which section a key of that name belongs.
    pub fn finish(&self, elsewhere: fn(&str) -> Option<&'static str>) -> Result<(), SetupError> {
        let known = self.asked.borrow();
        for (key, entry) in self.entries() {
            if known.contains(&key.as_str()) {
                continue;
            }
            let nearest = nearest(&key, &known);
            let belongs_in = match &nearest {
                // A key that differs only in case or by a letter is a slip, not a stray.
                Some(_) => None,
                None => elsewhere(&key).map(str::to_owned),
            };
            return Err(SetupError::UnknownKey {
                place: entry.place,
                nearest,
                belongs_in,
                known: known.clone(),
            });
        }
        Ok(())
    }
}

impl<'a, 't> Entry<'a, 't> {
    pub fn wrong_kind(&self, need: &'static str, hint: &'static str) -> SetupError {
        SetupError::WrongKind {
            place: self.place.clone(),
            got: describe(self.value),
            need,
            hint,
        }
    }

    pub fn table(
        &self,
        need: &'static str,
        hint: &'static str,
    ) -> Result<&'a DeTable<'t>, SetupError> {
        match self.value {
            DeValue::Table(table) => Ok(table),
            _ => Err(self.wrong_kind(need, hint)),
        }
    }

    pub fn text(&self, hint: &'static str) -> Result<&'a str, SetupError> {
        match self.value {
            DeValue::String(text) => Ok(text),
            _ => Err(self.wrong_kind("a text in quotes", hint)),
        }
    }

    pub fn flag(&self, hint: &'static str) -> Result<bool, SetupError> {
        match self.value {
            DeValue::Boolean(flag) => Ok(*flag),
            _ => Err(self.wrong_kind("true or false", hint)),
        }
    }

    /// A whole number from 0 to `most`.
    pub fn count(&self, most: usize, domain: &Domain) -> Result<usize, SetupError> {
        let number =
            number_of(self.value).ok_or_else(|| self.wrong_kind("a whole number", domain.hint))?;
        if number.fract() != 0.0 || !(domain.holds)(number) || number > most as f64 {
            return Err(self.out_of_range(number, domain));
        }
        Ok(number as usize)
    }

    pub fn number(&self, domain: &Domain) -> Result<f64, SetupError> {
        let number =
            number_of(self.value).ok_or_else(|| self.wrong_kind("a number", domain.hint))?;
        self.inside(number, domain)
    }

    /// One of a few words.
    pub fn word(
        &self,
        allowed: &'static [&'static str],
        hint: &'static str,
    ) -> Result<&'static str, SetupError> {
        let got = self.text(hint)?;
        allowed
            .iter()
            .find(|word| **word == got)
            .copied()
            .ok_or_else(|| SetupError::UnknownWord {
                place: self.place.clone(),
                got: got.to_owned(),
                allowed,
                nearest: nearest(got, allowed),
            })
    }

    /// A list of numbers, each without a check of its range.
    pub fn pair(value: &DeValue<'_>) -> Option<(f64, f64)> {
        let DeValue::Array(items) = value else {
            return None;
        };
        if items.len() != 2 {
            return None;
        }
        let mut numbers = items.iter().map(|item| number_of(item.get_ref()));
        Some((numbers.next()??, numbers.next()??))
    }

    /// A known number or `{ find = [low, high], start = x }`.
    pub fn value(&self, domain: &Domain) -> Result<Value, SetupError> {
        const NEED: &str = "a number or { find = [low, high] }";
        const HINT: &str = "write a number if the value is known, { find = [low, high] } or { find = [low, high], start = x } if not";
        let table = match self.value {
            DeValue::Table(table) => table,
            other => {
                let number = number_of(other).ok_or_else(|| self.wrong_kind(NEED, HINT))?;
                return self.inside(number, domain).map(Value::Known);
            }
        };
        for key in table.keys() {
            let key: &str = key.get_ref();
            if key != "find" && key != "start" {
                let known = vec!["find", "start"];
                let mut place = self.place.clone();
                place.key = format!("{}.{key}", place.key);
                return Err(SetupError::UnknownKey {
                    place,
                    nearest: nearest(key, &known),
                    belongs_in: None,
                    known,
                });
            }
        }
        let bounds = table
            .get("find")
            .ok_or_else(|| self.wrong_kind(NEED, HINT))?;
        let (low, high) = Self::pair(bounds.get_ref()).ok_or_else(|| SetupError::WrongKind {
            place: self.place.clone(),
            got: describe(bounds.get_ref()),
            need: "two numbers after `find`",
            hint: HINT,
        })?;
        self.inside(low, domain)?;
        self.inside(high, domain)?;
        if low >= high {
            return Err(SetupError::BoundsReversed {
                place: self.place.clone(),
                quantity: domain.quantity,
                low,
                high,
                unit: domain.unit,
            });
        }
        let start = match table.get("start") {
            None => None,
            Some(start) => {
                let number = number_of(start.get_ref()).ok_or_else(|| SetupError::WrongKind {
                    place: self.place.clone(),
                    got: describe(start.get_ref()),
                    need: "a number after `start`",
                    hint: HINT,
                })?;
                // `contains` is false for NaN, so that is refused too.
                if !(low..=high).contains(&number) {
                    return Err(SetupError::StartOutside {
                        place: self.place.clone(),
                        quantity: domain.quantity,
                        start: number,
                        low,
                        high,
                        unit: domain.unit,
                    });
                }
                Some(number)
            }
        };
        Ok(Value::Find { low, high, start })
    }

    fn inside(&self, number: f64, domain: &Domain) -> Result<f64, SetupError> {
        if number.is_finite() && (domain.holds)(number) {
            Ok(number)
        } else {
            Err(self.out_of_range(number, domain))
        }
    }

    fn out_of_range(&self, got: f64, domain: &Domain) -> SetupError {
        SetupError::OutOfRange {
            place: self.place.clone(),
            quantity: domain.quantity,
            got,
            unit: domain.unit,
            allowed: domain.allowed,
            hint: domain.hint,
        }
    }
}

/// A number, whether written with a point or without.
fn number_of(value: &DeValue<'_>) -> Option<f64> {
    match value {
        DeValue::Float(float) => float.as_str().parse().ok(),
        DeValue::Integer(integer) if integer.radix() == 10 => integer.as_str().parse().ok(),
        DeValue::Integer(integer) => i64::from_str_radix(integer.as_str(), integer.radix())
            .ok()
            .map(|number| number as f64),
        _ => None,
    }
}

/// A value in the words of a message.
fn describe(value: &DeValue<'_>) -> String {
    match value {
        DeValue::String(text) => format!("the text \"{}\"", shortened(text)),
        DeValue::Integer(integer) => format!("the number {integer}"),
        DeValue::Float(float) => format!("the number {float}"),
        DeValue::Boolean(flag) => format!("{flag}"),
        DeValue::Datetime(date) => format!("the date {date}"),
        DeValue::Array(items) => format!("a list of {}", items.len()),
        DeValue::Table(_) => "a table".to_owned(),
    }
}

fn shortened(text: &str) -> String {
    const MOST: usize = 40;
    if text.chars().count() <= MOST {
        text.to_owned()
    } else {
        let start: String = text.chars().take(MOST).collect();
        format!("{start}...")
    }
}

/// The candidate that looks most like `name`, if any looks like it enough to be meant.
pub(super) fn nearest(name: &str, candidates: &[&str]) -> Option<String> {
    const SIMILAR: f64 = 0.6;
    candidates
        .iter()
        .map(|candidate| (similarity(name, candidate), candidate))
        .filter(|(similarity, _)| *similarity >= SIMILAR)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, candidate)| (*candidate).to_owned())
}

/// How much two names look alike, from 0 to 1; case does not count.
pub(super) fn similarity(name: &str, candidate: &str) -> f64 {
    let (name, candidate) = (name.to_lowercase(), candidate.to_lowercase());
    let similarity = strsim::normalized_damerau_levenshtein(&name, &candidate);
    // A missing or added unit (`fwhm` for `fwhm_nm`) is a common slip that counts as close.
    let shorter = name.len().min(candidate.len());
    if shorter >= 3 && (candidate.starts_with(&name) || name.starts_with(&candidate)) {
        similarity.max(0.9)
    } else {
        similarity
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_nearest_key_forgives_case_typing_slips_and_missing_units() {
        let known = ["temperature_K", "velocity_km_s", "turbulence_km_s"];
        assert_eq!(
            nearest("temperature_k", &known).as_deref(),
            Some("temperature_K")
        );
        assert_eq!(
            nearest("temprature_K", &known).as_deref(),
            Some("temperature_K")
        );
        assert_eq!(
            nearest("velocity", &known).as_deref(),
            Some("velocity_km_s")
        );
        assert_eq!(nearest("pressure_pa", &known), None);
    }
}
