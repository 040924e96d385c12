//! SciPy in a process of its own, which waits to be asked: see `reference-checks/race`.

use std::io::{BufRead, BufReader, Write};
use std::ops::Range;
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use crate::case::FREE;

/// What SciPy found for one spectrum.
pub struct Answer {
    pub values: [f64; FREE],
    pub chi_square: f64,
}

/// Answers of some spectra, and what they cost.
pub struct Lap {
    pub answers: Vec<Answer>,
    pub ns_a_spectrum: f64,
    pub evaluations: f64,
}

pub struct SciPy {
    child: Child,
    ask: ChildStdin,
    answer: BufReader<ChildStdout>,
    folder: PathBuf,
}

impl SciPy {
    pub fn start(folder: &Path) -> SciPy {
        let programme =
            Path::new(env!("CARGO_MANIFEST_DIR")).join("../../reference-checks/race/race.py");
        let mut child = Command::new(python())
            .arg(programme)
            .arg(folder)
            .arg("--serve")
            .envs([("OMP_NUM_THREADS", "1"), ("OPENBLAS_NUM_THREADS", "1")])
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let ask = child.stdin.take().unwrap();
        let answer = BufReader::new(child.stdout.take().unwrap());
        let mut scipy = SciPy {
            child,
            ask,
            answer,
            folder: folder.to_path_buf(),
        };
        assert_eq!(scipy.line(), "ready");
        scipy
    }

    /// Fits some spectra with the model of that name.
    pub fn fit(&mut self, model: &str, spectra: Range<usize>) -> Lap {
        writeln!(self.ask, "{model} {} {}", spectra.start, spectra.end).unwrap();
        let line = self.line();
        let figures: Vec<f64> = line.split(' ').map(|word| word.parse().unwrap()).collect();
        let answers: Vec<Answer> = self
            .numbers()
            .chunks_exact(FREE + 1)
            .map(|row| Answer {
                values: row[..FREE].try_into().unwrap(),
                chi_square: row[FREE],
            })
            .collect();
        assert_eq!(answers.len(), spectra.len());
        Lap {
            answers,
            ns_a_spectrum: figures[0],
            evaluations: figures[1],
        }
    }

    /// Chi-square of values for each of the first spectra, in the finest of its models.
    pub fn judge(&mut self, values: &[[f64; FREE]]) -> Vec<f64> {
        let bytes: Vec<u8> = values
            .iter()
            .flatten()
            .copied()
            .flat_map(f64::to_le_bytes)
            .collect();
        std::fs::write(self.folder.join("values.f64"), bytes).unwrap();
        writeln!(self.ask, "judge").unwrap();
        assert_eq!(self.line(), "done");
        self.numbers()
    }

    fn numbers(&self) -> Vec<f64> {
        std::fs::read(self.folder.join("answers.f64"))
            .unwrap()
            .chunks_exact(8)
            .map(|bytes| f64::from_le_bytes(bytes.try_into().unwrap()))
            .collect()
    }

    fn line(&mut self) -> String {
        let mut line = String::new();
        self.answer.read_line(&mut line).unwrap();
        line.trim().to_owned()
    }
}

impl Drop for SciPy {
    fn drop(&mut self) {
        // It ends by itself when its input ends.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// A Python with the versions of `reference-checks/requirements.txt`: `BACKLIT_PYTHON`, or the environment that the tests use.
fn python() -> PathBuf {
    if let Some(python) = std::env::var_os("BACKLIT_PYTHON") {
        return python.into();
    }
    let script = "set -e; source tests/prepare; prepare_rust >&2; prepare_python >&2; printf %s \"$BACKLIT_PYTHON\"";
    let output = Command::new("bash")
        .args(["-c", script])
        .current_dir(Path::new(env!("CARGO_MANIFEST_DIR")).join("../.."))
        .stderr(Stdio::inherit())
        .output()
        .unwrap();
    assert!(
        output.status.success(),
        "no Python environment for the comparison; set BACKLIT_PYTHON to a Python with numpy and scipy"
    );
    String::from_utf8(output.stdout).unwrap().into()
}
