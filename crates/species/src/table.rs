//! The catalogue's own table format: one plain text file a species.
//!
//! Key-value rows (name, mass, ionization energy), then a section `[levels]` and a section `[lines]`, one row a
//! level group or line, columns divided by blanks, `#` for comments. Every row ends with the key of its source.

use std::collections::BTreeSet;
use std::str::SplitWhitespace;
use std::sync::Arc;

use backlit_units::constants::{ATOMIC_MASS_KG, ELEMENTARY_CHARGE_C, JOULE_PER_WAVENUMBER_CM};

use crate::{Level, Line, Species, SpeciesError};

/// Largest relative difference between a row's wavelength and its energies.
const ENERGY_TOLERANCE: f64 = 1e-3;

/// One row that is being read, with its place for messages.
pub(crate) struct Row<'a> {
    table: &'a str,
    number: usize,
    words: SplitWhitespace<'a>,
}

impl<'a> Row<'a> {
    pub(crate) fn new(table: &'a str, number: usize, content: &'a str) -> Self {
        Row {
            table,
            number,
            words: content.split_whitespace(),
        }
    }

    pub(crate) fn refuse(
        &self,
        column: &'static str,
        got: &str,
        expected: &'static str,
    ) -> SpeciesError {
        SpeciesError::Table {
            table: self.table.to_owned(),
            line: self.number,
            column,
            got: got.to_owned(),
            expected,
        }
    }

    pub(crate) fn word(&mut self, column: &'static str) -> Result<&str, SpeciesError> {
        match self.words.next() {
            Some(word) => Ok(word),
            None => Err(self.refuse(column, "", "there")),
        }
    }

    pub(crate) fn number(
        &mut self,
        column: &'static str,
        at_least: f64,
        expected: &'static str,
    ) -> Result<f64, SpeciesError> {
        let word = match self.words.next() {
            Some(word) => word,
            None => return Err(self.refuse(column, "", expected)),
        };
        match word.parse::<f64>() {
            Ok(value) if value.is_finite() && value >= at_least => Ok(value),
            _ => Err(self.refuse(column, word, expected)),
        }
    }

    pub(crate) fn weight(&mut self, column: &'static str) -> Result<f64, SpeciesError> {
        let expected = "a whole number from 1";
        let value = self.number(column, 1.0, expected)?;
        if value.fract() == 0.0 {
            Ok(value)
        } else {
            Err(self.refuse(column, &value.to_string(), expected))
        }
    }

    /// The key of the row's source, which is shared between the rows, and nothing after it.
    pub(crate) fn source(
        &mut self,
        known: &mut BTreeSet<Arc<str>>,
    ) -> Result<Arc<str>, SpeciesError> {
        let key = match self.words.next() {
            Some(word) => word,
            None => return Err(self.refuse("source", "", "the key of a source")),
        };
        if let Some(extra) = self.words.next() {
            return Err(self.refuse("source", extra, "the end of the row"));
        }
        if let Some(shared) = known.get(key) {
            return Ok(shared.clone());
        }
        let shared: Arc<str> = key.into();
        known.insert(shared.clone());
        Ok(shared)
    }
}

/// Reads a whole table; `table` is its name in messages.
pub(crate) fn parse(table: &str, text: &str) -> Result<Species, SpeciesError> {
    let incomplete = |part| SpeciesError::Incomplete {
        table: table.to_owned(),
        part,
    };
    let (mut name, mut mass_u, mut ionization_ev) = (None, None, None);
    let (mut lines, mut levels) = (Vec::new(), Vec::new());
    let mut sources = BTreeSet::new();
    let mut section = "";
    for (index, content) in text.lines().enumerate() {
        let content = content.trim();
        if content.is_empty() || content.starts_with('#') {
            continue;
        }
        if content.starts_with('[') {
            section = content;
            continue;
        }
        let mut row = Row::new(table, index + 1, content);
        match section {
            "[levels]" => levels.push(level(&mut row, &mut sources)?),
            "[lines]" => lines.push(line(&mut row, &mut sources)?),
            "" => match row.word("key")? {
                "name" => {
                    name = content
                        .split_once(char::is_whitespace)
                        .map(|(_, rest)| rest.trim().to_owned())
                }
                "mass_u" => {
                    mass_u = Some(row.number("mass_u", f64::MIN_POSITIVE, "a mass above 0")?);
                    row.source(&mut sources)?;
                }
                "ionization_energy_ev" => {
                    ionization_ev = Some(row.number(
                        "ionization_energy_ev",
                        f64::MIN_POSITIVE,
                        "an energy above 0",
                    )?);
                    row.source(&mut sources)?;
                }
                other => {
                    let got = other.to_owned();
                    return Err(row.refuse("key", &got, "name, mass_u or ionization_energy_ev"));
                }
            },
            other => return Err(row.refuse("section", other, "[levels] or [lines]")),
        }
    }
    if levels.is_empty() {
        return Err(incomplete("section [levels]"));
    }
    let name = name.ok_or_else(|| incomplete("name"))?;
    let mass_kg = mass_u.ok_or_else(|| incomplete("mass_u"))? * ATOMIC_MASS_KG;
    let mut species = Species::new(name, mass_kg, lines, levels);
    species.ionization_energy_j = ionization_ev.map(|energy_ev| energy_ev * ELEMENTARY_CHARGE_C);
    species.sources = sources.into_iter().collect();
    Ok(species)
}

fn level(row: &mut Row<'_>, sources: &mut BTreeSet<Arc<str>>) -> Result<Level, SpeciesError> {
    let g = row.weight("g")?;
    let energy_per_cm = row.number("energy_per_cm", 0.0, "an energy from 0")?;
    row.source(sources)?;
    Ok(Level {
        g,
        energy_j: energy_per_cm * JOULE_PER_WAVENUMBER_CM,
    })
}

fn line(row: &mut Row<'_>, sources: &mut BTreeSet<Arc<str>>) -> Result<Line, SpeciesError> {
    let wavelength_vac_nm = row.number(
        "wavelength_vac_nm",
        f64::MIN_POSITIVE,
        "a wavelength above 0",
    )?;
    let a_ki_per_s = row.number("a_ki_per_s", f64::MIN_POSITIVE, "a rate above 0")?;
    let grade = row.word("grade")?.to_owned();
    let grade = grade
        .parse()
        .map_err(|()| row.refuse("grade", &grade, "a grade from AAA to E or -"))?;
    let e_lower_per_cm = row.number("e_lower_per_cm", 0.0, "an energy from 0")?;
    let e_upper_per_cm = row.number("e_upper_per_cm", 0.0, "an energy from 0")?;
    let g_lower = row.weight("g_lower")?;
    let g_upper = row.weight("g_upper")?;
    let kind = row.word("kind")?.to_owned();
    let kind = kind
        .parse()
        .map_err(|()| row.refuse("kind", &kind, "E1, M1, E2, M2 or E2+M1"))?;
    let gamma_per_s = row.number("gamma_per_s", f64::MIN_POSITIVE, "a rate above 0")?;
    let source = row.source(sources)?;
    let expected = 1e7 / wavelength_vac_nm;
    if ((e_upper_per_cm - e_lower_per_cm) / expected - 1.0).abs() > ENERGY_TOLERANCE {
        return Err(row.refuse(
            "e_upper_per_cm",
            &e_upper_per_cm.to_string(),
            "the wavelength's energy above the lower level",
        ));
    }
    Ok(Line {
        wavelength_vac_m: wavelength_vac_nm * 1e-9,
        a_ki_per_s,
        e_lower_j: e_lower_per_cm * JOULE_PER_WAVENUMBER_CM,
        e_upper_j: e_upper_per_cm * JOULE_PER_WAVENUMBER_CM,
        g_lower,
        g_upper,
        gamma_per_s,
        grade,
        source,
        kind,
    })
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    const GOOD: &str = "# a comment\nname Xx II\nmass_u 10 a\nionization_energy_ev 5 a\n[levels]\n2 0 a\n[lines]\n\
        500 1e8 A 0 20000 2 4 E1 1e8 b\n400 2e-3 D+' 0 25000 2 2 E2+M1 2e-3 c\n";

    #[test]
    fn a_good_table_is_read_and_sorted() {
        let species = parse("xx", GOOD).unwrap();
        assert_eq!(
            (
                species.name.as_str(),
                species.lines.len(),
                species.levels.len()
            ),
            ("Xx II", 2, 1)
        );
        assert!((species.lines[0].wavelength_vac_m - 400e-9).abs() < 1e-20);
        assert!(species.lines[0].is_forbidden() && !species.lines[1].is_forbidden());
        assert_eq!(
            species
                .sources
                .iter()
                .map(|s| s.as_ref())
                .collect::<Vec<_>>(),
            ["a", "b", "c"]
        );
    }

    #[test]
    fn a_bad_row_is_refused_with_its_place() {
        for (good, bad, column, line) in [
            ("1e8 b", "1e8", "source", 8),
            ("1e8 b", "1e8 b c", "source", 8),
            ("2 0 a", "2 0", "source", 6),
            ("2 0 a", "2.5 0 a", "g", 6),
            ("mass_u 10 a", "mass_u 10", "source", 3),
            ("500 1e8", "500 0", "a_ki_per_s", 8),
            ("500 1e8", "501 1e8", "e_upper_per_cm", 8),
            ("4 E1", "4 E7", "kind", 8),
            ("1e8 A ", "1e8 F ", "grade", 8),
            ("name", "nome", "key", 2),
        ] {
            let text = GOOD.replacen(good, bad, 1);
            let Err(SpeciesError::Table {
                column: got,
                line: at,
                ..
            }) = parse("xx", &text)
            else {
                panic!("{bad} was accepted")
            };
            assert_eq!((got, at), (column, line), "{bad}");
        }
        assert!(matches!(
            parse("xx", ""),
            Err(SpeciesError::Incomplete { .. })
        ));
    }
}
