"""Certified subbands of a wire with its own charge: one mesh that serves potential and states together."""

from __future__ import annotations

import logging
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import CoarseMeshError, MeshError
from wiresolve.fem import estimate
from wiresolve.fem.enrich import prolong
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.electrostatics import Field, at_quadrature, improved
from wiresolve.physics.filled_states import filled_error, filled_needs
from wiresolve.physics.first_mesh import MOST_VALUES, first_size
from wiresolve.physics.pace import MeshPace
from wiresolve.physics.selfconsistent import Balanced, balance
from wiresolve.physics.solved import SPARE
from wiresolve.physics.state_density import state_density
from wiresolve.physics.subbands import Certified, Pass, certified_pass, solve_all

Array = NDArray[np.float64]
Progress = Callable[[str, float, str], None]

_log = logging.getLogger(__name__)

_AIM = 0.6
_MOST_MESHES = 12
_MOST_STALLED = 5
"""Meshes after one another without a better bar: the first ones may be too coarse to tell."""
_CANCELLED = 0.5
"""Changes of the potential that cancel in a state count at least by this part of what they are one by one."""


@dataclass(frozen=True, eq=False)
class Meshes:
    """A pair of meshes over the same triangles, with Poisson's equation on both."""

    coarse: Mesh
    fine: Mesh
    field: Field
    fine_field: Field

    @staticmethod
    def of(charged: ChargedWire, coarse: Mesh, fine: Mesh) -> Meshes:
        """The fields of two meshes of a wire."""
        return Meshes(coarse, fine, charged.field_on(coarse), charged.field_on(fine))


@dataclass(frozen=True, eq=False)
class ChargedSubbands:
    """The certified subbands in a potential that agrees with their charge.

    Attributes
    ----------
    certified : the subbands; their bars hold what the mesh does to the potential.
    balanced : potential and carriers.
    potential_error_eV : (wanted,) the part of the bars that comes from the potential.
    needs : how many states of each channel the list takes.
    bar_factor : how many falls wide bars are.
    """

    meshes: Meshes
    certified: Certified
    balanced: Balanced
    potential_error_eV: Array
    needs: tuple[int, ...]
    bar_factor: float


@dataclass(frozen=True, eq=False)
class _Judged:
    """What is known of one pair of meshes."""

    meshes: Meshes
    balanced: Balanced
    raw: Pass
    done: Pass
    share_eV: Array
    widening: tuple[Array, ...]


def certify_charged(
    charged: ChargedWire,
    volts: Sequence[Mapping[str, float]],
    wanted: int,
    accuracy_eV: float,
    on_progress: Progress | None = None,
) -> tuple[ChargedSubbands, ...]:
    """The lowest `wanted` subbands at several sets of voltages, each to `accuracy_eV`, all on one mesh.

    Parameters
    ----------
    volts : voltages that differ from those of the problem's gates, by name, for each set.

    Raises
    ------
    ConvergenceError
        Carriers and potential could not be brought to agree, or states are missing.
    """
    tell = on_progress or (lambda stage, fraction, detail: None)
    channels = charged.wire.channels
    best: list[_Judged] = []
    worst, stalled = np.inf, 0
    with Mesher(charged.wire.inner) as mesher:
        first = first_size(mesher, channels, wanted, accuracy_eV, charged.within)
        size, needs, pace = first.size, first.needs, MeshPace()
        factor = estimate.bar_factor(first.corners)
        corners = first.corners
        for number in range(1, _MOST_MESHES + 1):
            try:
                meshes = Meshes.of(charged, *mesher.mesh(size))
            except MeshError:
                if not best:
                    raise
                break  # cells at a singular end became too small: the best mesh so far is kept, with its bars
            tell("mesh", 0.02 + 0.08 * number, pace.begin(number, len(meshes.coarse.points)))
            if not best:
                corners = charged.corners(meshes.coarse, meshes.field, first.corners)
            try:
                judged = []
                for k, own in enumerate(volts):
                    before = best[k].balanced if best else None
                    judged.append(_judged(charged, meshes, own, needs, wanted, factor, accuracy_eV, before))
            except CoarseMeshError as fault:
                if not fault.finer_helps or number == _MOST_MESHES:
                    raise
                size = _smaller(size)
                continue
            bar, unknowns = max(j.done.bar_eV for j in judged), len(meshes.coarse.points)
            tell("mesh", 0.1 + 0.08 * number, f"mesh {number}: {unknowns:,} points, widest bar {1e3 * bar:.3g} meV")
            _log.debug("mesh %d: %d points, bar %.3g eV", number, unknowns, bar)
            stalled = 0 if bar < 0.7 * worst else stalled + 1
            if bar < worst:
                best, worst = judged, bar
            if bar <= accuracy_eV or stalled >= _MOST_STALLED:
                break
            needs = tuple(max(each) for each in zip(*(j.done.needs for j in judged), strict=True))
            target = max(accuracy_eV / factor * _AIM / 2 ** max(number - 2, 0), 1e-3 * bar)
            share = np.hstack([j.share_eV for j in judged])
            size = estimate.finer(meshes.field.space, share, size, corners, target)
            if unknowns * (bar / (factor * target)) ** 0.25 * (wanted + SPARE) > MOST_VALUES:
                break
    tell("count", 0.9, "counting the states below the highest wanted one")
    return tuple(_finished(charged, one, wanted, accuracy_eV, number, factor) for one in best)


def _smaller(size: SizeField) -> SizeField:
    """Cells of about half the area everywhere."""
    sizes = None if size.sizes_nm is None else 0.7 * size.sizes_nm
    return replace(size, largest_nm=0.7 * size.largest_nm, sizes_nm=sizes)


def certify_on(
    charged: ChargedWire,
    meshes: Meshes,
    balanced: Balanced,
    needs: Sequence[int],
    wanted: int,
    accuracy_eV: float,
    factor: float,
) -> ChargedSubbands:
    """The same on meshes that are there already, for a balance on them; without the effect of an outer wall."""
    judged = _on(charged, meshes, balanced, needs, wanted, factor, accuracy_eV)
    return _finished(charged, judged, wanted, accuracy_eV, 0, factor, walls=False)


def _judged(
    charged: ChargedWire,
    meshes: Meshes,
    volts: Mapping[str, float],
    needs: Sequence[int],
    wanted: int,
    factor: float,
    accuracy_eV: float,
    before: Balanced | None,
) -> _Judged:
    stage = charged.stage(meshes.coarse, meshes.field)
    held = meshes.field.held_values(charged.gate_V(volts))
    guess = None
    if before is not None:
        guess = before.function(*meshes.coarse.points.T)
        guess[meshes.field.held] = held
    balanced = balance(stage, held, guess=guess)
    return _on(charged, meshes, balanced, needs, wanted, factor, accuracy_eV)


def _on(
    charged: ChargedWire,
    meshes: Meshes,
    balanced: Balanced,
    needs: Sequence[int],
    wanted: int,
    factor: float,
    accuracy_eV: float,
) -> _Judged:
    channels = charged.channels_in(balanced.function)
    solved = filled_needs(balanced, needs)
    done = solve_all(meshes.coarse, meshes.fine, channels, solved, wanted, factor, accuracy_eV)
    if done.bar_eV <= accuracy_eV:
        done = done.thorough(accuracy_eV).finished()
    changes, share = _potential_error(charged, meshes, balanced, done)
    filled = filled_error(balanced, done.solved)
    wide = estimate.bar_factor(charged.corners(meshes.coarse, meshes.field))
    widening = tuple(wide * (change + filled.shift_eV) + balanced.residual_V for change in changes)
    wider = done.widened(widening)
    whole = np.zeros((len(meshes.coarse.cells), 0))
    columns = [whole, share[:, None]]
    cells = wider.space.cells
    for own in (filled.share_eV[:, None], *(own for _, bars, own in wider.states if len(bars))):
        if own.any():
            spread = np.zeros((len(meshes.coarse.cells), own.shape[1]))
            spread[cells] = own
            columns.append(spread)
    return _Judged(meshes, balanced, done, wider, np.hstack(columns), widening)


def _potential_error(charged: ChargedWire, meshes: Meshes, balanced: Balanced, done: Pass) -> tuple[list[Array], Array]:
    """What degree 6 does to the potential, in every state (m,) of each solved channel, and (c,) where it comes from.

    For a state's density w the change of the potential counts int w (phi_6 - phi_4) = int permittivity grad(z_6 - z_4)
    grad(phi_6 - phi_4), z being the potential of a charge w: cells are judged by the product of both (R. Becker and R.
    Rannacher, Acta Numerica 10, 1 (2001)).
    """
    coarse, fine = meshes.field, meshes.fine_field
    stage, field = balanced.stage, balanced.stage.field
    phi_there = at_quadrature(coarse.space, balanced.potential_V, fine.space, field.cells)
    density, slope = stage.dopants.charge(phi_there)
    solved = [s for s in done.solved if s is not None]
    there = solved[0].enriched.space
    filled, rate = _filled(charged, balanced, there)
    density[stage.places] -= filled
    slope[stage.places] -= rate
    held = _fine_held(meshes, balanced)
    better = improved(coarse, fine, balanced.potential_V, held, density, slope, field.cells)
    change = (better.phi - better.before)[fine.space.dofs[there.cells]] @ there.tabulated[1][2].T
    weights = there.quadrature_weights
    each, mean = [], np.zeros(weights.shape)
    for s in solved:
        held_density = state_density(there, s.operator, s.energy_eV, s.enriched.states)
        signed = np.abs(np.einsum("cq,cqm->m", weights * change, held_density))
        unsigned = np.einsum("cq,cqm->m", weights * np.abs(change), held_density)
        each.append(np.maximum(signed, _CANCELLED * unsigned))
        mean += held_density.mean(axis=2) / len(solved)
    share = _dual_share(meshes, balanced, better.share_eV_per_nm, mean)
    # Products of sizes overrate what cancels: together the cells account for what the states have seen.
    seen = max(float(change.max()) for change in each)
    return each, share * (seen / max(float(share.sum()), 1e-300))


def _filled(charged: ChargedWire, balanced: Balanced, fine: Space) -> tuple[Array, Array]:
    """Carriers in 1/nm^3, and what the predictor says of their answer, at the fine space's quadrature points."""
    occupied, carriers = balanced.occupied, balanced.stage.carriers
    shape = fine.quadrature_weights.shape
    filled, rate = np.zeros(shape), np.zeros(shape)
    steep = np.nan_to_num(occupied.density_slope_per_eV_nm, posinf=0.0)
    for number, channel in enumerate(charged.channels_in(balanced.function)):
        pick = np.flatnonzero(occupied.channel == number)
        if len(pick):
            states = prolong(carriers.space, fine, occupied.states[:, pick])
            operator = channel.operator_of(carriers.space.mesh)
            density = state_density(fine, operator, occupied.energy_eV[pick], states)
            filled += density @ occupied.line_density_per_nm[pick]
            rate += density @ steep[pick]
    return filled, rate


def _fine_held(meshes: Meshes, balanced: Balanced) -> Array:
    """(h6,) the potential at the fine field's held points."""
    values = np.full(len(meshes.coarse.points), np.nan)
    values[meshes.field.held] = balanced.held_V
    potentials = {name: float(values[points[0]]) for name, points in meshes.field.gate_points.items()}
    return meshes.fine_field.held_values(potentials)


def _dual_share(meshes: Meshes, balanced: Balanced, share: Array, density: Array) -> Array:
    """(c,) in V: each cell's part in what the mean density of the states sees of the potential's change."""
    coarse, fine, field = meshes.field, meshes.fine_field, balanced.stage.field
    if not len(coarse.held):
        return np.sqrt(np.maximum(share, 0.0))  # nothing to solve against: any change counts
    here = balanced.occupied.density_per_nm2
    mean = here.mean(axis=2) if here.shape[2] else np.zeros(here.shape[:2])
    load_density = np.zeros((len(field.cells), here.shape[1]))
    load_density[balanced.stage.places] = mean
    z = coarse.solve_linear(field.load(load_density), np.zeros(len(coarse.held)))
    whole = np.zeros((len(field.cells), density.shape[1]))
    whole[balanced.stage.places] = density
    nothing = replace(
        fine, density_per_nm3=np.zeros_like(fine.density_per_nm3), sheets=(),
    )  # fmt: skip
    dual = improved(coarse, nothing, z, np.zeros(len(fine.held)), whole, None, field.cells)
    return np.asarray(np.sqrt(np.maximum(share, 0.0) * np.maximum(dual.share_eV_per_nm, 0.0)))


def _finished(
    charged: ChargedWire,
    judged: _Judged,
    wanted: int,
    accuracy_eV: float,
    passes: int,
    factor: float,
    walls: bool = True,
) -> ChargedSubbands:
    channels = charged.channels_in(judged.balanced.function)
    done = judged.raw.thorough(accuracy_eV).finished().widened(judged.widening)
    effects = done.wall_effects(channels) if walls else [None] * len(channels)
    certified = certified_pass(channels, done, effects, wanted, accuracy_eV, passes)
    more = iter(judged.widening)
    by_channel = [next(more) for s in judged.done.solved if s is not None]
    error = np.array([by_channel[c][i] if i < len(by_channel[c]) else np.nan for c, i in certified.entries])
    return ChargedSubbands(judged.meshes, certified, judged.balanced, error, done.needs, factor)
