"""A function known at a mesh's points: its values anywhere, and on spaces of another degree."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from tests.truth._fields import meshed, piece
from wiresolve.describe.curves import circle
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space

Array = NDArray[np.float64]

RADIUS = 5.0


def quartic(x: Array, y: Array) -> Array:
    """A polynomial that straight quartic cells hold exactly."""
    return np.asarray(1.0 + 0.3 * x - 0.2 * y + 0.05 * x * y + 0.01 * x**3 - 0.002 * x**2 * y**2 + 0.001 * y**4)


def smooth(x: Array, y: Array) -> Array:
    """A smooth function that no cell holds exactly."""
    return np.asarray(np.cos(0.4 * x + 0.1) * np.exp(0.2 * y))


@cache
def meshes(size_nm: float) -> tuple[Mesh, Mesh]:
    """A disk in a ring, at degrees 4 and 6 over the same triangles."""
    pieces = [piece("layer 1", circle(RADIUS + 2), carriers=False), piece("core", circle(RADIUS))]
    with Mesher(pieces) as mesher:
        return mesher.mesh(SizeField(size_nm, (), turn_cells=24))


def inside(count: int, radius: float = RADIUS + 2) -> tuple[Array, Array]:
    """Points all over a disk."""
    random = np.random.default_rng(3)
    r, angle = radius * np.sqrt(random.uniform(0, 1, count)), random.uniform(0, 2 * np.pi, count)
    return r * np.cos(angle), r * np.sin(angle)


def test_quartics_are_exact_where_cells_are_straight() -> None:
    """Cells away from round edges are straight; curved ones hold polynomials in their own coordinates only."""
    mesh, _ = meshes(1.5)
    function = NodalFunction(mesh, quartic(*mesh.points.T))
    x, y = inside(400, 0.5 * RADIUS)
    assert function(x, y) == pytest.approx(quartic(x, y), rel=0, abs=1e-11)


def test_values_at_the_mesh_points_are_its_own() -> None:
    mesh, _ = meshes(1.5)
    values = np.random.default_rng(5).standard_normal(len(mesh.points))
    assert NodalFunction(mesh, values)(*mesh.points.T) == pytest.approx(values, rel=0, abs=1e-8)


def test_anywhere_it_converges_with_the_fifth_power() -> None:
    x, y = inside(300)
    errors, cells = [], []
    for size in (2.0, 0.5):
        mesh, _ = meshes(size)
        errors.append(np.abs(NodalFunction(mesh, smooth(*mesh.points.T))(x, y) - smooth(x, y)).max())
        cells.append(len(mesh.cells))
    finer = np.sqrt(cells[0] / cells[1])
    assert errors[0] < 1e-4
    assert errors[1] < errors[0] * finer**4.5


def test_shape_of_the_arguments_is_kept() -> None:
    mesh, _ = meshes(2.0)
    function = NodalFunction(mesh, quartic(*mesh.points.T))
    x, y = (part.reshape(2, 3, 5) for part in inside(30, 2.0))
    assert function(x, y).shape == (2, 3, 5)
    assert function(x, y)[1, 2, 3] == pytest.approx(float(function(x[1, 2, 3], y[1, 2, 3])), rel=1e-13)


def test_outside_it_is_what_it_is_at_the_edge() -> None:
    mesh, _ = meshes(1.0)
    function = NodalFunction(mesh, smooth(*mesh.points.T))
    angle = np.linspace(0, 2 * np.pi, 37)
    on, off = ((RADIUS + 2 + d) * np.array([np.cos(angle), np.sin(angle)]) for d in (0.0, 1e-4))
    assert function(*off) == pytest.approx(function(*on), abs=1e-3)


@pytest.mark.parametrize("whole", [False, True])
@pytest.mark.parametrize("fine", [False, True])
def test_on_spaces_of_degree_4_and_6_it_is_the_same_function(fine: bool, whole: bool) -> None:
    """Quadrature points and nodes of the carriers' cells and of all.

    Round edges are drawn to the degree of the mesh: those of degrees 4 and 6 are 1e-7 nm apart.
    """
    mesh = meshes(1.5)[0]
    space = Space(meshes(1.5)[int(fine)], whole=whole)
    function = NodalFunction(mesh, smooth(*mesh.points.T))
    at, close = space.quadrature_points, 1e-6 if fine else 1e-8
    assert function.on(space) == pytest.approx(function(at[..., 0], at[..., 1]), rel=0, abs=close)
    nodes = space.mesh.points[space.nodes]
    assert function.at_nodes(space) == pytest.approx(function(*nodes.T), rel=0, abs=close)


def test_at_its_own_nodes_it_has_its_own_values() -> None:
    mesh, _ = meshes(1.5)
    values = np.random.default_rng(7).standard_normal(len(mesh.points))
    space = Space(mesh)
    assert NodalFunction(mesh, values).at_nodes(space) == pytest.approx(values[space.nodes], rel=0, abs=1e-12)


def test_other_triangles_are_refused() -> None:
    mesh, _ = meshes(1.5)
    other = meshed([piece("core", circle(RADIUS))], 2.0)
    with pytest.raises(ValueError, match="other triangles"):
        NodalFunction(mesh, np.zeros(len(mesh.points))).on(Space(other))
