//! From the text to a [`Setup`]: the sections of the file, one function each.

use std::path::Path;
use std::str::FromStr;

use backlit_species::line_list::{Choice, Format};
use backlit_units::Medium;
use backlit_units::intensity::IntensityUnit;
use toml::de::{DeTable, DeValue};

use super::domains::{
    COLUMN, DILUTION, FWHM, MASS, MAX_SHAPE_TERMS, MOLECULE, MOST_MOLECULES, RESOLVING_POWER,
    SCALE, SHAPE_TERMS, TEMPERATURE, TOLERANCE, TURBULENCE, VELOCITY,
};
use super::place::line_of;
use super::section::{Entry, Section, Source};
use super::{
    Background, CloudSetup, Excitation, FitChoices, Instrument, Light, Place, Setup, SetupError,
    SpectrumSetup, UserSpecies, Value,
};

/// The accuracy of the model where the setup says nothing, relative to the highest line contrast.
const DEFAULT_TOLERANCE: f64 = 1e-5;

impl Setup {
    /// Reads a setup file.
    ///
    /// Paths inside the file are taken relative to the folder of `path`.
    ///
    /// # Errors
    ///
    /// [`SetupError::Read`] if the file cannot be read, otherwise as [`Setup::parse`].
    pub fn read(path: impl AsRef<Path>) -> Result<Setup, SetupError> {
        let path = path.as_ref();
        let text = std::fs::read_to_string(path).map_err(|source| SetupError::Read {
            path: path.to_path_buf(),
            source,
        })?;
        Setup::parse(&text, path)
    }

    /// Turns the text of a setup into checked values; `path` is the name for messages and the base of relative paths.
    ///
    /// # Errors
    ///
    /// The first thing that is wrong, with file, line, key, what was found, what is allowed and a hint.
    ///
    /// ```
    /// use backlit_inverse::setup::{Setup, Value};
    ///
    /// let setup = Setup::parse(
    ///     r#"
    ///     [background]
    ///     temperature_K = 5800
    ///     [[cloud]]
    ///     temperature_K = { find = [500, 4000], start = 1500 }
    ///     velocity_km_s = 0
    ///     turbulence_km_s = 2
    ///     [cloud.column_cm2]
    ///     "Na I" = { find = [1e9, 1e16] }
    ///     "#,
    ///     "sodium.toml",
    /// )?;
    /// assert_eq!(setup.background.temperature_k, Value::Known(5800.0));
    /// assert!(setup.clouds[0].columns[0].1.is_free());
    /// # Ok::<(), backlit_inverse::setup::SetupError>(())
    /// ```
    pub fn parse(text: &str, path: impl AsRef<Path>) -> Result<Setup, SetupError> {
        let path = path.as_ref();
        let source = Source { text, path };
        let document = DeTable::parse(text).map_err(|error| not_toml(source, &error))?;
        let root = Section::new(source, "", 1, document.get_ref());

        let spectrum = spectrum(
            root.section("spectrum", "write [spectrum] on a line of its own")?
                .as_ref(),
        )?;
        let instrument = instrument(
            root.section("instrument", "write [instrument] on a line of its own")?
                .as_ref(),
        )?;
        let background = background(
            path,
            &root
                .section("background", "write [background] on a line of its own")?
                .ok_or_else(|| SetupError::MissingKey {
                    place: root.place("background"),
                    hint: "say what shines behind the gas: [background] with light = \"blackbody\" and a temperature_K, or light = \"dark\"",
                })?,
        )?;
        let clouds = root
            .sections(
                "cloud",
                "write [[cloud]], with two brackets, before each cloud",
            )?
            .iter()
            .map(cloud)
            .collect::<Result<Vec<_>, _>>()?;
        let species = user_species(
            path,
            &root.sections(
                "species",
                "write [[species]], with two brackets, before each species",
            )?,
        )?;
        let (tolerance, fit) = fit(root
            .section("fit", "write [fit] on a line of its own")?
            .as_ref())?;
        root.finish(section_of)?;

        if background.light == Light::Dark && clouds.is_empty() {
            let mut place = root.place("background");
            place.key.clear();
            return Err(SetupError::NothingThere { place });
        }
        Ok(Setup {
            spectrum,
            instrument,
            background,
            clouds,
            species,
            tolerance,
            fit,
            text: text.to_owned(),
            path: path.to_path_buf(),
        })
    }

    /// Checks that the scale is open if the data have only a relative calibration, whoever says so: setup or data file.
    ///
    /// # Errors
    ///
    /// [`SetupError::RelativeNeedsScale`].
    pub fn check_calibration(&self, unit: &IntensityUnit) -> Result<(), SetupError> {
        if unit.is_relative && !self.spectrum.scale.is_free() {
            let line = self.spectrum.scale_line.unwrap_or(1);
            return Err(SetupError::RelativeNeedsScale {
                place: Place::new(&self.path, line, "spectrum.scale"),
            });
        }
        Ok(())
    }
}

fn not_toml(source: Source<'_>, error: &toml::de::Error) -> SetupError {
    let line = error
        .span()
        .map_or(1, |span| line_of(source.text, span.start));
    let message = error.message().lines().collect::<Vec<_>>().join(", ");
    let hint = if message.contains("duplicate") {
        "a key or a [section] may stand only once; only [[cloud]] and [[species]] repeat"
    } else {
        "a line is `key = value`, a [section], or a # comment; texts and names with a blank stand in quotes: \"Na I\" = 1e12"
    };
    SetupError::Toml {
        place: Place::new(source.path, line, ""),
        message,
        hint,
    }
}

/// The section to which a key of this name belongs.
fn section_of(key: &str) -> Option<&'static str> {
    Some(match key {
        "medium" | "intensity_unit" | "scale" | "use_nm" => "[spectrum]",
        "fwhm_nm" | "resolving_power" => "[instrument]",
        "light" | "dilution" | "shape_terms" | "file" => "[background]",
        "temperature_K" => "[background] or [[cloud]]",
        "velocity_km_s"
        | "turbulence_km_s"
        | "doppler_temperature_K"
        | "excitation"
        | "excitation_temperature_K"
        | "electron_density_cm3"
        | "column_cm2" => "[[cloud]]",
        "name" | "mass_u" | "lines" | "levels" | "format" | "molecule" | "isotopologue" => {
            "[[species]]"
        }
        "model_tolerance" | "scale_noise" | "robust" => "[fit]",
        _ => return None,
    })
}

fn spectrum(section: Option<&Section<'_, '_>>) -> Result<SpectrumSetup, SetupError> {
    let mut setup = SpectrumSetup {
        medium: None,
        intensity_unit: None,
        scale: Value::Known(1.0),
        use_nm: None,
        scale_line: None,
    };
    let Some(section) = section else {
        return Ok(setup);
    };
    if let Some(entry) = section.get("medium") {
        let word = entry.word(&["vacuum", "air"], "medium = \"vacuum\" or \"air\"")?;
        setup.medium = Medium::from_str(word).ok();
    }
    if let Some(entry) = section.get("scale") {
        setup.scale = entry.value(&SCALE)?;
        setup.scale_line = Some(entry.place.line);
    }
    if let Some(entry) = section.get("intensity_unit") {
        let text = entry.text("for example intensity_unit = \"W m-2 sr-1 nm-1\"")?;
        let unit = IntensityUnit::from_str(text).map_err(|source| SetupError::Unit {
            place: entry.place.clone(),
            got: text.to_owned(),
            source,
        })?;
        if unit.is_relative && !setup.scale.is_free() {
            let place = match setup.scale_line {
                Some(_) => section.place("scale"),
                None => entry.place.clone(),
            };
            return Err(SetupError::RelativeNeedsScale { place });
        }
        setup.intensity_unit = Some(text.to_owned());
    }
    if let Some(entry) = section.get("use_nm") {
        setup.use_nm = Some(ranges(&entry)?);
    }
    section.finish(section_of)?;
    Ok(setup)
}

fn ranges(entry: &Entry<'_, '_>) -> Result<Vec<(f64, f64)>, SetupError> {
    const NEED: &str = "a list of ranges, each with two wavelengths in nm";
    const HINT: &str = "for example use_nm = [[588.0, 591.0], [766.0, 771.0]]";
    let DeValue::Array(items) = entry.value else {
        return Err(entry.wrong_kind(NEED, HINT));
    };
    if items.is_empty() {
        return Err(SetupError::EmptyList {
            place: entry.place.clone(),
            hint: "name at least one range, or leave `use_nm` out to use all channels",
        });
    }
    items
        .iter()
        .enumerate()
        .map(|(i, item)| {
            let (low, high) =
                Entry::pair(item.get_ref()).ok_or_else(|| entry.wrong_kind(NEED, HINT))?;
            if low > 0.0 && low < high && high.is_finite() {
                Ok((low, high))
            } else {
                Err(SetupError::RangeReversed {
                    place: entry.place.clone(),
                    index: i + 1,
                    low,
                    high,
                })
            }
        })
        .collect()
}

fn instrument(section: Option<&Section<'_, '_>>) -> Result<Instrument, SetupError> {
    let Some(section) = section else {
        return Ok(Instrument::None);
    };
    let fwhm = section.get("fwhm_nm");
    let power = section.get("resolving_power");
    section.finish(section_of)?;
    match (fwhm, power) {
        (Some(_), Some(power)) => Err(SetupError::Conflict {
            place: power.place,
            beside: "`fwhm_nm`",
            hint: "give the width of the instrument once, as fwhm_nm or as resolving_power",
        }),
        (Some(fwhm), None) => Ok(match fwhm.number(&FWHM)? {
            0.0 => Instrument::None,
            width => Instrument::FwhmNm(width),
        }),
        (None, Some(power)) => Ok(Instrument::ResolvingPower(power.number(&RESOLVING_POWER)?)),
        (None, None) => Ok(Instrument::None),
    }
}

fn background(path: &Path, section: &Section<'_, '_>) -> Result<Background, SetupError> {
    let word = match section.get("light") {
        Some(entry) => entry.word(
            &["blackbody", "measured", "dark"],
            "light = \"blackbody\", \"measured\" or \"dark\"",
        )?,
        None => "blackbody",
    };
    let temperature = section.get("temperature_K");
    let dilution = section.get("dilution");
    let shape_terms = section.get("shape_terms");
    let file = section.get("file");
    section.finish(section_of)?;

    let refuse = |entry: &Option<Entry<'_, '_>>, beside, hint| match entry {
        Some(entry) => Err(SetupError::Conflict {
            place: entry.place.clone(),
            beside,
            hint,
        }),
        None => Ok(()),
    };
    const NOT_DARK: &str = "light = \"dark\"";
    const DARK_HINT: &str = "leave the key out, or give the background another light";
    const ONLY_MEASURED: &str = "a light that is not \"measured\"";
    let light = match word {
        "dark" => {
            refuse(&temperature, NOT_DARK, DARK_HINT)?;
            refuse(&dilution, NOT_DARK, DARK_HINT)?;
            refuse(&shape_terms, NOT_DARK, DARK_HINT)?;
            refuse(&file, NOT_DARK, DARK_HINT)?;
            Light::Dark
        }
        "measured" => {
            refuse(
                &temperature,
                "light = \"measured\"",
                "the file says how bright the light is; leave the temperature out",
            )?;
            const AS_MEASURED: &str = "the light is taken as the file has it: leave the key out";
            refuse(&dilution, "light = \"measured\"", AS_MEASURED)?;
            refuse(&shape_terms, "light = \"measured\"", AS_MEASURED)?;
            let name = file
                .as_ref()
                .ok_or_else(|| SetupError::MissingKey {
                    place: section.place("file"),
                    hint: "name the spectrum of the light without the gas: file = \"reference.csv\"",
                })?
                .text("file = \"reference.csv\"")?;
            Light::Measured {
                file: beside(path, name),
            }
        }
        _ => {
            refuse(
                &file,
                ONLY_MEASURED,
                "write light = \"measured\" to use the file",
            )?;
            Light::Blackbody
        }
    };
    let temperature_k = match &light {
        Light::Blackbody => temperature
            .as_ref()
            .ok_or_else(|| SetupError::MissingKey {
                place: section.place("temperature_K"),
                hint: "for example temperature_K = 5800 or temperature_K = { find = [3000, 9000] }; without a light behind write light = \"dark\"",
            })?
            .value(&TEMPERATURE)?,
        _ => Value::Known(0.0),
    };
    let dilution = match (&light, dilution) {
        (Light::Dark, _) => Value::Known(0.0),
        (_, Some(entry)) => entry.value(&DILUTION)?,
        (_, None) => Value::Known(1.0),
    };
    let shape_terms = match shape_terms {
        Some(entry) => entry.count(MAX_SHAPE_TERMS, &SHAPE_TERMS)?,
        None => 0,
    };
    Ok(Background {
        light,
        temperature_k,
        dilution,
        shape_terms,
    })
}

fn cloud(section: &Section<'_, '_>) -> Result<CloudSetup, SetupError> {
    let temperature = section.need(
        "temperature_K",
        "for example temperature_K = { find = [500, 4000] }",
    )?;
    let velocity = section.get("velocity_km_s");
    let turbulence = section.get("turbulence_km_s");
    let doppler = section.get("doppler_temperature_K");
    let excitation_word = section.get("excitation");
    let excitation_temperature = section.get("excitation_temperature_K");
    let electron_density = section.get("electron_density_cm3");
    let column_section = section.section(
        "column_cm2",
        "write [cloud.column_cm2] on a line of its own, then one line for each species: \"Na I\" = 1e12",
    )?;
    section.finish(section_of)?;

    let excitation = match &excitation_word {
        None => "thermal",
        Some(entry) => {
            let word = entry.word(
                &["thermal", "split", "electron_impact"],
                "excitation = \"thermal\" or \"split\"",
            )?;
            if word == "electron_impact" {
                return Err(SetupError::NotAvailable {
                    place: entry.place.clone(),
                    what: "excitation by electron impact",
                    hint: "use excitation = \"thermal\", or \"split\" with an excitation_temperature_K",
                });
            }
            word
        }
    };
    if let Some(entry) = electron_density {
        return Err(SetupError::Conflict {
            place: entry.place,
            beside: "an excitation that does not count electrons",
            hint: "leave `electron_density_cm3` out",
        });
    }
    let excitation = match (excitation, excitation_temperature) {
        ("split", Some(entry)) => Excitation::Split {
            excitation_temperature_k: entry.value(&TEMPERATURE)?,
        },
        ("split", None) => {
            return Err(SetupError::MissingKey {
                place: section.place("excitation_temperature_K"),
                hint: "excitation = \"split\" needs excitation_temperature_K = { find = [500, 20000] } or a number",
            });
        }
        (_, Some(entry)) => {
            return Err(SetupError::Conflict {
                place: entry.place,
                beside: "excitation = \"thermal\"",
                hint: "write excitation = \"split\" to give the levels a temperature of their own",
            });
        }
        (_, None) => Excitation::Thermal,
    };

    let zero = || Ok(Value::Known(0.0));
    let columns_hint = "a cloud needs [cloud.column_cm2] with at least one species: \"Na I\" = { find = [1e9, 1e16] }";
    let column_section = column_section.ok_or_else(|| SetupError::MissingKey {
        place: section.place("column_cm2"),
        hint: columns_hint,
    })?;
    let mut columns = Vec::new();
    let mut column_lines = Vec::new();
    for (name, entry) in column_section.entries() {
        columns.push((name, entry.value(&COLUMN)?));
        column_lines.push(entry.place.line);
    }
    if columns.is_empty() {
        return Err(SetupError::EmptyList {
            place: section.place("column_cm2"),
            hint: columns_hint,
        });
    }
    Ok(CloudSetup {
        temperature_k: temperature.value(&TEMPERATURE)?,
        velocity_km_s: velocity.map_or_else(zero, |entry| entry.value(&VELOCITY))?,
        turbulence_km_s: turbulence.map_or_else(zero, |entry| entry.value(&TURBULENCE))?,
        doppler_temperature_k: doppler.map(|entry| entry.value(&TEMPERATURE)).transpose()?,
        excitation,
        columns,
        column_lines,
    })
}

fn user_species(path: &Path, sections: &[Section<'_, '_>]) -> Result<Vec<UserSpecies>, SetupError> {
    let mut found: Vec<UserSpecies> = Vec::new();
    for section in sections {
        let name = section.need("name", "for example name = \"Xx I\"")?;
        let mass = section.need("mass_u", "for example mass_u = 22.99")?;
        let lines = section.need("lines", "for example lines = \"xx-lines.csv\"")?;
        let levels = section.need(
            "levels",
            "the partition function needs them: levels = \"xx-levels.csv\"",
        )?;
        let choice = list_choice(section)?;
        section.finish(section_of)?;
        let text = name.text("name = \"Xx I\"")?.trim();
        if text.is_empty() {
            return Err(SetupError::EmptyList {
                place: name.place,
                hint: "give the species the name that its columns use: name = \"Xx I\"",
            });
        }
        if let Some(first) = found.iter().find(|species| species.name == text) {
            return Err(SetupError::DefinedTwice {
                place: name.place,
                name: text.to_owned(),
                first_line: first.line,
            });
        }
        found.push(UserSpecies {
            name: text.to_owned(),
            mass_u: mass.number(&MASS)?,
            lines: beside(path, lines.text("lines = \"xx-lines.csv\"")?),
            levels: beside(path, levels.text("levels = \"xx-levels.csv\"")?),
            choice,
            line: section.line(),
        });
    }
    Ok(found)
}

/// Which lines of a list: its format where the content should not decide, and the species where it holds several.
fn list_choice(section: &Section<'_, '_>) -> Result<Choice, SetupError> {
    const FORMAT_HINT: &str = "left out, the content of the list decides";
    let number = |key| match section.get(key) {
        Some(entry) => entry
            .count(MOST_MOLECULES, &MOLECULE)
            .map(|n| Some(n as u32)),
        None => Ok(None),
    };
    let format = match section.get("format") {
        Some(entry) => entry.word(&Format::NAMES, FORMAT_HINT)?.parse().ok(),
        None => None,
    };
    Ok(Choice {
        format,
        molecule: number("molecule")?,
        isotopologue: number("isotopologue")?,
    })
}

fn fit(section: Option<&Section<'_, '_>>) -> Result<(f64, FitChoices), SetupError> {
    let Some(section) = section else {
        return Ok((DEFAULT_TOLERANCE, FitChoices::default()));
    };
    let tolerance = match section.get("model_tolerance") {
        Some(entry) => entry.number(&TOLERANCE)?,
        None => DEFAULT_TOLERANCE,
    };
    let choice = |key| match section.get(key) {
        Some(entry) => entry.flag("write true or false, without quotes"),
        None => Ok(false),
    };
    let choices = FitChoices {
        scale_noise: choice("scale_noise")?,
        robust: choice("robust")?,
    };
    section.finish(section_of)?;
    Ok((tolerance, choices))
}

/// A path written in the setup, which stands relative to the setup's own folder.
fn beside(setup: &Path, name: &str) -> std::path::PathBuf {
    match setup.parent() {
        Some(folder) => folder.join(name),
        None => name.into(),
    }
}
