"""Thin (non-degenerate) carriers: shares of the levels, effective dimension."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.physics.fermi import checked_temperature
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import effective_states, line_density_by_subband, tail_density
from wiresolve.units import KB

Array = NDArray[np.float64]

_COLDEST_K = 1e-7
"""Stands for T = 0 in shares of thin carriers: kT = 9e-12 eV, below any spacing that a solver resolves."""
_EMPTY_PER_NM = 1e-290
"""Line density below which shares would be lost to underflow."""


@dataclass(frozen=True, eq=False)
class BoltzmannSums:
    """Shares of thin carriers and their mean energies, at temperatures of any shape (t).

    `share` (n, t) of each solved subband and `tail_share` (t) of the semiclassical tail add up to 1; `energy_kT` (t) is
    the mean energy above the first subband, axial kinetic energy included, in units of kT.
    """

    share: Array
    tail_share: Array
    energy_kT: Array


def boltzmann_sums(spectrum: Spectrum, temperature_K: ArrayLike) -> BoltzmannSums:
    """Shares and mean energy of carriers so thin that Boltzmann statistics hold; their limit at T = 0.

    A parabola weighs N exp(-(E_n - E_1)/kT) with N = g sqrt(m kT/(2 pi hbar^2)) and holds kT/2 of axial kinetic energy
    a carrier; tables are integrated over k, the tail piecewise over its count.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    given = checked_temperature(temperature_K)
    temperature = np.maximum(given.ravel(), _COLDEST_K)
    above = (spectrum.energy_eV - spectrum.energy_eV[0])[:, None] / (KB * temperature)
    weight = np.zeros(above.shape)
    closed = spectrum.parabolic
    weight[closed] = effective_states(spectrum.axial_mass[closed, None], spectrum.degeneracy[closed, None], temperature)
    axial = np.full(weight.shape, 0.5)
    for index, band in enumerate(spectrum.bands):
        if band is not None:
            length, energy = band.boltzmann(temperature)
            weight[index] = spectrum.degeneracy[index] / pi * length
            axial[index] = energy / length
    weight = weight * np.exp(-above)
    tail, tail_energy = np.zeros(temperature.shape), np.zeros(temperature.shape)
    if spectrum.tail is not None:
        tail, tail_energy = spectrum.tail.boltzmann(float(spectrum.energy_eV[0]), temperature)
    total = weight.sum(axis=0) + tail
    mean = ((weight * (above + axial)).sum(axis=0) + tail_energy) / total
    shape = given.shape
    return BoltzmannSums((weight / total).reshape(-1, *shape), (tail / total).reshape(shape), mean.reshape(shape))


def first_level_share(spectrum: Spectrum, temperature_K: ArrayLike) -> Array:
    """Share of thin carriers in the first level (all its entries), of the shape of `temperature_K`."""
    return np.asarray(boltzmann_sums(spectrum, temperature_K).share[spectrum.level == 1].sum(axis=0))


def first_level_share_at(spectrum: Spectrum, fermi_eV: float, temperature_K: ArrayLike) -> Array:
    """Share of all carriers in the first level at a Fermi level; where none are left, that of thin carriers."""
    density = line_density_by_subband(spectrum, fermi_eV, temperature_K)
    total = density.sum(axis=0) + tail_density(spectrum, fermi_eV, temperature_K)
    empty = total < _EMPTY_PER_NM
    share = density[spectrum.level == 1].sum(axis=0) / np.where(empty, 1.0, total)
    # an empty wire: Boltzmann statistics are exact in the limit
    return np.asarray(np.where(empty, first_level_share(spectrum, temperature_K), share) if empty.any() else share)


def effective_dimension(spectrum: Spectrum, temperature_K: ArrayLike) -> Array:
    """d = 2 <E - E_1>/kT of thin carriers, axial kinetic energy included, of the shape of `temperature_K`.

    Each free direction holds kT/2 (equipartition), so d is 1 for a frozen wire, 2 for a wide thin sheet, 3 for bulk.
    """
    return np.asarray(2 * boltzmann_sums(spectrum, temperature_K).energy_kT)


def direction_dimensions(spectrum: Spectrum, temperature_K: ArrayLike) -> tuple[Array, Array]:
    """What each confined direction adds to d, (directions, t), and the share (t) of thin carriers it is known for.

    Where the section separates, a direction adds 2 <its energy - that of the first subband>/kT; the directions and the
    axial part make up d. The means are over the states with a finite `direction_energy_eV`; (0, t) and 0 without any.
    """
    sums = boltzmann_sums(spectrum, temperature_K)
    energy = spectrum.direction_energy_eV
    if energy is None or not np.isfinite(energy[0]).all():
        return np.zeros((0, *sums.tail_share.shape)), np.zeros(sums.tail_share.shape)
    known = np.isfinite(energy).all(axis=1)
    share = sums.share[known]
    covered = share.sum(axis=0)
    kT = KB * np.maximum(np.asarray(temperature_K, dtype=float), _COLDEST_K)
    return 2 * np.tensordot((energy[known] - energy[0]).T, share, axes=1) / (covered * kT), covered
