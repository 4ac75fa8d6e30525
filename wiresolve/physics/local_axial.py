"""Motion along the wire where masses grow with energy: axial mass and E(k) from T(E, k)."""

from __future__ import annotations

from typing import Any

import numpy as np
import scipy.linalg as dense
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.physics.axial_bands import LINEAR_ABOVE, AxialBands
from wiresolve.physics.local_mass import LocalMass
from wiresolve.physics.semiclassical import PhaseSpace

Array = NDArray[np.float64]

_ENERGIES = 96
"""Energies at which all k of the bands are found; between them k^2(E) is smooth."""
_ABOVE = 6
"""States solved beyond the listed ones where k is large: bands that have crossed listed ones may lie lower there."""


def curvature(family: LocalMass, energies: Array, states: NDArray[Any], levels: NDArray[np.int64]) -> Array:
    """Half of d2E/dk2 at k = 0 in eV nm^2, (m,), of an operator without terms linear in k.

    <H2(E)> / N, N = -d<T(E) - E M>/dE: the implicit derivative of T(E) x + k^2 H2(E) x = E M x.
    """
    norms = family.norms(energies, states)
    images = [None if z is None else z @ states for z in family.axial_matrices(2)]
    out = np.empty(len(energies))
    for level in np.unique(levels):
        pick = np.flatnonzero(levels == level)
        weights = family.weights(float(energies[pick].mean()))
        block = sum(
            w * (states[:, pick].conj().T @ image[:, pick])
            for w, image in zip(weights, images, strict=True)
            if image is not None
        )
        scale = np.sqrt(np.outer(norms[pick], norms[pick]))
        out[pick] = np.linalg.eigvalsh((block + block.conj().T) / 2 / scale)
    return out


def linear_part(family: LocalMass, energy_eV: float, states: NDArray[Any]) -> float:
    """The largest first-order term between the states (n, g) of a level, in eV nm, as `LINEAR_ABOVE` measures it.

    Above the curvature in eV nm^2 it counts.
    """
    scale = np.sqrt(family.norms(np.full(states.shape[1], energy_eV), states))
    total: Any = 0
    for weight, matrix in zip(family.weights(energy_eV), family.axial_matrices(1), strict=True):
        if matrix is not None:
            total = total + weight * (states.conj().T @ (matrix @ states))
    return float(10 / LINEAR_ABOVE * np.abs(total / np.outer(scale, scale)).max())


def dispersion(
    family: LocalMass,
    energies: Array,
    states: NDArray[Any],
    k_per_nm: Array,
    cells: PhaseSpace,
    count: int,
) -> AxialBands:
    """E(k) of the lowest `count` states at all `k_per_nm` (p,), from the space of states at three wave numbers.

    For an operator without terms linear in k; `minima` is for others.
    """
    blocks, held = [states], []
    for j in (round(0.6 * (len(k_per_nm) - 1)), len(k_per_nm) - 1):
        found = family.moved(float(k_per_nm[j])).lowest(count + _ABOVE, cells, polished=False)
        blocks.append(found.states)
        held.append((j, found.energy_eV))
    space = _orthonormal(np.hstack(blocks), family.mass)
    still, moving = _small(space, family.matrices), _small(space, family.axial_matrices(2))
    table = _by_energy(family, still, moving, energies, k_per_nm, count)
    bound = max(_distance(table[:, j], energy) for j, energy in held)
    return AxialBands(k_per_nm, table, bound)


def _distance(followed: Array, solved: Array) -> float:
    """How far followed bands lie from the nearest solved energies.

    Bands are followed through crossings: those above the solved energies have nothing to be held against.
    """
    known = followed[followed <= solved[-1]]
    return float(np.abs(known[:, None] - solved).min(axis=1).max()) if len(known) else 0.0


def _small(space: NDArray[Any], matrices: tuple[Any | None, ...]) -> list[NDArray[Any]]:
    d = space.shape[1]
    return [np.zeros((d, d)) if m is None else np.asarray(space.conj().T @ (m @ space)) for m in matrices]


def _sum(weights: Array, parts: list[NDArray[Any]]) -> NDArray[Any]:
    return np.asarray(sum(w * p for w, p in zip(weights, parts, strict=True)))


def _by_energy(
    family: LocalMass,
    still: list[NDArray[Any]],
    moving: list[NDArray[Any]],
    energies: Array,
    k_per_nm: Array,
    count: int,
) -> Array:
    """At a fixed energy k^2 is the eigenvalue of a linear problem, (E - T(E)) x = k^2 H2(E) x, for all bands."""
    from scipy.interpolate import CubicSpline, PchipInterpolator
    from scipy.optimize import linear_sum_assignment

    d, end = len(still[0]), float(k_per_nm[-1]) ** 2
    low = float(energies[0])
    # Where the lightest of the bands would be at the end, if its mass did not grow.
    stiffest = max(float(np.linalg.eigvalsh(_sum(family.weights(low), moving))[-1]), 0.0)
    reach = 1.2 * float(energies[count - 1] - low) + 0.3 * min(stiffest * end, 1.0) + 1e-3
    for _ in range(24):
        grid = low + reach * np.linspace(0, 1, _ENERGIES) ** 1.5
        # Far below their energies bands come in another order: some more are followed than are wanted.
        squares = np.empty((min(count + _ABOVE, d), len(grid)))
        before = None
        for i, energy in enumerate(grid):
            weights = family.weights(float(energy))
            metric = _sum(weights, moving)
            values, vectors = dense.eigh(energy * np.eye(d) - _sum(weights, still), (metric + metric.conj().T) / 2)
            values, vectors = values[::-1], vectors[:, ::-1]
            if before is None:
                picked = np.arange(len(squares))
            else:
                # Bands of unlike mass cross: each is followed by its states.
                picked = linear_sum_assignment(np.abs(before.conj().T @ metric @ vectors) ** 2, maximize=True)[1]
            squares[:, i], before = values[picked], vectors[:, picked]
        wanted = np.argsort([np.interp(0.0, row, grid) for row in squares], kind="stable")[:count]
        if squares[wanted, -1].min() >= end:
            break
        reach *= 1.6
    else:
        raise ConvergenceError(
            "the motion along the wire could not be followed up to the wave numbers that heat reaches"
        )
    table = np.empty((count, len(k_per_nm)))
    for row, start in enumerate(wanted):
        at = np.unique(np.append(np.flatnonzero(np.abs(grid - energies[row]) > 1e-3 * reach / _ENERGIES), []))
        at = at.astype(int)
        x, y = np.append(squares[start, at], 0.0), np.append(grid[at], energies[row])
        order = np.argsort(x)
        x, y = _rising(x[order], y[order])
        table[row] = CubicSpline(x, y)(k_per_nm**2)
        if (np.diff(table[row]) < 0).any():
            # Where two bands nearly meet a spline overshoots; this does not.
            table[row] = PchipInterpolator(x, y)(k_per_nm**2)
    return table


def _rising(x: Array, y: Array) -> tuple[Array, Array]:
    """The points of which no earlier one, seen from the band's bottom (x = 0), is higher."""
    bottom = int(np.flatnonzero(x == 0.0)[0])
    above = y[bottom:] >= np.maximum.accumulate(y[bottom:])
    below = y[: bottom + 1] <= np.minimum.accumulate(y[: bottom + 1][::-1])[::-1]
    kept = np.append(below[:-1], above)
    x, y = x[kept], y[kept]
    apart = np.append(True, np.diff(x) > 1e-12 * max(float(np.ptp(x)), 1e-300))
    apart[x == 0.0] = True
    return x[apart], y[apart]


def _orthonormal(block: NDArray[Any], mass: Any) -> NDArray[Any]:
    gram = block.conj().T @ (mass @ block)
    values, vectors = np.linalg.eigh((gram + gram.conj().T) / 2)
    kept = values > 1e-11 * values[-1]
    return np.asarray(block @ (vectors[:, kept] / np.sqrt(values[kept])))
