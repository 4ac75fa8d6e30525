"""Poisson's equation with a charge that answers to the potential: Newton's method on a convex energy.

Where the density never rises with phi (electrons follow the potential, and holes and ionised dopants do too), phi is
the one minimum of J(phi) = (1/2) int permittivity |grad phi|^2 - int W(phi) - (fixed load) phi with
W' = density. A step ends where the derivative of J along it has fallen enough, so that nothing is damped by hand; near
the solution whole steps are taken, and one factor serves as long as it makes the corrections fall quickly.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem.condensed import Outside, outside
from wiresolve.fem.eigen import Factor, definite, elimination_order
from wiresolve.physics.electrostatics import Field

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Charge = Callable[[Array], tuple[Array, Array]]
"""Density in e/nm^3 and its derivative by phi in e/(V nm^3), from phi in V; all (k, q), at quadrature points."""

_STEPS = 200
_NOISE = 1e-14
_STUCK_V, _STUCK = 1e-8, 3
"""Corrections below so many volts that new factors do not make smaller, so many times, are rounding."""
_FARTHEST = 1e4
"""Steps are prolonged by no more than this: where J still falls then, it is rounding that makes it fall."""
_CONTRACTION = 0.15
"""A factor serves on, and a correction is believed, where it is smaller than the one before by this factor."""
_ALIKE = 0.5
"""The same, where along the step the carriers' answer is at least this part of what the factor was made with."""
_LINE = 0.5
"""A step is long enough where the derivative of J along it has fallen to half of this part, or turned to all of it."""
_SEARCHES = 80
_ROUNDING_V = 1e-13
"""Corrections below this, times the largest |phi| or 1 V, are rounding."""
_STEEPEST = 1e12
"""An infinite slope of the density (a kink at T = 0) counts as so much times the permittivity over the cell's area."""
_LARGEST = 1e200
_ISOLATED = 1e-9
"""Where nothing is held and no carriers are, this part of the stiffness' diagonal keeps a step finite."""


@dataclass(frozen=True, eq=False)
class Solution:
    """A potential with its charge.

    Attributes
    ----------
    phi : (n,) in V.
    residual_V : the largest change of phi in the last correction, which is in phi.
    iterations, factors : corrections made, and matrices factored.
    load : (n,) integrals in e of all charge, fixed and carriers', with every node's function.
    factor : serves the next solve as long as it is good enough.
    """

    phi: Array
    residual_V: float
    iterations: int
    factors: int
    load: Array
    factor: Factor


@dataclass(frozen=True, eq=False)
class ChargedField:
    """A field with carriers in some of its cells: what Newton steps reuse.

    Attributes
    ----------
    cells : (k,) the carriers' cells, numbers among those of the field's space.
    """

    field: Field
    cells: Ints

    @cached_property
    def _dofs(self) -> Ints:
        return self.field.space.dofs[self.cells]

    @cached_property
    def _weights(self) -> Array:
        return self.field.space.quadrature_weights[self.cells]

    @cached_property
    def _values(self) -> Array:
        return np.ascontiguousarray(self.field.space.tabulated[1][2])

    @cached_property
    def _pairs(self) -> Array:
        """(q, n n) products of the functions at the quadrature points."""
        return (self._values[:, :, None] * self._values[:, None, :]).reshape(len(self._values), -1)

    @cached_property
    def _outside(self) -> Outside:
        """The free points outside of the carriers' cells, where the equation is linear."""
        poisson = self.field
        inside = np.zeros(len(poisson.space.nodes), dtype=bool)
        inside[self._dofs] = True
        inside[poisson.held] = False
        return outside(poisson.stiffness, np.flatnonzero(inside), np.flatnonzero(~inside & ~poisson.is_held))

    @cached_property
    def _reduced(self) -> tuple[Ints, sparse.csc_array]:
        """The free points of the carriers' cells as they are eliminated, and the stiffness that they see."""
        matrix = self._outside.reduced
        order = elimination_order(matrix + sparse.diags_array(_ISOLATED * matrix.diagonal()))
        block = sparse.csc_array(matrix[order][:, order])
        block.sort_indices()
        return self._outside.inner[order], block

    @property
    def _free(self) -> Ints:
        return self._reduced[0]

    @cached_property
    def _target(self) -> tuple[Ints, Ints]:
        """Which element entries (flat) lie in the reduced stiffness, and where in its data."""
        number = np.full(len(self.field.space.nodes), -1)
        number[self._free] = np.arange(len(self._free))
        local = number[self._dofs]
        rows = np.broadcast_to(local[:, :, None], (*local.shape, local.shape[1])).ravel()
        columns = np.broadcast_to(local[:, None, :], (*local.shape, local.shape[1])).ravel()
        inside = np.flatnonzero((rows >= 0) & (columns >= 0))
        block, size = self._reduced[1], len(self._free)
        key = np.repeat(np.arange(size), np.diff(block.indptr)) * size + block.indices
        return inside, np.searchsorted(key, columns[inside] * size + rows[inside])

    @cached_property
    def _steepest(self) -> Array:
        scale = self.field.permittivity[self.cells] / self._weights.sum(axis=1)
        return np.asarray(_STEEPEST * scale[:, None])

    def at_quadrature(self, phi: Array) -> Array:
        """phi (n,) at the quadrature points (k, q) of the carriers' cells."""
        return np.asarray(phi[self._dofs] @ self._values.T)

    def load(self, density: Array) -> Array:
        """(n,) integrals in e of a density (k, q) with every node's function."""
        local = (density * self._weights) @ self._values
        found = np.bincount(self._dofs.ravel(), local.ravel(), minlength=len(self.field.space.nodes))
        return np.asarray(found, dtype=float)

    def total(self, density: Array) -> float:
        """int of a density (k, q): e/nm."""
        return float((density * self._weights).sum())

    def _hessian(self, slope: Array) -> Factor:
        """The factor of the reduced stiffness plus the answer of the carriers."""
        elements = ((self._falling(slope) * self._weights) @ self._pairs).ravel()
        inside, target = self._target
        matrix = self._reduced[1].copy()
        matrix.data += np.bincount(target, elements[inside], minlength=len(matrix.data))
        if not len(self.field.held):
            matrix = sparse.csc_array(matrix + sparse.diags_array(_ISOLATED * self._reduced[1].diagonal()))
        return definite(matrix, ordered=True)

    def stepped(self, factor: Factor, right: Array) -> Array:
        """(n,) what a solution's factor makes of a right-hand side (n,), 0 at the held points."""
        found, beyond = np.zeros(len(right)), self._outside
        whole = right
        if beyond.factor is not None:
            whole = right.copy()
            whole[beyond.inner] -= beyond.coupling.T @ beyond.factor.solve(right[beyond.outer])
        found[self._free] = factor.solve(whole[self._free])
        if beyond.factor is not None:
            found[beyond.outer] = beyond.factor.solve(right[beyond.outer] - beyond.coupling @ found[beyond.inner])
        return found

    def solve(
        self, held_values: Array, charge: Charge, start: Array | Solution, tolerance_V: float, steps: int = _STEPS
    ) -> Solution:
        """phi with the carriers' charge, from a start (n,) or the last solution, whose factor is tried first.

        Raises
        ------
        ConvergenceError
            The corrections did not become smaller than `tolerance_V`, the largest change of phi at a point.
        """
        kept = start.factor if isinstance(start, Solution) else None
        phi = np.array(start.phi if isinstance(start, Solution) else start, dtype=float)
        phi[self.field.held] = held_values
        # Outside of the carriers' cells the equation is linear: it is fulfilled here, and again at the end.
        beyond = self._fulfilled(phi, self.field.fixed_load)
        free, block = self._reduced
        answer = (self.field.stiffness @ beyond)[free] - block @ beyond[free]
        here = self._at(beyond, charge, answer)
        factor, factors, last, least, stuck = kept, 0, np.inf, np.inf, 0
        for iteration in range(1, steps + 1):
            fresh = factor is None
            if factor is None:
                factor, last = self._hessian(here.slope), np.inf
                factors += 1
            step = np.zeros(len(phi))
            step[free] = -factor.solve(here.gradient)
            size = float(np.abs(step).max())
            falls = size <= _CONTRACTION * last
            if not fresh and not (falls and self._alike(here, step)):
                factor = None
                continue
            if fresh and size <= _STUCK_V:
                stuck = stuck + 1 if size > 0.5 * least else 0
                least = min(least, size)
            small = size <= _ROUNDING_V * max(1.0, float(np.abs(here.phi).max())) or self._is_noise(here, step)
            small = small or stuck >= _STUCK
            if small or (falls and size <= tolerance_V and np.isfinite(last)):
                here = self._at(here.phi + step, charge, answer)
                return Solution(self._fulfilled(here.phi, here.load), size, iteration, factors, here.load, factor)
            there, whole = self._along(here, step, charge, answer, fresh)
            if there is None:
                factor = None
                continue
            here, last = there, size
            if not whole:
                factor = None
        raise ConvergenceError(
            f"the potential still changed by {size:.2g} V after {steps} steps; {tolerance_V:.2g} V was wanted"
        )

    def _is_noise(self, here: _Point, step: Array) -> bool:
        """Whether all that is left of J's derivative along a step is rounding."""
        free, block = self._reduced
        sizes = np.abs(block @ here.phi[free]) + np.abs(here.load[free])
        return abs(float(step[free] @ here.gradient)) <= _NOISE * float(np.abs(step[free]) @ sizes)

    def _alike(self, here: _Point, step: Array) -> bool:
        """Whether the carriers still answer to a step as they did where its factor was made.

        A factor from where they were many makes corrections that look small where they are few.
        """
        falling = self._falling(here.slope)
        free, block = self._reduced
        then = -float(step[free] @ here.gradient)
        now = float(step[free] @ (block @ step[free]))
        now += self.total(falling * self.at_quadrature(step) ** 2)
        return now >= _ALIKE * then

    def _falling(self, slope: Array) -> Array:
        return np.clip(np.where(np.isposinf(-slope), self._steepest, np.nan_to_num(-slope)), 0.0, _LARGEST)

    def _fulfilled(self, phi: Array, load: Array) -> Array:
        """phi with the equation fulfilled outside of the carriers' cells."""
        beyond = self._outside
        if beyond.factor is None:
            return phi
        found = phi.copy()
        found[beyond.outer] += beyond.factor.solve((load - self.field.stiffness @ phi)[beyond.outer])
        return found

    def _at(self, phi: Array, charge: Charge, answer: Array) -> _Point:
        """A point from phi in the carriers' cells; `answer` is what gates and charge outside give to the free ones."""
        density, slope = charge(self.at_quadrature(phi))
        load = self.field.fixed_load + self.load(density)
        free, block = self._reduced
        return _Point(phi, slope, load, block @ phi[free] + answer - load[free])

    def _along(
        self, here: _Point, step: Array, charge: Charge, answer: Array, fresh: bool
    ) -> tuple[_Point | None, bool]:
        """The point at which the derivative of J along a step has fallen enough, and whether it is the whole step.

        No point where the whole step is not good enough and its factor was not made here.
        """
        free = self._free
        before = float(step[free] @ here.gradient)
        low, high, part = 0.0, np.inf, 1.0
        at_low, at_high = 1.0, -np.inf
        for _ in range(_SEARCHES):
            with np.errstate(over="ignore", invalid="ignore"):
                there = self._at(here.phi + part * step, charge, answer)
                left = float(step[free] @ there.gradient) / before
            left = left if np.isfinite(left) else -np.inf
            if -_LINE <= left <= _LINE / 2:
                return there, part == 1.0
            if not fresh:
                return None, False
            if left > 0:
                low, at_low = part, left
            else:
                high, at_high = part, left
            if not np.isfinite(high):
                if part > _FARTHEST:
                    break
                part *= 4
                continue
            # The secant's zero, but not so close to an end that the bracket hardly shrinks: J' may be exponential.
            secant = at_low / (at_low - at_high) if np.isfinite(at_high) else 0.5
            part = low + (high - low) * min(max(secant, 0.1), 0.9)
        return there, False


@dataclass(frozen=True, eq=False)
class _Point:
    """phi (n,), the slope (k, q) of its density, its load (n,), and J's derivative by phi at the free points inside."""

    phi: Array
    slope: Array
    load: Array
    gradient: Array


def nonlinear(
    poisson: Field, held_values: Array, charge: Charge, cells: Ints, start: Array | Solution, tolerance_V: float
) -> Solution:
    """One solve of `ChargedField(poisson, cells)`; where many are wanted, keep that object."""
    return ChargedField(poisson, cells).solve(held_values, charge, start, tolerance_V)
