//! What the program makes of a case: its problem and its prediction.

use crate::case::{Case, UNIT};
use backlit_inverse::Problem;
use backlit_inverse::setup::Setup;
use backlit_species::Catalogue;
use backlit_units::axis::SpectralAxis;
use backlit_units::{IntensityUnit, Medium};

impl Case {
    /// The case's problem: its setup, for data in [`UNIT`] at its wavelengths.
    pub fn problem(&self) -> Problem {
        let setup = Setup::read(&self.setup).unwrap_or_else(|error| panic!("{error}"));
        let centres_m: Vec<f64> = self.wavelength_nm.iter().map(|nm| nm * 1e-9).collect();
        let axis = SpectralAxis::from_centres_m(&centres_m, Medium::Vacuum).unwrap();
        let unit: IntensityUnit = UNIT.parse().unwrap();
        Problem::new(&setup, &axis, &unit, Catalogue::builtin(), None)
            .unwrap_or_else(|error| panic!("{}: {error}", self.setup.display()))
    }

    /// The spectrum that the program predicts, in [`UNIT`].
    pub fn predict(&self) -> Vec<f64> {
        self.problem()
            .predict()
            .unwrap_or_else(|error| panic!("{}: {error}", self.setup.display()))
    }
}
