"""At which gate voltage each level passes the Fermi level, how rounded that is, and the threshold of a sweep."""

from __future__ import annotations

from dataclasses import dataclass
from math import acosh, hypot, log, pi, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.physics.fermi import checked_temperature
from wiresolve.units import KB

Array = NDArray[np.float64]

THERMAL_WIDTH_KT = 4 * log(1 + sqrt(2))
"""Full width at half maximum of -df/dE in kT: 3.53."""
_SADDLE_WIDTH = 2 * acosh(sqrt(2)) / pi
"""Full width at half maximum of dT/dE of a saddle in hbar omega: 0.561."""
_HALVINGS = 60


def step_width_eV(temperature_K: float, saddle_curvature_eV: float | None = None) -> float:
    """Full width at half height of one step's dG/dE: 3.53 kT, and 0.561 hbar omega of a saddle, their squares added."""
    return hypot(THERMAL_WIDTH_KT * KB * temperature_K, _SADDLE_WIDTH * (saddle_curvature_eV or 0.0))


@dataclass(frozen=True, eq=False)
class GateSteps:
    """Of each level (n,); NaN where the sweep does not reach it.

    `voltage_V` where the level passes the Fermi level, `coupling` -dE/dV there, `width_V` the full width at half height
    of the peak of dG/dV (3.53 kT over the coupling), `error_V` the level's own bar over the coupling.
    """

    voltage_V: Array
    coupling: Array
    width_V: Array
    error_V: Array


def gate_steps(
    gate_voltage_V: ArrayLike,
    level_energy_eV: ArrayLike,
    coupling: ArrayLike,
    error_eV: ArrayLike,
    temperature_K: float,
) -> GateSteps:
    """The steps of a sweep, between its points by cubic Hermite pieces through energies and slopes.

    Parameters
    ----------
    gate_voltage_V : (p,) ascending, two or more.
    level_energy_eV : (p, n) from the source's Fermi level; NaN where a point failed.
    coupling : (p, n) -dE/dV of each level.
    error_eV : (p, n) bars of the levels.

    Raises
    ------
    InputError : for arrays that do not fit, voltages that do not ascend, or a temperature below zero.
    """
    temperature = float(checked_temperature(temperature_K))
    voltage = _ascending(gate_voltage_V)
    energy, slope, bar = (np.asarray(a, dtype=float) for a in (level_energy_eV, coupling, error_eV))
    for name, array in (("level_energy_eV", energy), ("coupling", slope), ("error_eV", bar)):
        if array.ndim != 2 or array.shape != (voltage.size, energy.shape[-1]):
            raise InputError(name, "must have a row a sweep point and a column a level", array.shape)
    found = np.full((4, energy.shape[1]), np.nan)
    for n in range(energy.shape[1]):
        kept = np.isfinite(energy[:, n]) & np.isfinite(slope[:, n])
        found[:3, n] = _crossing(voltage[kept], energy[kept, n], -slope[kept, n], bar[kept, n])
    with np.errstate(divide="ignore", invalid="ignore"):
        found[3] = THERMAL_WIDTH_KT * KB * temperature / found[1]
        return GateSteps(found[0], found[1], found[3], found[2] / found[1])


def threshold_by_first_level_V(steps: GateSteps) -> float:
    """Threshold as the gate voltage at which the lowest level passes the Fermi level; NaN where none does."""
    reached = steps.voltage_V[np.isfinite(steps.voltage_V)]
    return float(reached.min()) if reached.size else float("nan")


def threshold_by_extrapolation_V(gate_voltage_V: ArrayLike, quantity: ArrayLike, slope: ArrayLike) -> float:
    """Threshold by linear extrapolation: where the tangent at the steepest point of the sweep meets zero.

    The usual definition for a current or a conductance; for a line density it is the start of its linear rise. D. K.
    Schroder, Semiconductor Material and Device Characterization (Wiley, 2006), section 4.8 (from memory).

    Parameters
    ----------
    gate_voltage_V, quantity, slope : (p,) ascending voltages, what is measured, and its derivative by the voltage (as
        the transconductance, or the capacitance for a line density).

    Raises
    ------
    InputError : for voltages that do not ascend, or a quantity that never rises.
    """
    voltage = _ascending(gate_voltage_V)
    value, steep = np.asarray(quantity, dtype=float), np.asarray(slope, dtype=float)
    known = np.isfinite(value) & np.isfinite(steep)
    if not (steep[known] > 0).any():
        raise InputError("slope", "must be positive somewhere in the sweep", None, "sweep farther")
    at = int(np.argmax(np.where(known, steep, -np.inf)))
    return float(voltage[at] - value[at] / steep[at])


def threshold_by_constant_density_V(gate_voltage_V: ArrayLike, density_per_nm: ArrayLike, at_per_nm: float) -> float:
    """Threshold as the gate voltage at which a given line density is reached, its logarithm straight between points.

    NaN where the sweep does not pass it.

    Raises
    ------
    InputError : for voltages that do not ascend, or a density that is not positive.
    """
    voltage = _ascending(gate_voltage_V)
    if not at_per_nm > 0:
        raise InputError("at_per_nm", "must be positive", at_per_nm, "give carriers per nm, e.g. 1e-4")
    density = np.asarray(density_per_nm, dtype=float)
    kept = density > 0
    logarithm, voltage = np.log(density[kept]) - log(at_per_nm), voltage[kept]
    passed = np.flatnonzero((logarithm[:-1] < 0) & (logarithm[1:] >= 0))
    if not passed.size:
        return float("nan")
    i = int(passed[0])
    part = -logarithm[i] / (logarithm[i + 1] - logarithm[i])
    return float(voltage[i] + part * (voltage[i + 1] - voltage[i]))


def _crossing(voltage: Array, energy: Array, slope: Array, bar: Array) -> tuple[float, float, float]:
    """Voltage, coupling and bar where the energy first falls through zero; NaN where it does not."""
    passed = np.flatnonzero((energy[:-1] > 0) & (energy[1:] <= 0))
    if not passed.size:
        return (np.nan,) * 3
    i = int(passed[0])
    width = voltage[i + 1] - voltage[i]
    first, last, left, right = energy[i], energy[i + 1], width * slope[i], width * slope[i + 1]
    rise = last - first
    second, third = 3 * rise - 2 * left - right, left + right - 2 * rise
    low, high = 0.0, 1.0
    for _ in range(_HALVINGS):
        t = (low + high) / 2
        above = first + t * (left + t * (second + t * third)) > 0
        low, high = (t, high) if above else (low, t)
    t = (low + high) / 2
    steep = (left + t * (2 * second + 3 * t * third)) / width
    return float(voltage[i] + t * width), float(-steep), float(bar[i] + t * (bar[i + 1] - bar[i]))


def _ascending(gate_voltage_V: ArrayLike) -> Array:
    voltage = np.asarray(gate_voltage_V, dtype=float)
    if voltage.ndim != 1 or voltage.size < 2 or not (np.diff(voltage) > 0).all():
        raise InputError("gate_voltage_V", "must be two ascending voltages or more", voltage.shape)
    return voltage
