//! Hydrogen and hydrogen-like ions from theory: energies, wavelengths and transition probabilities.
//!
//! Levels are those of one electron about a nucleus of finite mass, with the Dirac fine structure and the Lamb shift;
//! transition probabilities come from exact radial integrals. No hyperfine structure but that of the ground level of H I, which
//! makes the 21 cm line; no two-photon decay of 2s.
//!
//! No level above n = 12 counts: at n = 12 the electron is 144 Bohr radii away, and no gas of interest leaves it
//! alone out there. Without such a limit the partition function would have no value at all.

mod energy;
mod hyperfine;
mod lines;
mod radial;

pub use energy::level_energy_j;
pub use lines::{Component, components};
pub use radial::radial_integral;

use backlit_units::constants::{
    ALPHA_PARTICLE_MASS_U, ATOMIC_MASS_KG, DEUTERON_MASS_U, ELECTRON_MASS_U, PROTON_MASS_U,
};

use crate::{Level, Species};

/// Highest principal quantum number of the catalogue's species.
pub const N_MAX: u32 = 12;

/// The nuclei whose one-electron spectra are computed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Nucleus {
    /// H I.
    Proton,
    /// D I.
    Deuteron,
    /// He II.
    AlphaParticle,
}

impl Nucleus {
    /// All of them, in the order of the catalogue.
    pub const ALL: [Nucleus; 3] = [Nucleus::Proton, Nucleus::Deuteron, Nucleus::AlphaParticle];

    /// Name of the atom or ion.
    pub fn species_name(self) -> &'static str {
        match self {
            Nucleus::Proton => "H I",
            Nucleus::Deuteron => "D I",
            Nucleus::AlphaParticle => "He II",
        }
    }

    /// Charge in elementary charges.
    pub fn charge(self) -> u32 {
        match self {
            Nucleus::Proton | Nucleus::Deuteron => 1,
            Nucleus::AlphaParticle => 2,
        }
    }

    /// Mass of the nucleus over that of the electron.
    pub fn mass_in_electrons(self) -> f64 {
        let mass_u = match self {
            Nucleus::Proton => PROTON_MASS_U,
            Nucleus::Deuteron => DEUTERON_MASS_U,
            Nucleus::AlphaParticle => ALPHA_PARTICLE_MASS_U,
        };
        mass_u / ELECTRON_MASS_U
    }

    /// Reduced mass of the electron in electron masses.
    pub fn reduced_mass(self) -> f64 {
        let mass = self.mass_in_electrons();
        mass / (1.0 + mass)
    }
}

/// The species of a nucleus with one electron, levels up to [`N_MAX`], lines merged where closer than 0.3 km/s.
pub fn species(nucleus: Nucleus) -> Species {
    let mass_kg = (nucleus.mass_in_electrons() + 1.0) * ELECTRON_MASS_U * ATOMIC_MASS_KG;
    let levels: Vec<Level> = (1..=N_MAX).map(|n| shell(nucleus, n)).collect();
    let mut lines = lines::merged(nucleus, N_MAX);
    if nucleus == Nucleus::Proton {
        lines.push(hyperfine::line_21_cm());
    }
    Species::new(nucleus.species_name(), mass_kg, lines, levels)
        .with_ionization_energy_j(energy::limit_j(nucleus))
}

/// A whole shell: 2 n^2 states at their mean energy; its width, at most kT of 0.5 K, is no matter to the partition function.
fn shell(nucleus: Nucleus, n: u32) -> Level {
    let mut level = Level {
        g: 0.0,
        energy_j: 0.0,
    };
    for (l, twice_j) in energy::states(n) {
        let g = f64::from(twice_j + 1);
        level.g += g;
        level.energy_j += g * level_energy_j(nucleus, n, l, twice_j);
    }
    level.energy_j /= level.g;
    level
}
