"""The section of a report, drawn to scale from its description: what is painted, in order, gates and a scale bar."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.appearance import round_length
from wiresolve.describe.curves import Line, Loop, Parabolas, Segment, Spline
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import GAP, VOID, Piece
from wiresolve.describe.setting import Setting, setting
from wiresolve.output.report_page import text

Array = NDArray[np.float64]
Frame = tuple[float, float, float, float]
_CURVED, _EACH = 48, 4
"""Straight pieces a curve is drawn with, and between two points of a traced one."""
_COLOURS = 7
_MARGIN = 0.06
_SIZE = 420.0
"""Width or height of the drawing in px, whichever is more."""


def drawing(problem: Problem) -> str:
    """HTML of the drawing and its legend."""
    around = setting(problem)
    painted = around.pieces(problem.section)
    frame = _frame(painted, around, problem.section.outside is not None)
    left, bottom, right, top = frame
    wide, high = right - left, top - bottom
    scale = _SIZE / max(wide, high)
    colours, shapes = _colours(painted, problem), []
    outside = problem.section.outside
    if outside is not None:
        shapes.append(_box(scale * wide, scale * high, colours["outside"], True))
    if problem.surroundings is not None:
        shapes.append(f'<rect class="beside" width="{scale * wide:.1f}" height="{scale * high:.1f}"/>')
    for piece in painted:
        if piece.name == "beside":
            continue
        path = _path([piece.loop, *(piece.holes or ())], left, top, scale)
        hidden = piece.name == GAP or piece.material == VOID
        look = 'class="hole"' if hidden else _look(colours[piece.name], piece.carriers)
        shapes.append(f'<path {look} fill-rule="evenodd" d="{path}"><title>{text(_named(piece))}</title></path>')
    for metal in around.gates:
        shapes.append(
            f'<path class="metal" d="{_open(metal.segments, left, top, scale)}"><title>gate {text(metal.name)}</title>'
            "</path>"
        )
    bar = round_length(0.3 * wide)
    y = scale * high + 20
    ruler = (
        f'<path class="ruler" d="M1,{y - 5:.1f}V{y + 5:.1f}M1,{y:.1f}H{1 + scale * bar:.1f}m0,-5v10"/>'
        f'<text x="{scale * bar + 9:.1f}" y="{y:.1f}" dy="0.35em">{bar:g} nm</text>'
    )
    rows = _legend(painted, colours, problem, around, frame)
    says = f"The section to scale: {'; '.join(words for words, _ in rows)}."
    return (
        f'<div class="section"><svg viewBox="-2 -2 {scale * wide + 4:.1f} {scale * high + 38:.1f}" role="img"'
        f' aria-label="{text(says)}"><defs><clipPath id="frame"><rect width="{scale * wide:.1f}"'
        f' height="{scale * high:.1f}"/></clipPath></defs><g clip-path="url(#frame)">{"".join(shapes)}</g>'
        f'{ruler}</svg><ul class="legend">{_swatches(rows)}</ul></div>'
    )


def _colours(painted: Sequence[Piece], problem: Problem) -> dict[str, int]:
    """A number of the cycle for each part, from the core outwards, then patches, insulators and surroundings."""
    own = [p for p in painted if p.name not in (GAP, "beside")]

    def rank(piece: Piece) -> int:
        kinds = ("core", "layer", "patch", "insulator", "below", "above")
        return next((n for n, kind in enumerate(kinds) if piece.name.startswith(kind)), 2)

    ordered = sorted(own, key=rank)
    cores = [p for p in ordered if p.name.startswith("layer")]
    # Layers are painted from the outermost one inwards.
    names = [p.name for p in ordered if not p.name.startswith("layer")]
    place = sum(p.name.startswith("core") for p in ordered)
    names[place:place] = [p.name for p in reversed(cores)]
    if problem.section.outside is not None:
        names.append("outside")
    return {name: n % _COLOURS + 1 for n, name in enumerate(names)}


def _legend(
    painted: Sequence[Piece], colours: dict[str, int], problem: Problem, around: Setting, frame: Frame
) -> list[tuple[str, str]]:
    """Words and look of each part."""
    pieces = {piece.name: piece for piece in painted}
    rows = []
    for name, number in colours.items():
        piece = pieces.get(name)
        if piece is None:
            rows.append((f"outside: {problem.section.outside}", _look(number, True)))
        elif piece.material != VOID:
            rows.append((_named(piece), _look(number, piece.carriers)))
    if problem.surroundings is not None:
        rows.append((f"beside: {problem.surroundings.beside}", 'class="beside"'))
    left, bottom, right, top = frame
    for metal in around.gates:
        x, y = _points(metal.segments).T
        seen = ((x >= left) & (x <= right) & (y >= bottom) & (y <= top)).any()
        rows.append((f"gate {metal.name}{'' if seen else ', farther away than shown'}", 'class="metal"'))
    if problem.section.outside is None and problem.surroundings is None and not around.around:
        rows.append(("a hard wall all around", 'class="wall"'))
    return rows


def _swatches(rows: Iterable[tuple[str, str]]) -> str:
    return "".join(
        f'<li><svg viewBox="0 0 22 14" width="22" height="14" aria-hidden="true"><path {look} d="M1,1H21V13H1Z"/></svg>'
        f"<span>{text(words)}</span></li>"
        for words, look in rows
    )


def _named(piece: Piece) -> str:
    around = piece.name.startswith(("insulator", "below", "above"))
    kept_out = "" if piece.carriers or around else ", carriers kept out"
    return f"{piece.name}: {piece.material}{kept_out}"


def _look(number: int, carriers: bool) -> str:
    return f'class="part{"" if carriers else " empty"}" style="--own: var(--series-{number})"'


def _box(wide: float, high: float, number: int, carriers: bool) -> str:
    return f'<rect {_look(number, carriers)} width="{wide:.1f}" height="{high:.1f}"/>'


def _frame(painted: Sequence[Piece], around: Setting, outside: bool) -> Frame:
    """Left, bottom, right and top in nm of what is shown: the section, its insulators, and of surroundings a margin."""
    near = [p.loop for p in painted if not p.name.startswith(("below", "above", "beside"))]
    x, y = np.vstack([_points(loop.segments) for loop in near]).T
    size = max(float(np.ptp(x)), float(np.ptp(y)))
    room = (0.25 if outside or around.box is not None else _MARGIN) * size
    return float(x.min()) - room, float(y.min()) - room, float(x.max()) + room, float(y.max()) + room


def _points(segments: Iterable[Segment]) -> Array:
    return np.vstack([s.point(np.linspace(0, 1, _pieces(s) + 1)) for s in segments])


def _pieces(segment: Segment) -> int:
    """Straight pieces that a segment is drawn with."""
    if isinstance(segment, Line):
        return 1
    return max(_CURVED, _EACH * len(segment.points)) if isinstance(segment, Spline | Parabolas) else _CURVED


def _path(loops: Iterable[Loop], left: float, top: float, scale: float) -> str:
    return "".join(f"{_open(loop.segments, left, top, scale)}Z" for loop in loops)


def _open(segments: Iterable[Segment], left: float, top: float, scale: float) -> str:
    """A path through the segments, moved to where one does not begin at the last one's end."""
    found, last = [], None
    for segment in segments:
        points = _points([segment])
        jump = last is None or math.dist(last, points[0]) > 1e-6 * float(np.abs(points).max() + 1)
        shown = [f"{scale * (x - left):.2f},{scale * (top - y):.2f}" for x, y in points]
        found.append(f"M{shown[0]}" if jump else "")
        found.append("L" + " ".join(shown[1:]))
        last = points[-1]
    return "".join(found)
