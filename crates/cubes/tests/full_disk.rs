//! A disk that runs full: a clear message, nothing torn, and everything goes on after space is made.
//!
//! The small disk is a tmpfs, which only root may mount; elsewhere these tests say so and pass.

#![cfg(target_os = "linux")]
#![allow(clippy::unwrap_used, clippy::print_stderr)]

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

use backlit_cubes::{
    CubeLayout, CubeWriter, CubesError, Maps, MapsSpec, MapsWriter, Quantity, Spectrum, Tile,
};
use ndarray::Array2;

struct SmallDisk {
    folder: tempfile::TempDir,
}

impl SmallDisk {
    fn mount(kib: usize) -> Option<Self> {
        let folder = tempfile::tempdir().unwrap();
        let options = format!("size={kib}k");
        let mounted = Command::new("mount")
            .args(["-t", "tmpfs", "-o", &options, "tmpfs"])
            .arg(folder.path())
            .output()
            .is_ok_and(|out| out.status.success());
        if !mounted {
            eprintln!("skipped: a small disk needs root");
        }
        mounted.then_some(Self { folder })
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    fn names(&self) -> BTreeSet<String> {
        let entries = fs::read_dir(self.folder.path()).unwrap();
        entries
            .map(|e| e.unwrap().file_name().to_string_lossy().into_owned())
            .collect()
    }

    /// Leaves about this much space.
    fn ballast(&self, free_bytes: usize) {
        let path = self.path("ballast");
        let mut size = 0;
        while fs::write(&path, vec![1; size + 4096]).is_ok() {
            size += 4096;
        }
        fs::write(&path, vec![1; size.saturating_sub(free_bytes)]).unwrap();
    }
}

#[test]
fn a_disk_that_may_not_be_written_is_named() {
    let Some(disk) = SmallDisk::mount(64) else {
        return;
    };
    let spectrum = Spectrum {
        wavelength: vec![1e-7, 2e-7],
        intensity: vec![1.0, 2.0],
        mask: vec![false; 2],
        ..Spectrum::default()
    };
    let read_only = Command::new("mount")
        .args(["-o", "remount,ro"])
        .arg(disk.folder.path())
        .status();
    assert!(read_only.unwrap().success());
    for error in [
        spectrum.write(disk.path("s.csv"), false).unwrap_err(),
        spectrum.write(disk.path("s.h5"), true).unwrap_err(),
        MapsWriter::create(disk.path("maps.h5"), spec(), false).unwrap_err(),
    ] {
        let message = error.to_string();
        assert!(message.contains("cannot create"), "{message}");
        assert!(
            message.contains("choose a folder where you may write"),
            "{message}"
        );
    }
}

impl Drop for SmallDisk {
    fn drop(&mut self) {
        let _ = Command::new("umount").arg(self.folder.path()).status();
    }
}

fn assert_full(error: &CubesError, path: &Path) {
    let message = error.to_string();
    assert!(message.contains("No space left on device"), "{message}");
    assert!(message.contains("make space"), "{message}");
    assert!(message.contains(&path.display().to_string()), "{message}");
}

fn spec() -> MapsSpec {
    let tile = |index| Tile {
        index,
        y0: index,
        y1: index + 1,
        x0: 0,
        x1: 512,
    };
    MapsSpec {
        ny: 32,
        nx: 512,
        quantities: vec![Quantity::new("a", "K", "a"), Quantity::new("b", "K", "b")],
        identity: "setup: x".into(),
        tiles: (0..32).map(tile).collect(),
        ..MapsSpec::default()
    }
}

/// Digits that do not compress.
fn values(tile: usize) -> Array2<f64> {
    Array2::from_shape_fn((2, 512), |(q, p)| {
        ((tile * 1024 + q * 512 + p) as f64).sin()
    })
}

fn fill(writer: &mut MapsWriter) -> Result<(), CubesError> {
    for tile in writer.open_tiles() {
        writer.put(tile.index, &values(tile.index), &[7; 512])?;
    }
    Ok(())
}

#[test]
fn spectra_and_cubes_leave_nothing_half_written() {
    let Some(disk) = SmallDisk::mount(256) else {
        return;
    };
    let n = 20_000;
    let wavelength: Vec<f64> = (0..n).map(|i| 500e-9 + 1e-12 * i as f64).collect();
    let spectrum = Spectrum {
        intensity: wavelength.iter().map(|w| (w * 1e12).sin()).collect(),
        mask: vec![false; n],
        wavelength: wavelength.clone(),
        ..Spectrum::default()
    };
    let path = disk.path("s.csv");
    assert_full(&spectrum.write(&path, false).unwrap_err(), &path);
    let path = disk.path("s.h5");
    assert_full(&spectrum.write(&path, false).unwrap_err(), &path);

    let path = disk.path("c.h5");
    let layout = CubeLayout {
        ny: 8,
        nx: 8,
        wavelength: wavelength[..400].into(),
        ..CubeLayout::default()
    };
    let error = (|| {
        let mut writer = CubeWriter::create(&path, &layout, false)?;
        let tile = Tile {
            index: 0,
            y0: 0,
            y1: 8,
            x0: 0,
            x1: 8,
        };
        writer.write_tile(&tile, &Array2::ones((64, 400)), None)?;
        writer.finish()?;
        CubeWriter::create(disk.path("d.h5"), &layout, false)?.finish()?;
        let mut writer = CubeWriter::create(&path, &layout, true)?;
        writer.write_tile(&tile, &Array2::ones((64, 400)), None)?;
        writer.finish()
    })()
    .unwrap_err();
    assert_full(&error, &path);
    assert!(
        !disk.names().iter().any(|n| n.contains("tmp")),
        "{:?}",
        disk.names()
    );
}

#[test]
fn maps_keep_their_finished_tiles_and_go_on() {
    let Some(disk) = SmallDisk::mount(2048) else {
        return;
    };
    let undivided = disk.path("undivided.h5");
    let mut writer = MapsWriter::create(&undivided, spec(), false).unwrap();
    fill(&mut writer).unwrap();
    writer.finish(&BTreeMap::new()).unwrap();

    // Full while tiles are put.
    let path = disk.path("maps.h5");
    let mut writer = MapsWriter::create(&path, spec(), false).unwrap();
    disk.ballast(100_000);
    assert_full(
        &fill(&mut writer).unwrap_err(),
        &disk.path("maps.h5.journal"),
    );
    let done = writer.done();
    assert!(!done.is_empty() && done.len() < 32, "{done:?}");
    drop(writer);
    fs::remove_file(disk.path("ballast")).unwrap();
    let mut writer = MapsWriter::resume(&path, spec()).unwrap();
    assert_eq!(writer.done(), done);
    fill(&mut writer).unwrap();

    // Full while the file is assembled, at many stages of it.
    drop(writer);
    for free in [0, 4096, 8192, 20_000, 60_000, 120_000, 200_000] {
        disk.ballast(free);
        let writer = MapsWriter::resume(&path, spec()).unwrap();
        assert_full(&writer.finish(&BTreeMap::new()).unwrap_err(), &path);
        let expected = ["ballast", "maps.h5.journal", "undivided.h5"].map(str::to_owned);
        assert_eq!(disk.names(), BTreeSet::from(expected));
        fs::remove_file(disk.path("ballast")).unwrap();
    }
    let writer = MapsWriter::resume(&path, spec()).unwrap();
    assert!(writer.open_tiles().is_empty());
    writer.finish(&BTreeMap::new()).unwrap();
    assert_eq!(fs::read(&path).unwrap(), fs::read(&undivided).unwrap());
    assert_eq!(
        Maps::open(&path).unwrap().map("b").unwrap()[(31, 5)],
        (31.0 * 1024.0 + 517.0_f64).sin()
    );
}
