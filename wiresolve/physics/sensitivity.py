"""Millielectronvolts per nanometre: how each energy moves with every dimension, mass and band edge, from one solve.

Dimensions by the volume form of the shape derivative (`fem.shape_derivative`), masses and edges by the theorem of
H. Hellmann (1937) and R. P. Feynman (Phys. Rev. 56, 340 (1939)), all with the same integrals. A level of several states
has a matrix of derivatives; its eigenvalues are how fast the states that it splits into move, and they are listed in
ascending order. Energies are counted with the energy zero and a given potential held where they are, each at the k
where its band is lowest.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.valleys import ValleyGroup
from wiresolve.describe.material import Material
from wiresolve.describe.valley import ANY_VALLEY, ZONE_CENTRE, Valley
from wiresolve.fem.boundary_form import places, stress_jumps
from wiresolve.fem.mesh import Region
from wiresolve.fem.shape_derivative import Medium, Pairs, Response, respond
from wiresolve.physics.minima import Minima
from wiresolve.physics.outline_motion import OutlineMotion
from wiresolve.physics.solved import Solved
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_PIECES = 6
"""Pieces of each edge of the mesh with a value of their own."""
PER_LENGTH, PER_ENERGY, PER_MASS, PER_INVERSE_MASS = "eV_per_nm", "eV_per_eV", "eV_per_m0", "eV_m0"


@dataclass(frozen=True, eq=False)
class Sensitivity:
    """Derivatives of energies by one quantity.

    Attributes
    ----------
    of : the path of the quantity's key in the wire file (`section.diameter`, `section.layers[1].thickness`,
        `section.patches[2].center[1]`, `materials.GaAs.electron_mass`, `materials.Si.Delta.longitudinal_mass`,
        `materials.GaAs.conduction_edge`, `section.layers[1].offset`), or "growth of rim", "growth of core" and so on:
        all of that outline moved outwards by the same distance, the other outlines held.
    unit : `eV_per_nm`, `eV_per_eV`, `eV_per_m0`, or `eV_m0` for an inverse mass in 1/m0.
    values : (subbands,).
    """

    of: str
    unit: str
    values: Array


def sensitivities(
    motion: OutlineMotion,
    solved: Solved,
    materials: Mapping[str, Material],
    group: ValleyGroup,
    wanted: int,
    k_per_nm: float = 0.0,
) -> tuple[Sensitivity, ...]:
    """Derivatives of the lowest energies of one group of valleys by dimensions, masses, band edges and offsets.

    Parameters
    ----------
    motion : of the outlines of the mesh that the states are on; the same for all groups on it.
    materials : by name, those that admit carriers at least.
    wanted : how many of the states count; whole levels are taken into account.
    k_per_nm : the wave number of the states.
    """
    kept = int(np.searchsorted(solved.level, solved.level[max(wanted, 1) - 1], side="right"))
    pairs = _pairs(solved.level[:kept], solved.energy_eV)
    found = respond(solved.pencil.space, motion.edges, medium(solved, k_per_nm), solved.states[:, :kept], pairs)
    regions = solved.pencil.space.mesh.regions
    rows = [(name, PER_LENGTH) for name in motion.names]
    parts = [found.moved(motion.edges, motion.velocity)] if rows else []
    for name, unit, row in (*by_masses(found, regions, materials, group), *by_edges(found, regions)):
        rows.append((name, unit))
        parts.append(row[None])
    values = _of_levels(np.vstack(parts), found.norm, pairs, solved.level[:kept])[:, :wanted]
    return tuple(Sensitivity(name, unit, row) for (name, unit), row in zip(rows, values, strict=True))


def sensitivities_at_minima(
    motion: OutlineMotion, low: Minima, materials: Mapping[str, Material], group: ValleyGroup
) -> tuple[Sensitivity, ...]:
    """The same of a channel's listed minima, each at its own wave number: there dE/dk is zero."""
    still = sensitivities(motion, low.survey.space.solved, materials, group, int(low.rows.max()) + 1)
    values = {s.of: s.values[low.rows] for s in still}
    for i, there in enumerate(low.there):
        if there is not None:
            solved, number = there
            for own in sensitivities(motion, solved, materials, group, number + 1, float(low.k_per_nm[i])):
                values[own.of][i] = own.values[number]
    return tuple(Sensitivity(s.of, s.unit, values[s.of]) for s in still)


@dataclass(frozen=True, eq=False)
class OutlineSensitivity:
    """How much each piece of the outlines moves the first level and the spacing to the second.

    Attributes
    ----------
    segments : (k, 2, 2) both ends of each piece in nm.
    level_eV_per_nm2 : (k,) energy of the first level for each nm that 1 nm of outline moves outwards: at a wall away
        from the carriers, at an interface away from the piece whose outline it is. States of a level are averaged.
    spacing_eV_per_nm2 : (k,) the same of the spacing to the second level; None where only one level is listed.
    """

    segments: Array
    level_eV_per_nm2: Array
    spacing_eV_per_nm2: Array | None


NOWHERE = OutlineSensitivity(np.zeros((0, 2, 2)), np.zeros(0), None)
"""No outline's sensitivity is known."""


def outline_sensitivity(
    motion: OutlineMotion, solved: Sequence[Solved], minima: Sequence[Minima | None], entries: Ints, level: Ints
) -> OutlineSensitivity:
    """The outlines' pieces with what they do to the first two levels of a list.

    Parameters
    ----------
    solved, minima : of each channel, on the mesh of `motion`, as in `Certified`.
    entries, level : (n, 2) channel and state of each entry by energy, and its level.
    """
    edges = motion.edges
    ends = np.linspace(0, 1, _PIECES + 1)
    middle = (ends[:-1] + ends[1:]) / 2
    found = []
    for number in np.unique(level)[:2]:
        total: Any = 0
        own = np.asarray(entries)[np.asarray(level) == number]
        for one, states, k in _places(solved, minima, own):
            energy, vectors = one.energy_eV[states], one.states[:, states]
            jumps = stress_jumps(one.pencil.space, edges, medium(one, k), vectors, energy, middle)
            total = total + (jumps / _norms(one, energy, vectors)).sum(axis=2)
        outward = np.where(edges.wall, 1.0, motion.outward)
        found.append((total / len(own) * outward[:, None]).ravel())
    points = places(edges, ends)
    segments = np.stack([points[:, :-1], points[:, 1:]], axis=2).reshape(-1, 2, 2)
    # The mesh's end of a material that goes on outside is no part of the section.
    drawn = np.repeat(motion.outward != 0, _PIECES)
    first = found[0][drawn]
    return OutlineSensitivity(segments[drawn], first, found[1][drawn] - first if len(found) > 1 else None)


def _places(
    solved: Sequence[Solved], minima: Sequence[Minima | None], entries: Ints
) -> Iterator[tuple[Solved, Ints, float]]:
    """The states of entries (channel, state) at their minima: all of a channel at k = 0 together, others one by one."""
    for channel in np.unique(entries[:, 0]):
        states, low = entries[entries[:, 0] == channel, 1], minima[channel]
        off = [] if low is None else [i for i in states if low.there[i] is not None]
        if len(off) < len(states):
            yield solved[channel], np.setdiff1d(states, off), 0.0
        for i in off:
            assert low is not None
            there = low.there[i]
            assert there is not None
            yield there[0], np.array([there[1]]), float(low.k_per_nm[i])


def _norms(solved: Solved, energy: Array, states: NDArray[Any]) -> Array:
    """(m,) -d<T(E) - E>/dE of states."""
    if solved.local_mass is not None:
        return solved.local_mass.norms(energy, states[solved.local_mass.kept])
    assert solved.relation is not None
    grown = solved.relation.alpha_per_eV * (energy - solved.relation.edge_eV)
    return np.asarray(1 + grown / (1 + grown))


def merged(
    channels: Sequence[Sequence[Sensitivity]], entries: Sequence[tuple[int, int]] | Ints
) -> tuple[Sensitivity, ...]:
    """Sensitivities of a list of entries (channel, state), from those of each channel; 0 by what a channel lacks."""
    units = {s.of: s.unit for channel in channels for s in channel}
    by_name = [{s.of: s.values for s in channel} for channel in channels]
    nothing = np.zeros(max((len(s.values) for channel in channels for s in channel), default=0))
    return tuple(
        Sensitivity(of, unit, np.array([by_name[c].get(of, nothing)[i] for c, i in entries]))
        for of, unit in units.items()
    )


def medium(solved: Solved, k_per_nm: float = 0.0) -> Medium:
    """What the states of a one-band operator live in."""
    operator = solved.operator
    depth = 2 if k_per_nm == 0 else 3
    alpha = np.array(operator.nonparabolicity_per_eV) if operator.nonparabolic else None
    return Medium(
        stiffness=np.array([c.quadratic[:depth, :depth, 0, 0].real for c in operator.by_region]),
        edge_eV=np.array([float(c.constant[0, 0].real) for c in operator.by_region]),
        nonparabolicity_per_eV=alpha,
        potential=operator.potential,
        k_per_nm=k_per_nm,
    )


def _pairs(level: Ints, energy: Array) -> Pairs:
    """All pairs i <= j inside levels, at their mean energy."""
    one, two = np.nonzero(np.triu(level[:, None] == level[None, :]))
    return Pairs(one, two, (energy[one] + energy[two]) / 2)


def _of_levels(rows: NDArray[Any], norm: NDArray[Any], pairs: Pairs, level: Ints) -> Array:
    """(k, m) eigenvalues of each level's matrices (k, p) in the inner product of `norm` (p,), ascending."""
    out = np.empty((len(rows), len(level)))
    number = np.zeros((len(level), len(level)), dtype=np.int64)
    number[pairs.first, pairs.second] = np.arange(len(pairs))
    first = np.flatnonzero(np.r_[True, level[1:] != level[:-1]])
    sizes = np.diff([*first, len(level)])
    for size in np.unique(sizes):
        states = first[sizes == size][:, None] + np.arange(size)  # (levels of this size, size)
        i, j = np.triu_indices(size)
        values = np.vstack([rows, norm[None]])[:, number[states[:, i], states[:, j]]]
        matrices = np.zeros((*values.shape[:2], size, size), dtype=values.dtype)
        matrices[..., j, i] = values.conj()
        matrices[..., i, j] = values
        turn = np.linalg.inv(np.linalg.cholesky(matrices[-1]))
        out[:, states] = np.linalg.eigvalsh(turn @ matrices[:-1] @ turn.conj().swapaxes(1, 2))
    return out


def by_masses(
    found: Response, regions: Sequence[Region], materials: Mapping[str, Material], group: ValleyGroup
) -> Iterator[tuple[str, str, NDArray[Any]]]:
    """By each mass of the group's valleys in each material: T(E) grows with A = hbar^2/2m as `stiffened` tells."""
    for name in dict.fromkeys(r.material for r in regions if r.carriers):
        own = [k for k, r in enumerate(regions) if r.carriers and r.material == name]
        stiffened = found.stiffened[own].sum(axis=0)
        depth = len(stiffened)
        valley = materials[name].valley_named(group.valley)
        assert valley is not None
        tensor = np.asarray(group.inverse_mass[name])[:depth, :depth]
        for key, unit, change in _changes(valley, tensor):
            yield f"materials.{name}.{key}", unit, HBAR2_OVER_2M0 * np.einsum("xy,xyp->p", change, stiffened)


def _changes(valley: Valley, tensor: Array) -> Iterator[tuple[str, str, Array]]:
    """Keys of a valley's masses, and how the inverse mass in 1/m0 changes with each."""
    depth = len(tensor)
    prefix = "" if valley.name in (ZONE_CENTRE, ANY_VALLEY) else f"{valley.name}."
    if valley.inverse_mass:
        for i, j in ((0, 0), (1, 1), (0, 1)):
            change = np.zeros((depth, depth))
            change[i, j] = change[j, i] = 1
            yield f"{prefix}inverse_mass[{i + 1}][{j + 1}]", PER_INVERSE_MASS, change
        return
    along, across = valley.longitudinal_mass, valley.transverse_mass
    assert along is not None and across is not None
    if along == across:
        yield f"{prefix}electron_mass", PER_MASS, -np.eye(depth) / along**2
        return
    # 1/m = (1 - u u)/across + u u/along with u along the valley's axis.
    axis = (tensor - np.eye(depth) / across) / (1 / along - 1 / across)
    yield f"{prefix}longitudinal_mass", PER_MASS, -axis / along**2
    yield f"{prefix}transverse_mass", PER_MASS, (axis - np.eye(depth)) / across**2


def by_edges(found: Response, regions: Sequence[Region]) -> Iterator[tuple[str, str, NDArray[Any]]]:
    """By each material's conduction edge and each piece's offset; nothing where only one piece admits carriers."""
    admitted = [(k, r) for k, r in enumerate(regions) if r.carriers]
    for name in dict.fromkeys(r.material for _, r in admitted):
        own = [k for k, r in admitted if r.material == name]
        if len(own) < len(admitted):
            yield f"materials.{name}.conduction_edge", PER_ENERGY, found.raised[own].sum(axis=0)
    if len(admitted) > 1:
        for k, region in admitted:
            if (path := _path(region.name)) is not None:
                yield f"{path}.offset", PER_ENERGY, found.raised[k]


def _path(region: str) -> str | None:
    """Where a region's keys stand in the wire file; None where it has none."""
    kind, _, number = region.partition(" ")
    if region == "core":
        return "section"
    if region == "outside":
        return None
    if kind in ("layer", "patch") and number.isdigit():
        return f"section.{'layers' if kind == 'layer' else 'patches'}[{number}]"
    return f"section.group_materials.{region}"
