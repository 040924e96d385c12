//! Cubes in HDF5: written and read tile by tile, and every refusal with its message.

#![allow(clippy::unwrap_used)]

use std::fs;
use std::path::{Path, PathBuf};

use backlit_cubes::{
    Cube, CubeLayout, CubeUncertainty, CubeWriter, CubesError, Spectrum, Storage, TileUncertainty,
};
use backlit_units::Medium;
use hdf5::types::{FixedAscii, VarLenUnicode};
use ndarray::{Array1, Array2, Array3};

const N: usize = 6;

fn wavelengths() -> Vec<f64> {
    (0..N).map(|i| (5880 + i) as f64 / 1e10).collect()
}

fn layout(ny: usize, nx: usize) -> CubeLayout {
    CubeLayout {
        ny,
        nx,
        wavelength: wavelengths(),
        medium: Some(Medium::Vacuum),
        intensity_unit: Some("W m-2 sr-1 nm-1".into()),
        ..CubeLayout::default()
    }
}

/// What channel i of pixel (y, x) must hold: halves, so that 32 bits hold them exactly.
fn truth(y: usize, x: usize, i: usize) -> f64 {
    0.5 + (y * 100 + x * 10 + i) as f64
}

fn place() -> (tempfile::TempDir, PathBuf) {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("cube.h5");
    (dir, path)
}

fn files_in(dir: &tempfile::TempDir) -> Vec<String> {
    let entries = fs::read_dir(dir.path()).unwrap();
    entries
        .map(|e| e.unwrap().file_name().to_string_lossy().into_owned())
        .collect()
}

fn text(location: &hdf5::Location, name: &str, value: &str) {
    let attribute = location.new_attr::<VarLenUnicode>().create(name).unwrap();
    attribute
        .write_scalar(&value.parse::<VarLenUnicode>().unwrap())
        .unwrap();
}

/// A cube as another program would write it; `change` may spoil it.
fn foreign(path: &Path, change: impl Fn(&hdf5::File)) {
    let file = hdf5::File::create(path).unwrap();
    let angstrom: Vec<f32> = (0..N).map(|i| (5880 + i) as f32).collect();
    let wavelength = file
        .new_dataset_builder()
        .with_data(&angstrom)
        .create("wavelength")
        .unwrap();
    let units = wavelength
        .new_attr::<FixedAscii<8>>()
        .shape(1)
        .create("units")
        .unwrap();
    units
        .write(&Array1::from_elem(
            1,
            FixedAscii::<8>::from_ascii(b"Angstrom").unwrap(),
        ))
        .unwrap();
    text(&wavelength, "medium", "air");
    let cube = Array3::from_shape_fn((3, 4, N), |(y, x, i)| truth(y, x, i) as f32);
    file.new_dataset_builder()
        .with_data(&cube)
        .create("intensity")
        .unwrap();
    change(&file);
}

fn replace<T: hdf5::H5Type, D: ndarray::Dimension>(
    file: &hdf5::File,
    name: &str,
    data: &ndarray::Array<T, D>,
) {
    if file.link_exists(name) {
        file.unlink(name).unwrap();
    }
    file.new_dataset_builder()
        .with_data(data)
        .create(name)
        .unwrap();
}

#[test]
fn a_cube_comes_back_tile_by_tile_whatever_the_storage() {
    for storage in [Storage::Single, Storage::Double] {
        for compression in [None, Some(4)] {
            for tile_pixels in [1, 2, 5, 1000] {
                let (dir, path) = place();
                let mut layout = layout(3, 4);
                layout.storage = storage;
                layout.compression = compression;
                layout.uncertainty = CubeUncertainty::Pixels;
                let mut writer = CubeWriter::create(&path, &layout, false).unwrap();
                let whole = backlit_cubes::Tile {
                    index: 0,
                    y0: 0,
                    y1: 3,
                    x0: 0,
                    x1: 4,
                };
                let data = Array2::from_shape_fn((12, N), |(p, i)| truth(p / 4, p % 4, i));
                writer
                    .write_tile(&whole, &data, Some(&(&data * 0.5)))
                    .unwrap();
                writer.finish().unwrap();
                assert_eq!(files_in(&dir), ["cube.h5"]);

                let cube = Cube::open(&path).unwrap();
                assert_eq!(cube.shape(), (3, 4, N));
                assert_eq!(cube.wavelength, wavelengths());
                assert_eq!(cube.medium, Some(Medium::Vacuum));
                assert_eq!(cube.intensity_unit.as_deref(), Some("W m-2 sr-1 nm-1"));
                let mut pixels = 0;
                for tile in cube.tiles(tile_pixels) {
                    let data = cube.read_tile(&tile).unwrap();
                    for p in 0..tile.pixels() {
                        let (y, x) = tile.position(p);
                        for i in 0..N {
                            assert_eq!(data.intensity[(p, i)], truth(y, x, i));
                            assert_eq!(data.uncertainty.row(p).unwrap()[i], truth(y, x, i) / 2.0);
                        }
                        pixels += 1;
                    }
                    assert!(data.mask.iter().all(|m| !m));
                }
                assert_eq!(pixels, 12);
            }
        }
    }
}

#[test]
fn pixels_that_were_never_written_come_masked() {
    let (_dir, path) = place();
    let mut writer = CubeWriter::create(&path, &layout(2, 2), false).unwrap();
    let tile = backlit_cubes::Tile {
        index: 0,
        y0: 1,
        y1: 2,
        x0: 0,
        x1: 1,
    };
    writer
        .write_tile(&tile, &Array2::ones((1, N)), None)
        .unwrap();
    writer.finish().unwrap();
    let cube = Cube::open(&path).unwrap();
    let data = cube.read_tile(&cube.tiles(4)[0]).unwrap();
    for p in 0..4 {
        assert!(data.mask.row(p).iter().all(|m| *m == (p != 2)), "pixel {p}");
    }
    assert_eq!(data.uncertainty, TileUncertainty::None);
}

#[test]
fn a_cube_of_another_program_is_understood() {
    let (_dir, path) = place();
    foreign(&path, |file| {
        text(
            &file.dataset("intensity").unwrap(),
            "units",
            "W m-2 sr-1 nm-1",
        );
        let mut sigma = Array1::from_elem(N, 0.25_f32);
        sigma[2] = 0.0;
        replace(file, "uncertainty", &sigma);
        replace(
            file,
            "mask",
            &Array3::from_shape_fn((3, 4, N), |(y, _, i)| y == 1 && i == 4),
        );
    });
    let cube = Cube::open(&path).unwrap();
    assert_eq!(cube.wavelength, wavelengths());
    assert_eq!(cube.medium, Some(Medium::Air));
    assert_eq!(cube.notes.len(), 1);
    let tile = cube.tiles(12)[0];
    let data = cube.read_tile(&tile).unwrap();
    for p in 0..12 {
        for i in 0..N {
            let (y, x) = tile.position(p);
            assert_eq!(data.intensity[(p, i)], truth(y, x, i));
            assert_eq!(
                data.mask[(p, i)],
                i == 2 || (y == 1 && i == 4),
                "({y}, {x}), {i}"
            );
        }
    }
    let sigma = data.uncertainty.row(5).unwrap();
    assert_eq!((sigma[0], sigma[2]), (0.25, 0.0));
}

#[test]
fn integers_scalars_and_wide_masks_are_understood() {
    let (_dir, path) = place();
    foreign(&path, |file| {
        let counts = Array3::from_shape_fn((3, 4, N), |(y, x, i)| (y * 100 + x * 10 + i) as u16);
        replace(file, "intensity", &counts);
        file.new_dataset::<f64>()
            .create("uncertainty")
            .unwrap()
            .write_scalar(&2.0)
            .unwrap();
        replace(
            file,
            "mask",
            &Array1::from_vec(vec![0_i64, 0, 1 << 40, 0, -7, 0]),
        );
    });
    let cube = Cube::open(&path).unwrap();
    let data = cube.read_tile(&cube.tiles(12)[0]).unwrap();
    assert_eq!(data.intensity[(7, 3)], 133.0);
    assert_eq!(data.uncertainty.row(0).unwrap().to_vec(), vec![2.0; N]);
    assert_eq!(
        data.mask.row(11).to_vec(),
        [false, false, true, false, true, false]
    );
}

#[test]
fn chunks_of_any_shape_are_read_right_and_tiles_keep_to_them() {
    for chunk in [(1, 1, N), (2, 3, 4), (3, 4, 1), (1, 4, 6), (3, 2, 5)] {
        let (_dir, path) = place();
        foreign(&path, |file| {
            file.unlink("intensity").unwrap();
            let cube = Array3::from_shape_fn((3, 4, N), |(y, x, i)| truth(y, x, i));
            let builder = file.new_dataset_builder().chunk(chunk).shuffle().deflate(5);
            builder.with_data(&cube).create("intensity").unwrap();
        });
        let cube = Cube::open(&path).unwrap();
        for tile_pixels in [1, 3, 6, 12] {
            let tiles = cube.tiles(tile_pixels);
            for tile in &tiles {
                if chunk.0 * chunk.1 <= tile_pixels {
                    let cut =
                        |at: usize, size: usize, end: usize| !at.is_multiple_of(size) && at != end;
                    assert!(
                        !cut(tile.y0, chunk.0, 3) && !cut(tile.y1, chunk.0, 3),
                        "{tile:?}"
                    );
                    assert!(
                        !cut(tile.x0, chunk.1, 4) && !cut(tile.x1, chunk.1, 4),
                        "{tile:?}"
                    );
                }
                let data = cube.read_tile(tile).unwrap();
                for ((p, i), value) in data.intensity.indexed_iter() {
                    let (y, x) = tile.position(p);
                    assert_eq!(*value, truth(y, x, i), "{chunk:?} {tile:?}");
                }
            }
            assert_eq!(tiles.iter().map(|t| t.pixels()).sum::<usize>(), 12);
        }
        let pixel = cube.spectrum(2, 1).unwrap();
        assert_eq!(
            pixel.intensity,
            (0..N).map(|i| truth(2, 1, i)).collect::<Vec<_>>()
        );
        assert_eq!(
            (pixel.wavelength, pixel.medium),
            (wavelengths(), Some(Medium::Air))
        );
        assert!(matches!(
            cube.spectrum(3, 0),
            Err(CubesError::UnknownTile { .. })
        ));
        assert!(matches!(
            cube.spectrum(0, usize::MAX),
            Err(CubesError::UnknownTile { .. })
        ));
    }
}

#[test]
fn nan_in_the_data_comes_masked() {
    let (_dir, path) = place();
    foreign(&path, |file| {
        let mut cube = Array3::from_elem((3, 4, N), 1.0);
        cube[(2, 3, 1)] = f64::NAN;
        cube[(0, 0, 0)] = f64::INFINITY;
        replace(file, "intensity", &cube);
    });
    let cube = Cube::open(&path).unwrap();
    let data = cube.read_tile(&cube.tiles(12)[0]).unwrap();
    assert_eq!(data.mask.iter().filter(|m| **m).count(), 2);
    assert!(data.mask[(11, 1)] && data.mask[(0, 0)]);
}

#[test]
fn bad_cubes_are_refused_with_their_place() {
    let refuses = |change: &dyn Fn(&hdf5::File), parts: &[&str]| {
        let (_dir, path) = place();
        foreign(&path, change);
        let message = Cube::open(&path).unwrap_err().to_string();
        for part in parts.iter().chain(&["cube.h5", "\nhint: "]) {
            assert!(message.contains(part), "`{part}` is not in: {message}");
        }
    };
    let wavelength = |values: Vec<f64>, units: Option<&'static str>| {
        move |file: &hdf5::File| {
            replace(file, "wavelength", &Array1::from_vec(values.clone()));
            if let Some(units) = units {
                text(&file.dataset("wavelength").unwrap(), "units", units);
            }
        }
    };
    refuses(
        &|f| replace(f, "intensity", &Array2::<f64>::zeros((4, N))),
        &[
            "/intensity has shape (4, 6)",
            "expected (ny, nx, n)",
            "(1, nt, n)",
        ],
    );
    refuses(
        &|f| replace(f, "intensity", &Array1::<f64>::zeros(N)),
        &["has shape (6)", "single spectrum", "backlit fit"],
    );
    refuses(
        &|f| replace(f, "intensity", &Array3::<f64>::zeros((3, 4, 7))),
        &["has shape (3, 4, 7)", "expected (ny, nx, 6) as /wavelength"],
    );
    refuses(
        &|f| {
            replace(
                f,
                "intensity",
                &Array3::from_elem((3, 4, N), FixedAscii::<4>::new()),
            )
        },
        &[
            "/intensity holds",
            "expected floating-point numbers or integers",
        ],
    );
    refuses(
        &|f| f.unlink("intensity").unwrap(),
        &["no dataset /intensity", "found `/wavelength`"],
    );
    refuses(
        &|f| f.unlink("wavelength").unwrap(),
        &["no dataset /wavelength", "found `/intensity`"],
    );
    refuses(
        &wavelength(vec![1.0, 2.0, 3.0, 4.0, 5.0, 6.0], None),
        &["/wavelength has no attribute `units`", "nm"],
    );
    refuses(
        &wavelength(vec![1.0, 2.0, 3.0, 4.0, 5.0, 6.0], Some("GHz")),
        &[
            "/wavelength, attribute `units`",
            "wavelength unit `GHz`",
            "expected nm",
        ],
    );
    refuses(
        &wavelength(vec![1.0, 2.0, 3.0, 3.0, 5.0, 6.0], Some("nm")),
        &[
            "/wavelength, element 3",
            "3 nm after 3 nm",
            "strictly rising",
        ],
    );
    refuses(
        &wavelength(vec![1.0, 2.0, -3.0, 4.0, 5.0, 6.0], Some("um")),
        &["/wavelength, element 2", "wavelength -3000 nm"],
    );
    refuses(
        &|f| replace(f, "wavelength", &Array2::<f64>::zeros((1, N))),
        &["/wavelength has shape (1, 6), expected (n)"],
    );
    refuses(
        &|f| {
            let w = f.dataset("wavelength").unwrap();
            w.delete_attr("medium").unwrap();
            text(&w, "medium", "water");
        },
        &["attribute `medium`", "medium `water`"],
    );
    refuses(
        &|f| {
            let w = f.dataset("wavelength").unwrap();
            w.delete_attr("medium").unwrap();
            w.new_attr::<f64>().create("medium").unwrap();
        },
        &["attribute `medium`: not a text"],
    );
    refuses(
        &|f| text(&f.dataset("intensity").unwrap(), "units", "furlongs"),
        &["/intensity, attribute `units`", "intensity unit `furlongs`"],
    );
    refuses(
        &|f| replace(f, "uncertainty", &Array2::<f64>::ones((3, 4))),
        &[
            "/uncertainty has shape (3, 4)",
            "(3, 4, 6), (6) or a scalar",
        ],
    );
    refuses(
        &|f| replace(f, "uncertainty", &Array1::from_elem(N, -1.0)),
        &[
            "/uncertainty",
            "no uncertainty is above zero (the first is -1)",
        ],
    );
    refuses(
        &|f| replace(f, "mask", &Array1::<u8>::zeros(5)),
        &["/mask has shape (5)", "(3, 4, 6) or (6)"],
    );
    refuses(
        &|f| replace(f, "mask", &Array1::<f64>::zeros(N)),
        &["/mask holds", "expected integers or booleans"],
    );
}

#[test]
fn files_that_are_no_cubes_are_refused() {
    let (dir, path) = place();
    let message = |path: &Path| Cube::open(path).unwrap_err().to_string();
    assert!(message(&path).contains("cannot read"), "{}", message(&path));
    assert!(
        message(dir.path()).contains("this is a folder"),
        "{}",
        message(dir.path())
    );
    fs::write(&path, "").unwrap();
    assert!(
        message(&path).contains("is not an HDF5 file"),
        "{}",
        message(&path)
    );
    fs::write(&path, "wavelength_nm,intensity\n1,2\n").unwrap();
    assert!(
        message(&path).contains("is not an HDF5 file"),
        "{}",
        message(&path)
    );
}

#[test]
fn a_cube_cut_at_any_place_is_refused_and_never_panics() {
    let (_dir, path) = place();
    foreign(&path, |_| ());
    let whole = fs::read(&path).unwrap();
    for cut in (1..whole.len()).step_by(97).chain([whole.len() - 1]) {
        fs::write(&path, &whole[..cut]).unwrap();
        let message = Cube::open(&path).unwrap_err().to_string();
        if cut > 100 {
            assert!(
                message.contains("is truncated") && message.contains("copy it again"),
                "{cut}: {message}"
            );
        } else {
            assert!(message.contains("hint:"), "{cut}: {message}");
        }
    }
}

#[test]
fn a_cube_of_one_pixel_is_a_spectrum_and_a_larger_one_is_not() {
    let (_dir, path) = place();
    foreign(&path, |f| {
        replace(f, "intensity", &Array3::<f64>::ones((1, 1, N)))
    });
    assert_eq!(Spectrum::read(&path).unwrap().intensity, vec![1.0; N]);
    foreign(&path, |_| ());
    let message = Spectrum::read(&path).unwrap_err().to_string();
    assert!(
        message.contains("/intensity has shape (3, 4, 6)") && message.contains("backlit map"),
        "{message}"
    );
}

#[test]
fn a_writer_that_is_dropped_leaves_nothing_and_keeps_what_was_there() {
    let (dir, path) = place();
    fs::write(&path, "mine").unwrap();
    let error = CubeWriter::create(&path, &layout(2, 2), false).unwrap_err();
    assert!(matches!(error, CubesError::Exists { .. }), "{error}");
    drop(CubeWriter::create(&path, &layout(2, 2), true).unwrap());
    assert_eq!(fs::read_to_string(&path).unwrap(), "mine");
    assert_eq!(files_in(&dir), ["cube.h5"]);
    CubeWriter::create(&path, &layout(2, 2), true)
        .unwrap()
        .finish()
        .unwrap();
    assert_eq!(Cube::open(&path).unwrap().shape(), (2, 2, N));

    let mut bad = layout(2, 2);
    bad.wavelength[3] = bad.wavelength[2];
    let message = CubeWriter::create(&path, &bad, true)
        .unwrap_err()
        .to_string();
    assert!(message.contains("/wavelength, element 3"), "{message}");
    assert_eq!(files_in(&dir), ["cube.h5"]);
}

#[test]
fn blocks_that_do_not_fit_are_refused() {
    let (_dir, path) = place();
    let mut writer = CubeWriter::create(&path, &layout(2, 2), false).unwrap();
    let mut tile = backlit_cubes::Tile {
        index: 7,
        y0: 0,
        y1: 1,
        x0: 0,
        x1: 2,
    };
    let message = writer
        .write_tile(&tile, &Array2::ones((3, N)), None)
        .unwrap_err()
        .to_string();
    assert!(
        message.contains("shape (3, 6), expected (2, 6) (tile 7)"),
        "{message}"
    );
    tile.y1 = 3;
    let error = writer
        .write_tile(&tile, &Array2::ones((6, N)), None)
        .unwrap_err();
    assert!(
        matches!(error, CubesError::UnknownTile { tile: 7, .. }),
        "{error}"
    );
}

#[test]
fn readers_may_be_shared_between_threads() {
    fn shared<T: Send + Sync>() {}
    shared::<Cube>();
    shared::<backlit_cubes::Maps>();
    fn movable<T: Send>() {}
    movable::<backlit_cubes::MapsWriter>();
    movable::<CubeWriter>();
}

#[test]
fn an_attribute_that_is_no_valid_text_is_refused_and_not_trusted() {
    let (_dir, path) = place();
    foreign(&path, |file| {
        let wavelength = file.dataset("wavelength").unwrap();
        wavelength.delete_attr("medium").unwrap();
        // UTF-8 by its type, not by its bytes, as old programs with Latin-1 text leave it.
        let value: hdf5::types::FixedUnicode<4> = "air".parse().unwrap();
        wavelength
            .new_attr::<hdf5::types::FixedUnicode<4>>()
            .create("medium")
            .unwrap()
            .write_scalar(&value)
            .unwrap();
    });
    assert_eq!(Cube::open(&path).unwrap().medium, Some(Medium::Air));
    let mut bytes = fs::read(&path).unwrap();
    let at = bytes.windows(4).position(|w| w == b"air\0").unwrap();
    bytes[at] = 0xe9;
    fs::write(&path, &bytes).unwrap();
    let message = Cube::open(&path).unwrap_err().to_string();
    assert!(message.contains("medium `\u{fffd}ir`"), "{message}");
}
