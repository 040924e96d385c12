//! `backlit predict`.
#![allow(clippy::unwrap_used)]

mod program;

use program::{Desk, SODIUM};

/// The rows of a CSV below its header, as numbers.
fn rows(text: &str) -> Vec<Vec<f64>> {
    text.lines()
        .filter(|line| !line.starts_with('#'))
        .skip(1)
        .map(|line| line.split(',').map(|cell| cell.parse().unwrap()).collect())
        .collect()
}

#[test]
fn the_spectrum_goes_to_standard_output_as_csv() {
    let outcome = Desk::laid().run(&["predict", "s.toml", "--range", "589..590", "--step", "0.1"]);
    assert_eq!(outcome.stderr, "");
    let text = outcome.done();
    assert!(text.contains("# medium: vacuum\n"));
    assert!(text.contains("# intensity_unit: W m-2 sr-1 nm-1\n"));
    assert!(text.contains("\nwavelength_nm,intensity\n"));
    let rows = rows(&text);
    assert_eq!(rows.len(), 11, "both ends of the range are channels");
    assert_eq!((rows[0][0], rows[10][0]), (589.0, 590.0));
    assert!(rows.iter().all(|row| row[1] > 0.0));
}

#[test]
fn the_sodium_lines_are_dark_in_front_of_a_hotter_star() {
    let desk = Desk::laid();
    let rows = rows(&desk.run(&["predict", "s.toml"]).done());
    assert!(rows.len() >= 2000);
    let at = |nm: f64| {
        let nearest = rows
            .iter()
            .min_by(|a, b| (a[0] - nm).abs().total_cmp(&(b[0] - nm).abs()));
        nearest.unwrap()[1]
    };
    // Rest wavelengths in vacuum (NIST) times 1 + v/c at 10 km/s.
    for line in [589.158_3 + 0.019_65, 589.755_8 + 0.019_67] {
        assert!(at(line) < 0.98 * at(588.5), "{line}");
    }
}

#[test]
fn a_file_ends_in_csv_or_hdf5_by_its_name_and_both_hold_the_same() {
    let desk = Desk::laid();
    for name in ["p.csv", "p.h5"] {
        let outcome = desk.run(&["predict", "s.toml", "--step", "0.1", "-o", name]);
        assert_eq!(outcome.stdout, "");
        assert_eq!(outcome.stderr, format!("wrote {name} (31)\n"));
    }
    let csv = rows(&desk.read("p.csv"));
    let file = hdf5::File::open(desk.path("p.h5")).unwrap();
    let intensity = file
        .dataset("intensity")
        .unwrap()
        .read_raw::<f64>()
        .unwrap();
    assert_eq!(csv.iter().map(|row| row[1]).collect::<Vec<_>>(), intensity);
}

#[test]
fn like_takes_wavelengths_of_a_spectrum_even_where_they_fall() {
    let desk = Desk::laid();
    desk.write(
        "like.csv",
        "wavelength_nm,intensity\n590,1\n589.5,1\n589,1\n588,1\n",
    );
    let rows = rows(
        &desk
            .run(&["predict", "s.toml", "--like", "like.csv"])
            .done(),
    );
    let wavelengths: Vec<f64> = rows.iter().map(|row| row[0]).collect();
    assert_eq!(wavelengths, [590.0, 589.5, 589.0, 588.0]);
    // A black body of 5800 K peaks at 499.6 nm (Wien): towards the red it gets fainter.
    assert!(rows[3][1] > rows[0][1]);
}

#[test]
fn noise_has_an_uncertainty_and_repeats_with_its_seed() {
    let desk = Desk::laid();
    let noisy = |seed: &str| {
        desk.run(&["predict", "s.toml", "--noise", "50", "--seed", seed])
            .done()
    };
    let (first, again, other) = (noisy("1"), noisy("1"), noisy("2"));
    assert_eq!(first, again);
    assert_ne!(first, other);
    let clean = rows(&desk.run(&["predict", "s.toml"]).done());
    let noisy = rows(&first);
    let sigma = noisy[0][2];
    let peak = clean.iter().map(|row| row[1]).fold(0.0, f64::max);
    assert!((sigma * 50.0 / peak - 1.0).abs() < 1e-2);
    let chi2: f64 = clean
        .iter()
        .zip(&noisy)
        .map(|(c, n)| ((n[1] - c[1]) / sigma).powi(2))
        .sum();
    let count = clean.len() as f64;
    assert!((chi2 / count - 1.0).abs() < 5.0 * (2.0 / count).sqrt());
}

#[test]
fn json_has_the_wavelengths_beside_the_intensities() {
    let document = Desk::laid()
        .run(&["predict", "s.toml", "--step", "0.5", "--json"])
        .json();
    assert_eq!(document["schema"], "backlit-predict/1");
    assert_eq!(document["wavelength_nm"].as_array().unwrap().len(), 7);
    assert_eq!(document["intensity"].as_array().unwrap().len(), 7);
    assert!(document["uncertainty"].is_null());
}

#[test]
fn an_open_value_without_a_start_cannot_be_predicted() {
    let desk = Desk::new();
    desk.write("s.toml", SODIUM.replace(", start = 3", ""));
    desk.run(&["predict", "s.toml"])
        .refused(&["turbulence", "start"]);
}

#[test]
fn each_pixel_of_a_cube_has_the_values_of_its_row_in_the_table() {
    let desk = Desk::laid();
    desk.write("v.csv", "y,x,cloud1_velocity\n0,0,10\n0,1,-60\n1,0,60\n");
    let arguments = [
        "predict", "s.toml", "--step", "0.05", "--cube", "2,2", "--vary", "v.csv", "-o", "c.h5",
    ];
    let outcome = desk.run(&arguments);
    assert_eq!(
        outcome.stderr,
        "note: 1 of 4 pixels are not in v.csv: they hold no data (NaN)\nwrote c.h5 (2 x 2 x 61)\n"
    );
    outcome.done();
    let file = hdf5::File::open(desk.path("c.h5")).unwrap();
    let cube = file
        .dataset("intensity")
        .unwrap()
        .read::<f64, ndarray::Ix3>()
        .unwrap();
    let single = rows(&desk.run(&["predict", "s.toml", "--step", "0.05"]).done());
    for (i, row) in single.iter().enumerate() {
        let relative = cube[(0, 0, i)] / row[1] - 1.0;
        assert!(
            relative.abs() < 1e-9,
            "the start is the same as the value 10: {relative}"
        );
    }
    assert!(cube[(1, 1, 0)].is_nan());
    let deepest = |x: usize| {
        (0..61)
            .min_by(|a, b| cube[(0, x, *a)].total_cmp(&cube[(0, x, *b)]))
            .unwrap()
    };
    assert!(
        deepest(1) < deepest(0),
        "an approaching cloud absorbs at shorter wavelengths"
    );
}

#[test]
fn the_table_of_a_cube_is_checked_before_anything_is_written() {
    let desk = Desk::laid();
    for (table, parts) in [
        (
            "y,x,cloud1_speed\n0,0,1\n",
            &[
                "v.csv line 1",
                "unknown column `cloud1_speed`",
                "cloud1_velocity",
            ][..],
        ),
        (
            "y,x,cloud1_velocity\n0,9,1\n",
            &["v.csv line 2", "column `x`", "found `9`", "from 0 to 1"],
        ),
        (
            "y,x,cloud1_velocity\n0,1,fast\n",
            &["v.csv line 2", "found `fast`", "a number"],
        ),
    ] {
        desk.write("v.csv", table);
        let arguments = [
            "predict", "s.toml", "--cube", "2,2", "--vary", "v.csv", "-o", "c.h5",
        ];
        desk.run(&arguments).refused(parts);
        assert_eq!(desk.names(), ["a.csv", "s.toml", "v.csv"]);
    }
}

#[test]
fn a_step_that_gives_no_grid_is_refused() {
    let outcome = Desk::laid().run(&["predict", "s.toml", "--step", "10"]);
    outcome.refused(&["a step of 10 nm", "588..591 nm"]);
}
