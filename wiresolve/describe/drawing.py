"""Everything that a section draws, taken together: the area of overlapping outlines and how far they reach."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Arc, Array, Line, Loop, Segment
from wiresolve.describe.planar_map import outlines
from wiresolve.describe.section import GAP, Piece, Section

BESIDE = 1e-10
"""How far beside an outline, as a part of the drawing's size, it is asked what lies there."""
CELLS: dict[type, int] = {Line: 16, Arc: 32}
"""Cells into which a segment is cut to find where it meets others; closed curves of one segment have more."""
MOST_CELLS, HALVINGS = 256, 28


def reach(pieces: Sequence[Piece]) -> tuple[float, float]:
    """Overall width and height in nm of the pieces."""
    segments = [segment for piece in pieces for segment in piece.loop.segments]
    points = [s.point(np.linspace(0, 1, 2 if isinstance(s, Line) else 4097)) for s in segments]
    width, height = np.ptp(np.vstack(points), axis=0)
    return float(width), float(height)


def area(pieces: Sequence[Piece]) -> float:
    """Area in nm^2 of the union of the pieces, holes painted as void included."""
    # The outermost layer is painted first: its outline is around the core and all layers.
    loops = [pieces[0].loop]
    if pieces[0].holes is not None:
        loops = outlines([(piece.loop, piece.holes or ()) for piece in pieces if piece.name != GAP])
    last = max((k for k, piece in enumerate(pieces) if piece.holes is not None), default=0)
    loops += [piece.loop for piece in pieces[last + 1 :] if piece.name.startswith("patch")]
    if len(loops) == 1 or last == len(pieces) - 1:
        return sum(loop.area for loop in loops)
    beside = BESIDE * max(reach(pieces))
    segments = [segment for loop in loops for segment in loop.segments]
    marks = np.vstack([s.point(_even(s)[: 1 if isinstance(s, Line) else -1]) for s in segments])
    boxes = [_box(loop.sample(64)) for loop in loops]
    total = 0.0
    for k, loop in enumerate(loops):
        for segment in loop.segments:
            grid = _grid(segment, marks)
            low, high = _box(segment.point(grid))
            near = [n for n, (a, b) in enumerate(boxes) if n != k and (a <= high).all() and (low <= b).all()]
            # Where outlines coincide, the last one counts: what the later ones hold on the inner side is theirs.
            total += _share(segment, grid, beside, [loops[n] for n in near], [loops[n] for n in near if n > k])
    return total


def visible_areas(section: Section) -> dict[str, float]:
    """Area in nm^2 of what is left to see of each piece, by name; patches over an imported mesh are not subtracted."""
    pieces = section.pieces()
    if section.groups:
        layers = [piece for piece in pieces if piece.holes is None and piece.name.startswith("layer")]
        map_area = area([piece for piece in pieces if piece.holes is not None])
        found = dict.fromkeys((piece.name for piece in pieces), 0.0)
        for k, piece in enumerate(layers):
            found[piece.name] = piece.loop.area - (layers[k + 1].loop.area if k + 1 < len(layers) else map_area)
        for piece in pieces:
            if piece.holes is not None:
                found[piece.name] += piece.loop.area - sum(hole.area for hole in piece.holes)
            elif piece.name.startswith("patch"):
                found[piece.name] = piece.loop.area
        return found
    patches = [piece for piece in pieces if piece.name.startswith("patch")]
    nested = pieces[: len(pieces) - len(patches)]
    whole = [area([piece, *patches]) for piece in nested]
    whole += [area(patches[k:]) for k in range(len(patches))] + [0.0]
    return {piece.name: whole[k] - whole[k + 1] for k, piece in enumerate(pieces)}


def _box(points: Array) -> tuple[Array, Array]:
    """Lower left and upper right corner of a box around the curve that the points sample."""
    low, high = points.min(axis=0), points.max(axis=0)
    margin = 0.01 * (high - low).max()
    return low - margin, high + margin


def _even(segment: Segment) -> Array:
    """Equally spaced parameters from 0 to 1."""
    return np.linspace(0, 1, CELLS.get(type(segment), MOST_CELLS) + 1)


def _grid(segment: Segment, marks: Array) -> Array:
    """Parameters from 0 to 1; on a line also opposite to corners and curves near it, so that none slips through."""
    even = _even(segment)
    if not isinstance(segment, Line):
        return even
    start, along = np.array(segment.start), np.array(segment.end) - np.array(segment.start)
    across = np.array([-along[1], along[0]])
    length2 = along @ along
    opposite, apart = (marks - start) @ along / length2, (marks - start) @ across / length2
    corner = (opposite > 0) & (opposite < 1) & (np.abs(apart) < 1 / CELLS[Line])
    return np.unique(np.concatenate([even, opposite[corner]]))


def _share(segment: Segment, grid: Array, beside: float, others: Sequence[Loop], later: Sequence[Loop]) -> float:
    """What the parts of a segment that bound the union add to its area: half the integral of x dy - y dx."""

    def bounds(t: Array) -> NDArray[np.bool_]:
        points, along = segment.point(t), segment.tangent(t)
        step = beside * np.column_stack([along[:, 1], -along[:, 0]]) / np.hypot(*along.T)[:, None]
        free = np.ones(len(points), dtype=bool)
        for side, loops in ((step, others), (-step, later)):
            for loop in loops:
                free[free] = ~loop.contains((points + side)[free])
        return free

    seen = bounds(grid)
    low, high, at_low, at_high = grid[:-1].copy(), grid[1:].copy(), seen[:-1], seen[1:]
    change = np.flatnonzero(at_low != at_high)
    a, b = low[change], high[change]
    for _ in range(HALVINGS if change.size else 0):
        middle = (a + b) / 2
        same = bounds(middle) == at_low[change]
        a, b = np.where(same, middle, a), np.where(same, b, middle)
    high[change] = np.where(at_low[change], a, high[change])
    low[change] = np.where(at_low[change], low[change], b)
    kept = at_low | at_high
    nodes, weights = np.polynomial.legendre.leggauss(4)
    span = (high - low)[kept]
    t = (low[kept, None] + span[:, None] * (nodes + 1) / 2).ravel()
    (x, y), (dx, dy) = segment.point(t).T, segment.tangent(t).T
    return float((span[:, None] * weights / 2).ravel() @ (x * dy - y * dx)) / 2
