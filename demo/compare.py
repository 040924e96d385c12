#!/usr/bin/env python3
"""Truth against answer, in a short table.

    compare.py map VALUES.csv MAPS.h5        the Kestrel Veil
    compare.py tube TRUTH.toml ANSWER.json   the discharge tube
"""

import csv
import json
import sys
import tomllib
from pathlib import Path

import h5py
import numpy as np

# Columns below this cannot be seen anywhere in the scenario: scenario.py writes 8 there.
NO_GAS = 8.5
# Where gas and background differ by less than this, the lines drown in the noise.
EQUAL_K = 25.0


def read_truth(path):
    """The values of every pixel as (ny, nx) arrays."""
    with open(path, newline="") as source:
        rows = list(csv.DictReader(source))
    y = np.array([int(row["y"]) for row in rows])
    x = np.array([int(row["x"]) for row in rows])
    truth = {}
    for name in rows[0]:
        if name not in ("y", "x"):
            truth[name] = np.full((y.max() + 1, x.max() + 1), np.nan)
            truth[name][y, x] = [float(row[name]) for row in rows]
    return truth


def read_maps(path):
    """All maps, their units, and the bit of each flag by name."""
    with h5py.File(path) as source:
        maps = {name: dataset[...] for name, dataset in source["maps"].items()}
        units = {name: text(dataset.attrs.get("units", "")) for name, dataset in source["maps"].items()}
        names = source["maps/flags"].attrs["flag_names"]
    names = text(names).split() if np.ndim(names) == 0 else [text(name) for name in names]
    return maps, units, {name.strip(","): 1 << bit for bit, name in enumerate(names)}


def text(value):
    """An HDF5 string as str."""
    return value.decode() if isinstance(value, bytes) else str(value)


def compare_maps(values_path, maps_path):
    """The table of the nebula."""
    truth = read_truth(values_path)
    maps, units, bits = read_maps(maps_path)
    flags = maps["flags"]
    clean = flags == 0
    print(f"{'quantity':30} {'unit':>11} {'truth':>19} {'median error':>13} {'error/sigma':>12} {'within 1 sigma':>15}")
    for name, true in truth.items():
        answered = clean & np.isfinite(maps[name])
        error = (maps[name] - true)[answered]
        pull = error / maps[f"{name}_sigma"][answered]
        span = f"{true[answered].min():.5g} .. {true[answered].max():.5g}"
        # 0.6745: the median of |x| of a normal distribution of width 1.
        print(
            f"{name:30} {units[name]:>11} {span:>19} {np.median(np.abs(error)):13.3g} "
            f"{np.median(np.abs(pull)) / 0.6745:12.2f} {100 * np.mean(np.abs(pull) < 1):13.0f} %"
        )

    column = truth["cloud1_log10_column_Ca_II"]
    contrast = np.abs(truth["cloud1_temperature"] - truth["background_temperature"])
    places = {
        "gas, hotter or cooler": (column > NO_GAS) & (contrast >= 300),
        f"gas as hot as the stars (+-{EQUAL_K:.0f} K)": (column > NO_GAS) & (contrast < EQUAL_K),
        "in between": (column > NO_GAS) & (contrast >= EQUAL_K) & (contrast < 300),
        "no gas": column <= NO_GAS,
    }
    print(f"\n{'where':36} {'pixels':>6} {'no flag':>8}  flags, in per cent of these pixels")
    for place, where in places.items():
        shares = {name: 100 * np.mean(flags[where] & bit > 0) for name, bit in bits.items()}
        seen = ", ".join(f"{name} {share:.0f}" for name, share in shares.items() if share >= 0.5)
        print(f"{place:36} {where.sum():6} {100 * np.mean(clean[where]):6.0f} %  {seen}")


def compare_tube(truth_path, answer_path):
    """The table of the tube."""
    setup = tomllib.loads(Path(truth_path).read_text())
    answer = json.loads(Path(answer_path).read_text())
    cloud = setup["cloud"][0]
    truth = {
        "cloud1_temperature": cloud["temperature_K"],
        "background_temperature": setup["background"]["temperature_K"],
        "background_dilution": setup["background"]["dilution"],
    }
    for name, column in cloud["column_cm2"].items():
        truth["cloud1_log10_column_" + name.replace(" ", "_")] = np.log10(column)
    units = answer.get("units", {})
    print(f"{'quantity':30} {'unit':>11} {'truth':>10} {'answer':>10} {'sigma':>9} {'error/sigma':>12}")
    for name, true in truth.items():
        value, sigma = answer["values"][name], answer["sigma"][name]
        if value is None or not sigma:
            print(f"{name:30} {units.get(name, ''):>11} {true:10.5g} {'none':>10}")
            continue
        print(
            f"{name:30} {units.get(name, ''):>11} {true:10.5g} {value:10.5g} {sigma:9.2g} "
            f"{(value - true) / sigma:12.2f}"
        )
    print(f"flags: {', '.join(answer['flags']) or 'none'}; reduced chi-square {answer['chi2_reduced']:.3f}")


if __name__ == "__main__":
    if len(sys.argv) != 4 or sys.argv[1] not in ("map", "tube"):
        sys.exit(__doc__)
    {"map": compare_maps, "tube": compare_tube}[sys.argv[1]](sys.argv[2], sys.argv[3])
