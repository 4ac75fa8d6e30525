"""Form factors: of the Coulomb energy along the wire, and of plane waves in the section.

For a density rho of pairs, u(r) = int K0(q |r - r'|) rho(r') dr' solves (-Delta + q^2) u = 2 pi rho in the whole plane.
With u_D the solution that vanishes on the boundary of where carriers may be, and g its outward slope there, u differs
from u_D by the potential of the layer -g/2pi, so that

    int int rho K0 rho' = int rho u_D' + 1/(4 pi^2) int int g(s) K0(q |r(s) - r(s')|) g'(s') ds ds':

one sparse factor and a double integral along the boundary give all pairs, without a cut-off anywhere.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem import eigen
from wiresolve.fem.edge_kernel import kernel_products
from wiresolve.fem.fluxes import boundary
from wiresolve.fem.space import Space
from wiresolve.physics.carried_modes import CarriedModes
from wiresolve.physics.matrix_elements import BAR_FACTOR, HIDDEN

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
_ROUNDING = 1e-11
_MOST_PHASE = 2.0
"""Phase of a plane wave across a cell, in rad, up to which the usual rule is enough."""


@dataclass(frozen=True, eq=False)
class Pairs:
    """Densities psi_i* psi_j of some states.

    Attributes
    ----------
    number : (m, m) of each pair's density among the columns of `load`.
    load : (nodes, p) int rho phi of each density with every node's function.
    """

    space: Space
    number: Ints
    load: NDArray[Any]

    @staticmethod
    def of(modes: CarriedModes, picked: Ints) -> Pairs:
        """All pairs of some of the states; real ones have the same density both ways."""
        size = len(picked)
        if np.iscomplexobj(modes.states):
            one, two = np.divmod(np.arange(size * size), size)
            number = np.arange(size * size).reshape(size, size)
        else:
            one, two = np.triu_indices(size)
            number = np.empty((size, size), dtype=np.int64)
            number[one, two] = number[two, one] = np.arange(len(one))
        space = modes.space
        own = replace(modes, states=modes.states[:, picked], energy_eV=modes.energy_eV[picked])
        load = np.zeros((len(space.nodes), len(one)), dtype=modes.states.dtype)
        values = space.tabulated[1][2]
        for cells in own.chunks():
            for some in np.array_split(cells, max(1, len(one) // (3 * size))):
                held = own.held(some)
                density = np.einsum("cqdp,cqdp->cqp", held[..., one].conj(), held[..., two])
                np.add.at(load, space.dofs[some], values.T @ (density * space.quadrature_weights[some][..., None]))
        return Pairs(space, number, load)


def coulomb(parts: Sequence[Pairs], q_per_nm: float) -> list[list[NDArray[Any]]]:
    """F_ijkl at one q for pairs ij of each part and kl of each part, (m, m, m', m')."""
    space = parts[0].space
    load = np.hstack([part.load for part in parts])
    ones = space.ones
    matrix = space.matrix({("x", "x"): ones, ("y", "y"): ones, ("1", "1"): q_per_nm**2 * ones})
    free = space.free
    inside = np.zeros(load.shape, dtype=load.dtype)
    source = 2 * np.pi * load
    inside[free] = eigen.definite(matrix[free][:, free]).solve(source[free])
    rim = boundary(space)
    slope = rim.fluxes(np.asarray(matrix @ inside) - source)
    layer = kernel_products(rim.points, rim.nodes[:, [0, -1]], slope, q_per_nm)
    table = load.T @ inside + layer / (4 * np.pi**2)
    table = (table + table.T) / 2
    starts = np.cumsum([0, *(part.load.shape[1] for part in parts)])
    return [
        [
            table[(start + one.number)[:, :, None, None], (other + two.number)[None, None]]
            for other, two in zip(starts, parts, strict=False)
        ]
        for start, one in zip(starts, parts, strict=False)
    ]


def bars(change: NDArray[Any], states: tuple[Ints, Ints], doubt: tuple[Array, Array], largest: float) -> Array:
    """Bars (m, m, m', m') from changes: of each block of four levels twice the root of its sum of squares.

    Parameters
    ----------
    states, doubt : levels and `matrix_elements.doubts` of the first and of the second pair's states.
    """
    first, second = states
    summed = np.abs(change) ** 2
    for axis, level in enumerate((first, first, second, second)):
        same = (level[:, None] == level).astype(float)
        summed = np.moveaxis(np.tensordot(same, summed, axes=(1, axis)), 0, axis)
    one, two = (own[:, None] + own for own in doubt)
    more = HIDDEN * largest * (one[:, :, None, None] + two)
    return np.asarray(BAR_FACTOR * np.sqrt(summed) + more + _ROUNDING * largest)


def plane(modes: CarriedModes, q_per_nm: Array) -> NDArray[np.complex128]:
    """(k, m, m) <i|exp(i q.r)|j> for wave vectors (k, 2)."""
    m = modes.states.shape[1]
    corner = modes.space.mesh.points[modes.space.mesh.cells[modes.space.cells][:, :3]]
    size = float(np.linalg.norm(corner - np.roll(corner, 1, axis=1), axis=2).max())
    if float(np.hypot(*q_per_nm.T).max(initial=0.0)) * size > _MOST_PHASE and not modes.space.composite:
        # Short waves are integrated on sixteen parts of each cell.
        again = replace(modes, space=Space(modes.space.mesh, composite=True))
        return plane(again, q_per_nm)
    total = np.zeros((len(q_per_nm), m, m), dtype=complex)
    for cells in modes.chunks():
        at, area, held = modes.space.quadrature_points[cells], modes.space.quadrature_weights[cells], modes.held(cells)
        flat = held.reshape(-1, held.shape[2], m)
        for k, wave in enumerate(q_per_nm):
            weight = (area * np.exp(1j * (at @ wave))).ravel()
            for part in range(held.shape[2]):
                own = flat[:, part]
                total[k] += own.conj().T @ (weight[:, None] * own)
    return total
