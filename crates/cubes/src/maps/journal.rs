//! The journal of finished tiles: a header, then records that are each whole or not there.
//!
//! Header: magic (16 bytes), format version (u32), length (u32) and text of the specification as JSON, SHA-256 of
//! all that. Record: `TILE`, index (u32), length of the payload (u64), payload, SHA-256 of all that. The payload is
//! the quantities as f64, quantity by quantity, pixel by pixel, then the flags as u32. All little-endian.
//!
//! A record counts when its checksum is right; reading stops at the first that is not, which after a kill or a
//! power failure can only be the last.

use std::fs::{File, TryLockError};
use std::io::{self, BufReader, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use sha2::{Digest, Sha256};

use super::spec::MapsSpec;
use crate::cube::Tile;
use crate::error::{Action, CubesError};

const MAGIC: [u8; 16] = *b"backlit-journal\n";
const FORMAT: u32 = 1;
const RECORD: [u8; 4] = *b"TILE";
const DIGEST: usize = 32;
const RECORD_HEAD: u64 = 16;

/// Records are synced together when they come faster than this; a power failure costs at most as much work.
const SYNC_INTERVAL: Duration = Duration::from_secs(1);

/// The journal's name beside the maps file.
pub fn path_of(maps: &Path) -> PathBuf {
    let mut name = maps.file_name().unwrap_or_default().to_os_string();
    name.push(".journal");
    maps.with_file_name(name)
}

/// Where the payload of a finished tile stands.
#[derive(Debug, Clone, Copy)]
pub struct Entry {
    pub tile: usize,
    pub payload_offset: u64,
}

/// What a journal holds.
#[derive(Debug)]
pub struct Content {
    pub spec: MapsSpec,
    pub entries: Vec<Entry>,
    /// Bytes up to the end of the last whole record.
    pub end: u64,
}

/// What stands where the journal should be.
#[derive(Debug)]
pub enum Found {
    /// Nothing, or a header that was never completed.
    Nothing,
    /// A journal of this version.
    Journal(Box<Content>),
    /// Something else: its format version, or 0.
    Other(u32),
}

/// An open, locked journal.
#[derive(Debug)]
pub struct Journal {
    pub path: PathBuf,
    file: File,
    end: u64,
    last_sync: Instant,
    unsynced: bool,
}

impl Journal {
    /// Opens or creates the file and takes its lock, which the system drops with the process.
    pub fn lock(maps: &Path) -> Result<Self, CubesError> {
        let path = path_of(maps);
        let file = loop {
            let file = File::options()
                .read(true)
                .write(true)
                .create(true)
                .truncate(false)
                .open(&path)
                .map_err(CubesError::io(&path, Action::Create))?;
            match file.try_lock() {
                Ok(()) => {}
                Err(TryLockError::WouldBlock) => {
                    return Err(CubesError::Busy { path: maps.into() });
                }
                Err(TryLockError::Error(source)) => {
                    return Err(CubesError::Io {
                        path,
                        action: Action::Lock,
                        source,
                    });
                }
            }
            // A run that finished between our opening and locking has removed this file: its lock guards nothing.
            if same_file(&file, &path) {
                break file;
            }
        };
        Ok(Self {
            path,
            file,
            end: 0,
            last_sync: Instant::now(),
            unsynced: false,
        })
    }

    /// Reads what is there.
    pub fn read(&mut self) -> Result<Found, CubesError> {
        scan(&mut self.file).map_err(CubesError::io(&self.path, Action::Read))
    }

    /// Empties the file and writes the header.
    pub fn begin(&mut self, spec: &MapsSpec) -> Result<(), CubesError> {
        let text = serde_json::to_vec(spec)
            .map_err(io::Error::from)
            .and_then(|text| Ok((u32::try_from(text.len()).map_err(io::Error::other)?, text)))
            .and_then(|(length, text)| {
                let mut header = MAGIC.to_vec();
                header.extend(FORMAT.to_le_bytes());
                header.extend(length.to_le_bytes());
                header.extend(text);
                let digest = Sha256::digest(&header);
                header.extend(digest);
                self.file.set_len(0)?;
                self.file.seek(SeekFrom::Start(0))?;
                self.file.write_all(&header)?;
                self.end = header.len() as u64;
                self.file.sync_all()
            });
        text.map_err(CubesError::io(&self.path, Action::Write))?;
        crate::staging::sync_folder(&self.path);
        Ok(())
    }

    /// Continues after the last whole record; what follows is cut off.
    pub fn continue_at(&mut self, end: u64) -> Result<(), CubesError> {
        self.end = end;
        self.file
            .set_len(end)
            .and_then(|()| self.file.sync_all())
            .map_err(CubesError::io(&self.path, Action::Write))
    }

    /// Appends a finished tile.
    pub fn append(
        &mut self,
        tile: usize,
        values: impl Iterator<Item = f64>,
        flags: &[u32],
    ) -> Result<Entry, CubesError> {
        let record = encode(tile, values, flags);
        let entry = Entry {
            tile,
            payload_offset: self.end + RECORD_HEAD,
        };
        let written = self
            .file
            .seek(SeekFrom::Start(self.end))
            .and_then(|_| self.file.write_all(&record));
        if let Err(source) = written {
            // Give the space back, so that a full disk leaves a journal that ends with a whole record.
            let _ = self.file.set_len(self.end);
            return Err(CubesError::Io {
                path: self.path.clone(),
                action: Action::Write,
                source,
            });
        }
        self.end += record.len() as u64;
        self.unsynced = true;
        if self.last_sync.elapsed() >= SYNC_INTERVAL {
            self.sync()?;
        }
        Ok(entry)
    }

    /// Makes all records durable.
    pub fn sync(&mut self) -> Result<(), CubesError> {
        if self.unsynced {
            self.file
                .sync_data()
                .map_err(CubesError::io(&self.path, Action::Write))?;
            self.unsynced = false;
        }
        self.last_sync = Instant::now();
        Ok(())
    }

    /// Reads a part of a payload.
    pub fn read_at(&mut self, offset: u64, bytes: &mut [u8]) -> Result<(), CubesError> {
        self.file
            .seek(SeekFrom::Start(offset))
            .and_then(|_| self.file.read_exact(bytes))
            .map_err(CubesError::io(&self.path, Action::Read))
    }

    /// Removes the file; the lock goes with it.
    pub fn remove(self) -> Result<(), CubesError> {
        std::fs::remove_file(&self.path).map_err(CubesError::io(&self.path, Action::Write))?;
        crate::staging::sync_folder(&self.path);
        Ok(())
    }
}

impl Drop for Journal {
    fn drop(&mut self) {
        // An interrupted run wants its last tiles durable; a failure shows when it is continued.
        let _ = self.sync();
    }
}

/// Bytes of a tile's payload.
pub fn payload_bytes(quantities: usize, pixels: usize) -> usize {
    pixels.saturating_mul(8 * quantities + 4)
}

fn encode(tile: usize, values: impl Iterator<Item = f64>, flags: &[u32]) -> Vec<u8> {
    let mut record = RECORD.to_vec();
    record.extend(u32::try_from(tile).unwrap_or(u32::MAX).to_le_bytes());
    record.extend([0; 8]);
    for value in values {
        record.extend(value.to_le_bytes());
    }
    for flag in flags {
        record.extend(flag.to_le_bytes());
    }
    let payload = record.len() as u64 - RECORD_HEAD;
    record[8..16].copy_from_slice(&payload.to_le_bytes());
    let digest = Sha256::digest(&record);
    record.extend(digest);
    record
}

/// Reads header and records; a short read is an end, not an error.
pub fn scan(file: &mut (impl Read + Seek)) -> io::Result<Found> {
    file.seek(SeekFrom::Start(0))?;
    let mut file = BufReader::with_capacity(1 << 20, file);
    let mut head = Vec::new();
    if !fill(&mut file, &mut head, 24)? {
        // A kill during the first write leaves a part of the header.
        let ours = head.len() >= MAGIC.len() || MAGIC.starts_with(&head);
        return Ok(if ours && head.iter().zip(MAGIC).all(|(a, b)| *a == b) {
            Found::Nothing
        } else {
            Found::Other(0)
        });
    }
    if head[..16] != MAGIC {
        return Ok(Found::Other(0));
    }
    let format = u32_at(&head, 16);
    if format != FORMAT {
        return Ok(Found::Other(format));
    }
    let length = u32_at(&head, 20) as usize;
    if !fill(&mut file, &mut head, 24 + length)? {
        return Ok(Found::Nothing);
    }
    let mut digest = Vec::new();
    if !fill(&mut file, &mut digest, DIGEST)? || Sha256::digest(&head)[..] != digest[..] {
        return Ok(Found::Nothing);
    }
    let Ok(spec) = serde_json::from_slice::<MapsSpec>(&head[24..]) else {
        return Ok(Found::Nothing);
    };
    let mut content = Content {
        spec,
        entries: Vec::new(),
        end: (head.len() + DIGEST) as u64,
    };
    while let Some(tile) = next_record(&mut file, &content)? {
        let payload_offset = content.end + RECORD_HEAD;
        content.end = payload_offset + (record_payload(&content.spec, &tile) + DIGEST) as u64;
        content.entries.push(Entry {
            tile: tile.index,
            payload_offset,
        });
    }
    Ok(Found::Journal(Box::new(content)))
}

fn record_payload(spec: &MapsSpec, tile: &Tile) -> usize {
    payload_bytes(spec.quantities.len(), tile.pixels())
}

/// The tile of the next whole record.
fn next_record(file: &mut impl Read, content: &Content) -> io::Result<Option<Tile>> {
    let mut record = Vec::new();
    if !fill(file, &mut record, RECORD_HEAD as usize)? || record[..4] != RECORD {
        return Ok(None);
    }
    let index = u32_at(&record, 4) as usize;
    let Some(tile) = content.spec.tile(index) else {
        return Ok(None);
    };
    let payload = record_payload(&content.spec, tile);
    let said = u64::from(u32_at(&record, 8)) | u64::from(u32_at(&record, 12)) << 32;
    if said != payload as u64 || !fill(file, &mut record, RECORD_HEAD as usize + payload)? {
        return Ok(None);
    }
    let mut digest = Vec::new();
    let whole = fill(file, &mut digest, DIGEST)? && Sha256::digest(&record)[..] == digest[..];
    Ok(whole.then_some(*tile))
}

/// Reads until `bytes` has `length` bytes; false if the file ends before. Memory grows only with what is there.
fn fill(file: &mut impl Read, bytes: &mut Vec<u8>, length: usize) -> io::Result<bool> {
    let wanted = length.saturating_sub(bytes.len());
    file.by_ref().take(wanted as u64).read_to_end(bytes)?;
    Ok(bytes.len() >= length)
}

fn u32_at(bytes: &[u8], at: usize) -> u32 {
    let mut four = [0; 4];
    four.copy_from_slice(&bytes[at..at + 4]);
    u32::from_le_bytes(four)
}

#[cfg(unix)]
fn same_file(file: &File, path: &Path) -> bool {
    use std::os::unix::fs::MetadataExt;
    match (file.metadata(), std::fs::metadata(path)) {
        (Ok(a), Ok(b)) => a.dev() == b.dev() && a.ino() == b.ino(),
        _ => false,
    }
}

#[cfg(not(unix))]
fn same_file(_: &File, path: &Path) -> bool {
    path.exists()
}
