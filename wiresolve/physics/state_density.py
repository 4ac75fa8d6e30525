"""Where a state holds its carrier, also where its mass grows with energy."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.space import Space
from wiresolve.physics.pencil import Operator

Array = NDArray[np.float64]


def state_density(space: Space, operator: Operator, energy_eV: Array, states: NDArray[Any]) -> Array:
    """(c, q, m) in 1/nm^2 at the quadrature points, each of integral 1, of states (nodes, m) of a one-band operator.

    |psi|^2, and where the mass grows |psi|^2 + alpha / (1 + alpha (E - V))^2 grad psi A grad psi with A at the edge's
    mass: what -d<T(E) - E M>/dE counts at each place. The second part is what the bands that were folded into the mass
    hold; it is also what a small change of V sees.
    """
    local = states[space.dofs]
    values = np.einsum("qa,cam->cqm", space.tabulated[1][2], local)
    density = np.abs(values) ** 2
    if operator.nonparabolic:
        region = space.mesh.region[space.cells]
        tensor = np.array([np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in operator.by_region])[region]
        slopes = space.gradients_of(local)
        kinetic = np.einsum("cqxm,cxy,cqym->cqm", slopes.conj(), tensor, slopes, optimize=True).real
        alpha = np.asarray(operator.nonparabolicity_per_eV)[region][:, None, None]
        edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])[region][:, None]
        height = energy_eV - (edge + operator.potential_on(space))[..., None]
        density = density + alpha / (1 + alpha * height) ** 2 * kinetic
    return np.asarray(density / np.einsum("cq,cqm->m", space.quadrature_weights, density))
