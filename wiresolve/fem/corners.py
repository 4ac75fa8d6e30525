"""How singular the states are at the corners of a drawing, and how cells must be graded towards them.

Near a corner a state goes like r^a; a comes from the angular part of the operator in the sectors that meet there
(V. A. Kondrat'ev, Trans. Moscow Math. Soc. 16, 227 (1967); for interfaces R. B. Kellogg, Appl. Anal. 4, 101 (1975)).
At degree p the cell size that spends fewest cells goes like r^(1 - a/(p + 1)).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.linalg as dense
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Grading

Array = NDArray[np.float64]

_ANGULAR_DEGREE = 8
SMOOTH_FROM = 4.0


@dataclass(frozen=True)
class Corner:
    """A point of the drawing at which states are singular, and the exponent a of r^a."""

    x: float
    y: float
    exponent: float


def singular_corners(mesh: Mesh, inverse_mass: Sequence[Array]) -> tuple[Corner, ...]:
    """The corners of a mesh with a singular exponent.

    Parameters
    ----------
    inverse_mass : (2, 2) in-plane inverse mass of each of the mesh's regions, in 1/m0.
    """
    slopes = triangle(mesh.degree).gradients(np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]))
    corners = []
    for point in mesh.corners:
        cells, local = np.nonzero(mesh.cells[:, :3] == point)
        inside = mesh.admitted[cells]
        cells, local = cells[inside], local[inside]
        if not len(cells):
            continue
        regions = mesh.region[cells]
        stretch = _round(np.mean([inverse_mass[r] for r in regions], axis=0))
        sectors = []
        for cell, vertex in zip(cells, local, strict=True):
            jacobian = np.einsum("ra,ax->xr", slopes[:, vertex], mesh.points[mesh.cells[cell]])
            legs = [jacobian @ leg for leg in LEGS[vertex]]
            first, last = (np.arctan2(*(stretch @ leg)[::-1]) for leg in legs)
            # What is left of a tensor after the common stretch counts by its geometric mean: grading needs no more.
            weight = float(np.sqrt(np.linalg.det(stretch @ inverse_mass[mesh.region[cell]] @ stretch.T)))
            sectors.append((float(first), float(np.mod(last - first, 2 * np.pi)), weight))
        exponent = _lowest_singular(sectors)
        if exponent is not None:
            x, y = mesh.points[point]
            corners.append(Corner(float(x), float(y), exponent))
    return tuple(corners)


LEGS = (
    (np.array([1.0, 0.0]), np.array([0.0, 1.0])),
    (np.array([-1.0, 1.0]), np.array([-1.0, 0.0])),
    (np.array([0.0, -1.0]), np.array([1.0, -1.0])),
)
"""Directions of the two edges that leave each vertex of the reference triangle, counter-clockwise."""


def _round(inverse_mass: Array) -> Array:
    """The map of the plane that makes this inverse mass a multiple of the identity (determinant 1)."""
    values, axes = np.linalg.eigh(inverse_mass)
    return np.asarray((axes / np.sqrt(values)) @ axes.T * np.sqrt(np.sqrt(values.prod())))


def _lowest_singular(sectors: Sequence[tuple[float, float, float]]) -> float | None:
    """The lowest exponent below `SMOOTH_FROM` that is no whole number, over the fans that meet at a point."""
    found = [a for fan in _fans(sectors) for a in exponents(fan[0], fan[1]) if a < SMOOTH_FROM]
    singular = [a for a in found if abs(a - round(a)) > 0.01]
    return float(min(singular)) if singular else None


def _fans(sectors: Sequence[tuple[float, float, float]]) -> list[tuple[list[tuple[float, float]], bool]]:
    """Runs of neighbouring sectors as ((angle, weight) merged by weight, closed around the point)."""
    order = sorted(sectors)
    if abs(sum(s[1] for s in order) - 2 * np.pi) < 1e-3:
        return [(merged([(s[1], s[2]) for s in order]), True)]
    fans: list[list[tuple[float, float, float]]] = []
    for sector in order:
        if fans and abs(np.mod(sector[0] - fans[-1][-1][0] - fans[-1][-1][1] + np.pi, 2 * np.pi) - np.pi) < 1e-3:
            fans[-1].append(sector)
        else:
            fans.append([sector])
    first, last = fans[0][0], fans[-1][-1]
    if len(fans) > 1 and abs(np.mod(first[0] - last[0] - last[1] + np.pi, 2 * np.pi) - np.pi) < 1e-3:
        fans[0] = fans.pop() + fans[0]
    return [(merged([(s[1], s[2]) for s in fan]), False) for fan in fans]


def merged(parts: Sequence[tuple[float, float]]) -> list[tuple[float, float]]:
    """Sectors (angle, weight) with neighbours of one weight made one."""
    found: list[tuple[float, float]] = []
    for angle, weight in parts:
        if found and np.isclose(found[-1][1], weight, rtol=1e-9):
            found[-1] = (found[-1][0] + angle, weight)
        else:
            found.append((angle, weight))
    return found


@lru_cache(maxsize=1)
def _angular_element() -> tuple[Array, Array]:
    """Stiffness and mass of an element of unit length and high degree on an angle."""
    count = _ANGULAR_DEGREE + 1
    nodes = np.linspace(0, 1, count)
    gauss, weights = np.polynomial.legendre.leggauss(count)
    gauss, weights = (gauss + 1) / 2, weights / 2
    basis = [np.polynomial.Polynomial.fromroots(np.delete(nodes, i)) for i in range(count)]
    basis = [p / p(nodes[i]) for i, p in enumerate(basis)]
    value = np.array([p(gauss) for p in basis])
    slope = np.array([p.deriv()(gauss) for p in basis])
    return (slope * weights) @ slope.T, (value * weights) @ value.T


def exponents(sectors: Sequence[tuple[float, float]], closed: bool, held: tuple[bool, bool] = (True, True)) -> Array:
    """Exponents a of r^a, ascending and positive, where sectors of different inverse mass meet.

    Parameters
    ----------
    sectors : (angle in rad, inverse mass) in order around the point.
    closed : they close around it; otherwise the fan has two ends.
    held : whether the function is given at the fan's first and last end, as at a wall; else no flux goes through.
    """
    if not closed and len(sectors) == 1:
        return np.asarray(np.pi / sectors[0][0] * (np.arange(1, 9) - (0 if held[0] == held[1] else 0.5)))
    degree, pieces = _ANGULAR_DEGREE, []
    for angle, weight in sectors:
        parts = max(1, int(np.ceil(angle / 1.2)))
        pieces += [(angle / parts, weight)] * parts
    stiff, mass = _angular_element()
    size = degree * len(pieces) + 1
    left, right = np.zeros((size, size)), np.zeros((size, size))
    for i, (angle, weight) in enumerate(pieces):
        part = slice(degree * i, degree * i + degree + 1)
        left[part, part] += weight / angle * stiff
        right[part, part] += weight * angle * mass
    if closed:
        for matrix in (left, right):
            matrix[0] += matrix[-1]
            matrix[:, 0] += matrix[:, -1]
        left, right = left[:-1, :-1], right[:-1, :-1]
    else:
        kept = slice(int(held[0]), size - int(held[1]))
        left, right = left[kept, kept], right[kept, kept]
    squares = dense.eigh(left, right, eigvals_only=True, subset_by_index=(0, min(8, len(left) - 1)))
    return np.asarray(np.sqrt(squares[squares > 1e-6]))


def gradings(
    corners: Sequence[Corner], largest_nm: float, reach_nm: float, least: float, degree: int = 4
) -> tuple[Grading, ...]:
    """Gradings that let cells grow from each corner, from no less than `least` of it, to `largest_nm` at `reach_nm`."""
    made = []
    for corner in corners:
        power = 1 - min(corner.exponent, degree) / (degree + 1)
        # The innermost cell is where the size reaches the distance itself.
        inner = reach_nm * min(1.0, largest_nm / reach_nm) ** (1 / (1 - power))
        made.append(Grading(corner.x, corner.y, reach_nm, largest_nm, power, max(0.5 * inner, least * largest_nm)))
    return tuple(made)
