//! The whole way from a setup file to a spectrum against brute_force.py, which shares nothing with it.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_reference_checks::case::{Case, Line, Species, channels};
use backlit_reference_checks::python;
use serde_json::{Value, json};
use std::fs;
use std::path::Path;

/// Largest difference of the program allowed, relative to the largest contrast between spectrum and continuum.
const ALLOWED: f64 = 1e-5;
/// The same for the plain reference model, by which the fast one is judged elsewhere.
const ALLOWED_PLAIN: f64 = 1e-7;
/// The answer of the brute-force model must itself be surer than that.
const ALLOWED_REFINEMENT: f64 = 1e-7;

const WAVELENGTH_NM: f64 = 500.0;
const LIGHT_KM_S: f64 = 299_792.458;

/// A setup with one cloud of "Xx I" at 1500 K in front of a 5000 K background that fills the beam.
fn one_cloud(instrument: &str, turbulence_km_s: f64, column_cm2: f64) -> String {
    format!(
        "[instrument]\n{instrument}\n[background]\nlight = \"blackbody\"\ntemperature_K = 5000\n\
         [[cloud]]\ntemperature_K = 1500\nvelocity_km_s = 0\nturbulence_km_s = {turbulence_km_s}\n\
         [cloud.column_cm2]\n\"Xx I\" = {column_cm2:e}\n"
    )
}

/// One line, b/FWHM from 0.01 to 10, central depth from 0.01 to 1e4, with and without damping wings.
fn widths_and_depths(folder: &Path) -> Vec<Case> {
    const B_KM_S: f64 = 2.0;
    let thermal_km_s = (2.0 * 8.314_462_618 * 1500.0 / 0.040_f64).sqrt() * 1e-3;
    let turbulence_km_s = (B_KM_S * B_KM_S - thermal_km_s * thermal_km_s).sqrt();
    let mut cases = Vec::new();
    for width in [0.01, 0.1, 1.0, 10.0] {
        for depth in [0.01, 1.0, 100.0, 1e4] {
            for gamma_per_s in [1e5, 1e9] {
                let fwhm_km_s = B_KM_S / width;
                let line = Line {
                    gamma_per_s: Some(gamma_per_s),
                    ..Line::at_nm(WAVELENGTH_NM)
                };
                let reach_nm =
                    f64::max(6.0 * fwhm_km_s, 12.0 * B_KM_S) / LIGHT_KM_S * WAVELENGTH_NM;
                cases.push(Case::write(
                    folder,
                    &format!("width-{width}-depth-{depth}-gamma-{gamma_per_s:e}"),
                    &one_cloud(
                        &format!("fwhm_nm = {}", fwhm_km_s / LIGHT_KM_S * WAVELENGTH_NM),
                        turbulence_km_s,
                        line.column_for_depth_cm2(depth, B_KM_S),
                    ),
                    &[Species::simple(vec![line])],
                    // Off the line's centre, so that no symmetry helps.
                    channels(
                        WAVELENGTH_NM - reach_nm,
                        WAVELENGTH_NM + 1.07 * reach_nm,
                        81,
                    ),
                ));
            }
        }
    }
    cases
}

/// Two lines closer than the instrument can tell, thin to saturated.
fn blends(folder: &Path) -> Vec<Case> {
    let mut cases = Vec::new();
    for apart_km_s in [0.5, 2.0, 6.0, 40.0] {
        for depth in [0.3, 30.0, 3000.0] {
            let first = Line {
                gamma_per_s: Some(2e8),
                ..Line::at_nm(WAVELENGTH_NM)
            };
            let second = Line {
                a_ki_per_s: 4e7,
                e_lower_per_cm: 300.0,
                g_upper: 2.0,
                ..Line::at_nm(WAVELENGTH_NM * (1.0 + apart_km_s / LIGHT_KM_S))
            };
            cases.push(Case::write(
                folder,
                &format!("blend-{apart_km_s}-{depth}"),
                &one_cloud(
                    "fwhm_nm = 0.03",
                    1.5,
                    first.column_for_depth_cm2(depth, 1.8),
                ),
                &[Species::simple(vec![first, second])],
                channels(WAVELENGTH_NM - 0.25, WAVELENGTH_NM + 0.32, 61),
            ));
        }
    }
    cases
}

/// What else a setup can say: several clouds, emission, motion, dilution, kinds of instrument and of light.
fn other_setups(folder: &Path) -> Vec<Case> {
    let rich = Species {
        name: "Xx I",
        mass_u: 23.0,
        lines: vec![
            Line {
                gamma_per_s: None,
                ..Line::at_nm(500.0)
            },
            Line {
                gamma_per_s: None,
                g_upper: 2.0,
                a_ki_per_s: 6e7,
                ..Line::at_nm(500.6)
            },
            Line {
                gamma_per_s: None,
                e_lower_per_cm: 9000.0,
                a_ki_per_s: 3e7,
                ..Line::at_nm(499.3)
            },
        ],
        levels: vec![(2.0, 0.0), (4.0, 9000.0), (6.0, 20_000.0)],
    };
    let heavy = Species {
        name: "Yy II",
        mass_u: 137.3,
        lines: vec![Line {
            gamma_per_s: Some(4e8),
            ..Line::at_nm(500.02)
        }],
        levels: vec![(2.0, 0.0), (10.0, 5000.0)],
    };
    // Far outside the channels, but so strong that its damping wing is in them.
    let distant = Species {
        name: "Zz I",
        mass_u: 9.0,
        lines: vec![Line {
            gamma_per_s: Some(3e8),
            ..Line::at_nm(506.0)
        }],
        levels: vec![(2.0, 0.0)],
    };
    let cloud = |temperature_k: f64, velocity_km_s: f64, columns: &str| {
        format!(
            "[[cloud]]\ntemperature_K = {temperature_k}\nvelocity_km_s = {velocity_km_s}\n\
             turbulence_km_s = 3\n[cloud.column_cm2]\n{columns}\n"
        )
    };
    let blackbody = "[background]\nlight = \"blackbody\"\ntemperature_K = 4800\n";
    let both = "\"Xx I\" = 3e13\n\"Yy II\" = 2e12";
    let cases = [
        (
            "absorption",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}{}",
                cloud(2500.0, 12.0, both)
            ),
        ),
        (
            "emission",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}{}",
                cloud(7000.0, -25.0, both)
            ),
        ),
        (
            "diluted",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}dilution = 0.3\n{}",
                cloud(4800.0, 90.0, both)
            ),
        ),
        (
            "two-clouds",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}{}{}",
                cloud(6500.0, 5.0, "\"Xx I\" = 1e15"),
                cloud(1500.0, -14.0, both)
            ),
        ),
        (
            "resolving-power",
            format!(
                "[instrument]\nresolving_power = 3000\n{blackbody}{}",
                cloud(2500.0, 150.0, both)
            ),
        ),
        (
            "no-instrument",
            format!("{blackbody}{}", cloud(2500.0, 0.0, both)),
        ),
        (
            "dark",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n[background]\nlight = \"dark\"\n{}",
                cloud(6000.0, 0.0, both)
            ),
        ),
        (
            "own-width",
            format!(
                "[instrument]\nfwhm_nm = 0.02\n{blackbody}[[cloud]]\ntemperature_K = 2500\n\
                 doppler_temperature_K = 300\nvelocity_km_s = -3\nturbulence_km_s = 0\n\
                 [cloud.column_cm2]\n{both}\n"
            ),
        ),
        (
            "wings-from-outside",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}{}",
                cloud(2500.0, 0.0, "\"Zz I\" = 1e19")
            ),
        ),
        (
            "fast",
            format!(
                "[instrument]\nfwhm_nm = 0.05\n{blackbody}{}",
                cloud(2500.0, -420.0, both)
            ),
        ),
    ];
    let species = [rich, heavy, distant];
    let mut cases: Vec<Case> = cases
        .iter()
        .map(|(name, setup)| {
            Case::write(folder, name, setup, &species, channels(498.9, 500.9, 101))
        })
        .collect();
    // Channels wider than the line-spread function and of unequal width.
    let mut uneven: Vec<f64> = (0..60)
        .map(|k| 498.9 + 2.0 * (f64::from(k) / 59.0).powf(1.4))
        .collect();
    uneven.dedup();
    cases.push(Case::write(
        folder,
        "uneven",
        &cases_text(&cases[0]),
        &species,
        uneven,
    ));
    cases
}

/// The sections of an existing case without its species, which `Case::write` adds again.
fn cases_text(case: &Case) -> String {
    let text = fs::read_to_string(&case.setup).unwrap();
    text.split("\n[[species]]").next().unwrap().to_owned()
}

/// Largest difference to the brute-force model, relative to the largest contrast.
fn difference(predicted: &[f64], answer: &Value) -> f64 {
    let numbers = |key: &str| -> Vec<f64> {
        answer[key]
            .as_array()
            .unwrap()
            .iter()
            .map(|number| number.as_f64().unwrap())
            .collect()
    };
    let (intensity, continuum) = (numbers("intensity"), numbers("continuum"));
    assert_eq!(predicted.len(), intensity.len());
    let largest = intensity
        .iter()
        .zip(&continuum)
        .map(|(i, c)| (i - c).abs())
        .fold(0.0, f64::max);
    assert!(largest > 0.0);
    // A NaN must not slip through `max`.
    assert!(predicted.iter().all(|value| value.is_finite()));
    predicted
        .iter()
        .zip(&intensity)
        .map(|(p, i)| (p - i).abs() / largest)
        .fold(0.0, f64::max)
}

/// What turns a case into a spectrum.
type Model = fn(&Case) -> Vec<f64>;

fn compare(subject: &str, make: fn(&Path) -> Vec<Case>) {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("brute-force-{subject}"));
    let cases = make(&folder);
    let jobs: Vec<Value> = cases
        .iter()
        .map(|case| json!({ "setup": case.setup, "wavelength_nm": case.wavelength_nm }))
        .collect();
    let (questions, answers) = (folder.join("jobs.json"), folder.join("answers.json"));
    fs::write(&questions, serde_json::to_string(&jobs).unwrap()).unwrap();
    if python::run("brute_force.py", &[&questions, &answers]).is_none() {
        return;
    }
    let answers: Vec<Value> = serde_json::from_str(&fs::read_to_string(&answers).unwrap()).unwrap();
    let models: [(&str, f64, Model); 2] = [
        ("plain model", ALLOWED_PLAIN, Case::observe_plainly),
        ("program", ALLOWED, Case::predict),
    ];
    for (model, allowed, spectrum) in models {
        let mut worst = (0.0, String::new());
        let mut failed = Vec::new();
        for (case, answer) in cases.iter().zip(&answers) {
            let name = case
                .setup
                .parent()
                .unwrap()
                .file_name()
                .unwrap()
                .to_string_lossy()
                .into_owned();
            let refinement = answer["refinement"].as_f64().unwrap();
            assert!(
                refinement < ALLOWED_REFINEMENT,
                "{name}: brute force is unsure by {refinement:.1e}"
            );
            let difference = difference(&spectrum(case), answer);
            if difference > allowed {
                failed.push(format!("{name}: {difference:.1e}"));
            }
            if difference > worst.0 {
                worst = (difference, name);
            }
        }
        println!(
            "{subject}, {model}: {} cases, worst {:.1e} ({})",
            cases.len(),
            worst.0,
            worst.1
        );
        assert!(
            failed.is_empty(),
            "{model} differs by more than {allowed:e} of the deepest line:\n{}",
            failed.join("\n")
        );
    }
}

#[test]
fn lines_of_any_width_and_depth_agree_with_brute_force() {
    compare("widths-and-depths", widths_and_depths);
}

#[test]
fn blends_agree_with_brute_force() {
    compare("blends", blends);
}

#[test]
fn every_kind_of_setup_agrees_with_brute_force() {
    compare("setups", other_setups);
}
