//! Line lists of others: what is read, and what is refused.

#![allow(clippy::unwrap_used)]

use std::path::PathBuf;

use backlit_species::line_list::{Choice, Format, read};
use backlit_species::{Level, SpeciesError, user};
use proptest::prelude::*;
use tempfile::TempDir;

/// A folder with one file in it.
fn file(bytes: &[u8]) -> (TempDir, PathBuf) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("list");
    std::fs::write(&path, bytes).unwrap();
    (folder, path)
}

/// A 160-character record: molecule and isotopologue, wavenumber, A, lower energy, weights.
fn record(
    species: &str,
    wavenumber: &str,
    a: &str,
    e_lower: &str,
    g_upper: &str,
    g_lower: &str,
) -> String {
    let front = format!(
        "{species:>3}{wavenumber:>12}{:>10}{a:>10}{:>5}{:>5}{e_lower:>10}{:>4}{:>8}",
        "9.465E-20", "0.07", "0.08", "0.7", "-.002"
    );
    format!("{front:<146}{g_upper:>7}{g_lower:>7}\n")
}

fn carbon_monoxide() -> String {
    record(" 51", "2147.081134", "1.201E+01", "0.0000", "3.0", "1.0")
        + &record(" 51", "2150.856008", "1.446E+01", "3.8450", "5.0", "3.0")
}

/// Rigid-rotor levels of CO, J = 0..60, with its rotational constant.
fn rotor() -> Vec<Level> {
    (0..60)
        .map(|j: u32| Level {
            g: f64::from(2 * j + 1),
            energy_j: 1.922_529 * f64::from(j * (j + 1)) * 1.986_445_857e-23,
        })
        .collect()
}

#[test]
fn a_record_of_160_characters_is_a_line() {
    let (_folder, path) = file(carbon_monoxide().as_bytes());
    let lines = read(&path, &Choice::default(), &[]).unwrap();
    assert_eq!(lines.len(), 2);
    // 1e7 / 2147.081134 nm.
    assert!((lines[1].wavelength_vac_m / 4.657_485e-6 - 1.0).abs() < 1e-6);
    assert!((lines[1].a_ki_per_s - 12.01).abs() < 1e-9);
    assert_eq!((lines[1].g_lower, lines[1].g_upper), (1.0, 3.0));
    // 3.845 cm^-1.
    assert!((lines[0].e_lower_j / 7.637_884e-23 - 1.0).abs() < 1e-6);
}

#[test]
fn several_species_in_one_list_must_be_chosen_from() {
    let both = carbon_monoxide() + &record(" 5A", "2000.0", "1.0", "0.0", "3.0", "1.0");
    let (_folder, path) = file(both.as_bytes());
    let message = read(&path, &Choice::default(), &[])
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("molecule 5 isotopologue 11") && message.contains("hint:"),
        "{message}"
    );
    let choose = |isotopologue| Choice {
        isotopologue: Some(isotopologue),
        ..Choice::default()
    };
    assert_eq!(read(&path, &choose(1), &[]).unwrap().len(), 2);
    assert_eq!(read(&path, &choose(11), &[]).unwrap().len(), 1);
    assert!(matches!(
        read(&path, &choose(3), &[]),
        Err(SpeciesError::WhichSpecies { .. })
    ));
}

#[test]
fn a_bad_record_is_refused_with_its_row_and_field() {
    for (species, wavenumber, a, e_lower, g_upper, g_lower, column) in [
        (" 51", "0.0", "1.0", "0.0", "3.0", "1.0", "wavenumber"),
        (" 51", "2000.0", "0.0", "0.0", "3.0", "1.0", "A,"),
        (" 51", "2000.0", "1.0", "-1.0", "3.0", "1.0", "lower energy"),
        (" 51", "2000.0", "1.0", "0.0", "2.5", "1.0", "upper weight"),
        (" 51", "2000.0", "1.0", "0.0", "3.0", "0.0", "lower weight"),
        (" 51", "2000.0", "1.0", "0.0", "3.0", "", "lower weight"),
        (" x1", "2000.0", "1.0", "0.0", "3.0", "1.0", "molecule"),
        (" 5-", "2000.0", "1.0", "0.0", "3.0", "1.0", "isotopologue"),
    ] {
        let text = carbon_monoxide() + &record(species, wavenumber, a, e_lower, g_upper, g_lower);
        let (_folder, path) = file(text.as_bytes());
        match read(&path, &Choice::default(), &[]) {
            Err(
                SpeciesError::OutOfRange {
                    row: 3,
                    column: got,
                    ..
                }
                | SpeciesError::NotANumber {
                    row: 3,
                    column: got,
                    ..
                },
            ) => {
                assert!(got.starts_with(column), "{got}");
            }
            other => panic!("{column}: {other:?}"),
        }
    }
}

/// CO J = 1-0 and 2-1 as the JPL catalogue prints them (from memory).
const MILLIMETRE: &str = "  115271.2018  0.0005 -5.0105 2    0.0000  3 -28001 101 1           0\n  \
     230538.0000  0.0005 -4.1197 2    3.8450  5 -28001 101 2           1\n";

#[test]
fn a_millimetre_catalogue_gives_the_published_a() {
    let (_folder, path) = file(MILLIMETRE.as_bytes());
    let lines = read(&path, &Choice::default(), &rotor()).unwrap();
    // 7.203e-8 and 6.910e-7 s^-1, lower weights 1 and 3.
    for (line, a_per_s, g_lower) in [(&lines[1], 7.203e-8, 1.0), (&lines[0], 6.910e-7, 3.0)] {
        assert!(
            (line.a_ki_per_s / a_per_s - 1.0).abs() < 3e-3,
            "{:e}",
            line.a_ki_per_s
        );
        assert_eq!(line.g_lower, g_lower);
    }
    let other = Choice {
        molecule: Some(29001),
        ..Choice::default()
    };
    assert!(matches!(
        read(&path, &other, &rotor()),
        Err(SpeciesError::WhichSpecies { .. })
    ));
}

#[test]
fn a_species_takes_its_lines_from_any_format() {
    let (_folder, path) = file(carbon_monoxide().as_bytes());
    let levels = path.with_file_name("levels.csv");
    std::fs::write(&levels, "g,energy_per_cm\n1,0\n3,3.845\n").unwrap();
    assert_eq!(
        user::species("CO x", 28.0, &path, &levels)
            .unwrap()
            .lines
            .len(),
        2
    );
    let as_csv = Choice {
        format: Some(Format::Csv),
        ..Choice::default()
    };
    assert!(matches!(
        user::chosen_species("CO x", 28.0, &path, &levels, &as_csv),
        Err(SpeciesError::MissingColumn { .. } | SpeciesError::Csv { .. })
    ));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(256))]
    #[test]
    fn no_bytes_make_a_panic(bytes in proptest::collection::vec(any::<u8>(), 0..400), good in any::<bool>()) {
        let mut all = if good { carbon_monoxide().into_bytes() } else { Vec::new() };
        all.extend(bytes);
        let (_folder, path) = file(&all);
        for format in [None, Some(Format::Csv), Some(Format::Record160), Some(Format::Millimetre)] {
            let _ = read(&path, &Choice { format, ..Choice::default() }, &rotor());
        }
        let _ = user::read_levels(&path);
    }

    #[test]
    fn no_damage_to_a_row_makes_a_panic(at in 0_usize..300, byte in any::<u8>(), rows in any::<bool>()) {
        let mut all = if rows { carbon_monoxide() } else { MILLIMETRE.to_owned() }.into_bytes();
        let end = all.len();
        all[at.min(end - 1)] = byte;
        let (_folder, path) = file(&all);
        for format in [None, Some(Format::Record160), Some(Format::Millimetre)] {
            let _ = read(&path, &Choice { format, ..Choice::default() }, &rotor());
        }
    }
}
