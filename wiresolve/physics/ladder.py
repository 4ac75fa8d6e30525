"""The subbands of all channels in one spectrum: the listed ones, those above that temperature can reach, and a tail."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics import local_mass, modes
from wiresolve.physics.channel import Channel
from wiresolve.physics.listing import K_POINTS, SPIN, THERMAL_REACH, Listed, Listing
from wiresolve.physics.pencil import build
from wiresolve.physics.smooth_count import SmoothCount, smooth_count
from wiresolve.physics.solved import Solved, levels
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.subbands import Certified
from wiresolve.physics.tail import Tail
from wiresolve.physics.unlisted import axial_motion, upright
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

_FERMI_REACH = 20.0
_ROUGH = 0.5
_MISPLACED = 0.2
"""States above the certified ones are used while their estimated error, a cautious one, is below so many kT, and no
more than so many states lie within it. Beyond, the smooth count is nearer to the truth."""
_SLOPE = 0.02
"""Relative step of energy for the smooth count's slope."""
_MOST_THERMAL = 80
"""Most states of a channel that are solved for thermal sums; what comes above is counted."""
_GAPS = 12
"""Among so many gaps at most the solved states end, where the smooth count agrees with them."""
_PARTED = 0.3
"""Gaps narrower than this part of the mean are taken for the inside of a level."""
_BENT = 6.0
"""How many kT above a state's minimum the growth of its mass along the wire is taken."""
_BEYOND = 40.0
"""Tails reach this many kT beyond the highest energy of interest."""
_TAIL_ENERGIES = 513
"""Closest at the start, where the states grow as (E - start)^(3/2): straight lines between are good to 1e-5."""


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
    edge_eV: Array
    alpha_per_eV: Array
    direction_eV: Array | None
    names: tuple[str, ...]


def spectrum_of(wire: Wire, certified: Certified, found: Listing) -> Spectrum:
    """The listed subbands, the states above them that temperature can reach, and a semiclassical tail."""
    carriers = wire.problem.carriers
    hottest = KB * max(*carriers.temperature_K, 1.0)
    lowest = float(certified.energy_eV[0])
    ceiling = lowest + THERMAL_REACH * hottest
    fermi = wire.problem.fermi_level_eV
    if fermi is not None:
        ceiling = max(ceiling, fermi + _FERMI_REACH * KB * carriers.temperature_K[0])
    counts = [smooth_count(certified.space, solved.operator) for solved in certified.solved]
    rows = [
        _rows(wire, channel, solved, n, own, count, ceiling, hottest)
        for channel, solved, n, own, count in zip(
            certified.channels, certified.solved, certified.listed, found.by_channel, counts, strict=True
        )
    ]
    constants = [_constant(count, r.energy_eV) for count, r in zip(counts, rows, strict=True)]
    lowest_start = max(float(certified.energy_eV[-1]), float(found.energy_eV.max()))
    highest_start = min([float(r.energy_eV.max()) for r in rows] + [bottom for _, bottom in certified.above])
    top = _joint(rows, counts, constants, lowest_start, highest_start)
    rows = [_up_to(r, top) for r in rows]
    end = max(top, ceiling) + _BEYOND * hottest
    energy = top + 1e-9 + (end - top) * np.linspace(0, 1, _TAIL_ENERGIES) ** 2
    tails = [
        count.tail(energy, len(r.energy_eV), constant, r.degeneracy)
        for count, r, constant in zip(counts, rows, constants, strict=True)
    ]
    for channel, bottom in certified.above:
        if bottom < end:
            count = smooth_count(certified.space, channel.operator_of(certified.space.mesh))
            tails.append(count.tail(energy, 0, 0.0, SPIN * channel.degeneracy))
    return _joined(rows, certified.wanted, tuple(tails))


def _joint(
    rows: Sequence[_Rows],
    counts: Sequence[SmoothCount],
    constants: Sequence[float],
    lowest_eV: float,
    known_to_eV: float,
) -> float:
    """Where the solved states end and the counted ones begin, in all channels: not below `lowest_eV`.

    All states are known up to where the first channel's end, or those of a channel that is not solved begin. Among the
    last gaps below, the one is taken in whose middle the smooth counts come closest to the number of the states. The
    first level above `lowest_eV` stays whole.
    """
    energy = np.sort(np.concatenate([r.energy_eV for r in rows]))
    energy = energy[(energy > lowest_eV) & (energy <= known_to_eV)]
    width = np.diff(energy)
    # Levels are not parted, and few states are worth more than a good fit.
    wide = np.flatnonzero(width > _PARTED * width.mean())[1:] if len(width) > 2 else np.zeros(0, dtype=int)
    wide = wide[wide >= max(3 * len(energy) // 4, len(energy) - _GAPS)]
    if not len(wide):
        return max(lowest_eV, known_to_eV)
    middles = (energy[wide] + energy[wide + 1]) / 2
    still = np.zeros(len(middles))
    misfit = np.zeros(len(middles))
    for r, count, constant in zip(rows, counts, constants, strict=True):
        number = np.searchsorted(np.sort(r.energy_eV), middles)
        misfit += r.degeneracy * np.abs(count.count(middles, still) + constant - number)
    return float(middles[int(np.argmin(misfit))])


def _constant(count: SmoothCount, energy_eV: Array) -> float:
    """What the known states, n - 1/2 below the n-th, have more than the smooth count, averaged over the upper half."""
    energy_eV = np.sort(energy_eV)
    number = np.arange(len(energy_eV))
    upper = number >= len(number) // 2
    smooth = count.count(energy_eV[upper], np.zeros(int(upper.sum())))
    return float(np.mean(number[upper] + 0.5 - smooth))


def _rows(
    wire: Wire,
    channel: Channel,
    solved: Solved,
    listed: int,
    own: Listed,
    smooth: SmoothCount,
    ceiling_eV: float,
    hottest_eV: float,
) -> _Rows:
    """A channel's states, solved further up where temperature can reach and the mesh allows it."""
    higher = _higher(solved, own, smooth, ceiling_eV, hottest_eV)
    known = len(own.energy_eV)
    above, rough, vectors = higher.energy_eV[known:], higher.error_eV[known:], higher.vectors[:, known:]
    energy, bar = np.concatenate([own.energy_eV, above]), np.concatenate([own.bar_eV, rough])
    relation = solved.relation
    if relation is not None:
        unlisted = own.states[solved.pencil.kept, listed:]
        along = np.concatenate([_along(solved, unlisted), _along(higher.made, vectors)])
        mass = np.concatenate([own.axial_mass[:listed], HBAR2_OVER_2M0 / (along * relation.slope(energy[listed:]))])
        edge, alpha = np.full(len(energy), relation.edge_eV), np.full(len(energy), relation.alpha_per_eV)
    else:
        family = higher.made.local_mass
        assert family is not None
        if family.sheared:
            count = len(higher.energy_eV)
            family = local_mass.family(family.space, upright(solved.operator), solved.phase_space, count)
        bent, growth = axial_motion(family, higher.energy_eV, higher.vectors, listed, _BENT * hottest_eV)
        mass = np.concatenate([own.axial_mass[:listed], bent])
        edge, alpha = energy, np.concatenate([np.zeros(listed), growth])
    k = own.bands.k_per_nm if listed else np.linspace(0, 1e-3, K_POINTS)
    unknown = ~(np.isfinite(mass) & (mass > 0))
    unknown[:listed] &= own.closed
    mass = np.where(unknown, HBAR2_OVER_2M0 / _mean_stiffness(solved), mass)
    table = np.full((len(energy), len(k)), np.nan)
    if not own.closed:
        table[:listed] = own.bands.energy_eV[:listed]
    directions = None
    axes = wire.separating_axes(next(g for g in wire.groups if g.label == channel.label))
    if axes is not None and relation is not None:
        # The band edge belongs to no direction. Where masses grow, each direction's share of the energy stays.
        parts = np.vstack(
            [
                modes.direction_energies(made.pencil, states, axes, wire.axis_parts)
                for made, states in ((solved, own.states), (higher.made, higher.made.pencil.spread(vectors)))
            ]
        )
        above_edge = energy - relation.edge_eV
        directions = parts * (above_edge / (relation.value(energy) - relation.edge_eV))[:, None]
    return _Rows(
        energy,
        bar,
        np.where(np.isfinite(mass) & (mass > 0), mass, np.nan),
        SPIN * channel.degeneracy,
        listed,
        own.closed,
        k,
        table,
        edge,
        alpha,
        directions,
        ("width", "height") if directions is not None else (),
    )


def _along(made: Solved, vectors: NDArray[Any]) -> Array:
    """hbar^2/2m along the wire of states (unknowns, m) at constant masses."""
    pencil = made.pencil
    if pencil.has(1):
        pencil = replace(build(pencil.space, upright(made.operator)), kept=pencil.kept)
    return np.asarray(np.diag(pencil.expected(2, vectors)).real)


@dataclass(frozen=True, eq=False)
class _Higher:
    """States of a channel from the lowest up (m of them), as far up as they are of use, on one of the two spaces.

    Attributes
    ----------
    made : the channel on that space: its pencil, and its T(E) where masses grow differently from place to place.
    energy_eV, error_eV : (m,) with estimated errors, of use above the certified states only.
    vectors : (unknowns, m).
    """

    made: Solved
    energy_eV: Array
    error_eV: Array
    vectors: NDArray[Any]


def _higher(solved: Solved, own: Listed, smooth: SmoothCount, ceiling_eV: float, hottest_eV: float) -> _Higher:
    """The states that temperature can reach, at degree 6 on the same mesh where degree 4 would not do."""
    known, highest = len(own.energy_eV), float(own.energy_eV.max())
    expected = int(solved.phase_space.count(np.array(ceiling_eV))) + 4
    count = min(max(known, expected), max(known, _MOST_THERMAL), len(solved.enriched_pencil.kept) // 4)
    if count <= known:
        return _Higher(solved, own.energy_eV, own.bar_eV, own.states[solved.pencil.kept])
    floor = solved.phase_space.bottom_eV

    def misplaced(energy: Array, fine: bool) -> tuple[Array, NDArray[np.bool_]]:
        """Cautious errors, and where they are much against kT or against the distance of states."""
        above = energy - floor
        height = np.maximum(above / (highest - floor), 1.0)
        # The error of a smooth state goes as (k h)^8 of its energy at degree 4, as (k h)^12 at degree 6.
        rough = own.bar_eV[-1] * height**5
        if fine:
            rough = np.minimum(rough, own.bar_eV[-1] * height + rough * np.sqrt(rough / above))
        step, still = _SLOPE * above, np.zeros(len(above))
        per_eV = (smooth.count(energy + step, still) - smooth.count(energy - step, still)) / (2 * step)
        return rough, (rough > _ROUGH * hottest_eV) | (rough * per_eV > _MISPLACED)

    top = np.array([max(solved.phase_space.energy_of(count), highest)])
    fine = bool(misplaced(top, False)[1][0]) or count > len(solved.pencil.kept) // 4
    if solved.relation is None and solved.operator.varies:
        fine, count = False, min(count, max(known, len(solved.pencil.kept) // 4))  # too many parts for degree 6
    made = _at_degree_six(solved) if fine else solved
    energy, vectors = made.lowest(count)
    made.pencil.forget()
    rough, useless = misplaced(energy, fine)
    useless[:known] = False
    used = int(np.argmax(useless)) if useless.any() else count
    return _Higher(made, energy[:used], rough[:used], vectors[:, :used])


def _at_degree_six(solved: Solved) -> Solved:
    """The channel on the finer space: for its pencil and its T(E); its certified states are those of degree 4."""
    space, family = solved.enriched.space, solved.local_mass
    if family is not None:
        family = local_mass.family(space, solved.operator, solved.phase_space, len(solved.energy_eV))
    return replace(solved, pencil=solved.enriched_pencil, local_mass=family)


def _up_to(rows: _Rows, top_eV: float) -> _Rows:
    """The states up to an energy, the listed ones in any case."""
    pick = (np.arange(len(rows.energy_eV)) < rows.listed) | (rows.energy_eV <= top_eV)
    return replace(
        rows,
        energy_eV=rows.energy_eV[pick],
        error_eV=rows.error_eV[pick],
        axial_mass=rows.axial_mass[pick],
        band_eV=rows.band_eV[pick],
        edge_eV=rows.edge_eV[pick],
        alpha_per_eV=rows.alpha_per_eV[pick],
        direction_eV=None if rows.direction_eV is None else rows.direction_eV[pick],
    )


def _joined(rows: Sequence[_Rows], wanted: int, tails: tuple[Tail, ...]) -> Spectrum:
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
        edge_eV=np.concatenate([r.edge_eV for r in rows])[order],
        nonparabolicity_per_eV=np.concatenate([r.alpha_per_eV for r in rows])[order],
        tails=tails,
        direction_energy_eV=directions,
        direction_names=names,
    )


def _mean_stiffness(solved: Solved) -> float:
    """hbar^2/2m along the axis, averaged over the section."""
    space = solved.pencil.space
    softer = upright(solved.operator).by_region
    by_region = np.array([float(c.quadratic[2, 2, 0, 0].real) for c in softer])
    weights = space.quadrature_weights.sum(axis=1)
    return float(np.average(by_region[space.mesh.region[space.cells]], weights=weights))
