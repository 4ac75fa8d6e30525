"""Certified subband minima: meshes refined until every wanted energy's bar is under the accuracy, then counted.

All groups of valleys are solved on the same meshes, and the lowest of their states together are the wanted ones.
"""

from __future__ import annotations

import logging
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.section import Piece
from wiresolve.errors import ConvergenceError
from wiresolve.fem import estimate
from wiresolve.fem.corners import Corner, gradings, singular_corners
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.outer_wall import Barrier, farthest, first_distance, further, wall_effect
from wiresolve.physics.semiclassical import PhaseSpace, phase_space
from wiresolve.physics.solved import SPARE, OperatorOf, Solved, levels, lowest_energy, solve_in, spaces

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Progress = Callable[[str, float, str], None]

_log = logging.getLogger(__name__)

MOST_VALUES = 12_000_000
"""Unknowns times states above which a mesh would leave a laptop's memory and patience: the best result so far is kept
and marked. A first mesh above it is made coarser."""
_NODES_PER_AREA = 18.0
"""Unknowns of an even mesh in a square of the cells' size."""
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
_NEAR_eV = 0.3
"""Valleys whose edge lies this far above the lowest level are looked at, though they are not listed."""
_PER_WAVE = 1.55e-8
"""Relative error of a smooth section's energy at k h = 1, times (k h)^8: fitted on circles, for the first mesh only."""


@dataclass(frozen=True, eq=False)
class Channel:
    """A group of valleys that one operator describes.

    Attributes
    ----------
    valley, label : their kind ("Delta"), and the group's name ("Delta [001]").
    degeneracy : how many valleys it stands for.
    operator_of : the operator over a mesh's regions.
    barrier : the outermost layer where it is a barrier for them.
    """

    valley: str
    label: str
    degeneracy: int
    operator_of: OperatorOf
    barrier: Barrier | None = None


@dataclass(frozen=True, eq=False)
class Certified:
    """The last mesh's states, what was reached, and the proof that none is missing.

    Attributes
    ----------
    channels, solved : the groups of valleys with states near the wanted ones, and their states.
    listed : how many states of each channel are among the wanted ones.
    entries : (wanted, 2) channel and state of each wanted entry, by energy.
    above : channels without a state near the wanted ones, each with its lowest energy on this mesh, or its band edge
        where that alone is far up.
    energy_eV, bar_eV, level : (wanted,) of the entries; levels over all channels.
    missed : states below the highest listed one that the solver did not return, in all channels together.
    wall_effect_eV : (wanted,) NaN for channels of which the outermost layer is no barrier, None where it is none.
    met : every wanted bar is under the accuracy.
    """

    channels: tuple[Channel, ...]
    solved: tuple[Solved, ...]
    listed: tuple[int, ...]
    entries: Ints
    above: tuple[tuple[Channel, float], ...]
    energy_eV: Array
    bar_eV: Array
    level: Ints
    missed: int
    wall_effect_eV: Array | None
    passes: int
    met: bool

    @property
    def wanted(self) -> int:
        """How many states were asked for."""
        return len(self.entries)

    @property
    def space(self) -> Space:
        """The space of the final mesh."""
        return self.solved[0].pencil.space


@dataclass(frozen=True, eq=False)
class _Pass:
    """All channels on one mesh: None for those whose states all lie above the wanted ones."""

    solved: tuple[Solved | None, ...]
    listed: tuple[int, ...]
    bottoms: tuple[float, ...]
    top_eV: float
    bar_eV: float

    @property
    def space(self) -> Space:
        return next(s.pencil.space for s in self.solved if s is not None)

    @property
    def lowest_eV(self) -> float:
        return min(float(s.energy_eV[0]) for s in self.solved if s is not None)

    @property
    def unknowns(self) -> int:
        return max(len(s.pencil.kept) for s in self.solved if s is not None)


def certify(
    draw: Callable[[float], Sequence[Piece]],
    channels: Sequence[Channel],
    wanted: int,
    accuracy_eV: float,
    on_progress: Progress | None = None,
) -> Certified:
    """The lowest `wanted` states of all channels together, each to `accuracy_eV`, with bars, count and wall effect.

    Parameters
    ----------
    draw : the pieces of the section in painting order, given how far in nm the outermost layer is to be extended
        (ignored where there is nothing to extend).
    """
    tell = on_progress or (lambda stage, fraction, detail: None)
    distance, passes = 0.0, 0
    extendable = any(c.barrier is not None and c.barrier.extendable for c in channels)
    for _ in range(4):
        with Mesher(draw(distance)) as mesher:
            first = _first_size(mesher, channels, wanted, accuracy_eV)
            if extendable and distance == 0.0:
                distance = max(
                    first_distance(cells, c.barrier)
                    for c, cells, need in zip(channels, first.cells, first.needs, strict=True)
                    if c.barrier is not None and need
                )
                continue
            best, made = _refine(mesher, first, channels, wanted, accuracy_eV, passes, tell)
        passes += made
        effects = [
            wall_effect(s, c.barrier, n)
            if s is not None and n and c.barrier is not None and _meshed(s, c.barrier)
            else None
            for c, s, n in zip(channels, best.solved, best.listed, strict=True)
        ]
        if not extendable:
            break
        more, farthest_nm = 0.0, 0.0
        for channel, solved, effect, n in zip(channels, best.solved, effects, best.listed, strict=True):
            if effect is not None and channel.barrier is not None and solved is not None:
                more = max(more, further(solved.energy_eV[:n], effect, channel.barrier, accuracy_eV))
                farthest_nm = max(farthest_nm, farthest(solved, channel.barrier))
        if more == 0.0 or distance >= farthest_nm:
            break
        distance = min(distance + more, farthest_nm)
    tell("count", 0.9, "counting the states below the highest wanted one")
    return _certified(channels, best, effects, wanted, accuracy_eV, passes)


def _meshed(solved: Solved, barrier: Barrier) -> bool:
    """Whether the barrier's region is there at all: patches may cover it."""
    return barrier.region in [r.name for r in solved.pencil.space.mesh.regions]


def _certified(
    channels: Sequence[Channel],
    best: _Pass,
    effects: Sequence[Array | None],
    wanted: int,
    accuracy_eV: float,
    passes: int,
) -> Certified:
    """The count of every channel, and all of them merged."""
    used, above, missed = [], [], 0
    for channel, solved, n, effect, bottom in zip(
        channels, best.solved, best.listed, effects, best.bottoms, strict=True
    ):
        if solved is None:
            near = bottom < best.lowest_eV + _NEAR_eV
            above.append((channel, lowest_energy(best.space, channel.operator_of(best.space.mesh)) if near else bottom))
            continue
        counted, lost = _counted(solved, n, best.top_eV)
        missed += lost
        used.append((channel, counted, n, effect))
    energy, bar, entries = _merged([(s.energy_eV[:n], s.bar_eV[:n]) for _, s, n, _ in used])
    alone = levels(energy, bar)
    bar = estimate.shared(bar, alone)
    effect_of = [np.full(n, np.nan) if effect is None else effect for _, _, n, effect in used]
    some = any(effect is not None for _, _, _, effect in used)
    return Certified(
        channels=tuple(c for c, _, _, _ in used),
        solved=tuple(s for _, s, _, _ in used),
        listed=tuple(n for _, _, n, _ in used),
        entries=entries,
        above=tuple(above),
        energy_eV=energy,
        bar_eV=bar,
        level=levels(energy, bar),
        missed=missed,
        wall_effect_eV=np.array([effect_of[c][i] for c, i in entries]) if some else None,
        passes=passes,
        met=bool((bar <= accuracy_eV).all()),
    )


def _merged(parts: Sequence[tuple[Array, Array]]) -> tuple[Array, Array, Ints]:
    """Energies and bars of all channels in one ascending list, with (n, 2) channel and state of each."""
    rows = [(c, i) for c, (energy, _) in enumerate(parts) for i in range(len(energy))]
    energy = np.concatenate([e for e, _ in parts])
    bar = np.concatenate([b for _, b in parts])
    order = np.argsort(energy, kind="stable")
    return energy[order], bar[order], np.array(rows, dtype=np.int64).reshape(-1, 2)[order]


@dataclass(frozen=True, eq=False)
class _First:
    """What a rough mesh shows: sizes of the first mesh, singular corners, and how many states each channel may need."""

    size: SizeField
    corners: tuple[Corner, ...]
    cells: tuple[PhaseSpace, ...]
    needs: tuple[int, ...]


def _first_size(mesher: Mesher, channels: Sequence[Channel], wanted: int, accuracy_eV: float) -> _First:
    """A size field for the first mesh, from the wave length of the highest wanted state and the singular corners."""
    rough, _ = mesher.mesh(SizeField(mesher.extent_nm / 4, turn_cells=_TURN_CELLS))
    space = Space(rough)
    operators = [c.operator_of(rough) for c in channels]
    cells = tuple(phase_space(space, operator) for operator in operators)
    top = _energy_of(cells, wanted + 1)
    needs = tuple(int(np.ceil(c.count(np.array(top)))) if c.bottom_eV < top else 0 for c in cells)
    wave_number = float(np.sqrt(max(c.wave_numbers_squared(np.array(top)).max() for c in cells)))
    sharpest: dict[tuple[float, float], Corner] = {}
    for operator, need in zip(operators, needs, strict=True):
        if need:
            inverse_mass = [np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in operator.by_region]
            for corner in singular_corners(rough, inverse_mass):
                known = sharpest.get((corner.x, corner.y))
                if known is None or corner.exponent < known.exponent:
                    sharpest[corner.x, corner.y] = corner
    corners = tuple(sharpest.values())
    bottom = min(c.bottom_eV for c in cells)
    relative = accuracy_eV / estimate.BAR_FACTOR / 2 / (top - bottom)
    # How small the first mesh's innermost cells are; later meshes follow the indicators.
    least = float(np.clip((relative / 1e-3) ** 0.25, 0.05, 0.8))
    if corners or len(operators[0].by_region) > 1:
        relative *= _COARSER
    largest = (relative / _PER_WAVE) ** 0.125 / wave_number
    affordable = np.sqrt(_NODES_PER_AREA * space.area_nm2 * (wanted + SPARE) / MOST_VALUES)
    largest = min(max(largest, 0.4 / wave_number, affordable), 3.0 / wave_number, mesher.extent_nm / 3)
    reach = min(float(np.sqrt(space.area_nm2) / 2), _REACH * largest)
    graded = gradings(corners, largest, reach, least) if least < _HARDLY else ()
    first = SizeField(largest, graded, turn_cells=_TURN_CELLS)
    barriers = [
        c.barrier for c, n in zip(channels, needs, strict=True) if n and c.barrier is not None and c.barrier.extendable
    ]
    if barriers:
        lowest = min(barriers, key=lambda b: b.edge_eV)
        first = _coarser_outside(first, rough, lowest, top)
    return _First(first, corners, cells, needs)


def _energy_of(cells: Sequence[PhaseSpace], count: int) -> float:
    """The energy below which all channels together have `count` states."""
    low, high = min(c.energy_of(1) for c in cells), min(c.energy_of(count) for c in cells)
    grid = np.linspace(min(low, high), high, 129)
    total = np.sum([c.count(grid) for c in cells], axis=0)
    return float(np.interp(count, np.maximum.accumulate(total), grid)) if total[-1] > total[0] else high


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
    first: _First,
    channels: Sequence[Channel],
    wanted: int,
    accuracy_eV: float,
    passes: int,
    tell: Progress,
) -> tuple[_Pass, int]:
    """Solve and re-mesh until the bars are under the accuracy, or no longer fall."""
    best: _Pass | None = None
    worst, stalled, factor = np.inf, 0, estimate.bar_factor(first.corners)
    size, needs = first.size, first.needs
    for number in range(1, 11):
        done = _solve_all(*mesher.mesh(size), channels, needs, wanted, factor)
        bar, needs, unknowns = done.bar_eV, done.listed, done.unknowns
        detail = f"mesh {passes + number}: {unknowns} unknowns, widest bar {1e3 * bar:.3g} meV"
        tell("mesh", 0.1 + 0.08 * number, detail)
        _log.debug("pass %d: %d unknowns, bar %.3g eV", passes + number, unknowns, bar)
        stalled = 0 if bar < 0.7 * worst else stalled + 1
        if bar < worst:
            best, worst = done, bar
        if bar <= accuracy_eV or stalled >= 3:
            break
        # A mesh that missed its aim was outside the law that sized it: aim lower the next time.
        aim = _AIM / 2 ** max(number - 2, 0)
        target = max(accuracy_eV / factor * aim, 1e-3 * bar)
        shares = [s.share_eV[:, :n] for s, n in zip(done.solved, done.listed, strict=True) if s is not None and n]
        space = next(s.enriched.space for s in done.solved if s is not None)
        size = estimate.finer(space, np.hstack(shares), size, first.corners, target)
        if unknowns * (bar / (factor * target)) ** 0.25 * (wanted + SPARE) > MOST_VALUES:
            break
    assert best is not None
    return best, number


def _solve_all(
    coarse: Mesh, fine: Mesh, channels: Sequence[Channel], needs: Sequence[int], wanted: int, factor: float
) -> _Pass:
    """Every channel on one mesh, with as many states as lie below the highest wanted one of all together."""
    operators = [c.operator_of(coarse) for c in channels]
    space, finer = spaces(coarse, fine, operators[0])
    bottoms = [phase_space(space, operator).bottom_eV for operator in operators]
    solved: list[Solved | None] = [
        solve_in(space, finer, operator, need + SPARE, factor) if need else None
        for operator, need in zip(operators, needs, strict=True)
    ]
    for _ in range(20):
        known = np.sort(np.concatenate([s.energy_eV for s in solved if s is not None]))
        top = float(known[wanted - 1]) if len(known) >= wanted else np.inf
        short = [
            i for i, s in enumerate(solved)
            if (bottoms[i] < top if s is None else float(s.energy_eV[-1] - s.bar_eV[-1]) <= top)
        ]  # fmt: skip
        if not short:
            break
        # Where nothing is known yet a few states tell; where they do not reach up to the top, half as many again.
        for i in short:
            before = solved[i]
            have = 0 if before is None else len(before.energy_eV)
            count = have + max(have // 2, 4) if have else 2 + SPARE
            solved[i] = solve_in(space, finer, operators[i], count, factor)
    else:
        raise ConvergenceError("the valleys' states could not be brought into one list")
    _, _, entries = _merged([(np.zeros(0),) * 2 if s is None else (s.energy_eV, s.bar_eV) for s in solved])
    listed = tuple(np.bincount(entries[:wanted, 0], minlength=len(channels)).tolist())
    widest = max(float(s.bar_eV[:n].max()) for s, n in zip(solved, listed, strict=True) if s is not None and n)
    return _Pass(tuple(solved), listed, tuple(bottoms), top, widest)


def _counted(solved: Solved, wanted: int, top_eV: float) -> tuple[Solved, int]:
    """The count of a channel's states below the first clear gap above its listed ones, against those found.

    A spectrum denser than its bars has no gap that is clear: the widest one of the discrete problem then serves, whose
    energies are known far more closely than the bars tell. A channel without a listed state is counted up to the
    highest energy of the list.
    """
    if not wanted:
        return solved, solved.count_below((top_eV + float(solved.energy_eV[0])) / 2)
    for attempt in range(4):
        energy, bar = solved.energy_eV, solved.bar_eV
        widths = np.diff(energy[wanted - 1 :])
        clear = np.flatnonzero(widths > bar[wanted - 1 : -1] + bar[wanted:])
        if len(clear) or attempt:
            last = wanted - 1 + int(clear[0] if len(clear) else np.argmax(widths))
            between = float(energy[last] + energy[last + 1]) / 2
            missed = solved.count_below(between) - (last + 1)
            if missed == 0:
                return solved, 0
        # A level without a clear end, or a state that the iteration passed over: solve for more.
        count = 2 * len(energy) - wanted + SPARE
        spaces_ = solved.pencil.space, solved.enriched.space
        solved = solve_in(*spaces_, solved.operator, count, solved.bar_factor)
    raise ConvergenceError("states below the highest wanted one are missing and four wider solves did not find them")
