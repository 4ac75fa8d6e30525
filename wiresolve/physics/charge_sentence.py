"""What the verdict says of a wire's charge: where it sits, and what limits the gate's hold on it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Loop
from wiresolve.physics.capacitance import in_F_per_m, limit_text
from wiresolve.physics.gate_answer import channel_capacitance
from wiresolve.physics.selfconsistent import Balanced
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]

NEAR = 0.3
"""A place is near a corner, or a face, within this part of the section's inner radius."""


def charge_sentence(balanced: Balanced, wire: Wire) -> str:
    """How many carriers there are and where they are, in a sentence or two."""
    total = balanced.occupied.total_per_nm
    if total <= 0:
        return "The wire holds no carriers at these voltages."
    shown = f"{total * 1e7:.3g} per cm"
    return f"It holds {shown} ({total:.3g} per nm), {where(balanced, wire)}.{_limit(balanced, wire)}"


def _limit(balanced: Balanced, wire: Wire) -> str:
    """Whether the density of states or the geometry limits the gates' hold, all gates moved together."""
    names = [gate.name for gate in wire.problem.gates]
    quantum = float(balanced.occupied.density_slope_per_eV_nm.sum())
    if not names or not np.isfinite(quantum) or quantum <= 0:
        return ""
    geometric = sum(channel_capacitance(balanced.stage, name) for name in names)
    text = f" It is {limit_text(quantum, geometric)}: {in_F_per_m(quantum) * 1e9:.3g} nF/m by the density of states,"
    return f"{text} {in_F_per_m(geometric) * 1e9:.3g} nF/m from the gate{'s' if len(names) > 1 else ''} to its surface."


def where(balanced: Balanced, wire: Wire) -> str:
    """Where the carriers are: "mostly in the middle", "along the faces" or "in the corners", by their densities.

    The mean densities of three parts of the carriers' area are compared: near corners of its outline, near its faces
    (both within `NEAR` of the inner radius), and the rest.
    """
    share, area = shares(balanced, wire)
    known = {name: share[name] / area[name] for name in share if area[name] > 0}
    most = max(known, key=lambda name: known[name])
    words = {"middle": "densest in the middle", "faces": "densest along the faces", "corners": "densest in the corners"}
    parts = ", ".join(f"{100 * share[name]:.0f} % {at}" for name, at in _PLACES if area[name] > 0)
    return f"{words[most]} ({parts})"


_PLACES = (("middle", "in the middle"), ("faces", "near faces"), ("corners", "near corners"))


def shares(balanced: Balanced, wire: Wire) -> tuple[dict[str, float], dict[str, float]]:
    """The carriers' shares in the middle, near faces and near corners, and the shares of the area."""
    space = balanced.stage.carriers.space
    weights, points = space.quadrature_weights, space.quadrature_points
    density = balanced.occupied.carriers_per_nm3
    walls = space.mesh.points[space.nodes[space.wall]]
    from scipy.spatial import cKDTree

    depth, _ = cKDTree(walls).query(points.reshape(-1, 2))
    inner = float(depth.max())
    corners = _corners(wire)
    near_face = depth.reshape(weights.shape) < NEAR * inner
    near_corner = np.zeros(weights.shape, dtype=bool)
    if len(corners):
        away, _ = cKDTree(corners).query(points.reshape(-1, 2))
        near_corner = away.reshape(weights.shape) < 2 * NEAR * inner
    kinds = {"corners": near_corner, "faces": near_face & ~near_corner, "middle": ~near_face & ~near_corner}
    held, all_of = float((weights * density).sum()), float(weights.sum())
    share = {name: float((weights * density)[here].sum()) / held for name, here in kinds.items()}
    return share, {name: float(weights[here].sum()) / all_of for name, here in kinds.items()}


def _corners(wire: Wire) -> Array:
    """(n, 2) corners of the outlines of all pieces that admit carriers, with less than 150 degrees inside."""
    found = [
        point
        for piece in wire.inner
        if piece.carriers
        for point, angle in Loop(piece.loop.segments).corners()
        if angle < np.radians(150)
    ]
    return np.array(found).reshape(-1, 2)
