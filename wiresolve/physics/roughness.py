"""What a displaced outline does between two states: the boundary form of the shape derivative, place by place.

A displacement v_n(s) of a wall or an interface along its normal has the matrix elements int b_ij(s) v_n(s) ds, with

    b_ij = [A_tt d_t psi_i* d_t psi_j - A_nn d_n psi_i* d_n psi_j + V psi_i* psi_j],

the fall of the bracket across the outline along the normal, A = hbar^2/2m and V the band edge (J. Hadamard, 1908, for a
wall: -A_nn d_n psi_i* d_n psi_j; the form of the interface has only what is continuous there, flux and trace). Slopes
along the normal come from fluxes (`fem.fluxes`). Where masses grow with energy a pair has those of its mean energy.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.fluxes import boundary, singular_rule
from wiresolve.fem.outline import OutlineEdges
from wiresolve.physics.carried_modes import CarriedModes
from wiresolve.physics.corner_motion import corner_velocities, volume_terms

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class OutlineElements:
    """b_ij at points of the outlines.

    Attributes
    ----------
    points_nm, normals : (p, 2) places, and unit normals to the right of the edges: away from the carriers at a wall.
    weights_nm : (p,) lengths that the points stand for.
    edge : (p,) which of the mesh's outline edges they lie on.
    share : (p,) where along its edge each point lies, from 0 to 1.
    values : (p, m, m) b_ij in eV/nm^2: energy for each nm that 1 nm of outline moves along the normal.
    """

    points_nm: Array
    normals: Array
    weights_nm: Array
    edge: Ints
    share: Array
    values: NDArray[Any]


def same_motion(moving: Mapping[str, Array], own: OutlineEdges, other: OutlineEdges) -> dict[str, Array]:
    """Motions of edges as they are on another mesh over the same triangles, whose edges may come and run otherwise."""
    place, sign = np.full(3 * len(own.mesh.cells), -1), np.ones(3 * len(own.mesh.cells))
    for side, way in ((1, -1.0), (0, 1.0)):
        known = own.cells[:, side] >= 0
        key = 3 * own.cells[known, side] + own.sides[known, side]
        place[key], sign[key] = np.flatnonzero(known), way
    key = 3 * other.cells[:, 0] + other.sides[:, 0]
    return {name: row[place[key]] * sign[key] for name, row in moving.items()}


def moved(
    modes: CarriedModes, edges: OutlineEdges, outline: OutlineElements, moving: Mapping[str, Array]
) -> NDArray[Any]:
    """(k, m, m) in eV/nm of motions of whole edges along their normals, (e,) each."""
    if not moving:
        return np.zeros((0, *outline.values.shape[1:]), dtype=outline.values.dtype)
    velocity, _ = corner_velocities(edges, moving)
    ends = velocity[:, edges.nodes[:, [0, -1]]][:, outline.edge]
    share = outline.share[:, None]
    here = (1 - share) * ends[:, :, 0] + share * ends[:, :, 1]
    motion = np.array([row[outline.edge] for row in moving.values()]) - np.einsum("px,kpx->kp", outline.normals, here)
    alone = np.tensordot(motion * outline.weights_nm, outline.values, axes=1)
    norm = np.sqrt(modes.norm)
    return np.asarray(alone + volume_terms(modes, velocity) / norm / norm[:, None])


def outline_elements(modes: CarriedModes, edges: OutlineEdges) -> OutlineElements:
    """b_ij of all pairs of states along the outlines of their mesh."""
    space, degree = modes.space, modes.space.mesh.degree
    cells = np.full(len(space.mesh.cells), -1)
    cells[space.cells] = np.arange(len(space.cells))
    fluxes, powers = _fluxes(modes)
    # Only walls have singular fluxes, and these have their carriers on the left.
    rule = singular_rule(degree, powers[cells[edges.cells[:, 0]], edges.sides[:, 0]])
    points = space.mesh.points[edges.nodes]
    along = np.einsum("eqn,enx->eqx", rule.slopes, points)
    places = np.einsum("eqn,enx->eqx", rule.values, points)
    length = np.linalg.norm(along, axis=2)
    tangent = along / length[..., None]
    normal = np.stack([tangent[..., 1], -tangent[..., 0]], axis=2)
    number = np.full(len(space.mesh.points), -1)
    number[space.nodes] = np.arange(len(space.nodes))
    local = modes.states[number[edges.nodes]]
    psi, sliding = rule.values @ local, rule.slopes @ local / length[..., None]
    m = modes.states.shape[1]
    total = np.zeros((*length.shape, m, m), dtype=modes.states.dtype)
    potential = _potential(modes, places)
    for side, sign in ((0, 1.0), (1, -1.0)):
        cell = edges.cells[:, side]
        here = np.flatnonzero((cell >= 0) & (cells[np.maximum(cell, 0)] >= 0))
        if not len(here):
            continue
        own = cells[cell[here]]
        flux = fluxes[own, edges.sides[here, side]]
        # The cell on the right meets the edge backwards, and its outward normal is the other one.
        flux = (
            rule.values[here] @ flux * rule.factor[here][..., None] if side == 0 else -rule.values[here] @ flux[:, ::-1]
        )
        total[here] += sign * _bracket(
            modes, modes.region[own], normal[here], (flux, sliding[here], psi[here]), potential[here]
        )
    total /= np.sqrt(modes.norm) * np.sqrt(modes.norm)[:, None]
    count = length.size
    return OutlineElements(
        places.reshape(count, 2),
        normal.reshape(count, 2),
        (length * rule.weights).ravel(),
        np.repeat(np.arange(len(points)), length.shape[1]),
        rule.at.ravel(),
        total.reshape(count, m, m),
    )


def _fluxes(modes: CarriedModes) -> tuple[NDArray[Any], Array]:
    """Outward fluxes n.A s grad psi at the boundary of each kind of material, (c, 3, degree + 1, m), 0 elsewhere.

    The second array, (c, 3, 2), has the powers that go with them.
    """
    space, mesh = modes.space, modes.space.mesh
    kinds = [(r.material, r.offset_eV) for r in mesh.regions]
    kind = np.array([kinds.index(k) for k in kinds])[modes.region]
    out = np.zeros((len(space.cells), 3, mesh.degree + 1, modes.states.shape[1]), dtype=modes.states.dtype)
    powers = np.zeros((len(space.cells), 3, 2))
    for number in np.unique(kind):
        part = kind == number
        own = boundary(space, part, modes.tensor[number])
        beside = np.zeros(len(space.nodes), dtype=bool)
        beside[own.nodes] = True
        out[own.cells, own.sides] = own.fluxes(modes.residual(part & beside[space.dofs].any(axis=1)))
        powers[own.cells, own.sides] = own.powers
    return out, powers


def _potential(modes: CarriedModes, at: Array) -> Array:
    """(e, q) the potential energy at places (e, q, 2)."""
    given = modes.operator.potential
    if given is None:
        return np.zeros(at.shape[:2])
    return np.asarray(given(at[..., 0], at[..., 1]), dtype=float).reshape(at.shape[:2])


def _bracket(
    modes: CarriedModes, region: Ints, normal: Array, fields: tuple[NDArray[Any], ...], potential: Array
) -> NDArray[Any]:
    """(e, q, m, m) what stands in the brackets on one side; `fields` are flux, slope along the edge, and value."""
    flux, sliding, psi = fields
    tensor, edge, alpha = modes.tensor[region], modes.edge_eV[region], modes.alpha_per_eV[region]
    tangent = np.stack([-normal[..., 1], normal[..., 0]], axis=2)
    across, mixed, along = (
        np.einsum("eqx,exy,eqy->eq", a, tensor, b) for a, b in ((normal, normal), (normal, tangent), (tangent, tangent))
    )
    height = edge[:, None] + potential
    lighter = 1 / (1 + alpha[:, None, None] * (modes.energy_eV - height[..., None]))
    slope = (flux / lighter - mixed[..., None] * sliding) / across[..., None]
    mean = (modes.energy_eV[:, None] + modes.energy_eV) / 2
    scale = 1 / (1 + alpha[:, None, None, None] * (mean - height[..., None, None]))

    def pairs(a: NDArray[Any], weight: Array) -> NDArray[Any]:
        return np.asarray(np.einsum("eqi,eq,eqj->eqij", a.conj(), weight, a, optimize=True))

    return np.asarray(scale * (pairs(sliding, along) - pairs(slope, across)) + pairs(psi, height))
