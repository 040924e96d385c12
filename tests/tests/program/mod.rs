//! The program under test: a folder to work in, a run, and both of its streams.

// Each test program uses a part of this.
#![allow(dead_code)]

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use ndarray::{Array1, Array3};
use tempfile::TempDir;

/// Two lines of sodium in front of a hot star; temperature, velocity and column are open.
pub const SODIUM: &str = r#"[spectrum]
medium = "vacuum"
intensity_unit = "W m-2 sr-1 nm-1"
use_nm = [[588.0, 591.0]]

[instrument]
fwhm_nm = 0.05

[background]
temperature_K = 5800

[[cloud]]
temperature_K = 1500
velocity_km_s = { find = [-100, 100], start = 10 }
turbulence_km_s = { find = [0.5, 20], start = 3 }
[cloud.column_cm2]
"Na I" = { find = [1e9, 1e16], start = 2e12 }
"#;

/// A well-formed spectrum; what the refusals are made from.
pub const SPECTRUM: &str = "# medium: vacuum\n# intensity_unit: W m-2 sr-1 nm-1\nwavelength_nm,intensity,uncertainty\n\
    589.0,26000,100\n589.1,25000,100\n589.2,24000,100\n589.3,26000,100\n589.4,26000,100\n589.5,26000,100\n";

/// What a run left.
pub struct Outcome {
    /// The exit code.
    pub code: i32,
    /// Standard output.
    pub stdout: String,
    /// Standard error.
    pub stderr: String,
}

impl Outcome {
    /// The run succeeded; gives standard output.
    #[track_caller]
    pub fn done(self) -> String {
        assert_eq!(self.code, 0, "{}", self.stderr);
        self.stdout
    }

    /// The run succeeded with one JSON document on standard output.
    #[track_caller]
    pub fn json(self) -> serde_json::Value {
        serde_json::from_str(&self.done()).unwrap()
    }

    /// The run was refused: exit code 2, nothing on standard output, one message with these parts and a hint.
    #[track_caller]
    pub fn refused(self, parts: &[&str]) {
        assert_eq!(self.code, 2, "{}", self.stderr);
        assert_eq!(self.stdout, "");
        let message: Vec<&str> = self
            .stderr
            .lines()
            .filter(|line| !line.starts_with("note: "))
            .collect();
        assert!(message[0].starts_with("error: "), "{}", self.stderr);
        assert_eq!(self.stderr.matches("error: ").count(), 1, "{}", self.stderr);
        assert_eq!(self.stderr.matches("hint: ").count(), 1, "{}", self.stderr);
        assert_eq!(message.len(), 2, "one line and a hint: {}", self.stderr);
        for part in parts {
            assert!(
                self.stderr.contains(part),
                "{}\nwithout {part:?}",
                self.stderr
            );
        }
    }
}

/// A folder of its own in which the program runs.
pub struct Desk {
    folder: TempDir,
}

impl Desk {
    /// An empty folder.
    pub fn new() -> Self {
        Desk {
            folder: tempfile::tempdir().unwrap(),
        }
    }

    /// A folder with `s.toml` and `a.csv`: see [`SODIUM`] and [`SPECTRUM`].
    pub fn laid() -> Self {
        let desk = Desk::new();
        desk.write("s.toml", SODIUM);
        desk.write("a.csv", SPECTRUM);
        desk
    }

    /// The path of a file in the folder.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Writes a file.
    pub fn write(&self, name: &str, content: impl AsRef<[u8]>) {
        std::fs::write(self.path(name), content).unwrap();
    }

    /// Reads a text file.
    pub fn read(&self, name: &str) -> String {
        std::fs::read_to_string(self.path(name)).unwrap()
    }

    /// The names of all files, sorted.
    pub fn names(&self) -> Vec<String> {
        let mut names: Vec<String> = std::fs::read_dir(self.folder.path())
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }

    /// The program with these arguments, ready to run.
    pub fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(assert_cmd::cargo::cargo_bin!("backlit"));
        command.args(arguments).current_dir(self.folder.path());
        command.stdin(Stdio::null());
        // A program that another test starts while this one writes a file inherits it open, and its lock with it.
        command.env("HDF5_USE_FILE_LOCKING", "FALSE");
        command
    }

    /// Runs the program.
    #[track_caller]
    pub fn run(&self, arguments: &[&str]) -> Outcome {
        let output = self.command(arguments).output().unwrap();
        Outcome {
            code: output.status.code().unwrap(),
            stdout: String::from_utf8(output.stdout).unwrap(),
            stderr: String::from_utf8(output.stderr).unwrap(),
        }
    }
}

/// Writes datasets of a cube as they are given, right or wrong.
pub fn write_cube(path: &Path, wavelength_nm: &[f64], shape: (usize, usize, usize), units: &str) {
    write_cube_of(26000.0, path, wavelength_nm, shape, units);
}

/// The same with one intensity everywhere.
pub fn write_cube_of(
    intensity: f64,
    path: &Path,
    wavelength_nm: &[f64],
    shape: (usize, usize, usize),
    units: &str,
) {
    let file = hdf5::File::create(path).unwrap();
    let wavelength = file
        .new_dataset_builder()
        .with_data(&Array1::from_vec(wavelength_nm.to_vec()))
        .create("wavelength")
        .unwrap();
    attribute(&wavelength, "units", "nm");
    attribute(&wavelength, "medium", "vacuum");
    let intensity = file
        .new_dataset_builder()
        .with_data(&Array3::from_elem(shape, intensity))
        .create("intensity")
        .unwrap();
    attribute(&intensity, "units", units);
}

/// Gives a dataset a text attribute.
pub fn attribute(dataset: &hdf5::Dataset, name: &str, text: &str) {
    let text: hdf5::types::VarLenUnicode = text.parse().unwrap();
    dataset
        .new_attr::<hdf5::types::VarLenUnicode>()
        .create(name)
        .unwrap()
        .write_scalar(&text)
        .unwrap();
}
