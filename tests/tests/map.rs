//! `backlit map`.
#![allow(clippy::unwrap_used)]

mod program;

use std::fmt::Write;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use ndarray::{Array2, Ix2};
use program::Desk;

/// A folder with a cube `c.h5` of `ny` by `nx` pixels, its velocity rising along x; the pixel (0, 0) has no data.
fn desk(ny: usize, nx: usize) -> Desk {
    let desk = Desk::laid();
    let mut table = String::from("y,x,cloud1_velocity\n");
    for y in 0..ny {
        for x in 0..nx {
            if (y, x) != (0, 0) {
                writeln!(table, "{y},{x},{}", velocity(x)).unwrap();
            }
        }
    }
    desk.write("v.csv", table);
    let shape = format!("{ny},{nx}");
    let arguments = [
        "predict", "s.toml", "--step", "0.03", "--noise", "100", "--cube", &shape, "--vary",
        "v.csv", "-o", "c.h5",
    ];
    desk.run(&arguments).done();
    desk
}

fn velocity(x: usize) -> f64 {
    -20.0 + 2.0 * x as f64
}

fn maps(desk: &Desk, name: &str) -> Vec<(String, Array2<f64>)> {
    let file = hdf5::File::open(desk.path(name)).unwrap();
    let group = file.group("maps").unwrap();
    let mut names = group.member_names().unwrap();
    names.sort();
    names
        .into_iter()
        .map(|name| {
            let map = group.dataset(&name).unwrap().read::<f64, Ix2>().unwrap();
            (name, map)
        })
        .collect()
}

/// The same numbers in the same maps, bit for bit.
fn same(a: &[(String, Array2<f64>)], b: &[(String, Array2<f64>)]) -> bool {
    let bits = |maps: &[(String, Array2<f64>)]| -> Vec<(String, Vec<u64>)> {
        maps.iter()
            .map(|(name, map)| (name.clone(), map.iter().map(|v| v.to_bits()).collect()))
            .collect()
    };
    bits(a) == bits(b)
}

#[test]
fn every_pixel_gets_its_values_its_uncertainty_and_its_flags() {
    let desk = desk(3, 8);
    let outcome = desk.run(&["map", "c.h5", "--setup", "s.toml", "-o", "m.h5"]);
    assert!(
        outcome
            .stderr
            .starts_with("wrote m.h5: 24 spectra, 23 fitted, "),
        "{}",
        outcome.stderr
    );
    assert!(
        outcome.stderr.trim_end().ends_with(" spectra/s"),
        "{}",
        outcome.stderr
    );
    assert_eq!(outcome.done(), "");
    assert_eq!(
        desk.names(),
        ["a.csv", "c.h5", "m.h5", "s.toml", "v.csv"],
        "no journal stays"
    );

    let file = hdf5::File::open(desk.path("m.h5")).unwrap();
    let map = |name: &str| {
        file.dataset(&format!("maps/{name}"))
            .unwrap()
            .read::<f64, Ix2>()
            .unwrap()
    };
    let (value, sigma) = (map("cloud1_velocity"), map("cloud1_velocity_sigma"));
    for ((y, x), value) in value.indexed_iter() {
        if (y, x) == (0, 0) {
            assert!(value.is_nan());
        } else {
            assert!(
                (value - velocity(x)).abs() < 5.0 * sigma[(y, x)],
                "({y}, {x}) {value}"
            );
        }
    }
    let flags = file
        .dataset("maps/flags")
        .unwrap()
        .read::<u32, Ix2>()
        .unwrap();
    // 64 is too_little_data.
    assert_eq!(flags[(0, 0)] & 64, 64);
    let text = |name: &str, attribute: &str| {
        let dataset = file.dataset(&format!("maps/{name}")).unwrap();
        let text: hdf5::types::VarLenUnicode =
            dataset.attr(attribute).unwrap().read_scalar().unwrap();
        text.to_string()
    };
    assert_eq!(text("cloud1_velocity", "units"), "km s-1");
    assert_eq!(text("cloud1_log10_column_Na_I", "units"), "log10(cm-2)");
    assert_eq!(text("cloud1_log10_column_Na_I_sigma", "units"), "dex");
    assert_eq!(
        text("cloud1_log10_column_Na_I_upper", "units"),
        "log10(cm-2)"
    );
    for name in ["cloud1_turbulence", "chi2_reduced", "iterations"] {
        assert!(!text(name, "long_name").is_empty());
    }
    let attribute = |name: &str| -> String {
        let text: hdf5::types::VarLenUnicode = file.attr(name).unwrap().read_scalar().unwrap();
        text.to_string()
    };
    assert_eq!(attribute("setup"), desk.read("s.toml"));
    assert_eq!(attribute("input"), "c.h5");
    assert_eq!(attribute("input_sha256").len(), 64);
    assert!(attribute("command_line").ends_with("map c.h5 --setup s.toml -o m.h5"));
    assert!(attribute("start_time") <= attribute("end_time"));
    assert_eq!(attribute("program_version"), env!("CARGO_PKG_VERSION"));
}

#[test]
fn the_maps_do_not_depend_on_the_number_of_threads() {
    let desk = desk(6, 8);
    for (threads, name) in [("1", "one.h5"), ("2", "two.h5"), ("7", "seven.h5")] {
        let arguments = [
            "map",
            "c.h5",
            "--setup",
            "s.toml",
            "-o",
            name,
            "--threads",
            threads,
        ];
        desk.run(&arguments).done();
    }
    let one = maps(&desk, "one.h5");
    assert!(one.len() > 8);
    assert!(same(&one, &maps(&desk, "two.h5")));
    assert!(same(&one, &maps(&desk, "seven.h5")));
}

#[test]
fn falling_wavelengths_give_the_same_maps() {
    let desk = desk(2, 5);
    let wavelengths: Vec<f64> = (0..101).map(|i| 588.0 + 0.03 * f64::from(i)).collect();
    let csv = |wavelengths: &mut dyn Iterator<Item = &f64>| {
        let rows: String = wavelengths.map(|nm| format!("{nm},1\n")).collect();
        format!("# medium: vacuum\nwavelength_nm,intensity\n{rows}")
    };
    desk.write("rising.csv", csv(&mut wavelengths.iter()));
    desk.write("falling.csv", csv(&mut wavelengths.iter().rev()));
    for order in ["rising", "falling"] {
        let (like, cube) = (format!("{order}.csv"), format!("{order}.h5"));
        let predict = [
            "predict", "s.toml", "--like", &like, "--noise", "100", "--cube", "2,5", "--vary",
            "v.csv", "-o", &cube,
        ];
        desk.run(&predict).done();
        let maps = format!("{order}-maps.h5");
        desk.run(&["map", &cube, "--setup", "s.toml", "-o", &maps])
            .done();
    }
    let file = hdf5::File::open(desk.path("falling.h5")).unwrap();
    let nm = file
        .dataset("wavelength")
        .unwrap()
        .read_raw::<f64>()
        .unwrap();
    assert!(nm[0] > nm[100], "the cube keeps the order of its model");
    let (rising, falling) = (
        maps(&desk, "rising-maps.h5"),
        maps(&desk, "falling-maps.h5"),
    );
    assert!(same(&rising, &falling));
}

#[test]
fn json_is_one_summary() {
    let desk = desk(2, 3);
    let outcome = desk.run(&[
        "map",
        "c.h5",
        "--setup",
        "s.toml",
        "-o",
        "m.h5",
        "--json",
        "--tile-pixels",
        "2",
    ]);
    assert_eq!(outcome.stderr, "");
    let document = outcome.json();
    assert_eq!(document["schema"], "backlit-map/1");
    assert_eq!(document["pixels"], 6);
    assert_eq!(document["fitted"], 5);
    assert_eq!(document["without_data"], 1);
}

#[test]
fn an_existing_file_is_kept_unless_overwrite_is_given() {
    let desk = desk(1, 3);
    desk.write("m.h5", "something else");
    let arguments = ["map", "c.h5", "--setup", "s.toml", "-o", "m.h5"];
    desk.run(&arguments)
        .refused(&["m.h5 exists already", "--overwrite"]);
    assert_eq!(desk.read("m.h5"), "something else");
    desk.run(&[&arguments[..], &["--overwrite"]].concat())
        .done();
    assert!(!maps(&desk, "m.h5").is_empty());
}

#[test]
#[cfg(unix)]
fn an_interrupted_run_says_how_to_continue_and_continues_to_the_same_maps() {
    let desk = desk(60, 120);
    let arguments = [
        "map",
        "c.h5",
        "--setup",
        "s.toml",
        "-o",
        "m.h5",
        "--threads",
        "1",
    ];
    let mut command = desk.command(&arguments);
    let mut child = command
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let journal = desk.path("m.h5.journal");
    let began = Instant::now();
    let mut header = None;
    // The journal's header is there first; when it has grown, a tile is done.
    loop {
        let size = std::fs::metadata(&journal).map_or(0, |m| m.len());
        match header {
            None if size > 0 => header = Some(size),
            Some(header) if size > header => break,
            _ => std::thread::sleep(Duration::from_millis(1)),
        }
        assert!(
            began.elapsed() < Duration::from_secs(120),
            "no tile is done"
        );
        assert!(child.try_wait().unwrap().is_none(), "it ended by itself");
    }
    let pid = child.id().to_string();
    assert!(
        Command::new("kill")
            .args(["-INT", &pid])
            .status()
            .unwrap()
            .success()
    );
    let output = child.wait_with_output().unwrap();
    let stderr = String::from_utf8(output.stderr).unwrap();
    assert_eq!(output.status.code(), Some(130), "{stderr}");
    assert!(output.stdout.is_empty());
    assert!(stderr.starts_with("error: interrupted after "), "{stderr}");
    assert!(
        stderr.contains("of 7200 spectra; they are kept in m.h5.journal\nhint: "),
        "{stderr}"
    );
    assert!(journal.exists() && !desk.path("m.h5").exists());

    // Neither a new run nor another setup may throw the journal away.
    desk.run(&arguments).refused(&["m.h5.journal"]);
    desk.write("other.toml", desk.read("s.toml").replace("5800", "5801"));
    let other = [
        "map",
        "c.h5",
        "--setup",
        "other.toml",
        "-o",
        "m.h5",
        "--resume",
    ];
    desk.run(&other).refused(&["setup"]);

    let resumed = desk.run(&[&arguments[..], &["--resume"]].concat());
    assert!(
        resumed.stderr.contains(" spectra were done before\n"),
        "{}",
        resumed.stderr
    );
    resumed.done();
    assert!(!journal.exists());
    let whole = [
        "map",
        "c.h5",
        "--setup",
        "s.toml",
        "-o",
        "whole.h5",
        "--threads",
        "2",
    ];
    desk.run(&whole).done();
    assert!(same(&maps(&desk, "m.h5"), &maps(&desk, "whole.h5")));
}

#[test]
fn intervals_are_maps_of_their_own_on_demand() {
    let desk = desk(2, 3);
    let plain = ["map", "c.h5", "--setup", "s.toml", "-o"];
    desk.run(&[&plain[..], &["m.h5"]].concat()).done();
    desk.run(&[&plain[..], &["i.h5", "--intervals"]].concat())
        .done();
    let names = |file: &str| -> Vec<String> {
        maps(&desk, file)
            .into_iter()
            .map(|(name, _)| name)
            .collect()
    };
    assert!(!names("m.h5").iter().any(|name| name.ends_with("_low")));
    let with = maps(&desk, "i.h5");
    let map = |name: &str| &with.iter().find(|(found, _)| found == name).unwrap().1;
    for name in ["cloud1_velocity", "cloud1_log10_column_Na_I"] {
        let (low, high) = (map(&format!("{name}_low")), map(&format!("{name}_high")));
        for ((value, low), high) in map(name).iter().zip(low).zip(high) {
            // The pixel without data has no interval either.
            assert!(
                low < value && value < high || value.is_nan() && low.is_nan(),
                "{name}: {low} {value} {high}"
            );
        }
    }
}
