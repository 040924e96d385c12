//! How many clouds: none invented out of noise, none overlooked that stands apart.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::Intervals;
use backlit_inverse::clouds::{Choice, Ladder};
use backlit_inverse::setup::Setup;
use backlit_reference_checks::case::{Case, Line, Species, UNIT, channels};
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::draws::{Draws, long};
use backlit_species::Catalogue;
use backlit_units::axis::SpectralAxis;
use backlit_units::{IntensityUnit, Medium};
use std::path::Path;

const SIGNAL_TO_NOISE: f64 = 50.0;
const NOISE_DRAWS: usize = 500;
/// In the normal run, for the scenes beside the usual one.
const NOISE_DRAWS_SHORT: usize = 100;
const FALSE_RATE: f64 = 0.02;
const CLOUD_DRAWS: usize = 100;
const CLOUD_DRAWS_LONG: usize = 500;
const FOUND_RATE: f64 = 0.98;
const FWHM_NM: f64 = 0.1;

fn species() -> Species {
    let line = |nm: f64, energy: f64, a_ki_per_s: f64| Line {
        a_ki_per_s,
        e_lower_per_cm: energy,
        g_lower: 3.0,
        g_upper: 5.0,
        gamma_per_s: Some(1e7),
        ..Line::at_nm(nm)
    };
    Species {
        name: "Xx I",
        mass_u: 40.0,
        lines: vec![
            line(497.2, 0.0, 2e7),
            line(500.0, 4000.0, 6e7),
            line(502.6, 9000.0, 3e8),
        ],
        levels: vec![(3.0, 0.0), (3.0, 4000.0), (3.0, 9000.0)],
    }
}

/// Clouds by velocity in km/s and column in cm-2 in front of a black body of 5500 K.
fn truth(folder: &Path, name: &str, clouds: &[(f64, f64)], wavelength_nm: &[f64]) -> Case {
    let mut text =
        format!("[instrument]\nfwhm_nm = {FWHM_NM}\n[background]\ntemperature_K = 5500\n");
    for (velocity, column) in clouds {
        text += &format!(
            "[[cloud]]\ntemperature_K = 3000\nvelocity_km_s = {velocity}\nturbulence_km_s = 5\n\
             [cloud.column_cm2]\n\"Xx I\" = {column:e}\n"
        );
    }
    Case::write(folder, name, &text, &[species()], wavelength_nm.to_vec())
}

fn choices(name: &str, clouds: &[(f64, f64)], most: usize, count: usize) -> Vec<Choice> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("clouds");
    let wavelength_nm = channels(495.5, 504.5, 260);
    let truth = truth(&folder, name, clouds, &wavelength_nm);
    let question = Case::write(
        &folder,
        &format!("{name}-question"),
        &format!(
            "[instrument]\nfwhm_nm = {FWHM_NM}\n[background]\ntemperature_K = {{ find = [1000, 30000] }}\n\
             [[cloud]]\ntemperature_K = {{ find = [300, 30000] }}\nvelocity_km_s = {{ find = [-400, 400] }}\n\
             turbulence_km_s = 5\n[cloud.column_cm2]\n\"Xx I\" = {{ find = [1e6, 1e22] }}\n"
        ),
        &[species()],
        wavelength_nm.clone(),
    );
    let draws = Draws::new(&truth, &question, SIGNAL_TO_NOISE);
    let setup = Setup::read(&question.setup).unwrap();
    let centres_m: Vec<f64> = wavelength_nm.iter().map(|nm| nm * 1e-9).collect();
    let axis = SpectralAxis::from_centres_m(&centres_m, Medium::Vacuum).unwrap();
    let unit: IntensityUnit = UNIT.parse().unwrap();
    let ladder = Ladder::new(&setup, most, &axis, &unit, Catalogue::builtin(), None).unwrap();
    let mut rooms = ladder.workspaces();
    let mut chance = Chance::new(41);
    (0..count)
        .map(|_| {
            let intensity = draws.spectrum(&mut chance);
            draws.observe(&intensity, |data| {
                ladder.fit(&mut rooms, data, Intervals::None)
            })
        })
        .collect()
}

fn count(choices: &[Choice], clouds: usize) -> usize {
    choices.iter().filter(|c| c.clouds == clouds).count()
}

#[test]
fn no_second_cloud_is_invented_in_noise() {
    for (name, clouds) in [
        ("one", &[(20.0, 6e13)][..]),
        ("opaque", &[(20.0, 2e15)]),
        ("nothing", &[]),
    ] {
        let draws = if long() || name == "one" {
            NOISE_DRAWS
        } else {
            NOISE_DRAWS_SHORT
        };
        let choices = choices(name, clouds, 2, draws);
        let invented = draws - count(&choices, 1);
        println!("{name}: a second cloud in {invented} of {draws}");
        assert!(
            invented as f64 <= FALSE_RATE * draws as f64,
            "{name}: {invented} of {draws}"
        );
    }
}

#[test]
fn a_second_cloud_three_widths_away_is_found() {
    let draws = if long() {
        CLOUD_DRAWS_LONG
    } else {
        CLOUD_DRAWS
    };
    // Three FWHM of the instrument, which is far wider than the line itself (b = 5.1 km/s), at 500 nm.
    let apart_km_s = 3.0 * FWHM_NM / 500.0 * 299_792.458;
    for (name, columns) in [("equal", (6e13, 6e13)), ("weaker", (6e13, 3e13))] {
        let clouds = [(-60.0, columns.0), (-60.0 + apart_km_s, columns.1)];
        let choices = choices(name, &clouds, 3, draws);
        let found: Vec<&Choice> = choices.iter().filter(|c| c.clouds == 2).collect();
        let third = count(&choices, 3);
        println!(
            "{name}: two clouds in {} of {draws}, three in {third}",
            found.len()
        );
        assert!(
            found.len() as f64 >= FOUND_RATE * draws as f64,
            "{name}: {} of {draws}",
            found.len()
        );
        // Background, then temperature, velocity, column of each; numbered by velocity.
        for (k, truth) in [(2, clouds[0].0), (5, clouds[1].0)] {
            let right = found
                .iter()
                .filter(|c| (c.fit.values[k] - truth).abs() < 5.0 * c.fit.sigma[k])
                .count();
            assert!(
                right as f64 >= FOUND_RATE * found.len() as f64,
                "{name}: {right} velocities of {} at {truth} km/s",
                found.len()
            );
        }
        let flagged = found
            .iter()
            .filter(|c| !c.fit.flags.names().is_empty())
            .map(|c| &c.fit.messages);
        println!(
            "{name}: {} flagged, for example {:?}",
            flagged.clone().count(),
            flagged.clone().next()
        );
    }
}
