"""Tables of E(k) where H(k) has a part linear in k: each listed band from k = 0 to where it rises for good."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.physics.axial_bands import AxialBands
from wiresolve.physics.axial_space import AxialSpace, Followed, followed
from wiresolve.physics.minima import Minima, fine_grid, spread_out

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_FEATURES = 12.0
"""Tables go on so many times beyond the states below the highest listed one as the states change with k."""
_STEPS, _FEWEST, _MOST = 3, 6, 60
"""Wave numbers at which the reduced space is looked at while the states change once."""
_ROUNDS = 3
_LARGEST = 400
"""States of a reduced space: a larger one costs more than the digits are worth."""
_ABOVE_eV = 1e-4
"""Accuracy of energies that are higher than was asked for."""


def tables(
    low: Minima, k_min_per_nm: Array, end_per_nm: float, points: int, reach_eV: float, accuracy_eV: float
) -> AxialBands:
    """E(k) of the listed bands from k = 0 to a k, or as far beyond as it takes for every band to rise at its end.

    Parameters
    ----------
    k_min_per_nm : (n,) the minima, which are among the wave numbers.
    reach_eV : how far above the lowest band energies are asked to the accuracy.
    """
    found = low.survey
    far, feature = float(found.bands.k_per_nm[-1]), found.feature_per_nm
    end = float(np.clip(end_per_nm, far, far + _FEATURES * feature))
    floor = float(found.bands.energy_eV[0, 0])
    space, solver = found.space.up_to(floor + reach_eV), found.space.solver()
    for _ in range(12):
        space, bands, columns, bound = _accurate(low, space, solver, end, floor + reach_eV, accuracy_eV)
        k = _with_minima(np.linspace(0, end, points), k_min_per_nm)
        table = np.array([bands.at(space, float(q))[0][columns] for q in k])
        climbs = (np.diff(table[-3:], axis=0) > 0).all(axis=0) & (table[-1] > table.min(axis=0) + 1e-6)
        if climbs.all():
            return AxialBands(k, table.T.copy(), bound)
        end *= 1.15
    raise ConvergenceError(f"a band still falls with k at {end:.3g} 1/nm: its states could not be followed")


def _accurate(
    low: Minima, space: AxialSpace, solver: eigen.Factor, end_per_nm: float, reach_eV: float, accuracy_eV: float
) -> tuple[AxialSpace, Followed, Ints, float]:
    """A space that has the listed bands up to an end, all its bands, which the listed ones are, and its error."""
    feature, solved = low.survey.feature_per_nm, set()
    steps = int(np.clip(np.ceil(_STEPS * end_per_nm / feature), _FEWEST, _MOST))
    for _ in range(_ROUNDS):
        bands = followed(space, fine_grid(end_per_nm, feature))
        columns = _columns(low, space, bands)
        bound, before = 0.0, space.size
        for g in spread_out(steps):
            k = end_per_nm * g / steps
            energies, vectors = bands.at(space, k)
            own = energies[columns]
            excess = space.excess(k, own, vectors[:, columns], solver)
            bound = max(bound, float(excess.max()))
            over = excess > np.where(own <= reach_eV, accuracy_eV, np.maximum(accuracy_eV, _ABOVE_eV))
            if over.any() and g not in solved and space.size < _LARGEST:
                solved.add(g)
                space = space.grown(k, int(np.sum(space.states(k)[0] < own[over].max())) + 2)
        if space.size == before:
            break
    else:
        bands = followed(space, fine_grid(end_per_nm, feature))
        columns = _columns(low, space, bands)
    return space, bands, columns, bound


def _columns(low: Minima, space: AxialSpace, bands: Followed) -> Ints:
    """Which of the bands of a space that has grown the listed ones are: those that have their states at the minima."""
    from scipy.optimize import linear_sum_assignment

    first = float(bands.k_per_nm[1])
    same = np.zeros((len(low.rows), bands.energy_eV.shape[1]))
    for i, row in enumerate(low.rows):
        k = max(float(low.k_per_nm[i]), first)
        state = low.survey.bands.at(space, k)[1][:, row]
        same[i] = np.abs(state.conj() @ bands.at(space, k)[1]) ** 2
    return np.asarray(linear_sum_assignment(same, maximize=True)[1], dtype=np.int64)


def _with_minima(k_per_nm: Array, k_min_per_nm: Array) -> Array:
    """Even wave numbers, the nearest ones moved to the minima off k = 0."""
    moved = k_per_nm.copy()
    for k in k_min_per_nm[k_min_per_nm > 0]:
        near = int(np.clip(np.argmin(np.abs(k_per_nm - k)), 1, len(k_per_nm) - 4))
        if moved[near] == k_per_nm[near] and moved[near - 1] < k < moved[near + 1]:
            moved[near] = k
    return moved
