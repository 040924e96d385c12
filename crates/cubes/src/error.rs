//! Everything that can be wrong with a file, each with its place, what was found, what was expected, what to do.

use std::fmt;
use std::io;
use std::path::{Path, PathBuf};

/// A place inside a file.
#[derive(Debug, Clone, PartialEq, Eq)]
#[non_exhaustive]
pub enum Place {
    /// A line of a text file, counted from 1.
    Line(usize),
    /// A column of one line of a text file.
    Cell {
        /// Line, counted from 1.
        line: usize,
        /// Name of the column.
        column: String,
    },
    /// A whole dataset of an HDF5 file.
    Dataset(String),
    /// One element of a dataset of an HDF5 file.
    Element {
        /// Name of the dataset.
        dataset: String,
        /// Index, counted from 0.
        index: usize,
    },
    /// An attribute of a dataset of an HDF5 file.
    Attribute {
        /// Name of the dataset.
        dataset: String,
        /// Name of the attribute.
        attribute: String,
    },
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Line(line) => write!(f, "line {line}"),
            Self::Cell { line, column } => write!(f, "line {line}, column `{column}`"),
            Self::Dataset(dataset) => write!(f, "dataset /{dataset}"),
            Self::Element { dataset, index } => write!(f, "dataset /{dataset}, element {index}"),
            Self::Attribute { dataset, attribute } => {
                write!(f, "dataset /{dataset}, attribute `{attribute}`")
            }
        }
    }
}

/// What the program was doing with a file when the system refused.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Action {
    /// Opening or reading.
    Read,
    /// Creating.
    Create,
    /// Writing or syncing.
    Write,
    /// Moving the finished file to its name.
    Rename,
    /// Taking the lock.
    Lock,
}

impl fmt::Display for Action {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Read => "read",
            Self::Create => "create",
            Self::Write => "write",
            Self::Rename => "rename to",
            Self::Lock => "lock",
        })
    }
}

/// One thing in which an interrupted run differs from the one that wants to continue it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Difference {
    /// What differs: `setup`, `input`, `shape`, ...
    pub what: String,
    /// What the file on disk says.
    pub there: String,
    /// What this run says.
    pub here: String,
}

/// Why a file could not be read or written.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum CubesError {
    /// The system refused.
    #[error("cannot {action} {}: {source}\nhint: {}", path.display(), io_hint(*action, source, path))]
    Io {
        /// The file.
        path: PathBuf,
        /// What was tried.
        action: Action,
        /// What the system said.
        source: io::Error,
    },
    /// The output is there already.
    #[error("{} exists already\nhint: choose another name, or give --overwrite to replace it", path.display())]
    Exists {
        /// The file.
        path: PathBuf,
    },
    /// The file holds nothing.
    #[error(
        "{} is empty: expected a header row and at least two channels\n\
         hint: a spectrum starts with the row `wavelength_nm,intensity`", path.display()
    )]
    Empty {
        /// The file.
        path: PathBuf,
    },
    /// Bytes that are no text in a text file.
    #[error(
        "{}, line {line}: bytes that are not UTF-8 text, expected CSV or HDF5\n\
         hint: save the table as plain text (UTF-8) with commas, or as HDF5", path.display()
    )]
    NotText {
        /// The file.
        path: PathBuf,
        /// Line of the first such byte.
        line: usize,
    },
    /// A column that must be there is not.
    #[error(
        "{}, line {line}: no column `{column}`, found {}\n\
         hint: the header row needs `wavelength_nm` and `intensity`, may have `uncertainty` and `mask`, separated by commas",
        path.display(), quoted(found)
    )]
    MissingColumn {
        /// The file.
        path: PathBuf,
        /// Line of the header row.
        line: usize,
        /// The missing column.
        column: &'static str,
        /// The columns that are there.
        found: Vec<String>,
    },
    /// A column that is there twice.
    #[error("{}, line {line}: column `{column}` is there more than once\nhint: keep one of them, rename the others", path.display())]
    RepeatedColumn {
        /// The file.
        path: PathBuf,
        /// Line of the header row.
        line: usize,
        /// The column.
        column: &'static str,
    },
    /// A row with more or fewer fields than the header.
    #[error(
        "{}, line {line}: {found} fields, expected {expected} as in the header row\n\
         hint: numbers use a decimal point, and only commas separate fields", path.display()
    )]
    FieldCount {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// Fields in this row.
        found: usize,
        /// Fields in the header.
        expected: usize,
    },
    /// Text where a number should be.
    #[error("{}, {place}: found `{found}`, expected a number\nhint: write 1.5e-3, or nan where there is no value", path.display())]
    NotANumber {
        /// The file.
        path: PathBuf,
        /// Line and column.
        place: Place,
        /// The text.
        found: String,
    },
    /// A mask that is neither 0 nor 1.
    #[error("{}, {place}: found `{found}`, expected 0 or 1\nhint: 1 = do not use this channel", path.display())]
    NotAMask {
        /// The file.
        path: PathBuf,
        /// Line and column.
        place: Place,
        /// The text.
        found: String,
    },
    /// No channel has a finite intensity that is not masked.
    #[error(
        "{}, {place}: none of the {channels} channels has a usable intensity (all are nan, infinite or masked)\n\
         hint: check the column of intensities and the mask (1 = do not use)", path.display()
    )]
    NoData {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// Number of channels.
        channels: usize,
    },
    /// No uncertainty is a positive number.
    #[error(
        "{}, {place}: no uncertainty is above zero (the first is {first}), expected 1-sigma values\n\
         hint: leave the uncertainty out if it is not known; the noise is then estimated from the data", path.display()
    )]
    NoUncertainty {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The first value.
        first: f64,
    },
    /// A wavelength that is zero, negative or not finite.
    #[error("{}, {place}: wavelength {found_nm} nm, expected a finite value above zero\nhint: check the unit and the row", path.display())]
    BadWavelength {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The value in nm.
        found_nm: f64,
    },
    /// Wavelengths that go back or stand still.
    #[error(
        "{}, {place}: wavelength {found_nm} nm after {previous_nm} nm, expected strictly {} wavelengths\n\
         hint: sort the rows by wavelength and remove repeated ones", path.display(), direction(*rising)
    )]
    NotMonotonic {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The value in nm.
        found_nm: f64,
        /// The value before it in nm.
        previous_nm: f64,
        /// Whether the file started with rising wavelengths.
        rising: bool,
    },
    /// One channel or none.
    #[error("{}, {place}: {found} channels, expected at least 2\nhint: a channel's width comes from its neighbours", path.display())]
    TooFewChannels {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// Number of channels.
        found: usize,
    },
    /// A medium that is neither vacuum nor air.
    #[error("{}, {place}: medium `{found}`, expected `vacuum` or `air`\nhint: write `vacuum` or `air`", path.display())]
    UnknownMedium {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The text.
        found: String,
    },
    /// A wavelength unit that is not known.
    #[error("{}, {place}: wavelength unit `{found}`, expected nm, Angstrom, um or m\nhint: set the attribute to one of these", path.display())]
    UnknownWavelengthUnit {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The text.
        found: String,
    },
    /// An intensity unit that is not known.
    #[error(
        "{}, {place}: intensity unit `{found}` is not understood, expected the like of `W m-2 sr-1 nm-1`\n\
         hint: a power per area, solid angle and wavelength, or `relative` if the calibration is only relative", path.display()
    )]
    UnknownIntensityUnit {
        /// The file.
        path: PathBuf,
        /// Where.
        place: Place,
        /// The text.
        found: String,
        /// What the parser of units said.
        source: Box<backlit_units::UnitsError>,
    },
    /// Not an HDF5 file.
    #[error(
        "{} is not an HDF5 file: its first bytes are no HDF5 signature\n\
         hint: cubes and maps are HDF5; a single spectrum may also be CSV with a name that ends in .csv", path.display()
    )]
    NotHdf5 {
        /// The file.
        path: PathBuf,
    },
    /// An HDF5 file that ends too early.
    #[error(
        "{} is truncated: it is shorter than its own header says ({found_bytes} bytes on disk)\n\
         hint: copy it again, or repeat the step that wrote it", path.display()
    )]
    Truncated {
        /// The file.
        path: PathBuf,
        /// Its length.
        found_bytes: u64,
    },
    /// The HDF5 library refused.
    #[error("cannot {action} {object} of {}: {source}\nhint: the file may be damaged, or open in another program", path.display())]
    Hdf5 {
        /// The file.
        path: PathBuf,
        /// What was tried.
        action: Action,
        /// Dataset, group or attribute.
        object: String,
        /// What the library said.
        source: hdf5::Error,
    },
    /// A dataset that must be there is not.
    #[error("{}: no dataset /{dataset}, found {}\nhint: see the layout of a cube: /wavelength (n), /intensity (ny, nx, n)", path.display(), quoted(found))]
    MissingDataset {
        /// The file.
        path: PathBuf,
        /// The missing dataset.
        dataset: String,
        /// What is there.
        found: Vec<String>,
    },
    /// An attribute that must be there is not.
    #[error("{}: dataset /{dataset} has no attribute `{attribute}`, expected {expected}\nhint: add the attribute", path.display())]
    MissingAttribute {
        /// The file.
        path: PathBuf,
        /// The dataset.
        dataset: String,
        /// The attribute.
        attribute: &'static str,
        /// What it should say.
        expected: &'static str,
    },
    /// An attribute that is not text.
    #[error("{}, {place}: not a text, expected a string\nhint: write the attribute as a string", path.display())]
    NotAString {
        /// The file.
        path: PathBuf,
        /// Dataset and attribute.
        place: Place,
    },
    /// A dataset of other dimensions than needed.
    #[error("{}: dataset /{dataset} has shape {}, expected {expected}\nhint: {}", path.display(), dimensions(found), rank_hint(dataset, found, expected))]
    WrongShape {
        /// The file.
        path: PathBuf,
        /// The dataset.
        dataset: String,
        /// Its shape.
        found: Vec<usize>,
        /// What it should be.
        expected: String,
    },
    /// A dataset whose elements are no numbers.
    #[error("{}: dataset /{dataset} holds {found}, expected {expected}\nhint: write it as one of these types", path.display())]
    WrongType {
        /// The file.
        path: PathBuf,
        /// The dataset.
        dataset: String,
        /// Its element type.
        found: String,
        /// What it should be.
        expected: &'static str,
    },
    /// Arrays that do not fit the cube or the tile.
    #[error(
        "{} has shape {}, expected {} (tile {tile})\nhint: this is a mistake in the calling program",
        what,
        dimensions(found),
        dimensions(expected)
    )]
    WrongTileShape {
        /// Which array.
        what: &'static str,
        /// The tile.
        tile: usize,
        /// Its shape.
        found: Vec<usize>,
        /// What it should be.
        expected: Vec<usize>,
    },
    /// A tile that the list of tiles does not have, or one that reaches outside.
    #[error("tile {tile} does not belong to {}\nhint: this is a mistake in the calling program", path.display())]
    UnknownTile {
        /// The file.
        path: PathBuf,
        /// The tile.
        tile: usize,
    },
    /// A tile that is in the journal already.
    #[error("tile {tile} is finished already in {}\nhint: this is a mistake in the calling program", path.display())]
    RepeatedTile {
        /// The journal.
        path: PathBuf,
        /// The tile.
        tile: usize,
    },
    /// Tiles that overlap, repeat or reach outside the maps, or repeated names.
    #[error("the {what} of the maps {} are not consistent: {item} is there twice or reaches outside\nhint: this is a mistake in the calling program", path.display())]
    BadMapsSpec {
        /// The maps file.
        path: PathBuf,
        /// `tiles` or `quantities`.
        what: &'static str,
        /// Which.
        item: String,
    },
    /// Another run writes the same maps now.
    #[error("another run is writing {} at this moment\nhint: wait for it, stop it, or choose another output", path.display())]
    Busy {
        /// The maps file.
        path: PathBuf,
    },
    /// A journal of an interrupted run is there.
    #[error(
        "an interrupted run left {} with {done} finished tiles\n\
         hint: give --resume to continue it, or --overwrite to begin again", path.display()
    )]
    JournalExists {
        /// The journal.
        path: PathBuf,
        /// Tiles that it holds.
        done: usize,
    },
    /// A file where the journal should be that is no journal, or one of another version.
    #[error("{} is not a journal of this version (format {found}, expected {expected})\nhint: remove it, or give --overwrite to begin again", path.display())]
    NotAJournal {
        /// The journal.
        path: PathBuf,
        /// Version found, 0 if it is no journal at all.
        found: u32,
        /// Version expected.
        expected: u32,
    },
    /// An interrupted or finished run that was another one.
    #[error("{} belongs to another run: {}\nhint: use the same setup and input, or give --overwrite to begin again", path.display(), list(differences))]
    OtherRun {
        /// The journal or the maps file.
        path: PathBuf,
        /// What differs.
        differences: Vec<Difference>,
    },
    /// Maps that cannot be finished yet.
    #[error("{} cannot be finished: {done} of {total} tiles are there\nhint: give --resume to compute the rest", path.display())]
    Unfinished {
        /// The maps file.
        path: PathBuf,
        /// Tiles that are there.
        done: usize,
        /// Tiles that should be.
        total: usize,
    },
    /// A map that the file does not have.
    #[error("{}: no map `{name}`, found {}\nhint: choose one of these", path.display(), quoted(found))]
    MissingMap {
        /// The maps file.
        path: PathBuf,
        /// The name.
        name: String,
        /// The maps that are there.
        found: Vec<String>,
    },
}

impl CubesError {
    /// An error of the system, at a path.
    pub(crate) fn io(path: &Path, action: Action) -> impl FnOnce(io::Error) -> Self + use<> {
        let path = path.to_path_buf();
        move |source| Self::Io {
            path,
            action,
            source,
        }
    }

    /// An error of the HDF5 library; if the system was behind it (disk full, ...), that one.
    pub(crate) fn hdf5(
        path: &Path,
        action: Action,
        object: &str,
    ) -> impl FnOnce(hdf5::Error) -> Self + use<> {
        let (path, object) = (path.to_path_buf(), object.to_owned());
        move |source| match system_error(&source) {
            Some(source) => Self::Io {
                path,
                action,
                source,
            },
            None => Self::Hdf5 {
                path,
                action,
                object,
                source,
            },
        }
    }
}

/// The library hides the system's error number in the text of an inner frame of its stack.
fn system_error(error: &hdf5::Error) -> Option<io::Error> {
    let stack = error.stack()?;
    stack.iter().find_map(|frame| {
        let (_, rest) = frame.desc().split_once("errno = ")?;
        let digits = rest.split(|c: char| !c.is_ascii_digit()).next()?;
        digits
            .parse()
            .ok()
            .filter(|&n| n != 0)
            .map(io::Error::from_raw_os_error)
    })
}

fn io_hint(action: Action, source: &io::Error, path: &Path) -> String {
    use io::ErrorKind as Kind;
    match (source.kind(), action) {
        (Kind::NotFound, Action::Read) => "check the name and the folder".into(),
        (Kind::NotFound, _) => match path
            .parent()
            .filter(|p| !p.as_os_str().is_empty() && !p.exists())
        {
            Some(folder) => format!(
                "the folder {} does not exist; create it first",
                folder.display()
            ),
            None => "check the name and the folder".into(),
        },
        (Kind::PermissionDenied | Kind::ReadOnlyFilesystem, Action::Read) => {
            "ask for permission to read it".into()
        }
        (Kind::PermissionDenied | Kind::ReadOnlyFilesystem, _) => {
            "choose a folder where you may write".into()
        }
        (Kind::StorageFull | Kind::QuotaExceeded, _) => {
            "make space on this disk, then run again (--resume keeps finished work)".into()
        }
        (Kind::IsADirectory, _) => "this is a folder; name a file".into(),
        (Kind::WouldBlock, _) => {
            "another program holds the file (HDF5 locks what it has open); close it there, then run again".into()
        }
        _ => "check the disk and the path".into(),
    }
}

fn quoted(names: &[String]) -> String {
    if names.is_empty() {
        return "nothing".into();
    }
    let mut text = String::new();
    for (i, name) in names.iter().take(20).enumerate() {
        let name: String = name.chars().take(60).collect();
        text += &format!("{}`{}`", if i == 0 { "" } else { ", " }, name);
    }
    if names.len() > 20 {
        text += &format!(" and {} more", names.len() - 20);
    }
    text
}

fn dimensions(shape: &[usize]) -> String {
    let inner: Vec<String> = shape.iter().map(usize::to_string).collect();
    format!("({})", inner.join(", "))
}

fn direction(rising: bool) -> &'static str {
    if rising { "rising" } else { "falling" }
}

fn rank_hint(dataset: &str, found: &[usize], expected: &str) -> &'static str {
    match (dataset, found.len()) {
        ("intensity", 2) => "a series of nt spectra is a cube of shape (1, nt, n)",
        ("intensity", 1) => "this is a single spectrum; use `backlit fit`",
        // Not where a cube was expected, of another length.
        ("intensity", 3) if !expected.contains(',') => "this is a cube; use `backlit map`",
        _ => "the last axis of a cube is the wavelength, and all datasets share its length",
    }
}

fn list(differences: &[Difference]) -> String {
    let parts: Vec<String> = differences
        .iter()
        .map(|d| format!("{} is `{}` there and `{}` here", d.what, d.there, d.here))
        .collect();
    parts.join("; ")
}
