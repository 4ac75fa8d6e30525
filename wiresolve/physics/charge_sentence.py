"""What the verdict says of a wire's charge: where it sits, and what limits the gate's hold on it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Loop
from wiresolve.physics.capacitance import in_F_per_m, limit_text
from wiresolve.physics.gate_answer import channel_capacitance
from wiresolve.physics.selfconsistent import Balanced
from wiresolve.physics.wire import Wire
from wiresolve.physics.wording import line_density

Array = NDArray[np.float64]

FEWEST_PER_NM = 1e-9
"""Fewer than one carrier in a metre is none."""
NEAR = 0.3
"""A place is near a corner, or a face, within this part of the section's inner radius."""


def charge_sentence(balanced: Balanced, wire: Wire) -> str:
    """How many carriers there are and where they are, in a sentence or two."""
    total = balanced.occupied.total_per_nm
    if total < FEWEST_PER_NM:
        return "The wire is pinched off: it holds no carriers at these voltages."
    return f"It holds {line_density(total)}, {where(balanced, wire)}.{_limit(balanced, wire)}"


def _limit(balanced: Balanced, wire: Wire) -> str:
    """Whether the density of states or the geometry limits the gates' hold, all gates moved together."""
    names = [gate.name for gate in wire.problem.gates]
    quantum = float(balanced.occupied.density_slope_per_eV_nm.sum())
    if not names or not np.isfinite(quantum) or quantum <= 0:
        return ""
    geometric = sum(channel_capacitance(balanced.stage, name) for name in names)
    if not np.isfinite(geometric):
        return " A gate lies on the channel itself."
    text = f" It is {limit_text(quantum, geometric)}: {in_F_per_m(quantum) * 1e9:.3g} nF/m by the density of states,"
    return f"{text} {in_F_per_m(geometric) * 1e9:.3g} nF/m from the gate{'s' if len(names) > 1 else ''} to its surface."


def where(balanced: Balanced, wire: Wire) -> str:
    """Where the carriers are: densest in the middle, along the faces or in the corners of the part that holds most.

    Mean densities of three parts of it are compared: near corners of its outline, near its faces (both within `NEAR` of
    its inner radius), and the rest.
    """
    name, share, area = shares(balanced, wire)
    known = {kind: share[kind] / area[kind] for kind in share if area[kind] > 0}
    most = max(known, key=lambda kind: known[kind])
    words = {"middle": "densest in the middle", "faces": "densest along the faces", "corners": "densest in the corners"}
    parts = ", ".join(f"{100 * share[kind]:.0f} % {at}" for kind, at in _PLACES if area[kind] > 0)
    several = sum(region.carriers for region in balanced.stage.carriers.space.mesh.regions) > 1
    return f"{words[most]}{f' of {name}' if several else ''} ({parts})"


_PLACES = (("middle", "in the middle"), ("faces", "near faces"), ("corners", "near corners"))


def shares(balanced: Balanced, wire: Wire) -> tuple[str, dict[str, float], dict[str, float]]:
    """The region that holds most carriers; its carriers' shares in the middle, near faces and near corners; and the
    same of its area."""
    from scipy.spatial import cKDTree

    space = balanced.stage.carriers.space
    region, held = space.mesh.region[space.cells], space.quadrature_weights * balanced.occupied.carriers_per_nm3
    number = int(np.argmax(np.bincount(region, held.sum(axis=1), minlength=len(space.mesh.regions))))
    name, inside = space.mesh.regions[number].name, region == number
    on_edge = np.zeros(len(space.nodes), dtype=bool)
    on_edge[np.intersect1d(space.dofs[inside], space.dofs[~inside])] = True
    on_edge[np.intersect1d(space.dofs[inside], np.flatnonzero(space.wall))] = True
    points, weights = space.quadrature_points[inside], space.quadrature_weights[inside]
    depth, _ = cKDTree(space.mesh.points[space.nodes[on_edge]]).query(points.reshape(-1, 2))
    near = NEAR * float(depth.max())
    near_face = depth.reshape(weights.shape) < near
    near_corner = np.zeros(weights.shape, dtype=bool)
    corners = _corners(wire, name)
    if len(corners):
        away, _ = cKDTree(corners).query(points.reshape(-1, 2))
        near_corner = away.reshape(weights.shape) < np.sqrt(2) * near
    kinds = {"corners": near_corner, "faces": near_face & ~near_corner, "middle": ~near_face & ~near_corner}
    total, whole = float(held[inside].sum()), float(weights.sum())
    share = {kind: float(held[inside][here].sum()) / total for kind, here in kinds.items()}
    return name, share, {kind: float(weights[here].sum()) / whole for kind, here in kinds.items()}


def _corners(wire: Wire, name: str) -> Array:
    """(n, 2) corners of the outline of a piece with less than 150 degrees inside."""
    found = [
        point
        for piece in wire.inner
        if piece.name == name
        for point, angle in Loop(piece.loop.segments).corners()
        if angle < np.radians(150)
    ]
    return np.array(found).reshape(-1, 2)
