"""Minima over k of a channel whose H(k) has a part linear in k: they may lie off k = 0, and none is to be missed.

At k = 0 the lowest state is lower than anywhere else: with A the stiffness in the plane, w its axis-plane column and a
the least of A_zz - w.A^-1.w, |psi| at k = 0 costs no more than psi at k less a k^2 (the diamagnetic inequality: E. H.
Lieb and M. Loss, Analysis, 2nd ed. 2001, theorem 7.21). So states below an energy are found only up to a certain k, and
up to there they are counted.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.fem.space import Space
from wiresolve.physics.axial_space import AxialSpace, Followed, axial_space, followed
from wiresolve.physics.outer_wall import Barrier, wall_effect
from wiresolve.physics.solved import SPARE, Solved, certify_at, solve_in

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_STEPS, _QUICK = 4, 1.5
"""Wave numbers with a count while the phase that k gives across the section changes by half a turn: for the proof, and
where a mesh is only to show which bands come down."""
_FEWEST, _MOST = 6, 150
_FOLLOWED = 48
"""Bands are followed in so many steps at least, and in ten for each half turn."""
_OFF = 0.1
"""A minimum lies off k = 0 where it is deeper by this share of the bar there."""
_GROWTHS = 6
_SAME_eV = 1e-6


@dataclass(frozen=True, eq=False)
class Survey:
    """The bands of a channel below an energy.

    Attributes
    ----------
    space, bands : the reduced space, and all its bands up to where none is that low.
    feature_per_nm : the wave number over which states change.
    energy_eV, k_per_nm : (d,) of each band its lowest energy in that space (on the grid only, for those far above), and
        where it is.
    top_eV : up to which energy nothing is missing.
    missed : states that the counts see and the space does not have, of all k together.
    thorough : it proves what it is to prove; otherwise it has counted at fewer k.
    """

    space: AxialSpace
    bands: Followed
    feature_per_nm: float
    energy_eV: Array
    k_per_nm: Array
    top_eV: float
    missed: int
    thorough: bool

    @property
    def step_per_nm(self) -> float:
        """A k that is small against what changes the states."""
        return float(np.diff(self.bands.k_per_nm).max()) / 4

    @property
    def highest(self) -> int:
        """How many of the states at k = 0 the bands below the top take."""
        low = np.flatnonzero(self.energy_eV <= self.top_eV)
        return int(low[-1]) + 1 if len(low) else 0


@dataclass(frozen=True, eq=False)
class Minima:
    """The listed minima of a channel, by energy.

    Attributes
    ----------
    survey : what they were chosen from.
    rows : (n,) the bands' states at k = 0, by number.
    energy_eV, bar_eV, k_per_nm : (n,).
    share_eV : (c, n) each cell's share of the fall of each energy.
    there : where a minimum lies off k = 0, the states there and which of them it is; else None.
    """

    survey: Survey
    rows: Ints
    energy_eV: Array
    bar_eV: Array
    k_per_nm: Array
    share_eV: Array
    there: tuple[tuple[Solved, int] | None, ...]

    def wall_effect(self, barrier: Barrier) -> Array:
        """How far each minimum falls when the outer hard wall is left free, (n,) in eV."""
        still = self.survey.space.solved
        own = wall_effect(still, barrier, int(self.rows.max()) + 1)[self.rows]
        for i, there in enumerate(self.there):
            if there is not None:
                solved, number = there
                own[i] = wall_effect(solved, barrier, number + 1, float(self.k_per_nm[i]))[number]
        return own

    def missed(self) -> int:
        """States below the top that the bands do not have, at the k of the survey and at each minimum."""
        space, found = self.survey.space, self.survey.missed
        for k in self.k_per_nm[self.k_per_nm > 0]:
            energy, _ = space.states(float(k))
            between = _between(energy, self.survey.top_eV, float(energy[0]))
            found += max(self.survey.space.solved.count_below(between, float(k)) - int(np.sum(energy < between)), 0)
        return found


def survey(solved: Solved, top_eV: float, tolerance_eV: float, thorough: bool = True) -> Survey:
    """The bands with states below an energy, each with its minimum over k.

    The space of the states at k = 0 grows until, at every k of a grid up to where the lowest state lies above the
    energy, it has as many states below as the full discrete problem (counted by the signs of a factor's pivots), each
    to the tolerance. What is proved is that at these k no state of the discrete problem is missing. Between two of
    them the phase that the unequal shears give to the section's far ends changes by an eighth of a turn at most.
    """
    feature, far = _feature(solved), _far(solved, top_eV)
    most, quick = (int(np.clip(np.ceil(each * far / feature), _FEWEST, _MOST)) for each in (_STEPS, _QUICK))
    steps, thorough = most if thorough else quick, thorough or quick == most
    space, solver = axial_space(solved, top_eV), None
    missed = 0
    for g in spread_out(steps):
        k = far * g / steps
        for _ in range(_GROWTHS):
            energy, vectors = space.states(k)
            between = _between(energy, top_eV, float(solved.energy_eV[0]))
            below, truth = int(np.sum(energy < between)), solved.count_below(between, k)
            if below >= truth:
                solver = solver or space.solver()
                if not below or space.excess(k, energy[:below], vectors[:, :below], solver).max() <= tolerance_eV:
                    break
            space = space.grown(k, truth + 2)
        missed += max(truth - below, 0)
    bands = followed(space, fine_grid(far, feature))
    return Survey(space, bands, feature, *_lowest(space, bands, top_eV), top_eV, missed, thorough)


def fine_grid(end_per_nm: float, feature_per_nm: float) -> Array:
    """Wave numbers at which bands are followed; closer near 0, where two may meet and one falls, perhaps not far."""
    grid = np.linspace(0, end_per_nm, int(np.ceil(max(10 * end_per_nm / feature_per_nm, _FOLLOWED))) + 1)
    return np.sort(np.append(grid, grid[1] * np.array([0.125, 0.25, 0.5])))


def selected(
    solved: Sequence[Solved | None],
    spaces: tuple[Space, Space],
    top_eV: float,
    wanted: int,
    accuracy_eV: float,
    thorough: bool,
) -> tuple[tuple[Solved | None, ...], tuple[int, ...], tuple[Minima | None, ...]]:
    """The wanted states of all channels together by their minima over k.

    Parameters
    ----------
    solved : the channels' states at k = 0, all up to `top_eV`, below which `wanted` of them lie.

    Returns
    -------
    Their states at k = 0 with the listed ones first, how many of each are listed, and where the bands of those whose
    H(k) has a part linear in k are lowest.
    """
    surveys = [
        _complete(s, spaces, top_eV, max(0.1 * accuracy_eV, 1e-7), thorough) if s is not None and s.sheared else None
        for s in solved
    ]
    lowest = [
        np.zeros(0) if s is None else s.energy_eV if m is None else m.energy_eV
        for s, m in zip(solved, surveys, strict=True)
    ]
    channel = np.repeat(np.arange(len(solved)), [len(e) for e in lowest])
    state = np.concatenate([np.arange(len(e)) for e in lowest])
    first = np.argsort(np.concatenate(lowest), kind="stable")[:wanted]
    found, low = (
        list(solved),
        [None if m is None else minima(m, state[first][channel[first] == i]) for i, m in enumerate(surveys)],
    )
    for i, own in enumerate(low):
        if own is not None:
            still = own.survey.space.solved
            rest = np.setdiff1d(np.arange(len(still.energy_eV)), own.rows)
            found[i] = still.reordered(np.append(own.rows, rest))
    listed = np.bincount(channel[first], minlength=len(solved))
    return tuple(found), tuple(listed.tolist()), tuple(low)


def _complete(
    solved: Solved, spaces: tuple[Space, Space], top_eV: float, tolerance_eV: float, thorough: bool
) -> Survey:
    """A survey with so many states at k = 0 that every band has its own there, and one more."""
    for _ in range(6):
        found = survey(solved, top_eV, tolerance_eV, thorough)
        kept = min(found.highest, len(solved.energy_eV))
        here = found.bands.energy_eV[0, :kept]
        if found.highest < len(solved.energy_eV) and np.abs(here - solved.energy_eV[:kept]).max(initial=0) < _SAME_eV:
            return found
        # A band has no state at k = 0 yet, or one was passed over there.
        count = max(found.highest, len(solved.energy_eV)) + SPARE
        solved = solve_in(*spaces, solved.operator, count, solved.bar_factor)
    raise ConvergenceError("bands that are lowest off k = 0 could not be followed back to k = 0")


def minima(found: Survey, rows: Ints) -> Minima:
    """The minima of some bands with their bars: those off k = 0 are solved where they lie, on the same meshes."""
    solved = found.space.solved
    energy, bar, k = solved.energy_eV[rows], solved.bar_eV[rows], np.zeros(len(rows))
    share = solved.share_eV[:, rows]
    there: list[tuple[Solved, int] | None] = [None] * len(rows)
    for i, row in enumerate(rows):
        if energy[i] - found.energy_eV[row] <= _OFF * bar[i]:
            continue
        k[i] = found.k_per_nm[row]
        own, number = _solved_there(found, int(row), float(k[i]))
        energy[i], bar[i], share[:, i] = own.energy_eV[number], own.bar_eV[number], own.share_eV[:, number]
        there[i] = own, number
    order = np.argsort(energy, kind="stable")
    return Minima(
        found, rows[order], energy[order], bar[order], k[order], share[:, order], tuple(there[i] for i in order)
    )


def _solved_there(found: Survey, row: int, k_per_nm: float) -> tuple[Solved, int]:
    """The states at a k up to a band's, and which of them is the band's."""
    energies, _ = found.bands.at(found.space, k_per_nm)
    count = int(np.sum(found.space.states(k_per_nm)[0] < energies[row])) + 1
    own = certify_at(found.space.solved, k_per_nm, count)
    return own, _number(found, row, k_per_nm, own)


def _number(found: Survey, row: int, k_per_nm: float, own: Solved) -> int:
    """Which state at a k is a band's: by its energy, among equals by its overlap."""
    space = found.space
    energies, vectors = found.bands.at(space, k_per_nm)
    state = space.basis @ vectors[:, row]
    alike = np.abs(state.conj() @ (space.solved.pencil.mass @ own.unknown_states)) ** 2
    apart = np.abs(own.energy_eV - energies[row])
    alike[apart > apart.min() + own.bar_eV] = 0
    return int(np.argmax(alike))


def beside(found: Survey) -> Solved:
    """The states beside k = 0 that `bend` needs of bands that are lowest there."""
    return certify_at(found.space.solved, 4 * found.step_per_nm, found.highest)


def bend(low: Minima, i: int, near_zero: Solved | None = None) -> tuple[float, float, float]:
    """The bottom of a listed band: where exactly, half of d2E/dk2 there in eV nm^2, and its error.

    The space is made exact there to first order in k, so that its energies are to third order. How much the enriched
    states bend less than those of the mesh tells the mesh's share of the error.

    Parameters
    ----------
    near_zero : from `beside`, where the minimum is at k = 0.
    """
    found, row, centre = low.survey, int(low.rows[i]), float(low.k_per_nm[i])
    step, space, there = found.step_per_nm, found.space, low.there[i]
    if there is None:
        assert near_zero is not None
        side = near_zero, _number(found, row, 4 * step, near_zero)
        known = [side, (space.solved, row), side]
    else:
        known = [_solved_there(found, row, abs(centre - 4 * step)), there, _solved_there(found, row, centre + 4 * step)]
    falls = []
    for own, number in known:
        finer = own.enriched.energy_eV if own.relation is None else own.relation.energy(own.enriched.energy_eV)
        falls.append(float(own.energy_eV[number] - finer[number]))
        space = space.joined(own.unknown_states)

    def differences(k: float, h: float) -> tuple[float, float]:
        """Slope and half of the second derivative at k from E at k and at h on either side."""
        below, here, above = (float(found.bands.at(space, abs(q))[0][row]) for q in (k - h, k, k + h))
        return (above - below) / (2 * h), (above + below - 2 * here) / (2 * h**2)

    bottom = centre
    for _ in range(3 if centre else 0):
        slope, curve = differences(bottom, step)
        bottom -= float(np.clip(slope / (2 * curve), -step, step)) if curve > 0 else 0.0
    near, far = differences(bottom, step)[1], differences(bottom, 2 * step)[1]
    mesh = abs(falls[0] + falls[2] - 2 * falls[1]) / (32 * step**2)
    if centre:
        # The mesh moves the bottom too, to where the band bends otherwise.
        moved = abs(falls[2] - falls[0]) / (8 * step) / (2 * abs(near))
        mesh += moved * abs(differences(bottom + step, step)[1] - differences(bottom - step, step)[1]) / (2 * step)
    error = found.space.solved.bar_factor * mesh + abs(near - far) / 3 + 1e-12 / step**2
    return bottom, (4 * near - far) / 3, error


def _lowest(space: AxialSpace, bands: Followed, top_eV: float) -> tuple[Array, Array]:
    """The lowest energy of each band and its k, between the wave numbers of the grid where it is below an energy."""
    from scipy.optimize import minimize_scalar

    at = np.argmin(bands.energy_eV, axis=0)
    energy, k = bands.energy_eV.min(axis=0), bands.k_per_nm[at]
    slack = 0.1 * (top_eV - float(energy.min())) + 1e-4
    for band in np.flatnonzero((energy < top_eV + slack) & (at > 0) & (at < len(bands.k_per_nm) - 1)):
        low, high = bands.k_per_nm[at[band] - 1], bands.k_per_nm[at[band] + 1]
        best = minimize_scalar(
            lambda q, band=band: float(bands.at(space, q)[0][band]),
            bounds=(low, high),
            method="bounded",
            options={"xatol": 1e-4 * (high - low)},
        )
        if best.fun < energy[band]:
            energy[band], k[band] = float(best.fun), float(best.x)
    return energy, k


def _between(energy: Array, top_eV: float, lowest_eV: float) -> float:
    """An energy from the top up, in a gap of the reduced problem's energies, and not far up."""
    ceiling = top_eV + 0.1 * (top_eV - lowest_eV) + 1e-4
    edges = np.concatenate([[top_eV], energy[(energy > top_eV) & (energy < ceiling)], [ceiling]])
    widest = int(np.argmax(np.diff(edges) > min(1e-5, 0.5 * float(np.diff(edges).max()))))
    return float(edges[widest] + edges[widest + 1]) / 2


def spread_out(steps: int) -> list[int]:
    """0 to `steps`, both ends first, then what halves the widest gap."""
    order = [0, steps]
    while len(order) <= steps:
        known = np.sort(order)
        gap = int(np.argmax(np.diff(known)))
        order.append(int(known[gap] + known[gap + 1]) // 2)
    return order


def _stiffness(solved: Solved) -> NDArray[Any]:
    """(regions, 3, 3) of the regions that have cells, in eV nm^2."""
    space = solved.pencil.space
    used = np.unique(space.mesh.region[space.cells])
    return np.array([solved.operator.by_region[r].quadratic[:, :, 0, 0].real for r in used])


def _feature(solved: Solved) -> float:
    """The wave number over which states change: half a turn of the phase that unequal shears give to the far ends."""
    shears = np.array([np.linalg.solve(a[:2, :2], a[:2, 2]) for a in _stiffness(solved)])
    unlike = float(np.linalg.norm(shears[:, None] - shears, axis=2).max())
    space = solved.pencil.space
    size = float(np.linalg.norm(np.ptp(space.mesh.points[space.nodes[solved.pencil.kept]], axis=0)))
    return float(np.pi / max(unlike * size, 1e-12))


def _far(solved: Solved, top_eV: float) -> float:
    """The wave number from which on no state lies below an energy."""
    axial = np.array([a[2, 2] - a[2, :2] @ np.linalg.solve(a[:2, :2], a[:2, 2]) for a in _stiffness(solved)])
    lowest = float(solved.energy_eV[0] - solved.bar_eV[0])
    if solved.relation is not None:
        room = float(solved.relation.value(np.array(top_eV)) - solved.relation.value(np.array(lowest)))
        return float(np.sqrt(max(room, 1e-6) / axial.min()))
    family = solved.local_mass
    assert family is not None
    # Of T(top, k): with masses as at that energy its lowest value must lie above it.
    value, _ = eigen.lowest(family.at(top_eV), family.mass, 1, solved.shift_eV)
    heaviest = float(np.max(solved.operator.mass_ratio(solved.pencil.space, top_eV)))
    room = top_eV - float(value[0]) + float(solved.bar_eV[0])
    return float(np.sqrt(max(room, 1e-6) * max(heaviest, 1.0) / axial.min()))
