"""A mode's opening rounded twice, by temperature and by tunnelling: averages over two logistic widths.

Both -df/dE and the slope of a saddle's transmission are logistic densities, so the linear conductance of a step is the
probability that the sum of two logistic variables stays below E_F - E_n. With a <= b the widths, it is
``int p(t) F((d + a t)/b) dt``, p(t) = 1/(4 cosh^2(t/2)), whose integrand is analytic for |Im t| < pi: the trapezoidal
rule with spacing h is wrong by exp(-2 pi^2/h) only (L. N. Trefethen and J. A. C. Weideman, SIAM Review 56, 385 (2014)).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import expit

from wiresolve.physics.fermi import fermi_integral

Array = NDArray[np.float64]

NEAR_STEP_KT = (-8.0, -5.0, -3.0, -2.0, -1.0, 0.0, 1.0, 2.0, 3.0, 5.0, 8.0)
"""Places around a step, in kT, at which curves need points of their own."""

SPACING = 0.45
"""Of the nodes: exp(-2 pi^2/0.45) is 9e-20."""
_TAIL = 42.0
"""Beyond, exp(-42) = 6e-19 of the largest part is lost."""
_UNDERFLOW = 760.0
"""exp(-760) is zero in double precision."""
_BLOCK = 1_000_000
"""Values worked out at once."""
_FAR = 700.0
_SHARP = 1e-18
"""A width this much smaller than the other one is none."""


def log_density(t: Array) -> Array:
    """ln of the logistic density 1/(4 cosh^2(t/2))."""
    return np.asarray(-np.abs(t) - 2 * np.log1p(np.exp(-np.abs(t))))


def nodes(narrow: float, wide: float, deepest: float, limit: float = _UNDERFLOW) -> Array:
    """Equally spaced nodes t for ``int p(t) F((d + narrow t)/wide) dt`` with d down to -`deepest`.

    Where F falls as exp((d + narrow t)/wide), p F falls only as exp(-t (1 - narrow/wide)) up to t = -d/narrow.
    """
    flat = max(deepest, 0.0) / narrow
    slack = 1 - narrow / wide
    if slack * flat > _TAIL:
        flat = _TAIL / slack
    high = min(flat, limit) + _TAIL
    return SPACING * np.arange(-np.ceil(_TAIL / SPACING), np.ceil(high / SPACING) + 1)


def step(distance_eV: ArrayLike, first_eV: float, second_eV: float) -> Array:
    """A step of height 1 rounded by two widths (kT and a saddle's; zero is sharp), at E_F - E_n, of any shape.

    Relative accuracy 1e-14, far below the opening too. Both sharp: 1/2 on the opening.
    """
    distance = np.asarray(distance_eV, dtype=float)
    narrow, wide = sorted((first_eV, second_eV))
    if wide == 0:
        return np.asarray(np.where(distance > 0, 1.0, np.where(distance < 0, 0.0, 0.5)))
    if narrow / wide < _SHARP:
        return np.asarray(expit(distance / wide))
    # symmetric about the opening: the small side is the one that is summed
    below = _rounded(-np.abs(distance), narrow, wide, lambda d: expit(d / wide))
    return np.asarray(np.where(distance > 0, 1 - below, below))


def window(low_eV: ArrayLike, difference_eV: ArrayLike, first_eV: float, second_eV: float) -> Array:
    """Integral of `step` from distance `low_eV` to `low_eV + difference_eV`, in eV; broadcast.

    A small difference loses no digits.
    """
    low, difference = np.broadcast_arrays(np.asarray(low_eV, dtype=float), np.asarray(difference_eV, dtype=float))
    narrow, wide = sorted((first_eV, second_eV))
    if narrow == 0 or narrow / wide < _SHARP:
        return _window(low, difference, wide)
    # far above the opening the average is that of d itself: mirror, so that only the side below has a long tail
    mirrored = low > 0
    start = np.where(mirrored, -low - difference, low)
    deepest = float(-np.minimum(start, start + difference).min(initial=0.0))
    t = nodes(narrow, wide, deepest)
    part = _averaged(t, (start, difference), lambda d, span, t: _window(d + narrow * t, span, wide))
    return np.asarray(np.where(mirrored, difference - part, part))


def ramp(distance_eV: ArrayLike, first_eV: float, second_eV: float) -> Array:
    """Integral of `step` from minus infinity to the distance, in eV: what a count that grows by 1 an eV leaves."""
    distance = np.asarray(distance_eV, dtype=float)
    narrow, wide = sorted((first_eV, second_eV))
    if narrow == 0 or narrow / wide < _SHARP:
        return _softened(distance, wide)
    below = _rounded(-np.abs(distance), narrow, wide, lambda d: _softened(d, wide))
    return np.asarray(np.maximum(distance, 0.0) + below)


def ramp_window(high_eV: ArrayLike, low_eV: ArrayLike, first_eV: float, second_eV: float) -> Array:
    """Integral of `ramp` from distance `low_eV` to `high_eV`, in eV^2; broadcast."""
    ends = np.broadcast_arrays(np.asarray(high_eV, dtype=float), np.asarray(low_eV, dtype=float))
    narrow, wide = sorted((first_eV, second_eV))

    def squared(d: Array) -> Array:
        if wide == 0:
            return np.asarray(np.maximum(d, 0.0) ** 2 / 2)
        return np.asarray(wide**2 * fermi_integral(1, d / wide))

    if narrow == 0 or narrow / wide < _SHARP:
        return np.asarray(squared(ends[0]) - squared(ends[1]))
    upper, lower = (_rounded(end, narrow, wide, squared) for end in ends)
    return np.asarray(upper - lower)


def _averaged(t: Array, given: tuple[Array, ...], function: Callable[..., Array]) -> Array:
    """Mean of function(*given, t) over the logistic density of t at these nodes, of the given arrays' shape."""
    flat = [np.ravel(part) for part in given]
    out = np.empty(flat[0].size)
    weights = SPACING * np.exp(log_density(t))
    size = max(1, _BLOCK // t.size)
    for start in range(0, out.size, size):
        out[start : start + size] = function(*(part[start : start + size, None] for part in flat), t) @ weights
    return out.reshape(given[0].shape)


def _rounded(distance: Array, narrow: float, wide: float, function: Callable[[Array], Array]) -> Array:
    """Mean of function(distance + narrow t) over the logistic density of t."""
    t = nodes(narrow, wide, float(-distance.min(initial=0.0)))
    return _averaged(t, (distance,), lambda d, t: function(d + narrow * t))


def _softened(distance: Array, width: float) -> Array:
    """width F_0(distance/width), the distance itself or nothing where it is sharp."""
    if width == 0:
        return np.maximum(distance, 0.0)
    eta = distance / width
    near = np.abs(eta) < _FAR
    return np.where(near, width * np.logaddexp(0.0, np.where(near, eta, 0.0)), np.maximum(distance, 0.0))


def _window(low: Array, difference: Array, width: float) -> Array:
    """Integral of the Fermi function of one width between two distances; exact to rounding for near ones too."""
    high = low + difference
    if width == 0:
        return np.asarray(np.where((high > 0) & (low > 0), difference, np.maximum(high, 0.0) - np.maximum(low, 0.0)))
    steps = difference / width
    near = np.abs(steps) < 1
    # ln (1 + e^a) - ln (1 + e^b) = ln (1 + (e^(a-b) - 1) / (1 + e^-b))
    close = np.log1p(np.expm1(np.where(near, steps, 0.0)) * expit(low / width))
    return np.asarray(np.where(near, width * close, _softened(high, width) - _softened(low, width)))
