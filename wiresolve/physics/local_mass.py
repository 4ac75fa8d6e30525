"""A mass that grows with energy and differs from place to place: T(E) psi = E M psi, solved and counted.

m(E) = m (1 + alpha (E - V(x, y))), V being band edge and potential (E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957); in
a heterostructure G. Bastard, Phys. Rev. B 24, 5693 (1981)). The n-th eigenvalue of T(E) falls with E, so it meets E
once, and the n-th state is where it does (H. Voss, BIT 44, 387 (2004), on the min-max rule of such problems);
T(E) - E M has as many negative pivots as there are states below E.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import scipy.linalg as dense
from numpy.typing import NDArray

from wiresolve.bands.coefficients import Coefficients
from wiresolve.errors import ConvergenceError, InputError
from wiresolve.fem import eigen
from wiresolve.fem.space import Space
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import PhaseSpace

Array = NDArray[np.float64]
Weights = Callable[[float], Array]

RESIDUAL = 1e-9
"""States are solved until |T(E) x - E M x| is below this times |(E - shift) M x|."""
_INTERPOLATED = 1e-11
"""Relative error of 1/m(E) between the potentials at which it is worked out, where a potential varies inside cells."""
_FEWEST, _MOST = 3, 48
"""Numbers of such potentials."""
_NEAREST = 1e-3
"""Masses smaller than this part of the edge's are not worked with: that near below lies the end of the model."""
_NEWTON = 30
_ROUNDS = 6
_SPARE = 3
_FIRST = 1e-4
"""Tolerance of the first blocks: the small problem and the polish do the rest."""
_REFERENCES, _MORE_REFERENCES = (0.2, 0.9), (0.05, 0.3, 0.6, 1.0)
"""Shares of the wanted states at whose energies the first blocks are solved: together they hold all states closely."""


@dataclass(frozen=True, eq=False)
class Part:
    """A part of T(E): a pencil's element matrices on some cells ((c,) flags, None for all), times a weight of E's."""

    pencil: Pencil
    cells: NDArray[np.bool_] | None


@dataclass(frozen=True, eq=False)
class Found:
    """States of T(E): energies (m,), states on the unknowns (n, m) with int |psi|^2 = 1, and the largest residual."""

    energy_eV: Array
    states: NDArray[Any]
    residual: float


@dataclass(frozen=True, eq=False)
class LocalMass:
    """T(E) on one space: a sum of fixed matrices with weights that depend on E.

    Attributes
    ----------
    kept : unknowns among the space's nodes.
    parts : the sum as element matrices.
    axial : pencils whose orders 1 and 2 in k go with the same weights (None: nothing).
    weights, slopes : of the parts at an energy, (p,), and their derivatives.
    mass : of the inner product.
    middle_eV : the energy at which the first block of states is solved.
    shift_eV : an energy below all states.
    floor_eV : the energy above which all masses are positive; all states lie above it.
    still : the same at k = 0, where k is another.
    """

    space: Space
    operator: Operator
    kept: NDArray[np.int64]
    parts: tuple[Part, ...]
    weights: Weights
    slopes: Weights
    axial: tuple[Pencil | None, ...]
    middle_eV: float
    shift_eV: float
    floor_eV: float
    k_per_nm: float = 0.0
    still: LocalMass | None = None

    @cached_property
    def matrices(self) -> tuple[Any, ...]:
        """The parts as sparse matrices on the unknowns."""
        if self.still is None:
            made = (self.space.gathered(part.pencil.local(), part.cells) for part in self.parts)
            return tuple(total[self.kept][:, self.kept] for total in made)
        found = list(self.still.matrices)
        for order in (1, 2):
            for i, moving in enumerate(self.axial_matrices(order)):
                if moving is not None:
                    found[i] = found[i] + self.k_per_nm**order * moving
        return tuple(found)

    def axial_matrices(self, order: int) -> tuple[Any | None, ...]:
        """What k (order 1) or k^2 (order 2) multiplies in each part, None where nothing."""
        return tuple(None if p is None else (p.h1 if order == 1 else p.h2) for p in self.axial)

    @property
    def sheared(self) -> bool:
        """Whether terms linear in k are there."""
        return any(p is not None and p.has(1) for p in self.axial)

    def moved(self, k_per_nm: float) -> LocalMass:
        """T(E) at a wave number along the wire."""
        return replace(self, k_per_nm=k_per_nm, still=self.still or self)

    @cached_property
    def mass(self) -> Any:
        """The matrix of the inner product on the unknowns."""
        if self.still is not None:
            return self.still.mass
        return self.space.mass[self.kept][:, self.kept]

    def at(self, energy_eV: float) -> Any:
        """T(E) on the unknowns."""
        total: Any = 0
        for weight, matrix in zip(self.weights(energy_eV), self.matrices, strict=True):
            total = total + weight * matrix
        return total

    def slope(self, energy_eV: float) -> Any:
        """dT/dE on the unknowns."""
        total: Any = 0
        for weight, matrix in zip(self.slopes(energy_eV), self.matrices, strict=True):
            if weight:
                total = total + weight * matrix
        return total

    def count_below(self, energy_eV: float) -> int:
        """Number of states below an energy (of the discrete problem)."""
        return eigen.count_below(self.at(energy_eV), self.mass, energy_eV)

    def spread(self, states: NDArray[Any]) -> NDArray[Any]:
        """States (n, m) of the unknowns on all nodes, zero on the walls."""
        full = np.zeros((len(self.space.nodes), states.shape[1]), dtype=states.dtype)
        full[self.kept] = states
        return full

    def norms(self, energies: Array, states: NDArray[Any]) -> Array:
        """-d<T(E) - E M>/dE of each state, (m,): 1 where masses do not depend on energy."""
        found = np.empty(len(energies))
        images = [matrix @ states for matrix in self.matrices]
        own = [np.einsum("im,im->m", states.conj(), image).real for image in images]
        for i, energy in enumerate(energies):
            found[i] = 1 - sum(w * o[i] for w, o in zip(self.slopes(float(energy)), own, strict=True))
        return found

    def residuals(self, energies: Array, states: NDArray[Any]) -> tuple[NDArray[Any], Array]:
        """T(E) x - E M x, (n, m), and its size beside (E - shift) M x, (m,)."""
        images = [matrix @ states for matrix in self.matrices]
        weighted = self.mass @ states
        rest = -weighted * energies
        for i, energy in enumerate(energies):
            for w, image in zip(self.weights(float(energy)), images, strict=True):
                rest[:, i] += w * image[:, i]
        size = np.linalg.norm(rest, axis=0) / (
            np.linalg.norm(weighted, axis=0) * np.maximum(energies - self.shift_eV, 1e-12)
        )
        return rest, size

    def lowest(self, count: int, cells: PhaseSpace, polished: bool = True, start: NDArray[Any] | None = None) -> Found:
        """The `count` lowest states; without the last polish their energies have nine digits rather than all.

        Parameters
        ----------
        start : (n, m) states that come close, such as those with another outer boundary.
        """
        found = self._solved(count, cells, polished, _REFERENCES if start is None else _REFERENCES[-1:], start)
        if polished and found.residual > RESIDUAL:
            found = self._solved(count, cells, polished, _MORE_REFERENCES, start)
        if polished and found.residual > RESIDUAL:
            rule = f"a state whose mass grows with energy did not converge (residual {found.residual:.1g})"
            raise ConvergenceError(rule)
        return found

    def polish(self, found: Found) -> Found:
        """The same states improved by inverse iteration; `residual` tells whether that was enough."""
        count = len(found.energy_eV)
        energies, states = self._polished(found.energy_eV, found.states, count)
        _, size = self.residuals(energies, states)
        return Found(energies, states, float(size.max()))

    def _solved(
        self, count: int, cells: PhaseSpace, polished: bool, references: Sequence[float], start: NDArray[Any] | None
    ) -> Found:
        # A level that is cut at the end converges badly: a few states more are carried along.
        more = min(count + _SPARE, len(self.kept) // 2)
        block = start
        for share in references:
            at = max(cells.energy_of(max(share * more, 0.5)), self.floor_eV)
            _, found = eigen.lowest(self.at(at), self.mass, more, self.shift_eV, _FIRST)
            block = found if block is None else np.hstack([block, found])
        assert block is not None
        block = _orthonormal(block, self.mass)
        small = [block.conj().T @ (matrix @ block) for matrix in self.matrices]
        guess = np.full(more, max(cells.energy_of(1), self.floor_eV))
        energies, turn = reduced(small, self.weights, self.slopes, more, guess)
        states = block @ turn
        if polished:
            energies, states = self._polished(energies, states, count)
        _, size = self.residuals(energies[:count], states[:, :count])
        return Found(energies[:count], states[:, :count], float(size.max()))

    def _polished(self, energies: Array, states: NDArray[Any], count: int) -> tuple[Array, NDArray[Any]]:
        """States improved by inverse iteration, each level with the factor of T(E) - E M at its own energy.

        They are improved until the residuals of the first `count` are small.
        """
        span = max(float(energies[-1]) - self.shift_eV, 1e-9)
        for _ in range(_ROUNDS):
            _, size = self.residuals(energies, states)
            if size[:count].max() <= RESIDUAL:
                break
            blocks = []
            edges = np.flatnonzero(np.diff(energies) > 1e-6 * span) + 1
            for pick in np.split(np.arange(len(energies)), edges):
                block = states[:, pick]
                if size[pick].max() > 0.1 * RESIDUAL:
                    at = float(energies[pick[0]]) - 1e-7 * span
                    inverse, slope = eigen.factor(self.at(at), self.mass, at), self.slope(at)
                    for _ in range(2):
                        block = inverse.solve(self.mass @ block - slope @ block)
                        block = block / np.linalg.norm(block, axis=0)
                blocks.append(block)
            # One small problem for all: neighbours that came to the same state are told apart by the old ones.
            basis = _orthonormal(np.hstack(blocks), self.mass)
            if basis.shape[1] < len(energies):
                basis = _orthonormal(np.hstack([*blocks, states]), self.mass)
            small = [basis.conj().T @ (matrix @ basis) for matrix in self.matrices]
            energies, turn = reduced(small, self.weights, self.slopes, len(energies), energies)
            states = basis @ turn
        return energies, states


def reduced(
    parts: list[NDArray[Any]], weights: Weights, slopes: Weights, count: int, guess: Array
) -> tuple[Array, NDArray[Any]]:
    """The lowest states of a small T(E) in an orthonormal basis: energies (count,) and combinations (d, count).

    Newton's method on each eigenvalue of T(E) less E, which falls with E faster than -E does.
    """
    energies, turn = np.empty(count), np.empty((len(parts[0]), count), dtype=parts[0].dtype)
    for n in range(count):
        energy = float(guess[n])
        for _ in range(_NEWTON):
            matrix = sum(w * part for w, part in zip(weights(energy), parts, strict=True))
            value, vector = dense.eigh((matrix + matrix.conj().T) / 2, subset_by_index=(n, n))
            fall = sum(w * part for w, part in zip(slopes(energy), parts, strict=True))
            norm = 1 - float(np.real(vector[:, 0].conj() @ fall @ vector[:, 0]))
            step = (float(value[0]) - energy) / norm
            energy += step
            if abs(step) <= 1e-14 * max(abs(energy), 1e-3):
                break
        energies[n], turn[:, n] = energy, vector[:, 0]
    # Equal energies: two solves may give one state twice, so the states of a level are taken from one.
    apart = np.flatnonzero(np.diff(energies) > 1e-9 * max(float(np.ptp(energies)), 1e-3)) + 1
    for pick in np.split(np.arange(count), apart):
        if len(pick) > 1:
            matrix = sum(w * part for w, part in zip(weights(float(energies[pick].mean())), parts, strict=True))
            ends = (int(pick[0]), int(pick[-1]))
            _, turn[:, pick] = dense.eigh((matrix + matrix.conj().T) / 2, subset_by_index=ends)
    return energies, turn


def _orthonormal(block: NDArray[Any], mass: Any) -> NDArray[Any]:
    gram = block.conj().T @ (mass @ block)
    values, vectors = np.linalg.eigh((gram + gram.conj().T) / 2)
    kept = values > 1e-12 * values[-1]
    return np.asarray(block @ (vectors[:, kept] / np.sqrt(values[kept])))


def family(
    space: Space,
    operator: Operator,
    cells: PhaseSpace,
    count: int,
    released: NDArray[np.bool_] | None = None,
) -> LocalMass:
    """T(E) of an operator on a space, for its `count` lowest states.

    Parameters
    ----------
    released : (n,) wall nodes at which the boundary is left free.

    Raises
    ------
    InputError
        In some region the mass is not positive at the energies of the states: outside the model.
    """
    bottom, top = cells.bottom_eV, cells.energy_of(count)
    floor = _floor(space, operator)
    kept = np.flatnonzero(~(space.wall if released is None else space.wall & ~released))
    made = _parts(space, operator, kept, max(floor, bottom + 0.2 * (cells.energy_of(1) - bottom)))
    # T(E) is below its value at the lowest energy, and above the edge.
    shift = bottom - 1e-3 * (top - bottom)
    middle = max(bottom + 0.5 * (top - bottom), floor + 0.1 * (top - bottom))
    found = LocalMass(space, operator, kept, *made, middle, shift, floor)
    if floor > bottom and found.count_below(floor) > 0:
        raise _outside(space, operator, floor)
    return found


def _floor(space: Space, operator: Operator) -> float:
    """The energy above which every mass is positive, with a small margin."""
    alpha = space.field(operator.nonparabolicity_per_eV)
    growing = alpha > 0
    ratio = operator.mass_ratio(space, 0.0)[growing]
    ratio = ratio if ratio.ndim == 1 else ratio.min(axis=1)
    return float(((_NEAREST - ratio) / alpha[growing]).max())


def _outside(space: Space, operator: Operator, energy_eV: float) -> InputError:
    ratio = operator.mass_ratio(space, energy_eV)
    flat = ratio if ratio.ndim == 1 else ratio.min(axis=1)
    region = space.mesh.regions[int(space.mesh.region[space.cells[int(flat.argmin())]])]
    return InputError(
        "carriers.model",
        f"the mass of {region.material} ({region.name}) that grows with energy is not positive at the energies of the"
        " states, far below its band edge: outside this model",
        f"{region.material}, nonparabolicity {max(operator.nonparabolicity_per_eV):g} 1/eV",
        'write model = "parabolic" under [carriers], or carriers = "excluded" there',
    )


_Made = tuple[tuple[Part, ...], Weights, Weights, tuple[Pencil | None, ...]]


def _parts(space: Space, operator: Operator, kept: NDArray[np.int64], lowest_eV: float) -> _Made:
    """The kinetic energy of regions with one edge and alpha each, and what does not depend on the energy.

    Where a potential varies, 1/(1 + alpha (E - edge - V)) is the polynomial in V through a few potentials V_j: its
    weights 1/(1 + alpha (E - edge - V_j)) follow every energy exactly.
    """
    edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])
    alpha = np.array(operator.nonparabolicity_per_eV)
    region = space.mesh.region[space.cells]
    pairs, number = np.unique(np.column_stack([edge, alpha]), axis=0, return_inverse=True)
    number = number.ravel()
    moving = replace(
        operator,
        by_region=tuple(replace(c, constant=np.zeros_like(c.constant)) for c in operator.by_region),
        potential=None,
        nonparabolicity_per_eV=(),
    )
    still = replace(
        operator,
        by_region=tuple(
            Coefficients(np.zeros_like(c.quadratic), np.zeros_like(c.linear), c.constant) for c in operator.by_region
        ),
        nonparabolicity_per_eV=(),
    )
    whole = build(space, moving)
    parts, axial, alphas, centres = [], [], [], []
    for g, (own_edge, own_alpha) in enumerate(pairs):
        cells = number[region] == g
        if not cells.any():
            continue
        mine = _only(moving, number == g)
        points = _potentials(space, operator, cells, float(own_edge), float(own_alpha), lowest_eV)
        if points is None:
            parts.append(Part(whole, cells))
            axial.append(replace(build(space, mine), kept=kept))
            points = np.zeros(1)
        else:
            for j in range(len(points)):
                scaled = replace(mine, kinetic_scale=_lagrange(operator, points, j))
                pencil = replace(build(space, scaled), kept=kept)
                parts.append(Part(pencil, cells))
                axial.append(pencil)
        alphas += [float(own_alpha)] * len(points)
        centres += (own_edge + points).tolist()
    slope, centre = np.array(alphas), np.array(centres)

    def weights(energy: float) -> Array:
        return np.append(1 / (1 + slope * (energy - centre)), 1.0)

    def slopes(energy: float) -> Array:
        return np.append(-slope / (1 + slope * (energy - centre)) ** 2, 0.0)

    return (*parts, Part(build(space, still), None)), weights, slopes, (*axial, None)


def _potentials(
    space: Space, operator: Operator, cells: NDArray[np.bool_], edge: float, alpha: float, lowest_eV: float
) -> Array | None:
    """Chebyshev points of the potential in some cells, as many as 1/m needs at the lowest energy; None: one does."""
    if operator.potential is None or alpha == 0:
        return None
    values = operator.potential_on(space)[cells]
    low, high = float(values.min()), float(values.max())
    middle, half = (low + high) / 2, max((high - low) / 2, 1e-9)
    probes = middle + half * np.cos(np.pi * np.linspace(0, 1, 201))

    def lighter(potential: Array) -> Array:
        return np.asarray(1 / (1 + alpha * (lowest_eV - edge - potential)))

    for count in range(_FEWEST, _MOST + 1):
        points = middle + half * np.cos(np.pi * (np.arange(count) + 0.5) / count)
        guess = lighter(points) @ _polynomials(points, probes)
        if np.abs(guess / lighter(probes) - 1).max() < _INTERPOLATED:
            break
    return points


def _polynomials(points: Array, at: Array) -> Array:
    """Lagrange polynomials (p, n) of the points, at n places."""
    spread, centre = float(np.ptp(points)) / 2 or 1.0, float(points.max() + points.min()) / 2
    table = np.polynomial.chebyshev.chebvander((points - centre) / spread, len(points) - 1)
    there = np.polynomial.chebyshev.chebvander((at - centre) / spread, len(points) - 1)
    return np.asarray(np.linalg.solve(table.T, np.moveaxis(there, -1, 0).reshape(len(points), -1)))


def _lagrange(operator: Operator, points: Array, j: int) -> Callable[[Space], Array]:
    """The j-th polynomial of the potential, as a field on a space."""

    def field(space: Space) -> Array:
        values = operator.potential_on(space)
        inside = np.clip(values, points.min() - 0.1 * np.ptp(points), points.max() + 0.1 * np.ptp(points))
        return np.asarray(_polynomials(points, inside.ravel())[j].reshape(values.shape))

    return field


def _only(operator: Operator, regions: NDArray[np.bool_]) -> Operator:
    """The operator in some regions, nothing elsewhere."""
    return replace(
        operator,
        by_region=tuple(
            c if here else Coefficients(np.zeros_like(c.quadratic), c.linear, c.constant)
            for c, here in zip(operator.by_region, regions, strict=True)
        ),
    )
