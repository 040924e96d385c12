//! One line's optical depth, and what changes it, added to the nodes of its group.

use super::field::Field;
use super::lines::LineState;
use crate::lanes::{Kernel, LANES};
use crate::voigt::{Arithmetic, slope_lanes, w_lanes};

/// Adds a line to a field.
pub struct Absorb<'a> {
    pub line: &'a LineState,
    pub field: &'a mut Field,
}

impl Kernel for Absorb<'_> {
    /// `τ = D K(x, a)`, `x = (λ_c/λ - 1) c/b`, `a ∝ 1/b`, `D ∝ N s(T)/b`:
    ///
    /// * `∂τ/∂ln b = -D (K + x K_x + a K_a)`, and through it by both temperatures and the turbulence;
    /// * `∂τ/∂v = D K_x (c/b) (λ_c/λ) d ln λ_c/dv`.
    #[inline(always)]
    fn run<R: Arithmetic>(self) {
        let line = self.line;
        let (wavelengths, inverses, cloud) = self.field.open(line.cloud, line.species);
        let reach = line.centre_m * line.shape.relative_reach() * 1.2;
        let first = wavelengths.partition_point(|block| block[LANES - 1] < line.centre_m - reach);
        let last = wavelengths.partition_point(|block| block[0] <= line.centre_m + reach);
        let per_width = 1.0 / line.relative_width;
        let y = line.damping.y();
        let (own_temperature, kinetic_temperature) = if line.own_doppler_temperature {
            (0.0, line.width_by_temperature)
        } else {
            (line.width_by_temperature, 0.0)
        };
        let depths = &mut cloud.by_column[line.species].depth;
        for block in first..last {
            let mut x = [0.0; LANES];
            for lane in 0..LANES {
                x[lane] = (line.centre_m - wavelengths[block][lane])
                    * (inverses[block][lane] * per_width);
            }
            let (mut k, mut l) = ([0.0; LANES], [0.0; LANES]);
            w_lanes::<_, R, LANES>(&x, &line.damping, &mut k, &mut l);
            let (mut slope_re, mut slope_im) = ([0.0; LANES], [0.0; LANES]);
            slope_lanes::<R, LANES>(&x, y, &k, &l, &mut slope_re, &mut slope_im);
            let depth = &mut cloud.depth[block];
            let by_temperature = &mut cloud.by_temperature[block];
            let by_velocity = &mut cloud.by_velocity[block];
            let by_turbulence = &mut cloud.by_turbulence[block];
            let by_doppler = &mut cloud.by_doppler_temperature[block];
            let by_column = &mut depths[block];
            for lane in 0..LANES {
                let tau = line.depth * k[lane];
                // dw/dy = i dw/dx: K_a = -Im(dw/dz).
                let by_width = -line.depth
                    * R::mul_add(
                        x[lane],
                        slope_re[lane],
                        R::mul_add(-y, slope_im[lane], k[lane]),
                    );
                let stretch = R::mul_add(x[lane], line.relative_width, 1.0);
                depth[lane] += tau;
                by_column[lane] += tau;
                by_temperature[lane] +=
                    R::mul_add(line.excitation_slope, tau, own_temperature * by_width);
                by_doppler[lane] = R::mul_add(kinetic_temperature, by_width, by_doppler[lane]);
                by_turbulence[lane] =
                    R::mul_add(line.width_by_turbulence, by_width, by_turbulence[lane]);
                by_velocity[lane] = R::mul_add(
                    line.depth * line.x_by_velocity * stretch,
                    slope_re[lane],
                    by_velocity[lane],
                );
            }
        }
    }
}
