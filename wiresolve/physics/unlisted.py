"""Motion along the wire of solved states that are not listed, where masses grow differently from place to place."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import scipy.linalg as dense
from numpy.typing import NDArray

from wiresolve.physics.local_mass import LocalMass
from wiresolve.physics.pencil import Operator
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]

NEAR = 0.2
"""Part of the reach at which k^2 is taken between the minimum and its end."""


def axial_motion(
    family: LocalMass, energy_eV: Array, states: NDArray[Any], first: int, reach_eV: float
) -> tuple[Array, Array]:
    """Axial mass in m0 at the minimum, and growth in 1/eV, of the states from number `first` on.

    With d the energy above a state's own minimum, d (1 + growth d) = hbar^2 k^2 / 2m. At a fixed energy k^2 is an
    eigenvalue of a linear problem, (E - T(E)) x = k^2 H2(E) x, in the space of all the given states. Its values at
    the minimum, `reach_eV` above it and in between give both numbers. Terms linear in k are left out.

    Parameters
    ----------
    energy_eV, states : (m,) and (unknowns, m), independent.
    """
    still = np.array([_small(states, matrix) for matrix in family.matrices])
    moving = np.array([_small(states, matrix) for matrix in family.axial_matrices(2)])
    product = _small(states, family.mass)
    steps = np.array([0.0, NEAR, 1.0]) * reach_eV
    squares = np.empty((len(energy_eV) - first, 3))
    for row, n in enumerate(range(first, len(energy_eV))):
        for column, step in enumerate(steps):
            at = float(energy_eV[n] + step)
            weights = family.weights(at)
            metric = np.tensordot(weights, moving, 1)
            values, vectors = dense.eigh(at * product - np.tensordot(weights, still, 1), metric)
            squares[row, column] = followed_value(values, metric[n] @ vectors)
    return from_squares(squares, steps)


def followed_value(values: Array, overlap: NDArray[Any]) -> Array:
    """Of eigenvalues (..., m) the one whose state is most alike another one, by the overlaps with it, (...).

    Where two are about as alike, because states that lie close to each other mix along the wire, it is between theirs:
    a choice would jump, and charge and potential could not agree on it. A part p of another state counts as p^2, less
    than what repels the levels, which goes like p.
    """
    weight = np.abs(overlap) ** 4
    return np.asarray((weight * values).sum(axis=-1) / weight.sum(axis=-1))


def from_squares(squares: Array, steps: Array) -> tuple[Array, Array]:
    """Axial mass and growth from k^2 (m, 3) at three steps above each minimum, the first one 0."""
    # At the minimum k^2 vanishes but for the closeness of the states. From there k^2 / d is a straight line in d.
    near, far = ((squares[:, 1:] - squares[:, :1]) / steps[1:]).T
    bend = (far - near) / (steps[2] - steps[1])
    inverse = near - bend * steps[1]
    with np.errstate(divide="ignore", invalid="ignore"):
        growth = np.where(inverse > 0, np.maximum(bend / inverse, 0.0), 0.0)
    return HBAR2_OVER_2M0 * inverse, growth


def _small(states: NDArray[Any], matrix: Any | None) -> NDArray[Any]:
    if matrix is None:
        return np.zeros((states.shape[1], states.shape[1]))
    small = np.asarray(states.conj().T @ (matrix @ states))
    return np.asarray((small + small.conj().T) / 2)


def upright(operator: Operator) -> Operator:
    """The operator without terms that couple the axis to the section.

    They move a region's in-plane momenta, which a phase undoes where the state lives, and leave the axis softer by
    c A^(-1) c, with A the in-plane part and c the coupling.
    """
    by_region = []
    for c in operator.by_region:
        tensor = np.array(c.quadratic)
        softer = tensor[2, 2, 0, 0] - tensor[2, :2, 0, 0] @ np.linalg.solve(tensor[:2, :2, 0, 0], tensor[:2, 2, 0, 0])
        tensor[2, :2] = tensor[:2, 2] = 0.0
        tensor[2, 2] = softer
        by_region.append(replace(c, quadratic=tensor))
    return replace(operator, by_region=tuple(by_region))
