//! `backlit species`.
#![allow(clippy::unwrap_used)]

mod program;

use program::Desk;

#[test]
fn the_list_has_one_row_a_species_and_a_count() {
    let text = Desk::new().run(&["species"]).done();
    let rows = text.lines().count() - 2;
    assert!(text.lines().any(|line| line.starts_with("Na I ")));
    let count = text.lines().last().unwrap();
    assert!(count.starts_with(&format!("{rows} species, ")), "{count}");
}

#[test]
fn a_named_species_shows_the_sodium_doublet_in_vacuum_and_air() {
    // NIST Atomic Spectra Database: 588.9950954 and 589.5924237 nm in air (from memory).
    let document = Desk::new()
        .run(&["species", "Na I", "--range", "588..591", "--json"])
        .json();
    assert_eq!(document["schema"], "backlit-species/1");
    let lines = document["species"][0]["lines"].as_array().unwrap();
    let air: Vec<f64> = lines
        .iter()
        .map(|line| line["wavelength_air_nm"].as_f64().unwrap())
        .collect();
    for expected in [588.995_095, 589.592_424] {
        assert!(air.iter().any(|nm| (nm - expected).abs() < 1e-3), "{air:?}");
    }
    for line in lines {
        let (air, vacuum) = (&line["wavelength_air_nm"], &line["wavelength_vac_nm"]);
        assert!(vacuum.as_f64().unwrap() > air.as_f64().unwrap() + 0.16);
    }
}

#[test]
fn json_is_one_document_and_nothing_else() {
    let document = Desk::new().run(&["species", "--json"]).json();
    let species = document["species"].as_array().unwrap();
    assert!(species.iter().any(|entry| entry["name"] == "Na I"));
    assert!(species.iter().all(|entry| entry.get("lines").is_none()));
}

#[test]
fn a_range_without_lines_lists_no_species() {
    let text = Desk::new()
        .run(&["species", "--range", "1e12..2e12"])
        .done();
    assert!(
        text.ends_with("0 species, 0 lines; wavelengths in vacuum\n"),
        "{text}"
    );
}

#[test]
fn an_unknown_name_is_refused_with_the_nearest_ones() {
    let outcome = Desk::new().run(&["species", "Na Q"]);
    outcome.refused(&["\"Na Q\"", "hint: did you mean", "Na I"]);
}
