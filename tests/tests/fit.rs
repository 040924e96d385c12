//! `backlit fit`.
#![allow(clippy::unwrap_used)]

mod program;

use program::{Desk, SODIUM};
use serde_json::Value;

/// A folder with `s.toml`, its values left open without starts in `open.toml`, and its spectrum in `p.csv`.
fn desk(noise: &[&str]) -> Desk {
    let desk = Desk::laid();
    let open = SODIUM
        .replace(", start = 10 ", " ")
        .replace(", start = 3 ", " ")
        .replace(", start = 2e12 ", " ");
    assert!(!open.contains("start"));
    desk.write("open.toml", open);
    let mut arguments = vec!["predict", "s.toml", "-o", "p.csv"];
    arguments.extend(noise);
    desk.run(&arguments).done();
    desk
}

const TRUTH: [(&str, f64); 3] = [
    ("cloud1_velocity", 10.0),
    ("cloud1_turbulence", 3.0),
    // log10(2e12)
    ("cloud1_log10_column_Na_I", 12.301_029_995_663_981),
];

#[test]
fn what_predict_made_fit_finds_again_without_a_start() {
    let desk = desk(&["--noise", "100"]);
    let document = desk
        .run(&["fit", "p.csv", "--setup", "open.toml", "--json"])
        .json();
    assert_eq!(document["schema"], "backlit-fit/1");
    for (name, truth) in TRUTH {
        let value = document["values"][name].as_f64().unwrap();
        let sigma = document["sigma"][name].as_f64().unwrap();
        assert!(
            sigma > 0.0 && (value - truth).abs() < 5.0 * sigma,
            "{name} {value} +- {sigma}"
        );
    }
    assert_eq!(document["units"]["cloud1_velocity"], "km s-1");
    assert_eq!(document["units"]["cloud1_log10_column_Na_I"], "log10(cm-2)");
    assert_eq!(document["flags"], Value::Array(vec![]));
    let chi2 = document["chi2_reduced"].as_f64().unwrap();
    assert!((0.8..1.2).contains(&chi2), "{chi2}");
}

#[test]
fn the_table_names_every_open_value_with_its_unit() {
    let desk = desk(&["--noise", "100"]);
    let outcome = desk.run(&["fit", "p.csv", "--setup", "open.toml"]);
    let text = outcome.done();
    for (name, unit) in [
        ("cloud1_velocity", "km s-1"),
        ("cloud1_turbulence", "km s-1"),
        ("cloud1_log10_column_Na_I", "log10(cm-2)"),
    ] {
        let row = text.lines().find(|line| line.starts_with(name)).unwrap();
        assert!(row.trim_end().ends_with(unit), "{row}");
    }
    assert!(text.contains("reduced chi-square "));
    assert!(text.ends_with("no flags\n"), "{text}");
}

#[test]
fn the_file_of_the_answer_is_the_document_of_json() {
    let desk = desk(&["--noise", "100"]);
    let arguments = [
        "fit",
        "p.csv",
        "--setup",
        "open.toml",
        "--json",
        "-o",
        "o.json",
    ];
    let text = desk.run(&arguments).done();
    assert_eq!(desk.read("o.json"), text);
    desk.run(&arguments)
        .refused(&["o.json exists already", "--overwrite"]);
    desk.run(&[&arguments[..], &["--overwrite"]].concat())
        .done();
}

#[test]
fn a_spectrum_without_uncertainty_is_fitted_and_the_result_says_where_the_noise_comes_from() {
    let desk = desk(&["--noise", "100"]);
    let without: String = desk
        .read("p.csv")
        .lines()
        .map(|line| match line.matches(',').count() {
            2 => format!("{}\n", line.rsplit_once(',').unwrap().0),
            _ => format!("{line}\n"),
        })
        .collect();
    desk.write("q.csv", without);
    let outcome = desk.run(&["fit", "q.csv", "--setup", "open.toml", "--json"]);
    assert!(outcome.stderr.contains("noise"), "{}", outcome.stderr);
    let document = outcome.json();
    let messages = document["messages"].to_string();
    assert!(messages.contains("noise"), "{messages}");
    let value = document["values"]["cloud1_velocity"].as_f64().unwrap();
    let sigma = document["sigma"]["cloud1_velocity"].as_f64().unwrap();
    assert!((value - 10.0).abs() < 5.0 * sigma);
}

#[test]
fn quiet_keeps_standard_error_empty() {
    let desk = desk(&["--noise", "100"]);
    desk.write(
        "bare.toml",
        desk.read("open.toml").replace("medium = \"vacuum\"\n", ""),
    );
    desk.write(
        "q.csv",
        desk.read("p.csv").replace("# medium: vacuum\n", ""),
    );
    let loud = desk.run(&["fit", "q.csv", "--setup", "bare.toml"]);
    assert!(
        loud.stderr.contains("note: q.csv does not say its medium"),
        "{}",
        loud.stderr
    );
    let quiet = desk.run(&["fit", "q.csv", "--setup", "bare.toml", "--quiet"]);
    assert_eq!(quiet.stderr, "");
    assert_eq!(quiet.done(), loud.done());
}

#[test]
fn gas_that_is_not_there_gets_an_upper_limit_and_its_flag_in_words() {
    let desk = desk(&[]);
    let absent = SODIUM
        .replace("{ find = [-100, 100], start = 10 }", "0")
        .replace("{ find = [0.5, 20], start = 3 }", "3");
    desk.write("absent.toml", absent.replace("start = 2e12", "start = 1e9"));
    desk.run(&["predict", "absent.toml", "--noise", "50", "-o", "n.csv"])
        .done();
    let outcome = desk.run(&["fit", "n.csv", "--setup", "absent.toml", "--json"]);
    let document = outcome.json();
    let flags = document["flags"].as_array().unwrap();
    assert!(
        flags.iter().any(|flag| flag == "not_detected"),
        "{document}"
    );
    let upper = document["upper"]["cloud1_log10_column_Na_I"]
        .as_f64()
        .unwrap();
    assert!((9.0..12.3).contains(&upper), "{upper}");
    let text = desk.run(&["fit", "n.csv", "--setup", "absent.toml"]).done();
    assert!(text.contains("flag not_detected: "), "{text}");
    assert!(text.contains(" at 3 sigma)"), "{text}");
}

#[test]
fn falling_wavelengths_give_the_same_answer() {
    let desk = desk(&["--noise", "100"]);
    let text = desk.read("p.csv");
    let (head, rows): (Vec<&str>, Vec<&str>) =
        text.lines().partition(|line| line.starts_with(['#', 'w']));
    let falling: Vec<&str> = rows.into_iter().rev().collect();
    desk.write(
        "f.csv",
        format!("{}\n{}\n", head.join("\n"), falling.join("\n")),
    );
    let fit = |name: &str| {
        let mut document = desk
            .run(&["fit", name, "--setup", "open.toml", "--json"])
            .json();
        document["spectrum"] = Value::Null;
        document
    };
    assert_eq!(fit("p.csv"), fit("f.csv"));
}

#[test]
fn a_measured_background_takes_the_place_of_the_black_body() {
    let desk = desk(&[]);
    let text = desk.read("open.toml").replace(
        "temperature_K = 5800",
        "light = \"measured\"\nfile = \"bare.csv\"",
    );
    desk.write("measured.toml", text);
    desk.write(
        "bare.toml",
        "[spectrum]\nmedium = \"vacuum\"\nuse_nm = [[588.0, 591.0]]\n[background]\ntemperature_K = 5800\n",
    );
    // The background reaches a little farther than the data and has a grid of its own.
    let bare = [
        "predict",
        "bare.toml",
        "--range",
        "587..592",
        "--step",
        "0.1",
        "-o",
        "bare.csv",
    ];
    desk.run(&bare).done();
    desk.run(&["predict", "s.toml", "--noise", "100", "-o", "n.csv"])
        .done();
    let document = desk
        .run(&["fit", "n.csv", "--setup", "measured.toml", "--json"])
        .json();
    for (name, truth) in TRUTH {
        let value = document["values"][name].as_f64().unwrap();
        let sigma = document["sigma"][name].as_f64().unwrap();
        assert!(
            (value - truth).abs() < 5.0 * sigma,
            "{name} {value} +- {sigma}"
        );
    }
    let short = [
        "predict",
        "bare.toml",
        "--range",
        "589..592",
        "-o",
        "bare.csv",
        "--overwrite",
    ];
    desk.run(&short).done();
    desk.run(&["fit", "n.csv", "--setup", "measured.toml"])
        .refused(&["bare.csv covers 589.000..592.000 nm", "588.000..591.000 nm"]);
}

#[test]
fn intervals_are_walked_out_on_demand_and_match_sigma_where_that_is_valid() {
    let desk = desk(&["--noise", "400"]);
    let arguments = ["fit", "p.csv", "--setup", "open.toml", "--json"];
    let plain = desk.run(&arguments).json();
    assert_eq!(plain["intervals"], serde_json::json!({}));
    let document = desk
        .run(&[&arguments[..], &["--intervals"]].concat())
        .json();
    for (name, _) in TRUTH {
        let number = |field: &str| document[field][name].as_f64().unwrap();
        let interval = &document["intervals"][name];
        assert_eq!(interval["level"], 0.683);
        let (low, high) = (
            interval["low"].as_f64().unwrap(),
            interval["high"].as_f64().unwrap(),
        );
        let (value, sigma) = (number("values"), number("sigma"));
        // A fifth: the curvature of the valley over one standard deviation.
        for reach in [value - low, high - value] {
            assert!((reach / sigma - 1.0).abs() < 0.2, "{name}: {reach} {sigma}");
        }
    }
    let text = desk
        .run(&["fit", "p.csv", "--setup", "open.toml", "--intervals"])
        .done();
    assert!(text.contains("interval of 68.3 %"), "{text}");
}

#[test]
fn an_opaque_line_gets_an_interval_unasked() {
    let desk = desk(&[]);
    desk.write(
        "thick.toml",
        desk.read("s.toml").replace("start = 2e12", "start = 3e15"),
    );
    desk.run(&["predict", "thick.toml", "--noise", "30", "-o", "t.csv"])
        .done();
    let document = desk
        .run(&["fit", "t.csv", "--setup", "open.toml", "--json"])
        .json();
    assert!(
        document["flags"].as_array().is_some_and(|f| !f.is_empty()),
        "{document}"
    );
    let intervals = document["intervals"].as_object().unwrap();
    assert!(
        intervals.contains_key("cloud1_log10_column_Na_I"),
        "{document}"
    );
}

#[test]
fn the_number_of_clouds_comes_with_its_evidence() {
    let desk = desk(&["--noise", "100"]);
    let arguments = [
        "fit",
        "p.csv",
        "--setup",
        "open.toml",
        "--clouds",
        "up-to-2",
    ];
    let document = desk.run(&[&arguments[..], &["--json"]].concat()).json();
    let clouds = &document["clouds"];
    assert_eq!(clouds["chosen"], 1);
    let tried = clouds["tried"].as_array().unwrap();
    assert_eq!(tried.len(), 2);
    for one in tried {
        let number = |field: &str| one[field].as_f64().unwrap();
        let bic = number("chi2") + number("free_values") * number("channels").ln();
        assert!((number("bic") - bic).abs() < 1e-9 * bic);
    }
    let text = desk.run(&arguments).done();
    assert!(text.contains("<- chosen"), "{text}");
    let wrong = desk.run(&["fit", "p.csv", "--setup", "open.toml", "--clouds", "4"]);
    assert_eq!(wrong.code, 2);
    assert!(wrong.stderr.contains("up-to-3"), "{}", wrong.stderr);
    let cloud = &SODIUM[SODIUM.find("[[cloud]]").unwrap()..];
    desk.write("two.toml", format!("{SODIUM}{cloud}"));
    desk.run(&["fit", "p.csv", "--setup", "two.toml", "--clouds", "up-to-2"])
        .refused(&["2 clouds", "exactly 1 is needed", "two.toml"]);
}
