"""The parts of a gate's capacitance: geometry, density of states, and where the charge sits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.physics.fermi import checked_temperature
from wiresolve.physics.transistor import States
from wiresolve.units import EPSILON0_PER_V_NM, FARAD_PER_M

Array = NDArray[np.float64]

QUANTUM_LIMITED_BELOW = 1.0
"""C_quantum / C_geometric below which more than half of a change of the gate voltage moves the levels, and less than
half of it falls over the insulator: that is what the limit is named for."""
_EMPTY = 1e-9
DEEPLY_LIMITED_BELOW = 0.1
"""Below, ten parts of eleven move the levels: the gate voltage reads as an energy scale within a tenth."""


@dataclass(frozen=True, eq=False)
class CapacitanceParts:
    """1/total = 1/geometric + 1/quantum + 1/centroid, each in e/(V nm), of one shape.

    `centroid` is what is left: how far the charge sits from the surface of the channel. It is negative where the charge
    lies nearer to the gate than the geometric part assumes, infinite where it lies just there.
    """

    total_per_V_nm: Array
    geometric_per_V_nm: Array
    quantum_per_V_nm: Array
    centroid_per_V_nm: Array


def in_F_per_m(capacitance_per_V_nm: ArrayLike) -> Array:
    """A capacitance in e/(V nm), in F/m."""
    return np.asarray(np.asarray(capacitance_per_V_nm, dtype=float) * FARAD_PER_M)


def per_V_nm(capacitance_F_per_m: ArrayLike) -> Array:
    """A capacitance in F/m, in e/(V nm)."""
    return np.asarray(np.asarray(capacitance_F_per_m, dtype=float) / FARAD_PER_M)


def quantum_capacitance_per_V_nm(states: States, fermi_eV: ArrayLike, temperature_K: float) -> Array:
    """e^2 dn/dE_F in e/(V nm), of the shape of `fermi_eV` (S. Luryi, Appl. Phys. Lett. 52, 501 (1988)).

    N F_(-3/2)/kT for parabolas; at T = 0 the density of states: infinite on an opening, 0 below all of them.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = float(checked_temperature(temperature_K))
    return np.asarray(states.slope(np.asarray(fermi_eV, dtype=float), temperature).sum(axis=0))


def parts(total_per_V_nm: ArrayLike, geometric_per_V_nm: ArrayLike, quantum_per_V_nm: ArrayLike) -> CapacitanceParts:
    """The series: the total dN/dV, that of the empty section, and e^2 dn/dE_F; broadcast.

    An infinite part takes no voltage; where the total or the quantum part is 0 (an empty wire) the centroid is NaN.
    """
    total, geometric, quantum = np.broadcast_arrays(
        *(np.asarray(c, dtype=float) for c in (total_per_V_nm, geometric_per_V_nm, quantum_per_V_nm))
    )
    # In an empty wire what is left of two nearly equal numbers is rounding.
    empty = (total == 0) | (quantum <= _EMPTY * np.where(np.isinf(geometric), EPSILON0_PER_V_NM, geometric))
    with np.errstate(divide="ignore", invalid="ignore"):
        centroid = 1 / (1 / total - 1 / geometric - 1 / quantum)
    return CapacitanceParts(total, geometric, quantum, np.where(empty, np.nan, centroid))


def is_quantum_limited(quantum_per_V_nm: ArrayLike, geometric_per_V_nm: ArrayLike) -> NDArray[np.bool_]:
    """Whether the density of states, not the insulator, decides how the gate fills the channel; broadcast."""
    ratio = np.asarray(quantum_per_V_nm, dtype=float) / np.asarray(geometric_per_V_nm, dtype=float)
    return np.asarray(ratio < QUANTUM_LIMITED_BELOW)


def limit_text(quantum_per_V_nm: float, geometric_per_V_nm: float) -> str:
    """ "deep in the quantum-capacitance limit", "in the quantum-capacitance limit" or "limited by its geometry"."""
    ratio = quantum_per_V_nm / geometric_per_V_nm
    if ratio < DEEPLY_LIMITED_BELOW:
        return "deep in the quantum-capacitance limit"
    return "in the quantum-capacitance limit" if ratio < QUANTUM_LIMITED_BELOW else "limited by its geometry"
