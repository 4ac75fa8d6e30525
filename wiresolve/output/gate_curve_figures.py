"""Figures of a gate curve: each function returns a Matplotlib figure; `save_all` writes PNG, SVG and PDF."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import LogLocator, MaxNLocator, NullLocator

from wiresolve.gate_result import Array, GateCurve
from wiresolve.output.between_points import between_points_of
from wiresolve.output.canvas import (
    COLUMN_MM,
    CYCLE,
    GRID,
    INK,
    PAGE_MM,
    canvas,
    dashes_of,
    label_lines,
    line_style,
    mark,
    save,
    shortened,
    titled,
)
from wiresolve.output.measured import GATE_VOLTAGE, Measured
from wiresolve.output.measured_points import lay_over
from wiresolve.output.style import styled
from wiresolve.output.valley_names import short_valleys
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_LABELS, MOST_LINES = 14, 7
_DECADES = 3.0
"""How far below its largest value a capacitance is drawn."""
_CURRENT_DECADES = 12.0


def _voltages(curve: GateCurve) -> Array:
    return np.array([p.gate_voltage_V for p in curve.points])


def _column(curve: GateCurve, name: str) -> Array:
    """A number of each point; NaN, a gap in the line, where the point failed."""
    return np.array([getattr(p, name) for p in curve.points], dtype=float)


def _places(valley: Sequence[str]) -> list[tuple[str, int]]:
    """Of each listed subband its group of valleys, and which of that group's it is: what stays where groups cross."""
    seen: dict[str, int] = {}
    found = []
    for name in valley:
        found.append((name, seen.get(name, 0)))
        seen[name] = found[-1][1] + 1
    return found


def _followed(curve: GateCurve) -> dict[tuple[str, int], int]:
    """The level of each subband at the last point that lists it, in the order of energies there."""
    last: dict[tuple[str, int], tuple[float, int]] = {}
    for point in curve.converged:
        rows = zip(_places(point.valley), point.energy_eV.tolist(), point.level.tolist(), strict=True)
        last |= {place: (energy, level) for place, energy, level in rows}
    return {place: last[place][1] for place in sorted(last, key=lambda p: last[p][0])}


def _by_subband(curve: GateCurve, name: str) -> Array:
    """(points, subbands) each followed within its group of valleys; NaN where a point does not list it."""
    places = {place: n for n, place in enumerate(_followed(curve))}
    found = np.full((len(curve.points), len(places)), np.nan)
    for row, point in zip(found, curve.points, strict=True):
        for place, value in zip(_places(point.valley), np.asarray(getattr(point, name), dtype=float), strict=True):
            row[places[place]] = value
    return found


def _lines_of_levels(curve: GateCurve) -> list[tuple[int, str]]:
    """Level and valleys of each followed subband."""
    return [(level, valley) for (valley, _), level in _followed(curve).items()]


def _title(axes: Axes, curve: GateCurve, text: str, pad: float = 5) -> None:
    """A title, with a line about the crosses where points failed (see `_room`)."""
    note = "\n× did not converge" if curve.failed else ""
    titled(axes, text + note, 6.5, pad)


def _room(curve: GateCurve) -> float:
    """Height in mm of a title's second line."""
    return 3.2 if curve.failed else 0.0


def _across(axes: Axes, curve: GateCurve) -> None:
    """The axis of gate voltages, with crosses at those that failed."""
    voltages = _voltages(curve)
    at = [p.gate_voltage_V for p in curve.failed]
    if at:
        across = axes.get_xaxis_transform()
        axes.plot(at, [0.0] * len(at), "x", color=CYCLE[5], ms=4, mew=1.0, clip_on=False, transform=across, zorder=5)
    axes.set_xlim(float(voltages.min()), float(voltages.max()))
    axes.xaxis.set_major_locator(MaxNLocator(6, steps=[1, 2, 2.5, 5, 10]))
    axes.set_xlabel(f"Voltage of the gate “{shortened(curve.swept, 24)}” (V)")


def _opened(curve: GateCurve) -> list[float]:
    return [s.opens_at_V for s in curve.steps if math.isfinite(s.opens_at_V)]


def _lines(curve: GateCurve) -> tuple[Array, list[tuple[int, str]], Array]:
    """Voltages (v,), level and valleys of each line, and energies in meV (v, lines)."""
    swept = between_points_of(curve)
    if swept is None:
        return _voltages(curve), _lines_of_levels(curve), 1e3 * _by_subband(curve, "energy_eV")
    valleys = list(dict.fromkeys(name for p in curve.converged for name in p.valley))
    at = swept.places_V()
    return at, [(line["level"], valleys[line["group"]]) for line in swept.lines], 1e3 * swept.lines_eV(at)


@styled
def levels(curve: GateCurve) -> Figure:
    """Subband minima against gate voltage, from the source's Fermi level, with the band of one kT around it.

    Between the solved points lines are curved as `between_points` says, straight where it cannot say.
    Where several groups of valleys are listed each has a line style.
    """
    voltages, (at, named, energy) = _voltages(curve), _lines(curve)
    dashes = dashes_of([valley for _, valley in named])
    below = 12 + (4.0 * math.ceil(len(dashes) / 2) + 1 if len(dashes) > 1 else 0)
    figure, rect = canvas(COLUMN_MM, below + 69 + _room(curve))
    axes = rect(15, below, COLUMN_MM - 25, 61)
    thermal = 1e3 * KB * curve.temperature_K
    axes.axhspan(-thermal, thermal, color=CYCLE[4], alpha=0.22, lw=0, zorder=0)
    axes.axhline(0.0, color=INK, lw=0.7, ls=(0, (4, 2)), zorder=1)
    for (level, valley), line in zip(named, energy.T, strict=True):
        colour, dash = line_style(level - 1)
        axes.plot(at, line, color=colour, ls=dash if len(dashes) < 2 else dashes[valley], lw=1.0, zorder=2)
    low, high = min(float(np.nanmin(energy)), -thermal), max(float(np.nanmax(energy)), thermal)
    axes.set_ylim(low - 0.04 * (high - low), high + 0.04 * (high - low))
    _across(axes, curve)
    ends = int(np.argmax(np.where(np.isfinite(energy).any(axis=1), at, -np.inf)))
    last = {level: float(e) for (level, _), e in zip(named, energy[ends], strict=True) if math.isfinite(e)}
    order = sorted(last, key=lambda n: last[n])[:MOST_LABELS]
    label_lines(axes, 1.0, [last[n] for n in order], [str(n) for n in order], 3.2)
    axes.set_xlim(float(voltages.min()), float(voltages.max()))
    axes.set_ylabel("Energy from the source's Fermi level (meV)")
    word = f"±kT at {curve.temperature_K:g} K shaded" if thermal > 0 else "T = 0"
    _title(axes, curve, f"Levels numbered; Fermi level at 0, {word}", 6)
    if len(dashes) > 1:
        signs = [Line2D([], [], color=INK, ls=dash, lw=1.0, label=short_valleys(v)) for v, dash in dashes.items()]
        figure.legend(handles=signs, loc="lower center", ncols=2, handlelength=2.6, columnspacing=1.4)
    return figure


@styled
def staircase(curve: GateCurve, measured: Measured | None = None) -> Figure:
    """Conductance against gate voltage in G0 and in microsiemens, the voltages at which steps open marked.

    Between the solved points, which are dots, the line follows from levels (`between_points`); straight where these are
    not known. Measured points are laid over it where they are given (`output.measured`).

    Raises
    ------
    InputError
        The measured points are not against a gate voltage.
    """
    if measured is not None:
        measured.require(GATE_VOLTAGE)
    below = 12 if measured is None else 20.5
    figure, rect = canvas(COLUMN_MM, 56 + below + _room(curve))
    axes = rect(13, below, COLUMN_MM - 29, 48)
    voltages, conductance = _voltages(curve), _column(curve, "conductance_G0")
    highest = float(np.nanmax(conductance))
    if (swept := between_points_of(curve)) is None:
        axes.plot(voltages, conductance, "-o", color=CYCLE[0], lw=1.2, ms=1.8, label="computed")
    else:
        at = swept.places_V()
        line = swept.conductance_G0(at)
        axes.plot(at, line, color=CYCLE[0], lw=1.2, label="computed")
        axes.plot(voltages, conductance, "o", color=CYCLE[0], ms=1.8)
        highest = max(highest, float(line.max()))
    axes.set_xlim(float(voltages.min()), float(voltages.max()))
    if measured is not None:
        highest = max(highest, lay_over(axes, measured))
        # Below the axes: points may lie anywhere within.
        axes.legend(loc="upper center", bbox_to_anchor=(0.5, -9.5 / 48), handlelength=1.4, borderpad=0.2)
    top = max(1.0, 1.06 * highest)
    axes.set_ylim(0, top)
    axes.set_yticks(np.arange(0, math.floor(top) + 1, max(1, math.ceil(top / 12))))
    axes.grid(axis="y", color=GRID, lw=0.5)
    axes.set_axisbelow(True)
    mark(axes, _opened(curve))
    _across(axes, curve)
    axes.set_ylabel("Conductance (G0 = 2e²/h)")
    other = axes.twinx()
    other.spines["right"].set_visible(True)
    other.set_ylim(0, top * 1e6 * CONDUCTANCE_QUANTUM_SIEMENS)
    other.set_ylabel("Conductance (µS)")
    word = ("" if swept is None else "; dots are solved") + ("; steps open where marked" if _opened(curve) else "")
    _title(axes, curve, f"At {curve.temperature_K:g} K{word}", 7)
    return figure


@styled
def density_and_capacitance(curve: GateCurve) -> Figure:
    """Line density, in all and by level, above; the capacitance and its parts in series below."""
    figure, rect = canvas(COLUMN_MM, 122 + _room(curve))
    upper, lower = rect(16, 72, COLUMN_MM - 26, 43), rect(16, 19, COLUMN_MM - 26, 43)
    voltages = _voltages(curve)
    by_subband, named = _by_subband(curve, "line_density_by_subband_per_nm"), _lines_of_levels(curve)
    numbers = sorted({level for level, _ in named})
    ends: dict[int, float] = {}
    for number in numbers:
        ours = [n for n, (level, _) in enumerate(named) if level == number]
        total = np.where(np.isnan(by_subband[:, ours]).all(axis=1), np.nan, np.nansum(by_subband[:, ours], axis=1))
        colour, dash = line_style(number - 1)
        upper.plot(voltages, total, color=colour, ls=dash, lw=0.9)
        if np.isfinite(total).any():
            ends[number] = float(total[np.isfinite(total)][-1])
    density = _column(curve, "line_density_per_nm")
    upper.plot(voltages, density, color=INK, lw=1.5)
    top = float(np.nanmax(density))
    upper.set_ylim(0, 1.06 * top if top > 0 else 1.0)
    shown = [n for n in sorted(ends, key=lambda n: ends[n]) if ends[n] > 0.02 * top]
    texts = [str(n) for n in shown]
    finite = density[np.isfinite(density)]
    label_lines(upper, 1.0, [*(ends[n] for n in shown), float(finite[-1])], [*texts, "all"], 3.2)
    _across(upper, curve)
    upper.set_xlabel("")
    upper.set_xticklabels([])
    upper.set_ylabel("Line density (1/nm)")
    _title(upper, curve, f"At {curve.temperature_K:g} K; in all, and of each level")
    total = 1e9 * _column(curve, "capacitance_F_per_m")
    parts = {"geometric": 1, "quantum": 2, "centroid": 3}
    for name, number in parts.items():
        part = _positive(1e9 * _column(curve, f"{name}_F_per_m"))
        lower.plot(voltages, part, color=CYCLE[number], lw=1.0, label=name)
    lower.plot(voltages, _positive(total), color=INK, lw=1.5, label="in all")
    lower.set_yscale("log")
    whole, drawn = total[total > 0], np.concatenate([np.asarray(line.get_ydata(), dtype=float) for line in lower.lines])
    if whole.size:
        # Parts in series that are much larger than what they add up to say nothing.
        highest = min(2 * float(np.nanmax(np.where(np.isfinite(drawn), drawn, 0.0))), 100 * float(whole.max()))
        lower.set_ylim(_least(whole, _DECADES) / 2, highest)
    lower.yaxis.set_major_locator(LogLocator(numticks=7))
    lower.yaxis.set_minor_locator(NullLocator())
    lower.yaxis.set_major_formatter(lambda value, _: f"{value:g}")
    _across(lower, curve)
    lower.set_ylabel("Capacitance (nF/m)")
    titled(lower, "1/all = 1/geometric + 1/quantum + 1/centroid", 6.5)
    figure.legend(handles=lower.lines[3::-1], loc="lower center", ncols=4, handlelength=1.4, columnspacing=1.0)
    return figure


def _least(values: Array, decades: float) -> float:
    """The smallest of the values that are not more than so many decades below the largest."""
    return float(values[values > values.max() * 10**-decades].min())


def _positive(values: Array) -> Array:
    """Values as a logarithmic axis can show them."""
    return np.where(values > 0, values, np.nan)


def _currents(curve: GateCurve) -> tuple[Array, Array, Array]:
    """Gate voltages, drain voltages and the current in µA at each pair, NaN where there is none."""
    gates = np.array(sorted({p.gate_voltage_V for p in curve.points}))
    drains = np.array(sorted({t.drain_voltage_V for t in curve.transistor}))
    found = np.full((len(gates), len(drains)), np.nan)
    for t in curve.transistor:
        place = np.searchsorted(gates, t.gate_voltage_V), np.searchsorted(drains, t.drain_voltage_V)
        found[place] = 1e6 * t.current_A
    return gates, drains, found


def _some(count: int) -> list[int]:
    """Up to `MOST_LINES` places, evenly, both ends with them."""
    return sorted({round(float(x)) for x in np.linspace(0, count - 1, min(count, MOST_LINES))})


@styled
def transfer(curve: GateCurve) -> Figure:
    """Current against gate voltage at each drain voltage: logarithmic on the left, linear on the right."""
    gates, drains, current = _currents(curve)
    some = _some(len(drains))
    height, below = 66.0, 12.0 + 4.5 * math.ceil(len(some) / 5)
    figure, rect = canvas(PAGE_MM, height + below - 4 + _room(curve))
    wide = (PAGE_MM - 42) / 2
    left, right = rect(17, below, wide, height - 12), rect(PAGE_MM - 6 - wide, below, wide, height - 12)
    for row, place in enumerate(some):
        colour, dash = line_style(row)
        left.plot(gates, _positive(np.abs(current[:, place])), color=colour, ls=dash, lw=1.2)
        right.plot(gates, current[:, place], color=colour, ls=dash, lw=1.2, label=f"drain at {drains[place]:g} V")
    left.set_yscale("log")
    size = np.abs(current[np.isfinite(current)])
    if size.any():
        left.set_ylim(_least(size, _CURRENT_DECADES) / 2, 2 * float(size.max()))
    left.yaxis.set_major_locator(LogLocator(numticks=8))
    left.yaxis.set_minor_locator(NullLocator())
    low, high = min(0.0, float(np.nanmin(current))), max(0.0, float(np.nanmax(current)))
    right.set_ylim(low - (0.05 * (high - low) if low < 0 else 0), high + 0.05 * (high - low) or 1.0)
    for axes, word in ((left, "logarithmic"), (right, "linear")):
        _across(axes, curve)
        _title(axes, curve, f"At {curve.temperature_K:g} K, {word}")
    left.set_ylabel("Current (µA)")
    right.set_ylabel("Current (µA)")
    figure.legend(loc="lower center", ncols=5, handlelength=2.0, columnspacing=1.4)
    return figure


@styled
def output(curve: GateCurve) -> Figure:
    """Current against drain voltage, a line a gate voltage; at no drain voltage there is no current."""
    gates, drains, current = _currents(curve)
    if 0.0 not in drains:
        place = int(np.searchsorted(drains, 0.0))
        drains, current = np.insert(drains, place, 0.0), np.insert(current, place, 0.0, axis=1)
    figure, rect = canvas(COLUMN_MM, 72)
    axes = rect(15, 12, COLUMN_MM - 32, 72 - 20)
    gates, current = gates[np.isfinite(current).any(axis=1)], current[np.isfinite(current).any(axis=1)]
    some = _some(len(gates))
    for row, place in enumerate(some):
        colour, dash = line_style(row)
        axes.plot(drains, current[place], marker="o", color=colour, ls=dash, lw=1.1, ms=1.8)
    axes.set_xlim(float(drains.min()), float(drains.max()))
    low, high = min(0.0, float(np.nanmin(current))), max(0.0, float(np.nanmax(current)))
    axes.set_ylim(low - (0.05 * (high - low) if low < 0 else 0), high + 0.05 * (high - low) or 1.0)
    ends = {place: float(current[place, -1]) for place in some if math.isfinite(current[place, -1])}
    order = sorted(ends, key=lambda n: ends[n])
    label_lines(axes, 1.0, [ends[n] for n in order], [f"{gates[n]:.4g} V" for n in order], 3.2)
    axes.set_xlim(float(drains.min()), float(drains.max()))
    axes.xaxis.set_major_locator(MaxNLocator(6, steps=[1, 2, 2.5, 5, 10]))
    axes.set_xlabel("Drain voltage (V)")
    axes.set_ylabel("Current (µA)")
    more = f", {len(some)} of {len(gates)} shown" if len(some) < len(gates) else ""
    titled(axes, f"At {curve.temperature_K:g} K; gate voltages on the right{more}", 6.5, 6)
    return figure


FIGURES: MappingProxyType[str, Callable[[GateCurve], Figure]] = MappingProxyType(
    {
        "levels": levels,
        "staircase": staircase,
        "density_and_capacitance": density_and_capacitance,
        "transfer": transfer,
        "output": output,
    }
)


def __dir__() -> list[str]:
    return [*FIGURES, "FIGURES", "drawable", "save_all"]


def drawable(curve: GateCurve) -> Sequence[str]:
    """Names of the figures that the curve has data for: an output curve needs two drain voltages or more."""
    drains = {t.drain_voltage_V for t in curve.transistor}
    missing = {"transfer"} - ({"transfer"} if drains else set()) | ({"output"} if len(drains) < 2 else set())
    return [name for name in FIGURES if name not in missing]


def save_all(curve: GateCurve, folder: str | Path, measured: Measured | None = None) -> list[Path]:
    """Write every figure as PNG, SVG and PDF into an existing folder; the same curve gives the same bytes.

    Measured points are laid over the staircase.

    Raises
    ------
    InputError
        The measured points are not against a gate voltage.
    OSError
        A file cannot be written.
    """
    made = {name: partial(FIGURES[name], curve) for name in drawable(curve)}
    return save(made | {"staircase": partial(staircase, curve, measured)}, folder)
