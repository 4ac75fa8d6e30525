"""A subband whose E(k) is no parabola, a table or a closed form: its monotone pieces, and sums over its states."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from itertools import pairwise
from math import ceil

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit

from wiresolve.bands.nonparabolic import Relation
from wiresolve.errors import InputError
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

PARABOLIC_WITHIN_EV = 1e-9
"""A table that stays this close to its parabola (far below any error bar) is treated in closed form."""
CONSISTENT_WITHIN_EV = 2e-3
"""A table whose minimum is farther than this from the subband's energy is another band or another energy zero."""
_ROUNDING = 4e-16
"""Relative error of an energy from rounding: nearer than that, a root is found."""
_EXACT, _ROUGH = 60, 4
"""Newton steps where k(E) is the result, and where it only bounds a window (a few kT more or less do not matter)."""
_REACH = 32.0
"""Distance in kT beyond which the Fermi function is 0 or 1 to 1e-14."""
_PANELS, _POINTS = 14, 10
"""Gauss panels over a window of 2 x _REACH: a panel is 4.6 kT where E is linear in k: error below 1e-8 of the
carriers, far below that of any table."""
_SHARED_PANEL = 2.3
"""Mean height in kT of the panels that many Fermi levels share: where E grows as k^2, the steepest is twice as high."""
_BOLTZMANN_PANELS = 5
"""exp(-E/kT) is smooth in k all over."""


@dataclass(frozen=True, eq=False)
class _Piece:
    """A stretch of k on which E(k) is monotone; the last one has no end and is the parabola beyond the table."""

    start_per_nm: float
    end_per_nm: float
    low_eV: float
    high_eV: float
    rising: bool
    energy: Callable[[Array], Array]
    wave_number: Callable[[Array, int], Array]

    @property
    def at_low_per_nm(self) -> float:
        """k of the end with the lower energy."""
        return self.start_per_nm if self.rising else self.end_per_nm


@dataclass(frozen=True, eq=False)
class Cubics:
    """The spline of a table: on each cell a cubic in the distance to its left knot, then a parabola in k.

    `knots_per_nm` (m,), `coefficients` (4, m - 1) of the powers 3, 2, 1, 0; beyond the last knot E grows by
    `beyond_eV_nm2` k^2.
    """

    knots_per_nm: Array
    coefficients: Array
    beyond_eV_nm2: float


@dataclass(frozen=True, eq=False)
class TabulatedBand:
    """E(k) for k >= 0 (E is even): a cubic spline through a table, then a parabola with the axial mass.

    `turning_eV` (t,) are the energies where modes open or close and `turning_modes` (t,) by how many (their sum over
    the energies below E is the number of modes M(E) that run in one direction); `singular` (t,) tells whether E(k) is
    flat there. `lowest_eV` is the band's minimum, `k_min_per_nm` where it lies; `cubics` None for a closed form.
    """

    pieces: tuple[_Piece, ...]
    turning_eV: Array
    turning_modes: Array
    singular: NDArray[np.bool_]
    lowest_eV: float
    k_min_per_nm: float
    cubics: Cubics | None = None

    def energy(self, k_per_nm: Array) -> Array:
        """E(k) at wave numbers from 0 up, in their shape."""
        k = np.asarray(k_per_nm, dtype=float)
        out = np.empty(k.shape)
        for piece in self.pieces:
            here = (k >= piece.start_per_nm) & (k <= piece.end_per_nm)
            out[here] = piece.energy(k[here])
        return out

    def occupied_length(self, fermi_eV: Array, temperature_K: Array) -> Array:
        """Integral of the Fermi function over k from 0 to infinity in 1/nm; the arguments broadcast, T = 0 is exact."""
        fermi, temperature = np.broadcast_arrays(fermi_eV, temperature_K)
        fermi_list, kT = fermi.ravel().astype(float), KB * temperature.ravel()
        total = np.zeros(fermi.size)
        for piece in self.pieces:
            total += _occupied(piece, self.lowest_eV, fermi_list, kT)
        return total.reshape(fermi.shape)

    def boltzmann(self, temperature_K: Array) -> tuple[Array, Array]:
        """Integrals over k >= 0 of w and of w (E - lowest)/kT, w = exp(-(E - lowest)/kT), in 1/nm; (t,), T > 0."""
        kT = KB * temperature_K
        weight, mean = np.zeros(kT.shape), np.zeros(kT.shape)
        for piece in self.pieces:
            top = np.minimum(piece.high_eV, self.lowest_eV + 40 * kT)
            if (top <= piece.low_eV).all():
                continue
            end = piece.wave_number(np.maximum(top, piece.low_eV), _ROUGH)
            k, factor = _panels(np.full(kT.shape, piece.at_low_per_nm), end, _BOLTZMANN_PANELS)
            x = (piece.energy(k) - self.lowest_eV) / kT[:, None]
            w = np.abs(factor) * np.exp(-x)
            weight += w.sum(axis=1)
            mean += (w * x).sum(axis=1)
        return weight, mean


def growing_band(lowest_eV: float, axial_mass: float, relation: Relation) -> TabulatedBand:
    """The band of a mass that grows with energy by one relation all over the section, from its minimum up.

    Parameters
    ----------
    axial_mass : in m0, at the minimum.
    """
    bottom = float(relation.value(np.array(lowest_eV)))
    # At the minimum dE = slope d(value): the mass there holds the slope already.
    stiffness = HBAR2_OVER_2M0 / axial_mass / float(relation.slope(np.array(lowest_eV)))

    def energy(k: Array) -> Array:
        return relation.energy(bottom + stiffness * np.asarray(k) ** 2)

    def wave_number(energy: Array, passes: int) -> Array:
        return np.asarray(np.sqrt(np.maximum(relation.value(energy) - bottom, 0.0) / stiffness))

    piece = _Piece(0.0, np.inf, lowest_eV, np.inf, True, energy, wave_number)
    return TabulatedBand((piece,), np.array([lowest_eV]), np.array([1.0]), np.array([True]), lowest_eV, 0.0)


def tabulated_band(k_per_nm: Array, band_eV: Array, lowest_eV: float, axial_mass: float) -> TabulatedBand | None:
    """The band of a table, shifted so that its minimum is `lowest_eV`; None where it is its parabola all along.

    Parameters
    ----------
    k_per_nm : (m,) ascending from 0, m >= 4.
    band_eV : (m,) energies at these k.
    axial_mass : mass in m0 of the parabola beyond the table; NaN (unknown) takes the one whose slope joins on.

    Raises
    ------
    InputError : if the energy does not rise at the table's end, or its minimum is not at `lowest_eV` within
        `CONSISTENT_WITHIN_EV`.
    """
    from scipy.interpolate import CubicSpline

    known_mass = np.isfinite(axial_mass)
    if known_mass:
        parabola = lowest_eV + HBAR2_OVER_2M0 / axial_mass * k_per_nm**2
        if np.abs(band_eV - parabola).max() <= PARABOLIC_WITHIN_EV:
            return None
    # E is even in k: zero slope at k = 0, unless two bands cross there with opposite slopes.
    linear_start = not known_mass or _starts_linearly(k_per_nm, band_eV)
    spline = CubicSpline(k_per_nm, band_eV, bc_type=("not-a-knot" if linear_start else "clamped", "not-a-knot"))
    inner = _turning_points(spline.c, k_per_nm)
    marks = np.concatenate([[0.0], inner, [k_per_nm[-1]]])
    knots = np.union1d(k_per_nm, inner)
    energies = spline(marks)
    shift = lowest_eV - float(energies.min())
    coefficients = spline.c.copy()
    coefficients[3] += shift
    energies = energies + shift
    cubic = _Cubic(k_per_nm, coefficients)
    pieces = [_table_piece(cubic, knots[(knots >= a) & (knots <= b)]) for a, b in pairwise(marks)]
    end_k, end_eV = float(k_per_nm[-1]), float(energies[-1])
    end_slope = float(spline(end_k, 1))
    if end_slope <= 0:
        raise InputError("band", "its table must end where the energy rises with k", end_k, "go on to larger k")
    if abs(shift) > CONSISTENT_WITHIN_EV:
        raise InputError("band", "its minimum must be the subband's energy", lowest_eV - shift, "use one energy zero")
    curvature = HBAR2_OVER_2M0 / axial_mass if known_mass else end_slope / (2 * end_k)
    pieces.append(_outer_piece(end_k, end_eV, curvature))
    rising = np.array([p.rising for p in pieces])
    # a rising piece opens a mode at its start and closes it at its end, a falling one the reverse
    modes = np.where(rising, 1.0, -1.0)
    modes[1:] -= modes[:-1].copy()
    turns = modes != 0
    flat = np.ones(len(marks), dtype=bool)
    flat[0], flat[-1] = not linear_start, False
    return TabulatedBand(
        pieces=tuple(pieces),
        turning_eV=energies[turns],
        turning_modes=modes[turns],
        singular=flat[turns],
        lowest_eV=lowest_eV,
        k_min_per_nm=float(marks[np.argmin(energies)]),
        cubics=Cubics(k_per_nm, coefficients, curvature),
    )


def _starts_linearly(k: Array, energy: Array) -> bool:
    """Whether at the first k > 0 of a table the linear term outweighs the quadratic one, both from three points."""
    first, second = (energy[1:3] - energy[0]) / k[1:3]
    quadratic = (second - first) / (k[2] - k[1])
    return bool(abs(first - quadratic * k[1]) > abs(quadratic) * k[1])


@dataclass(frozen=True, eq=False)
class _Cubic:
    """Piecewise cubic with the coefficients (4, m - 1) of powers 3, 2, 1, 0 of the distance to the left knot."""

    knots: Array
    coefficients: Array

    def cell(self, k: Array) -> NDArray[np.intp]:
        return _cell(self.knots, k)

    def __call__(self, k: Array) -> Array:
        cell = self.cell(k)
        t = k - self.knots[cell]
        c = self.coefficients
        return np.asarray(((c[0, cell] * t + c[1, cell]) * t + c[2, cell]) * t + c[3, cell])

    def inverse(self, energy: Array, low: Array, high: Array, guess: Array, rising: bool, passes: int) -> Array:
        """k between `low` and `high` (in one cell, E monotone) with E(k) = energy: Newton, kept safe by bisection."""
        cell = self.cell((low + high) / 2)
        left = self.knots[cell]
        c3, c2, c1, c0 = self.coefficients[:, cell]
        sign = 1.0 if rising else -1.0
        a, b, t = low - left, high - left, guess - left
        for _ in range(passes):
            residual = sign * (((c3 * t + c2) * t + c1) * t + c0 - energy)
            short = residual < 0
            a, b = np.where(short, t, a), np.where(short, b, t)
            with np.errstate(divide="ignore", invalid="ignore"):
                step = t - residual / (sign * ((3 * c3 * t + 2 * c2) * t + c1))
            following = np.where((step >= a) & (step <= b), step, (a + b) / 2)
            settled = np.abs(following - t) <= 1e-14 * (high - low)
            t = following
            if (settled | (np.abs(residual) <= _ROUNDING * np.abs(energy))).all():
                break
        return np.asarray(left + t)


def _turning_points(coefficients: Array, knots: Array) -> Array:
    """k > 0 inside the table where the spline's slope changes sign: roots of the quadratics, by cell."""
    a, b, c = 3 * coefficients[0], 2 * coefficients[1], coefficients[2]
    width = np.diff(knots)
    disc = b * b - 4 * a * c
    with np.errstate(divide="ignore", invalid="ignore"):
        q = -(b + np.copysign(np.sqrt(disc), b)) / 2
        roots = np.concatenate([q / a, c / q])
    left = np.tile(knots[:-1], 2)
    span = np.tile(width, 2)
    inside = np.isfinite(roots) & (roots >= 0) & (roots < span) & (left + roots > 1e-9 * knots[-1])
    candidates = np.sort((left + roots)[inside])
    if candidates.size > 1:
        candidates = candidates[np.concatenate([[True], np.diff(candidates) > 1e-9 * knots[-1]])]
    if not candidates.size:
        return candidates
    # keep those where the slope does change sign: compare the slopes midway to the neighbours
    middles = np.concatenate([[candidates[0] / 2], (candidates[1:] + candidates[:-1]) / 2])
    middles = np.append(middles, (candidates[-1] + knots[-1]) / 2)
    cell = np.clip(np.searchsorted(knots, middles, side="right") - 1, 0, width.size - 1)
    t = middles - knots[cell]
    slopes = (a[cell] * t + b[cell]) * t + c[cell]
    return np.asarray(candidates[np.sign(slopes[1:]) != np.sign(slopes[:-1])])


def _table_piece(cubic: _Cubic, knots: Array) -> _Piece:
    values = cubic(knots)
    rising = bool(values[-1] > values[0])
    ordered, energies = (knots, values) if rising else (knots[::-1], values[::-1])

    def wave_number(energy: Array, passes: int) -> Array:
        cell = _cell(energies, energy)
        from_k, to_k = ordered[cell], ordered[cell + 1]
        part = (energy - energies[cell]) / (energies[cell + 1] - energies[cell])
        part = np.minimum(np.maximum(part, 0.0), 1.0)
        # E starts flat in the first cell, as a parabola
        guess = from_k + (to_k - from_k) * np.where(cell == 0, np.sqrt(part), part)
        ends = (part == 0) | (part == 1)
        inner = ~ends
        if inner.any():
            low, high = np.minimum(from_k, to_k)[inner], np.maximum(from_k, to_k)[inner]
            guess[inner] = cubic.inverse(energy[inner], low, high, guess[inner], rising, passes)
        return guess

    low, high = float(energies[0]), float(energies[-1])
    return _Piece(float(knots[0]), float(knots[-1]), low, high, rising, cubic, wave_number)


def _outer_piece(start_per_nm: float, start_eV: float, curvature: float) -> _Piece:
    def energy(k: Array) -> Array:
        return np.asarray(start_eV + curvature * (k * k - start_per_nm**2))

    def wave_number(energy: Array, passes: int) -> Array:
        return np.asarray(np.sqrt(start_per_nm**2 + np.maximum(energy - start_eV, 0.0) / curvature))

    return _Piece(start_per_nm, np.inf, start_eV, np.inf, True, energy, wave_number)


def _occupied(piece: _Piece, lowest_eV: float, fermi: Array, kT: Array) -> Array:
    """Integral of the Fermi function: the full part counted, the window around the Fermi level by Gauss panels."""
    low = np.minimum(np.maximum(fermi - _REACH * kT, piece.low_eV), piece.high_eV)
    high = np.minimum(np.maximum(fermi, lowest_eV) + _REACH * kT, piece.high_eV)
    if (high <= piece.low_eV).all():
        return np.zeros(fermi.shape)
    if fermi.size > 1 and kT[0] > 0 and np.ptp(kT) == 0 and high.max() > low.min():
        count = ceil((high.max() - low.min()) / (_SHARED_PANEL * kT[0]))
        if count <= _PANELS * fermi.size:
            return _occupied_by_shared_panels(piece, count, low, high, fermi, float(kT[0]))
    full_to = piece.wave_number(low, _ROUGH if kT.min() > 0 else _EXACT)
    length = np.abs(full_to - piece.at_low_per_nm)
    # At T = 0 nothing is left between the two, but for rounding.
    window = (high > low) & (kT > 0)
    if window.any():
        fermi, kT = fermi[window, None], kT[window, None]
        k, weight = _panels(full_to[window], piece.wave_number(high[window], _ROUGH), _PANELS)
        length[window] += (np.abs(weight) * expit((fermi - piece.energy(k)) / kT)).sum(axis=1)
    return length


def _occupied_by_shared_panels(piece: _Piece, count: int, low: Array, high: Array, fermi: Array, kT: float) -> Array:
    """The same at one temperature, with E(k) worked out once, on panels that all Fermi levels share."""
    start, end = piece.wave_number(np.array([low.min(), high.max()]), _ROUGH)
    width = (end - start) / count  # negative on a falling piece: from low to high energy
    points, weights = _gauss()
    edges = piece.energy(start + width * np.arange(count + 1))
    energy = piece.energy(start + width * (np.arange(count)[:, None] + (points + 1) / 2))
    # panels before `first` are full, those from `last` on empty
    first = np.searchsorted(edges[1:], low)
    last = np.searchsorted(edges[:-1], high)
    panel = first[:, None] + np.arange(max(int((last - first).max()), 1))
    partly = panel < last[:, None]
    filling = expit((fermi[:, None, None] - energy[np.minimum(panel, count - 1)]) / kT) @ (weights / 2)
    panels = first + np.where(partly, filling, 0.0).sum(axis=1)
    return np.asarray(abs(start - piece.at_low_per_nm) + abs(width) * panels)


def _cell(edges: Array, at: Array) -> NDArray[np.intp]:
    """Number of the interval between ascending edges in which each value lies, the ends included."""
    return np.minimum(np.maximum(np.searchsorted(edges, at, side="right") - 1, 0), edges.size - 2)


@cache
def _gauss() -> tuple[Array, Array]:
    points, weights = np.polynomial.legendre.leggauss(_POINTS)
    return points, weights


def _panels(start: Array, end: Array, count: int) -> tuple[Array, Array]:
    """Gauss points and weights (i, panels x points) on the intervals [start_i, end_i]."""
    points, weights = _gauss()
    offsets = (np.arange(count)[:, None] + (points + 1) / 2).ravel() / count
    span = (end - start)[:, None]
    return start[:, None] + span * offsets, span * np.tile(weights / 2, count) / count
