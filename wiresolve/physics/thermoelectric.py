"""Seebeck coefficient and the electrons' thermal conductance of a wire, from its modes and their transmission.

With L_j = sum (g/2) int T(E) ((E - E_F)/kT)^j (-df/dE) dE: G = G0 L_0, S = -(k/e) L_1/L_0 and
kappa = G0 (k/e)^2 T (L_2 - L_1^2/L_0) (U. Sivan and Y. Imry, Phys. Rev. B 33, 551 (1986); R. Kim, S. Datta and
M. S. Lundstrom, J. Appl. Phys. 105, 034506 (2009)).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.physics.conductance import Openings, transmitted_conductance
from wiresolve.physics.fermi import checked_temperature, fermi_integral
from wiresolve.physics.rounded import log_density, nodes
from wiresolve.physics.transmission import Transmission
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

Array = NDArray[np.float64]

LORENZ_V2_PER_K2: float = pi**2 / 3 * KB**2
"""pi^2/3 (k/e)^2: kappa/(G T) of a metal, and of a wire on its plateaus."""
THERMAL_QUANTUM_W_PER_K2: float = CONDUCTANCE_QUANTUM_SIEMENS / 2 * LORENZ_V2_PER_K2
"""pi^2 k^2/(3 h): thermal conductance over temperature of one spin-resolved mode (L. G. C. Rego and G. Kirczenow, Phys.
Rev. Lett. 81, 232 (1998); J. B. Pendry, J. Phys. A 16, 2161 (1983))."""
_THIN = 38.0
"""This many kT above the Fermi level -df/dE is exp(-x) to rounding."""
_FARTHEST = 3e4
"""Nodes go no farther, in units of the narrower width."""
_BLOCK = 1_000_000


@dataclass(frozen=True, eq=False)
class Thermoelectric:
    """Of the shape of the Fermi levels. `power_factor_W_per_K2` is S^2 G."""

    conductance_G0: Array
    seebeck_V_per_K: Array
    thermal_conductance_W_per_K: Array
    power_factor_W_per_K2: Array


def thermoelectric(
    modes: Openings, transmission: Transmission, fermi_eV: ArrayLike, temperature_K: float
) -> Thermoelectric:
    """Conductance, Seebeck coefficient (negative for electrons) and thermal conductance without contacts.

    At T = 0 each is its limit: S = 0 where a mode is open, -(k/e) ln 2/(N - 1/2) where step N of
    equal ones opens, minus infinity below the first opening; kappa = 0.

    Raises
    ------
    InputError : for a temperature below zero.
    """
    temperature = float(checked_temperature(temperature_K))
    fermi = np.asarray(fermi_eV, dtype=float)
    conductance = transmitted_conductance(modes, transmission, fermi, temperature)
    flat = fermi.ravel()
    if temperature == 0:
        ratio = _ratio_at_zero(modes, transmission, flat)
        variance = np.zeros(flat.size)
    else:
        ratio, variance = np.empty(flat.size), np.empty(flat.size)
        count = modes.energy_eV.size + modes.ramp_eV.size
        size = max(1, _BLOCK // max(1, count * _nodes(modes, transmission, flat, KB * temperature).size))
        for start in range(0, flat.size, size):
            here = slice(start, start + size)
            ratio[here], variance[here] = _mean_and_variance(modes, transmission, flat[here], KB * temperature)
    siemens, seebeck = CONDUCTANCE_QUANTUM_SIEMENS * conductance, -KB * ratio.reshape(fermi.shape)
    heat = siemens * KB**2 * temperature * variance.reshape(fermi.shape)
    with np.errstate(invalid="ignore", over="ignore"):
        power = np.where(siemens > 0, siemens * seebeck**2, 0.0)
    return Thermoelectric(conductance, seebeck, heat, power)


def _mean_and_variance(
    modes: Openings, transmission: Transmission, fermi: Array, thermal: float
) -> tuple[Array, Array]:
    """Mean of x = (E - E_F)/kT over T(E) (-df/dE) and its variance, (f,) each; no digit is lost to cancellation.

    Moments are taken about the Fermi level, or about the first opening where that lies above it, and their common
    exponential is taken out, so that carriers as thin as exp(-1e4) have them too.
    """
    width = transmission.width_eV / thermal
    opening = np.concatenate([modes.energy_eV, modes.ramp_eV])
    weights = np.concatenate(
        [
            modes.modes * transmission.part(modes.subband),
            modes.ramp_per_eV * thermal * transmission.part(np.full(modes.ramp_eV.shape, modes.beyond)),
        ]
    )
    grows = np.arange(opening.size) >= modes.energy_eV.size
    y = (opening - fermi[:, None]) / thermal
    t = _nodes(modes, transmission, fermi, thermal)
    if width > 1:
        reference = np.zeros(fermi.size)
        z = (t - y[..., None]) / width
        logarithm = log_density(t) + np.where(grows[:, None], _log_softened(z) + np.log(width), -np.logaddexp(0, -z))
        top = logarithm.max(axis=(1, 2), keepdims=True)
        parts = np.exp(logarithm - top)
        moments = [(parts * t**j).sum(axis=2) @ weights for j in range(3)]
    else:
        reference = np.maximum(y.min(axis=1), 0.0)
        at = y[..., None] + width * t
        raised = np.where(at < _THIN, 0.0, at - _THIN)
        logarithm = log_density(t) - raised
        top = logarithm.max(axis=(1, 2), keepdims=True)
        parts = np.exp(logarithm - top)
        with_steps = _moments(at[:, ~grows] - raised[:, ~grows], raised[:, ~grows] - reference[:, None, None], 0)
        with_ramps = _moments(at[:, grows] - raised[:, grows], raised[:, grows] - reference[:, None, None], 1)
        joined = [np.concatenate([a, b], axis=1) for a, b in zip(with_steps, with_ramps, strict=True)]
        moments = [(parts * m).sum(axis=2) @ weights for m in joined]
    with np.errstate(divide="ignore", invalid="ignore"):
        mean = moments[1] / moments[0]
        variance = np.maximum(moments[2] / moments[0] - mean**2, 0.0)
    return reference + mean, variance


def _moments(y: Array, shift: Array, order: int) -> tuple[Array, Array, Array]:
    """int_y^inf (x + shift)^j (x - y)^order p(x) dx, j = 0, 1, 2, p(x) = 1/(4 cosh^2(x/2)), order 0 or 1.

    About the lower end they are (j + order)! F_(j-1+order)(-y), all positive; for y < 0 p is even in x, so the moments
    of the whole line less those of the mirror image are taken.
    """
    far = np.abs(y)
    f = [fermi_integral(j - 1, -far) for j in range(3 + order)]
    # about the lower end, order raised by one each time
    about = [factor * value for factor, value in zip((1, 1, 2, 6), f, strict=False)][order:]
    above = (
        about[0],
        (y + shift) * about[0] + about[1],
        (y + shift) ** 2 * about[0] + 2 * (y + shift) * about[1] + about[2],
    )
    # K_j(|y|) = int_|y|^inf x^j p dx
    k = [
        f[0],
        far * f[0] + f[1],
        far**2 * f[0] + 2 * far * f[1] + 2 * f[2],
    ]
    k = [1 - k[0], k[1], pi**2 / 3 - k[2]]
    if order:
        third = far**3 * f[0] + 3 * far**2 * f[1] + 6 * far * f[2] + 6 * f[3]
        k = [k[1] + far * k[0], k[2] + far * k[1], third + far * k[2]]
    below = (k[0], k[1] + shift * k[0], k[2] + 2 * shift * k[1] + shift**2 * k[0])
    return tuple(np.where(y >= 0, a, b) for a, b in zip(above, below, strict=True))  # type: ignore[return-value]


def _nodes(modes: Openings, transmission: Transmission, fermi: Array, thermal: float) -> Array:
    """Places at which the narrower of the two widths is summed: of -df/dE, or (mirrored) of the transmission."""
    width = transmission.width_eV
    if width < 1e-18 * thermal:
        return np.zeros(1)
    # what opens farther above the first mode adds nothing
    highest = min(float(np.max(modes.energy_eV)), float(np.min(modes.energy_eV)) + 80 * max(width, thermal))
    deepest = max(highest - float(fermi.min()), 0.0)
    if width > thermal:
        return nodes(thermal, width, deepest, _FARTHEST)
    return -nodes(width, thermal, deepest, _FARTHEST)


def _log_softened(z: Array) -> Array:
    """ln ln (1 + e^z)."""
    thin = z < -_THIN
    return np.where(thin, z, np.log(np.logaddexp(0, np.where(thin, 0.0, z))))


def _ratio_at_zero(modes: Openings, transmission: Transmission, fermi: Array) -> Array:
    """Limit of L_1/L_0."""
    if transmission.width_eV > 0:
        return np.zeros(fermi.size)
    weights = modes.modes * transmission.part(modes.subband)
    distance = fermi[:, None] - modes.energy_eV
    on = (distance == 0) @ weights
    opened = (distance > 0) @ weights + on / 2
    if modes.ramp_eV.size:
        grown = np.maximum(fermi[:, None] - modes.ramp_eV, 0.0) @ modes.ramp_per_eV
        opened = opened + np.maximum(grown, 0.0) * transmission.part(modes.beyond)
    # int_0^inf x p dx = ln 2
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(opened > 0, np.log(2) * on / opened, np.inf)
