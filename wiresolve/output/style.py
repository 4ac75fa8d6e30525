"""The style of all figures: fonts, lines and sizes, whatever the caller's settings are; and a figure that keeps it."""

from __future__ import annotations

import functools
import io
import re
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from types import MappingProxyType
from typing import Any, ParamSpec

import matplotlib
from matplotlib.figure import Figure
from matplotlib.font_manager import fontManager

from wiresolve.describe.appearance import INK

Drawn = ParamSpec("Drawn")
"""What is drawn: a result or a gate curve, and points laid over it."""
DPI = 160
"""Pixels an inch, of PNG files and of pictures within the others."""
STYLE = MappingProxyType(
    {
        # The first is the part of the second that figures use (scripts/_figure_font.py): it is embedded faster.
        "font.family": ["DejaVu Sans Figures", "DejaVu Sans"],
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
        # Text stays text: in SVG as such, in PDF with the letters of an embedded TrueType font.
        "svg.fonttype": "none",
        "svg.hashsalt": "wiresolve",
        "pdf.fonttype": 42,
        "figure.dpi": DPI,
        "savefig.dpi": DPI,
    }
)
_OURS = re.compile(
    r"(axes|font|figure|grid|hatch|image|legend|lines|markers|mathtext|patch|path|pdf|savefig|svg|text|[xy](axis|tick))\."
)
"""Groups of Matplotlib's settings that a figure depends on."""
_METADATA: Mapping[str, Mapping[str, str | None]] = MappingProxyType(
    {
        "png": {"Software": None},
        "svg": {"Date": None, "Creator": "wiresolve"},
        "pdf": {"CreationDate": None, "Creator": "wiresolve"},
    }
)
"""Without dates, so that the same figure gives the same bytes."""


@functools.cache
def _settings() -> Mapping[Any, Any]:
    """This module's style, checked, and Matplotlib's own defaults for what it leaves open; makes its font known."""
    fontManager.addfont(Path(__file__).with_name("fonts") / "figures.ttf")
    defaults = {key: value for key, value in matplotlib.rcParamsDefault.items() if _OURS.match(key)}
    return MappingProxyType({**defaults, **matplotlib.RcParams(dict(STYLE))})


@contextmanager
def style() -> Iterator[None]:
    """This module's style in place of the caller's settings, for the time of a `with` block."""
    before = dict.copy(matplotlib.rcParams)
    # The values have been checked: doing so again for each of the 300 takes longer than some figures.
    dict.update(matplotlib.rcParams, _settings())
    try:
        yield
    finally:
        dict.update(matplotlib.rcParams, before)


def styled(draw: Callable[Drawn, Figure]) -> Callable[Drawn, Figure]:
    """Draw in this module's style whatever the caller's settings are, and leave those alone."""

    @functools.wraps(draw)
    def drawn(*given: Drawn.args, **named: Drawn.kwargs) -> Figure:
        with style():
            return draw(*given, **named)

    return drawn


class Drawing(Figure):
    """A figure that is saved in the style in which it was drawn, without dates, and that notebooks show."""

    def savefig(self, fname: Any, *, transparent: bool | None = None, **kwargs: Any) -> None:
        """As Matplotlib's own; PNG, SVG and PDF of the same figure have the same bytes, and text in them is text."""
        kind = kwargs.get("format") or Path(str(fname)).suffix.removeprefix(".").lower()
        if kind in _METADATA:
            kwargs.setdefault("metadata", dict(_METADATA[kind]))
        with style():
            super().savefig(fname, transparent=transparent, **kwargs)

    def _repr_png_(self) -> tuple[bytes, dict[str, int]]:
        """The picture that a notebook shows, at its size on paper."""
        picture = io.BytesIO()
        self.savefig(picture, format="png", dpi=self.dpi)
        return picture.getvalue(), {"width": round(96 * float(self.get_figwidth()))}
