//! HDF5 files, opened and questioned in one place.
//!
//! The library holds one global lock, so that calls from several threads are safe but take turns; let one thread
//! read and others compute.

use std::fs;
use std::io::{Read, Seek, SeekFrom};
use std::path::{Path, PathBuf};

use backlit_units::Medium;
use hdf5::types::{FixedAscii, FixedUnicode, TypeDescriptor, VarLenAscii, VarLenUnicode};
use hdf5::{Container, Dataset, Group, Location};

use crate::decimal;
use crate::error::{Action, CubesError, Place};

const SIGNATURE: [u8; 8] = *b"\x89HDF\r\n\x1a\n";

/// Longest fixed-length string attribute that is read.
const LONGEST_FIXED_STRING: usize = 4096;

/// Chunk cache of a dataset: enough for a row of usual chunks, small against the memory of a run.
const CHUNK_CACHE_BYTES: usize = 16 << 20;

/// Whether the file starts like HDF5: the signature stands at 0, or at 512 times a power of two.
pub fn has_signature(path: &Path) -> Result<bool, CubesError> {
    let at = || CubesError::io(path, Action::Read);
    let mut file = fs::File::open(path).map_err(at())?;
    let length = file.metadata().map_err(at())?.len();
    let mut offset = 0;
    while offset + 8 <= length {
        let mut found = [0; 8];
        file.seek(SeekFrom::Start(offset)).map_err(at())?;
        file.read_exact(&mut found).map_err(at())?;
        if found == SIGNATURE {
            return Ok(true);
        }
        offset = if offset == 0 { 512 } else { offset * 2 };
    }
    Ok(false)
}

/// An HDF5 file that is open for reading.
#[derive(Debug)]
pub struct Archive {
    pub path: PathBuf,
    root: Group,
}

impl Archive {
    /// Opens a file, or says why it is none.
    pub fn open(path: &Path) -> Result<Self, CubesError> {
        if path.is_dir() {
            let source = std::io::ErrorKind::IsADirectory.into();
            return Err(CubesError::Io {
                path: path.into(),
                action: Action::Read,
                source,
            });
        }
        if !has_signature(path)? {
            return Err(CubesError::NotHdf5 { path: path.into() });
        }
        let file = hdf5::FileBuilder::new()
            .with_fapl(|p| p.chunk_cache(1021, CHUNK_CACHE_BYTES, 0.75))
            .open(path)
            .map_err(|source| match () {
                () if source.to_string().contains("truncated") => CubesError::Truncated {
                    path: path.into(),
                    found_bytes: fs::metadata(path).map_or(0, |m| m.len()),
                },
                () => CubesError::hdf5(path, Action::Read, "the header")(source),
            })?;
        let root = file
            .group("/")
            .map_err(CubesError::hdf5(path, Action::Read, "group /"))?;
        Ok(Self {
            path: path.into(),
            root,
        })
    }

    /// A group below the root.
    pub fn group(&self, name: &str) -> Result<Group, CubesError> {
        if !self.root.link_exists(name) {
            return Err(self.missing(name)?);
        }
        self.root.group(name).map_err(self.reading(name))
    }

    /// The root group.
    pub fn root(&self) -> &Group {
        &self.root
    }

    /// A dataset of the root that must be there.
    pub fn dataset(&self, name: &str) -> Result<Dataset, CubesError> {
        match self.optional_dataset(name)? {
            Some(dataset) => Ok(dataset),
            None => Err(self.missing(name)?),
        }
    }

    /// A dataset of the root, if it is there.
    pub fn optional_dataset(&self, name: &str) -> Result<Option<Dataset>, CubesError> {
        if !self.root.link_exists(name) {
            return Ok(None);
        }
        self.root
            .dataset(name)
            .map(Some)
            .map_err(self.reading(name))
    }

    fn missing(&self, name: &str) -> Result<CubesError, CubesError> {
        let found = self.root.member_names().map_err(self.reading("/"))?;
        Ok(CubesError::MissingDataset {
            path: self.path.clone(),
            dataset: name.into(),
            found: found.iter().map(|n| format!("/{n}")).collect(),
        })
    }

    /// Turns an error of the library into ours.
    pub fn reading(&self, object: &str) -> impl FnOnce(hdf5::Error) -> CubesError + use<> {
        CubesError::hdf5(
            &self.path,
            Action::Read,
            &format!("/{}", object.trim_start_matches('/')),
        )
    }

    /// Refuses elements that are not numbers.
    pub fn require_numbers(&self, dataset: &Dataset, name: &str) -> Result<(), CubesError> {
        let found = match dataset.dtype().and_then(|t| t.to_descriptor()) {
            Ok(
                TypeDescriptor::Float(_) | TypeDescriptor::Integer(_) | TypeDescriptor::Unsigned(_),
            ) => return Ok(()),
            Ok(other) => other.to_string(),
            Err(_) => "an unknown type".into(),
        };
        let expected = "floating-point numbers or integers";
        Err(CubesError::WrongType {
            path: self.path.clone(),
            dataset: name.into(),
            found,
            expected,
        })
    }

    /// A small dataset of numbers, whole.
    pub fn numbers(&self, dataset: &Dataset, name: &str) -> Result<Vec<f64>, CubesError> {
        self.require_numbers(dataset, name)?;
        dataset.read_raw::<f64>().map_err(self.reading(name))
    }

    /// `/wavelength` in metres, verified, and its medium.
    pub fn wavelengths(&self) -> Result<(Vec<f64>, Option<Medium>), CubesError> {
        let name = "wavelength";
        let dataset = self.dataset(name)?;
        let shape = dataset.shape();
        if shape.len() != 1 {
            return Err(self.wrong_shape(name, shape, "(n)"));
        }
        let place = |attribute: &str| Place::Attribute {
            dataset: name.into(),
            attribute: attribute.into(),
        };
        let Some(units) = self.text_attribute(&dataset, name, "units")? else {
            return Err(CubesError::MissingAttribute {
                path: self.path.clone(),
                dataset: name.into(),
                attribute: "units",
                expected: "nm, Angstrom, um or m",
            });
        };
        let exponent = match units.trim() {
            "nm" | "nanometer" | "nanometre" => -9,
            "Angstrom" | "angstrom" | "Å" | "AA" | "\u{212b}" => -10,
            "um" | "µm" | "\u{3bc}m" | "micron" | "micrometer" | "micrometre" => -6,
            "m" | "meter" | "metre" => 0,
            _ => {
                return Err(CubesError::UnknownWavelengthUnit {
                    path: self.path.clone(),
                    place: place("units"),
                    found: units,
                });
            }
        };
        let medium = match self.text_attribute(&dataset, name, "medium")? {
            Some(text) => Some(medium(&self.path, place("medium"), &text)?),
            None => None,
        };
        let values = self.numbers(&dataset, name)?;
        let wavelength: Vec<f64> = values
            .iter()
            .map(|v| decimal::shifted(*v, exponent))
            .collect();
        crate::wavelengths::verify(
            &self.path,
            &wavelength,
            Place::Dataset(name.into()),
            |index| Place::Element {
                dataset: name.into(),
                index,
            },
        )?;
        Ok((wavelength, medium))
    }

    /// The unit text of a dataset of intensities, checked.
    pub fn intensity_unit(
        &self,
        dataset: &Dataset,
        name: &str,
    ) -> Result<Option<String>, CubesError> {
        let Some(text) = self.text_attribute(dataset, name, "units")? else {
            return Ok(None);
        };
        let place = Place::Attribute {
            dataset: name.into(),
            attribute: "units".into(),
        };
        intensity_unit(&self.path, place, &text).map(Some)
    }

    /// A shape that is not what it should be.
    pub fn wrong_shape(&self, name: &str, found: Vec<usize>, expected: &str) -> CubesError {
        CubesError::WrongShape {
            path: self.path.clone(),
            dataset: name.into(),
            found,
            expected: expected.into(),
        }
    }

    /// An attribute as text, whatever kind of string the writer chose.
    pub fn text_attribute(
        &self,
        location: &Location,
        name: &str,
        attribute: &str,
    ) -> Result<Option<String>, CubesError> {
        let there = location.attr_names().map_err(self.reading(name))?;
        if !there.iter().any(|a| a == attribute) {
            return Ok(None);
        }
        let value = location.attr(attribute).map_err(self.reading(name))?;
        let texts = strings(&value).map_err(self.reading(name))?;
        match texts.and_then(|t| t.into_iter().next()) {
            Some(text) => Ok(Some(text)),
            None => Err(CubesError::NotAString {
                path: self.path.clone(),
                place: Place::Attribute {
                    dataset: name.into(),
                    attribute: attribute.into(),
                },
            }),
        }
    }
}

/// The strings of an attribute; `None` if it holds something else.
///
/// The bytes are taken and not the text, because a file may say UTF-8 and hold anything.
pub fn strings(value: &Container) -> hdf5::Result<Option<Vec<String>>> {
    fn texts<T>(items: Vec<T>, bytes: impl Fn(&T) -> &[u8]) -> Option<Vec<String>> {
        let text = |item| String::from_utf8_lossy(bytes(item)).into_owned();
        Some(items.iter().map(text).collect())
    }
    type Unicode = FixedUnicode<LONGEST_FIXED_STRING>;
    type Ascii = FixedAscii<LONGEST_FIXED_STRING>;
    Ok(match value.dtype()?.to_descriptor()? {
        TypeDescriptor::VarLenUnicode => {
            texts(value.read_raw::<VarLenUnicode>()?, VarLenUnicode::as_bytes)
        }
        TypeDescriptor::VarLenAscii => {
            texts(value.read_raw::<VarLenAscii>()?, VarLenAscii::as_bytes)
        }
        TypeDescriptor::FixedUnicode(n) if n <= LONGEST_FIXED_STRING => {
            texts(value.read_raw::<Unicode>()?, Unicode::as_bytes)
        }
        TypeDescriptor::FixedAscii(n) if n <= LONGEST_FIXED_STRING => {
            texts(value.read_raw::<Ascii>()?, Ascii::as_bytes)
        }
        _ => None,
    })
}

/// A medium as a file says it.
pub fn medium(path: &Path, place: Place, text: &str) -> Result<Medium, CubesError> {
    text.trim().parse().map_err(|_| CubesError::UnknownMedium {
        path: path.into(),
        place,
        found: text.trim().into(),
    })
}

/// The text of a unit of intensity, if it is one.
pub fn intensity_unit(path: &Path, place: Place, text: &str) -> Result<String, CubesError> {
    let text = text.trim();
    match text.parse::<backlit_units::intensity::IntensityUnit>() {
        Ok(_) => Ok(text.into()),
        Err(source) => {
            let source = Box::new(source);
            let (path, found) = (path.into(), text.into());
            Err(CubesError::UnknownIntensityUnit {
                path,
                place,
                found,
                source,
            })
        }
    }
}

/// Writes a text attribute. HDF5 strings end at the first NUL, so that NULs are replaced.
pub fn write_text(location: &Location, name: &str, text: &str) -> hdf5::Result<()> {
    let value = var_len(text);
    location
        .new_attr::<VarLenUnicode>()
        .create(name)?
        .write_scalar(&value)
}

/// A text as HDF5 keeps it.
pub fn var_len(text: &str) -> VarLenUnicode {
    let clean = text.replace('\0', "\u{fffd}");
    // Without NULs every text is representable.
    clean.parse().unwrap_or_default()
}

/// Refuses to write wavelengths that could not be read again.
pub fn verify_outgoing(path: &Path, wavelength: &[f64]) -> Result<(), CubesError> {
    let dataset = || String::from("wavelength");
    crate::wavelengths::verify(path, wavelength, Place::Dataset(dataset()), |index| {
        Place::Element {
            dataset: dataset(),
            index,
        }
    })
}

/// Writes `/wavelength` in nm with its attributes.
pub fn write_wavelengths(
    group: &Group,
    wavelength: &[f64],
    medium: Option<Medium>,
) -> hdf5::Result<()> {
    let nm: Vec<f64> = wavelength.iter().map(|w| decimal::shifted(*w, 9)).collect();
    let builder = group.new_dataset_builder().obj_track_times(false);
    let dataset = builder.with_data(&nm).create("wavelength")?;
    write_text(&dataset, "units", "nm")?;
    match medium {
        Some(medium) => write_text(&dataset, "medium", &medium.to_string()),
        None => Ok(()),
    }
}
