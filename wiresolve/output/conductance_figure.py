"""The figure of the staircase against the Fermi level, with measured points where there are some."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.figure import Figure

from wiresolve.output import tables
from wiresolve.output.canvas import (
    COLUMN_MM,
    GRID,
    INK,
    canvas,
    mark,
    mark_fermi,
    thermal_colour,
    titled,
    with_fermi,
)
from wiresolve.output.measured import FERMI_LEVEL, Measured
from wiresolve.output.measured_points import lay_over
from wiresolve.output.style import styled
from wiresolve.result import Result
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS


def _fermi_window(result: Result) -> tuple[float, float]:
    """Fermi levels in meV around the listed levels; curves at high temperatures reach much farther."""
    low = min((1e3 * float(c.fermi_eV[0]) for c in result.conductance), default=0.0)
    high = max((1e3 * float(c.fermi_eV[-1]) for c in result.conductance), default=1e3)
    bottom, top = 1e3 * float(result.energies_eV.min()), 1e3 * float(result.energies_eV.max())
    if top == bottom:
        return low, high
    return max(low, bottom - 0.15 * (top - bottom)), min(high, top + 0.05 * (top - bottom))


def shown_meV(result: Result) -> tuple[float, float]:
    """The lowest and the highest Fermi level of the figure, in meV."""
    return with_fermi(result, *_fermi_window(result))


@styled
def conductance(result: Result, measured: Measured | None = None) -> Figure:
    """Ballistic conductance against the Fermi level at each temperature, in G0 and in microsiemens.

    Measured points are laid over it where they are given (`output.measured`). With gates or charge the potential is
    kept as it is at the source's Fermi level, and axis and title say so: what a gate does is another curve
    (`gate_curve_figures.staircase`).

    Raises
    ------
    InputError
        The measured points are not against the Fermi level.
    """
    if measured is not None:
        measured.require(FERMI_LEVEL)
    kept = result.charge is not None
    figure, rect = canvas(COLUMN_MM, 69.5 if kept else 66)
    axes = rect(12, 11, COLUMN_MM - 28, 66 - 17)
    top, window = 1.0, shown_meV(result)
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    for curve in result.conductance:
        kelvin = curve.temperature_K
        colour, width = (thermal_colour(warm.index(kelvin)), 1.3) if kelvin in warm else (INK, 0.6)
        fermi_meV = 1e3 * curve.fermi_eV
        axes.plot(fermi_meV, curve.values, color=colour, lw=width, label=f"{kelvin:g} K")
        shown = (fermi_meV >= window[0]) & (fermi_meV <= window[1])
        top = max(top, float(np.max(curve.values[shown], initial=0.0)))
    if result.conductance or measured is not None:
        axes.set_xlim(*window)
        top = max(top, 0.0 if measured is None else lay_over(axes, measured, 1e3))
        axes.legend(
            loc="upper left", handlelength=1.4, borderpad=0.2, ncols=1 + len(result.conductance) // 6, columnspacing=1.0
        )
    axes.set_ylim(0, 1.06 * top)
    step = max(1, math.ceil(top / 12))
    axes.set_yticks(np.arange(0, math.floor(1.06 * top) + 1, step))
    axes.grid(axis="y", color=GRID, lw=0.5)
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
    titled(axes, title, 6.5 if kept else 7.0, 7)
    return figure
