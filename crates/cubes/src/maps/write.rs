//! The writer of maps: takes finished tiles in any order, ends with one whole file.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use ndarray::Array2;

use super::journal::{Entry, Found, Journal};
use super::spec::{MapsSpec, identity_differences};
use super::{Maps, assemble};
use crate::cube::Tile;
use crate::error::{Action, CubesError};
use crate::staging;

/// Name of the attribute that keeps the identity of the run.
pub(super) const IDENTITY: &str = "identity";

/// Writes maps tile by tile; each tile that [`MapsWriter::put`] took survives a kill.
#[derive(Debug)]
pub struct MapsWriter {
    path: PathBuf,
    spec: MapsSpec,
    entries: BTreeMap<usize, Entry>,
    overwrite: bool,
    /// `None` when the wanted file is complete already.
    journal: Option<Journal>,
}

impl MapsWriter {
    /// Begins new maps. The file at `path`, if any, stays as it is until [`MapsWriter::finish`].
    ///
    /// # Errors
    /// [`CubesError::Exists`] and [`CubesError::JournalExists`] unless `overwrite`; [`CubesError::Busy`] if another
    /// run writes the same maps; [`CubesError::Io`].
    pub fn create(
        path: impl AsRef<Path>,
        spec: MapsSpec,
        overwrite: bool,
    ) -> Result<Self, CubesError> {
        let path = path.as_ref();
        spec.verify(path)?;
        staging::refuse_existing(path, overwrite)?;
        let mut journal = Journal::lock(path)?;
        if !overwrite {
            match journal.read()? {
                Found::Nothing => {}
                Found::Journal(content) => {
                    let (path, done) = (journal.path.clone(), content.entries.len());
                    return Err(CubesError::JournalExists { path, done });
                }
                Found::Other(found) => {
                    let (path, expected) = (journal.path.clone(), 1);
                    return Err(CubesError::NotAJournal {
                        path,
                        found,
                        expected,
                    });
                }
            }
        }
        journal.begin(&spec)?;
        let (path, entries) = (path.to_owned(), BTreeMap::new());
        Ok(Self {
            path,
            spec,
            entries,
            overwrite,
            journal: Some(journal),
        })
    }

    /// Continues an interrupted run, begins a new one if there is none, and has nothing to do if it is complete.
    ///
    /// # Errors
    /// [`CubesError::OtherRun`] if setup, input, shape, quantities or tiles differ, naming what differs;
    /// [`CubesError::Busy`], [`CubesError::NotAJournal`], [`CubesError::Io`].
    pub fn resume(path: impl AsRef<Path>, spec: MapsSpec) -> Result<Self, CubesError> {
        let path = path.as_ref();
        spec.verify(path)?;
        let finished = path.exists();
        let journal_path = super::journal::path_of(path);
        if finished && !journal_path.exists() {
            return Self::complete(path, spec);
        }
        let mut journal = Journal::lock(path)?;
        let content = match journal.read()? {
            Found::Journal(content) => content,
            Found::Nothing => {
                journal.begin(&spec)?;
                let (path, entries) = (path.to_owned(), BTreeMap::new());
                return Ok(Self {
                    path,
                    spec,
                    entries,
                    overwrite: false,
                    journal: Some(journal),
                });
            }
            Found::Other(found) => {
                return Err(CubesError::NotAJournal {
                    path: journal.path.clone(),
                    found,
                    expected: 1,
                });
            }
        };
        let differences = spec.differences(&content.spec);
        if !differences.is_empty() {
            return Err(CubesError::OtherRun {
                path: journal.path.clone(),
                differences,
            });
        }
        journal.continue_at(content.end)?;
        let mut entries = BTreeMap::new();
        for entry in content.entries {
            entries.entry(entry.tile).or_insert(entry);
        }
        // The journal of a run that may overwrite stands beside the file that it will replace.
        let (path, spec) = (path.to_owned(), content.spec);
        Ok(Self {
            path,
            spec,
            entries,
            overwrite: finished,
            journal: Some(journal),
        })
    }

    fn complete(path: &Path, spec: MapsSpec) -> Result<Self, CubesError> {
        let there = Maps::open(path)?;
        let identity = there.attributes.get(IDENTITY).map_or("", String::as_str);
        let differences = identity_differences(&spec.identity, identity);
        if !differences.is_empty() {
            return Err(CubesError::OtherRun {
                path: path.into(),
                differences,
            });
        }
        let entry = |tile: &Tile| {
            (
                tile.index,
                Entry {
                    tile: tile.index,
                    payload_offset: 0,
                },
            )
        };
        let entries = spec.tiles.iter().map(entry).collect();
        Ok(Self {
            path: path.into(),
            spec,
            entries,
            overwrite: false,
            journal: None,
        })
    }

    /// The tiles that are finished.
    pub fn done(&self) -> BTreeSet<usize> {
        self.entries.keys().copied().collect()
    }

    /// The tiles that are not finished, in their order.
    pub fn open_tiles(&self) -> Vec<Tile> {
        self.spec
            .tiles
            .iter()
            .filter(|t| !self.entries.contains_key(&t.index))
            .copied()
            .collect()
    }

    /// What the file will hold; after [`MapsWriter::resume`] with the attributes of the first start.
    pub fn spec(&self) -> &MapsSpec {
        &self.spec
    }

    /// Takes a finished tile: values (quantity, pixel) and a word of flags a pixel.
    ///
    /// # Errors
    /// [`CubesError::UnknownTile`], [`CubesError::RepeatedTile`], [`CubesError::WrongTileShape`]; [`CubesError::Io`]
    /// on a full disk, after which earlier tiles are intact.
    pub fn put(
        &mut self,
        tile_index: usize,
        values: &Array2<f64>,
        flags: &[u32],
    ) -> Result<(), CubesError> {
        let Some(tile) = self.spec.tile(tile_index) else {
            return Err(CubesError::UnknownTile {
                path: self.path.clone(),
                tile: tile_index,
            });
        };
        let expected = [self.spec.quantities.len(), tile.pixels()];
        let wrong = |what, found: &[usize], expected: &[usize]| {
            let (found, expected) = (found.to_vec(), expected.to_vec());
            Err(CubesError::WrongTileShape {
                what,
                tile: tile_index,
                found,
                expected,
            })
        };
        if values.shape() != expected {
            return wrong("the values", values.shape(), &expected);
        }
        if flags.len() != expected[1] {
            return wrong("the flags", &[flags.len()], &expected[1..]);
        }
        match &mut self.journal {
            Some(journal) if !self.entries.contains_key(&tile_index) => {
                // `iter` runs in logical order whatever the memory layout.
                let entry = journal.append(tile_index, values.iter().copied(), flags)?;
                self.entries.insert(tile_index, entry);
                Ok(())
            }
            _ => Err(CubesError::RepeatedTile {
                path: self.path.clone(),
                tile: tile_index,
            }),
        }
    }

    /// Makes all tiles durable now; [`MapsWriter::put`] does so about every second.
    ///
    /// # Errors
    /// [`CubesError::Io`].
    pub fn sync(&mut self) -> Result<(), CubesError> {
        self.journal.as_mut().map_or(Ok(()), Journal::sync)
    }

    /// Assembles the file, gives it its name and removes the journal; `end_attributes` join those of the start.
    ///
    /// # Errors
    /// [`CubesError::Unfinished`] if tiles are missing; [`CubesError::Io`] and [`CubesError::Hdf5`], after which
    /// the journal is still there to continue from.
    pub fn finish(mut self, end_attributes: &BTreeMap<String, String>) -> Result<(), CubesError> {
        let (done, total) = (self.entries.len(), self.spec.tiles.len());
        if done < total {
            return Err(CubesError::Unfinished {
                path: self.path.clone(),
                done,
                total,
            });
        }
        let Some(mut journal) = self.journal.take() else {
            return Ok(());
        };
        journal.sync()?;
        let mut attributes = self.spec.attributes.clone();
        attributes.extend(end_attributes.iter().map(|(k, v)| (k.clone(), v.clone())));
        attributes.insert(IDENTITY.into(), self.spec.identity.clone());

        let mut name = self.path.file_name().unwrap_or_default().to_os_string();
        name.push(".partial");
        // The lock makes this name ours, so that what a killed run left is simply replaced.
        let temporary = self.path.with_file_name(name);
        let staged = staging::Staged::begin_at(&self.path, temporary, self.overwrite)?;
        assemble::assemble(
            staged.temporary(),
            &self.spec,
            &attributes,
            &self.entries,
            &mut journal,
        )
        .map_err(|e| e.at(&self.path, Action::Write))?;
        staged.commit()?;
        journal.remove()
    }
}
