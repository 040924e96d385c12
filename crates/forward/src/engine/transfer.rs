//! Radiative transfer through the slabs at the nodes of a group, with derivatives by every free parameter.

use super::Engine;
use super::field::Field;
use super::lines::CloudState;
use crate::lanes::{Block, Kernel, LANES, dispatch, expm1};
use crate::oracle::{interpolate_channels, legendre};
use crate::planck::{FIRST_RADIATION_W_M2_PER_SR, SECOND_RADIATION_M_K};
use crate::sightline::{Background, Layout};
use crate::voigt::Arithmetic;

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
fn planck<R: Arithmetic>(first: &Block, second: &Block, temperature_k: f64) -> (Block, Block) {
    let per_temperature = 1.0 / temperature_k;
    let mut x = [0.0; LANES];
    for lane in 0..LANES {
        x[lane] = second[lane] * per_temperature;
    }
    let growth = expm1::<R>(&x);
    let (mut value, mut slope) = ([0.0; LANES], [0.0; LANES]);
    for lane in 0..LANES {
        let inverse = 1.0 / growth[lane];
        value[lane] = first[lane] * inverse;
        slope[lane] = value[lane] * x[lane] * R::mul_add(1.0, inverse, 1.0);
    }
    (value, slope)
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
        let sightline = &engine.sightline;
        let scale = parameters[Layout::SCALE].exp();
        let background_k = parameters[Layout::BACKGROUND_TEMPERATURE].exp();
        let dilution = parameters[Layout::DILUTION];
        let terms = sightline.background.shape_terms();
        let shape = &parameters[Layout::SHAPE..Layout::SHAPE + terms];
        let span = sightline.channels.span_vac_m().unwrap_or((0.0, 1.0));
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
            let (mut first, mut second) = ([0.0; LANES], [0.0; LANES]);
            for lane in 0..LANES {
                let square = inverse[lane] * inverse[lane];
                first[lane] = scale * FIRST_RADIATION_W_M2_PER_SR * square * square * inverse[lane];
                second[lane] = SECOND_RADIATION_M_K * inverse[lane];
            }
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
                    (bare, behind_slope) = planck::<R>(&first, &second, background_k);
                    for lane in 0..LANES {
                        let mut bend = dilution;
                        if terms > 0 {
                            let place =
                                (2.0 * wavelength[lane] - span.0 - span.1) / (span.1 - span.0);
                            for (k, a) in shape.iter().enumerate() {
                                bend += dilution * a * legendre(k + 1, place);
                            }
                        }
                        behind[lane] = bend * bare[lane];
                        behind_slope[lane] *= bend;
                    }
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
                    planck::<R>(&first, &second, states[cloud].temperature_k);
                let negative = depths[cloud].depth[block].map(|depth| -depth);
                let change = expm1::<R>(&negative);
                for lane in 0..LANES {
                    let contrast = source[lane] - behind[lane];
                    let pull = contrast - excess[lane];
                    by_depth[cloud][lane] = pull * (1.0 + change[lane]);
                    by_source[cloud][lane] = -change[lane] * source_slope[lane];
                    lost[cloud][lane] = change[lane];
                    excess[lane] = R::mul_add(-change[lane], pull, excess[lane]);
                }
            }
            let rows = &mut rows[block * LANES * stride..(block + 1) * LANES * stride];
            let mut write = |column: usize, values: &Block| {
                for lane in 0..LANES {
                    rows[lane * stride + column] = values[lane] * weight[lane];
                }
            };
            write(0, &excess);
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
                let chain = |slopes: &Block| {
                    let mut values = [0.0; LANES];
                    for lane in 0..LANES {
                        values[lane] = slopes[lane] * by_depth[cloud][lane];
                    }
                    values
                };
                if column_of[place.temperature()] > 0 {
                    let mut values = chain(&depth.by_temperature[block]);
                    for lane in 0..LANES {
                        values[lane] += by_source[cloud][lane];
                    }
                    write(column_of[place.temperature()], &values);
                }
                for (parameter, slopes) in [
                    (place.velocity(), &depth.by_velocity),
                    (place.turbulence_squared(), &depth.by_turbulence),
                    (place.doppler_temperature(), &depth.by_doppler_temperature),
                ] {
                    if column_of[parameter] > 0 {
                        write(column_of[parameter], &chain(&slopes[block]));
                    }
                }
                for (s, species) in depth.by_column.iter().enumerate() {
                    if species.touched && column_of[place.column(s)] > 0 {
                        write(
                            column_of[place.column(s)],
                            &chain(&species.depth[block]),
                        );
                    }
                }
                for lane in 0..LANES {
                    through[lane] *= 1.0 + lost[cloud][lane];
                }
            }
            for lane in 0..LANES {
                through[lane] -= 1.0;
            }
            let of_background = |slopes: &Block| {
                let mut values = [0.0; LANES];
                for lane in 0..LANES {
                    values[lane] = slopes[lane] * through[lane];
                }
                values
            };
            if column_of[Layout::SCALE] > 0 {
                // A measured background is what it is: only the gas's own light scales.
                let mut values = excess;
                if matches!(sightline.background, Background::Measured { .. }) {
                    for lane in 0..LANES {
                        values[lane] -= behind[lane] * through[lane];
                    }
                }
                write(column_of[Layout::SCALE], &values);
            }
            if column_of[Layout::BACKGROUND_TEMPERATURE] > 0 {
                write(
                    column_of[Layout::BACKGROUND_TEMPERATURE],
                    &of_background(&behind_slope),
                );
            }
            if column_of[Layout::DILUTION] > 0 {
                let mut slopes = bare;
                for (k, a) in shape.iter().enumerate() {
                    for lane in 0..LANES {
                        let place = (2.0 * wavelength[lane] - span.0 - span.1) / (span.1 - span.0);
                        slopes[lane] += bare[lane] * a * legendre(k + 1, place);
                    }
                }
                write(column_of[Layout::DILUTION], &of_background(&slopes));
            }
            for k in 0..terms {
                if column_of[Layout::SHAPE + k] > 0 {
                    let mut slopes = [0.0; LANES];
                    for lane in 0..LANES {
                        let place = (2.0 * wavelength[lane] - span.0 - span.1) / (span.1 - span.0);
                        slopes[lane] = dilution * bare[lane] * legendre(k + 1, place);
                    }
                    write(column_of[Layout::SHAPE + k], &of_background(&slopes));
                }
            }
        }
    }
}
