"""Conductance with a transmission, linear and at a finite drain voltage; contacts in series."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.describe.operation import Transport
from wiresolve.errors import InputError
from wiresolve.physics.fermi import checked_temperature
from wiresolve.physics.rounded import ramp, ramp_window, step, window
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.transmission import Transmission, transmission_of
from wiresolve.physics.transport import conductance as ballistic
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB, RESISTANCE_QUANTUM_OHM

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Openings:
    """Where the modes that run in one direction open (or close), spin-resolved.

    `energy_eV` (t,), `modes` (t,) how many open there (negative where they close), `subband` (t,) to which subband,
    counted from 0, they belong. `ramp_eV`, `ramp_per_eV` (q,): from there on the number of modes grows by so many an eV
    more, for the further subbands that are counted only.
    """

    energy_eV: Array
    modes: Array
    subband: NDArray[np.int_]
    ramp_eV: Array
    ramp_per_eV: Array

    @property
    def beyond(self) -> int:
        """The number that stands for all subbands that are counted only."""
        return int(self.subband.max()) + 1


def openings(spectrum: Spectrum) -> Openings:
    """Those of a spectrum: bands with several extrema open and close modes, the tail goes on in straight lines."""
    energies, modes, subband = [], [], []
    for n, (energy, degeneracy, band) in enumerate(
        zip(spectrum.energy_eV, spectrum.degeneracy, spectrum.bands, strict=True)
    ):
        at = np.array([energy]) if band is None else band.turning_eV
        energies.append(at)
        modes.append(degeneracy * (np.ones(1) if band is None else band.turning_modes))
        subband.append(np.full(at.size, n))
    tail = spectrum.tail
    ramps = (np.zeros(0), np.zeros(0))
    if tail is not None:
        slopes = np.diff(tail.modes) / np.diff(tail.energy_eV)
        ramps = (tail.energy_eV[:-1], np.diff(slopes, prepend=0.0))
    return Openings(np.concatenate(energies), np.concatenate(modes), np.concatenate(subband), *ramps)


def openings_of_rows(energy_eV: ArrayLike, degeneracy: ArrayLike) -> Openings:
    """Those of plain rows, (n,) each: subbands with one minimum, degeneracy = spin times valley."""
    energy = np.atleast_1d(np.asarray(energy_eV, dtype=float))
    modes = np.broadcast_to(np.asarray(degeneracy, dtype=float), energy.shape)
    return Openings(energy, np.array(modes), np.arange(energy.size), np.zeros(0), np.zeros(0))


def transmitted_conductance(
    modes: Openings, transmission: Transmission, fermi_eV: ArrayLike, temperature_K: float
) -> Array:
    """Linear conductance in units of G0 = 2 e^2/h, of the shape of `fermi_eV`; T = 0 is exact.

    G/G0 = sum (g/2) int T(E) (-df/dE) dE (R. Landauer, IBM J. Res. Dev. 1, 223 (1957); M. Buettiker, Phys. Rev. Lett.
    57, 1761 (1986)): closed where T is a step, to 1e-14 where tunnelling rounds it.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    thermal, width = KB * float(checked_temperature(temperature_K)), transmission.width_eV
    fermi = np.asarray(fermi_eV, dtype=float)
    weights = modes.modes * transmission.part(modes.subband)
    total = step(fermi[..., None] - modes.energy_eV, thermal, width) @ weights
    if modes.ramp_eV.size:
        grown = ramp(fermi[..., None] - modes.ramp_eV, thermal, width) @ modes.ramp_per_eV
        total = total + np.maximum(grown, 0.0) * transmission.part(modes.beyond)
    return np.asarray(total / 2)


def conductance_through(
    spectrum: Spectrum, fermi_eV: ArrayLike, temperature_K: float, given: Transport | None
) -> Array:
    """Linear conductance of a spectrum in units of G0, with the transmission and the contacts that were described.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    if given is None or given.is_open:
        return ballistic(spectrum, fermi_eV, temperature_K)
    through = transmitted_conductance(openings(spectrum), transmission_of(given), fermi_eV, temperature_K)
    return in_series(through, given.contact_resistance_ohm)


def in_series(conductance_G0: ArrayLike, contact_resistance_ohm: float) -> Array:
    """1/(1/G + R) in units of G0, R being the resistance of all contacts together in ohm.

    Raises
    ------
    InputError : for a resistance below zero.
    """
    resistance = _checked_resistance(contact_resistance_ohm)
    conductance = np.asarray(conductance_G0, dtype=float)
    return np.asarray(conductance / (1 + conductance * resistance / RESISTANCE_QUANTUM_OHM))


def current(
    modes: Openings,
    transmission: Transmission,
    fermi_eV: ArrayLike,
    drain_V: ArrayLike,
    temperature_K: float,
    *,
    lowered_part: float,
    contact_resistance_ohm: float = 0.0,
) -> Array:
    """Current in A at a finite drain voltage; `fermi_eV` (the source's) and `drain_V` broadcast, T = 0 is exact.

    I = (2 e/h) sum (g/2) int T(E) (f_S - f_D) dE, f_D with the drain's Fermi level at `fermi_eV` - e V.

    Parameters
    ----------
    lowered_part : which part of the drain voltage lowers the subbands where they decide (at the top of the barrier):
        0 keeps them with the source, 1/2 is the symmetric drop on both sides of a constriction.
    contact_resistance_ohm : in series; the constriction then gets V - R I of the drain voltage.

    Raises
    ------
    InputError : for a temperature or a resistance below zero, or a part outside 0 to 1.
    """
    resistance = _checked_resistance(contact_resistance_ohm)
    fermi, drain = np.broadcast_arrays(np.asarray(fermi_eV, dtype=float), np.asarray(drain_V, dtype=float))
    whole = _current(modes, transmission, fermi, drain, temperature_K, lowered_part)
    if resistance == 0:
        return whole
    # V = v + R I(v) rises with v, which lies between 0 and V
    inner, low, high = drain / (1 + resistance * _chord(whole, drain)), np.minimum(drain, 0.0), np.maximum(drain, 0.0)
    through = whole
    for _ in range(200):
        through = _current(modes, transmission, fermi, inner, temperature_K, lowered_part)
        slope = differential_conductance(modes, transmission, fermi, inner, temperature_K, lowered_part=lowered_part)
        excess = inner + resistance * through - drain
        low, high = np.where(excess <= 0, inner, low), np.where(excess >= 0, inner, high)
        following = inner - excess / (1 + resistance * CONDUCTANCE_QUANTUM_SIEMENS * slope)
        following = np.where((following > low) & (following < high), following, (low + high) / 2)
        settled = np.abs(following - inner) <= 4e-16 * np.abs(drain)
        inner = following
        if settled.all():
            break
    return through


def differential_conductance(
    modes: Openings,
    transmission: Transmission,
    fermi_eV: ArrayLike,
    drain_V: ArrayLike,
    temperature_K: float,
    *,
    lowered_part: float,
) -> Array:
    """dI/dV in units of G0 at a finite drain voltage; the arguments are those of `current`, without contacts.

    (1 - p) G(E_F - e V + p e V) + p G(E_F + p e V), each G counted from the unmoved subbands: for p = 1/2 plateaus at
    half the quantum where only one of the two Fermi levels has passed an opening (L. I. Glazman and A. V. Khaetskii,
    Europhys. Lett. 9, 263 (1989), from memory).

    Raises
    ------
    InputError : for a temperature below zero, or a part outside 0 to 1.
    """
    part = _checked_part(lowered_part)
    fermi, drain = np.asarray(fermi_eV, dtype=float), np.asarray(drain_V, dtype=float)
    from_source = transmitted_conductance(modes, transmission, fermi + part * drain, temperature_K)
    from_drain = transmitted_conductance(modes, transmission, fermi - (1 - part) * drain, temperature_K)
    return np.asarray(part * from_source + (1 - part) * from_drain)


def _current(
    modes: Openings,
    transmission: Transmission,
    fermi: Array,
    drain: Array,
    temperature_K: float,
    lowered_part: float,
) -> Array:
    part = _checked_part(lowered_part)
    thermal, width = KB * float(checked_temperature(temperature_K)), transmission.width_eV
    drain_side, drain = (fermi - (1 - part) * drain)[..., None], drain[..., None]
    weights = modes.modes * transmission.part(modes.subband)
    total = window(drain_side - modes.energy_eV, drain, thermal, width) @ weights
    if modes.ramp_eV.size:
        below = drain_side - modes.ramp_eV
        grown = ramp_window(below + drain, below, thermal, width)
        total = total + (grown @ modes.ramp_per_eV) * transmission.part(modes.beyond)
    return np.asarray(CONDUCTANCE_QUANTUM_SIEMENS * total / 2)


def _chord(through: Array, drain: Array) -> Array:
    return np.where(drain == 0, 0.0, through / np.where(drain == 0, 1.0, drain))


def _checked_resistance(contact_resistance_ohm: float) -> float:
    if not (np.isfinite(contact_resistance_ohm) and contact_resistance_ohm >= 0):
        rule = "must be zero or positive"
        raise InputError("contact_resistance", rule, contact_resistance_ohm, "give ohm, e.g. 500")
    return float(contact_resistance_ohm)


def _checked_part(part: float) -> float:
    if not 0 <= part <= 1:
        raise InputError("lowered_part", "must lie between 0 and 1", part, "0.5 is the symmetric drop")
    return float(part)
