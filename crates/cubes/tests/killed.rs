//! A writer that is killed at any moment, finishing included, loses no tile that it had taken.
//!
//! The test starts itself again as the victim: the process in whose environment [`VICTIM`] names a file.

#![cfg(unix)]
#![allow(clippy::unwrap_used, clippy::print_stderr)]

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::io::{BufRead, BufReader};
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use backlit_cubes::{Maps, MapsSpec, MapsWriter, Quantity, Tile};
use ndarray::Array2;

const VICTIM: &str = "BACKLIT_TEST_VICTIM";
const TILES: usize = 60;
const KILLS: u64 = 40;

fn spec() -> MapsSpec {
    let tile = |index| Tile {
        index,
        y0: index,
        y1: index + 1,
        x0: 0,
        x1: 200,
    };
    MapsSpec {
        ny: TILES,
        nx: 200,
        quantities: ["a", "b", "c"]
            .map(|name| Quantity::new(name, "K", name))
            .to_vec(),
        identity: "setup: x".into(),
        tiles: (0..TILES).map(tile).collect(),
        ..MapsSpec::default()
    }
}

fn values(tile: usize) -> Array2<f64> {
    Array2::from_shape_fn((3, 200), |(q, p)| ((tile * 600 + q * 200 + p) as f64).sin())
}

/// Puts all open tiles and says each on standard error after it was taken, then says that it finishes and does.
/// Returns the time that finishing took.
fn work(path: &Path) -> Duration {
    let mut writer = MapsWriter::resume(path, spec()).unwrap();
    for tile in writer.open_tiles() {
        writer
            .put(tile.index, &values(tile.index), &[3; 200])
            .unwrap();
        eprintln!("took {}", tile.index);
    }
    eprintln!("finishing");
    let start = Instant::now();
    writer.finish(&BTreeMap::new()).unwrap();
    start.elapsed()
}

#[test]
fn a_killed_writer_loses_no_tile_that_it_took() {
    if let Some(path) = std::env::var_os(VICTIM) {
        work(Path::new(&path));
        return;
    }
    let dir = tempfile::tempdir().unwrap();
    let undivided = dir.path().join("undivided.h5");
    let finishing = work(&undivided);
    let expected = fs::read(&undivided).unwrap();
    let path = dir.path().join("maps.h5");
    let mut taken: BTreeSet<usize> = BTreeSet::new();
    for kill in 0..KILLS {
        let mut victim = Command::new(std::env::current_exe().unwrap())
            .args([
                "--exact",
                "a_killed_writer_loses_no_tile_that_it_took",
                "--nocapture",
            ])
            .env(VICTIM, &path)
            .stdout(Stdio::null())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        // The moment is counted in what the victim says, so that a busy machine does not shift it.
        let mut said = BufReader::new(victim.stderr.take().unwrap()).lines();
        let mut hear = |line: &str| {
            // The last line may be torn.
            if let Some(Ok(tile)) = line.strip_prefix("took ").map(str::parse) {
                taken.insert(tile);
            }
            line == "finishing"
        };
        for _ in 0..=kill % 17 {
            if said.next().is_some_and(|line| hear(&line.unwrap())) {
                std::thread::sleep(finishing.mul_f64((kill * 613 % 1_500) as f64 / 1_000.0));
                break;
            }
        }
        victim.kill().unwrap();
        said.for_each(|line| _ = hear(&line.unwrap()));
        victim.wait().unwrap();

        if path.exists() {
            // A file under its own name is always whole.
            assert_eq!(fs::read(&path).unwrap(), expected, "after kill {kill}");
            assert_eq!(
                Maps::open(&path).unwrap().map("c").unwrap()[(9, 9)],
                values(9)[(2, 9)]
            );
        }
        let writer = MapsWriter::resume(&path, spec()).unwrap();
        let done = writer.done();
        assert!(
            done.is_superset(&taken),
            "after kill {kill}: lost {:?}",
            &taken - &done
        );
        let complete = writer.open_tiles().is_empty();
        if complete {
            writer.finish(&BTreeMap::new()).unwrap();
            assert_eq!(fs::read(&path).unwrap(), expected, "after kill {kill}");
            fs::remove_file(&path).unwrap();
            taken.clear();
        }
    }
    work(&path);
    assert_eq!(fs::read(&path).unwrap(), expected);
    let names: BTreeSet<_> = fs::read_dir(dir.path())
        .unwrap()
        .map(|e| e.unwrap().file_name())
        .collect();
    assert!(
        !names
            .iter()
            .any(|n| n.to_string_lossy().contains("maps.h5.")),
        "{names:?}"
    );
}
