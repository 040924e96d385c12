//! What can be wrong with a setup.

use std::path::PathBuf;

use backlit_species::SpeciesError;
use backlit_units::UnitsError;

use super::Place;

/// A setup that cannot be used, with the place, what was found, what is allowed, and a hint.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SetupError {
    /// The file cannot be read.
    #[error("setup file {} cannot be read: {source}\nhint: {}", path.display(), read_hint(source))]
    Read {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The text is not TOML.
    #[error("{place} is not valid TOML: {message}\nhint: {hint}")]
    Toml {
        /// The line where the parser stopped.
        place: Box<Place>,
        /// What the TOML parser said.
        message: String,
        /// What usually causes this.
        hint: &'static str,
    },
    /// A key that no setup has, at least not here.
    #[error("unknown key `{}` ({place})\nhint: {}", place.key, unknown_key_hint(nearest.as_deref(), belongs_in.as_deref(), known))]
    UnknownKey {
        /// The key.
        place: Box<Place>,
        /// The known key of the same section that looks most like it.
        nearest: Option<String>,
        /// The section to which a key of exactly this name belongs.
        belongs_in: Option<String>,
        /// All keys of the section.
        known: Vec<&'static str>,
    },
    /// A key that must be there is not.
    #[error("key `{}` is missing ({} line {})\nhint: {hint}", place.key, place.path.display(), place.line)]
    MissingKey {
        /// The missing key and the line of its section.
        place: Box<Place>,
        /// What to write.
        hint: &'static str,
    },
    /// A value of the wrong kind.
    #[error("found {got} where {need} is expected ({place})\nhint: {hint}")]
    WrongKind {
        /// The key.
        place: Box<Place>,
        /// What the file has.
        got: String,
        /// What should be there.
        need: &'static str,
        /// An example.
        hint: &'static str,
    },
    /// A number outside what is possible.
    #[error(
        "{quantity} {got}{} is outside {allowed} ({place})\nhint: {hint}",
        unit_suffix(unit)
    )]
    OutOfRange {
        /// The key.
        place: Box<Place>,
        /// The name of the quantity.
        quantity: &'static str,
        /// The number found.
        got: f64,
        /// Its unit, empty for a pure number.
        unit: &'static str,
        /// The allowed range, with its unit.
        allowed: &'static str,
        /// What to do.
        hint: &'static str,
    },
    /// Bounds in the wrong order.
    #[error(
        "{quantity} bounds [{low}, {high}]{} do not rise ({place})\nhint: the low bound comes first: {{ find = [{high}, {low}] }}; for a known value write the number alone",
        unit_suffix(unit)
    )]
    BoundsReversed {
        /// The key.
        place: Box<Place>,
        /// The name of the quantity.
        quantity: &'static str,
        /// The first bound.
        low: f64,
        /// The second bound.
        high: f64,
        /// Their unit.
        unit: &'static str,
    },
    /// A starting value outside the bounds.
    #[error(
        "{quantity} start {start}{} is outside the bounds {low}..={high} ({place})\nhint: move the start inside, widen the bounds, or leave `start` out",
        unit_suffix(unit)
    )]
    StartOutside {
        /// The key.
        place: Box<Place>,
        /// The name of the quantity.
        quantity: &'static str,
        /// The start.
        start: f64,
        /// The low bound.
        low: f64,
        /// The high bound.
        high: f64,
        /// Their unit.
        unit: &'static str,
    },
    /// A wavelength range that does not rise.
    #[error(
        "range {index} [{low}, {high}] nm does not rise ({place})\nhint: the short wavelength comes first, both above 0 nm: use_nm = [[588.0, 591.0]]"
    )]
    RangeReversed {
        /// The key.
        place: Box<Place>,
        /// Which of the ranges, from 1.
        index: usize,
        /// The first wavelength.
        low: f64,
        /// The second wavelength.
        high: f64,
    },
    /// A list that holds nothing.
    #[error("the list is empty ({place})\nhint: {hint}")]
    EmptyList {
        /// The key.
        place: Box<Place>,
        /// What to do.
        hint: &'static str,
    },
    /// A word that is none of the known ones.
    #[error("unknown word \"{got}\", expected {} ({place})\nhint: {}", word_list(allowed), word_hint(nearest.as_deref(), allowed))]
    UnknownWord {
        /// The key.
        place: Box<Place>,
        /// The word found.
        got: String,
        /// The words that are known.
        allowed: &'static [&'static str],
        /// The known word that looks most like it.
        nearest: Option<String>,
    },
    /// A unit that is not understood.
    #[error("unit \"{got}\" is not understood ({place}): {source}")]
    Unit {
        /// The key.
        place: Box<Place>,
        /// The text found.
        got: String,
        /// What the reader of units said.
        source: UnitsError,
    },
    /// Something that the file format has but this version cannot do.
    #[error("{what} is not available in this version ({place})\nhint: {hint}")]
    NotAvailable {
        /// The key.
        place: Box<Place>,
        /// What was asked.
        what: &'static str,
        /// What to use in its place.
        hint: &'static str,
    },
    /// Two keys that exclude each other, or a key that has no meaning beside another's value.
    #[error("key `{}` has no meaning beside {beside} ({place})\nhint: {hint}", place.key)]
    Conflict {
        /// The key.
        place: Box<Place>,
        /// The other key, with its value where that matters.
        beside: &'static str,
        /// What to do.
        hint: &'static str,
    },
    /// A relative calibration with a fixed scale.
    #[error(
        "the intensity is relative but the scale is fixed ({place})\nhint: a relative calibration leaves the scale open: scale = {{ find = [1e-3, 1e3] }}, or give the true `intensity_unit`"
    )]
    RelativeNeedsScale {
        /// The scale, or the unit where the scale is not written.
        place: Box<Place>,
    },
    /// A setup that describes neither light nor gas.
    #[error("neither light nor gas: the background is dark and there is no cloud ({} line {})\nhint: add a [[cloud]], or give the [background] a light", place.path.display(), place.line)]
    NothingThere {
        /// The file.
        place: Box<Place>,
    },
    /// The same species twice.
    #[error(
        "species \"{name}\" is defined twice, first on line {first_line} ({place})\nhint: give each [[species]] a name of its own"
    )]
    DefinedTwice {
        /// The second definition.
        place: Box<Place>,
        /// The name.
        name: String,
        /// The line of the first definition.
        first_line: usize,
    },
    /// A species that neither the catalogue nor the setup knows.
    #[error(
        "unknown species \"{name}\" ({place})\nhint: {}",
        species_hint(nearest)
    )]
    UnknownSpecies {
        /// The column's key.
        place: Box<Place>,
        /// The name as written.
        name: String,
        /// Known names that look like it.
        nearest: Vec<String>,
    },
    /// One species under two names in one cloud.
    #[error(
        "species \"{name}\" has two columns in one cloud, the first on line {first_line} ({place})\nhint: give each species one column; a second [[cloud]] may have its own"
    )]
    SpeciesTwice {
        /// The second column's key.
        place: Box<Place>,
        /// The name in the catalogue.
        name: String,
        /// The line of the first column.
        first_line: usize,
    },
    /// A name that the catalogue refuses.
    #[error("{place}: {source}")]
    SpeciesName {
        /// The column's key.
        place: Box<Place>,
        /// What the catalogue said.
        source: Box<SpeciesError>,
    },
    /// The tables of a user's species cannot be used.
    #[error("species \"{name}\" ({place}): {source}")]
    UserTables {
        /// The species' section.
        place: Box<Place>,
        /// The name.
        name: String,
        /// What the reader of tables said.
        source: Box<SpeciesError>,
    },
}

fn read_hint(source: &std::io::Error) -> &'static str {
    match source.kind() {
        std::io::ErrorKind::NotFound => "check the path; it is relative to the current folder",
        std::io::ErrorKind::PermissionDenied => "the file needs read permission for you",
        std::io::ErrorKind::InvalidData => "a setup is UTF-8 text in TOML; save it as UTF-8",
        std::io::ErrorKind::IsADirectory => "name the setup file inside this folder",
        _ => "a setup is a text file in TOML",
    }
}

fn unit_suffix(unit: &str) -> String {
    if unit.is_empty() {
        String::new()
    } else {
        format!(" {unit}")
    }
}

fn unknown_key_hint(nearest: Option<&str>, belongs_in: Option<&str>, known: &[&str]) -> String {
    if let Some(section) = belongs_in {
        return format!("this key belongs in {section}");
    }
    match nearest {
        Some(name) => format!("did you mean `{name}`?"),
        None => format!("known here: {}", known.join(", ")),
    }
}

fn word_list(allowed: &[&str]) -> String {
    let quoted: Vec<String> = allowed.iter().map(|w| format!("\"{w}\"")).collect();
    match quoted.as_slice() {
        [] => String::new(),
        [one] => one.clone(),
        [rest @ .., last] => format!("{} or {last}", rest.join(", ")),
    }
}

fn word_hint(nearest: Option<&str>, allowed: &[&str]) -> String {
    match nearest {
        Some(word) => format!("did you mean \"{word}\"?"),
        None => format!("write one of {}", word_list(allowed)),
    }
}

fn species_hint(nearest: &[String]) -> String {
    if nearest.is_empty() {
        return "`backlit species` lists the names; others come from a [[species]] of your own"
            .to_owned();
    }
    let quoted: Vec<String> = nearest.iter().map(|n| format!("\"{n}\"")).collect();
    format!(
        "did you mean {}? `backlit species` lists all names",
        quoted.join(" or ")
    )
}
