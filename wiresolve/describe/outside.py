"""Where a material that goes on outside is cut off: an outline well outside everything that is drawn."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from wiresolve.describe import checks
from wiresolve.describe.curves import Arc, Line, Loop, Parabolas, Point, Segment, Spline, circle
from wiresolve.describe.section import Piece
from wiresolve.describe.strands import KINK_rad


def outside_loop(pieces: Sequence[Piece], distance_nm: float) -> Loop:
    """An outline at least `distance_nm` outside all pieces, for a material that goes on outside.

    A circle where the outermost outline is one; otherwise the convex hull of lines and of the tangents of curves,
    grown with round corners.
    """
    distance = checks.length("distance", distance_nm, 1e-3)
    ring = pieces[0].loop.is_circle
    if ring is not None:
        (x, y), radius = ring
        others = [piece.loop.sample(16) - (x, y) for piece in pieces[1:]]
        if all(float(np.hypot(*points.T).max()) <= radius * (1 + 1e-9) for points in others):
            return circle(radius + distance, "outside", (x, y))
    segments = [segment for piece in pieces for segment in piece.loop.segments]
    # Joints of a chain turn by next to nothing, which would make arcs too short to be meshed around them.
    flat = KINK_rad if any(isinstance(segment, Parabolas) for segment in segments) else 1e-9
    hull = _hull([p for segment in segments for p in _around(segment)], flat)
    return _round_grown(hull, distance + (flat * _size(hull) if flat > 1e-9 else 0.0))


def _around(segment: Segment) -> list[Point]:
    """Corners of an open polygon that encloses the segment from its outer side, with turns of 45 degrees at most."""
    if isinstance(segment, Line):
        return [segment.start, segment.end]
    parts = 8 if not isinstance(segment, Arc) else max(1, math.ceil(abs(segment.sweep) / (math.pi / 4) - 1e-9))
    if isinstance(segment, Spline | Parabolas):
        parts = 16
    t = np.linspace(0, 1, parts + 1)
    points, along = segment.point(t), segment.tangent(t)
    found: list[Point] = [(float(points[0, 0]), float(points[0, 1])), (float(points[-1, 0]), float(points[-1, 1]))]
    for (p, q), (u, v) in zip(pairwise(points), pairwise(along), strict=True):
        cross = u[0] * v[1] - u[1] * v[0]
        if abs(cross) < 1e-9 * math.hypot(*u) * math.hypot(*v):
            continue
        s = ((q[0] - p[0]) * v[1] - (q[1] - p[1]) * v[0]) / cross
        found.append((float(p[0] + s * u[0]), float(p[1] + s * u[1])))
    return found


def _size(points: Sequence[Point]) -> float:
    return max(max(abs(x), abs(y)) for x, y in points)


def _hull(points: list[Point], flat: float) -> list[Point]:
    """Corners of the convex hull, counter-clockwise (Andrew's monotone chain), without those of straight sides.

    Corners that stand out by less than `flat`, as a part of the size, are left out.
    """
    ordered = sorted(set(points))
    size = _size(ordered)

    def chain(row: Sequence[Point]) -> list[Point]:
        kept: list[Point] = []
        for point in row:
            while len(kept) > 1:
                (ax, ay), (bx, by) = kept[-2], kept[-1]
                if (bx - ax) * (point[1] - ay) - (by - ay) * (point[0] - ax) > flat * size * math.dist(kept[-2], point):
                    break
                kept.pop()
            kept.append(point)
        return kept[:-1]

    return chain(ordered) + chain(ordered[::-1])


def _round_grown(corners: list[Point], distance: float) -> Loop:
    normals = []
    for a, b in zip(corners, corners[1:] + corners[:1], strict=True):
        long = math.dist(a, b)
        normals.append(((b[1] - a[1]) / long, (a[0] - b[0]) / long))
    segments: list[Segment] = []
    for k, (x, y) in enumerate(corners):
        (ux, uy), (vx, vy) = normals[k - 1], normals[k]
        sweep = math.atan2(ux * vy - uy * vx, ux * vx + uy * vy)
        segments.append(Arc((x, y), distance, math.atan2(uy, ux), sweep, "outside"))
        bx, by = corners[(k + 1) % len(corners)]
        start, end = (x + distance * vx, y + distance * vy), (bx + distance * vx, by + distance * vy)
        segments.append(Line(start, end, "outside"))
    return Loop(tuple(segments))
