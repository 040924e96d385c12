//! The partition function as a plain sum over levels: the reference of the faster table.

use backlit_units::constants::BOLTZMANN_J_PER_K;

use crate::Level;

/// Below this temperature, K, the sum is that of this temperature: no gas is colder than the sky.
pub const PARTITION_T_LOW_K: f64 = 1.0;
/// Above this temperature, K, the sum is that of this temperature: the levels of no table reach further.
pub const PARTITION_T_HIGH_K: f64 = 1e6;

/// Logarithm of the partition function and its slope.
///
/// `Q(T) = sum_i g_i exp(-E_i / kT)`, `d ln Q / dT = <E> / kT^2`.
///
/// Domain: [`PARTITION_T_LOW_K`] to [`PARTITION_T_HIGH_K`]. Outside, value and slope are those at the nearer end: a
/// caller who lets temperatures run further must hold them back itself. NaN in gives NaN out. No level gives
/// ln Q = 0 (one state).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Partition {
    /// Natural logarithm of Q.
    pub ln_q: f64,
    /// Derivative of ln Q by the temperature, K^-1.
    pub dlnq_dt_per_k: f64,
}

pub(crate) fn sum(levels: &[Level], temperature_k: f64) -> Partition {
    let temperature_k = temperature_k.clamp(PARTITION_T_LOW_K, PARTITION_T_HIGH_K);
    let Some(lowest_j) = levels
        .iter()
        .map(|level| level.energy_j)
        .min_by(f64::total_cmp)
    else {
        return Partition {
            ln_q: 0.0,
            dlnq_dt_per_k: 0.0,
        };
    };
    let kt_j = BOLTZMANN_J_PER_K * temperature_k;
    // Energies from the lowest level: the sum neither overflows nor vanishes, whatever the zero of the table.
    let (mut q, mut q_energy_j) = (0.0, 0.0);
    for level in levels {
        let above_j = level.energy_j - lowest_j;
        let weight = level.g * (-above_j / kt_j).exp();
        q += weight;
        q_energy_j += weight * above_j;
    }
    Partition {
        ln_q: q.ln() - lowest_j / kt_j,
        dlnq_dt_per_k: (q_energy_j / q + lowest_j) / (kt_j * temperature_k),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn two_levels() -> [Level; 2] {
        [
            Level {
                g: 2.0,
                energy_j: 0.0,
            },
            Level {
                g: 6.0,
                energy_j: BOLTZMANN_J_PER_K * 1000.0,
            },
        ]
    }

    #[test]
    fn two_levels_give_the_sum_by_hand() {
        // At T = 1000 K: Q = 2 + 6/e, d ln Q/dT = (6/e) / Q / 1000 K.
        let tail = 6.0 * (-1.0_f64).exp();
        let got = sum(&two_levels(), 1000.0);
        assert!((got.ln_q - (2.0 + tail).ln()).abs() < 1e-15);
        assert!((got.dlnq_dt_per_k - tail / (2.0 + tail) / 1000.0).abs() < 1e-18);
    }

    #[test]
    fn a_shifted_zero_of_energy_changes_ln_q_by_the_shift_over_kt() {
        let shifted = two_levels().map(|l| Level {
            energy_j: l.energy_j + BOLTZMANN_J_PER_K * 5e4,
            ..l
        });
        let (a, b) = (sum(&two_levels(), 20.0), sum(&shifted, 20.0));
        assert!((a.ln_q - b.ln_q - 5e4 / 20.0).abs() < 1e-9);
        // d/dT of -E0/kT is E0/kT^2.
        assert!((b.dlnq_dt_per_k - a.dlnq_dt_per_k - 5e4 / 400.0).abs() < 1e-9);
    }

    #[test]
    fn outside_the_domain_the_ends_hold_and_nothing_is_nan() {
        for temperature_k in [f64::NEG_INFINITY, -1.0, 0.0, 1e-300, 1e300, f64::INFINITY] {
            let got = sum(&two_levels(), temperature_k);
            assert!(got.ln_q.is_finite() && got.dlnq_dt_per_k.is_finite());
        }
        assert_eq!(
            sum(&two_levels(), 0.0),
            sum(&two_levels(), PARTITION_T_LOW_K)
        );
        assert!(sum(&two_levels(), f64::NAN).ln_q.is_nan());
        assert_eq!(sum(&[], 300.0).ln_q, 0.0);
    }
}
