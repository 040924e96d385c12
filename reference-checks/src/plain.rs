//! What a case shows by the plain reference model of `backlit_forward`, reached without the fit's own machinery.

use crate::case::Case;
use backlit_forward::{Background, Channels, Cloud, Layout, LineSpread, Sightline, oracle};
use backlit_inverse::setup::{Instrument, Light, Setup, Value};
use backlit_species::Catalogue;
use backlit_units::Medium;
use backlit_units::axis::SpectralAxis;

impl Case {
    /// The spectrum of a case whose values are all known, in [`crate::case::UNIT`].
    ///
    /// # Panics
    /// If a value is not known, or the light is a measured one.
    pub fn observe_plainly(&self) -> Vec<f64> {
        let setup = Setup::read(&self.setup).unwrap_or_else(|error| panic!("{error}"));
        let centres_m: Vec<f64> = self.wavelength_nm.iter().map(|nm| nm * 1e-9).collect();
        let axis = SpectralAxis::from_centres_m(&centres_m, Medium::Vacuum).unwrap();
        let (sightline, parameters) = sightline(&setup, &axis);
        // From per metre to per nanometre.
        oracle::observed(&sightline, &parameters)
            .iter()
            .map(|radiance| radiance * 1e-9)
            .collect()
    }
}

fn known(value: Value) -> f64 {
    match value {
        Value::Known(value) => value,
        Value::Find { .. } => panic!("a plain case knows all its values"),
    }
}

/// Setup to sightline and parameters, value by value.
fn sightline(setup: &Setup, axis: &SpectralAxis) -> (Sightline, Vec<f64>) {
    let columns = setup
        .resolve_columns(Catalogue::builtin())
        .unwrap_or_else(|error| panic!("{error}"));
    let sightline = Sightline {
        channels: Channels::new(axis.edges_vac_m(), &vec![true; axis.len()]),
        line_spread: match setup.instrument {
            Instrument::None => LineSpread::None,
            Instrument::FwhmNm(fwhm_nm) => LineSpread::Fwhm {
                fwhm_m: fwhm_nm * 1e-9,
            },
            Instrument::ResolvingPower(resolving_power) => {
                LineSpread::ResolvingPower { resolving_power }
            }
        },
        background: match setup.background.light {
            Light::Blackbody => Background::Blackbody { shape_terms: 0 },
            Light::Dark => Background::Dark,
            Light::Measured { .. } => panic!("a plain case has no measured light"),
        },
        clouds: setup
            .clouds
            .iter()
            .zip(columns)
            .map(|(cloud, species)| Cloud {
                species,
                own_doppler_temperature: cloud.doppler_temperature_k.is_some(),
            })
            .collect(),
        tolerance: setup.tolerance,
    };
    let layout = sightline.layout();
    let mut parameters = vec![0.0; layout.len()];
    parameters[Layout::SCALE] = known(setup.spectrum.scale).ln();
    if setup.background.light == Light::Blackbody {
        parameters[Layout::BACKGROUND_TEMPERATURE] = known(setup.background.temperature_k).ln();
        parameters[Layout::DILUTION] = known(setup.background.dilution);
    }
    for (cloud, place) in setup.clouds.iter().zip(&layout.clouds) {
        parameters[place.temperature()] = known(cloud.temperature_k).ln();
        parameters[place.velocity()] = known(cloud.velocity_km_s) * 1e3;
        parameters[place.turbulence_squared()] = (known(cloud.turbulence_km_s) * 1e3).powi(2);
        if let Some(temperature_k) = cloud.doppler_temperature_k {
            parameters[place.doppler_temperature()] = known(temperature_k).ln();
        }
        for (species, (_, column_cm2)) in cloud.columns.iter().enumerate() {
            parameters[place.column(species)] = (known(*column_cm2) * 1e4).ln();
        }
    }
    (sightline, parameters)
}
