//! What a setup becomes, and the words of every refusal.

use std::path::Path;

use backlit_units::{IntensityUnit, Medium};

use super::{Excitation, Instrument, Light, Setup, Value};

const WHOLE: &str = r#"[spectrum]
medium = "air"
intensity_unit = "W m-2 sr-1 nm-1"
scale = 2
use_nm = [[588.0, 591], [766, 771.0]]

[instrument]
fwhm_nm = 0.1

[background]
light = "blackbody"
temperature_K = { find = [3_000, 9000.0] }
dilution = 0.5
shape_terms = 2

[[cloud]]
temperature_K = { find = [500, 4000], start = 1500 }
velocity_km_s = { find = [-300, 300] }
turbulence_km_s = 2.0
doppler_temperature_K = 300
[cloud.column_cm2]
"Na I" = { find = [1e9, 1e16] }
"K I" = 3e11
"Ca II" = 1

[[cloud]]
temperature_K = 0x64
excitation = "split"
excitation_temperature_K = { find = [500, 900] }
column_cm2 = { "Xx I" = 5 }

[[species]]
name = "Xx I"
mass_u = 22.99
lines = "xx-lines.csv"
levels = "/abs/xx-levels.csv"

[fit]
model_tolerance = 1e-5
robust = true
"#;

#[test]
fn every_key_of_the_contract_is_read_in_its_own_unit() {
    let setup = Setup::parse(WHOLE, "folder/setup.toml").unwrap();
    let find = |low, high| Value::Find {
        low,
        high,
        start: None,
    };
    assert_eq!(setup.spectrum.medium, Some(Medium::Air));
    assert_eq!(
        setup.spectrum.intensity_unit.as_deref(),
        Some("W m-2 sr-1 nm-1")
    );
    assert_eq!(setup.spectrum.scale, Value::Known(2.0));
    assert_eq!(
        setup.spectrum.use_nm,
        Some(vec![(588.0, 591.0), (766.0, 771.0)])
    );
    assert_eq!(setup.instrument, Instrument::FwhmNm(0.1));
    assert_eq!(setup.background.light, Light::Blackbody);
    assert_eq!(setup.background.temperature_k, find(3000.0, 9000.0));
    assert_eq!(setup.background.dilution, Value::Known(0.5));
    assert_eq!(setup.background.shape_terms, 2);
    let [first, second] = setup.clouds.as_slice() else {
        panic!("two clouds");
    };
    assert_eq!(
        first.temperature_k,
        Value::Find {
            low: 500.0,
            high: 4000.0,
            start: Some(1500.0)
        }
    );
    assert_eq!(first.velocity_km_s, find(-300.0, 300.0));
    assert_eq!(first.turbulence_km_s, Value::Known(2.0));
    assert_eq!(first.doppler_temperature_k, Some(Value::Known(300.0)));
    assert_eq!(first.excitation, Excitation::Thermal);
    let order: Vec<&str> = first.columns.iter().map(|(n, _)| n.as_str()).collect();
    assert_eq!(order, ["Na I", "K I", "Ca II"], "the order of the file");
    assert_eq!(first.columns[0].1, find(1e9, 1e16));
    assert_eq!(first.column_lines, [22, 23, 24]);
    assert_eq!(second.temperature_k, Value::Known(100.0));
    assert_eq!(second.velocity_km_s, Value::Known(0.0));
    assert_eq!(
        second.excitation,
        Excitation::Split {
            excitation_temperature_k: find(500.0, 900.0)
        }
    );
    assert_eq!(setup.species[0].lines, Path::new("folder/xx-lines.csv"));
    assert_eq!(setup.species[0].levels, Path::new("/abs/xx-levels.csv"));
    assert_eq!(setup.tolerance, 1e-5);
    assert!(setup.fit.robust && !setup.fit.scale_noise);
    assert_eq!(setup.text, WHOLE);
}

#[test]
fn what_the_file_leaves_out_has_a_harmless_value() {
    let setup = Setup::parse("[background]\ntemperature_K = 300\n", "s.toml").unwrap();
    assert_eq!(setup.spectrum.scale, Value::Known(1.0));
    assert_eq!(setup.spectrum.use_nm, None);
    assert_eq!(setup.instrument, Instrument::None);
    assert_eq!(setup.background.dilution, Value::Known(1.0));
    assert_eq!(setup.background.shape_terms, 0);
    assert_eq!(setup.tolerance, 1e-5);
    assert!(!setup.fit.robust);
}

#[test]
fn a_width_of_zero_is_no_instrument() {
    let text = "[background]\ntemperature_K = 300\n[instrument]\nfwhm_nm = 0\n";
    let setup = Setup::parse(text, "s.toml").unwrap();
    assert_eq!(setup.instrument, Instrument::None);
}

/// `WHOLE` with one line replaced, and what the refusal must say.
const REFUSALS: &[(&str, &str, &[&str])] = &[
    // Keys
    (
        "medium = \"air\"",
        "mediun = \"air\"",
        &[
            "unknown key `spectrum.mediun`",
            "setup.toml line 2",
            "did you mean `medium`?",
        ],
    ),
    (
        "fwhm_nm = 0.1",
        "fwhm = 0.1",
        &[
            "unknown key `instrument.fwhm`",
            "line 8",
            "did you mean `fwhm_nm`?",
        ],
    ),
    (
        "fwhm_nm = 0.1",
        "dilution = 0.1",
        &[
            "unknown key `instrument.dilution`",
            "belongs in [background]",
        ],
    ),
    (
        "fwhm_nm = 0.1",
        "pressure = 0.1",
        &["unknown key", "known here: fwhm_nm, resolving_power"],
    ),
    (
        "[fit]",
        "[fitt]",
        &["unknown key `fitt`", "did you mean `fit`?"],
    ),
    (
        "turbulence_km_s = 2.0",
        "turbulence_kms = 2.0",
        &["`cloud.turbulence_kms`", "did you mean `turbulence_km_s`?"],
    ),
    (
        "start = 1500",
        "begin = 1500",
        &[
            "unknown key `cloud.temperature_K.begin`",
            "known here: find, start",
        ],
    ),
    (
        "mass_u = 22.99",
        "",
        &[
            "key `species.mass_u` is missing",
            "hint: for example mass_u",
        ],
    ),
    // Kinds
    (
        "scale = 2",
        "scale = \"two\"",
        &[
            "found the text \"two\"",
            "a number or { find = [low, high] }",
            "`spectrum.scale`",
        ],
    ),
    (
        "scale = 2",
        "scale = { find = [1] }",
        &["found a list of 1", "two numbers after `find`"],
    ),
    (
        "scale = 2",
        "scale = { start = 3 }",
        &["found a table", "{ find = [low, high] }"],
    ),
    (
        "robust = true",
        "robust = \"yes\"",
        &["found the text \"yes\" where true or false"],
    ),
    (
        "[[species]]",
        "[species]",
        &[
            "found a table where a repeated section is expected",
            "[[species]], with two brackets",
        ],
    ),
    (
        "use_nm = [[588.0, 591], [766, 771.0]]",
        "use_nm = [588.0, 591]",
        &["a list of ranges", "use_nm = [[588.0, 591.0]"],
    ),
    // Ranges of numbers
    (
        "temperature_K = 0x64",
        "temperature_K = 0",
        &[
            "temperature 0 K is outside 0 K < temperature <= 1e9 K",
            "(key `cloud.temperature_K`, folder/setup.toml line 27)",
            "293.15",
        ],
    ),
    (
        "temperature_K = 0x64",
        "temperature_K = 2e9",
        &["temperature 2000000000 K is outside"],
    ),
    (
        "temperature_K = 0x64",
        "temperature_K = nan",
        &["temperature NaN K is outside"],
    ),
    (
        "temperature_K = 0x64",
        "temperature_K = inf",
        &["temperature inf K is outside"],
    ),
    (
        "find = [500, 4000], start = 1500",
        "find = [-5, 4000]",
        &["temperature -5 K is outside"],
    ),
    (
        "find = [500, 4000], start = 1500",
        "find = [4000, 500]",
        &[
            "temperature bounds [4000, 500] K do not rise",
            "find = [500, 4000]",
        ],
    ),
    (
        "find = [500, 4000], start = 1500",
        "find = [500, 500]",
        &["do not rise"],
    ),
    (
        "start = 1500",
        "start = 5000",
        &["temperature start 5000 K is outside the bounds 500..=4000"],
    ),
    ("start = 1500", "start = nan", &["start NaN K is outside"]),
    (
        "turbulence_km_s = 2.0",
        "turbulence_km_s = -2.0",
        &["turbulence -2 km/s is outside"],
    ),
    (
        "velocity_km_s = { find = [-300, 300] }",
        "velocity_km_s = -299792.458",
        &["velocity -299792.458 km/s is outside", "speed of light"],
    ),
    (
        "velocity_km_s = { find = [-300, 300] }",
        "velocity_km_s = { find = [-300, 4e5] }",
        &["velocity 400000 km/s is outside"],
    ),
    (
        "dilution = 0.5",
        "dilution = 1.5",
        &["dilution 1.5 is outside 0..=1"],
    ),
    (
        "\"K I\" = 3e11",
        "\"K I\" = 0",
        &[
            "column density 0 cm-2 is outside",
            "`cloud.column_cm2.\"K I\"`",
            "line 23",
        ],
    ),
    (
        "\"K I\" = 3e11",
        "\"K I\" = -3e11",
        &["column density -300000000000 cm-2 is outside"],
    ),
    ("scale = 2", "scale = 0", &["scale 0 is outside above 0"]),
    (
        "fwhm_nm = 0.1",
        "fwhm_nm = -0.1",
        &["instrument width -0.1 nm is outside"],
    ),
    (
        "fwhm_nm = 0.1",
        "resolving_power = 0",
        &["resolving power 0 is outside above 0"],
    ),
    (
        "shape_terms = 2",
        "shape_terms = 2.5",
        &["number of shape terms 2.5 is outside"],
    ),
    (
        "shape_terms = 2",
        "shape_terms = -1",
        &["number of shape terms -1 is outside"],
    ),
    (
        "shape_terms = 2",
        "shape_terms = 21",
        &["number of shape terms 21 is outside"],
    ),
    ("mass_u = 22.99", "mass_u = 0", &["mass 0 u is outside"]),
    (
        "model_tolerance = 1e-5",
        "model_tolerance = 1",
        &["model tolerance 1 is outside 1e-9..=1e-2"],
    ),
    (
        "[766, 771.0]",
        "[771, 766]",
        &["range 2 [771, 766] nm does not rise", "line 5"],
    ),
    (
        "[766, 771.0]",
        "[-1, 766]",
        &["range 2 [-1, 766] nm does not rise"],
    ),
    (
        "use_nm = [[588.0, 591], [766, 771.0]]",
        "use_nm = []",
        &["the list is empty", "leave `use_nm` out"],
    ),
    (
        "column_cm2 = { \"Xx I\" = 5 }",
        "column_cm2 = {}",
        &["the list is empty", "at least one species"],
    ),
    (
        "column_cm2 = { \"Xx I\" = 5 }",
        "",
        &["key `cloud.column_cm2` is missing"],
    ),
    // Words
    (
        "medium = \"air\"",
        "medium = \"Air\"",
        &[
            "unknown word \"Air\", expected \"vacuum\" or \"air\"",
            "did you mean \"air\"?",
        ],
    ),
    (
        "medium = \"air\"",
        "medium = \"water\"",
        &["unknown word \"water\""],
    ),
    (
        "light = \"blackbody\"",
        "light = \"black body\"",
        &["unknown word \"black body\"", "did you mean \"blackbody\"?"],
    ),
    (
        "excitation = \"split\"",
        "excitation = \"splitt\"",
        &["did you mean \"split\"?"],
    ),
    (
        "excitation = \"split\"",
        "excitation = \"electron_impact\"",
        &[
            "excitation by electron impact is not available in this version",
            "line 28",
        ],
    ),
    (
        "W m-2 sr-1 nm-1",
        "furlong m-2",
        &[
            "unit \"furlong m-2\" is not understood",
            "`spectrum.intensity_unit`",
            "line 3",
        ],
    ),
    // Keys that do not go together
    (
        "fwhm_nm = 0.1",
        "fwhm_nm = 0.1\nresolving_power = 10",
        &[
            "`instrument.resolving_power` has no meaning beside `fwhm_nm`",
            "line 9",
        ],
    ),
    (
        "excitation = \"split\"",
        "excitation = \"thermal\"",
        &[
            "`cloud.excitation_temperature_K` has no meaning beside excitation = \"thermal\"",
            "write excitation = \"split\"",
        ],
    ),
    (
        "excitation_temperature_K = { find = [500, 900] }",
        "",
        &["key `cloud.excitation_temperature_K` is missing"],
    ),
    (
        "light = \"blackbody\"",
        "light = \"dark\"",
        &["`background.temperature_K` has no meaning beside light = \"dark\""],
    ),
    (
        "light = \"blackbody\"",
        "light = \"measured\"",
        &["`background.temperature_K` has no meaning beside light = \"measured\""],
    ),
    (
        "light = \"blackbody\"",
        "file = \"x.csv\"",
        &["`background.file` has no meaning", "light = \"measured\""],
    ),
    (
        "temperature_K = { find = [3_000, 9000.0] }",
        "",
        &["key `background.temperature_K` is missing"],
    ),
    (
        "W m-2 sr-1 nm-1",
        "relative",
        &[
            "the intensity is relative but the scale is fixed",
            "`spectrum.scale`",
            "line 4",
            "find = [1e-3, 1e3]",
        ],
    ),
    (
        "[fit]",
        "[[species]]\nname = \"Xx I\"\nmass_u = 1\nlines = \"a\"\nlevels = \"b\"\n[fit]",
        &["species \"Xx I\" is defined twice, first on line"],
    ),
    // Not TOML at all
    (
        "scale = 2",
        "scale = 2 2",
        &["is not valid TOML", "line 4", "hint:"],
    ),
    (
        "\"K I\" = 3e11",
        "K I = 3e11",
        &[
            "is not valid TOML",
            "line 23",
            "names with a blank stand in quotes",
        ],
    ),
    (
        "scale = 2",
        "medium = \"air\"",
        &["is not valid TOML", "duplicate key", "may stand only once"],
    ),
];

#[test]
fn every_refusal_names_file_line_key_what_was_found_and_a_hint() {
    for (from, to, parts) in REFUSALS {
        assert!(WHOLE.contains(from), "the text has {from}");
        let text = WHOLE.replacen(from, to, 1);
        let message = match Setup::parse(&text, "folder/setup.toml") {
            Ok(_) => panic!("{to:?} was accepted"),
            Err(error) => error.to_string(),
        };
        for part in parts.iter().chain(&["folder/setup.toml line ", "hint: "]) {
            assert!(
                message.contains(part),
                "{to:?} gave\n{message}\nwithout\n{part}"
            );
        }
        assert_eq!(
            message.lines().count(),
            2,
            "a message is one line and a hint: {message}"
        );
    }
}

#[test]
fn a_setup_without_light_and_gas_is_refused() {
    let error = Setup::parse("[background]\nlight = \"dark\"\n", "s.toml").unwrap_err();
    assert!(error.to_string().contains("neither light nor gas"));
    let error = Setup::parse("", "s.toml").unwrap_err();
    assert!(
        error.to_string().contains("key `background` is missing"),
        "{error}"
    );
    let error = Setup::parse("[background]\nlight = \"measured\"\n", "s.toml").unwrap_err();
    assert!(
        error
            .to_string()
            .contains("key `background.file` is missing")
    );
}

#[test]
fn a_measured_light_is_neither_diluted_nor_bent() {
    for key in ["dilution = 0.5", "shape_terms = 2"] {
        let text = format!("[background]\nlight = \"measured\"\nfile = \"x.csv\"\n{key}\n");
        let error = Setup::parse(&text, "s.toml").unwrap_err().to_string();
        assert!(
            error.contains("has no meaning beside light = \"measured\"")
                && error.contains("line 4"),
            "{error}"
        );
    }
}

#[test]
fn a_relative_unit_of_the_data_needs_an_open_scale_too() {
    let relative: IntensityUnit = "counts".parse().unwrap();
    let fixed = Setup::parse("[background]\ntemperature_K = 300\n", "s.toml").unwrap();
    let error = fixed.check_calibration(&relative).unwrap_err().to_string();
    assert!(error.contains("the intensity is relative but the scale is fixed"));
    let open = "[background]\ntemperature_K = 300\n[spectrum]\nscale = { find = [1, 2] }\n";
    let open = Setup::parse(open, "s.toml").unwrap();
    assert!(open.check_calibration(&relative).is_ok());
}

#[test]
fn a_file_that_cannot_be_read_is_named_with_the_systems_reason() {
    let error = Setup::read("no-such-folder/s.toml")
        .unwrap_err()
        .to_string();
    assert!(error.contains("no-such-folder/s.toml cannot be read"));
    assert!(error.contains("hint: check the path"));
}

#[test]
fn a_line_list_of_others_can_be_named_and_chosen_from() {
    let own = |keys: &str| {
        Setup::parse(
            &format!(
                "[[species]]\nname = \"Xx\"\nmass_u = 28\nlines = \"a\"\nlevels = \"b\"\n{keys}\n[background]\nlight = \"dark\"\n[[cloud]]\ntemperature_K = 100\n[cloud.column_cm2]\n\"Xx\" = 1e15\n"
            ),
            Path::new("setup.toml"),
        )
    };
    let choice = own("").unwrap().species[0].choice;
    assert_eq!(choice, backlit_species::line_list::Choice::default());
    let choice = own("format = \"record-160\"\nmolecule = 5\nisotopologue = 2\n")
        .unwrap()
        .species[0]
        .choice;
    assert_eq!(
        choice.format,
        Some(backlit_species::line_list::Format::Record160)
    );
    assert_eq!((choice.molecule, choice.isotopologue), (Some(5), Some(2)));
    for bad in [
        "format = \"milimetre\"",
        "molecule = 0",
        "isotopologue = 1.5",
    ] {
        assert!(own(bad).unwrap_err().to_string().contains("hint:"), "{bad}");
    }
}
