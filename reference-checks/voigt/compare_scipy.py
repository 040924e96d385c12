"""Compare the oracle table with scipy.special.wofz, an independent implementation, and say how far apart they are.

Usage: python compare_scipy.py [table.csv]

Exits with 1 if any component of any point differs by more than SciPy's own accuracy allows (its documentation gives 1e-13; this table
shows up to 3e-13 where a component is many orders below the other one).
"""

import csv
import pathlib
import sys

import numpy as np
from scipy.special import wofz

BOUND = 1e-12


def main():
    path = pathlib.Path(sys.argv[1]) if len(sys.argv) > 1 else pathlib.Path(__file__).with_name("table.csv")
    with open(path, encoding="ascii") as lines:
        rows = csv.DictReader(line for line in lines if not line.startswith("#"))
        table = np.array([[float(row[name]) for name in ("x", "y", "re", "im")] for row in rows])
    x, y, re, im = table.T
    got = wofz(x + 1j * y)
    worst = 0.0
    for name, value, expected in (("real", got.real, re), ("imaginary", got.imag, im)):
        normal = np.abs(expected) >= np.finfo(float).tiny
        error = np.abs(value[normal] / expected[normal] - 1)
        error[~np.isfinite(error)] = np.inf
        worst = max(worst, error.max())
        median, high = np.quantile(error, [0.5, 0.99])
        print(f"{name:9} part, {normal.sum()} points: median {median:.1e}, 99 % {high:.1e}, maximum {error.max():.1e}")
    if worst > BOUND:
        sys.exit(f"error: the table and SciPy differ by {worst:.1e}, more than {BOUND:.0e}\nhint: one of them has a wrong value; compare with more digits")


if __name__ == "__main__":
    main()
