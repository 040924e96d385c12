//! The names of species in a setup against the user's own tables and a catalogue.

use std::sync::Arc;

use backlit_species::{Catalogue, Species, SpeciesError, user};

use super::section::similarity;
use super::{Place, Setup, SetupError};

impl Setup {
    /// The species of all clouds, each once, in the order in which the columns first name them.
    ///
    /// # Errors
    ///
    /// As [`Setup::resolve_columns`].
    pub fn resolve(&self, catalogue: &Catalogue) -> Result<Vec<Arc<Species>>, SetupError> {
        let mut found: Vec<Arc<Species>> = Vec::new();
        for species in self.resolve_columns(catalogue)?.into_iter().flatten() {
            if !found.iter().any(|known| known.name == species.name) {
                found.push(species);
            }
        }
        Ok(found)
    }

    /// The species of every column: one list a cloud, in the order of its columns.
    ///
    /// A `[[species]]` of the setup comes before one of the same name in the catalogue. The tables of a `[[species]]`
    /// are read even where no column names it, so that a wrong table never goes unseen.
    ///
    /// # Errors
    ///
    /// [`SetupError::UnknownSpecies`] with the nearest names, [`SetupError::SpeciesTwice`] for two columns of one
    /// species in one cloud, [`SetupError::SpeciesName`] for a name that the catalogue refuses for another reason,
    /// [`SetupError::UserTables`] for tables that cannot be used.
    pub fn resolve_columns(
        &self,
        catalogue: &Catalogue,
    ) -> Result<Vec<Vec<Arc<Species>>>, SetupError> {
        let own = self.own_species()?;
        self.clouds
            .iter()
            .map(|cloud| {
                let mut found: Vec<Arc<Species>> = Vec::new();
                for ((name, _), &line) in cloud.columns.iter().zip(&cloud.column_lines) {
                    let place = Place::new(&self.path, line, format!("cloud.column_cm2.{name:?}"));
                    let species = match own.iter().find(|species| species.name == *name) {
                        Some(species) => Arc::clone(species),
                        None => catalogue
                            .get(name)
                            .map_err(|source| refused(place.clone(), name, source, &own))?,
                    };
                    if let Some(first) = found.iter().position(|s| s.name == species.name) {
                        return Err(SetupError::SpeciesTwice {
                            place,
                            name: species.name.clone(),
                            first_line: cloud.column_lines[first],
                        });
                    }
                    found.push(species);
                }
                Ok(found)
            })
            .collect()
    }

    /// The species of the `[[species]]` sections, their tables read.
    ///
    /// # Errors
    ///
    /// [`SetupError::UserTables`] for tables that cannot be used.
    pub fn own_species(&self) -> Result<Vec<Arc<Species>>, SetupError> {
        self.species
            .iter()
            .map(|own| {
                user::chosen_species(&own.name, own.mass_u, &own.lines, &own.levels, &own.choice)
                    .map(Arc::new)
                    .map_err(|source| SetupError::UserTables {
                        place: Place::new(&self.path, own.line, "species"),
                        name: own.name.clone(),
                        source: Box::new(source),
                    })
            })
            .collect()
    }
}

/// The catalogue's refusal with its place; the user's own names join those that it suggests.
fn refused(
    place: Box<Place>,
    name: &str,
    source: SpeciesError,
    own: &[Arc<Species>],
) -> SetupError {
    const MOST: usize = 3;
    const SIMILAR: f64 = 0.5;
    match source {
        SpeciesError::Unknown { suggestions, .. } => {
            let mut nearest: Vec<String> = own
                .iter()
                .filter(|species| similarity(name, &species.name) >= SIMILAR)
                .map(|species| species.name.clone())
                .collect();
            nearest.extend(suggestions);
            nearest.truncate(MOST);
            SetupError::UnknownSpecies {
                place,
                name: name.to_owned(),
                nearest,
            }
        }
        source => SetupError::SpeciesName {
            place,
            source: Box::new(source),
        },
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    const OWN: &str = "[[species]]\nname = \"Xx I\"\nmass_u = 22.99\nlines = \"lines.csv\"\nlevels = \"levels.csv\"\n";
    const LINES: &str =
        "wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper\n500,1e8,0,2,4\n";
    const LEVELS: &str = "g,energy_per_cm\n2,0\n4,20000\n";

    /// A setup with these columns and a species of its own, in a folder with its tables.
    fn setup(columns: &str, lines: &str) -> (tempfile::TempDir, Setup) {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("lines.csv"), lines).unwrap();
        std::fs::write(folder.path().join("levels.csv"), LEVELS).unwrap();
        let text = format!(
            "[background]\nlight = \"dark\"\n[[cloud]]\ntemperature_K = 300\n[cloud.column_cm2]\n{columns}\n{OWN}"
        );
        let setup = Setup::parse(&text, folder.path().join("s.toml")).unwrap();
        (folder, setup)
    }

    fn refusal(columns: &str, lines: &str) -> String {
        let (_folder, setup) = setup(columns, lines);
        setup.resolve(Catalogue::builtin()).unwrap_err().to_string()
    }

    #[test]
    fn names_come_from_the_setup_first_then_from_the_catalogue() {
        let (_folder, setup) = setup("\"Na I\" = 1\n\"Xx I\" = 2", LINES);
        let found = setup.resolve(Catalogue::builtin()).unwrap();
        assert_eq!(found[0].name, "Na I");
        assert_eq!(found[1].name, "Xx I");
        assert_eq!(found[1].lines.len(), 1);
    }

    #[test]
    fn an_unknown_species_is_named_with_its_line_and_the_nearest_names() {
        let message = refusal("\"Ma I\" = 1", LINES);
        assert!(message.contains("unknown species \"Ma I\""), "{message}");
        assert!(message.contains("s.toml line 6"), "{message}");
        assert!(message.contains("hint: did you mean \""), "{message}");
        let message = refusal("\"Xy I\" = 1", LINES);
        assert!(message.contains("did you mean \"Xx I\""), "{message}");
    }

    #[test]
    fn a_table_that_cannot_be_used_is_refused_even_where_no_column_names_it() {
        let message = refusal("\"Na I\" = 1", "wavelength_vac_nm\n500\n");
        assert!(
            message.contains("species \"Xx I\" (key `species`"),
            "{message}"
        );
        assert!(message.contains("lines.csv"), "{message}");
    }
}
