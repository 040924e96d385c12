//! Benchmark F: 512 channels, 12 lines of two invented species, 6 free values, 400 noisy spectra of one truth.

use std::f64::consts::PI;
use std::fmt::Write as _;
use std::path::Path;
use std::sync::Arc;

use backlit_forward::oracle;
use backlit_forward::transition::{Transition, doppler_width_squared};
use backlit_forward::{Background, Channels, Cloud, Engine, Layout, LineSpread, Sightline};
use backlit_inverse::Problem;
use backlit_inverse::setup::Setup;
use backlit_inverse::solver::Limits;
use backlit_species::{Catalogue, Species, user};
use backlit_units::constants::{ATOMIC_MASS_KG, SPEED_OF_LIGHT_M_PER_S};
use backlit_units::{IntensityUnit, Medium, SpectralAxis};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal, Uniform};

pub const CHANNELS: usize = 512;
/// Background temperature, gas temperature, velocity, turbulence squared, two columns.
pub const FREE: usize = 6;
pub const SPECTRA: usize = 400;

const FIRST_CENTRE_M: f64 = 497.956e-9;
const CHANNEL_M: f64 = 0.008e-9;
const FWHM_M: f64 = 0.02e-9;
/// Depth of the deepest line in units of the noise.
pub const DEEPEST_IN_SIGMAS: f64 = 35.0;
const SEED: u64 = 20;

const BACKGROUND_K: f64 = 5800.0;
const TEMPERATURE_K: f64 = 3000.0;
const VELOCITY_M_PER_S: f64 = 12_300.0;
/// With the thermal motion b = 5.04 km/s, which is 0.42 FWHM.
const TURBULENCE_M_PER_S: f64 = 4_930.0;
const COLUMN_PER_M2: f64 = 1e18;
/// FWHM of the line-spread function as a velocity.
pub const FWHM_M_PER_S: f64 = FWHM_M / 500e-9 * SPEED_OF_LIGHT_M_PER_S;

/// How far from the truth a start may be: factors as their logarithm, the velocity in FWHM.
const OFF_BACKGROUND: f64 = 0.03;
const OFF_TEMPERATURE: f64 = 0.3;
const OFF_VELOCITY_FWHM: f64 = 0.8;
const OFF_TURBULENCE: f64 = 0.3;
const OFF_COLUMN: f64 = 0.7;

/// Total natural broadening: damping wings of a = 1.6e-4.
const GAMMA_PER_S: f64 = 2e7;
const G_UPPER: f64 = 5.0;

/// Name, mass in u, and the lines: vacuum wavelength in nm, lower level in cm^-1, optical depth at the truth.
type Invented = (&'static str, f64, [(f64, f64, f64); 6]);
const SPECIES: [Invented; 2] = [
    (
        "Xa I",
        56.0,
        [
            (498.210, 0.0, 3.5),
            (498.905, 4500.0, 0.9),
            (499.590, 400.0, 1.8),
            (500.280, 7000.0, 0.12),
            (500.870, 2500.0, 0.4),
            (501.480, 8000.0, 0.05),
        ],
    ),
    (
        "Xb I",
        40.0,
        [
            (498.560, 7000.0, 0.08),
            (499.210, 800.0, 2.4),
            // A blend with the line of the other species.
            (499.622, 2500.0, 0.6),
            (500.590, 0.0, 1.2),
            (501.170, 4500.0, 0.25),
            (501.790, 8000.0, 0.03),
        ],
    ),
];
const LEVELS: [(f64, f64); 9] = [
    (9.0, 0.0),
    (7.0, 400.0),
    (5.0, 800.0),
    (9.0, 2500.0),
    (11.0, 4500.0),
    (7.0, 7000.0),
    (5.0, 8000.0),
    (15.0, 20_000.0),
    (21.0, 26_000.0),
];

/// The benchmark, ready to run.
pub struct Case {
    pub problem: Problem,
    /// The forward model of `problem` once more, for what the problem does not show.
    pub engine: Engine,
    pub limits: Limits,
    /// W m⁻² sr⁻¹ m⁻¹; the unit of the problem's data too.
    pub spectra: Vec<Vec<f64>>,
    pub sigma: f64,
    pub truth: Vec<f64>,
    /// Parameters of the forward model, one set a spectrum.
    pub starts: Vec<Vec<f64>>,
}

impl Case {
    /// Makes the case and writes what another programme needs to do the same into `folder`.
    pub fn new(folder: &Path) -> Case {
        write_tables(folder);
        let text = setup_text();
        std::fs::write(folder.join("setup.toml"), &text).unwrap();
        let setup = Setup::read(folder.join("setup.toml")).unwrap();
        let centres: Vec<f64> = (0..CHANNELS)
            .map(|k| FIRST_CENTRE_M + k as f64 * CHANNEL_M)
            .collect();
        let axis = SpectralAxis::from_centres_m(&centres, Medium::Vacuum).unwrap();
        let unit: IntensityUnit = "W m-2 sr-1 m-1".parse().unwrap();
        let problem = Problem::new(&setup, &axis, &unit, Catalogue::builtin(), None).unwrap();
        let sightline = Sightline {
            channels: Channels::new(axis.edges_vac_m(), &[true; CHANNELS]),
            line_spread: LineSpread::Fwhm { fwhm_m: FWHM_M },
            background: Background::Blackbody { shape_terms: 0 },
            clouds: vec![Cloud {
                species: SPECIES
                    .iter()
                    .enumerate()
                    .map(|(s, _)| Arc::new(species(folder, s)))
                    .collect(),
                own_doppler_temperature: false,
            }],
            tolerance: setup.tolerance,
        };
        let truth = truth(&sightline.layout());
        let clean = oracle::observed(&sightline, &truth);
        let mut without = truth.clone();
        for s in 0..2 {
            without[sightline.layout().clouds[0].column(s)] = -700.0;
        }
        let bare = oracle::observed(&sightline, &without);
        let deepest = clean
            .iter()
            .zip(&bare)
            .fold(0.0_f64, |most, (a, b)| most.max((a - b).abs()));
        let sigma = deepest / DEEPEST_IN_SIGMAS;
        let mut random = ChaCha8Rng::seed_from_u64(SEED);
        let spectra: Vec<Vec<f64>> = (0..SPECTRA)
            .map(|_| {
                clean
                    .iter()
                    .map(|value| {
                        let unit: f64 = StandardNormal.sample(&mut random);
                        value + sigma * unit
                    })
                    .collect()
            })
            .collect();
        let limits = limits(&sightline.layout());
        let starts: Vec<Vec<f64>> = (0..SPECTRA)
            .map(|_| start(&truth, &limits, &mut random))
            .collect();
        let (mut low, mut high) = (truth.clone(), truth.clone());
        for (i, &parameter) in limits.parameter.iter().enumerate() {
            low[parameter] = limits.low[i];
            high[parameter] = limits.high[i];
        }
        let case = Case {
            problem,
            engine: Engine::new(sightline, &low, &high),
            limits,
            spectra,
            sigma,
            truth,
            starts,
        };
        case.write(folder);
        case
    }

    /// The free values of a set of parameters, as the other programme has them: ln K, ln K, km/s, km/s,
    /// ln m⁻², ln m⁻².
    pub fn free_of(&self, parameters: &[f64]) -> [f64; FREE] {
        let mut values = [0.0; FREE];
        for (value, &parameter) in values.iter_mut().zip(&self.limits.parameter) {
            *value = parameters[parameter];
        }
        values[2] *= 1e-3;
        values[3] = values[3].sqrt() * 1e-3;
        values
    }

    fn write(&self, folder: &Path) {
        let bytes = |values: &mut dyn Iterator<Item = f64>| -> Vec<u8> {
            values.flat_map(f64::to_le_bytes).collect()
        };
        let spectra = bytes(&mut self.spectra.iter().flatten().copied());
        std::fs::write(folder.join("spectra.f64"), spectra).unwrap();
        let starts = bytes(&mut self.starts.iter().flat_map(|start| self.free_of(start)));
        std::fs::write(folder.join("starts.f64"), starts).unwrap();
        let masses: Vec<String> = SPECIES
            .iter()
            .map(|(_, mass_u, _)| format!("{:e}", mass_u * ATOMIC_MASS_KG))
            .collect();
        let case = format!(
            "{{\n  \"channels\": {CHANNELS},\n  \"first_centre_m\": {FIRST_CENTRE_M:e},\n  \"channel_m\": {CHANNEL_M:e},\n  \
             \"fwhm_m\": {FWHM_M:e},\n  \"sigma\": {:e},\n  \"masses_kg\": [{}]\n}}\n",
            self.sigma,
            masses.join(", ")
        );
        std::fs::write(folder.join("case.json"), case).unwrap();
    }
}

fn setup_text() -> String {
    let mut text = format!(
        "[spectrum]\nmedium = \"vacuum\"\n\n[instrument]\nfwhm_nm = {}\n\n[background]\ntemperature_K = {{ find = [3000, 9000] }}\n\n\
         [[cloud]]\ntemperature_K = {{ find = [500, 8000] }}\nvelocity_km_s = {{ find = [-200, 200] }}\n\
         turbulence_km_s = {{ find = [0.1, 20] }}\n[cloud.column_cm2]\n",
        FWHM_M * 1e9
    );
    for (name, ..) in SPECIES {
        let _ = writeln!(text, "\"{name}\" = {{ find = [1e11, 1e17] }}");
    }
    for (s, (name, mass_u, _)) in SPECIES.iter().enumerate() {
        let _ = writeln!(
            text,
            "\n[[species]]\nname = \"{name}\"\nmass_u = {mass_u}\nlines = \"lines{s}.csv\"\nlevels = \"levels.csv\""
        );
    }
    text
}

/// Line lists in which each line has the wanted optical depth at the truth.
fn write_tables(folder: &Path) {
    let mut levels = String::from("g,energy_per_cm\n");
    for (g, energy_per_cm) in LEVELS {
        let _ = writeln!(levels, "{g},{energy_per_cm}");
    }
    std::fs::write(folder.join("levels.csv"), levels).unwrap();
    for (s, (_, _, lines)) in SPECIES.iter().enumerate() {
        // Once with A = 1 per second to see what depth that gives, then with the A that it takes.
        write_lines(folder, s, &[1.0; 6]);
        let gas = species(folder, s);
        let partition = gas.partition_function(TEMPERATURE_K);
        let b_squared =
            doppler_width_squared(TEMPERATURE_K, gas.mass_kg, TURBULENCE_M_PER_S.powi(2));
        let a_ki: Vec<f64> = gas
            .lines
            .iter()
            .zip(lines)
            .map(|(line, (_, _, depth))| {
                let transition = Transition::new(line, 0);
                let (cross_section, _) =
                    transition.integrated_cross_section(TEMPERATURE_K, partition.ln_q, 0.0);
                let doppler_hz =
                    transition.frequency_hz * b_squared.sqrt() / SPEED_OF_LIGHT_M_PER_S;
                depth * PI.sqrt() * doppler_hz / (COLUMN_PER_M2 * cross_section)
            })
            .collect();
        write_lines(folder, s, &a_ki);
    }
}

fn write_lines(folder: &Path, s: usize, a_ki_per_s: &[f64]) {
    let mut text =
        String::from("wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper,gamma_per_s\n");
    for ((wavelength_nm, e_lower, _), a_ki) in SPECIES[s].2.iter().zip(a_ki_per_s) {
        let g_lower = LEVELS.iter().find(|level| level.1 == *e_lower).unwrap().0;
        let _ = writeln!(
            text,
            "{wavelength_nm},{a_ki:e},{e_lower},{g_lower},{G_UPPER},{GAMMA_PER_S}"
        );
    }
    std::fs::write(folder.join(format!("lines{s}.csv")), text).unwrap();
}

fn species(folder: &Path, s: usize) -> Species {
    let (name, mass_u, _) = SPECIES[s];
    let lines = folder.join(format!("lines{s}.csv"));
    user::species(name, mass_u, &lines, &folder.join("levels.csv")).unwrap()
}

fn truth(layout: &Layout) -> Vec<f64> {
    let mut truth = vec![0.0; layout.len()];
    truth[Layout::BACKGROUND_TEMPERATURE] = BACKGROUND_K.ln();
    truth[Layout::DILUTION] = 1.0;
    let cloud = &layout.clouds[0];
    truth[cloud.temperature()] = TEMPERATURE_K.ln();
    truth[cloud.velocity()] = VELOCITY_M_PER_S;
    truth[cloud.turbulence_squared()] = TURBULENCE_M_PER_S.powi(2);
    for s in 0..2 {
        truth[cloud.column(s)] = COLUMN_PER_M2.ln();
    }
    truth
}

/// The bounds of the setup once more, as coordinates.
fn limits(layout: &Layout) -> Limits {
    let cloud = &layout.clouds[0];
    let column = (1e15_f64.ln(), 1e21_f64.ln(), 2.5);
    let rows = [
        (
            Layout::BACKGROUND_TEMPERATURE,
            (3000_f64.ln(), 9000_f64.ln(), 0.7),
        ),
        (cloud.temperature(), (500_f64.ln(), 8000_f64.ln(), 0.7)),
        (cloud.velocity(), (-2e5, 2e5, FWHM_M_PER_S)),
        (cloud.turbulence_squared(), (1e4, 4e8, 2e8)),
        (cloud.column(0), column),
        (cloud.column(1), column),
    ];
    Limits {
        parameter: rows.iter().map(|row| row.0).collect(),
        low: rows.iter().map(|row| row.1.0).collect(),
        high: rows.iter().map(|row| row.1.1).collect(),
        stride: rows.iter().map(|row| row.1.2).collect(),
    }
}

fn start(truth: &[f64], limits: &Limits, random: &mut ChaCha8Rng) -> Vec<f64> {
    let within = Uniform::new(-1.0, 1.0).unwrap();
    let mut off = || within.sample(random);
    let mut start = truth.to_vec();
    start[limits.parameter[0]] += OFF_BACKGROUND * off();
    start[limits.parameter[1]] += OFF_TEMPERATURE * off();
    start[limits.parameter[2]] += OFF_VELOCITY_FWHM * FWHM_M_PER_S * off();
    start[limits.parameter[3]] *= (2.0 * OFF_TURBULENCE * off()).exp();
    start[limits.parameter[4]] += OFF_COLUMN * off();
    start[limits.parameter[5]] += OFF_COLUMN * off();
    start
}
