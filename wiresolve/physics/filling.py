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
_CHUNK = 4096
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
        return _kane(eta, np.full(eta.shape, alpha * thermal), float(np.sqrt(thermal / HBAR2_OVER_2M0)), thermal)

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
    if not straight.all():
        eta = depth[:, ~straight] / thermal
        growth = np.broadcast_to(alpha_per_eV[~straight] * thermal, eta.shape)
        unit = float(np.sqrt(thermal / HBAR2_OVER_2M0))
        density[:, ~straight], slope[:, ~straight] = _kane(eta, growth, unit, thermal)
    return Tables(float(by[0]), step, density, slope)


@cache
def _gauss() -> tuple[Array, Array]:
    points, weights = np.polynomial.legendre.leggauss(_POINTS)
    return (points + 1) / 2, weights / 2


def _kane(eta: Array, growth: Array, unit: float, thermal: float) -> tuple[Array, Array]:
    """1/pi int sqrt(x (1 + growth x)) (-df/dx) dx times `unit`, and its derivative by the depth in eV.

    In x = u^2 the integrand of n = 1/pi int k'(x) f dx is smooth; panels end around the Fermi level.
    """
    flat, growths = np.ravel(eta), np.ravel(growth)
    both = np.empty((2, len(flat)))
    for start in range(0, len(flat), _CHUNK):
        pick = slice(start, start + _CHUNK)
        both[:, pick] = _kane_row(flat[pick], growths[pick, None], unit, thermal)
    return both[0].reshape(np.shape(eta)), both[1].reshape(np.shape(eta))


def _kane_row(flat: Array, growth: Array, unit: float, thermal: float) -> tuple[Array, Array]:
    points, weights = _gauss()
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
    return density, steep
