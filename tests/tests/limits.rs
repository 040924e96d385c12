//! `backlit limits`.
#![allow(clippy::unwrap_used)]

mod program;

use program::{Desk, SODIUM};

/// `s.toml` with a known temperature, and its spectrum with noise in `p.csv`.
fn desk() -> Desk {
    let desk = Desk::laid();
    let arguments = ["predict", "s.toml", "-o", "p.csv", "--noise", "100"];
    desk.run(&arguments).done();
    desk
}

#[test]
fn the_limit_of_sodium_is_in_its_stronger_line_and_scales_with_the_noise() {
    let desk = desk();
    let limit = |sigma: &str| {
        let document = desk
            .run(&[
                "limits", "--like", "p.csv", "--setup", "s.toml", "--sigma", sigma, "--json",
            ])
            .json();
        assert_eq!(document["schema"], "backlit-limits/1");
        let sodium = document["species"][0].clone();
        assert_eq!(sodium["name"], "Na I");
        // D2 in vacuum.
        assert!((sodium["line_vac_nm"].as_f64().unwrap() - 589.158).abs() < 0.001);
        assert_eq!(sodium["temperature_k"], 1500.0);
        sodium["column_per_cm2"].as_f64().unwrap()
    };
    // Thin lines are linear in the column.
    assert!((limit("6") / limit("3") - 2.0).abs() < 0.05);
}

#[test]
fn the_signal_to_noise_that_a_column_needs_is_asked_for() {
    let desk = desk();
    let arguments = ["limits", "--like", "p.csv", "--setup", "s.toml", "--json"];
    let document = desk.run(&arguments).json();
    let column = document["species"][0]["column_per_cm2"].as_f64().unwrap();
    let have = document["signal_to_noise"].as_f64().unwrap();
    assert!(document["species"][0]["signal_to_noise_needed"].is_null());
    let half = format!("{:e}", column / 2.0);
    let document = desk
        .run(&[&arguments[..], &["--column", &half]].concat())
        .json();
    let needed = document["species"][0]["signal_to_noise_needed"]
        .as_f64()
        .unwrap();
    assert!(
        (needed / (2.0 * have) - 1.0).abs() < 0.05,
        "{needed} {have}"
    );
}

#[test]
fn gas_as_hot_as_its_background_has_no_limit() {
    let desk = desk();
    desk.write(
        "hot.toml",
        SODIUM.replace("temperature_K = 1500", "temperature_K = 5800"),
    );
    let outcome = desk.run(&["limits", "--like", "p.csv", "--setup", "hot.toml", "--json"]);
    let document = outcome.json();
    assert!(document["species"][0]["column_per_cm2"].is_null());
    let text = desk
        .run(&[
            "limits", "--like", "p.csv", "--setup", "hot.toml", "--quiet",
        ])
        .done();
    assert!(text.contains("at no column"), "{text}");
}

#[test]
fn an_unknown_species_is_refused_with_a_hint() {
    desk()
        .run(&[
            "limits", "--like", "p.csv", "--setup", "s.toml", "--among", "Nq I",
        ])
        .refused(&["Nq I"]);
}
