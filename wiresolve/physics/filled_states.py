"""What the mesh does to states that hold carriers moves the potential, and with it every level."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics.gate_answer import channel_capacitance
from wiresolve.physics.occupied import Occupied
from wiresolve.physics.selfconsistent import Balanced
from wiresolve.physics.solved import SPARE, Solved
from wiresolve.units import KB

Array = NDArray[np.float64]

_WARM_KT = 4.0
"""States farther above the Fermi level hold too few carriers for their errors to matter."""


def filled_needs(balanced: Balanced, needs: Sequence[int]) -> tuple[int, ...]:
    """How many states of each channel are solved at two degrees: those listed, and those that hold carriers."""
    occupied = balanced.occupied
    warm = occupied.energy_eV <= _WARM_KT * KB * occupied.temperature_K
    held = np.bincount(occupied.channel[warm], minlength=len(needs))
    most = balanced.stage.carriers.space.nodes.size // 4 - SPARE
    return tuple(max(need, min(int(n), most)) for need, n in zip(needs, held, strict=True))


@dataclass(frozen=True, eq=False)
class FilledError:
    """How far levels move with the potential, in eV, and each cell's part (c,) in it."""

    shift_eV: float
    share_eV: Array


def filled_error(balanced: Balanced, solved: Sequence[Solved | None]) -> FilledError:
    """What the falls of filled states' energies do to the potential.

    A state that lies too high by d holds D d too few carriers, and the potential rises until they are made up for: by
    sum D d / (C + sum D), with D by the difference, as it diverges at a level's edge, and C that of all gates.
    """
    occupied, total, own = balanced.occupied, 0.0, 0.0
    share = np.zeros(len(balanced.stage.carriers.space.cells))
    for number, s in enumerate(solved):
        if s is None:
            continue
        pick = np.flatnonzero(occupied.channel == number)[: len(s.energy_eV)]
        if not len(pick):
            continue
        fall = s.bar_eV[: len(pick)] / s.bar_factor
        missing = _held(occupied, pick, fall) - occupied.line_density_per_nm[pick]
        rate = missing / np.maximum(fall, 1e-300)
        total, own = total + float(missing.sum()), own + float(rate.sum())
        share = share + s.share_eV[:, : len(pick)] @ rate
    stage = balanced.stage
    hold = sum(channel_capacitance(stage, name) for name in stage.field.field.gate_points)
    hold = max(hold + own if np.isfinite(hold) else own, 1e-300)
    return FilledError(total / hold, share / hold)


def _held(occupied: Occupied, pick: NDArray[np.int64], lower_eV: Array) -> Array:
    """(k,) line densities of states whose energies are lower."""
    lower = replace(occupied, energy_eV=occupied.energy_eV.copy())
    lower.energy_eV[pick] -= lower_eV
    return np.asarray(lower.line_density_per_nm[pick])
