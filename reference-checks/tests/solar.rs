//! The Sun: ASTM G173-03 extraterrestrial spectrum, a dense hot body seen through its own cooler gas.
//!
//! The table comes from the PyPI package pvlib, which carries it; without that package the tests say so and pass.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::setup::Setup;
use backlit_inverse::{Fit, Observation, Problem};
use backlit_reference_checks::python;
use backlit_species::Catalogue;
use backlit_units::Medium;
use backlit_units::axis::SpectralAxis;
use std::fs;
use std::path::Path;

/// Solid angle of the Sun at one astronomical unit: π (6.957e8 m / 1.495978707e11 m)² = 6.79e-5 sr (IAU 2012 B2, 2015 B3).
const SUN_SR: f64 = 6.79e-5;

/// Wavelength in nm and irradiance in W m⁻² nm⁻¹ of the channels of a range.
fn table(test: &str, from_nm: f64, to_nm: f64) -> Option<(Vec<f64>, Vec<f64>)> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR"))
        .join("solar")
        .join(test);
    fs::create_dir_all(&folder).unwrap();
    let path = folder.join("g173.csv");
    python::run("solar_table.py", &[&path])?;
    let text = fs::read_to_string(&path).unwrap();
    let rows = text
        .lines()
        .filter(|line| line.starts_with(|first: char| first.is_ascii_digit()));
    let pairs = rows.map(|row| {
        let (wavelength, irradiance) = row.split_once(',').unwrap();
        (
            wavelength.parse::<f64>().unwrap(),
            irradiance.parse::<f64>().unwrap(),
        )
    });
    let inside: Vec<(f64, f64)> = pairs
        .filter(|(nm, _)| (from_nm..=to_nm).contains(nm))
        .collect();
    assert!(inside.len() > 8);
    Some(inside.into_iter().unzip())
}

/// The fit of a setup to a range of the table, with the quantity names.
fn fit(setup: &str, wavelength_nm: &[f64], irradiance: &[f64]) -> (Vec<String>, Fit) {
    let setup = Setup::parse(setup, "sun.toml").unwrap_or_else(|error| panic!("{error}"));
    let centres_m: Vec<f64> = wavelength_nm.iter().map(|nm| nm * 1e-9).collect();
    // The table does not say in what its wavelengths are; the lines' own velocity takes up the difference.
    let axis = SpectralAxis::from_centres_m(&centres_m, Medium::Vacuum).unwrap();
    let unit = "W m-2 nm-1".parse().unwrap();
    let problem = Problem::new(&setup, &axis, &unit, Catalogue::builtin(), None)
        .unwrap_or_else(|e| panic!("{e}"));
    let data = Observation {
        intensity: irradiance,
        uncertainty: None,
        mask: &vec![false; irradiance.len()],
    };
    let fit = problem.fit(&mut problem.workspace(), &data, None);
    (
        problem
            .quantities()
            .iter()
            .map(|quantity| quantity.name.clone())
            .collect(),
        fit,
    )
}

/// Published: effective temperature 5772 K (IAU 2015 resolution B3); as a colour of 400-2500 nm, 5750-5950 K.
#[test]
fn the_sun_is_a_body_of_about_5800_k() {
    let Some((wavelength_nm, irradiance)) = table("body", 400.0, 2500.0) else {
        return;
    };
    let setup = format!(
        "[spectrum]\nscale = {SUN_SR}\n[background]\nlight = \"blackbody\"\n\
         temperature_K = {{ find = [3000, 9000] }}\n"
    );
    let (names, fit) = fit(&setup, &wavelength_nm, &irradiance);
    assert_eq!(names, ["background_temperature"]);
    println!(
        "the Sun: {:.1} +- {:.1} K, {:?}",
        fit.values[0],
        fit.sigma[0],
        fit.flags.names()
    );
    assert!(
        (5750.0..=5950.0).contains(&fit.values[0]),
        "{} K",
        fit.values[0]
    );
}

/// Fraunhofer (1817): the lines C (H alpha), D (Na I), H and K (Ca II), b (Mg I) are dark.
#[test]
fn the_gas_above_it_absorbs() {
    // The table is made of means over its steps of 0.5 and 1 nm, which the channels are; little more blurs it.
    let windows = [
        ("H I", 640.0, 673.0, 0.5, 1e24),
        ("Na I", 577.0, 602.0, 0.5, 1e20),
        ("Ca II", 389.0, 401.0, 0.3, 1e20),
        ("Mg I", 505.0, 530.0, 0.5, 1e20),
    ];
    for (species, from_nm, to_nm, fwhm_nm, most_cm2) in windows {
        let Some((wavelength_nm, irradiance)) = table(species, from_nm, to_nm) else {
            return;
        };
        let setup = format!(
            "[spectrum]\nscale = {SUN_SR}\n[instrument]\nfwhm_nm = {fwhm_nm}\n\
             [background]\nlight = \"blackbody\"\ntemperature_K = {{ find = [3000, 9000] }}\n\
             [[cloud]]\ntemperature_K = {{ find = [2500, 12000] }}\nvelocity_km_s = {{ find = [-400, 400] }}\n\
             turbulence_km_s = 2\n[cloud.column_cm2]\n\"{species}\" = {{ find = [1e8, {most_cm2:e}] }}\n"
        );
        let (names, fit) = fit(&setup, &wavelength_nm, &irradiance);
        let value = |name: &str| fit.values[names.iter().position(|other| other == name).unwrap()];
        println!(
            "{species}: {:?}, {:?}",
            names.iter().zip(&fit.values).collect::<Vec<_>>(),
            fit.flags.names()
        );
        assert!(
            !fit.flags.names().contains(&"not_detected"),
            "{species} is not detected"
        );
        let (gas_k, background_k) = (value("cloud1_temperature"), value("background_temperature"));
        assert!(
            gas_k < background_k,
            "{species}: gas of {gas_k} K before {background_k} K would shine"
        );
    }
}
