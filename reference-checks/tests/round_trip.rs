//! Noise-free round trip: what a setup predicts, the fit takes apart again, without a start from the user.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use backlit_inverse::Observation;
use backlit_reference_checks::case::channels;
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::invented::{FROM_NM, TO_NM, scene};
use std::path::Path;

const SETUPS: usize = 200;
/// Relative; logarithms of columns count as the columns themselves.
const ALLOWED: f64 = 1e-6;

#[test]
fn every_value_comes_back_without_a_start() {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("round-trip");
    let wavelength_nm = channels(FROM_NM, TO_NM, 400);
    let mut chance = Chance::new(20);
    let mut worst: f64 = 0.0;
    let mut failed = Vec::new();
    for number in 0..SETUPS {
        let (scene, species) = scene(&mut chance, number % 2 == 1);
        let (truth, question) =
            scene.write(&folder, &number.to_string(), &[species], &wavelength_nm);
        let intensity = truth.predict();
        let uncertainty: Vec<f64> = intensity.iter().map(|value| value * 1e-3).collect();
        let problem = question.problem();
        let fit = problem.fit(
            &mut problem.workspace(),
            &Observation {
                intensity: &intensity,
                uncertainty: Some(&uncertainty),
                mask: &vec![false; intensity.len()],
            },
            None,
        );
        let mut largest: f64 = 0.0;
        let mut text = String::new();
        for (quantity, &value) in problem.quantities().iter().zip(&fit.values) {
            let true_value = scene.true_value(&quantity.name);
            let error = if quantity.name.contains("log10") {
                10.0_f64.powf(value - true_value) - 1.0
            } else {
                value / true_value - 1.0
            };
            text += &format!(" {} {true_value:.6} -> {value:.6};", quantity.name);
            largest = if error.is_nan() {
                f64::INFINITY
            } else {
                largest.max(error.abs())
            };
        }
        worst = worst.max(largest);
        if largest > ALLOWED {
            let flags = fit.flags.names().join(" ");
            failed.push(format!(
                "setup {number}: {largest:.1e}, flags [{flags}], {:?};{text}",
                fit.stop
            ));
        }
    }
    println!("{SETUPS} round trips, worst relative error {worst:.1e}");
    assert!(
        failed.is_empty(),
        "{} of {SETUPS} do not come back:\n{}",
        failed.len(),
        failed.join("\n")
    );
}
