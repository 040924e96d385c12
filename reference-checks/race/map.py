"""The whole program on a whole cube: time and memory of `backlit map`.

    python3 reference-checks/race/map.py               300 x 300 pixels of 1000 channels, on one thread and on two
    python3 reference-checks/race/map.py --quick       60 x 60 pixels, to see that it works
    python3 reference-checks/race/map.py --scaling     also tables against pixels, channels, lines and threads

The cube is invented: two species with ten lines, seven free values, smooth maps of all of them, fresh noise in every channel.
`backlit predict --cube` makes it. Needs nothing but Python's own library and cargo. Exits with 1 where a target is missed: 25 s on two
cores, 400 MiB.
"""

import argparse
import json
import math
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
SECONDS, MEBIBYTES = 25.0, 400.0
FIRST_NM, STEP_NM, FWHM_NM = 496.0, 0.008, 0.02
# Lower level in cm^-1 and strength relative to the strongest line of the species.
STRENGTHS = [(0, 1.0), (4500, 0.9), (400, 0.5), (7000, 0.4), (2500, 0.2)]
LEVELS = [(9, 0), (7, 400), (5, 800), (9, 2500), (11, 4500), (7, 7000), (15, 20000)]
SPECIES = [("Xa I", 56), ("Xb I", 40)]


def write_setup(folder, channels, lines):
    """Tables and setup; the lines share the range evenly, in turn of one species and the other."""
    table = ["g,energy_per_cm"] + [f"{g},{energy}" for g, energy in LEVELS]
    (folder / "levels.csv").write_text("\n".join(table) + "\n")
    tables = [["wavelength_vac_nm,a_ki_per_s,e_lower_per_cm,g_lower,g_upper,gamma_per_s"] for _ in SPECIES]
    for k in range(lines):
        wavelength = FIRST_NM + STEP_NM * channels * (k + 0.5 + 0.2 * math.sin(3.0 * k)) / lines
        energy, strength = STRENGTHS[k // 2 % len(STRENGTHS)]
        g_lower = next(g for g, level in LEVELS if level == energy)
        tables[k % 2].append(f"{wavelength:.5f},{1.5e7 * strength:.6g},{energy},{g_lower},5,2e7")
    for s, rows in enumerate(tables):
        (folder / f"lines{s}.csv").write_text("\n".join(rows) + "\n")
    text = f"""
[instrument]
fwhm_nm = {FWHM_NM}

[background]
temperature_K = {{ find = [3000, 9000] }}

[[cloud]]
temperature_K = {{ find = [500, 8000] }}
velocity_km_s = {{ find = [-200, 200] }}
turbulence_km_s = {{ find = [0.5, 20] }}
[cloud.column_cm2]
"""
    text += "".join(f'"{name}" = {{ find = [1e11, 1e17] }}\n' for name, _ in SPECIES)
    for s, (name, mass) in enumerate(SPECIES):
        text += f'\n[[species]]\nname = "{name}"\nmass_u = {mass}\nlines = "lines{s}.csv"\nlevels = "levels.csv"\n'
    (folder / "cloud.toml").write_text(text)


def write_values(path, size):
    """Maps as a nebula has them: a rotation, a warm middle, two columns with centres of their own."""
    names = "y,x,background_temperature,cloud1_temperature,cloud1_velocity,cloud1_turbulence"
    rows = [names + ",cloud1_log10_column_Xa_I,cloud1_log10_column_Xb_I"]
    for y in range(size):
        for x in range(size):
            u, v = 2 * x / size - 1, 2 * y / size - 1
            r2 = u * u + v * v
            values = [
                5800 + 200 * u,
                2500 + 800 * math.exp(-2 * r2),
                60 * math.tanh(2 * u) + 10 * v,
                4 + 2 * math.exp(-3 * r2),
                13.6 + 0.5 * math.exp(-2 * r2),
                13.7 + 0.3 * u * v,
            ]
            rows.append(f"{y},{x}," + ",".join(f"{value:.8g}" for value in values))
    path.write_text("\n".join(rows) + "\n")


def run(arguments):
    """Standard output, seconds, seconds of processor time and peak memory in MiB of a command."""
    began = time.monotonic()
    with tempfile.TemporaryFile() as output:
        process = subprocess.Popen([str(a) for a in arguments], stdout=output)
        _, status, used = os.wait4(process.pid, 0)
        seconds = time.monotonic() - began
        process.returncode = os.waitstatus_to_exitcode(status)
        if process.returncode != 0:
            sys.exit(f"{' '.join(map(str, arguments))}: exit code {process.returncode}")
        output.seek(0)
        text = output.read().decode()
    return text, seconds, used.ru_utime + used.ru_stime, used.ru_maxrss / 1024


class Bench:
    def __init__(self, program, folder):
        self.program, self.folder = program, folder
        print("  pixels  channels  lines  threads   seconds  processor  spectra/s      MiB  flagged", flush=True)

    def cube(self, size, channels, lines):
        write_setup(self.folder, channels, lines)
        write_values(self.folder / "values.csv", size)
        last = FIRST_NM + STEP_NM * (channels - 1)
        # A hair more than the last channel, so that rounding does not lose it.
        command = [self.program, "predict", self.folder / "cloud.toml", "--quiet", "--overwrite"]
        command += ["--range", f"{FIRST_NM}..{last + 0.01 * STEP_NM:.6f}", "--step", STEP_NM, "--noise", 70]
        command += ["--cube", f"{size},{size}", "--vary", self.folder / "values.csv", "-o", self.folder / "cube.h5"]
        run(command)

    def map(self, size, channels, lines, threads):
        command = [self.program, "map", self.folder / "cube.h5", "--setup", self.folder / "cloud.toml", "--overwrite"]
        command += ["-o", self.folder / "maps.h5", "--threads", threads, "--quiet", "--json"]
        text, seconds, processor, peak = run(command)
        summary = json.loads(text)
        print(
            f"{size * size:8} {channels:9} {lines:6} {threads:8} {seconds:9.2f} {processor:10.2f} "
            f"{summary['pixels'] / seconds:10.0f} {peak:8.0f} {summary['flagged']:8}",
            flush=True,
        )
        return seconds, peak


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--quick", action="store_true")
    parser.add_argument("--scaling", action="store_true")
    parser.add_argument("--program", type=Path, help="a backlit that is built already")
    options = parser.parse_args()
    program = options.program
    if program is None:
        subprocess.run(["cargo", "build", "--release", "--quiet", "--bin", "backlit"], cwd=ROOT, check=True)
        target = Path(os.environ.get("CARGO_TARGET_DIR", ROOT / "target"))
        program = target / "release" / "backlit"
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    size, channels, lines = (60 if options.quick else 300), 1000, 10
    missed = []
    with tempfile.TemporaryDirectory() as name:
        bench = Bench(program, Path(name))
        bench.cube(size, channels, lines)
        one, _ = bench.map(size, channels, lines, 1)
        two, peak = bench.map(size, channels, lines, 2)
        print(f"two threads are {one / two:.2f} times as fast as one; load of the machine {os.getloadavg()[0]:.1f}")
        if not options.quick:
            if two > SECONDS:
                missed.append(f"{two:.1f} s on two threads, target {SECONDS:.0f}")
            if peak > MEBIBYTES:
                missed.append(f"{peak:.0f} MiB, target {MEBIBYTES:.0f}")
        if options.scaling:
            small = 60
            cases = [(side, channels, lines) for side in (30, 60, 120, 240)]
            cases += [(small, n, lines) for n in (250, 500, 2000, 4000)]
            cases += [(small, channels, n) for n in (2, 20, 40)]
            for case in cases:
                bench.cube(*case)
                bench.map(*case, 2)
            bench.cube(small, channels, lines)
            for threads in (1, 2, 4):
                bench.map(small, channels, lines, threads)
    for target in missed:
        print(f"missed: {target}", file=sys.stderr)
    sys.exit(1 if missed else 0)


if __name__ == "__main__":
    main()
