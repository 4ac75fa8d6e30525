"""The edges of a mesh that lie on given curves: where gates and charged surfaces are."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache, cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from wiresolve.describe.curves import Line, Parabolas, Segment, Spline
from wiresolve.fem.mesh import Mesh

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_NEAR = 1e-3
"""How far, in lengths of the edge, its ends may be from the curve; they are on it but for rounding."""
_INNER = 2e-2
"""How far its inner nodes may be: a quartic departs from an arc by far less, but not where the curvature jumps."""


@dataclass(frozen=True, eq=False)
class NamedEdges:
    """Edges along given curves, each once.

    Attributes
    ----------
    nodes : (e, degree + 1) mesh points along each edge, ends included.
    cells : (e, 2) the cells that have the edge (-1: there is no second one).
    segment : (e,) which of the given curves each edge lies on.
    wanted_nm : length of all given curves; more than `length_nm` where the mesh has no edge along a part of them.
    """

    mesh: Mesh
    nodes: Ints
    cells: Ints
    segment: Ints
    wanted_nm: float

    @cached_property
    def points(self) -> Ints:
        """(n,) mesh points on these edges, ascending."""
        return np.unique(self.nodes)

    @cached_property
    def weights_nm(self) -> Array:
        """(e, degree + 1) integrals of each node's function along its edge, with the curved edge's own metric."""
        _, weights, values, slopes = _edge_rule(self.mesh.degree)
        along = np.einsum("qi,eix->eqx", slopes, self.mesh.points[self.nodes])
        return np.asarray((np.linalg.norm(along, axis=2) * weights) @ values)

    @property
    def length_nm(self) -> float:
        """Length of the edges."""
        return float(self.weights_nm.sum())

    @property
    def missing_nm(self) -> float:
        """How much of the given curves no edge of the mesh follows."""
        return max(self.wanted_nm - self.length_nm, 0.0)

    def load(self, density: float | Array = 1.0) -> Array:
        """(mesh points,) integrals of a density, one number or one an edge, with every node's function."""
        each = np.broadcast_to(np.asarray(density, dtype=float), (len(self.nodes),))
        flat = (each[:, None] * self.weights_nm).ravel()
        return np.asarray(np.bincount(self.nodes.ravel(), flat, minlength=len(self.mesh.points)), dtype=float)


def edges_along(mesh: Mesh, segments: Sequence[Segment]) -> NamedEdges:
    """The edges of a mesh, outer or inner ones, all of whose nodes lie on the segments."""
    nodes, cells = _all_edges(mesh)
    chord = np.linalg.norm(mesh.points[nodes[:, -1]] - mesh.points[nodes[:, 0]], axis=1)
    # Points first, each at its own nearest segment: an edge may lie on two segments that go on smoothly.
    longest = np.zeros(len(mesh.points))
    np.maximum.at(longest, nodes, chord[:, None])
    far, on = np.full(len(mesh.points), np.inf), np.full(len(mesh.points), -1)
    for number, segment in enumerate(segments):
        some = np.flatnonzero(_in_box(segment, mesh.points, _INNER * longest))
        distance = _distance(segment, mesh.points[some])
        nearer = distance < far[some]
        far[some[nearer]], on[some[nearer]] = distance[nearer], number
    allowed = np.full(nodes.shape[1], _INNER)
    allowed[[0, -1]] = _NEAR
    found = np.flatnonzero((far[nodes] <= allowed * chord[:, None]).all(axis=1))
    middle = nodes[found, mesh.degree // 2]
    return NamedEdges(mesh, nodes[found], cells[found], on[middle], sum(_length(s) for s in segments))


def _all_edges(mesh: Mesh) -> tuple[Ints, Ints]:
    """Every edge once: its nodes (e, degree + 1), in the first cell's direction, and its cells (e, 2)."""
    inner, cells = mesh.degree - 1, mesh.cells
    rows = []
    for s, (a, b) in enumerate(((0, 1), (1, 2), (2, 0))):
        rows.append(np.column_stack([cells[:, a], cells[:, 3 + s * inner : 3 + (s + 1) * inner], cells[:, b]]))
    nodes, cell = np.vstack(rows), np.tile(np.arange(len(cells)), 3)
    key = nodes[:, [0, -1]].min(axis=1) * len(mesh.points) + nodes[:, [0, -1]].max(axis=1)
    order = np.argsort(key, kind="stable")
    key = key[order]
    first = np.flatnonzero(np.r_[True, key[1:] != key[:-1]])
    paired = np.r_[key[1:] == key[:-1], False][first]
    second = np.where(paired, cell[order[np.minimum(first + 1, len(order) - 1)]], -1)
    return nodes[order[first]], np.column_stack([cell[order[first]], second])


def _samples(segment: Segment) -> Array:
    """Parameters dense enough that the nearest of their points is in the basin of the nearest point of the curve."""
    if isinstance(segment, Line):
        return np.array([0.0, 1.0])
    many = 16 * len(segment.points) if isinstance(segment, Spline | Parabolas) else 256
    return np.linspace(0, 1, many + 1)


def _in_box(segment: Segment, at: Array, slack: Array) -> NDArray[np.bool_]:
    """Points (m, 2) in the bounding box of a segment, generously, with a slack (m,) in nm."""
    samples = segment.point(_samples(segment))
    low, high = samples.min(axis=0), samples.max(axis=0)
    room = slack[:, None] + 0.02 * float(np.linalg.norm(high - low))
    return np.asarray(((at >= low - room) & (at <= high + room)).all(axis=1))


def _distance(segment: Segment, at: Array) -> Array:
    """(m,) distances in nm of points (m, 2) from a segment, its ends included."""
    if not len(at):
        return np.zeros(0)
    if isinstance(segment, Line):
        start, step = np.array(segment.start), np.array(segment.end) - np.array(segment.start)
        t = np.clip((at - start) @ step / (step @ step), 0, 1)
        return np.asarray(np.linalg.norm(at - start - t[:, None] * step, axis=1))
    samples = _samples(segment)
    _, nearest = cKDTree(segment.point(samples)).query(at)
    t = samples[nearest]
    for _ in range(8):
        tangent = segment.tangent(t)
        step = ((at - segment.point(t)) * tangent).sum(axis=1) / (tangent**2).sum(axis=1)
        t = np.clip(t + step, 0, 1)
    return np.asarray(np.linalg.norm(at - segment.point(t), axis=1))


def _length(segment: Segment) -> float:
    t, weights = segment.quadrature()
    return float(weights @ np.linalg.norm(segment.tangent(t), axis=1))


@cache
def _edge_rule(degree: int) -> tuple[Array, Array, Array, Array]:
    """Gauss points and weights on an edge; values and slopes (points, degree + 1) of its functions there."""
    at, weights = np.polynomial.legendre.leggauss(2 * degree + 2)
    at, weights = (at + 1) / 2, weights / 2
    steps, powers = np.arange(degree + 1) / degree, np.arange(degree + 1)
    carry = np.linalg.inv(steps[:, None] ** powers)
    slopes = powers * at[:, None] ** np.maximum(powers - 1, 0)
    return at, weights, at[:, None] ** powers @ carry, slopes @ carry
