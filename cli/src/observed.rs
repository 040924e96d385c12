//! Data files as the fit wants them: what file and setup say together, arrays in rising wavelength.

use std::path::Path;

use backlit_cubes::Spectrum;
use backlit_inverse::setup::{Light, Setup};
use backlit_units::{IntensityUnit, Medium, SpectralAxis, air};

use crate::console::Console;
use crate::failure::Failure;

/// What a data file says of itself.
pub struct Description<'a> {
    /// Channel centres in metres, in the file's medium and order.
    pub wavelength_m: &'a [f64],
    /// The medium, if the file says it.
    pub medium: Option<Medium>,
    /// The unit of the intensity, if the file says it.
    pub intensity_unit: Option<&'a str>,
    /// The file.
    pub path: &'a Path,
}

/// The axis and the unit of the data: the setup's word first, then the file's.
pub struct Frame {
    /// The spectral axis.
    pub axis: SpectralAxis,
    /// The medium of the data's wavelengths.
    pub medium: Medium,
    /// The unit of the data.
    pub unit: IntensityUnit,
}

impl Frame {
    /// Brings setup and file together, with a note where a choice was made for the user.
    pub fn new(console: &Console, setup: &Setup, data: &Description<'_>) -> Result<Frame, Failure> {
        let medium = medium(console, setup, data);
        let unit = unit(console, setup, data)?;
        setup.check_calibration(&unit)?;
        if !unit.is_relative && !unit.per_steradian && setup.spectrum.scale_line.is_none() {
            console.note(&format!(
                "{} is in {unit}, without sr-1, and {} gives no `scale`: the model is taken for a solid angle of 1 sr; \
                 give scale = the solid angle in sr, or let it be found",
                data.path.display(),
                setup.path.display()
            ));
        }
        let axis = SpectralAxis::from_centres_m(data.wavelength_m, medium).map_err(|source| {
            Failure::Units {
                path: data.path.to_path_buf(),
                source,
            }
        })?;
        Ok(Frame { axis, medium, unit })
    }

    /// Values of the file's channels in rising wavelength.
    pub fn rising<T: Copy>(&self, values: &[T]) -> Vec<T> {
        let mut values = values.to_vec();
        if self.axis.is_reversed() {
            values.reverse();
        }
        values
    }

    /// The light without the gas on this axis, in the data's own unit, where the setup names a file for it.
    ///
    /// A grid of its own is interpolated linearly; it must reach over the data.
    pub fn measured_background(
        &self,
        console: &Console,
        setup: &Setup,
    ) -> Result<Option<Vec<f64>>, Failure> {
        let Light::Measured { file } = &setup.background.light else {
            return Ok(None);
        };
        let reference = Spectrum::read(file)?;
        for note in &reference.notes {
            console.note(&format!("{}: {note}", file.display()));
        }
        let medium = reference.medium.unwrap_or(self.medium);
        let axis =
            SpectralAxis::from_centres_m(&reference.wavelength, medium).map_err(|source| {
                Failure::Units {
                    path: file.clone(),
                    source,
                }
            })?;
        let mut intensity = reference.intensity.clone();
        if axis.is_reversed() {
            intensity.reverse();
        }
        if let Some(first) = reference.mask.iter().position(|masked| *masked) {
            return Err(Failure::BackgroundMasked {
                path: file.clone(),
                masked: reference.mask.iter().filter(|masked| **masked).count(),
                first_nm: reference.wavelength[first] * 1e9,
            });
        }
        self.interpolated(setup, &axis, &intensity, file).map(Some)
    }

    /// Linear between the channels of another axis; NaN beyond its ends, which only unused channels may be.
    fn interpolated(
        &self,
        setup: &Setup,
        from: &SpectralAxis,
        values: &[f64],
        path: &Path,
    ) -> Result<Vec<f64>, Failure> {
        let have = from.centres_vac_m();
        let [have_low, .., have_high] = *have else {
            return Ok(vec![f64::NAN; self.axis.len()]);
        };
        // A hundredth of a channel: the rounding of a printed wavelength, not a different grid.
        let slack = 0.01 * (have_high - have_low) / (have.len() - 1) as f64;
        let reaches =
            |wavelength: f64| (have_low - slack..=have_high + slack).contains(&wavelength);
        let used = self.used(setup);
        if !used.iter().all(|wavelength| reaches(*wavelength)) {
            return Err(Failure::BackgroundTooShort {
                path: path.to_path_buf(),
                have_low_nm: have_low * 1e9,
                have_high_nm: have_high * 1e9,
                need_low_nm: used.first().copied().unwrap_or(f64::NAN) * 1e9,
                need_high_nm: used.last().copied().unwrap_or(f64::NAN) * 1e9,
            });
        }
        let at = |wavelength: f64| {
            if !reaches(wavelength) {
                return f64::NAN;
            }
            let right = have
                .partition_point(|h| *h < wavelength)
                .clamp(1, have.len() - 1);
            let part = (wavelength - have[right - 1]) / (have[right] - have[right - 1]);
            values[right - 1] + part.clamp(0.0, 1.0) * (values[right] - values[right - 1])
        };
        Ok(self.axis.centres_vac_m().iter().map(|w| at(*w)).collect())
    }

    /// The channel centres, vacuum, within the setup's ranges.
    fn used(&self, setup: &Setup) -> Vec<f64> {
        let inside = |wavelength_vac_m: f64| {
            let in_file_nm = 1e9
                * match self.medium {
                    Medium::Air => air::vacuum_to_air_m(wavelength_vac_m),
                    Medium::Vacuum => wavelength_vac_m,
                };
            setup.spectrum.use_nm.as_ref().is_none_or(|ranges| {
                ranges
                    .iter()
                    .any(|&(low, high)| (low..=high).contains(&in_file_nm))
            })
        };
        let centres = self.axis.centres_vac_m();
        centres.iter().copied().filter(|w| inside(*w)).collect()
    }
}

fn medium(console: &Console, setup: &Setup, data: &Description<'_>) -> Medium {
    match (setup.spectrum.medium, data.medium) {
        (Some(says), Some(file)) if says != file => {
            console.note(&format!(
                "{} says {file} wavelengths, {} says {says}: the setup is followed",
                data.path.display(),
                setup.path.display()
            ));
            says
        }
        (Some(says), _) => says,
        (None, Some(file)) => file,
        (None, None) => {
            console.note(&format!(
                "{} does not say its medium: vacuum wavelengths are assumed; say medium = \"air\" or \"vacuum\" in [spectrum]",
                data.path.display()
            ));
            Medium::Vacuum
        }
    }
}

fn unit(
    console: &Console,
    setup: &Setup,
    data: &Description<'_>,
) -> Result<IntensityUnit, Failure> {
    let (text, path) = match (&setup.spectrum.intensity_unit, data.intensity_unit) {
        (Some(says), file) => {
            if file.is_some_and(|file| file != says) {
                console.note(&format!(
                    "{} is in {}, {} says {says}: the setup is followed",
                    data.path.display(),
                    file.unwrap_or_default(),
                    setup.path.display()
                ));
            }
            (says.as_str(), setup.path.as_path())
        }
        (None, Some(file)) => (file, data.path),
        (None, None) if setup.spectrum.scale.is_free() => ("relative", setup.path.as_path()),
        (None, None) => {
            return Err(Failure::NoUnit {
                data: data.path.to_path_buf(),
                setup: setup.path.clone(),
            });
        }
    };
    text.parse().map_err(|source| Failure::Units {
        path: path.to_path_buf(),
        source,
    })
}
