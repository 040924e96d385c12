#!/usr/bin/env python3
"""The maps of the Kestrel Veil as one picture.

    picture.py CUBE.h5 MAPS.h5 PICTURE.png
"""

import sys

import h5py
import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt
import numpy as np
from compare import read_maps
from matplotlib.colors import BoundaryNorm, ListedColormap, LogNorm, Normalize
from matplotlib.patches import Patch

INK = "#1b2430"
PALE = "#e7e9ec"  # no answer
# Three colours that stay apart for colour-blind readers (Okabe & Ito 2008).
SPECTRUM_COLOURS = ["#0072b2", "#4d4d4d", "#d55e00"]
STYLE = {
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.6,
    "axes.titlesize": 9.5,
    "axes.titlelocation": "left",
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.direction": "out",
}

# Map, title, label of the colour bar, colours.
PANELS = [
    ("cloud1_temperature", "Gas temperature", "K", "inferno"),
    ("cloud1_temperature_sigma", "... and its uncertainty", "K, 1 sigma", "magma"),
    ("background_temperature", "Star field behind it", "K", "cividis"),
    ("cloud1_velocity", "Velocity of the gas", "km s$^{-1}$, positive = receding", "berlin"),
    ("cloud1_log10_column_Ca_II", "Ca II column", "log$_{10}$ (cm$^{-2}$)", "viridis"),
    ("cloud1_log10_column_Na_I", "Na I column", "log$_{10}$ (cm$^{-2}$)", "viridis"),
    ("cloud1_log10_column_K_I", "K I column", "log$_{10}$ (cm$^{-2}$)", "viridis"),
]
# Shown in this order of precedence; the first two are for pixels where no column at all was found.
NOTHING = ("no line seen", "#c8ccd2")
FLAGS = [
    ("no_contrast", "as hot as the stars", "#cc79a7"),
    ("at_bound", "at a bound", "#e69f00"),
    ("degenerate", "cannot be told apart", "#8c6bb1"),
    ("poor_fit", "poor fit", "#d55e00"),
    ("saturated", "saturated", "#56b4e9"),
    ("not_detected", "a species not detected", "#b8d8c8"),
]


def draw_map(axes, figure, values, title, label, colours, centred=False, logarithmic=False):
    """One map with its colour bar; pixels without an answer stay pale."""
    shown = np.ma.masked_invalid(values)
    inside = shown.compressed()
    # A few wild pixels must not take the colours of all others.
    low, high = np.percentile(inside, [2, 98]) if inside.size else (0, 1)
    if centred:
        high = max(abs(low), abs(high))
        low = -high
    axes.set_facecolor(PALE)
    norm = LogNorm(low, high) if logarithmic else Normalize(low, high)
    image = axes.imshow(shown, origin="lower", cmap=colours, norm=norm, interpolation="nearest")
    axes.set_title(title)
    axes.set_xticks([])
    axes.set_yticks([])
    bar = figure.colorbar(image, ax=axes, orientation="horizontal", pad=0.03, shrink=0.94, aspect=28)
    bar.set_label(label, labelpad=2)
    bar.outline.set_linewidth(0.4)
    if not logarithmic:
        bar.locator = matplotlib.ticker.MaxNLocator(5)
        bar.update_ticks()


def draw_flags(axes, flags, bits, nothing):
    """Which pixels to trust, and why not; `nothing`: where no column was found."""
    legend = [("no flag", "#1f7a5c"), NOTHING, *[(label, colour) for _, label, colour in FLAGS], ("other", "#000000")]
    state = np.full(flags.shape, len(legend) - 1)
    state[flags == 0] = 0
    for place, (name, _, _) in reversed(list(enumerate(FLAGS, start=2))):
        state[flags & bits.get(name, 0) > 0] = place
    state[nothing] = 1
    present = [place for place in range(len(legend)) if np.any(state == place)]
    image = axes.imshow(
        state,
        origin="lower",
        cmap=ListedColormap([colour for _, colour in legend]),
        norm=BoundaryNorm(np.arange(len(legend) + 1) - 0.5, len(legend)),
        interpolation="nearest",
    )
    axes.set_title("Can it be trusted?")
    axes.set_xticks([])
    axes.set_yticks([])
    patches = [Patch(color=legend[place][1], label=legend[place][0]) for place in present]
    # The legend stands where the other maps have their colour bars, in a bar without colours.
    bar = axes.figure.colorbar(image, ax=axes, orientation="horizontal", pad=0.03, shrink=0.94, aspect=28)
    bar.set_label(" ", labelpad=2)
    bar.outline.set_visible(False)
    bar.solids.set_alpha(0)
    bar.ax.tick_params(labelcolor="none", length=0)
    bar.ax.legend(
        handles=patches,
        loc="upper center",
        bbox_to_anchor=(0.5, 2.2),
        ncols=2,
        frameon=False,
        fontsize=7.5,
        handlelength=1.1,
        handleheight=0.6,
        labelspacing=0.25,
        columnspacing=0.9,
    ).set_in_layout(False)


def choose_pixels(maps, bits):
    """One pixel each in absorption, as hot as its background, and in emission."""
    contrast = maps["cloud1_temperature"] - maps["background_temperature"]
    column = maps["cloud1_log10_column_Ca_II"]
    # How many pixels around show gas: what hides in their middle is hidden by its temperature.
    found = np.pad(np.isfinite(column), 3).astype(int)
    around = np.lib.stride_tricks.sliding_window_view(found, (7, 7)).sum(axis=(2, 3))
    good = (maps["flags"] == 0) & np.isfinite(contrast)
    chosen = []
    for wanted, where in [
        (lambda: np.where(good, contrast - 0.0, np.inf), good & (contrast < 0)),
        (None, maps["flags"] & bits["no_contrast"] > 0),
        (lambda: np.where(good, -contrast, np.inf), good & (contrast > 0)),
    ]:
        if not np.any(where):
            chosen.append(None)
            continue
        if wanted is None:
            score = np.where(where, -around, np.inf)
        else:
            # Deep contrast and much gas.
            score = np.where(where, wanted() / 1000 - 1.5 * np.nan_to_num(column, nan=0.0), np.inf)
        chosen.append(np.unravel_index(np.argmin(score), score.shape))
    return chosen


def draw_spectra(slots, cube_path, pixels):
    """The spectra of three pixels in the four windows of the spectrograph."""
    labels = ["cooler than the stars", "as hot as the stars", "hotter than the stars"]
    with h5py.File(cube_path) as source:
        wavelength = source["wavelength"][...]
        unit = source["wavelength"].attrs.get("units", "nm")
        if (unit.decode() if isinstance(unit, bytes) else unit) == "m":
            wavelength = wavelength * 1e9
        spectra = [None if pixel is None else source["intensity"][pixel[0], pixel[1], :] for pixel in pixels]
    gaps = np.flatnonzero(np.diff(wavelength) > 5)
    windows = np.split(np.arange(len(wavelength)), gaps + 1)
    names = ["Ca II K, H", "Na I D", "K I", "Ca II triplet"]
    for axes, window, name in zip(slots, windows, names):
        # The channels at the ends of a window reach half-way to the next one and are not in use.
        inner = window[2:-2]
        for spectrum, colour, label, lift in zip(spectra, SPECTRUM_COLOURS, labels, (-0.25, 0.0, 0.25)):
            if spectrum is None:
                continue
            level = np.median(spectrum[inner])
            axes.step(wavelength[inner], spectrum[inner] / level + lift, where="mid", color=colour, lw=0.9, label=label)
        axes.set_title(name)
        axes.set_xlim(wavelength[inner[0]], wavelength[inner[-1]])
        axes.xaxis.set_major_locator(matplotlib.ticker.MaxNLocator(4))
        axes.spines[["top", "right"]].set_visible(False)
        axes.set_xlabel("vacuum wavelength, nm")
    slots[0].set_ylabel("radiance / its median,\napart by 0.25")
    for axes in slots[1:]:
        axes.sharey(slots[0])
        axes.tick_params(labelleft=False)
    slots[-1].legend(loc="upper right", frameon=False, fontsize=8, reverse=True, labelcolor="linecolor")


def main(cube_path, maps_path, picture_path):
    """Draws and saves."""
    plt.rcParams.update(STYLE)
    maps, _, bits = read_maps(maps_path)
    figure = plt.figure(figsize=(12.4, 10.6), layout="constrained")
    figure.get_layout_engine().set(w_pad=0.06, h_pad=0.07, hspace=0.02)
    grid = figure.add_gridspec(3, 4, height_ratios=[1.28, 1.28, 0.78])
    pixels = choose_pixels(maps, bits)
    first = None
    # Values that the flags call a guess are left out; saturated ones stay, with their large uncertainty.
    guess = sum(bits[flag] for flag in ("not_converged", "at_bound", "no_contrast", "degenerate"))
    doubtful = (maps["flags"] & guess) > 0
    for place, (name, title, label, colours) in enumerate(PANELS):
        axes = figure.add_subplot(grid[place // 4, place % 4])
        first = first or axes
        values = np.where(doubtful & name.startswith("cloud"), np.nan, maps[name])
        draw_map(axes, figure, values, title, label, colours, name.endswith("velocity"), name.endswith("sigma"))
    for pixel, colour in zip(pixels, SPECTRUM_COLOURS):
        if pixel is not None:
            first.plot(pixel[1], pixel[0], "o", ms=7, mfc="none", mec="white", mew=2.6)
            first.plot(pixel[1], pixel[0], "o", ms=7, mfc="none", mec=colour, mew=1.3)
    nothing = np.all([np.isnan(maps[name]) for name, *_ in PANELS if "column" in name], axis=0)
    draw_flags(figure.add_subplot(grid[1, 3]), maps["flags"], bits, nothing)
    draw_spectra([figure.add_subplot(grid[2, column]) for column in range(4)], cube_path, pixels)
    figure.suptitle(
        "The Kestrel Veil, an invented nebula in front of a star field", x=0.012, ha="left", fontsize=13, weight="bold"
    )
    figure.savefig(picture_path, dpi=150)


if __name__ == "__main__":
    if len(sys.argv) != 4:
        sys.exit(__doc__)
    main(*sys.argv[1:])
