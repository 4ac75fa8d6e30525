"""Dopants of which only a part is charged: it follows the potential."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit

from wiresolve.units import KB

Array = NDArray[np.float64]

COLDEST_K = 1.0
DONOR_STATES, ACCEPTOR_STATES = 2.0, 4.0
"""How many states a neutral donor, and a neutral acceptor, has: common practice for s-like donors and cubic valence
bands."""


@dataclass(frozen=True, eq=False)
class Dopants:
    """Donors and acceptors with levels, in some cells.

    N+ = N / (1 + 2 exp((E_F - E_D)/kT)) and N- = N / (1 + 4 exp((E_A - E_F)/kT)) (S. M. Sze, Physics of Semiconductor
    Devices, ch. 1), with E_D and E_A lowered by the potential and E_F = 0. Colder ones are taken at `COLDEST_K`, below
    which nothing changes but the sharpness of a step that no iteration could follow.

    Attributes
    ----------
    donors_per_nm3, donor_eV, acceptors_per_nm3, acceptor_eV : (k,) densities, and levels at zero potential, by cell.
    """

    donors_per_nm3: Array
    donor_eV: Array
    acceptors_per_nm3: Array
    acceptor_eV: Array
    temperature_K: float

    def charge(self, potential_V: Array) -> tuple[Array, Array]:
        """(k, q) charge in e/nm^3 and its derivative by the potential, for a potential (k, q)."""
        density, slope = np.zeros(potential_V.shape), np.zeros(potential_V.shape)
        thermal = KB * max(self.temperature_K, COLDEST_K)
        for dopants, level, sign, states in (
            (self.donors_per_nm3, self.donor_eV, 1.0, DONOR_STATES),
            (self.acceptors_per_nm3, self.acceptor_eV, -1.0, ACCEPTOR_STATES),
        ):
            some = np.flatnonzero(dopants)
            if not len(some):
                continue
            # How far the level lies above the Fermi level (donors: then charged), or below it (acceptors).
            height = sign * (level[some, None] - potential_V[some])
            part = expit(height / thermal - np.log(states))
            density[some] += sign * dopants[some, None] * part
            slope[some] -= dopants[some, None] * part * (1 - part) / thermal
        return density, slope
