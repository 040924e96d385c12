//! `backlit predict`: the spectrum that a setup would show, or a whole cube of them.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::str::FromStr;

use backlit_cubes::{CubeLayout, CubeUncertainty, CubeWriter, Spectrum, Tile};
use backlit_inverse::Problem;
use backlit_inverse::setup::{Light, Setup};
use backlit_species::Catalogue;
use clap::Args;
use ndarray::Array2;
use rayon::prelude::*;
use serde::Serialize;

use crate::console::Console;
use crate::failure::Failure;
use crate::grid;
use crate::noise::Noise;
use crate::observed::{Description, Frame};
use crate::output;
use crate::progress::Progress;
use crate::range::RangeNm;
use crate::vary::PixelValues;

/// The unit of a prediction for which neither setup nor data name one.
const DEFAULT_UNIT: &str = "W m-2 sr-1 nm-1";

/// Compute the spectrum that a setup would show
///
/// Values that the setup leaves open take their `start`. Without -o the spectrum
/// goes to standard output as CSV; with -o the file's ending decides: .h5 or
/// .hdf5 is HDF5, all else CSV.
///
/// With --cube NY,NX and --vary VALUES.csv each pixel of a cube has its own
/// values. VALUES.csv has the columns y, x (from 0) and any of the open
/// quantities by their names in the maps, for example
///   y,x,cloud1_temperature,cloud1_log10_column_Na_I
///   0,0,1500,12.5
///
/// Example: backlit predict sodium.toml --range 588..591 --step 0.01 -o sodium.csv
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Predict {
    /// What light, gas and instrument are, TOML
    #[arg(value_name = "SETUP")]
    setup: PathBuf,

    /// Take wavelengths and unit from this spectrum
    #[arg(long, value_name = "SPECTRUM", conflicts_with_all = ["range", "step"])]
    like: Option<PathBuf>,

    /// From..to in nm [default: use_nm or the lines]
    ///
    /// In the setup's medium. By default the hull of `use_nm`, or else the strongest lines with 2 % on each side.
    /// Example: 588..591
    #[arg(long, value_name = "NM..NM", allow_hyphen_values = true)]
    range: Option<RangeNm>,

    /// Channel spacing [default: FWHM/4, at most 1/2000]
    ///
    /// In nm. By default a quarter of the instrument's FWHM, and not fewer than 2000 channels.
    #[arg(long, value_name = "NM", value_parser = positive)]
    step: Option<f64>,

    /// Add Gaussian noise of this ratio to the peak
    ///
    /// 1 sigma is the highest intensity of the background divided by this, in a cube that of its middling pixel
    /// (median); a column `uncertainty`, in a cube the dataset, says so. Example: 50
    #[arg(long, value_name = "S/N", value_parser = positive)]
    noise: Option<f64>,

    /// The same seed gives the same noise
    #[arg(long, value_name = "S", default_value_t = 1, requires = "noise")]
    seed: u64,

    /// Write a cube of NY rows and NX columns (HDF5)
    #[arg(long, value_name = "NY,NX", requires = "vary", requires = "output")]
    cube: Option<CubeShape>,

    /// Values of each pixel of the cube, CSV
    #[arg(long, value_name = "VALUES.csv", requires = "cube")]
    vary: Option<PathBuf>,

    /// Write to this file, CSV or HDF5 by its ending
    #[arg(long, short, value_name = "OUT")]
    output: Option<PathBuf>,

    /// Replace the output file if it exists
    #[arg(long)]
    overwrite: bool,
}

#[derive(Debug, Clone, Copy)]
struct CubeShape {
    ny: usize,
    nx: usize,
}

impl FromStr for CubeShape {
    type Err = &'static str;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        const NEED: &str =
            "expected two whole numbers from 1 to 100000 with a comma between, for example 64,64";
        let (ny, nx) = text.split_once(',').ok_or(NEED)?;
        let size = |part: &str| {
            part.trim()
                .parse::<usize>()
                .ok()
                .filter(|n| (1..=100_000).contains(n))
                .ok_or(NEED)
        };
        Ok(CubeShape {
            ny: size(ny)?,
            nx: size(nx)?,
        })
    }
}

fn positive(text: &str) -> Result<f64, &'static str> {
    text.parse::<f64>()
        .ok()
        .filter(|number| number.is_finite() && *number > 0.0)
        .ok_or("expected a number above 0")
}

#[derive(Serialize)]
struct Document<'a> {
    schema: &'static str,
    medium: String,
    intensity_unit: &'a str,
    wavelength_nm: Vec<f64>,
    intensity: &'a [f64],
    uncertainty: Option<&'a [f64]>,
}

#[derive(Serialize)]
struct Written {
    schema: &'static str,
    output: String,
    shape: Vec<usize>,
    noise_sigma: Option<f64>,
}

/// Where the prediction is to be made.
struct Place {
    wavelength_m: Vec<f64>,
    frame: Frame,
}

impl Predict {
    /// Predicts and writes.
    pub fn run(&self, console: &Console) -> Result<(), Failure> {
        if let Some(path) = &self.output {
            output::refuse_existing(path, self.overwrite)?;
        }
        let setup = Setup::read(&self.setup)?;
        let place = self.place(console, &setup)?;
        let measured = place.frame.measured_background(console, &setup)?;
        let mut setup = setup;
        if setup.background.shape_terms == 0 {
            // `use_nm` says what a fit looks at; a prediction fills every channel. Only the terms that bend the
            // background are defined over these ranges.
            setup.spectrum.use_nm = None;
        }
        let problem = |setup: &Setup| {
            let (axis, unit) = (&place.frame.axis, &place.frame.unit);
            Problem::new(setup, axis, unit, Catalogue::builtin(), measured.as_deref())
        };
        let gas = problem(&setup)?;
        // The light without the gas is what noise is measured by; where nothing shines, the gas itself.
        let mut bare = setup.clone();
        if bare.background.light != Light::Dark {
            bare.clouds.clear();
        }
        let bare = problem(&bare)?;
        match (self.cube, &self.vary, &self.output) {
            (Some(shape), Some(vary), Some(path)) => {
                let models = CubeModels { gas, bare };
                self.write_cube(console, &models, &place, shape, vary, path)
            }
            _ => {
                let noise = match self.noise {
                    Some(ratio) => Some(self.noise_of(ratio, largest(&bare.predict()?))),
                    None => None,
                };
                self.write_spectrum(console, &gas, place, noise)
            }
        }
    }

    fn noise_of(&self, ratio: f64, peak: f64) -> Noise {
        Noise {
            sigma: peak / ratio,
            seed: self.seed,
        }
    }

    fn place(&self, console: &Console, setup: &Setup) -> Result<Place, Failure> {
        if let Some(path) = &self.like {
            let like = Spectrum::read(path)?;
            let description = Description {
                wavelength_m: &like.wavelength,
                medium: like.medium,
                intensity_unit: like.intensity_unit.as_deref(),
                path,
            };
            let frame = Frame::new(console, setup, &description)?;
            return Ok(Place {
                wavelength_m: like.wavelength,
                frame,
            });
        }
        let medium = setup.spectrum.medium.unwrap_or_default();
        let species = setup.resolve(Catalogue::builtin())?;
        let wavelength_m = grid::centres_m(setup, &species, medium, self.range, self.step)?;
        let description = Description {
            wavelength_m: &wavelength_m,
            medium: Some(medium),
            intensity_unit: Some(
                setup
                    .spectrum
                    .intensity_unit
                    .as_deref()
                    .unwrap_or(DEFAULT_UNIT),
            ),
            path: &self.setup,
        };
        let frame = Frame::new(console, setup, &description)?;
        Ok(Place {
            wavelength_m,
            frame,
        })
    }

    fn write_spectrum(
        &self,
        console: &Console,
        problem: &Problem,
        place: Place,
        noise: Option<Noise>,
    ) -> Result<(), Failure> {
        let mut intensity = problem.predict()?;
        if let Some(noise) = noise {
            noise.add(&mut intensity, 0);
        }
        // Back into the order of the wavelengths, which `--like` may have falling.
        let intensity = place.frame.rising(&intensity);
        let unit = place.frame.unit.to_string();
        let channels = intensity.len();
        let spectrum = Spectrum {
            wavelength: place.wavelength_m,
            medium: Some(place.frame.medium),
            uncertainty: noise.map(|noise| vec![noise.sigma; channels]),
            mask: vec![false; channels],
            intensity_unit: Some(unit.clone()),
            intensity,
            ..Spectrum::default()
        };
        if let Some(path) = &self.output {
            spectrum.write(path, self.overwrite)?;
            return self.tell_written(console, path, vec![channels], noise);
        }
        if console.json() {
            return console.print_json(&Document {
                schema: "backlit-predict/1",
                medium: place.frame.medium.to_string(),
                intensity_unit: &unit,
                wavelength_nm: spectrum.wavelength.iter().map(|w| w * 1e9).collect(),
                intensity: &spectrum.intensity,
                uncertainty: spectrum.uncertainty.as_deref(),
            });
        }
        console.print(&spectrum.to_csv())
    }

    fn write_cube(
        &self,
        console: &Console,
        models: &CubeModels,
        place: &Place,
        shape: CubeShape,
        vary: &Path,
        path: &Path,
    ) -> Result<(), Failure> {
        let CubeShape { ny, nx } = shape;
        let n = place.wavelength_m.len();
        let problem = &models.gas;
        let values = PixelValues::read(vary, (ny, nx), problem.quantities(), &problem.starts())?;
        let noise = self
            .noise
            .map(|ratio| self.noise_of(ratio, models.middling_peak(&values)));
        let layout = CubeLayout {
            ny,
            nx,
            wavelength: place.wavelength_m.clone(),
            medium: Some(place.frame.medium),
            intensity_unit: Some(place.frame.unit.to_string()),
            uncertainty: noise.map_or(CubeUncertainty::None, |noise| {
                CubeUncertainty::Scalar(noise.sigma)
            }),
            ..CubeLayout::default()
        };
        let mut writer = CubeWriter::create(path, &layout, self.overwrite)?;
        let progress = Progress::new(console, (ny * nx) as u64, 0);
        // A row at a time, in blocks of at most a million numbers: memory does not grow with the cube.
        let width = (1_000_000 / n.max(1)).clamp(1, nx);
        for y in 0..ny {
            for x0 in (0..nx).step_by(width) {
                let x1 = (x0 + width).min(nx);
                let rows: Vec<Vec<f64>> = (x0..x1)
                    .into_par_iter()
                    .map_init(
                        || problem.workspace(),
                        |workspace, x| match values.of(y, x) {
                            None => vec![f64::NAN; n],
                            Some(values) => {
                                let mut spectrum = problem.predict_at(workspace, values);
                                if let Some(noise) = noise {
                                    noise.add(&mut spectrum, (y * nx + x) as u64);
                                }
                                place.frame.rising(&spectrum)
                            }
                        },
                    )
                    .collect();
                let block = Array2::from_shape_fn((x1 - x0, n), |(p, i)| rows[p][i]);
                let tile = Tile {
                    index: 0,
                    y0: y,
                    y1: y + 1,
                    x0,
                    x1,
                };
                writer.write_tile(&tile, &block, None)?;
                progress.advance((x1 - x0) as u64);
            }
        }
        progress.finish();
        writer.finish()?;
        if values.filled() < ny * nx {
            console.note(&format!(
                "{} of {} pixels are not in {}: they hold no data (NaN)",
                ny * nx - values.filled(),
                ny * nx,
                vary.display()
            ));
        }
        self.tell_written(console, path, vec![ny, nx, n], noise)
    }

    fn tell_written(
        &self,
        console: &Console,
        path: &Path,
        shape: Vec<usize>,
        noise: Option<Noise>,
    ) -> Result<(), Failure> {
        if console.json() {
            return console.print_json(&Written {
                schema: "backlit-predict-file/1",
                output: path.display().to_string(),
                shape,
                noise_sigma: noise.map(|noise| noise.sigma),
            });
        }
        let mut size = String::new();
        for (i, extent) in shape.iter().enumerate() {
            let _ = write!(size, "{}{extent}", if i == 0 { "" } else { " x " });
        }
        console.tell(&format!("wrote {} ({size})", path.display()));
        Ok(())
    }
}

/// The models of a cube's pixels.
struct CubeModels {
    gas: Problem,
    /// The light without the gas, or the gas itself in front of nothing.
    bare: Problem,
}

impl CubeModels {
    /// The median over the pixels of the highest intensity of the light without the gas.
    fn middling_peak(&self, values: &PixelValues) -> f64 {
        let position = |name: &str| self.gas.quantities().iter().position(|q| q.name == name);
        // The open values of the bare model are some of those of the whole one.
        let chosen: Vec<usize> = self
            .bare
            .quantities()
            .iter()
            .filter_map(|quantity| position(&quantity.name))
            .collect();
        let mut peaks: Vec<f64> = values
            .all()
            .par_iter()
            .map_init(
                || self.bare.workspace(),
                |workspace, values| {
                    let own: Vec<f64> = chosen.iter().map(|i| values[*i]).collect();
                    largest(&self.bare.predict_at(workspace, &own))
                },
            )
            .collect();
        peaks.sort_by(f64::total_cmp);
        peaks.get(peaks.len() / 2).copied().unwrap_or(0.0)
    }
}

fn largest(values: &[f64]) -> f64 {
    values.iter().copied().fold(0.0, f64::max)
}
