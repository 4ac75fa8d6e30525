"""The listed subbands of a wire in balance as plain rows."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics import modes
from wiresolve.physics.charged_subbands import ChargedSubbands
from wiresolve.physics.filling import Filling
from wiresolve.physics.listing import SPIN
from wiresolve.physics.pencil import Operator, Pencil
from wiresolve.physics.selfconsistent import Balanced
from wiresolve.physics.solved import levels
from wiresolve.physics.state_density import state_density
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class ListedRows:
    """(n,) of each listed subband by energy, (nodes, n) canonical states on the carriers' space, and their densities.

    `density_per_nm2` (c, q, n) is theirs at the space's quadrature points, that of folded bands included.
    """

    energy_eV: Array
    error_eV: Array
    axial_mass: Array
    degeneracy: Ints
    valley: tuple[str, ...]
    level: Ints
    line_density_per_nm: Array
    states: NDArray[Any]
    density_per_nm2: Array


def listed_rows(solved: ChargedSubbands) -> ListedRows:
    """The certified subbands; what each holds is counted with the states of the balance."""
    certified = solved.certified
    labels = [channel.label for channel in solved.balanced.stage.carriers.channels]
    numbers = [labels.index(channel.label) for channel in certified.channels]
    made = [_canonical(s.pencil, s.operator, s.energy_eV, s.unknown_states, s.level) for s in certified.solved]
    entries = [(numbers[c], int(i), made[c]) for c, i in certified.entries]
    return _rows(solved.balanced, entries, certified.energy_eV, certified.bar_eV, certified.level)


def followed_rows(balanced: Balanced, wanted: int, bar_eV: Array) -> ListedRows | None:
    """The lowest `wanted` subbands from the states of the balance, with given bars (wanted,).

    None where these do not reach so far, or may not be all.
    """
    stage, occupied = balanced.stage, balanced.occupied
    known = [kept for kept in occupied.kept if kept is not None]
    if len(known) < len(stage.carriers.channels):
        return None
    energy = np.concatenate([kept.found.energy_eV for kept in known])
    if len(energy) < wanted:
        return None
    top = float(np.sort(energy)[wanted - 1])
    if any(kept.complete_eV <= top for kept in known):
        return None
    rows = sorted((float(e), c, i) for c, kept in enumerate(known) for i, e in enumerate(kept.found.energy_eV))[:wanted]
    made = []
    for c, kept in enumerate(known):
        count = sum(channel == c for _, channel, _ in rows)
        own = kept.found.energy_eV[:count]
        bars = np.full(count, float(bar_eV.max()))
        pencil, operator = stage.carriers.described(c, balanced.function)
        made.append(_canonical(pencil, operator, own, kept.found.states[:, :count], levels(own, bars)))
    energies = np.array([e for e, _, _ in rows])
    entries = [(c, i, made[c]) for _, c, i in rows]
    return _rows(balanced, entries, energies, bar_eV, levels(energies, bar_eV))


@dataclass(frozen=True, eq=False)
class _Canonical:
    """States of one channel in their canonical frame: on all nodes, with their densities (c, q, m)."""

    pencil: Pencil
    states: NDArray[Any]
    density_per_nm2: Array


def _canonical(pencil: Pencil, operator: Operator, energy: Array, states: NDArray[Any], level: Ints) -> _Canonical:
    whole = int(level.max()) if len(level) else 0
    unknowns = modes.canonical(pencil, states, level, whole) if whole else states
    full = pencil.spread(unknowns)
    return _Canonical(pencil, full, state_density(pencil.space, operator, energy, full))


def _rows(
    balanced: Balanced, entries: Sequence[tuple[int, int, _Canonical]], energy: Array, bar: Array, level: Ints
) -> ListedRows:
    """Rows from (channel, number, states) of each."""
    occupied, channels = balanced.occupied, balanced.stage.carriers.channels
    mass, held = np.empty(len(entries)), np.empty(len(entries))
    for row, (c, i, made) in enumerate(entries):
        pick = np.flatnonzero(occupied.channel == c)
        if i < len(pick):
            mass[row], alpha = occupied.axial_mass[pick[i]], float(occupied.alpha_per_eV[pick[i]])
        else:
            along = made.pencil.expected(2, made.states[made.pencil.kept][:, [i]])
            mass[row], alpha = HBAR2_OVER_2M0 / float(np.real(along[0, 0])), 0.0
        filling = Filling(occupied.temperature_K, alpha)
        held[row] = SPIN * channels[c].degeneracy * np.sqrt(mass[row]) * float(filling.density(np.array(-energy[row])))
    return ListedRows(
        energy,
        bar,
        mass,
        np.array([SPIN * channels[c].degeneracy for c, _, _ in entries]),
        tuple(channels[c].label for c, _, _ in entries),
        level,
        held,
        np.column_stack([made.states[:, i] for _, i, made in entries]),
        np.stack([made.density_per_nm2[:, :, i] for _, i, made in entries], axis=2),
    )
