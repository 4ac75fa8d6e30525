"""Crystal directions: integer triples, and the nearest ones at right angles."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from wiresolve.describe import checks
from wiresolve.errors import InputError

Direction = tuple[int, int, int]
LARGEST_INDEX = 50


def direction(field: str, value: object) -> Direction:
    """A crystal direction from three whole numbers, not all zero; InputError otherwise."""
    if isinstance(value, str) or not isinstance(value, Sequence) or len(value) != 3:
        raise InputError(
            field, "must be three whole numbers", value, f"write e.g. {field.rsplit('.', 1)[-1]} = [1, 1, 0]"
        )
    a, b, c = (checks.whole(f"{field}[{k + 1}]", v, -LARGEST_INDEX, LARGEST_INDEX) for k, v in enumerate(value))
    if a == b == c == 0:
        raise InputError(field, "must not be zero in all three numbers", list(value))
    return a, b, c


def nearest_orthogonal(axis: Direction, up: Direction) -> Direction:
    """The simplest direction at right angles to `axis` among those within half a degree of the nearest to `up`."""
    reach = np.arange(-6, 7)
    triples = np.stack(np.meshgrid(reach, reach, reach, indexing="ij"), axis=-1).reshape(-1, 3)
    fits = triples[(triples @ np.array(axis) == 0) & np.any(triples != 0, axis=1)]
    a, b = np.array(axis), np.array(up)
    wanted = b * (a @ a) - a * (a @ b)  # up less its part along the axis, in whole numbers
    if not wanted.any():  # up lies along the axis: anything at right angles is as near
        wanted = (
            np.array(min(fits.tolist(), key=lambda t: sum(v * v for v in t)))
            if len(fits)
            else np.cross(a, (a[1], a[2], a[0] + 1))
        )
    if len(fits):
        angles = np.arccos(np.clip(fits @ wanted / np.linalg.norm(fits, axis=1) / np.linalg.norm(wanted), -1, 1))
        close = fits[angles <= angles.min() + math.radians(0.5)]
        best = min(close.tolist(), key=lambda t: (sum(v * v for v in t), [-v for v in t]))
        if angles.min() < math.radians(5):
            return best[0], best[1], best[2]
    shared = math.gcd(*(int(v) for v in wanted))
    x, y, z = (int(v) // shared for v in wanted)
    return x, y, z


def orthogonal(axis: Direction, up: Direction) -> None:
    """InputError, with the nearest `up` that fits, where the two are not at right angles."""
    if sum(p * q for p, q in zip(axis, up, strict=True)) != 0:
        better = list(nearest_orthogonal(axis, up))
        raise InputError(
            "up", f"must be at right angles to the axis {list(axis)}", list(up), f"the nearest is up = {better}"
        )
