"""T(E) of a mass that grows with energy, worked out at the quadrature points themselves: quick to apply and to make.

``<u|T(E)|v> = int grad u A grad v / (1 + alpha (E - V)) + int u V v`` with V the band edge and all potentials on it, as
in `local_mass`; between the energies at which it is worked out for a small basis, T is a polynomial in E that has
eleven digits.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import scipy.linalg as dense
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.fem.space import Space
from wiresolve.physics.followed_states import split_energies
from wiresolve.physics.pencil import Operator
from wiresolve.physics.unlisted import NEAR, followed_value, from_squares

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_EXACT = 1e-10
_FEWEST, _MOST = 3, 20
_MARGIN_eV = 1e-3
_NEWTON = 12
_GROUPS = 5
"""Factors that serve all states: T(E) is another at each energy."""
_SETTLED_eV, _EQUAL_eV = 1e-7, 1e-10
"""A step of Newton's method so small leaves the square of itself; levels closer than that are one."""


_LARGE, _LARGEST = 60, 250
"""From so many basis functions on lines are worth while."""
_LINES, _LINE_eV = 4, 0.15
"""Straight lines in E that stand for T(E), and how far apart in eV."""
_BESIDE_eV = 2e-4
"""States closer than this are corrected as one space."""
_CORRECTIONS, _ALIKE = 12, 1e-11


@dataclass(frozen=True, eq=False)
class CellTables:
    """What T(E) needs of an operator with one band on a space, but for the potential.

    Attributes
    ----------
    kept : (n,) unknowns among the space's nodes.
    mass : of the inner product, on the unknowns.
    slopes : (c, 2 q, a) gradients of the functions at the quadrature points, times roots of A and of the weights.
    values : (q, a) functions at the quadrature points.
    weights : (c, q).
    alpha_per_eV, edge_eV, axial_eV_nm2 : (c,) growth, band edge, and hbar^2/2m along the wire at the edge.
    """

    space: Space
    kept: Ints
    mass: Any
    slopes: Array
    values: Array
    weights: Array
    alpha_per_eV: Array
    edge_eV: Array
    axial_eV_nm2: Array

    @cached_property
    def number(self) -> Ints:
        """(c, a) numbers of the cells' nodes among the unknowns, one too high for those on walls."""
        found = np.full(len(self.space.nodes), len(self.kept))
        found[self.kept] = np.arange(len(self.kept))
        return np.asarray(found[self.space.dofs])

    @cached_property
    def scatter(self) -> sparse.csr_array:
        """(n, c a) sums what the cells give to each unknown."""
        flat = self.number.ravel()
        inside = np.flatnonzero(flat < len(self.kept))
        return sparse.csr_array((np.ones(len(inside)), (flat[inside], inside)), shape=(len(self.kept), len(flat)))

    @cached_property
    def pattern(self) -> tuple[Ints, Ints, sparse.csc_array]:
        """Element entries (flat) within the unknowns, where each goes in the data of a matrix, and that matrix."""
        size = len(self.kept)
        rows = np.broadcast_to(self.number[:, :, None], (*self.number.shape, self.number.shape[1])).ravel()
        columns = np.broadcast_to(self.number[:, None, :], (*self.number.shape, self.number.shape[1])).ravel()
        inside = np.flatnonzero((rows < size) & (columns < size))
        key = columns[inside] * size + rows[inside]
        unique, place = np.unique(key, return_inverse=True)
        starts = np.searchsorted(unique // size, np.arange(size + 1))
        empty = sparse.csc_array((np.zeros(len(unique)), unique % size, starts), shape=(size, size))
        return inside, place.ravel(), empty

    def local(self, states: NDArray[Any]) -> NDArray[Any]:
        """(c, a, m) states (n, m) cell by cell, zero on the walls."""
        return np.asarray(np.vstack([states, np.zeros((1, states.shape[1]))])[self.number])


def cell_tables(space: Space, operator: Operator, kept: Ints, mass: Any) -> CellTables:
    """The tables of an operator with one band."""
    region, by_region = space.mesh.region[space.cells], operator.by_region
    roots = np.array([np.linalg.cholesky(c.quadratic[:2, :2, 0, 0].real) for c in by_region])[region]
    count = space.dofs.shape[1]
    unit = np.broadcast_to(np.eye(count), (len(region), count, count))
    slopes = np.einsum("cqxa,cxy->cyqa", space.gradients_of(unit), roots, optimize=True)
    weights = space.quadrature_weights
    slopes = slopes * np.sqrt(weights)[:, None, :, None]
    return CellTables(
        space,
        kept,
        mass,
        np.ascontiguousarray(slopes.reshape(len(region), -1, count)),
        np.ascontiguousarray(space.tabulated[1][2]),
        weights,
        np.asarray(operator.nonparabolicity_per_eV or [0.0] * len(by_region))[region],
        np.array([float(c.constant[0, 0].real) for c in by_region])[region],
        np.array([float(c.quadratic[2, 2, 0, 0].real) for c in by_region])[region],
    )


@dataclass(frozen=True, eq=False)
class Grown:
    """T(E) in one potential.

    Attributes
    ----------
    height_eV : (c, q) band edge and potential at the quadrature points.
    """

    tables: CellTables
    height_eV: Array

    @property
    def mass(self) -> Any:
        """Of the inner product."""
        return self.tables.mass

    @property
    def bottom_eV(self) -> float:
        """The lowest height."""
        return float(self.height_eV.min())

    def lighter(self, energy_eV: float | Array) -> Array:
        """(c, q) or (c, q, m): m / m(E) at each place."""
        energy = np.asarray(energy_eV)
        alpha = self.tables.alpha_per_eV.reshape((-1,) + (1,) * (1 + energy.ndim))
        height = self.height_eV.reshape(self.height_eV.shape + (1,) * energy.ndim)
        return np.asarray(1 / (1 + alpha * (energy - height)))

    @property
    def floor_eV(self) -> float:
        """The energy above which all masses are positive."""
        alpha = self.tables.alpha_per_eV
        some = alpha > 0
        return float((self.height_eV[some] - (1 / alpha[some])[:, None]).max()) if some.any() else -np.inf

    def matrix(self, energy_eV: float) -> Any:
        """T(E) on the unknowns, sparse."""
        t = self.tables
        scaled = t.slopes * np.tile(self.lighter(energy_eV), (1, 2))[..., None]
        elements = t.slopes.transpose(0, 2, 1) @ scaled
        pairs = (t.values[:, :, None] * t.values[:, None, :]).reshape(len(t.values), -1)
        elements = elements + ((t.weights * self.height_eV) @ pairs).reshape(elements.shape)
        inside, place, empty = t.pattern
        data = np.bincount(place, elements.ravel()[inside], minlength=len(empty.data))
        return sparse.csc_array((data, empty.indices, empty.indptr), shape=empty.shape)

    def count_below(self, energy_eV: float) -> int:
        """Number of states below an energy."""
        return eigen.count_below(self.matrix(energy_eV), self.mass, energy_eV)

    def factors(self, energy_eV: Array, used: int) -> tuple[eigen.Factor, ...]:
        """What follows the first `used` of states into other potentials."""
        at = split_energies(energy_eV, used, _GROUPS)
        return tuple(eigen.factor(self.matrix(energy), self.mass, energy) for energy in at)

    def image(self, energy_eV: Array, states: NDArray[Any]) -> NDArray[Any]:
        """(n, m) each state's T(E) x at its own energy."""
        t = self.tables
        local = t.local(states)
        cells, count, m = local.shape
        flux = t.slopes @ local
        flux *= np.tile(self.lighter(energy_eV), (1, 2, 1))
        out = t.slopes.transpose(0, 2, 1) @ flux
        there = t.values @ local
        there *= (t.weights * self.height_eV)[..., None]
        out += t.values.T @ there
        return np.asarray(t.scatter @ out.reshape(cells * count, m))

    def small(self, states: NDArray[Any], energies: Array) -> tuple[NDArray[Any], NDArray[Any]]:
        """(p, m, m) <i|T(E)|j> at p energies, and <i|H2(E)|j>, which k^2 along the wire multiplies."""
        t = self.tables
        local = t.local(states)
        m = local.shape[2]
        flux = np.ascontiguousarray((t.slopes @ local).reshape(-1, m))
        there = np.ascontiguousarray((t.values @ local).reshape(-1, m))
        height = there.T @ (there * (t.weights * self.height_eV).reshape(-1, 1))
        axial = (t.weights * t.axial_eV_nm2[:, None]).reshape(-1)
        still, moving = np.empty((len(energies), m, m)), np.empty((len(energies), m, m))
        for k, energy in enumerate(energies):
            lighter = self.lighter(float(energy))
            still[k] = flux.T @ (flux * np.tile(lighter, (1, 2)).reshape(-1, 1)) + height
            moving[k] = there.T @ (there * (axial * lighter.ravel())[:, None])
        return still, moving

    def nodes(self, low_eV: float, high_eV: float) -> Array:
        """Chebyshev points between two energies, through which T(E) is a polynomial to ten digits.

        1 / (1 + alpha (E - V)) has its pole at V - 1/alpha: the polynomials' error falls with the power of the ellipse
        around the energies that goes through it (S. N. Bernstein, 1912).
        """
        middle, half = (low_eV + high_eV) / 2, (high_eV - low_eV) / 2
        far = max((middle - self.floor_eV) / half, 1 + 1e-3)
        count = int(np.ceil(np.log(1 / _EXACT) / np.log(far + np.sqrt(far**2 - 1)))) + 1
        count = min(max(count, _FEWEST), _MOST)
        return np.asarray(middle + half * np.cos(np.pi * (np.arange(count) + 0.5) / count))

    def ritz(self, basis: NDArray[Any], count: int, guess_eV: Array) -> tuple[Array, NDArray[Any]]:
        """The lowest states in the span of an orthonormal basis: energies and combinations."""
        margin = _MARGIN_eV + 0.1 * float(np.ptp(guess_eV))
        low, high = float(guess_eV.min()) - margin, float(guess_eV.max()) + margin
        points = self.nodes(max(low, self.floor_eV + 1e-3 * (high - self.floor_eV)), high)
        series = _Series.through(points, self._small_still(basis, points))
        if basis.shape[1] >= _LARGE and (quick := linearised(series, count, guess_eV)) is not None:
            return quick
        if basis.shape[1] > _LARGEST:
            rule = f"{count} states whose masses grow steeply with energy could not be told apart; a lower voltage, or"
            raise ConvergenceError(f'{rule} model = "parabolic", can be solved')
        energy, turn = np.asarray(guess_eV, dtype=float).copy(), np.empty((basis.shape[1], count))
        for _ in range(_NEWTON):
            # Members of a level share their energy, and then their states come from one solve.
            level = np.concatenate([[0], np.cumsum(np.diff(energy) > _EQUAL_eV)])
            first = np.flatnonzero(np.concatenate([[True], np.diff(level) > 0]))
            values, vectors = np.linalg.eigh(series.at(energy[first]))
            own = np.arange(count)
            value, turn = values[level, own], vectors[level, :, own].T
            fall = np.einsum("im,mij,jm->m", turn, series.slope(energy[first])[level], turn, optimize=True)
            step = (value - energy[first][level]) / (1 - fall)
            energy = np.sort(energy[first][level] + step)
            if np.abs(step).max() <= _SETTLED_eV:
                break
        return energy, turn

    def _small_still(self, states: NDArray[Any], energies: Array) -> NDArray[Any]:
        t = self.tables
        local = t.local(states)
        m = local.shape[2]
        flux = np.ascontiguousarray((t.slopes @ local).reshape(-1, m))
        there = np.ascontiguousarray((t.values @ local).reshape(-1, m))
        still = np.empty((len(energies), m, m))
        height = there.T @ (there * (t.weights * self.height_eV).reshape(-1, 1))
        for k, energy in enumerate(energies):
            # A product of a matrix with itself costs half of one of two.
            scaled = flux * np.sqrt(np.tile(self.lighter(float(energy)), (1, 2))).reshape(-1, 1)
            still[k] = scaled.T @ scaled + height
        return still

    def density(self, energy_eV: Array, states: NDArray[Any]) -> Array:
        """(c, q, m) what -d<T(E) - E M>/dE counts at each place, integral 1.

        |psi|^2 + alpha / (1 + alpha (E - V))^2 grad psi A grad psi, A at the edge's mass: the second part is what the
        bands that were folded into the mass hold. It is also what a small change of V sees.
        """
        t = self.tables
        local = t.local(states)
        cells, _, m = local.shape
        flux = (t.slopes @ local).reshape(cells, 2, -1, m)
        kinetic = (flux**2).sum(axis=1) / t.weights[..., None]
        density = (t.values @ local) ** 2 + t.alpha_per_eV[:, None, None] * self.lighter(energy_eV) ** 2 * kinetic
        total = np.einsum("cq,cqm->m", t.weights, density)
        return np.asarray(density / total)

    def axial_motion(self, energy_eV: Array, states: NDArray[Any], reach_eV: float) -> tuple[Array, Array]:
        """Axial mass in m0 at the minimum, and growth in 1/eV: see `unlisted.axial_motion`."""
        steps = np.array([0.0, NEAR, 1.0]) * reach_eV
        points = self.nodes(float(energy_eV.min()), float(energy_eV.max()) + reach_eV)
        still, moving = self.small(states, points)
        product = states.T @ (self.mass @ states)
        at = (energy_eV[:, None] + steps).ravel()
        metric = _Series.through(points, moving).at(at)
        rest = at[:, None, None] * product - _Series.through(points, still).at(at)
        lower = np.linalg.inv(np.linalg.cholesky((metric + metric.transpose(0, 2, 1)) / 2))
        matrix = lower @ rest @ lower.transpose(0, 2, 1)
        values, vectors = np.linalg.eigh((matrix + matrix.transpose(0, 2, 1)) / 2)
        vectors = lower.transpose(0, 2, 1) @ vectors
        own = np.repeat(np.arange(len(energy_eV)), len(steps))
        seen = np.einsum("pi,pij->pj", metric[np.arange(len(at)), own], vectors)
        return from_squares(followed_value(values, seen).reshape(-1, len(steps)), steps)


def linearised(series: _Series, count: int, guess_eV: Array) -> tuple[Array, NDArray[Any]] | None:
    """The lowest states of a small T(E) from straight lines in E, corrected until they are exact; None if they resist.

    T(E) is taken as a straight line at a few energies, where one problem S x = E B x serves all states near by; what
    the line misses is put right by first-order perturbation theory with the states of that problem. States that lie
    close together are corrected as one space.
    """
    energy = np.sort(np.asarray(guess_eV, dtype=float)[:count])
    low, high = series.middle_eV - series.half_eV, series.middle_eV + series.half_eV
    parts = max(1, min(_LINES, int(np.ceil(np.ptp(energy) / _LINE_eV))))
    edges = np.linspace(energy[0], energy[-1], parts + 1)
    found_energy, found_turn = [], []
    taken = 0
    for part in range(parts):
        at = float(edges[part] + edges[part + 1]) / 2
        slope = series.slope(np.array([at]))[0]
        whole = np.eye(len(slope)) - slope
        try:
            values, vectors = dense.eigh(series.at(np.array([at]))[0] - at * slope, whole)
        except np.linalg.LinAlgError:
            return None
        end = count if part == parts - 1 else min(int(np.searchsorted(values, edges[part + 1])), count)
        # A state at the border of two lines belongs to one of them, a level too.
        while taken < end < count and values[end] - values[end - 1] < _BESIDE_eV:
            end += 1
        if end <= taken:
            continue
        if values[end - 1] > high or values[taken] < low:
            return None
        own = _corrected(series, values, vectors, np.arange(taken, end))
        if own is None:
            return None
        found_energy.append(own[0])
        found_turn.append(own[1])
        taken = end
    energy = np.concatenate(found_energy) if found_energy else np.zeros(0)
    if len(energy) < count or (np.diff(energy) < -_SETTLED_eV).any():
        return None
    return energy, np.hstack(found_turn)


def _corrected(
    series: _Series, values: Array, vectors: NDArray[Any], own: NDArray[np.int64]
) -> tuple[Array, NDArray[Any]] | None:
    """Energies and states (d, m) of the numbers `own` among those of a line, made exact."""
    energy, states = values[own].copy(), vectors[:, own].copy()
    cluster = np.concatenate([[0], np.cumsum(np.diff(energy) > _BESIDE_eV)])
    members = [pick for n in range(int(cluster[-1]) + 1) if len(pick := np.flatnonzero(cluster == n)) > 1]
    alone = np.bincount(cluster)[cluster] == 1
    close = cluster == np.full(len(values), -1)[:, None]
    close[own] = cluster[own - own[0]][:, None] == cluster
    for _ in range(_CORRECTIONS):
        before = energy.copy()
        image, fall = series.applied(energy, states), series.applied(energy, states, slope=True)
        value = np.einsum("im,im->m", states, image - states * energy)
        rate = np.einsum("im,im->m", states, fall - states)
        energy[alone] -= (value / rate)[alone]
        for pick in members:
            middle = float(energy[pick].mean())
            block = states[:, pick]
            line = series.slope(np.array([middle]))[0] @ block
            inner = block.T @ (series.at(np.array([middle]))[0] @ block) - middle * (block.T @ line)
            weight = block.T @ block - block.T @ line
            energy[pick], turn = dense.eigh((inner + inner.T) / 2, (weight + weight.T) / 2)
            states[:, pick] = block @ turn
        rest = series.applied(energy, states) - states * energy
        gap = energy - values[:, None]
        with np.errstate(divide="ignore", invalid="ignore"):
            share = np.where(close, 0.0, (vectors.T @ rest) / gap)
        if not np.isfinite(share).all() or np.abs(share).max() > 0.5:
            return None
        states = states + vectors @ share
        if np.abs(share).max() <= _ALIKE and np.abs(energy - before).max() <= _SETTLED_eV:
            return energy, states / np.linalg.norm(states, axis=0)
    return None


@dataclass(frozen=True, eq=False)
class _Series:
    """Matrices that are polynomials in E: their Chebyshev coefficients (p, m, m) between two energies."""

    middle_eV: float
    half_eV: float
    parts: Array

    @staticmethod
    def through(points: Array, values: Array) -> _Series:
        """The polynomials through values (p, m, m) at p Chebyshev points."""
        middle, half = _span(points)
        table = np.polynomial.chebyshev.chebvander((points - middle) / half, len(points) - 1)
        return _Series(middle, half, np.tensordot(np.linalg.inv(table), values, 1))

    def at(self, energy_eV: Array) -> Array:
        """(n, m, m)."""
        x = (energy_eV - self.middle_eV) / self.half_eV
        return np.asarray(np.tensordot(np.polynomial.chebyshev.chebvander(x, len(self.parts) - 1), self.parts, 1))

    def applied(self, energy_eV: Array, states: NDArray[Any], slope: bool = False) -> NDArray[Any]:
        """T(E), or its derivative, of each state (m, n) at its own energy (n,)."""
        x, count = (energy_eV - self.middle_eV) / self.half_eV, len(self.parts)
        weights = np.polynomial.chebyshev.chebvander(x, count - 1)
        if slope:
            weights = (
                np.polynomial.chebyshev.chebval(x, np.polynomial.chebyshev.chebder(np.eye(count))).T / self.half_eV
            )
        found = np.zeros_like(states)
        for k, part in enumerate(self.parts):
            found += (part @ states) * weights[:, k]
        return found

    def slope(self, energy_eV: Array) -> Array:
        """(n, m, m) derivative by E."""
        x, count = (energy_eV - self.middle_eV) / self.half_eV, len(self.parts)
        rate = np.polynomial.chebyshev.chebval(x, np.polynomial.chebyshev.chebder(np.eye(count))) / self.half_eV
        return np.asarray(np.tensordot(rate.T, self.parts, 1))


def _span(points: Array) -> tuple[float, float]:
    return float(points.max() + points.min()) / 2, float(np.ptp(points)) / 2 or 1.0
