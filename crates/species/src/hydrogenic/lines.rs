//! Lines of hydrogen-like spectra: fine-structure components, and components merged where no gas can part them.

use std::sync::Arc;

use backlit_units::constants::{BOHR_RADIUS_M, FINE_STRUCTURE, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S};

use super::{Nucleus, energy, level_energy_j, radial_integral};
use crate::{Grade, Kind, Line};

/// Components closer than this are one line: a tenth of the narrowest thermal width that hydrogen shows (10 K: 0.4 km/s).
const MERGE_WITHIN_M_PER_S: f64 = 300.0;
/// Components with less than this part of the whole transition's g A join the nearest line.
const WEAK_PART: f64 = 3e-3;
/// Lines beyond this wavelength are left out, m.
const LONGEST_WAVELENGTH_M: f64 = 10e-6;

/// One fine-structure component (n, l, j) -> (n', l', j').
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Component {
    /// Vacuum wavelength, m.
    pub wavelength_vac_m: f64,
    /// Einstein A, s^-1.
    pub a_ki_per_s: f64,
    /// Energy of the lower level above 1s, J.
    pub e_lower_j: f64,
    /// (l, 2j) of the upper level.
    pub upper: (u32, u32),
    /// (l, 2j) of the lower level.
    pub lower: (u32, u32),
    /// Decay rates of upper and lower level together, s^-1.
    pub gamma_per_s: f64,
}

/// The electric-dipole components from shell `n_upper` to shell `n_lower`, sorted by wavelength.
///
/// `A = (4 alpha omega^3 / 3 c^2) (max(l, l') / (2l + 1)) R^2 (e_eff/e)^2` times the part of (j -> j'), omega that of the
/// component. Domain: n_upper > n_lower >= 1. Source: Bethe and Salpeter (1957), sections 60 and 64.
/// Accuracy: 1e-4 of A against the published tables (`reference-checks`, `hydrogen_a_values_are_the_published_ones`).
pub fn components(nucleus: Nucleus, n_upper: u32, n_lower: u32) -> Vec<Component> {
    let multiplets = all_multiplets(nucleus, n_upper);
    let wanted = multiplets
        .into_iter()
        .find(|multiplet| (multiplet.n_upper, multiplet.n_lower) == (n_upper, n_lower));
    wanted.map_or_else(Vec::new, |multiplet| multiplet.components)
}

/// All components between two shells.
struct Multiplet {
    n_upper: u32,
    n_lower: u32,
    components: Vec<Component>,
}

/// Place of the state (l, 2j) among those of its shell.
fn place((l, twice_j): (u32, u32)) -> usize {
    (l + twice_j / 2) as usize
}

/// Every multiplet up to shell `n_max`; together they hold every decay, so that each rate is computed once.
fn all_multiplets(nucleus: Nucleus, n_max: u32) -> Vec<Multiplet> {
    let energies_j: Vec<Vec<f64>> = (1..=n_max)
        .map(|n| {
            energy::states(n)
                .map(|(l, twice_j)| level_energy_j(nucleus, n, l, twice_j))
                .collect()
        })
        .collect();
    let shell = |n: u32| &energies_j[n as usize - 1];
    let mut decays: Vec<Vec<f64>> = energies_j
        .iter()
        .map(|shell| vec![0.0; shell.len()])
        .collect();
    let mut multiplets = Vec::new();
    for n_lower in 1..n_max {
        for n_upper in n_lower + 1..=n_max {
            let components = multiplet(
                nucleus,
                (n_upper, shell(n_upper)),
                (n_lower, shell(n_lower)),
            );
            for part in &components {
                decays[n_upper as usize - 1][place(part.upper)] += part.a_ki_per_s;
            }
            multiplets.push(Multiplet {
                n_upper,
                n_lower,
                components,
            });
        }
    }
    for Multiplet {
        n_upper,
        n_lower,
        components,
    } in &mut multiplets
    {
        for part in components {
            let decay = |n: u32, state| decays[n as usize - 1][place(state)];
            part.gamma_per_s = decay(*n_upper, part.upper) + decay(*n_lower, part.lower);
        }
    }
    multiplets
}

/// The components between two shells, sorted by wavelength, their broadening still open.
fn multiplet(
    nucleus: Nucleus,
    (n_upper, upper_j): (u32, &Vec<f64>),
    (n_lower, lower_j): (u32, &Vec<f64>),
) -> Vec<Component> {
    let (z, mass) = (f64::from(nucleus.charge()), nucleus.mass_in_electrons());
    // The nucleus swings too: in an ion the dipole about the centre of mass is a little larger than e r.
    let effective_charge = (mass + z) / (mass + 1.0);
    let unit_m = BOHR_RADIUS_M / (nucleus.reduced_mass() * z) * effective_charge;
    let mut found = Vec::new();
    for l in 0..n_upper {
        for l_lower in (l.saturating_sub(1)..=l + 1).filter(|other| *other != l && *other < n_lower)
        {
            let radius_m = unit_m * radial_integral(n_upper, l, n_lower, l_lower);
            let whole = 4.0 * FINE_STRUCTURE / (3.0 * SPEED_OF_LIGHT_M_PER_S.powi(2))
                * f64::from(l.max(l_lower))
                / f64::from(2 * l + 1)
                * radius_m.powi(2);
            for upper in energy::states(n_upper).filter(|state| state.0 == l) {
                for lower in energy::states(n_lower).filter(|state| state.0 == l_lower) {
                    let part = fine_structure_part(upper, lower);
                    if part == 0.0 {
                        continue;
                    }
                    let e_lower_j = lower_j[place(lower)];
                    let photon_j = upper_j[place(upper)] - e_lower_j;
                    let omega_per_s = 2.0 * std::f64::consts::PI * photon_j / PLANCK_J_S;
                    found.push(Component {
                        wavelength_vac_m: PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / photon_j,
                        a_ki_per_s: whole * omega_per_s.powi(3) * part,
                        e_lower_j,
                        upper,
                        lower,
                        gamma_per_s: 0.0,
                    });
                }
            }
        }
    }
    found.sort_by(|a, b| a.wavelength_vac_m.total_cmp(&b.wavelength_vac_m));
    found
}

/// The part of the decays (l, j) -> l' that ends in j': (2j' + 1)(2l + 1) times the square of the 6j symbol.
fn fine_structure_part((l, twice_j): (u32, u32), (l_lower, twice_j_lower): (u32, u32)) -> f64 {
    if l == l_lower + 1 {
        let stretched = twice_j == 2 * l + 1;
        let to_stretched = twice_j_lower == 2 * l_lower + 1;
        match (stretched, to_stretched) {
            (true, true) => 1.0,
            (true, false) => 0.0,
            (false, true) => 1.0 / f64::from(l * (2 * l - 1)),
            (false, false) => 1.0 - 1.0 / f64::from(l * (2 * l - 1)),
        }
    } else if l_lower == l + 1 {
        // Line strengths are symmetric in upper and lower level.
        let reverse = fine_structure_part((l_lower, twice_j_lower), (l, twice_j));
        reverse * f64::from((twice_j_lower + 1) * (2 * l + 1))
            / f64::from((twice_j + 1) * (2 * l_lower + 1))
    } else {
        0.0
    }
}

/// All lines up to shell `n_max`, components merged: the sum of g A is kept, nothing is counted twice.
pub(super) fn merged(nucleus: Nucleus, n_max: u32) -> Vec<Line> {
    let source: Arc<str> = "hydrogenic".into();
    let mut lines = Vec::new();
    for Multiplet { components, .. } in all_multiplets(nucleus, n_max) {
        let shortest_m = components
            .first()
            .map_or(f64::INFINITY, |part| part.wavelength_vac_m);
        if shortest_m <= LONGEST_WAVELENGTH_M {
            lines.extend(
                clusters(&components)
                    .iter()
                    .map(|cluster| line(cluster, &source)),
            );
        }
    }
    lines
}

fn strength(part: &Component) -> f64 {
    f64::from(part.upper.1 + 1) * part.a_ki_per_s
}

fn clusters(parts: &[Component]) -> Vec<Vec<Component>> {
    let whole: f64 = parts.iter().map(strength).sum();
    let (weak, strong): (Vec<&Component>, Vec<&Component>) = parts
        .iter()
        .partition(|part| strength(part) < WEAK_PART * whole);
    let mut found: Vec<Vec<Component>> = Vec::new();
    for part in strong {
        let widest = 1.0 + MERGE_WITHIN_M_PER_S / SPEED_OF_LIGHT_M_PER_S;
        match found.last_mut() {
            Some(cluster) if part.wavelength_vac_m < cluster[0].wavelength_vac_m * widest => {
                cluster.push(*part)
            }
            _ => found.push(vec![*part]),
        }
    }
    for part in weak {
        let distance =
            |cluster: &[Component]| (cluster[0].wavelength_vac_m - part.wavelength_vac_m).abs();
        if let Some(nearest) = found
            .iter_mut()
            .min_by(|a, b| distance(a).total_cmp(&distance(b)))
        {
            nearest.push(*part);
        }
    }
    found
}

fn line(cluster: &[Component], source: &Arc<str>) -> Line {
    let whole: f64 = cluster.iter().map(strength).sum();
    let mean = |value: &dyn Fn(&Component) -> f64| {
        cluster
            .iter()
            .map(|part| strength(part) * value(part))
            .sum::<f64>()
            / whole
    };
    let weight = |state: &dyn Fn(&Component) -> (u32, u32)| {
        let mut states: Vec<(u32, u32)> = cluster.iter().map(state).collect();
        states.sort_unstable();
        states.dedup();
        states
            .iter()
            .map(|(_, twice_j)| f64::from(twice_j + 1))
            .sum::<f64>()
    };
    let wavelength_vac_m = mean(&|part| part.wavelength_vac_m);
    let e_lower_j = mean(&|part| part.e_lower_j);
    let g_upper = weight(&|part| part.upper);
    Line {
        wavelength_vac_m,
        a_ki_per_s: whole / g_upper,
        e_lower_j,
        e_upper_j: e_lower_j + PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / wavelength_vac_m,
        g_lower: weight(&|part| part.lower),
        g_upper,
        gamma_per_s: mean(&|part| part.gamma_per_s),
        grade: Grade::Aaa,
        source: source.clone(),
        kind: Kind::ElectricDipole,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use backlit_units::constants::{
        ELECTRON_MASS_KG, ELEMENTARY_CHARGE_C, VACUUM_PERMITTIVITY_F_PER_M,
    };

    #[test]
    fn the_parts_of_a_decay_add_up_to_one() {
        for l in 0..11_u32 {
            for twice_j in [2 * l + 1, (2 * l).wrapping_sub(1)]
                .into_iter()
                .filter(|j| *j < 99)
            {
                for l_lower in [l.wrapping_sub(1), l + 1]
                    .into_iter()
                    .filter(|other| *other < 99)
                {
                    let ends = [2 * l_lower + 1, (2 * l_lower).wrapping_sub(1)]
                        .into_iter()
                        .filter(|j| *j < 99);
                    let sum: f64 = ends
                        .map(|j| fine_structure_part((l, twice_j), (l_lower, j)))
                        .sum();
                    assert!(
                        (sum - 1.0).abs() < 1e-14,
                        "l={l} 2j={twice_j} l'={l_lower}: {sum}"
                    );
                }
            }
        }
        // 3d3/2 -> 2p3/2 is a sixth (multiplet strengths 9:5:1 of a 2P-2D multiplet; White and Eliason 1933).
        assert!((fine_structure_part((2, 3), (1, 3)) - 1.0 / 6.0).abs() < 1e-15);
    }

    #[test]
    fn oscillator_strengths_of_lyman_lines_are_the_published_ones() {
        // f(1s -> np), NIST Atomic Spectra Database, from memory (Bethe and Salpeter 1957, table 13, have 0.4162, 0.0791,
        // 0.0290, 0.0139 for a nucleus of infinite mass).
        let per_rate = VACUUM_PERMITTIVITY_F_PER_M * ELECTRON_MASS_KG * SPEED_OF_LIGHT_M_PER_S
            / (2.0 * std::f64::consts::PI * ELEMENTARY_CHARGE_C.powi(2));
        for (n, published) in [
            (2, 0.416_41),
            (3, 0.079_142),
            (4, 0.029_006),
            (5, 0.013_945),
        ] {
            let f: f64 = components(Nucleus::Proton, n, 1)
                .iter()
                .map(|part| per_rate * part.wavelength_vac_m.powi(2) * strength(part) / 2.0)
                .sum();
            assert!((f / published - 1.0).abs() < 1e-4, "1s-{n}p: {f}");
        }
    }

    #[test]
    fn merging_keeps_the_strength_and_the_number_of_lines_small() {
        for nucleus in Nucleus::ALL {
            let lines = merged(nucleus, 12);

            assert!(lines.len() < 500, "{} lines", lines.len());
            for (n_upper, n_lower) in [(2, 1), (3, 2), (6, 2), (7, 4)] {
                let parts = components(nucleus, n_upper, n_lower);
                let (first, last) = (
                    parts[0].wavelength_vac_m,
                    parts[parts.len() - 1].wavelength_vac_m,
                );
                let inside = lines
                    .iter()
                    .filter(|l| (first..=last).contains(&l.wavelength_vac_m));
                let sum: f64 = inside.map(|l| l.g_upper * l.a_ki_per_s).sum();
                let whole: f64 = parts.iter().map(strength).sum();
                assert!(
                    (sum / whole - 1.0).abs() < 1e-12,
                    "{n_upper}-{n_lower}: {sum} of {whole}"
                );
            }
        }
    }
}
