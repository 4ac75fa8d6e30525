"""The mesh that a problem's accuracy needs, without what is measured on it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass

from wiresolve.describe.problem import Problem
from wiresolve.fem.mesh import Mesh
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire


@dataclass(frozen=True, eq=False)
class SectionMesh:
    """A mesh on which every wanted energy has its bar, unless `met` is false: then it is the best that was found."""

    mesh: Mesh
    unknowns: int
    area_nm2: float
    met: bool

    def cells_by_region(self) -> list[tuple[str, int]]:
        """Regions by name and how many cells each has."""
        count = Counter(self.mesh.region.tolist())
        return [(region.name, count[number]) for number, region in enumerate(self.mesh.regions)]


def section_mesh(problem: Problem, on_progress: Callable[[str, float, str], None] | None = None) -> SectionMesh:
    """Mesh a problem's section until the wanted energies have the wanted accuracy.

    Raises
    ------
    InputError, MeshError, ConvergenceError
        As for `solve`.
    """
    from threadpoolctl import threadpool_limits

    wire, accuracy = Wire(problem), problem.accuracy
    with threadpool_limits(limits=1, user_api="blas"):
        done = certify(wire.draw, wire.operator, accuracy.subbands, accuracy.energy_eV, wire.barrier, on_progress)
    space = done.solved.pencil.space
    return SectionMesh(space.mesh, len(done.solved.pencil.kept), space.area_nm2, done.met)


def mesh(problem: Problem) -> Mesh:
    """The curved mesh of a problem's section, fine enough for its accuracy (see `section_mesh`)."""
    return section_mesh(problem).mesh
