"""Fields of the reference values: meshes of plain pieces, capacitances and potentials on them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Loop, Point, Segment, circle
from wiresolve.describe.section import VOID, Piece
from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Grading, Mesher, SizeField
from wiresolve.fem.named_edges import NamedEdges, edges_along
from wiresolve.fem.space import Space
from wiresolve.physics.electrostatics import Field, poisson_field

Array = NDArray[np.float64]


def piece(name: str, loop: Loop, carriers: bool = True) -> Piece:
    """A piece whose material is called as the piece is."""
    return Piece(name, loop, name, carriers, 0.0)


def hole(radius: float, center: Point = (0.0, 0.0)) -> Piece:
    """A round hole: a metal core, whose rim is held."""
    return Piece("core", circle(radius, center=center), VOID, True, 0.0)


def meshed(
    pieces: Sequence[Piece],
    largest_nm: float,
    turn_cells: int = 24,
    gradings: tuple[Grading, ...] = (),
) -> Mesh:
    """The degree-4 mesh with cells of one size, but for gradings."""
    with Mesher(pieces) as mesher:
        return mesher.mesh(SizeField(largest_nm, gradings, turn_cells=turn_cells))[0]


def field(
    mesh: Mesh, permittivity: Mapping[str, float], gates: Mapping[str, Sequence[Segment]], **more: Mapping[str, float]
) -> Field:
    """The field with gates on curves; `density_per_nm3`, by the piece's name too, is fixed charge."""
    names = [region.name for region in mesh.regions]
    density = more.get("density_per_nm3", {})
    return poisson_field(
        Space(mesh, whole=True),
        [permittivity[name] for name in names],
        {name: whole(mesh, segments) for name, segments in gates.items()},
        density_by_region_per_nm3=[density.get(name, 0.0) for name in names],
    )


def whole(mesh: Mesh, segments: Sequence[Segment]) -> NamedEdges:
    """The edges along curves, all of which the mesh must follow."""
    edges = edges_along(mesh, segments)
    assert edges.missing_nm < 1e-6 * edges.length_nm
    return edges


def at_origin(mesh: Mesh, values: Array) -> float:
    """A function at the origin, from the straight cell around it."""
    corner = mesh.points[mesh.cells[:, :3]]
    legs = np.stack([corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]], axis=2)
    place = np.linalg.solve(legs, -corner[:, 0][:, :, None])[:, :, 0]
    cell = int(np.argmax(np.minimum(place.min(axis=1), 1 - place.sum(axis=1))))
    return float((triangle(mesh.degree).values(place[cell][None]) @ values[mesh.cells[cell]])[0])


def mean_on(edges: NamedEdges, values: Array) -> float:
    """A function's mean along edges."""
    return float(edges.load() @ values) / edges.length_nm
