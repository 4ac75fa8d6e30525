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
from matplotlib.transforms import blended_transform_factory

from wiresolve.output import tables
from wiresolve.output.canvas import (
    COLUMN_MM,
    CYCLE,
    FAINT,
    INK,
    PAGE_MM,
    bare,
    canvas,
    coloured,
    style,
    styled,
    thermal_colour,
)
from wiresolve.output.raster import Edges, edges, outline, raster
from wiresolve.result import Result, Subband
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_MODES, MOST_LABELS = 20, 24


def _extent(points: Any) -> tuple[float, float, float, float]:
    (left, bottom), (right, top) = points.min(axis=0), points.max(axis=0)
    edge = 0.01 * max(right - left, top - bottom)
    return float(left - edge), float(right + edge), float(bottom - edge), float(top + edge)


def _fermi_window(result: Result) -> tuple[float, float]:
    """Fermi levels around the listed levels; curves at high temperatures reach much farther."""
    low = min((float(c.fermi_eV[0]) for c in result.conductance), default=0.0)
    high = max((float(c.fermi_eV[-1]) for c in result.conductance), default=1.0)
    bottom, top = float(result.energies_eV.min()), float(result.energies_eV.max())
    if top == bottom:
        return low, high
    return max(low, bottom - 0.15 * (top - bottom)), min(high, top + 0.05 * (top - bottom))


def _mark(axes: Axes, energies_eV: Any) -> None:
    """Small triangles above the axes at the energies that are in view; few enough ticks for the narrow column."""
    low, high = axes.get_xlim()
    at = np.array([e for e in energies_eV if low <= e <= high])
    across = blended_transform_factory(axes.transData, axes.transAxes)
    axes.plot(at, np.full(len(at), 1.02), "v", ms=3.0, color=CYCLE[5], transform=across, clip_on=False)
    axes.set_xlim(low, high)
    axes.xaxis.set_major_locator(MaxNLocator(6))
    axes.ticklabel_format(axis="x", useOffset=False)


def _order_of_appearance(names: Sequence[str]) -> list[int]:
    """Regions from the core outwards, then patches, then what is outside."""

    def rank(number: int) -> tuple[int, int]:
        kind, _, count = names[number].partition(" ")
        known = {"core": 0, "layer": 1, "patch": 2, "outside": 4}
        return known.get(kind, 3), int(count) if count.isdigit() else number

    return sorted(range(len(names)), key=rank)


def _layer_colour(result: Result, order: Sequence[int], number: int) -> tuple[float, float, float]:
    """The layer's colour, softened so that lines on it can be read; paler where carriers are kept out."""
    strength = 0.72 if result.mesh.regions[number].carriers else 0.25
    red, green, blue = (1 - strength * (1 - c) for c in to_rgb(CYCLE[order.index(number) % len(CYCLE)]))
    return red, green, blue


def _filled(found: Edges, region: int, colour: tuple[float, float, float]) -> PathPatch:
    loops = outline(found, region)
    codes = [Outline.MOVETO]
    for loop in loops:
        codes += [Outline.LINETO] * (len(loop) - 2) + [Outline.CLOSEPOLY, Outline.MOVETO]
    return PathPatch(Outline(np.concatenate(loops), codes[:-1]), fc=colour, lw=0)


def _round_length(about: float) -> float:
    power = 10.0 ** math.floor(math.log10(about))
    return max(m * power for m in (1, 2, 5) if m * power <= about)


def _shortened(text: str, most: int) -> str:
    """One line of text; dollar signs would start a formula."""
    line = " ".join(text.split()).replace("$", r"\$")
    return line if len(line) <= most else line[: most - 3].rstrip() + "..."


def _where_seen(result: Result) -> Any:
    """Points of a frame around the drawn section, or around the modes where the section extends far outside."""
    size = np.abs(result.modes[:, :MOST_MODES])
    seen = (size > 2e-3 * size.max(axis=0)).any(axis=1)
    drawn = np.array([region.name != "outside" for region in result.mesh.regions])
    seen[result.mesh.cells[drawn[result.mesh.region]].ravel()] = True
    return seen


def _grid(count: int, aspect: float) -> tuple[int, float]:
    """Columns and panel width in mm that leave least of the page (at most 215 mm high) empty."""
    best, most = (5, 12.0), 0.0
    for columns in range(1, min(5, count) + 1):
        rows = math.ceil(count / columns)
        panel = min((PAGE_MM - 6) / columns - 3, (215 / rows - 10.5) * aspect, 75.0, 60.0 * aspect)
        covered = count * panel**2 / aspect / (rows * (panel / aspect + 10.5))
        if panel > 0 and covered > most:
            best, most = (columns, panel), covered
    return best


def _energy(subband: Subband) -> str:
    # A bar below a tenth of a microelectronvolt is shown as one, for want of room.
    return f"{tables.with_bar(1e3 * subband.energy_eV, max(1e3 * subband.error_eV, 1e-4))} meV"


def _small_energy(energy_eV: float) -> str:
    for unit, size in (("meV", 1e-3), ("µeV", 1e-6), ("neV", 1e-9)):
        if energy_eV >= size:
            return f"{float(f'{energy_eV / size:.2g}'):g} {unit}"
    return "1 neV"


def _spread(places: Any, gap: float, span: tuple[float, float]) -> Any:
    """Ascending label places at least `gap` apart, inside `span` where they fit, as near to `places` as that allows."""
    out = np.array(places, dtype=float)
    for i in range(1, len(out)):
        out[i] = max(out[i], out[i - 1] + gap)
    out[-1] = min(out[-1], span[1])
    for i in range(len(out) - 2, -1, -1):
        out[i] = min(out[i], out[i + 1] - gap)
    return out


@styled
def section(result: Result) -> Figure:
    """The section to scale: layers in colours in order of appearance, the curved mesh, a scale bar.

    A material that goes on outside is shown as far as the modes are seen.
    """
    mesh = result.mesh
    found = edges(mesh)
    left, right, bottom, top = _extent(mesh.points[_where_seen(result)])
    frame_mm = 76.0
    scale = frame_mm / max(right - left, 1.25 * (top - bottom))
    wide, high = scale * (right - left), scale * (top - bottom)
    below = 9.0 + 4.2 * len(mesh.regions)
    figure, rect = canvas(COLUMN_MM, high + below + 9)
    axes = rect((COLUMN_MM - wide) / 2, below, wide, high)
    bare(axes, (left, right, bottom, top))
    order = _order_of_appearance([region.name for region in mesh.regions])
    for number in order:
        axes.add_patch(_filled(found, number, _layer_colour(result, order, number)))
    fine = found.lines[~found.on_outline]
    axes.add_collection(LineCollection(list(fine[:, ::2]), colors="white", linewidths=0.35, alpha=0.75))
    axes.add_collection(LineCollection(list(found.lines[found.on_outline]), colors=INK, linewidths=0.6))
    key = rect(0, 0, COLUMN_MM, below)
    bare(key, (0, COLUMN_MM, 0, below))
    length = _round_length(0.3 * (right - left))
    at = (COLUMN_MM - wide) / 2
    key.plot([at, at + scale * length], [below - 4.5] * 2, color=INK, lw=1.6, solid_capstyle="butt")
    key.text(at + scale * length + 1.5, below - 4.6, f"{length:g} nm", va="center", ha="left")
    for row, number in enumerate(order):
        region = mesh.regions[number]
        y = below - 9.0 - 4.2 * row
        key.add_patch(Rectangle((at, y - 1.2), 4.5, 2.6, fc=_layer_colour(result, order, number), ec=INK, lw=0.5))
        apart = "" if region.carriers else ", carriers kept out"
        key.text(at + 6, y, f"{region.name}: {region.material}{apart}", va="center", fontsize=7)
    figure.text(0.5, 1 - 4.0 / (high + below + 9), _shortened(result.problem.title, 56), ha="center", va="center")
    return figure


@styled
def modes(result: Result) -> Figure:
    """The envelope functions in a grid, each on its own scale, white where they vanish; at most the first 20."""
    shown = result.subbands[:MOST_MODES]
    extent = _extent(result.mesh.points[_where_seen(result)])
    wide, high = extent[1] - extent[0], extent[3] - extent[2]
    columns, panel = _grid(len(shown), wide / high)
    rows = math.ceil(len(shown) / columns)
    pitch_x, pitch_y = (PAGE_MM - 6) / columns, panel * high / wide + 10.5
    height = rows * pitch_y + (5 if len(shown) < len(result.subbands) else 1)
    figure, rect = canvas(PAGE_MM, height)
    found = edges(result.mesh)
    lines = list(found.lines[found.on_outline])
    pixels = raster(result.mesh, extent, min(300, max(100, int(panel / 25.4 * 200))))
    for place, subband in enumerate(shown):
        row, column = divmod(place, columns)
        at_x = 3 + column * pitch_x + (pitch_x - panel) / 2
        axes = rect(at_x, height - 9.5 - row * pitch_y - panel * high / wide, panel, panel * high / wide)
        bare(axes, extent)
        picture = coloured(pixels.image(result.modes[:, place]))
        axes.imshow(picture, origin="lower", extent=pixels.extent, interpolation="nearest", aspect="equal", zorder=1)
        axes.add_collection(LineCollection(lines, colors=INK, linewidths=0.45, zorder=2))
        bare(axes, extent)
        title = f"subband {subband.index}, level {subband.level}\n{_energy(subband)}"
        axes.set_title(title, fontsize=7, pad=2.5, linespacing=1.25)
    if len(shown) < len(result.subbands):
        note = f"first {len(shown)} of {len(result.subbands)} subbands"
        figure.text(0.5, 1.5 / height, note, ha="center", fontsize=7)
    return figure


@styled
def levels(result: Result) -> Figure:
    """Levels with their bars on the left; spacing to the next level and bar against kT on the right."""
    groups = tables.levels(result.subbands)
    energies = 1e3 * np.array([tables.level_energy_eV(g) for g in groups])
    bars = 1e3 * np.array([max(s.error_eV for s in g) for g in groups])
    thermal = [1e3 * KB * t for t in result.problem.carriers.temperature_K if t > 0]
    high = min(128.0, max(56.0, 4.6 * min(len(groups), MOST_LABELS)))
    figure, rect = canvas(PAGE_MM, high + 28)
    margin = 0.07 * (np.ptp(energies) or max(abs(energies[0]), 1.0))
    span = (energies.min() - margin, energies.max() + margin)
    ladder, ratios = rect(15, 20, 84, high), rect(112, 20, 62, high)
    for group, energy, bar in zip(groups, energies, bars, strict=True):
        colour = CYCLE[0] if len(group) == 1 else CYCLE[5]
        count, gap = (len(group), 0.12) if len(group) <= 6 else (1, 0.0)
        width = (1 - gap * (count - 1)) / count
        for start in np.arange(count) * (width + gap):
            ladder.add_patch(Rectangle((start, energy - bar), width, 2 * bar, fc=colour, alpha=0.25, lw=0))
            ladder.plot([start, start + width], [energy, energy], color=colour, lw=1.6, solid_capstyle="butt")
    places = _spread(energies[:MOST_LABELS], 3.9 / high * (span[1] - span[0]), span)
    for group, energy, bar, place in zip(groups, energies, bars, places, strict=False):
        ladder.plot([1.03, 1.10, 1.16], [energy, place, place], color=FAINT, lw=0.5, clip_on=False)
        label = f"{tables.with_bar(energy, bar)}  (×{tables.states(group)})"
        ladder.text(1.19, place, label, va="center", fontsize=7)
    seen = [(number, size) for number, size in enumerate(thermal) if size > 0.012 * (span[1] - span[0])]
    for place, (number, size) in enumerate(seen):
        x, head = -0.18 - 0.19 * place, min(energies[0] + size, span[1])
        ladder.plot([x, x], [energies[0], head], color=thermal_colour(number), lw=3, solid_capstyle="butt")
        ladder.annotate("kT", (x, head), (0, 1.5), textcoords="offset points", ha="center", fontsize=6)
    ladder.set_xlim(-0.3 - 0.19 * len(seen), 2.25)
    ladder.set_ylim(*span)
    ladder.set_xticks([])
    ladder.spines["bottom"].set_visible(False)
    ladder.set_ylabel("Energy (meV)")
    ladder.set_title("Levels ± bar in meV (× states, spin and valleys counted)", loc="left", pad=5, fontsize=7)
    _against_kT(ratios, energies, bars, thermal)
    ratios.set_ylim(*span)
    ratios.set_title("Spacing and bar of each level against kT", loc="left", pad=5, fontsize=7)
    signs = [Line2D([], [], color=INK, marker="o", ls="", ms=3.6, label="spacing to the next level")]
    signs += [Line2D([], [], color=INK, marker="|", ls="", ms=6, mew=1.2, label="error bar")]
    for number, temperature in enumerate(t for t in result.problem.carriers.temperature_K if t > 0):
        signs.append(Line2D([], [], color=thermal_colour(number), lw=2, label=f"kT at {temperature:g} K"))
    figure.legend(handles=signs, loc="lower center", ncols=6, handlelength=1.3, columnspacing=1.4)
    return figure


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
    axes.stairs(data.per_eV_nm, data.edges_eV, fill=True, color=CYCLE[0], alpha=0.25, lw=0)
    axes.stairs(data.per_eV_nm, data.edges_eV, color=CYCLE[0], lw=0.9)
    axes.set_xlim(data.edges_eV[0], data.edges_eV[-1])
    axes.set_ylim(0, 1.06 * max(float(np.max(data.per_eV_nm, initial=0.0)), 1e-12))
    _mark(axes, data.singular_at_eV)
    axes.set_xlabel("Energy (eV)")
    axes.set_ylabel("Density of states (1/(eV nm))")
    axes.set_title("Averages over bins; infinite at the edges marked", loc="left", pad=7, fontsize=7)
    return figure


@styled
def dispersion(result: Result) -> Figure:
    """Energy along the wire's axis, a line a subband, mirrored where the table starts at k = 0."""
    data = result.dispersion
    figure, rect = canvas(COLUMN_MM, 70)
    axes = rect(15, 11, COLUMN_MM - 19, 70 - 17)
    k, energy = data.k_per_nm, data.energy_eV
    if k.size and k[0] == 0:
        k, energy = np.concatenate([-k[:0:-1], k]), np.concatenate([energy[:, :0:-1], energy], axis=1)
    for subband, line in zip(result.subbands, energy, strict=True):
        axes.plot(k, line, color=CYCLE[(subband.level - 1) % 8], lw=1.0)
    axes.set_xlim(k[0], k[-1])
    low, high = float(energy.min()), float(energy.max())
    axes.set_ylim(low - 0.03 * (high - low), high + 0.03 * (high - low))
    last = {subband.level: float(line[-1]) for subband, line in zip(result.subbands, energy, strict=True)}
    gap = 3.2 / 53 * 1.06 * (high - low)
    labelled: list[int] = []
    for level in sorted(last, key=lambda n: last[n]):
        if len(last) <= 12 or not labelled or last[level] - last[labelled[-1]] >= gap:
            labelled.append(level)
    places = _spread([last[level] for level in labelled], gap, axes.get_ylim())
    for level, place in zip(labelled, places, strict=True):
        axes.text(1.015, place, str(level), transform=axes.get_yaxis_transform(), va="center", fontsize=7)
    axes.set_xlabel("Wave number along the wire (1/nm)")
    axes.set_ylabel("Energy (eV)")
    axes.set_title(
        f"Levels numbered; within {_small_energy(data.error_bound_eV)} of the full problem",
        loc="left",
        pad=5,
        fontsize=7,
    )
    return figure


@styled
def conductance(result: Result) -> Figure:
    """Ballistic conductance against the Fermi level at each temperature, in G0 and in microsiemens."""
    figure, rect = canvas(COLUMN_MM, 66)
    axes = rect(12, 11, COLUMN_MM - 28, 66 - 17)
    top, window = 1.0, _fermi_window(result)
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    for curve in result.conductance:
        kelvin = curve.temperature_K
        colour, width = (thermal_colour(warm.index(kelvin)), 1.3) if kelvin in warm else (INK, 0.6)
        axes.plot(curve.fermi_eV, curve.values, color=colour, lw=width, label=f"{kelvin:g} K")
        shown = (curve.fermi_eV >= window[0]) & (curve.fermi_eV <= window[1])
        top = max(top, float(np.max(curve.values[shown], initial=0.0)))
    if result.conductance:
        axes.set_xlim(*window)
        axes.legend(loc="upper left", handlelength=1.4, borderpad=0.2)
    axes.set_ylim(0, 1.06 * top)
    step = max(1, math.ceil(top / 12))
    axes.set_yticks(np.arange(0, math.floor(1.06 * top) + 1, step))
    axes.grid(axis="y", color="#e4e4e4", lw=0.5)
    axes.set_axisbelow(True)
    _mark(axes, [tables.level_energy_eV(g) for g in tables.levels(result.subbands)])
    axes.set_xlabel("Fermi level (eV)")
    axes.set_ylabel("Conductance (G0 = 2e²/h)")
    other = axes.twinx()
    other.spines["right"].set_visible(True)
    other.set_ylim(0, 1.06 * top * 1e6 * CONDUCTANCE_QUANTUM_SIEMENS)
    other.set_ylabel("Conductance (µS)")
    axes.set_title("Ballistic, transmission 1; levels marked", loc="left", pad=7, fontsize=7)
    return figure


FIGURES = MappingProxyType(
    {
        "section": section,
        "modes": modes,
        "levels": levels,
        "density_of_states": density_of_states,
        "dispersion": dispersion,
        "conductance": conductance,
    }
)


def save_all(result: Result, folder: str | Path) -> list[Path]:
    """Write every figure as PNG and SVG into an existing folder; the same result gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    written = []
    with style():
        for name, draw in FIGURES.items():
            figure = draw(result)
            png, svg = Path(folder) / f"{name}.png", Path(folder) / f"{name}.svg"
            figure.savefig(png, format="png", metadata={"Software": None}, pil_kwargs={"compress_level": 4})
            figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": "wiresolve"})
            written += [png, svg]
    return written
