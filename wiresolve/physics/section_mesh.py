"""The mesh that a problem's accuracy needs, without what is measured on it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from wiresolve.describe.problem import Problem, require_problem
from wiresolve.fem.mesh import Mesh
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire


@dataclass(frozen=True, eq=False)
class SectionMesh:
    """A mesh on which every wanted energy has its bar, unless `met` is false: then it is the best that was found.

    `cells` and `areas_nm2` are by region; regions that carriers cannot enter have cells, but no area here.
    """

    mesh: Mesh
    unknowns: int
    cells: Mapping[str, int]
    areas_nm2: Mapping[str, float]
    met: bool


def mesh(problem: Problem, on_progress: Callable[[str, float, str], None] | None = None) -> SectionMesh:
    """Mesh a problem's section until the wanted energies have the wanted accuracy.

    Raises
    ------
    InputError, MeshError, ConvergenceError
        As for `solve`.
    """
    from threadpoolctl import threadpool_limits

    require_problem(problem)
    wire, accuracy = Wire(problem), problem.accuracy
    with threadpool_limits(limits=1, user_api="blas"):
        done = certify(wire.draw, wire.channels, accuracy.subbands, accuracy.energy_eV, on_progress)
    space = done.space
    names = [region.name for region in space.mesh.regions]
    count = np.bincount(space.mesh.region, minlength=len(names))
    area = np.bincount(space.mesh.region[space.cells], space.quadrature_weights.sum(axis=1), minlength=len(names))
    return SectionMesh(
        mesh=space.mesh,
        unknowns=len(done.solved[0].pencil.kept),
        cells=dict(zip(names, count.tolist(), strict=True)),
        areas_nm2=dict(zip(names, area.tolist(), strict=True)),
        met=done.met,
    )
