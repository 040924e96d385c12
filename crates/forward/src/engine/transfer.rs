//! Radiative transfer through the slabs at the nodes of a group, with derivatives by every free parameter.

use super::Engine;
use super::field::Field;
use super::lines::CloudState;
use crate::lanes::{Block, Kernel, LANES, dispatch, expm1, map};
use crate::oracle::{interpolate_channels, legendre};
use crate::planck::{FIRST_RADIATION_W_M2_PER_SR, SECOND_RADIATION_M_K};
use crate::sightline::{Background, Layout};
use crate::voigt::{Arithmetic, Vector};

/// Fills the rows of the field: excess radiance over the background and its derivatives, times the weights.
///
/// Cloud after cloud, nearest the background first, with E the excess so far and t = exp(-τ):
///
/// `E <- E t + (S - I_bg)(1 - t)`
///
/// so that a contrast of zero gives a spectrum without lines exactly. Derivatives: by τ of a cloud,
/// `(S - I_bg - E_before) t` times the transmission of the clouds in front; by the background,
/// `Π t - 1` times its own slope; by the temperature also through S.
pub fn pass(
    engine: &Engine,
    parameters: &[f64],
    states: &[CloudState],
    column_of: &[usize],
    stride: usize,
    field: &mut Field,
) {
    let count = field.wavelength_m.len() * LANES;
    // A row holds what every call writes and zeros elsewhere: columns that this group does not touch.
    field.rows.clear();
    field.rows.resize(count * stride, 0.0);
    dispatch(Pass {
        engine,
        parameters,
        states,
        column_of,
        stride,
        field,
    });
}

struct Pass<'a> {
    engine: &'a Engine,
    parameters: &'a [f64],
    states: &'a [CloudState],
    column_of: &'a [usize],
    stride: usize,
    field: &'a mut Field,
}

/// Clouds on one sightline that the engine can pass.
pub const MOST_CLOUDS: usize = 8;

/// Radiance of a blackbody and its derivative by ln T, on a block.
#[inline(always)]
fn planck<V: Vector>(v: V, first: &Block, second: &Block, temperature_k: f64) -> (Block, Block) {
    let per_temperature = v.splat(1.0 / temperature_k);
    let x = map(
        v,
        [second],
        #[inline(always)]
        |[second]| v.mul(second, per_temperature),
    );
    let growth = expm1(v, &x);
    let inverse = map(
        v,
        [&growth],
        #[inline(always)]
        |[growth]| v.div(v.splat(1.0), growth),
    );
    let value = map(
        v,
        [first, &inverse],
        #[inline(always)]
        |[first, inverse]| v.mul(first, inverse),
    );
    let slope = map(
        v,
        [&value, &x, &inverse],
        #[inline(always)]
        |[value, x, inverse]| v.mul(v.mul(value, x), v.add(inverse, v.splat(1.0))),
    );
    (value, slope)
}

/// Writes one column of the rows of a block, times the weights of the nodes.
#[inline(always)]
fn scatter<V: Vector>(
    v: V,
    rows: &mut [f64],
    stride: usize,
    weight: &Block,
    column: usize,
    values: &Block,
) {
    let weighted = product(v, values, weight);
    for (row, value) in rows.chunks_exact_mut(stride).zip(weighted) {
        row[column] = value;
    }
}

/// Lane by lane.
#[inline(always)]
fn product<V: Vector>(v: V, a: &Block, b: &Block) -> Block {
    map(
        v,
        [a, b],
        #[inline(always)]
        |[a, b]| v.mul(a, b),
    )
}

impl Kernel for Pass<'_> {
    #[inline(always)]
    fn run<R: Arithmetic>(self) {
        let Pass {
            engine,
            parameters,
            states,
            column_of,
            stride,
            field,
        } = self;
        let Some(v) = R::vector() else { return };
        let sightline = &engine.sightline;
        let scale = parameters[Layout::SCALE].exp();
        let background_k = parameters[Layout::BACKGROUND_TEMPERATURE].exp();
        let dilution = parameters[Layout::DILUTION];
        let terms = sightline.background.shape_terms();
        let shape = &parameters[Layout::SHAPE..Layout::SHAPE + terms];
        let span = sightline.channels.span_vac_m().unwrap_or((0.0, 1.0));
        let place_of = |wavelength: f64| (2.0 * wavelength - span.0 - span.1) / (span.1 - span.0);
        let clouds = states.len().min(MOST_CLOUDS);
        let Field {
            wavelength_m,
            per_wavelength,
            weight_m,
            clouds: depths,
            rows,
            ..
        } = field;
        for block in 0..wavelength_m.len() {
            let wavelength = wavelength_m[block];
            let inverse = per_wavelength[block];
            let weight = weight_m[block];
            let square = map(
                v,
                [&inverse],
                #[inline(always)]
                |[inverse]| v.mul(inverse, inverse),
            );
            let first = map(
                v,
                [&square, &inverse],
                #[inline(always)]
                |[square, inverse]| {
                    let constant = v.splat(scale * FIRST_RADIATION_W_M2_PER_SR);
                    v.mul(v.mul(constant, v.mul(square, square)), inverse)
                },
            );
            let second = map(
                v,
                [&inverse],
                #[inline(always)]
                |[inverse]| v.mul(v.splat(SECOND_RADIATION_M_K), inverse),
            );
            let mut behind = [0.0; LANES];
            let mut behind_slope = [0.0; LANES];
            let mut bare = [0.0; LANES];
            match &sightline.background {
                Background::Dark => {}
                Background::Measured { radiance } => {
                    for lane in 0..LANES {
                        behind[lane] =
                            interpolate_channels(&sightline.channels, radiance, wavelength[lane]);
                    }
                }
                Background::Blackbody { .. } => {
                    (bare, behind_slope) = planck(v, &first, &second, background_k);
                    let mut bend = [dilution; LANES];
                    for (k, a) in shape.iter().enumerate() {
                        for lane in 0..LANES {
                            bend[lane] +=
                                dilution * a * legendre(k + 1, place_of(wavelength[lane]));
                        }
                    }
                    behind = map(
                        v,
                        [&bend, &bare],
                        #[inline(always)]
                        |[bend, bare]| v.mul(bend, bare),
                    );
                    behind_slope = map(
                        v,
                        [&bend, &behind_slope],
                        #[inline(always)]
                        |[bend, slope]| v.mul(bend, slope),
                    );
                }
            }
            let mut excess = [0.0; LANES];
            let mut lost = [[0.0; LANES]; MOST_CLOUDS];
            let mut by_depth = [[0.0; LANES]; MOST_CLOUDS];
            let mut by_source = [[0.0; LANES]; MOST_CLOUDS];
            for cloud in 0..clouds {
                if !depths[cloud].touched {
                    continue;
                }
                let (source, source_slope) =
                    planck(v, &first, &second, states[cloud].temperature_k);
                let negative = map(
                    v,
                    [&depths[cloud].depth[block]],
                    #[inline(always)]
                    |[depth]| v.sub(v.splat(0.0), depth),
                );
                let change = expm1(v, &negative);
                let pull = map(
                    v,
                    [&source, &behind, &excess],
                    #[inline(always)]
                    |[source, behind, excess]| v.sub(v.sub(source, behind), excess),
                );
                by_depth[cloud] = map(
                    v,
                    [&pull, &change],
                    #[inline(always)]
                    |[pull, change]| v.mul_add(pull, change, pull),
                );
                by_source[cloud] = map(
                    v,
                    [&change, &source_slope],
                    #[inline(always)]
                    |[change, slope]| v.neg_mul_add(change, slope, v.splat(0.0)),
                );
                excess = map(
                    v,
                    [&change, &pull, &excess],
                    #[inline(always)]
                    |[change, pull, excess]| v.neg_mul_add(change, pull, excess),
                );
                lost[cloud] = change;
            }
            let rows = &mut rows[block * LANES * stride..(block + 1) * LANES * stride];
            scatter(v, rows, stride, &weight, 0, &excess);
            // From the observer backwards: what the clouds in front let through.
            let mut through = [1.0; LANES];
            for cloud in (0..clouds).rev() {
                let depth = &depths[cloud];
                if !depth.touched {
                    continue;
                }
                let place = &engine.layout.clouds[cloud];
                for lane in 0..LANES {
                    by_depth[cloud][lane] *= through[lane];
                    by_source[cloud][lane] *= through[lane];
                }
                if column_of[place.temperature()] > 0 {
                    let mut values = product(v, &by_depth[cloud], &depth.by_temperature[block]);
                    for lane in 0..LANES {
                        values[lane] += by_source[cloud][lane];
                    }
                    scatter(
                        v,
                        rows,
                        stride,
                        &weight,
                        column_of[place.temperature()],
                        &values,
                    );
                }
                for (parameter, slopes) in [
                    (place.velocity(), &depth.by_velocity),
                    (place.turbulence_squared(), &depth.by_turbulence),
                    (place.doppler_temperature(), &depth.by_doppler_temperature),
                ] {
                    if column_of[parameter] > 0 {
                        scatter(
                            v,
                            rows,
                            stride,
                            &weight,
                            column_of[parameter],
                            &product(v, &by_depth[cloud], &slopes[block]),
                        );
                    }
                }
                for (s, species) in depth.by_column.iter().enumerate() {
                    if species.touched && column_of[place.column(s)] > 0 {
                        scatter(
                            v,
                            rows,
                            stride,
                            &weight,
                            column_of[place.column(s)],
                            &product(v, &by_depth[cloud], &species.depth[block]),
                        );
                    }
                }
                for lane in 0..LANES {
                    through[lane] *= 1.0 + lost[cloud][lane];
                }
            }
            let through = through.map(|through| through - 1.0);
            if column_of[Layout::SCALE] > 0 {
                // A measured background is what it is: only the gas's own light scales.
                let mut values = excess;
                if matches!(sightline.background, Background::Measured { .. }) {
                    for lane in 0..LANES {
                        values[lane] -= behind[lane] * through[lane];
                    }
                }
                scatter(v, rows, stride, &weight, column_of[Layout::SCALE], &values);
            }
            if column_of[Layout::BACKGROUND_TEMPERATURE] > 0 {
                scatter(
                    v,
                    rows,
                    stride,
                    &weight,
                    column_of[Layout::BACKGROUND_TEMPERATURE],
                    &product(v, &through, &behind_slope),
                );
            }
            if column_of[Layout::DILUTION] > 0 {
                let mut slopes = bare;
                for (k, a) in shape.iter().enumerate() {
                    for lane in 0..LANES {
                        let place = place_of(wavelength[lane]);
                        slopes[lane] += bare[lane] * a * legendre(k + 1, place);
                    }
                }
                scatter(
                    v,
                    rows,
                    stride,
                    &weight,
                    column_of[Layout::DILUTION],
                    &product(v, &through, &slopes),
                );
            }
            for k in 0..terms {
                if column_of[Layout::SHAPE + k] > 0 {
                    let mut slopes = [0.0; LANES];
                    for lane in 0..LANES {
                        let place = place_of(wavelength[lane]);
                        slopes[lane] = dilution * bare[lane] * legendre(k + 1, place);
                    }
                    scatter(
                        v,
                        rows,
                        stride,
                        &weight,
                        column_of[Layout::SHAPE + k],
                        &product(v, &through, &slopes),
                    );
                }
            }
        }
    }
}
