"""A curved mesh: cells of one degree with their regions, and the shape of their maps."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


_CLOSE = 0.01
"""How close to a vertex points of the quadrature come, in lengths of the edges."""


@dataclass(frozen=True)
class Region:
    """A piece of the section that is left after painting, in one material."""

    name: str
    material: str
    carriers: bool
    offset_eV: float


@dataclass(frozen=True, eq=False)
class Mesh:
    """Curved triangles of one degree.

    Attributes
    ----------
    points : (n, 2) nodes in nm.
    cells : (c, nodes per cell) in the node order of `fem.lagrange`; counter-clockwise.
    region : (c,) index into `regions`.
    corners : (m,) points that are corners of the drawing (ends of its curves).
    """

    degree: int
    points: Array
    cells: Ints
    region: Ints
    regions: tuple[Region, ...]
    corners: Ints

    @property
    def admitted(self) -> NDArray[np.bool_]:
        """(c,) cells that carriers may enter."""
        return np.array([r.carriers for r in self.regions])[self.region]


def oriented(mesh: Mesh) -> Mesh:
    """The mesh with cells that run counter-clockwise (mirrored ones get their nodes renumbered)."""
    corner = mesh.points[mesh.cells[:, :3]]
    edge1, edge2 = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    clockwise = edge1[:, 0] * edge2[:, 1] - edge1[:, 1] * edge2[:, 0] < 0
    if not clockwise.any():
        return mesh
    element = triangle(mesh.degree)
    mirrored = np.rint(element.nodes[:, ::-1] * mesh.degree).astype(int)
    place = {tuple(n): i for i, n in enumerate(np.rint(element.nodes * mesh.degree).astype(int))}
    order = np.array([place[tuple(n)] for n in mirrored])
    cells = mesh.cells.copy()
    cells[clockwise] = cells[clockwise][:, order]
    return replace(mesh, cells=cells)


def blended(mesh: Mesh) -> Mesh:
    """The mesh with the inner nodes of curved cells where the degree of the curved map falls off as it must.

    An edge's departure from its chord is s (1 - s) q(s); it is carried into the cell as the polynomial of the same
    total degree, so that a part of degree k stays of the size h^k. With inner nodes placed otherwise the map's
    derivatives are too large and energies converge like h^5 instead of h^8 (P. G. Ciarlet and P.-A. Raviart, Comput.
    Methods Appl. Mech. Eng. 1, 217 (1972); M. Lenoir, SIAM J. Numer. Anal. 23, 562 (1986)).
    """
    curved = np.flatnonzero(~is_straight(mesh))
    if not len(curved):
        return mesh
    cells, inner = mesh.cells[curved], triangle(mesh.degree).inner
    nodes = mesh.points[cells]
    weights = np.column_stack([1 - triangle(mesh.degree).nodes.sum(1), triangle(mesh.degree).nodes])
    departure = nodes - np.einsum("av,cvx->cax", weights, nodes[:, :3])
    carried = np.einsum("ie,cex->cix", edge_extension(mesh.degree), departure[:, 3:-inner])
    points = mesh.points.copy()
    points[cells[:, -inner:]] = nodes[:, -inner:] - departure[:, -inner:] + carried
    return replace(mesh, points=points)


@cache
def edge_extension(degree: int) -> Array:
    """Departures at inner nodes from those at the inner nodes of the edges, (inner nodes, 3 (degree - 1))."""
    element = triangle(degree)
    weights = np.column_stack([1 - element.nodes.sum(1), element.nodes])[-element.inner :]
    steps = np.arange(1, degree) / degree
    powers = np.arange(degree - 1)
    quotient = np.linalg.inv((steps * (1 - steps))[:, None] * steps[:, None] ** powers)
    parts = []
    for first, last in ((0, 1), (1, 2), (2, 0)):
        along = (weights[:, last] - weights[:, first] + 1) / 2
        parts.append((weights[:, first] * weights[:, last])[:, None] * along[:, None] ** powers @ quotient)
    return np.hstack(parts)


def folded(mesh: Mesh) -> NDArray[np.bool_]:
    """Cells whose Jacobian is not positive on a lattice of degree 8, their vertices left out, nor close to these.

    At a vertex between two edges on one smooth curve a cell has no angle left and its Jacobian is zero: integrals over
    such a cell are finite, and what it costs in accuracy is in the indicators. As close to a vertex as points of the
    quadrature come, it must be positive.
    """
    element = triangle(mesh.degree)
    result = np.zeros(len(mesh.cells), dtype=bool)
    curved = ~is_straight(mesh)
    nodes = mesh.points[mesh.cells[curved]]
    slopes = element.gradients(np.vstack([triangle(8).nodes[3:], _beside_vertices()]))
    jacobian = np.einsum("rqa,cax->cqxr", slopes, nodes, optimize=True)
    det = jacobian[..., 0, 0] * jacobian[..., 1, 1] - jacobian[..., 0, 1] * jacobian[..., 1, 0]
    mean = det.mean(axis=1)
    inner = triangle(8).count - 3
    result[curved] = (det[:, :inner].min(axis=1) <= 1e-3 * mean) | (det[:, inner:].min(axis=1) <= 1e-6 * mean)
    return result


@cache
def _beside_vertices() -> Array:
    """Points as far from each vertex as those of the closest quadrature rules, (15, 2)."""
    t = np.linspace(0, 1, 5)[:, None]
    corners = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    ways = [(corners[k], corners[(k + 1) % 3] - corners[k], corners[(k + 2) % 3] - corners[k]) for k in range(3)]
    return np.vstack([start + _CLOSE * ((1 - t) * first + t * second) for start, first, second in ways])


def is_straight(mesh: Mesh) -> NDArray[np.bool_]:
    """(c,) cells whose map from the reference triangle is affine to rounding."""
    nodes = mesh.points[mesh.cells]
    barycentric = np.column_stack([1 - triangle(mesh.degree).nodes.sum(1), triangle(mesh.degree).nodes])
    flat = np.einsum("av,cvx->cax", barycentric, nodes[:, :3])
    reach = np.abs(nodes[:, 1:3] - nodes[:, :1]).max(axis=(1, 2))
    return np.asarray(np.abs(nodes - flat).max(axis=(1, 2)) < 1e-11 * reach)
