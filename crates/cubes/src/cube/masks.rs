//! Masks as files keep them: integers of any width, or the two-valued enumeration that stands for booleans.

use hdf5::types::TypeDescriptor;
use hdf5::{Dataset, Selection};

use crate::archive::Archive;
use crate::error::CubesError;

/// Whether a 1-sigma uncertainty says anything: positive and finite.
pub fn usable(sigma: f64) -> bool {
    sigma.is_finite() && sigma > 0.0
}

/// What the elements of a mask are.
enum Kind {
    Integers,
    Booleans,
}

fn kind(archive: &Archive, dataset: &Dataset) -> Result<Kind, CubesError> {
    let found = match dataset.dtype().and_then(|t| t.to_descriptor()) {
        Ok(TypeDescriptor::Integer(_) | TypeDescriptor::Unsigned(_)) => return Ok(Kind::Integers),
        Ok(TypeDescriptor::Boolean) => return Ok(Kind::Booleans),
        Ok(other) => other.to_string(),
        Err(_) => "an unknown type".into(),
    };
    let (path, dataset) = (archive.path.clone(), "mask".into());
    Err(CubesError::WrongType {
        path,
        dataset,
        found,
        expected: "integers or booleans",
    })
}

/// Refuses a mask whose elements are neither integers nor booleans.
pub fn verify(archive: &Archive, dataset: &Dataset) -> Result<(), CubesError> {
    kind(archive, dataset).map(|_| ())
}

/// A part of a mask; every value but 0 masks.
pub fn slab(
    archive: &Archive,
    dataset: &Dataset,
    selection: Selection,
) -> Result<Vec<bool>, CubesError> {
    let values = match kind(archive, dataset)? {
        // The library clips to the range of i32, which keeps zero and non-zero apart.
        Kind::Integers => dataset
            .read_slice::<i32, _, ndarray::IxDyn>(selection)
            .map(|a| a.iter().map(|v| *v != 0).collect()),
        Kind::Booleans => dataset
            .read_slice::<bool, _, ndarray::IxDyn>(selection)
            .map(|a| a.iter().copied().collect()),
    };
    values.map_err(archive.reading("mask"))
}

/// A whole mask.
pub fn whole(archive: &Archive, dataset: &Dataset) -> Result<Vec<bool>, CubesError> {
    slab(archive, dataset, Selection::All)
}
