"""A section as a small SVG, drawn from its curves: to scale, with a scale bar and a legend of materials."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Sequence
from html import escape
from typing import Protocol

import numpy as np

from wiresolve.describe.appearance import INK, fill, order_of_appearance, round_length
from wiresolve.describe.curves import Arc, Array, EllipseArc, Line, Loop, Parabolas, Segment

_SIDE, _EDGE, _ROW = 240.0, 8.0, 19.0
"""Pixels: the longer side of the drawing, the margin around it, and a row of the legend."""
_MOST_POINTS = 400
"""Points that a smooth curve is drawn with; parabolas are drawn as such while there are no more."""
_VOID = "void"


class Painted(Protocol):
    """A piece of a section, as `describe.section` has it."""

    @property
    def name(self) -> str: ...

    @property
    def loop(self) -> Loop: ...

    @property
    def material(self) -> str: ...

    @property
    def carriers(self) -> bool: ...

    @property
    def holes(self) -> tuple[Loop, ...] | None: ...


class _Paper:
    """Places on the picture: x to the right and y downwards, in pixels."""

    def __init__(self, left: float, top: float, scale: float) -> None:
        self._left, self._top, self.scale = left, top, scale

    def at(self, point: Sequence[float] | Array) -> str:
        """A point of the section, "x y"."""
        x, y = self.scale * (point[0] - self._left) + _EDGE, self.scale * (self._top - point[1]) + _EDGE
        return f"{x:.2f} {y:.2f}"


def svg(pieces: Sequence[Painted], outside: str | None) -> str:
    """Pieces, painted in their order, as an SVG text of its own; lines of text take the page's colour.

    A material that goes on outside is shown as a frame. What is void shows the page.
    """
    points = np.vstack([piece.loop.sample(24) for piece in pieces])
    (left, bottom), (right, top) = points.min(axis=0), points.max(axis=0)
    size = max(right - left, top - bottom)
    room = 0.12 * size if outside is not None else 0.0
    left, right, bottom, top = left - room, right + room, bottom - room, top + room
    paper = _Paper(left, top, _SIDE / max(right - left, top - bottom))
    wide, high = paper.scale * (right - left), paper.scale * (top - bottom)
    legend = _legend(pieces, outside)
    colours = {name: _colour(place, carriers) for place, (name, _, carriers) in enumerate(legend)}
    body: list[str] = []
    if outside is not None:
        body.append(
            f'<rect x="{_EDGE}" y="{_EDGE}" width="{wide:.2f}" height="{high:.2f}" fill="{colours["outside"]}"/>'
        )
    mark = hashlib.sha256(repr([(p.name, p.material, p.loop) for p in pieces]).encode()).hexdigest()[:8]
    for number, piece in enumerate(pieces):
        path = " ".join(_loop(loop, paper) for loop in (piece.loop, *(piece.holes or ())))
        if piece.material == _VOID:
            # Cuts a hole into all that is painted so far.
            name = f"hole-{mark}-{number}"
            cut = f'<rect width="100%" height="100%" fill="white"/><path d="{path}" fill="black"/>'
            body = [f'<mask id="{name}">{cut}</mask>', f'<g mask="url(#{name})">', *body, "</g>"]
            body.append(f'<path d="{path}" fill="none" stroke="currentColor" stroke-width="1"/>')
            continue
        look = f'fill="{colours[piece.name]}" fill-rule="evenodd" stroke="{INK}" stroke-width="1"'
        body.append(f'<path d="{path}" {look}/>')
    texts, across = _key(legend, colours, size, paper.scale, high + 2 * _EDGE)
    full = max(wide + 2 * _EDGE, across), high + 2 * _EDGE + _ROW * (len(legend) + 1) + 4
    words = escape(f"Section: {', '.join(f'{name} of {material}' for name, material, _ in legend)}", quote=True)
    head = f'<svg xmlns="http://www.w3.org/2000/svg" width="{full[0]:.0f}" height="{full[1]:.0f}" role="img"'
    head += f' viewBox="0 0 {full[0]:.0f} {full[1]:.0f}" aria-label="{words}">'
    return "\n".join([head, *body, *texts, "</svg>"])


def _colour(place: int, carriers: bool) -> str:
    return "#" + "".join(f"{round(255 * part):02x}" for part in fill(place, carriers))


def _legend(pieces: Sequence[Painted], outside: str | None) -> list[tuple[str, str, bool]]:
    """Name, material and whether carriers may be there of each part, in the order of appearance."""
    found = {piece.name: (piece.material, piece.carriers) for piece in pieces if piece.material != _VOID}
    found |= {"outside": (outside, True)} if outside is not None else {}
    names = list(found)
    return [(names[n], *found[names[n]]) for n in order_of_appearance(names)]


def _key(
    legend: Sequence[tuple[str, str, bool]], colours: dict[str, str], size: float, scale: float, below: float
) -> tuple[list[str], float]:
    """The scale bar and the rows of the legend, and how far to the right they reach."""
    length = round_length(0.4 * size)
    style = 'fill="currentColor" font-family="sans-serif" font-size="12"'
    y = below + _ROW / 2
    end = _EDGE + scale * length
    found = [f'<path d="M{_EDGE} {y} H{end:.2f}" stroke="currentColor" stroke-width="2.5" fill="none"/>']
    texts = [f"{length:g} nm"]
    found.append(f'<text x="{end + 6:.2f}" y="{y + 4:.2f}" {style}>{texts[0]}</text>')
    for row, (name, material, carriers) in enumerate(legend, 1):
        y = below + _ROW * row
        texts.append(f"{name}: {material}" + ("" if carriers else ", carriers kept out"))
        box = f'x="{_EDGE}" y="{y + 3:.2f}" width="18" height="11"'
        found.append(f'<rect {box} fill="{colours[name]}" stroke="{INK}" stroke-width="1"/>')
        found.append(f'<text x="{_EDGE + 25}" y="{y + 13:.2f}" {style}>{escape(texts[-1])}</text>')
    reach = max(end + 6 + 7.2 * len(texts[0]), _EDGE + 25 + 7.2 * max(map(len, texts[1:]), default=0))
    return found, reach + _EDGE


def _loop(loop: Loop, paper: _Paper) -> str:
    """A closed path."""
    parts = [f"M{paper.at(loop.segments[0].start)}"]
    for segment in loop.segments:
        parts += _segment(segment, paper)
    return " ".join([*parts, "Z"])


def _segment(segment: Segment, paper: _Paper) -> list[str]:
    """A segment from its start on."""
    if isinstance(segment, Line):
        return [f"L{paper.at(segment.end)}"]
    if isinstance(segment, Arc | EllipseArc):
        # An arc that is closed, or nearly so, is none to SVG: in two halves it is.
        a, b, tilt = segment.conic()
        turn = f"{-math.degrees(tilt):.4g} 0 {0 if segment.sweep > 0 else 1}"
        radii = f"{paper.scale * a:.3f} {paper.scale * b:.3f}"
        return [f"A{radii} {turn} {paper.at(point)}" for point in segment.point(np.array([0.5, 1.0]))]
    if isinstance(segment, Parabolas) and len(segment.points) <= _MOST_POINTS:
        poles, _ = segment.poles()
        return [f"Q{paper.at(poles[k])} {paper.at(poles[k + 1])}" for k in range(1, len(poles), 2)]
    count = min(_MOST_POINTS, 6 * len(segment.points))
    return [f"L{paper.at(point)}" for point in segment.point(np.linspace(0, 1, count + 1)[1:])]
