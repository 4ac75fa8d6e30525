"""The figure of a charged wire: where the band edge lies, and where the carriers are."""

from __future__ import annotations

from dataclasses import dataclass
from math import floor, log10
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator, ScalarFormatter

from wiresolve.output.canvas import ENDS, INK, PAGE_MM, canvas, extent_of, goes_on, trace
from wiresolve.output.raster import Raster, edges, near, outlines, raster
from wiresolve.output.style import styled
from wiresolve.output.valley_names import members, short_valleys
from wiresolve.result import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_PIXELS = 260
_FLAT_meV = 0.1
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_TO_1e18_PER_CM3 = 1e3
"""From 1/nm^3."""
_DEEP, _DENSE = (*ENDS[:2], "#f3e9d2"), ("#ffffff", ENDS[1], ENDS[0])
"""Colours from low to high; white is what is blank, or holds no carriers."""


@dataclass(frozen=True, eq=False)
class _Panel:
    """One of the two pictures: its colours run from `low` to `high`."""

    title: str
    label: str
    image: Any
    low: float
    high: float
    colours: tuple[str, ...]


@styled
def charge(result: Result) -> Figure:
    """Potential energy of the electrons and density of the carriers over the section, to scale, with all outlines.

    The potential energy is the band edge of the first subband's valleys less the potential, from the Fermi level; a
    dashed line is drawn where it meets the Fermi level. Both are blank where carriers are kept out.

    Raises
    ------
    ValueError
        The result has no charge: its potential was given.
    """
    if result.charge is None:
        raise ValueError("the result has no charge: no gates, surfaces or dopants were given")
    mesh, given = result.mesh, result.charge
    drawn = np.array([not goes_on(region.name) for region in mesh.regions])
    inside = np.where(drawn[mesh.region], 1.0, np.nan)
    extent = extent_of(mesh.points[np.unique(mesh.cells[drawn[mesh.region]])])
    aspect = (extent[1] - extent[0]) / (extent[3] - extent[2])
    slot = PAGE_MM / 2
    wide = min(slot - 20, 78 * aspect)
    high = wide / aspect
    pixels = raster(mesh, extent, _PIXELS if aspect >= 1 else max(60, round(_PIXELS * aspect)))
    edge = pixels.by_cell(result.cell_fields["band_edge_of_first_valleys_eV"])
    energy = 1e3 * (edge + pixels.image(given.given_eV - given.potential_V))
    density = np.where(np.isfinite(edge), _TO_1e18_PER_CM3 * pixels.image(given.density_per_nm3), np.nan)
    power = _power(float(np.nanmax(density)))
    density /= 10.0 ** (power - 18)
    valleys = result.subbands[0].valley
    unit = f"10{str(power).translate(_RAISED)} cm⁻³"
    shown = (
        _Panel("Potential energy of electrons", "meV from the Fermi level", energy, *_ends(energy, _FLAT_meV), _DEEP),
        _Panel("Density of carriers", unit, density, 0.0, _ends(density)[1], _DENSE),
    )
    named = f" of the {short_valleys(valleys)} valleys" if len(members(valleys)[1]) else ""
    notes = [f"Potential energy is the band edge{named} less the potential"]
    below, above = 28.0, 7.0
    height = above + high + below
    figure, rect = canvas(PAGE_MM, height)
    lines = near(outlines(mesh, edges(mesh)), extent)
    for place, panel in enumerate(shown):
        at_x = place * slot + 14 + (slot - 20 - wide) / 2
        axes = rect(at_x, below, wide, high)
        _picture(axes, pixels, panel, extent)
        trace(axes, lines, INK, 0.6, zorder=3)
        if place == 0 and _fermi(axes, pixels, energy, pixels.by_cell(mesh.region.astype(float))):
            notes.append("dashed where it passes through the Fermi level")
        axes.set_title(panel.title, fontsize=8, pad=4, y=1.0)
        axes.xaxis.set_major_locator(MaxNLocator(max(1, min(6, round(wide / 11)))))
        axes.yaxis.set_major_locator(MaxNLocator(max(1, min(6, round(high / 9)))))
        _bar(figure, rect(place * slot + 18, below - 14.5, slot - 28, 2.6), panel)
    notes += ["blank where carriers are kept out"] if np.isnan(edge[np.isfinite(pixels.by_cell(inside))]).any() else []
    figure.text(0.5, 1.4 / height, "; ".join(notes), ha="center", va="bottom", fontsize=6)
    return figure


def _power(most_1e18: float) -> int:
    """The power of ten that densities are shown in: 18, or where that is far from them the largest one's."""
    if not most_1e18 > 0 or 0.01 <= most_1e18 <= 1000:
        return 18
    return 18 + floor(log10(most_1e18))


def _ends(image: Any, least: float = 0.0) -> tuple[float, float]:
    """Where the colours begin and end, at least so far apart: what is flat is drawn in one colour."""
    low, high = float(np.nanmin(image)), float(np.nanmax(image))
    if high - low < least:
        low, high = (low + high - least) / 2, (low + high + least) / 2
    return (low, high) if high > low else (low, low + 1.0)


def _map(panel: _Panel) -> LinearSegmentedColormap:
    return LinearSegmentedColormap.from_list("shown", panel.colours, N=192)


def _picture(axes: Axes, pixels: Raster, panel: _Panel, extent: tuple[float, float, float, float]) -> None:
    axes.imshow(
        panel.image,
        origin="lower",
        extent=pixels.extent,
        interpolation="nearest",
        cmap=_map(panel),
        norm=Normalize(panel.low, panel.high),
        zorder=1,
    )
    axes.set_xlim(*extent[:2])
    axes.set_ylim(*extent[2:])
    axes.set_xlabel("x (nm)")
    axes.set_ylabel("y (nm)")


def _fermi(axes: Axes, pixels: Raster, energy: Any, region: Any) -> bool:
    """Draw where the potential energy is zero inside of regions, not along their outlines; whether it is anywhere."""
    left, right, bottom, top = pixels.extent
    rows, columns = pixels.shape
    x = left + (np.arange(columns) + 0.5) * (right - left) / columns
    y = bottom + (np.arange(rows) + 0.5) * (top - bottom) / rows
    found = False
    for number in np.unique(region[np.isfinite(energy)]):
        own = np.where(region == number, energy, np.nan)
        if np.nanmin(own) < 0 < np.nanmax(own):
            found = True
            axes.contour(x, y, own, levels=[0.0], colors=[ENDS[4]], linewidths=0.9, linestyles=["--"], zorder=2)
    return found


def _bar(figure: Figure, axes: Axes, panel: _Panel) -> None:
    from matplotlib.cm import ScalarMappable

    bar = figure.colorbar(
        ScalarMappable(Normalize(panel.low, panel.high), _map(panel)), cax=axes, orientation="horizontal"
    )
    bar.outline.set_linewidth(0.5)
    bar.locator = MaxNLocator(5)
    bar.formatter = ScalarFormatter(useOffset=False)
    bar.update_ticks()
    bar.set_label(panel.label, fontsize=7)
