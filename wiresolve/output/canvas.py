"""What all figures share: sizes and places in mm, colours, marks and labels."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.path import Path as Outline
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import blended_transform_factory

from wiresolve.describe.appearance import CYCLE as CYCLE
from wiresolve.describe.appearance import INK as INK
from wiresolve.describe.appearance import order_of_appearance as order_of_appearance
from wiresolve.output.style import DPI, Drawing
from wiresolve.output.target import PICTURES
from wiresolve.result import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes

COLUMN_MM, PAGE_MM = 86.0, 178.0
_DASHES: tuple[Any, ...] = ("-", (0, (4, 1.4)), (0, (1.4, 0.9)), (0, (5, 1.2, 1, 1.2)), (0, (8, 2)), (0, (2, 2)))
FAINT, GRID = "#8c8c8c", "#e4e4e4"


def thermal_colour(number: int) -> str:
    """The colour of the carriers' temperature of that number, the same in all figures."""
    return CYCLE[(number + 1) % len(CYCLE)]


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
    figure = Drawing(figsize=(width_mm / 25.4, height_mm / 25.4))
    FigureCanvasAgg(figure)

    def rect(left: float, bottom: float, width: float, height: float) -> Axes:
        return figure.add_axes((left / width_mm, bottom / height_mm, width / width_mm, height / height_mm))

    return figure, rect


def trace(
    axes: Axes,
    lines: Any,
    colour: Any,
    width: float,
    *,
    zorder: float = 2,
    alpha: float | None = None,
    cap: Literal["butt", "round"] = "butt",
) -> None:
    """Draw polylines, (m, n, 2) in data coordinates, as one path: there may be thousands of them."""
    points = np.asarray(lines, dtype=float)
    if not points.size:
        return
    codes = np.full(points.shape[:2], Outline.LINETO)
    codes[:, 0] = Outline.MOVETO
    path = Outline(points.reshape(-1, 2), codes.ravel())
    style: dict[str, Any] = {"capstyle": cap, "joinstyle": "round", "alpha": alpha, "zorder": zorder}
    axes.add_artist(PathPatch(path, fill=False, ec=colour, lw=width, **style))


def titled(axes: Axes, text: str, size: float = 7.0, pad: float = 5.0) -> None:
    """A title flush left above the axes, at a fixed height: Matplotlib would measure all labels to find one."""
    axes.set_title(text, loc="left", pad=pad, fontsize=size, linespacing=1.3, y=1.0)


def bare(axes: Axes, extent: tuple[float, float, float, float]) -> None:
    axes.set_axis_off()
    axes.set_xlim(extent[0], extent[1])
    axes.set_ylim(extent[2], extent[3])


def extent_of(points: Any) -> tuple[float, float, float, float]:
    """Left, right, bottom and top of a frame around points, with a narrow edge."""
    (left, bottom), (right, top) = points.min(axis=0), points.max(axis=0)
    edge = 0.01 * max(right - left, top - bottom)
    return float(left - edge), float(right + edge), float(bottom - edge), float(top + edge)


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
    wide, high = frame.width / DPI * 25.4, frame.height / DPI * 25.4
    low, top = axes.get_ylim()
    gap = gap_mm / high * (top - low)
    places = spread(at, gap, (low + gap / 2, top - gap / 2))
    bends = [start + mm / wide for mm in (0.0, 2.2, 3.2)]
    across = axes.get_yaxis_transform()
    # One line with gaps.
    heights = np.column_stack([at, places, places, np.full(len(at), np.nan)])
    axes.plot([*bends, np.nan] * len(at), heights.ravel(), color=FAINT, lw=0.5, clip_on=False, transform=across)
    for place, text in zip(places, texts, strict=True):
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
    style["bbox"] = {"fc": "white", "ec": "none", "alpha": 0.85, "pad": 0.6}
    if not 0 <= part <= 1:
        arrow, right = {"x": "←→", "y": "↓↑"}[along][int(part > 1)], along == "x" and part > 1
        at = (1.0 if right else 0.0, 1.0 if along == "y" and part > 1 else 0.0)
        shift, sides = (
            (-2 if right else 2, -2 if at[1] else 2),
            ("right" if right else "left", "top" if at[1] else "bottom"),
        )
        axes.annotate(f"Fermi level {level:.4g} meV {arrow}", at, shift, ha=sides[0], va=sides[1], zorder=4, **style)
        return
    line: dict[str, Any] = {"color": INK, "lw": 0.6, "ls": (0, (4, 2)), "zorder": 1.5}
    if along == "x":
        axes.axvline(level, **line)
        side, shift = ("right", (-2, 0)) if part > 0.5 else ("left", (2, 0))
        axes.annotate("Fermi level", (part, 0.03), shift, rotation=90, ha=side, va="bottom", zorder=4, **style)
    else:
        axes.axhline(level, **line)
        side, shift = ("bottom", (2, 2)) if part < 0.9 else ("top", (2, -2))
        axes.annotate("Fermi level", (0, part), shift, ha="left", va=side, zorder=4, **style)


def with_fermi(result: Result, low: float, high: float) -> tuple[float, float]:
    """A range in meV, widened by up to a third of itself where that brings the wire file's Fermi level into view."""
    level, room = result.problem.fermi_level_eV, 0.3 * (high - low)
    if level is None or not low - room <= 1e3 * level <= high + room:
        return low, high
    return min(low, 1e3 * level - 0.1 * room), max(high, 1e3 * level + 0.1 * room)


def from_zero(result: Result) -> str:
    return "Energy (meV)" if result.charge is None else "Energy from the Fermi level (meV)"


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


def save(made: Mapping[str, Callable[[], Figure]], folder: str | Path) -> list[Path]:
    """Draw each of the named figures once and write it as PNG, SVG and PDF; the same thing gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    written = []
    for name, draw in made.items():
        figure = draw()
        for kind in PICTURES:
            path = Path(folder) / f"{name}.{kind}"
            more: dict[str, Any] = {"pil_kwargs": {"compress_level": 3}} if kind == "png" else {}
            figure.savefig(path, format=kind, **more)
            written.append(path)
    return written
