//! A cube larger than memory should be: what is resident does not grow with it.

#![cfg(target_os = "linux")]
#![allow(clippy::unwrap_used)]

use backlit_cubes::Cube;
use hdf5::plist::dataset_create::{AllocTime, FillTime};

/// Peak resident memory of this process, in bytes; the only test of this file, so that nothing else counts.
fn peak_bytes() -> usize {
    let status = std::fs::read_to_string("/proc/self/status").unwrap();
    let line = status.lines().find(|l| l.starts_with("VmHWM")).unwrap();
    line.split_whitespace()
        .nth(1)
        .unwrap()
        .parse::<usize>()
        .unwrap()
        * 1024
}

#[test]
fn a_cube_of_4_gib_is_read_in_tiles_with_little_memory() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("large.h5");
    let file = hdf5::File::create(&path).unwrap();
    let nm: Vec<f64> = (0..512).map(|i| 588.0 + 0.01 * f64::from(i)).collect();
    let wavelength = file
        .new_dataset_builder()
        .with_data(&nm)
        .create("wavelength")
        .unwrap();
    let units = wavelength
        .new_attr::<hdf5::types::VarLenUnicode>()
        .create("units")
        .unwrap();
    units
        .write_scalar(&"nm".parse::<hdf5::types::VarLenUnicode>().unwrap())
        .unwrap();
    // Allocated but never written: the file system keeps a hole.
    let builder = file.new_dataset::<f64>().alloc_time(Some(AllocTime::Early));
    builder
        .fill_time(FillTime::Never)
        .shape((1024, 1024, 512))
        .create("intensity")
        .unwrap();
    // The file gets its length when the last handle is closed.
    drop((wavelength, units));
    file.close().unwrap();
    assert!(std::fs::metadata(&path).unwrap().len() > 4 << 30);

    let before = peak_bytes();
    let cube = Cube::open(&path).unwrap();
    let tiles = cube.tiles(cube.default_tile_pixels());
    // A part of it, from both ends.
    for tile in tiles[..40].iter().chain(&tiles[tiles.len() - 40..]) {
        let data = cube.read_tile(tile).unwrap();
        assert!(data.intensity.iter().all(|v| *v == 0.0));
    }
    let used = peak_bytes() - before;
    // Measured: 3 MiB, of which the intensity of one tile is 3.
    assert!(used < 8 << 20, "{} MiB", used >> 20);
}
