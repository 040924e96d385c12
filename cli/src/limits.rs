//! `backlit limits`: how little gas this noise would show.

use std::fmt::Write as _;
use std::path::PathBuf;

use backlit_cubes::Spectrum;
use backlit_inverse::limits::{Limit, Noise, best, smallest_columns};
use backlit_inverse::noise;
use backlit_inverse::setup::Setup;
use backlit_species::Catalogue;
use clap::Args;
use serde::Serialize;

use crate::console::Console;
use crate::failure::Failure;
use crate::observed::{Description, Frame};

/// The smallest column of each species that the noise would show
///
/// For every species of the setup: the column that would stand 3 sigma above the
/// noise of a spectrum, all else known, at which temperature it shows best and in
/// which line. With --column the question is turned round: the signal-to-noise
/// that a wanted column needs. Values that the setup leaves open take their start
/// or the middle of their range; an open temperature is tried over its range.
///
/// Example: backlit limits --like tube.csv --setup sodium.toml --column 1e10
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Limits {
    /// Wavelengths, unit and noise are those of this file
    #[arg(long, value_name = "SPECTRUM")]
    like: PathBuf,

    /// Light, gas and instrument, TOML
    #[arg(long, value_name = "SETUP")]
    setup: PathBuf,

    /// These species instead, in the first cloud
    #[arg(long, value_name = "NAMES", value_delimiter = ',')]
    among: Vec<String>,

    /// Wanted column, cm-2: what S/N does it need?
    #[arg(long, value_name = "CM2", value_parser = positive)]
    column: Option<f64>,

    /// Significance that counts as shown, in sigma
    #[arg(long, value_name = "K", default_value_t = 3.0, value_parser = positive)]
    sigma: f64,
}

fn positive(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value > 0.0 && value.is_finite() => Ok(value),
        _ => Err("expected a number above 0".to_owned()),
    }
}

#[derive(Serialize)]
struct Document {
    schema: &'static str,
    spectrum: String,
    setup: String,
    significance_sigma: f64,
    signal_to_noise: f64,
    noise_is_estimated: bool,
    species: Vec<Record>,
}

#[derive(Serialize)]
struct Record {
    name: String,
    cloud: usize,
    column_per_cm2: Option<f64>,
    temperature_k: Option<f64>,
    line_vac_nm: Option<f64>,
    wanted_column_per_cm2: Option<f64>,
    significance_of_wanted_sigma: Option<f64>,
    signal_to_noise_needed: Option<f64>,
    temperatures: Vec<TemperatureRecord>,
}

#[derive(Serialize)]
struct TemperatureRecord {
    temperature_k: f64,
    column_per_cm2: Option<f64>,
    line_vac_nm: Option<f64>,
}

impl Limits {
    /// Computes and prints.
    pub fn run(&self, console: &Console) -> Result<(), Failure> {
        let setup = Setup::read(&self.setup)?;
        let spectrum = Spectrum::read(&self.like)?;
        for note in &spectrum.notes {
            console.note(&format!("{}: {note}", self.like.display()));
        }
        let frame = Frame::new(
            console,
            &setup,
            &Description {
                wavelength_m: &spectrum.wavelength,
                medium: spectrum.medium,
                intensity_unit: spectrum.intensity_unit.as_deref(),
                path: &self.like,
            },
        )?;
        let measured = frame.measured_background(console, &setup)?;
        let mask = frame.rising(&spectrum.mask);
        let mut intensity = frame.rising(&spectrum.intensity);
        for (value, masked) in intensity.iter_mut().zip(&mask) {
            if *masked {
                *value = f64::NAN;
            }
        }
        let mut sigma = match &spectrum.uncertainty {
            Some(sigma) => frame.rising(sigma),
            None => {
                let usable = intensity.iter().filter(|v| v.is_finite()).count();
                let estimate = noise::estimate(&intensity).filter(|sigma| *sigma > 0.0);
                let sigma = estimate.ok_or_else(|| Failure::NoNoise {
                    path: self.like.clone(),
                    usable,
                })?;
                console.note(&format!(
                    "{} has no uncertainties: the noise was estimated from the data, {sigma:.3e} {}",
                    self.like.display(),
                    frame.unit
                ));
                vec![sigma; intensity.len()]
            }
        };
        for (sigma, masked) in sigma.iter_mut().zip(&mask) {
            if *masked {
                *sigma = f64::NAN;
            }
        }
        let mut ratios: Vec<f64> = intensity
            .iter()
            .zip(&sigma)
            .map(|(value, sigma)| value.abs() / sigma)
            .filter(|ratio| ratio.is_finite())
            .collect();
        ratios.sort_by(f64::total_cmp);
        let signal_to_noise = ratios.get(ratios.len() / 2).copied().unwrap_or(f64::NAN);
        let shared = Noise {
            axis: &frame.axis,
            unit: &frame.unit,
            sigma: &sigma,
            measured: measured.as_deref(),
        };
        let asked: Vec<(usize, String)> = if self.among.is_empty() {
            let columns = setup.clouds.iter().enumerate();
            columns
                .flat_map(|(cloud, c)| c.columns.iter().map(move |(name, _)| (cloud, name.clone())))
                .collect()
        } else {
            self.among
                .iter()
                .map(|name| (0, name.trim().to_owned()))
                .collect()
        };
        let mut species = Vec::new();
        for (cloud, name) in asked {
            let limits = smallest_columns(
                &setup,
                &shared,
                Catalogue::builtin(),
                &name,
                cloud,
                self.sigma,
                self.column,
            )?;
            species.push(self.record(name, cloud, signal_to_noise, &limits));
        }
        let document = Document {
            schema: "backlit-limits/1",
            spectrum: self.like.display().to_string(),
            setup: self.setup.display().to_string(),
            significance_sigma: self.sigma,
            signal_to_noise,
            noise_is_estimated: spectrum.uncertainty.is_none(),
            species,
        };
        if console.json() {
            console.print_json(&document)
        } else {
            console.print(&table(&document))
        }
    }

    fn record(&self, name: String, cloud: usize, signal_to_noise: f64, limits: &[Limit]) -> Record {
        let least = best(limits);
        let significance = limits
            .iter()
            .filter_map(|limit| limit.significance_of_wanted)
            .max_by(f64::total_cmp);
        Record {
            name,
            cloud: cloud + 1,
            column_per_cm2: least.and_then(|limit| limit.column_per_cm2),
            temperature_k: least.map(|limit| limit.temperature_k),
            line_vac_nm: least.and_then(|limit| limit.line_vac_m).map(|m| m * 1e9),
            wanted_column_per_cm2: self.column,
            significance_of_wanted_sigma: significance,
            signal_to_noise_needed: significance
                .filter(|s| *s > 0.0)
                .map(|s| signal_to_noise * self.sigma / s),
            temperatures: limits
                .iter()
                .map(|limit| TemperatureRecord {
                    temperature_k: limit.temperature_k,
                    column_per_cm2: limit.column_per_cm2,
                    line_vac_nm: limit.line_vac_m.map(|m| m * 1e9),
                })
                .collect(),
        }
    }
}

fn table(document: &Document) -> String {
    let mut text = format!(
        "{:<8} {:>5} {:>14} {:>9} {:>16}",
        "species", "cloud", "column, cm-2", "at T, K", "line, vacuum nm"
    );
    let wanted = document
        .species
        .iter()
        .find_map(|record| record.wanted_column_per_cm2);
    if let Some(column) = wanted {
        let _ = write!(text, " {:>24}", format!("S/N needed for {column:.1e}"));
    }
    text.push('\n');
    for record in &document.species {
        let number =
            |value: Option<f64>, form: &dyn Fn(f64) -> String| value.map_or("-".to_owned(), form);
        let _ = write!(
            text,
            "{:<8} {:>5} {:>14} {:>9} {:>16}",
            record.name,
            record.cloud,
            number(record.column_per_cm2, &|v| format!("{v:.3e}")),
            number(record.temperature_k, &|v| format!("{v:.0}")),
            number(record.line_vac_nm, &|v| format!("{v:.4}")),
        );
        if wanted.is_some() {
            let _ = write!(
                text,
                " {:>24}",
                number(record.signal_to_noise_needed, &|v| format!("{v:.3e}"))
            );
        }
        text.push('\n');
    }
    let _ = writeln!(
        text,
        "columns that show at {} sigma in a noise of S/N {:.1} (median), all else known; -: at no column up to 1e20 cm-2",
        document.significance_sigma, document.signal_to_noise
    );
    text
}
