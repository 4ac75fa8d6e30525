"""How much each part of an outline moves an energy: the boundary form of the shape derivative, place by place.

dE = int [S_nn] v_n over the outlines, [S_nn] being the fall of the normal stress of `fem.shape_derivative` from the
left side to the right one (at a hard wall -A_nn |d psi/dn|^2: J. Hadamard, 1908). Away from corners it is as accurate
as the slopes of the states; for numbers, the volume form is the better one.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.outline import OutlineEdges
from wiresolve.fem.shape_derivative import Medium
from wiresolve.fem.space import Space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


def stress_jumps(
    space: Space, edges: OutlineEdges, medium: Medium, states: NDArray[Any], energy_eV: Array, at: Array
) -> Array:
    """Energy in eV for each nm that 1 nm of outline moves to the right, (e, places, m), of states with int |psi|^2 = 1.

    Parameters
    ----------
    states : (nodes of the space, m), with `energy_eV` (m,).
    at : (places,) parameters along each edge, from 0 to 1.
    """
    number = np.full(len(space.mesh.cells), -1)
    number[space.cells] = np.arange(len(space.cells))
    right = np.where(edges.cells[:, 1] < 0, -1, number[edges.cells[:, 1]])
    normals = _normals(edges, at)
    total = np.zeros((len(edges.nodes), len(at), states.shape[1]))
    for cells, sides, where, sign in (
        (number[edges.cells[:, 0]], edges.sides[:, 0], at, 1.0),
        (right, edges.sides[:, 1], 1 - at, -1.0),  # cells run counter-clockwise: the right one meets the edge backwards
    ):
        for side in range(3):
            rows = np.flatnonzero((cells >= 0) & (sides == side))
            if len(rows):
                place = _on_side(side, where)
                total[rows] += sign * _stress(space, medium, states, energy_eV, cells[rows], place, normals[rows])
    return total


def _on_side(side: int, s: Array) -> Array:
    """Reference points along a side, from its first vertex to its second."""
    return np.column_stack([(s, 0 * s), (1 - s, s), (0 * s, 1 - s)][side])


def _normals(edges: OutlineEdges, at: Array) -> Array:
    """(e, places, 2) unit normals to the right."""
    normals = _carried(edges.normals, at)
    return np.asarray(normals / np.linalg.norm(normals, axis=2, keepdims=True))


def places(edges: OutlineEdges, at: Array) -> Array:
    """(e, places, 2) points in nm at parameters along the edges."""
    return _carried(edges.mesh.points[edges.nodes], at)


def _carried(nodal: Array, at: Array) -> Array:
    """Values (e, places, 2) from those at the edges' nodes (e, n, 2)."""
    steps = np.arange(nodal.shape[1]) / (nodal.shape[1] - 1)
    powers = np.arange(len(steps))
    carry = (at[:, None] ** powers) @ np.linalg.inv(steps[:, None] ** powers)
    return np.asarray(np.einsum("pn,enx->epx", carry, nodal))


def _stress(
    space: Space, medium: Medium, states: NDArray[Any], energy: Array, cells: Ints, at: Array, normals: Array
) -> Array:
    """n.S.n on one side of an outline, (cells, places, m)."""
    mesh, element = space.mesh, triangle(space.mesh.degree)
    region = mesh.region[space.cells[cells]]
    corner = mesh.points[mesh.cells[space.cells[cells]]]
    slopes, values = element.gradients(at), element.values(at)
    inverse = np.linalg.inv(np.einsum("rqa,cax->cqxr", slopes, corner))
    local = states[space.dofs[cells]]
    psi = values @ local
    grad = np.einsum("cqrx,rcqm->xcqm", inverse, np.stack([slopes[0] @ local, slopes[1] @ local]))
    if medium.k_per_nm:
        grad = np.concatenate([grad, 1j * medium.k_per_nm * psi[None]])
    depth = len(grad)
    flux = np.einsum("cxy,ycqm->xcqm", medium.stiffness[region][:, :depth, :depth], grad)
    above = energy - medium.edge_eV[region][:, None, None]
    if medium.potential is not None:
        x = np.einsum("qa,cax->xcq", values, corner)
        above = above - np.asarray(medium.potential(x[0], x[1]), dtype=float)[..., None]
    if medium.nonparabolicity_per_eV is not None:
        flux = flux / (1 + medium.nonparabolicity_per_eV[region][:, None, None] * above)
    normal = np.moveaxis(normals, 2, 0)[..., None]
    kinetic = (grad.conj() * flux).sum(axis=0).real
    across = ((normal * grad[:2]).sum(axis=0).conj() * (normal * flux[:2]).sum(axis=0)).real
    return np.asarray(kinetic - above * np.abs(psi) ** 2 - 2 * across)
