#!/usr/bin/env python3
"""Invents the Kestrel Veil: writes the values of every pixel and the channels of the spectrograph.

    scenario.py FOLDER     writes kestrel-veil-values.csv, kestrel-veil-channels.csv, tube-channels.csv

The values are the truth that the demo holds the program's answers against. Only they come from here;
the spectra are made by the program (`backlit predict`).
"""

import sys
from pathlib import Path

import numpy as np

SIZE = 64
# First and last channel centre in nm, and how many channels: the four windows of the spectrograph.
WINDOWS = [(392.9, 397.5, 120), (588.0, 591.0, 64), (765.0, 771.5, 96), (849.0, 867.5, 232)]
# log10 of a column that nothing could see: the parts of the field without gas.
NO_GAS = 8.0


def fields():
    """The truth, one (SIZE, SIZE) array a quantity, named as in the maps."""
    y, x = np.mgrid[0:SIZE, 0:SIZE] / (SIZE - 1) * 2 - 1
    turned_x, turned_y = 0.86 * x + 0.5 * y, 0.86 * y - 0.5 * x

    # Two wings about a waist, combed into filaments, and a hot knot off the centre.
    wing = np.exp(-(((np.abs(turned_x) - 0.42) / 0.36) ** 2) - (turned_y / (0.16 + 0.46 * np.abs(turned_x))) ** 2)
    waist = 0.5 * np.exp(-((turned_x / 0.24) ** 2) - (turned_y / 0.55) ** 2)
    angle, radius = np.arctan2(turned_y, np.abs(turned_x) + 0.05), np.hypot(turned_x, turned_y)
    filaments = 1 + 0.45 * np.sin(11 * angle + 5 * radius) * np.minimum(radius / 0.5, 1)
    density = (wing + waist) * filaments
    knot = np.exp(-(((x - 0.28) / 0.42) ** 2) - ((y - 0.12) / 0.36) ** 2)

    # Cooler than the stars at the rim, hotter in the knot: in between lies a line where both are equal and the
    # gas cannot be seen.
    gas = 3900 + 500 * turned_x + 3000 * knot
    stars = 5100 + 450 * x - 250 * y
    absent = density < 0.12
    column = np.log10(np.maximum(density, 1e-6))
    quantities = {
        "cloud1_temperature": gas,
        "cloud1_velocity": 110 * np.tanh(1.8 * turned_x) - 45 * turned_y,
        "cloud1_log10_column_Ca_II": 14.5 + column,
        "cloud1_log10_column_Na_I": 12.8 + 1.1 * column - 0.2 * knot,
        "cloud1_log10_column_K_I": 12.6 + 1.1 * column - 0.3 * knot,
        "background_temperature": stars,
    }
    for name, values in quantities.items():
        if "column" in name:
            values[absent] = NO_GAS
    return quantities


def main(folder):
    """Writes the three files."""
    folder.mkdir(parents=True, exist_ok=True)
    quantities = fields()
    names = list(quantities)
    with (folder / "kestrel-veil-values.csv").open("w") as out:
        print("y", "x", *names, sep=",", file=out)
        for row in range(SIZE):
            for column in range(SIZE):
                print(row, column, *(f"{quantities[name][row, column]:.6f}" for name in names), sep=",", file=out)

    windows = np.concatenate([np.linspace(*window) for window in WINDOWS])
    tube = np.linspace(410, 870, 4601)
    for name, centres in [("kestrel-veil-channels.csv", windows), ("tube-channels.csv", tube)]:
        with (folder / name).open("w") as out:
            print("# medium: vacuum\n# intensity_unit: W m-2 sr-1 nm-1\nwavelength_nm,intensity", file=out)
            for centre in centres:
                print(f"{centre:.6f},1.0", file=out)


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    main(Path(sys.argv[1]))
