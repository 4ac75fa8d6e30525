"""The subbands of all channels in one spectrum: the listed ones, those above that temperature can reach, and a tail."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics import modes
from wiresolve.physics.listing import K_POINTS, SPIN, THERMAL_REACH, Listed, Listing
from wiresolve.physics.pencil import Operator
from wiresolve.physics.semiclassical import PhaseSpace, phase_space
from wiresolve.physics.solved import Solved, levels
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.subbands import Certified, Channel
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

_FERMI_REACH = 20.0
_ROUGH = 0.02
"""States above the listed ones are used while their error is below this many kT."""
_MOST_THERMAL = 80


@dataclass(frozen=True, eq=False)
class _Rows:
    """States of one channel as the spectrum holds them, the listed ones first."""

    energy_eV: Array
    error_eV: Array
    axial_mass: Array
    degeneracy: int
    listed: int
    closed: bool
    k_per_nm: Array
    band_eV: Array
    edge_eV: float
    alpha_per_eV: float
    direction_eV: Array | None
    names: tuple[str, ...]


def spectrum_of(wire: Wire, certified: Certified, found: Listing) -> Spectrum:
    """The listed subbands, the states above them that temperature can reach, and a semiclassical tail."""
    carriers = wire.problem.carriers
    hottest = KB * max(*carriers.temperature_K, 1.0)
    lowest = float(certified.energy_eV[0])
    ceiling = lowest + THERMAL_REACH * hottest
    if carriers.fermi_level_eV is not None:
        ceiling = max(ceiling, carriers.fermi_level_eV + _FERMI_REACH * KB * carriers.temperature_K[0])
    groups = {g.label: g for g in wire.groups}
    rows = []
    for channel, solved, n, own in zip(
        certified.channels, certified.solved, certified.listed, found.by_channel, strict=True
    ):
        axes = wire.separating_axes(groups[channel.label])
        rows.append(_rows(wire, channel, solved, n, own, ceiling, hottest, axes))
    # Above the first energy up to which some channel's states are not known, all are counted by area.
    top = max(float(certified.energy_eV[-1]), min(float(r.energy_eV[-1]) for r in rows), float(found.energy_eV.max()))
    rows = [_up_to(r, top) for r in rows]
    counted = [
        (SPIN * c.degeneracy, s.phase_space, len(r.energy_eV), s.operator)
        for c, s, r in zip(certified.channels, certified.solved, rows, strict=True)
    ]
    mesh = certified.space.mesh
    for channel, bottom in certified.above:
        if bottom < max(top, ceiling) + 40 * hottest:
            operator = channel.operator_of(mesh)
            counted.append((SPIN * channel.degeneracy, phase_space(certified.space, operator), 0, operator))
    tail_energy = np.linspace(top + 1e-9, max(top, ceiling) + 40 * hottest, 257)
    tail = np.zeros(len(tail_energy))
    for degeneracy, cells, known, _ in counted:
        tail += degeneracy * np.maximum.accumulate(np.maximum(cells.count(tail_energy) - known, 0.0))
    tail[0] = 0.0  # what the solved states are short of the smooth count joins in the first interval
    return _joined(rows, certified.wanted, tail_energy, tail, _tail_mass(certified, counted, top, ceiling))


def _rows(
    wire: Wire,
    channel: Channel,
    solved: Solved,
    listed: int,
    own: Listed,
    ceiling_eV: float,
    hottest_eV: float,
    axes: Array | None,
) -> _Rows:
    """A channel's states, solved further up where temperature can reach and the mesh allows it."""
    energy, bar, mass, states = own.energy_eV, own.bar_eV, own.axial_mass, own.states
    known = len(energy)
    expected = int(solved.phase_space.count(np.array(ceiling_eV))) + 4
    count = min(max(known, expected), max(known, _MOST_THERMAL), len(solved.pencil.kept) // 4)
    if count > known:
        above, vectors = solved.lowest(count)
        # Unrefined states: the error of a smooth state of degree 4 grows like E^5.
        floor = solved.phase_space.bottom_eV
        height = np.maximum((above[known:] - floor) / (energy[-1] - floor), 1.0)
        rough = bar[-1] * height**5
        # Where these errors would count against kT, the count by area is the better one.
        count = known + int(np.searchsorted(rough, _ROUGH * hottest_eV))
        energy = np.concatenate([energy, above[known:count]])
        bar = np.concatenate([bar, rough[: count - known]])
        states = np.hstack([states, solved.pencil.spread(vectors[:, known:count])])
        axial = np.diag(solved.pencil.expected(2, vectors[:, known:count])).real
        slope = 1.0 if solved.relation is None else solved.relation.slope(above[known:count])
        mass = np.concatenate([mass, HBAR2_OVER_2M0 / (axial * slope)])
    k = own.bands.k_per_nm if listed else np.linspace(0, 1e-3, K_POINTS)
    unknown = ~(np.isfinite(mass) & (mass > 0))
    unknown[:listed] &= own.closed
    mass = np.where(unknown, HBAR2_OVER_2M0 / _mean_stiffness(solved), mass)
    table = np.full((len(energy), len(k)), np.nan)
    if not own.closed:
        table[:listed] = own.bands.energy_eV[:listed]
    relation = solved.relation if own.closed else None
    directions = None
    if axes is not None and solved.relation is not None:
        # The band edge belongs to no direction. Where masses grow, each direction's share of the energy stays.
        parts = modes.direction_energies(solved.pencil, states, axes, wire.axis_parts)
        above_edge = energy - solved.relation.edge_eV
        directions = parts * (above_edge / (solved.relation.value(energy) - solved.relation.edge_eV))[:, None]
    return _Rows(
        energy,
        bar,
        np.where(np.isfinite(mass) & (mass > 0), mass, np.nan),
        SPIN * channel.degeneracy,
        listed,
        own.closed,
        k,
        table,
        0.0 if relation is None else relation.edge_eV,
        0.0 if relation is None else relation.alpha_per_eV,
        directions,
        ("width", "height") if directions is not None else (),
    )


def _up_to(rows: _Rows, top_eV: float) -> _Rows:
    """The states up to an energy, the listed ones in any case."""
    count = max(rows.listed, int(np.searchsorted(np.sort(rows.energy_eV), top_eV + 1e-12)))
    pick = slice(0, count)
    return replace(
        rows,
        energy_eV=rows.energy_eV[pick],
        error_eV=rows.error_eV[pick],
        axial_mass=rows.axial_mass[pick],
        band_eV=rows.band_eV[pick],
        direction_eV=None if rows.direction_eV is None else rows.direction_eV[pick],
    )


def _joined(rows: Sequence[_Rows], wanted: int, tail_energy: Array, tail: Array, tail_mass: float) -> Spectrum:
    """All channels in one list by energy; the listed entries come first by construction."""
    energy = np.concatenate([r.energy_eV for r in rows])
    bar = np.concatenate([r.error_eV for r in rows])
    order = np.argsort(energy, kind="stable")
    shape = [len(r.energy_eV) for r in rows]

    def spread(values: Sequence[Any]) -> NDArray[Any]:
        return np.repeat(np.array(values), shape)[order]

    tabulated = any(not r.closed for r in rows)
    known = [r.direction_eV for r in rows if r.direction_eV is not None]
    directions = None
    if known:
        blank = [
            np.full((n, 2), np.nan) if r.direction_eV is None else r.direction_eV
            for r, n in zip(rows, shape, strict=True)
        ]
        directions = np.vstack(blank)[order]
    names = next((r.names for r in rows if r.names), ())
    return Spectrum(
        energy_eV=energy[order],
        error_eV=bar[order],
        axial_mass=np.concatenate([r.axial_mass for r in rows])[order],
        degeneracy=spread([r.degeneracy for r in rows]),
        level=levels(energy[order], bar[order]),
        listed=wanted,
        k_per_nm=np.vstack([np.tile(r.k_per_nm, (n, 1)) for r, n in zip(rows, shape, strict=True)])[order]
        if tabulated
        else None,
        band_eV=np.vstack([r.band_eV for r in rows])[order] if tabulated else None,
        edge_eV=spread([r.edge_eV for r in rows]),
        nonparabolicity_per_eV=spread([r.alpha_per_eV for r in rows]),
        tail_energy_eV=tail_energy,
        tail_count=tail,
        tail_axial_mass=tail_mass,
        direction_energy_eV=directions,
        direction_names=names,
    )


def _mean_stiffness(solved: Solved) -> float:
    """hbar^2/2m along the axis, averaged over the section."""
    space = solved.pencil.space
    by_region = np.array([float(c.quadratic[2, 2, 0, 0].real) for c in solved.operator.by_region])
    weights = space.quadrature_weights.sum(axis=1)
    return float(np.average(by_region[space.mesh.region[space.cells]], weights=weights))


def _tail_mass(
    certified: Certified, counted: Sequence[tuple[int, PhaseSpace, int, Operator]], low_eV: float, high_eV: float
) -> float:
    """Axial mass in m0 of the states counted by area: sqrt(m) averaged as they come, since a density goes like it."""
    space = certified.space
    weights = space.quadrature_weights.sum(axis=1)
    region = space.mesh.region[space.cells]
    middle = 0.5 * (low_eV + max(high_eV, low_eV + 1e-3))
    share, root = 0.0, 0.0
    for degeneracy, _, _, operator in counted:
        alphas = operator.nonparabolicity_per_eV or (0.0,) * len(operator.by_region)
        for index, (c, alpha) in enumerate(zip(operator.by_region, alphas, strict=True)):
            above = max(middle - float(c.constant[0, 0].real), 0.0)
            in_plane = float(np.sqrt(np.linalg.det(c.quadratic[:2, :2, 0, 0].real)))
            states = degeneracy * float(weights[region == index].sum()) * above * (1 + alpha * above) / in_plane
            share += states
            heavier = 1 + 2 * alpha * above
            root += states * float(np.sqrt(HBAR2_OVER_2M0 / c.quadratic[2, 2, 0, 0].real * heavier))
    return (root / share) ** 2 if share > 0 else 1.0
