"""Certified subband minima: meshes refined until every wanted energy's bar is under the accuracy, then counted."""

from __future__ import annotations

import logging
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.section import Piece
from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen, estimate
from wiresolve.fem.corners import Corner, gradings, singular_corners
from wiresolve.fem.enrich import Enriched, enrich
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import PhaseSpace, phase_space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
OperatorOf = Callable[[Mesh], Operator]
"""The operator over a mesh's regions."""
Progress = Callable[[str, float, str], None]

_log = logging.getLogger(__name__)

MOST_VALUES = 12_000_000
"""Unknowns times states above which a mesh would leave a laptop's memory and patience: the best result so far is kept
and marked. A first mesh above it is made coarser."""
_NODES_PER_AREA = 18.0
"""Unknowns of an even mesh in a square of the cells' size."""
_SPARE = 4
"""States solved beyond the wanted ones, so that a level at the end is seen whole."""
_COARSER = 300.0
"""How much less accurate the first mesh of a section with corners or interfaces is: the fit below knows smooth sections
only, and a second mesh that is sized by what the first one shows is cheaper than a first one that is too fine."""
_REACH = 1.5
"""Cells grow from a corner to their full size over this many full sizes."""
_AIM = 0.7
"""The next mesh aims at this share of the accuracy, so that one that turns out a little worse still meets it."""
_TURN_CELLS = 10
"""Cells around a full turn of a curve, at least: larger ones beside a fillet would fold."""
_HARDLY = 0.4
"""Gradings to no less than this share of the largest cell are left away: they cost more than they save."""
_GROWTH = 4.0
"""How much larger cells are far out in a material that goes on outside."""
_PER_WAVE = 1.55e-8
"""Relative error of a smooth section's energy at k h = 1, times (k h)^8: fitted on circles, for the first mesh only."""


@dataclass(frozen=True, eq=False)
class Solved:
    """States of one mesh with their bars.

    Attributes
    ----------
    energy_eV, bar_eV, level : (m,) ascending, m at least the wanted number; levels from 1.
    states : (nodes x bands, m) on all nodes of the space, orthonormal in the mass matrix.
    shift_eV : an energy below all states.
    bar_factor : how many falls wide the bars are.
    """

    pencil: Pencil
    operator: Operator
    energy_eV: Array
    bar_eV: Array
    level: Ints
    states: NDArray[Any]
    enriched: Enriched
    enriched_pencil: Pencil
    shift_eV: float
    phase_space: PhaseSpace
    bar_factor: float

    @property
    def unknown_states(self) -> NDArray[Any]:
        """The states on the pencil's unknowns."""
        return np.asarray(self.states[self.pencil.kept])


@dataclass(frozen=True, eq=False)
class Certified:
    """The last mesh's states, what was reached, and the proof that none is missing.

    Attributes
    ----------
    wanted : how many of the states were asked for.
    missed : states below the counting energy that the solver did not return.
    wall_effect_eV : (wanted,) None where the outermost layer is no barrier.
    met : every wanted bar is under the accuracy.
    """

    solved: Solved
    wanted: int
    missed: int
    wall_effect_eV: Array | None
    passes: int
    met: bool


@dataclass(frozen=True)
class Barrier:
    """The outermost layer where it is a barrier: its region, edge and stiffness, and whether it may be extended."""

    region: str
    edge_eV: float
    stiffness_eV_nm2: float
    extendable: bool


def levels(energy_eV: Array, bar_eV: Array) -> Ints:
    """Clusters of neighbouring energies that are equal within their bars, numbered from 1, shape (m,)."""
    apart = np.diff(energy_eV) > bar_eV[:-1] + bar_eV[1:]
    return np.asarray(1 + np.concatenate([[0], np.cumsum(apart)]), dtype=np.int64)


def solve_on(
    coarse: Mesh, fine: Mesh, operator_of: OperatorOf, count: int, factor: float = estimate.BAR_FACTOR
) -> Solved:
    """States and bars (`factor` falls wide) on one pair of meshes (degree 4 and 6 over the same triangles)."""
    operator = operator_of(coarse)
    space, finer = Space(coarse), Space(fine, composite=operator.varies)
    pencil, above = build(space, operator), build(finer, operator)
    cells = phase_space(space, operator)
    unknowns = len(pencil.kept)
    if count > unknowns // 2:
        raise ConvergenceError(f"{count} states were asked of a mesh with {unknowns} unknowns")
    shift = cells.bottom_eV - 1e-3 * (cells.energy_of(count) - cells.bottom_eV)
    energy, states = eigen.lowest(pencil.h0, pencil.mass, count, shift)
    full = pencil.spread(states)
    if unknowns >= eigen.SINGLE_FROM:
        pencil.forget()
    enriched = enrich(
        space,
        finer,
        energy,
        full,
        (pencil.local(), above.local()),
        above.local_mass,
        shift,
        operator.bands,
        operator.varies,
    )
    bar, level = _bars_and_levels(energy, enriched, factor)
    return Solved(pencil, operator, energy, bar, level, full, enriched, above, shift, cells, factor)


def _bars_and_levels(energy: Array, enriched: Enriched, factor: float) -> tuple[Array, Ints]:
    """Bars, one for each level, and the levels that these bars make."""
    bar = estimate.bars(enriched, factor, levels(energy, estimate.bars(enriched, factor)))
    return bar, levels(energy, bar)


def certify_at(solved: Solved, k_per_nm: float, count: int) -> Solved:
    """The states at another k on the same meshes, with bars of their own."""
    pencil = solved.pencil
    energy, states = eigen.lowest(pencil.at(k_per_nm), pencil.mass, count + _SPARE, solved.shift_eV)
    full = pencil.spread(states)
    enriched = enrich(
        pencil.space,
        solved.enriched.space,
        energy,
        full,
        (pencil.local(k_per_nm), solved.enriched_pencil.local(k_per_nm)),
        solved.enriched_pencil.local_mass,
        solved.shift_eV,
        solved.operator.bands,
        solved.operator.varies,
    )
    bar, level = _bars_and_levels(energy, enriched, solved.bar_factor)
    return replace(solved, energy_eV=energy, bar_eV=bar, level=level, states=full, enriched=enriched)


def certify(
    draw: Callable[[float], Sequence[Piece]],
    operator_of: OperatorOf,
    wanted: int,
    accuracy_eV: float,
    barrier: Barrier | None = None,
    on_progress: Progress | None = None,
) -> Certified:
    """The lowest `wanted` states, each to `accuracy_eV`, with bars, count and wall effect.

    Parameters
    ----------
    draw : the pieces of the section in painting order, given how far in nm the outermost layer is to be extended
        (ignored where there is nothing to extend).
    barrier : the outermost layer where it is a barrier.
    """
    tell = on_progress or (lambda stage, fraction, detail: None)
    distance, passes = 0.0, 0
    for _ in range(4):
        with Mesher(draw(distance)) as mesher:
            size, corners, start = _first_size(mesher, operator_of, wanted, accuracy_eV, barrier)
            if barrier is not None and barrier.extendable and distance == 0.0:
                distance = _first_distance(start, barrier)
                continue
            best, made = _refine(mesher, size, corners, operator_of, wanted, accuracy_eV, passes, tell)
        passes += made
        if barrier is not None and barrier.region not in [r.name for r in best.pencil.space.mesh.regions]:
            barrier = None  # patches cover it
        effect = None if barrier is None else wall_effect(best, barrier, wanted)
        if barrier is None or effect is None or not barrier.extendable:
            break
        more = _further(best, effect, barrier, wanted, accuracy_eV)
        if more == 0.0:
            break
        farthest = _farthest(best, barrier)
        if distance >= farthest:
            break
        distance = min(distance + more, farthest)
    tell("count", 0.9, "counting the states below the highest wanted one")
    best, missed = _counted(best, wanted)
    met = bool((best.bar_eV[:wanted] <= accuracy_eV).all())
    return Certified(best, wanted, missed, effect, passes, met)


def _first_size(
    mesher: Mesher, operator_of: OperatorOf, wanted: int, accuracy_eV: float, barrier: Barrier | None
) -> tuple[SizeField, tuple[Corner, ...], PhaseSpace]:
    """A size field for the first mesh, from the wave length of the highest wanted state and the singular corners."""
    rough, _ = mesher.mesh(SizeField(mesher.extent_nm / 4, turn_cells=_TURN_CELLS))
    space, operator = Space(rough), operator_of(rough)
    cells = phase_space(space, operator)
    top = cells.energy_of(wanted + 1)
    wave_number = float(np.sqrt((np.maximum(top - cells.edge_eV, 0) / cells.stiffness_eV_nm2).max()))
    inverse_mass = [np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in operator.by_region]
    corners = singular_corners(rough, inverse_mass)
    relative = accuracy_eV / estimate.BAR_FACTOR / 2 / (top - cells.bottom_eV)
    # How small the first mesh's innermost cells are; later meshes follow the indicators.
    least = float(np.clip((relative / 1e-3) ** 0.25, 0.05, 0.8))
    if corners or len(operator.by_region) > 1:
        relative *= _COARSER
    largest = (relative / _PER_WAVE) ** 0.125 / wave_number
    affordable = np.sqrt(_NODES_PER_AREA * space.area_nm2 * (wanted + _SPARE) / MOST_VALUES)
    largest = min(max(largest, 0.4 / wave_number, affordable), 3.0 / wave_number, mesher.extent_nm / 3)
    reach = min(float(np.sqrt(space.area_nm2) / 2), _REACH * largest)
    graded = gradings(corners, largest, reach, least) if least < _HARDLY else ()
    first = SizeField(largest, graded, turn_cells=_TURN_CELLS)
    if barrier is not None and barrier.extendable:
        first = _coarser_outside(first, rough, barrier, top)
    return first, corners, cells


def _coarser_outside(size: SizeField, rough: Mesh, barrier: Barrier, top_eV: float) -> SizeField:
    """Cells that grow away from what the outer material surrounds: states decay there, or have long waves."""
    corner = rough.cells[:, :3]
    outer = rough.region == [r.name for r in rough.regions].index(barrier.region)
    wave = np.sqrt(max(top_eV - barrier.edge_eV, 0) / barrier.stiffness_eV_nm2)
    grown = min(_GROWTH * size.largest_nm, max(2 / wave, size.largest_nm) if wave else np.inf)
    sizes = np.full(len(rough.points), grown)
    sizes[np.unique(corner[~outer])] = size.largest_nm
    return replace(size, largest_nm=grown, triangles=rough.points[corner], sizes_nm=sizes[corner])


def _refine(
    mesher: Mesher,
    size: SizeField,
    corners: tuple[Corner, ...],
    operator_of: OperatorOf,
    wanted: int,
    accuracy_eV: float,
    passes: int,
    tell: Progress,
) -> tuple[Solved, int]:
    """Solve and re-mesh until the bars are under the accuracy, or no longer fall."""
    best: Solved | None = None
    worst, stalled, factor = np.inf, 0, estimate.bar_factor(corners)
    for number in range(1, 11):
        solved = solve_on(*mesher.mesh(size), operator_of, wanted + _SPARE, factor)
        bar = float(solved.bar_eV[:wanted].max())
        unknowns = len(solved.pencil.kept)
        detail = f"mesh {passes + number}: {unknowns} unknowns, widest bar {1e3 * bar:.3g} meV"
        tell("mesh", 0.1 + 0.08 * number, detail)
        _log.debug("pass %d: %d unknowns, bar %.3g eV", passes + number, unknowns, bar)
        stalled = 0 if bar < 0.7 * worst else stalled + 1
        if bar < worst:
            best, worst = solved, bar
        if bar <= accuracy_eV or stalled >= 3:
            break
        # A mesh that missed its aim was outside the law that sized it: aim lower the next time.
        aim = _AIM / 2 ** max(number - 2, 0)
        target = max(accuracy_eV / factor * aim, 1e-3 * bar)
        size = estimate.finer(solved.enriched, size, corners, target, wanted)
        if unknowns * (bar / (factor * target)) ** 0.25 * (wanted + _SPARE) > MOST_VALUES:
            break
    assert best is not None
    return best, number


def _first_distance(cells: PhaseSpace, barrier: Barrier) -> float:
    """A first guess of how far the outermost layer must reach: 8 decay lengths at half its height."""
    height = max(barrier.edge_eV - cells.bottom_eV, 1e-3)
    return float(8 * np.sqrt(2 * barrier.stiffness_eV_nm2 / height))


def _farthest(solved: Solved, barrier: Barrier) -> float:
    """How far the outermost layer is extended at most.

    States just below its edge, or above, would push it out for ever and fill it with states of its own: 24 decay
    lengths at half its height, or three times the size of what it surrounds, and the wall's effect is said.
    """
    space = solved.pencil.space
    name = [r.name for r in space.mesh.regions].index(barrier.region)
    weights = space.quadrature_weights[space.mesh.region[space.cells] != name]
    return float(max(3 * _first_distance(solved.phase_space, barrier), 3 * np.sqrt(weights.sum())))


def wall_effect(solved: Solved, barrier: Barrier, wanted: int) -> Array:
    """How far each energy falls when the outer hard wall is left free, (wanted,) in eV."""
    space = solved.pencil.space
    region = [r.name for r in space.mesh.regions].index(barrier.region)
    free = build(space, solved.operator, space.rim_of(region))
    energy, _ = eigen.lowest(free.h0, free.mass, wanted + 2, solved.shift_eV)
    return np.asarray(solved.energy_eV[:wanted] - energy[:wanted])


def _further(solved: Solved, effect: Array, barrier: Barrier, wanted: int, accuracy_eV: float) -> float:
    """How much farther the wall must be for the bound states not to see it, 0 where it is far enough.

    The hard wall's own share is about half of the effect. It falls as exp(-2 distance/decay length); a thousandth of
    the accuracy costs little more than a tenth.
    """
    bound = solved.energy_eV[:wanted] < barrier.edge_eV
    wish = np.maximum(1e-3 * accuracy_eV, 1e-11)
    if not bound.any() or effect[bound].max() <= wish:
        return 0.0
    decay = np.sqrt(np.maximum(barrier.edge_eV - solved.energy_eV[:wanted], 1e-6) / barrier.stiffness_eV_nm2)
    return float((np.log(np.maximum(effect[bound], 1e-300) / wish) / (2 * decay[bound])).max() * 1.15)


def _counted(solved: Solved, wanted: int) -> tuple[Solved, int]:
    """The count of the states below the first clear gap above the wanted ones, against those found.

    A spectrum denser than its bars has no gap that is clear: the widest one of the discrete problem then serves, whose
    energies are known far more closely than the bars tell.
    """
    for attempt in range(4):
        energy, bar = solved.energy_eV, solved.bar_eV
        widths = np.diff(energy[wanted - 1 :])
        clear = np.flatnonzero(widths > bar[wanted - 1 : -1] + bar[wanted:])
        if len(clear) or attempt:
            last = wanted - 1 + int(clear[0] if len(clear) else np.argmax(widths))
            between = float(energy[last] + energy[last + 1]) / 2
            missed = eigen.count_below(solved.pencil.h0, solved.pencil.mass, between) - (last + 1)
            if missed == 0:
                return solved, 0
        # A level without a clear end, or a state that the iteration passed over: solve for more.
        solved = _again(solved, 2 * len(energy) - wanted + _SPARE)
    raise ConvergenceError("states below the highest wanted one are missing and four wider solves did not find them")


def _again(solved: Solved, count: int) -> Solved:
    """The same mesh solved for more states."""
    coarse, fine = solved.pencil.space.mesh, solved.enriched.space.mesh
    return solve_on(coarse, fine, lambda mesh: solved.operator, count, solved.bar_factor)
