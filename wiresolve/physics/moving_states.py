"""The states of one channel at any wave number along the wire, on one space, and modes followed from one to another."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.nonparabolic import Relation
from wiresolve.fem import eigen
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.local_mass import LocalMass
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import PhaseSpace, phase_space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_MORE = 2
"""States solved beyond those that are needed, so that a level at the end is seen whole."""
_NEWTON = 20


class Moving(Protocol):
    """H(k), or T(E, k), of a channel on its unknowns."""

    @property
    def kept(self) -> Ints:
        """The unknowns among the space's nodes."""

    @property
    def mass(self) -> Any:
        """Of the inner product."""

    @property
    def sheared(self) -> bool:
        """Whether there is a part linear in k, which makes states complex."""

    def means(self, k_per_nm: float, states: NDArray[Any]) -> Array:
        """(m,) energies that states (unknowns, m) have at a k, by the Rayleigh quotient."""

    def lowest(self, k_per_nm: float, top_eV: float, start: NDArray[Any]) -> tuple[Array, NDArray[Any]]:
        """All states up to an energy, at least as many as a start has that comes close, and a few more."""


@dataclass(frozen=True, eq=False)
class Plain:
    """Masses that are constant, or grow by one relation all over the section."""

    pencil: Pencil
    relation: Relation
    shift_eV: float

    @property
    def kept(self) -> Ints:
        """The unknowns among the space's nodes."""
        return self.pencil.kept

    @property
    def mass(self) -> Any:
        """Of the inner product."""
        return self.pencil.mass

    @property
    def sheared(self) -> bool:
        """Whether there is a part linear in k."""
        return self.pencil.has(1)

    @property
    def uniform(self) -> bool:
        """Whether H(k) is H(0) and a number."""
        return self.pencil.uniform_axial_eV_nm2 is not None

    def means(self, k_per_nm: float, states: NDArray[Any]) -> Array:
        """(m,) energies by the Rayleigh quotient."""
        own = np.einsum("im,im->m", states.conj(), self.pencil.at(k_per_nm) @ states).real
        return self.relation.energy(own / _squares(states, self.mass))

    def lowest(self, k_per_nm: float, top_eV: float, start: NDArray[Any]) -> tuple[Array, NDArray[Any]]:
        """All states up to an energy, at least as many as a start has that comes close, and a few more."""
        matrix, top = self.pencil.at(k_per_nm), float(self.relation.value(np.array(top_eV)))
        count = max(eigen.count_below(matrix, self.mass, top), start.shape[1]) + _MORE
        values, states = eigen.lowest(matrix, self.mass, count, self.shift_eV)
        return self.relation.energy(values), states


@dataclass(frozen=True, eq=False)
class Growing:
    """Masses that grow with energy, differently from place to place."""

    family: LocalMass
    cells: PhaseSpace

    @property
    def kept(self) -> Ints:
        """The unknowns among the space's nodes."""
        return self.family.kept

    @cached_property
    def mass(self) -> Any:
        """Of the inner product."""
        return self.family.mass

    @property
    def sheared(self) -> bool:
        """Whether there is a part linear in k."""
        return self.family.sheared

    def means(self, k_per_nm: float, states: NDArray[Any]) -> Array:
        """(m,) where <T(E)> meets E, by Newton's method."""
        family = self._at(k_per_nm)
        square = _squares(states, self.mass)
        parts = np.array([np.einsum("im,im->m", states.conj(), m @ states).real / square for m in family.matrices])
        energy = np.full(states.shape[1], family.middle_eV)
        for _ in range(_NEWTON):
            value = np.array([family.weights(float(e)) @ parts[:, i] for i, e in enumerate(energy)])
            slope = np.array([family.slopes(float(e)) @ parts[:, i] for i, e in enumerate(energy)])
            step = (value - energy) / (1 - slope)
            energy = energy + step
            if np.abs(step).max() < 1e-13:
                break
        return energy

    def lowest(self, k_per_nm: float, top_eV: float, start: NDArray[Any]) -> tuple[Array, NDArray[Any]]:
        """All states up to an energy, at least as many as a start has that comes close, and a few more."""
        family = self._at(k_per_nm)
        count = max(family.count_below(top_eV), start.shape[1]) + _MORE
        found = family.lowest(count, self.cells, start=start)
        return found.energy_eV, found.states

    def _at(self, k_per_nm: float) -> LocalMass:
        return self.family.moved(k_per_nm) if k_per_nm else self.family


def moving(space: Space, operator: Operator, count: int) -> Moving:
    """A channel on a space, for some `count` of its lowest states at k = 0."""
    cells, relation = phase_space(space, operator), operator.relation
    if relation is None:
        return Growing(local_mass.family(space, operator, cells, count), cells)
    bottom, top = (float(relation.value(np.array(e))) for e in (cells.bottom_eV, cells.energy_of(count)))
    return Plain(build(space, operator), relation, bottom - 1e-3 * (top - bottom))


@dataclass(frozen=True, eq=False)
class Followed:
    """Modes at a wave number: energies (m,) and states (unknowns, m) of norm 1."""

    k_per_nm: float
    energy_eV: Array
    states: NDArray[Any]


def started(channel: Moving, states: NDArray[Any]) -> Followed:
    """Modes at k = 0."""
    return Followed(0.0, channel.means(0.0, states), states)


def followed(channel: Moving, at: Followed, k_per_nm: float, band_eV: Array, tolerance_eV: float) -> Followed:
    """The same modes at another wave number.

    Each is the state at its band's energy; phases, and the frame in a level, are as close to the modes before as they
    can be (parallel transport).

    Parameters
    ----------
    band_eV : (m,) energies of the modes' bands there.
    tolerance_eV : energies that are no farther apart are one level.
    """
    if isinstance(channel, Plain) and channel.uniform:
        return _risen(channel, at, k_per_nm)
    from scipy.optimize import linear_sum_assignment

    energy, found = channel.lowest(k_per_nm, float(band_eV.max()) + tolerance_eV, at.states)
    overlap = found.conj().T @ (channel.mass @ at.states)
    level = np.concatenate([[0], np.cumsum(np.diff(energy) > tolerance_eV)])
    held = np.zeros((int(level[-1]) + 1, len(band_eV)))
    np.add.at(held, level, np.abs(overlap) ** 2)
    # Energies tell the states, and where these are too close the likeness does.
    apart = np.abs(energy[:, None] - band_eV) / tolerance_eV - held[level]
    rows, columns = linear_sum_assignment(apart)
    place = np.empty(len(band_eV), dtype=np.int64)
    place[columns] = level[rows]
    states, energies = np.empty((len(found), len(band_eV)), dtype=found.dtype), np.empty(len(band_eV))
    for number in np.unique(place):
        # A level goes on as a whole, in whatever frame the solver returned it.
        own, modes = np.flatnonzero(level == number), np.flatnonzero(place == number)
        left, _, right = np.linalg.svd(overlap[np.ix_(own, modes)], full_matrices=False)
        turn = left @ right
        states[:, modes] = found[:, own] @ turn
        energies[modes] = energy[own] @ np.abs(turn) ** 2
    return Followed(k_per_nm, energies, states / np.sqrt(_squares(states, channel.mass)))


def _risen(channel: Plain, at: Followed, k_per_nm: float) -> Followed:
    """Where one mass holds all over the section only energies change."""
    rate = channel.pencil.uniform_axial_eV_nm2
    assert rate is not None
    value = channel.relation.value(at.energy_eV) + rate * (k_per_nm**2 - at.k_per_nm**2)
    return replace(at, k_per_nm=k_per_nm, energy_eV=channel.relation.energy(value))


def _squares(states: NDArray[Any], mass: Any) -> Array:
    return np.asarray(np.einsum("im,im->m", states.conj(), mass @ states).real)
