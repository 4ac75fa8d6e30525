"""How deep the slope dG/dmu of a conductance staircase dips between two of its steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_REACH = 25.0
"""Steps farther than this many kT from a pair add less than 1e-10 to the slope there."""
_RESOLVED = 60.0
"""Between steps farther apart than this many kT the slope dips to zero within 1e-12."""
_POINTS = 25
"""Grid over the gap between two steps: kT/2 or finer up to 12 kT; farther apart the slope is convex in the middle."""
_SPACINGS = np.array([40.0, 14, 11, 10, 9, 8, 7, 6, 5.5, 5, 4.5, 4, 3.5, 3, 2.5, 2])
"""Spacings in kT, falling, on which limits are bracketed."""
_PASSES = 6
"""Newton steps for a dip, to rounding; false-position steps for a limit take as many."""


def contrasts(
    energy_eV: Array, modes: Array, lower_eV: Array, upper_eV: Array, thermal_eV: Array, passes: int = _PASSES
) -> Array:
    """Contrast 1 - dip/peak of dG/dmu for pairs of neighbouring steps, 0 where it does not dip between them.

    dG/dmu is the sum of `modes` p((mu - E)/kT)/kT over all steps, p(x) = 1/(4 cosh^2(x/2)). The dip is its minimum
    between the two steps; the peak is the smaller of its values at the two, so a small step on the flank of a large one
    is measured by its own slope. Two equal steps: 0 below 2.63 kT, 0.22 at 4 kT, 0.95 at 10 kT.

    Parameters
    ----------
    energy_eV, modes : (s,) ascending energies at which modes open (or, negative, close).
    lower_eV, upper_eV, thermal_eV : (i,) the two steps and kT of each pair; one result each.
    passes : Newton steps for the dip.
    """
    result = np.ones(lower_eV.shape)
    near = upper_eV - lower_eV < _RESOLVED * thermal_eV
    if not near.any():
        return result
    lower, upper, thermal = lower_eV[near], upper_eV[near], thermal_eV[near]
    where, weight = _neighbours(energy_eV, modes, lower, upper, thermal)
    grid = ((upper - lower) / thermal)[:, None] * np.linspace(0.0, 1.0, _POINTS)
    slope = (_bell(grid[:, :, None] - where[:, None, :]) @ weight[:, :, None])[:, :, 0]
    peak = np.minimum(slope[:, 0], slope[:, -1])
    rows, best = np.arange(slope.shape[0]), np.clip(slope.argmin(axis=1), 1, _POINTS - 2)
    low, high, x = grid[rows, best - 1], grid[rows, best + 1], grid[rows, best]
    dip = slope.min(axis=1)
    for _ in range(passes):
        value, first, second = _bell_and_slopes(x[:, None] - where, weight)
        dip = np.minimum(dip, value)
        falling = first < 0
        low, high = np.where(falling, x, low), np.where(falling, high, x)
        with np.errstate(divide="ignore", invalid="ignore"):
            step = x - first / second
        x = np.where((second > 0) & (step >= low) & (step <= high), step, (low + high) / 2)
    with np.errstate(divide="ignore", invalid="ignore"):
        contrast = np.where(peak > 0, 1 - dip / peak, 0.0)
    result[near] = np.clip(contrast, 0.0, 1.0)
    return result


def falls_below_at(
    energy_eV: Array, modes: Array, lower_eV: Array, upper_eV: Array, thresholds: tuple[float, ...], highest_eV: float
) -> Array:
    """kT in eV at which the contrast of each pair of steps first falls below each threshold: (thresholds, pairs).

    `highest_eV` where it holds up to that kT. Bracketed on a ladder of temperatures, then false position in log kT.
    """
    pairs = lower_eV.size
    if pairs == 0:
        return np.zeros((len(thresholds), 0))

    def evaluate(thermal: Array) -> Array:
        rows = thermal.shape[0]
        flat = contrasts(energy_eV, modes, np.tile(lower_eV, rows), np.tile(upper_eV, rows), thermal.ravel(), 3)
        return flat.reshape(thermal.shape)

    target = np.array(thresholds)[:, None]
    ladder = np.minimum(np.maximum(upper_eV - lower_eV, 1e-15) / _SPACINGS[:, None], highest_eV)
    seen = np.zeros(ladder.shape)
    open_ = np.ones(pairs, dtype=bool)
    for row, thermal in enumerate(ladder):
        seen[row, open_] = contrasts(energy_eV, modes, lower_eV[open_], upper_eV[open_], thermal[open_], 2)
        open_ &= seen[row] >= target.min()  # below the lowest threshold it is settled
        if not open_.any():
            break
    below = seen[None, :, :] < target[:, None, :]
    never = ~below.any(axis=1)
    first = np.maximum(below.argmax(axis=1), 1)
    column = np.arange(pairs)
    a, b = np.log(ladder[first - 1, column]), np.log(ladder[first, column])
    value_a, value_b = seen[first - 1, column] - target, seen[first, column] - target
    kept = np.zeros(a.shape)
    for _ in range(_PASSES):
        middle = _crossing(a, b, value_a, value_b)
        value = evaluate(np.exp(middle)) - target
        above = value >= 0
        # the Illinois rule: an end that stays twice counts half, so that both ends close in
        value_b = np.where(above & (kept == 1), value_b / 2, value_b)
        value_a = np.where(~above & (kept == -1), value_a / 2, value_a)
        kept = np.where(above, 1, -1)
        a, value_a = np.where(above, middle, a), np.where(above, value, value_a)
        b, value_b = np.where(above, b, middle), np.where(above, value_b, value)
    return np.asarray(np.where(never, ladder[-1], np.exp(_crossing(a, b, value_a, value_b))))


def _crossing(a: Array, b: Array, value_a: Array, value_b: Array) -> Array:
    with np.errstate(divide="ignore", invalid="ignore"):
        middle = (a * value_b - b * value_a) / (value_b - value_a)
    return np.where((middle >= a) & (middle <= b), middle, (a + b) / 2)


def _neighbours(energy: Array, modes: Array, lower: Array, upper: Array, thermal: Array) -> tuple[Array, Array]:
    """Steps that matter for each pair: distance from its lower step in kT, modes; (i, most), padded with 0 modes."""
    reach = _REACH * thermal
    start = np.searchsorted(energy, lower - reach)
    stop = np.searchsorted(energy, upper + reach)
    index = start[:, None] + np.arange(int((stop - start).max()))
    inside = index < stop[:, None]
    index = np.minimum(index, energy.size - 1)
    distance = (energy[index] - lower[:, None]) / thermal[:, None]
    return np.where(inside, distance, 0.0), np.where(inside, modes[index], 0.0)


def _bell(distance: Array) -> Array:
    """1 / (4 cosh^2(x/2))."""
    e = np.exp(-np.abs(distance))
    return np.asarray(e / np.square(1 + e))


def _bell_and_slopes(distance: Array, weight: Array) -> tuple[Array, Array, Array]:
    """Sum over the last axis of weight times the bell, and of its first two derivatives."""
    bell = _bell(distance) * weight
    tilt = np.tanh(distance / 2)
    return bell.sum(axis=-1), -(tilt * bell).sum(axis=-1), (bell * (1.5 * tilt * tilt - 0.5)).sum(axis=-1)
