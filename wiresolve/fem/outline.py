"""The edges of a mesh along which materials change or carriers meet a wall."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

_STRAIGHT = 1e-11
"""Departure from the chord, as a part of its length, below which an edge is straight."""


@dataclass(frozen=True, eq=False)
class OutlineEdges:
    """Edges between unlike materials, or at a wall, that carriers meet: each once, carriers on its left.

    Attributes
    ----------
    nodes : (e, degree + 1) mesh points along each edge, ends included, in its direction.
    cells : (e, 2) the cell on the left, which admits carriers, and the one on the right (-1: none).
    sides : (e, 2) which side of these cells the edge is (0, 1, 2 for the vertices 01, 12, 20).
    rim : (e,) edges of the outer boundary of the mesh (holes are not in it).
    """

    mesh: Mesh
    nodes: Ints
    cells: Ints
    sides: Ints
    rim: Flags

    @cached_property
    def used(self) -> Ints:
        """(n,) the mesh points on these edges, ascending."""
        return np.unique(self.nodes)

    @cached_property
    def local(self) -> Ints:
        """(e, degree + 1) `nodes` as numbers among `used`."""
        return np.asarray(np.searchsorted(self.used, self.nodes), dtype=np.int64)

    @property
    def wall(self) -> Flags:
        """(e,) edges with carriers on one side only."""
        right = self.cells[:, 1]
        return np.asarray((right < 0) | ~self.mesh.admitted[np.maximum(right, 0)])

    @cached_property
    def tangents(self) -> Array:
        """(e, degree + 1, 2) derivatives of the edges' points by their parameter from 0 to 1, at their nodes."""
        at = np.arange(self.mesh.degree + 1) / self.mesh.degree
        powers = np.arange(self.mesh.degree + 1)
        slopes = powers * at[:, None] ** np.maximum(powers - 1, 0)
        derive = slopes @ np.linalg.inv(at[:, None] ** powers)
        return np.asarray(np.einsum("ij,ejx->eix", derive, self.mesh.points[self.nodes]))

    @cached_property
    def normals(self) -> Array:
        """(e, degree + 1, 2) unit normals at the nodes, away from the left."""
        along = self.tangents / np.linalg.norm(self.tangents, axis=2, keepdims=True)
        return np.stack([along[..., 1], -along[..., 0]], axis=2)

    @cached_property
    def curved(self) -> Flags:
        """(e,) edges that depart from their chord."""
        points = self.mesh.points[self.nodes]
        t = (np.arange(self.mesh.degree + 1) / self.mesh.degree)[:, None]
        chord = (1 - t) * points[:, :1] + t * points[:, -1:]
        length = np.linalg.norm(points[:, -1] - points[:, 0], axis=1)
        return np.asarray(np.abs(points - chord).max(axis=(1, 2)) > _STRAIGHT * length)


def outline_edges(mesh: Mesh) -> OutlineEdges:
    """The edges at which the operator jumps or ends."""
    inner, cells = mesh.degree - 1, mesh.cells
    rows = []
    for s, (a, b) in enumerate(((0, 1), (1, 2), (2, 0))):
        middle = cells[:, 3 + s * inner : 3 + (s + 1) * inner]
        rows.append(np.column_stack([cells[:, a], middle, cells[:, b]]))
    nodes = np.vstack(rows)
    cell, side = np.tile(np.arange(len(cells)), 3), np.repeat(np.arange(3), len(cells))
    low, high = nodes[:, [0, -1]].min(axis=1), nodes[:, [0, -1]].max(axis=1)
    order = np.argsort(low * len(mesh.points) + high, kind="stable")
    key = (low * len(mesh.points) + high)[order]
    first = np.flatnonzero(np.r_[True, key[1:] != key[:-1]])
    paired = np.r_[key[1:] == key[:-1], False][first]
    one, two = order[first], order[np.minimum(first + 1, len(order) - 1)]
    # The cell that carriers may enter comes first.
    turned = paired & ~mesh.admitted[cell[one]]
    one, two = np.where(turned, two, one), np.where(turned, one, two)
    right = np.where(paired, cell[two], -1)
    admitted = mesh.admitted[cell[one]]
    beside = paired & mesh.admitted[np.maximum(right, 0)]
    # Regions of one material and offset are one to carriers.
    kinds = [(r.material, r.offset_eV) for r in mesh.regions]
    kind = np.array([kinds.index(k) for k in kinds])[mesh.region]
    kept = admitted & ~(beside & (kind[cell[one]] == kind[np.maximum(right, 0)]))
    lonely = ~paired
    outer = np.zeros(len(one), dtype=bool)
    outer[lonely] = _outer(mesh, nodes[one[lonely]][:, [0, -1]])
    return OutlineEdges(
        mesh,
        nodes[one[kept]],
        np.column_stack([cell[one], right])[kept],
        np.column_stack([side[one], np.where(paired, side[two], -1)])[kept],
        outer[kept],
    )


def _outer(mesh: Mesh, ends: Ints) -> Flags:
    """Which boundary edges (b, 2), the mesh on their left, run around it and not around a hole."""
    order = np.argsort(ends[:, 0])
    after = order[np.searchsorted(ends[order, 0], ends[:, 1])]
    ring = np.arange(len(ends))
    for _ in range(len(ends).bit_length()):  # the smallest number on each ring, seen twice as far each time
        ring, after = np.minimum(ring, ring[after]), after[after]
    (x0, y0), (x1, y1) = np.moveaxis(mesh.points[ends], (1, 2), (0, 1))
    around = np.bincount(ring, x0 * y1 - x1 * y0, minlength=len(ends))
    return np.asarray(around[ring] > 0)
