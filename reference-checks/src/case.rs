//! Invented gas: a species with a few lines, and a setup around it, written as the files a user would write.

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};

/// The unit of every case.
pub const UNIT: &str = "W m-2 sr-1 nm-1";

/// A line of an invented species, in the units of the user's line lists.
#[derive(Debug, Clone, Copy)]
pub struct Line {
    /// Vacuum wavelength.
    pub wavelength_vac_nm: f64,
    /// Einstein A.
    pub a_ki_per_s: f64,
    /// Energy of the lower level.
    pub e_lower_per_cm: f64,
    /// Statistical weight of the lower level.
    pub g_lower: f64,
    /// Statistical weight of the upper level.
    pub g_upper: f64,
    /// Natural broadening of both levels, FWHM in angular frequency; `None` leaves it to the default.
    pub gamma_per_s: Option<f64>,
}

impl Line {
    /// A line of moderate strength from the ground level: A = 1e8 /s, f = 0.75 at 500 nm, hardly any damping.
    pub fn at_nm(wavelength_vac_nm: f64) -> Self {
        Line {
            wavelength_vac_nm,
            a_ki_per_s: 1e8,
            e_lower_per_cm: 0.0,
            g_lower: 2.0,
            g_upper: 4.0,
            gamma_per_s: Some(1e5),
        }
    }

    /// Oscillator strength, `f = 1.4992e-16 (λ/Å)² (g_u/g_l) A s`: the factor of the NIST compilations
    /// (Wiese & Fuhr 2009, J. Phys. Chem. Ref. Data 38, 565, their conversion table), from memory.
    pub fn oscillator_strength(&self) -> f64 {
        1.4992e-16 * (10.0 * self.wavelength_vac_nm).powi(2) * self.g_upper / self.g_lower
            * self.a_ki_per_s
    }

    /// Column in cm⁻² of the lower level that gives a central optical depth in a purely Gaussian profile:
    /// `τ0 = 1.497e-15 (N/cm⁻²) f (λ/Å) / (b/km s⁻¹)`, Draine (2011), eq. 9.10.
    pub fn column_for_depth_cm2(&self, depth: f64, b_km_s: f64) -> f64 {
        depth * b_km_s / (1.497e-15 * self.oscillator_strength() * 10.0 * self.wavelength_vac_nm)
    }
}

/// An invented species: its lines and levels.
#[derive(Debug, Clone)]
pub struct Species {
    /// Such as "Xx I".
    pub name: &'static str,
    /// Mass in atomic mass units.
    pub mass_u: f64,
    /// The lines.
    pub lines: Vec<Line>,
    /// Weight and energy in cm⁻¹ of the levels of the partition function.
    pub levels: Vec<(f64, f64)>,
}

impl Species {
    /// A species whose partition function is 2 at any temperature, so that columns are easy to reason about.
    pub fn simple(lines: Vec<Line>) -> Self {
        Species {
            name: "Xx I",
            mass_u: 40.0,
            lines,
            levels: vec![(2.0, 0.0)],
        }
    }

    /// Writes line list and levels into the folder; gives the `[[species]]` table of a setup.
    pub fn write(&self, folder: &Path) -> String {
        let stem = self.name.to_lowercase().replace(' ', "-");
        let with_gamma = self.lines.iter().all(|line| line.gamma_per_s.is_some());
        let mut text = String::from("wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper");
        text.push_str(if with_gamma { ",gamma_per_s\n" } else { "\n" });
        for line in &self.lines {
            let Line {
                wavelength_vac_nm,
                a_ki_per_s,
                e_lower_per_cm,
                g_lower,
                g_upper,
                gamma_per_s,
            } = line;
            write!(
                text,
                "{wavelength_vac_nm},{a_ki_per_s},{e_lower_per_cm},{g_lower},{g_upper}"
            )
            .unwrap();
            match gamma_per_s {
                Some(gamma) if with_gamma => writeln!(text, ",{gamma}").unwrap(),
                _ => text.push('\n'),
            }
        }
        fs::write(folder.join(format!("{stem}-lines.csv")), text).unwrap();
        let mut text = String::from("g,energy_per_cm\n");
        for (g, energy) in &self.levels {
            writeln!(text, "{g},{energy}").unwrap();
        }
        fs::write(folder.join(format!("{stem}-levels.csv")), text).unwrap();
        format!(
            "\n[[species]]\nname = \"{}\"\nmass_u = {}\nlines = \"{stem}-lines.csv\"\nlevels = \"{stem}-levels.csv\"\n",
            self.name, self.mass_u
        )
    }
}

/// A setup file on disk and the channels it is to be seen in.
#[derive(Debug, Clone)]
pub struct Case {
    /// The setup file.
    pub setup: PathBuf,
    /// Channel centres in vacuum nm.
    pub wavelength_nm: Vec<f64>,
}

impl Case {
    /// Writes a case into `folder/name/`: the sections of the setup as given, the species added to them.
    pub fn write(
        folder: &Path,
        name: &str,
        sections: &str,
        species: &[Species],
        wavelength_nm: Vec<f64>,
    ) -> Case {
        let folder = folder.join(name);
        fs::create_dir_all(&folder).unwrap();
        let mut text = sections.to_owned();
        for one in species {
            text.push_str(&one.write(&folder));
        }
        let setup = folder.join("setup.toml");
        fs::write(&setup, text).unwrap();
        Case {
            setup,
            wavelength_nm,
        }
    }
}

/// `count` channel centres from one wavelength to another, both included.
pub fn channels(from_nm: f64, to_nm: f64, count: usize) -> Vec<f64> {
    (0..count)
        .map(|k| from_nm + (to_nm - from_nm) * k as f64 / (count - 1) as f64)
        .collect()
}
