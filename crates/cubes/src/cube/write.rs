//! Writing a cube tile by tile.

use std::path::{Path, PathBuf};

use backlit_units::Medium;
use hdf5::{Dataset, Selection};
use ndarray::Array2;

use super::Tile;
use crate::archive;
use crate::error::{Action, CubesError};
use crate::staging::Staged;

/// Bytes of a chunk of about the size that the library's cache and a tile like.
const CHUNK_BYTES: usize = 1 << 20;

/// How the numbers of a cube are stored.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub enum Storage {
    /// 32-bit floating point: half the size, seven digits.
    Single,
    /// 64-bit floating point.
    #[default]
    Double,
}

/// The uncertainty that a new cube will have.
#[derive(Debug, Clone, Default, PartialEq)]
pub enum CubeUncertainty {
    /// None.
    #[default]
    None,
    /// One value for all, in the unit of the intensity.
    Scalar(f64),
    /// One value a channel.
    Channels(Vec<f64>),
    /// One value a pixel and channel, written with each tile.
    Pixels,
}

/// What a new cube looks like.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct CubeLayout {
    /// Rows.
    pub ny: usize,
    /// Columns.
    pub nx: usize,
    /// Wavelengths of the channel centres in metres, in `medium`.
    pub wavelength: Vec<f64>,
    /// Medium of the wavelengths.
    pub medium: Option<Medium>,
    /// Unit of the intensity.
    pub intensity_unit: Option<String>,
    /// How numbers are stored.
    pub storage: Storage,
    /// The uncertainty.
    pub uncertainty: CubeUncertainty,
    /// Level of compression 1-9; `None` stores plainly.
    pub compression: Option<u8>,
}

/// Writes a cube; pixels that are never written stay NaN. Dropped without [`CubeWriter::finish`] it leaves nothing.
#[derive(Debug)]
pub struct CubeWriter {
    path: PathBuf,
    shape: (usize, usize, usize),
    intensity: Dataset,
    uncertainty: Option<Dataset>,
    file: hdf5::File,
    staged: Staged,
}

impl CubeWriter {
    /// Starts a cube in a temporary file beside `path`.
    ///
    /// # Errors
    /// [`CubesError::Exists`] unless `overwrite`; wavelengths that are not strictly monotonic and positive;
    /// [`CubesError::Io`].
    pub fn create(
        path: impl AsRef<Path>,
        layout: &CubeLayout,
        overwrite: bool,
    ) -> Result<Self, CubesError> {
        let path = path.as_ref();
        archive::verify_outgoing(path, &layout.wavelength)?;
        let staged = Staged::begin(path, overwrite)?;
        let wrong = |source| CubesError::hdf5(path, Action::Create, "the cube")(source);
        let file = hdf5::File::create(staged.temporary()).map_err(wrong)?;
        archive::write_wavelengths(&file, &layout.wavelength, layout.medium).map_err(wrong)?;
        let intensity = create_block(&file, "intensity", layout).map_err(wrong)?;
        if let Some(unit) = &layout.intensity_unit {
            archive::write_text(&intensity, "units", unit).map_err(wrong)?;
        }
        let uncertainty = create_uncertainty(&file, layout).map_err(wrong)?;
        let shape = (layout.ny, layout.nx, layout.wavelength.len());
        Ok(Self {
            path: path.into(),
            shape,
            intensity,
            uncertainty,
            file,
            staged,
        })
    }

    /// Writes the spectra of a tile: (pixels, n), pixels along x first; `uncertainty` only where the layout has it a pixel.
    ///
    /// # Errors
    /// [`CubesError::UnknownTile`], [`CubesError::WrongTileShape`], [`CubesError::Io`].
    pub fn write_tile(
        &mut self,
        tile: &Tile,
        intensity: &Array2<f64>,
        uncertainty: Option<&Array2<f64>>,
    ) -> Result<(), CubesError> {
        self.write_block(&self.intensity, "intensity", tile, intensity)?;
        match (&self.uncertainty, uncertainty) {
            (Some(dataset), Some(values)) => self.write_block(dataset, "uncertainty", tile, values),
            _ => Ok(()),
        }
    }

    fn write_block(
        &self,
        dataset: &Dataset,
        what: &'static str,
        tile: &Tile,
        values: &Array2<f64>,
    ) -> Result<(), CubesError> {
        let (ny, nx, n) = self.shape;
        if tile.pixels() == 0 || tile.y1 > ny || tile.x1 > nx {
            return Err(CubesError::UnknownTile {
                path: self.path.clone(),
                tile: tile.index,
            });
        }
        let block = values.as_standard_layout();
        let Ok(block) = block.to_shape((tile.height(), tile.width(), n)) else {
            return Err(CubesError::WrongTileShape {
                what,
                tile: tile.index,
                found: values.shape().to_vec(),
                expected: vec![tile.pixels(), n],
            });
        };
        let selection = Selection::new((tile.y0..tile.y1, tile.x0..tile.x1, ..));
        dataset
            .write_slice(block.view(), selection)
            .map_err(CubesError::hdf5(&self.path, Action::Write, what))
    }

    /// Completes the file and gives it its name.
    ///
    /// # Errors
    /// [`CubesError::Io`]; then nothing stays behind.
    pub fn finish(self) -> Result<(), CubesError> {
        let Self {
            path,
            intensity,
            uncertainty,
            file,
            staged,
            ..
        } = self;
        drop((intensity, uncertainty));
        let wrong = |source| CubesError::hdf5(&path, Action::Write, "the cube")(source);
        file.flush().map_err(wrong)?;
        file.close().map_err(wrong)?;
        staged.commit()
    }
}

fn create_block(file: &hdf5::File, name: &str, layout: &CubeLayout) -> hdf5::Result<Dataset> {
    let n = layout.wavelength.len();
    let bytes = match layout.storage {
        Storage::Single => 4,
        Storage::Double => 8,
    };
    let pixels = (CHUNK_BYTES / (bytes * n)).max(1);
    let cx = pixels.clamp(1, layout.nx.max(1));
    let cy = (pixels / cx).clamp(1, layout.ny.max(1));
    let builder = match layout.storage {
        Storage::Single => file.new_dataset::<f32>().fill_value(f32::NAN),
        Storage::Double => file.new_dataset::<f64>().fill_value(f64::NAN),
    };
    let builder = builder.obj_track_times(false).chunk((cy, cx, n));
    let builder = match layout.compression {
        Some(level) if hdf5::filters::deflate_available() => {
            builder.shuffle().deflate(level.clamp(1, 9))
        }
        _ => builder,
    };
    builder.shape((layout.ny, layout.nx, n)).create(name)
}

fn create_uncertainty(file: &hdf5::File, layout: &CubeLayout) -> hdf5::Result<Option<Dataset>> {
    let name = "uncertainty";
    match &layout.uncertainty {
        CubeUncertainty::None => Ok(None),
        CubeUncertainty::Scalar(value) => {
            let dataset = file
                .new_dataset::<f64>()
                .obj_track_times(false)
                .create(name)?;
            dataset.write_scalar(value).map(|()| None)
        }
        CubeUncertainty::Channels(values) => {
            let builder = file.new_dataset_builder().obj_track_times(false);
            builder.with_data(values).create(name).map(|_| None)
        }
        CubeUncertainty::Pixels => create_block(file, name, layout).map(Some),
    }
}
