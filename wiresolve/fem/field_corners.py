"""Where a potential is singular: corners of the drawing, and the ends of what holds it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.corners import LEGS, SMOOTH_FROM, Corner, exponents, merged
from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class _Sector:
    """What one cell takes of the surroundings of a point."""

    start: float
    angle: float
    weight: float
    held_first: bool
    held_last: bool


def field_corners(mesh: Mesh, permittivity: Sequence[float], held: Sequence[Ints]) -> tuple[Corner, ...]:
    """The points of the drawing at which the potential goes like r^a with a singular exponent a.

    Parameters
    ----------
    permittivity : of each of the mesh's regions.
    held : nodes (e, degree + 1) of the edges at which the potential is given (`NamedEdges.nodes`); elsewhere on the
        boundary no field goes through.
    """
    ends = np.vstack([np.sort(nodes[:, [0, -1]], axis=1) for nodes in held]) if held else np.zeros((0, 2), int)
    given = {(int(a), int(b)) for a, b in ends}
    slopes = triangle(mesh.degree).gradients(np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]))
    found = []
    for point in np.unique(mesh.corners):
        sectors = []
        for cell, vertex in zip(*np.nonzero(mesh.cells[:, :3] == point), strict=True):
            nodes = mesh.cells[cell]
            jacobian = np.einsum("ra,ax->xr", slopes[:, vertex], mesh.points[nodes])
            first, last = (float(np.arctan2(*(jacobian @ leg)[::-1])) for leg in LEGS[vertex])
            beside = [int(nodes[(vertex + step) % 3]) for step in (1, 2)]
            at_ends = [(min(int(point), other), max(int(point), other)) in given for other in beside]
            weight = float(permittivity[mesh.region[cell]])
            sectors.append(_Sector(first, float(np.mod(last - first, 2 * np.pi)), weight, *at_ends))
        exponent = _lowest(sectors)
        if exponent is not None:
            x, y = mesh.points[point]
            found.append(Corner(float(x), float(y), exponent))
    return tuple(found)


def _lowest(sectors: Sequence[_Sector]) -> float | None:
    """The lowest exponent below `SMOOTH_FROM` that is no whole number."""
    some = [
        a
        for fan, closed in _fans(sectors)
        for a in exponents(merged([(s.angle, s.weight) for s in fan]), closed, (fan[0].held_first, fan[-1].held_last))
        if a < SMOOTH_FROM and abs(a - round(a)) > 0.01
    ]
    return float(min(some)) if some else None


def _fans(sectors: Sequence[_Sector]) -> list[tuple[list[_Sector], bool]]:
    """Runs of neighbouring sectors between which nothing is held, each with whether it closes around the point."""
    order = sorted(sectors, key=lambda s: s.start)
    follows = [_adjoin(one, order[(i + 1) % len(order)]) for i, one in enumerate(order)]
    if all(follows):
        return [(order, True)]
    first = follows.index(False) + 1
    order, follows = order[first:] + order[:first], follows[first:] + follows[:first]
    fans: list[list[_Sector]] = [[]]
    for sector, goes_on in zip(order, follows, strict=True):
        fans[-1].append(sector)
        if not goes_on:
            fans.append([])
    return [(fan, False) for fan in fans if fan]


def _adjoin(one: _Sector, other: _Sector) -> bool:
    """Whether a sector goes on in another one, with nothing held between them."""
    gap = np.mod(other.start - one.start - one.angle + np.pi, 2 * np.pi) - np.pi
    return bool(abs(gap) < 1e-3 and not one.held_last and not other.held_first)
