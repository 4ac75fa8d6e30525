"""How energies move with a mesh: the volume form of the shape derivative, gathered on the outlines.

With T(E) = -div (A s grad) + V, s = 1/(1 + alpha (E - V)), and a velocity field v that carries materials along (A,
alpha and edges go with them, a given potential stays in space), the states i, j of one level have the matrix

    D_ij = int (S_ij : grad v + f_ij . v),    S = <i|T - E|j> 1 - (A s grad j) grad i - (A s grad i) grad j,

f being the force of the potential's gradient and <i|..|j> a density, and the energies move as the eigenvalues of
D x = (dE/dp) N x, where N = -d<T(E) - E>/dE (A. Henrot, Extremum problems for eigenvalues of elliptic operators, 2006,
section 2.5, with the integral before it is taken to the boundary). It is the exact derivative of the discrete energies
when the mesh's nodes move with v, so it is as accurate as they are; the form on the boundary is not.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.eigen import solve_definite
from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import edge_extension
from wiresolve.fem.outline import OutlineEdges
from wiresolve.fem.space import Space, reference_mass

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Potential = Callable[[Array, Array], Array]
"""Energy in eV at points (x, y) in nm."""
_MOST_VALUES = 600_000
"""Cells x quadrature points x pairs of states that are held at a time."""
_STEP = 1e-5
"""Step of the potential's numerical gradient, as a part of the section's size."""


@dataclass(frozen=True, eq=False)
class Medium:
    """What states live in, one entry a region of the mesh, and a given potential.

    Attributes
    ----------
    stiffness : (regions, 2, 2) A in eV nm^2, real and symmetric; (regions, 3, 3) with the axis where k is not 0.
    edge_eV : (regions,) band edges.
    nonparabolicity_per_eV : (regions,) alpha, or None where masses do not depend on energy.
    potential : energy in eV at points (x, y) in nm, or None.
    k_per_nm : wave number along the axis.
    """

    stiffness: Array
    edge_eV: Array
    nonparabolicity_per_eV: Array | None = None
    potential: Potential | None = None
    k_per_nm: float = 0.0


@dataclass(frozen=True, eq=False)
class Pairs:
    """Pairs of states of one level whose matrix elements are wanted: (p,) numbers of both, and their energy."""

    first: Ints
    second: Ints
    energy_eV: Array

    def __len__(self) -> int:
        return len(self.first)


@dataclass(frozen=True, eq=False)
class Response:
    """Matrix elements of the pairs.

    Attributes
    ----------
    norm : (p,) of N.
    raised : (regions, p) derivative of T(E) by the band edge of a region; the sum over all regions is `norm`.
    stiffened : (regions, d, d, p) derivative by the entries of A there.
    outline : (used points of the outlines, 2, p) what a velocity in nm per unit there adds to D. Velocities of vertices
        go on into the section harmonically and linearly along the edges; those of inner nodes of curved edges count
        from there.
    """

    norm: NDArray[Any]
    raised: NDArray[Any]
    stiffened: NDArray[Any]
    outline: NDArray[Any]

    def moved(self, edges: OutlineEdges, velocity: Array) -> NDArray[Any]:
        """D for velocities (k, used points, 2) of the outlines' points, (k, p)."""
        field = np.array(velocity)
        field[:, edges.local[:, 1:-1]] = 0  # a straight edge stays straight
        inner = edges.local[edges.curved][:, 1:-1]
        ends = edges.local[edges.curved][:, [0, -1]]
        t = (np.arange(1, edges.mesh.degree) / edges.mesh.degree)[:, None]
        field[:, inner] = velocity[:, inner] - (1 - t) * velocity[:, ends[:, :1]] - t * velocity[:, ends[:, 1:]]
        flat = field.reshape(len(field), -1)
        return np.asarray(flat @ self.outline.reshape(flat.shape[1], -1))


def respond(space: Space, edges: OutlineEdges, medium: Medium, states: NDArray[Any], pairs: Pairs) -> Response:
    """Matrix elements of pairs of states (nodes of the space, m), which are normalised in any way.

    Parameters
    ----------
    edges : the outlines of the space's mesh.
    """
    regions, count = len(space.mesh.regions), len(pairs)
    depth = 2 if medium.k_per_nm == 0 else 3
    kind = complex if depth == 3 else states.dtype
    gathered = _Gathered(
        np.zeros((regions, count), dtype=kind),
        np.zeros((regions, depth, depth, count), dtype=kind),
        np.zeros((len(space.mesh.points), 2, count), dtype=kind),
    )
    varies = medium.potential is not None
    quick = depth == 2 and not (varies and medium.nonparabolicity_per_eV is not None)
    simple = space.straight & quick
    points = len(space.tabulated[0]) if varies else triangle(space.mesh.degree).count
    for cells in _chunks(np.flatnonzero(simple), 2 * points * max(count, states.shape[1])):
        _on_straight(space, medium, states, pairs, cells, gathered)
    size = len(space.tabulated[0]) * max(2 * count, 4 * states.shape[1])
    for cells in _chunks(np.flatnonzero(~simple), size):
        _by_quadrature(space, medium, states, pairs, cells, gathered)
    return Response(
        gathered.raised.sum(axis=0), gathered.raised, gathered.stiffened, _on_outlines(space, edges, gathered.points)
    )


@dataclass(frozen=True, eq=False)
class _Gathered:
    """Sums over cells; `points` holds D by the velocity of each vertex (linear between) and of inner nodes of edges."""

    raised: NDArray[Any]
    stiffened: NDArray[Any]
    points: NDArray[Any]

    def add(self, region: Ints, raised: NDArray[Any], stiffened: NDArray[Any]) -> None:
        for r in np.unique(region):
            self.raised[r] += raised[region == r].sum(axis=0)
            self.stiffened[r] += stiffened[region == r].sum(axis=0)

    def scatter(self, nodes: Ints, forces: NDArray[Any]) -> None:
        """Add forces (cells, nodes a cell, 2, pairs) at mesh points (cells, nodes a cell)."""
        order = np.argsort(nodes, axis=None, kind="stable")
        used = nodes.ravel()[order]
        first = np.flatnonzero(np.r_[True, used[1:] != used[:-1]])
        self.points[used[first]] += np.add.reduceat(forces.reshape(-1, *forces.shape[2:])[order], first, axis=0)


def _chunks(cells: Ints, values_per_cell: int) -> Iterator[Ints]:
    size = max(16, _MOST_VALUES // max(values_per_cell, 1))
    for start in range(0, len(cells), size):
        yield cells[start : start + size]


@cache
def _orthonormal(degree: int) -> Array:
    """Rows that turn nodal values into derivatives by both reference coordinates and values, in orthonormal bases."""
    lower, own = triangle(degree - 1), triangle(degree)
    slopes = np.linalg.cholesky(reference_mass(degree - 1)).T @ own.gradients(lower.nodes)
    values = np.linalg.cholesky(reference_mass(degree)).T
    return np.vstack([slopes[0], slopes[1], values])


def _on_straight(space: Space, medium: Medium, states: NDArray[Any], pairs: Pairs, cells: Ints, out: _Gathered) -> None:
    """Cells with an affine map and constant coefficients but the potential: exact integrals without quadrature."""
    mesh, degree = space.mesh, space.mesh.degree
    region = mesh.region[space.cells[cells]]
    corner = mesh.points[mesh.cells[space.cells[cells]][:, :3]]
    jacobian = np.stack([corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]], axis=2)
    det = jacobian[:, 0, 0] * jacobian[:, 1, 1] - jacobian[:, 0, 1] * jacobian[:, 1, 0]
    inverse = np.linalg.inv(jacobian)
    local = states[space.dofs[cells].T]
    rows = len(local)
    parts = (_orthonormal(degree) @ local.reshape(rows, -1)).reshape(-1, *local.shape[1:])
    one, two = parts[:, :, pairs.first], parts[:, :, pairs.second]
    n = triangle(degree - 1).count
    blocks = (slice(0, n), slice(n, 2 * n))
    grams = np.stack([[_summed(one[a], two[b]) for b in blocks] for a in blocks])
    slopes = np.einsum("crx,rscp,csy->cxyp", inverse, grams, inverse * det[:, None, None], optimize=True)
    both = det[:, None] * _summed(one[2 * n :], two[2 * n :])
    stiffness = medium.stiffness[region]
    # From here on: (cells, pairs).
    above = pairs.energy_eV - medium.edge_eV[region][:, None]
    kinetic = np.einsum("cxy,cxyp->cp", stiffness, slopes)
    if medium.nonparabolicity_per_eV is not None:
        alpha = medium.nonparabolicity_per_eV[region][:, None]
        lighter = 1 / (1 + alpha * above)
        slopes, kinetic = slopes * lighter[:, None, None], kinetic * lighter
        out.add(region, both + alpha * lighter * kinetic, slopes)
    else:
        out.add(region, both, slopes)
    stress = -np.einsum("cxyp,cyz->cxzp", slopes + slopes.swapaxes(1, 2), stiffness)
    stress[:, [0, 1], [0, 1]] += (kinetic - above * both)[:, None]
    forces: Any = 0
    if medium.potential is not None:
        energy, forces = _of_potential(space, medium.potential, states, pairs, cells, det)
        stress[:, [0, 1], [0, 1]] += energy[:, None]
    gradients = np.concatenate([-inverse.sum(axis=1, keepdims=True), inverse], axis=1)
    out.scatter(mesh.cells[space.cells[cells]][:, :3], np.einsum("cvb,cxbp->cvxp", gradients, stress) + forces)


def _of_potential(
    space: Space, potential: Potential, states: NDArray[Any], pairs: Pairs, cells: Ints, det: Array
) -> tuple[NDArray[Any], NDArray[Any]]:
    """int V psi_i psi_j in straight cells, (c, p), and the force of its gradient on the vertices, (c, 3, 2, p)."""
    weights, (*_, values) = space.tabulated
    linear = triangle(1).values(_reference_points(space))
    corner = space.mesh.points[space.mesh.cells[space.cells[cells]][:, :3]]
    at = np.einsum("qv,cvx->xcq", linear, corner)
    slope = _gradient(potential, at, float(np.ptp(space.mesh.points, axis=0).max()))
    fields = np.concatenate(
        [
            np.asarray(potential(at[0], at[1]), dtype=float)[:, None],
            np.einsum("qv,xcq->cvxq", linear, slope).reshape(len(cells), 6, -1),
        ],
        axis=1,
    )
    psi = values @ states[space.dofs[cells]]
    found = (fields * (det[:, None, None] * weights)) @ (psi[..., pairs.first].conj() * psi[..., pairs.second])
    return found[:, 0], found[:, 1:].reshape(len(cells), 3, 2, -1)


def _reference_points(space: Space) -> Array:
    """(q, 2) points of the rule for varying fields."""
    return np.asarray(space.tabulated[1][2] @ triangle(space.mesh.degree).nodes)


def _summed(one: NDArray[Any], two: NDArray[Any]) -> NDArray[Any]:
    return np.asarray(np.einsum("kcp,kcp->cp", one.conj(), two))


def _by_quadrature(
    space: Space,
    medium: Medium,
    states: NDArray[Any],
    pairs: Pairs,
    cells: Ints,
    out: _Gathered,
) -> None:
    """Any cells: curved ones, and fields that vary inside."""
    mesh, element = space.mesh, triangle(space.mesh.degree)
    weights, (*_, values) = space.tabulated
    slopes = space.tabulated[1][:2]
    region = mesh.region[space.cells[cells]]
    nodes = mesh.cells[space.cells[cells]]
    places = mesh.points[nodes]
    jacobian = np.einsum("rqa,cax->cqxr", slopes, places, optimize=True)
    det = jacobian[..., 0, 0] * jacobian[..., 1, 1] - jacobian[..., 0, 1] * jacobian[..., 1, 0]
    pull = np.empty_like(jacobian)  # of reference derivatives to those by x and y: (c, q, reference, x)
    pull[..., 0, 0], pull[..., 0, 1] = jacobian[..., 1, 1] / det, -jacobian[..., 0, 1] / det
    pull[..., 1, 0], pull[..., 1, 1] = -jacobian[..., 1, 0] / det, jacobian[..., 0, 0] / det
    weight = (det * weights)[..., None]
    local = states[space.dofs[cells]]
    psi = values @ local
    by_reference = np.stack([slopes[0] @ local, slopes[1] @ local])
    grad = np.einsum("cqrx,rcqm->xcqm", pull, by_reference, optimize=True)
    if medium.k_per_nm:
        grad = np.concatenate([grad, 1j * medium.k_per_nm * psi[None]])
    flux = np.einsum("cxy,ycqm->xcqm", medium.stiffness[region], grad, optimize=True)
    one, two = grad[..., pairs.first].conj(), grad[..., pairs.second]
    flux_one, flux_two = flux[:2][..., pairs.first].conj(), flux[:2][..., pairs.second]
    both = weight * psi[..., pairs.first].conj() * psi[..., pairs.second]
    above = pairs.energy_eV - medium.edge_eV[region][:, None, None]
    force: NDArray[Any] | None = None
    if medium.potential is not None:
        x = np.einsum("qa,cax->xcq", values, places, optimize=True)
        above = above - np.asarray(medium.potential(x[0], x[1]), dtype=float)[..., None]
        force = _gradient(medium.potential, x, float(np.ptp(mesh.points, axis=0).max()))
    kinetic = np.einsum("xcqp,xcqp->cqp", one[:2], flux_two)
    if len(flux) > 2:
        kinetic = kinetic + one[2] * flux[2][..., pairs.second]
    kinetic *= weight
    raised = both
    scale: Any = weight
    if medium.nonparabolicity_per_eV is not None:
        alpha = medium.nonparabolicity_per_eV[region][:, None, None]
        lighter = 1 / (1 + alpha * above)
        kinetic, scale = kinetic * lighter, weight * lighter
        raised = both + alpha * lighter * kinetic
    scaled = scale * two
    stiffened = np.einsum("xcqp,ycqp->cxyp", one, scaled)
    out.add(region, raised.sum(axis=1), stiffened)
    density = kinetic - above * both
    # D by the velocity of each node of the cell: the stress times the derivatives of its function, and the force.
    derive = np.einsum("cqrb,rqa->cbqa", pull, slopes, optimize=True)
    c, _, q, count = derive.shape
    total = np.empty((c, count, 2, len(pairs)), dtype=out.points.dtype)
    flux_two = scale * flux_two
    stress = np.empty((c, 2, q, len(pairs)), dtype=total.dtype)
    for x in range(2):
        for y in range(2):
            stress[:, y] = -one[x] * flux_two[y] - flux_one[y] * scaled[x]
        stress[:, x] += density
        part = derive.reshape(c, 2 * q, count).swapaxes(1, 2) @ stress.reshape(c, 2 * q, -1)
        if force is not None:
            part = part + values.T @ (raised * force[x][..., None])
        total[:, :, x] = part
    out.scatter(nodes[:, : count - element.inner], _to_outer_nodes(total, space.mesh.degree))


def _to_outer_nodes(forces: NDArray[Any], degree: int) -> NDArray[Any]:
    """Forces on the nodes of cells (c, n, ...) as those of the vertices and of the edges' departures from linear."""
    flat = forces.reshape(*forces.shape[:2], -1)
    return np.asarray(_carried(degree).T @ flat).reshape(len(forces), -1, *forces.shape[2:])


@cache
def _carried(degree: int) -> Array:
    """Velocities of a cell's nodes from those of its vertices and the departures at the inner nodes of its edges."""
    element = triangle(degree)
    linear = np.column_stack([1 - element.nodes.sum(axis=1), element.nodes])
    edges = 3 * (degree - 1)
    return np.hstack([linear, np.vstack([np.zeros((3, edges)), np.eye(edges), edge_extension(degree)])])


def _gradient(potential: Potential, at: Array, size: float) -> Array:
    """(2, ...) central differences of a potential at points (2, ...)."""
    step = _STEP * size
    return np.stack(
        [
            np.asarray(potential(at[0] + dx, at[1] + dy) - potential(at[0] - dx, at[1] - dy)) / (2 * step)
            for dx, dy in ((step, 0.0), (0.0, step))
        ]
    )


def _on_outlines(space: Space, edges: OutlineEdges, forces: NDArray[Any]) -> NDArray[Any]:
    """Forces by the velocities of the outlines' points, those of other vertices following harmonically.

    The adjoint of the harmonic extension: one sparse solve however many velocities are asked for later.
    """
    mesh = space.mesh
    cells = mesh.cells[space.cells][:, :3]
    is_fixed = np.zeros(len(mesh.points), dtype=bool)
    is_fixed[edges.used] = True
    inside = np.zeros(len(mesh.points), dtype=bool)
    inside[cells] = True
    inside &= ~is_fixed
    out = forces[edges.used]
    size = int(inside.sum())
    if size == 0:
        return np.asarray(out)
    corner = mesh.points[cells]
    across = np.roll(corner, -2, axis=1) - np.roll(corner, -1, axis=1)
    area = np.abs(across[:, 0, 0] * across[:, 1, 1] - across[:, 0, 1] * across[:, 1, 0])
    local = across @ across.swapaxes(1, 2) / np.maximum(area, 1e-300)[:, None, None]
    number = np.empty(len(mesh.points), dtype=np.int32)
    number[inside] = np.arange(size)
    number[edges.used] = np.arange(len(edges.used))
    rows = np.broadcast_to(cells[:, :, None], local.shape)
    columns = np.broadcast_to(cells[:, None, :], local.shape)

    def part(picked: NDArray[np.bool_], height: int) -> Any:
        at = number[rows[picked]], number[columns[picked]]
        return sparse.csc_array((local[picked], at), shape=(height, size))

    load = forces[inside].reshape(size, -1)
    parts = np.hstack([load.real, load.imag]) if np.iscomplexobj(load) else load
    answer = solve_definite(part(inside[rows] & inside[columns], size), parts)
    carried = part(is_fixed[rows] & inside[columns], len(out)) @ answer
    if np.iscomplexobj(load):
        carried = carried[:, : load.shape[1]] + 1j * carried[:, load.shape[1] :]
    return np.asarray(out - carried.reshape(out.shape))
