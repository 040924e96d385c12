//! The memory of `backlit map` does not grow with the cube.
#![cfg(target_os = "linux")]
#![allow(clippy::unwrap_used)]

mod program;

use std::process::Stdio;
use std::time::Duration;

use ndarray::{Array1, Array3, s};
use program::{Desk, attribute};

/// 1024 x 1024 spectra of 512 channels are 4 GiB in memory.
const SIDE: usize = 1024;
const CHANNELS: usize = 512;
/// Rows that hold spectra; the others hold none, so that the test takes seconds.
const ROWS: usize = 2;
const ALLOWED_BYTES: usize = 300 << 20;

#[test]
fn a_cube_of_4_gib_maps_in_less_than_300_mib() {
    let desk = Desk::laid();
    let step = (3.0 / (CHANNELS - 1) as f64).to_string();
    let one = [
        "predict", "s.toml", "--step", &step, "--noise", "50", "-o", "one.h5",
    ];
    desk.run(&one).done();
    write_cube(&desk);

    let arguments = ["map", "c.h5", "--setup", "s.toml", "-o", "m.h5", "--json"];
    let mut command = desk.command(&arguments);
    let mut child = command
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let status = format!("/proc/{}/status", child.id());
    let mut peak = 0;
    while child.try_wait().unwrap().is_none() {
        // The line is gone between the end of the program and our asking for its exit code.
        let text = std::fs::read_to_string(&status).unwrap_or_default();
        let line = text.lines().find(|line| line.starts_with("VmHWM"));
        let kib = line.and_then(|line| line.split_whitespace().nth(1)?.parse::<usize>().ok());
        peak = peak.max(kib.unwrap_or(0) * 1024);
        std::thread::sleep(Duration::from_millis(2));
    }
    let output = child.wait_with_output().unwrap();
    let stderr = String::from_utf8(output.stderr).unwrap();
    assert_eq!(output.status.code(), Some(0), "{stderr}");
    let summary: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(summary["fitted"], ROWS * SIDE);
    assert_eq!(summary["without_data"], (SIDE - ROWS) * SIDE);
    // Measured: 63 MiB on two threads.
    assert!(peak > 0 && peak < ALLOWED_BYTES, "peak {} MiB", peak >> 20);
}

/// The spectrum of `one.h5` in the first rows of a cube whose other chunks were never written.
fn write_cube(desk: &Desk) {
    let one = hdf5::File::open(desk.path("one.h5")).unwrap();
    let read = |name: &str| one.dataset(name).unwrap().read_raw::<f64>().unwrap();
    let spectrum = read("intensity");
    assert_eq!(spectrum.len(), CHANNELS);
    let file = hdf5::File::create(desk.path("c.h5")).unwrap();
    let wavelength = file
        .new_dataset_builder()
        .with_data(&Array1::from_vec(read("wavelength")))
        .create("wavelength")
        .unwrap();
    attribute(&wavelength, "units", "nm");
    let intensity = file
        .new_dataset::<f64>()
        .chunk((1, 256, CHANNELS))
        .fill_value(f64::NAN)
        .shape((SIDE, SIDE, CHANNELS))
        .create("intensity")
        .unwrap();
    let rows = Array3::from_shape_fn((ROWS, SIDE, CHANNELS), |(_, _, i)| spectrum[i]);
    intensity.write_slice(&rows, s![0..ROWS, .., ..]).unwrap();
    let uncertainty = file.new_dataset::<f64>().create("uncertainty").unwrap();
    uncertainty.write_scalar(&read("uncertainty")[0]).unwrap();
}
