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


@dataclass(frozen=True, eq=False)
class Traced:
    """One closed curve: points, shape (n, 2), counter-clockwise, and their numbers in the file from 1."""

    points: Array
    numbers: Ints
    name: str


def read(field: str, file: InputFile) -> tuple[Traced, ...]:
    """The curves of a file; InputError, with the numbers of the points, for what is no set of simple closed curves."""
    rows, marks = point_table.read(field, file, 2, "a curve's number or name")
    if not rows:
        raise InputError(field, "holds no points", file.name)
    if len(rows) > MOST_POINTS:
        raise InputError(field, f"has {len(rows):,} points; at most {MOST_POINTS:,} can be used")
    every, names = np.array(rows), list(dict.fromkeys(marks))
    if len(names) > MOST_CURVES:
        raise InputError(field, f"holds {len(names)} curves; at most {MOST_CURVES} can be used")
    numbers = np.arange(1, len(rows) + 1)
    traced = []
    for k, name in enumerate(names, 1):
        mine = np.array([mark == name for mark in marks])
        shown = f"curve {k}" if name.startswith("\n") else f"curve '{name[:30]}'"
        traced.append(_checked(field, every[mine], numbers[mine], shown if len(names) > 1 else "the outline"))
    return tuple(traced)


def _checked(field: str, points: Array, numbers: Ints, shown: str) -> Traced:
    from scipy.spatial import cKDTree

    if len(points) > 1 and (points[0] == points[-1]).all():
        points, numbers = points[:-1], numbers[:-1]
    if len(points) < 3:
        raise InputError(field, f"{shown} has too few points", f"{len(points)}", "an outline needs at least 3")
    size = float(np.ptp(points, axis=0).max())
    if not 0 < size < 1e12 or abs(points).max() > 1e9 * size:
        raise InputError(field, f"the points of {shown} coincide, or lie beyond all scales")
    if len(twice := cKDTree(points).query_pairs(1e-9 * size, output_type="ndarray")):
        a, b = sorted(int(numbers[k]) for k in twice[0])
        raise InputError(field, f"points {a} and {b} of {shown} coincide", remedy=f"leave point {b} out")
    after = np.roll(points, -1, axis=0)
    steps = np.hypot(*(after - points).T)
    usual = float(np.quantile(steps[:-1], 0.95))
    if len(points) >= 20 and steps[-1] > _OPEN * usual and steps[-1] > 0.05 * size:
        rule = f"{shown} is open: its last point, {numbers[-1]}, is {steps[-1]:.3g} from its first, {numbers[0]}"
        raise InputError(field, rule, f"steps of up to {usual:.3g} elsewhere", "trace it all around")
    n = np.arange(len(points))
    if (hit := crossings.first(points, after, np.column_stack([n, (n + 1) % len(n)]))) is not None:
        (a, b), m = hit, len(n)
        sides = [f"from point {numbers[k]} to {numbers[(k + 1) % m]}" for k in (a, b)]
        rule = f"{shown} crosses itself: the side {sides[0]} meets that {sides[1]}"
        raise InputError(field, rule, remedy="list the points in order around the outline")
    x, y = (points - points[0]).T
    area = float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2
    if abs(area) < 1e-6 * size**2:
        raise InputError(field, f"{shown} encloses no area", remedy="an outline goes around what it bounds")
    turned = slice(None) if area > 0 else slice(None, None, -1)
    return Traced(points[turned], numbers[turned], shown)
