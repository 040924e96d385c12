//! One atom, ion or molecule in the gas.

use std::sync::Arc;

use crate::{Line, Partition, partition};

/// A level, or a group of levels so close that the partition function cannot tell them apart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Level {
    /// Statistical weight, `2J + 1` summed over the group.
    pub g: f64,
    /// Energy above the ground level, J.
    pub energy_j: f64,
}

/// What a gas particle is: its mass, its lines and its levels.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub struct Species {
    /// Such as "Na I".
    pub name: String,
    /// Mass of one particle of the natural isotope mixture, kg.
    pub mass_kg: f64,
    /// Lines, sorted by wavelength.
    pub lines: Vec<Line>,
    /// Levels or groups of levels below the first ionization limit, sorted by energy.
    pub levels: Vec<Level>,
    /// Energy from the ground level to the first ionization limit, J, where known.
    pub ionization_energy_j: Option<f64>,
    /// Keys of the sources of all figures, explained by [`crate::catalogue::citation`].
    pub sources: Vec<Arc<str>>,
}

impl Species {
    /// A species from its parts; lines and levels are sorted here.
    pub fn new(
        name: impl Into<String>,
        mass_kg: f64,
        mut lines: Vec<Line>,
        mut levels: Vec<Level>,
    ) -> Self {
        lines.sort_by(|a, b| a.wavelength_vac_m.total_cmp(&b.wavelength_vac_m));
        levels.sort_by(|a, b| a.energy_j.total_cmp(&b.energy_j));
        let mut sources: Vec<Arc<str>> = lines.iter().map(|line| line.source.clone()).collect();
        sources.sort_unstable();
        sources.dedup();
        Species {
            name: name.into(),
            mass_kg,
            lines,
            levels,
            ionization_energy_j: None,
            sources,
        }
    }

    /// The same species with its ionization energy, J.
    pub fn with_ionization_energy_j(mut self, energy_j: f64) -> Self {
        self.ionization_energy_j = Some(energy_j);
        self
    }

    /// Partition function and its slope, by the plain sum over the levels: see [`Partition`].
    pub fn partition_function(&self, temperature_k: f64) -> Partition {
        partition::sum(&self.levels, temperature_k)
    }

    /// The lines from one vacuum wavelength to another, m, both ends included.
    pub fn lines_between(&self, low_vac_m: f64, high_vac_m: f64) -> &[Line] {
        let start = self
            .lines
            .partition_point(|line| line.wavelength_vac_m < low_vac_m);
        let end = self
            .lines
            .partition_point(|line| line.wavelength_vac_m <= high_vac_m);
        &self.lines[start.min(end)..end]
    }
}
