//! Questions that the data cannot answer: the right flag must say so, whatever the noise.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::{Fit, Observation};
use backlit_reference_checks::case::{Line, Species, channels};
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::scene::Scene;
use std::path::Path;

const DRAWS: usize = 100;
/// Of the draws, at least.
const FLAGGED: f64 = 0.95;

fn line(nm: f64, energy: f64, a_ki_per_s: f64) -> Line {
    Line {
        a_ki_per_s,
        e_lower_per_cm: energy,
        g_lower: 3.0,
        g_upper: 5.0,
        gamma_per_s: Some(1e7),
        ..Line::at_nm(nm)
    }
}

fn one_line() -> Species {
    Species {
        name: "Xx I",
        mass_u: 40.0,
        lines: vec![line(500.0, 0.0, 1e8)],
        levels: vec![(3.0, 0.0), (5.0, 9000.0)],
    }
}

fn three_lines() -> Species {
    Species {
        name: "Xx I",
        mass_u: 40.0,
        lines: vec![
            line(497.5, 0.0, 2e7),
            line(500.0, 6000.0, 1e8),
            line(502.5, 12_000.0, 6e8),
        ],
        levels: vec![(3.0, 0.0), (3.0, 6000.0), (3.0, 12_000.0)],
    }
}

fn scene(gas_k: f64, column_cm2: f64) -> Scene {
    Scene {
        fwhm_nm: 0.1,
        background_k: 5000.0,
        dilution: 1.0,
        gas_k,
        velocity_km_s: 15.0,
        turbulence_km_s: 5.0,
        columns_cm2: vec![("Xx I", column_cm2)],
        find: vec![
            "temperature",
            "velocity",
            "column",
            "background_temperature",
        ],
    }
}

fn wavelengths() -> Vec<f64> {
    channels(496.0, 504.0, 240)
}

/// Fits of noisy spectra: what the truth setup shows, asked with the question setup.
fn fits(
    name: &str,
    truth: &Scene,
    question: &Scene,
    gas: (&Species, &Species),
    signal_to_noise: f64,
) -> Vec<Fit> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("degeneracy");
    let truth = truth
        .write(
            &folder,
            &format!("{name}-data"),
            std::slice::from_ref(gas.0),
            &wavelengths(),
        )
        .0;
    let question = question
        .write(&folder, name, std::slice::from_ref(gas.1), &wavelengths())
        .1;
    let exact = truth.predict();
    let noise = exact.iter().copied().fold(0.0, f64::max) / signal_to_noise;
    let problem = question.problem();
    let mut workspace = problem.workspace();
    let mut chance = Chance::new(5);
    let uncertainty = vec![noise; exact.len()];
    (0..DRAWS)
        .map(|_| {
            let intensity: Vec<f64> = exact
                .iter()
                .map(|value| value + noise * chance.normal())
                .collect();
            let data = Observation {
                intensity: &intensity,
                uncertainty: Some(&uncertainty),
                mask: &vec![false; exact.len()],
            };
            problem.fit(&mut workspace, &data, None)
        })
        .collect()
}

fn assert_flagged(name: &str, fits: &[Fit], any_of: &[&str]) {
    let raised = fits
        .iter()
        .filter(|fit| fit.flags.names().iter().any(|flag| any_of.contains(flag)))
        .count() as f64;
    println!("{name}: {any_of:?} in {raised} of {}", fits.len());
    let others: Vec<String> = fits
        .iter()
        .map(|fit| fit.flags.names().join("+"))
        .take(12)
        .collect();
    assert!(
        raised >= FLAGGED * fits.len() as f64,
        "{name}: {any_of:?} in {raised} of {}: {others:?}",
        fits.len()
    );
}

#[test]
fn one_thin_line_cannot_tell_temperature_from_column() {
    let scene = scene(2500.0, 2e11);
    let fits = fits(
        "one-thin-line",
        &scene,
        &scene,
        (&one_line(), &one_line()),
        300.0,
    );
    assert_flagged("one thin line", &fits, &["degenerate"]);
}

#[test]
fn gas_as_hot_as_its_background_has_no_contrast() {
    let scene = scene(5000.0, 1e14);
    let fits = fits(
        "equal",
        &scene,
        &scene,
        (&three_lines(), &three_lines()),
        50.0,
    );
    // Without lines nobody can tell gas of that temperature from no gas at all.
    assert_flagged(
        "as hot as its background",
        &fits,
        &["no_contrast", "not_detected"],
    );
}

#[test]
fn known_gas_as_hot_as_its_background_has_no_contrast() {
    let scene = Scene {
        find: vec!["velocity", "column", "background_temperature"],
        ..scene(5000.0, 1e14)
    };
    let fits = fits(
        "known-equal",
        &scene,
        &scene,
        (&three_lines(), &three_lines()),
        50.0,
    );
    assert_flagged(
        "known to be as hot as its background",
        &fits,
        &["no_contrast"],
    );
}

#[test]
fn thin_gas_cannot_tell_its_column_from_the_dilution_of_a_light_of_unknown_strength() {
    // The gas shines by itself: half the column in twice the part of the beam looks the same.
    let scene = Scene {
        find: vec!["temperature", "column", "dilution"],
        dilution: 0.5,
        ..scene(2500.0, 2e11)
    };
    let fits = fits(
        "dilution",
        &scene,
        &scene,
        (&one_line(), &one_line()),
        300.0,
    );
    assert_flagged("one thin line and dilution", &fits, &["degenerate"]);
}

#[test]
fn no_gas_is_not_detected_and_has_an_upper_limit() {
    let nothing = scene(2500.0, 1.0);
    let fits = fits(
        "nothing",
        &nothing,
        &nothing,
        (&three_lines(), &three_lines()),
        50.0,
    );
    assert_flagged("no gas", &fits, &["not_detected"]);
}

#[test]
fn the_upper_limit_of_gas_of_known_temperature_is_three_sigma() {
    // With temperature and velocity known, the column is the only unknown of the gas, and the limit is sharp.
    let truth = Scene {
        find: vec!["column", "background_temperature"],
        ..scene(2500.0, 1.0)
    };
    let fits = fits(
        "limit",
        &truth,
        &truth,
        (&three_lines(), &three_lines()),
        50.0,
    );
    let with_limit = fits
        .iter()
        .filter(|fit| fit.upper.iter().any(|upper| upper.is_finite()))
        .count();
    assert!(with_limit >= 95, "{with_limit} of {DRAWS} with a limit");
}

#[test]
fn a_thick_line_is_saturated() {
    let scene = Scene {
        find: vec!["velocity", "column", "background_temperature"],
        ..scene(1500.0, 3e15)
    };
    let fits = fits(
        "saturated",
        &scene,
        &scene,
        (&one_line(), &one_line()),
        50.0,
    );
    assert_flagged("tau of a thousand", &fits, &["saturated"]);
}

#[test]
fn a_value_outside_its_bounds_ends_at_the_bound() {
    // The background is at 900 K less than the question's lowest.
    let truth = Scene {
        background_k: 900.0,
        find: vec!["background_temperature"],
        ..scene(600.0, 1e3)
    };
    let fits = fits(
        "bound",
        &truth,
        &truth,
        (&three_lines(), &three_lines()),
        50.0,
    );
    assert_flagged("outside its bounds", &fits, &["at_bound"]);
}

#[test]
fn lines_that_the_setup_does_not_know_make_a_poor_fit() {
    let mut more = three_lines();
    more.lines.push(line(498.7, 0.0, 2e7));
    let scene = scene(2500.0, 3e13);
    let fits = fits("poor", &scene, &scene, (&more, &three_lines()), 50.0);
    assert_flagged("an unknown line", &fits, &["poor_fit"]);
}

#[test]
fn a_spectrum_with_fewer_channels_than_unknowns_is_too_little() {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("degeneracy");
    let scene = scene(2500.0, 3e13);
    let (truth, question) = scene.write(&folder, "little", &[three_lines()], &wavelengths());
    let intensity = truth.predict();
    let uncertainty: Vec<f64> = intensity.iter().map(|value| value / 50.0).collect();
    let problem = question.problem();
    for usable in 0..=3 {
        let mask: Vec<bool> = (0..intensity.len())
            .map(|channel| channel >= usable)
            .collect();
        let data = Observation {
            intensity: &intensity,
            uncertainty: Some(&uncertainty),
            mask: &mask,
        };
        let fit = problem.fit(&mut problem.workspace(), &data, None);
        assert!(
            fit.flags.names().contains(&"too_little_data"),
            "{usable} channels: {:?}",
            fit.flags.names()
        );
        assert!(
            fit.values.iter().all(|value| value.is_nan()),
            "{usable} channels: {:?}",
            fit.values
        );
    }
}
