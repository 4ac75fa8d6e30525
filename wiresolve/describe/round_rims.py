"""Round outlines cut where a part of them ends, so that mesh edges end there too."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np

from wiresolve.describe.curves import Arc, EllipseArc, Loop, Segment, Spline
from wiresolve.describe.gates import ArcPart
from wiresolve.errors import InputError

_SAME_deg = 1e-9
CLOSEST_deg = 0.01
"""Two directions nearer than this leave a part that no mesh resolves."""


def cut(loop: Loop, parts: Iterable[ArcPart]) -> Loop:
    """A round loop about the origin whose segments end where the parts do; the loop itself where there are no parts.

    Segments between two neighbouring ends have one name ("rim 1", "rim 2", ...). InputError where ends lie so close
    together that nothing could be meshed between them.
    """
    marks = _distinct(angle % 360 for part in parts for angle in (part.from_deg, part.to_deg))
    if not marks:
        return loop
    first = loop.segments[0]
    if loop.is_circle is not None:
        assert isinstance(first, Arc)
        center, radius = first.center, first.radius
        quarters = [float(q) for q in (0, 90, 180, 270) if not any(_apart(q, m) < CLOSEST_deg for m in marks)]
        at = sorted([*marks, *quarters])
        segments: list[Segment] = [
            Arc(center, radius, math.radians(a), math.radians((b - a) % 360), _part_name(marks, a))
            for a, b in zip(at, [*at[1:], at[0]], strict=True)
        ]
    elif isinstance(first, EllipseArc):
        a, b, tilt = first.conic()
        angles = {_parameter(first, mark): mark for mark in marks}
        at = sorted(angles)
        segments = [
            EllipseArc(first.center, a, b, tilt, s, (t - s) % math.tau, _part_name(marks, angles[s]))
            for s, t in zip(at, [*at[1:], at[0]], strict=True)
        ]
    else:
        assert isinstance(first, Spline)
        places = {_place(first, mark): mark for mark in marks}
        at = sorted(places)
        segments = [
            _piece(first, s, t, _part_name(marks, places[s])) for s, t in zip(at, [*at[1:], at[0] + 1], strict=True)
        ]
    return Loop(_closed(segments))


def within(loop: Loop, part: ArcPart) -> tuple[Segment, ...]:
    """The segments of a cut loop that belong to a part, in its order."""

    def ahead(segment: Segment) -> float:
        x, y = segment.point(np.array([0.5]))[0]
        return (math.degrees(math.atan2(y, x)) - part.from_deg) % 360

    found = [(ahead(segment), segment) for segment in loop.segments if ahead(segment) < part.sweep_deg]
    return tuple(segment for _, segment in sorted(found, key=lambda pair: pair[0]))


def overlap(one: ArcPart, other: ArcPart) -> bool:
    """Whether two parts have a point in common, an end included."""
    ahead, behind = (other.from_deg - one.from_deg) % 360, (one.from_deg - other.from_deg) % 360
    return ahead <= one.sweep_deg + _SAME_deg or behind <= other.sweep_deg + _SAME_deg


def _apart(a: float, b: float) -> float:
    return abs((a - b + 180) % 360 - 180)


def _distinct(angles: Iterable[float]) -> list[float]:
    found: list[float] = []
    for angle in sorted(angles):
        near = min((_apart(angle, other) for other in found), default=360.0)
        if near < _SAME_deg:
            continue
        if near < CLOSEST_deg:
            rule = f"parts of the rim end within {CLOSEST_deg:g} deg of each other"
            raise InputError("touches", rule, f"at {angle:g} deg", "let them end at one place, or further apart")
        found.append(angle)
    return found


def _part_name(marks: Sequence[float], start: float) -> str:
    """Of the part of the rim in which a segment begins: segments of one part have one name."""
    behind = [m for m in marks if m <= start]
    return f"rim {len(behind) or len(marks)}"


def _parameter(ellipse: EllipseArc, direction_deg: float) -> float:
    """The ellipse's own parameter, in [0, 2 pi), where the line from its centre in a direction meets it."""
    a, b, tilt = ellipse.conic()
    angle = math.radians(direction_deg) - tilt
    return math.atan2(a * math.sin(angle), b * math.cos(angle)) % math.tau


def _place(spline: Spline, direction_deg: float) -> float:
    """Where in [0, 1) a closed spline around the origin is met in a direction (bisection)."""
    t = np.linspace(0, 1, 4097)

    def beyond(at: np.ndarray) -> np.ndarray:
        x, y = spline.point(at).T
        turned = np.degrees(np.arctan2(y, x)) - direction_deg
        return np.asarray((turned + 180) % 360 - 180)

    ahead = beyond(t)
    hits = np.flatnonzero((ahead[:-1] < 0) & (ahead[1:] >= 0) & (ahead[1:] - ahead[:-1] < 180))
    low, high = float(t[hits[0]]), float(t[hits[0] + 1])
    for _ in range(60):
        middle = (low + high) / 2
        if beyond(np.array([middle]))[0] < 0:
            low = middle
        else:
            high = middle
    return high % 1.0


def _piece(spline: Spline, start: float, end: float, name: str) -> Spline:
    """A part of a closed spline as one with dense points: it follows the whole one to its own accuracy."""
    count = max(16, 2 * round(len(spline.points) * (end - start)))
    points = spline.point(np.linspace(start, end, count + 1) % 1.0)
    return Spline(tuple((float(x), float(y)) for x, y in points), name)


def _closed(segments: Sequence[Segment]) -> tuple[Segment, ...]:
    """Splines that begin exactly where the one before ends; arcs know their ends only by their angles."""
    row = list(segments)
    for k, segment in enumerate(row):
        if isinstance(segment, Spline):
            after = row[(k + 1) % len(row)].start
            row[k] = Spline((*segment.points[:-1], after), segment.name)
    return tuple(row)
