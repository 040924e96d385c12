//! Line strengths of parallel bands, from Hund's case (a) to case (b).

use super::term::Term;

/// Hönl-London factor, summed over the orientations of both levels: 0 where the line is forbidden.
///
/// `S = (sum_Omega c_Omega c'_Omega a_Omega)^2`, with `a^2 = ((j+1)^2 - Omega^2)/(j+1)` between J = j and j + 1 and
/// `a^2 = Omega^2 (2J+1)/(J(J+1))` for equal J. The sum over all partners of one level is 2J + 1. Selection: J changes by
/// one and e, f stay, or J stays and they change. The same formula gives Hund's case (b) of a 2-Sigma state, which is
/// the mixture of Omega = +-1/2 that e and f are. Source: Zare, Angular Momentum (1988), section 6.3.
pub(super) fn honl_london(one: &Term, other: &Term) -> f64 {
    let difference = one.twice_j.abs_diff(other.twice_j);
    let changes = one.is_e != other.is_e;
    if !(difference == 2 && !changes || difference == 0 && changes) {
        return 0.0;
    }
    let twice_j = one.twice_j.min(other.twice_j);
    let j = f64::from(twice_j) / 2.0;
    let lowest_omega = f64::from(twice_j % 2) / 2.0;
    let amplitude = |omega: f64| {
        if difference == 2 {
            (((j + 1.0).powi(2) - omega * omega) / (j + 1.0))
                .max(0.0)
                .sqrt()
        } else if twice_j == 0 {
            0.0
        } else {
            omega * ((2.0 * j + 1.0) / (j * (j + 1.0))).sqrt()
        }
    };
    let sum = one.mix[0] * other.mix[0] * amplitude(lowest_omega)
        + one.mix[1] * other.mix[1] * amplitude(1.5);
    sum * sum
}

#[cfg(test)]
mod tests {
    use super::super::molecule::State;
    use super::super::term::{Constants, terms};
    use super::*;

    #[test]
    fn the_strengths_from_one_level_add_up_to_its_weight() {
        for a in [-139.0, 0.0, 28.0, 1e4] {
            let c = Constants {
                origin: 0.0,
                b: 18.5,
                d: 2e-3,
                h: 0.0,
                a,
                a_d: 0.0,
                gamma: -0.1,
                p: 0.2,
                q: -0.04,
            };
            for state in [State::Sigma1, State::Sigma2, State::Pi2] {
                let all: Vec<Term> = state
                    .twice_j(9)
                    .flat_map(|j| terms(state, &c, 0, j))
                    .collect();
                for level in all.iter().filter(|level| level.twice_j < 15) {
                    let sum: f64 = all.iter().map(|other| honl_london(level, other)).sum();
                    let weight = f64::from(level.twice_j + 1);
                    // Lambda doubling mixes e and f levels a little differently.
                    assert!(
                        (sum / weight - 1.0).abs() < 1e-4,
                        "{state:?} {level:?} {sum}"
                    );
                }
            }
        }
    }
}
