"""States followed from one potential to another: the last ones, improved until their residuals are small.

The states and the directions that a factor of a nearby operator gives for their residuals span a small space, whose
lowest states are the next ones; with the last step's direction kept these are conjugate gradients on a block (A. V.
Knyazev, SIAM J. Sci. Comput. 23, 517 (2001)). Energies are as exact as the square of the residuals.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem import eigen

Array = NDArray[np.float64]

RESIDUAL = 1e-10
"""States are followed until |T(E) x - E M x| is below this times |(E - bottom) M x|."""
_ROUNDS = 12
_GROUPS = 2
"""Factors that serve all states."""
LOOSEST = 1e-4
_SAME = 1e-13
"""Directions whose part outside of the others is smaller than this, squared, are left out."""


class Form(Protocol):
    """T(E), or one matrix at all energies, with the mass matrix of its unknowns."""

    @property
    def mass(self) -> Any:
        """(n, n) of the inner product."""

    def image(self, energy_eV: Array, states: NDArray[Any]) -> NDArray[Any]:
        """(n, m) each state's T(E) x at its own energy."""

    def ritz(self, basis: NDArray[Any], count: int, guess_eV: Array) -> tuple[Array, NDArray[Any]]:
        """The lowest states in the span of an orthonormal basis (n, d): energies and combinations (d, count)."""


@dataclass(frozen=True, eq=False)
class Constant:
    """A Hamiltonian that is the same at all energies."""

    hamiltonian: Any
    mass: Any

    def image(self, energy_eV: Array, states: NDArray[Any]) -> NDArray[Any]:
        """(n, m)."""
        return np.asarray(self.hamiltonian @ states)

    def ritz(self, basis: NDArray[Any], count: int, guess_eV: Array) -> tuple[Array, NDArray[Any]]:
        """The lowest states in the span of an orthonormal basis."""
        small = basis.T @ (self.hamiltonian @ basis)
        values, turn = np.linalg.eigh((small + small.T) / 2)
        return values[:count], turn[:, :count]

    def count_below(self, energy_eV: float) -> int:
        """Number of states below an energy."""
        return eigen.count_below(self.hamiltonian, self.mass, energy_eV)

    def factors(self, energy_eV: Array, used: int) -> tuple[eigen.Factor, ...]:
        """What follows the first `used` of states into other potentials."""
        at = split_energies(energy_eV, used, _GROUPS)
        return tuple(eigen.factor(self.hamiltonian, self.mass, energy) for energy in at)


@dataclass(frozen=True, eq=False)
class Followed:
    """States on the unknowns, and what follows them further.

    Attributes
    ----------
    energy_eV, states : (m,) and (n, m).
    factors : of operators nearby, each less an energy; the nearest one serves a state.
    rounds : steps that were made.
    """

    energy_eV: Array
    states: NDArray[Any]
    factors: tuple[eigen.Factor, ...]
    rounds: int


def followed(
    form: Form, start: Followed, bottom_eV: float, tolerance: Callable[[Array], Array], count: int | None = None
) -> Followed | None:
    """The lowest states of a form from those of another one; None where they do not converge quickly.

    Parameters
    ----------
    bottom_eV : an energy below all states, from which residuals are judged.
    tolerance : how large residuals (m,) may be, of the energies; infinite for states that only come along.
    count : how many states are wanted, as many as the start has if not given.
    """
    mass = form.mass
    basis = _independent(start.states, mass)
    count = start.states.shape[1] if count is None else count
    if basis.shape[1] < count:
        return None
    guess, before = np.resize(start.energy_eV, count), None
    for number in range(_ROUNDS + 1):
        energy, turn = form.ritz(basis, count, guess)
        states = basis @ turn
        weighted = mass @ states
        rest = form.image(energy, states) - weighted * energy
        scale = np.linalg.norm(weighted, axis=0) * np.maximum(energy - bottom_eV, 1e-12)
        size, enough = np.linalg.norm(rest, axis=0) / scale, tolerance(energy)
        if not np.isfinite(size).all():
            return None
        if (size <= enough).all():
            return Followed(energy, states, start.factors, number)
        guess = energy
        open_ = size > 0.1 * np.minimum(enough, 1.0)
        basis = _independent(states, mass)
        basis = _with(basis, _steps(start.factors, energy[open_], rest[:, open_]), mass)
        if before is not None:
            basis = _with(basis, before[:, open_], mass)
        before = states
    return None


def split_energies(energy_eV: Array, used: int, groups: int) -> list[float]:
    """Energies between the first `used` states, at which factors serve them: one in a wide gap of each group."""
    used = max(min(used, len(energy_eV)), 1)
    found = []
    for pick in np.array_split(np.arange(used), min(groups, used)):
        near = energy_eV[max(int(pick[0]) - 1, 0) : int(pick[-1]) + 2]
        if pick[0] == 0:
            near = np.append(near[0] - 0.3 * max(float(np.ptp(near)), 1e-3), near)
        widest = int(np.diff(near).argmax())
        found.append(float(near[widest] + near[widest + 1]) / 2)
    return sorted(set(found))


def _steps(factors: tuple[eigen.Factor, ...], energy: Array, rest: NDArray[Any]) -> NDArray[Any]:
    """Each residual solved with the factor that is nearest in energy."""
    at = np.array([factor.shift for factor in factors])
    nearest = np.abs(energy[:, None] - at).argmin(axis=1)
    found = np.empty_like(rest)
    for number in np.unique(nearest):
        pick = nearest == number
        found[:, pick] = factors[number].solve(rest[:, pick])
    return found


def _with(basis: NDArray[Any], block: NDArray[Any], mass: Any) -> NDArray[Any]:
    """An orthonormal basis with the parts of a block that lie outside of it."""
    for _ in range(2):
        block = block - basis @ (basis.T @ (mass @ block))
        size = np.sqrt(np.maximum(np.einsum("ij,ij->j", block, mass @ block), 0.0))
        block = block[:, size > 0] / size[size > 0]
    block = _independent(block, mass)
    return np.hstack([basis, block - basis @ (basis.T @ (mass @ block))])


def _independent(block: NDArray[Any], mass: Any) -> NDArray[Any]:
    gram = block.T @ (mass @ block)
    values, vectors = np.linalg.eigh((gram + gram.T) / 2)
    kept = values > _SAME * values[-1]
    return np.asarray(block @ (vectors[:, kept] / np.sqrt(values[kept])))
