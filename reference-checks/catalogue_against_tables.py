"""Compares the tables of the catalogue with published tables, figure by figure, and reports what disagrees.

    python3 reference-checks/catalogue_against_tables.py FOLDER

FOLDER holds CSV files as a download of the NIST Atomic Spectra Database (doi 10.18434/T4W30F) gives them: nist-asd-levels.csv,
nist-asd-neutral-lines.csv, nist-asd-ion-lines-partial.csv, nist-ionization-energies.csv, nist-isotope-masses.csv.
Exit code 1 if anything disagrees. Needs nothing but Python.
"""

import bisect
import csv
import math
import pathlib
import sys
from collections import defaultdict

TABLES = pathlib.Path(__file__).parent.parent / "crates/species/data"
BOLTZMANN_PER_CM_K = 0.695034800486
TEMPERATURES_K = (300, 1000, 3000, 6000, 10_000, 20_000)
# What the tables promise: wavelengths to a part in a million, A as printed, energies as printed, masses to 5 digits.
WAVELENGTH = 2e-6
A_LISTED = 1e-3
ENERGY_PER_CM = 0.02
MASS = 1e-6
LIMIT = 1e-7
PARTITION = 2e-3
# Figures from memory are held to a measured-A yardstick.
A_MEMORY = 0.5


def read_table(path):
    """One species table: keys, levels (g, energy) and lines (dicts)."""
    keys, levels, lines, section = {}, [], [], ""
    for row in path.read_text().splitlines():
        words = row.split()
        if not words or words[0].startswith("#"):
            continue
        if words[0].startswith("["):
            section = words[0]
        elif section == "[levels]":
            levels.append((float(words[0]), float(words[1])))
        elif section == "[lines]":
            names = ("wavelength", "a", "grade", "e_lower", "e_upper", "g_lower", "g_upper", "kind", "gamma", "source")
            line = dict(zip(names, words))
            for name in names:
                if name not in ("grade", "kind", "source"):
                    line[name] = float(line[name])
            lines.append(line)
        else:
            keys[words[0]] = " ".join(words[1:]) if words[0] == "name" else float(words[1])
    return keys, levels, lines


def number(text):
    try:
        return float(text)
    except ValueError:
        return None


def weight(row, level):
    """2J + 1 where J is one number: some rows of the published list print 2J in the column g."""
    j = row[f"j_{level}"].split("/")
    if all(part.isdigit() for part in j) and len(j) <= 2:
        return 2 * int(j[0]) / int(j[1] if len(j) == 2 else 1) + 1
    return number(row[f"g_{level}"])


def read_csv(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


def published_lines(folder):
    found = defaultdict(list)
    for name in ("nist-asd-neutral-lines.csv", "nist-asd-ion-lines-partial.csv"):
        for row in read_csv(folder / name):
            a, wavelength = number(row["a_ki_per_s"]), number(row["wavelength_vac_nm"])
            if a and wavelength:
                energies = [number(row[f"e_{level}_per_cm"]) for level in ("lower", "upper")]
                weights = [weight(row, level) for level in ("lower", "upper")]
                found[row["species"]].append((wavelength, a, *energies, *weights, row["type"]))
    for rows in found.values():
        rows.sort(key=lambda row: row[0])
    return found


def natural_masses(folder):
    found = defaultdict(float)
    for row in read_csv(folder / "nist-isotope-masses.csv"):
        part = number(row["isotopic_composition"])
        if part and row["symbol"] != "D":
            found[row["symbol"]] += part * float(row["relative_atomic_mass"])
    return found


ELECTRON_U = 5.48579909e-4
STAGES = {"I": 0, "II": 1, "III": 2, "IV": 3}


def compare_lines(name, lines, published, levels):
    """Yields a sentence for each line that disagrees; counts those compared."""
    rows = published.get(name, [])
    wavelengths = [row[0] for row in rows]
    compared = 0
    for line in lines:
        near = rows[
            bisect.bisect_left(wavelengths, line["wavelength"] * (1 - 1e-4)):
            bisect.bisect_right(wavelengths, line["wavelength"] * (1 + 1e-4))
        ]
        # The same transition: both weights, both energies and the multipole.
        same = [
            row for row in near
            if row[4:6] == (line["g_lower"], line["g_upper"])
            and row[2] is not None and abs(row[2] - line["e_lower"]) < 0.5
            and row[3] is not None and abs(row[3] - line["e_upper"]) < 0.5
        ]
        for level in ("lower", "upper"):
            energies = levels.get((name, line[f"g_{level}"]), [])
            if energies:
                off = min(abs(energy - line[f"e_{level}"]) for energy in energies)
                if off > 0.5 and line["source"] == "memory":
                    yield f"{line['wavelength']} nm: no published {level} level of that weight within 0.5 cm-1 (nearest {off:.3g} off)", 0
        if not same:
            if line["source"] == "asd":
                if rows and rows[0][0] <= line["wavelength"] <= rows[-1][0] and name.endswith(" I"):
                    yield f"{line['wavelength']} nm: not in the published list", 0
            continue
        compared += 1
        kinds = [row for row in same if row[6] == line["kind"]]
        best = min(kinds or same, key=lambda row: abs(math.log(row[1] / line["a"])))
        total = sum(row[1] for row in same)
        off_wavelength = line["wavelength"] / best[0] - 1
        off_a = min((line["a"] / a - 1 for a in (best[1], total)), key=abs)
        bound = A_LISTED if line["source"] == "asd" else A_MEMORY
        if abs(off_wavelength) > WAVELENGTH:
            yield f"{line['wavelength']} nm: published {best[0]} nm", 0
        if abs(off_a) > bound:
            yield f"{line['wavelength']} nm: A {line['a']:.4g}, published {best[1]:.4g} ({line['source']})", 0
        if line["source"] == "asd":
            for mine, theirs in ((line["e_lower"], best[2]), (line["e_upper"], best[3])):
                if abs(mine - theirs) > ENERGY_PER_CM:
                    yield f"{line['wavelength']} nm: level {mine}, published {theirs} cm-1", 0
    yield None, compared


def main(folder):
    published = published_lines(folder)
    masses = natural_masses(folder)
    limits_ev = {row["species"]: float(row["ionization_energy_ev"]) for row in read_csv(folder / "nist-ionization-energies.csv")}
    all_levels, by_weight = defaultdict(list), defaultdict(list)
    for row in read_csv(folder / "nist-asd-levels.csv"):
        g, energy = number(row["g"]), number(row["energy_per_cm"])
        if g and energy is not None:
            all_levels[row["species"]].append((g, energy))
            by_weight[row["species"], g].append(energy)
    bad = compared = figures = 0
    for path in sorted(TABLES.glob("*_*.txt")):
        keys, levels, lines = read_table(path)
        name = keys["name"]
        reports = []
        symbol, stage = name.split()
        mass = masses.get(symbol, 0) - STAGES[stage] * ELECTRON_U
        if masses.get(symbol):
            figures += 1
            if abs(keys["mass_u"] / mass - 1) > MASS:
                reports.append(f"mass {keys['mass_u']} u, published {mass:.6f}")
        if name in limits_ev and "ionization_energy_ev" in keys:
            figures += 1
            if abs(keys["ionization_energy_ev"] / limits_ev[name] - 1) > LIMIT:
                reports.append(f"ionization {keys['ionization_energy_ev']} eV, published {limits_ev[name]}")
        limit_per_cm = limits_ev.get(name, math.inf) * 8065.543937
        below = [(g, e) for g, e in all_levels.get(name, []) if e < limit_per_cm]
        if below:
            for kelvin in TEMPERATURES_K:
                sums = [math.fsum(g * math.exp(-e / (BOLTZMANN_PER_CM_K * kelvin)) for g, e in some) for some in (levels, below)]
                figures += 1
                if abs(sums[0] / sums[1] - 1) > PARTITION:
                    reports.append(f"partition function at {kelvin} K: {sums[0]:.5f}, published levels give {sums[1]:.5f}")
        for report, count in compare_lines(name, lines, published, by_weight):
            compared += count
            if report:
                reports.append(report)
        bad += len(reports)
        for report in reports:
            print(f"{name}: {report}")
    print(f"{compared} lines and {figures} other figures compared, {bad} disagreements")
    return 1 if bad else 0


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    sys.exit(main(pathlib.Path(sys.argv[1])))
