"""What all figures share: sizes in mm, style, colours, and axes placed in mm."""

from __future__ import annotations

import functools
import math
import re
from collections.abc import Callable, Mapping, Sequence
from contextlib import AbstractContextManager
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, TypeVar

import matplotlib
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import blended_transform_factory

from wiresolve.result import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Drawn = TypeVar("Drawn")
"""What is drawn: a result or a gate curve."""
COLUMN_MM, PAGE_MM = 86.0, 178.0
_DASHES: tuple[Any, ...] = ("-", (0, (4, 1.4)), (0, (1.4, 0.9)), (0, (5, 1.2, 1, 1.2)), (0, (8, 2)), (0, (2, 2)))
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


def styled(draw: Callable[[Drawn], Figure]) -> Callable[[Drawn], Figure]:
    """Draw in this module's style whatever the caller's settings are, and leave those alone."""

    @functools.wraps(draw)
    def drawn(result: Drawn) -> Figure:
        with style():
            return draw(result)

    return drawn


def thermal_colour(number: int) -> str:
    """The colour of the carriers' temperature of that number, the same in all figures."""
    return CYCLE[(number + 1) % len(CYCLE)]


def order_of_appearance(names: Sequence[str]) -> list[int]:
    """Regions from the core outwards, then patches, insulators, and what is around and outside."""

    def rank(number: int) -> tuple[int, int]:
        kind, _, count = names[number].partition(" ")
        known = {"core": 0, "layer": 1, "patch": 2, "insulator": 4, "below": 5, "above": 6, "beside": 7, "outside": 8}
        return known.get(kind, 3), int(count) if count.isdigit() else number

    return sorted(range(len(names)), key=rank)


def goes_on(name: str) -> bool:
    """Whether a region reaches far beyond what is drawn: a material outside, or the surroundings."""
    return name in ("outside", "beside") or re.fullmatch(r"(below|above) \d+", name) is not None


def line_style(number: int) -> tuple[str, Any]:
    """Colour and line style of the line of that number (from 0): once the colours are used up, the dashes change."""
    rounds, colour = divmod(number, len(CYCLE))
    return CYCLE[colour], "-" if rounds == 0 else (0, (5, 1.5) + (1, 1.5) * (rounds - 1))


def dashes_of(labels: Sequence[str]) -> dict[str, Any]:
    """A line style for each group of valleys, in order of appearance; drawn full where there is only one."""
    return {label: _DASHES[n % len(_DASHES)] for n, label in enumerate(dict.fromkeys(labels))}


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


def extent_of(points: Any) -> tuple[float, float, float, float]:
    """Left, right, bottom and top of a frame around points, with a narrow edge."""
    (left, bottom), (right, top) = points.min(axis=0), points.max(axis=0)
    edge = 0.01 * max(right - left, top - bottom)
    return float(left - edge), float(right + edge), float(bottom - edge), float(top + edge)


def round_length(about: float) -> float:
    """The largest of 1, 2, 5 times a power of ten that is not above `about`."""
    power = 10.0 ** math.floor(math.log10(about))
    return max(m * power for m in (1, 2, 5) if m * power <= about)


def shortened(text: str, most: int) -> str:
    """One line of text; dollar signs would start a formula."""
    line = " ".join(text.split()).replace("$", r"\$")
    return line if len(line) <= most else line[: most - 3].rstrip() + "..."


def panels(count: int, aspect: float) -> tuple[int, float]:
    """Columns and panel width in mm that leave least of the page (at most 215 mm high) empty."""
    best, most = (5, 12.0), 0.0
    for columns in range(1, min(5, count) + 1):
        rows = math.ceil(count / columns)
        panel = min((PAGE_MM - 6) / columns - 3, (215 / rows - 10.5) * aspect, 75.0, 60.0 * aspect)
        covered = count * panel**2 / aspect / (rows * (panel / aspect + 10.5))
        if panel > 0 and covered > most:
            best, most = (columns, panel), covered
    return best


def small_energy(energy_eV: float) -> str:
    """An energy in the unit that fits, rounded up to two digits; a nanoelectronvolt at least."""
    for unit, size in (("meV", 1e-3), ("µeV", 1e-6), ("neV", 1e-9)):
        if energy_eV >= size:
            step = 10.0 ** (math.floor(math.log10(energy_eV / size)) - 1)
            return f"{math.ceil(energy_eV / size / step - 1e-9) * step:g} {unit}"
    return "1 neV"


def spread(places: Any, gap: float, span: tuple[float, float]) -> Any:
    """Ascending label places at least `gap` apart, inside `span` where they fit, as near to `places` as that allows."""
    out = np.array(places, dtype=float)
    for i in range(1, len(out)):
        out[i] = max(out[i], out[i - 1] + gap)
    out[-1] = min(out[-1], span[1])
    for i in range(len(out) - 2, -1, -1):
        out[i] = min(out[i], out[i + 1] - gap)
    return out


def label_lines(axes: Axes, start: float, at: Sequence[float], texts: Sequence[str], gap_mm: float) -> None:
    """Labels right of the axes at heights `at` (data, ascending), moved apart inside the frame, each with its line.

    `start` is where the lines begin, as a fraction of the width.
    """
    if not at:
        return
    frame = axes.get_window_extent()
    wide, high = frame.width / _DPI * 25.4, frame.height / _DPI * 25.4
    low, top = axes.get_ylim()
    gap = gap_mm / high * (top - low)
    places = spread(at, gap, (low + gap / 2, top - gap / 2))
    bends = [start + mm / wide for mm in (0.0, 2.2, 3.2)]
    across = axes.get_yaxis_transform()
    for height, place, text in zip(at, places, texts, strict=True):
        axes.plot(bends, [height, place, place], color=FAINT, lw=0.5, clip_on=False, transform=across)
        axes.text(bends[2] + 0.6 / wide, place, text, transform=across, va="center", fontsize=7)


def mark(axes: Axes, energies_meV: Any) -> None:
    """Small triangles above the axes at the energies that are in view; few enough ticks for the narrow column."""
    low, high = axes.get_xlim()
    at = np.array([e for e in energies_meV if low <= e <= high])
    across = blended_transform_factory(axes.transData, axes.transAxes)
    axes.plot(at, np.full(len(at), 1.02), "v", ms=3.0, color=CYCLE[5], transform=across, clip_on=False)
    axes.set_xlim(low, high)
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.ticklabel_format(axis="x", useOffset=False)


def mark_fermi(axes: Axes, result: Result, along: str) -> None:
    """A thin dashed line and a word at the wire file's Fermi level; its value and an arrow where it is out of view."""
    if result.problem.fermi_level_eV is None:
        return
    level = 1e3 * result.problem.fermi_level_eV
    low, high = axes.get_xlim() if along == "x" else axes.get_ylim()
    part = (level - low) / (high - low)
    style: dict[str, Any] = {"textcoords": "offset points", "xycoords": "axes fraction", "fontsize": 6}
    if not 0 <= part <= 1:
        # Curves are drawn over it, since it says nothing about them.
        arrow, right = {"x": "←→", "y": "↓↑"}[along][int(part > 1)], along == "x" and part > 1
        at = (1.0 if right else 0.0, 1.0 if along == "y" and part > 1 else 0.0)
        shift, sides = (
            (-2 if right else 2, -2 if at[1] else 2),
            ("right" if right else "left", "top" if at[1] else "bottom"),
        )
        axes.annotate(f"Fermi level {level:.4g} meV {arrow}", at, shift, ha=sides[0], va=sides[1], zorder=1.5, **style)
        return
    style["bbox"] = {"fc": "white", "ec": "none", "alpha": 0.85, "pad": 0.6}
    line: dict[str, Any] = {"color": INK, "lw": 0.6, "ls": (0, (4, 2)), "zorder": 1.5}
    if along == "x":
        axes.axvline(level, **line)
        side, shift = ("right", (-2, 0)) if part > 0.5 else ("left", (2, 0))
        axes.annotate("Fermi level", (part, 0.03), shift, rotation=90, ha=side, va="bottom", zorder=4, **style)
    else:
        axes.axhline(level, **line)
        side, shift = ("bottom", (2, 2)) if part < 0.9 else ("top", (2, -2))
        axes.annotate("Fermi level", (0, part), shift, ha="left", va=side, zorder=4, **style)


ENDS = ("#00395c", "#2f8fca", "#ffffff", "#ee8647", "#7d3200")


def coloured(values: Any) -> Any:
    """RGBA bytes of a signed image on its own symmetric scale, in 192 steps; transparent where it is NaN.

    The steps are too fine to be seen and make the files half as large.
    """
    half = 96
    inside = np.isfinite(values)
    t = np.where(inside, values, 0.0) / (np.nanmax(np.abs(values), initial=0.0) or 1.0)
    stops, colours = np.linspace(-half, half, len(ENDS)), np.array([to_rgb(c) for c in ENDS])
    steps = np.arange(-half, half + 1)
    table = np.full((2 * half + 2, 4), 255, dtype=np.uint8)
    for channel in range(3):
        table[:-1, channel] = np.rint(255 * np.interp(steps, stops, colours[:, channel]))
    table[-1] = (255, 255, 255, 0)
    return table[np.where(inside, np.rint(half * t).astype(np.int64) + half, -1)]


def save(
    made: Mapping[str, Callable[[Drawn], Figure]], names: Sequence[str], thing: Drawn, folder: str | Path
) -> list[Path]:
    """Draw the named figures of a thing and write each as PNG and SVG; the same thing gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    written = []
    with style():
        for name in names:
            figure = made[name](thing)
            png, svg = Path(folder) / f"{name}.png", Path(folder) / f"{name}.svg"
            figure.savefig(png, format="png", metadata={"Software": None}, pil_kwargs={"compress_level": 4})
            figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": "wiresolve"})
            written += [png, svg]
    return written
