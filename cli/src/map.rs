//! `backlit map`: the values behind every pixel of a cube.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::mpsc::{self, Receiver, SyncSender};
use std::time::{Instant, SystemTime};

use backlit_cubes::{Cube, FlagName, MapsSpec, MapsWriter, Tile, TileData};
use backlit_inverse::setup::Setup;
use backlit_inverse::{Flags, Intervals, Problem};
use backlit_species::Catalogue;
use clap::Args;
use rayon::ThreadPool;
use rayon::prelude::*;
use serde::Serialize;

use crate::console::Console;
use crate::failure::Failure;
use crate::interrupt;
use crate::observed::{Description, Frame};
use crate::output;
use crate::progress::Progress;
use crate::tile_fit::{self, TileMaps};

/// A cube is divided into about this many tiles at least, so that all cores have work and Ctrl-C is quick.
const WANTED_TILES: usize = 64;
/// A tile this small still lets a pixel profit from its neighbours.
const SMALLEST_TILE_PIXELS: usize = 16;

/// Fit every pixel of a cube, in parallel, resumable
///
/// Finished tiles are kept in MAPS.h5.journal beside the output until all are
/// done; only then MAPS.h5 appears. Ctrl-C finishes the tiles in work and ends
/// with exit code 130; --resume continues from there, and the result is the
/// same file. A second Ctrl-C ends at once; only the tiles in work are lost.
///
/// Example: backlit map nebula.h5 --setup sodium.toml -o maps.h5
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct Map {
    /// The cube, HDF5
    #[arg(value_name = "CUBE")]
    cube: PathBuf,

    /// What is known and what is to be found, TOML
    #[arg(long, value_name = "SETUP")]
    setup: PathBuf,

    /// The maps, HDF5
    #[arg(long, short, value_name = "MAPS.h5")]
    output: PathBuf,

    /// Replace the output file if it exists
    #[arg(long, conflicts_with = "resume")]
    overwrite: bool,

    /// Continue an interrupted run
    #[arg(long)]
    resume: bool,

    /// Pixels read and fitted together [default: about 3 MiB]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..))]
    tile_pixels: Option<u32>,

    /// Add maps with the ends of 68.3 % intervals
    ///
    /// <name>_low and <name>_high: where chi-square, with all other values
    /// refitted, is 1 above its least. Takes several times as long.
    #[arg(long)]
    intervals: bool,
}

#[derive(Serialize)]
struct Summary {
    schema: &'static str,
    output: String,
    pixels: u64,
    fitted: u64,
    without_data: u64,
    flagged: u64,
    flags: BTreeMap<String, u64>,
    seconds: f64,
    spectra_per_second: f64,
}

impl Map {
    /// Fits all pixels and writes the maps.
    pub fn run(&self, console: &Console, pool: &ThreadPool) -> Result<(), Failure> {
        if !self.resume {
            // The maps store refuses it too, but only after the whole cube was read for its checksum.
            output::refuse_existing(&self.output, self.overwrite)?;
        }
        let setup = Setup::read(&self.setup)?;
        let cube = Cube::open(&self.cube)?;
        for note in &cube.notes {
            console.note(&format!("{}: {note}", self.cube.display()));
        }
        let frame = Frame::new(
            console,
            &setup,
            &Description {
                wavelength_m: &cube.wavelength,
                medium: cube.medium,
                intensity_unit: cube.intensity_unit.as_deref(),
                path: &self.cube,
            },
        )?;
        let measured = frame.measured_background(console, &setup)?;
        let problem = Problem::new(
            &setup,
            &frame.axis,
            &frame.unit,
            Catalogue::builtin(),
            measured.as_deref(),
        )?;
        if !cube.has_uncertainty() {
            console.note(&format!(
                "{} has no uncertainty: the noise of each spectrum is estimated from the spectrum itself",
                self.cube.display()
            ));
        }

        let spec = self.spec(&setup, &cube, &problem)?;
        let mut writer = if self.resume {
            MapsWriter::resume(&self.output, spec)?
        } else {
            MapsWriter::create(&self.output, spec, self.overwrite)?
        };
        let (ny, nx, _) = cube.shape();
        let total = (ny * nx) as u64;
        let open = writer.open_tiles();
        let to_do: u64 = open.iter().map(|tile| tile.pixels() as u64).sum();
        if self.resume && to_do == 0 {
            console.note(&format!("all {total} spectra were done before"));
        } else if self.resume && to_do < total {
            console.note(&format!(
                "{} of {total} spectra were done before",
                total - to_do
            ));
        }

        interrupt::listen();
        let reversed = frame.axis.is_reversed();
        let progress = Progress::new(console, total, total - to_do);
        let began = Instant::now();
        let wanted = self.wanted_intervals();
        let count = fit_tiles(
            &cube,
            reversed,
            &problem,
            wanted,
            open,
            pool,
            |tile, maps| {
                writer.put(tile.index, &maps.values, &maps.flags)?;
                progress.advance(tile.pixels() as u64);
                Ok(())
            },
        );
        progress.finish();
        let count = count?;
        if count.pixels < to_do {
            writer.sync()?;
            return Err(Failure::Interrupted {
                done: total - to_do + count.pixels,
                total,
                journal: journal_of(&self.output),
            });
        }
        let too_little = Flags::TOO_LITTLE_DATA.trailing_zeros() as usize;
        if count.pixels == total && count.flags.get(too_little) == Some(&total) {
            // Maps of nothing would look like an answer.
            drop(writer);
            let journal = journal_of(&self.output);
            std::fs::remove_file(&journal).map_err(|source| Failure::Write {
                path: journal,
                source,
            })?;
            return Err(Failure::NoUsableSpectrum {
                path: self.cube.clone(),
                total,
            });
        }
        let end = BTreeMap::from([("end_time".to_owned(), now())]);
        writer.finish(&end)?;
        self.tell(console, &count, began.elapsed().as_secs_f64())
    }

    fn spec(&self, setup: &Setup, cube: &Cube, problem: &Problem) -> Result<MapsSpec, Failure> {
        let checksum = cube.checksum()?;
        let (ny, nx, _) = cube.shape();
        let wanted = match self.tile_pixels {
            Some(pixels) => pixels as usize,
            None => (ny * nx / WANTED_TILES)
                .max(SMALLEST_TILE_PIXELS)
                .min(cube.default_tile_pixels()),
        };
        let version = env!("CARGO_PKG_VERSION");
        let command_line: Vec<String> = std::env::args().map(quoted).collect();
        let attributes = [
            ("program", format!("backlit {version}")),
            ("program_version", version.to_owned()),
            ("setup", setup.text.clone()),
            ("input", self.cube.display().to_string()),
            ("input_sha256", checksum.clone()),
            ("start_time", now()),
            ("command_line", command_line.join(" ")),
        ];
        Ok(MapsSpec {
            ny,
            nx,
            quantities: tile_fit::map_quantities(problem.quantities(), self.wanted_intervals()),
            flag_names: FlagName::standard(),
            attributes: attributes
                .map(|(key, value)| (key.to_owned(), value))
                .into(),
            // The setup's text in one line: any change of it is another run.
            identity: format!(
                "program: backlit {version}\ninput sha256: {checksum}\nsetup: {:?}\n{}",
                setup.text,
                if self.intervals {
                    "intervals: all\n"
                } else {
                    ""
                }
            ),
            tiles: cube.tiles(wanted),
        })
    }

    fn wanted_intervals(&self) -> Intervals {
        if self.intervals {
            Intervals::All
        } else {
            Intervals::None
        }
    }

    fn tell(&self, console: &Console, count: &Count, seconds: f64) -> Result<(), Failure> {
        let flags: BTreeMap<String, u64> = FlagName::standard()
            .into_iter()
            .map(|flag| {
                let bit = flag.mask.trailing_zeros() as usize;
                (flag.name, count.flags.get(bit).copied().unwrap_or(0))
            })
            .collect();
        let rate = count.pixels as f64 / seconds.max(1e-9);
        if console.json() {
            return console.print_json(&Summary {
                schema: "backlit-map/1",
                output: self.output.display().to_string(),
                pixels: count.pixels,
                fitted: count.fitted,
                without_data: count.pixels - count.fitted,
                flagged: count.flagged,
                flags,
                seconds,
                spectra_per_second: rate,
            });
        }
        let raised: Vec<String> = flags
            .iter()
            .filter(|(_, pixels)| **pixels > 0)
            .map(|(name, pixels)| format!("{name} {pixels}"))
            .collect();
        let raised = if raised.is_empty() {
            String::new()
        } else {
            format!(" ({})", raised.join(", "))
        };
        if count.pixels == 0 {
            // A run that was resumed with nothing left to do.
            console.tell(&format!("{} is complete", self.output.display()));
            return Ok(());
        }
        console.tell(&format!(
            "wrote {}: {} spectra, {} fitted, {} flagged{raised}, {seconds:.2} s, {rate:.0} spectra/s",
            self.output.display(),
            count.pixels,
            count.fitted,
            count.flagged,
        ));
        Ok(())
    }
}

/// What came out, counted.
#[derive(Default)]
struct Count {
    pixels: u64,
    fitted: u64,
    flagged: u64,
    /// Pixels with each bit.
    flags: [u64; 32],
}

impl Count {
    fn add(&mut self, maps: &TileMaps) {
        self.pixels += maps.flags.len() as u64;
        self.fitted += maps.fitted;
        for flags in &maps.flags {
            self.flagged += u64::from(*flags != 0);
            for (bit, count) in self.flags.iter_mut().enumerate() {
                *count += u64::from(flags >> bit & 1);
            }
        }
    }
}

/// Reads, fits and hands over tiles until they are done, the user interrupts, or something fails.
///
/// One thread reads, the pool fits, the calling thread writes; bounded queues between them keep the memory to a few
/// tiles a thread. Each tile is fitted by one thread from its own data alone: the answer does not depend on who does it.
fn fit_tiles(
    cube: &Cube,
    reversed: bool,
    problem: &Problem,
    intervals: Intervals,
    tiles: Vec<Tile>,
    pool: &ThreadPool,
    mut write: impl FnMut(Tile, &TileMaps) -> Result<(), Failure>,
) -> Result<Count, Failure> {
    type Read = Result<(Tile, TileData), Failure>;
    type Fitted = Result<(Tile, TileMaps), Failure>;
    let depth = pool.current_num_threads();
    let (to_fit, read_tiles): (SyncSender<Read>, Receiver<Read>) = mpsc::sync_channel(depth);
    let (to_write, fitted_tiles): (SyncSender<Fitted>, Receiver<Fitted>) =
        mpsc::sync_channel(depth);

    let mut count = Count::default();
    std::thread::scope(|scope| {
        scope.spawn(move || {
            for tile in tiles {
                if interrupt::asked() {
                    break;
                }
                let read = cube.read_tile(&tile).map(|data| (tile, data));
                let failed = read.is_err();
                // A send fails only when the other side has ended because of a failure of its own.
                if to_fit.send(read.map_err(Failure::from)).is_err() || failed {
                    break;
                }
            }
        });
        scope.spawn(move || {
            pool.install(|| {
                read_tiles.into_iter().par_bridge().for_each_init(
                    || (to_write.clone(), problem.workspace()),
                    |(to_write, workspace), read| {
                        if interrupt::asked() {
                            // Tiles that wait are left to the next run; those in work are finished.
                            return;
                        }
                        let fitted = read.map(|(tile, data)| {
                            let maps =
                                tile_fit::fit(problem, workspace, reversed, &tile, data, intervals);
                            (tile, maps)
                        });
                        // As above: nobody listens only after a failure that is already reported.
                        let _ = to_write.send(fitted);
                    },
                );
            });
        });
        let mut outcome = Ok(());
        for fitted in fitted_tiles {
            // After a failure the queue is dropped with this loop, which ends the other threads.
            let (tile, maps) = match fitted {
                Ok(done) => done,
                Err(failure) => {
                    outcome = Err(failure);
                    break;
                }
            };
            count.add(&maps);
            if let Err(failure) = write(tile, &maps) {
                outcome = Err(failure);
                break;
            }
        }
        outcome
    })
    .map(|()| count)
}

/// The journal that the maps store keeps beside its output.
fn journal_of(output: &Path) -> PathBuf {
    let mut name = output.as_os_str().to_owned();
    name.push(".journal");
    name.into()
}

fn now() -> String {
    humantime::format_rfc3339_seconds(SystemTime::now()).to_string()
}

/// An argument as one would type it.
fn quoted(argument: String) -> String {
    let plain = !argument.is_empty()
        && argument
            .chars()
            .all(|c| c.is_ascii_alphanumeric() || "-_./=:,+@%".contains(c));
    if plain {
        argument
    } else {
        format!("'{}'", argument.replace('\'', "'\\''"))
    }
}
