//! Reading maps back.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use hdf5::{Dataset, Group, IndexType, IterationOrder};
use ndarray::Array2;

use super::spec::{FlagName, Quantity};
use crate::archive::{self, Archive};
use crate::error::CubesError;

/// A maps file that is open for reading; maps are read when asked for.
#[derive(Debug)]
pub struct Maps {
    /// The file.
    pub path: PathBuf,
    /// The quantities in the order of the file; `flags` apart.
    pub quantities: Vec<Quantity>,
    /// The bits of the flags.
    pub flag_names: Vec<FlagName>,
    /// The text attributes of the file.
    pub attributes: BTreeMap<String, String>,
    archive: Archive,
    group: Group,
    shape: (usize, usize),
}

impl Maps {
    /// Opens a maps file.
    ///
    /// # Errors
    /// [`CubesError::NotHdf5`], [`CubesError::Truncated`], [`CubesError::MissingDataset`], [`CubesError::WrongShape`].
    pub fn open(path: impl AsRef<Path>) -> Result<Self, CubesError> {
        let path = path.as_ref();
        let archive = Archive::open(path)?;
        let group = archive.group("maps")?;
        // Files that do not track the order of creation are listed by name.
        let names = group
            .member_names_by(IndexType::CreationOrder, IterationOrder::Increasing)
            .or_else(|_| group.member_names())
            .map_err(archive.reading("maps"))?;
        let mut shape = None;
        let mut quantities = Vec::new();
        let mut flag_names = Vec::new();
        for name in &names {
            // Later versions may put other objects here; only two-dimensional datasets are maps.
            let Ok(dataset) = group.dataset(name) else {
                continue;
            };
            let &[ny, nx] = dataset.shape().as_slice() else {
                continue;
            };
            if *shape.get_or_insert((ny, nx)) != (ny, nx) {
                let expected = format!("{:?} as the other maps", shape.unwrap_or_default());
                return Err(archive.wrong_shape(&format!("maps/{name}"), vec![ny, nx], &expected));
            }
            if name == "flags" {
                flag_names = read_flag_names(&archive, &dataset)?;
                continue;
            }
            let text = |attribute| archive.text_attribute(&dataset, name, attribute);
            quantities.push(Quantity {
                name: name.clone(),
                units: text("units")?.unwrap_or_default(),
                long_name: text("long_name")?.unwrap_or_default(),
            });
        }
        let Some(shape) = shape else {
            let (path, dataset) = (path.into(), "maps/...".into());
            return Err(CubesError::MissingDataset {
                path,
                dataset,
                found: names,
            });
        };
        let attributes = read_attributes(&archive)?;
        Ok(Self {
            path: path.into(),
            quantities,
            flag_names,
            attributes,
            archive,
            group,
            shape,
        })
    }

    /// Rows and columns: (ny, nx).
    pub fn shape(&self) -> (usize, usize) {
        self.shape
    }

    /// The names of the quantities.
    pub fn names(&self) -> impl Iterator<Item = &str> {
        self.quantities.iter().map(|q| q.name.as_str())
    }

    /// A quantity by its name.
    pub fn quantity(&self, name: &str) -> Option<&Quantity> {
        self.quantities.iter().find(|q| q.name == name)
    }

    /// One map (ny, nx), NaN where there is no answer.
    ///
    /// # Errors
    /// [`CubesError::MissingMap`], [`CubesError::WrongType`], [`CubesError::Hdf5`].
    pub fn map(&self, name: &str) -> Result<Array2<f64>, CubesError> {
        let dataset = self.dataset(name)?;
        self.archive
            .require_numbers(&dataset, &format!("maps/{name}"))?;
        dataset
            .read_2d()
            .map_err(self.archive.reading(&format!("maps/{name}")))
    }

    /// The flags (ny, nx).
    ///
    /// # Errors
    /// As [`Maps::map`].
    pub fn flags(&self) -> Result<Array2<u32>, CubesError> {
        let dataset = self.dataset("flags")?;
        self.archive.require_numbers(&dataset, "maps/flags")?;
        dataset
            .read_2d()
            .map_err(self.archive.reading("maps/flags"))
    }

    fn dataset(&self, name: &str) -> Result<Dataset, CubesError> {
        let known = name == "flags" || self.quantity(name).is_some();
        if !known || !self.group.link_exists(name) {
            return Err(CubesError::MissingMap {
                path: self.path.clone(),
                name: name.into(),
                found: self.names().map(str::to_owned).collect(),
            });
        }
        self.group
            .dataset(name)
            .map_err(self.archive.reading(&format!("maps/{name}")))
    }
}

fn read_attributes(archive: &Archive) -> Result<BTreeMap<String, String>, CubesError> {
    let names = archive.root().attr_names().map_err(archive.reading("/"))?;
    let mut attributes = BTreeMap::new();
    for name in names {
        // Attributes of other types were not written by this program.
        if let Ok(Some(text)) = archive.text_attribute(archive.root(), "/", &name) {
            attributes.insert(name, text);
        }
    }
    Ok(attributes)
}

fn read_flag_names(archive: &Archive, dataset: &Dataset) -> Result<Vec<FlagName>, CubesError> {
    let wrong = || archive.reading("maps/flags");
    let there = dataset.attr_names().map_err(wrong())?;
    let has = |name: &str| there.iter().any(|t| t == name);
    if !has("flag_names") {
        return Ok(Vec::new());
    }
    let names = dataset.attr("flag_names").map_err(wrong())?;
    let names = archive::strings(&names)
        .map_err(wrong())?
        .unwrap_or_default();
    let masks = if has("flag_masks") {
        dataset
            .attr("flag_masks")
            .and_then(|a| a.read_raw::<u32>())
            .map_err(wrong())?
    } else {
        (0..names.len())
            .map(|bit| 1_u32.checked_shl(bit as u32).unwrap_or(0))
            .collect()
    };
    Ok(masks
        .into_iter()
        .zip(names)
        .map(|(mask, name)| FlagName { mask, name })
        .collect())
}
