//! The fast model against the plain one, and its derivatives against differences.

use super::*;
use crate::oracle;
use crate::sightline::{Channels, Cloud, LineSpread};
use crate::voigt;
use backlit_species::{Grade, Kind, Level, Line, Species};
use backlit_units::constants::{
    ATOMIC_MASS_KG, BOLTZMANN_J_PER_K, PLANCK_J_S, SPEED_OF_LIGHT_M_PER_S,
};
use std::f64::consts::PI;
use std::sync::Arc;

/// An invented atom with lines of given wavelengths (nm), lower energies (in units of k × 1000 K) and damping.
fn atom(name: &str, lines: &[(f64, f64)], gamma_per_s: f64) -> Arc<Species> {
    let lines = lines
        .iter()
        .map(|&(wavelength_nm, lower)| {
            let wavelength_vac_m = wavelength_nm * 1e-9;
            let e_lower_j = lower * 1000.0 * BOLTZMANN_J_PER_K;
            Line {
                wavelength_vac_m,
                a_ki_per_s: 1e7,
                e_lower_j,
                e_upper_j: e_lower_j + PLANCK_J_S * SPEED_OF_LIGHT_M_PER_S / wavelength_vac_m,
                g_lower: 2.0,
                g_upper: 4.0,
                gamma_per_s,
                grade: Grade::default(),
                source: "invented".into(),
                kind: Kind::default(),
            }
        })
        .collect();
    let levels = [(2.0, 0.0), (4.0, 3.0), (6.0, 12.0)]
        .map(|(g, e)| Level {
            g,
            energy_j: e * 1000.0 * BOLTZMANN_J_PER_K,
        })
        .to_vec();
    Arc::new(Species::new(name, 23.0 * ATOMIC_MASS_KG, lines, levels))
}

/// Two clouds' worth of everything, to be cut down by the tests.
struct Scene {
    sightline: Sightline,
    parameters: Vec<f64>,
}

/// `tau` of the strongest line, `width` = b/FWHM, `channel` = channel/FWHM (FWHM 0: `channel` in nm).
fn scene(
    tau: f64,
    width: f64,
    damping: f64,
    fwhm_nm: f64,
    channel_nm: f64,
    lines: &[(f64, f64)],
) -> Scene {
    let centre_nm = 500.0;
    let b = width * if fwhm_nm > 0.0 { fwhm_nm } else { channel_nm } / centre_nm
        * SPEED_OF_LIGHT_M_PER_S;
    let frequency = SPEED_OF_LIGHT_M_PER_S / (centre_nm * 1e-9);
    let gamma = damping * 4.0 * PI * frequency * b / SPEED_OF_LIGHT_M_PER_S;
    let species = atom("Xx I", lines, gamma);
    let half_nm = (40.0 * channel_nm)
        .max(12.0 * fwhm_nm)
        .max(8.0 * width * fwhm_nm);
    let count = (2.0 * half_nm / channel_nm) as usize;
    let edges: Vec<f64> = (0..=count)
        .map(|k| (centre_nm - half_nm + channel_nm * (k as f64 + 0.3)) * 1e-9)
        .collect();
    // The width comes from the turbulence alone, so that it is what the test asks for.
    let gas_k = 2500.0_f64;
    let line_spread = if fwhm_nm > 0.0 {
        LineSpread::Fwhm {
            fwhm_m: fwhm_nm * 1e-9,
        }
    } else {
        LineSpread::None
    };
    let sightline = Sightline {
        channels: Channels::new(&edges, &vec![true; count]),
        line_spread,
        background: Background::Blackbody { shape_terms: 0 },
        clouds: vec![Cloud {
            species: vec![species.clone()],
            own_doppler_temperature: true,
        }],
        tolerance: 1e-5,
    };
    let layout = sightline.layout();
    let mut parameters = vec![0.0; layout.len()];
    parameters[Layout::SCALE] = 0.0;
    parameters[Layout::BACKGROUND_TEMPERATURE] = 5000.0_f64.ln();
    parameters[Layout::DILUTION] = 1.0;
    let place = layout.clouds[0];
    parameters[place.temperature()] = gas_k.ln();
    parameters[place.doppler_temperature()] = 1e-3_f64.ln();
    parameters[place.turbulence_squared()] = b * b;
    let strongest = species
        .lines
        .iter()
        .map(|line| {
            let q = species.partition_function(gas_k);
            let transition = Transition::new(line, 0);
            let cross = transition.integrated_cross_section(gas_k, q.ln_q, 0.0).0;
            cross / (PI.sqrt() * transition.frequency_hz * b / SPEED_OF_LIGHT_M_PER_S)
        })
        .fold(0.0, f64::max)
        * voigt::scalar::w(0.0, damping).0;
    parameters[place.column(0)] = (tau / strongest).ln();
    Scene {
        sightline,
        parameters,
    }
}

fn engine_of(scene: &Scene) -> Engine {
    Engine::new(
        scene.sightline.clone(),
        &scene.parameters,
        &scene.parameters,
    )
}

/// Largest difference of the two models over the strongest feature.
fn disagreement(scene: &Scene) -> f64 {
    let engine = engine_of(scene);
    let mut evaluation = engine.evaluation(&[]);
    engine.evaluate(&mut evaluation, &scene.parameters);
    let expected = oracle::observed(&scene.sightline, &scene.parameters);
    let mut bare = scene.parameters.clone();
    for place in &engine.layout.clouds {
        for s in 0..place.species() {
            bare[place.column(s)] = -100.0;
        }
    }
    let nothing = oracle::observed(&scene.sightline, &bare);
    let peak = expected
        .iter()
        .zip(&nothing)
        .map(|(a, b)| (a - b).abs())
        .fold(0.0, f64::max);
    let worst = expected
        .iter()
        .enumerate()
        .map(|(channel, e)| (e - evaluation.value(channel)).abs())
        .fold(0.0, f64::max);
    worst / peak
}

#[test]
fn the_engine_agrees_with_the_oracle() {
    // (FWHM, channel) in nm: a sampled instrument, one sharper than its channels, none at all.
    for (fwhm_nm, channel_nm) in [(0.1, 0.04), (0.002, 0.04), (0.0, 0.04)] {
        for width in [1e-3, 1e-2, 0.1, 0.42, 1.0, 10.0, 100.0] {
            for (tau, damping) in [
                (0.01, 1e-4),
                (1.0, 1e-3),
                (1.0, 0.3),
                (20.0, 1e-3),
                (100.0, 1e-3),
                (1e4, 1e-4),
                (1e4, 1e-2),
            ] {
                if width > 10.0 && (fwhm_nm == 0.1 || damping > 1e-3) {
                    continue;
                }
                let case = scene(tau, width, damping, fwhm_nm, channel_nm, &[(500.0, 0.0)]);
                let error = disagreement(&case);
                assert!(
                    error < 1e-5,
                    "fwhm {fwhm_nm} b/fwhm {width} tau {tau} a {damping}: {error:.2e}"
                );
            }
        }
    }
}

#[test]
fn blends_agree_with_the_oracle() {
    for width in [1e-2, 0.1, 0.42, 3.0] {
        for apart in [0.7, 3.0, 20.0] {
            for tau in [0.1, 5.0, 1e3] {
                let step = apart * width * 0.1;
                let lines = [
                    (500.0, 0.0),
                    (500.0 + step, 1.0),
                    (500.0 + 1.4 * step, 2.0),
                    (500.0 - step, 0.5),
                ];
                let case = scene(tau, width, 1e-2, 0.1, 0.04, &lines);
                let error = disagreement(&case);
                assert!(
                    error < 1e-5,
                    "b/fwhm {width} apart {apart} tau {tau}: {error:.2e}"
                );
            }
        }
    }
}

/// Two clouds of two species each before a bent, diluted background: every kind of parameter is there.
fn crowded_scene() -> Scene {
    let mut case = scene(
        3.0,
        0.3,
        1e-2,
        0.1,
        0.04,
        &[(500.0, 0.0), (500.3, 1.5), (499.5, 3.0)],
    );
    let first = case.sightline.clouds[0].species[0].clone();
    let second = atom("Yy II", &[(500.1, 0.0), (499.2, 0.7)], 3e9);
    case.sightline.clouds = vec![
        Cloud {
            species: vec![first.clone(), second.clone()],
            own_doppler_temperature: false,
        },
        Cloud {
            species: vec![second, first],
            own_doppler_temperature: true,
        },
    ];
    case.sightline.background = Background::Blackbody { shape_terms: 2 };
    let column = case.parameters[CloudLayoutOfOne::COLUMN];
    let layout = case.sightline.layout();
    let mut parameters = vec![0.0; layout.len()];
    parameters[Layout::SCALE] = 0.3;
    parameters[Layout::BACKGROUND_TEMPERATURE] = 4200.0_f64.ln();
    parameters[Layout::DILUTION] = 0.7;
    parameters[Layout::SHAPE] = 0.05;
    parameters[Layout::SHAPE + 1] = -0.02;
    for (k, place) in layout.clouds.iter().enumerate() {
        parameters[place.temperature()] = [2900.0_f64, 6100.0][k].ln();
        parameters[place.doppler_temperature()] = 5e5_f64.ln();
        parameters[place.velocity()] = [2.0e4, -1.5e4][k];
        parameters[place.turbulence_squared()] = 8e7;
        parameters[place.column(0)] = column;
        parameters[place.column(1)] = column - 0.5;
    }
    case.parameters = parameters;
    case
}

/// Where the one-cloud, one-species scene keeps its column.
struct CloudLayoutOfOne;
impl CloudLayoutOfOne {
    const COLUMN: usize = Layout::SHAPE + 4;
}

#[test]
fn several_clouds_agree_with_the_oracle() {
    let error = disagreement(&crowded_scene());
    assert!(error < 1e-5, "{error:.2e}");
}

#[test]
fn derivatives_agree_with_finite_differences() {
    let case = crowded_scene();
    let free: Vec<usize> = (0..case.parameters.len())
        .filter(|&p| p != case.sightline.layout().clouds[0].doppler_temperature())
        .collect();
    let (mut low, mut high) = (case.parameters.clone(), case.parameters.clone());
    for &p in &free {
        let room = 0.01 * case.parameters[p].abs().max(1.0);
        low[p] -= room;
        high[p] += room;
    }
    let engine = Engine::new(case.sightline.clone(), &low, &high);
    let mut at = engine.evaluation(&free);
    let mut around = engine.evaluation(&[]);
    engine.evaluate(&mut at, &case.parameters);
    let channels = case.sightline.channels.len();
    for (column, &p) in free.iter().enumerate() {
        let step = 1e-5 * case.parameters[p].abs().max(0.1);
        let mut sides = Vec::new();
        for sign in [1.0, -1.0] {
            let mut moved = case.parameters.clone();
            moved[p] += sign * step;
            engine.evaluate(&mut around, &moved);
            sides.push((0..channels).map(|c| around.value(c)).collect::<Vec<_>>());
        }
        let largest = (0..channels)
            .map(|c| at.slopes(c)[column].abs())
            .fold(0.0, f64::max);
        assert!(largest > 0.0, "parameter {p} has no effect");
        for (channel, (after, before)) in sides[0].iter().zip(&sides[1]).enumerate() {
            let finite = (after - before) / (2.0 * step);
            let slope = at.slopes(channel)[column];
            assert!(
                (finite - slope).abs() < 2e-5 * largest,
                "parameter {p} channel {channel}: {slope:e}, by differences {finite:e}"
            );
        }
    }
}

#[test]
fn equal_temperatures_give_no_lines_and_thick_gas_gives_its_own_light() {
    let mut case = scene(50.0, 0.4, 1e-3, 0.1, 0.04, &[(500.0, 0.0)]);
    let place = case.sightline.layout().clouds[0];
    case.parameters[Layout::BACKGROUND_TEMPERATURE] = case.parameters[place.temperature()];
    let engine = engine_of(&case);
    let mut evaluation = engine.evaluation(&[]);
    engine.evaluate(&mut evaluation, &case.parameters);
    for (channel, (low, high)) in case.sightline.channels.bounds_vac_m().enumerate() {
        let expected = crate::planck::radiance(0.5 * (low + high), 2500.0);
        // The mean over channel and spread differs from the value in the middle by the curvature.
        assert!((evaluation.value(channel) / expected - 1.0).abs() < 1e-6);
    }
    let mut bare = case.parameters.clone();
    bare[place.column(0)] = -50.0;
    let mut without = engine.evaluation(&[]);
    engine.evaluate(&mut without, &bare);
    for channel in 0..case.sightline.channels.len() {
        assert!((evaluation.value(channel) / without.value(channel) - 1.0).abs() < 1e-12);
    }
}
