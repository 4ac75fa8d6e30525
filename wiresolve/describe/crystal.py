"""Crystal directions: integer triples, those that symmetry makes equal, the wire's frame, tensors turned into it."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from wiresolve.describe import checks
from wiresolve.errors import InputError

Direction = tuple[int, int, int]
Vector = tuple[float, float, float]
Rows = tuple[Vector, Vector, Vector]
LARGEST_INDEX = 50
RIGHT_ANGLE = 1e-9
"""Cosines below this are right angles: no two directions of whole numbers come as near without being orthogonal."""


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


def equivalents(axis: Direction, zone_boundary: bool, crystal: str | None) -> tuple[tuple[Direction, int], ...]:
    """Directions that the crystal's symmetry makes equal to `axis`, and for how many valleys each stands.

    A direction and its opposite are one entry: it counts twice, but once at the zone's boundary (or centre), where a
    valley and its opposite are the same. In wurtzite a direction is one of the hexagonal lattice (three numbers).
    """
    a, b, c = axis
    if crystal == "wurtzite":
        around = [(a, b), (a - b, a), (-b, a - b)]  # by 60 degrees each; the other three are their opposites
        found = [(p, q, s * c) for u, v in around for p, q in ((u, v), (v, u)) for s in (1, -1)]
    else:
        signs = itertools.product((1, -1), repeat=3)
        found = [(p * x, q * y, r * z) for p, q, r in signs for x, y, z in itertools.permutations(axis)]
    once: dict[Direction, int] = {}
    for p, q, r in found:
        if (-p, -q, -r) not in once:
            once[p, q, r] = 1 if zone_boundary else 2
    return tuple(once.items())


def cartesian(direction: Sequence[float], crystal: str | None = None, c_over_a: float | None = None) -> Vector:
    """A direction of the lattice in the crystal's Cartesian axes, in units of its lattice constant a.

    Cubic crystals: the cube's edges. Wurtzite: x along the first of two lattice vectors in the basal plane that are 120
    degrees apart, z along c; c/a counts only for directions that are neither along c nor across it.
    """
    a, b, c = (float(v) for v in direction)
    if crystal != "wurtzite":
        return a, b, c
    return a - b / 2, b * math.sqrt(3) / 2, c * (c_over_a or 1.0)


def is_slanted(direction: Sequence[float]) -> bool:
    """Whether a direction of a hexagonal lattice is neither along c nor across it."""
    return direction[2] != 0 and (direction[0] != 0 or direction[1] != 0)


def frame(axis: Direction, up: Direction, crystal: str | None = None, c_over_a: float | None = None) -> Rows:
    """The wire's frame in the crystal's Cartesian axes: three rows, unit vectors along x, y and z.

    z is along `axis`, y along `up` (what of it is at right angles to the axis), x = up x axis.
    """
    z = _unit(np.array(cartesian(axis, crystal, c_over_a)))
    y = np.array(cartesian(up, crystal, c_over_a))
    y = _unit(y - z * (y @ z))
    y = _unit(y - z * (y @ z))  # once more: what rounding left along z
    x = _unit(np.cross(y, z))
    return _row(x), _row(y), _row(z)


def inverse_mass_tensor(direction: Sequence[float], longitudinal: float, transverse: float, rows: Rows) -> Rows:
    """Inverse mass (1/m0) in the wire's frame of a valley with one mass along a direction and one across it.

    1/transverse + (1/longitudinal - 1/transverse) n n^T with n the unit vector along the direction in the wire's frame:
    the rotated diagonal tensor (F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967), section II). Exactly symmetric.

    Parameters
    ----------
    direction : the valley's, in the crystal's Cartesian axes (`cartesian`), of any length.
    longitudinal, transverse : masses in m0.
    rows : the wire's frame (`frame`).
    """
    n = np.array(rows) @ _unit(np.array(direction, dtype=float))
    along, across = 1 / longitudinal, 1 / transverse
    tensor = (along - across) * np.outer(n, n) + across * np.eye(3)
    return _row(tensor[0]), _row(tensor[1]), _row(tensor[2])


def _unit(vector: np.ndarray[Any, Any]) -> np.ndarray[Any, Any]:
    return vector / math.hypot(*vector)


def _row(values: np.ndarray[Any, Any]) -> Vector:
    x, y, z = (float(v) for v in values)
    return x, y, z


def nearest_orthogonal(
    axis: Direction, up: Direction, crystal: str | None = None, c_over_a: float | None = None
) -> Direction | None:
    """The simplest direction at right angles to `axis` among those within half a degree of the nearest to `up`.

    None where no lattice direction of small numbers is near (in a hexagonal crystal few directions are orthogonal).
    """
    reach = np.arange(-6, 7)
    triples = np.stack(np.meshgrid(reach, reach, reach, indexing="ij"), axis=-1).reshape(-1, 3)
    lattice = np.array([cartesian(row, crystal, c_over_a) for row in ((1, 0, 0), (0, 1, 0), (0, 0, 1))])
    a, b = np.array(axis) @ lattice, np.array(up) @ lattice
    places = triples @ lattice
    fits = np.any(triples != 0, axis=1) & (
        np.abs(places @ a) <= RIGHT_ANGLE * np.linalg.norm(a) * np.linalg.norm(places, axis=1)
    )
    triples, places = triples[fits], places[fits]
    wanted = b * (a @ a) - a * (a @ b)  # up less its part along the axis
    if np.linalg.norm(wanted) < 1e-9 * np.linalg.norm(b) * (a @ a):  # anything at right angles is as near
        wanted = places[np.argmin(np.linalg.norm(places, axis=1))] if len(places) else np.cross(a, np.roll(a, 1) + 1.0)
    if len(triples):
        cosines = places @ wanted / np.linalg.norm(places, axis=1) / np.linalg.norm(wanted)
        angles = np.arccos(np.clip(cosines, -1, 1))
        close = triples[angles <= angles.min() + math.radians(0.5)]
        best = min(close.tolist(), key=lambda t: (sum(v * v for v in t), [-v for v in t]))
        if angles.min() < math.radians(5):
            return best[0], best[1], best[2]
    if crystal == "wurtzite":
        return None
    along, square = sum(p * q for p, q in zip(axis, up, strict=True)), sum(p * p for p in axis)
    whole = [q * square - p * along for p, q in zip(axis, up, strict=True)]  # the same in whole numbers
    if not any(whole):
        whole = [-axis[1], axis[0], 0] if axis[0] or axis[1] else [1, 0, 0]
    shared = math.gcd(*whole)
    x, y, z = (v // shared for v in whole)
    return x, y, z


def orthogonal(axis: Direction, up: Direction, crystal: str | None = None, c_over_a: float | None = None) -> None:
    """InputError, with the nearest `up` that fits, where the two are not at right angles in the crystal."""
    a, b = (np.array(cartesian(d, crystal, c_over_a)) for d in (axis, up))
    if abs(a @ b) <= RIGHT_ANGLE * np.linalg.norm(a) * np.linalg.norm(b):
        return
    better = nearest_orthogonal(axis, up, crystal, c_over_a)
    lattice = " in the hexagonal lattice (three numbers, c last)" if crystal == "wurtzite" else ""
    remedy = "choose an axis along c, [0, 0, 1], or across it"
    remedy = remedy if better is None else f"the nearest is up = {list(better)}"
    raise InputError("up", f"must be at right angles to the axis {list(axis)}{lattice}", list(up), remedy)
