"""The figure of the levels: a ladder with bars, and spacings and bars against the thermal energy."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.ticker import LogLocator, NullLocator

from wiresolve.output import tables
from wiresolve.output.canvas import (
    CYCLE,
    GRID,
    INK,
    PAGE_MM,
    canvas,
    dashes_of,
    from_zero,
    label_lines,
    thermal_colour,
    titled,
)
from wiresolve.output.style import styled
from wiresolve.output.valley_names import short_valleys
from wiresolve.result import Result
from wiresolve.units import KB

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_LABELS, MOST_BARS = 24, 4


@styled
def levels(result: Result) -> Figure:
    """Levels with their bars on the left; spacing to the next level and bar against kT on the right.

    Where several groups of valleys are listed each has a line style.
    """
    groups = tables.levels(result.subbands)
    energies = 1e3 * np.array([tables.level_energy_eV(g) for g in groups])
    bars = 1e3 * np.array([max(s.error_eV for s in g) for g in groups])
    said = [tables.with_bar(e, b) for e, b in zip(energies, bars, strict=True)]
    bars = np.array([tables.printed_bar(words) for words in said])
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    thermal = [1e3 * KB * t for t in warm]
    high = min(128.0, max(56.0, 4.6 * min(len(groups), MOST_LABELS)))
    dashes = dashes_of([s.valley for s in result.subbands])
    # Names of valleys are long.
    across = 6 if len(dashes) < 2 else 4
    below = 16.0 + 4.0 * math.ceil((len(warm) + 3 + (len(dashes) if len(dashes) > 1 else 0)) / across)
    figure, rect = canvas(PAGE_MM, high + below + 8)
    margin = 0.07 * (np.ptp(energies) or max(abs(energies[0]), 1.0))
    span = (energies.min() - margin, energies.max() + margin)
    ladder, ratios = rect(15, below, 84, high), rect(112, below, 62, high)
    for group, energy, bar in zip(groups, energies, bars, strict=True):
        colour = CYCLE[0] if len(group) == 1 else CYCLE[5]
        count, gap = (len(group), 0.12) if len(group) <= 6 else (1, 0.0)
        width = (1 - gap * (count - 1)) / count
        for start, entry in zip(np.arange(count) * (width + gap), group, strict=False):
            ladder.add_patch(Rectangle((start, energy - bar), width, 2 * bar, fc=colour, alpha=0.25, lw=0))
            look = {"color": colour, "ls": dashes[entry.valley], "lw": 1.6, "solid_capstyle": "butt"}
            ladder.plot([start, start + width], [energy, energy], dash_capstyle="butt", **look)
    ladder.set_ylim(*span)
    room = _thermal_bars(ladder, float(energies[0]), thermal, warm)
    ladder.set_xlim(-room, 2.25)
    texts = [f"{words}  (×{tables.states(g)})" for words, g in zip(said, groups, strict=True)]
    label_lines(ladder, (1.03 + room) / (2.25 + room), energies[:MOST_LABELS].tolist(), texts[:MOST_LABELS], 3.9)
    ladder.set_xlim(-room, 2.25)
    ladder.set_xticks([])
    ladder.spines["bottom"].set_visible(False)
    if result.charge is not None and span[0] < 0 < span[1]:
        ladder.axhline(0.0, color=INK, lw=0.6, ls=(0, (4, 2)), zorder=0)
    ladder.set_ylabel(from_zero(result))
    titled(ladder, "Levels ± bar in meV (× states, spin and valleys counted)")
    _against_kT(ratios, energies, bars, thermal)
    ratios.set_ylim(*span)
    titled(ratios, "Spacing and bar of each level against kT")
    signs = [Line2D([], [], color=INK, marker="o", ls="", ms=3.6, label="spacing to the next level")]
    signs += [Line2D([], [], color=INK, marker="|", ls="", ms=6, mew=1.2, label="error bar")]
    for number, temperature in enumerate(warm):
        signs.append(Line2D([], [], color=thermal_colour(number), lw=2, label=f"kT at {temperature:g} K"))
    if any(len(g) > 1 for g in groups):
        signs.append(Line2D([], [], color=CYCLE[5], lw=1.6, label="several subbands"))
    if len(dashes) > 1:
        signs += [Line2D([], [], color=INK, ls=dash, lw=1.4, label=short_valleys(v)) for v, dash in dashes.items()]
    length = 1.3 if len(dashes) < 2 else 2.6
    figure.legend(handles=signs, loc="lower center", ncols=across, handlelength=length, columnspacing=1.4)
    return figure


def _thermal_bars(axes: Axes, lowest: float, thermal: Sequence[float], warm: Sequence[float]) -> float:
    """Bars of kT up from the lowest level, left of the levels; returns how far to the left they reach.

    One that does not fit is cut and has an arrow head; those too short to be seen are left out, which is said below.
    """
    low, top = axes.get_ylim()
    shown = [n for n in range(len(thermal)) if thermal[n] > 0.012 * (top - low)]
    short, shown = [n for n in range(len(thermal)) if n not in shown], shown[:MOST_BARS]
    for place, number in enumerate(shown):
        x, colour = -0.14 - 0.19 * place, thermal_colour(number)
        fits = lowest + thermal[number] <= top
        head = lowest + thermal[number] if fits else top - 0.02 * (top - low)
        axes.plot([x, x], [lowest, head], color=colour, lw=3, solid_capstyle="butt")
        if not fits:
            axes.plot([x], [head], "^", color=colour, ms=6, clip_on=False)
        word = f"kT at {warm[number]:g} K" + ("" if fits else ", longer than shown")
        axes.annotate(
            word, (x, lowest), (-2.6, 0), textcoords="offset points", rotation=90, ha="right", va="bottom", fontsize=6
        )
    if short:
        word = f"too short to draw: kT at {', '.join(f'{warm[n]:g}' for n in short[:6])} K"
        axes.annotate(word, (0, 0), (3, -3), xycoords="axes fraction", textcoords="offset points", va="top", fontsize=6)
    return 0.3 + 0.19 * max(0, len(shown))


def _against_kT(axes: Axes, energies: Any, bars: Any, thermal: Sequence[float]) -> None:
    spacing = np.diff(energies)
    axes.set_xscale("log")
    axes.hlines(energies, 0, 1, transform=axes.get_yaxis_transform(), color=GRID, lw=0.5, zorder=0)
    for number, size in enumerate(thermal):
        axes.axvline(size, color=thermal_colour(number), lw=1.6, zorder=1)
    axes.plot(spacing, energies[:-1], "o", ms=3.6, color=INK, zorder=3)
    axes.plot(bars[bars > 0], energies[bars > 0], "|", ms=6, mew=1.2, color=INK, zorder=3)
    values = np.concatenate([spacing[spacing > 0], bars[bars > 0], thermal])
    if values.size:
        axes.set_xlim(values.min() / 3, values.max() * 3)
    axes.xaxis.set_major_formatter(lambda value, _: f"{value:g}")
    axes.xaxis.set_major_locator(LogLocator(numticks=7))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.set_yticklabels([])
    axes.set_xlabel("Energy (meV)")
