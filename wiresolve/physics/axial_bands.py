"""Motion along the wire: the axial mass from perturbation theory, and E(k) from a reduced space.

Second-order perturbation in k gives E(k) = E + k^2 D with D = <H2> + second order in H1; in a level, the matrix of D
over its states (J. M. Luttinger and W. Kohn, Phys. Rev. 97, 869 (1955), section IV). States at a few k span a space in
which H(k) is a small dense matrix for every other k.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.physics.pencil import Pencil

Array = NDArray[np.float64]

LINEAR_ABOVE = 1e-3
"""A first-order term counts when it moves E by more than this share of the second-order one at k = 0.1/nm; what the
mesh leaves of a term that symmetry forbids is a hundred times smaller."""


def curvature(pencil: Pencil, energies: Array, states: NDArray[Any], levels: NDArray[np.int64], shift: float) -> Array:
    """Half of d2E/dk2 at k = 0 in eV nm^2, shape (m,); NaN where a first-order term survives.

    Parameters
    ----------
    energies, states : (m,) and (n, m), all states below the highest given one, orthonormal in the mass matrix.
    levels : (m,) level of each state; the last level may be cut, its values are then those of its part.
    shift : an energy below all states.
    """
    m = len(energies)
    second = pencil.expected(2, states)
    first = np.zeros((m, m))
    if pencil.has(1):
        first = _sandwich(pencil.h1, states)
        second = second + _second_order(pencil, energies, states, levels, first, shift)
    out = np.empty(m)
    for level in np.unique(levels):
        pick = np.flatnonzero(levels == level)
        block, linear = second[np.ix_(pick, pick)], first[np.ix_(pick, pick)]
        out[pick] = np.linalg.eigvalsh((block + block.conj().T) / 2)
        if np.abs(linear).max() * 10 > LINEAR_ABOVE * np.abs(out[pick]).max():
            out[pick] = np.nan
    return out


def _sandwich(matrix: Any, states: NDArray[Any]) -> NDArray[Any]:
    m = states.shape[1]
    return np.zeros((m, m)) if matrix is None else np.asarray(states.conj().T @ (matrix @ states))


def _second_order(
    pencil: Pencil, energies: Array, states: NDArray[Any], levels: NDArray[np.int64], first: NDArray[Any], shift: float
) -> NDArray[Any]:
    """-H1 (H0 - E)^-1 H1 outside each state's level: known states by their sum, the rest by conjugate gradients."""
    m = len(energies)
    moved = pencil.h1 @ states
    weighted = pencil.mass @ states
    rest = moved - weighted @ (states.conj().T @ moved)
    solver = eigen.factor(pencil.h0, pencil.mass, shift)
    answers = np.empty_like(rest)
    for j in range(m):
        answers[:, j] = _projected_cg(pencil, energies[j], rest[:, j], states, weighted, solver)
    out = -(rest.conj().T @ answers)
    for i in range(m):
        for j in range(m):
            if levels[i] == levels[j]:
                others = levels != levels[i]
                gaps = energies[others] - (energies[i] + energies[j]) / 2
                out[i, j] -= np.sum(first[others, i].conj() * first[others, j] / gaps)
            else:
                out[i, j] = 0
    return np.asarray(out)


def _projected_cg(
    pencil: Pencil,
    energy: float,
    right: NDArray[Any],
    states: NDArray[Any],
    weighted: NDArray[Any],
    solver: eigen.Factor,
) -> NDArray[Any]:
    """(H0 - E M)^-1 on the complement of the known states, where it is positive definite."""
    x = np.zeros_like(right)
    residual, size = right.copy(), float(np.linalg.norm(right))
    if size == 0:
        return x
    direction, before = None, 1.0
    for _ in range(400):
        step = solver.solve(residual)
        step = step - states @ (weighted.conj().T @ step)
        now = float(np.real(np.vdot(residual, step)))
        direction = step if direction is None else step + (now / before) * direction
        image = pencil.h0 @ direction - energy * (pencil.mass @ direction)
        image = image - weighted @ (states.conj().T @ image)
        along = now / float(np.real(np.vdot(direction, image)))
        x, residual, before = x + along * direction, residual - along * image, now
        if np.linalg.norm(residual) < 1e-11 * size:
            return np.asarray(x)
    raise ConvergenceError("the axial mass did not converge: another state lies just above the solved ones")


@dataclass(frozen=True, eq=False)
class AxialBands:
    """E(k) of the lowest states.

    Attributes
    ----------
    k_per_nm : (p,) from 0 on.
    energy_eV : (m, p), a row a band: bands of unlike mass cross.
    error_bound_eV : the largest estimate, over states and k, of how far the reduced space lies above the full one.
    """

    k_per_nm: Array
    energy_eV: Array
    error_bound_eV: float


def dispersion(
    pencil: Pencil, energies: Array, states: NDArray[Any], k_per_nm: Array, shift: float, accuracy_eV: float, count: int
) -> AxialBands:
    """E(k) of the lowest `count` states at all `k_per_nm` (p,), from a space that grows where it is worst.

    Parameters
    ----------
    energies, states : (m,) and (n, m) states at k = 0, m at least `count`.
    accuracy_eV : the space grows until the estimate of its error is below this.
    """
    scale = pencil.uniform_axial_eV_nm2
    if scale is not None:
        return AxialBands(k_per_nm, energies[:count, None] + scale * k_per_nm**2, 0.0)
    complex_states = pencil.has(1)
    space = _orthonormal(pencil, states.astype(complex) if complex_states else states, None)
    solver = eigen.factor(pencil.h0, pencil.mass, shift)
    solved = {0}
    # E(k) is smooth: a few points show where the reduced space is worst.
    probes = sorted({int(i) for i in np.linspace(0, len(k_per_nm) - 1, 7)[1:]})
    while True:
        table, coordinates = _reduced(pencil, space, k_per_nm, count)
        bounds = {
            i: _excess(pencil, float(k_per_nm[i]), table[:, i], space @ coordinates[i], solver)
            for i in probes
            if i not in solved
        }
        worst = max(bounds, key=lambda i: bounds[i])
        if bounds[worst] <= accuracy_eV or len(solved) >= 5:
            return AxialBands(k_per_nm, table, bounds[worst])
        _, more = eigen.lowest(pencil.at(float(k_per_nm[worst])), pencil.mass, count + 2, shift)
        space = _orthonormal(pencil, more, space)
        solved.add(worst)


def _reduced(pencil: Pencil, space: NDArray[Any], k_per_nm: Array, count: int) -> tuple[Array, list[NDArray[Any]]]:
    """E(k) in the reduced space, each band followed through crossings by the overlap of its states from k to k."""
    from scipy.optimize import linear_sum_assignment

    parts = [_sandwich(h, space) for h in (pencil.h0, pencil.h1, pencil.h2)]
    table = np.empty((count, len(k_per_nm)))
    coordinates: list[NDArray[Any]] = []
    for i, k in enumerate(k_per_nm):
        small = parts[0] + k * parts[1] + k**2 * parts[2]
        values, vectors = np.linalg.eigh((small + small.conj().T) / 2)
        if coordinates:
            alike = np.abs(coordinates[-1].conj().T @ vectors) ** 2
            picked = linear_sum_assignment(alike, maximize=True)[1]
        else:
            picked = np.arange(count)
        table[:, i] = values[picked]
        coordinates.append(vectors[:, picked])
    return table, coordinates


def _excess(pencil: Pencil, k: float, values: Array, vectors: NDArray[Any], solver: eigen.Factor) -> float:
    """How far the values lie above the full pencil's: the residual in the energy norm of H0 - shift M."""
    residual = pencil.at(k) @ vectors - (pencil.mass @ vectors) * values
    step = solver.solve(residual)
    square = np.real(np.einsum("ij,ij->j", residual.conj(), step))
    return float(square.max())


def _orthonormal(pencil: Pencil, more: NDArray[Any], space: NDArray[Any] | None) -> NDArray[Any]:
    """A basis orthonormal in the mass matrix of `space` and `more`; what adds nothing new is dropped."""
    joined = more if space is None else np.hstack([space, more])
    gram = joined.conj().T @ (pencil.mass @ joined)
    values, vectors = np.linalg.eigh((gram + gram.conj().T) / 2)
    kept = values > 1e-11 * values.max()
    return np.asarray(joined @ (vectors[:, kept] / np.sqrt(values[kept])))
