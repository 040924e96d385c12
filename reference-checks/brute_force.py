#!/usr/bin/env python3
"""What an instrument sees of gas in front of a warm background, by brute force.

An independent forward model for the comparison in tests/brute_force.rs. It shares no code, no
constants file and no method with backlit: no line windows, no clever nodes, no tables. Every
line core is laid out in panels of a quarter of the narrowest Doppler width with eight
Gauss-Legendre points each, every panel ends at the channel edges, and every point is spread
over every channel with the exact integral of the Gaussian line-spread function.

    brute_force.py JOBS.json ANSWERS.json   compute the spectra of a list of jobs
    brute_force.py --self-test              compare with a second route of this file's own

JOBS.json:    [{"setup": "case.toml", "wavelength_nm": [...], "shape": [a1, ...]}, ...]
ANSWERS.json: [{"intensity": [...], "continuum": [...], "refinement": 1e-10}, ...]

A setup is read as the program reads it (TOML, user's own line lists and levels as CSV), so that
units and conventions are checked too. `find` values take their `start`. `shape` holds the
coefficients of the Legendre terms. `refinement` is the largest change on a grid twice as fine,
relative to the largest contrast between spectrum and continuum.
"""

import csv
import json
import sys
import tomllib
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
from numpy.polynomial import legendre
from scipy.special import erf, wofz

# CODATA 2022; h, c, k are exact.
PLANCK = 6.62607015e-34
LIGHT = 299792458.0
BOLTZMANN = 1.380649e-23
ATOMIC_MASS = 1.66053906892e-27


@dataclass
class Line:
    """One line; lengths in m, energies in J, rates in 1/s."""

    wavelength: float
    a_ki: float
    e_lower: float
    g_lower: float
    g_upper: float
    gamma: float


@dataclass
class Layer:
    """One species inside one cloud."""

    mass: float
    column: float
    lines: list
    level_g: np.ndarray
    level_energy: np.ndarray


@dataclass
class Cloud:
    """A uniform slab."""

    temperature: float
    doppler_temperature: float
    velocity: float
    turbulence: float
    layers: list


@dataclass
class Scene:
    """All that stands between the background and the file, in SI."""

    edges: np.ndarray  # of the channels, vacuum, rising
    background_temperature: float  # 0 = dark
    dilution: float
    shape: list
    shape_range: tuple  # the wavelengths of x = -1 and x = +1
    clouds: list  # the one nearest the background first
    fwhm: float = 0.0
    resolving_power: float = 0.0
    factor: float = 1.0  # from W m-2 sr-1 m-1 to the file's unit
    notes: list = field(default_factory=list)


# ---------------------------------------------------------------- physics


def planck(wavelength, temperature):
    """B_lambda = (2 h c^2 / lambda^5) / (exp(hc / lambda k T) - 1), W m-2 sr-1 m-1."""
    if temperature == 0:
        return np.zeros_like(wavelength)
    return 2 * PLANCK * LIGHT**2 / wavelength**5 / np.expm1(PLANCK * LIGHT / (wavelength * BOLTZMANN * temperature))


def background(scene, wavelength):
    """W B_lambda(T_bg) (1 + sum a_k P_k(x)), x = -1..1 over the range of the shape terms."""
    low, high = scene.shape_range
    x = (2 * wavelength - low - high) / (high - low)
    return (
        scene.dilution
        * planck(wavelength, scene.background_temperature)
        * legendre.legval(x, [1.0, *scene.shape])
    )


def doppler_width(cloud, layer):
    """b = sqrt(2 k T / m + xi^2), m/s."""
    return np.sqrt(2 * BOLTZMANN * cloud.doppler_temperature / layer.mass + cloud.turbulence**2)


def shifted(line, cloud):
    """The line's wavelength as it is observed; v > 0 recedes."""
    beta = cloud.velocity / LIGHT
    return line.wavelength * np.sqrt((1 + beta) / (1 - beta))


def line_opacity(line, layer, cloud, wavelength):
    """Optical depth of one line.

    tau = N_l (g_u/g_l) (c^2 / 8 pi nu0^2) A (1 - exp(-h nu0 / k T)) phi(nu), in the gas's own frame.
    """
    beta = cloud.velocity / LIGHT
    nu = LIGHT / wavelength * np.sqrt((1 + beta) / (1 - beta))
    nu0 = LIGHT / line.wavelength
    kt = BOLTZMANN * cloud.temperature
    partition = np.sum(layer.level_g * np.exp(-layer.level_energy / kt))
    lower = layer.column * line.g_lower * np.exp(-line.e_lower / kt) / partition
    width = nu0 * doppler_width(cloud, layer) / LIGHT
    z = ((nu - nu0) + 1j * line.gamma / (4 * np.pi)) / width
    phi = wofz(z).real / (np.sqrt(np.pi) * width)
    strength = line.g_upper / line.g_lower * LIGHT**2 / (8 * np.pi * nu0**2) * line.a_ki
    return lower * strength * -np.expm1(-PLANCK * nu0 / kt) * phi


def contrast(scene, wavelength):
    """The sightline's radiance minus the background's, before the instrument.

    Cloud by cloud I <- I exp(-tau) + B(T) (1 - exp(-tau)), written for the difference D = I - I_bg so
    that nothing is lost where it is small: D <- D exp(-tau) + (B(T) - I_bg) (1 - exp(-tau)).
    """
    base = background(scene, wavelength)
    difference = np.zeros_like(wavelength)
    for cloud in scene.clouds:
        tau = np.zeros_like(wavelength)
        for layer in cloud.layers:
            for line in layer.lines:
                tau += line_opacity(line, layer, cloud, wavelength)
        difference = difference * np.exp(-tau) - (planck(wavelength, cloud.temperature) - base) * np.expm1(-tau)
    return difference


# ---------------------------------------------------------------- instrument


def lsf_sigma(scene, wavelength):
    """Standard deviation of the line-spread function for light of this wavelength."""
    fwhm = wavelength / scene.resolving_power if scene.resolving_power else np.full_like(wavelength, scene.fwhm)
    return fwhm / (2 * np.sqrt(2 * np.log(2)))


def panels(scene, fineness):
    """Panel ends that follow every line core, every wing and every channel edge."""
    edges = scene.edges
    reach = 9.0 * lsf_sigma(scene, edges[[0, -1]])
    low, high = edges[0] - reach[0], edges[-1] + reach[1]
    ends = [np.array([low, high]), edges]

    # A panel is never longer than half a sigma of the line-spread function or half a channel.
    longest = 0.5 * np.min(np.diff(edges))
    if reach[0] > 0:
        longest = min(longest, 0.5 * lsf_sigma(scene, edges[:1])[0])
    ends.append(np.linspace(low, high, 2 + int(np.ceil((high - low) / (longest / fineness)))))

    # Around a line: a quarter of a Doppler width out to 12 of them, then steps that grow by an eighth.
    steps = [0.25] * 48
    while sum(steps) < 1e7 and len(steps) < 400:
        steps.append(steps[-1] * 1.125)
    offsets = np.cumsum(np.repeat(np.array(steps) / fineness, fineness))
    offsets = np.concatenate([-offsets[::-1], [0.0], offsets])
    for cloud in scene.clouds:
        for layer in cloud.layers:
            for line in layer.lines:
                centre = shifted(line, cloud)
                ends.append(centre + offsets * centre * doppler_width(cloud, layer) / LIGHT)
    ends = np.concatenate(ends)
    return np.unique(ends[(ends >= low) & (ends <= high)])


def spread_over_channels(scene, wavelength, weight, amount):
    """Sum over points of weight x amount x (part of the point's light that falls into each channel)."""
    edges = scene.edges
    sigma = lsf_sigma(scene, wavelength)
    total = np.zeros(len(edges) - 1)
    if np.all(sigma == 0):
        # Panels end at the channel edges, so each point belongs to one channel.
        index = np.searchsorted(edges, wavelength) - 1
        inside = (index >= 0) & (index < len(total))
        np.add.at(total, index[inside], (weight * amount)[inside])
        return total / np.diff(edges)
    for start in range(0, len(wavelength), 4096):
        part = slice(start, start + 4096)
        z = (edges[:, None] - wavelength[None, part]) / (np.sqrt(2) * sigma[None, part])
        # The difference of two erf loses digits where both are near +-1; there the share is below 1e-16.
        share = 0.5 * (erf(z[1:]) - erf(z[:-1]))
        total += share @ (weight[part] * amount[part])
    return total / np.diff(edges)


def observe(scene, fineness=1):
    """Contrast and continuum as the channels see them, in the file's unit."""
    x8, w8 = legendre.leggauss(8)
    ends = panels(scene, fineness)
    half = np.diff(ends) / 2
    wavelength = ((ends[:-1] + ends[1:])[:, None] / 2 + half[:, None] * x8).ravel()
    weight = (half[:, None] * w8).ravel()
    lines = spread_over_channels(scene, wavelength, weight, contrast(scene, wavelength))

    # The continuum is smooth: 32 points over each channel, each with 64 points over the line-spread function.
    x32, w32 = legendre.leggauss(32)
    edges = scene.edges
    at = (edges[:-1] + edges[1:])[:, None] / 2 + np.diff(edges)[:, None] / 2 * x32
    if scene.fwhm or scene.resolving_power:
        x64, w64 = legendre.leggauss(64)
        sigma = lsf_sigma(scene, at)[..., None]
        source = at[..., None] + 9 * sigma * x64
        own = lsf_sigma(scene, source)  # the width belongs to the light's own wavelength
        kernel = np.exp(-0.5 * ((at[..., None] - source) / own) ** 2) / (np.sqrt(2 * np.pi) * own)
        smooth = np.sum(kernel * background(scene, source) * 9 * sigma * w64, axis=-1)
    else:
        smooth = background(scene, at)
    continuum = smooth @ w32 / 2
    return lines * scene.factor, continuum * scene.factor


def observe_uniformly(scene, samples_per_width=40):
    """The second route: one uniform grid, the convolution and the channel mean as plain sums."""
    narrowest = min(
        shifted(line, cloud) * doppler_width(cloud, layer) / LIGHT
        for cloud in scene.clouds
        for layer in cloud.layers
        for line in layer.lines
    )
    edges = scene.edges
    reach = 9.0 * lsf_sigma(scene, edges[[0, -1]])
    step = narrowest / samples_per_width
    wavelength = np.arange(edges[0] - reach[0], edges[-1] + reach[1] + step, step)
    amount = contrast(scene, wavelength) * step
    x, w = legendre.leggauss(24)
    at = (edges[:-1] + edges[1:])[:, None] / 2 + np.diff(edges)[:, None] / 2 * x
    sigma = lsf_sigma(scene, wavelength)
    seen = np.zeros(at.size)
    for start in range(0, at.size, 64):
        part = at.ravel()[start : start + 64, None]
        kernel = np.exp(-0.5 * ((part - wavelength) / sigma) ** 2) / (np.sqrt(2 * np.pi) * sigma)
        seen[start : start + 64] = kernel @ amount
    return seen.reshape(at.shape) @ w / 2 * scene.factor


# ---------------------------------------------------------------- reading


def value(entry):
    """A setup's value: a number, or the start of a quantity to find."""
    if isinstance(entry, dict):
        return float(entry["start"])
    return float(entry)


def read_table(path):
    """A CSV file with a header row, as a dictionary of columns of floats (text that is no number is left out)."""
    rows = [row for row in path.read_text().splitlines() if row.strip() and not row.startswith("#")]
    columns = {}
    for row in csv.DictReader(rows, skipinitialspace=True):
        for name, text in row.items():
            columns.setdefault(name.strip(), []).append(float(text))
    return {name: np.array(column) for name, column in columns.items()}


def read_species(entry, folder):
    """Mass, lines and levels of a [[species]] table."""
    per_cm = PLANCK * LIGHT * 100
    table = read_table(folder / entry["lines"])
    wavelength = table["wavelength_vac_nm"] * 1e-9
    lower = table["e_lower_per_cm"]
    upper = lower + 0.01 / wavelength
    if "gamma_per_s" in table:
        gamma = table["gamma_per_s"]
    else:
        # The listed decays of both levels of each line.
        decay = lambda energy: np.sum(table["a_ki_per_s"][np.abs(upper - energy) < 0.02])  # noqa: E731
        gamma = np.array([decay(u) + decay(low) for u, low in zip(upper, lower)])
    lines = [
        Line(*row)
        for row in zip(wavelength, table["a_ki_per_s"], lower * per_cm, table["g_lower"], table["g_upper"], gamma)
    ]
    levels = read_table(folder / entry["levels"])
    return entry["mass_u"] * ATOMIC_MASS, lines, levels["g"], levels["energy_per_cm"] * per_cm


UNITS = {"W m-2 sr-1 nm-1": 1e9, "W m-2 sr-1 m-1": 1.0, "W m-2 nm-1": 1e9}


def read_scene(path, wavelength_nm, shape=()):
    """A setup file and the channel centres of the data (vacuum) as a scene."""
    path = Path(path)
    setup = tomllib.loads(path.read_text())
    centres = np.asarray(wavelength_nm) * 1e-9
    middle = (centres[:-1] + centres[1:]) / 2
    edges = np.concatenate([[2 * centres[0] - middle[0]], middle, [2 * centres[-1] - middle[-1]]])

    species = {entry["name"]: read_species(entry, path.parent) for entry in setup.get("species", [])}
    clouds = []
    for entry in setup.get("cloud", []):
        temperature = value(entry["temperature_K"])
        layers = []
        for name, column in entry["column_cm2"].items():
            mass, lines, g, energy = species[name]
            layers.append(Layer(mass, value(column) * 1e4, lines, g, energy))
        clouds.append(
            Cloud(
                temperature=temperature,
                doppler_temperature=value(entry.get("doppler_temperature_K", temperature)),
                velocity=value(entry.get("velocity_km_s", 0)) * 1e3,
                turbulence=value(entry.get("turbulence_km_s", 0)) * 1e3,
                layers=layers,
            )
        )
    light = setup["background"]
    spectrum = setup.get("spectrum", {})
    instrument = setup.get("instrument", {})
    return Scene(
        edges=edges,
        background_temperature=value(light["temperature_K"]) if light.get("light", "blackbody") == "blackbody" else 0.0,
        dilution=value(light.get("dilution", 1.0)),
        shape=list(shape),
        shape_range=(edges[0], edges[-1]),
        clouds=clouds,
        fwhm=instrument.get("fwhm_nm", 0.0) * 1e-9,
        resolving_power=instrument.get("resolving_power", 0.0),
        factor=value(spectrum.get("scale", 1.0)) / UNITS[spectrum.get("intensity_unit", "W m-2 sr-1 nm-1")],
    )


def answer(job):
    """One job's spectrum, with the change that a finer grid would make."""
    scene = read_scene(job["setup"], job["wavelength_nm"], job.get("shape", ()))
    lines, continuum = observe(scene)
    finer, _ = observe(scene, fineness=2)
    largest = np.max(np.abs(finer))
    refinement = float(np.max(np.abs(finer - lines)) / largest) if largest > 0 else 0.0
    return {
        "intensity": (continuum + finer).tolist(),
        "continuum": continuum.tolist(),
        "refinement": refinement,
    }


# ---------------------------------------------------------------- self-test


def self_test():
    """This file against itself: another grid, another sum; and what must be so whatever the grid."""
    line = Line(500e-9, 1e8, 0.0, 2.0, 4.0, 1e8)
    near = replace(line, wavelength=500.004e-9, a_ki=3e7)
    worst = 0.0
    for fwhm, power, depth_column, velocity in [
        (0.02e-9, 0, 1e14, 0.0),
        (0.02e-9, 0, 1e17, 30e3),
        (0.005e-9, 0, 1e18, -15e3),
        (0, 20000.0, 1e16, 0.0),
    ]:
        layer = Layer(23 * ATOMIC_MASS, depth_column, [line, near], np.array([2.0, 4.0]), np.array([0.0, 4e-19]))
        warm = Cloud(1200.0, 1200.0, velocity, 1000.0, [layer])
        other = Cloud(6500.0, 3000.0, 8e3, 2000.0, [replace(layer, column=0.3 * depth_column)])
        scene = Scene(
            edges=np.linspace(499.9e-9, 500.1e-9, 41),
            background_temperature=5000.0,
            dilution=0.6,
            shape=[0.1, -0.05],
            shape_range=(499.9e-9, 500.1e-9),
            clouds=[warm, other],
            fwhm=fwhm,
            resolving_power=power,
        )
        once, continuum = observe(scene)
        twice, _ = observe(scene, fineness=2)
        uniform = observe_uniformly(scene)
        largest = np.max(np.abs(twice))
        difference = max(np.max(np.abs(once - twice)), np.max(np.abs(uniform - twice))) / largest
        worst = max(worst, difference)

        # A background that fills the beam, and gas as hot as it: no line at all.
        equal = replace(scene, dilution=1.0, shape=[], clouds=[replace(warm, temperature=5000.0)])
        assert np.all(observe(equal)[0] == 0.0)
        assert np.all(continuum > 0)

    # The instrument keeps the energy: what the lines take out is the same with and without it.
    wide = np.linspace(495e-9, 505e-9, 2001)
    sums = []
    for fwhm in (0.0, 0.2e-9):
        lines, _ = observe(replace(scene, edges=wide, fwhm=fwhm, resolving_power=0))
        sums.append(np.sum(lines * np.diff(wide)))
    # 1e-4 because the damping wings beyond the range are spread into it and out of it.
    assert abs(sums[1] / sums[0] - 1) < 1e-4, sums

    print(f"two routes differ by at most {worst:.1e} of the deepest line (allowed: 1e-7)")
    if not worst < 1e-7:
        sys.exit("the brute-force model disagrees with itself")


def main(arguments):
    """The command line."""
    if arguments == ["--self-test"]:
        self_test()
    elif len(arguments) == 2:
        jobs = json.loads(Path(arguments[0]).read_text())
        Path(arguments[1]).write_text(json.dumps([answer(job) for job in jobs]))
    else:
        sys.exit(__doc__)


if __name__ == "__main__":
    main(sys.argv[1:])
