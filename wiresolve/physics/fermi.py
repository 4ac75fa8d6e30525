"""Fermi-Dirac integrals and the Fermi function, safe from frozen to strongly degenerate."""

from __future__ import annotations

from functools import cache
from math import pi, sqrt
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import expit, gamma, rgamma, zeta

from wiresolve.errors import InputError
from wiresolve.units import KB

Array = NDArray[np.float64]

_SERIES_TERMS = 23
"""Terms of the accelerated series: its error falls as 5.83^-terms (3e-18 here)."""
_THIN_BELOW = -38.0
"""Below, the second term of the series, exp(eta)/2^(j+1) of the first, is lost in rounding."""
_SHIFT = 8
"""Poles taken out before the asymptotic series is used at |eta + 2 pi i shift| >= 50, where it is exact to 1e-16."""
_ASYMPTOTIC_TERMS = 11
_ASYMPTOTIC_FROM = 2 * pi * _SHIFT


def fermi_integral(order: float, eta: ArrayLike) -> Array:
    """Normalised Fermi-Dirac integral F_j(eta) = 1/Gamma(j+1) int_0^inf x^j / (1 + exp(x - eta)) dx.

    For j <= -1 it is the analytic continuation, dF_j/deta = F_(j-1). As F_j(eta) = -Li_(j+1)(-exp(eta)):

    - eta <= 0: the alternating series in exp(eta) (DLMF 25.12.10), its convergence accelerated to about 20 terms by
      Cohen, Rodriguez Villegas and Zagier, Experimental Mathematics 9, 3 (2000), algorithm 1.
    - eta > 0, whole j: reflection F_j(eta) - (-1)^j F_j(-eta) = polynomial (Blakemore, Solid-State Electronics 25,
      1067 (1982)).
    - eta > 0, half j: the Sommerfeld series at w = eta + 2 pi i K, where it has converged, plus the residues at the
      K poles eta + i pi (2k + 1) that the shift has crossed. The same follows from the relation to Hurwitz's zeta
      function (DLMF 25.12.13) with its Euler-Maclaurin series.

    Relative error below 2e-13 for j <= 1/2, below 2e-12 for j = 3/2, for any eta (cancellation grows with half j).

    Parameters
    ----------
    order : j, a whole or half number from -3/2 to 2.
    eta : reduced Fermi level (E_F - E) / kT, any shape.

    Raises
    ------
    InputError : for another order.
    """
    doubled = round(2 * order)
    if doubled != 2 * order or not -3 <= doubled <= 4:
        raise InputError("order", "must be a whole or half number from -3/2 to 2", order, "use e.g. -0.5")
    argument = np.asarray(eta, dtype=float)
    if doubled == -2:
        return np.asarray(expit(argument))
    if doubled == 0:
        return np.asarray(np.logaddexp(0.0, argument))
    flat = argument.ravel()
    values = np.full(flat.shape, np.nan)
    low = (flat <= 0) & (flat > _THIN_BELOW)
    if low.any():
        values[low] = _from_series(order, flat[low])
    low = flat <= _THIN_BELOW
    if low.any():
        values[low] = np.exp(flat[low])
    if doubled % 2 == 0:
        high = flat > 0
        if high.any():
            values[high] = _sommerfeld(order, flat[high]) + (-1) ** round(order) * _from_series(order, -flat[high])
        return values.reshape(argument.shape)
    middle = (flat > 0) & (flat <= _ASYMPTOTIC_FROM)
    if middle.any():
        values[middle] = _from_poles(order, flat[middle])
    high = flat > _ASYMPTOTIC_FROM
    if high.any():
        values[high] = _sommerfeld(order, flat[high])
    return values.reshape(argument.shape)


def reduced_level(distance_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """eta = distance / kT, broadcast; at T = 0 its limit: minus or plus infinity, and 0 where the distance is 0."""
    distance = np.asarray(distance_eV, dtype=float)
    thermal = KB * np.asarray(temperature_K, dtype=float)
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        eta = distance / thermal
    return np.asarray(np.where(distance == 0, 0.0, eta))


def occupation(energy_eV: ArrayLike, fermi_eV: ArrayLike, temperature_K: ArrayLike) -> Array:
    """Fermi function 1 / (1 + exp((E - E_F)/kT)), broadcast; at T = 0 the step with 1/2 at E = E_F (its limit)."""
    distance = np.asarray(fermi_eV, dtype=float) - np.asarray(energy_eV, dtype=float)
    return np.asarray(expit(reduced_level(distance, temperature_K)))


def checked_temperature(temperature_K: ArrayLike) -> Array:
    """The temperatures in K as an array, if all are finite and none is below zero.

    Raises
    ------
    InputError : otherwise.
    """
    value = np.asarray(temperature_K, dtype=float)
    if not (np.isfinite(value) & (value >= 0)).all():
        raise InputError("temperature", "must be zero or positive", temperature_K, "give kelvin, e.g. 77")
    return value


@cache
def _series_coefficients(order: float) -> tuple[float, ...]:
    """Coefficients of z, z^2, ... in F_j = sum (-1)^n w_n z^(n+1) / (n+1)^(j+1) with the accelerating weights w_n."""
    count = _SERIES_TERMS
    whole = ((3 + sqrt(8)) ** count + (3 - sqrt(8)) ** count) / 2
    term, rest = -1.0, -whole
    coefficients = []
    for n in range(count):
        rest = term - rest
        coefficients.append(rest / whole / (n + 1) ** (order + 1))
        term *= (n + count) * (n - count) / ((n + 0.5) * (n + 1))
    return tuple(coefficients)


@cache
def _sommerfeld_coefficients(order: float) -> tuple[float, ...]:
    """Coefficients of eta^(j+1-2m), m = 0, 1, ...: 2 (1 - 2^(1-2m)) zeta(2m) / Gamma(j + 2 - 2m)."""
    powers = 2.0 * np.arange(1, _ASYMPTOTIC_TERMS)
    factors = np.concatenate([[1.0], 2 * (1 - 2 ** (1 - powers)) * zeta(powers)])
    return tuple(float(c) for c in factors * rgamma(order + 2 - 2.0 * np.arange(_ASYMPTOTIC_TERMS)))


def _from_series(order: float, eta: Array) -> Array:
    z = np.exp(eta)
    total = np.zeros_like(z)
    for coefficient in reversed(_series_coefficients(order)):
        total += coefficient
        total *= z
    return total


def _sommerfeld(order: float, eta: Array) -> Array:
    """The series in eta^-2 on the real axis; a polynomial (exact) for whole orders."""
    coefficients = _sommerfeld_coefficients(order)
    if order == round(order):
        powers = order + 1 - 2 * np.arange(len(coefficients))
        return np.asarray(sum(c * eta**p for c, p in zip(coefficients, powers, strict=True) if c and p >= 0))
    return np.asarray(eta ** (order + 1) * _polynomial(coefficients, eta**-2.0))


def _from_poles(order: float, eta: Array) -> Array:
    residues = np.zeros_like(eta)
    half_steps = round(order + 0.5)
    for k in range(_SHIFT):
        height = pi * (2 * k + 1)
        residues += _power_from_root(half_steps, eta, height).imag
    far_inverse = 1 / (eta + 1j * _ASYMPTOTIC_FROM)
    leading = _power_from_root(half_steps + 1, eta, _ASYMPTOTIC_FROM)
    smooth = (leading * _polynomial(_sommerfeld_coefficients(order), far_inverse * far_inverse)).real
    return np.asarray(smooth + 2 * pi / gamma(order + 1) * residues)


def _power_from_root(whole: int, real: Array, imaginary: float) -> NDArray[np.complex128]:
    """(real + i imaginary)^(whole - 1/2) for real >= 0, the root written out (far faster than complex sqrt)."""
    modulus = np.sqrt(real * real + imaginary * imaginary)
    root = np.sqrt((modulus + real) / 2)
    power = np.empty(real.shape, dtype=complex)
    power.real = root / modulus
    power.imag = -imaginary / (2 * root * modulus)
    if whole:
        base = real + 1j * imaginary
        power = power * (base if whole == 1 else base**whole)
    return power


def _polynomial(coefficients: tuple[float, ...], x: NDArray[Any]) -> NDArray[Any]:
    total = np.full_like(x, coefficients[-1])
    for coefficient in coefficients[-2::-1]:
        total = total * x + coefficient
    return total
