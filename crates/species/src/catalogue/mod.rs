//! The species that the program knows.

use std::sync::{Arc, OnceLock};

use crate::{Species, SpeciesError, diatomic, hydrogenic, table};

/// Where the figures of one species come from.
enum Origin {
    /// A table of this crate's `data` folder: its name and its text.
    Table(&'static str, &'static str),
    /// Theory.
    Hydrogenic(hydrogenic::Nucleus),
    /// Theory with the constants of a table in the folder `data/molecules`: its name and its text.
    Diatomic(&'static str, &'static str),
}

struct Entry {
    name: &'static str,
    origin: Origin,
    loaded: OnceLock<Arc<Species>>,
}

/// The built-in species. Each is read when it is first asked for, and only once.
pub struct Catalogue {
    entries: Vec<Entry>,
}

/// How many names an error suggests.
const SUGGESTIONS: usize = 3;
/// Likeness (Jaro-Winkler) from which a name is worth suggesting.
const LIKENESS: f64 = 0.7;

mod tables;
use tables::{MOLECULES, TABLES};

impl Catalogue {
    /// The catalogue that the program carries.
    pub fn builtin() -> &'static Catalogue {
        static BUILTIN: OnceLock<Catalogue> = OnceLock::new();
        BUILTIN.get_or_init(Catalogue::unread)
    }

    /// All entries, none of them read yet.
    fn unread() -> Catalogue {
        let computed = hydrogenic::Nucleus::ALL
            .into_iter()
            .map(|nucleus| (nucleus.species_name(), Origin::Hydrogenic(nucleus)));
        let tables = TABLES
            .iter()
            .map(|&(name, text)| (name, Origin::Table(name, text)));
        let molecules = MOLECULES
            .iter()
            .map(|&(name, table, text)| (name, Origin::Diatomic(table, text)));
        let entry = |(name, origin)| Entry {
            name,
            origin,
            loaded: OnceLock::new(),
        };
        Catalogue {
            entries: computed.chain(tables).chain(molecules).map(entry).collect(),
        }
    }

    /// The species of that name, such as "Na I".
    ///
    /// Blanks and case may be left out where that leaves one reading ("NaI", "na i"). Errors: an unknown name, with the
    /// nearest ones; an ambiguous one ("nii" is N II or Ni I); a table that cannot be read.
    ///
    /// ```
    /// let sodium = backlit_species::Catalogue::builtin().get("Na I")?;
    /// let doublet = sodium.lines_between(589.0e-9, 590.0e-9);
    /// assert_eq!(doublet.len(), 2);
    /// assert!(sodium.partition_function(300.0).ln_q < 0.694); // two states, ln 2
    /// # Ok::<(), backlit_species::SpeciesError>(())
    /// ```
    pub fn get(&self, name: &str) -> Result<Arc<Species>, SpeciesError> {
        self.load(self.find(name)?)
    }

    /// All species, in the order of the catalogue. Reads every table.
    pub fn iter(&self) -> impl Iterator<Item = Arc<Species>> + '_ {
        // A table of our own that cannot be read is caught by `every_table_can_be_read`, never here.
        self.entries
            .iter()
            .filter_map(|entry| self.load(entry).ok())
    }

    /// All names, in the order of the catalogue, without reading a table.
    pub fn names(&self) -> impl Iterator<Item = &'static str> + '_ {
        self.entries.iter().map(|entry| entry.name)
    }

    fn load(&self, entry: &Entry) -> Result<Arc<Species>, SpeciesError> {
        if let Some(species) = entry.loaded.get() {
            return Ok(species.clone());
        }
        let species = Arc::new(match entry.origin {
            Origin::Table(table, text) => table::parse(table, text)?,
            Origin::Hydrogenic(nucleus) => hydrogenic::species(nucleus),
            Origin::Diatomic(table, text) => diatomic::species(table, text, entry.name)?,
        });
        Ok(entry.loaded.get_or_init(|| species).clone())
    }

    fn find(&self, name: &str) -> Result<&Entry, SpeciesError> {
        let close = |text: &str| -> String {
            text.chars()
                .filter(|c| !c.is_whitespace() && *c != '_')
                .collect()
        };
        let spaced = |text: &str| text.split_whitespace().collect::<Vec<_>>().join(" ");
        let lower = |text: String| text.to_lowercase();
        // From the strictest reading to the kindest; the first with a match decides.
        let readings: [&dyn Fn(&str) -> String; 4] =
            [&spaced, &|text| lower(spaced(text)), &close, &|text| {
                lower(close(text))
            }];
        for reading in readings {
            let wanted = reading(name);
            let found: Vec<&Entry> = self
                .entries
                .iter()
                .filter(|entry| reading(entry.name) == wanted)
                .collect();
            match found.as_slice() {
                [] => {}
                [entry] => return Ok(entry),
                several => {
                    return Err(SpeciesError::Ambiguous {
                        name: name.to_owned(),
                        candidates: several.iter().map(|entry| entry.name.to_owned()).collect(),
                    });
                }
            }
        }
        let asked = name.trim().to_lowercase();
        let mut near: Vec<(f64, &str)> = self
            .entries
            .iter()
            .map(|entry| {
                (
                    strsim::jaro_winkler(&asked, &entry.name.to_lowercase()),
                    entry.name,
                )
            })
            .filter(|(likeness, _)| *likeness >= LIKENESS)
            .collect();
        near.sort_by(|a, b| b.0.total_cmp(&a.0));
        let suggestions = near
            .into_iter()
            .take(SUGGESTIONS)
            .map(|(_, name)| name.to_owned())
            .collect();
        Err(SpeciesError::Unknown {
            name: name.to_owned(),
            suggestions,
        })
    }
}

/// The citation behind a source key, such as "asd"; `None` for a key that the table of sources lacks.
pub fn citation(key: &str) -> Option<&'static str> {
    include_str!("../../data/sources.txt")
        .lines()
        .find_map(|row| {
            let (found, text) = row.split_once(char::is_whitespace)?;
            (found == key).then(|| text.trim())
        })
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    #[test]
    fn every_table_can_be_read_and_every_source_is_explained() {
        for (name, text) in TABLES {
            let parsed = table::parse(name, text).unwrap_or_else(|error| panic!("{error}"));
            assert_eq!(parsed.name, *name);
            assert!(!parsed.sources.is_empty());
            for key in parsed.sources {
                assert!(
                    citation(&key).is_some(),
                    "source {key} of {name} is not in sources.txt"
                );
            }
        }
    }

    #[test]
    fn every_molecule_of_a_table_is_in_the_catalogue_and_its_sources_are_explained() {
        for (name, table, text) in MOLECULES {
            for key in diatomic::species(table, text, name).unwrap().sources {
                assert!(citation(&key).is_some(), "source {key} of {name}");
            }
            for isotopologue in diatomic::names(table, text).unwrap() {
                assert!(
                    MOLECULES.iter().any(|known| known.0 == isotopologue),
                    "{isotopologue}"
                );
            }
        }
    }

    #[test]
    fn names_are_found_kindly() {
        let catalogue = Catalogue::builtin();
        for (asked, name) in [
            ("Na I", "Na I"),
            ("NaI", "Na I"),
            ("na i", "Na I"),
            (" Ca  II", "Ca II"),
            ("NiI", "Ni I"),
            ("Ca_II", "Ca II"),
        ] {
            assert_eq!(catalogue.get(asked).unwrap().name, name, "{asked}");
        }
    }

    #[test]
    fn an_unknown_name_brings_suggestions() {
        let Err(SpeciesError::Unknown { suggestions, .. }) = Catalogue::builtin().get("Nb I")
        else {
            panic!()
        };
        assert!(
            suggestions
                .iter()
                .any(|name| name == "N I" || name == "Na I"),
            "{suggestions:?}"
        );
        let message = Catalogue::builtin()
            .get("unobtainium")
            .unwrap_err()
            .to_string();
        assert!(message.contains("hint:"), "{message}");
    }

    #[test]
    fn a_name_that_can_be_read_in_two_ways_is_refused() {
        let message = Catalogue::builtin().get("nii").unwrap_err().to_string();
        assert!(
            message.contains("N II") && message.contains("Ni I"),
            "{message}"
        );
    }

    #[test]
    fn the_catalogue_holds_no_name_twice() {
        let mut names: Vec<_> = Catalogue::builtin().names().collect();
        names.sort_unstable();
        names
            .windows(2)
            .for_each(|pair| assert_ne!(pair[0], pair[1]));
    }

    #[test]
    fn the_catalogue_is_broad() {
        let all: Vec<_> = Catalogue::builtin().iter().collect();
        let band = |species: &Species| species.lines_between(90e-9, 5e-6).len();
        let lines: usize = all.iter().map(|species| band(species)).sum();
        assert!(all.len() >= 60, "{} species", all.len());
        assert!(lines >= 5000, "{lines} lines");
        for species in &all {
            assert!(!species.lines.is_empty(), "{} has no line", species.name);
            assert!(
                species.ionization_energy_j.is_some() && !species.sources.is_empty(),
                "{}",
                species.name
            );
            assert_eq!(
                species.levels[0].energy_j, 0.0,
                "{} does not start at its ground level",
                species.name
            );
        }
    }

    #[test]
    fn reading_everything_takes_milliseconds() {
        // The best of several, as other work on the machine is no fault of the reader.
        let once = |_| {
            let start = std::time::Instant::now();
            let count = Catalogue::unread().iter().count();
            (start.elapsed().as_secs_f64(), count)
        };
        let (seconds, count) = (0..7).map(once).min_by(|a, b| a.0.total_cmp(&b.0)).unwrap();
        assert_eq!(count, Catalogue::builtin().names().count());
        assert!(seconds < LOADING_LIMIT_S, "{count} species in {seconds} s");
    }

    /// What a user would not notice at the start of a command.
    const LOADING_LIMIT_S: f64 = 0.020;
}
