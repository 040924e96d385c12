//! Cross-checks of the catalogue: measured lifetimes of levels, and line ratios that theory fixes.
//!
//! Published values here are quoted from memory. Most are independent of the catalogue's figures. Not independent, and so
//! only a check of copying and of the arithmetic: the two lifetimes of Ca II (its A rest on them), and the ratios of O III, N II,
//! S III and Ar III (the catalogue's A come from calculations of the same kind, chosen because they meet these ratios).

#![allow(clippy::unwrap_used)]

use backlit_species::{Catalogue, Line};

fn line(name: &str, wavelength_vac_nm: f64) -> Line {
    let species = Catalogue::builtin().get(name).unwrap();
    let window_m = 5e-5 * wavelength_vac_nm * 1e-9;
    let near = species.lines_between(
        wavelength_vac_nm * 1e-9 - window_m,
        wavelength_vac_nm * 1e-9 + window_m,
    );
    let strongest = near
        .iter()
        .max_by(|a, b| (a.g_upper * a.a_ki_per_s).total_cmp(&(b.g_upper * b.a_ki_per_s)));
    strongest
        .unwrap_or_else(|| panic!("{name} has no line near {wavelength_vac_nm} nm"))
        .clone()
}

#[test]
fn natural_broadening_of_resonance_lines_is_one_over_the_measured_lifetime() {
    // Species, a line from the ground term (vacuum nm), lifetime of its upper level (ns), tolerance.
    for (name, wavelength_vac_nm, lifetime_ns, tolerance) in [
        ("Na I", 589.158_3, 16.25, 0.01),  // Volz et al. 1996
        ("Li I", 670.976, 27.10, 0.01),    // McAlexander et al. 1996
        ("K I", 766.700_9, 26.37, 0.01),   // Wang et al. 1997
        ("Rb I", 780.241_5, 26.24, 0.01),  // Volz and Schmoranzer 1996
        ("Cs I", 852.347_3, 30.57, 0.01),  // Rafac et al. 1999
        ("Mg I", 285.296_4, 2.03, 0.04),   // Kelly and Mathur 1980
        ("Ca I", 422.791_8, 4.59, 0.05),   // Hansen 1983
        ("Sr I", 460.862_4, 5.22, 0.06),   // Nagel et al. 2005
        ("Hg I", 253.728_3, 119.0, 0.02),  // Halstead and Reeves 1982
        ("Zn I", 213.924_8, 1.41, 0.04),   // Lurio et al. 1964
        ("Cu I", 324.847_3, 7.2, 0.03),    // Carlsson et al. 1989
        ("Be II", 313.132_1, 8.85, 0.03),  // Andersen et al. 1969
        ("Mg II", 279.635_2, 3.81, 0.03),  // Herrmann et al. 2009
        ("Ca II", 393.477_7, 6.924, 0.01), // Jin and Church 1993
        ("Ca II", 396.959_1, 7.098, 0.01), // Jin and Church 1993
        ("Sr II", 407.886_2, 6.69, 0.03),  // Pinnington et al. 1995
        ("Ba II", 455.531, 6.32, 0.02),    // Pinnington et al. 1995
        ("Ba II", 493.545_4, 7.90, 0.02),  // Pinnington et al. 1995
        ("Zn II", 202.613_7, 2.5, 0.05),   // Bergeson and Lawler 1993
        ("Mn II", 257.687_7, 3.54, 0.03),  // Schnabel et al. 1995
        ("Fe II", 238.276_5, 3.19, 0.03),  // Biemont et al. 1991
        ("Fe II", 260.017_3, 3.70, 0.03),  // Biemont et al. 1991
        ("C IV", 154.818_7, 3.78, 0.02),   // theory of three electrons, 1 %
        ("H I", 121.567_0, 1.596, 0.001),  // theory: 2p
    ] {
        let found = line(name, wavelength_vac_nm);
        let got_ns = 1e9 / found.gamma_per_s;
        assert!(
            (got_ns / lifetime_ns - 1.0).abs() < tolerance,
            "{name} {wavelength_vac_nm} nm: lifetime {got_ns} ns, measured {lifetime_ns} ns"
        );
    }
}

#[test]
fn forbidden_lines_of_one_level_have_the_ratio_that_theory_and_nebulae_show() {
    // Photon energy times A. Storey and Zeippen 2000 (O III, N II, O I); Mendoza 1983 (S III, Ar III).
    for (name, strong_nm, weak_nm, published, tolerance) in [
        ("O III", 500.824, 496.030, 2.98, 0.01),
        ("N II", 658.527, 654.986, 3.05, 0.01),
        // Each of the two A is of grade B+ (7 %).
        ("O I", 630.205, 636.554, 3.0, 0.07),
        ("S III", 953.323, 907.114, 2.48, 0.03),
        ("Ar III", 713.776, 775.324, 4.14, 0.02),
    ] {
        let (strong, weak) = (line(name, strong_nm), line(name, weak_nm));
        assert!(strong.is_forbidden() && weak.is_forbidden());
        let got =
            strong.a_ki_per_s / strong.wavelength_vac_m / (weak.a_ki_per_s / weak.wavelength_vac_m);
        assert!(
            (got / published - 1.0).abs() < tolerance,
            "{name}: {got}, published {published}"
        );
    }
}

#[test]
fn oscillator_strengths_are_those_of_the_interstellar_line_tables() {
    // Morton, ApJS 149, 205 (2003), from memory: another compilation than the catalogue's.
    for (name, wavelength_vac_nm, published, tolerance) in [
        ("Na I", 589.158_3, 0.641, 0.01),
        ("Na I", 589.755_8, 0.320, 0.01),
        ("K I", 766.700_9, 0.666, 0.01),
        ("Ca II", 393.477_7, 0.627, 0.01),
        ("Ca II", 396.959_1, 0.312, 0.01),
        ("Ca I", 422.791_8, 1.77, 0.02),
        ("Mg I", 285.296_4, 1.83, 0.02),
        ("Mg II", 279.635_2, 0.616, 0.02),
        ("Mg II", 280.353_1, 0.306, 0.02),
        ("O I", 130.216_8, 0.052, 0.06),
        ("C II", 133.453_2, 0.128, 0.02),
        ("N I", 119.954_96, 0.132, 0.03),
        ("Si II", 126.042_2, 1.18, 0.05),
        ("Si II", 152.670_7, 0.133, 0.02),
        ("Al II", 167.078_7, 1.74, 0.03),
        ("C IV", 154.818_7, 0.190, 0.01),
        ("Si IV", 139.375_5, 0.513, 0.02),
        ("Fe II", 238.276_5, 0.320, 0.02),
        ("Fe II", 260.017_3, 0.239, 0.02),
    ] {
        let got = line(name, wavelength_vac_nm).oscillator_strength();
        assert!(
            (got / published - 1.0).abs() < tolerance,
            "{name} {wavelength_vac_nm} nm: f {got}, published {published}"
        );
    }
}

#[test]
fn deuterium_has_lines_of_its_own() {
    let (deuterium, hydrogen) = (line("D I", 121.534), line("H I", 121.567));
    assert!((deuterium.a_ki_per_s / hydrogen.a_ki_per_s - 1.0).abs() < 2e-3);
    assert!(hydrogen.wavelength_vac_m - deuterium.wavelength_vac_m > 0.03e-9);
}
