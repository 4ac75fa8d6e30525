"""Normal fluxes on the boundary of a part of a mesh, as accurate as the functions themselves.

A discrete solution u of -div A grad u + c u = f has slopes that are a degree less accurate than u. Its flux n.A grad u
as the boundary's share in the weak form, int (A grad u.grad phi + c u phi - f phi) = int flux phi for the functions phi
that do not vanish there, is not: products of such fluxes converge as fast as energies (the idea is M. F. Wheeler's,
SIAM J. Numer. Anal. 11, 764 (1974), from memory). A function along the boundary has the mesh's degree on each edge and
may jump at corners; beside a re-entrant corner of a wall, of the angle w, it is a polynomial times r^(pi/w - 1).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache, cached_property
from math import comb
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.space import Space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

_TURN = 0.05
"""Edges whose directions differ by more, in rad, meet at a corner."""
_CROWDED, _CROWD = 20, 8
"""Points of the rule on an edge with a singular end, and the power by which they crowd there."""


@cache
def edge_rule(degree: int, count: int) -> tuple[Array, Array, Array, Array]:
    """Gauss points and weights (q,) on (0, 1); functions of the edge's nodes there and their derivatives, (q, nodes).

    The nodes stand in the order of the edge, both ends included.
    """
    nodes, weights = np.polynomial.legendre.leggauss(count)
    at = (nodes + 1) / 2
    values, slopes = edge_functions(degree, at)
    return at, weights / 2, values, slopes


def edge_functions(degree: int, at: Array) -> tuple[Array, Array]:
    """Values and derivatives (q, nodes) of an edge's functions at parameters (q,) from 0 to 1."""
    powers = np.arange(degree + 1)
    steps = powers / degree
    # In Chebyshev polynomials: plain powers lose digits at degree 6.
    basis = np.polynomial.chebyshev
    inverse = np.linalg.inv(basis.chebvander(2 * steps - 1, degree))
    derived = np.stack([basis.chebval(2 * at - 1, 2 * basis.chebder(row)) for row in np.eye(degree + 1)], axis=1)
    return basis.chebvander(2 * at - 1, degree) @ inverse, derived @ inverse


@dataclass(frozen=True, eq=False)
class EdgeRule:
    """A rule on edges that may be singular at their ends.

    Attributes
    ----------
    at, weights : (e, q) parameters from 0 to 1, and weights.
    values, slopes : (e, q, nodes) the edges' functions there, and their derivatives by the parameter.
    factor : (e, q) what a flux is multiplied by: t^first (1 - t)^last.
    """

    at: Array
    weights: Array
    values: Array
    slopes: Array
    factor: Array


def singular_rule(degree: int, powers: Array) -> EdgeRule:
    """A rule for edges with the powers (e, 2) of fluxes at both ends, 0 where they are finite."""
    singular = powers != 0
    count = _CROWDED if singular.any() else degree + 4
    nodes, weights = np.polynomial.legendre.leggauss(count)
    x, w = (nodes + 1) / 2, weights / 2
    one, two = x**_CROWD, (1 - x) ** _CROWD
    crowded = _CROWD * x ** (_CROWD - 1), _CROWD * (1 - x) ** (_CROWD - 1)
    both = one / (one + two), (crowded[0] * two + one * crowded[1]) / (one + two) ** 2
    ways = np.array([x, one, 1 - two, both[0]]), np.array([w, w * crowded[0], w * crowded[1], w * both[1]])
    kind = singular[:, 0] + 2 * singular[:, 1]
    at = ways[0][kind]
    tables = [edge_functions(degree, row) for row in ways[0]]
    values, slopes = (np.array([table[i] for table in tables])[kind] for i in (0, 1))
    # Near an end 1 - t is known more closely than from t.
    rest = np.array([1 - x, 1 - one, two, two / (one + two)])[kind]
    return EdgeRule(at, ways[1][kind], values, slopes, at ** powers[:, :1] * rest ** powers[:, 1:])


@dataclass(frozen=True, eq=False)
class Boundary:
    """The edges that only one cell of a part of the mesh has, the part on their left.

    Attributes
    ----------
    space : where functions live.
    part : (c,) which of the space's cells belong to it.
    cells, sides : (e,) number among the space's cells, and which side of it the edge is.
    nodes : (e, degree + 1) along each edge, numbers among the space's nodes.
    tensor : (2, 2) A there, which decides how singular corners are; None where fluxes are to be finite everywhere.
    """

    space: Space
    part: Flags
    cells: Ints
    sides: Ints
    nodes: Ints
    tensor: Array | None = None

    @property
    def degree(self) -> int:
        """Of the edges and of functions along them."""
        return self.space.mesh.degree

    @cached_property
    def points(self) -> Array:
        """(e, degree + 1, 2) the edges' nodes in nm."""
        return np.asarray(self.space.mesh.points[self.space.nodes[self.nodes]])

    @property
    def walls(self) -> Flags:
        """(e,) edges at a wall of the space."""
        return np.asarray(self.space.wall[self.nodes].all(axis=1))

    @cached_property
    def _ends(self) -> Array:
        """(e, 2, 2) unit tangents at both ends."""
        _, slopes = edge_functions(self.degree, np.array([0.0, 1.0]))
        along = np.einsum("qn,enx->eqx", slopes, self.points)
        return np.asarray(along / np.linalg.norm(along, axis=2, keepdims=True))

    @cached_property
    def _numbers(self) -> tuple[Ints, Flags, Flags, Array]:
        """Unknowns of a flux (e, nodes); nodes with an equation; edges at a jump; the powers (e, 2)."""
        ends, degree = self.nodes[:, [0, -1]], self.degree
        wall = self.walls
        count = np.bincount(ends.ravel(), minlength=len(self.space.nodes))
        arriving, leaving = (np.full(len(self.space.nodes), -1) for _ in range(2))
        leaving[ends[:, 0]], arriving[ends[:, 1]] = np.arange(len(ends)), np.arange(len(ends))
        jump = count > 2
        plain = np.flatnonzero(count == 2)
        before, after = self._ends[arriving[plain], 1], self._ends[leaving[plain], 0]
        turn = np.arctan2(before[:, 0] * after[:, 1] - before[:, 1] * after[:, 0], np.einsum("nx,nx->n", before, after))
        both = wall[arriving[plain]] & wall[leaving[plain]]
        kinked = np.abs(turn) > _TURN
        mixed = wall[arriving[plain]] != wall[leaving[plain]]
        # At a corner of a wall fluxes are alike on both sides: zero where it sticks out.
        jump[plain[(kinked & ~both) | mixed]] = True
        power = np.zeros(len(self.space.nodes))
        if self.tensor is not None:
            at = plain[kinked & both & (turn < 0)]
            power[at] = np.pi / self._angle(arriving[at], leaving[at]) - 1
        number = np.full(self.nodes.shape, -1)
        number[:, 1:-1] = np.arange(len(ends) * (degree - 1)).reshape(len(ends), -1)
        used = len(ends) * (degree - 1)
        smooth = np.flatnonzero((count > 0) & ~jump)
        at_node = np.full(len(self.space.nodes), -1)
        at_node[smooth] = used + np.arange(len(smooth))
        used += len(smooth)
        own = at_node[ends]
        loose = jump[ends]
        own[loose] = used + np.arange(int(loose.sum()))
        number[:, [0, -1]] = own
        equations = np.zeros(len(self.space.nodes), dtype=bool)
        equations[self.nodes] = True
        return number, equations, np.asarray(loose.any(axis=1)), power[ends]

    def _angle(self, arriving: Ints, leaving: Ints) -> Array:
        """Angles of corners in the metric in which A is the unit matrix, in rad."""
        assert self.tensor is not None
        flat = np.linalg.inv(np.linalg.cholesky(self.tensor))
        before, after = self._ends[arriving, 1] @ flat.T, self._ends[leaving, 0] @ flat.T
        cross = before[:, 0] * after[:, 1] - before[:, 1] * after[:, 0]
        return np.asarray(np.pi - np.arctan2(cross, np.einsum("nx,nx->n", before, after)))

    def _scales(self, powers: Array) -> Array:
        """(e, 2) values at singular ends for the one coefficient that both edges have there.

        In the metric of A a flux goes with the distance alike on both, and with the lengths as a density does.
        """
        if self.tensor is None or not powers.any():
            return np.ones(powers.shape)
        _, slopes = edge_functions(self.degree, np.array([0.0, 1.0]))
        along = np.einsum("qn,enx->eqx", slopes, self.points)
        flat = np.linalg.norm(along @ np.linalg.inv(np.linalg.cholesky(self.tensor)).T, axis=2)
        return np.where(powers != 0, flat ** (powers + 1) / np.linalg.norm(along, axis=2), 1.0)

    @property
    def powers(self) -> Array:
        """(e, 2) of the distance from both ends that fluxes go with."""
        return self._numbers[3]

    def fluxes(self, residual: NDArray[Any]) -> NDArray[Any]:
        """(e, degree + 1, m) outward fluxes at the edges' nodes, from what the weak form lacks on all nodes (n, m).

        Where an edge has powers at its ends they are the polynomial that the singular factor multiplies.
        Where a flux may jump one equation stands for several values; of all that fulfil it the smoothest is taken.
        """
        from scipy.sparse.linalg import splu

        number, equations, loose, powers = self._numbers
        rule = singular_rule(self.degree, powers)
        length = np.linalg.norm(np.einsum("eqn,enx->eqx", rule.slopes, self.points), axis=2) * rule.weights
        local = np.swapaxes(rule.values, 1, 2) @ (rule.values * (length * rule.factor)[..., None])
        scale = np.ones(number.shape)
        scale[:, [0, -1]] = self._scales(powers)
        local = local * scale[:, None]
        row = np.full(len(self.space.nodes), -1)
        row[equations] = np.arange(int(equations.sum()))
        rows, columns = (np.broadcast_to(x, local.shape) for x in (row[self.nodes][:, :, None], number[:, None, :]))
        unknowns = int(number.max()) + 1
        shape = (int(equations.sum()), unknowns)
        matrix = sparse.csr_array((local.ravel(), (rows.ravel(), columns.ravel())), shape=shape)
        right = residual[equations]
        if loose.any():
            top = np.array([(-1.0) ** k * comb(self.degree, k) for k in range(self.degree + 1)])
            picked = np.flatnonzero(loose)
            weight = np.sqrt(length[picked].sum(axis=1))[:, None] * top
            across = number[picked]
            place = np.broadcast_to(np.arange(len(picked))[:, None], across.shape)
            smooth = sparse.csr_array((weight.ravel(), (place.ravel(), across.ravel())), shape=(len(picked), unknowns))
            whole = sparse.block_array([[smooth.T @ smooth, matrix.T], [matrix, None]], format="csc")
            right = np.concatenate([np.zeros((unknowns, right.shape[1]), dtype=right.dtype), right])
        else:
            whole = sparse.csc_array(matrix)
        solver = splu(whole)
        if np.iscomplexobj(right):
            solved = solver.solve(np.ascontiguousarray(right.real)) + 1j * solver.solve(
                np.ascontiguousarray(right.imag)
            )
        else:
            solved = solver.solve(np.ascontiguousarray(right))
        return np.asarray(solved[:unknowns][number] * scale[..., None])


def boundary(space: Space, part: Flags | None = None, tensor: Array | None = None) -> Boundary:
    """The boundary of some of a space's cells, (c,) flags, or of all of them; `tensor` as in `Boundary`."""
    whole = np.ones(len(space.cells), dtype=bool) if part is None else part
    inner, numbers = space.mesh.degree - 1, np.flatnonzero(whole)
    dofs = space.dofs[numbers]
    rows = []
    for side, (first, last) in enumerate(((0, 1), (1, 2), (2, 0))):
        middle = dofs[:, 3 + side * inner : 3 + (side + 1) * inner]
        rows.append(np.column_stack([dofs[:, first], middle, dofs[:, last]]))
    nodes = np.vstack(rows)
    ends = np.sort(nodes[:, [0, -1]], axis=1)
    _, index, count = np.unique(ends[:, 0] * len(space.nodes) + ends[:, 1], return_inverse=True, return_counts=True)
    lonely = np.flatnonzero(count[index.ravel()] == 1)
    cells, sides = np.tile(numbers, 3), np.repeat(np.arange(3), len(numbers))
    return Boundary(space, whole, cells[lonely], sides[lonely], nodes[lonely], tensor)
