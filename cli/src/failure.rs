//! Why the program ends without an answer.

use std::io;
use std::path::PathBuf;
use std::process::ExitCode;

use backlit_cubes::CubesError;
use backlit_inverse::InverseError;
use backlit_inverse::setup::SetupError;
use backlit_species::SpeciesError;
use backlit_units::UnitsError;

use crate::interrupt;

/// Everything that ends a command early; the message is what the user reads.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum Failure {
    /// A setup that cannot be used.
    #[error(transparent)]
    Setup(#[from] SetupError),
    /// A file that cannot be read or written.
    #[error(transparent)]
    Cubes(#[from] CubesError),
    /// A species that is not known.
    #[error(transparent)]
    Species(#[from] SpeciesError),
    /// A problem that cannot be posed.
    #[error(transparent)]
    Inverse(#[from] InverseError),
    /// Wavelengths or units of a file that cannot be used.
    #[error("{}: {source}", path.display())]
    Units {
        /// The file.
        path: PathBuf,
        /// What is wrong.
        source: UnitsError,
    },
    /// Neither the data nor the setup say the unit of the intensity.
    #[error(
        "{} does not say the unit of its intensity, nor does {}\n\
         hint: add `# intensity_unit: W m-2 sr-1 nm-1` (CSV) or the attribute `units` (HDF5) to the data, or intensity_unit to \
         [spectrum] in the setup; \"relative\" with scale = {{ find = [low, high] }} where the calibration is only relative",
        data.display(), setup.display()
    )]
    NoUnit {
        /// The data file.
        data: PathBuf,
        /// The setup file.
        setup: PathBuf,
    },
    /// A measured background that does not reach over the data.
    #[error(
        "{} covers {have_low_nm:.3}..{have_high_nm:.3} nm, the data need {need_low_nm:.3}..{need_high_nm:.3} nm (vacuum)\n\
         hint: measure the light without the gas over the whole range, or narrow `use_nm` and cut the data to it", path.display()
    )]
    BackgroundTooShort {
        /// The file of the measured light.
        path: PathBuf,
        /// Its shortest wavelength.
        have_low_nm: f64,
        /// Its longest wavelength.
        have_high_nm: f64,
        /// The data's shortest wavelength.
        need_low_nm: f64,
        /// The data's longest wavelength.
        need_high_nm: f64,
    },
    /// A measured background with channels that cannot be used.
    #[error(
        "{} has {masked} channels without a usable intensity, the first at {first_nm:.4} nm\n\
         hint: the light without the gas must be known in every channel; fill or cut these", path.display()
    )]
    BackgroundMasked {
        /// The file of the measured light.
        path: PathBuf,
        /// How many channels.
        masked: usize,
        /// The first of them, in the file's medium.
        first_nm: f64,
    },
    /// A spectrum with too little in it to tell lines from light.
    #[error(
        "{} has {usable} usable channels, an identification needs at least 41\n\
         hint: give a wider piece of the spectrum, or less of a mask or of `use_nm`", path.display()
    )]
    TooShort {
        /// The file.
        path: PathBuf,
        /// Channels that are not masked.
        usable: usize,
    },
    /// A spectrum whose noise nobody knows.
    #[error(
        "{} has no uncertainties, and its {usable} usable channels do not show their noise\n\
         hint: add a column `uncertainty` (1 sigma)", path.display()
    )]
    NoNoise {
        /// The file.
        path: PathBuf,
        /// Channels with a value.
        usable: usize,
    },
    /// A grid that makes no sense.
    #[error(
        "a step of {step_nm} nm divides {low_nm}..{high_nm} nm into {channels:.0} channels, allowed are 2..=10000000\n\
         hint: choose another --step or --range"
    )]
    Grid {
        /// The step.
        step_nm: f64,
        /// The short end.
        low_nm: f64,
        /// The long end.
        high_nm: f64,
        /// The number of channels.
        channels: f64,
    },
    /// The table of `--vary` cannot be read.
    #[error("{} cannot be read: {source}\nhint: a table with a header row: y,x and one column a quantity, as `backlit predict --help` shows", path.display())]
    VaryRead {
        /// The table.
        path: PathBuf,
        /// What the reader said.
        source: csv::Error,
    },
    /// A column of `--vary` that is no free quantity, or one that is missing.
    #[error("{} line 1: {what} column `{column}`\nhint: {hint}", path.display())]
    VaryColumn {
        /// The table.
        path: PathBuf,
        /// `unknown`, `repeated` or `no`.
        what: &'static str,
        /// The column.
        column: String,
        /// What to do.
        hint: String,
    },
    /// A cell of `--vary` that is no number, or outside the cube.
    #[error("{} line {line}, column `{column}`: found `{got}`, expected {need}\nhint: {hint}", path.display())]
    VaryCell {
        /// The table.
        path: PathBuf,
        /// The line, from 1.
        line: u64,
        /// The column.
        column: String,
        /// What stands there.
        got: String,
        /// What should stand there.
        need: String,
        /// What to do.
        hint: &'static str,
    },
    /// A file that the system does not let us write.
    #[error("{} cannot be written: {source}\nhint: check the folder, its permissions and the space left", path.display())]
    Write {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: io::Error,
    },
    /// A cube in which no spectrum can be fitted.
    #[error("{}: none of the {total} spectra has as many usable channels as free values (no data, NaN, masked, or without a usable uncertainty)\nhint: check `/intensity` and `/uncertainty` of the cube, and `spectrum.use_nm` of the setup", path.display())]
    NoUsableSpectrum {
        /// The cube.
        path: PathBuf,
        /// Its spectra.
        total: u64,
    },
    /// A file that is there already.
    #[error("{} exists already\nhint: choose another name, or give --overwrite to replace it", path.display())]
    Exists {
        /// The file.
        path: PathBuf,
    },
    /// Standard output cannot be written.
    #[error(
        "standard output cannot be written: {source}\nhint: check the space left where it goes"
    )]
    Stdout {
        /// What the system said.
        source: io::Error,
    },
    /// The reader of standard output has gone; no reason to complain.
    #[error("standard output was closed")]
    PipeClosed,
    /// A document that JSON cannot hold.
    #[error(
        "the answer cannot be written as JSON: {source}\nhint: this is a defect of the program; please report it"
    )]
    Json {
        /// What the writer said.
        source: serde_json::Error,
    },
    /// The system gives no threads.
    #[error("cannot start the threads: {source}\nhint: give a smaller --threads")]
    Threads {
        /// What the system said.
        source: rayon::ThreadPoolBuildError,
    },
    /// Ctrl-C.
    #[error(
        "interrupted after {done} of {total} spectra; they are kept in {}\nhint: the same command with --resume continues", journal.display()
    )]
    Interrupted {
        /// Spectra done.
        done: u64,
        /// Spectra in the cube.
        total: u64,
        /// Where they are kept.
        journal: PathBuf,
    },
}

impl Failure {
    /// Standard output failed; a closed pipe is no failure.
    pub fn stdout(source: io::Error) -> Self {
        match source.kind() {
            io::ErrorKind::BrokenPipe => Failure::PipeClosed,
            _ => Failure::Stdout { source },
        }
    }

    /// 130 for an interrupted run, otherwise 2.
    pub fn exit_code(&self) -> ExitCode {
        match self {
            Failure::Interrupted { .. } => ExitCode::from(interrupt::EXIT_CODE),
            _ => ExitCode::from(2),
        }
    }
}
