"""Element matrices against scikit-fem's own assembly, and the geometry that they stand on."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from skfem import BilinearForm

from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Rectangle
from wiresolve.fem.lagrange import reference_nodes, triangle
from wiresolve.fem.mesh import Mesh, oriented
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space

RING = Section(Circle(diameter_nm=8), "a", layers=(Layer(3, "b"),))


def meshes(section: Section, size: float = 2.0) -> tuple[Mesh, Mesh]:
    with Mesher(section.pieces()) as mesher:
        return mesher.mesh(SizeField(size))


def test_reference_nodes_count_and_corners() -> None:
    for degree in (1, 2, 3, 4, 6, 8):
        nodes = reference_nodes(degree)
        assert nodes.shape == ((degree + 1) * (degree + 2) // 2, 2)
        np.testing.assert_allclose(triangle(degree).values(nodes), np.eye(len(nodes)), atol=1e-10)


@pytest.mark.parametrize("degree", [4, 6])
def test_gradients_are_those_of_the_values(degree: int) -> None:
    element, at, step = triangle(degree), np.array([[0.2, 0.3], [0.6, 0.1]]), 1e-6
    for axis in range(2):
        shift = np.eye(2)[axis] * step
        difference = (element.values(at + shift) - element.values(at - shift)) / (2 * step)
        np.testing.assert_allclose(element.gradients(at)[axis], difference, atol=1e-7)


@pytest.mark.parametrize(("index", "close"), [(0, 1e-8), (1, 1e-11)], ids=["quartic", "sextic"])
def test_area_and_moments_of_a_circle(index: int, close: float) -> None:
    """Area pi R^2 and integral of x^2 = pi R^4/4 of the curved mesh, in closed form."""
    mesh = meshes(Section(Circle(diameter_nm=10), "a"), 1.5)[index]
    space = Space(mesh)
    x = mesh.points[space.nodes, 0]
    assert space.area_nm2 == pytest.approx(25 * np.pi, rel=close)
    assert x @ space.mass @ x == pytest.approx(np.pi * 625 / 4, rel=close)


@pytest.mark.parametrize("section", [Section(Hexagon(across_flats_nm=10), "a"), RING], ids=["straight", "curved"])
def test_library_agrees(section: Section) -> None:
    """Stiffness, mass and first-derivative forms against scikit-fem's assembly on the same quartic cells."""
    space = Space(meshes(section, 4.0)[0])
    basis, number = space.quartic_basis()
    one = space.ones
    for form, library in (
        ({("x", "x"): 2 * one, ("x", "y"): 0.3 * one, ("y", "x"): 0.3 * one, ("y", "y"): one}, stiffness),
        ({("1", "x"): one}, derivative),
        ({("1", "1"): one}, product),
    ):
        ours = space.matrix(form).toarray()
        theirs = library.assemble(basis).toarray()[np.ix_(number, number)]
        np.testing.assert_allclose(ours, theirs, atol=1e-12 * np.abs(theirs).max())


@BilinearForm
def stiffness(u: Any, v: Any, _: Any) -> Any:
    x, y = u.grad
    return 2 * x * v.grad[0] + 0.3 * (x * v.grad[1] + y * v.grad[0]) + y * v.grad[1]


@BilinearForm
def derivative(u: Any, v: Any, _: Any) -> Any:
    return u.grad[0] * v


@BilinearForm
def product(u: Any, v: Any, _: Any) -> Any:
    return u * v


def test_curved_and_straight_paths_agree() -> None:
    """A field that varies inside the cells takes quadrature; a constant one takes reference tensors."""
    mesh, _ = meshes(RING)
    space = Space(mesh)
    constant = {("x", "x"): space.ones, ("1", "1"): space.ones, ("x", "1"): space.ones}
    ones = np.ones(space.quadrature_weights.shape)
    varying = dict.fromkeys(constant, ones)
    plain, dense = space.matrix(constant), space.matrix(varying)
    assert abs(plain - dense).max() < 1e-13 * abs(plain).max()
    only_value = space.matrix({("x", "x"): space.ones, ("1", "1"): ones, ("x", "1"): space.ones})
    assert abs(plain - only_value).max() < 1e-13 * abs(plain).max()


def test_functions_match_across_edges() -> None:
    """The jump of a random function over inner edges is zero: both cells see the same values along the edge."""
    mesh, _ = meshes(RING)
    values = np.random.default_rng(1).normal(size=len(mesh.points))
    along = np.linspace(0, 1, 7)
    seen: dict[tuple[int, int], np.ndarray] = {}
    jumps = []
    for cell in mesh.cells:
        for a, b in ((0, 1), (1, 2), (2, 0)):
            corner = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
            at = corner[a] + along[:, None] * (corner[b] - corner[a])
            shown = triangle(4).values(at) @ values[cell]
            if cell[a] > cell[b]:
                shown = shown[::-1]
            key = (min(cell[a], cell[b]), max(cell[a], cell[b]))
            if key in seen:
                jumps.append(np.abs(seen[key] - shown).max())
            seen[key] = shown
    assert len(jumps) > 20
    assert max(jumps) < 1e-12


def test_interfaces_and_walls_are_edges() -> None:
    """Every mesh point on the interface circle belongs to cells of both materials, and the wall is the outer circle."""
    mesh, _ = meshes(RING)
    space = Space(mesh)
    radius = np.hypot(*mesh.points.T)
    inside, outside = (set(mesh.cells[mesh.region == r].ravel()) for r in (0, 1))
    on_interface = set(np.flatnonzero(np.abs(radius - 4) < 1e-5))
    assert on_interface
    assert on_interface == inside & outside
    assert set(space.nodes[space.wall]) == set(np.flatnonzero(np.abs(radius - 7) < 1e-5))
    assert space.rim_of(0).sum() + space.rim_of(1).sum() == space.wall.sum()


def test_wall_around_excluded_and_void_parts() -> None:
    """A hole and a patch that carriers cannot enter are bounded by walls."""
    section = Section(
        Rectangle(width_nm=20, height_nm=12),
        "a",
        patches=(
            Patch(Circle(diameter_nm=4), "void", center_nm=(-5, 0)),
            Patch(Circle(diameter_nm=4), "b", center_nm=(5, 0), carriers="excluded"),
        ),
    )
    mesh, _ = meshes(section)
    space = Space(mesh)
    assert space.area_nm2 == pytest.approx(240 - 8 * np.pi, rel=1e-6)
    for x in (-5, 5):
        on_circle = np.abs(np.hypot(mesh.points[:, 0] - x, mesh.points[:, 1]) - 2) < 1e-4
        assert space.wall[np.isin(space.nodes, np.flatnonzero(on_circle))].all()
    assert {r.name for r in mesh.regions} == {"core", "patch 2"}


def test_ellipse_layer_is_a_parallel_curve() -> None:
    """Vertices on the outer wall of a coated ellipse lie one thickness away from the ellipse."""
    mesh, _ = meshes(Section(Ellipse(width_nm=16, height_nm=8), "a", layers=(Layer(2, "b"),)))
    space = Space(mesh)
    vertices = np.intersect1d(space.nodes[space.wall], mesh.cells[:, :3])
    wall = mesh.points[vertices]
    t = np.linspace(0, 2 * np.pi, 200001)
    ellipse = np.column_stack([8 * np.cos(t), 4 * np.sin(t)])
    distances = [np.hypot(*(ellipse - point).T).min() for point in wall]
    np.testing.assert_allclose(distances, 2, atol=1e-8)


@pytest.mark.parametrize(
    "shape", [Circle(diameter_nm=20), Ellipse(width_nm=20, height_nm=10)], ids=["circle", "ellipse"]
)
def test_area_converges_like_the_energies(shape: Circle | Ellipse) -> None:
    """Edges that meet their curve at Lobatto points leave an area error of order h^8 (equal steps would leave h^6)."""
    area = np.pi * 100 if isinstance(shape, Circle) else np.pi * 50
    errors, sizes = [], []
    for size in (6.0, 4.0, 3.0, 2.0):
        space = Space(meshes(Section(shape, "a"), size)[0])
        errors.append(abs(space.area_nm2 / area - 1))
        sizes.append(len(space.cells) ** -0.5)
    assert np.polyfit(np.log(sizes), np.log(errors), 1)[0] > 7
    assert errors[-1] < 2e-11


def test_curved_maps_keep_their_degree_small() -> None:
    """The cubic and quartic parts of a curved cell's map fall like h^3 and h^4, as optimal energies need."""
    coefficients = []
    for size in (4.0, 2.0):
        mesh = meshes(Section(Ellipse(width_nm=20, height_nm=14), "a"), size)[0]
        curved = mesh.points[mesh.cells[~Space(mesh).straight]]
        x, y = triangle(4).nodes.T
        powers = [(i, d - i) for d in range(5) for i in range(d + 1)]
        monomials = np.column_stack([x**i * y**j for i, j in powers])
        parts = np.einsum("ma,cax->cmx", np.linalg.inv(monomials), curved)
        degree = np.array([i + j for i, j in powers])
        coefficients.append([np.abs(parts[:, degree == d]).max() for d in (2, 3, 4)])
    fall = np.log2(np.array(coefficients[0]) / coefficients[1])
    assert fall[0] > 1.5
    assert fall[1] > 2.3
    assert fall[2] > 3.0


def test_orientation_is_mended() -> None:
    """Mirrored cells are turned counter-clockwise with their nodes in the right order."""
    mesh, _ = meshes(RING)
    mirrored = replace(mesh, points=mesh.points * [-1, 1])
    space, plain = Space(oriented(mirrored)), Space(mesh)
    assert space.area_nm2 == pytest.approx(plain.area_nm2, rel=1e-13)
    assert space.mass.diagonal().min() > 0
    np.testing.assert_allclose(np.sort(space.mass.diagonal()), np.sort(plain.mass.diagonal()), rtol=1e-12)
