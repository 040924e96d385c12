//! Spectra from and to CSV and HDF5, and every refusal with its message.

#![allow(clippy::unwrap_used)]

use std::fs;
use std::path::PathBuf;

use backlit_cubes::{CubesError, Spectrum};
use backlit_units::Medium;
use proptest::prelude::*;

fn parse(text: &str) -> Result<Spectrum, CubesError> {
    Spectrum::parse_csv(text.as_bytes(), "lamp.csv")
}

/// The message must hold all these parts, and always a place, what to do, and nothing twice.
fn refuses(text: &str, parts: &[&str]) {
    let message = parse(text).unwrap_err().to_string();
    for part in parts.iter().chain(&["lamp.csv", "\nhint: "]) {
        assert!(message.contains(part), "`{part}` is not in: {message}");
    }
    assert_eq!(message.matches("hint:").count(), 1, "{message}");
}

fn place() -> (tempfile::TempDir, PathBuf) {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("lamp.csv");
    (dir, path)
}

fn files_in(dir: &tempfile::TempDir) -> Vec<String> {
    let entries = fs::read_dir(dir.path()).unwrap();
    entries
        .map(|e| e.unwrap().file_name().to_string_lossy().into_owned())
        .collect()
}

#[test]
fn columns_may_stand_in_any_order_with_comments_and_blanks_between() {
    let text = "\u{feff}# a lamp, seen through a cell\r\n# medium: air\r\n\r\n\
                mask, note, intensity ,wavelength_nm,uncertainty\r\n\
                # intensity_unit: W m-2 sr-1 nm-1\r\n\
                0,a,1.5,588.0,0.1\r\n  \r\n\
                1,b,2.5,588.5,0.1\r\n\
                ,c,nan,589.0,0.1\r\n\
                0,d,,589.5,0.1\r\n\
                0,e,3.5,590.0,0\r\n,,,,\r\n";
    let s = parse(text).unwrap();
    assert_eq!(s.wavelength, [588e-9, 588.5e-9, 589e-9, 589.5e-9, 590e-9]);
    assert_eq!(s.medium, Some(Medium::Air));
    assert_eq!(s.intensity_unit.as_deref(), Some("W m-2 sr-1 nm-1"));
    assert_eq!(s.intensity[..2], [1.5, 2.5]);
    assert_eq!(s.mask, [false, true, true, true, true]);
    assert_eq!(s.uncertainty.unwrap()[0], 0.1);
    assert_eq!(s.notes.len(), 2);
    assert!(s.notes[0].starts_with("2 of 5 channels have no finite intensity"));
    assert!(s.notes[1].starts_with("1 of 5 channels have an uncertainty"));
}

#[test]
fn falling_wavelengths_keep_their_order() {
    let s = parse("wavelength_nm,intensity\n590,1\n589,2\n588,3\n").unwrap();
    assert_eq!(s.wavelength, [590e-9, 589e-9, 588e-9]);
    assert_eq!(s.intensity, [1.0, 2.0, 3.0]);
    assert_eq!(
        (s.uncertainty, s.medium, s.intensity_unit),
        (None, None, None)
    );
}

#[test]
fn bad_text_is_refused_with_its_place() {
    refuses("", &["is empty", "expected a header row"]);
    refuses("\n# medium: air\n", &["is empty"]);
    refuses(
        "wavelength_nm,flux\n1,2\n",
        &["line 1", "no column `intensity`", "`wavelength_nm`, `flux`"],
    );
    refuses(
        "588.0,1.0\n589.0,1.0\n",
        &[
            "line 1",
            "no column `wavelength_nm`",
            "`588.0`",
            "header row",
        ],
    );
    refuses(
        "wavelength_nm intensity\n588 1\n",
        &["no column `wavelength_nm`", "separated by commas"],
    );
    refuses(
        "mask,mask,wavelength_nm,intensity\n",
        &["line 1", "`mask` is there more than once"],
    );
    let row =
        |row: &str| format!("wavelength_nm,intensity,uncertainty,mask\n# x\n588,1,1,0\n{row}\n");
    refuses(
        &row("589,bright,1,0"),
        &["line 4, column `intensity`", "found `bright`", "a number"],
    );
    refuses(
        &row("yellow,1,1,0"),
        &["line 4, column `wavelength_nm`", "found `yellow`"],
    );
    refuses(
        &row(",1,1,0"),
        &["line 4, column `wavelength_nm`", "found ``"],
    );
    refuses(
        &row("589,1,?,0"),
        &["line 4, column `uncertainty`", "found `?`"],
    );
    refuses(
        &row("589,1,1,2"),
        &["line 4, column `mask`", "found `2`", "expected 0 or 1"],
    );
    refuses(&row("589,1"), &["line 4", "2 fields, expected 4"]);
    refuses(
        &row("589,1,5,1,0"),
        &["line 4", "5 fields, expected 4", "decimal point"],
    );
    refuses(
        &row("nan,1,1,0"),
        &["line 4", "wavelength NaN nm", "above zero"],
    );
    refuses(&row("-589,1,1,0"), &["line 4", "wavelength -589 nm"]);
    refuses(&row("0,1,1,0"), &["line 4", "wavelength 0 nm"]);
    refuses(
        &row("588,1,1,0"),
        &["line 4", "wavelength 588 nm after 588 nm"],
    );
    refuses(
        &row("589,1,1,0\n588.5,1,1,0"),
        &[
            "line 5, column `wavelength_nm`",
            "588.5 nm after 589 nm",
            "strictly rising",
        ],
    );
    refuses(
        "wavelength_nm,intensity\n",
        &["line 1", "0 channels, expected at least 2"],
    );
    refuses(
        "wavelength_nm,intensity\n588,1\n",
        &["line 1", "1 channels, expected at least 2"],
    );
    refuses(
        "wavelength_nm,intensity\n588,nan\n589,\n590,inf\n",
        &[
            "line 1, column `intensity`",
            "none of the 3 channels has a usable intensity",
        ],
    );
    refuses(
        "wavelength_nm,intensity,mask\n588,1,1\n589,2,1\n",
        &["none of the 2 channels", "masked"],
    );
    refuses(
        "wavelength_nm,intensity,uncertainty\n588,1,-2\n589,1,0\n",
        &[
            "line 1, column `uncertainty`",
            "no uncertainty is above zero (the first is -2)",
        ],
    );
    refuses(
        "# medium: water\nwavelength_nm,intensity\n",
        &["line 1", "medium `water`", "`air`"],
    );
    refuses(
        "# intensity_unit: furlongs\nwavelength_nm,intensity\n",
        &["line 1", "intensity unit `furlongs`", "W m-2 sr-1 nm-1"],
    );
}

#[test]
fn bytes_that_are_no_text_are_refused() {
    let error =
        Spectrum::parse_csv(b"wavelength_nm,intensity\n588,\xff\n", "lamp.csv").unwrap_err();
    assert!(
        error
            .to_string()
            .contains("lamp.csv, line 2: bytes that are not UTF-8"),
        "{error}"
    );
}

#[test]
fn files_that_cannot_be_read_are_named() {
    let (dir, path) = place();
    let message = Spectrum::read(&path).unwrap_err().to_string();
    assert!(
        message.contains("cannot read") && message.contains("lamp.csv"),
        "{message}"
    );
    let message = Spectrum::read(dir.path()).unwrap_err().to_string();
    assert!(message.contains("this is a folder"), "{message}");
    let fake = dir.path().join("lamp.h5");
    fs::write(&fake, "wavelength_nm,intensity\n1,2\n3,4\n").unwrap();
    let message = Spectrum::read(&fake).unwrap_err().to_string();
    assert!(message.contains("is not an HDF5 file"), "{message}");
}

#[test]
fn a_file_that_exists_is_kept() {
    let (dir, path) = place();
    let s = parse("wavelength_nm,intensity\n588,1\n589,2\n").unwrap();
    fs::write(&path, "mine").unwrap();
    for error in [
        s.write_csv(&path, false).unwrap_err(),
        s.write_hdf5(&path, false).unwrap_err(),
    ] {
        let message = error.to_string();
        assert!(
            message.contains("exists already") && message.contains("--overwrite"),
            "{message}"
        );
    }
    assert_eq!(fs::read_to_string(&path).unwrap(), "mine");
    s.write_csv(&path, true).unwrap();
    assert_eq!(
        fs::read_to_string(&path).unwrap(),
        "wavelength_nm,intensity\n588,1\n589,2\n"
    );
    assert_eq!(files_in(&dir), ["lamp.csv"]);
    let message = s
        .write_csv(dir.path().join("none/a.csv"), false)
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("the folder") && message.contains("does not exist"),
        "{message}"
    );
    let message = s.write_hdf5(dir.path(), true).unwrap_err().to_string();
    assert!(message.contains("this is a folder"), "{message}");
    assert_eq!(files_in(&dir), ["lamp.csv"]);
}

#[test]
fn a_spectrum_survives_hdf5() {
    let (dir, _) = place();
    let path = dir.path().join("lamp.h5");
    let text = "# medium: vacuum\n# intensity_unit: W m-2 sr-1 nm-1\nwavelength_nm,intensity,uncertainty,mask\n\
                589.1583,1e-5,1e-7,0\n588.2,2e-5,1e-7,1\n587.3,3e-5,2e-7,0\n";
    let s = parse(text).unwrap();
    s.write(&path, false).unwrap();
    let back = Spectrum::read(&path).unwrap();
    assert_eq!(back, Spectrum { path, ..s });
    assert_eq!(files_in(&dir), ["lamp.h5"]);
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    #[test]
    fn random_bytes_never_panic(bytes in proptest::collection::vec(any::<u8>(), 0..400)) {
        let _ = Spectrum::parse_csv(&bytes, "random.csv");
    }

    #[test]
    fn random_tables_never_panic_and_what_is_accepted_is_sound(
        rows in proptest::collection::vec("[0-9eE+.,nai#\"\\- \u{e9}]{0,14}", 0..12),
        head in prop_oneof![Just("wavelength_nm,intensity"), Just("intensity,wavelength_nm,uncertainty,mask"), Just("")],
    ) {
        let text = format!("{head}\n{}", rows.join("\n"));
        if let Ok(s) = parse(&text) {
            prop_assert!(s.wavelength.len() >= 2);
            prop_assert_eq!(s.wavelength.len(), s.intensity.len());
            prop_assert_eq!(s.wavelength.len(), s.mask.len());
            prop_assert!(s.mask.iter().any(|m| !m));
            for i in 0..s.mask.len() {
                prop_assert!(s.mask[i] || s.intensity[i].is_finite());
            }
        }
    }

    #[test]
    fn a_spectrum_survives_csv_bit_for_bit(
        steps in proptest::collection::vec((1e-13..1e-9f64, -1e3..1e3f64, 1e-30..1e30f64, any::<bool>()), 2..40),
        falling in any::<bool>(),
    ) {
        let mut at = 300e-9;
        let mut s = Spectrum { medium: Some(Medium::Air), ..Spectrum::default() };
        s.intensity_unit = Some("W m-2 sr-1 nm-1".into());
        let mut sigma = Vec::new();
        for (step, value, uncertainty, masked) in steps {
            at = if falling { at - step } else { at + step };
            s.wavelength.push(at);
            s.intensity.push(value);
            s.mask.push(masked);
            sigma.push(uncertainty);
        }
        s.mask[0] = false;
        s.uncertainty = Some(sigma);
        let dir = tempfile::tempdir().unwrap();
        s.path = dir.path().join("s.csv");
        s.write_csv(&s.path, false).unwrap();
        prop_assert_eq!(Spectrum::read(&s.path).unwrap(), s);
    }
}
