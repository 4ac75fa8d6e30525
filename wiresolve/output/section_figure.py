"""The figure of a section: its layers and its mesh, to scale."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch, Rectangle
from matplotlib.path import Path as Outline

from wiresolve.describe.appearance import fill, round_length
from wiresolve.output.canvas import (
    COLUMN_MM,
    INK,
    bare,
    canvas,
    extent_of,
    goes_on,
    order_of_appearance,
    shortened,
    trace,
)
from wiresolve.output.raster import edges, near, outermost, outlines
from wiresolve.output.style import styled
from wiresolve.result import Result

MOST_MODES = 20
"""Modes that are drawn, and that the frame of the section holds."""


def where_seen(result: Result) -> Any:
    """Points of a frame around the section with its insulators, and around the modes where they reach farther."""
    size = np.abs(result.modes[:, :MOST_MODES])
    seen = (size > 2e-3 * size.max(axis=0)).any(axis=1)
    drawn = np.array([not goes_on(region.name) for region in result.mesh.regions])
    seen[result.mesh.cells[drawn[result.mesh.region]].ravel()] = True
    return seen


def _filled(loops: Sequence[Any], colour: tuple[float, float, float]) -> PathPatch:
    codes = [Outline.MOVETO]
    for loop in loops:
        codes += [Outline.LINETO] * (len(loop) - 2) + [Outline.CLOSEPOLY, Outline.MOVETO]
    return PathPatch(Outline(np.concatenate(loops), codes[:-1]), fc=colour, lw=0)


@styled
def section(result: Result) -> Figure:
    """The section to scale: layers in colours in order of appearance, the curved mesh, a scale bar.

    A material that goes on outside fills the frame, which reaches as far as the modes are seen; of surroundings a
    margin is shown.
    """
    mesh = result.mesh
    found = edges(mesh)
    left, right, bottom, top = extent_of(mesh.points[where_seen(result)])
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
    colours = {number: fill(place, mesh.regions[number].carriers) for place, number in enumerate(order)}
    for number in order:
        loops, last = outermost(found, number)
        if mesh.regions[number].name == "outside":
            loops[last] = np.array([[left, bottom], [right, bottom], [right, top], [left, top], [left, bottom]])
        axes.add_patch(_filled(loops, colours[number]))
    fine = found.lines[~found.on_outline]
    extent = left, right, bottom, top
    trace(axes, near(fine[:, ::2], extent), "white", 0.35, alpha=0.75)
    trace(axes, near(outlines(mesh, found), extent), INK, 0.6)
    key = rect(0, 0, COLUMN_MM, below)
    bare(key, (0, COLUMN_MM, 0, below))
    length = round_length(0.3 * (right - left))
    at = (COLUMN_MM - wide) / 2
    key.plot([at, at + scale * length], [below - 4.5] * 2, color=INK, lw=1.6, solid_capstyle="butt")
    key.text(at + scale * length + 1.5, below - 4.6, f"{length:g} nm", va="center", ha="left")
    for row, number in enumerate(order):
        region = mesh.regions[number]
        y = below - 9.0 - 4.2 * row
        key.add_patch(Rectangle((at, y - 1.2), 4.5, 2.6, fc=colours[number], ec=INK, lw=0.5))
        apart = "" if region.carriers else ", carriers kept out"
        key.text(at + 6, y, f"{region.name}: {region.material}{apart}", va="center", fontsize=7)
    figure.text(0.5, 1 - 4.0 / (high + below + 9), shortened(result.problem.title, 56), ha="center", va="center")
    return figure
