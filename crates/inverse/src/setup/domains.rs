//! What each number of a setup must satisfy, with the words that say so.

use backlit_units::constants::SPEED_OF_LIGHT_M_PER_S;

use super::section::Domain;

const SPEED_OF_LIGHT_KM_S: f64 = SPEED_OF_LIGHT_M_PER_S / 1e3;
/// Above this no atom keeps an electron, and rest energies begin to matter.
const MAX_TEMPERATURE_K: f64 = 1e9;
/// More than any sightline through normal matter holds; it catches columns written in m⁻² or as exponents.
const MAX_COLUMN_CM2: f64 = 1e30;
/// With more terms than this a "background" can imitate lines.
pub(super) const MAX_SHAPE_TERMS: usize = 20;

pub(super) const TEMPERATURE: Domain = Domain {
    quantity: "temperature",
    unit: "K",
    allowed: "0 K < temperature <= 1e9 K",
    hint: "temperatures are absolute, in kelvin: 20 degrees Celsius are 293.15 K",
    holds: |x| x > 0.0 && x <= MAX_TEMPERATURE_K,
};

pub(super) const VELOCITY: Domain = Domain {
    quantity: "velocity",
    unit: "km/s",
    allowed: "-299792.458 km/s < velocity < 299792.458 km/s (the speed of light)",
    hint: "velocities are in km/s, positive = receding",
    holds: |x| x.abs() < SPEED_OF_LIGHT_KM_S,
};

pub(super) const TURBULENCE: Domain = Domain {
    quantity: "turbulence",
    unit: "km/s",
    allowed: "0 km/s <= turbulence < 299792.458 km/s (the speed of light)",
    hint: "the 1/e half-width of the microturbulent Gaussian in km/s; 0 = none",
    holds: |x| (0.0..SPEED_OF_LIGHT_KM_S).contains(&x),
};

pub(super) const DILUTION: Domain = Domain {
    quantity: "dilution",
    unit: "",
    allowed: "0..=1",
    hint: "the part of the beam that the background fills: 1 = all of it",
    holds: |x| (0.0..=1.0).contains(&x),
};

pub(super) const COLUMN: Domain = Domain {
    quantity: "column density",
    unit: "cm-2",
    allowed: "0 cm-2 < column <= 1e30 cm-2",
    hint: "the number of particles per cm2 of sightline itself, not its logarithm; leave a species out if there is none",
    holds: |x| x > 0.0 && x <= MAX_COLUMN_CM2,
};

pub(super) const SCALE: Domain = Domain {
    quantity: "scale",
    unit: "",
    allowed: "above 0",
    hint: "model radiance times this is the data; a solid angle in sr where the data's unit has no sr-1",
    holds: |x| x > 0.0,
};

pub(super) const FWHM: Domain = Domain {
    quantity: "instrument width",
    unit: "nm",
    allowed: "0 nm or above",
    hint: "the full width at half maximum of the Gaussian line-spread function in nm; 0 = none",
    holds: |x| x >= 0.0,
};

pub(super) const RESOLVING_POWER: Domain = Domain {
    quantity: "resolving power",
    unit: "",
    allowed: "above 0",
    hint: "wavelength divided by the full width at half maximum; for no spread at all write fwhm_nm = 0",
    holds: |x| x > 0.0,
};

pub(super) const SHAPE_TERMS: Domain = Domain {
    quantity: "number of shape terms",
    unit: "",
    allowed: "the whole numbers 0..=20",
    hint: "0 = a pure black body; 2 bend it gently",
    holds: |x| x >= 0.0,
};

pub(super) const MASS: Domain = Domain {
    quantity: "mass",
    unit: "u",
    allowed: "0 u < mass <= 1e4 u",
    hint: "the mass of one particle in unified atomic mass units, for example mass_u = 22.99",
    holds: |x| x > 0.0 && x <= 1e4,
};

pub(super) const TOLERANCE: Domain = Domain {
    quantity: "model tolerance",
    unit: "",
    allowed: "1e-9..=1e-2",
    hint: "relative to the highest line contrast; the default 1e-5 is finer than most data",
    holds: |x| (1e-9..=1e-2).contains(&x),
};

/// Tags of millimetre catalogues have up to six digits.
pub(super) const MOST_MOLECULES: usize = 999_999;

pub(super) const MOLECULE: Domain = Domain {
    quantity: "number of the molecule or isotopologue",
    unit: "",
    allowed: "the whole numbers 1..=999999",
    hint: "as the list itself numbers them: characters 1-2 and 3 of a record, or the tag of a millimetre catalogue",
    holds: |x| x >= 1.0,
};
