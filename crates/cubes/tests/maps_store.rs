//! The maps store: what is put in comes out, whatever happens in between.

#![allow(clippy::unwrap_used)]

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::{Path, PathBuf};

use backlit_cubes::{CubesError, FlagName, Maps, MapsSpec, MapsWriter, Quantity, Tile};
use ndarray::Array2;

const NY: usize = 7;
const NX: usize = 5;

fn spec() -> MapsSpec {
    let mut tiles = Vec::new();
    for y0 in (0..NY).step_by(2) {
        for x0 in (0..NX).step_by(3) {
            let (y1, x1) = ((y0 + 2).min(NY), (x0 + 3).min(NX));
            tiles.push(Tile {
                index: tiles.len(),
                y0,
                y1,
                x0,
                x1,
            });
        }
    }
    MapsSpec {
        ny: NY,
        nx: NX,
        quantities: vec![
            Quantity::new("cloud1_temperature", "K", "temperature of cloud 1"),
            Quantity::new("chi2_reduced", "1", "reduced chi-square"),
        ],
        flag_names: FlagName::standard(),
        attributes: BTreeMap::from([("setup".into(), "[instrument]\nfwhm_nm = 0.1\n".into())]),
        identity: "setup: abc\ninput sha256: 123".into(),
        tiles,
    }
}

/// What pixel (y, x) of quantity q must hold: written down here, not read from the store.
fn truth(q: usize, y: usize, x: usize) -> f64 {
    if (y, x) == (3, 3) {
        f64::NAN
    } else {
        1000.0 * q as f64 + 10.0 * y as f64 + x as f64 + 0.1
    }
}

fn truth_flag(y: usize, x: usize) -> u32 {
    u32::try_from(y * 16 + x).unwrap()
}

fn put(writer: &mut MapsWriter, tile: &Tile) {
    let values = Array2::from_shape_fn((2, tile.pixels()), |(q, p)| {
        let (y, x) = tile.position(p);
        truth(q, y, x)
    });
    let flags: Vec<u32> = (0..tile.pixels())
        .map(|p| {
            let (y, x) = tile.position(p);
            truth_flag(y, x)
        })
        .collect();
    writer.put(tile.index, &values, &flags).unwrap();
}

fn check(path: &Path) {
    let maps = Maps::open(path).unwrap();
    assert_eq!(maps.shape(), (NY, NX));
    for (q, quantity) in spec().quantities.iter().enumerate() {
        assert_eq!(maps.quantity(&quantity.name), Some(quantity));
        let map = maps.map(&quantity.name).unwrap();
        for ((y, x), value) in map.indexed_iter() {
            assert_eq!(
                value.to_bits(),
                truth(q, y, x).to_bits(),
                "{} at ({y}, {x})",
                quantity.name
            );
        }
    }
    for ((y, x), flag) in maps.flags().unwrap().indexed_iter() {
        assert_eq!(*flag, truth_flag(y, x));
    }
    let names: Vec<&str> = maps.names().collect();
    assert_eq!(
        names,
        ["cloud1_temperature", "chi2_reduced"],
        "in the order of the specification"
    );
    assert_eq!(maps.flag_names, FlagName::standard());
    assert_eq!(maps.attributes["setup"], "[instrument]\nfwhm_nm = 0.1\n");
    assert_eq!(maps.attributes["end"], "now");
    assert_eq!(left_over(path), BTreeSet::from([name_of(path)]));
}

fn name_of(path: &Path) -> String {
    path.file_name().unwrap().to_string_lossy().into_owned()
}

fn left_over(path: &Path) -> BTreeSet<String> {
    let folder = fs::read_dir(path.parent().unwrap()).unwrap();
    folder
        .map(|e| e.unwrap().file_name().to_string_lossy().into_owned())
        .collect()
}

fn end() -> BTreeMap<String, String> {
    BTreeMap::from([("end".into(), "now".into())])
}

fn place() -> (tempfile::TempDir, PathBuf) {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("maps.h5");
    (dir, path)
}

fn run(path: &Path, order: impl IntoIterator<Item = Tile>) {
    let mut writer = MapsWriter::create(path, spec(), false).unwrap();
    order.into_iter().for_each(|tile| put(&mut writer, &tile));
    writer.finish(&end()).unwrap();
}

#[test]
fn what_is_put_in_comes_out() {
    let (_dir, path) = place();
    run(&path, spec().tiles);
    check(&path);
}

#[test]
fn the_order_of_tiles_does_not_show_in_the_file() {
    let (_dir, path) = place();
    let (_other_dir, other) = place();
    run(&path, spec().tiles);
    run(&other, spec().tiles.into_iter().rev());
    assert_eq!(fs::read(path).unwrap(), fs::read(other).unwrap());
}

#[test]
fn a_resumed_run_gives_the_same_file_bit_for_bit() {
    let (_dir, whole) = place();
    run(&whole, spec().tiles);
    let (_dir, path) = place();
    let mut writer = MapsWriter::create(&path, spec(), false).unwrap();
    put(&mut writer, &spec().tiles[4]);
    put(&mut writer, &spec().tiles[1]);
    drop(writer);
    assert!(!path.exists());

    let mut resumed = spec();
    resumed
        .attributes
        .insert("command".into(), "with --resume".into());
    let mut writer = MapsWriter::resume(&path, resumed).unwrap();
    assert_eq!(writer.done(), BTreeSet::from([1, 4]));
    for tile in writer.open_tiles() {
        put(&mut writer, &tile);
    }
    writer.finish(&end()).unwrap();
    check(&path);
    assert_eq!(fs::read(whole).unwrap(), fs::read(path).unwrap());
}

#[test]
fn a_journal_torn_at_any_byte_of_its_last_record_loses_only_that_record() {
    let (_dir, path) = place();
    let journal = path.with_file_name("maps.h5.journal");
    let mut writer = MapsWriter::create(&path, spec(), false).unwrap();
    put(&mut writer, &spec().tiles[0]);
    writer.sync().unwrap();
    let before = fs::read(&journal).unwrap().len();
    put(&mut writer, &spec().tiles[1]);
    drop(writer);
    let whole = fs::read(&journal).unwrap();
    for cut in before..whole.len() {
        fs::write(&journal, &whole[..cut]).unwrap();
        let writer = MapsWriter::resume(&path, spec()).unwrap();
        assert_eq!(writer.done(), BTreeSet::from([0]), "cut at byte {cut}");
        drop(writer);
        assert_eq!(
            fs::read(&journal).unwrap().len(),
            before,
            "the torn part is cut off"
        );
    }
    // A single wrong bit anywhere in the record is noticed as well.
    for at in before..whole.len() {
        let mut bytes = whole.clone();
        bytes[at] ^= 0x10;
        fs::write(&journal, &bytes).unwrap();
        let writer = MapsWriter::resume(&path, spec()).unwrap();
        assert_eq!(
            writer.done(),
            BTreeSet::from([0]),
            "bit flipped at byte {at}"
        );
    }
    fs::write(&journal, &whole).unwrap();
    let mut writer = MapsWriter::resume(&path, spec()).unwrap();
    for tile in writer.open_tiles() {
        put(&mut writer, &tile);
    }
    writer.finish(&end()).unwrap();
    check(&path);
}

#[test]
fn a_journal_torn_in_its_header_begins_anew() {
    let (_dir, path) = place();
    let journal = path.with_file_name("maps.h5.journal");
    drop(MapsWriter::create(&path, spec(), false).unwrap());
    let whole = fs::read(&journal).unwrap();
    for cut in 0..whole.len() {
        fs::write(&journal, &whole[..cut]).unwrap();
        assert!(
            MapsWriter::resume(&path, spec()).unwrap().done().is_empty(),
            "cut at byte {cut}"
        );
        assert_eq!(
            fs::read(&journal).unwrap(),
            whole,
            "the header is whole again"
        );
    }
}

#[test]
fn a_second_run_on_the_same_output_is_refused_while_the_first_lives() {
    let (_dir, path) = place();
    let first = MapsWriter::create(&path, spec(), false).unwrap();
    for error in [
        MapsWriter::create(&path, spec(), true).unwrap_err(),
        MapsWriter::resume(&path, spec()).unwrap_err(),
    ] {
        assert!(matches!(error, CubesError::Busy { .. }), "{error}");
        assert!(error.to_string().contains("another run is writing"));
    }
    drop(first);
    MapsWriter::resume(&path, spec()).unwrap();
}

#[test]
fn existing_files_are_kept_unless_told_otherwise() {
    let (_dir, path) = place();
    drop(MapsWriter::create(&path, spec(), false).unwrap());
    let message = MapsWriter::create(&path, spec(), false)
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("maps.h5.journal with 0 finished tiles"),
        "{message}"
    );
    assert!(message.contains("--resume"), "{message}");

    let mut writer = MapsWriter::create(&path, spec(), true).unwrap();
    spec().tiles.iter().for_each(|tile| put(&mut writer, tile));
    writer.finish(&end()).unwrap();
    let before = fs::read(&path).unwrap();
    let message = MapsWriter::create(&path, spec(), false)
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("exists already") && message.contains("--overwrite"),
        "{message}"
    );
    assert_eq!(left_over(&path), BTreeSet::from([name_of(&path)]));

    // A run that may overwrite leaves the old file alone until it is done, and can be continued as well.
    let mut writer = MapsWriter::create(&path, spec(), true).unwrap();
    put(&mut writer, &spec().tiles[0]);
    drop(writer);
    assert_eq!(fs::read(&path).unwrap(), before);
    let mut writer = MapsWriter::resume(&path, spec()).unwrap();
    assert_eq!(writer.done().len(), 1);
    for tile in writer.open_tiles() {
        put(&mut writer, &tile);
    }
    writer.finish(&end()).unwrap();
    check(&path);
}

#[test]
fn resuming_complete_maps_has_nothing_to_do() {
    let (_dir, path) = place();
    run(&path, spec().tiles);
    let before = fs::read(&path).unwrap();
    let writer = MapsWriter::resume(&path, spec()).unwrap();
    assert!(writer.open_tiles().is_empty());
    writer.finish(&BTreeMap::new()).unwrap();
    assert_eq!(fs::read(&path).unwrap(), before);

    let other = MapsSpec {
        identity: "setup: abc\ninput sha256: 999".into(),
        ..spec()
    };
    let message = MapsWriter::resume(&path, other).unwrap_err().to_string();
    assert!(
        message.contains("input sha256 is `123` there and `999` here"),
        "{message}"
    );
}

#[test]
fn another_run_is_not_continued_and_the_message_says_what_differs() {
    let (_dir, path) = place();
    drop(MapsWriter::create(&path, spec(), false).unwrap());
    let refuse = |other: MapsSpec, what: &str| {
        let message = MapsWriter::resume(&path, other).unwrap_err().to_string();
        assert!(
            message.contains(what) && message.contains("hint:"),
            "{message}"
        );
    };
    refuse(
        MapsSpec {
            identity: "setup: xyz\ninput sha256: 123".into(),
            ..spec()
        },
        "setup is `abc` there and `xyz` here",
    );
    refuse(
        MapsSpec {
            tiles: vec![spec().tiles[0]],
            ..spec()
        },
        "tiles is `8 tiles` there and `1 tiles` here",
    );
    let mut quantities = spec().quantities;
    quantities.truncate(1);
    refuse(
        MapsSpec {
            quantities,
            ..spec()
        },
        "quantities is `cloud1_temperature chi2_reduced` there",
    );
}

#[test]
fn a_file_that_is_no_journal_is_not_touched() {
    let (_dir, path) = place();
    let journal = path.with_file_name("maps.h5.journal");
    fs::write(
        &journal,
        "a diary of something else entirely, kept by the user",
    )
    .unwrap();
    for error in [
        MapsWriter::create(&path, spec(), false).unwrap_err(),
        MapsWriter::resume(&path, spec()).unwrap_err(),
    ] {
        assert!(
            error
                .to_string()
                .contains("is not a journal of this version"),
            "{error}"
        );
    }
    assert!(fs::read_to_string(&journal).unwrap().starts_with("a diary"));
}

#[test]
fn unfinished_maps_cannot_be_finished_and_stay_resumable() {
    let (_dir, path) = place();
    let mut writer = MapsWriter::create(&path, spec(), false).unwrap();
    put(&mut writer, &spec().tiles[0]);
    let message = writer.finish(&end()).unwrap_err().to_string();
    assert!(message.contains("1 of 8 tiles are there"), "{message}");
    assert_eq!(MapsWriter::resume(&path, spec()).unwrap().done().len(), 1);
}

#[test]
fn tiles_and_arrays_that_do_not_fit_are_refused() {
    let (_dir, path) = place();
    let mut writer = MapsWriter::create(&path, spec(), false).unwrap();
    let values = Array2::zeros((2, 6));
    assert!(matches!(
        writer.put(99, &values, &[0; 6]),
        Err(CubesError::UnknownTile { .. })
    ));
    assert!(matches!(
        writer.put(0, &values, &[0; 5]),
        Err(CubesError::WrongTileShape { .. })
    ));
    let wrong = Array2::zeros((3, 6));
    let message = writer.put(0, &wrong, &[0; 6]).unwrap_err().to_string();
    assert!(
        message.contains("has shape (3, 6), expected (2, 6)"),
        "{message}"
    );
    writer.put(0, &values, &[0; 6]).unwrap();
    assert!(matches!(
        writer.put(0, &values, &[0; 6]),
        Err(CubesError::RepeatedTile { .. })
    ));
    drop(writer);

    let (_dir, path) = place();
    let mut overlapping = spec();
    overlapping.tiles[1].x0 = 2;
    let error = MapsWriter::create(&path, overlapping, false).unwrap_err();
    assert!(
        matches!(error, CubesError::BadMapsSpec { what: "tiles", .. }),
        "{error}"
    );
    assert!(left_over(&path).is_empty());
}

#[test]
fn a_folder_that_is_missing_is_named() {
    let (dir, _) = place();
    let path = dir.path().join("nowhere/maps.h5");
    let message = MapsWriter::create(&path, spec(), false)
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("the folder") && message.contains("does not exist"),
        "{message}"
    );
}

#[test]
fn a_part_of_the_tiles_leaves_the_rest_nan() {
    let (_dir, path) = place();
    let part = MapsSpec {
        tiles: vec![spec().tiles[3]],
        ..spec()
    };
    let mut writer = MapsWriter::create(&path, part.clone(), false).unwrap();
    put(&mut writer, &part.tiles[0]);
    writer.finish(&end()).unwrap();
    let map = Maps::open(&path).unwrap().map("chi2_reduced").unwrap();
    for ((y, x), value) in map.indexed_iter() {
        let tile = part.tiles[0];
        let inside = (tile.y0..tile.y1).contains(&y) && (tile.x0..tile.x1).contains(&x);
        assert_eq!(value.is_nan(), !inside || (y, x) == (3, 3), "({y}, {x})");
    }
}
