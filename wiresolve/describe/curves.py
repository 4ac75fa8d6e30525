"""Plane curves: the segments of an outline and the closed loop that they make (lengths in nm, angles in radians)."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Point = tuple[float, float]
CORNER_rad = 1e-3
"""A jump of direction above this is a corner."""


@cache
def _gauss(count: int) -> tuple[Array, Array]:
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1) / 2, weights / 2


def turn(point: Point, angle: float) -> Point:
    """`point` turned about the origin; quarter turns are exact."""
    cosine, sine = cos_sin(angle)
    return cosine * point[0] - sine * point[1], sine * point[0] + cosine * point[1]


def cos_sin(angle: float) -> tuple[float, float]:
    """Cosine and sine, exact at whole quarter turns, so that turned sides stay on top of each other."""
    quarters = angle / (math.pi / 2)
    if abs(quarters - round(quarters)) < 1e-14 * max(1.0, abs(quarters)):
        return ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))[round(quarters) % 4]
    return math.cos(angle), math.sin(angle)


@dataclass(frozen=True)
class Line:
    """A straight segment."""

    start: Point
    end: Point
    name: str

    def point(self, t: Array) -> Array:
        """Points at `t` in [0, 1], shape (m, 2)."""
        s = np.atleast_1d(np.asarray(t, dtype=float))[:, None]
        points: Array = (1 - s) * np.array(self.start) + s * np.array(self.end)
        return points

    def tangent(self, t: Array) -> Array:
        """Derivative of `point` by `t`, shape (m, 2)."""
        step = np.array(self.end) - np.array(self.start)
        return np.tile(step, (np.size(t), 1))

    def moved(self, dx: float, dy: float) -> Line:
        """The same segment elsewhere."""
        return Line((self.start[0] + dx, self.start[1] + dy), (self.end[0] + dx, self.end[1] + dy), self.name)

    def rotated(self, angle: float) -> Line:
        """The same segment turned about the origin."""
        return Line(turn(self.start, angle), turn(self.end, angle), self.name)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1] that integrate smooth functions along the segment."""
        return _gauss(4)


class _Conic:
    """What a circular and an elliptic arc share: x = centre + R(tilt) (a cos s, b sin s)."""

    center: Point
    start_angle: float
    sweep: float
    name: str

    def _axes(self) -> tuple[float, float, float]:
        raise NotImplementedError

    def _at(self, s: Array) -> Array:
        a, b, tilt = self._axes()
        cosine, sine = cos_sin(tilt)
        x, y = a * np.cos(s), b * np.sin(s)
        return np.column_stack([self.center[0] + cosine * x - sine * y, self.center[1] + sine * x + cosine * y])

    def _single(self, s: float) -> Point:
        a, b, tilt = self._axes()
        c, d = cos_sin(s)
        x, y = turn((a * c, b * d), tilt)
        return self.center[0] + x, self.center[1] + y

    @property
    def start(self) -> Point:
        """First point."""
        return self._single(self.start_angle)

    @property
    def end(self) -> Point:
        """Last point."""
        return self._single(self.start_angle + self.sweep)

    def point(self, t: Array) -> Array:
        """Points at `t` in [0, 1], shape (m, 2)."""
        return self._at(self.start_angle + self.sweep * np.atleast_1d(np.asarray(t, dtype=float)))

    def tangent(self, t: Array) -> Array:
        """Derivative of `point` by `t`, shape (m, 2)."""
        a, b, tilt = self._axes()
        cosine, sine = cos_sin(tilt)
        s = self.start_angle + self.sweep * np.atleast_1d(np.asarray(t, dtype=float))
        x, y = -a * np.sin(s) * self.sweep, b * np.cos(s) * self.sweep
        return np.column_stack([cosine * x - sine * y, sine * x + cosine * y])


@dataclass(frozen=True)
class Arc(_Conic):
    """A circular arc from `start_angle` through `sweep` (counter-clockwise positive)."""

    center: Point
    radius: float
    start_angle: float
    sweep: float
    name: str

    def _axes(self) -> tuple[float, float, float]:
        return self.radius, self.radius, 0.0

    def moved(self, dx: float, dy: float) -> Arc:
        """The same arc elsewhere."""
        return replace(self, center=(self.center[0] + dx, self.center[1] + dy))

    def rotated(self, angle: float) -> Arc:
        """The same arc turned about the origin."""
        return replace(self, center=turn(self.center, angle), start_angle=self.start_angle + angle)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1] that integrate smooth functions along the arc."""
        return _gauss(16)


@dataclass(frozen=True)
class EllipseArc(_Conic):
    """An arc of an ellipse with semi-axes `semi_x`, `semi_y` turned by `tilt`; angles are the ellipse's parameter."""

    center: Point
    semi_x: float
    semi_y: float
    tilt: float
    start_angle: float
    sweep: float
    name: str

    def _axes(self) -> tuple[float, float, float]:
        return self.semi_x, self.semi_y, self.tilt

    def moved(self, dx: float, dy: float) -> EllipseArc:
        """The same arc elsewhere."""
        return replace(self, center=(self.center[0] + dx, self.center[1] + dy))

    def rotated(self, angle: float) -> EllipseArc:
        """The same arc turned about the origin."""
        return replace(self, center=turn(self.center, angle), tilt=self.tilt + angle)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1], in panels, since a slender ellipse bends sharply at its ends."""
        nodes, weights = _gauss(24)
        panels = np.arange(16)[:, None]
        return ((panels + nodes) / 16).ravel(), np.tile(weights / 16, 16)


@dataclass(frozen=True)
class Spline:
    """A smooth curve through `points`, shape (n, 2): cubic between them, over the length of the chords.

    Where the first point is also the last, the curve is closed and as smooth there as elsewhere.
    """

    points: tuple[Point, ...]
    name: str

    @property
    def start(self) -> Point:
        """First point."""
        return self.points[0]

    @property
    def end(self) -> Point:
        """Last point."""
        return self.points[-1]

    def _curve(self) -> tuple[Callable[..., Array], Array]:
        from scipy.interpolate import CubicSpline  # here, because only parallel curves of ellipses need it

        nodes = np.array(self.points)
        chords = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(nodes, axis=0).T))])
        knots = chords / chords[-1]
        closed = self.points[0] == self.points[-1]
        return CubicSpline(knots, nodes, bc_type="periodic" if closed else "not-a-knot"), knots

    def point(self, t: Array) -> Array:
        """Points at `t` in [0, 1], shape (m, 2)."""
        return np.asarray(self._curve()[0](np.atleast_1d(np.asarray(t, dtype=float))))

    def tangent(self, t: Array) -> Array:
        """Derivative of `point` by `t`, shape (m, 2)."""
        return np.asarray(self._curve()[0](np.atleast_1d(np.asarray(t, dtype=float)), 1))

    def moved(self, dx: float, dy: float) -> Spline:
        """The same curve elsewhere."""
        return Spline(tuple((x + dx, y + dy) for x, y in self.points), self.name)

    def rotated(self, angle: float) -> Spline:
        """The same curve turned about the origin."""
        return Spline(tuple(turn(p, angle) for p in self.points), self.name)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1], four to each interval of the spline."""
        knots = self._curve()[1]
        nodes, weights = _gauss(4)
        steps = np.diff(knots)
        return (knots[:-1, None] + steps[:, None] * nodes).ravel(), (steps[:, None] * weights).ravel()


Segment = Line | Arc | EllipseArc | Spline


def _rays_line(
    x0: float | Array, y0: float | Array, x1: float | Array, y1: float | Array, x: Array, y: Array
) -> NDArray[np.bool_]:
    """Which rays from (x, y) towards +x cross the line (or each of several, by broadcasting)."""
    crosses = (y0 <= y) != (y1 <= y)
    with np.errstate(divide="ignore", invalid="ignore"):
        at = x0 + (y - y0) / (y1 - y0) * (x1 - x0)
    return np.asarray(crosses & (np.where(crosses, at, -np.inf) > x))


def _rays_conic(arc: Arc | EllipseArc, y_start: float, y_end: float, x: Array, y: Array) -> NDArray[np.bool_]:
    """Whether the rays from (x, y) towards +x cross the arc an odd number of times: exact, piece by monotone piece."""
    a, b, tilt = arc._axes()
    cosine, sine = cos_sin(tilt)
    # y(s) = cy + height cos(s - phase) rises or falls between the multiples of pi from the phase.
    height, phase = math.hypot(a * sine, b * cosine), math.atan2(b * cosine, a * sine)
    low, high = sorted((arc.start_angle, arc.start_angle + arc.sweep))
    first, last = math.floor((low - phase) / math.pi), math.ceil((high - phase) / math.pi)
    breaks = [low, *(phase + k * math.pi for k in range(first, last + 1) if low < phase + k * math.pi < high), high]
    heights = [arc.center[1] + height * math.cos(s - phase) for s in breaks]
    heights[0], heights[-1] = (y_start, y_end) if arc.sweep > 0 else (y_end, y_start)
    odd = np.zeros(x.shape, dtype=bool)
    for s0, s1, y0, y1 in zip(breaks, breaks[1:], heights, heights[1:], strict=False):
        crosses = (y0 <= y) != (y1 <= y)
        if not crosses.any():
            continue
        k = math.floor(((s0 + s1) / 2 - phase) / math.pi)
        u = np.clip((y - arc.center[1]) / height * (1 if k % 2 == 0 else -1), -1, 1)
        at = arc._at(phase + k * math.pi + np.arccos(u))[:, 0]
        odd ^= crosses & (at > x)
    return odd


@dataclass(frozen=True)
class Loop:
    """A closed outline, counter-clockwise, of segments that follow each other."""

    segments: tuple[Segment, ...]

    def _moments(self) -> tuple[float, float, float]:
        area = first_x = first_y = 0.0
        for segment in self.segments:
            nodes, weights = segment.quadrature()
            (x, y), (dx, dy) = segment.point(nodes).T, segment.tangent(nodes).T
            area += float(weights @ (x * dy - y * dx)) / 2
            first_x += float(weights @ (x * x * dy)) / 2
            first_y -= float(weights @ (y * y * dx)) / 2
        return area, first_x, first_y

    @property
    def area(self) -> float:
        """Enclosed area in nm^2 (negative for a clockwise loop)."""
        return self._moments()[0]

    @property
    def centroid(self) -> Point:
        """Centre of the enclosed area."""
        area, x, y = self._moments()
        return x / area, y / area

    @property
    def perimeter(self) -> float:
        """Length of the outline in nm."""
        total = 0.0
        for segment in self.segments:
            nodes, weights = segment.quadrature()
            total += float(weights @ np.hypot(*segment.tangent(nodes).T))
        return total

    def sample(self, n_per_segment: int) -> Array:
        """Points along the outline, `n_per_segment` from the start of each segment on, shape (m, 2)."""
        t = np.arange(n_per_segment) / n_per_segment
        return np.vstack([segment.point(t) for segment in self.segments])

    def corners(self) -> tuple[tuple[Point, float], ...]:
        """Points where the direction jumps, each with its interior angle in radians."""
        found = []
        for before, after in zip((self.segments[-1], *self.segments[:-1]), self.segments, strict=True):
            (ux, uy), (vx, vy) = before.tangent(np.array([1.0]))[0], after.tangent(np.array([0.0]))[0]
            jump = math.atan2(ux * vy - uy * vx, ux * vx + uy * vy)
            if abs(jump) > CORNER_rad:
                found.append((after.start, math.pi - jump))
        return tuple(found)

    def contains(self, points: Array) -> NDArray[np.bool_]:
        """Which of the points, shape (m, 2), lie inside: exact for lines and arcs, to 1e-6 of the size for splines."""
        x, y = np.asarray(points, dtype=float).reshape(-1, 2).T
        inside = np.zeros(x.shape, dtype=bool)
        following: Sequence[Segment] = (*self.segments[1:], self.segments[0])
        for segment, after in zip(self.segments, following, strict=True):
            # The next segment's start, not the own end: rounding must leave no gap between the two for a ray.
            (x0, y0), (x1, y1) = segment.start, after.start
            if isinstance(segment, Line):
                inside ^= _rays_line(x0, y0, x1, y1, x, y)
            elif isinstance(segment, Spline):
                dense = segment.point(np.linspace(0, 1, 8 * len(segment.points)))
                dense[-1] = x1, y1
                for part in range(0, len(x), 500):  # bounds the memory of points x pieces
                    some = slice(part, part + 500)
                    ahead, ray_x, ray_y = dense[1:], x[some, None], y[some, None]
                    hits = _rays_line(dense[:-1, 0], dense[:-1, 1], ahead[:, 0], ahead[:, 1], ray_x, ray_y)
                    inside[some] ^= hits.sum(axis=1) % 2 == 1
            else:
                inside ^= _rays_conic(segment, y0, y1, x, y)
        return inside

    def moved(self, dx: float, dy: float) -> Loop:
        """The same loop elsewhere."""
        return self if dx == dy == 0 else Loop(tuple(s.moved(dx, dy) for s in self.segments))

    def rotated(self, angle: float) -> Loop:
        """The same loop turned about the origin by `angle` (radians)."""
        return self if angle == 0 else Loop(tuple(s.rotated(angle) for s in self.segments))

    @property
    def is_circle(self) -> tuple[Point, float] | None:
        """Centre and radius where the whole loop is one circle."""
        first = self.segments[0]
        if not isinstance(first, Arc):
            return None
        near, around = 1e-12 * (first.radius + math.hypot(*first.center)), 0.0
        for segment in self.segments:
            if not isinstance(segment, Arc) or abs(segment.radius - first.radius) > near:
                return None
            if math.dist(segment.center, first.center) > near:
                return None
            around += segment.sweep
        return (first.center, first.radius) if abs(around - 2 * math.pi) < 1e-9 else None


def circle(radius: float, name: str = "rim", center: Point = (0.0, 0.0)) -> Loop:
    """A circle as four quarter arcs."""
    quarter = math.pi / 2
    return Loop(tuple(Arc(center, radius, k * quarter, quarter, name) for k in range(4)))
