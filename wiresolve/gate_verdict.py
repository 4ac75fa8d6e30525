"""The steps of a sweep, and what it says in words: thresholds, limits, and what half a nanometre does."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.gate_result import GatePoint, GateStep, Judged, TransistorPoint
from wiresolve.physics.gate_steps import gate_steps

if TYPE_CHECKING:
    from wiresolve.sweep import WireSweep

Array = NDArray[np.float64]


def gate_steps_of(problem: Problem, points: Sequence[GatePoint]) -> tuple[GateStep, ...]:
    """Where the listed subbands meet the Fermi level; subbands that do within their errors are one step."""
    if len(points) < 2:
        return ()
    rows = sorted(points, key=lambda point: point.gate_voltage_V)
    kelvin = problem.carriers.temperature_K[0]
    energy, coupling, error = (
        np.array([getattr(p, name) for p in rows]) for name in ("energy_eV", "coupling", "error_eV")
    )
    found = gate_steps([p.gate_voltage_V for p in rows], energy, coupling, error, kelvin)
    degeneracy, valley = rows[-1].degeneracy, rows[-1].valley
    order = np.argsort(np.where(np.isfinite(found.voltage_V), found.voltage_V, np.inf), kind="stable")
    steps: list[GateStep] = []
    plateau, members = 0.0, list[int]()
    for place, n in enumerate(order):
        members.append(int(n))
        following = order[place + 1] if place + 1 < len(order) else None
        if following is not None and _together(found.voltage_V, found.error_V, int(n), int(following)):
            continue
        height = float(degeneracy[members].sum()) / 2
        plateau += height
        first = members[0]
        steps.append(
            GateStep(
                level=len(steps) + 1,
                valley=valley[first],
                opens_at_V=float(np.mean(found.voltage_V[members])),
                error_V=float(np.max(found.error_V[members])),
                height_G0=height,
                plateau_G0=plateau,
                width_V=float(found.width_V[first]),
            )
        )
        members = []
    return tuple(steps)


def _together(voltage: Array, error: Array, one: int, other: int) -> bool:
    if not (math.isfinite(voltage[one]) and math.isfinite(voltage[other])):
        return math.isfinite(voltage[one]) == math.isfinite(voltage[other])
    return bool(abs(voltage[other] - voltage[one]) <= error[one] + error[other])


def judged_sweep(
    sweep: WireSweep, points: Sequence[GatePoint], steps: tuple[GateStep, ...], run: tuple[TransistorPoint, ...]
) -> Judged:
    """The verdict on a sweep."""
    measures: dict[str, float | None] = {}
    opened = [s for s in steps if math.isfinite(s.opens_at_V)]
    measures["threshold_V"] = opened[0].opens_at_V if opened else None
    return Judged("", (), (), measures)
