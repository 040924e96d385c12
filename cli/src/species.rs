//! `backlit species`: what the catalogue knows.

use std::fmt::Write as _;
use std::sync::Arc;

use backlit_species::{Catalogue, Species as Entry};
use backlit_units::air;
use backlit_units::constants::{
    ATOMIC_MASS_KG, ELEMENTARY_CHARGE_C, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S,
};
use clap::Args;
use serde::Serialize;

use crate::console::Console;
use crate::failure::Failure;
use crate::range::RangeNm;

const JOULE_PER_WAVENUMBER: f64 = PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S * 100.0;

/// List the built-in species, or the lines and levels of some
///
/// Without a name: one row a species. With names: all lines and levels of each.
/// Wavelengths are vacuum nm; the air wavelength (standard air) stands beside.
///
/// Example: backlit species "Na I" --range 500..600
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Species {
    /// Names such as "Na I"; without any, all species
    #[arg(value_name = "NAME")]
    names: Vec<String>,

    /// Only lines in this range, vacuum nm, e.g. 588..591
    #[arg(long, value_name = "NM..NM", allow_hyphen_values = true)]
    range: Option<RangeNm>,
}

#[derive(Serialize)]
struct Document {
    schema: &'static str,
    species: Vec<SpeciesRecord>,
}

#[derive(Serialize)]
struct SpeciesRecord {
    name: String,
    mass_u: f64,
    ionization_energy_ev: Option<f64>,
    line_count: usize,
    level_count: usize,
    shortest_vac_nm: Option<f64>,
    longest_vac_nm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    lines: Option<Vec<LineRecord>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    levels: Option<Vec<LevelRecord>>,
}

#[derive(Serialize)]
struct LineRecord {
    wavelength_vac_nm: f64,
    wavelength_air_nm: f64,
    a_ki_per_s: f64,
    e_lower_per_cm: f64,
    e_upper_per_cm: f64,
    g_lower: f64,
    g_upper: f64,
    gamma_per_s: f64,
    grade: String,
    source: String,
}

#[derive(Serialize)]
struct LevelRecord {
    g: f64,
    energy_per_cm: f64,
}

impl Species {
    /// Prints the list.
    pub fn run(&self, console: &Console) -> Result<(), Failure> {
        let catalogue = Catalogue::builtin();
        let named = !self.names.is_empty();
        let chosen: Vec<Arc<Entry>> = if named {
            self.names
                .iter()
                .map(|name| catalogue.get(name))
                .collect::<Result<_, _>>()?
        } else {
            catalogue
                .iter()
                .filter(|entry| {
                    self.range.is_none()
                        || entry.lines.iter().any(|l| self.inside(l.wavelength_vac_m))
                })
                .collect()
        };
        let records: Vec<SpeciesRecord> = chosen
            .iter()
            .map(|entry| self.record(entry, named))
            .collect();
        if console.json() {
            return console.print_json(&Document {
                schema: "backlit-species/1",
                species: records,
            });
        }
        if named {
            let texts: Vec<String> = records.iter().map(details).collect();
            console.print(&texts.join("\n"))
        } else {
            console.print(&overview(&records))
        }
    }

    fn inside(&self, wavelength_vac_m: f64) -> bool {
        self.range
            .is_none_or(|range| range.contains(wavelength_vac_m * 1e9))
    }

    fn record(&self, entry: &Entry, whole: bool) -> SpeciesRecord {
        let lines: Vec<LineRecord> = entry
            .lines
            .iter()
            .filter(|line| self.inside(line.wavelength_vac_m))
            .map(|line| LineRecord {
                wavelength_vac_nm: line.wavelength_vac_m * 1e9,
                wavelength_air_nm: air::vacuum_to_air_m(line.wavelength_vac_m) * 1e9,
                a_ki_per_s: line.a_ki_per_s,
                e_lower_per_cm: line.e_lower_j / JOULE_PER_WAVENUMBER,
                e_upper_per_cm: line.e_upper_j / JOULE_PER_WAVENUMBER,
                g_lower: line.g_lower,
                g_upper: line.g_upper,
                gamma_per_s: line.gamma_per_s,
                grade: line.grade.to_string(),
                source: line.source.to_string(),
            })
            .collect();
        SpeciesRecord {
            name: entry.name.clone(),
            mass_u: entry.mass_kg / ATOMIC_MASS_KG,
            ionization_energy_ev: entry.ionization_energy_j.map(|e| e / ELEMENTARY_CHARGE_C),
            line_count: lines.len(),
            level_count: entry.levels.len(),
            shortest_vac_nm: lines.first().map(|line| line.wavelength_vac_nm),
            longest_vac_nm: lines.last().map(|line| line.wavelength_vac_nm),
            levels: whole.then(|| {
                entry
                    .levels
                    .iter()
                    .map(|level| LevelRecord {
                        g: level.g,
                        energy_per_cm: level.energy_j / JOULE_PER_WAVENUMBER,
                    })
                    .collect()
            }),
            lines: whole.then_some(lines),
        }
    }
}

fn overview(records: &[SpeciesRecord]) -> String {
    let mut text = format!(
        "{:<12} {:>6} {:>7} {:>12} {:>12} {:>10} {:>14}\n",
        "species", "lines", "levels", "from, nm", "to, nm", "mass, u", "ionization, eV"
    );
    let optional = |value: Option<f64>, decimals: usize| match value {
        Some(value) => format!("{value:.decimals$}"),
        None => "-".to_owned(),
    };
    for record in records {
        let _ = writeln!(
            text,
            "{:<12} {:>6} {:>7} {:>12} {:>12} {:>10.4} {:>14}",
            record.name,
            record.line_count,
            record.level_count,
            optional(record.shortest_vac_nm, 3),
            optional(record.longest_vac_nm, 3),
            record.mass_u,
            optional(record.ionization_energy_ev, 4)
        );
    }
    let lines: usize = records.iter().map(|record| record.line_count).sum();
    let _ = writeln!(
        text,
        "{} species, {lines} lines; wavelengths in vacuum",
        records.len()
    );
    text
}

fn details(record: &SpeciesRecord) -> String {
    let ionization = match record.ionization_energy_ev {
        Some(energy) => format!(", ionization {energy:.4} eV"),
        None => String::new(),
    };
    let mut text = format!(
        "{}: mass {:.4} u{ionization}, {} lines, {} levels\n\n",
        record.name, record.mass_u, record.line_count, record.level_count
    );
    let _ = writeln!(
        text,
        "{:>13} {:>13} {:>10} {:>12} {:>12} {:>5} {:>5} {:>10}  {:<6} source",
        "vacuum, nm",
        "air, nm",
        "A, s-1",
        "lower, cm-1",
        "upper, cm-1",
        "g low",
        "g up",
        "gamma, s-1",
        "grade"
    );
    for line in record.lines.iter().flatten() {
        let _ = writeln!(
            text,
            "{:>13.5} {:>13.5} {:>10.3e} {:>12.3} {:>12.3} {:>5} {:>5} {:>10.3e}  {:<6} {}",
            line.wavelength_vac_nm,
            line.wavelength_air_nm,
            line.a_ki_per_s,
            line.e_lower_per_cm,
            line.e_upper_per_cm,
            line.g_lower,
            line.g_upper,
            line.gamma_per_s,
            line.grade,
            line.source
        );
    }
    let _ = writeln!(text, "\n{:>8} {:>14}", "g", "level, cm-1");
    for level in record.levels.iter().flatten() {
        let _ = writeln!(text, "{:>8} {:>14.3}", level.g, level.energy_per_cm);
    }
    text
}
