"""Lagrange triangles of any degree: nodes, functions and quadrature on the reference triangle.

Nodes follow the order that Gmsh and VTK share: the three vertices, the inner nodes of the edges 01, 12, 20, then the
inner nodes as a smaller triangle of degree p - 3 by the same rule.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache, cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def reference_nodes(degree: int) -> Array:
    """Nodes of the reference triangle (0,0), (1,0), (0,1), shape (nodes, 2)."""
    if degree == 0:
        return np.full((1, 2), 1 / 3)
    corners = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    steps = np.arange(1, degree)[:, None] / degree
    edges = [corners[a] + steps * (corners[b] - corners[a]) for a, b in ((0, 1), (1, 2), (2, 0))]
    nodes = np.vstack([corners, *edges])
    if degree < 3:
        return nodes
    if degree == 3:
        return np.vstack([nodes, reference_nodes(0)])
    return np.vstack([nodes, 1 / degree + (degree - 3) / degree * reference_nodes(degree - 3)])


def _exponents(degree: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    pairs = np.array([(i, d - i) for d in range(degree + 1) for i in range(d + 1)], dtype=np.int64)
    return pairs[:, 0], pairs[:, 1]


@dataclass(frozen=True)
class LagrangeTriangle:
    """The Lagrange functions of one degree on the reference triangle.

    Functions are combinations of the monomials of (x - 1/3, y - 1/3); at degree 6 the change of basis is conditioned
    well enough for 12 digits.
    """

    degree: int

    @property
    def count(self) -> int:
        """Number of nodes, (p + 1)(p + 2)/2."""
        return (self.degree + 1) * (self.degree + 2) // 2

    @property
    def inner(self) -> int:
        """Number of nodes inside the triangle; they come last."""
        return (self.degree - 1) * (self.degree - 2) // 2

    @cached_property
    def nodes(self) -> Array:
        """Reference coordinates of the nodes, shape (count, 2)."""
        return reference_nodes(self.degree)

    @cached_property
    def _coefficients(self) -> Array:
        return np.asarray(np.linalg.inv(self._monomials(self.nodes)), dtype=float)

    def _monomials(self, at: Array) -> Array:
        i, j = _exponents(self.degree)
        x, y = 3 * at[:, :1] - 1, 3 * at[:, 1:] - 1
        return np.asarray(x**i * y**j)

    def values(self, at: Array) -> Array:
        """Functions at reference points `at` (m, 2), shape (m, count)."""
        return np.asarray(self._monomials(at) @ self._coefficients)

    def gradients(self, at: Array) -> Array:
        """Reference gradients at `at` (m, 2), shape (2, m, count)."""
        i, j = _exponents(self.degree)
        x, y = 3 * at[:, :1] - 1, 3 * at[:, 1:] - 1
        along_x = 3 * i * x ** np.maximum(i - 1, 0) * y**j
        along_y = 3 * j * x**i * y ** np.maximum(j - 1, 0)
        return np.stack([along_x @ self._coefficients, along_y @ self._coefficients])


@cache
def triangle(degree: int) -> LagrangeTriangle:
    """The element of a degree, made once."""
    return LagrangeTriangle(degree)
