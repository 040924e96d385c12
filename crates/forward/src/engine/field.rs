//! Optical depths and their slopes on the nodes of a group, and the light that leaves them.

use super::groups::Placed;
use super::lines::CloudState;
use super::spread::RunOfChannels;
use crate::lanes::{Block, LANES, NormalIntegral};
use crate::sightline::LineSpread;

/// The nodes of one group within reach of one run of channels, in whole blocks of lanes: the last block is
/// filled up with nodes of no weight.
#[derive(Default)]
pub struct Field {
    pub wavelength_m: Vec<Block>,
    /// 1/wavelength of each node.
    pub per_wavelength: Vec<Block>,
    /// Weight of each node, in m.
    pub weight_m: Vec<Block>,
    /// Nodes before the filling.
    pub nodes: usize,
    /// One entry a cloud.
    pub clouds: Vec<CloudField>,
    /// Excess radiance and its derivatives, times the weight: one row a node, laid out as those of the channels.
    pub rows: Vec<f64>,
}

/// Optical depth of one cloud on the nodes, and its derivatives.
#[derive(Default)]
pub struct CloudField {
    /// False while the cloud has no line in the group: then nothing below is meant.
    pub touched: bool,
    pub depth: Vec<Block>,
    pub by_temperature: Vec<Block>,
    pub by_velocity: Vec<Block>,
    pub by_turbulence: Vec<Block>,
    pub by_doppler_temperature: Vec<Block>,
    /// The part of each species: at the same time the derivative by the logarithm of its column.
    pub by_column: Vec<SpeciesField>,
}

/// Optical depth of one species on the nodes.
#[derive(Default)]
pub struct SpeciesField {
    /// False while the species has no line in the group.
    pub touched: bool,
    pub depth: Vec<Block>,
}

impl Field {
    /// Takes those nodes of a plan that reach the channels of a run; false if there are none.
    pub fn lay(&mut self, placed: &Placed, run: &RunOfChannels, line_spread: LineSpread) -> bool {
        let plan = placed.nodes;
        let margin = NormalIntegral::REACH * line_spread.sigma_m(placed.reference_m) * 1.01;
        let (low, high) = (run.first_edge_m() - margin, run.last_edge_m() + margin);
        let (zero, unit) = if plan.absolute {
            (0.0, 1.0)
        } else {
            (placed.reference_m, placed.reference_m)
        };
        let from = plan.place.partition_point(|&z| zero + unit * z < low);
        let to = plan.place.partition_point(|&z| zero + unit * z <= high);
        if from >= to {
            return false;
        }
        self.nodes = to - from;
        self.wavelength_m.clear();
        self.per_wavelength.clear();
        self.weight_m.clear();
        let place = &plan.place[from..to];
        for (place, weight) in place.chunks(LANES).zip(plan.weight[from..to].chunks(LANES)) {
            // The last block repeats its last node without weight.
            let last = place[place.len() - 1];
            let wavelength: Block =
                std::array::from_fn(|lane| zero + unit * place.get(lane).unwrap_or(&last));
            self.wavelength_m.push(wavelength);
            self.per_wavelength.push(wavelength.map(f64::recip));
            self.weight_m.push(std::array::from_fn(|lane| {
                unit * weight.get(lane).unwrap_or(&0.0)
            }));
        }
        true
    }

    /// Forgets the optical depths of the group before.
    pub fn clear(&mut self, states: &[CloudState]) {
        self.clouds.resize_with(states.len(), CloudField::default);
        for (cloud, state) in self.clouds.iter_mut().zip(states) {
            cloud.touched = false;
            cloud
                .by_column
                .resize_with(state.species, SpeciesField::default);
            for species in &mut cloud.by_column {
                species.touched = false;
            }
        }
    }

    /// The wavelengths with their inverse, and the field of a cloud with that of one species of it opened:
    /// zeroed at the first touch.
    pub fn open(&mut self, cloud: usize, species: usize) -> (&[Block], &[Block], &mut CloudField) {
        let count = self.wavelength_m.len();
        let field = &mut self.clouds[cloud];
        let zero = |values: &mut Vec<Block>| {
            values.clear();
            values.resize(count, [0.0; LANES]);
        };
        if !field.touched {
            field.touched = true;
            zero(&mut field.depth);
            zero(&mut field.by_temperature);
            zero(&mut field.by_velocity);
            zero(&mut field.by_turbulence);
            zero(&mut field.by_doppler_temperature);
        }
        if !field.by_column[species].touched {
            field.by_column[species].touched = true;
            zero(&mut field.by_column[species].depth);
        }
        (&self.wavelength_m, &self.per_wavelength, field)
    }
}
