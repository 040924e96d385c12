//! `backlit identify`.
#![allow(clippy::unwrap_used)]

mod program;

use program::Desk;
use serde_json::Value;

/// Sodium and potassium before a hot source, from 400 to 800 nm.
const ALKALI: &str = r#"[spectrum]
medium = "vacuum"
intensity_unit = "W m-2 sr-1 nm-1"

[instrument]
fwhm_nm = 0.3

[background]
temperature_K = 5800

[[cloud]]
temperature_K = 1800
velocity_km_s = 60
turbulence_km_s = 5
[cloud.column_cm2]
"Na I" = 3e13
"K I" = 3e13
"Ca I" = 3e13
"Cr I" = 1e14
"#;

fn desk() -> Desk {
    let desk = Desk::new();
    desk.write("s.toml", ALKALI);
    let range = ["--range", "390..800", "--step", "0.1", "--noise", "200"];
    desk.run(&[&["predict", "s.toml", "-o", "p.csv"][..], &range].concat())
        .done();
    desk
}

fn verdict<'a>(document: &'a Value, name: &str) -> &'a Value {
    document["species"]
        .as_array()
        .unwrap()
        .iter()
        .find(|species| species["name"] == name)
        .unwrap()
}

#[test]
fn what_predict_put_there_is_present_and_every_candidate_is_listed() {
    let desk = desk();
    let document = desk
        .run(&["identify", "p.csv", "--setup", "s.toml", "--json"])
        .json();
    assert_eq!(document["schema"], "backlit-identify/1");
    for name in ["Na I", "Cr I"] {
        let found = verdict(&document, name);
        assert_eq!(found["verdict"], "present", "{found:#}");
        assert_eq!(found["seen_in"], "absorption");
        // A fifth of the FWHM at 500 nm is 36 km/s.
        assert!((found["velocity_km_s"].as_f64().unwrap() - 60.0).abs() < 36.0);
        assert!(found["false_alarm_rate"].as_f64().unwrap() < 0.01);
        assert!(found["lines_seen"].as_u64().unwrap() >= 2);
    }
    let truth = ["Na I", "K I", "Ca I", "Cr I"];
    for found in document["species"].as_array().unwrap() {
        let name = found["name"].as_str().unwrap();
        assert!(
            found["verdict"] != "present" || truth.contains(&name),
            "{name} is not there: {found:#}"
        );
    }
    let candidates = desk.run(&["species", "--json"]).json();
    assert_eq!(
        document["species"].as_array().unwrap().len(),
        candidates["species"].as_array().unwrap().len()
    );
    let absent = verdict(&document, "Ne I");
    assert!(absent["verdict"] == "absent" || absent["verdict"] == "untestable");
}

#[test]
fn one_line_is_never_more_than_possible_unless_it_is_expected() {
    let desk = Desk::new();
    desk.write(
        "s.toml",
        ALKALI
            .replace("\"Na I\" = 3e13\n", "")
            .replace("\"K I\" = 3e13\n", "")
            .replace("\"Cr I\" = 1e14\n", ""),
    );
    // Of neutral calcium only the resonance line at 422.8 nm lies here.
    let range = ["--range", "400..425", "--step", "0.1", "--noise", "200"];
    desk.run(&[&["predict", "s.toml", "-o", "p.csv"][..], &range].concat())
        .done();
    let ask = |more: &[&str]| {
        let arguments = [
            "identify",
            "p.csv",
            "--setup",
            "s.toml",
            "--among",
            "Ca I,Ne I",
            "--json",
        ];
        let document = desk.run(&[&arguments[..], more].concat()).json();
        verdict(&document, "Ca I")["verdict"].clone()
    };
    assert_ne!(ask(&[]), "present");
    assert_eq!(
        ask(&["--expect", "Ca I", "--velocity", "40..80"]),
        "present"
    );
}

#[test]
fn the_picture_shows_claimed_species_and_is_not_overwritten() {
    let desk = desk();
    let arguments = ["identify", "p.csv", "--setup", "s.toml", "--plot", "p.svg"];
    let text = desk.run(&arguments).done();
    assert!(text.contains("Na I") && text.contains("present"), "{text}");
    let picture = desk.read("p.svg");
    assert!(picture.starts_with("<svg") && picture.contains(">Na I<"));
    desk.run(&arguments).refused(&["p.svg", "exists already"]);
    desk.run(&[&arguments[..], &["--overwrite"]].concat())
        .done();
}

#[test]
fn too_short_a_spectrum_and_a_wrong_range_are_refused() {
    let desk = Desk::laid();
    desk.run(&["identify", "a.csv"]).refused(&["a.csv", "41"]);
    let outcome = desk.run(&["identify", "a.csv", "--velocity", "5..-5"]);
    assert_eq!(outcome.code, 2);
    assert!(
        outcome.stderr.contains("rising velocities"),
        "{}",
        outcome.stderr
    );
    let outcome = desk.run(&["identify", "a.csv", "--plot", "p.png"]);
    assert_eq!(outcome.code, 2);
    assert!(
        outcome.stderr.contains("ends in .svg"),
        "{}",
        outcome.stderr
    );
    desk.run(&["identify", "a.csv", "--among", "Nq I"])
        .refused(&["Nq I"]);
}
