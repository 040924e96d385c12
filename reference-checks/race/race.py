"""Fits the spectra of one folder with SciPy: the plain programme against which backlit's fit is timed.

    python race.py FOLDER [windowed|unwindowed|fine] [COUNT]    fits, and prints the time a spectrum
    python race.py FOLDER --serve                               waits for requests (the benchmark does this)

The folder is written by `cargo bench -p backlit-inverse --bench fit -- --keep FOLDER`; README.md says what is in it.

The model is one slab of gas before a black body, seen through a Gaussian line-spread function:
I = B(T_bg) exp(-tau) + B(T) (1 - exp(-tau)). The six values to be found are ln T_bg, ln T (K), velocity and turbulence (km/s), and the
logarithms of the two columns (m^-2).
"""

import csv
import json
import sys
import time
from pathlib import Path

import numpy as np
from scipy.constants import c, h, k as boltzmann
from scipy.optimize import least_squares
from scipy.sparse import csr_matrix
from scipy.special import erf, wofz

# Kind of model: whether a line counts only within its window, and samples a channel. Two samples are enough for lines of this
# width (6e-6 of the deepest line), because the exact integral of the line-spread function over each channel is in the weights; four
# leave 1e-9, and judge the answers.
KINDS = {"windowed": (True, 2), "unwindowed": (False, 2), "fine": (False, 4)}
# Beyond this distance (in channels) from its centre a line counts as nothing where windows are asked for.
WINDOW_CHANNELS = 16
# Light further off than this many standard deviations does not reach a channel.
REACH_SIGMAS = 6.0


def planck(wavelength, temperature):
    """Spectral radiance of a black body, W m^-2 sr^-1 m^-1."""
    return 2 * h * c**2 / wavelength**5 / np.expm1(h * c / (boltzmann * wavelength * temperature))


def read_table(path):
    with open(path, newline="") as file:
        rows = list(csv.DictReader(file))
    return {name: np.array([float(row[name]) for row in rows]) for name in rows[0]}


class Model:
    """The spectrum in every channel as a function of the six values."""

    def __init__(self, folder, kind):
        case = json.loads((folder / "case.json").read_text())
        self.windowed, samples_per_channel = KINDS[kind]
        self.mass = np.array(case["masses_kg"])
        tables = [read_table(folder / f"lines{s}.csv") for s in range(len(self.mass))]
        self.species = np.concatenate([np.full(len(t["g_upper"]), s) for s, t in enumerate(tables)])
        lines = {name: np.concatenate([t[name] for t in tables]) for name in tables[0]}
        self.rest = lines["wavelength_vac_nm"] * 1e-9
        self.frequency = c / self.rest
        self.strength = lines["g_upper"] * lines["a_ki_per_s"] * self.rest**2 / (8 * np.pi)
        self.lower = lines["e_lower_per_cm"] * 100 * h * c / boltzmann
        self.gamma = lines["gamma_per_s"]
        levels = read_table(folder / "levels.csv")
        self.level_g, self.level_k = levels["g"], levels["energy_per_cm"] * 100 * h * c / boltzmann

        width, n = case["channel_m"], case["channels"]
        self.centres = case["first_centre_m"] + width * np.arange(n)
        sigma = case["fwhm_m"] / np.sqrt(8 * np.log(2))
        reach = int(np.ceil(REACH_SIGMAS * sigma / width))
        self.step = width / samples_per_channel
        count = (n + 2 * reach) * samples_per_channel
        self.first = self.centres[0] - (reach + 0.5) * width + 0.5 * self.step
        self.samples = self.first + self.step * np.arange(count)
        # What part of the light of a sample falls into a channel.
        rows, columns, parts = [], [], []
        for j, centre in enumerate(self.centres):
            near = np.flatnonzero(np.abs(self.samples - centre) < reach * width + 0.5 * width)
            low, high = centre - 0.5 * width - self.samples[near], centre + 0.5 * width - self.samples[near]
            part = 0.5 * (erf(high / (sigma * np.sqrt(2))) - erf(low / (sigma * np.sqrt(2))))
            rows.append(np.full(len(near), j))
            columns.append(near)
            parts.append(part * self.step / width)
        self.spread = csr_matrix(
            (np.concatenate(parts), (np.concatenate(rows), np.concatenate(columns))), shape=(n, count)
        )
        half = WINDOW_CHANNELS * samples_per_channel
        self.offsets = np.arange(-half, half + 1)
        # Light of a wavelength times this over the temperature is the exponent in Planck's law.
        self.planck_front = 2 * h * c**2 / self.samples**5
        self.planck_kelvin = h * c / (boltzmann * self.samples)
        self.evaluations = 0

    def optical_depth(self, temperature, velocity, turbulence, columns):
        """Optical depth at the samples."""
        partition = self.level_g @ np.exp(-self.level_k / temperature)
        b = np.sqrt(2 * boltzmann * temperature / self.mass + turbulence**2)[self.species]
        doppler = self.frequency * b / c
        damping = self.gamma / (4 * np.pi * doppler)
        net = -np.expm1(-h * self.frequency / (boltzmann * temperature))
        cross_section = self.strength * np.exp(-self.lower / temperature) / partition * net
        depth = columns[self.species] * cross_section / (np.sqrt(np.pi) * doppler)
        beta = velocity / c
        factor = np.sqrt((1 + beta) / (1 - beta))
        if not self.windowed:
            x = (c * factor / self.samples - self.frequency[:, None]) / doppler[:, None]
            return depth @ wofz(x + 1j * damping[:, None]).real
        nearest = np.rint((self.rest * factor - self.first) / self.step).astype(int)
        index = np.clip(nearest[:, None] + self.offsets, 0, len(self.samples) - 1)
        x = (c * factor / self.samples[index] - self.frequency[:, None]) / doppler[:, None]
        profile = depth[:, None] * wofz(x + 1j * damping[:, None]).real
        return np.bincount(index.ravel(), profile.ravel(), minlength=len(self.samples))

    def __call__(self, values):
        self.evaluations += 1
        background_k, temperature = np.exp(values[0]), np.exp(values[1])
        tau = self.optical_depth(temperature, values[2] * 1e3, values[3] * 1e3, np.exp(values[4:]))
        gas = self.planck_front / np.expm1(self.planck_kelvin / temperature)
        behind = self.planck_front / np.expm1(self.planck_kelvin / background_k)
        # The background is so smooth that neither the line-spread function nor the channels change it (1e-8).
        return planck(self.centres, background_k) + self.spread @ ((behind - gas) * np.expm1(-tau))


class Race:
    """All spectra of a folder, to be fitted with one kind of model."""

    def __init__(self, folder, kind):
        self.model = Model(folder, kind)
        self.sigma = json.loads((folder / "case.json").read_text())["sigma"]
        self.spectra = np.fromfile(folder / "spectra.f64").reshape(-1, len(self.model.centres))
        self.starts = np.fromfile(folder / "starts.f64").reshape(len(self.spectra), -1)

    def fit(self, index):
        spectrum, sigma, model = self.spectra[index], self.sigma, self.model
        answer = least_squares(lambda values: (model(values) - spectrum) / sigma, self.starts[index], method="lm")
        # The model knows the turbulence only by its square.
        answer.x[3] = abs(answer.x[3])
        return np.append(answer.x, 2 * answer.cost)

    def run(self, begin, end):
        """Answers of some spectra, nanoseconds of processor time and evaluations a spectrum."""
        self.model.evaluations = 0
        began = time.process_time_ns()
        answers = np.array([self.fit(index) for index in range(begin, end)])
        spent = time.process_time_ns() - began
        return answers, spent / (end - begin), self.model.evaluations / (end - begin)

    def judge(self, values):
        """Chi-square of some values for each of the first spectra."""
        return np.array([np.sum(((self.model(v) - y) / self.sigma) ** 2) for v, y in zip(values, self.spectra)])


def serve(folder):
    races = {kind: Race(folder, kind) for kind in KINDS}
    print("ready", flush=True)
    for request in sys.stdin:
        kind, *numbers = request.split()
        if kind == "judge":
            values = np.fromfile(folder / "values.f64").reshape(-1, races["fine"].starts.shape[1])
            races["fine"].judge(values).tofile(folder / "answers.f64")
            print("done", flush=True)
            continue
        answers, spent, evaluations = races[kind].run(*map(int, numbers))
        answers.tofile(folder / "answers.f64")
        print(spent, evaluations, flush=True)


def main():
    folder = Path(sys.argv[1])
    if sys.argv[2:] == ["--serve"]:
        serve(folder)
        return
    kind = sys.argv[2] if len(sys.argv) > 2 else "windowed"
    race = Race(folder, kind)
    count = int(sys.argv[3]) if len(sys.argv) > 3 else len(race.spectra)
    answers, spent, evaluations = race.run(0, count)
    print(f"{kind}: {count} spectra, {spent * 1e-6:.2f} ms and {evaluations:.1f} evaluations a spectrum")
    print(f"chi-square: median {np.median(answers[:, -1]):.3f}")


if __name__ == "__main__":
    main()
