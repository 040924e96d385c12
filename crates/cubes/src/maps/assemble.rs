//! The HDF5 file of maps, made of the journal one quantity at a time.

use std::collections::BTreeMap;
use std::path::Path;

use hdf5::plist::group_create::LinkCreationOrder;
use hdf5::types::VarLenUnicode;
use hdf5::{Dataset, Group, H5Type};
use ndarray::Array2;

use super::journal::{Entry, Journal};
use super::spec::MapsSpec;
use crate::archive;
use crate::error::{Action, CubesError};

/// Pixels of a chunk: small enough for a reader of one row, large enough to compress.
const CHUNK_PIXELS: usize = 1 << 16;

/// Level of compression; higher ones cost time and gain little on floating-point maps.
const DEFLATE: u8 = 3;

/// The library or the journal failed.
#[derive(Debug)]
pub enum AssembleError {
    Hdf5(hdf5::Error),
    Journal(CubesError),
}

impl From<hdf5::Error> for AssembleError {
    fn from(error: hdf5::Error) -> Self {
        Self::Hdf5(error)
    }
}

impl From<CubesError> for AssembleError {
    fn from(error: CubesError) -> Self {
        Self::Journal(error)
    }
}

impl AssembleError {
    /// The public error, naming the wanted file and not the temporary one.
    pub fn at(self, path: &Path, action: Action) -> CubesError {
        match self {
            Self::Hdf5(source) => CubesError::hdf5(path, action, "the maps")(source),
            Self::Journal(error) => error,
        }
    }
}

/// Writes the whole file; only one map is in memory at a time.
pub fn assemble(
    path: &Path,
    spec: &MapsSpec,
    attributes: &BTreeMap<String, String>,
    entries: &BTreeMap<usize, Entry>,
    journal: &mut Journal,
) -> Result<(), AssembleError> {
    let file = hdf5::File::create(path)?;
    for (name, text) in attributes {
        archive::write_text(&file, name, text)?;
    }
    // Readers that list a group by creation see the quantities in the order of the specification.
    let group = file
        .create_group_builder()
        .obj_track_times(false)
        .with_gcpl(|p| p.link_creation_order(LinkCreationOrder::Indexed))
        .create("maps")?;
    for (q, quantity) in spec.quantities.iter().enumerate() {
        let mut map = Array2::from_elem((spec.ny, spec.nx), f64::NAN);
        fill(
            &mut map,
            spec,
            entries,
            journal,
            |pixels| q * pixels * 8,
            f64::from_le_bytes,
        )?;
        let dataset = write_map(&group, &quantity.name, &map)?;
        archive::write_text(&dataset, "units", &quantity.units)?;
        archive::write_text(&dataset, "long_name", &quantity.long_name)?;
    }
    let mut flags = Array2::from_elem((spec.ny, spec.nx), 0_u32);
    let before_flags = spec.quantities.len() * 8;
    fill(
        &mut flags,
        spec,
        entries,
        journal,
        |pixels| before_flags * pixels,
        u32::from_le_bytes,
    )?;
    let dataset = write_map(&group, "flags", &flags)?;
    archive::write_text(&dataset, "units", "1")?;
    archive::write_text(&dataset, "long_name", "flags")?;
    let names: Vec<VarLenUnicode> = spec
        .flag_names
        .iter()
        .map(|f| archive::var_len(&f.name))
        .collect();
    let masks: Vec<u32> = spec.flag_names.iter().map(|f| f.mask).collect();
    if !names.is_empty() {
        dataset
            .new_attr_builder()
            .with_data(&names)
            .create("flag_names")?;
        dataset
            .new_attr_builder()
            .with_data(&masks)
            .create("flag_masks")?;
    }
    file.flush()?;
    file.close()?;
    Ok(())
}

/// Puts the parts of all tiles where they belong; `N` bytes an element, the part of a tile starting at `offset`.
fn fill<T: Copy, const N: usize>(
    map: &mut Array2<T>,
    spec: &MapsSpec,
    entries: &BTreeMap<usize, Entry>,
    journal: &mut Journal,
    offset: impl Fn(usize) -> usize,
    decode: impl Fn([u8; N]) -> T,
) -> Result<(), CubesError> {
    let mut bytes = Vec::new();
    for tile in &spec.tiles {
        let Some(entry) = entries.get(&tile.index) else {
            continue;
        };
        let pixels = tile.pixels();
        bytes.resize(pixels * N, 0);
        journal.read_at(entry.payload_offset + offset(pixels) as u64, &mut bytes)?;
        for (p, item) in bytes.chunks_exact(N).enumerate() {
            let mut array = [0; N];
            array.copy_from_slice(item);
            map[tile.position(p)] = decode(array);
        }
    }
    Ok(())
}

fn write_map<T: H5Type>(group: &Group, name: &str, map: &Array2<T>) -> hdf5::Result<Dataset> {
    let (ny, nx) = map.dim();
    let builder = group.new_dataset_builder().obj_track_times(false);
    if ny * nx == 0 {
        return builder.with_data(map).create(name);
    }
    let cx = nx.min(CHUNK_PIXELS);
    let cy = (CHUNK_PIXELS / cx).clamp(1, ny);
    let builder = builder.chunk((cy, cx));
    let builder = if hdf5::filters::deflate_available() {
        builder.shuffle().deflate(DEFLATE)
    } else {
        builder
    };
    builder.with_data(map).create(name)
}
