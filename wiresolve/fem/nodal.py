"""A function that is known by its values at the nodes of a mesh."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh, is_straight
from wiresolve.fem.space import Space

Array = NDArray[np.float64]

_NEWTON = 12
_FEW, _MANY = 4, 32
"""Cells looked at for a point: the nearest few, and more where it lies in none of them."""


@dataclass(frozen=True, eq=False)
class NodalFunction:
    """A continuous function on a mesh.

    Attributes
    ----------
    mesh : the curved mesh.
    values : (n,) at its points.
    """

    mesh: Mesh
    values: Array

    def on(self, space: Space) -> Array:
        """(c, q) values at the quadrature points of a space over the same triangles, of any degree.

        Raises
        ------
        ValueError
            The space lies over other triangles.
        """
        if len(space.mesh.cells) != len(self.mesh.cells):
            raise ValueError("the space lies over other triangles than the function")
        shapes = triangle(self.mesh.degree).values(space.reference_points)
        return np.asarray(self.values[self.mesh.cells[space.cells]] @ shapes.T)

    def at_nodes(self, space: Space) -> Array:
        """(n,) values at the nodes of a space over the same triangles."""
        shapes = triangle(self.mesh.degree).values(triangle(space.mesh.degree).nodes)
        found = np.empty(len(space.nodes))
        found[space.dofs] = self.values[self.mesh.cells[space.cells]] @ shapes.T
        return found

    def __call__(self, x: Array, y: Array) -> Array:
        """Values at any points; outside the mesh those of the nearest cell, at its nearest edge."""
        points = np.column_stack([np.ravel(x), np.ravel(y)])
        found, worst = np.zeros(len(points)), np.full(len(points), np.inf)
        for count in (_FEW, _MANY):
            left = np.flatnonzero(worst > 1e-9)
            if not len(left):
                break
            most = min(count, len(self.mesh.cells))
            _, near = self._tree.query(points[left], k=most)
            self._look(points, near.reshape(len(left), most), left, found, worst)
        return found.reshape(np.shape(x))

    def _look(
        self, points: Array, near: NDArray[np.int64], left: NDArray[np.int64], found: Array, worst: Array
    ) -> None:
        """Fill in values of the points `left` from the cells `near` each, where they lie less far outside."""
        element = triangle(self.mesh.degree)
        for column in near.T:
            still = worst[left] > 1e-9
            open_, cell = left[still], column[still]
            if not len(open_):
                break
            nodes = self.mesh.points[self.mesh.cells[cell]]
            at = _place(nodes, points[open_], self.mesh.degree, ~self._straight[cell])
            outside = np.maximum(-np.minimum(at.min(axis=1), 1 - at.sum(axis=1)), 0.0)
            better = outside < worst[open_]
            some = open_[better]
            inside = np.clip(at[better], 0.0, 1.0)
            inside /= np.maximum(inside.sum(axis=1, keepdims=True), 1.0)
            shapes = element.values(inside)
            found[some] = np.einsum("pn,pn->p", shapes, self.values[self.mesh.cells[cell[better]]])
            worst[some] = outside[better]

    @cached_property
    def _straight(self) -> NDArray[np.bool_]:
        return is_straight(self.mesh)

    @cached_property
    def _tree(self) -> Any:
        from scipy.spatial import cKDTree

        return cKDTree(self.mesh.points[self.mesh.cells[:, :3]].mean(axis=1))


def _place(nodes: Array, points: Array, degree: int, curved: NDArray[np.bool_]) -> Array:
    """(p, 2) reference places of points in their cells, nodes (p, n, 2): by Newton's method where these are curved."""
    element = triangle(degree)
    first, second = nodes[:, 1] - nodes[:, 0], nodes[:, 2] - nodes[:, 0]
    at = np.linalg.solve(np.stack([first, second], axis=2), (points - nodes[:, 0])[..., None])[..., 0]
    # Where a point lies far outside of the chords' triangle, its cell's bend does not bring it in.
    near = (at.min(axis=1) > -0.5) & (at.sum(axis=1) < 1.5)
    some = np.flatnonzero(curved & near)
    if not len(some):
        return np.asarray(at)
    nodes, points, inner = nodes[some], points[some], at[some]
    for _ in range(_NEWTON):
        inner = np.clip(inner, -0.5, 1.5)
        rest = points - np.einsum("pn,pnx->px", element.values(inner), nodes)
        jacobian = np.einsum("rpn,pnx->pxr", element.gradients(inner), nodes)
        step = np.linalg.solve(jacobian, rest[..., None])[..., 0]
        inner = inner + step
        if np.abs(step).max() < 1e-12:
            break
    at[some] = inner
    return np.asarray(at)
