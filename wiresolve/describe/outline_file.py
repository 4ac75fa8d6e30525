"""Closed curves as points in a table of two columns: what is traced from a micrograph or exported from a layout."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wiresolve.describe import crossings, point_table
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import Array, Ints
from wiresolve.errors import InputError

MOST_POINTS, MOST_CURVES = 100_000, 51
_OPEN = 6.0
"""A gap this many times as long as other steps is no step: the outline is open."""
_STEP = 1.5
"""A neighbouring pixel is at most this many pixels away."""
_TOLD = 5
"""Faults of one kind that are told in one message; where there are more the order of the points is wrong."""


@dataclass(frozen=True, eq=False)
class Traced:
    """One closed curve: points, shape (n, 2), counter-clockwise, and their lines in the file from 1."""

    points: Array
    lines: Ints
    name: str


def read(field: str, file: InputFile, pixel: float = 0.0) -> tuple[Traced, ...]:
    """The curves of a file; InputError, with the lines of the points, for what is no set of simple closed curves.

    A point that is listed twice in a row counts once. With the size of a `pixel` (in the file's unit) steps to a
    neighbouring pixel and straight back are left out.
    """
    rows, marks, places = point_table.read(field, file, 2, "a curve's number or name")
    if not rows:
        raise InputError(field, "holds no points", file.name)
    if len(rows) > MOST_POINTS:
        raise InputError(field, f"has {len(rows):,} points; at most {MOST_POINTS:,} can be used")
    every, names = np.array(rows), list(dict.fromkeys(marks))
    if len(names) > MOST_CURVES:
        raise InputError(field, f"holds {len(names)} curves; at most {MOST_CURVES} can be used")
    lines = np.array(places)
    traced = []
    for k, name in enumerate(names, 1):
        mine = np.array([mark == name for mark in marks])
        shown = f"curve {k}" if name.startswith("\n") else f"curve '{name[:30]}'"
        shown = shown if len(names) > 1 else "the outline"
        traced.append(_checked(field, *_cleaned(every[mine], lines[mine], pixel), shown))
    return tuple(traced)


def _cleaned(points: Array, lines: Ints, pixel: float) -> tuple[Array, Ints]:
    """The points of a closed curve without those listed twice in a row, nor steps to a next pixel and straight back."""
    kept: list[int] = []
    rows = points.tolist()
    for k, point in enumerate(rows):
        if kept and point == rows[kept[-1]]:
            continue
        # What comes back to the point before the last one makes the last one a spike, and itself a repetition.
        if len(kept) > 1 and point == rows[kept[-2]] and _is_step(points[kept[-1]], points[k], pixel):
            kept.pop()
            continue
        kept.append(k)
    while len(kept) > 1 and (points[kept[0]] == points[kept[-1]]).all():
        kept.pop()
    # Around the end the same: a spike at the first or at the last point.
    while len(kept) > 3:
        first, second, before, last = (points[kept[k]] for k in (0, 1, -2, -1))
        if (before == first).all() and _is_step(last, first, pixel):
            kept = kept[:-2]
        elif (second == last).all() and _is_step(first, last, pixel):
            kept = kept[1:-1]
        else:
            break
    return points[kept], lines[kept]


def _is_step(one: Array, other: Array, pixel: float) -> bool:
    return float(np.hypot(*(one - other))) <= _STEP * pixel


def _checked(field: str, points: Array, lines: Ints, shown: str) -> Traced:
    if len(points) < 3:
        raise InputError(field, f"{shown} has too few points", f"{len(points)}", "an outline needs at least 3")
    size = float(np.ptp(points, axis=0).max())
    if not 0 < size < 1e12 or abs(points).max() > 1e9 * size:
        raise InputError(field, f"the points of {shown} all coincide, or their coordinates are far too large")
    _no_point_twice(field, points, lines, shown, size)
    after = np.roll(points, -1, axis=0)
    steps = np.hypot(*(after - points).T)
    usual = float(np.quantile(steps[:-1], 0.95))
    if len(points) >= 20 and steps[-1] > _OPEN * usual and steps[-1] > 0.05 * size:
        rule = f"{shown} is open: its last point (line {lines[-1]}) is {steps[-1]:.3g} from its first (line {lines[0]})"
        raise InputError(field, rule, f"steps of up to {usual:.3g} elsewhere", "trace it all around")
    _no_side_crosses(field, points, lines, shown)
    x, y = (points - points[0]).T
    area = float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2
    if abs(area) < 1e-6 * size**2:
        raise InputError(field, f"{shown} encloses no area", remedy="an outline goes around what it bounds")
    turned = slice(None) if area > 0 else slice(None, None, -1)
    return Traced(points[turned], lines[turned], shown)


def _no_point_twice(field: str, points: Array, lines: Ints, shown: str, size: float) -> None:
    from scipy.spatial import cKDTree

    n = np.arange(len(points))
    away, near = cKDTree(points).query(points, k=2)
    other = np.where(near[:, 0] == n, near[:, 1], near[:, 0])
    twice = np.unique(np.sort(np.column_stack([n, other])[away[:, 1] <= 1e-9 * size], axis=1), axis=0)
    if not len(twice):
        return
    pairs = lines[twice]
    told = _listed([f"{a} and {b}" for a, b in pairs])
    remedy = f"leave out line {pairs[0][1]}" if len(pairs) == 1 else "leave out one of each two"
    many = len(pairs) > _TOLD
    if not many:  # sides that meet in these points cross there; do others?
        hits = _crossing(points, _TOLD + 4 * len(pairs))
        many = sum(not np.isin(_ends(hit, points), twice).any() for hit in hits) > _TOLD
    if many:
        remedy = "the order of the points is probably wrong, or the outline goes around twice: trace it once around"
    raise InputError(field, f"points of {shown} coincide: lines {told}", remedy=remedy)


def _no_side_crosses(field: str, points: Array, lines: Ints, shown: str) -> None:
    hits = _crossing(points, _TOLD)
    if not hits:
        return
    ends = [lines[_ends(hit, points)] for hit in hits]
    told = _listed([f"from line {a} to {b} meets that from {c} to {d}" for a, b, c, d in ends])
    remedy = "list the points in order around the outline"
    if len(hits) > _TOLD:
        remedy = f"the order of the points is probably wrong: {remedy}"
    raise InputError(field, f"{shown} crosses itself: the side {told}", remedy=remedy)


def _crossing(points: Array, most: int) -> list[tuple[int, int]]:
    """Pairs of sides of a closed curve that cross, each named by its first point; more than `most` where there are."""
    n = np.arange(len(points))
    knots = np.column_stack([n, (n + 1) % len(n)])
    return crossings.several(points, np.roll(points, -1, axis=0), knots, most + 1)


def _ends(sides: tuple[int, int], points: Array) -> list[int]:
    """The four ends of two sides."""
    return [k % len(points) for side in sides for k in (side, side + 1)]


def _listed(texts: list[str]) -> str:
    """The first few of them."""
    return ", ".join(texts[:_TOLD]) + (", and more" if len(texts) > _TOLD else "")
