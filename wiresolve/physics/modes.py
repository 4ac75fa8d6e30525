"""Envelope functions as they are stored: canonical in each level, normalised, with their shares and energies."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.space import Space
from wiresolve.physics.pencil import Pencil

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


def canonical(
    pencil: Pencil, states: NDArray[Any], level: Ints, whole: int, frame: tuple[Array, float] | None = None
) -> NDArray[Any]:
    """States (n, m) of a one-band pencil turned within each level to one frame, with one sign each.

    In a level the frame diagonalises a function that is even in y and holds all angular harmonics, with a small odd
    part; the sign makes the overlap with a skew exponential positive. Levels from the number `whole` on may be cut and
    are left as they are.

    Parameters
    ----------
    frame : the function's centre and size, `frame_of` another pencil; the pencil's own unless given.
    """
    space = pencil.space
    center, reach = frame or frame_of(pencil)
    place = (space.mesh.points[space.nodes[pencil.kept]] - center) @ np.array([1, 1j])
    place = 0.8 * place / reach
    weight = (1 / (1 - place)).real + 1e-3 * place.imag
    skew = np.exp(1.3 * place.real + 0.7 * place.imag)
    out = np.array(states)
    for number in np.unique(level):
        pick = np.flatnonzero(level == number)
        if len(pick) > 1 and number < whole:
            block = out[:, pick]
            # The weight as a field at the nodes: its interpolant is as good a frame as the function itself.
            matrix = block.conj().T @ (pencil.mass @ (weight[:, None] * block))
            _, turn = np.linalg.eigh((matrix + matrix.conj().T) / 2)
            out[:, pick] = block @ turn
    overlap = skew @ (pencil.mass @ out)
    phase = np.where(np.abs(overlap) > 0, overlap / np.maximum(np.abs(overlap), 1e-300), 1.0)
    return np.asarray(out * np.conj(phase) if np.iscomplexobj(out) else out * np.sign(phase))


def frame_of(pencil: Pencil) -> tuple[Array, float]:
    """Centre (2,) and size in nm of the function that tells a level's states apart: of the section, not of a mesh."""
    space = pencil.space
    center = space.center_nm
    return center, float(np.hypot(*(space.mesh.points[space.nodes] - center).T).max())


def shares(space: Space, states: NDArray[Any]) -> dict[str, Array]:
    """Probability of each state in each region of the mesh, by the region's name, (m,) each."""
    found = {}
    for index, region in enumerate(space.mesh.regions):
        cells = np.flatnonzero(space.mesh.region[space.cells] == index)
        if not len(cells):
            continue
        total = np.zeros(states.shape[1])
        for start in range(0, len(cells), 2048):
            chunk = cells[start : start + 2048]
            local = states[space.dofs[chunk]]
            mass = space.elements({("1", "1"): space.ones}, chunk)
            total += np.einsum("cim,cim->m", local.conj(), mass @ local).real
        found[region.name] = total
    return found


def direction_energies(pencil: Pencil, states: NDArray[Any], axes: Array, parts: tuple[Any, Any]) -> Array:
    """Kinetic and potential energy of each state along two axes of the section, shape (m, 2).

    Parameters
    ----------
    axes : (2, 2) rows are unit vectors along which the inverse mass is diagonal.
    parts : the potential's parts that depend on one axis each, functions of (x, y) in eV or None.
    """
    space = pencil.space
    quadratic = {}
    for term in pencil.terms:
        if term.order == 0:
            for slot, field in term.form.items():
                if "1" not in slot:
                    quadratic[slot] = field * float(term.matrix[0, 0].real)
    out = np.empty((states.shape[1], 2))
    at = space.quadrature_points
    for i, axis in enumerate(axes):
        strength = sum(
            axis[a] * axis[b] * quadratic.get((s, t), 0.0) for a, s in enumerate("xy") for b, t in enumerate("xy")
        )
        form = {(s, t): strength * axis[a] * axis[b] for a, s in enumerate("xy") for b, t in enumerate("xy")}
        part = parts[i]
        if part is not None:
            form["1", "1"] = part(at[..., 0], at[..., 1])
        out[:, i] = np.einsum("im,im->m", states.conj(), space.matrix(form) @ states).real
    return out
