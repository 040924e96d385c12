//! Lines and levels of the user's own: what is read, and what is refused with which message.

#![allow(clippy::unwrap_used)]

use std::fs;
use std::path::PathBuf;

use backlit_species::{SpeciesError, user};
use tempfile::TempDir;

const LINES: &str = "wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper\n\
    500.0,1e8,0,2,4\n\
    400.0,2e7,0,2,2\n\
    600.0,3e6,20000,4,6\n";

struct Folder(TempDir);

impl Folder {
    fn new() -> Self {
        Folder(tempfile::tempdir().unwrap())
    }

    fn file(&self, name: &str, text: &str) -> PathBuf {
        let path = self.0.path().join(name);
        fs::write(&path, text).unwrap();
        path
    }
}

fn refused(text: &str) -> SpeciesError {
    let folder = Folder::new();
    user::read_lines(&folder.file("xx-lines.csv", text)).unwrap_err()
}

#[test]
fn lines_are_read_sorted_and_in_si() {
    let folder = Folder::new();
    let lines = user::read_lines(&folder.file("l.csv", LINES)).unwrap();
    let wavelengths: Vec<f64> = lines
        .iter()
        .map(|line| (line.wavelength_vac_m * 1e9).round())
        .collect();
    assert_eq!(wavelengths, [400.0, 500.0, 600.0]);
    // 20 000 cm^-1 is 2.479 68 eV, or 3.972 89e-19 J.
    assert!((lines[2].e_lower_j / 3.972_891_7e-19 - 1.0).abs() < 1e-7);
    assert!((lines[1].g_upper - 4.0).abs() < 1e-15 && (lines[1].a_ki_per_s - 1e8).abs() < 1e-3);
}

#[test]
fn without_a_column_of_its_own_gamma_is_the_sum_of_the_listed_decays_of_both_levels() {
    // The 600 nm line starts at the upper level of the 500 nm line (20 000 cm^-1, g = 4): 3e6 + 1e8.
    let folder = Folder::new();
    let lines = user::read_lines(&folder.file("l.csv", LINES)).unwrap();
    for (line, want) in lines.iter().zip([2e7, 1e8, 1.03e8]) {
        assert!(
            (line.gamma_per_s / want - 1.0).abs() < 1e-12,
            "{} {want}",
            line.gamma_per_s
        );
    }
}

#[test]
fn column_order_extra_columns_comments_and_given_gamma_are_taken() {
    let folder = Folder::new();
    let text = "# from our own furnace\n g_upper ,note,g_lower,e_lower_per_cm,gamma_per_s,a_ki_per_s,wavelength_vac_nm\n\
        4,ours,2,0,7e8,1e8,500\n2,\"a, b\",2,0,,2e7,400\n";
    let lines = user::read_lines(&folder.file("l.csv", text)).unwrap();
    assert!((lines[1].gamma_per_s - 7e8).abs() < 1.0);
    assert!((lines[0].gamma_per_s - 2e7).abs() < 1.0);
}

#[test]
fn a_species_has_the_partition_function_of_its_levels() {
    let folder = Folder::new();
    let lines = folder.file("l.csv", LINES);
    let levels = folder.file("v.csv", "energy_per_cm,g\n20000,4\n0,2\n");
    let species = user::species("Xx I", 22.99, &lines, &levels).unwrap();
    // Q(10 000 K) = 2 + 4 exp(-20000 / 6950.348).
    let want = (2.0 + 4.0 * (-20_000.0_f64 / 6_950.348_004).exp()).ln();
    assert!((species.partition_function(1e4).ln_q - want).abs() < 1e-9);
    assert!((species.mass_kg / (22.99 * 1.660_539_068_92e-27) - 1.0).abs() < 1e-15);
    assert!(matches!(
        user::species("Xx I", 0.0, &lines, &levels),
        Err(SpeciesError::BadMass { .. })
    ));
    assert!(matches!(
        user::species(" ", 1.0, &lines, &levels),
        Err(SpeciesError::NoName)
    ));
}

#[test]
fn bad_rows_are_refused_with_row_column_and_value() {
    let number = refused(&LINES.replace("2e7", "fast"));
    assert!(
        matches!(number, SpeciesError::NotANumber { row: 3, column: "a_ki_per_s", ref got, .. } if got == "fast")
    );
    for (good, bad, want_row, want_column) in [
        ("1e8", "0", 2, "a_ki_per_s"),
        ("1e8", "-1e8", 2, "a_ki_per_s"),
        ("1e8", "NaN", 2, "a_ki_per_s"),
        ("400.0", "0", 3, "wavelength_vac_nm"),
        ("400.0", "inf", 3, "wavelength_vac_nm"),
        ("20000,4", "-5,4", 4, "e_lower_per_cm"),
        ("4,6", "4,6.5", 4, "g_upper"),
        ("4,6", "0,6", 4, "g_lower"),
    ] {
        match refused(&LINES.replacen(good, bad, 1)) {
            SpeciesError::OutOfRange { row, column, .. } => {
                assert_eq!((row, column), (want_row, want_column))
            }
            other => panic!("{bad}: {other}"),
        }
    }
}

#[test]
fn energies_that_contradict_the_wavelength_are_refused() {
    let with_upper = |e_upper: &str| {
        format!(
            "wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper,e_upper_per_cm\n500,1e8,0,2,4,{e_upper}\n"
        )
    };
    // 500 nm is 20 000 cm^-1: 19 981 is 0.095 % off, 19 979 is 0.105 %.
    let folder = Folder::new();
    assert!(user::read_lines(&folder.file("l.csv", &with_upper("19981"))).is_ok());
    let message = refused(&with_upper("19979")).to_string();
    assert!(
        message.contains("19979") && message.contains("row 2") && message.contains("hint:"),
        "{message}"
    );
}

#[test]
fn files_that_are_no_lists_are_refused() {
    let missing = refused(&LINES.replace("g_lower", "g_low"));
    assert!(
        matches!(missing, SpeciesError::MissingColumn { column: "g_lower", ref nearest, .. } if nearest.as_deref() == Some("g_low"))
    );
    let message = missing.to_string();
    assert!(
        message.contains("xx-lines.csv") && message.contains("rename"),
        "{message}"
    );
    assert!(matches!(refused(""), SpeciesError::MissingColumn { .. }));
    let header_only = LINES.lines().next().unwrap();
    assert!(matches!(
        refused(header_only),
        SpeciesError::NoRows { what: "line", .. }
    ));
    assert!(matches!(
        refused(&format!("{LINES}1,2\n")),
        SpeciesError::Csv { .. }
    ));
    let nowhere = user::read_levels(&PathBuf::from("no-such-levels.csv")).unwrap_err();
    assert!(
        matches!(nowhere, SpeciesError::Read { .. })
            && nowhere.to_string().contains("no-such-levels.csv")
    );
}
