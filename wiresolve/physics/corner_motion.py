"""Displaced outlines near corners, where slopes are singular: by the volume form, which does not need them there.

With S_ij = (A grad psi_i*.grad psi_j + (V - E) psi_i* psi_j) 1 - A grad psi_j grad psi_i* - A grad psi_i* grad psi_j
and any velocity v that is continuous, the jumps b_ij of n.S.n (`physics.roughness`) fulfil

    int b_ij v.n ds = int (S_ij : grad v + f_ij.v),

f_ij being what the divergence of S leaves: the gradient of V, and terms with E - E_i that vanish inside a level, where
this is the shape derivative of `fem.shape_derivative`. Near each corner v is a motion that moves both its edges as they
should; only what is left of the motion is integrated along the outlines. E is the mean energy of a pair.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.outline import OutlineEdges
from wiresolve.physics.carried_modes import CarriedModes

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_TURN, _FITS = 0.05, 1e-3
"""Least turn of a corner in rad, and how closely a motion has to fit all edges that meet there."""
_RINGS = 2
"""So many rings of vertices around a corner move as it does."""
_MOST_VALUES = 1_000_000
"""Cells x quadrature points x pairs of states that are held at a time."""
_STEP = 1e-5
"""Step of the potential's numerical gradient, as a part of the section's size."""


def corner_velocities(edges: OutlineEdges, moving: Mapping[str, Array]) -> tuple[Array, NDArray[np.bool_]]:
    """Velocities (motions, mesh points, 2) of vertices near corners, zero elsewhere; which motions tear a corner.

    Where more than two edges meet there may be no velocity that moves each of them as it should.
    """
    mesh = edges.mesh
    out = np.zeros((len(moving), len(mesh.points), 2))
    ends = edges.nodes[:, [0, -1]]
    count = np.bincount(ends.ravel(), minlength=len(mesh.points))
    at = np.argsort(ends.ravel(), kind="stable")
    first = np.searchsorted(ends.ravel()[at], np.arange(len(mesh.points)))
    given = np.array(list(moving.values())).reshape(len(moving), -1)
    corners, velocity, torn = [], [], np.zeros(len(moving), dtype=bool)
    for point in np.flatnonzero(count >= 2):
        touching = at[first[point] : first[point] + count[point]]
        normal = edges.normals[:, [0, -1]].reshape(-1, 2)[touching]
        if np.linalg.svd(normal, compute_uv=False)[-1] < _TURN:
            continue
        wanted = given[:, touching // 2]
        found = wanted @ np.linalg.pinv(normal).T
        fits = np.abs(found @ normal.T - wanted).max(axis=1, initial=0.0) < _FITS
        torn |= ~fits
        corners.append(point)
        velocity.append(found * fits[:, None])
    if not corners or not moving:
        return out, torn
    nearest = np.full(len(mesh.points), -1)
    nearest[corners] = np.arange(len(corners))
    vertex = mesh.cells[:, :3]
    fixed = count > 2
    for _ in range(_RINGS):
        known = nearest[vertex]
        reached = known.max(axis=1)
        for k in range(3):
            new = (known[:, k] < 0) & (reached >= 0) & ~fixed[vertex[:, k]]
            nearest[vertex[new, k]] = reached[new]
    moved = nearest >= 0
    out[:, moved] = np.array(velocity).swapaxes(0, 1)[:, nearest[moved]]
    return out, torn


def volume_terms(modes: CarriedModes, velocity: Array) -> NDArray[Any]:
    """(motions, m, m) int (S : grad v + f.v) for velocities of vertices (motions, points of the mesh, 2)."""
    space, m = modes.space, modes.states.shape[1]
    out = np.zeros((len(velocity), m, m), dtype=modes.states.dtype)
    vertex = space.mesh.cells[space.cells][:, :3]
    beside = np.flatnonzero((velocity[:, vertex] != 0).any(axis=(0, 2, 3)))
    if not len(beside):
        return out
    at = space.reference_points
    linear, flat = triangle(1).values(at), triangle(1).gradients(at)
    summed, pairs = (_by_pairs, m * (m + 1) // 2) if modes.operator.nonparabolic else (_by_products, 4 * m)
    for cells in np.array_split(beside, 1 + len(beside) * len(at) * pairs // _MOST_VALUES):
        grad, pull = modes.slopes(cells)
        field = velocity[:, vertex[cells]]
        v = np.einsum("qv,kcvx->kcqx", linear, field)
        slope = np.einsum("cqxr,rqv,kcvy->kcqxy", pull, flat, field, optimize=True)
        out += summed(modes, cells, grad, v, slope)
    return out


def _by_products(modes: CarriedModes, cells: Ints, grad: NDArray[Any], v: Array, slope: Array) -> NDArray[Any]:
    """What some cells add where masses are constant, motion by motion: the energies stand outside of the integrals."""
    region, weights = modes.region[cells], modes.space.quadrature_weights[cells]
    force, height = _potential(modes, cells, modes.edge_eV[region][:, None, None])
    psi, tensor, energy = modes.values(cells), modes.tensor[region][:, None], modes.energy_eV
    m = len(energy)
    flat, mean, apart = psi.reshape(-1, m), (energy[:, None] + energy) / 2, energy[:, None] - energy
    found = []
    for own, turn in zip(v, slope, strict=True):
        spread = np.trace(turn, axis1=2, axis2=3)
        stiff = tensor * spread[..., None, None] - np.swapaxes(turn, 2, 3) @ tensor - tensor @ turn
        kinetic = grad.reshape(-1, m).conj().T @ ((weights[..., None, None] * stiff) @ grad).reshape(-1, m)
        raised = (weights * (height[..., 0] * spread + (force[..., 0] * own).sum(axis=2))).ravel()
        plain = flat.conj().T @ ((weights * spread).ravel()[:, None] * flat)
        along = flat.conj().T @ ((weights[..., None, None] * own[..., None]) * grad).sum(axis=2).reshape(-1, m)
        above = flat.conj().T @ (raised[:, None] * flat) - mean * plain
        found.append(kinetic + above + apart / 2 * (along - along.conj().T))
    return np.array(found)


def _by_pairs(modes: CarriedModes, cells: Ints, grad: NDArray[Any], v: Array, slope: Array) -> NDArray[Any]:
    """What some cells add, (motions, m, m), pair by pair."""
    m = len(modes.energy_eV)
    one, two = np.triu_indices(m)
    stress, load = _stress(modes, cells, grad, (one, two))
    weights = modes.space.quadrature_weights[cells]
    total = np.einsum("cq,cqxyp,kcqxy->kp", weights, stress, slope, optimize=True)
    total = total + np.einsum("cq,cqxp,kcqx->kp", weights, load, v, optimize=True)
    out = np.zeros((len(v), m, m), dtype=total.dtype)
    out[:, two, one] = total.conj()
    out[:, one, two] = total
    return out


def _stress(
    modes: CarriedModes, cells: Ints, grad: NDArray[Any], pairs: tuple[Ints, Ints]
) -> tuple[NDArray[Any], NDArray[Any]]:
    """S (c, q, 2, 2, p) and what its divergence leaves (c, q, 2, p), of pairs of states."""
    region = modes.region[cells]
    alpha, edge = (x[region][:, None, None] for x in (modes.alpha_per_eV, modes.edge_eV))
    force, height = _potential(modes, cells, edge)
    psi, flux = modes.values(cells), modes.tensor[region][:, None] @ grad
    energy = modes.energy_eV
    mean = (energy[pairs[0]] + energy[pairs[1]]) / 2
    lighter = 1 / (1 + alpha * (mean - height))
    first, second = ((psi[..., k], grad[..., k], flux[..., k], energy[k]) for k in pairs)
    first = first[0].conj(), first[1].conj(), first[2].conj(), first[3]
    kinetic = (first[1] * second[2]).sum(axis=2)
    above = height - mean
    stress = -lighter[:, :, None, None] * (
        second[2][:, :, :, None] * first[1][:, :, None] + first[2][:, :, :, None] * second[1][:, :, None]
    )
    stress[:, :, [0, 1], [0, 1]] += (lighter * kinetic + above * first[0] * second[0])[:, :, None]
    load = (first[0] * second[0] + alpha * lighter**2 * kinetic)[:, :, None] * force
    for own, other in ((first, second), (second, first)):
        ratio = lighter * (1 + alpha * (own[3] - height))
        rest = (above - ratio * (height - own[3])) * own[0]
        if alpha.any():
            drift = alpha**2 * (own[3] - mean) * lighter**3 / ratio
            rest = rest - drift * (force * own[2]).sum(axis=2)
        load = load + rest[:, :, None] * other[1]
    return stress, load


def _potential(modes: CarriedModes, cells: Ints, edge: Array) -> tuple[Array, Array]:
    """Gradient (c, q, 2, 1) and value (c, q, 1) of edge and potential."""
    at, given = modes.space.quadrature_points[cells], modes.operator.potential
    if given is None:
        return np.zeros((*at.shape, 1)), edge + np.zeros((*at.shape[:2], 1))
    step = _STEP * float(np.ptp(modes.space.mesh.points, axis=0).max())
    slopes = []
    for axis in range(2):
        off = step * np.eye(2)[axis]
        ahead, behind = (np.asarray(given(*np.moveaxis(at + s * off, 2, 0)), dtype=float) for s in (1, -1))
        slopes.append((ahead - behind) / (2 * step))
    value = np.asarray(given(at[..., 0], at[..., 1]), dtype=float)
    return np.stack(slopes, axis=2)[..., None], edge + value[..., None]
