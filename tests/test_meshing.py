"""Meshes: sound cells in hard places, errors that say what is wrong, no session left behind."""

from __future__ import annotations

from pathlib import Path

import gmsh
import numpy as np
import pytest

from wiresolve.describe.section import Layer, Patch, Piece, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle
from wiresolve.describe.wirefile import parse, read
from wiresolve.errors import InputError, MeshError
from wiresolve.fem import meshing
from wiresolve.fem.corners import exponents, gradings, singular_corners
from wiresolve.fem.mesh import folded
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire

GEOMETRIES = sorted((Path(__file__).parents[1] / "geometries").glob("*.toml"))
EYE = [np.eye(2)] * 9


def area(section: Section, size: float) -> dict[str, float]:
    """Area of each region of the mesh, by quadrature over all its cells."""
    with Mesher(section.pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(size))
    assert not folded(mesh).any()
    space = Space(mesh)
    by_cell = space.quadrature_weights.sum(axis=1)
    region = mesh.region[space.cells]
    return {r.name: float(by_cell[region == i].sum()) for i, r in enumerate(mesh.regions)}


@pytest.mark.parametrize("path", GEOMETRIES, ids=[p.stem for p in GEOMETRIES])
def test_every_geometry_has_sound_cells_of_the_drawn_area(path: Path) -> None:
    section = read(path).section
    with Mesher(section.pieces()) as mesher:
        for mesh in mesher.mesh(SizeField(mesher.extent_nm / 8)):
            assert not folded(mesh).any()
            assert len(np.unique(mesh.cells)) == len(mesh.points)


@pytest.mark.parametrize("thickness", [0.2, 0.6, 2.0])
def test_thin_shells_do_not_fold(thickness: float) -> None:
    """A thin ring on coarse cells: pi ((R + t)^2 - R^2)."""
    found = area(Section(Circle(diameter_nm=30), "a", layers=(Layer(thickness, "b"),)), 20.0)
    assert found["layer 1"] == pytest.approx(np.pi * ((15 + thickness) ** 2 - 225), rel=1e-7)
    assert found["core"] == pytest.approx(np.pi * 225, rel=1e-7)


def test_patches_share_their_edges() -> None:
    """Later patches over earlier ones, one across the boundary, one hole: areas in closed form."""
    section = Section(
        Rectangle(width_nm=20, height_nm=10),
        "a",
        patches=(
            Patch(Rectangle(width_nm=8, height_nm=6), "b", center_nm=(0, 6)),
            Patch(Rectangle(width_nm=4, height_nm=4), "c", center_nm=(0, 4)),
            Patch(Circle(diameter_nm=2), "void", center_nm=(-6, 0)),
        ),
    )
    found = area(section, 3.0)
    assert found == pytest.approx({"core": 200 - 16 - 4 - np.pi, "patch 1": 48 - 12, "patch 2": 16}, rel=1e-6)


def test_rotation_is_a_rotation() -> None:
    one, other = (
        area(Section(Ellipse(width_nm=18, height_nm=9, rotation_deg=angle), "a"), 3.0)["core"] for angle in (0, 37)
    )
    assert one == pytest.approx(other, rel=1e-8)
    assert one == pytest.approx(np.pi * 9 * 4.5, rel=1e-8)


def test_covered_carriers_are_an_error() -> None:
    """A patch that hides all that admits carriers."""
    cover = Patch(Circle(diameter_nm=12), "b", carriers="excluded")
    with pytest.raises(InputError, match="carriers"):
        Section(Circle(diameter_nm=10), "a", patches=(cover,))
    # What the description cannot see is seen once it is drawn.
    pieces = (*Section(Circle(diameter_nm=10), "a").pieces(), Piece("patch 1", cover.shape.loop(), "b", False, 0.0))
    with pytest.raises(InputError, match="nothing is left for carriers"), Mesher(pieces):
        pass


def test_cells_that_stay_folded_are_a_mesh_error(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(meshing, "folded", lambda mesh: np.ones(len(mesh.cells), dtype=bool))
    with pytest.raises(MeshError, match="make it thicker"), Mesher(Section(Circle(diameter_nm=9), "a").pieces()) as m:
        m.mesh(SizeField(9.0))
    assert not gmsh.isInitialized()


def test_session_ends_whatever_happens() -> None:
    with pytest.raises(KeyboardInterrupt), Mesher(Section(Circle(diameter_nm=9), "a").pieces()):
        raise KeyboardInterrupt
    assert not gmsh.isInitialized()


def test_a_foreign_session_is_left_alone() -> None:
    """Somebody else's Gmsh session in the process is not touched; the error says what to do."""
    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    try:
        with pytest.raises(MeshError, match=r"gmsh\.finalize"), Mesher(Section(Circle(diameter_nm=9), "a").pieces()):
            pass
        assert gmsh.isInitialized()
    finally:
        gmsh.finalize()


def test_exponents_of_walls_and_interfaces() -> None:
    """pi/angle at a wall; at an interface the root of an equation (R. B. Kellogg, Appl. Anal. 4, 101 (1975)).

    For a sector of angle w and inverse mass p in a plane of inverse mass q, the states even about its axis obey
    p tan(a w/2) = -q tan(a (2 pi - w)/2), the odd ones q tan(a w/2) = -p tan(a (2 pi - w)/2).
    """
    assert exponents([(1.5 * np.pi, 1.0)], closed=False)[0] == pytest.approx(2 / 3)
    for angle, p, q in ((2 * np.pi / 3, 1 / 0.023, 1 / 0.08), (np.pi / 2, 1.0, 10.0), (np.pi / 2, 10.0, 1.0)):
        lowest = exponents([(angle, p), (2 * np.pi - angle, q)], closed=True)[0]
        rest = 2 * np.pi - angle
        even = p * np.sin(lowest * angle / 2) * np.cos(lowest * rest / 2) + q * np.cos(lowest * angle / 2) * np.sin(
            lowest * rest / 2
        )
        odd = q * np.sin(lowest * angle / 2) * np.cos(lowest * rest / 2) + p * np.cos(lowest * angle / 2) * np.sin(
            lowest * rest / 2
        )
        assert min(abs(even), abs(odd)) < 1e-8 * max(p, q)
        assert 0.4 < lowest < 1


def test_which_corners_are_graded() -> None:
    """Re-entrant and 120-degree corners are, right angles and smooth joints are not.

    Under the inverse mass [[2, 1], [1, 2]] right angles count as 120 and 60 degrees in turn: two are graded.
    """
    sections = {
        "hexagon": (Section(Hexagon(across_flats_nm=10), "a"), EYE, 6),
        "rectangle": (Section(Rectangle(width_nm=10, height_nm=6), "a"), EYE, 0),
        "rounded": (Section(Rectangle(width_nm=10, height_nm=6, corner_radius_nm=1), "a"), EYE, 0),
        "circle": (Section(Circle(diameter_nm=10), "a", layers=(Layer(3, "b"),)), EYE, 0),
        "L": (
            Section(Polygon(points_nm=((0, 0), (9, 0), (9, 9), (-9, 9), (-9, -9), (0, -9))), "a"),
            EYE,
            1,
        ),
        "skew": (Section(Rectangle(width_nm=10, height_nm=6), "a"), [np.array([[2.0, 1.0], [1.0, 2.0]])], 2),
    }
    for name, (section, inverse_mass, count) in sections.items():
        with Mesher(section.pieces()) as mesher:
            mesh, _ = mesher.mesh(SizeField(3.0))
        assert len(singular_corners(mesh, inverse_mass)) == count, name
    skew = singular_corners(mesh, inverse_mass)
    assert [corner.exponent for corner in skew] == pytest.approx([1.5, 1.5])
    assert gradings(skew, 3.0, 4.0, 0.1)[0].smallest_nm >= 0.3 - 1e-12


@pytest.mark.parametrize("accuracy", ["1 meV", "0.1 meV"])
def test_no_cell_of_a_thin_shell_is_turned_over_at_a_corner(accuracy: str) -> None:
    """A cell with two edges on the shell's walls may turn over beside a vertex only, where a lattice does not look."""
    text = f"""
[section]
shape = "circle"
diameter = "16 nm"
material = "a"
layers = [{{thickness = "0.6 nm", material = "b"}}]
[materials]
a = {{electron_mass = 0.05, conduction_edge = "0 eV"}}
b = {{electron_mass = 0.09, conduction_edge = "0.3 eV"}}
[carriers]
temperature = "77 K"
[accuracy]
subbands = 8
energy = "{accuracy}"
"""
    wire = Wire(parse(text, Path()))
    found = certify(wire.draw, wire.channels, 8, wire.problem.accuracy.energy_eV)
    assert found.met
    for space in (found.space, found.solved[0].enriched.space):
        assert space.quadrature_weights.min() > 0


def test_a_field_of_small_round_patches_is_counted() -> None:
    """63 patches: one cell turned over gives a mass or stiffness below zero, and the count a state that is none."""
    patches = tuple(Patch(Circle(diameter_nm=2.0), "b", (4.0 * i, 4.0 * j)) for i in range(-4, 5) for j in range(-3, 4))
    section = Section(Rectangle(width_nm=40.0, height_nm=30.0), "a", patches=patches)
    with Mesher(section.pieces()) as mesher:
        for size in (2.5, 1.6):
            for mesh in mesher.mesh(SizeField(size, turn_cells=10)):
                assert Space(mesh).quadrature_weights.min() > 0
