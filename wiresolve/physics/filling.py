"""How many carriers a subband holds per length, as a function of how far its bottom lies below the Fermi level."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit, zeta

from wiresolve.physics.fermi import fermi_integral
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

_STEP = 0.125
"""Spacing of a table in kT: cubic Hermite pieces then hold six digits of the density."""
_THERMAL = 40.0
"""Beyond this many kT above the Fermi level the occupation is below rounding; as far below it, so is what Sommerfeld's
expansion leaves after its sixth term."""
_CLASSES = (-np.inf, 1.0, 10.0, _THERMAL)
"""Depths in kT between which one spacing of the quadrature serves all."""
_DIGITS = 33.0
"""The trapezoidal rule leaves exp(-33), 5e-15."""


@dataclass(frozen=True)
class Filling:
    """Line density over g sqrt(m) of a subband whose bottom lies d below the Fermi level, at one temperature.

    ``n / (g sqrt(m)) = 1/pi int dk f(E(k))`` with hbar^2 k^2 / 2 m0 = e (1 + alpha e), e the energy above the bottom
    (E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957)): ``sqrt(kT / (4 pi c)) F_(-1/2)(d/kT)`` for alpha = 0 and
    ``sqrt(d / c) / pi`` at T = 0, c being hbar^2 / 2 m0.
    """

    temperature_K: float
    alpha_per_eV: float = 0.0

    def density(self, depth_eV: Array) -> Array:
        """In 1/nm, of any shape."""
        return self.both(depth_eV)[0]

    def slope(self, depth_eV: Array) -> Array:
        """Derivative of `density` by the depth, 1/(eV nm); infinite at T = 0 and depth 0."""
        return self.both(depth_eV)[1]

    def both(self, depth_eV: Array) -> tuple[Array, Array]:
        """`density` and `slope`."""
        depth = np.asarray(depth_eV, dtype=float)
        alpha, thermal = self.alpha_per_eV, KB * self.temperature_K
        if thermal == 0:
            inside = np.maximum(depth, 0.0)
            squared = inside * (1 + alpha * inside) / HBAR2_OVER_2M0
            density = np.sqrt(squared) / np.pi
            with np.errstate(divide="ignore", invalid="ignore"):
                slope = (1 + 2 * alpha * inside) / (2 * np.pi * HBAR2_OVER_2M0 * np.sqrt(squared))
            return density, np.where(depth > 0, slope, np.where(depth == 0, np.inf, 0.0))
        eta = depth / thermal
        if alpha == 0:
            unit = float(np.sqrt(thermal / (4 * np.pi * HBAR2_OVER_2M0)))
            return unit * fermi_integral(-0.5, eta), unit / thermal * fermi_integral(-1.5, eta)
        return _kane(eta, alpha * thermal, float(np.sqrt(thermal / HBAR2_OVER_2M0)), thermal)

    def table(self, low_eV: float, high_eV: float) -> Table:
        """A fast stand-in between two depths, good to seven digits."""
        step = _STEP * KB * self.temperature_K
        # Nodes lie at multiples of the step: tables of other ranges must agree, or Newton's method sees them differ.
        at = step * np.arange(np.floor(low_eV / step) - 1, np.ceil(high_eV / step) + 2)
        return Table(float(at[0]), step, *self.both(np.asarray(at, dtype=float)))


@dataclass(frozen=True, eq=False)
class Table:
    """Cubic Hermite pieces between equally spaced nodes."""

    start_eV: float
    step_eV: float
    density: Array
    slope: Array

    def __call__(self, depth_eV: Array) -> tuple[Array, Array]:
        """Density and slope at depths of any shape, which must lie inside the table."""
        place = (depth_eV - self.start_eV) / self.step_eV
        piece = np.clip(place.astype(np.int64), 0, len(self.density) - 2)
        t = place - piece
        low, high = self.density[piece], self.density[piece + 1]
        left, right = self.step_eV * self.slope[piece], self.step_eV * self.slope[piece + 1]
        rise = high - low
        second, third = 3 * rise - 2 * left - right, left + right - 2 * rise
        value = low + t * (left + t * (second + t * third))
        return value, (left + t * (2 * second + 3 * t * third)) / self.step_eV


@dataclass(frozen=True, eq=False)
class Tables:
    """The same for many subbands (m,) as functions of how much deeper each has come, with shared nodes."""

    start_eV: float
    step_eV: float
    density: Array
    slope: Array

    def __call__(self, by_eV: Array) -> tuple[Array, Array]:
        """Densities and slopes (..., m) where all have come deeper by so much, which must lie inside the tables."""
        place = (by_eV - self.start_eV) / self.step_eV
        piece = np.clip(place.astype(np.int64), 0, len(self.density) - 2)
        t = (place - piece)[..., None]
        low, left = self.density[piece], self.step_eV * self.slope[piece]
        rise, right = self.density[piece + 1] - low, self.step_eV * self.slope[piece + 1]
        second, third = 3 * rise - 2 * left - right, left + right - 2 * rise
        return low + t * (left + t * (second + t * third)), (left + t * (2 * second + 3 * t * third)) / self.step_eV


def tables(temperature_K: float, alpha_per_eV: Array, depth_eV: Array, low_eV: float, high_eV: float) -> Tables:
    """Tables of subbands (m,) with their growths and depths, for all changes of the depths between two values."""
    thermal = KB * temperature_K
    step = _STEP * thermal
    by = low_eV - step + step * np.arange(int(np.ceil((high_eV - low_eV) / step)) + 3)
    depth = by[:, None] + depth_eV
    density, slope = np.empty(depth.shape), np.empty(depth.shape)
    straight = alpha_per_eV == 0
    if straight.any():
        density[:, straight], slope[:, straight] = Filling(temperature_K).both(depth[:, straight])
    unit = float(np.sqrt(thermal / HBAR2_OVER_2M0))
    for n in np.flatnonzero(~straight):
        density[:, n], slope[:, n] = _kane(depth[:, n] / thermal, float(alpha_per_eV[n]) * thermal, unit, thermal)
    return Tables(float(by[0]), step, density, slope)


def _kane(eta: Array, growth: float, unit: float, thermal: float) -> tuple[Array, Array]:
    """1/pi int sqrt(x (1 + growth x)) (-df/dx) dx times `unit`, and its derivative by the depth in eV.

    In x = u^2 the integrand of n = 1/pi int k'(x) f dx is even and analytic in a strip, so that the trapezoidal rule
    converges exponentially (L. N. Trefethen and J. A. C. Weideman, SIAM Review 56, 385 (2014)); far below the Fermi
    level Sommerfeld's expansion takes its place.
    """
    flat = np.ravel(eta)
    density, slope = np.empty(len(flat)), np.empty(len(flat))
    for low, high in pairwise(_CLASSES):
        some = np.flatnonzero((flat > low) & (flat <= high))
        if len(some):
            x, weight = _nodes(high, growth)
            f = expit(flat[some, None] - x)
            density[some] = f @ weight
            f *= 1 - f
            slope[some] = f @ weight
    deep = np.flatnonzero(~(flat <= _THERMAL))
    if len(deep):
        density[deep], slope[deep] = _sommerfeld(flat[deep], growth)
    unit = unit / np.pi
    return unit * density.reshape(np.shape(eta)), unit / thermal * slope.reshape(np.shape(eta))


def _nodes(eta: float, growth: float) -> tuple[Array, Array]:
    """x = u^2 and weights for depths up to `eta`: u is spaced by how near a singularity lies to the real line.

    The nearest are the poles of f at u^2 = eta + i pi and the branch point of the mass at u = i / sqrt(growth).
    """
    distance = min(float(np.sqrt(complex(eta, np.pi)).imag), 1 / float(np.sqrt(max(growth, 1e-12))))
    spacing = 2 * np.pi * distance / _DIGITS
    u = spacing * np.arange(int(np.sqrt(eta + _THERMAL) / spacing) + 2)
    x = u * u
    weight = spacing * (1 + 2 * growth * x) / np.sqrt(1 + growth * x)
    weight[0] /= 2
    return x, weight


def _sommerfeld(eta: Array, growth: float) -> tuple[Array, Array]:
    """int sqrt(P) (-df/dx) dx with P = x (1 + growth x), and its derivative, by the derivatives of sqrt(P) at `eta`.

    A. Sommerfeld, Z. Phys. 47, 1 (1928). The derivatives follow from 2 P N' = P' N, differentiated n times.
    """
    square, first, second = eta * (1 + growth * eta), 1 + 2 * growth * eta, 2 * growth
    before, now = np.zeros(eta.shape), np.sqrt(square)
    density, slope = now.copy(), np.zeros(eta.shape)
    for n in range(2 * len(_EVEN) + 1):
        before, now = now, ((1 - 2 * n) * first * now + n * (2 - n) * second * before) / (2 * square)
        # `now` is the derivative of order n + 1
        if n % 2 == 0:
            slope += (_EVEN[n // 2 - 1] if n else 1.0) * now
        else:
            density += _EVEN[n // 2] * now
    return density, slope


_EVEN = tuple(float(2 * (1 - 2.0 ** (1 - 2 * j)) * zeta(2 * j)) for j in range(1, 7))
"""What the derivatives of order 2, 4, ... of a function count in its average over -df/dx."""
