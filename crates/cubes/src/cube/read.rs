//! Reading a cube tile by tile.

use std::path::{Path, PathBuf};

use backlit_units::Medium;
use hdf5::{Dataset, Selection};
use ndarray::{Array1, Array2, Array3, ArrayView1};

use super::{Tile, divide, masks};
use crate::archive::Archive;
use crate::error::{CubesError, Place};
use crate::spectrum::Spectrum;

/// Bytes of f64 intensity in a tile of the default size.
const TILE_BYTES: usize = 3 << 20;

/// Where a cube keeps its uncertainty.
#[derive(Debug)]
enum Uncertainty {
    None,
    Channels(Array1<f64>),
    Pixels(Dataset),
}

/// Where a cube keeps its mask.
#[derive(Debug)]
enum Mask {
    None,
    Channels(Vec<bool>),
    Pixels(Dataset),
}

/// A cube of spectra in HDF5, of which only the description is in memory.
#[derive(Debug)]
pub struct Cube {
    /// Wavelengths of the channel centres in metres, in the file's medium and order, strictly rising or falling.
    pub wavelength: Vec<f64>,
    /// Medium of the wavelengths, if the file says it.
    pub medium: Option<Medium>,
    /// Unit of the intensity, if the file says it; understood by `backlit_units`.
    pub intensity_unit: Option<String>,
    /// The file.
    pub path: PathBuf,
    /// What the reader noticed and the user should know.
    pub notes: Vec<String>,
    archive: Archive,
    intensity: Dataset,
    uncertainty: Uncertainty,
    mask: Mask,
    shape: (usize, usize, usize),
    chunk: (usize, usize),
}

/// The uncertainty of a tile.
#[derive(Debug, Clone, PartialEq)]
pub enum TileUncertainty {
    /// The file has none.
    None,
    /// The same for every pixel: (n).
    Channels(Array1<f64>),
    /// (pixels, n).
    Pixels(Array2<f64>),
}

impl TileUncertainty {
    /// The 1-sigma values of one pixel.
    pub fn row(&self, pixel: usize) -> Option<ArrayView1<'_, f64>> {
        match self {
            Self::None => None,
            Self::Channels(row) => Some(row.view()),
            Self::Pixels(rows) => Some(rows.row(pixel)),
        }
    }
}

/// The spectra of one tile.
#[derive(Debug, Clone, PartialEq)]
pub struct TileData {
    /// (pixels, n), pixels along x first; not finite only where the mask is set.
    pub intensity: Array2<f64>,
    /// 1-sigma uncertainty; positive and finite where the mask is not set.
    pub uncertainty: TileUncertainty,
    /// (pixels, n); true where a channel must not be used.
    pub mask: Array2<bool>,
}

impl Cube {
    /// Opens a cube and checks its description; reads no spectra.
    ///
    /// `/wavelength` (n) with attributes `units` and `medium`; `/intensity` (ny, nx, n) with `units`; optional
    /// `/uncertainty` (ny, nx, n), (n) or a scalar; optional `/mask` (ny, nx, n) or (n).
    ///
    /// # Errors
    /// One [`CubesError`] with the dataset for everything that is not so.
    pub fn open(path: impl AsRef<Path>) -> Result<Self, CubesError> {
        let path = path.as_ref();
        let archive = Archive::open(path)?;
        let intensity = archive.dataset("intensity")?;
        let &[ny, nx, n] = intensity.shape().as_slice() else {
            return Err(archive.wrong_shape("intensity", intensity.shape(), "(ny, nx, n)"));
        };
        archive.require_numbers(&intensity, "intensity")?;
        let (wavelength, medium) = archive.wavelengths()?;
        if wavelength.len() != n {
            let expected = format!("(ny, nx, {}) as /wavelength", wavelength.len());
            return Err(archive.wrong_shape("intensity", intensity.shape(), &expected));
        }
        if ny == 0 || nx == 0 {
            let expected = format!("at least one pixel: (ny, nx, {n})");
            return Err(archive.wrong_shape("intensity", intensity.shape(), &expected));
        }
        let mut notes = Vec::new();
        let shape = (ny, nx, n);
        let uncertainty = open_uncertainty(&archive, shape, &mut notes)?;
        let mask = open_mask(&archive, shape)?;
        Ok(Self {
            wavelength,
            medium,
            intensity_unit: archive.intensity_unit(&intensity, "intensity")?,
            path: path.into(),
            notes,
            chunk: intensity.chunk().map_or((1, 1), |c| (c[0], c[1])),
            archive,
            intensity,
            uncertainty,
            mask,
            shape,
        })
    }

    /// Rows, columns, channels: (ny, nx, n).
    pub fn shape(&self) -> (usize, usize, usize) {
        self.shape
    }

    /// Whether the file has uncertainties.
    pub fn has_uncertainty(&self) -> bool {
        !matches!(self.uncertainty, Uncertainty::None)
    }

    /// Pixels of a tile of about 3 MiB.
    pub fn default_tile_pixels(&self) -> usize {
        (TILE_BYTES / (8 * self.shape.2)).max(1)
    }

    /// The tiles in file order, of about `pixels_per_tile` pixels, aligned with the file's chunks where a chunk is
    /// not much larger than a tile.
    pub fn tiles(&self, pixels_per_tile: usize) -> Vec<Tile> {
        divide(self.shape.0, self.shape.1, pixels_per_tile, self.chunk).0
    }

    /// Reads one tile, and nothing else of the file.
    ///
    /// Channels whose intensity is not finite or whose uncertainty is not positive and finite come masked.
    ///
    /// # Errors
    /// [`CubesError::UnknownTile`] for a tile outside the cube, [`CubesError::Hdf5`] or [`CubesError::Io`] for a
    /// damaged file.
    pub fn read_tile(&self, tile: &Tile) -> Result<TileData, CubesError> {
        let (ny, nx, n) = self.shape;
        if tile.pixels() == 0 || tile.y1 > ny || tile.x1 > nx {
            return Err(CubesError::UnknownTile {
                path: self.path.clone(),
                tile: tile.index,
            });
        }
        let pixels = tile.pixels();
        let intensity = self.read_block(&self.intensity, "intensity", tile)?;
        let uncertainty = match &self.uncertainty {
            Uncertainty::None => TileUncertainty::None,
            Uncertainty::Channels(row) => TileUncertainty::Channels(row.clone()),
            Uncertainty::Pixels(d) => {
                TileUncertainty::Pixels(self.read_block(d, "uncertainty", tile)?)
            }
        };
        let mut mask = match &self.mask {
            Mask::None => Array2::from_elem((pixels, n), false),
            Mask::Channels(row) => Array2::from_shape_fn((pixels, n), |(_, i)| row[i]),
            Mask::Pixels(dataset) => {
                let values = masks::slab(&self.archive, dataset, block(tile))?;
                self.shaped("mask", pixels, values)?
            }
        };
        mask.zip_mut_with(&intensity, |m, v| *m |= !v.is_finite());
        match &uncertainty {
            TileUncertainty::None => {}
            TileUncertainty::Channels(row) => mask
                .rows_mut()
                .into_iter()
                .for_each(|mut m| m.zip_mut_with(row, |m, s| *m |= !masks::usable(*s))),
            TileUncertainty::Pixels(all) => mask.zip_mut_with(all, |m, s| *m |= !masks::usable(*s)),
        }
        Ok(TileData {
            intensity,
            uncertainty,
            mask,
        })
    }

    /// One pixel as a spectrum.
    ///
    /// # Errors
    /// As [`Cube::read_tile`].
    pub fn spectrum(&self, y: usize, x: usize) -> Result<Spectrum, CubesError> {
        let (y1, x1) = (y.saturating_add(1), x.saturating_add(1));
        let data = self.read_tile(&Tile {
            index: 0,
            y0: y,
            y1,
            x0: x,
            x1,
        })?;
        Ok(Spectrum {
            wavelength: self.wavelength.clone(),
            medium: self.medium,
            intensity: data.intensity.row(0).to_vec(),
            uncertainty: data.uncertainty.row(0).map(|row| row.to_vec()),
            mask: data.mask.row(0).to_vec(),
            intensity_unit: self.intensity_unit.clone(),
            path: self.path.clone(),
            notes: self.notes.clone(),
        })
    }

    /// The SHA-256 of the file; reads all of it.
    ///
    /// # Errors
    /// [`CubesError::Io`].
    pub fn checksum(&self) -> Result<String, CubesError> {
        crate::checksum(&self.path)
    }

    fn read_block(
        &self,
        dataset: &Dataset,
        name: &'static str,
        tile: &Tile,
    ) -> Result<Array2<f64>, CubesError> {
        let block: Array3<f64> = dataset
            .read_slice(block(tile))
            .map_err(self.archive.reading(name))?;
        self.shaped(name, tile.pixels(), block.into_raw_vec_and_offset().0)
    }

    fn shaped<T>(
        &self,
        name: &'static str,
        pixels: usize,
        values: Vec<T>,
    ) -> Result<Array2<T>, CubesError> {
        let (n, found) = (self.shape.2, vec![values.len()]);
        Array2::from_shape_vec((pixels, n), values).map_err(|_| {
            self.archive
                .wrong_shape(name, found, &format!("({pixels}, {n})"))
        })
    }
}

fn block(tile: &Tile) -> Selection {
    Selection::new((tile.y0..tile.y1, tile.x0..tile.x1, ..))
}

fn open_uncertainty(
    archive: &Archive,
    shape: (usize, usize, usize),
    notes: &mut Vec<String>,
) -> Result<Uncertainty, CubesError> {
    let (ny, nx, n) = shape;
    let name = "uncertainty";
    let Some(dataset) = archive.optional_dataset(name)? else {
        return Ok(Uncertainty::None);
    };
    archive.require_numbers(&dataset, name)?;
    let found = dataset.shape();
    if found == [ny, nx, n] {
        return Ok(Uncertainty::Pixels(dataset));
    }
    if !(found.is_empty() || found == [1] || found == [n]) {
        let expected = format!("({ny}, {nx}, {n}), ({n}) or a scalar");
        return Err(archive.wrong_shape(name, found, &expected));
    }
    let values = archive.numbers(&dataset, name)?;
    let useless = values.iter().filter(|s| !masks::usable(**s)).count();
    if useless == values.len() {
        let (path, place) = (archive.path.clone(), Place::Dataset(name.into()));
        return Err(CubesError::NoUncertainty {
            path,
            place,
            first: values[0],
        });
    }
    if useless > 0 {
        notes.push(format!(
            "{useless} of {n} channels have an uncertainty that is not above zero and are not used"
        ));
    }
    Ok(Uncertainty::Channels(match values[..] {
        [one] => Array1::from_elem(n, one),
        _ => Array1::from_vec(values),
    }))
}

fn open_mask(archive: &Archive, shape: (usize, usize, usize)) -> Result<Mask, CubesError> {
    let (ny, nx, n) = shape;
    let Some(dataset) = archive.optional_dataset("mask")? else {
        return Ok(Mask::None);
    };
    masks::verify(archive, &dataset)?;
    let found = dataset.shape();
    if found == [ny, nx, n] {
        Ok(Mask::Pixels(dataset))
    } else if found == [n] {
        Ok(Mask::Channels(masks::whole(archive, &dataset)?))
    } else {
        Err(archive.wrong_shape("mask", found, &format!("({ny}, {nx}, {n}) or ({n})")))
    }
}
