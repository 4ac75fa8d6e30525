"""The carriers' states in a given potential, their densities in the section, and how many each one holds."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.errors import CoarseMeshError
from wiresolve.fem import eigen
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.channel import Channel
from wiresolve.physics.charged_potential import charged_potential
from wiresolve.physics.filling import Filling, tables
from wiresolve.physics.followed_states import LOOSEST, RESIDUAL, Constant, Followed, followed
from wiresolve.physics.grown_states import CellTables, Grown, cell_tables
from wiresolve.physics.listing import SPIN
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import PhaseSpace, phase_space
from wiresolve.physics.unlisted import upright
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

REACH = 20.0
"""States are kept up to this many kT above the Fermi level: exp(-20) is 2e-9."""
_ABOVE_LOWEST = 14.0
"""And up to this many kT above the lowest one, so that an empty wire's few carriers are all counted, to exp(-14)."""
_SPARE, _SHARE = 3, 0.2
"""States carried along beyond those that hold carriers, and the part of these that is added: they lead the others."""
_MOST, _TOO_MANY = 600, 1.3
_PARTED = 1e-6
"""States closer than this many eV are kept or left together: a level is never cut."""
_WIDEST_TABLE = 2000.0
"""Potentials further apart than so many kT are only met while a step is looked for: no table then."""
_REFERENCES = (0.2, 0.9)
"""Shares of the wanted states at whose energies a growing mass is taken for first states."""
_FIRST = 1e-4
_SLOW = 6
"""States that took more steps than this get a factor of the operator they are in."""
_BELOW_eV = 1e-4
_BENT = 6.0
"""How many kT above a state's minimum the growth of its mass along the wire is taken."""


@dataclass(frozen=True, eq=False)
class Kept:
    """What one channel's states in another potential start from.

    Attributes
    ----------
    found : the states, those that hold no carriers too.
    height_eV : (c, q) the band edge with all potentials, in which they are.
    complete_eV : below it none is missing.
    """

    found: Followed
    height_eV: Array
    complete_eV: float


@dataclass(frozen=True, eq=False)
class Occupied:
    """States of all channels in one potential, channel by channel; energies from the Fermi level.

    Attributes
    ----------
    energy_eV, axial_mass, alpha_per_eV, degeneracy, channel : (m,) minimum, mass along the wire in m0, how it grows,
        spin times valleys, and the channel's number.
    states : (nodes, m) on the carriers' space.
    density_per_nm2 : (c, q, m) of one carrier at the space's quadrature points; integral 1.
    temperature_K : of the carriers.
    kept : of each channel what its states in another potential start from.
    """

    space: Space
    energy_eV: Array
    axial_mass: Array
    alpha_per_eV: Array
    degeneracy: Array
    channel: Ints
    states: NDArray[Any]
    density_per_nm2: Array
    temperature_K: float
    kept: tuple[Kept | None, ...] = ()

    @cached_property
    def scale(self) -> Array:
        """(m,) g sqrt(m)."""
        return np.asarray(self.degeneracy * np.sqrt(self.axial_mass))

    @cached_property
    def line_density_per_nm(self) -> Array:
        """(m,) carriers of each state per length."""
        return self._filled(lambda filling, pick: filling.density(-self.energy_eV[pick]))

    @cached_property
    def density_slope_per_eV_nm(self) -> Array:
        """(m,) derivative of the line densities by the Fermi level."""
        return self._filled(lambda filling, pick: filling.slope(-self.energy_eV[pick]))

    def _filled(self, of: Any) -> Array:
        found = np.empty(len(self.energy_eV))
        for alpha in np.unique(self.alpha_per_eV):
            pick = self.alpha_per_eV == alpha
            found[pick] = self.scale[pick] * of(Filling(self.temperature_K, float(alpha)), pick)
        return found

    @property
    def total_per_nm(self) -> float:
        """Carriers per length."""
        return float(self.line_density_per_nm.sum())

    @cached_property
    def carriers_per_nm3(self) -> Array:
        """(c, q) density of carriers at the quadrature points."""
        return np.asarray(self.density_per_nm2 @ self.line_density_per_nm)

    def counts(self, channels: int) -> list[int]:
        """How many states each channel has."""
        return [int(n) for n in np.bincount(self.channel, minlength=channels)]

    def shifted(self, by_V: Array) -> tuple[Array, Array]:
        """(c, q) density of carriers and its derivative where the potential has risen by (c, q) volts.

        Each state is filled, place by place, as if its bottom had moved down by the local rise: the predictor of A.
        Trellakis, A. T. Galick, A. Pacelli and U. Ravaioli, J. Appl. Phys. 81, 7880 (1997).
        """
        thermal = KB * self.temperature_K
        # The place of each state itself belongs to the table.
        low, high = min(float(by_V.min()), 0.0), max(float(by_V.max()), 0.0)
        some = np.flatnonzero(-self.energy_eV + high >= -2 * REACH * thermal)
        depths, growth = -self.energy_eV[some], self.alpha_per_eV[some]
        if 0 < high - low + 1e-3 * thermal <= _WIDEST_TABLE * thermal:
            table = tables(self.temperature_K, growth, depths, low, high)
            n, rate = table(by_V)
            # At the place itself the filling is exact: the last pass must not see the table.
            at, _ = table(np.zeros(1))
            exact = self.line_density_per_nm[some] / self.scale[some]
            weight = self.scale[some] * np.divide(exact, at[0], out=np.ones(len(some)), where=at[0] > 0)
            here = self.density_per_nm2[:, :, some] * weight
            return np.einsum("cqm,cqm->cq", here, n), np.einsum("cqm,cqm->cq", here, rate)
        density, slope = np.zeros(by_V.shape), np.zeros(by_V.shape)
        for i in some:
            n, rate = Filling(self.temperature_K, float(self.alpha_per_eV[i])).both(by_V - self.energy_eV[i])
            density += self.density_per_nm2[:, :, i] * self.scale[i] * n
            slope += self.density_per_nm2[:, :, i] * self.scale[i] * rate
        return density, slope


@dataclass(frozen=True, eq=False)
class Carriers:
    """What holds carriers on one mesh: the channels' operators without the charge's potential.

    Attributes
    ----------
    space : of the cells that admit carriers.
    channels : groups of valleys.
    operators : one a channel, without the charge's potential.
    least : so many states of each channel are solved, whether they hold carriers or not.
    """

    space: Space
    channels: Sequence[Channel]
    operators: tuple[Operator, ...]
    temperature_K: float
    least: tuple[int, ...] = ()

    @property
    def degeneracies(self) -> tuple[int, ...]:
        """Spin times valleys of each channel."""
        return tuple(SPIN * channel.degeneracy for channel in self.channels)

    @cached_property
    def _pencils(self) -> tuple[Pencil, ...]:
        return tuple(build(self.space, operator) for operator in self.operators)

    @cached_property
    def _values(self) -> Array:
        """(q, n) functions at the quadrature points."""
        return np.ascontiguousarray(self.space.tabulated[1][2])

    @cached_property
    def _tables(self) -> tuple[CellTables | None, ...]:
        """Of each channel whose masses grow with energy what its T(E) is made of."""
        pairs = zip(self.operators, self._pencils, strict=True)
        return tuple(cell_tables(self.space, o, p.kept, p.mass) if o.nonparabolic else None for o, p in pairs)

    @cached_property
    def _heights(self) -> tuple[Array, ...]:
        """(c, q) of each channel its band edge with a given potential, without the charge's."""
        region = self.space.mesh.region[self.space.cells]
        found = []
        for operator in self.operators:
            edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])[region]
            found.append(edge[:, None] + operator.potential_on(self.space))
        return tuple(found)

    @cached_property
    def _axial(self) -> tuple[Array, ...]:
        """(c,) of each channel hbar^2/2m along the wire, without what couples it to the section."""
        region = self.space.mesh.region[self.space.cells]
        straight = [upright(operator) for operator in self.operators]
        return tuple(np.array([c.quadratic[2, 2, 0, 0].real for c in o.by_region])[region] for o in straight)

    def in_potential(
        self,
        potential_V: NodalFunction,
        expected: Sequence[int] | None = None,
        before: Occupied | None = None,
    ) -> Occupied:
        """All states that can hold carriers in an electrostatic potential.

        Parameters
        ----------
        expected : how many each channel had last time.
        before : these carriers in another potential, from whose states they are followed.
        """
        higher = -potential_V.on(self.space)
        starts = before.kept if before is not None and before.space is self.space else ()
        rows, kept = self._rows(higher, potential_V, expected, starts or (None,) * len(self.channels))
        energy, mass, growth, degeneracy, number, states, density = (list(part) for part in zip(*rows, strict=True))
        return Occupied(
            self.space,
            np.concatenate(energy),
            np.concatenate(mass),
            np.concatenate(growth),
            np.concatenate(degeneracy),
            np.concatenate(number),
            np.hstack(states),
            np.concatenate(density, axis=2),
            self.temperature_K,
            kept,
        )

    def pencils_in(self, potential_V: NodalFunction) -> list[tuple[Pencil, Any, float]]:
        """Of each channel its pencil, H in an electrostatic potential, and an energy below all states.

        Masses that grow with energy are those at the band edge.
        """
        raised = self.space.matrix({("1", "1"): -potential_V.on(self.space)})
        found = []
        for pencil, height in zip(self._pencils, self._heights, strict=True):
            hamiltonian = pencil.h0 + raised[pencil.kept][:, pencil.kept]
            found.append((pencil, hamiltonian, float((height - potential_V.on(self.space)).min()) - _BELOW_eV))
        return found

    def described(self, number: int, potential_V: NodalFunction) -> tuple[Pencil, Operator]:
        """A channel's pencil at constant masses, without the charge, and its operator with the charge's potential."""
        operator = self.operators[number]
        charged = replace(operator, potential=charged_potential(operator.potential, potential_V), smooth=True)
        return self._pencils[number], charged

    @cached_property
    def interpolation(self) -> sparse.csr_array:
        """(cells x quadrature points, nodes) values of functions at the quadrature points."""
        cells, count = self.space.dofs.shape
        rows = np.arange(cells * len(self._values)).reshape(cells, -1)
        row = np.broadcast_to(rows[:, :, None], (cells, len(self._values), count)).ravel()
        column = np.broadcast_to(self.space.dofs[:, None, :], (cells, len(self._values), count)).ravel()
        data = np.broadcast_to(self._values, (cells, len(self._values), count)).ravel()
        return sparse.csr_array((data, (row, column)), shape=(rows.size, len(self.space.nodes)))

    def _rows(
        self, higher: Array, potential: NodalFunction, expected: Sequence[int] | None, starts: Sequence[Kept | None]
    ) -> tuple[list[tuple[Any, ...]], tuple[Kept | None, ...]]:
        raised = self.space.matrix({("1", "1"): higher}) if None in self._tables else None
        heights = [height + higher for height in self._heights]
        order = np.argsort([float(height.min()) for height in heights])
        rows: list[tuple[Any, ...]] = [()] * len(self.channels)
        kept: list[Kept | None] = [None] * len(self.channels)
        lowest = np.inf
        for number in map(int, order):
            bottom = float(heights[number].min())
            if np.isfinite(lowest) and bottom > self._reach(lowest):
                rows[number] = self._empty()
                continue
            form = self._form(number, heights[number], raised)
            known = None if expected is None else expected[number]
            own = kept[number] = self._states(number, form, heights[number], potential, lowest, starts[number], known)
            energy = own.found.energy_eV
            lowest = min(lowest, float(energy[0]))
            used = self._used(energy, lowest)
            rows[number] = self._row(number, form, energy[:used], own.found.states[:, :used])
        return rows, tuple(kept)

    def _form(self, number: int, height: Array, raised: Any) -> Constant | Grown:
        """The operator of a channel in a potential."""
        tables = self._tables[number]
        if tables is not None:
            return Grown(tables, height)
        pencil = self._pencils[number]
        return Constant(pencil.h0 + raised[pencil.kept][:, pencil.kept], pencil.mass)

    def _reach(self, lowest_eV: float) -> float:
        """Up to which energy states hold carriers."""
        thermal = KB * self.temperature_K
        return max(REACH * thermal, lowest_eV + _ABOVE_LOWEST * thermal)

    def _used(self, energy: Array, lowest_eV: float) -> int:
        """How many of a channel's states hold carriers; the lowest one of all counts, though it may hold none."""
        used = int(np.searchsorted(energy, self._reach(lowest_eV)))
        used = max(used, 1 if energy[0] <= lowest_eV else 0)
        # A level is never cut: the members that follow closely come along.
        while 0 < used < len(energy) and energy[used] - energy[used - 1] < _PARTED:
            used += 1
        return used

    def _lead(self, number: int, energy: Array, used: int) -> int:
        """How many of a channel's states are wanted: those that hold carriers, and at least `least`."""
        return max(used, min(self.least[number], len(energy)) if self.least else 0)

    def _tolerance(self, number: int, energy: Array, lowest_eV: float) -> Array:
        """(m,) how large residuals may be: those of states that hold few carriers larger, as these count less."""
        lowest = min(lowest_eV, float(energy[0]))
        found = np.full(len(energy), np.inf)
        used, thermal = self._used(energy, lowest), KB * self.temperature_K
        above = np.maximum(energy[:used] - max(lowest, 0.0), 0.0)
        found[: self._lead(number, energy, used)] = RESIDUAL
        if thermal > 0:
            found[:used] = np.minimum(RESIDUAL * np.exp(above / thermal), LOOSEST)
        return found

    def _states(
        self,
        number: int,
        form: Constant | Grown,
        height: Array,
        potential: NodalFunction,
        lowest_eV: float,
        start: Kept | None,
        known: int | None,
    ) -> Kept:
        """A channel's states, those that may hold carriers and some more; none is missing, or they are solved anew."""
        bottom = float(height.min())
        if start is not None:
            found = followed(form, start.found, bottom, lambda e: self._tolerance(number, e, lowest_eV))
            if found is not None:
                energy = found.energy_eV
                lowest = min(lowest_eV, float(energy[0]))
                used = self._lead(number, energy, self._used(energy, lowest))
                clear = _clear(energy, used, self._reach(lowest))
                complete = start.complete_eV - float(np.abs(height - start.height_eV).max())
                if clear is not None and complete < max(self._reach(lowest), energy[max(used - 1, 0)]):
                    complete = clear if form.count_below(clear) == int(np.searchsorted(energy, clear)) else -np.inf
                if clear is not None and np.isfinite(complete):
                    if found.rounds > _SLOW or len(energy) < used + _SPARE:
                        found = replace(found, factors=form.factors(energy, used))
                    return Kept(_trimmed(found, used), height, complete)
        most = min(_MOST, form.mass.shape[0] // 3)
        operator = self.operators[number]
        operator = replace(operator, potential=charged_potential(operator.potential, potential), smooth=True)
        cells = phase_space(self.space, operator)
        count = known
        if count is None:
            reach = self._reach(lowest_eV) if np.isfinite(lowest_eV) else max(REACH * KB * self.temperature_K, bottom)
            count = int(np.ceil(cells.count(np.array(reach))))
            if count > _TOO_MANY * most:
                raise CoarseMeshError(len(self._pencils[number].kept) // 3 < _MOST, most)
        while True:
            count = min(max(int((1 + _SHARE) * count), *self.least[number : number + 1], 0) + _SPARE, most)
            found = self._cold(number, form, operator, cells, count, lowest_eV)
            energy = found.energy_eV
            lowest = min(lowest_eV, float(energy[0]))
            used = self._lead(number, energy, self._used(energy, lowest))
            clear = _clear(energy, used, self._reach(lowest))
            if count >= most and energy[-1] <= self._reach(lowest):
                raise CoarseMeshError(len(self._pencils[number].kept) // 3 < _MOST, count)
            if count >= most or (clear is not None and form.count_below(clear) <= int(np.searchsorted(energy, clear))):
                return Kept(_trimmed(found, used), height, -np.inf if clear is None else clear)

    def _cold(
        self,
        number: int,
        form: Constant | Grown,
        operator: Operator,
        cells: PhaseSpace,
        count: int,
        lowest_eV: float,
    ) -> Followed:
        """States from nothing."""
        top = cells.energy_of(count)
        shift = cells.bottom_eV - 1e-3 * (top - cells.bottom_eV) - 1e-6
        if isinstance(form, Constant):
            energy, states = eigen.lowest(form.hamiltonian, form.mass, count, shift)
            return Followed(energy, states, form.factors(energy, self._used(energy, lowest_eV)), 0)
        floor, blocks = form.floor_eV, []
        for share in _REFERENCES:
            at = max(cells.energy_of(max(share * count, 0.5)), floor + 0.1 * (top - floor))
            blocks.append(eigen.lowest(form.matrix(at), form.mass, count, shift, _FIRST))
        energy, first = blocks[0]
        start = Followed(energy, np.hstack([first, blocks[1][1]]), form.factors(energy, count), 0)
        found = followed(form, start, cells.bottom_eV, lambda e: self._tolerance(number, e, lowest_eV), count)
        lowest = -np.inf if found is None else float(found.energy_eV[0])
        if found is None or lowest <= floor + 1e-3 * (top - cells.bottom_eV):
            # Where masses are hardly positive, or not at all: this says so.
            own = local_mass.family(self.space, operator, cells, count)
            solved = own.lowest(count, cells)
            return Followed(solved.energy_eV, solved.states, start.factors, 0)
        return found

    def _empty(self) -> tuple[Any, ...]:
        none = np.zeros(0)
        states = np.zeros((len(self.space.nodes), 0))
        density = np.zeros((*self.space.quadrature_weights.shape, 0))
        return none, none, none, none, np.zeros(0, dtype=np.int64), states, density

    def _row(self, number: int, form: Constant | Grown, energy: Array, states: NDArray[Any]) -> tuple[Any, ...]:
        channel, pencil = self.channels[number], self._pencils[number]
        full = pencil.spread(states)
        if isinstance(form, Grown):
            density = form.density(energy, states)
            mass, growth = form.axial_motion(energy, states, _BENT * KB * max(self.temperature_K, 1.0))
        else:
            density = (self._values @ full[self.space.dofs]) ** 2
            weights = self.space.quadrature_weights * self._axial[number][:, None]
            mass, growth = HBAR2_OVER_2M0 / np.einsum("cq,cqm->m", weights, density), np.zeros(len(energy))
        degeneracy = np.full(len(energy), float(SPIN * channel.degeneracy))
        return energy, mass, growth, degeneracy, np.full(len(energy), number), full, density


def _trimmed(found: Followed, used: int) -> Followed:
    """The states that hold carriers and those that are to lead the others."""
    count = used + _SPARE + int(_SHARE * used)
    return replace(found, energy_eV=found.energy_eV[:count], states=found.states[:, :count])


def _clear(energy: Array, used: int, reach_eV: float) -> float | None:
    """An energy above the reach and the first `used` states, in the widest of the next gaps; None if all lie below."""
    low = np.maximum(energy[max(used - 1, 0) : -1], reach_eV)[:_SPARE]
    width = energy[max(used - 1, 0) + 1 :][:_SPARE] - low
    if not len(width) or width.max() <= 0:
        return None
    widest = int(width.argmax())
    return float(low[widest] + width[widest] / 2)
