"""The gate voltage at which a subband meets the Fermi level."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from wiresolve.errors import ConvergenceError
from wiresolve.physics.selfconsistent import Balanced

_MOST = 24
_FARTHEST_V = 50.0


@dataclass(frozen=True)
class Opening:
    """Where a subband is at the Fermi level within `rest_eV`, and by how many eV it falls there for each volt."""

    voltage_V: float
    coupling: float
    rest_eV: float


def subband_eV(balanced: Balanced, number: int) -> float:
    """The energy of the subband with a number (from 0) among all that were solved.

    Raises
    ------
    ConvergenceError
        Fewer were solved.
    """
    known = [kept.found.energy_eV for kept in balanced.occupied.kept if kept is not None]
    energy = np.sort(np.concatenate(known)) if known else np.zeros(0)
    if number >= len(energy):
        raise ConvergenceError(f"subband {number + 1} was not solved")
    return float(energy[number])


def opening(
    energy_at: Callable[[float], float],
    start_V: float,
    coupling: float,
    close_eV: float,
    low_V: float = -np.inf,
    high_V: float = np.inf,
) -> Opening:
    """The voltage where an energy that falls with the voltage is zero, by secants that stay in a bracket.

    Parameters
    ----------
    low_V, high_V : where the energy is known to be above and below zero.

    Raises
    ------
    ConvergenceError
        It is not found within 50 V.
    """
    voltage, last = start_V, None
    best = Opening(start_V, coupling, np.inf)
    for _ in range(_MOST):
        energy = energy_at(voltage)
        if energy > 0:
            low_V = max(low_V, voltage)
        else:
            high_V = min(high_V, voltage)
        if last is not None and last[0] != voltage:
            slope = (last[1] - energy) / (voltage - last[0])
            coupling = slope if slope > 0 else coupling
        if abs(energy) < best.rest_eV:
            best = Opening(voltage, coupling, abs(energy))
        if abs(energy) <= close_eV:
            return Opening(voltage, coupling, abs(energy))
        last = voltage, energy
        following = voltage + energy / max(coupling, 1e-9)
        if not low_V < following < high_V:
            following = (low_V + high_V) / 2
        elif np.isfinite(high_V - low_V):
            # A kink lets secants creep from one side: they must take a part of the bracket.
            inset = 0.02 * (high_V - low_V)
            following = min(max(following, low_V + inset), high_V - inset) if abs(energy) > 50 * close_eV else following
        if not np.isfinite(following) or abs(following - start_V) > _FARTHEST_V:
            break
        voltage = following
    if best.rest_eV <= 1e3 * close_eV:
        return best
    raise ConvergenceError(f"no voltage was found at which the subband opens; {best.rest_eV:.2g} eV were left")
