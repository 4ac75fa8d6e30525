"""The smooth number of subbands below an energy at a wave number along the wire, and the states that they hold.

N(E, k) = area x q/(4 pi) - walls x sqrt(q)/(4 pi) + steps, q = (e (1 + alpha e) - a k^2)/s, place by place: H. Weyl's
law with its boundary term (M. Kac, Am. Math. Mon. 73, 1 (1966)) for the in-plane motion that is left to a carrier of
energy E that moves along the wire. A subband is followed in k by its number, as an adiabatic invariant is, so the axial
motion has the mass and the growth with energy of the places where the carriers are.

Where two materials meet, a wave that one side reflects counts -1/4 + phi/pi for each wave number along the edge, with
tan phi = (k_n/m) / (kappa/m'), from the matching of value and of derivative over mass; a hard wall has phi = 0.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.outline import outline_edges
from wiresolve.fem.space import Space
from wiresolve.physics.pencil import Operator
from wiresolve.physics.tail import Tail

Array = NDArray[np.float64]

_BINS = 64
"""Pieces of a region with a varying potential."""
_AXIAL, _ALONG = 16, 8
"""Gauss points in k along the wire, and along an edge."""
_HALVINGS = 40


@dataclass(frozen=True, eq=False)
class Places:
    """Parts of a section: edge energies, hbar^2/2m in the section and along the wire, growth of the mass; (p,) each."""

    edge_eV: Array
    in_plane_eV_nm2: Array
    axial_eV_nm2: Array
    alpha_per_eV: Array

    def squared(self, energy_eV: Array, k_squared: Array) -> Array:
        """q in 1/nm^2, (..., p), negative where the energy does not suffice."""
        e = np.asarray(energy_eV)[..., None] - self.edge_eV
        # Below an edge the relation is followed down to where the mass has halved.
        e = np.maximum(e, -0.5 / np.maximum(self.alpha_per_eV, 1e-12))
        value = e * (1 + self.alpha_per_eV * e) - self.axial_eV_nm2 * np.asarray(k_squared)[..., None]
        return np.asarray(value / self.in_plane_eV_nm2)

    def lighter(self, energy_eV: Array) -> Array:
        """hbar^2/2m(E) in the section, (..., p)."""
        e = np.asarray(energy_eV)[..., None] - self.edge_eV
        return np.asarray(self.in_plane_eV_nm2 / np.maximum(1 + self.alpha_per_eV * e, 0.5))


@dataclass(frozen=True, eq=False)
class SmoothCount:
    """What the count needs of a section.

    Attributes
    ----------
    area_nm2 : (p,) of each of the `inside` places.
    wall_nm : (w,) lengths at the `walls`, stretched where the in-plane mass has directions.
    step_nm : (s,) lengths at which the places `sides` (two of s) meet.
    """

    inside: Places
    area_nm2: Array
    walls: Places
    wall_nm: Array
    sides: tuple[Places, Places]
    step_nm: Array

    def count(self, energy_eV: Array, k_squared: Array) -> Array:
        """N(E, k^2) of orbital states; the arguments broadcast. Negative close to the bottom, where it says nothing."""
        energy, k2 = np.broadcast_arrays(np.asarray(energy_eV, dtype=float), np.asarray(k_squared, dtype=float))
        area = np.maximum(self.inside.squared(energy, k2), 0.0) @ self.area_nm2
        walls = np.sqrt(np.maximum(self.walls.squared(energy, k2), 0.0)) @ self.wall_nm
        return np.asarray((area - walls) / (4 * np.pi) + self._steps(energy, k2))

    def _steps(self, energy: Array, k2: Array) -> Array:
        """What the edges between materials add: the integral of (-1/4 + phi/pi)/pi over wave numbers along them."""
        if not len(self.step_nm):
            return np.zeros(energy.shape)
        q = np.stack([side.squared(energy, k2) for side in self.sides])
        light = np.stack([side.lighter(energy) for side in self.sides])
        upper = q[0] >= q[1]
        high, low = np.maximum(np.where(upper, q[0], q[1]), 0.0), np.where(upper, q[1], q[0])
        ratio = np.where(upper, light[0] / light[1], light[1] / light[0])
        least = np.clip(low, 0.0, high)
        points, weights = np.polynomial.legendre.leggauss(_ALONG)
        total = np.zeros(high.shape)
        for angle, weight in zip((points + 1) * np.pi / 4, weights * np.pi / 4, strict=True):
            along = least + (high - least) * np.sin(angle) ** 2
            normal = np.sqrt((high - least) * np.cos(angle) ** 2)
            decay = np.sqrt(np.maximum(along - low, 0.0))
            phase = np.arctan2(ratio * normal, decay)
            slope = (high - least) * np.sin(angle) * np.cos(angle) / np.sqrt(np.maximum(along, 1e-300))
            total += weight * slope * (phase / np.pi - 0.25)
        return np.asarray(total @ self.step_nm / np.pi)

    def tail(self, energy_eV: Array, known: int, constant: float, degeneracy: int) -> Tail:
        """The subbands after the first `known` ones, of a count with a constant added, from the first energy on."""
        excess = constant - known
        above = self.count(energy_eV, np.zeros(energy_eV.shape)) + excess
        modes = np.maximum.accumulate(np.maximum(above, 0.0))
        states = np.zeros(energy_eV.shape)
        open_ = np.flatnonzero(above > 0)
        if len(open_):
            energy = energy_eV[open_]
            # Where the last of them, and every one, has its bottom: N(E, k^2) falls with k.
            top = self.inside.squared(energy, np.zeros(energy.shape)) * self.inside.in_plane_eV_nm2
            low, high = np.zeros(len(energy)), (top / self.inside.axial_eV_nm2).max(axis=1)
            for _ in range(_HALVINGS):
                middle = (low + high) / 2
                more = self.count(energy, middle) + excess > 0
                low, high = np.where(more, middle, low), np.where(more, high, middle)
            points, weights = np.polynomial.legendre.leggauss(_AXIAL)
            end = np.sqrt((low + high) / 2)[:, None]
            k = end * (points + 1) / 2
            held = np.maximum(self.count(np.repeat(energy[:, None], _AXIAL, axis=1), k**2) + excess, 0.0)
            states[open_] = (held * end * weights / 2).sum(axis=1) / np.pi
        states = np.maximum.accumulate(states)
        modes[0] = states[0] = 0.0  # what is short of the smooth count at the start joins in the first interval
        return Tail(energy_eV, degeneracy * modes, degeneracy * states)


def smooth_count(space: Space, operator: Operator) -> SmoothCount:
    """The count of a one-band operator on the space's cells."""
    tensors = [np.asarray(c.quadratic[:, :, 0, 0].real) for c in operator.by_region]
    edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])
    alpha = np.array(operator.nonparabolicity_per_eV or [0.0] * len(edge))
    in_plane = np.array([np.sqrt(np.linalg.det(t[:2, :2])) for t in tensors])
    # Terms that couple the axis to the section move momenta and leave this much along the axis.
    axial = np.array([t[2, 2] - t[2, :2] @ np.linalg.solve(t[:2, :2], t[:2, 2]) for t in tensors])
    mesh = space.mesh

    def at(region: NDArray[np.int64], higher: Array | float) -> Places:
        return Places(edge[region] + higher, in_plane[region], axial[region], alpha[region])

    def places(region: NDArray[np.int64], points: Array) -> Places:
        varying = operator.potential
        return at(region, 0.0 if varying is None else np.asarray(varying(points[:, 0], points[:, 1]), dtype=float))

    weights = space.quadrature_weights
    region = np.repeat(mesh.region[space.cells], weights.shape[1])
    inside = at(region, operator.potential_on(space).ravel())
    bins = _bins(region, inside.edge_eV)

    border = outline_edges(mesh)
    polyline = mesh.points[border.nodes]
    chords = np.diff(polyline, axis=1)
    middle = (polyline[:, 0] + polyline[:, -1]) / 2
    left, right = mesh.region[border.cells[:, 0]], mesh.region[np.maximum(border.cells[:, 1], 0)]
    # The wave numbers along a wall reach as far as the mass along it lets them.
    inverse = np.array([np.linalg.inv(t[:2, :2]) for t in tensors])[left]
    reach = np.sqrt(np.einsum("eix,exy,eiy->ei", chords, inverse, chords) * in_plane[left, None]).sum(axis=1)
    wall, step = np.flatnonzero(border.wall), np.flatnonzero(~border.wall)
    walls = places(left[wall], middle[wall])
    wall_bins = _bins(left[wall], walls.edge_eV)
    one, other = (places(side[step], middle[step]) for side in (left, right))
    step_bins = _bins(left[step] * len(edge) + right[step], one.edge_eV)
    length = np.linalg.norm(chords, axis=2).sum(axis=1)[step]
    return SmoothCount(
        _averaged(inside, bins, weights.ravel()),
        _total(bins, weights.ravel()),
        _averaged(walls, wall_bins, reach[wall]),
        _total(wall_bins, reach[wall]),
        (_averaged(one, step_bins, length), _averaged(other, step_bins, length)),
        _total(step_bins, length),
    )


def _bins(kind: NDArray[np.int64], energy_eV: Array) -> NDArray[np.int64]:
    """A number for each place, from 0: equal for places of one kind and nearly one energy."""
    label = np.zeros(len(kind), dtype=np.int64)
    used = 0
    for one in np.unique(kind):
        here = np.flatnonzero(kind == one)
        energy = energy_eV[here]
        span = float(np.ptp(energy))
        parts = min(len(here), _BINS) if span > 1e-12 else 1
        rank = np.argsort(np.argsort(energy, kind="stable"), kind="stable")
        label[here] = used + rank * parts // len(here)
        used += parts
    return label


def _averaged(places: Places, bins: NDArray[np.int64], weight: Array) -> Places:
    """The mean places of the bins; all but the edge energy is one number in a bin."""
    total = _total(bins, weight)
    each = (places.edge_eV, places.in_plane_eV_nm2, places.axial_eV_nm2, places.alpha_per_eV)
    return Places(*(_total(bins, weight * values) / total for values in each))


def _total(bins: NDArray[np.int64], weight: Array) -> Array:
    return np.asarray(np.bincount(bins, weight), dtype=float)
