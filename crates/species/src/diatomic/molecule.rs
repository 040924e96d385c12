//! A molecule's table: state, isotopologues, constants and bands, in the catalogue's plain text format.

use std::collections::BTreeSet;
use std::sync::Arc;

use backlit_units::constants::{ELEMENTARY_CHARGE_C, JOULE_PER_WAVENUMBER_CM};

use super::term::{self, Constants};
use crate::table::Row;
use crate::{Grade, SpeciesError};

/// Electronic ground state.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum State {
    Sigma1,
    Sigma2,
    Pi2,
}

impl State {
    /// Every 2J from the lowest up to `2 j_max + 1`.
    pub(super) fn twice_j(self, j_max: u32) -> impl Iterator<Item = u32> {
        let first = if self == State::Sigma1 { 0 } else { 1 };
        (first..=2 * j_max + 1).step_by(2)
    }
}

#[derive(Debug, Clone)]
pub(super) struct Isotopologue {
    pub(super) name: String,
    masses_u: [f64; 2],
    /// Relative correction of B beyond the reduced mass.
    correction_of_b: f64,
}

impl Isotopologue {
    fn reduced_mass_u(&self) -> f64 {
        self.masses_u[0] * self.masses_u[1] / (self.masses_u[0] + self.masses_u[1])
    }
}

/// A band between two vibrational levels, equal ones for pure rotation.
#[derive(Debug, Clone)]
pub(super) struct Band {
    pub(super) v_upper: u32,
    pub(super) v_lower: u32,
    pub(super) moment_debye: f64,
    /// Linear and quadratic coefficient of the Herman-Wallis factor's root.
    pub(super) herman_wallis: [f64; 2],
    pub(super) grade: Grade,
    pub(super) source: Arc<str>,
}

/// What the constants stand for, with the power of the reduced mass's root that scales them.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Symbol {
    G,
    B,
    D,
    H,
    A,
    AD,
    Gamma,
    P,
    Q,
}

const SYMBOLS: [(&str, Symbol, i32); 9] = [
    ("G", Symbol::G, 0),
    ("B", Symbol::B, 2),
    ("D", Symbol::D, 4),
    ("H", Symbol::H, 6),
    ("A", Symbol::A, 0),
    ("AD", Symbol::AD, 2),
    ("gamma", Symbol::Gamma, 2),
    ("p", Symbol::P, 2),
    ("q", Symbol::Q, 4),
];

#[derive(Debug, Clone, Copy)]
struct Coefficient {
    symbol: Symbol,
    power: i32,
    value_per_cm: f64,
}

#[derive(Debug)]
pub(super) struct Molecule {
    table: String,
    pub(super) state: State,
    dissociation_ev: f64,
    pub(super) ionization_ev: f64,
    pub(super) line_j_max: u32,
    pub(super) isotopologues: Vec<Isotopologue>,
    coefficients: Vec<Coefficient>,
    pub(super) bands: Vec<Band>,
    pub(super) sources: BTreeSet<Arc<str>>,
}

impl Molecule {
    pub(super) fn parse(table: &str, text: &str) -> Result<Self, SpeciesError> {
        let incomplete = |part| SpeciesError::Incomplete {
            table: table.to_owned(),
            part,
        };
        let mut sources = BTreeSet::new();
        let (mut state, mut dissociation, mut ionization, mut j_max) = (None, None, None, None);
        let (mut isotopologues, mut coefficients, mut bands) = (Vec::new(), Vec::new(), Vec::new());
        let mut section = "";
        for (index, content) in text.lines().enumerate() {
            let content = content.trim();
            if content.is_empty() || content.starts_with('#') {
                continue;
            }
            if content.starts_with('[') {
                section = content;
                continue;
            }
            let mut row = Row::new(table, index + 1, content);
            match section {
                "[isotopologues]" => isotopologues.push(isotopologue(&mut row, &mut sources)?),
                "[constants]" => coefficients.push(coefficient(&mut row, &mut sources)?),
                "[bands]" => bands.push(band(&mut row, &mut sources)?),
                "" => {
                    let key = row.word("key")?.to_owned();
                    match key.as_str() {
                        "state" => state = Some(electronic_state(&mut row)?),
                        "dissociation_ev" => {
                            dissociation = Some(row.number(
                                "dissociation_ev",
                                0.1,
                                "an energy from 0.1 eV",
                            )?);
                            row.source(&mut sources)?;
                        }
                        "ionization_energy_ev" => {
                            ionization = Some(row.number(
                                "ionization_energy_ev",
                                0.1,
                                "an energy from 0.1 eV",
                            )?);
                            row.source(&mut sources)?;
                        }
                        "line_j_max" => {
                            j_max = Some(row.weight("line_j_max")? as u32);
                            row.source(&mut sources)?;
                        }
                        _ => return Err(row.refuse("key", &key, "a key of a molecule's table")),
                    }
                }
                other => {
                    return Err(row.refuse(
                        "section",
                        other,
                        "[isotopologues], [constants] or [bands]",
                    ));
                }
            }
        }
        for (symbol, part) in [(Symbol::G, "constant G"), (Symbol::B, "constant B")] {
            if !coefficients
                .iter()
                .any(|c: &Coefficient| c.symbol == symbol)
            {
                return Err(incomplete(part));
            }
        }
        if isotopologues.is_empty() {
            return Err(incomplete("section [isotopologues]"));
        }
        Ok(Molecule {
            table: table.to_owned(),
            state: state.ok_or_else(|| incomplete("state"))?,
            dissociation_ev: dissociation.ok_or_else(|| incomplete("dissociation_ev"))?,
            ionization_ev: ionization.ok_or_else(|| incomplete("ionization_energy_ev"))?,
            line_j_max: j_max.ok_or_else(|| incomplete("line_j_max"))?,
            isotopologues,
            coefficients,
            bands,
            sources,
        })
    }

    /// The molecule with one isotopologue, its constants and moments scaled by the reduced mass.
    ///
    /// `Y_kl ~ mu^-(k/2 + l)`; moments of a band that changes v by n go as `mu^-(n/4)`, the harmonic oscillator's
    /// `(B/omega)^(n/2)`. Source: Dunham, Phys. Rev. 41, 721 (1932).
    pub(super) fn isotopologue(mut self, name: &str) -> Result<Self, SpeciesError> {
        let Some(wanted) = self.isotopologues.iter().find(|found| found.name == name) else {
            return Err(SpeciesError::Incomplete {
                table: self.table,
                part: "an isotopologue of that name",
            });
        };
        let root = (self.isotopologues[0].reduced_mass_u() / wanted.reduced_mass_u()).sqrt();
        let correction_of_b = wanted.correction_of_b;
        self.isotopologues = vec![wanted.clone()];
        for coefficient in &mut self.coefficients {
            let rotation = SYMBOLS
                .iter()
                .find(|known| known.1 == coefficient.symbol)
                .map_or(0, |known| known.2);
            coefficient.value_per_cm *= root.powi(coefficient.power + rotation);
            if coefficient.symbol == Symbol::B {
                coefficient.value_per_cm *= 1.0 + correction_of_b;
            }
        }
        for band in &mut self.bands {
            let quanta = f64::from(band.v_upper - band.v_lower);
            band.moment_debye *= root.powf(quanta / 2.0);
        }
        Ok(self)
    }

    pub(super) fn mass_u(&self) -> f64 {
        self.isotopologues[0].masses_u.iter().sum()
    }

    pub(super) fn dissociation_per_cm(&self) -> f64 {
        self.dissociation_ev * ELEMENTARY_CHARGE_C / JOULE_PER_WAVENUMBER_CM
    }

    /// The constants of one vibrational level, cm^-1.
    pub(super) fn constants(&self, v: u32) -> Constants {
        let sum = |symbol| -> f64 {
            self.coefficients
                .iter()
                .filter(|coefficient| coefficient.symbol == symbol)
                .map(|c| c.value_per_cm * (f64::from(v) + 0.5).powi(c.power))
                .sum()
        };
        Constants {
            origin: sum(Symbol::G),
            b: sum(Symbol::B),
            d: sum(Symbol::D),
            h: sum(Symbol::H),
            a: sum(Symbol::A),
            a_d: sum(Symbol::AD),
            gamma: sum(Symbol::Gamma),
            p: sum(Symbol::P),
            q: sum(Symbol::Q),
        }
    }

    /// Energy of the lowest level on the scale of the constants, cm^-1.
    pub(super) fn ground_per_cm(&self) -> f64 {
        let constants = self.constants(0);
        self.state
            .twice_j(1)
            .flat_map(|twice_j| term::terms(self.state, &constants, 0, twice_j))
            .map(|term| term.energy_per_cm)
            .fold(f64::INFINITY, f64::min)
    }
}

fn electronic_state(row: &mut Row<'_>) -> Result<State, SpeciesError> {
    match row.word("state")? {
        "1Sigma" => Ok(State::Sigma1),
        "2Sigma" => Ok(State::Sigma2),
        "2Pi" => Ok(State::Pi2),
        other => {
            let got = other.to_owned();
            Err(row.refuse("state", &got, "1Sigma, 2Sigma or 2Pi"))
        }
    }
}

fn isotopologue(
    row: &mut Row<'_>,
    sources: &mut BTreeSet<Arc<str>>,
) -> Result<Isotopologue, SpeciesError> {
    let name = row.word("name")?.to_owned();
    let mut mass = || row.number("mass_u", 1.0, "a mass from 1 u");
    let masses_u = [mass()?, mass()?];
    let correction_of_b = row.number("correction_of_b", -0.01, "a correction of less than 1 %")?;
    row.source(sources)?;
    Ok(Isotopologue {
        name,
        masses_u,
        correction_of_b,
    })
}

fn coefficient(
    row: &mut Row<'_>,
    sources: &mut BTreeSet<Arc<str>>,
) -> Result<Coefficient, SpeciesError> {
    let word = row.word("symbol")?.to_owned();
    let symbol = SYMBOLS
        .iter()
        .find(|known| known.0 == word)
        .map(|known| known.1)
        .ok_or_else(|| row.refuse("symbol", &word, "G, B, D, H, A, AD, gamma, p or q"))?;
    let power = row.number("power", 0.0, "a power from 0")? as i32;
    let value_per_cm = row.number("value_per_cm", f64::NEG_INFINITY, "a number")?;
    row.source(sources)?;
    Ok(Coefficient {
        symbol,
        power,
        value_per_cm,
    })
}

fn band(row: &mut Row<'_>, sources: &mut BTreeSet<Arc<str>>) -> Result<Band, SpeciesError> {
    let mut quantum = |column| row.number(column, 0.0, "a vibrational quantum number");
    let (v_upper, v_lower) = (quantum("v_upper")? as u32, quantum("v_lower")? as u32);
    if v_upper < v_lower {
        return Err(row.refuse("v_lower", &v_lower.to_string(), "at most v_upper"));
    }
    let mut number = |column| row.number(column, f64::NEG_INFINITY, "a number");
    let moment_debye = number("moment_debye")?;
    let herman_wallis = [number("hw_c")?, number("hw_d")?];
    let grade = row.word("grade")?.to_owned();
    let grade = grade
        .parse()
        .map_err(|()| row.refuse("grade", &grade, "a grade from AAA to E or -"))?;
    let source = row.source(sources)?;
    Ok(Band {
        v_upper,
        v_lower,
        moment_debye,
        herman_wallis,
        grade,
        source,
    })
}
