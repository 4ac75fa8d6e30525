"""What all figures share: sizes in mm, style, colours, and axes placed in mm."""

from __future__ import annotations

import functools
from collections.abc import Callable
from contextlib import AbstractContextManager
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import matplotlib
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure

from wiresolve.result import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes

COLUMN_MM, PAGE_MM = 86.0, 178.0
CYCLE = ("#0072B2", "#E69F00", "#009E73", "#CC79A7", "#56B4E9", "#D55E00", "#F0E442", "#000000")
INK, FAINT = "#262626", "#8c8c8c"
_DPI = 200
STYLE = MappingProxyType(
    {
        "font.family": "DejaVu Sans",
        "font.size": 8.0,
        "axes.titlesize": 8.0,
        "axes.labelsize": 8.0,
        "xtick.labelsize": 7.0,
        "ytick.labelsize": 7.0,
        "legend.fontsize": 7.0,
        "legend.frameon": False,
        "axes.linewidth": 0.6,
        "axes.edgecolor": INK,
        "axes.labelcolor": INK,
        "axes.spines.top": False,
        "axes.spines.right": False,
        "text.color": INK,
        "xtick.color": INK,
        "ytick.color": INK,
        "xtick.major.width": 0.6,
        "ytick.major.width": 0.6,
        "xtick.major.size": 2.5,
        "ytick.major.size": 2.5,
        "lines.linewidth": 1.2,
        "path.simplify": True,
        "svg.fonttype": "none",
        "svg.hashsalt": "wiresolve",
        "figure.dpi": _DPI,
        "savefig.dpi": _DPI,
    }
)


def style() -> AbstractContextManager[None]:
    """This module's style in place of the caller's settings, for the time of a `with` block."""
    settings: dict[Any, Any] = dict(STYLE)
    return matplotlib.rc_context(settings)


def styled(draw: Callable[[Result], Figure]) -> Callable[[Result], Figure]:
    """Draw in this module's style whatever the caller's settings are, and leave those alone."""

    @functools.wraps(draw)
    def drawn(result: Result) -> Figure:
        with style():
            return draw(result)

    return drawn


def thermal_colour(number: int) -> str:
    """The colour of the carriers' temperature of that number, the same in all figures."""
    return CYCLE[(number + 1) % len(CYCLE)]


def canvas(width_mm: float, height_mm: float) -> tuple[Figure, Callable[[float, float, float, float], Axes]]:
    """A figure, and a function that adds axes to it by left, bottom, width and height in mm."""
    figure = Figure(figsize=(width_mm / 25.4, height_mm / 25.4))
    FigureCanvasAgg(figure)

    def rect(left: float, bottom: float, width: float, height: float) -> Axes:
        return figure.add_axes((left / width_mm, bottom / height_mm, width / width_mm, height / height_mm))

    return figure, rect


def bare(axes: Axes, extent: tuple[float, float, float, float]) -> None:
    axes.set_axis_off()
    axes.set_xlim(extent[0], extent[1])
    axes.set_ylim(extent[2], extent[3])


_ENDS = ("#00395c", "#2f8fca", "#ffffff", "#ee8647", "#7d3200")


def coloured(values: Any) -> Any:
    """RGBA bytes of a signed image on its own symmetric scale, in 192 steps; transparent where it is NaN.

    The steps are too fine to be seen and make the files half as large.
    """
    half = 96
    inside = np.isfinite(values)
    t = np.where(inside, values, 0.0) / (np.nanmax(np.abs(values), initial=0.0) or 1.0)
    stops, colours = np.linspace(-half, half, len(_ENDS)), np.array([to_rgb(c) for c in _ENDS])
    steps = np.arange(-half, half + 1)
    table = np.full((2 * half + 2, 4), 255, dtype=np.uint8)
    for channel in range(3):
        table[:-1, channel] = np.rint(255 * np.interp(steps, stops, colours[:, channel]))
    table[-1] = (255, 255, 255, 0)
    return table[np.where(inside, np.rint(half * t).astype(np.int64) + half, -1)]
