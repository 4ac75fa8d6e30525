"""How many carriers a subband holds per length, as a function of how far its bottom lies below the Fermi level."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics.fermi import fermi_integral
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

_STEP = 0.125
"""Spacing of a table in kT: cubic Hermite pieces then hold six digits of the density."""
_PANELS, _POINTS = 6, 16
_THERMAL = 40.0
"""Beyond this many kT above the Fermi level the occupation is below rounding."""


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


@cache
def _gauss() -> tuple[Array, Array]:
    points, weights = np.polynomial.legendre.leggauss(_POINTS)
    return (points + 1) / 2, weights / 2


def _kane(eta: Array, growth: float, unit: float, thermal: float) -> tuple[Array, Array]:
    """1/pi int sqrt(x (1 + growth x)) (-df/dx) dx times `unit`, and its derivative by the depth in eV.

    In x = u^2 the integrand of n = 1/pi int k'(x) f dx is smooth; panels end around the Fermi level.
    """
    points, weights = _gauss()
    flat = np.ravel(eta)
    high = np.sqrt(np.maximum(flat, 0.0) + _THERMAL)
    low = np.sqrt(np.maximum(flat - _THERMAL, 0.0))
    middle = np.sqrt(np.maximum(flat, 0.0))
    below = np.linspace(0, 1, _PANELS + 1)
    edges = np.concatenate(
        [
            np.zeros((len(flat), 1)),
            low[:, None] + (middle - low)[:, None] * below,
            middle[:, None] + (high - middle)[:, None] * below[1:],
        ],
        axis=1,
    )
    width = np.diff(edges, axis=1)
    u = (edges[:, :-1, None] + width[..., None] * points).reshape(len(flat), -1)
    w = (width[..., None] * weights).reshape(len(flat), -1)
    x = u * u
    rate = 2 * (0.5 + growth * x) / np.sqrt(1 + growth * x)  # dk/du in units of `unit`
    argument = x - flat[:, None]
    f = np.exp(-np.logaddexp(0.0, argument))
    slope = f * np.exp(-np.logaddexp(0.0, -argument))
    density = unit / np.pi * (w * rate * f).sum(axis=1)
    steep = unit / np.pi / thermal * (w * rate * slope).sum(axis=1)
    return density.reshape(np.shape(eta)), steep.reshape(np.shape(eta))
