//! Optical depths and their slopes on the nodes of a group, and the light that leaves them.

use super::groups::Placed;
use super::lines::CloudState;
use super::spread::RunOfChannels;
use crate::lanes::{LANES, NormalIntegral};
use crate::sightline::LineSpread;

/// The nodes of one group within reach of one run of channels, in whole blocks of lanes: the last block is
/// filled up with nodes of no weight.
#[derive(Default)]
pub struct Field {
    pub wavelength_m: Vec<f64>,
    /// Weight of each node, in m.
    pub weight_m: Vec<f64>,
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
    pub depth: Vec<f64>,
    pub by_temperature: Vec<f64>,
    pub by_velocity: Vec<f64>,
    pub by_turbulence: Vec<f64>,
    pub by_doppler_temperature: Vec<f64>,
    /// The part of each species: at the same time the derivative by the logarithm of its column.
    pub by_column: Vec<SpeciesField>,
}

/// Optical depth of one species on the nodes.
#[derive(Default)]
pub struct SpeciesField {
    /// False while the species has no line in the group.
    pub touched: bool,
    pub depth: Vec<f64>,
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
        let count = (to - from).next_multiple_of(LANES);
        self.wavelength_m.clear();
        self.wavelength_m
            .extend(plan.place[from..to].iter().map(|&z| zero + unit * z));
        self.weight_m.clear();
        self.weight_m
            .extend(plan.weight[from..to].iter().map(|&w| unit * w));
        let last = self.wavelength_m[to - from - 1];
        self.wavelength_m.resize(count, last);
        self.weight_m.resize(count, 0.0);
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

    /// The fields of a cloud and of one species of it, zeroed at the first touch.
    pub fn open(&mut self, cloud: usize, species: usize) -> (&[f64], &mut CloudField) {
        let count = self.wavelength_m.len();
        let field = &mut self.clouds[cloud];
        let zero = |values: &mut Vec<f64>| {
            values.clear();
            values.resize(count, 0.0);
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
        (&self.wavelength_m, field)
    }
}
