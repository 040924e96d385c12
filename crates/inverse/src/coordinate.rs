//! A free value in the user's unit and in the coordinate of the fit.

use crate::setup::Value;

/// What a free value is: fixes its unit, its coordinate and the way back.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// A temperature in K; coordinate ln T.
    Temperature,
    /// A velocity in km/s; coordinate m/s.
    Velocity,
    /// A turbulence in km/s; coordinate its square in m² s⁻², which adds to the thermal width.
    Turbulence,
    /// A column in cm⁻², shown as log10; coordinate ln of m⁻².
    Column,
    /// A plain number 0..1; its own coordinate.
    Dilution,
    /// A positive factor; coordinate its logarithm.
    Scale,
    /// A Legendre coefficient; its own coordinate.
    Shape,
}

/// cm⁻² in m⁻².
const PER_SQUARE_CM: f64 = 1e4;

impl Kind {
    /// From the setup's number (columns: cm⁻²) to the coordinate.
    pub fn coordinate(self, setup_value: f64) -> f64 {
        match self {
            Kind::Temperature | Kind::Scale => setup_value.ln(),
            Kind::Velocity => setup_value * 1e3,
            Kind::Turbulence => (setup_value * 1e3).powi(2),
            Kind::Column => (setup_value * PER_SQUARE_CM).ln(),
            Kind::Dilution | Kind::Shape => setup_value,
        }
    }

    /// From the coordinate to the reported number (columns: log10 of cm⁻²).
    pub fn reported(self, coordinate: f64) -> f64 {
        match self {
            Kind::Temperature | Kind::Scale => coordinate.exp(),
            Kind::Velocity => coordinate * 1e-3,
            Kind::Turbulence => coordinate.max(0.0).sqrt() * 1e-3,
            Kind::Column => (coordinate - PER_SQUARE_CM.ln()) / std::f64::consts::LN_10,
            Kind::Dilution | Kind::Shape => coordinate,
        }
    }

    /// From the reported number to the coordinate: the inverse of [`Kind::reported`].
    pub fn from_reported(self, reported: f64) -> f64 {
        match self {
            Kind::Column => reported * std::f64::consts::LN_10 + PER_SQUARE_CM.ln(),
            _ => self.coordinate(reported),
        }
    }

    /// Derivative of the reported number by the coordinate.
    pub fn slope(self, coordinate: f64) -> f64 {
        match self {
            Kind::Temperature | Kind::Scale => coordinate.exp(),
            Kind::Velocity => 1e-3,
            Kind::Turbulence => 0.5e-3 / coordinate.max(1e-12).sqrt(),
            Kind::Column => 1.0 / std::f64::consts::LN_10,
            Kind::Dilution | Kind::Shape => 1.0,
        }
    }

    /// The unit of the reported number.
    pub fn unit(self, scale_unit: &str) -> String {
        match self {
            Kind::Temperature => "K",
            Kind::Velocity | Kind::Turbulence => "km s-1",
            Kind::Column => "log10(cm-2)",
            Kind::Dilution | Kind::Shape => "1",
            Kind::Scale => scale_unit,
        }
        .to_owned()
    }
}

/// A value to be found: where it stands, its bounds and its names.
#[derive(Debug, Clone, PartialEq)]
pub struct FreeValue {
    /// Its kind.
    pub kind: Kind,
    /// Index in the forward model's parameters.
    pub parameter: usize,
    /// The cloud it belongs to.
    pub cloud: Option<usize>,
    /// The species whose column it is.
    pub species: Option<usize>,
    /// Lower bound, as a coordinate.
    pub low: f64,
    /// Upper bound, as a coordinate.
    pub high: f64,
    /// The user's guess, as a coordinate.
    pub start: Option<f64>,
}

impl FreeValue {
    /// The free value of a setup, or `None` if the user knows it.
    pub fn of(
        kind: Kind,
        parameter: usize,
        cloud: Option<usize>,
        species: Option<usize>,
        value: Value,
    ) -> Option<Self> {
        let Value::Find { low, high, start } = value else {
            return None;
        };
        Some(FreeValue {
            kind,
            parameter,
            cloud,
            species,
            low: kind.coordinate(low),
            high: kind.coordinate(high),
            start: start.map(|start| kind.coordinate(start)),
        })
    }

    /// The middle of the bounds in the coordinate, or the user's guess.
    pub fn middle(&self) -> f64 {
        self.start.unwrap_or(0.5 * (self.low + self.high))
    }
}
