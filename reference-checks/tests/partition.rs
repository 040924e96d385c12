//! Partition functions against direct sums over the published levels and against a printed table.

// ln 2 stands here as a published figure of doublets, not as the constant.
#![allow(clippy::unwrap_used, clippy::approx_constant)]

use backlit_species::{Catalogue, PartitionTable};

const TEMPERATURES_K: [f64; 6] = [300.0, 1000.0, 3000.0, 6000.0, 10_000.0, 20_000.0];

/// ln Q: direct sum over all levels below the first limit of the NIST Atomic Spectra Database (doi 10.18434/T4W30F),
/// done outside this program with k = 0.695 034 800 486 cm^-1/K.
const DIRECT_SUMS: [(&str, [f64; 6]); 16] = [
    (
        "He I",
        [0.000000, 0.000000, 0.000000, 0.000000, 0.000000, 0.004291],
    ),
    (
        "C I",
        [2.058352, 2.154922, 2.187303, 2.238317, 2.323479, 2.793287],
    ),
    (
        "O I",
        [1.908218, 2.093155, 2.161028, 2.191307, 2.242673, 2.420811],
    ),
    (
        "Na I",
        [0.693147, 0.693147, 0.694037, 0.783779, 1.765699, 4.076752],
    ),
    (
        "Mg I",
        [0.000000, 0.000000, 0.000248, 0.047989, 0.497645, 2.903632],
    ),
    (
        "Si I",
        [1.565938, 1.989568, 2.155014, 2.284161, 2.427247, 3.608450],
    ),
    (
        "Ar I",
        [0.000000, 0.000000, 0.000000, 0.000000, 0.000064, 0.268247],
    ),
    (
        "K I",
        [0.693147, 0.693147, 0.699232, 0.959350, 2.284125, 4.336065],
    ),
    (
        "Ca I",
        [0.000000, 0.000000, 0.006980, 0.348701, 1.711970, 4.336793],
    ),
    (
        "Ti I",
        [2.251612, 2.749883, 3.035841, 3.587620, 4.421063, 5.860479],
    ),
    (
        "Fe I",
        [2.319907, 2.756534, 3.088974, 3.457507, 4.088507, 5.615692],
    ),
    (
        "Hg I",
        [0.000000, 0.000000, 0.000000, 0.000499, 0.034459, 1.545239],
    ),
    (
        "Ca II",
        [0.693147, 0.693147, 0.700190, 0.871021, 1.269723, 2.058710],
    ),
    (
        "Fe II",
        [2.450263, 2.975842, 3.535516, 3.861993, 4.203137, 4.988367],
    ),
    (
        "S II",
        [1.386294, 1.386294, 1.388301, 1.458439, 1.677522, 2.146130],
    ),
    (
        "O III",
        [1.359656, 1.912162, 2.099118, 2.152281, 2.198272, 2.316754],
    ),
];

/// The catalogue keeps near levels in groups; this is what the grouping may cost, relative in Q.
const GROUPING_TOLERANCE: f64 = 1e-3;

#[test]
fn partition_functions_are_the_direct_sums_over_the_published_levels() {
    let mut worst: f64 = 0.0;
    for (name, sums) in DIRECT_SUMS {
        let species = Catalogue::builtin().get(name).unwrap();
        let table = PartitionTable::new(&species, 300.0, 20_000.0);
        for (temperature_k, want) in TEMPERATURES_K.into_iter().zip(sums) {
            for got in [
                species.partition_function(temperature_k),
                table.ln_q_and_slope(temperature_k),
            ] {
                let off = (got.ln_q - want).exp_m1().abs();
                worst = worst.max(off);
                assert!(
                    off < GROUPING_TOLERANCE,
                    "{name} at {temperature_k} K: Q off by {off:e}"
                );
            }
        }
    }
    // Measured 2.0e-4; a large change is worth a look even inside the tolerance.
    assert!(worst > 1e-7, "the sums agree too well to be independent");
}

#[test]
fn partition_functions_at_5040_kelvin_are_those_of_the_printed_table() {
    // log10 Q at theta = 5040/T = 1: Allen, Astrophysical Quantities, 3rd edition (1973), section 15, from memory; two decimals.
    for (name, printed) in [
        ("H I", 0.30),
        ("He I", 0.00),
        ("C I", 0.97),
        ("O I", 0.94),
        ("Na I", 0.31),
        ("Mg I", 0.01),
        ("Si I", 0.98),
        ("Ca I", 0.07),
        ("Ca II", 0.34),
        ("Ti I", 1.48),
        ("Fe I", 1.43),
        ("Fe II", 1.63),
    ] {
        let species = Catalogue::builtin().get(name).unwrap();
        let got = species.partition_function(5040.0).ln_q / std::f64::consts::LN_10;
        assert!(
            (got - printed).abs() < 0.02,
            "{name}: {got:.3}, printed {printed}"
        );
    }
}

#[test]
fn hydrogen_stays_at_two_states_until_it_is_hot() {
    // 2 sum n^2 exp(-E_n/kT) with Rydberg energies, n up to 12, by hand: ln Q = 0.693 297 at 10 000 K, 0.944 837 at 20 000 K.
    let hydrogen = Catalogue::builtin().get("H I").unwrap();
    for (temperature_k, want) in [
        (300.0, std::f64::consts::LN_2),
        (10_000.0, 0.693_296_877),
        (20_000.0, 0.944_836_989),
    ] {
        let got = hydrogen.partition_function(temperature_k).ln_q;
        assert!(
            (got - want).abs() < 1e-5,
            "{temperature_k} K: {got}, want {want}"
        );
    }
}

#[test]
fn the_slope_is_the_finite_difference_of_the_value() {
    for name in ["H I", "Na I", "Fe I", "Ca II"] {
        let species = Catalogue::builtin().get(name).unwrap();
        for temperature_k in [40.0, 700.0, 5000.0, 18_000.0] {
            let step_k = 1e-4 * temperature_k;
            let rise = species.partition_function(temperature_k + step_k).ln_q
                - species.partition_function(temperature_k - step_k).ln_q;
            let slope_per_k = species.partition_function(temperature_k).dlnq_dt_per_k;
            let off = (slope_per_k - rise / (2.0 * step_k)).abs() * temperature_k;
            assert!(off < 1e-6, "{name} at {temperature_k} K: off by {off:e}");
        }
    }
}
