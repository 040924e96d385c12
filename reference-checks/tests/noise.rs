//! With noise: the scatter of the answers against the Cramér-Rao bound, their bias, and what their intervals cover.
//!
//! The noise is drawn on the plain reference model, not on the model that the fit itself uses.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::Observation;
use backlit_reference_checks::bound::cramer_rao;
use backlit_reference_checks::case::{Line, Species, channels};
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::scene::Scene;
use std::path::Path;

const DRAWS: usize = 1000;
const SIGNAL_TO_NOISE: f64 = 30.0;

/// Four lines from four levels: temperature and column each leave a mark of their own.
fn species() -> Species {
    let line = |nm: f64, energy: f64, a_ki_per_s: f64| Line {
        a_ki_per_s,
        e_lower_per_cm: energy,
        g_lower: 3.0,
        g_upper: 5.0,
        gamma_per_s: Some(1e8),
        ..Line::at_nm(nm)
    };
    Species {
        name: "Xx I",
        mass_u: 40.0,
        lines: vec![
            line(497.0, 0.0, 2e7),
            line(498.6, 4000.0, 6e7),
            line(500.9, 9000.0, 3e8),
            line(502.7, 14_000.0, 1.2e9),
        ],
        levels: vec![(3.0, 0.0), (3.0, 4000.0), (3.0, 9000.0), (3.0, 14_000.0)],
    }
}

/// Fits many noisy spectra of a scene and checks the statistics of every quantity.
fn check(name: &str, scene: &Scene, seed: u64) {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("noise");
    let wavelength_nm = channels(495.5, 504.5, 260);
    let species = [species()];
    let (truth, question) = scene.write(&folder, name, &species, &wavelength_nm);
    let exact = truth.observe_plainly();
    let noise = exact.iter().copied().fold(0.0, f64::max) / SIGNAL_TO_NOISE;

    let problem = question.problem();
    let names: Vec<String> = problem
        .quantities()
        .iter()
        .map(|quantity| quantity.name.clone())
        .collect();
    let derivatives: Vec<Vec<f64>> = names
        .iter()
        .map(|quantity| {
            let middle = scene.true_value(quantity);
            let step = if quantity.contains("log10") {
                1e-4
            } else {
                1e-4 * middle.abs().max(1.0)
            };
            let at = |value: f64| {
                let changed = scene.with(quantity, value);
                changed
                    .write(&folder, &format!("{name}-step"), &species, &wavelength_nm)
                    .0
                    .observe_plainly()
            };
            at(middle + step)
                .iter()
                .zip(at(middle - step))
                .map(|(up, down)| (up - down) / (2.0 * step))
                .collect()
        })
        .collect();
    let bound = cramer_rao(&derivatives, noise);

    let mut chance = Chance::new(seed);
    let uncertainty = vec![noise; exact.len()];
    let mask = vec![false; exact.len()];
    let mut workspace = problem.workspace();
    let mut fits = Vec::with_capacity(DRAWS);
    for _ in 0..DRAWS {
        let intensity: Vec<f64> = exact
            .iter()
            .map(|value| value + noise * chance.normal())
            .collect();
        let data = Observation {
            intensity: &intensity,
            uncertainty: Some(&uncertainty),
            mask: &mask,
        };
        fits.push(problem.fit(&mut workspace, &data, None));
    }
    let flagged = fits
        .iter()
        .filter(|fit| !fit.flags.names().is_empty())
        .count();
    let reasons = fits
        .iter()
        .find(|fit| !fit.flags.names().is_empty())
        .map(|fit| &fit.messages);
    println!("{name}: {flagged} of {DRAWS} flagged, for example {reasons:?}");
    assert!(
        flagged <= DRAWS / 50,
        "{name}: {flagged} of {DRAWS} good spectra are flagged (allowed: 2 %)"
    );

    let chi2 = fits.iter().map(|fit| fit.chi2_reduced).sum::<f64>() / DRAWS as f64;
    assert!(
        (chi2 - 1.0).abs() < 0.02,
        "{name}: mean reduced chi-square {chi2}"
    );
    for (k, quantity) in names.iter().enumerate() {
        let true_value = scene.true_value(quantity);
        let errors: Vec<f64> = fits.iter().map(|fit| fit.values[k] - true_value).collect();
        let bias = errors.iter().sum::<f64>() / DRAWS as f64;
        let scatter = (errors
            .iter()
            .map(|error| (error - bias).powi(2))
            .sum::<f64>()
            / (DRAWS - 1) as f64)
            .sqrt();
        let covered = fits
            .iter()
            .zip(&errors)
            .filter(|(fit, error)| error.abs() <= fit.sigma[k])
            .count() as f64
            / DRAWS as f64;
        println!(
            "{name}, {quantity}: scatter/bound {:.3}, bias {:+.3} sigma, 68 % intervals cover {covered:.3}",
            scatter / bound[k],
            bias / bound[k]
        );
        assert!(
            (scatter / bound[k] - 1.0).abs() <= 0.10,
            "{name}, {quantity}: {}",
            scatter / bound[k]
        );
        assert!(
            bias.abs() <= 0.15 * bound[k],
            "{name}, {quantity}: bias {} sigma",
            bias / bound[k]
        );
        assert!(
            (0.65..=0.72).contains(&covered),
            "{name}, {quantity}: intervals cover {covered}"
        );
    }
}

fn scene(gas_k: f64, background_k: f64, column_cm2: f64) -> Scene {
    Scene {
        fwhm_nm: 0.1,
        background_k,
        dilution: 1.0,
        gas_k,
        velocity_km_s: 23.0,
        turbulence_km_s: 6.0,
        columns_cm2: vec![("Xx I", column_cm2)],
        find: vec![
            "temperature",
            "velocity",
            "column",
            "background_temperature",
        ],
    }
}

#[test]
fn absorption_is_measured_as_well_as_the_noise_allows() {
    check("absorption", &scene(3000.0, 5200.0, 6e13), 11);
}

#[test]
fn emission_is_measured_as_well_as_the_noise_allows() {
    check("emission", &scene(6500.0, 4200.0, 2.5e13), 12);
}
