"""How potential, levels and carriers answer to a small change of voltages, to first order and without approximation."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.physics.selfconsistent import Balanced

Array = NDArray[np.float64]

_CLOSE_eV = 1e-7
"""Levels nearer than this count as equal: the difference quotient of their filling is its derivative."""
_OUTER, _INNER = 1e-9, 1e-10
_MOST_OUTER, _MOST_INNER = 80, 400
_FAINT = 1e-11
"""States that hold less than this part of the fullest one's carriers do not count for the answer of states."""


@dataclass(frozen=True, eq=False)
class Response:
    """The answer to a change of the held potentials, each per volt.

    Attributes
    ----------
    potential : (n,) change of the potential at the mesh's points.
    density_per_nm3 : (c, q) change of the carriers at the quadrature points of the carriers' cells.
    carriers_per_V_nm : change of the line density.
    charges_per_V_nm : change of each gate's charge, in e/(V nm).
    """

    potential: Array
    density_per_nm3: Array
    carriers_per_V_nm: float
    charges_per_V_nm: dict[str, float]


def response(balanced: Balanced, gate: str) -> Response:
    """The answer to the voltage of one gate.

    The carriers' answer is that of first-order perturbation theory: levels move by what their densities see, and the
    states change by all others, those that are kept one by one, all further ones through a linear problem for each.

    Raises
    ------
    ConvergenceError
        The linear problems did not converge.
    """
    charged = balanced.stage.field
    field = charged.field
    start = np.zeros(len(field.space.nodes))
    start[field.gate_points[gate]] = 1.0
    answer = Answer(balanced)

    def applied(potential: Array) -> Array:
        image = field.stiffness @ potential + charged.load(answer(potential))
        image[field.held] = 0.0
        return np.asarray(image)

    def stepped(right: Array) -> Array:
        return charged.stepped(balanced.solution.factor, right)

    potential = start + _conjugate_gradients(applied, -applied(start), stepped)
    density = answer(potential)
    held = density[balanced.stage.places]
    carriers = float((balanced.stage.carriers.space.quadrature_weights * held).sum())
    return Response(potential, held, carriers, field.charges(potential, -charged.load(density)))


def _conjugate_gradients(applied: Any, right: Array, solve: Any) -> Array:
    answer, residual, direction = np.zeros_like(right), right.copy(), np.zeros_like(right)
    before, size = np.inf, 0.0
    for _ in range(_MOST_OUTER):
        step = solve(residual)
        now = max(float(residual @ step), 0.0)
        size = max(size, now)
        if now <= _OUTER**2 * size:
            return answer
        direction = step + direction * (now / before)
        image = applied(direction)
        along = now / float(direction @ image)
        answer += along * direction
        residual -= along * image
        before = now
    raise ConvergenceError("the answer of carriers and potential to a voltage did not converge")


@dataclass(frozen=True, eq=False)
class Answer:
    """The change of the carriers' density for a small change of the potential."""

    balanced: Balanced

    @cached_property
    def _channels(self) -> tuple[_Channel, ...]:
        carriers, occupied = self.balanced.stage.carriers, self.balanced.occupied
        made = []
        for number, (pencil, hamiltonian, shift) in enumerate(carriers.pencils_in(self.balanced.function)):
            pick = np.flatnonzero(occupied.channel == number)
            if len(pick):
                states = occupied.energy_eV[pick], occupied.states[:, pick]
                filling = occupied.line_density_per_nm[pick], occupied.density_slope_per_eV_nm[pick]
                matrices = carriers.interpolation, hamiltonian, pencil.mass, pencil.kept
                made.append(_Channel(*matrices, shift, *states, *filling))
        return tuple(made)

    def __call__(self, potential: Array) -> Array:
        """(k, q) how much less charge, in e/nm^3 and per volt of a potential (n,), the field's charged cells hold."""
        stage = self.balanced.stage
        there = stage.field.at_quadrature(potential)
        _, slope = stage.dopants.charge(stage.field.at_quadrature(self.balanced.potential_V))
        change = -slope * there
        rise = there[stage.places]
        weighted = (stage.carriers.space.quadrature_weights * rise).ravel()
        for channel in self._channels:
            change[stage.places] += channel.change(weighted).reshape(rise.shape)
        return change


@dataclass(frozen=True, eq=False)
class _Channel:
    """States of one channel: m of them, with the matrices on its unknowns."""

    interpolation: sparse.csr_array
    hamiltonian: Any
    mass: Any
    kept: NDArray[np.int64]
    shift_eV: float
    energy_eV: Array
    states: NDArray[Any]
    filling: Array
    slope: Array

    @cached_property
    def _there(self) -> Array:
        """(p, m) the states at all quadrature points."""
        return np.asarray(self.interpolation @ self.states)

    @cached_property
    def _factor(self) -> eigen.Factor:
        return eigen.factor(self.hamiltonian, self.mass, self.shift_eV)

    @cached_property
    def _weighted(self) -> Array:
        return np.asarray(self.mass @ self.states[self.kept])

    @cached_property
    def _pairs(self) -> Array:
        """(m, m) how much a pair of states answers: difference quotients of the filling by energy."""
        gap = self.energy_eV[:, None] - self.energy_eV
        with np.errstate(divide="ignore", invalid="ignore"):
            quotient = -(self.filling[:, None] - self.filling) / gap
        mean = (self.slope[:, None] + self.slope) / 2
        return np.where(np.abs(gap) > _CLOSE_eV, quotient, mean)

    def change(self, weighted_rise: Array) -> Array:
        """(p,) of the density, for a rise of the potential (p,) times the weights of the quadrature."""
        lifted = weighted_rise[:, None] * self._there
        inside = self._there.T @ lifted
        answer = (self._there * (self._there @ (self._pairs * inside))).sum(axis=1)
        load = (self.interpolation.T @ lifted)[self.kept]
        further = np.zeros((self.interpolation.shape[1], len(self.energy_eV)))
        used = self.filling > _FAINT * self.filling.max()
        if not used.any():
            return np.asarray(answer)
        weights = self.filling[used] / self.filling.max()
        further[np.ix_(self.kept, np.flatnonzero(used))] = self._further(load[:, used], self.energy_eV[used], weights)
        return np.asarray(answer + 2 * (self._there * (self.interpolation @ further)) @ self.filling)

    def _further(self, load: Array, energy: Array, weights: Array) -> Array:
        """(H - E)^-1 of loads within the states that are not kept: conjugate gradients, all columns at once.

        Columns count by their weights (m,): those of states that hold few carriers need not be as exact.
        """

        def outside(block: Array) -> Array:
            return np.asarray(block - self.states[self.kept] @ (self._weighted.T @ block))

        def outside_load(block: Array) -> Array:
            return np.asarray(block - self._weighted @ (self.states[self.kept].T @ block))

        residual = outside_load(load)
        answer, direction = np.zeros_like(residual), np.zeros_like(residual)
        before = np.ones(residual.shape[1])
        first: Array | None = None
        for _ in range(_MOST_INNER):
            step = outside(self._factor.solve(residual))
            now = np.einsum("ij,ij->j", residual, step)
            first = np.maximum(now, 1e-300) if first is None else first
            open_ = now * weights**2 > _INNER**2 * (first * weights**2).max()
            if not open_.any():
                return answer
            direction = step + direction * (now / before)
            image = self.hamiltonian @ direction - (self.mass @ direction) * energy
            along = now / np.maximum(np.einsum("ij,ij->j", direction, image), 1e-300)
            answer += along * direction
            residual = outside_load(residual - along * image)
            before = np.maximum(now, 1e-300)
        raise ConvergenceError("the answer of the states to a voltage did not converge")
