//! The fit finds the best minimum there is, without a start, and from a start that is not too far off.
//!
//! "The best there is" is the better of two: what the fit finds, and what it finds when it is also told the truth.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::Ask;
use backlit_reference_checks::case::channels;
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::draws::{Draws, long};
use backlit_reference_checks::invented::{FROM_NM, TO_NM, scene};
use std::path::Path;

const SCENES: usize = 80;
const SCENES_LONG: usize = 300;
const SPECTRA_A_SCENE: usize = 10;
/// Of all spectra, at least.
const WITHOUT_START: f64 = 0.99;
const FROM_START: f64 = 0.995;
/// A chi-square that is this little above the least is the same minimum.
const SAME: f64 = 0.01;
/// How far from the truth a start may be: the velocity in FWHM, all else in e-folds.
const OFF_FWHM: f64 = 0.8;
const OFF_BACKGROUND: f64 = 0.03;
const OFF_TEMPERATURE: f64 = 0.3;
const OFF_COLUMN: f64 = 0.7;

#[test]
fn the_global_optimum_is_found_without_a_start_and_from_a_near_one() {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("convergence");
    let wavelength_nm = channels(FROM_NM, TO_NM, 400);
    let mut chance = Chance::new(50);
    let (mut spectra, mut without, mut from, mut as_neighbour) =
        (0_usize, 0_usize, 0_usize, 0_usize);
    let mut missed = Vec::new();
    for number in 0..if long() { SCENES_LONG } else { SCENES } {
        let (scene, species) = scene(&mut chance, number % 2 == 1);
        let name = number.to_string();
        let species = [species];
        let (truth, question) = scene.write(&folder, &name, &species, &wavelength_nm);
        let bare = scene
            .without_gas()
            .write(&folder, &format!("{name}-bare"), &species, &wavelength_nm)
            .0;
        let draws = Draws::of_lines(&truth, &bare, &question, chance.between_in_log(10.0, 300.0));
        let problem = &draws.problem;
        let names: Vec<&str> = problem
            .quantities()
            .iter()
            .map(|q| q.name.as_str())
            .collect();
        let true_values: Vec<f64> = names.iter().map(|name| scene.true_value(name)).collect();
        let told = [problem.parameters_at(&true_values)];
        let mut room = problem.workspace();
        for _ in 0..SPECTRA_A_SCENE {
            let intensity = draws.spectrum(&mut chance);
            let off: Vec<f64> = names
                .iter()
                .zip(&true_values)
                .map(|(name, value)| {
                    let either = chance.between(-1.0, 1.0);
                    match *name {
                        "cloud1_velocity" => {
                            let fwhm_km_s = scene.fwhm_nm / 500.0 * 299_792.458;
                            value + either * OFF_FWHM * fwhm_km_s
                        }
                        "background_temperature" => value * (OFF_BACKGROUND * either).exp(),
                        name if name.contains("log10") => {
                            value + OFF_COLUMN * either / std::f64::consts::LN_10
                        }
                        _ => value * (OFF_TEMPERATURE * either).exp(),
                    }
                })
                .collect();
            draws.observe(&intensity, |data| {
                let alone = problem.fit(&mut room, data, None);
                let ask = Ask {
                    starts: &told,
                    ..Ask::default()
                };
                let best = problem.fit_with(&mut room, data, &ask);
                let started = [problem.parameters_at(&off)];
                let ask = Ask {
                    starts: &started,
                    ..Ask::default()
                };
                let near = problem.fit_with(&mut room, data, &ask);
                let mut neighbour = alone.clone();
                neighbour.parameters.clone_from(&started[0]);
                let warm = problem.fit(&mut room, data, Some(&neighbour));
                let least = best.chi_square.min(alone.chi_square);
                spectra += 1;
                without += usize::from(alone.chi_square <= least + SAME);
                as_neighbour += usize::from(warm.chi_square <= least + SAME);
                from += usize::from(near.chi_square <= least + SAME);
                if near.chi_square > least + SAME {
                    let above = near.chi_square - least;
                    missed.push(format!(
                        "scene {number}, from a start: {above:.3} above {least:.1}: {:?} not {:?}, started at {off:?}, {:?}",
                        near.values, best.values, near.stop
                    ));
                }
                if alone.chi_square > least + SAME {
                    missed.push(format!(
                        "scene {number}: {:.3} above {least:.1}: {:?} not {:?}, truth {true_values:?}",
                        alone.chi_square - least, alone.values, best.values
                    ));
                }
            });
        }
    }
    println!(
        "global optimum in {without} of {spectra} without a start, in {from} with a start within {OFF_FWHM} FWHM, in {as_neighbour} \
         where a neighbour's answer is that far off; missed: {missed:#?}"
    );
    assert!(without as f64 >= WITHOUT_START * spectra as f64);
    assert!(from as f64 >= FROM_START * spectra as f64);
}
