"""The curve at a constant distance outside an outline that has no simple formula."""

from __future__ import annotations

import numpy as np

from wiresolve.describe import crossings, polygons
from wiresolve.describe.curves import Line, Loop, Spline
from wiresolve.errors import InputError

_PRECISE = 1e-7
"""How closely the spline keeps its distance, as a part of the outline's size."""


def parallel(field: str, loop: Loop, distance_nm: float) -> Loop:
    """The outline at `distance_nm` outside: mitred around straight sides, a spline around a smooth outline.

    InputError about `field` where the outline has corners between curves, or the parallel one would cross itself.
    """
    if distance_nm == 0:
        return loop
    if all(isinstance(segment, Line) for segment in loop.segments):
        corners = polygons.parallel(field, tuple(s.start for s in loop.segments), [distance_nm] * len(loop.segments))
        after = corners[1:] + corners[:1]
        return Loop(tuple(Line(a, b, s.name) for a, b, s in zip(corners, after, loop.segments, strict=True)))
    if loop.corners():
        (x, y), _ = loop.corners()[0]
        rule = f"no layer can be grown around an outline with corners between curves, as at ({x:.4g}, {y:.4g}) nm"
        raise InputError(field, rule, remedy="draw the layer's outline too")
    size = float(np.ptp(loop.sample(64), axis=0).max())
    for count in (32, 64, 128, 256, 512, 1024):
        t = (np.arange(2 * count) + 0.0) / count
        points, normals = _along(loop, t / 2)
        moved = points + distance_nm * normals
        knots = moved[::2]
        spline = Spline(tuple((float(x), float(y)) for x, y in [*knots, knots[0]]), "rim")
        chords = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(np.vstack([knots, knots[:1]]), axis=0).T))])
        middles = spline.point((chords[:-1] + chords[1:]) / 2 / chords[-1])
        if np.hypot(*(middles - moved[1::2]).T).max() < 1e3 * _PRECISE * size:
            foot = np.abs(_distance(loop, middles) - distance_nm)
            if foot.max() < _PRECISE * size:
                break
    steps = np.roll(points, -1, axis=0) - points
    if (((np.roll(moved, -1, axis=0) - moved) * steps).sum(axis=1) <= 0).any() or _crosses(moved):
        raise InputError(
            field,
            "at this thickness the layer's outline would cross itself",
            f"{distance_nm:g} nm",
            "make the layer thinner, or draw its outline too",
        )
    return Loop((spline,))


def _along(loop: Loop, part: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Points at these parts of the way around a smooth loop, by length, and the normals there that point outwards."""
    fine = np.linspace(0, 1, 257)
    lengths = [np.concatenate([[0], np.cumsum(np.hypot(*np.diff(s.point(fine), axis=0).T))]) for s in loop.segments]
    ends = np.cumsum([row[-1] for row in lengths])
    at = part * ends[-1]
    which = np.minimum(np.searchsorted(ends, at, side="right"), len(ends) - 1)
    points, tangents = np.empty((len(part), 2)), np.empty((len(part), 2))
    for k, segment in enumerate(loop.segments):
        here = which == k
        if here.any():
            t = np.interp(at[here] - (ends[k] - lengths[k][-1]), lengths[k], fine)
            points[here], tangents[here] = segment.point(t), segment.tangent(t)
    return points, np.column_stack([tangents[:, 1], -tangents[:, 0]]) / np.hypot(*tangents.T)[:, None]


def _distance(loop: Loop, points: np.ndarray) -> np.ndarray:
    """Distances of points from a loop, from parabolas through three neighbouring points of many."""
    from scipy.spatial import cKDTree

    dense, _ = _along(loop, np.arange(8192) / 8192)
    _, near = cKDTree(dense).query(points)
    a, b, c = (dense[(near + k) % len(dense)] for k in (-1, 0, 1))
    first, second = (c - a) / 2, a - 2 * b + c
    t = np.zeros(len(points))
    for _ in range(6):
        off = b + t[:, None] * first + t[:, None] ** 2 / 2 * second - points
        slope = first + t[:, None] * second
        t -= (off * slope).sum(axis=1) / ((slope**2).sum(axis=1) + (off * second).sum(axis=1))
    off = b + t[:, None] * first + t[:, None] ** 2 / 2 * second - points
    return np.asarray(np.hypot(*off.T))


def _crosses(points: np.ndarray) -> bool:
    n = np.arange(len(points))
    knots = np.column_stack([n, (n + 1) % len(n)])
    return crossings.first(points, np.roll(points, -1, axis=0), knots) is not None
