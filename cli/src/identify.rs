//! `backlit identify`: which species a spectrum shows.

use std::fmt::Write as _;
use std::path::PathBuf;
use std::str::FromStr;
use std::sync::Arc;

use backlit_cubes::Spectrum;
use backlit_inverse::identify::{
    Choices, Finding, Identification, LineFound, LineState, Observed, Verdict, Width, identify,
};
use backlit_inverse::setup::{Instrument, Setup};
use backlit_species::{Catalogue, Species};
use backlit_units::{Medium, SpectralAxis, air};
use clap::Args;
use serde::Serialize;

use crate::console::Console;
use crate::failure::Failure;
use crate::identify_plot;
use crate::output;

/// Which species are there, judged by whole line patterns
///
/// Every species of the catalogue is compared with all lines of the spectrum at
/// once, bright and dark, at any temperature and at one common velocity. Beside
/// each verdict stands how often the same pattern with its lines in wrong places
/// does as well in this very spectrum: its false-alarm rate. One usable line is
/// never more than `possible`, unless --expect says that the species is there.
///
/// Example: backlit identify lamp.csv --plot lamp.svg
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Identify {
    /// The spectrum, CSV or HDF5
    #[arg(value_name = "SPECTRUM")]
    spectrum: PathBuf,

    /// Medium, ranges, instrument and own species, TOML
    #[arg(long, value_name = "SETUP")]
    setup: Option<PathBuf>,

    /// Only these species, e.g. "Na I,K I"
    #[arg(long, value_name = "NAMES", value_delimiter = ',')]
    among: Vec<String>,

    /// Species known to be there: one line is enough
    #[arg(long, value_name = "NAMES", value_delimiter = ',')]
    expect: Vec<String>,

    /// Velocities to search, km/s [default: -500..500]
    ///
    /// Positive recedes. Example: 430..520
    #[arg(long, value_name = "LOW..HIGH", allow_hyphen_values = true)]
    velocity: Option<VelocityRange>,

    /// Error of the wavelength scale [default: 0.03]
    ///
    /// In nm. Lines may lie this far off, each on its own.
    #[arg(long, value_name = "NM", value_parser = scale_error)]
    scale_error: Option<f64>,

    /// Draw spectrum and claimed lines, .svg
    #[arg(long, value_name = "OUT.svg", value_parser = svg)]
    plot: Option<PathBuf>,

    /// Replace the picture if it exists
    #[arg(long)]
    overwrite: bool,
}

/// Velocities on the command line: `-100..100`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct VelocityRange {
    low_km_s: f64,
    high_km_s: f64,
}

/// The fastest gas that makes sense here, km/s.
const FASTEST_KM_S: f64 = 100_000.0;

impl FromStr for VelocityRange {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let parse = |part: &str| {
            part.trim()
                .parse::<f64>()
                .ok()
                .filter(|v| v.abs() <= FASTEST_KM_S)
        };
        match text.split_once("..").map(|(low, high)| (parse(low), parse(high))) {
            Some((Some(low_km_s), Some(high_km_s))) if low_km_s < high_km_s => Ok(VelocityRange {
                low_km_s,
                high_km_s,
            }),
            _ => Err("expected two rising velocities in km/s, within ±100000, with two dots between, for example -100..100".to_owned()),
        }
    }
}

fn svg(text: &str) -> Result<PathBuf, String> {
    let path = PathBuf::from(text);
    if path
        .extension()
        .is_some_and(|ending| ending.eq_ignore_ascii_case("svg"))
    {
        Ok(path)
    } else {
        Err("expected a name that ends in .svg, the one format of this picture".to_owned())
    }
}

fn scale_error(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value > 0.0 && value.is_finite() => Ok(value),
        _ => Err("expected a wavelength above 0 in nm".to_owned()),
    }
}

#[derive(Serialize)]
struct Document {
    schema: &'static str,
    spectrum: String,
    velocity_km_s: Option<f64>,
    fwhm_nm: f64,
    fwhm_is_estimated: bool,
    noise_is_estimated: bool,
    false_discovery_rate: f64,
    species: Vec<Record>,
}

#[derive(Serialize)]
struct Record {
    name: String,
    verdict: String,
    evidence_nats: f64,
    false_alarm_rate: f64,
    seen_in: Option<&'static str>,
    velocity_km_s: Option<f64>,
    excitation_temperature_k: Option<[f64; 2]>,
    lines_expected: usize,
    lines_seen: usize,
    lines_missing: usize,
    lines_blended: usize,
    lines_outside: usize,
    upper_limit_peak: Option<f64>,
    upper_limit_line_vac_nm: Option<f64>,
    lines: Vec<LineRecord>,
}

#[derive(Serialize)]
struct LineRecord {
    rest_vac_nm: f64,
    observed_vac_nm: f64,
    state: String,
    expected_snr: f64,
    snr: f64,
    evidence_nats: f64,
    share: f64,
}

impl Identify {
    /// Judges and prints.
    pub fn run(&self, console: &Console) -> Result<(), Failure> {
        if let Some(path) = &self.plot {
            output::refuse_existing(path, self.overwrite)?;
        }
        let setup = self.setup.as_deref().map(Setup::read).transpose()?;
        let spectrum = Spectrum::read(&self.spectrum)?;
        for note in &spectrum.notes {
            console.note(&format!("{}: {note}", self.spectrum.display()));
        }
        let medium = setup
            .as_ref()
            .and_then(|setup| setup.spectrum.medium)
            .or(spectrum.medium)
            .unwrap_or_else(|| {
                console.note(&format!(
                    "{} does not say its medium: vacuum wavelengths are assumed; add `# medium: air` or `# medium: vacuum`",
                    self.spectrum.display()
                ));
                Medium::Vacuum
            });
        let axis =
            SpectralAxis::from_centres_m(&spectrum.wavelength, medium).map_err(|source| {
                Failure::Units {
                    path: self.spectrum.clone(),
                    source,
                }
            })?;
        let rising = |values: &[f64]| -> Vec<f64> {
            let mut values = values.to_vec();
            if axis.is_reversed() {
                values.reverse();
            }
            values
        };
        let intensity = rising(&spectrum.intensity);
        let uncertainty = spectrum.uncertainty.as_deref().map(rising);
        let mut mask = spectrum.mask.clone();
        if axis.is_reversed() {
            mask.reverse();
        }
        if let Some(setup) = &setup {
            leave_out(setup, &axis, medium, &mut mask);
        }
        let candidates = self.candidates(setup.as_ref())?;
        let choices = self.choices(setup.as_ref(), &candidates)?;
        let answer = identify(
            &Observed {
                centres_vac_m: axis.centres_vac_m(),
                intensity: &intensity,
                uncertainty: uncertainty.as_deref(),
                mask: &mask,
            },
            &candidates,
            &choices,
        )
        .ok_or_else(|| Failure::TooShort {
            path: self.spectrum.clone(),
            usable: mask.iter().filter(|masked| !**masked).count(),
        })?;
        if answer.noise_is_estimated {
            console.note(&format!(
                "{} has no uncertainties: the noise was estimated from the data",
                self.spectrum.display()
            ));
        }
        if let Some(path) = &self.plot {
            let picture = identify_plot::draw(axis.centres_vac_m(), &intensity, &mask, &answer);
            output::write_text(path, &picture, self.overwrite)?;
        }
        if console.json() {
            console.print_json(&self.document(&answer))
        } else {
            console.print(&table(&answer))
        }
    }

    fn candidates(&self, setup: Option<&Setup>) -> Result<Vec<Arc<Species>>, Failure> {
        let catalogue = Catalogue::builtin();
        let own = match setup {
            Some(setup) => setup.own_species()?,
            None => Vec::new(),
        };
        let named = |name: &String| -> Result<Arc<Species>, Failure> {
            let found = own.iter().find(|species| species.name == name.trim());
            Ok(match found {
                Some(species) => species.clone(),
                None => catalogue.get(name.trim())?,
            })
        };
        if !self.among.is_empty() {
            return self.among.iter().map(named).collect();
        }
        let mut all = own.clone();
        all.extend(
            catalogue
                .iter()
                .filter(|species| own.iter().all(|o| o.name != species.name)),
        );
        Ok(all)
    }

    fn choices(
        &self,
        setup: Option<&Setup>,
        candidates: &[Arc<Species>],
    ) -> Result<Choices, Failure> {
        let mut choices = Choices::default();
        if let Some(range) = self.velocity {
            choices.velocity_m_per_s = (range.low_km_s * 1e3, range.high_km_s * 1e3);
        }
        if let Some(error_nm) = self.scale_error {
            choices.scale_error_m = error_nm * 1e-9;
        }
        if let Some(setup) = setup {
            choices.width = match setup.instrument {
                Instrument::None => Width::Unknown,
                Instrument::FwhmNm(fwhm_nm) => Width::Fwhm {
                    fwhm_m: fwhm_nm * 1e-9,
                },
                Instrument::ResolvingPower(resolving_power) => {
                    Width::ResolvingPower { resolving_power }
                }
            };
        }
        for name in &self.expect {
            let name = name.trim();
            let known = candidates.iter().find(|species| species.name == name);
            choices.expected.push(match known {
                Some(species) => species.name.clone(),
                None => Catalogue::builtin().get(name)?.name.clone(),
            });
        }
        Ok(choices)
    }

    fn document(&self, answer: &Identification) -> Document {
        Document {
            schema: "backlit-identify/1",
            spectrum: self.spectrum.display().to_string(),
            velocity_km_s: answer.velocity_m_per_s.map(|v| v / 1e3),
            fwhm_nm: answer.fwhm_m * 1e9,
            fwhm_is_estimated: answer.fwhm_is_estimated,
            noise_is_estimated: answer.noise_is_estimated,
            false_discovery_rate: answer.false_discovery_rate,
            species: answer.species.iter().map(record).collect(),
        }
    }
}

/// Masks what the setup's ranges leave out.
fn leave_out(setup: &Setup, axis: &SpectralAxis, medium: Medium, mask: &mut [bool]) {
    let Some(ranges) = &setup.spectrum.use_nm else {
        return;
    };
    for (masked, centre_m) in mask.iter_mut().zip(axis.centres_vac_m()) {
        let in_file_nm = 1e9
            * match medium {
                Medium::Air => air::vacuum_to_air_m(*centre_m),
                Medium::Vacuum => *centre_m,
            };
        *masked |= !ranges
            .iter()
            .any(|&(low, high)| (low..=high).contains(&in_file_nm));
    }
}

fn seen_in(finding: &Finding) -> Option<&'static str> {
    finding
        .bright
        .map(|bright| if bright { "emission" } else { "absorption" })
}

fn record(finding: &Finding) -> Record {
    let absent = finding.verdict == Verdict::Absent;
    Record {
        name: finding.name.clone(),
        verdict: finding.verdict.to_string(),
        evidence_nats: finding.evidence,
        false_alarm_rate: finding.false_alarm_rate,
        seen_in: seen_in(finding),
        velocity_km_s: finding.velocity_m_per_s.map(|v| v / 1e3),
        excitation_temperature_k: finding.temperature_k.map(|(low, high)| [low, high]),
        lines_expected: finding.expected(),
        lines_seen: finding.count(LineState::Seen),
        lines_missing: finding.count(LineState::Missing),
        lines_blended: finding.count(LineState::Blended),
        lines_outside: finding.count(LineState::Outside),
        upper_limit_peak: finding.upper_limit_peak.filter(|_| absent),
        upper_limit_line_vac_nm: finding
            .upper_limit_line_vac_m
            .filter(|_| absent)
            .map(|m| m * 1e9),
        lines: finding.lines.iter().map(line_record).collect(),
    }
}

fn line_record(line: &LineFound) -> LineRecord {
    LineRecord {
        rest_vac_nm: line.rest_vac_m * 1e9,
        observed_vac_nm: line.observed_vac_m * 1e9,
        state: line.state.to_string(),
        expected_snr: line.expected_snr,
        snr: line.snr,
        evidence_nats: line.evidence,
        share: line.share,
    }
}

fn table(answer: &Identification) -> String {
    let mut text = format!(
        "{:<8} {:<10} {:>9} {:>11} {:<10} {:>9} {:>13} {:>5} {:>7} {:>7} {:>7}\n",
        "species",
        "verdict",
        "evidence",
        "false alarm",
        "seen in",
        "v, km/s",
        "T, K",
        "seen",
        "missing",
        "blended",
        "outside"
    );
    let shown = |f: &&Finding| matches!(f.verdict, Verdict::Present | Verdict::Possible);
    for finding in answer.species.iter().filter(shown) {
        let velocity = finding
            .velocity_m_per_s
            .map_or("-".to_owned(), |v| format!("{:.0}", v / 1e3));
        let temperature = finding.temperature_k.map_or("-".to_owned(), |(low, high)| {
            if low == high {
                format!("{low:.0}")
            } else {
                format!("{low:.0}..{high:.0}")
            }
        });
        let _ = writeln!(
            text,
            "{:<8} {:<10} {:>9.1} {:>11.1e} {:<10} {:>9} {:>13} {:>5} {:>7} {:>7} {:>7}",
            finding.name,
            finding.verdict.to_string(),
            finding.evidence,
            finding.false_alarm_rate,
            seen_in(finding).unwrap_or("-"),
            velocity,
            temperature,
            finding.count(LineState::Seen),
            finding.count(LineState::Missing),
            finding.count(LineState::Blended),
            finding.count(LineState::Outside),
        );
    }
    let number = |verdict| {
        answer
            .species
            .iter()
            .filter(|f| f.verdict == verdict)
            .count()
    };
    let _ = writeln!(
        text,
        "{} present, {} possible, {} absent, {} without a usable line in the data",
        number(Verdict::Present),
        number(Verdict::Possible),
        number(Verdict::Absent),
        number(Verdict::Untestable)
    );
    if answer.false_discovery_rate.is_finite() {
        let _ = writeln!(
            text,
            "of those present, a share of about {:.2} is expected to be there by chance",
            answer.false_discovery_rate
        );
    }
    text
}
