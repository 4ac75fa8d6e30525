"""Whether straight pieces of plane curves cross: any number of them, by a sweep along x."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
_AT_ONCE = 2_000_000


def first(start: Array, end: Array, knots: Ints) -> tuple[int, int] | None:
    """Two pieces that cross or touch and share no end, or None; parameters as for `several`."""
    return next(iter(several(start, end, knots, 1)), None)


def several(start: Array, end: Array, knots: Ints, enough: int) -> list[tuple[int, int]]:
    """Pairs of pieces that cross or touch and share no end, in order; there may be more once `enough` are found.

    Parameters
    ----------
    start, end : (m, 2) points.
    knots : (m, 2) numbers of the end points; pieces with a common number are neighbours, which may touch.
    """
    found: list[tuple[int, int]] = []
    reach = 1e-9 * float(np.ptp(np.vstack([start, end]), axis=0).max())
    low, high = np.minimum(start, end) - reach, np.maximum(start, end) + reach
    order = np.argsort(low[:, 0], kind="stable")
    low, high = low[order], high[order]
    until = np.searchsorted(low[:, 0], high[:, 0], side="right")
    count = np.maximum(until - np.arange(len(order)) - 1, 0)
    begin = 0
    while begin < len(order):
        end_row = begin + max(1, int(np.searchsorted(np.cumsum(count[begin:]), _AT_ONCE)))
        some = count[begin:end_row]
        i = np.repeat(np.arange(begin, begin + len(some)), some)
        j = i + 1 + np.arange(len(i)) - np.repeat(np.cumsum(some) - some, some)
        meet = (low[i, 1] <= high[j, 1]) & (low[j, 1] <= high[i, 1])
        i, j = order[i[meet]], order[j[meet]]
        apart = (knots[i][:, :, None] != knots[j][:, None, :]).all(axis=(1, 2))
        i, j = i[apart], j[apart]
        cross = _split(start[i], end[i], start[j], end[j], reach) & _split(start[j], end[j], start[i], end[i], reach)
        hits = np.flatnonzero(cross)
        found += [(min(a, b), max(a, b)) for a, b in zip(i[hits].tolist(), j[hits].tolist(), strict=True)]
        if len(found) >= enough:
            break
        begin = end_row
    return sorted(found)


def _split(a: Array, b: Array, c: Array, d: Array, reach: float) -> NDArray[np.bool_]:
    """Which lines through a and b do not have both c and d clearly on one side."""
    along = b - a
    long = np.maximum(np.hypot(*along.T), 1e-300)
    of_c, of_d = ((along[:, 0] * (p - a)[:, 1] - along[:, 1] * (p - a)[:, 0]) / long for p in (c, d))
    return np.asarray(~(((of_c > reach) & (of_d > reach)) | ((of_c < -reach) & (of_d < -reach))))
