"""Outlines that touch without crossing: there two curves run along each other so closely that nothing can be cut."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from wiresolve.describe.curves import Arc, Line, Loop, Point, Segment
from wiresolve.describe.mesh_data import Array

NEAREST_nm = 1e-4
"""Curves that come closer than this without crossing, or overlap by less, touch."""
_SLANT = 0.02
"""Sine of the angle below which two curves run along each other."""
_SAME_nm = 1e-9
_AT_END = 0.02
"""How near to its end a place on a curve is still at the end, as a part of the curve: around a touch all are near."""
_COARSE, _FINE, _ROUNDS = 33, 9, 28


def first(loops: Sequence[Loop], begin: int = 1) -> tuple[int, int, Point] | None:
    """Two loops, by number, that touch tangentially where neither has a corner, and the place; None if none do.

    Looked at are the loops from number `begin` on, each against all before it. Curves that leave each other where they
    have run on top of each other touch there too, but cleanly: both end at one point.
    """
    even = np.linspace(0, 1, _COARSE)
    marks = [[segment.point(even) for segment in loop.segments] for loop in loops]
    boxes = [_box(np.vstack(rows)) for rows in marks]
    corners = [np.array([at for at, _ in loop.corners()]).reshape(-1, 2) for loop in loops]
    for j in range(begin, len(loops)):
        for i in range(j):
            if (boxes[i][0] > boxes[j][1]).any() or (boxes[j][0] > boxes[i][1]).any():
                continue
            for k, (a, p) in enumerate(zip(loops[i].segments, marks[i], strict=True)):
                for m, (b, q) in enumerate(zip(loops[j].segments, marks[j], strict=True)):
                    at = None if isinstance(a, Line) and isinstance(b, Line) else _touch(a, b, p, q)
                    near = _AT_END * max(float(np.ptp(row, axis=0).max()) for row in (p, q))
                    if at is None or any(_near(row, at, near) for row in (corners[i], corners[j])):
                        continue
                    beside = [(other, b) for other in _neighbours(loops[i], k, at, near)]
                    beside += [(a, other) for other in _neighbours(loops[j], m, at, near)]
                    if not any(_on_top(one, other) for one, other in beside):
                        return i, j, at
    return None


def _near(points: Array, at: Point, near: float) -> bool:
    return bool(len(points) and np.hypot(*(points - at).T).min() < near)


def _neighbours(loop: Loop, number: int, at: Point, near: float) -> list[Segment]:
    """The segments that meet a loop's segment of that number at a place."""
    count = len(loop.segments)
    own, before, after = (loop.segments[k % count] for k in (number, number - 1, number + 1))
    found = [before] if math.dist(own.start, at) < near else []
    return found + ([after] if math.dist(own.end, at) < near else [])


def _on_top(a: Segment, b: Segment) -> bool:
    """Whether two curves belong to one line or circle, or are the same."""
    if isinstance(a, Line) and isinstance(b, Line):
        (px, py), (ux, uy) = b.start, b.tangent(np.zeros(1))[0]
        far = [abs((x - px) * uy - (y - py) * ux) / math.hypot(ux, uy) for x, y in (a.start, a.end)]
        return bool(max(far) < _SAME_nm)
    if isinstance(a, Arc) and isinstance(b, Arc):
        return math.dist(a.center, b.center) + abs(a.radius - b.radius) < _SAME_nm
    return a == b


def _box(points: Array) -> tuple[Array, Array]:
    margin = 0.01 * float(np.ptp(points, axis=0).max())
    return points.min(axis=0) - margin, points.max(axis=0) + margin


def _touch(a: Segment, b: Segment, p: Array, q: Array) -> Point | None:
    """Where two curves, through p and q, come within `NEAREST_nm` and run along each other, but not all the way."""
    if _on_top(a, b):
        return None
    (low_p, high_p), (low_q, high_q) = _box(p), _box(q)
    if (low_p > high_q).any() or (low_q > high_p).any():
        return None
    t = s = np.linspace(0, 1, _COARSE)
    half = 1.0 / (_COARSE - 1)
    for _ in range(_ROUNDS):
        away = np.hypot(*np.moveaxis(p[:, None] - q[None], 2, 0))
        k, m = np.unravel_index(int(np.argmin(away)), away.shape)
        best_t, best_s, least = float(t[k]), float(s[m]), float(away[k, m])
        if least > NEAREST_nm + sum(float(np.hypot(*np.diff(row, axis=0).T).max()) for row in (p, q)):
            return None
        t, s = (np.unique(np.clip(best + np.linspace(-half, half, _FINE), 0, 1)) for best in (best_t, best_s))
        p, q = a.point(t), b.point(s)
        half *= 0.5
    if least > NEAREST_nm:
        return None
    (ux, uy), (vx, vy) = a.tangent(np.array([best_t]))[0], b.tangent(np.array([best_s]))[0]
    if abs(ux * vy - uy * vx) > _SLANT * math.hypot(ux, uy) * math.hypot(vx, vy):
        return None
    x, y = a.point(np.array([best_t]))[0]
    return float(x), float(y)
