"""Figures of a result, drawn headless: each function returns a Matplotlib figure; `save_all` writes PNG and SVG.

Sizes are those of a printed column (86 mm) or page (178 mm). Colours are the eight of Okabe and Ito (Color Universal
Design, 2008), which colour-blind readers tell apart, in order of appearance.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import PathPatch, Rectangle
from matplotlib.path import Path as Outline
from matplotlib.ticker import LogLocator, MaxNLocator, NullLocator

from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.output import tables
from wiresolve.output.canvas import (
    COLUMN_MM,
    CYCLE,
    INK,
    PAGE_MM,
    bare,
    canvas,
    coloured,
    dashes_of,
    extent_of,
    goes_on,
    label_lines,
    line_style,
    mark,
    mark_fermi,
    order_of_appearance,
    panels,
    round_length,
    save,
    shortened,
    small_energy,
    styled,
    thermal_colour,
)
from wiresolve.output.charge_figure import charge
from wiresolve.output.outline_figure import sensitivity
from wiresolve.output.raster import edges, near, outermost, outlines, raster
from wiresolve.output.valley_names import members, short_valleys
from wiresolve.result import Result, Subband
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_MODES, MOST_LABELS, MOST_BARS = 20, 24, 4


def _fermi_window(result: Result) -> tuple[float, float]:
    """Fermi levels in meV around the listed levels; curves at high temperatures reach much farther."""
    low = min((1e3 * float(c.fermi_eV[0]) for c in result.conductance), default=0.0)
    high = max((1e3 * float(c.fermi_eV[-1]) for c in result.conductance), default=1e3)
    bottom, top = 1e3 * float(result.energies_eV.min()), 1e3 * float(result.energies_eV.max())
    if top == bottom:
        return low, high
    return max(low, bottom - 0.15 * (top - bottom)), min(high, top + 0.05 * (top - bottom))


def _with_fermi(result: Result, low: float, high: float) -> tuple[float, float]:
    """A range in meV, widened by up to a third of itself where that brings the wire file's Fermi level into view."""
    level, room = result.problem.fermi_level_eV, 0.3 * (high - low)
    if level is None or not low - room <= 1e3 * level <= high + room:
        return low, high
    return min(low, 1e3 * level - 0.1 * room), max(high, 1e3 * level + 0.1 * room)


def _layer_colour(result: Result, order: Sequence[int], number: int) -> tuple[float, float, float]:
    """The layer's colour, softened so that lines on it can be read; paler where carriers are kept out."""
    strength = 0.72 if result.mesh.regions[number].carriers else 0.25
    red, green, blue = (1 - strength * (1 - c) for c in to_rgb(CYCLE[order.index(number) % len(CYCLE)]))
    return red, green, blue


def _filled(loops: Sequence[Any], colour: tuple[float, float, float]) -> PathPatch:
    codes = [Outline.MOVETO]
    for loop in loops:
        codes += [Outline.LINETO] * (len(loop) - 2) + [Outline.CLOSEPOLY, Outline.MOVETO]
    return PathPatch(Outline(np.concatenate(loops), codes[:-1]), fc=colour, lw=0)


def _where_seen(result: Result) -> Any:
    """Points of a frame around the section with its insulators, and around the modes where they reach farther."""
    size = np.abs(result.modes[:, :MOST_MODES])
    seen = (size > 2e-3 * size.max(axis=0)).any(axis=1)
    drawn = np.array([not goes_on(region.name) for region in result.mesh.regions])
    seen[result.mesh.cells[drawn[result.mesh.region]].ravel()] = True
    return seen


def _from_zero(result: Result) -> str:
    return "Energy (meV)" if result.charge is None else "Energy from the Fermi level (meV)"


def _energy(subband: Subband) -> str:
    """As in the printed table."""
    return f"{tables.with_bar(1e3 * subband.energy_eV, 1e3 * subband.error_eV)} meV"


@styled
def section(result: Result) -> Figure:
    """The section to scale: layers in colours in order of appearance, the curved mesh, a scale bar.

    A material that goes on outside fills the frame, which reaches as far as the modes are seen; of surroundings a
    margin is shown.
    """
    mesh = result.mesh
    found = edges(mesh)
    left, right, bottom, top = extent_of(mesh.points[_where_seen(result)])
    if result.problem.surroundings is not None:
        room = 0.12 * max(right - left, top - bottom)
        left, right, bottom, top = left - room, right + room, bottom - room, top + room
    frame_mm = 76.0
    scale = frame_mm / max(right - left, 1.25 * (top - bottom))
    wide, high = scale * (right - left), scale * (top - bottom)
    below = 9.0 + 4.2 * len(mesh.regions)
    figure, rect = canvas(COLUMN_MM, high + below + 9)
    axes = rect((COLUMN_MM - wide) / 2, below, wide, high)
    bare(axes, (left, right, bottom, top))
    order = order_of_appearance([region.name for region in mesh.regions])
    for number in order:
        loops, last = outermost(found, number)
        if mesh.regions[number].name == "outside":
            loops[last] = np.array([[left, bottom], [right, bottom], [right, top], [left, top], [left, bottom]])
        axes.add_patch(_filled(loops, _layer_colour(result, order, number)))
    fine = found.lines[~found.on_outline]
    extent = left, right, bottom, top
    axes.add_collection(LineCollection(near(fine[:, ::2], extent), colors="white", linewidths=0.35, alpha=0.75))
    axes.add_collection(LineCollection(near(outlines(mesh, found), extent), colors=INK, linewidths=0.6))
    key = rect(0, 0, COLUMN_MM, below)
    bare(key, (0, COLUMN_MM, 0, below))
    length = round_length(0.3 * (right - left))
    at = (COLUMN_MM - wide) / 2
    key.plot([at, at + scale * length], [below - 4.5] * 2, color=INK, lw=1.6, solid_capstyle="butt")
    key.text(at + scale * length + 1.5, below - 4.6, f"{length:g} nm", va="center", ha="left")
    for row, number in enumerate(order):
        region = mesh.regions[number]
        y = below - 9.0 - 4.2 * row
        key.add_patch(Rectangle((at, y - 1.2), 4.5, 2.6, fc=_layer_colour(result, order, number), ec=INK, lw=0.5))
        apart = "" if region.carriers else ", carriers kept out"
        key.text(at + 6, y, f"{region.name}: {region.material}{apart}", va="center", fontsize=7)
    figure.text(0.5, 1 - 4.0 / (high + below + 9), shortened(result.problem.title, 56), ha="center", va="center")
    return figure


@styled
def modes(result: Result) -> Figure:
    """The envelope functions in a grid, each on its own scale, white where they vanish; at most the first 20.

    Valleys are named where any subband is not of the zone centre.
    """
    shown = result.subbands[:MOST_MODES]
    extent = extent_of(result.mesh.points[_where_seen(result)])
    wide, high = extent[1] - extent[0], extent[3] - extent[2]
    columns, panel = panels(len(shown), wide / high)
    rows = math.ceil(len(shown) / columns)
    named = any(s.valley != ZONE_CENTRE for s in result.subbands)
    above = 13.0 if named else 9.5
    notes = [f"first {len(shown)} of {len(result.subbands)} subbands"] if len(shown) < len(result.subbands) else []
    if any(len(members(s.valley)[1]) > 1 for s in shown):
        notes.append("of valleys that are alike one is shown")
    pitch_x, pitch_y = (PAGE_MM - 6) / columns, panel * high / wide + above + 1
    height = rows * pitch_y + (5 if notes else 1)
    figure, rect = canvas(PAGE_MM, height)
    found = edges(result.mesh)
    lines = near(outlines(result.mesh, found), extent)
    titles = [f"subband {s.index}, level {s.level}\n{_energy(s)}" for s in shown]
    if named:
        titles = [f"{title}\n{short_valleys(s.valley)}" for title, s in zip(titles, shown, strict=True)]
    # A letter is about 0.22 mm wide for each point of its size.
    letters = max(len(line) for title in titles for line in title.splitlines())
    size = min(7.0, (pitch_x - 2.0) / (0.22 * letters))
    pixels = raster(result.mesh, extent, min(300, max(100, int(panel / 25.4 * 200))))
    for place in range(len(shown)):
        row, column = divmod(place, columns)
        at_x = 3 + column * pitch_x + (pitch_x - panel) / 2
        axes = rect(at_x, height - above - row * pitch_y - panel * high / wide, panel, panel * high / wide)
        bare(axes, extent)
        picture = coloured(pixels.image(result.modes[:, place]))
        axes.imshow(picture, origin="lower", extent=pixels.extent, interpolation="nearest", aspect="equal", zorder=1)
        axes.add_collection(LineCollection(lines, colors=INK, linewidths=0.45, zorder=2))
        bare(axes, extent)
        axes.set_title(titles[place], fontsize=size, pad=2.5, linespacing=1.25)
    if notes:
        figure.text(0.5, 1.5 / height, "; ".join(notes), ha="center", fontsize=7)
    return figure


@styled
def levels(result: Result) -> Figure:
    """Levels with their bars on the left; spacing to the next level and bar against kT on the right.

    Where several groups of valleys are listed each has a line style.
    """
    groups = tables.levels(result.subbands)
    energies = 1e3 * np.array([tables.level_energy_eV(g) for g in groups])
    bars = 1e3 * np.array([max(s.error_eV for s in g) for g in groups])
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    thermal = [1e3 * KB * t for t in warm]
    high = min(128.0, max(56.0, 4.6 * min(len(groups), MOST_LABELS)))
    dashes = dashes_of([s.valley for s in result.subbands])
    # Names of valleys are long.
    across = 6 if len(dashes) < 2 else 4
    below = 16.0 + 4.0 * math.ceil((len(warm) + 2 + (len(dashes) if len(dashes) > 1 else 0)) / across)
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
    texts = [f"{tables.with_bar(e, b)}  (×{tables.states(g)})" for e, b, g in zip(energies, bars, groups, strict=True)]
    label_lines(ladder, (1.03 + room) / (2.25 + room), energies[:MOST_LABELS].tolist(), texts[:MOST_LABELS], 3.9)
    ladder.set_xlim(-room, 2.25)
    ladder.set_xticks([])
    ladder.spines["bottom"].set_visible(False)
    if result.charge is not None and span[0] < 0 < span[1]:
        ladder.axhline(0.0, color=INK, lw=0.6, ls=(0, (4, 2)), zorder=0)
    ladder.set_ylabel(_from_zero(result))
    ladder.set_title("Levels ± bar in meV (× states, spin and valleys counted)", loc="left", pad=5, fontsize=7)
    _against_kT(ratios, energies, bars, thermal)
    ratios.set_ylim(*span)
    ratios.set_title("Spacing and bar of each level against kT", loc="left", pad=5, fontsize=7)
    signs = [Line2D([], [], color=INK, marker="o", ls="", ms=3.6, label="spacing to the next level")]
    signs += [Line2D([], [], color=INK, marker="|", ls="", ms=6, mew=1.2, label="error bar")]
    for number, temperature in enumerate(warm):
        signs.append(Line2D([], [], color=thermal_colour(number), lw=2, label=f"kT at {temperature:g} K"))
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
    axes.hlines(energies, 0, 1, transform=axes.get_yaxis_transform(), color="#e4e4e4", lw=0.5, zorder=0)
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


@styled
def density_of_states(result: Result) -> Figure:
    """Density of states as exact averages over energy bins, with the inverse-square-root edges marked."""
    data = result.density_of_states
    figure, rect = canvas(COLUMN_MM, 62)
    axes = rect(15, 11, COLUMN_MM - 19, 62 - 17)
    at, density = 1e3 * data.edges_eV, 1e-3 * data.per_eV_nm
    axes.stairs(density, at, fill=True, color=CYCLE[0], alpha=0.25, lw=0)
    axes.stairs(density, at, color=CYCLE[0], lw=0.9)
    axes.set_xlim(at[0], at[-1])
    axes.set_ylim(0, 1.06 * max(float(np.max(density, initial=0.0)), 1e-15))
    mark(axes, 1e3 * data.singular_at_eV)
    axes.set_xlabel(_from_zero(result))
    axes.set_ylabel("Density of states (1/(meV nm))")
    axes.set_title("Averages over bins; infinite at the edges marked", loc="left", pad=7, fontsize=7)
    return figure


@styled
def dispersion(result: Result) -> Figure:
    """Energy along the wire's axis, a line a subband, mirrored where the table starts at k = 0.

    Where several groups of valleys are listed each has a line style. Where the table reaches so far that the levels
    would run together, only the part around k = 0 is shown.
    """
    data = result.dispersion
    dashes = dashes_of([s.valley for s in result.subbands])
    below = 11 + (4.0 * math.ceil(len(dashes) / 2) + 1 if len(dashes) > 1 else 0)
    figure, rect = canvas(COLUMN_MM, below + 62)
    axes = rect(15, below, COLUMN_MM - 25, 53)
    k, energy = data.k_per_nm, 1e3 * data.energy_eV
    far = np.flatnonzero(energy[0] - energy[0, 0] > 1.6 * np.ptp(energy[:, 0]))
    if len(far) and np.ptp(energy[:, 0]) > 0:
        kept = max(int(far[0]) + 1, 12)
        k, energy = k[:kept], energy[:, :kept]
    if k.size and k[0] == 0:
        k, energy = np.concatenate([-k[:0:-1], k]), np.concatenate([energy[:, :0:-1], energy], axis=1)
    for subband, line in zip(result.subbands, energy, strict=True):
        colour, dash = line_style(subband.level - 1)
        axes.plot(k, line, color=colour, ls=dash if len(dashes) < 2 else dashes[subband.valley], lw=1.0)
    axes.set_xlim(k[0], k[-1])
    low, high = float(energy.min()), float(energy.max())
    axes.set_ylim(*_with_fermi(result, low - 0.03 * (high - low), high + 0.03 * (high - low)))
    mark_fermi(axes, result, "y")
    last = {subband.level: float(line[-1]) for subband, line in zip(result.subbands, energy, strict=True)}
    gap = 3.2 / 53 * (axes.get_ylim()[1] - axes.get_ylim()[0])
    labelled: list[int] = []
    for level in sorted(last, key=lambda n: last[n]):
        if len(last) <= 12 or not labelled or last[level] - last[labelled[-1]] >= gap:
            labelled.append(level)
    label_lines(axes, 1.0, [last[level] for level in labelled], [str(level) for level in labelled], 3.2)
    axes.set_xlim(k[0], k[-1])
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.set_xlabel("Wave number along the wire (1/nm)")
    axes.set_ylabel("Energy (meV)")
    bound = small_energy(data.error_bound_eV)
    axes.set_title(
        f"Levels numbered; beyond the bars of the minima,\nerror of E(k) below {bound}", loc="left", pad=4, fontsize=6.5
    )
    if len(dashes) > 1:
        signs = [Line2D([], [], color=INK, ls=dash, lw=1.0, label=short_valleys(v)) for v, dash in dashes.items()]
        figure.legend(handles=signs, loc="lower center", ncols=2, handlelength=2.6, columnspacing=1.4)
    return figure


@styled
def conductance(result: Result) -> Figure:
    """Ballistic conductance against the Fermi level at each temperature, in G0 and in microsiemens.

    With gates or charge the potential is kept as it is at the source's Fermi level, and axis and title say so: what a
    gate does is another curve (`gate_curve_figures.staircase`).
    """
    kept = result.charge is not None
    figure, rect = canvas(COLUMN_MM, 69.5 if kept else 66)
    axes = rect(12, 11, COLUMN_MM - 28, 66 - 17)
    top, window = 1.0, _with_fermi(result, *_fermi_window(result))
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    for curve in result.conductance:
        kelvin = curve.temperature_K
        colour, width = (thermal_colour(warm.index(kelvin)), 1.3) if kelvin in warm else (INK, 0.6)
        fermi_meV = 1e3 * curve.fermi_eV
        axes.plot(fermi_meV, curve.values, color=colour, lw=width, label=f"{kelvin:g} K")
        shown = (fermi_meV >= window[0]) & (fermi_meV <= window[1])
        top = max(top, float(np.max(curve.values[shown], initial=0.0)))
    if result.conductance:
        axes.set_xlim(*window)
        axes.legend(
            loc="upper left", handlelength=1.4, borderpad=0.2, ncols=1 + len(result.conductance) // 6, columnspacing=1.0
        )
    axes.set_ylim(0, 1.06 * top)
    step = max(1, math.ceil(top / 12))
    axes.set_yticks(np.arange(0, math.floor(1.06 * top) + 1, step))
    axes.grid(axis="y", color="#e4e4e4", lw=0.5)
    axes.set_axisbelow(True)
    mark_fermi(axes, result, "x")
    mark(axes, [1e3 * tables.level_energy_eV(g) for g in tables.levels(result.subbands)])
    axes.set_xlabel("Fermi level (meV)")
    axes.set_ylabel("Conductance (G0 = 2e²/h)")
    other = axes.twinx()
    other.spines["right"].set_visible(True)
    other.set_ylim(0, 1.06 * top * 1e6 * CONDUCTANCE_QUANTUM_SIEMENS)
    other.set_ylabel("Conductance (µS)")
    transport = result.problem.transport
    open_ = transport is None or transport.is_open
    title = "Ballistic, transmission 1; levels marked" if open_ else "With transmission and contacts; levels marked"
    if kept:
        axes.set_xlabel("Fermi level, the potential kept (meV)")
        title = "Not the staircase of a gate, which moves the levels too:\n" + title[0].lower() + title[1:]
    axes.set_title(title, loc="left", pad=7, fontsize=6.5 if kept else 7)
    return figure


FIGURES = MappingProxyType(
    {
        "section": section,
        "modes": modes,
        "levels": levels,
        "density_of_states": density_of_states,
        "dispersion": dispersion,
        "conductance": conductance,
        "sensitivity": sensitivity,
        "charge": charge,
    }
)


def drawable(result: Result) -> Sequence[str]:
    """Names of the figures that the result has data for."""
    missing = set() if len(result.outline_sensitivity.segments) else {"sensitivity"}
    missing |= {"charge"} if result.charge is None else set()
    return [name for name in FIGURES if name not in missing]


def save_all(result: Result, folder: str | Path) -> list[Path]:
    """Write every figure that the result has data for, as PNG and SVG, into an existing folder.

    The same result gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    return save(FIGURES, drawable(result), result, folder)
