//! The fast model: a spectrum and its derivatives in one pass, with no allocation once warm.
//!
//! The gas changes the background only near its lines, so the work is done there: lines that reach into
//! each other form a group (`groups`); the group's optical depths and their slopes are added up on the
//! nodes of a plan (`absorb`); the slabs are passed one after the other (`transfer`); and each node is
//! handed to the channels that the line-spread function carries it to (`spread`). The smooth background
//! is laid under it by [`crate::continuum`]. Everything that does not depend on the point in the parameter
//! space belongs to the [`Engine`] and is shared; what does belongs to the [`Evaluation`], which a thread
//! owns.

mod absorb;
mod field;
mod gram;
mod groups;
mod lines;
mod shares;
mod spread;
mod transfer;

#[cfg(test)]
mod tests;

pub use gram::Gram;
pub use transfer::MOST_CLOUDS;

use crate::continuum::{Continuum, ContinuumColumns};
use crate::lanes::{LANES, NormalIntegral, dispatch};
use crate::nodes::{Planner, Shape};
use crate::sightline::{Background, Layout, Sightline};
use crate::transition::Transition;
use backlit_species::PartitionTable;
use lines::LineState;

/// What all evaluations of one sightline share.
pub struct Engine {
    sightline: Sightline,
    layout: Layout,
    /// The lines that can matter anywhere within the bounds, by cloud.
    transitions: Vec<Vec<Transition>>,
    partitions: Vec<Vec<PartitionTable>>,
    continuum: Option<Continuum>,
    normal: NormalIntegral,
    runs: Vec<spread::RunOfChannels>,
    mean_channel_m: f64,
}

/// A point of the parameter space with the spectrum there, its derivatives, and the room to work in.
pub struct Evaluation {
    /// Column of each parameter in a row: 0 where it is not free.
    column_of: Vec<usize>,
    /// The free parameter of each column after the first.
    free: Vec<usize>,
    stride: usize,
    rows: Vec<f64>,
    /// Where the first row begins.
    offset: usize,
    continuum: ContinuumColumns,
    planner: Planner,
    lines: Vec<LineState>,
    groups: groups::Groups,
    key: Vec<Shape>,
    field: field::Field,
    room: Vec<crate::lanes::Block>,
    nodes_used: usize,
    states: Vec<lines::CloudState>,
}

impl Engine {
    /// Prepares a sightline for evaluation anywhere between two corners of its parameter space.
    ///
    /// * `low`, `high`: laid out by [`Sightline::layout`], equal where a parameter is known.
    pub fn new(sightline: Sightline, low: &[f64], high: &[f64]) -> Self {
        let layout = sightline.layout();
        let transitions = lines::relevant(&sightline, &layout, low, high);
        let partitions = sightline
            .clouds
            .iter()
            .zip(&layout.clouds)
            .map(|(cloud, place)| {
                let temperature = place.temperature();
                let (low_k, high_k) = (low[temperature].exp(), high[temperature].exp());
                cloud
                    .species
                    .iter()
                    .map(|species| PartitionTable::new(species, low_k, high_k))
                    .collect()
            })
            .collect();
        let continuum = match sightline.background {
            Background::Blackbody { shape_terms } => Some(Continuum::new(
                &sightline.channels,
                sightline.line_spread,
                shape_terms,
                (
                    low[Layout::BACKGROUND_TEMPERATURE].exp(),
                    high[Layout::BACKGROUND_TEMPERATURE].exp(),
                ),
            )),
            _ => None,
        };
        let runs = spread::RunOfChannels::all(&sightline.channels, sightline.line_spread);
        let mean_channel_m = sightline.channels.mean_width_m();
        Engine {
            sightline,
            layout,
            transitions,
            partitions,
            continuum,
            normal: NormalIntegral::new(),
            runs,
            mean_channel_m,
        }
    }

    /// Standard deviation of line spread and channel together.
    fn blur_m(&self, wavelength_m: f64) -> f64 {
        let sigma_m = self.sightline.line_spread.sigma_m(wavelength_m);
        (sigma_m * sigma_m + self.mean_channel_m * self.mean_channel_m / 12.0).sqrt()
    }

    /// What lies on the line of sight.
    pub fn sightline(&self) -> &Sightline {
        &self.sightline
    }

    /// Where each parameter stands.
    pub fn layout(&self) -> &Layout {
        &self.layout
    }

    /// The lines that can matter within the bounds, of one cloud.
    pub fn transitions(&self, cloud: usize) -> &[Transition] {
        &self.transitions[cloud]
    }

    /// Room for evaluations with derivatives by the parameters in `free` (indices into the layout).
    pub fn evaluation(&self, free: &[usize]) -> Evaluation {
        let mut column_of = vec![0; self.layout.len()];
        for (column, &parameter) in free.iter().enumerate() {
            column_of[parameter] = column + 1;
        }
        let stride = (free.len() + 1).next_multiple_of(LANES);
        let room = (self.sightline.channels.len() + 2 * LANES + 1) * stride;
        let rows = vec![0.0; room];
        // Vectors that straddle two cache lines cost twice: start on one.
        let offset = rows.as_ptr().align_offset(64).min(stride);
        Evaluation {
            column_of,
            free: free.to_vec(),
            stride,
            rows,
            offset,
            continuum: ContinuumColumns::default(),
            planner: Planner::new(0.1 * self.sightline.tolerance),
            lines: Vec::new(),
            groups: groups::Groups::default(),
            key: Vec::new(),
            field: field::Field::default(),
            room: Vec::new(),
            nodes_used: 0,
            states: Vec::new(),
        }
    }

    /// The spectrum and its derivatives at a point; they stay in `evaluation` until the next call.
    ///
    /// * `parameters`: laid out by [`Sightline::layout`], within the corners given to [`Engine::new`].
    ///
    /// Accuracy: the sightline's tolerance, relative to the strongest feature, against [`crate::oracle`]
    /// (`the_engine_agrees_with_the_oracle`); derivatives against finite differences
    /// (`derivatives_agree_with_finite_differences`).
    pub fn evaluate(&self, evaluation: &mut Evaluation, parameters: &[f64]) {
        lines::update(
            self,
            parameters,
            &mut evaluation.states,
            &mut evaluation.lines,
        );
        let Evaluation {
            column_of,
            stride,
            rows,
            offset,
            continuum,
            planner,
            lines,
            groups,
            key,
            field,
            states,
            room,
            nodes_used,
            ..
        } = evaluation;
        *nodes_used = 0;
        let stride = *stride;
        let rows = &mut rows[*offset..];
        self.lay_background(parameters, continuum, column_of, stride, rows);
        groups.form(lines);
        for group in groups.iter() {
            let placed = groups::plan(group, &self.sightline, planner, key, lines);
            for run in &self.runs {
                if !field.lay(&placed, run, self.sightline.line_spread) {
                    continue;
                }
                *nodes_used += field.nodes;
                field.clear(states);
                for &index in group.members {
                    dispatch(absorb::Absorb {
                        line: &lines[index],
                        field,
                    });
                }
                transfer::pass(self, parameters, states, column_of, stride, field);
                dispatch(spread::Spread {
                    field,
                    run,
                    stride,
                    normal: &self.normal,
                    line_spread: self.sightline.line_spread,
                    rows,
                    room,
                });
            }
        }
    }

    fn lay_background(
        &self,
        parameters: &[f64],
        columns: &mut ContinuumColumns,
        column_of: &[usize],
        stride: usize,
        rows: &mut [f64],
    ) {
        let channels = self.sightline.channels.len();
        let mut laid: [(usize, &[f64]); 4] = [(0, &[]); 4];
        let mut count = 0;
        let mut lay = |column: usize, values| {
            laid[count] = (column, values);
            count += 1;
        };
        match (&self.sightline.background, &self.continuum) {
            (Background::Blackbody { .. }, Some(continuum)) => {
                continuum.evaluate(parameters, channels, columns);
                lay(0, &columns.value);
                for (parameter, values) in [
                    (Layout::SCALE, &columns.value),
                    (Layout::BACKGROUND_TEMPERATURE, &columns.temperature),
                    (Layout::DILUTION, &columns.dilution),
                ] {
                    if column_of[parameter] > 0 {
                        lay(column_of[parameter], values);
                    }
                }
            }
            (Background::Measured { radiance }, _) => lay(0, radiance),
            _ => {}
        }
        // One pass over the rows: whatever no background reaches starts from zero.
        for (channel, row) in rows.chunks_exact_mut(stride).enumerate() {
            row.fill(0.0);
            if channel < channels {
                for &(column, values) in &laid[..count] {
                    row[column] = values[channel];
                }
            }
        }
        for (k, values) in columns.shape.iter().enumerate() {
            let column = column_of[Layout::SHAPE + k];
            if column > 0 {
                for (row, value) in rows.chunks_exact_mut(stride).zip(values) {
                    row[column] = *value;
                }
            }
        }
    }
}

impl Evaluation {
    /// Nodes at which the last evaluation worked out the gas.
    pub fn nodes_used(&self) -> usize {
        self.nodes_used
    }

    /// The free parameters, in the order of the derivatives.
    pub fn free(&self) -> &[usize] {
        &self.free
    }

    /// Model value of a channel, in W m⁻² sr⁻¹ m⁻¹ × scale.
    pub fn value(&self, channel: usize) -> f64 {
        self.rows[self.offset + channel * self.stride]
    }

    /// Derivatives of a channel by the free parameters.
    pub fn slopes(&self, channel: usize) -> &[f64] {
        let start = self.offset + channel * self.stride + 1;
        &self.rows[start..start + self.free.len()]
    }

    /// Chi-square, gradient and normal matrix of the model against data: see [`Gram`].
    ///
    /// * `data`, `weight`: one a channel in use; weight = 1/σ², 0 for a channel not to be used.
    pub fn gram(&self, data: &[f64], weight: &[f64], gram: &mut Gram) {
        gram.accumulate(
            &self.rows[self.offset..],
            self.stride,
            self.free.len(),
            data,
            weight,
        );
    }

    /// Optical depth at the centre of the deepest line, and of every cloud and species.
    pub fn peak_depths(&self) -> impl Iterator<Item = PeakDepth> + '_ {
        self.lines.iter().map(LineState::peak_depth)
    }
}

/// How deep a line is at the last evaluation.
#[derive(Debug, Clone, Copy)]
pub struct PeakDepth {
    /// Index of the cloud.
    pub cloud: usize,
    /// Index of the species in the cloud.
    pub species: usize,
    /// Observed wavelength of the centre.
    pub centre_m: f64,
    /// 1/e half-width in wavelength.
    pub width_m: f64,
    /// Optical depth at the centre.
    pub optical_depth: f64,
}
