"""How a wire in balance answers to a gate: levels and carriers for each volt, and what an empty section would do."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.space import Space
from wiresolve.physics.response import Response, response
from wiresolve.physics.selfconsistent import Balanced, Stage, balance
from wiresolve.units import KB

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_STEP_KT, _LEAST_V = 0.005, 2e-5
"""Steps of the difference that stands for the answer where masses grow with energy: at 300 K it is good to 1e-5, at
4.2 K, where the least step is 0.06 kT, to 6e-4."""


@dataclass(frozen=True, eq=False)
class Answered:
    """What one volt on a gate does.

    Attributes
    ----------
    coupling : (n,) by how many eV each listed level falls; levels of one cluster share their mean.
    empty_coupling : the same of the first level where there is no charge.
    carriers_per_V_nm : by how much the line density rises.
    """

    coupling: Array
    empty_coupling: float
    carriers_per_V_nm: float


def answered(balanced: Balanced, density_per_nm2: Array, level: Ints, gate: str) -> Answered:
    """The answer of listed states, whose densities are (c, q, n) and clusters `level` (n,), and of all carriers.

    Where masses grow with energy, or with exchange, it is the difference of two balances close by.
    """
    stage = balanced.stage
    if stage.exchange is not None or any(operator.nonparabolic for operator in stage.carriers.operators):
        found = _by_difference(balanced, gate)
    else:
        found = response(balanced, gate)
    seen = _seen(stage.carriers.space, found.potential, density_per_nm2)
    shared = np.array([seen[level == number].mean() for number in level])
    empty = _seen(stage.carriers.space, _empty(stage, gate), density_per_nm2[:, :, :1])
    return Answered(shared, float(empty[0]), found.carriers_per_V_nm)


def _seen(space: Space, potential: Array, density_per_nm2: Array) -> Array:
    """(n,) mean of a potential (mesh points,) over densities (c, q, n) of integral 1."""
    at = potential[space.nodes][space.dofs] @ space.tabulated[1][2].T
    return np.asarray(np.einsum("cq,cqm->m", space.quadrature_weights * at, density_per_nm2))


def _empty(stage: Stage, gate: str) -> Array:
    """(n,) the potential of one volt on a gate, with no charge that answers."""
    field = stage.field.field
    held = np.zeros(len(field.space.nodes))
    held[field.gate_points[gate]] = 1.0
    return field.solve_linear(np.zeros(len(held)), held[field.held])


def _by_difference(balanced: Balanced, gate: str) -> Response:
    stage = balanced.stage
    field = stage.field.field
    one = np.zeros(len(field.space.nodes))
    one[field.gate_points[gate]] = 1.0
    step = max(_STEP_KT * KB * stage.carriers.temperature_K, _LEAST_V)
    here = balanced.potential_V
    up = balance(stage, balanced.held_V + step * one[field.held], balanced)
    down = balance(stage, balanced.held_V - step * one[field.held], balanced, 2 * here - up.potential_V)

    def slope(of: Any) -> Any:
        return (of(up) - of(down)) / (2 * step)

    charges = {name: slope(lambda b, n=name: b.charges_per_nm()[n]) for name in field.gate_points}
    return Response(
        slope(lambda b: b.felt_V),
        slope(lambda b: b.occupied.carriers_per_nm3),
        float(slope(lambda b: b.occupied.total_per_nm)),
        charges,
    )


def channel_capacitance(stage: Stage, gate: str) -> float:
    """Capacitance in e/(V nm) between a gate and the section as if all of it that admits carriers were a metal.

    All other gates and pinned surfaces are at its potential. Infinite where the gate lies on that metal.
    """
    field, space = stage.field.field, stage.carriers.space
    inside = np.zeros(len(field.space.nodes), dtype=bool)
    regions = space.mesh.regions
    own = np.array([not region.name.startswith("insulator ") for region in regions])[space.mesh.region[space.cells]]
    inside[space.mesh.cells[space.cells[own]]] = True
    if inside[field.gate_points[gate]].any():
        return np.inf
    potential = np.zeros(len(inside))
    potential[field.gate_points[gate]] = 1.0
    free = np.flatnonzero(~inside & ~field.is_held)
    if len(free):
        from wiresolve.fem.eigen import definite

        load = -(field.stiffness @ potential)
        potential[free] = definite(field.stiffness[free][:, free]).solve(load[free])
    return float(-(field.stiffness @ potential)[inside].sum())
