"""How far the steps of a sweep move when a dimension of the wire is not what was drawn: solved anew, not linearised."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from wiresolve.describe.dimensions import dimensions
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.problem import Problem
from wiresolve.errors import WiresolveError
from wiresolve.gate_result import GateStep
from wiresolve.physics.charged_subbands import ChargedSubbands, certify_charged
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.opening import opening, subband_eV
from wiresolve.physics.selfconsistent import Balanced, balance
from wiresolve.physics.wire import Wire

MOST_STEPS, MOST_DIMENSIONS = 3, 3
SMALL_nm = 5.0
"""Dimensions below this are varied by a tenth of a nanometre in all, others by half of one."""
_CLOSE_eV = 2e-6
_COARSER = 5.0
"""How much less exact than the sweep these solves may be: their errors are alike on both sides and cancel."""


@dataclass(frozen=True)
class Motion:
    """How far steps move, in V for each nm by which a dimension (its key's path) grows."""

    of: str
    value_nm: float
    per_nm_V: tuple[float, ...]


def step_motions(
    problem: Problem,
    steps: Sequence[tuple[GateStep, int, float]],
    on_progress: Callable[[str, float, str], None] | None = None,
) -> tuple[Motion, ...]:
    """The motion of up to three steps with up to three dimensions: two of the section, and the swept gate's insulator.

    Each step is solved for on two other wires, the length a quarter of a nanometre (of small ones a twentieth) longer
    and shorter; half a nanometre is no differential where levels feel their own charge.

    Parameters
    ----------
    steps : each with the number of its subband by energy (from 0) and the coupling there.
    """
    assert problem.voltages is not None
    some = [s for s in steps if math.isfinite(s[0].opens_at_V) and s[2] > 0][:MOST_STEPS]
    lengths = _lengths(problem)
    if not some or not lengths:
        return ()
    gate, wanted = problem.voltages.gate, 1 + max(n for _, n, _ in some)
    # One mesh, made for the last step, serves all of them.
    volts: list[Mapping[str, float]] = [{gate: some[-1][0].opens_at_V}]
    accuracy = _COARSER * problem.accuracy.energy_eV
    found = []
    for number, (path, value, change) in enumerate(lengths):
        if on_progress is not None:
            on_progress("fabrication error", number / len(lengths), path)
        off = 0.25 if value >= SMALL_nm else 0.05
        opened = []
        try:
            for sign in (1, -1):
                wire = ChargedWire(Wire(change(value + sign * off)))
                solved = certify_charged(wire, volts, wanted, accuracy)[0]
                opened.append([_opens(wire, solved, gate, *of) for of in some])
        except WiresolveError:
            continue  # the changed section cannot be drawn or solved: nothing is said of this dimension
        rise = (np.array(opened[0]) - np.array(opened[1])) / (2 * off)
        found.append(Motion(path, value, tuple(float(r) for r in rise)))
    return tuple(found)


def _opens(
    wire: ChargedWire, solved: ChargedSubbands, gate: str, step: GateStep, subband: int, coupling: float
) -> float:
    """The voltage at which a subband meets the Fermi level on another wire."""
    stage = solved.balanced.stage.listing(solved.needs)
    before: Balanced | None = None

    def energy_at(voltage: float) -> float:
        nonlocal before
        held = solved.meshes.field.held_values(wire.gate_V({gate: voltage}))
        before = balance(stage, held, before, solved.balanced.potential_V if before is None else None)
        return subband_eV(before, subband)

    return opening(energy_at, step.opens_at_V, coupling, _CLOSE_eV).voltage_V


def _lengths(problem: Problem) -> list[tuple[str, float, Callable[[float], Problem]]]:
    section = problem.section
    found: list[tuple[str, float, Callable[[float], Problem]]] = []
    if not isinstance(section.shape, ImportedMesh):
        for dimension in dimensions(section):
            parts = dimension.path.split(".")
            if len(parts) == 2 and parts[1] != "corner_radius":
                found.append((dimension.path, dimension.value_nm, _of_shape(problem, f"{parts[1]}_nm")))
            elif len(parts) == 3 and parts[1].startswith("layers[") and parts[2] == "thickness":
                found.append((dimension.path, dimension.value_nm, _of_layer(problem, int(parts[1][7:-1]) - 1)))
    found = found[: MOST_DIMENSIONS - 1]
    for k, gate in enumerate(problem.gates):
        if problem.voltages is not None and gate.name == problem.voltages.gate and gate.insulator is not None:
            path = f"gates[{k + 1}].insulator.thickness"
            found.append((path, gate.insulator.thickness_nm, _of_insulator(problem, k)))
    return found


def _of_shape(problem: Problem, field: str) -> Callable[[float], Problem]:
    section = problem.section
    shape: Any = section.shape
    return lambda value: replace(problem, section=replace(section, shape=replace(shape, **{field: value})))


def _of_layer(problem: Problem, k: int) -> Callable[[float], Problem]:
    section = problem.section

    def changed(value: float) -> Problem:
        layers = list(section.layers)
        layers[k] = replace(layers[k], thickness_nm=value)
        return replace(problem, section=replace(section, layers=tuple(layers)))

    return changed


def _of_insulator(problem: Problem, k: int) -> Callable[[float], Problem]:
    def changed(value: float) -> Problem:
        gates = list(problem.gates)
        insulator = gates[k].insulator
        assert insulator is not None
        gates[k] = replace(gates[k], insulator=replace(insulator, thickness_nm=value))
        return replace(problem, gates=tuple(gates))

    return changed
