"""A result's modes by groups of valleys, with the operator that they are states of, at degree 4 and at degree 6."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space
from wiresolve.physics.carried_modes import CarriedModes, improved, stationary
from wiresolve.physics.channel import Channel
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.solved import slanted
from wiresolve.physics.wire import Wire
from wiresolve.result import Result

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class ModeGroup:
    """The modes of one group of valleys.

    Attributes
    ----------
    rows : (m,) their numbers in the list, from 0.
    coarse, fine : the modes as they are listed, and the same at degree 6.
    potential_error_eV : (m,) the part of the bars that comes from the charge's potential; None without charge.
    """

    rows: Ints
    coarse: CarriedModes
    fine: CarriedModes
    potential_error_eV: Array | None


def channels_of(result: Result) -> tuple[Channel, ...]:
    """The groups of valleys of a result, with the operator of each in the potential that was found."""
    wire = Wire(result.problem)
    if result.charge is None:
        return wire.channels
    felt = result.charge.potential_V
    if result.charge.exchange_V is not None:
        felt = felt + result.charge.exchange_V
    return ChargedWire(wire).channels_in(NodalFunction(result.mesh, felt))


def listed_modes(result: Result) -> list[tuple[Ints, Channel, CarriedModes]]:
    """Rows, channel, and modes of each group of valleys in the list."""
    space = Space(result.mesh)
    valley = np.array([s.valley for s in result.subbands])
    found = []
    for channel in channels_of(result):
        rows = np.flatnonzero(valley == channel.label)
        if len(rows):
            operator = channel.operator_of(result.mesh)
            modes = CarriedModes(space, operator, result.energies_eV[rows], result.modes[space.nodes][:, rows])
            # The listed energies are those of minima, which may lie off k = 0 there.
            found.append((rows, channel, stationary(modes) if slanted(operator) else modes))
    return found


def mode_groups(result: Result) -> list[ModeGroup]:
    """The modes of each group of valleys in the list, at both degrees.

    Raises
    ------
    ConvergenceError
        The modes are not states of the result's problem.
    """
    fine_mesh = result.finer_mesh or finer(result.mesh)
    error = None if result.charge is None else np.nan_to_num(result.charge.potential_error_eV)
    found = []
    for rows, _, modes in listed_modes(result):
        operator = modes.operator
        space = Space(fine_mesh, composite=operator.varies and not operator.smooth)
        fine = improved(modes, space, result.errors_eV[rows])
        found.append(ModeGroup(rows, modes, fine, None if error is None else error[rows]))
    return found


def finer(mesh: Mesh) -> Mesh:
    """The same curved cells with nodes of degree 6."""
    element, own = triangle(6), triangle(mesh.degree)
    places = np.einsum("an,cnx->cax", own.values(element.nodes), mesh.points[mesh.cells]).reshape(-1, 2)
    size = float(np.ptp(mesh.points, axis=0).max())
    _, first, number = np.unique(np.round(places / (1e-9 * size)), axis=0, return_index=True, return_inverse=True)
    cells = np.asarray(number, dtype=np.int64).reshape(len(mesh.cells), -1)
    return Mesh(6, places[first], cells, mesh.region, mesh.regions, np.zeros(0, dtype=np.int64))
