//! `backlit fit`: the values behind one spectrum.

use std::fmt::Write as _;
use std::path::PathBuf;

use backlit_cubes::Spectrum;
use backlit_inverse::clouds::{Choice, Ladder};
use backlit_inverse::setup::Setup;
use backlit_inverse::{Ask, Fit as Answer, Intervals, LEVEL, Observation, Problem, Quantity};
use backlit_species::Catalogue;
use clap::Args;
use serde::Serialize;
use serde_json::{Map, Value, json};

use crate::clouds::{self, Evidence};
use crate::console::{Console, json_text};
use crate::failure::Failure;
use crate::flags;
use crate::observed::{Description, Frame};
use crate::output;

/// Find temperatures, columns, velocity, background of a spectrum
///
/// Every value that the setup leaves open ({ find = [low, high] }) is found,
/// with its 1-sigma uncertainty and with flags that say in words where the
/// answer cannot be trusted. Where a flag says that the uncertainty is not
/// valid, an interval of 68.3 % is walked out instead.
///
/// Example: backlit fit tube.csv --setup sodium.toml -o tube.json
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Fit {
    /// The spectrum, CSV or HDF5
    #[arg(value_name = "SPECTRUM")]
    spectrum: PathBuf,

    /// What is known and what is to be found, TOML
    #[arg(long, value_name = "SETUP")]
    setup: PathBuf,

    /// Write the answer as JSON to this file too
    #[arg(long, short, value_name = "OUT.json")]
    output: Option<PathBuf>,

    /// Replace the output file if it exists
    #[arg(long)]
    overwrite: bool,

    /// Walk out the 68.3 % interval of every value
    ///
    /// The ends are where chi-square, with all other values refitted, is 1 above
    /// its least. Without this option only values whose uncertainty a flag calls
    /// invalid get an interval. An end that is open is `-`, null in JSON.
    #[arg(long)]
    intervals: bool,

    /// Find how many clouds there are, such as up-to-3
    ///
    /// Fits with 1 to N copies of the setup's one [[cloud]] are compared by the
    /// Bayesian information criterion; a further cloud must also be worth the
    /// search for it. The clouds are numbered by rising velocity where their
    /// order makes no difference.
    #[arg(long, value_name = "up-to-N", value_parser = clouds::most)]
    clouds: Option<usize>,
}

#[derive(Serialize)]
struct Document<'a> {
    schema: &'static str,
    spectrum: String,
    setup: String,
    values: Map<String, Value>,
    sigma: Map<String, Value>,
    upper: Map<String, Value>,
    units: Map<String, Value>,
    flags: Vec<&'a str>,
    chi2_reduced: f64,
    iterations: u32,
    stop: String,
    messages: &'a [String],
    intervals: Map<String, Value>,
    #[serde(skip_serializing_if = "Option::is_none")]
    clouds: Option<Value>,
}

impl Fit {
    /// Fits and prints.
    pub fn run(&self, console: &Console) -> Result<(), Failure> {
        if let Some(path) = &self.output {
            output::refuse_existing(path, self.overwrite)?;
        }
        let setup = Setup::read(&self.setup)?;
        let spectrum = Spectrum::read(&self.spectrum)?;
        for note in &spectrum.notes {
            console.note(&format!("{}: {note}", self.spectrum.display()));
        }
        let frame = Frame::new(
            console,
            &setup,
            &Description {
                wavelength_m: &spectrum.wavelength,
                medium: spectrum.medium,
                intensity_unit: spectrum.intensity_unit.as_deref(),
                path: &self.spectrum,
            },
        )?;
        let measured = frame.measured_background(console, &setup)?;
        let intensity = frame.rising(&spectrum.intensity);
        let uncertainty = spectrum.uncertainty.as_deref().map(|u| frame.rising(u));
        let mask = frame.rising(&spectrum.mask);
        let observation = Observation {
            intensity: &intensity,
            uncertainty: uncertainty.as_deref(),
            mask: &mask,
        };
        let intervals = if self.intervals {
            Intervals::All
        } else {
            Intervals::Doubtful
        };
        let catalogue = Catalogue::builtin();
        let measured = measured.as_deref();
        let (quantities, answer, evidence) = match self.clouds {
            None => {
                let problem = Problem::new(&setup, &frame.axis, &frame.unit, catalogue, measured)?;
                let ask = Ask {
                    intervals,
                    ..Ask::default()
                };
                let answer = problem.fit_with(&mut problem.workspace(), &observation, &ask);
                (problem.quantities().to_vec(), answer, None)
            }
            Some(most) => {
                let ladder =
                    Ladder::new(&setup, most, &frame.axis, &frame.unit, catalogue, measured)?;
                let Choice { clouds, fit, tried } =
                    ladder.fit(&mut ladder.workspaces(), &observation, intervals);
                let evidence = Evidence {
                    chosen: clouds,
                    tried,
                };
                let quantities = ladder.problem(clouds).quantities().to_vec();
                (quantities, fit, Some(evidence))
            }
        };

        let document = self.document(&quantities, &answer, evidence.as_ref());
        if let Some(path) = &self.output {
            output::write_text(path, &json_text(&document)?, self.overwrite)?;
        }
        for message in &answer.messages {
            console.note(message);
        }
        if console.json() {
            console.print_json(&document)
        } else {
            let evidence = evidence.map_or(String::new(), |evidence| evidence.table());
            console.print(&(table(&quantities, &answer) + &evidence))
        }
    }

    fn document<'a>(
        &self,
        quantities: &[Quantity],
        answer: &'a Answer,
        evidence: Option<&Evidence>,
    ) -> Document<'a> {
        // A number that is not finite has no form in JSON: `json!` writes null, which is "no answer".
        let by_name = |values: &[f64]| -> Map<String, Value> {
            quantities
                .iter()
                .zip(values)
                .map(|(quantity, value)| (quantity.name.clone(), json!(value)))
                .collect()
        };
        Document {
            schema: "backlit-fit/1",
            spectrum: self.spectrum.display().to_string(),
            setup: self.setup.display().to_string(),
            values: by_name(&answer.values),
            sigma: by_name(&answer.sigma),
            upper: quantities
                .iter()
                .zip(&answer.upper)
                .filter(|(quantity, _)| is_column(quantity))
                .map(|(quantity, value)| (quantity.name.clone(), json!(value)))
                .collect(),
            units: quantities
                .iter()
                .map(|quantity| (quantity.name.clone(), json!(quantity.units)))
                .collect(),
            flags: answer.flags.names(),
            chi2_reduced: answer.chi2_reduced,
            iterations: answer.iterations,
            stop: answer.stop.name().to_owned(),
            messages: &answer.messages,
            intervals: quantities
                .iter()
                .zip(&answer.intervals)
                .filter_map(|(quantity, interval)| {
                    let interval = (*interval)?;
                    let ends =
                        json!({ "low": interval.low, "high": interval.high, "level": LEVEL });
                    Some((quantity.name.clone(), ends))
                })
                .collect(),
            clouds: evidence.map(Evidence::json),
        }
    }
}

/// Whether a quantity is a logarithm of a column, which has an upper limit where it is not detected.
pub fn is_column(quantity: &Quantity) -> bool {
    quantity.name.contains("_log10_column_")
}

fn table(quantities: &[Quantity], answer: &Answer) -> String {
    let width = quantities
        .iter()
        .map(|quantity| quantity.name.len())
        .fold("quantity".len(), usize::max);
    let mut text = format!(
        "{:<width$}  {:>14}  {:>12}  unit\n",
        "quantity", "value", "1 sigma"
    );
    for (i, quantity) in quantities.iter().enumerate() {
        let at = |values: &[f64]| values.get(i).copied().unwrap_or(f64::NAN);
        let (value, sigma) = rounded(at(&answer.values), at(&answer.sigma));
        let _ = write!(
            text,
            "{:<width$}  {value:>14}  {sigma:>12}  {}",
            quantity.name, quantity.units
        );
        let upper = at(&answer.upper);
        if upper.is_finite() {
            let _ = write!(text, "   (below {upper:.3} at 3 sigma)");
        }
        text.push('\n');
    }
    if answer.intervals.iter().any(Option::is_some) {
        let _ = writeln!(
            text,
            "\n{:<width$}  {:>14}  {:>12}",
            format!("interval of {:.1} %", 100.0 * LEVEL),
            "from",
            "to"
        );
    }
    for (i, (quantity, interval)) in quantities.iter().zip(&answer.intervals).enumerate() {
        let Some(interval) = interval else { continue };
        // Two digits of the nearer end's distance, as with a standard deviation.
        let value = answer.values.get(i).copied().unwrap_or(f64::NAN);
        let reach = [interval.low, interval.high]
            .iter()
            .flatten()
            .map(|end| (end - value).abs())
            .fold(f64::INFINITY, f64::min);
        let [low, high] =
            [interval.low, interval.high].map(|end| rounded(end.unwrap_or(f64::NAN), reach).0);
        let _ = writeln!(text, "{:<width$}  {low:>14}  {high:>12}", quantity.name);
    }
    let _ = writeln!(
        text,
        "\nreduced chi-square {:.4}, {} iterations, stopped: {}",
        answer.chi2_reduced,
        answer.iterations,
        answer.stop.name()
    );
    let names = answer.flags.names();
    if names.is_empty() {
        text.push_str("no flags\n");
    }
    for name in names {
        let _ = writeln!(
            text,
            "flag {name}: {}",
            flags::explain(name).unwrap_or("see the documentation")
        );
    }
    text
}

/// Value and uncertainty with two digits of the uncertainty.
fn rounded(value: f64, sigma: f64) -> (String, String) {
    if !value.is_finite() {
        return ("-".to_owned(), "-".to_owned());
    }
    if !(sigma.is_finite() && sigma > 0.0) {
        return (format!("{value:.6}"), "-".to_owned());
    }
    let size = value.abs().max(sigma);
    if !(1e-4..1e9).contains(&size) {
        // As many digits as the uncertainty leaves.
        let digits = (1.0 + size.log10().floor() - sigma.log10().floor()).clamp(1.0, 12.0) as usize;
        return (format!("{value:.digits$e}"), format!("{sigma:.1e}"));
    }
    let decimals = (1.0 - sigma.log10().floor()).clamp(0.0, 9.0) as usize;
    (format!("{value:.decimals$}"), format!("{sigma:.decimals$}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_value_is_shown_to_two_digits_of_its_uncertainty() {
        let shown = |value, sigma| {
            let (value, sigma) = rounded(value, sigma);
            format!("{value} {sigma}")
        };
        assert_eq!(shown(1503.1514, 12.34), "1503 12");
        assert_eq!(shown(-20.00123, 0.0344), "-20.001 0.034");
        assert_eq!(shown(12.5, f64::NAN), "12.500000 -");
        assert_eq!(shown(1.2345e-20, 3.4e-22), "1.234e-20 3.4e-22");
        assert_eq!(shown(5.6789e12, 1.23e10), "5.679e12 1.2e10");
        assert_eq!(shown(f64::NAN, 1.0), "- -");
    }
}
