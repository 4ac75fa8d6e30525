"""The figure of the modes: envelope functions over the section, to scale, level by level."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure

from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.output import tables
from wiresolve.output.canvas import FAINT, INK, PAGE_MM, bare, canvas, coloured, extent_of, panels, trace
from wiresolve.output.raster import edges, near, outlines, raster
from wiresolve.output.section_figure import MOST_MODES, where_seen
from wiresolve.output.style import DPI, styled
from wiresolve.output.valley_names import members, short_valleys
from wiresolve.result import Result, Subband

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_EDGE_MM, _PIXEL_MM = 3.0, 25.4 / DPI


def _energy(subband: Subband) -> str:
    """As in the printed table."""
    return f"{tables.with_bar(1e3 * subband.energy_eV, 1e3 * subband.error_eV)} meV"


@styled
def modes(result: Result) -> Figure:
    """The envelope functions in a grid, each on its own scale, white where they vanish; at most the first 20.

    Those of one level are drawn in the frame in which the result holds them, and joined by a line. Valleys are named
    where any subband is not of the zone centre.
    """
    shown = result.subbands[:MOST_MODES]
    extent = extent_of(result.mesh.points[where_seen(result)])
    wide, high = extent[1] - extent[0], extent[3] - extent[2]
    columns, panel = panels(len(shown), wide / high)
    rows = math.ceil(len(shown) / columns)
    named = any(s.valley != ZONE_CENTRE for s in result.subbands)
    above = 13.5 if named else 10.0
    notes = [f"first {len(shown)} of {len(result.subbands)} subbands"] if len(shown) < len(result.subbands) else []
    if len({s.level for s in shown}) < len(shown):
        notes.append("modes of one level are joined by a line")
    if any(len(members(s.valley)[1]) > 1 for s in shown):
        notes.append("of valleys that are alike one is shown")
    across = max(8, int(panel / _PIXEL_MM))
    panel = across * _PIXEL_MM
    scale = panel / wide
    pitch_x, pitch_y = (PAGE_MM - 2 * _EDGE_MM) / columns, panel * high / wide + above + 1
    height = rows * pitch_y + (5 if notes else 1)
    # All panels in one set of axes, in mm: twenty sets of their own take longer to make than everything in them.
    figure, rect = canvas(PAGE_MM, height)
    axes = rect(0, 0, PAGE_MM, height)
    bare(axes, (0, PAGE_MM, 0, height))
    found = edges(result.mesh)
    outline = np.array(near(outlines(result.mesh, found), extent))
    titles = [f"subband {s.index}, level {s.level}\n{_energy(s)}" for s in shown]
    if named:
        titles = [f"{title}\n{short_valleys(s.valley)}" for title, s in zip(titles, shown, strict=True)]
    # A letter is about 0.22 mm wide for each point of its size.
    letters = max(len(line) for title in titles for line in title.splitlines())
    size = min(7.0, (pitch_x - 2.0) / (0.22 * letters))
    pixels = raster(result.mesh, extent, across)
    # One picture of the whole page and one path, whose pixels and lines are those of all panels.
    page = np.full((math.ceil(height / _PIXEL_MM), math.ceil(PAGE_MM / _PIXEL_MM), 4), (255, 255, 255, 0), np.uint8)
    lines, corners = [], []
    for place, title in enumerate(titles):
        row, column = divmod(place, columns)
        first = round((_EDGE_MM + column * pitch_x + (pitch_x - panel) / 2) / _PIXEL_MM)
        lowest = round((height - above - row * pitch_y - panel * high / wide) / _PIXEL_MM)
        left, bottom = first * _PIXEL_MM, lowest * _PIXEL_MM
        corners.append((left, bottom))
        down, along = pixels.shape
        page[lowest : lowest + down, first : first + along] = coloured(pixels.image(result.modes[:, place]))
        lines.append(scale * (outline - [extent[0], extent[2]]) + [left, bottom])
        middle, top = left + panel / 2, bottom + panel * high / wide
        axes.text(middle, top + 0.8, title, ha="center", va="bottom", fontsize=size, linespacing=1.25)
    size_mm = page.shape[1] * _PIXEL_MM, page.shape[0] * _PIXEL_MM
    axes.imshow(page, origin="lower", extent=(0, size_mm[0], 0, size_mm[1]), interpolation="none", zorder=1)
    bare(axes, (0, PAGE_MM, 0, height))
    axes.set_aspect("auto")
    trace(axes, np.concatenate(lines), INK, 0.45)
    _join(axes, [s.level for s in shown], corners, columns, panel, panel * high / wide + above - 1.6)
    if notes:
        figure.text(0.5, 1.5 / height, "; ".join(notes), ha="center", fontsize=7)
    return figure


def _join(
    axes: Axes, level: Sequence[int], corners: Sequence[tuple[float, float]], columns: int, wide: float, up: float
) -> None:
    """A line over neighbouring panels of one level, row by row."""
    start = 0
    for place in range(1, len(level) + 1):
        if place < len(level) and level[place] == level[start] and place % columns:
            continue
        if level.count(level[start]) > 1:
            (left, bottom), (right, _) = corners[start], corners[place - 1]
            axes.plot([left, right + wide], [bottom + up] * 2, color=FAINT, lw=0.8, solid_capstyle="butt")
        start = place
