"""Subbands above the solved ones, as a smooth number of modes and of states against energy."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.physics.fermi import fermi_integral, reduced_level
from wiresolve.units import KB

Array = NDArray[np.float64]

_FROZEN_ETA = 700.0
"""Beyond, kT F_0 is the distance, or nothing, in double precision."""


@dataclass(frozen=True, eq=False)
class Tail:
    """Further subbands of a channel, counted, not solved; all degeneracies are in the numbers.

    Parameters
    ----------
    energy_eV : (q,) ascending, from the spectrum's energy zero.
    modes : (q,) how many of the subbands have their minima below each energy: from 0 on, not falling.
    states_per_nm : (q,) how many states a length these subbands have below each energy: from 0 on, not falling.
        Between the energies both are straight lines, and the last line goes on.

    Raises
    ------
    InputError : for arrays that do not fit these rules.
    """

    energy_eV: Array
    modes: Array
    states_per_nm: Array

    def __post_init__(self) -> None:
        for name in ("energy_eV", "modes", "states_per_nm"):
            object.__setattr__(self, name, np.asarray(getattr(self, name), dtype=float))
        energy = self.energy_eV
        if energy.ndim != 1 or energy.size < 2 or not (np.isfinite(energy).all() and (np.diff(energy) > 0).all()):
            raise InputError("tails.energy_eV", "must be two ascending energies or more", energy.shape)
        for name in ("modes", "states_per_nm"):
            count = getattr(self, name)
            if count.shape != energy.shape or not np.isfinite(count).all():
                raise InputError(f"tails.{name}", "must have one number for each energy", count.shape)
            if count[0] != 0 or (np.diff(count) < 0).any():
                raise InputError(f"tails.{name}", "must start at 0 and not fall", float(count[0]))

    def line_density(self, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
        """Carriers in 1/nm: the integral of (states below E) x (-df/dE); the arguments broadcast, T = 0 is exact."""
        return _filled(self.energy_eV, self.states_per_nm, fermi_eV, temperature_K)

    def mean_modes(self, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
        """The integral of (modes below E) x (-df/dE); the arguments broadcast, T = 0 is exact."""
        return _filled(self.energy_eV, self.modes, fermi_eV, temperature_K)

    def boltzmann(self, bottom_eV: float, temperature_K: Array) -> tuple[Array, Array]:
        """Sums over the states, in 1/nm, of w = exp(-(E - bottom)/kT) and of w (E - bottom)/kT; (t,), T > 0."""
        kT = KB * temperature_K[:, None]
        x = (self.energy_eV - bottom_eV) / kT
        # The slope s from x on is worth s exp(-x), and s (1 + x) exp(-x) of energy.
        change = _slope_changes(self.energy_eV, self.states_per_nm) * kT * np.exp(-x)
        return change.sum(axis=1), (change * (1 + x)).sum(axis=1)


def added(tails: Sequence[Tail]) -> Tail | None:
    """All tails in one; None where there is none."""
    if len(tails) < 2:
        return tails[0] if tails else None
    energy = np.unique(np.concatenate([t.energy_eV for t in tails]))
    modes, states = (
        np.sum([_at(t.energy_eV, getattr(t, name), energy) for t in tails], axis=0)
        for name in ("modes", "states_per_nm")
    )
    return Tail(energy, modes, states)


def _at(energy: Array, count: Array, at: Array) -> Array:
    slope = (count[-1] - count[-2]) / (energy[-1] - energy[-2])
    return np.asarray(np.interp(at, energy, count) + slope * np.maximum(at - energy[-1], 0.0))


def _filled(energy: Array, count: Array, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """Integral of a piecewise linear count with -df/dE: kT F_0 at each energy where its slope changes."""
    temperature = np.asarray(temperature_K, dtype=float)
    distance = np.asarray(fermi_eV, dtype=float)[..., None] - energy
    filled = np.maximum(distance, 0.0)
    if temperature.any():
        eta = reduced_level(distance, temperature[..., None])
        # Far up a logarithm of 1 + exp(eta) is eta itself, and at T = 0 everywhere.
        near = np.abs(eta) < _FROZEN_ETA
        filled = np.where(near, KB * temperature[..., None] * fermi_integral(0, np.where(near, eta, 0.0)), filled)
    return np.asarray(np.maximum(filled @ _slope_changes(energy, count), 0.0))


def _slope_changes(energy: Array, count: Array) -> Array:
    """By how much the slope of the piecewise linear count changes at each of its points."""
    return np.append(np.diff(np.diff(count) / np.diff(energy), prepend=0.0), 0.0)
