//! Input that cannot be used: exit code 2, one message with file, place, found, expected, hint; nothing half-written.
#![allow(clippy::unwrap_used)]

mod program;

use program::{Desk, SODIUM, SPECTRUM, attribute, write_cube, write_cube_of};

const UNIT: &str = "W m-2 sr-1 nm-1";

/// Fits a spectrum and expects a refusal with these parts; no file appears.
#[track_caller]
fn fit_refuses(spectrum: &str, parts: &[&str]) {
    let desk = Desk::laid();
    desk.write("a.csv", spectrum);
    let arguments = ["fit", "a.csv", "--setup", "s.toml", "-o", "o.json"];
    desk.run(&arguments).refused(parts);
    assert_eq!(desk.names(), ["a.csv", "s.toml"]);
}

/// Maps a cube and expects a refusal with these parts; no file appears.
#[track_caller]
fn map_refuses(desk: &Desk, parts: &[&str]) {
    let before = desk.names();
    let arguments = ["map", "c.h5", "--setup", "s.toml", "-o", "m.h5"];
    desk.run(&arguments).refused(parts);
    assert_eq!(desk.names(), before);
}

/// Fits with a changed setup and expects a refusal with these parts; no file appears.
#[track_caller]
fn setup_refuses(from: &str, to: &str, parts: &[&str]) {
    assert!(SODIUM.contains(from), "{from}");
    let desk = Desk::laid();
    desk.write("s.toml", SODIUM.replacen(from, to, 1));
    let arguments = ["fit", "a.csv", "--setup", "s.toml", "-o", "o.json"];
    desk.run(&arguments).refused(&[parts, &["s.toml"]].concat());
    assert_eq!(desk.names(), ["a.csv", "s.toml"]);
}

#[test]
fn an_empty_file() {
    fit_refuses("", &["a.csv", "empty"]);
    let desk = Desk::laid();
    desk.write("c.h5", "");
    map_refuses(&desk, &["c.h5", "HDF5"]);
}

#[test]
fn a_missing_file() {
    let desk = Desk::laid();
    let outcome = desk.run(&["fit", "b.csv", "--setup", "s.toml"]);
    outcome.refused(&["b.csv"]);
    let outcome = desk.run(&["fit", "a.csv", "--setup", "t.toml"]);
    outcome.refused(&["t.toml cannot be read", "check the path"]);
    map_refuses(&desk, &["c.h5"]);
}

#[test]
fn a_missing_column() {
    let spectrum = SPECTRUM.replace("intensity,", "flux,");
    fit_refuses(&spectrum, &["a.csv, line 3", "`intensity`", "`flux`"]);
}

#[test]
fn text_where_a_number_should_be() {
    let spectrum = SPECTRUM.replace("24000", "dark");
    fit_refuses(&spectrum, &["a.csv, line 6", "`intensity`", "dark"]);
}

#[test]
fn nan_everywhere() {
    let spectrum: String = SPECTRUM
        .replace("26000", "NaN")
        .replace("25000", "NaN")
        .replace("24000", "NaN");
    fit_refuses(&spectrum, &["a.csv", "6"]);
}

#[test]
fn wavelengths_that_are_not_monotonic() {
    fit_refuses(
        &SPECTRUM.replace("589.3", "588.3"),
        &["a.csv, line 7", "588.3"],
    );
    fit_refuses(
        &SPECTRUM.replace("589.3", "589.2"),
        &["a.csv, line 7", "589.2"],
    );
}

#[test]
fn wavelengths_that_are_negative() {
    fit_refuses(
        &SPECTRUM.replace("589.0", "-589.0"),
        &["a.csv, line 4", "-589"],
    );
}

#[test]
fn a_wrong_unit() {
    let spectrum = SPECTRUM.replace(UNIT, "furlong");
    fit_refuses(&spectrum, &["a.csv", "furlong"]);
    setup_refuses(
        UNIT,
        "furlong",
        &["line 3", "`spectrum.intensity_unit`", "furlong"],
    );
    let desk = Desk::laid();
    write_cube(
        &desk.path("c.h5"),
        &[589.0, 589.1, 589.2],
        (1, 2, 3),
        "furlong",
    );
    map_refuses(&desk, &["c.h5", "intensity", "furlong"]);
}

#[test]
fn no_unit_at_all() {
    let desk = Desk::new();
    desk.write(
        "s.toml",
        SODIUM.replace("intensity_unit = \"W m-2 sr-1 nm-1\"\n", ""),
    );
    desk.write(
        "a.csv",
        SPECTRUM.replace("# intensity_unit: W m-2 sr-1 nm-1\n", ""),
    );
    let outcome = desk.run(&["fit", "a.csv", "--setup", "s.toml"]);
    outcome.refused(&["a.csv does not say the unit", "s.toml", "# intensity_unit:"]);
}

#[test]
fn a_relative_calibration_with_a_fixed_scale() {
    setup_refuses(
        UNIT,
        "relative",
        &["the intensity is relative", "scale = { find = "],
    );
}

#[test]
fn an_unknown_species() {
    setup_refuses(
        "\"Na I\"",
        "\"Na Q\"",
        &[
            "unknown species \"Na Q\"",
            "line 17",
            "did you mean",
            "\"Na I\"",
        ],
    );
}

#[test]
fn an_unknown_key() {
    setup_refuses(
        "fwhm_nm",
        "fwhm_mn",
        &["`instrument.fwhm_mn`", "line 7", "did you mean `fwhm_nm`?"],
    );
}

#[test]
fn reversed_bounds() {
    setup_refuses(
        "[-100, 100]",
        "[100, -100]",
        &["line 14", "`cloud.velocity_km_s`", "[100, -100] km/s"],
    );
}

#[test]
fn a_setup_that_is_not_toml() {
    setup_refuses("[instrument]", "[instrument", &["line 6", "not valid TOML"]);
}

#[test]
fn a_cube_of_the_wrong_rank() {
    let desk = Desk::laid();
    let file = hdf5::File::create(desk.path("c.h5")).unwrap();
    let wavelength = file
        .new_dataset_builder()
        .with_data(&[589.0, 589.1])
        .create("wavelength")
        .unwrap();
    attribute(&wavelength, "units", "nm");
    let intensity = ndarray::arr2(&[[1.0, 2.0]]);
    file.new_dataset_builder()
        .with_data(&intensity)
        .create("intensity")
        .unwrap();
    drop((wavelength, file));
    map_refuses(&desk, &["c.h5", "intensity", "(1, 2)", "(ny, nx, n)"]);
}

#[test]
fn a_cube_of_mismatched_lengths() {
    let desk = Desk::laid();
    write_cube(&desk.path("c.h5"), &[589.0, 589.1], (1, 2, 3), UNIT);
    map_refuses(
        &desk,
        &["c.h5", "(1, 2, 3)", "(ny, nx, 2)", "hint: the last axis"],
    );
}

#[test]
fn a_cube_with_a_missing_dataset() {
    let desk = Desk::laid();
    let file = hdf5::File::create(desk.path("c.h5")).unwrap();
    file.new_dataset_builder()
        .with_data(&[589.0, 589.1])
        .create("wavelength")
        .unwrap();
    drop(file);
    map_refuses(&desk, &["c.h5", "intensity", "wavelength"]);
}

#[test]
fn a_file_that_is_not_hdf5() {
    let desk = Desk::laid();
    desk.write("c.h5", SPECTRUM);
    map_refuses(&desk, &["c.h5", "HDF5"]);
}

#[test]
fn a_truncated_hdf5_file() {
    let desk = Desk::laid();
    write_cube(
        &desk.path("whole.h5"),
        &[589.0, 589.1, 589.2],
        (20, 20, 3),
        UNIT,
    );
    let whole = std::fs::read(desk.path("whole.h5")).unwrap();
    desk.write("c.h5", &whole[..whole.len() / 2]);
    map_refuses(&desk, &["c.h5"]);
}

#[test]
fn an_output_that_exists() {
    let desk = Desk::laid();
    write_cube(&desk.path("c.h5"), &[589.0, 589.1, 589.2], (1, 2, 3), UNIT);
    for name in ["o.json", "m.h5", "p.csv", "p.h5"] {
        desk.write(name, "mine");
    }
    let all = desk.names();
    for arguments in [
        &["fit", "a.csv", "--setup", "s.toml", "-o", "o.json"][..],
        &["map", "c.h5", "--setup", "s.toml", "-o", "m.h5"],
        &["predict", "s.toml", "-o", "p.csv"],
        &["predict", "s.toml", "-o", "p.h5"],
    ] {
        let name = arguments[arguments.len() - 1];
        desk.run(arguments)
            .refused(&[&format!("{name} exists already"), "--overwrite"]);
        assert_eq!(desk.read(name), "mine");
        assert_eq!(desk.names(), all);
    }
}

#[test]
fn no_permission_to_write() {
    let desk = Desk::laid();
    write_cube(&desk.path("c.h5"), &[589.0, 589.1, 589.2], (1, 2, 3), UNIT);
    let before = desk.names();
    // A file is no folder: nobody can write into it, whatever their rights.
    for arguments in [
        &["fit", "a.csv", "--setup", "s.toml", "-o", "a.csv/o.json"][..],
        &["map", "c.h5", "--setup", "s.toml", "-o", "a.csv/m.h5"],
        &["predict", "s.toml", "-o", "a.csv/p.csv"],
        &["predict", "s.toml", "-o", "a.csv/p.h5"],
        &["predict", "s.toml", "-o", "nowhere/p.h5"],
    ] {
        desk.run(arguments)
            .refused(&[arguments[arguments.len() - 1]]);
        assert_eq!(desk.names(), before);
    }
}

#[test]
#[cfg(target_os = "linux")]
fn a_folder_in_which_the_system_allows_no_files() {
    // Even the administrator may not create files there.
    let desk = Desk::laid();
    for arguments in [
        &[
            "fit",
            "a.csv",
            "--setup",
            "s.toml",
            "-o",
            "/sys/backlit.json",
        ][..],
        &["predict", "s.toml", "-o", "/sys/backlit.csv"],
        &["predict", "s.toml", "-o", "/sys/backlit.h5"],
    ] {
        desk.run(arguments).refused(&["/sys/backlit", "hint: "]);
    }
}

#[test]
fn a_cube_without_any_number() {
    let desk = Desk::laid();
    let wavelength_nm: Vec<f64> = (0..40).map(|k| 588.0 + 0.05 * f64::from(k)).collect();
    write_cube_of(
        f64::NAN,
        &desk.path("c.h5"),
        &wavelength_nm,
        (2, 3, 40),
        UNIT,
    );
    map_refuses(&desk, &["c.h5", "none of the 6 spectra", "NaN", "hint:"]);
}
