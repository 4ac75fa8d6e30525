"""Ballistic conductance of a wire and how well its steps are resolved."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.physics.fermi import checked_temperature, occupation
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import tail_matters
from wiresolve.physics.step_contrast import contrasts, falls_below_at
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

Array = NDArray[np.float64]

PLATEAU_CONTRAST = 0.9
"""dG/dmu between two steps falls to a tenth of the peaks or less: the conductance is flat for the eye and the
instrument. Two equal steps reach it near 8.7 kT (10 kT gives 0.95)."""
SHOULDER_CONTRAST = 0.2
"""Below, dG/dmu shows one bump where there are two steps: 0.22 is what two equal steps 4 kT apart leave."""
HIGHEST_TEMPERATURE_K = 1000.0
"""Limits are searched up to here; a wire that is hotter is no longer the same crystal."""


def conductance(spectrum: Spectrum, fermi_eV: ArrayLike, temperature_K: float) -> Array:
    """Linear ballistic conductance in units of G0 = 2 e^2/h, of the shape of `fermi_eV`; T = 0 is exact.

    G/G0 = int M(E) (-df/dE) dE / 2 with the number M(E) of spin-resolved modes that run in one direction (R. Landauer,
    IBM J. Res. Dev. 1, 223 (1957); thermal rounding: P. F. Bagwell and T. P. Orlando, Phys. Rev. B 40, 1456 (1989)).
    M is constant between the energies at which modes open or close, so the integral is a sum of Fermi functions there:
    sum (g_s g_v / 2) f(E_n) for parabolas. The semiclassical tail of further subbands is included. Every mode is
    transmitted; contacts add nothing.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = float(checked_temperature(temperature_K))
    fermi = np.asarray(fermi_eV, dtype=float)
    energy, modes = spectrum.thresholds
    flat = fermi.ravel()
    total = np.asarray(modes @ occupation(energy[:, None], flat, temperature) / 2)
    matters = tail_matters(spectrum, flat, np.asarray(temperature))
    if spectrum.tail is not None and matters.any():
        total[matters] += spectrum.tail.mean_modes(flat[matters], temperature) / 2
    return total.reshape(fermi.shape)


def in_siemens(G_over_G0: ArrayLike) -> Array:
    """A conductance in units of G0 = 2 e^2/h, in siemens."""
    return np.asarray(np.asarray(G_over_G0, dtype=float) * CONDUCTANCE_QUANTUM_SIEMENS)


def kind_of_step(contrast: float) -> str:
    """What a contrast means: "plateau" (>= 0.9), "shoulder" (>= 0.2) or "merged"."""
    if contrast >= PLATEAU_CONTRAST:
        return "plateau"
    return "shoulder" if contrast >= SHOULDER_CONTRAST else "merged"


def steps(spectrum: Spectrum, temperature_K: float) -> tuple[dict[str, Any], ...]:
    """The conductance steps of the listed levels at one temperature, each with what follows it.

    Each dict holds `level`, `opens_at_eV`, `opens_error_eV`, `height_G0`, `plateau_G0` (the T = 0 conductance midway to
    the next level), `spacing_to_next_eV`, `spacing_over_kT` (None at T = 0), `contrast` and `kind` of the flat part
    between this step and the next. The contrast is 1 - dip/peak, the dip of dG/dmu between the two steps and the
    smaller of its values at the two steps, of the whole spectrum; 0 where it does not dip. Both are None for a level
    with none above it. At T = 0 all steps are plateaus.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = float(checked_temperature(temperature_K))
    levels, bottoms, tops = _levels(spectrum)
    gaps = min(levels.size, bottoms.size - 1)
    energy, modes = spectrum.thresholds
    contrast = np.ones(gaps)
    if temperature > 0:
        kT = np.full(gaps, KB * temperature)
        contrast = contrasts(energy, modes, bottoms[:gaps], bottoms[1 : gaps + 1], kT)
    opened = [1.0 if band is None else band.turning_modes[np.argmin(band.turning_eV)] for band in spectrum.bands]
    heights = np.array(opened) * spectrum.degeneracy / 2
    middles = tops[: levels.size] + 1e-9
    middles[:gaps] = (tops[:gaps] + bottoms[1 : gaps + 1]) / 2
    plateaus = conductance(spectrum, middles, 0.0)
    table = []
    for index, level in enumerate(levels):
        members = spectrum.level == level
        followed = index < gaps
        spacing = float(bottoms[index + 1] - bottoms[index]) if followed else None
        table.append(
            {
                "level": int(level),
                "opens_at_eV": float(bottoms[index]),
                "opens_error_eV": float(spectrum.error_eV[members].max()),
                "height_G0": float(heights[members].sum()),
                "plateau_G0": float(plateaus[index]),
                "spacing_to_next_eV": spacing,
                "spacing_over_kT": spacing / (KB * temperature) if spacing is not None and temperature else None,
                "contrast": float(contrast[index]) if followed else None,
                "kind": kind_of_step(float(contrast[index])) if followed else None,
            }
        )
    return tuple(table)


def step_limits(spectrum: Spectrum) -> tuple[dict[str, Any], ...]:
    """Up to which temperature the flat part after each listed level stays a plateau, and at least a shoulder.

    Each dict holds `level`, `plateau_up_to_K`, `shoulder_up_to_K`; HIGHEST_TEMPERATURE_K stands for "there or above".
    """
    levels, bottoms, _ = _levels(spectrum)
    gaps = min(levels.size, bottoms.size - 1)
    energy, modes = spectrum.thresholds
    limits = (
        falls_below_at(
            energy,
            modes,
            bottoms[:gaps],
            bottoms[1 : gaps + 1],
            (PLATEAU_CONTRAST, SHOULDER_CONTRAST),
            KB * HIGHEST_TEMPERATURE_K,
        )
        / KB
    )
    return tuple(
        {"level": int(level), "plateau_up_to_K": float(limits[0, i]), "shoulder_up_to_K": float(limits[1, i])}
        for i, level in enumerate(levels[:gaps])
    )


def _levels(spectrum: Spectrum) -> tuple[NDArray[np.int_], Array, Array]:
    """Numbers of the listed levels; lowest and highest energy of every level, extra states' levels after them."""
    numbers, first = np.unique(spectrum.level, return_index=True)
    last = np.append(first[1:], spectrum.level.size) - 1
    listed = numbers[numbers <= spectrum.level[spectrum.listed - 1]]
    return listed, spectrum.energy_eV[first], spectrum.energy_eV[last]
