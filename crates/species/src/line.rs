//! One spectral line.

use std::fmt;
use std::str::FromStr;
use std::sync::Arc;

use backlit_units::constants::{
    ELECTRON_MASS_KG, ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_PER_S, VACUUM_PERMITTIVITY_F_PER_M,
};

/// A transition between two levels of one species.
#[derive(Debug, Clone, PartialEq)]
pub struct Line {
    /// Rest wavelength in vacuum, m.
    pub wavelength_vac_m: f64,
    /// Einstein A of the spontaneous decay, s^-1.
    pub a_ki_per_s: f64,
    /// Energy of the lower level above the ground level, J.
    pub e_lower_j: f64,
    /// Energy of the upper level above the ground level, J.
    pub e_upper_j: f64,
    /// Statistical weight of the lower level.
    pub g_lower: f64,
    /// Statistical weight of the upper level.
    pub g_upper: f64,
    /// Total natural broadening of both levels: FWHM of the Lorentzian in angular frequency, s^-1.
    pub gamma_per_s: f64,
    /// How well A is known.
    pub grade: Grade,
    /// Key of the source, explained in the table of sources, or the path of a user's list.
    pub source: Arc<str>,
    /// The radiation's multipole.
    pub kind: Kind,
}

impl Line {
    /// Absorption oscillator strength, dimensionless.
    ///
    /// `f = (eps0 m_e c / 2 pi e^2) lambda^2 (g_u/g_l) A`. Source: Hilborn, Am. J. Phys. 50, 982 (1982), eq. 25.
    pub fn oscillator_strength(&self) -> f64 {
        let per_rate = VACUUM_PERMITTIVITY_F_PER_M * ELECTRON_MASS_KG * SPEED_OF_LIGHT_M_PER_S
            / (2.0 * std::f64::consts::PI * ELEMENTARY_CHARGE_C.powi(2));
        per_rate * self.wavelength_vac_m.powi(2) * self.g_upper / self.g_lower * self.a_ki_per_s
    }

    /// Whether the line is forbidden: any multipole but the electric dipole.
    pub fn is_forbidden(&self) -> bool {
        self.kind != Kind::ElectricDipole
    }
}

/// The multipole of a transition.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub enum Kind {
    /// E1, an allowed (or spin-forbidden) line.
    #[default]
    ElectricDipole,
    /// M1.
    MagneticDipole,
    /// E2.
    ElectricQuadrupole,
    /// M2.
    MagneticQuadrupole,
    /// M1 and E2 together: A is their sum.
    MagneticDipoleAndElectricQuadrupole,
}

impl fmt::Display for Kind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Kind::ElectricDipole => "E1",
            Kind::MagneticDipole => "M1",
            Kind::ElectricQuadrupole => "E2",
            Kind::MagneticQuadrupole => "M2",
            Kind::MagneticDipoleAndElectricQuadrupole => "E2+M1",
        })
    }
}

impl FromStr for Kind {
    type Err = ();

    fn from_str(text: &str) -> Result<Self, ()> {
        match text {
            "E1" => Ok(Kind::ElectricDipole),
            "M1" => Ok(Kind::MagneticDipole),
            "E2" => Ok(Kind::ElectricQuadrupole),
            "M2" => Ok(Kind::MagneticQuadrupole),
            "E2+M1" | "M1+E2" => Ok(Kind::MagneticDipoleAndElectricQuadrupole),
            _ => Err(()),
        }
    }
}

/// How well A is known: the grades of the NIST Atomic Spectra Database.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
#[allow(missing_docs)] // The letters are the database's own; `relative_uncertainty` says what they mean.
pub enum Grade {
    Aaa,
    Aa,
    APlus,
    A,
    BPlus,
    B,
    CPlus,
    C,
    DPlus,
    D,
    E,
    /// Not graded.
    #[default]
    Unknown,
}

const GRADES: [(Grade, &str, f64); 12] = [
    (Grade::Aaa, "AAA", 0.003),
    (Grade::Aa, "AA", 0.01),
    (Grade::APlus, "A+", 0.02),
    (Grade::A, "A", 0.03),
    (Grade::BPlus, "B+", 0.07),
    (Grade::B, "B", 0.10),
    (Grade::CPlus, "C+", 0.18),
    (Grade::C, "C", 0.25),
    (Grade::DPlus, "D+", 0.40),
    (Grade::D, "D", 0.50),
    (Grade::E, "E", 1.0),
    (Grade::Unknown, "-", f64::NAN),
];

impl Grade {
    /// Bound that the database gives for the relative error of A; "E" stands for "more than 50 %"; `None` if not graded.
    ///
    /// Source: NIST Atomic Spectra Database, help page on transition probabilities.
    pub fn relative_uncertainty(self) -> Option<f64> {
        GRADES
            .iter()
            .find(|(grade, ..)| *grade == self)
            .map(|entry| entry.2)
            .filter(|bound| bound.is_finite())
    }
}

impl fmt::Display for Grade {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(
            GRADES
                .iter()
                .find(|(grade, ..)| grade == self)
                .map_or("-", |entry| entry.1),
        )
    }
}

impl FromStr for Grade {
    type Err = ();

    /// The database's letters; a prime (a deviation noted there) is ignored.
    fn from_str(text: &str) -> Result<Self, ()> {
        let letters = text.trim_end_matches('\'');
        GRADES
            .iter()
            .find(|(_, name, _)| *name == letters)
            .map(|entry| entry.0)
            .ok_or(())
    }
}
