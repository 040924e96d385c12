//! One spectrum, from and to CSV or HDF5.
//!
//! One file a format: a new one needs a reader that fills a [`Spectrum`], a writer, and a line in
//! [`Spectrum::read`] that recognises it by its content.

mod csv;
mod hdf5_file;

use std::fs;
use std::path::{Path, PathBuf};

use backlit_units::Medium;

use crate::archive;
use crate::cube::masks;
use crate::error::{Action, CubesError, Place};
use crate::staging::Staged;

/// One spectrum as its file has it.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Spectrum {
    /// Wavelengths of the channel centres in metres, in the file's medium and order, strictly rising or falling.
    pub wavelength: Vec<f64>,
    /// Medium of the wavelengths, if the file says it.
    pub medium: Option<Medium>,
    /// Intensity in the file's unit; not finite only where `mask` is set.
    pub intensity: Vec<f64>,
    /// 1-sigma uncertainty in the same unit; positive and finite where `mask` is not set.
    pub uncertainty: Option<Vec<f64>>,
    /// True where a channel must not be used.
    pub mask: Vec<bool>,
    /// Unit of the intensity, if the file says it; understood by `backlit_units`.
    pub intensity_unit: Option<String>,
    /// The file it was read from; empty if it was not.
    pub path: PathBuf,
    /// What the reader noticed and the user should know.
    pub notes: Vec<String>,
}

impl Spectrum {
    /// Reads a spectrum, CSV or HDF5 by its content.
    ///
    /// HDF5 holds `/wavelength` (n) and `/intensity` (n) or (1, 1, n). A channel whose intensity is not finite or
    /// whose uncertainty is not positive and finite is masked, and `notes` says how many were.
    ///
    /// # Errors
    /// One [`CubesError`] with the place for whatever is not as it should be: see its variants.
    pub fn read(path: impl AsRef<Path>) -> Result<Self, CubesError> {
        let path = path.as_ref();
        if path.is_dir() {
            let source = std::io::ErrorKind::IsADirectory.into();
            return Err(CubesError::Io {
                path: path.into(),
                action: Action::Read,
                source,
            });
        }
        if archive::has_signature(path)? {
            return hdf5_file::read(path);
        }
        let bytes = fs::read(path).map_err(CubesError::io(path, Action::Read))?;
        if named_hdf5(path) && !bytes.is_empty() {
            return Err(CubesError::NotHdf5 { path: path.into() });
        }
        csv::parse(&bytes, path)
    }

    /// Reads a spectrum from the bytes of a CSV file; `path` is for messages.
    ///
    /// # Errors
    /// As [`Spectrum::read`].
    pub fn parse_csv(bytes: &[u8], path: impl AsRef<Path>) -> Result<Self, CubesError> {
        csv::parse(bytes, path.as_ref())
    }

    /// Writes HDF5 if the name ends in `.h5`, `.hdf5` or `.hdf`, CSV otherwise.
    ///
    /// # Errors
    /// As [`Spectrum::write_csv`].
    pub fn write(&self, path: impl AsRef<Path>, overwrite: bool) -> Result<(), CubesError> {
        if named_hdf5(path.as_ref()) {
            self.write_hdf5(path, overwrite)
        } else {
            self.write_csv(path, overwrite)
        }
    }

    /// The text of the CSV that [`Spectrum::write_csv`] writes.
    pub fn to_csv(&self) -> String {
        csv::format(self)
    }

    /// Writes CSV; every number is read back bit for bit (`a_spectrum_survives_csv_bit_for_bit`).
    ///
    /// # Errors
    /// [`CubesError::Exists`] unless `overwrite`, and [`CubesError::Io`]; nothing half-written stays behind.
    pub fn write_csv(&self, path: impl AsRef<Path>, overwrite: bool) -> Result<(), CubesError> {
        let path = path.as_ref();
        let staged = Staged::begin(path, overwrite)?;
        fs::write(staged.temporary(), csv::format(self))
            .map_err(CubesError::io(path, Action::Write))?;
        staged.commit()
    }

    /// Writes HDF5 with wavelengths in nm.
    ///
    /// # Errors
    /// As [`Spectrum::write_csv`].
    pub fn write_hdf5(&self, path: impl AsRef<Path>, overwrite: bool) -> Result<(), CubesError> {
        let path = path.as_ref();
        let staged = Staged::begin(path, overwrite)?;
        hdf5_file::write(self, staged.temporary()).map_err(CubesError::hdf5(
            path,
            Action::Write,
            "the spectrum",
        ))?;
        staged.commit()
    }

    /// Masks what cannot be used, notes how much it was, and refuses a spectrum with nothing left.
    fn settle(
        mut self,
        intensity_place: Place,
        uncertainty_place: Place,
    ) -> Result<Self, CubesError> {
        let channels = self.intensity.len();
        let mut missing = 0;
        for (value, masked) in self.intensity.iter().zip(&mut self.mask) {
            if !value.is_finite() && !*masked {
                *masked = true;
                missing += 1;
            }
        }
        if self.mask.iter().all(|m| *m) {
            let path = self.path;
            return Err(CubesError::NoData {
                path,
                place: intensity_place,
                channels,
            });
        }
        if missing > 0 {
            self.notes.push(format!(
                "{missing} of {channels} channels have no finite intensity and are not used"
            ));
        }
        let Some(sigma) = &self.uncertainty else {
            return Ok(self);
        };
        let mut useless = 0;
        for (sigma, masked) in sigma.iter().zip(&mut self.mask) {
            if !masks::usable(*sigma) && !*masked {
                *masked = true;
                useless += 1;
            }
        }
        if self.mask.iter().all(|m| *m) {
            let first = sigma.first().copied().unwrap_or(f64::NAN);
            let path = self.path;
            return Err(CubesError::NoUncertainty {
                path,
                place: uncertainty_place,
                first,
            });
        }
        if useless > 0 {
            self.notes.push(format!(
                "{useless} of {channels} channels have an uncertainty that is not above zero and are not used"
            ));
        }
        Ok(self)
    }
}

fn named_hdf5(path: &Path) -> bool {
    let ending = path
        .extension()
        .unwrap_or_default()
        .to_string_lossy()
        .to_lowercase();
    matches!(ending.as_str(), "h5" | "hdf5" | "hdf" | "he5")
}
