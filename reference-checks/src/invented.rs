//! Scenes out of chance: a species with a few lines and one cloud of it, well enough seen to be measured.

use crate::case::{Line, Species};
use crate::chance::Chance;
use crate::scene::Scene;

/// The range of the spectra.
pub const FROM_NM: f64 = 490.0;
/// The range of the spectra.
pub const TO_NM: f64 = 510.0;
/// hc/k, CODATA 2022.
const HC_OVER_K_CM_K: f64 = 1.438_776_877;

/// A species with four to seven lines from different levels, all of them of use at a temperature.
fn species(chance: &mut Chance, temperature_k: f64) -> Species {
    let energies = [0.0, 2500.0, 7000.0, 12_000.0, 16_000.0, 700.0, 21_000.0];
    let count = 4 + (chance.unit() * 4.0) as usize;
    let lines: Vec<Line> = energies[..count]
        .iter()
        .enumerate()
        .map(|(k, &e_lower_per_cm)| {
            let slot = (TO_NM - FROM_NM - 6.0) / count as f64;
            let population = (-e_lower_per_cm * HC_OVER_K_CM_K / temperature_k).exp();
            Line {
                // Lines of very different strength, but none that would be invisible beside the others.
                a_ki_per_s: chance.between_in_log(2e6, 2e8) / population.max(1e-6),
                e_lower_per_cm,
                g_lower: 3.0,
                g_upper: 5.0,
                gamma_per_s: Some(chance.between_in_log(1e6, 5e8)),
                ..Line::at_nm(FROM_NM + 3.0 + slot * (k as f64 + chance.between(0.1, 0.9)))
            }
        })
        .collect();
    let levels = energies[..count]
        .iter()
        .map(|&energy| (3.0, energy))
        .chain([(9.0, 24_000.0)])
        .collect();
    Species {
        name: "Xx I",
        mass_u: chance.between(7.0, 140.0),
        lines,
        levels,
    }
}

/// A scene in absorption or in emission whose strongest line has a central depth from 0.3 to 50.
pub fn scene(chance: &mut Chance, emission: bool) -> (Scene, Species) {
    let background_k = chance.between(3500.0, 7000.0);
    let gas_k = background_k
        * if emission {
            chance.between(1.2, 1.8)
        } else {
            chance.between(0.35, 0.8)
        };
    let species = species(chance, gas_k);
    let turbulence_km_s = chance.between(1.0, 8.0);
    let thermal_km_s = (2.0 * 8.314_462_618 * gas_k / (species.mass_u * 1e-3)).sqrt() * 1e-3;
    let b_km_s = turbulence_km_s.hypot(thermal_km_s);
    let weight = |energy: f64| 3.0 * (-energy * HC_OVER_K_CM_K / gas_k).exp();
    let partition: f64 = species
        .levels
        .iter()
        .map(|&(g, e)| g * (-e * HC_OVER_K_CM_K / gas_k).exp())
        .sum();
    // The column with which the strongest line has a depth of 1.
    let unit_cm2 = species
        .lines
        .iter()
        .map(|line| {
            line.column_for_depth_cm2(1.0, b_km_s) * partition / weight(line.e_lower_per_cm)
        })
        .fold(f64::INFINITY, f64::min);
    let mut find = vec![
        "temperature",
        "velocity",
        "column",
        "background_temperature",
    ];
    let fwhm_nm = chance.between_in_log(0.08, 0.3);
    if chance.unit() < 0.3 {
        find.push("turbulence");
    }
    let scene = Scene {
        fwhm_nm,
        background_k,
        dilution: if chance.unit() < 0.5 {
            1.0
        } else {
            chance.between(0.7, 1.0)
        },
        gas_k,
        velocity_km_s: chance.between(5.0, 150.0) * if chance.unit() < 0.5 { -1.0 } else { 1.0 },
        turbulence_km_s,
        columns_cm2: vec![("Xx I", unit_cm2 * chance.between_in_log(0.3, 50.0))],
        find,
    };
    (scene, species)
}
