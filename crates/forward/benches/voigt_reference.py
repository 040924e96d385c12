"""SciPy's wofz on the points that the Voigt benchmark sends, timed in one thread.

Usage: python voigt_reference.py POINTS VALUES

POINTS holds pairs x, y as doubles; the values go to VALUES as pairs re, im. Then every line on standard input asks for one timed pass; its
nanoseconds a point go to standard output.
"""

import sys
import time

import numpy as np
from scipy.special import wofz


def main():
    points = np.fromfile(sys.argv[1], dtype=np.float64).reshape(-1, 2)
    z = points[:, 0] + 1j * points[:, 1]
    values = np.empty_like(z)
    wofz(z, out=values)
    values.tofile(sys.argv[2])
    print("ready", flush=True)
    for _ in sys.stdin:
        began = time.perf_counter_ns()
        wofz(z, out=values)
        print((time.perf_counter_ns() - began) / len(z), flush=True)


if __name__ == "__main__":
    main()
