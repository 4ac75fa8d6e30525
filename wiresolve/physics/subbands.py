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
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher
from wiresolve.fem.space import Space
from wiresolve.physics.channel import Channel
from wiresolve.physics.first_mesh import MOST_VALUES, First, first_size
from wiresolve.physics.minima import Minima, selected
from wiresolve.physics.outer_wall import Barrier, farthest, first_distance, further, wall_effect
from wiresolve.physics.pace import MeshPace
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.solved import (
    SPARE,
    Solved,
    finished,
    levels,
    lowest_energy,
    slanted,
    solve_in,
    spaces,
)

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Progress = Callable[[str, float, str], None]

_log = logging.getLogger(__name__)

_AIM = 0.7
"""The next mesh aims at this share of the accuracy, so that one that turns out a little worse still meets it."""
_POLISHED_eV = 1e-6
"""Finer accuracies need the states of every mesh solved to the last residual, others those of the last mesh alone."""
_NEAR_eV = 0.3
"""Valleys whose edge lies this far above the lowest level are looked at, though they are not listed."""


@dataclass(frozen=True, eq=False)
class Certified:
    """The last mesh's states, what was reached, and the proof that none is missing.

    Attributes
    ----------
    channels, solved : the groups of valleys with states near the wanted ones, and their states at k = 0, the listed
        ones first.
    listed : how many states of each channel are among the wanted ones.
    minima : of each channel whose H(k) has a part linear in k, where its listed bands are lowest; None of others.
    entries : (wanted, 2) channel and state of each wanted entry, by energy.
    above : channels without a state near the wanted ones, each with its lowest energy on this mesh, or its band edge
        where that alone is far up.
    energy_eV, bar_eV, level : (wanted,) of the entries, at their minima over k; levels over all channels.
    missed : states below the highest listed one that the solver did not return, in all channels together, at k = 0 and
        where H(k) has a part linear in k at all k of `minima.survey` and at each minimum.
    wall_effect_eV : (wanted,) NaN for channels of which the outermost layer is no barrier, None where it is none.
    met : every wanted bar is under the accuracy.
    """

    channels: tuple[Channel, ...]
    solved: tuple[Solved, ...]
    listed: tuple[int, ...]
    minima: tuple[Minima | None, ...]
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
class Pass:
    """All channels on one mesh: None for those whose states all lie above the wanted ones, as in `Certified`."""

    solved: tuple[Solved | None, ...]
    listed: tuple[int, ...]
    minima: tuple[Minima | None, ...]
    bottoms: tuple[float, ...]

    @property
    def top_eV(self) -> float:
        """The highest listed energy."""
        return max(float(energy[-1]) for energy, _, _ in self.states if len(energy))

    @property
    def states(self) -> tuple[tuple[Array, Array, Array], ...]:
        """Energy, bar and (c, n) shares by cell of each channel's listed states, at their minima over k."""
        nothing = np.zeros(0), np.zeros(0), np.zeros((0, 0))
        return tuple(
            nothing if s is None
            else (s.energy_eV[:n], s.bar_eV[:n], s.share_eV[:, :n]) if m is None
            else (m.energy_eV, m.bar_eV, m.share_eV)
            for s, m, n in zip(self.solved, self.minima, self.listed, strict=True)
        )  # fmt: skip

    @property
    def bar_eV(self) -> float:
        """The widest of the listed states' bars."""
        return max(float(bar.max()) for _, bar, _ in self.states if len(bar))

    @property
    def needs(self) -> tuple[int, ...]:
        """How many states at k = 0 each channel needs on the next mesh."""
        return tuple(
            n if m is None else max(n, m.survey.highest) for m, n in zip(self.minima, self.listed, strict=True)
        )  # fmt: skip

    def finished(self) -> Pass:
        """The same with all states solved to their last residual."""
        solved = tuple(
            s if s is None or m is not None else finished(s) for s, m in zip(self.solved, self.minima, strict=True)
        )
        return replace(self, solved=solved)

    def thorough(self, accuracy_eV: float) -> Pass:
        """The same with all that is to be proved about minima off k = 0."""
        if all(m is None or m.survey.thorough for m in self.minima):
            return self
        top = max(m.survey.top_eV for m in self.minima if m is not None)
        solved = [s if m is None else m.survey.space.solved for s, m in zip(self.solved, self.minima, strict=True)]
        spaces_ = next((s.pencil.space, s.enriched.space) for s in solved if s is not None)
        return Pass(*selected(solved, spaces_, top, self.wanted, accuracy_eV, thorough=True), self.bottoms)

    def wall_effects(self, channels: Sequence[Channel]) -> list[Array | None]:
        """How far each listed state moves where the outer wall is freed; None for channels without a barrier there."""
        return [
            (wall_effect(s, c.barrier, n) if m is None else m.wall_effect(c.barrier))
            if s is not None and n and c.barrier is not None and meshed(s, c.barrier)
            else None
            for c, s, m, n in zip(channels, self.solved, self.minima, self.listed, strict=True)
        ]

    def widened(self, more_eV: Sequence[Array]) -> Pass:
        """The same with wider bars, by so much for each state (m,) of every channel that is solved, in their order.

        Of bands with minima off k = 0 those at the minima are widened by the largest of them.
        """
        more, solved, minima = iter(more_eV), [], []
        for s, low in zip(self.solved, self.minima, strict=True):
            if s is not None:
                own = next(more)
                alone = s.bar_eV + own
                bar = estimate.shared(alone, levels(s.energy_eV, alone))
                s = replace(s, bar_eV=bar, level=levels(s.energy_eV, bar))
                if low is not None:
                    low = replace(low, bar_eV=low.bar_eV + float(own.max()))
            solved.append(s)
            minima.append(low)
        return replace(self, solved=tuple(solved), minima=tuple(minima))

    @property
    def wanted(self) -> int:
        return sum(self.listed)

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
            first = first_size(mesher, channels, wanted, accuracy_eV)
            if extendable and distance == 0.0:
                distance = max(
                    first_distance(cells, c.barrier)
                    for c, cells, need in zip(channels, first.cells, first.needs, strict=True)
                    if c.barrier is not None and need
                )
                continue
            best, made = _refine(mesher, first, channels, wanted, accuracy_eV, passes, tell)
        passes += made
        effects = best.wall_effects(channels)
        if not extendable:
            break
        more, farthest_nm = 0.0, 0.0
        for channel, solved, effect, (energy, _, _) in zip(channels, best.solved, effects, best.states, strict=True):
            if effect is not None and channel.barrier is not None and solved is not None:
                more = max(more, further(energy, effect, channel.barrier, accuracy_eV))
                farthest_nm = max(farthest_nm, farthest(solved, channel.barrier))
        if more == 0.0 or distance >= farthest_nm:
            break
        distance = min(distance + more, farthest_nm)
    tell("count", 0.9, "counting the states below the highest wanted one")
    return certified_pass(channels, best, effects, wanted, accuracy_eV, passes)


def meshed(solved: Solved, barrier: Barrier) -> bool:
    """Whether the barrier's region is there at all: patches may cover it."""
    return barrier.region in [r.name for r in solved.pencil.space.mesh.regions]


def certified_pass(
    channels: Sequence[Channel],
    best: Pass,
    effects: Sequence[Array | None],
    wanted: int,
    accuracy_eV: float,
    passes: int,
) -> Certified:
    """The count of every channel, and all of them merged."""
    used, above, missed = [], [], 0
    for channel, solved, low, n, effect, bottom in zip(
        channels, best.solved, best.minima, best.listed, effects, best.bottoms, strict=True
    ):
        if solved is None:
            near = bottom < best.lowest_eV + _NEAR_eV
            above.append((channel, lowest_energy(best.space, channel.operator_of(best.space.mesh)) if near else bottom))
            continue
        counted, lost = _counted(solved, n, best.top_eV) if low is None else (solved, low.missed())
        missed += lost
        used.append((channel, counted, n, effect, low))
    energy, bar, entries = _merged(
        [(s.energy_eV[:n], s.bar_eV[:n]) if m is None else (m.energy_eV, m.bar_eV) for _, s, n, _, m in used]
    )
    alone = levels(energy, bar)
    bar = estimate.shared(bar, alone)
    effect_of = [np.full(n, np.nan) if effect is None else effect for _, _, n, effect, _ in used]
    some = any(effect is not None for _, _, _, effect, _ in used)
    return Certified(
        channels=tuple(c for c, *_ in used),
        solved=tuple(s for _, s, *_ in used),
        listed=tuple(n for _, _, n, *_ in used),
        minima=tuple(m for *_, m in used),
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


def _refine(
    mesher: Mesher,
    first: First,
    channels: Sequence[Channel],
    wanted: int,
    accuracy_eV: float,
    passes: int,
    tell: Progress,
) -> tuple[Pass, int]:
    """Solve and re-mesh until the bars are under the accuracy, or no longer fall."""
    best: Pass | None = None
    worst, stalled, factor = np.inf, 0, estimate.bar_factor(first.corners)
    size, needs, pace = first.size, first.needs, MeshPace()
    for number in range(1, 11):
        meshes = mesher.mesh(size)
        tell("mesh", 0.02 + 0.08 * number, pace.begin(passes + number, len(meshes[0].points)))
        done = solve_all(*meshes, channels, needs, wanted, factor, accuracy_eV)
        if done.bar_eV <= accuracy_eV:
            done = done.thorough(accuracy_eV).finished()
        bar, needs, unknowns = done.bar_eV, done.needs, done.unknowns
        detail = f"mesh {passes + number}: {unknowns:,} unknowns, widest bar {1e3 * bar:.3g} meV"
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
        shares = [share for _, bars, share in done.states if len(bars)]
        space = next(s.enriched.space for s in done.solved if s is not None)
        size = estimate.finer(space, np.hstack(shares), size, first.corners, target)
        if unknowns * (bar / (factor * target)) ** 0.25 * (wanted + SPARE) > MOST_VALUES:
            break
    assert best is not None
    return best.thorough(accuracy_eV).finished(), number


def solve_all(
    coarse: Mesh,
    fine: Mesh,
    channels: Sequence[Channel],
    needs: Sequence[int],
    wanted: int,
    factor: float,
    accuracy_eV: float,
) -> Pass:
    """Every channel on one mesh, with as many states as lie below the highest wanted one of all together."""
    operators = [c.operator_of(coarse) for c in channels]
    space, finer = spaces(coarse, fine, operators[0])
    polished = accuracy_eV < _POLISHED_eV
    bottoms = [phase_space(space, operator).bottom_eV for operator in operators]
    solved: list[Solved | None] = [
        solve_in(space, finer, operator, need + SPARE, factor, polished or slanted(operator)) if need else None
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
            solved[i] = solve_in(space, finer, operators[i], count, factor, polished or slanted(operators[i]))
    else:
        raise ConvergenceError("the valleys' states could not be brought into one list")
    # A band that is lowest off k = 0 may lie below states that are lower than it at k = 0.
    chosen = selected(solved, (space, finer), top, wanted, accuracy_eV, thorough=False)
    return Pass(*chosen, tuple(bottoms))


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
