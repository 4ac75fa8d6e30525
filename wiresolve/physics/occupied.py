"""The carriers' states in a given potential, their densities in the section, and how many each one holds."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem import eigen
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.channel import Channel
from wiresolve.physics.filling import Filling
from wiresolve.physics.listing import SPIN
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.unlisted import axial_motion, upright
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

REACH = 20.0
"""States are kept up to this many kT above the Fermi level: exp(-20) is 2e-9."""
_ABOVE_LOWEST = 14.0
"""And up to this many kT above the lowest one, so that an empty wire's few carriers are all counted, to exp(-14)."""
_SPARE = 2
_MOST = 400
_PARTED = 1e-6
"""States closer than this many eV are kept or left together: a level is never cut."""
_BENT = 6.0
"""How many kT above a state's minimum the growth of its mass along the wire is taken."""


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
        density, slope = np.zeros(by_V.shape), np.zeros(by_V.shape)
        low, high = float(by_V.min()), float(by_V.max())
        thermal = KB * self.temperature_K
        for alpha in np.unique(self.alpha_per_eV):
            filling = Filling(self.temperature_K, float(alpha))
            reached = -self.energy_eV + high >= -2 * REACH * thermal
            some = np.flatnonzero((self.alpha_per_eV == alpha) & reached)
            if not len(some):
                continue
            depths = -self.energy_eV[some]
            table: Callable[[Array], tuple[Array, Array]] = filling.both
            if thermal > 0:
                table = filling.table(float(depths.min()) + low, float(depths.max()) + high)
            for i in some:
                n, rate = table(by_V - self.energy_eV[i])
                weight = self.density_per_nm2[:, :, i] * self.scale[i]
                if thermal > 0:
                    # At the place itself the filling is exact: the last pass must not see the table.
                    at, _ = table(np.array(-self.energy_eV[i]))
                    weight = weight * (self.line_density_per_nm[i] / self.scale[i] / at)
                density += weight * n
                slope += weight * rate
        return density, slope


@dataclass(frozen=True, eq=False)
class Carriers:
    """What holds carriers on one mesh: the channels' operators without the charge's potential.

    Attributes
    ----------
    space : of the cells that admit carriers.
    channels : groups of valleys.
    operators : one a channel, without the charge's potential.
    """

    space: Space
    channels: Sequence[Channel]
    operators: tuple[Operator, ...]
    temperature_K: float

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

    def in_potential(self, potential_V: NodalFunction, expected: Sequence[int] | None = None) -> Occupied:
        """All states that can hold carriers in an electrostatic potential.

        Parameters
        ----------
        expected : how many each channel had last time.
        """
        higher = -potential_V.on(self.space)
        rows = self._rows(higher, potential_V, expected)
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
        )

    def pencils_in(self, potential_V: NodalFunction) -> list[tuple[Pencil, Any, float]]:
        """Of each channel its pencil, H in an electrostatic potential, and an energy below all states.

        Masses that grow with energy are those at the band edge.
        """
        raised = self.space.matrix({("1", "1"): -potential_V.on(self.space)})
        found = []
        for pencil, operator in zip(self._pencils, self.operators, strict=True):
            cells = phase_space(self.space, replace(operator, potential=_raised(operator, potential_V)))
            hamiltonian = pencil.h0 + raised[pencil.kept][:, pencil.kept]
            found.append((pencil, hamiltonian, cells.bottom_eV - 1e-3 * (cells.energy_of(4) - cells.bottom_eV) - 1e-6))
        return found

    @cached_property
    def interpolation(self) -> sparse.csr_array:
        """(cells x quadrature points, nodes) values of functions at the quadrature points."""
        cells, count = self.space.dofs.shape
        rows = np.arange(cells * len(self._values)).reshape(cells, -1)
        row = np.broadcast_to(rows[:, :, None], (cells, len(self._values), count)).ravel()
        column = np.broadcast_to(self.space.dofs[:, None, :], (cells, len(self._values), count)).ravel()
        data = np.broadcast_to(self._values, (cells, len(self._values), count)).ravel()
        return sparse.csr_array((data, (row, column)), shape=(rows.size, len(self.space.nodes)))

    def _rows(self, higher: Array, potential: NodalFunction, expected: Sequence[int] | None) -> list[tuple[Any, ...]]:
        thermal = KB * self.temperature_K
        raised = self.space.matrix({("1", "1"): higher})
        operators = [
            replace(operator, potential=_raised(operator, potential), smooth=True) for operator in self.operators
        ]
        cells = [phase_space(self.space, operator) for operator in operators]
        order = np.argsort([c.bottom_eV for c in cells])
        rows: list[tuple[Any, ...]] = [()] * len(self.channels)
        lowest = np.inf
        for number in order:
            channel, operator, own = self.channels[number], operators[number], cells[number]
            reach = max(REACH * thermal, lowest + _ABOVE_LOWEST * thermal if np.isfinite(lowest) else -np.inf)
            count = _SPARE + (expected[number] if expected is not None else int(np.ceil(own.count(np.array(reach)))))
            if own.bottom_eV > reach:
                rows[number] = self._empty(int(number))
                continue
            while True:
                count = min(count, _MOST, len(self._pencils[number].kept) // 3)
                energy, states, family = self._solved(int(number), operator, own, raised, count)
                lowest = min(lowest, float(energy[0]))
                reach = max(REACH * thermal, lowest + _ABOVE_LOWEST * thermal)
                if energy[-1] > reach or count >= min(_MOST, len(self._pencils[number].kept) // 3):
                    break
                count = max(count + 4, int(1.4 * count))
            used = int(np.searchsorted(energy, reach))
            used = max(used, 1 if energy[0] <= lowest else 0)
            # A level is never cut: the members that follow closely come along.
            while 0 < used < len(energy) and energy[used] - energy[used - 1] < _PARTED:
                used += 1
            rows[number] = self._row(int(number), channel, operator, energy[:used], states[:, :used], family)
        return rows

    def _empty(self, number: int) -> tuple[Any, ...]:
        none = np.zeros(0)
        states = np.zeros((len(self.space.nodes), 0))
        density = np.zeros((*self.space.quadrature_weights.shape, 0))
        return none, none, none, none, np.zeros(0, dtype=np.int64), states, density

    def _solved(
        self, number: int, operator: Operator, cells: Any, raised: Any, count: int
    ) -> tuple[Array, NDArray[Any], local_mass.LocalMass | None]:
        """Energies, states on the unknowns, and T(E) where masses grow."""
        if operator.nonparabolic:
            family = local_mass.family(self.space, operator, cells, count)
            found = family.lowest(count, cells, polished=False)
            return found.energy_eV, found.states, family
        pencil = self._pencils[number]
        shift = cells.bottom_eV - 1e-3 * (cells.energy_of(count) - cells.bottom_eV) - 1e-6
        hamiltonian = pencil.h0 + raised[pencil.kept][:, pencil.kept]
        energy, states = eigen.lowest(hamiltonian, pencil.mass, count, shift)
        return energy, states, None

    def _row(
        self,
        number: int,
        channel: Channel,
        operator: Operator,
        energy: Array,
        states: NDArray[Any],
        family: local_mass.LocalMass | None,
    ) -> tuple[Any, ...]:
        pencil = self._pencils[number]
        full = pencil.spread(states)
        growth = np.zeros(len(energy))
        if family is not None:
            density = self._grown_density(operator, energy, full)
            mass, growth = axial_motion(family, energy, states, 0, _BENT * KB * max(self.temperature_K, 1.0))
        else:
            values = full[self.space.dofs].transpose(0, 2, 1) @ self._values.T
            density = (np.abs(values) ** 2).transpose(0, 2, 1)
            uniform = pencil.uniform_axial_eV_nm2
            if uniform is not None:
                mass = np.full(len(energy), HBAR2_OVER_2M0 / uniform)
            else:
                along = pencil if not pencil.has(1) else self._upright(number)
                mass = HBAR2_OVER_2M0 / np.diag(along.expected(2, states)).real
        degeneracy = np.full(len(energy), float(SPIN * channel.degeneracy))
        return energy, mass, growth, degeneracy, np.full(len(energy), number), full, density

    def _upright(self, number: int) -> Pencil:
        return replace(build(self.space, upright(self.operators[number])), kept=self._pencils[number].kept)

    def _grown_density(self, operator: Operator, energy: Array, full: NDArray[Any]) -> Array:
        """(c, q, m) of states whose mass grows: what -d<T(E) - E M>/dE counts at each place.

        |psi|^2 + alpha / (1 + alpha (E - V))^2 grad psi A grad psi, A at the edge's mass: the second part is what the
        bands that were folded into the mass hold. It is also what a small change of V sees.
        """
        space, region = self.space, self.space.mesh.region[self.space.cells]
        local = full[space.dofs]
        values = np.einsum("qa,cam->cqm", self._values, local)
        slopes = space.gradients_of(local)
        tensor = np.array([np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in operator.by_region])[region]
        kinetic = np.einsum("cqxm,cxy,cqym->cqm", slopes.conj(), tensor, slopes, optimize=True).real
        alpha = np.asarray(operator.nonparabolicity_per_eV)[region][:, None, None]
        edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])[region][:, None]
        height = energy - (edge + operator.potential_on(space))[..., None]
        density = np.abs(values) ** 2 + alpha / (1 + alpha * height) ** 2 * kinetic
        total = np.einsum("cq,cqm->m", space.quadrature_weights, density)
        return np.asarray(density / total)


@dataclass(frozen=True, eq=False)
class Raised:
    """A given potential energy with the charge's on top of it."""

    given: Any
    potential_V: NodalFunction

    def on(self, space: Space) -> Array:
        """(c, q) eV at the quadrature points of a space over the same triangles."""
        at = space.quadrature_points
        return np.asarray(np.asarray(self.given(at[..., 0], at[..., 1]), dtype=float) - self.potential_V.on(space))

    def __call__(self, x: Array, y: Array) -> Array:
        """In eV at any points."""
        return np.asarray(np.asarray(self.given(x, y), dtype=float) - self.potential_V(x, y))


def _raised(operator: Operator, potential_V: NodalFunction) -> Any:
    return charged_potential(operator.potential, potential_V)


def charged_potential(given: Any, potential_V: NodalFunction) -> Any:
    """The electron's potential energy: what was given, and minus the electrostatic potential."""
    if given is None:
        return NodalFunction(potential_V.mesh, -potential_V.values)
    return Raised(given, potential_V)
