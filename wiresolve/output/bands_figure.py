"""The figures along the wire: energy against wave number, and the density of states that follows from it."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import MaxNLocator

from wiresolve.output.canvas import (
    COLUMN_MM,
    CYCLE,
    INK,
    canvas,
    dashes_of,
    from_zero,
    label_lines,
    line_style,
    mark,
    mark_fermi,
    small_energy,
    titled,
    with_fermi,
)
from wiresolve.output.style import styled
from wiresolve.output.valley_names import short_valleys
from wiresolve.result import Result


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
    axes.set_xlabel(from_zero(result))
    axes.set_ylabel("Density of states (1/(meV nm))")
    titled(axes, "Averages over bins; infinite at the edges marked", pad=7)
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
    axes.set_ylim(*with_fermi(result, low - 0.03 * (high - low), high + 0.03 * (high - low)))
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
    titled(axes, f"Levels numbered; beyond the bars of the minima,\nerror of E(k) below {bound}", 6.5, 4)
    if len(dashes) > 1:
        signs = [Line2D([], [], color=INK, ls=dash, lw=1.0, label=short_valleys(v)) for v, dash in dashes.items()]
        figure.legend(handles=signs, loc="lower center", ncols=2, handlelength=2.6, columnspacing=1.4)
    return figure
