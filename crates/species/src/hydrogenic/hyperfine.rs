//! The 21 cm line: the spin flip in the ground level of H I.
//!
//! The weights here are those of F = 0 and F = 1 over the two states of the proton, 1/2 and 3/2, because all other weights of
//! H I leave the proton out, and the energies count from the centre of gravity of the two, which is the ground level of the
//! other lines: F = 0 lies below zero. So the level list and the partition function stay those of H I, no other line
//! changes, and the populations are right to the square of h nu / kT. The excitation temperature of the cloud is the
//! spin temperature.

use std::sync::Arc;

use backlit_units::constants::{PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};

use crate::{Grade, Kind, Line};

/// Hyperfine splitting of 1s, Hz. Source: Hellwig and others, IEEE Trans. Instrum. Meas. 19, 200 (1970), from memory.
const SPLITTING_HZ: f64 = 1_420_405_751.768;
/// Einstein A, s^-1. Source: Gould, Astrophys. J. 423, 522 (1994), from memory.
const A_PER_S: f64 = 2.8843e-15;
/// Weights 2F + 1 per state of the proton.
const WEIGHTS: [f64; 2] = [0.5, 1.5];

/// F = 1 to F = 0.
pub(super) fn line_21_cm() -> Line {
    let source: Arc<str> = "hi-21cm".into();
    Line {
        wavelength_vac_m: SPEED_OF_LIGHT_M_PER_S / SPLITTING_HZ,
        a_ki_per_s: A_PER_S,
        e_lower_j: -0.75 * PLANCK_J_S * SPLITTING_HZ,
        e_upper_j: 0.25 * PLANCK_J_S * SPLITTING_HZ,
        g_lower: WEIGHTS[0],
        g_upper: WEIGHTS[1],
        gamma_per_s: A_PER_S,
        grade: Grade::Aaa,
        source,
        kind: Kind::MagneticDipole,
    }
}
