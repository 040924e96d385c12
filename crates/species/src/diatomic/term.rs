//! Term values: the energies of one vibrational level's rotation, with spin and Lambda doubling.

use super::molecule::State;

/// The constants of one vibrational level, cm^-1, in the N^2 form of the effective Hamiltonian.
#[derive(Debug, Clone, Copy)]
pub(super) struct Constants {
    pub(super) origin: f64,
    pub(super) b: f64,
    pub(super) d: f64,
    pub(super) h: f64,
    /// Spin-orbit constant and its centrifugal part.
    pub(super) a: f64,
    pub(super) a_d: f64,
    /// Spin-rotation.
    pub(super) gamma: f64,
    /// Lambda doubling.
    pub(super) p: f64,
    pub(super) q: f64,
}

/// One level (v, J, parity, spin component).
#[derive(Debug, Clone, Copy)]
pub(super) struct Term {
    pub(super) v: u32,
    pub(super) twice_j: u32,
    /// Symmetry without the sign that alternates with J: e, or else f.
    pub(super) is_e: bool,
    pub(super) energy_per_cm: f64,
    /// Amplitudes of |Omega|: of the lowest one the state has (0 or 1/2), and of 3/2.
    pub(super) mix: [f64; 2],
}

/// All levels of one v and J, cm^-1 on the scale of the constants.
///
/// 1-Sigma: `B x - D x^2 + H x^3`, x = J(J+1). 2-Sigma: the same in N(N+1), plus `gamma N/2` for J = N + 1/2 or
/// `-gamma (N+1)/2` for J = N - 1/2. 2-Pi: the eigenvalues of the 2 x 2 matrix over |Omega| = 1/2, 3/2 of each parity.
/// Sources: Herzberg, Spectra of Diatomic Molecules (1950), chapter V; Brown, Colbourn, Watson and Wayne, J. Mol.
/// Spectrosc. 74, 294 (1979); Lambda doubling: Brown and Merer, J. Mol. Spectrosc. 74, 488 (1979).
pub(super) fn terms(state: State, constants: &Constants, v: u32, twice_j: u32) -> Vec<Term> {
    let j = f64::from(twice_j) / 2.0;
    let term = |is_e, energy_per_cm, mix| Term {
        v,
        twice_j,
        is_e,
        energy_per_cm,
        mix,
    };
    let Constants {
        origin,
        b,
        d,
        h,
        gamma,
        ..
    } = *constants;
    let rotor = |x: f64| origin + x * (b - x * (d - x * h));
    match state {
        State::Sigma1 => vec![term(true, rotor(j * (j + 1.0)), [1.0, 0.0])],
        State::Sigma2 => {
            // e: N = J - 1/2; f: N = J + 1/2.
            let (below, above) = (j - 0.5, j + 0.5);
            vec![
                term(
                    true,
                    rotor(below * (below + 1.0)) + gamma / 2.0 * below,
                    [1.0, 0.0],
                ),
                term(
                    false,
                    rotor(above * (above + 1.0)) - gamma / 2.0 * (above + 1.0),
                    [1.0, 0.0],
                ),
            ]
        }
        State::Pi2 => {
            let mut found = Vec::with_capacity(4);
            for is_e in [true, false] {
                let [low, off, high] = pi_matrix(constants, j, is_e);
                if twice_j == 1 {
                    found.push(term(is_e, low, [1.0, 0.0]));
                    continue;
                }
                for (energy, mix) in eigen(low, off, high) {
                    found.push(term(is_e, energy, mix));
                }
            }
            found
        }
    }
}

/// The elements (1/2,1/2), (1/2,3/2) and (3/2,3/2) of a 2-Pi Hamiltonian, cm^-1.
fn pi_matrix(constants: &Constants, j: f64, is_e: bool) -> [f64; 3] {
    let Constants {
        origin,
        b,
        d,
        h,
        a,
        a_d,
        gamma,
        p,
        q,
    } = *constants;
    let sign = if is_e { 1.0 } else { -1.0 };
    let x = j + 0.5;
    let z = x * x - 1.0;
    let root = z.max(0.0).sqrt();
    // N^2, and its square and cube as matrices.
    let n1 = [z + 2.0, -root, z];
    let times = |m: [f64; 3]| {
        [
            n1[0] * m[0] + n1[1] * m[1],
            n1[0] * m[1] + n1[1] * m[2],
            n1[1] * m[1] + n1[2] * m[2],
        ]
    };
    let n2 = times(n1);
    let n3 = times(n2);
    let rotor = |i: usize| b * n1[i] - d * n2[i] + h * n3[i];
    [
        origin + rotor(0) - 0.5 * a - 0.5 * a_d * n1[0] - gamma - sign * 0.5 * (p + 2.0 * q) * x,
        rotor(1) + 0.5 * root * (gamma + sign * q * x),
        origin + rotor(2) + 0.5 * a + 0.5 * a_d * n1[2],
    ]
}

/// Eigenvalues, rising, and unit eigenvectors of the symmetric matrix [[low, off], [off, high]].
fn eigen(low: f64, off: f64, high: f64) -> [(f64, [f64; 2]); 2] {
    let mean = 0.5 * (low + high);
    let difference = 0.5 * (low - high);
    let half = (difference * difference + off * off).sqrt();
    if half == 0.0 {
        return [(mean, [0.0, 1.0]), (mean, [1.0, 0.0])];
    }
    // The larger of the two components first, so that nothing cancels.
    let large = (0.5 * (1.0 + difference.abs() / half)).sqrt();
    let small = 0.5 * off / (half * large);
    let [cos, sin] = if difference >= 0.0 {
        [large, small]
    } else {
        [small, large]
    };
    [(mean - half, [-sin, cos]), (mean + half, [cos, sin])]
}

#[cfg(test)]
mod tests {
    use super::*;

    fn constants(a: f64, gamma: f64, q: f64) -> Constants {
        Constants {
            origin: 0.0,
            b: 10.0,
            d: 1e-3,
            h: 1e-7,
            a,
            a_d: 0.0,
            gamma,
            p: 0.0,
            q,
        }
    }

    #[test]
    fn without_spin_orbit_coupling_a_pi_state_is_a_rotor_in_n() {
        // N = J -+ 1/2: B N(N+1) - D N^2(N+1)^2 + H ... plus spin-rotation gamma/2 N and -gamma/2 (N+1).
        let c = constants(0.0, 0.02, 0.0);
        let rotor = |n: f64| {
            let x = n * (n + 1.0);
            10.0 * x - 1e-3 * x * x + 1e-7 * x * x * x
        };
        for twice_j in [3, 9, 21] {
            let j = f64::from(twice_j) / 2.0;
            let found = terms(State::Pi2, &c, 0, twice_j);
            for pair in [&found[..2], &found[2..]] {
                let (n1, n2) = (j - 0.5, j + 0.5);
                let want = [rotor(n1) + 0.01 * n1, rotor(n2) - 0.01 * (n2 + 1.0)];
                for (term, want) in pair.iter().zip(want) {
                    assert!(
                        (term.energy_per_cm - want).abs() < 1e-9 * want,
                        "{twice_j} {want}"
                    );
                }
            }
        }
    }

    #[test]
    fn in_case_b_lambda_doubling_is_q_n_times_n_plus_one_in_both_spin_components() {
        let c = constants(0.0, 0.0, 0.03);
        for twice_j in [5, 11] {
            let j = f64::from(twice_j) / 2.0;
            let found = terms(State::Pi2, &c, 0, twice_j);
            for (spin, n, sense) in [(0, j - 0.5, 1.0), (1, j + 0.5, -1.0)] {
                let got = found[spin].energy_per_cm - found[2 + spin].energy_per_cm;
                assert!(
                    (got - sense * 0.03 * n * (n + 1.0)).abs() < 1e-3,
                    "{twice_j} {got}"
                );
            }
        }
    }

    #[test]
    fn eigenvectors_are_those_of_the_matrix() {
        for (low, off, high) in [
            (1.0, 0.3, 2.0),
            (5.0, -2.0, 1.0),
            (1.0, 0.0, 3.0),
            (3.0, 0.0, 1.0),
        ] {
            for (value, [x, y]) in eigen(low, off, high) {
                assert!((low * x + off * y - value * x).abs() < 1e-12);
                assert!((off * x + high * y - value * y).abs() < 1e-12);
            }
        }
    }
}
