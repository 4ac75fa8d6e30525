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
from wiresolve.physics.state_density import state_density
from wiresolve.physics.subbands import Certified
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
    certified, occupied = solved.certified, solved.balanced.occupied
    labels = [channel.label for channel in solved.balanced.stage.carriers.channels]
    states = [
        s.pencil.spread(modes.canonical(s.pencil, s.unknown_states, s.level, int(s.level.max())))
        for s in certified.solved
    ]
    mass, held = np.empty(certified.wanted), np.empty(certified.wanted)
    for row, (c, i) in enumerate(certified.entries):
        channel = certified.channels[c]
        pick = np.flatnonzero(occupied.channel == labels.index(channel.label))
        if i < len(pick):
            mass[row], alpha = occupied.axial_mass[pick[i]], float(occupied.alpha_per_eV[pick[i]])
        else:
            along = certified.solved[c].pencil.expected(2, certified.solved[c].unknown_states[:, [i]])
            mass[row], alpha = HBAR2_OVER_2M0 / float(np.real(along[0, 0])), 0.0
        filling = Filling(occupied.temperature_K, alpha)
        energy = float(certified.energy_eV[row])
        held[row] = SPIN * channel.degeneracy * np.sqrt(mass[row]) * float(filling.density(np.array(-energy)))
    channels = [certified.channels[c] for c, _ in certified.entries]
    return ListedRows(
        certified.energy_eV,
        certified.bar_eV,
        mass,
        np.array([SPIN * channel.degeneracy for channel in channels]),
        tuple(channel.label for channel in channels),
        certified.level,
        held,
        np.column_stack([states[c][:, i] for c, i in certified.entries]),
        _densities(certified, states),
    )


def _densities(certified: Certified, states: Sequence[NDArray[Any]]) -> Array:
    """(c, q, n) of the listed states."""
    space = certified.space
    found = np.empty((*space.quadrature_weights.shape, certified.wanted))
    for c, solved in enumerate(certified.solved):
        rows = np.flatnonzero(certified.entries[:, 0] == c)
        if len(rows):
            own = certified.entries[rows, 1]
            found[:, :, rows] = state_density(space, solved.operator, solved.energy_eV[own], states[c][:, own])
    return found
