//! What a maps file will hold, and what must match for a run to be continued.

use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

use serde::{Deserialize, Serialize};

use crate::cube::Tile;
use crate::error::{CubesError, Difference};

/// One quantity that every pixel has.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Quantity {
    /// Name of the dataset, as `cloud1_temperature`.
    pub name: String,
    /// Unit, as `K`.
    pub units: String,
    /// A few words for the axis of a picture.
    pub long_name: String,
}

impl Quantity {
    /// A quantity of these texts.
    pub fn new(
        name: impl Into<String>,
        units: impl Into<String>,
        long_name: impl Into<String>,
    ) -> Self {
        Self {
            name: name.into(),
            units: units.into(),
            long_name: long_name.into(),
        }
    }
}

/// The name of one bit of the flags.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct FlagName {
    /// The bit.
    pub mask: u32,
    /// Its name.
    pub name: String,
}

impl FlagName {
    /// The flags of the maps of this program, in the order of their bits.
    pub fn standard() -> Vec<Self> {
        [
            (1, "not_converged"),
            (2, "at_bound"),
            (4, "no_contrast"),
            (8, "saturated"),
            (16, "not_detected"),
            (32, "degenerate"),
            (64, "too_little_data"),
            (128, "poor_fit"),
        ]
        .map(|(mask, name)| Self {
            mask,
            name: name.into(),
        })
        .to_vec()
    }
}

/// What a maps file will hold.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct MapsSpec {
    /// Rows.
    pub ny: usize,
    /// Columns.
    pub nx: usize,
    /// The quantities, in the order of the payload.
    pub quantities: Vec<Quantity>,
    /// Names of the bits of `flags`; see [`FlagName::standard`].
    pub flag_names: Vec<FlagName>,
    /// Attributes of the file; a continued run keeps those of its first start.
    pub attributes: BTreeMap<String, String>,
    /// What must match for a run to be continued: lines `key: value`, as `setup: ...`, `input sha256: ...`.
    pub identity: String,
    /// The tiles, their indices rising; pixels outside all of them stay NaN.
    pub tiles: Vec<Tile>,
}

impl MapsSpec {
    /// The tile of an index.
    pub(super) fn tile(&self, index: usize) -> Option<&Tile> {
        let at = self.tiles.binary_search_by_key(&index, |t| t.index).ok()?;
        self.tiles.get(at)
    }

    /// Refuses repeated names, and tiles whose indices do not rise, that overlap or reach outside.
    pub(super) fn verify(&self, path: &Path) -> Result<(), CubesError> {
        let bad = |what, item: String| CubesError::BadMapsSpec {
            path: path.into(),
            what,
            item,
        };
        let mut names = BTreeSet::from(["flags"]);
        for quantity in &self.quantities {
            if quantity.name.is_empty()
                || quantity.name.contains('/')
                || !names.insert(&quantity.name)
            {
                return Err(bad("quantities", quantity.name.clone()));
            }
        }
        let mut last = None;
        let mut covered = vec![false; self.ny * self.nx];
        for tile in &self.tiles {
            let inside = tile.pixels() > 0 && tile.y1 <= self.ny && tile.x1 <= self.nx;
            if !inside || last.replace(tile.index) >= Some(tile.index) {
                return Err(bad("tiles", format!("tile {}", tile.index)));
            }
            for y in tile.y0..tile.y1 {
                for cell in &mut covered[y * self.nx + tile.x0..y * self.nx + tile.x1] {
                    if std::mem::replace(cell, true) {
                        return Err(bad("tiles", format!("tile {}", tile.index)));
                    }
                }
            }
        }
        Ok(())
    }

    /// What differs between the run that is on disk and this one.
    pub(super) fn differences(&self, there: &Self) -> Vec<Difference> {
        let mut differences = identity_differences(&self.identity, &there.identity);
        let mut compare = |what: &str, there: String, here: String| {
            if there != here {
                differences.push(Difference {
                    what: what.into(),
                    there,
                    here,
                });
            }
        };
        let shape = |s: &Self| format!("({}, {})", s.ny, s.nx);
        let names = |s: &Self| {
            let names: Vec<&str> = s.quantities.iter().map(|q| q.name.as_str()).collect();
            names.join(" ")
        };
        compare("shape", shape(there), shape(self));
        compare("quantities", names(there), names(self));
        if there.tiles != self.tiles {
            let count = |s: &Self| format!("{} tiles", s.tiles.len());
            let (there, here) = (count(there), count(self));
            let what = if there == here {
                "division into tiles"
            } else {
                "tiles"
            }
            .into();
            differences.push(Difference { what, there, here });
        }
        differences
    }
}

/// Compares two identities line by line, so that the message can name the key and not two walls of text.
pub(super) fn identity_differences(here: &str, there: &str) -> Vec<Difference> {
    if here == there {
        return Vec::new();
    }
    let keys = |text: &str| -> BTreeMap<String, String> {
        text.lines()
            .map(|line| line.split_once(':').unwrap_or(("identity", line)))
            .map(|(key, value)| (key.trim().to_owned(), value.trim().to_owned()))
            .collect()
    };
    let (here, there) = (keys(here), keys(there));
    let all: BTreeSet<&String> = here.keys().chain(there.keys()).collect();
    let text = |side: &BTreeMap<String, String>, key: &str| {
        side.get(key)
            .map_or("nothing".to_owned(), |v| v.chars().take(80).collect())
    };
    let differences: Vec<Difference> = all
        .into_iter()
        .filter(|key| here.get(*key) != there.get(*key))
        .map(|key| Difference {
            what: key.clone(),
            there: text(&there, key),
            here: text(&here, key),
        })
        .collect();
    if differences.is_empty() {
        // The same keys in another order or with repeated ones.
        let (there, here) = ("other lines".into(), "these lines".into());
        return vec![Difference {
            what: "identity".into(),
            there,
            here,
        }];
    }
    differences
}
