"""At which wave number along the wire each subband meets an energy."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics.spectrum import Spectrum
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]

_PASSES = 60


def wave_numbers(spectrum: Spectrum, energy_eV: float) -> Array:
    """(listed,) the largest k in 1/nm at which E(k) of each listed subband is the energy; NaN where it lies higher."""
    found = np.full(spectrum.listed, np.nan)
    rows = zip(spectrum.energy_eV[: spectrum.listed], spectrum.axial_mass, spectrum.bands, strict=False)
    for number, (lowest, mass, band) in enumerate(rows):
        if energy_eV < lowest:
            continue
        if band is None:
            found[number] = np.sqrt((energy_eV - lowest) * mass / HBAR2_OVER_2M0)
            continue
        meeting = [piece for piece in band.pieces if piece.low_eV <= energy_eV <= piece.high_eV]
        if meeting:
            found[number] = max(float(p.wave_number(np.array([energy_eV]), _PASSES)[0]) for p in meeting)
    return found
