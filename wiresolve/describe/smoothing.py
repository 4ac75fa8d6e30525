"""A smooth closed curve through points that stand on the pixels of a picture."""

from __future__ import annotations

import math

import numpy as np

from wiresolve.describe.curves import Loop, Spline
from wiresolve.describe.mesh_data import Array
from wiresolve.errors import InputError

FARTHEST = 1.0
"""Points may lie this many pixels beside the smooth curve."""
SHORTEST = 4.0
"""Waves shorter than this many pixels are the pixels' own: they are always smoothed."""
_FEWEST = 8
_TRIED = 40
_PER_WAVE = 3
"""Points of the curve to the shortest wave that is left."""
_MOST_POINTS = 1200


def smoothed(field: str, points: Array, pixel: float, shown: str) -> Loop:
    """A closed cubic spline beside the points as far as pixels put them, of the area of the polygon through them.

    A periodic smoothing spline over the length of the curve, which is a filter of its Fourier series: how strong is
    found by generalised cross validation (G. Wahba, Spline Models for Observational Data (1990), chapter 4), from what
    pixels need on. Then it is scaled about its centre.

    Parameters
    ----------
    points : (n, 2) counter-clockwise; pixel : size of a pixel, in the same unit.
    """
    if len(points) < _FEWEST:
        remedy = f'write pixel_size = "0 nm" for a polygon, or give {_FEWEST} points or more'
        raise InputError(field, f"{shown} has too few points to be smoothed", f"{len(points)}", remedy)
    x, y = (points - points[0]).T
    area = float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2
    if 5 * pixel > math.sqrt(area):
        rule = f"{shown} is only {math.sqrt(area) / pixel:.2g} pixels large"
        raise InputError("pixel_size", rule, f"{pixel:.4g} nm", "trace it at a higher resolution")
    place, closed = _lengths(points), np.append(points, points[:1], axis=0)
    steps = np.hypot(*np.diff(closed, axis=0).T)
    length = float(steps.sum())
    spacing = max(pixel / 8, float(np.median(steps)))
    for _ in range(3):  # lengths along the smooth curve: stairs are longer than what they stand for
        count = max(16, round(length / spacing))
        series = _series(place, closed, count)
        wave = _wave(series, length, SHORTEST * pixel)
        curve = _at(series, length, wave, place[:-1])
        place = _lengths(curve)
        length = float(np.hypot(*(np.roll(curve, -1, axis=0) - curve).T).sum())
    series = _series(place, closed, count)
    while wave > 2 * pixel and np.hypot(*(_at(series, length, wave, place[:-1]) - points).T).max() > FARTHEST * pixel:
        wave *= 0.8
    many = min(max(48, math.ceil(_PER_WAVE * length / wave)), _MOST_POINTS)
    curve = _at(series, length, wave, np.arange(many) / many)
    loop = _closed(curve)
    center, scale = np.array(loop.centroid), math.sqrt(area / loop.area)
    return _closed(center + scale * (curve - center))


def _closed(points: Array) -> Loop:
    rows = tuple((float(x), float(y)) for x, y in points)
    return Loop((Spline((*rows, rows[0]), "rim"),))


def _lengths(rows: Array) -> Array:
    """Lengths along a closed row of points from its first one, the whole way being 1; shape (n + 1,)."""
    steps = np.hypot(*(np.roll(rows, -1, axis=0) - rows).T)
    return np.asarray(np.concatenate([[0.0], np.cumsum(steps)]) / steps.sum())


def _series(place: Array, closed: Array, count: int) -> np.ndarray:
    """Fourier coefficients of x + i y at `count` even places."""
    even = np.arange(count) / count
    x, y = (np.interp(even, place, column) for column in closed.T)
    return np.asarray(np.fft.fft(x + 1j * y) / count)


def _passed(count: int, length: float, wave: float) -> Array:
    """What is left of each Fourier coefficient: half at waves of this length."""
    return np.asarray(1 / (1 + (np.fft.fftfreq(count, 1 / count) * wave / length) ** 4))


def _wave(series: np.ndarray, length: float, shortest: float) -> float:
    """The shortest wave to keep, for which what is left best predicts each point from the others."""
    tried = np.geomspace(shortest, max(length / 3, 1.01 * shortest), _TRIED)
    scores = []
    for wave in tried:
        passed = _passed(len(series), length, wave)
        scores.append((np.abs((1 - passed) * series) ** 2).sum() / (1 - passed.mean()) ** 2)
    return float(tried[int(np.argmin(scores))])


def _at(series: np.ndarray, length: float, wave: float, place: Array) -> Array:
    """Points of the smoothed curve."""
    kept = series * _passed(len(series), length, wave)
    strong = np.flatnonzero(np.abs(kept) > 1e-7 * np.abs(kept).max())
    order = np.fft.fftfreq(len(series), 1 / len(series))[strong]
    found = np.zeros(len(place), dtype=complex)
    for part in range(0, len(place), 2000):
        some = slice(part, part + 2000)
        found[some] = np.exp(2j * np.pi * np.outer(place[some], order)) @ kept[strong]
    return np.column_stack([found.real, found.imag])
