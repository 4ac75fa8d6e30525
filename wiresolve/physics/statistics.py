"""Carriers of a wire in equilibrium: line density, Fermi level, density of states."""

from __future__ import annotations

from dataclasses import dataclass
from math import log, pi

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.physics.fermi import checked_temperature, fermi_integral, reduced_level
from wiresolve.physics.spectrum import Spectrum
from wiresolve.units import HBAR2_OVER_2M0, KB

__all__ = [
    "BinnedStates",
    "Spectrum",
    "density_of_states",
    "effective_states",
    "fermi_integral",
    "fermi_level",
    "line_density",
    "line_density_by_subband",
    "subband_density",
    "tail_density",
]

Array = NDArray[np.float64]

_FROZEN_ETA = 1e8
"""Above this (E_F - E)/kT the thermal correction pi^2/24/eta^2 is below rounding: the T = 0 form is used."""
_TAIL_REACH = 60.0
"""exp(-60) is 1e-26: ten thousand million subbands this many kT up add nothing in double precision."""
_HIGHEST_FERMI_EV = 1e3
"""A Fermi level farther than this above the first subband is no wire's: no effective-mass band reaches there."""


@dataclass(frozen=True, eq=False)
class BinnedStates:
    """Exact averages of the 1D density of states over energy bins, all degeneracies counted.

    `edges_eV` (n + 1,), `per_eV_nm` (n,); the density diverges as an inverse square root at `singular_at_eV`.
    """

    edges_eV: Array
    per_eV_nm: Array
    singular_at_eV: Array


def effective_states(axial_mass: ArrayLike, degeneracy: ArrayLike, temperature_K: ArrayLike) -> Array:
    """N = g sqrt(m kT / (2 pi hbar^2)) in 1/nm (g = spin x valley), broadcast: a parabola holds N F_(-1/2)(eta)."""
    thermal = KB * np.asarray(temperature_K, dtype=float)
    ratio = np.asarray(axial_mass, dtype=float) * thermal / (pi * HBAR2_OVER_2M0)
    return np.asarray(np.asarray(degeneracy) / 2 * np.sqrt(ratio))


def subband_density(
    energy_eV: ArrayLike,
    axial_mass: ArrayLike,
    degeneracy: ArrayLike,
    fermi_eV: ArrayLike,
    temperature_K: ArrayLike,
) -> Array:
    """Line density in 1/nm of parabolic subbands; all arguments broadcast.

    n = N F_(-1/2)((E_F - E)/kT) with N from `effective_states` (J. S. Blakemore, Solid-State Electronics 25, 1067
    (1982), for F_j); at T = 0 it is g k_F / pi, g being spin times valley.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = checked_temperature(temperature_K)
    distance = np.asarray(fermi_eV, dtype=float) - np.asarray(energy_eV, dtype=float)
    wave_number = np.sqrt(np.maximum(distance, 0.0) * np.asarray(axial_mass) / HBAR2_OVER_2M0)
    frozen = np.asarray(degeneracy) / pi * wave_number
    if not temperature.any():
        return np.asarray(frozen)
    eta = reduced_level(distance, temperature)
    cold = (eta > _FROZEN_ETA) | (temperature == 0)
    thermal = effective_states(axial_mass, degeneracy, temperature) * fermi_integral(-0.5, np.where(cold, 0.0, eta))
    return np.asarray(np.where(cold, frozen, thermal))


def line_density_by_subband(spectrum: Spectrum, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """Line density in 1/nm of each solved subband; T = 0 is exact.

    `fermi_eV` and `temperature_K` broadcast; the result has the shape (n,) + theirs.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = checked_temperature(temperature_K)
    fermi, temperature = np.broadcast_arrays(np.asarray(fermi_eV, dtype=float), temperature)
    column = (slice(None),) + (None,) * fermi.ndim
    density = np.empty((spectrum.energy_eV.size, *fermi.shape))
    closed = spectrum.parabolic
    density[closed] = subband_density(
        spectrum.energy_eV[closed][column],
        spectrum.axial_mass[closed][column],
        spectrum.degeneracy[closed][column],
        fermi,
        temperature,
    )
    for index, band in enumerate(spectrum.bands):
        if band is not None:
            density[index] = spectrum.degeneracy[index] / pi * band.occupied_length(fermi, temperature)
    return density


def tail_density(spectrum: Spectrum, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """Line density in 1/nm of the further subbands that are counted only; the arguments broadcast, T = 0 is exact.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = checked_temperature(temperature_K)
    fermi, temperature = np.broadcast_arrays(np.asarray(fermi_eV, dtype=float), temperature)
    tail = spectrum.tail
    return np.zeros(fermi.shape) if tail is None else tail.line_density(fermi, temperature)


def tail_matters(spectrum: Spectrum, fermi_eV: Array, temperature_K: Array) -> NDArray[np.bool_]:
    """Where the tail is not lost in the rounding of what the first subband holds or conducts."""
    if spectrum.tail is None:
        return np.zeros(np.broadcast(fermi_eV, temperature_K).shape, dtype=bool)
    reached = np.maximum(fermi_eV, spectrum.energy_eV[0]) + _TAIL_REACH * KB * np.asarray(temperature_K)
    return np.asarray(reached > spectrum.tail.energy_eV[0])


def line_density(spectrum: Spectrum, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """Line density in 1/nm of all states (listed, extra and the tail); the arguments broadcast, T = 0 is exact.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    total = np.asarray(line_density_by_subband(spectrum, fermi_eV, temperature_K).sum(axis=0))
    fermi, temperature = np.broadcast_arrays(np.asarray(fermi_eV, dtype=float), np.asarray(temperature_K, dtype=float))
    matters = tail_matters(spectrum, fermi, temperature)
    if matters.any():
        total[matters] += tail_density(spectrum, fermi[matters], temperature[matters])
    return total


def fermi_level(spectrum: Spectrum, line_density_per_nm: float, temperature_K: float) -> float:
    """Fermi level in eV, from the energy zero, at which all states together hold this line density.

    Raises
    ------
    InputError : for a density that is not positive, or that no Fermi level within 1000 eV of the first subband gives.
    """
    from scipy.optimize import brentq

    temperature = float(checked_temperature(temperature_K))
    target = float(line_density_per_nm)
    if not (np.isfinite(target) and target > 0):
        raise InputError("line_density", "must be positive", line_density_per_nm, "give carriers per nm, e.g. 0.05")
    first = float(spectrum.energy_eV[0])

    def excess(fermi: float) -> float:
        # the logarithm keeps the equation near linear where carriers are thin; the bound stands for "none at all"
        density = float(line_density(spectrum, fermi, temperature))
        return max(log(density / target), -1e3) if density > 0 else -1e3

    low = first
    step = 4 * KB * temperature if temperature > 0 else 1e-3
    while temperature > 0 and excess(low) > 0:
        low -= step
        step *= 2
    high = first + step
    while excess(high) < 0:
        step *= 2
        high = first + step
        if step > _HIGHEST_FERMI_EV:
            rule = "is more than the wire's bands can hold"
            raise InputError("line_density", rule, line_density_per_nm, "give carriers per nm, e.g. 0.05")
    return float(brentq(excess, low, high, xtol=1e-15, rtol=4 * np.finfo(float).eps, maxiter=500))


def density_of_states(spectrum: Spectrum, edges_eV: ArrayLike) -> BinnedStates:
    """Exact bin averages of the density of states of the solved subbands (the tail, which has no edges, left out).

    Each is the difference of the numbers of states below the bin's two edges over its width, so the inverse
    square-root edges lose nothing and nothing is smoothed.

    Parameters
    ----------
    edges_eV : (m + 1,) ascending bin edges. Choose them up to the last solved subband: what lies above is not there.

    Raises
    ------
    InputError : for edges that do not ascend.
    """
    edges = np.asarray(edges_eV, dtype=float)
    if edges.ndim != 1 or edges.size < 2 or not (np.diff(edges) > 0).all():
        raise InputError("edges_eV", "must be two ascending energies or more", edges_eV)
    count = line_density_by_subband(spectrum, edges, 0.0).sum(axis=0)
    singular = [spectrum.energy_eV[spectrum.parabolic]]
    singular += [band.turning_eV[band.singular] for band in spectrum.bands if band is not None]
    return BinnedStates(edges, np.diff(count) / np.diff(edges), np.unique(np.concatenate(singular)))
