"""Plane curves: the segments of an outline and the closed loop that they make (lengths in nm, angles in radians)."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe import rays
from wiresolve.describe.rays import cos_sin as cos_sin  # for those who take curves from here

Array = NDArray[np.float64]
Point = tuple[float, float]
CORNER_rad = 1e-3
"""A jump of direction above this is a corner."""


@cache
def _gauss(count: int) -> tuple[Array, Array]:
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1) / 2, weights / 2


def _panels(knots: Array, count: int = 4) -> tuple[Array, Array]:
    """Nodes, `count` of them between each two knots, with their weights."""
    nodes, weights = _gauss(count)
    steps = np.diff(knots)
    return (knots[:-1, None] + steps[:, None] * nodes).ravel(), (steps[:, None] * weights).ravel()


def turn(point: Point, angle: float) -> Point:
    """`point` turned about the origin; quarter turns are exact."""
    cosine, sine = cos_sin(angle)
    return cosine * point[0] - sine * point[1], sine * point[0] + cosine * point[1]


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

    def conic(self) -> tuple[float, float, float]:
        """Semi-axes, and the angle by which they are turned."""
        raise NotImplementedError

    def _at(self, s: Array) -> Array:
        a, b, tilt = self.conic()
        cosine, sine = cos_sin(tilt)
        x, y = a * np.cos(s), b * np.sin(s)
        return np.column_stack([self.center[0] + cosine * x - sine * y, self.center[1] + sine * x + cosine * y])

    def _single(self, s: float) -> Point:
        a, b, tilt = self.conic()
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
        a, b, tilt = self.conic()
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

    def conic(self) -> tuple[float, float, float]:
        """The radius twice, and no turn."""
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

    def conic(self) -> tuple[float, float, float]:
        """Semi-axes, and the angle by which they are turned."""
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

    def poles(self) -> tuple[Array, Array]:
        """Control points, shape (m, 2), and distinct knots of the same curve as a B-spline with clamped ends."""
        from scipy.interpolate import make_interp_spline

        curve, knots = self._curve()
        at_ends = [[(1, curve(t, 1))] for t in (0.0, 1.0)]
        return np.asarray(make_interp_spline(knots, np.array(self.points), 3, bc_type=at_ends).c), knots

    def moved(self, dx: float, dy: float) -> Spline:
        """The same curve elsewhere."""
        return Spline(tuple((x + dx, y + dy) for x, y in self.points), self.name)

    def rotated(self, angle: float) -> Spline:
        """The same curve turned about the origin."""
        return Spline(tuple(turn(p, angle) for p in self.points), self.name)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1], four to each interval of the spline."""
        return _panels(self._curve()[1])


@dataclass(frozen=True)
class Parabolas:
    """A smooth chain of parabolic arcs: what second-order edges are.

    `points` (2 m + 1 of them) are the nodes: each arc goes from an even one through the odd one, at the middle of its
    parameter, to the next even one.
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

    def poles(self) -> tuple[Array, Array]:
        """Control points, shape (2 m + 1, 2), and distinct knots of the chain as a B-spline: the arcs' own ones."""
        nodes = np.array(self.points)
        poles = nodes.copy()
        poles[1::2] = 2 * nodes[1::2] - (nodes[:-1:2] + nodes[2::2]) / 2
        reach = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(nodes[::2], axis=0).T))])
        return poles, reach / reach[-1]

    def _arc(self, t: Array) -> tuple[Array, Array, Array]:
        """For each parameter its arc's three control points, the place within the arc, and the knots' step."""
        poles, knots = self.poles()
        t = np.atleast_1d(np.asarray(t, dtype=float))
        arc = np.clip(np.searchsorted(knots, t, side="right") - 1, 0, len(knots) - 2)
        step = knots[arc + 1] - knots[arc]
        return np.stack([poles[2 * arc + k] for k in range(3)]), ((t - knots[arc]) / step)[:, None], step[:, None]

    def point(self, t: Array) -> Array:
        """Points at `t` in [0, 1], shape (m, 2)."""
        (a, b, c), s, _ = self._arc(t)
        return np.asarray((1 - s) ** 2 * a + 2 * s * (1 - s) * b + s**2 * c)

    def tangent(self, t: Array) -> Array:
        """Derivative of `point` by `t`, shape (m, 2)."""
        (a, b, c), s, step = self._arc(t)
        return np.asarray(2 * ((1 - s) * (b - a) + s * (c - b)) / step)

    def moved(self, dx: float, dy: float) -> Parabolas:
        """The same chain elsewhere."""
        return Parabolas(tuple((x + dx, y + dy) for x, y in self.points), self.name)

    def rotated(self, angle: float) -> Parabolas:
        """The same chain turned about the origin."""
        return Parabolas(tuple(turn(p, angle) for p in self.points), self.name)

    def quadrature(self) -> tuple[Array, Array]:
        """Nodes and weights on [0, 1], eight to each arc: an arc may bend sharply."""
        return _panels(self.poles()[1], 8)


Segment = Line | Arc | EllipseArc | Spline | Parabolas


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
        """Which of the points, shape (m, 2), lie inside: exact but for splines, there to 1e-6 of the size."""
        x, y = np.asarray(points, dtype=float).reshape(-1, 2).T
        inside = np.zeros(x.shape, dtype=bool)
        following: Sequence[Segment] = (*self.segments[1:], self.segments[0])
        straight: list[Array] = []
        for segment, after in zip(self.segments, following, strict=True):
            # The next segment's start, not the own end: rounding must leave no gap between the two for a ray.
            (x0, y0), (x1, y1) = segment.start, after.start
            if isinstance(segment, Line):
                straight.append(np.array([[x0, y0, x1, y1]]))
            elif isinstance(segment, Spline):
                dense = segment.point(np.linspace(0, 1, 8 * len(segment.points)))
                dense[-1] = x1, y1
                straight.append(np.hstack([dense[:-1], dense[1:]]))
            elif isinstance(segment, Parabolas):
                inside ^= rays.parabolas(segment.poles()[0], after.start, x, y)
            else:
                inside ^= rays.conic(segment, segment.conic(), (y0, y1), x, y)
        if straight:
            lines = np.vstack(straight).T
            for part in range(0, len(x), 500):  # bounds the memory of points x pieces
                some = slice(part, part + 500)
                hits = rays.line(lines[0], lines[1], lines[2], lines[3], x[some, None], y[some, None])
                inside[some] ^= hits.sum(axis=1) % 2 == 1
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
