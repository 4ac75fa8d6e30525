"""The solved states as they are listed: canonical modes, shares, axial masses and E(k), channel by channel."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics import local_axial, modes
from wiresolve.physics.axial_bands import AxialBands, curvature, dispersion
from wiresolve.physics.band_tables import tables
from wiresolve.physics.minima import Minima, bend, beside
from wiresolve.physics.solved import Solved
from wiresolve.physics.subbands import Certified
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

SPIN = 2
"""Both spins share each effective-mass state."""
THERMAL_REACH = 12.0
"""States are solved up to this many kT above the lowest (20 above the Fermi level); above, they are counted by area."""
K_POINTS = 61
_AXIAL_eV = 1e-6
"""E(k) between the minima is never asked for more closely than this: the mesh is made for k = 0."""


@dataclass(frozen=True, eq=False)
class Listed:
    """What is known of the solved states of one channel, the listed ones first (m states).

    Attributes
    ----------
    energy_eV, bar_eV, k_min_per_nm : (m,) minimum over k, its bar, and where it lies.
    axial_mass, axial_mass_error : (m,) in m0 at the minimum; NaN where E(k) starts linearly.
    states : (nodes, m) canonical envelope functions at k = 0.
    shares : probability by region, (m,) each.
    bands : E(k) of the listed states (at least of one).
    closed : E(k) is a parabola, or follows one relation of energy and k^2 that holds all over the section.
    """

    energy_eV: Array
    bar_eV: Array
    k_min_per_nm: Array
    axial_mass: Array
    axial_mass_error: Array
    states: NDArray[Any]
    shares: Mapping[str, Array]
    bands: AxialBands
    closed: bool


@dataclass(frozen=True, eq=False)
class Listing:
    """The wanted entries of all channels, by energy (n of them).

    Attributes
    ----------
    energy_eV, bar_eV, k_min_per_nm, axial_mass, axial_mass_error, shares : (n,), as in `Listed`.
    states : (nodes, n).
    valley, valley_kind, valley_degeneracy : of each entry: the group's label, its kind, and for how many it stands.
    entries : (n, 2) channel and state of each entry.
    wall_effect_eV : (n,) of each entry, NaN where it has none; None where no channel has an outer barrier.
    by_channel : each channel's own.
    """

    energy_eV: Array
    bar_eV: Array
    k_min_per_nm: Array
    axial_mass: Array
    axial_mass_error: Array
    states: NDArray[Any]
    shares: Mapping[str, Array]
    valley: tuple[str, ...]
    valley_kind: tuple[str, ...]
    valley_degeneracy: tuple[int, ...]
    entries: NDArray[np.int64]
    wall_effect_eV: Array | None
    by_channel: tuple[Listed, ...]


def listing(wire: Wire, certified: Certified) -> Listing:
    """Everything that is listed of the certified states."""
    reach = _energy_reach(wire, certified)
    each = tuple(
        _listed(wire, solved, n, low, reach)
        for solved, n, low in zip(certified.solved, certified.listed, certified.minima, strict=True)
    )
    entries = certified.entries

    def gathered(name: str) -> Array:
        return np.array([getattr(each[c], name)[i] for c, i in entries])

    channels = [certified.channels[c] for c, _ in entries]
    regions = {name for one in each for name in one.shares}
    energy = gathered("energy_eV")
    # A minimum that lies off k = 0 may bring entries into another order than their energies at k = 0 have.
    order = np.argsort(energy, kind="stable")
    return Listing(
        energy_eV=energy[order],
        bar_eV=gathered("bar_eV")[order],
        k_min_per_nm=gathered("k_min_per_nm")[order],
        axial_mass=gathered("axial_mass")[order],
        axial_mass_error=gathered("axial_mass_error")[order],
        states=np.column_stack([each[c].states[:, i] for c, i in entries[order]]),
        shares={
            name: np.array([each[c].shares[name][i] if name in each[c].shares else 0.0 for c, i in entries[order]])
            for name in sorted(regions)
        },
        valley=tuple(channels[i].label for i in order),
        valley_kind=tuple(channels[i].valley for i in order),
        valley_degeneracy=tuple(channels[i].degeneracy for i in order),
        entries=entries[order],
        wall_effect_eV=None if certified.wall_effect_eV is None else certified.wall_effect_eV[order],
        by_channel=each,
    )


def _listed(wire: Wire, solved: Solved, listed: int, low: Minima | None, reach_eV: float) -> Listed:
    """One channel's states; without a listed one, E(k) is taken for a parabola."""
    whole = int(solved.level.max())
    unknowns = modes.canonical(solved.pencil, solved.unknown_states, solved.level, whole)
    states = solved.pencil.spread(unknowns)
    shares = modes.shares(solved.pencil.space, states)
    if not listed:
        return _unlisted(solved, unknowns, states, shares)
    if low is not None:
        accuracy = max(0.1 * wire.problem.accuracy.energy_eV, _AXIAL_eV)
        return _sheared(solved, low, unknowns, states, shares, reach_eV, accuracy)
    count = listed
    if solved.relation is None:
        return _locally(solved, unknowns, states, shares, count, reach_eV)
    relation, pencil = solved.relation, solved.pencil
    coarse, mass, error = _masses(solved, unknowns)
    stiffness = np.nanmedian(np.abs(coarse)) if np.isfinite(coarse).any() else HBAR2_OVER_2M0
    lowest = solved.energy_eV[:1]
    far = float((relation.value(lowest + reach_eV) - relation.value(lowest))[0])
    k = np.linspace(0, np.sqrt(far / stiffness), K_POINTS)
    accuracy = max(0.1 * wire.problem.accuracy.energy_eV, _AXIAL_eV)
    bands = dispersion(pencil, solved.value_eV, unknowns, k, solved.shift_eV, accuracy, count)
    parabola = solved.value_eV[:count, None] + coarse[:count, None] * k**2
    closed = bool(np.isfinite(coarse).all() and np.abs(bands.energy_eV - parabola).max() < 1e-9)
    bands = replace(bands, energy_eV=relation.energy(bands.energy_eV))
    k_min = np.zeros(len(solved.energy_eV))
    return Listed(solved.energy_eV, solved.bar_eV, k_min, mass, error, states, shares, bands, closed)


def _masses(solved: Solved, unknowns: NDArray[Any]) -> tuple[Array, Array, Array]:
    """(m,) curvatures of the constant-mass eigenvalues at k = 0 in eV nm^2, axial masses in m0, and their errors."""
    relation = solved.relation
    assert relation is not None
    coarse = curvature(solved.pencil, solved.value_eV, unknowns, solved.level, solved.shift_eV)
    # The same at degree 6 shows what the mesh still does to the mass.
    fine_states = solved.enriched.states[solved.enriched_pencil.kept]
    fine = curvature(solved.enriched_pencil, solved.enriched.energy_eV, fine_states, solved.level, solved.shift_eV)
    heavier = 1 / relation.slope(solved.energy_eV)
    mass = HBAR2_OVER_2M0 / coarse * heavier
    error = solved.bar_factor * np.abs(HBAR2_OVER_2M0 / fine * heavier - mass) + 1e-12 * np.abs(mass)
    growth = relation.alpha_per_eV * solved.bar_eV
    return coarse, mass, error + 2 * growth / heavier * np.abs(mass)


def _sheared(
    solved: Solved,
    low: Minima,
    unknowns: NDArray[Any],
    states: NDArray[Any],
    shares: Mapping[str, Array],
    reach_eV: float,
    accuracy_eV: float,
) -> Listed:
    """The same where H(k) has a part linear in k: bands may be lowest off k = 0, or start linearly."""
    n = len(low.rows)
    energy, bar, k_min = solved.energy_eV.copy(), solved.bar_eV.copy(), np.zeros(len(solved.energy_eV))
    energy[:n], bar[:n], k_min[:n] = low.energy_eV, low.bar_eV, low.k_per_nm
    along = np.diag(solved.pencil.expected(2, unknowns)).real
    if solved.relation is not None:
        _, mass, error = _masses(solved, unknowns)
        along = along * solved.relation.slope(solved.energy_eV)
        near_zero = None
    else:
        mass, error = HBAR2_OVER_2M0 / along, 0.1 * HBAR2_OVER_2M0 / along
        near_zero = beside(low.survey) if None in low.there else None
    for i, there in enumerate(low.there):
        if there is not None:
            k_min[i], mass[i], error[i] = _bent(low, i)
        elif solved.relation is None:
            assert solved.local_mass is not None
            level = np.flatnonzero(solved.level == solved.level[i])
            linear = local_axial.linear_part(solved.local_mass, solved.energy_eV[i], unknowns[:, level])
            mass[i], error[i] = (np.nan, np.nan) if linear > along[i] else _bent(low, i, near_zero)[1:]
    stiffness = HBAR2_OVER_2M0 / np.abs(mass[:n][np.isfinite(mass[:n])])
    end = float(np.sqrt(1.5 * reach_eV / np.median(stiffness if len(stiffness) else along[:n])))
    bands = tables(low, k_min[:n], end, K_POINTS, reach_eV, accuracy_eV)
    return Listed(energy, bar, k_min, mass, error, states, shares, bands, closed=False)


def _bent(low: Minima, i: int, near_zero: Solved | None = None) -> tuple[float, float, float]:
    """Where exactly a listed minimum is, its axial mass, and the mass's error."""
    k, curve, error = bend(low, i, near_zero)
    mass = HBAR2_OVER_2M0 / curve
    return k, mass, abs(mass) * error / abs(curve)


def _unlisted(solved: Solved, unknowns: NDArray[Any], states: NDArray[Any], shares: Mapping[str, Array]) -> Listed:
    """States that are there for thermal sums only: masses without what terms linear in k add."""
    along = np.diag(solved.pencil.expected(2, unknowns)).real
    slope = 1.0 if solved.relation is None else solved.relation.slope(solved.energy_eV)
    mass = HBAR2_OVER_2M0 / (along * slope)
    none = AxialBands(np.linspace(0, 1e-3, 4), np.zeros((0, 4)), 0.0)
    zeros = np.zeros(len(mass))
    return Listed(solved.energy_eV, solved.bar_eV, zeros, mass, 0.1 * mass, states, shares, none, closed=True)


def _locally(
    solved: Solved, unknowns: NDArray[Any], states: NDArray[Any], shares: Mapping[str, Array], count: int, reach: float
) -> Listed:
    """The same where masses grow with energy differently from place to place."""
    family, energy = solved.local_mass, solved.energy_eV
    assert family is not None
    along = np.diag(solved.pencil.expected(2, unknowns)).real
    k = np.linspace(0, np.sqrt(1.5 * reach / np.median(along)), K_POINTS)
    bands = local_axial.dispersion(family, energy, unknowns, k, solved.phase_space, count)
    coarse = local_axial.curvature(family, energy, unknowns, solved.level)
    mass = HBAR2_OVER_2M0 / coarse
    fine = np.diag(
        solved.enriched_pencil.expected(2, solved.enriched.states[solved.enriched_pencil.kept])
    ).real  # fmt: skip
    error = 2 * solved.bar_factor * np.abs(fine / along - 1) * np.abs(mass) + 1e-9 * np.abs(mass)
    return Listed(energy, solved.bar_eV, np.zeros(len(energy)), mass, error, states, shares, bands, closed=False)


def _energy_reach(wire: Wire, certified: Certified) -> float:
    """How far up E(k) is wanted: the listed span, and 12 kT."""
    energy = certified.energy_eV
    hottest = max(wire.problem.carriers.temperature_K)
    return float(max(energy[-1] - energy[0], THERMAL_REACH * KB * hottest, 0.02 * abs(energy[0]), 1e-3))
