//! One cloud in front of a blackbody, told once as what is there and once as what is to be found.

use crate::case::{Case, Species};
use std::fmt::Write as _;
use std::path::Path;

/// The truth about a sightline through one cloud.
#[derive(Debug, Clone)]
pub struct Scene {
    /// FWHM of the line-spread function.
    pub fwhm_nm: f64,
    /// Temperature of the background.
    pub background_k: f64,
    /// Part of the beam that it fills.
    pub dilution: f64,
    /// Temperature of the gas.
    pub gas_k: f64,
    /// Its velocity.
    pub velocity_km_s: f64,
    /// Its turbulence.
    pub turbulence_km_s: f64,
    /// Its columns.
    pub columns_cm2: Vec<(&'static str, f64)>,
    /// What the fit has to find, by the names in the maps without `cloud1_`: "temperature", "velocity", "turbulence",
    /// "column" (all of them), "background_temperature", "dilution".
    pub find: Vec<&'static str>,
}

impl Scene {
    /// The setup with every value known.
    pub fn truth(&self) -> String {
        self.setup(|_, value, _| format!("{value:?}"))
    }

    /// The setup for the fit: wide bounds, no start.
    pub fn question(&self) -> String {
        self.setup(|name, value, (low, high)| {
            if self.find.contains(&name) {
                format!("{{ find = [{low:e}, {high:e}] }}")
            } else {
                format!("{value:?}")
            }
        })
    }

    fn setup(&self, entry: impl Fn(&str, f64, (f64, f64)) -> String) -> String {
        let mut text = format!(
            "[instrument]\nfwhm_nm = {:?}\n[background]\nlight = \"blackbody\"\ntemperature_K = {}\ndilution = {}\n\
             [[cloud]]\ntemperature_K = {}\nvelocity_km_s = {}\nturbulence_km_s = {}\n[cloud.column_cm2]\n",
            self.fwhm_nm,
            entry(
                "background_temperature",
                self.background_k,
                (1000.0, 30_000.0)
            ),
            entry("dilution", self.dilution, (0.01, 1.0)),
            entry("temperature", self.gas_k, (300.0, 30_000.0)),
            entry("velocity", self.velocity_km_s, (-400.0, 400.0)),
            entry("turbulence", self.turbulence_km_s, (0.1, 50.0)),
        );
        for (name, column) in &self.columns_cm2 {
            writeln!(
                text,
                "\"{name}\" = {}",
                entry("column", *column, (1e6, 1e22))
            )
            .expect("a string takes all");
        }
        text
    }

    /// The true value of a quantity by its name in the maps.
    ///
    /// # Panics
    /// If there is no such quantity.
    pub fn true_value(&self, name: &str) -> f64 {
        match name {
            "background_temperature" => self.background_k,
            "background_dilution" => self.dilution,
            "cloud1_temperature" => self.gas_k,
            "cloud1_velocity" => self.velocity_km_s,
            "cloud1_turbulence" => self.turbulence_km_s,
            _ => {
                let column = self.columns_cm2.iter().find(|(species, _)| {
                    name.strip_prefix("cloud1_log10_column_")
                        == Some(species.replace(' ', "_").as_str())
                });
                column
                    .unwrap_or_else(|| panic!("no quantity {name}"))
                    .1
                    .log10()
            }
        }
    }

    /// The same scene with one quantity changed, for derivatives.
    ///
    /// # Panics
    /// If there is no such quantity.
    pub fn with(&self, name: &str, value: f64) -> Scene {
        let mut scene = self.clone();
        match name {
            "background_temperature" => scene.background_k = value,
            "background_dilution" => scene.dilution = value,
            "cloud1_temperature" => scene.gas_k = value,
            "cloud1_velocity" => scene.velocity_km_s = value,
            "cloud1_turbulence" => scene.turbulence_km_s = value,
            _ => {
                let column = scene.columns_cm2.iter_mut().find(|(species, _)| {
                    name.strip_prefix("cloud1_log10_column_")
                        == Some(species.replace(' ', "_").as_str())
                });
                column.unwrap_or_else(|| panic!("no quantity {name}")).1 = 10.0_f64.powf(value);
            }
        }
        scene
    }

    /// The same sightline without any gas.
    pub fn without_gas(&self) -> Scene {
        let mut scene = self.clone();
        for (_, column) in &mut scene.columns_cm2 {
            *column = 1.0;
        }
        scene
    }

    /// Writes truth and question into `folder/name-truth` and `folder/name-question`.
    pub fn write(
        &self,
        folder: &Path,
        name: &str,
        species: &[Species],
        wavelength_nm: &[f64],
    ) -> (Case, Case) {
        let one = |kind: &str, text: String| {
            Case::write(
                folder,
                &format!("{name}-{kind}"),
                &text,
                species,
                wavelength_nm.to_vec(),
            )
        };
        (one("truth", self.truth()), one("question", self.question()))
    }
}
