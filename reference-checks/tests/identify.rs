//! Identification on invented mixtures: what is there is found, and what is called present is there.
//!
//! The mixtures are made here, by another road than the program's: each line's equivalent width by quadrature of a
//! Gaussian profile, spread by the instrument, with an error of the wavelength scale and a noise that the program
//! does not assume (heavy tails, neighbours correlated).

#![allow(clippy::unwrap_used, clippy::print_stderr)]

use backlit_inverse::identify::{Choices, Finding, Identification, Observed, Verdict, identify};
use backlit_reference_checks::chance::Chance;
use backlit_reference_checks::python;
use backlit_species::{Catalogue, Species};
use backlit_units::air;
use std::fs;
use std::path::Path;
use std::sync::Arc;

const C_M_S: f64 = 299_792_458.0;
/// h c / k in m K (CODATA 2022: exact).
const HC_OVER_K: f64 = 1.438_776_877e-2;
/// Boltzmann's constant (CODATA 2022: exact).
const K_J_K: f64 = 1.380_649e-23;

/// The species that mixtures are made of.
const FORTY: [&str; 40] = [
    "H I", "He I", "Li I", "C I", "N I", "O I", "Ne I", "Na I", "Mg I", "Mg II", "Al I", "Si I",
    "Si II", "S I", "Ar I", "Ar II", "K I", "Ca I", "Ca II", "Sc II", "Ti I", "Ti II", "V I",
    "Cr I", "Mn I", "Fe I", "Fe II", "Co I", "Ni I", "Cu I", "Zn I", "Kr I", "Rb I", "Sr I",
    "Y II", "Xe I", "Cs I", "Ba I", "Ba II", "Hg I",
];

/// One ingredient: the species, and how many lines of it stand 5 sigma above the noise.
struct Ingredient {
    name: String,
    five_sigma_lines: usize,
    /// Those of them that no other ingredient covers.
    clear_lines: usize,
}

struct Mixture {
    centres_m: Vec<f64>,
    intensity: Vec<f64>,
    uncertainty: Option<Vec<f64>>,
    ingredients: Vec<Ingredient>,
    bright: bool,
    resolving_power: f64,
}

fn planck(wavelength_m: f64, temperature_k: f64) -> f64 {
    // The constant in front does not matter: only ratios are used.
    (500e-9 / wavelength_m).powi(5) / (HC_OVER_K / (wavelength_m * temperature_k)).exp_m1()
}

/// Equivalent width over Doppler width, `∫ (1 - exp(-τ exp(-u²))) du`, by the trapezoidal rule.
fn width(depth: f64) -> f64 {
    const HALF: usize = 60;
    let step = 5.0 / HALF as f64;
    let at = |k: usize| -(-depth * (-(k as f64 * step).powi(2)).exp()).exp_m1();
    step * (at(0) + 2.0 * (1..=HALF).map(at).sum::<f64>())
}

/// Rest wavelength and equivalent width of each line, in m.
type Lines = Vec<(f64, f64)>;

/// Lines of a species as (rest wavelength, equivalent width), both in m, for a depth of the thickest.
fn lines(
    species: &Species,
    range_m: (f64, f64),
    temperature_k: f64,
    b_m_s: f64,
    depth: f64,
) -> Lines {
    let inside = species.lines_between(range_m.0, range_m.1);
    let strength = |line: &backlit_species::Line| {
        let photon = HC_OVER_K / (line.wavelength_vac_m * temperature_k);
        line.g_upper
            * line.a_ki_per_s
            * (line.wavelength_vac_m * 2e6).powi(3)
            * (-line.e_lower_j / (K_J_K * temperature_k)).exp()
            * -(-photon).exp_m1()
    };
    let thickest = inside.iter().map(&strength).fold(0.0, f64::max);
    inside
        .iter()
        .map(|line| (line, depth * strength(line) / thickest))
        .filter(|(_, depth)| *depth > 1e-4)
        .map(|(line, depth)| {
            let w = line.wavelength_vac_m;
            (w, w * b_m_s / C_M_S * width(depth))
        })
        .collect()
}

fn mixture(seed: u64) -> Mixture {
    let mut chance = Chance::new(seed);
    let catalogue = Catalogue::builtin();
    let resolving_power = chance.between_in_log(1000.0, 20_000.0);
    let bright = chance.unit() < 0.5;
    const CHANNELS: usize = 3000;
    let per_fwhm = chance.between(2.2, 3.5);
    let step = 1.0 / (resolving_power * per_fwhm);
    let start_m = chance.between(300e-9, 600e-9);
    let centres_m: Vec<f64> = (0..CHANNELS)
        .map(|k| start_m * (step * k as f64).exp())
        .collect();
    let range_m = (centres_m[0], centres_m[CHANNELS - 1]);
    let (background_k, gas_k) = if bright {
        (4000.0, chance.between(5000.0, 10_000.0))
    } else {
        (5800.0, chance.between(1500.0, 4500.0))
    };
    let velocity_m_s = chance.between(-4e5, 4e5);
    let stretch = ((1.0 + velocity_m_s / C_M_S) / (1.0 - velocity_m_s / C_M_S)).sqrt();
    let phase = chance.between(0.0, std::f64::consts::TAU);
    let turns = chance.between(0.5, 2.0);
    let scale_error_m = |w: f64| {
        0.03e-9
            * (phase + std::f64::consts::TAU * turns * (w - range_m.0) / (range_m.1 - range_m.0))
                .sin()
    };
    let smooth: Vec<f64> = centres_m.iter().map(|w| planck(*w, background_k)).collect();
    const SIGNAL_TO_NOISE: f64 = 30.0;
    let sigma: Vec<f64> = smooth.iter().map(|s| s / SIGNAL_TO_NOISE).collect();
    // A filter of the line's shape averages over this many channels.
    let averaged = (per_fwhm / 2.354_82 * std::f64::consts::PI.sqrt()).sqrt();
    let fwhm_of = |w: f64| w / resolving_power;
    let height = |w: f64, width_m: f64| {
        // Peak of an unresolved line, in sigma of the filtered data.
        let contrast = planck(w, gas_k) / planck(w, background_k) - 1.0;
        0.9394 * width_m / fwhm_of(w) * contrast * SIGNAL_TO_NOISE * averaged
    };
    let count = 1 + (chance.unit() * 6.0) as usize;
    let mut chosen: Vec<(Arc<Species>, Lines)> = Vec::new();
    let mut tries = 0;
    while chosen.len() < count && tries < 200 {
        tries += 1;
        let name = FORTY[(chance.unit() * FORTY.len() as f64) as usize];
        if chosen.iter().any(|(species, _)| species.name == name) {
            continue;
        }
        let species = catalogue
            .get(name)
            .unwrap_or_else(|error| panic!("{error}"));
        let b_m_s = chance.between(3e3, 15e3);
        let wanted = chance.between_in_log(6.0, 60.0);
        // Deepen until the strongest line is as high as wanted or the curve of growth is flat.
        let mut depth = 0.01;
        let mut own = Vec::new();
        while depth < 1e4 {
            own = lines(&species, range_m, gas_k, b_m_s, depth);
            if own
                .iter()
                .any(|(w, width)| height(*w, *width).abs() >= wanted)
            {
                break;
            }
            depth *= 1.6;
        }
        if own.iter().any(|(w, width)| height(*w, *width).abs() >= 5.0) {
            chosen.push((species, own));
        }
    }
    // What each species shows, as distinct peaks: (rest wavelength, height).
    let peaks: Vec<Vec<(f64, f64)>> = chosen
        .iter()
        .map(|(_, own)| {
            let mut groups: Vec<(f64, f64)> = Vec::new();
            for &(w, width_m) in own {
                let own_height = height(w, width_m).abs();
                match groups.last_mut() {
                    Some(last) if w - last.0 < fwhm_of(w) => last.1 += own_height,
                    _ => groups.push((w, own_height)),
                }
            }
            groups
        })
        .collect();
    let ingredients = chosen
        .iter()
        .enumerate()
        .map(|(index, (species, _))| {
            let strong: Vec<&(f64, f64)> = peaks[index].iter().filter(|p| p.1 >= 5.0).collect();
            let covered = |at: f64, height: f64| {
                peaks.iter().enumerate().any(|(other, list)| {
                    other != index
                        && list
                            .iter()
                            .any(|p| (p.0 - at).abs() < 1.5 * fwhm_of(at) && p.1 > 0.3 * height)
                })
            };
            Ingredient {
                name: species.name.clone(),
                five_sigma_lines: strong.len(),
                clear_lines: strong.iter().filter(|p| !covered(p.0, p.1)).count(),
            }
        })
        .collect();
    let mut intensity = smooth.clone();
    for (_, own) in &chosen {
        for &(rest_m, width_m) in own {
            let at_m = rest_m * stretch;
            let at_m = at_m + scale_error_m(at_m);
            let sigma_m = fwhm_of(at_m) / 2.354_82;
            let contrast = planck(rest_m, gas_k) / planck(rest_m, background_k) - 1.0;
            let from = centres_m.partition_point(|c| *c < at_m - 5.0 * sigma_m);
            let to = centres_m.partition_point(|c| *c < at_m + 5.0 * sigma_m);
            for k in from..to {
                let u = (centres_m[k] - at_m) / sigma_m;
                intensity[k] += smooth[k] * contrast * width_m * (-0.5 * u * u).exp()
                    / (sigma_m * std::f64::consts::TAU.sqrt());
            }
        }
    }
    // Absorption cannot take more light than the gas leaves.
    if !bright {
        for ((value, smooth), w) in intensity.iter_mut().zip(&smooth).zip(&centres_m) {
            *value = value.max(smooth * planck(*w, gas_k) / planck(*w, background_k));
        }
    }
    // Student's t with 5 degrees of freedom (variance 5/3), a fifth of each neighbour mixed in.
    let mut before = 0.0;
    for (value, sigma) in intensity.iter_mut().zip(&sigma) {
        let square = (0..5).map(|_| chance.normal().powi(2)).sum::<f64>() / 5.0;
        let draw = chance.normal() / square.sqrt() / (5.0_f64 / 3.0).sqrt();
        *value += sigma * (0.98 * draw + 0.2 * before);
        before = draw;
    }
    let uncertainty = (chance.unit() < 0.5).then_some(sigma);
    Mixture {
        centres_m,
        intensity,
        uncertainty,
        ingredients,
        bright,
        resolving_power,
    }
}

struct Tally {
    wanted: usize,
    found: usize,
    clear_wanted: usize,
    clear_found: usize,
    called: usize,
    wrong: usize,
    printed_wrong: f64,
}

fn campaign(mixtures: u64, first_seed: u64) -> Tally {
    let candidates: Vec<Arc<Species>> = Catalogue::builtin().iter().collect();
    let mut tally = Tally {
        wanted: 0,
        found: 0,
        clear_wanted: 0,
        clear_found: 0,
        called: 0,
        wrong: 0,
        printed_wrong: 0.0,
    };
    let tell = std::env::var_os("BACKLIT_TELL").is_some();
    for seed in first_seed..first_seed + mixtures {
        let mixture = mixture(seed);
        let mask = vec![false; mixture.centres_m.len()];
        let answer = identify(
            &Observed {
                centres_vac_m: &mixture.centres_m,
                intensity: &mixture.intensity,
                uncertainty: mixture.uncertainty.as_deref(),
                mask: &mask,
            },
            &candidates,
            &Choices::default(),
        )
        .unwrap();
        let present: Vec<&str> = answer
            .species
            .iter()
            .filter(|f| f.verdict == Verdict::Present)
            .map(|f| f.name.as_str())
            .collect();
        let (mut missed, mut wrong) = (Vec::new(), Vec::new());
        for ingredient in &mixture.ingredients {
            let found = present.contains(&ingredient.name.as_str());
            if ingredient.five_sigma_lines >= 3 {
                tally.wanted += 1;
                tally.found += usize::from(found);
                if !found {
                    missed.push(format!(
                        "{} ({} lines, {} clear)",
                        ingredient.name, ingredient.five_sigma_lines, ingredient.clear_lines
                    ));
                }
            }
            if ingredient.clear_lines >= 3 {
                tally.clear_wanted += 1;
                tally.clear_found += usize::from(found);
            }
        }
        tally.called += present.len();
        for name in &present {
            if mixture.ingredients.iter().all(|i| i.name != *name) {
                tally.wrong += 1;
                wrong.push((*name).to_owned());
            }
        }
        if answer.false_discovery_rate.is_finite() {
            tally.printed_wrong += answer.false_discovery_rate * present.len() as f64;
        }
        if tell && !(missed.is_empty() && wrong.is_empty()) {
            let names: Vec<&str> = mixture
                .ingredients
                .iter()
                .map(|i| i.name.as_str())
                .collect();
            eprintln!(
                "{seed}: R {:.0} {} {names:?} missed {missed:?} wrong {wrong:?}",
                mixture.resolving_power,
                if mixture.bright { "bright" } else { "dark" }
            );
        }
    }
    eprintln!(
        "{mixtures} mixtures: found {}/{} of three 5-sigma lines, {}/{} of three clear ones; {} called present, {} wrong, {:.1} printed",
        tally.found,
        tally.wanted,
        tally.clear_found,
        tally.clear_wanted,
        tally.called,
        tally.wrong,
        tally.printed_wrong
    );
    tally
}

/// Share of the species with three 5-sigma lines that must be found, and share of wrong ones among those called.
const LEAST_RECALL: f64 = 0.95;
const MOST_WRONG: f64 = 0.05;

fn assert_kept(tally: &Tally) {
    let recall = tally.found as f64 / tally.wanted as f64;
    assert!(recall >= LEAST_RECALL, "recall {recall}");
    let wrong = tally.wrong as f64 / tally.called as f64;
    assert!(
        wrong <= MOST_WRONG,
        "{wrong} of those called present are not there"
    );
}

/// Sixty mixtures; too few for the printed rate, which the long campaign checks.
#[test]
fn mixtures_are_taken_apart() {
    assert_kept(&campaign(60, 1));
}

/// Three hundred mixtures: recall, false discoveries, and the printed rate of these.
#[test]
#[ignore = "long"]
fn three_hundred_mixtures_are_taken_apart_at_the_printed_rate() {
    let tally = campaign(300, 1);
    assert_kept(&tally);
    let ratio = tally.wrong as f64 / tally.printed_wrong;
    assert!(
        (0.5..2.0).contains(&ratio),
        "{ratio} times as many wrong as printed"
    );
}

/// Without any gas nothing is called present in 20 spectra (the wanted share of 5 % holds for spectra with nothing
/// in them too: one of 20 on average).
#[test]
fn light_without_gas_shows_nothing() {
    let candidates: Vec<Arc<Species>> = Catalogue::builtin().iter().collect();
    let mut called = 0;
    for seed in 0..20 {
        let mut chance = Chance::new(1000 + seed);
        let centres_m: Vec<f64> = (0..2000).map(|k| 500e-9 + 2e-11 * f64::from(k)).collect();
        let intensity: Vec<f64> = centres_m
            .iter()
            .map(|w| planck(*w, 5000.0) * (1.0 + chance.normal() / 30.0))
            .collect();
        let answer = ask(&centres_m, &intensity, &candidates, &Choices::default());
        called += present(&answer).len();
    }
    assert!(called <= 3, "{called} species in 20 spectra of nothing");
}

/// 4000 channels, the whole catalogue, decoys included. The goal is 3 s on one core; the limit here is twice that
/// because tests share the machine.
#[test]
fn four_thousand_channels_take_seconds() {
    let candidates: Vec<Arc<Species>> = Catalogue::builtin().iter().collect();
    let mut chance = Chance::new(77);
    let centres_m: Vec<f64> = (0..4000).map(|k| 350e-9 + 1e-10 * f64::from(k)).collect();
    let mut intensity: Vec<f64> = centres_m.iter().map(|_| 30.0 + chance.normal()).collect();
    // A comb of 300 lines, so that there is much to explain.
    for _ in 0..300 {
        let at = (chance.unit() * 3990.0) as usize + 5;
        let height = chance.between_in_log(5.0, 300.0);
        for (d, part) in [0.06, 0.5, 1.0, 0.5, 0.06].into_iter().enumerate() {
            intensity[(at + d).min(3999)] += height * part;
        }
    }
    let start = std::time::Instant::now();
    let answer = ask(&centres_m, &intensity, &candidates, &Choices::default());
    let seconds = start.elapsed().as_secs_f64();
    eprintln!(
        "4000 channels against {} species in {seconds:.2} s",
        answer.species.len()
    );
    assert!(seconds < 6.0, "{seconds} s");
}

/// ASTM G173-03, the extraterrestrial spectrum, as pvlib carries it.
#[test]
fn the_sun_shows_its_strong_lines_and_no_noble_gas() {
    let Some((centres_m, intensity)) = table("solar_table.py", "g173.csv") else {
        return;
    };
    let candidates: Vec<Arc<Species>> = Catalogue::builtin().iter().collect();
    let answer = ask(&centres_m, &intensity, &candidates, &Choices::default());
    let found = present(&answer);
    for name in ["H I", "Ca II", "Mg I", "Na I"] {
        assert!(found.contains(&name), "{name} is not among {found:?}");
    }
    for name in [
        "He I", "Ne I", "Ar I", "Kr I", "Xe I", "Ne II", "Ar II", "Kr II", "Xe II", "Hg I",
    ] {
        assert!(!found.contains(&name), "{name} in the Sun");
    }
}

/// A neon lamp before a compact spectrometer, as the package ramanchada2 carries it: scale errors of 0.1 nm.
#[test]
fn a_neon_lamp_shows_neon_and_nothing_else() {
    let Some((centres_m, intensity)) = table("neon_table.py", "neon.csv") else {
        return;
    };
    let candidates: Vec<Arc<Species>> = Catalogue::builtin().iter().collect();
    let choices = Choices {
        scale_error_m: 1e-10,
        ..Choices::default()
    };
    let answer = ask(&centres_m, &intensity, &candidates, &choices);
    assert_eq!(present(&answer), ["Ne I"]);
}

fn present(answer: &Identification) -> Vec<&str> {
    let named = |f: &Finding| f.verdict == Verdict::Present;
    let present = answer.species.iter().filter(|f| named(f));
    present.map(|f| f.name.as_str()).collect()
}

fn ask(
    centres_m: &[f64],
    intensity: &[f64],
    candidates: &[Arc<Species>],
    choices: &Choices,
) -> Identification {
    let observed = Observed {
        centres_vac_m: centres_m,
        intensity,
        uncertainty: None,
        mask: &vec![false; intensity.len()],
    };
    identify(&observed, candidates, choices).unwrap()
}

/// Vacuum wavelengths in m and intensities of a table in air that a script writes; `None` without its package.
fn table(script: &str, name: &str) -> Option<(Vec<f64>, Vec<f64>)> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("identify");
    fs::create_dir_all(&folder).unwrap();
    let path = folder.join(name);
    python::run(script, &[&path])?;
    let Ok(text) = fs::read_to_string(&path) else {
        eprintln!("skipped: {script} found no table");
        return None;
    };
    let rows = text.lines().filter_map(|row| {
        let (wavelength, value) = row.split_once(',')?;
        let nm: f64 = wavelength.parse().ok()?;
        let value: f64 = value.parse().ok()?;
        Some((air::air_to_vacuum_m(nm * 1e-9), value))
    });
    Some(rows.unzip())
}
