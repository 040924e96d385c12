//! Spectra in HDF5, laid out as a cube without its first two axes.

use std::path::Path;

use super::Spectrum;
use crate::archive::{self, Archive};
use crate::cube::masks;
use crate::error::{CubesError, Place};

/// Reads `/wavelength` (n), `/intensity` (n) or (1, 1, n), and `/uncertainty`, `/mask` of that shape or (n).
pub fn read(path: &Path) -> Result<Spectrum, CubesError> {
    let archive = Archive::open(path)?;
    let (wavelength, medium) = archive.wavelengths()?;
    let n = wavelength.len();
    let fits = |shape: &[usize]| shape == [n] || shape == [1, 1, n];

    let dataset = archive.dataset("intensity")?;
    if !fits(&dataset.shape()) {
        return Err(archive.wrong_shape("intensity", dataset.shape(), &format!("({n})")));
    }
    let intensity = archive.numbers(&dataset, "intensity")?;
    let intensity_unit = archive.intensity_unit(&dataset, "intensity")?;

    let uncertainty = match archive.optional_dataset("uncertainty")? {
        None => None,
        Some(dataset) => {
            let values = archive.numbers(&dataset, "uncertainty")?;
            match values[..] {
                [one] if dataset.shape().len() < 2 => Some(vec![one; n]),
                _ if fits(&dataset.shape()) => Some(values),
                _ => {
                    let expected = format!("({n}) or a scalar");
                    return Err(archive.wrong_shape("uncertainty", dataset.shape(), &expected));
                }
            }
        }
    };
    let mask = match archive.optional_dataset("mask")? {
        None => vec![false; n],
        Some(dataset) if fits(&dataset.shape()) => masks::whole(&archive, &dataset)?,
        Some(dataset) => {
            return Err(archive.wrong_shape("mask", dataset.shape(), &format!("({n})")));
        }
    };
    let spectrum = Spectrum {
        wavelength,
        medium,
        intensity,
        uncertainty,
        mask,
        intensity_unit,
        path: path.into(),
        notes: Vec::new(),
    };
    spectrum.settle(
        Place::Dataset("intensity".into()),
        Place::Dataset("uncertainty".into()),
    )
}

/// Writes the layout that [`read`] reads.
pub fn write(spectrum: &Spectrum, path: &Path) -> hdf5::Result<()> {
    let file = hdf5::File::create(path)?;
    let vector = |name: &str, data: &[f64]| {
        file.new_dataset_builder()
            .obj_track_times(false)
            .with_data(data)
            .create(name)
    };
    archive::write_wavelengths(&file, &spectrum.wavelength, spectrum.medium)?;
    let dataset = vector("intensity", &spectrum.intensity)?;
    if let Some(unit) = &spectrum.intensity_unit {
        archive::write_text(&dataset, "units", unit)?;
    }
    if let Some(sigma) = &spectrum.uncertainty {
        vector("uncertainty", sigma)?;
    }
    if spectrum.mask.iter().any(|m| *m) {
        let mask: Vec<u8> = spectrum.mask.iter().map(|m| u8::from(*m)).collect();
        file.new_dataset_builder()
            .obj_track_times(false)
            .with_data(&mask)
            .create("mask")?;
    }
    file.flush()?;
    file.close()
}
