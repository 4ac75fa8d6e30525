"""The figure of the outlines coloured by what their motion does to the first level and to the first spacing."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from wiresolve.output.canvas import COLUMN_MM, ENDS, INK, PAGE_MM, canvas, extent_of, trace
from wiresolve.output.style import styled
from wiresolve.output.valley_names import members
from wiresolve.result import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_SHOWN = 0.98
"""Share of the outlines' length whose values the colours span: in the corners values have no bound."""
_LINE_PT, _CASING_PT, _SHADES = 3.4, 4.4, 128


@styled
def sensitivity(result: Result) -> Figure:
    """The walls and interfaces to scale, coloured by the energy for each nm that a nm of them moves outwards.

    A panel for the first level and one for the spacing to the second; walls move away from the carriers, interfaces
    away from the piece whose outline they are. A material that goes on outside is not shown.
    """
    given = result.outline_sensitivity
    fields = [("First level", given.level_eV_per_nm2)]
    if given.spacing_eV_per_nm2 is not None:
        fields.append(("Spacing to the second level", given.spacing_eV_per_nm2))
    extent = extent_of(given.segments.reshape(-1, 2)) if len(given.segments) else (0.0, 1.0, 0.0, 1.0)
    room = 0.03 * max(extent[1] - extent[0], extent[3] - extent[2])
    extent = extent[0] - room, extent[1] + room, extent[2] - room, extent[3] + room
    aspect = (extent[1] - extent[0]) / (extent[3] - extent[2])
    slot_mm = COLUMN_MM if len(fields) == 1 else PAGE_MM / len(fields)
    panel = min(slot_mm - 20, 78 * aspect)
    high = panel / aspect
    notes = ["Outwards means away from the piece inside the line", "at a wall, away from the carriers"]
    notes = ["; ".join(notes)] if len(fields) > 1 else [notes[0] + ";", notes[1]]
    alike = len(members(result.subbands[0].valley)[1])
    if alike > 1:
        shown = [
            f"First level: one of {alike} alike valleys is shown;",
            "its images, mirrored or turned, lean their own way",
        ]
        notes += [" ".join(shown)] if len(fields) > 1 else shown
    below, above = 25.5 + 2.6 * len(notes), 6.0
    height = above + high + below
    figure, rect = canvas(slot_mm * len(fields), height)
    for place, (title, values) in enumerate(fields):
        slot = place * slot_mm
        at_x = slot + 14 + (slot_mm - 20 - panel) / 2
        axes = rect(at_x, below, panel, high)
        top = _drawn(axes, given.segments, 1e3 * values, extent)
        axes.xaxis.set_major_locator(MaxNLocator(max(1, min(6, round(panel / 11)))))
        axes.yaxis.set_major_locator(MaxNLocator(max(1, min(6, round(high / 9)))))
        # Over its own panel, a narrow one too.
        figure.text(
            (slot + slot_mm / 2 + 4) / (slot_mm * len(fields)), 1 - 3.4 / height, title, ha="center", va="center"
        )
        _colour_bar(figure, rect(slot + 18, below - 14.5, slot_mm - 28, 2.6), *top)
    figure.text(0.5, 1.2 / height, "\n".join(notes), ha="center", va="bottom", fontsize=6)
    return figure


def _map() -> LinearSegmentedColormap:
    return LinearSegmentedColormap.from_list("signed", ENDS, N=256)


def _drawn(axes: Axes, segments: Any, values: Any, extent: tuple[float, float, float, float]) -> tuple[float, bool]:
    """Draw the outlines; the value at the colours' ends, and whether some lie beyond it."""
    length = np.linalg.norm(segments[:, 1] - segments[:, 0], axis=1)
    order = np.argsort(np.abs(values))
    inner = np.cumsum(length[order]) <= _SHOWN * length.sum()
    top = float(np.abs(values[order][inner]).max(initial=0.0)) or float(np.abs(values).max(initial=0.0)) or 1.0
    trace(axes, segments, INK, _CASING_PT, zorder=2, cap="round")
    # A path for each of the colours in place of one for each segment.
    colours, share = _map(), np.clip((values / top + 1) / 2, 0, 1)
    shade = np.rint(_SHADES * share).astype(int)
    for number in np.unique(shade):
        trace(axes, segments[shade == number], colours(number / _SHADES), _LINE_PT, zorder=2.1, cap="round")
    axes.set_xlim(*extent[:2])
    axes.set_ylim(*extent[2:])
    axes.set_aspect("equal")
    axes.set_xlabel("x (nm)")
    axes.set_ylabel("y (nm)")
    return top, bool(np.abs(values).max(initial=0.0) > 1.02 * top)


def _colour_bar(figure: Figure, axes: Axes, top: float, beyond: bool) -> None:
    from matplotlib.cm import ScalarMappable

    shown = ScalarMappable(Normalize(-top, top), _map())
    bar = figure.colorbar(shown, cax=axes, orientation="horizontal", extend="both" if beyond else "neither")
    bar.outline.set_linewidth(0.5)
    bar.locator = MaxNLocator(5)
    bar.update_ticks()
    bar.set_label("meV for each nm outwards, per nm of outline", fontsize=7)
