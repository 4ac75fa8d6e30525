"""Imported meshes: regions as they are, energies of closed forms, and one line for whatever is wrong with a file."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import gmsh
import meshio
import numpy as np
import pytest

from tests import meshes
from tests.truth import core_shell
from tests.truth import disk as bessel
from wiresolve.describe import imported_mesh, mesh_data
from wiresolve.describe.curves import Line, Loop, Parabolas
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.materials import Material
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.planar_map import undirected
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Group, Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.describe.summary import describe
from wiresolve.errors import InputError, MeshError
from wiresolve.fem import cad_file
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.loading import load
from wiresolve.output.writing import write
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

NAMES = {1: "core", 2: "shell"}


def mesh(content: bytes, name: str = "section.msh", unit: str = "nm", **options: object) -> ImportedMesh:
    return ImportedMesh(InputFile(name, content), unit, **options)  # type: ignore[arg-type]


def round_mesh(rings: int = 4, core_rings: int = 2, **options: object) -> meshes.Arrays:
    return meshes.disk(10.0, rings, core_rings=core_rings, **options)  # type: ignore[arg-type]


def section(shape: ImportedMesh, **options: object) -> Section:
    """Everything of one material."""
    groups = tuple(Group(name, "one") for name in shape.group_names)
    return Section(shape, groups=groups, **options)  # type: ignore[arg-type]


def solved(described: Section, accuracy_eV: float, count: int = 4) -> Result:
    # With this mass an energy in eV is an eigenvalue of the negative Laplacian in 1/nm^2.
    one = Material.given("one", electron_mass=HBAR2_OVER_2M0, conduction_edge_eV=0.0)
    cold = Carriers(temperature_K=(4.2,))
    return solve(Problem("mesh", described, cold, Accuracy(count, accuracy_eV), materials=(one,)))


def areas(described: Section, size: float = 4.0) -> dict[str, float]:
    """Area of each region that Gmsh meshes, by quadrature."""
    with Mesher(described.pieces()) as mesher:
        made, _ = mesher.mesh(SizeField(size))
    space = Space(made)
    by_cell = space.quadrature_weights.sum(axis=1)
    region = made.region[space.cells]
    return {r.name: float(by_cell[region == i].sum()) for i, r in enumerate(made.regions)}


# --- energies ---------------------------------------------------------------------------------------------------------


def test_second_order_disk_has_the_levels_of_its_parabolas() -> None:
    """Bessel's zeros, raised by what 24 parabolas miss of the circle.

    A parabola through three points of a circle, 2 f apart in angle, lies R f^4 / 60 inside it on average (the integral
    of (t^2 f^2 - t^4) R / 8), and a wall that moves in by d raises the lowest level by 2 d / R.
    """
    shape = mesh(meshes.msh(round_mesh(4, 0), NAMES))
    outline = shape.loop()
    assert len(outline.segments) == 24
    assert all(isinstance(segment, Parabolas) for segment in outline.segments)
    f = math.pi / 24
    result = solved(section(shape), 3e-9, 1)
    exact = bessel.from_table(1)[0] / 100
    assert result.subbands[0].energy_eV / exact - 1 == pytest.approx(f**4 / 30, rel=0.01)
    assert shape.missed_nm == pytest.approx(10 * f**4 / 32, rel=0.05)
    assert shape.missed_area == pytest.approx(f**4 / 30, rel=0.1)  # an estimate from angles


def test_many_edges_are_one_curve_and_cost_no_more() -> None:
    """96 edges around the core: one smooth curve, and no more unknowns than the circle itself needs."""
    shape = mesh(meshes.msh(round_mesh(16, 0), NAMES))
    assert [type(segment) for segment in shape.loop().segments] == [Parabolas]
    result = solved(section(shape), 1e-6, 6)
    exact = np.array(bessel.from_table(6)) / 100
    assert (np.abs(result.energies_eV / exact - 1) < result.errors_eV / exact + 1e-7).all()
    one = Material.given("one", electron_mass=HBAR2_OVER_2M0, conduction_edge_eV=0.0)
    drawn = solve(
        Problem("drawn", Section(Circle(20), "one"), Carriers(temperature_K=(4.2,)), Accuracy(6, 1e-6), (one,))
    )
    assert result.summary.unknowns < 1.5 * drawn.summary.unknowns


@pytest.mark.parametrize("kind", ["triangle", "quad", "quad9"])
def test_rectangle_to_its_bars(kind: str) -> None:
    """pi^2 (i^2 / a^2 + j^2 / b^2), whatever the cells; collinear edges are one side."""
    shape = mesh(meshes.msh(meshes.rectangle(9.0, 5.0, 9, 7, kind=kind), NAMES))
    assert [type(segment) for segment in shape.loop().segments] == [Line] * 4
    result = solved(section(shape), 1e-6, 3)
    exact = [math.pi**2 * (i**2 / 81 + j**2 / 25) for i, j in ((1, 1), (2, 1), (3, 1))]
    assert (np.abs(result.energies_eV - exact) <= result.errors_eV + 1e-12).all()
    assert result.accuracy_met


def test_a_material_that_goes_on_outside() -> None:
    """The closed form of a round well between barriers, to what 36 parabolas miss of the inner circle."""
    shape = mesh(meshes.msh(meshes.disk(14.0, 14, core_rings=6), NAMES))
    groups = (Group("core", "barrier"), Group("shell", "well"))
    described = Section(shape, groups=groups, outside="barrier")
    cold = Carriers(temperature_K=(4.2,))
    result = solve(Problem("mesh", described, cold, Accuracy(5, 1e-6), materials=(core_shell.WELL, core_shell.BARRIER)))
    exact = np.array(core_shell.entries(core_shell.OPEN)[:5])
    assert (np.abs(result.energies_eV - exact) < result.errors_eV + (math.pi / 36) ** 4 / 10 * exact).all()


def test_a_split_region_changes_nothing() -> None:
    """Two groups of one material: the same levels, and shares that add up."""
    whole = solved(section(mesh(meshes.msh(meshes.rectangle(9.0, 5.0, 9, 5), NAMES))), 1e-6)
    parts = solved(section(mesh(meshes.msh(meshes.rectangle(9.0, 5.0, 9, 5, split=3), NAMES))), 1e-6)
    assert np.abs(whole.energies_eV - parts.energies_eV).max() < whole.errors_eV.max() + parts.errors_eV.max()
    # sin^2 integrated over the first third: 1/3 - sin(2 pi / 3) / (2 pi).
    shares = parts.subbands[0].shares
    assert shares["core"] == pytest.approx(1 / 3 - math.sin(2 * math.pi / 3) / (2 * math.pi), abs=1e-5)
    assert sum(shares.values()) == pytest.approx(1, abs=1e-12)


def test_a_chain_of_parabolas_is_what_it_says() -> None:
    """One arc of y = x^2 on [-1, 1]: length, area below its chord, tangents, and what lies inside."""
    arc = Parabolas(((-1.0, 1.0), (0.0, 0.0), (1.0, 1.0)), "arc")
    loop = Loop((arc, Line((1.0, 1.0), (-1.0, 1.0), "lid")))
    assert loop.area == pytest.approx(4 / 3, rel=1e-14)
    assert loop.centroid == pytest.approx((0, 3 / 5), abs=1e-14)
    assert Loop((arc,)).perimeter == pytest.approx(math.sqrt(5) + math.asinh(2) / 2, rel=2e-5)  # eight nodes an arc
    assert arc.tangent(np.array([0.0, 0.5, 1.0])) == pytest.approx(np.array([(2, -4), (2, 0), (2, 4)]))
    x, y = np.random.default_rng(1).uniform((-1.2, -0.2), (1.2, 1.2), (5000, 2)).T
    assert (loop.contains(np.column_stack([x, y])) == ((y > x**2) & (y < 1))).all()
    turned = loop.rotated(0.7).moved(3.0, -2.0)
    assert turned.area == pytest.approx(4 / 3, rel=1e-13)
    reverse = Parabolas(arc.points[::-1], "arc")
    assert undirected(reverse) == undirected(arc)


# --- the drawing ------------------------------------------------------------------------------------------------------


def test_area_and_centre_of_parabolas() -> None:
    """A disk whose edges are 24 parabolas: pi R^2 less 24 R^2 f^5 / 30, to the next order; its centre is moved."""
    shape = mesh(meshes.msh(round_mesh(center=(123.0, -45.0)), NAMES))
    f = math.pi / 24
    assert shape.loop().area == pytest.approx(100 * (math.pi - 24 * f**5 / 30), rel=1e-7)
    assert shape.loop().centroid == pytest.approx((0, 0), abs=1e-9)
    assert [face.group for face in shape.faces()] == ["shell", "core"]
    assert shape.faces()[0].area_nm2 + shape.faces()[1].area_nm2 == pytest.approx(shape.loop().area, rel=1e-13)
    assert shape.in_file(np.zeros(1), np.zeros(1)) == (pytest.approx([123.0]), pytest.approx([-45.0]))
    found = areas(section(shape))
    assert found == pytest.approx({f.group: f.area_nm2 for f in shape.faces()}, rel=1e-8)


def test_what_straight_edges_miss_is_said() -> None:
    """A regular polygon of 36 sides against its circle: the middle of a side, and the area."""
    shape = mesh(meshes.msh(round_mesh(6, 0, order=1), NAMES))
    f = math.pi / 36
    assert shape.missed_nm == pytest.approx(10 * (1 - math.cos(f)), rel=0.01)
    assert shape.missed_area == pytest.approx(1 - math.sin(2 * f) / (2 * f), rel=0.02)
    assert shape.geometry_note is not None
    assert "straight edges" in shape.geometry_note
    assert "0.038 nm" in shape.geometry_note
    assert "0.51 % too small" in shape.geometry_note
    assert mesh(meshes.msh(meshes.rectangle(9, 5, 3, 2), NAMES)).geometry_note is None


def moved_numbers(arrays: meshes.Arrays) -> meshes.Arrays:
    """The same mesh with nodes in another order, some that no cell uses, and half of the cells turned over."""
    points, cells, groups = arrays
    chance = np.random.default_rng(4)
    order = chance.permutation(len(points) + 5)
    new = np.full((len(points) + 5, 3), np.nan)
    new[order[: len(points)]] = points
    new[order[len(points) :]] = 77.0, 99.0, 3.0
    turned = {}
    for kind, rows in cells.items():
        rows = order[rows].copy()
        rows[::2] = rows[::2][:, [0, 2, 1, 5, 4, 3]]
        turned[kind] = rows
    return new, turned, groups


def loops_of(shape: ImportedMesh) -> list[Loop]:
    return [face.outer for face in shape.faces()]


def test_orientation_order_and_unused_nodes_do_not_matter() -> None:
    plain, mixed = (mesh(meshes.msh(arrays, NAMES)) for arrays in (round_mesh(), moved_numbers(round_mesh())))
    for one, other in zip(loops_of(plain), loops_of(mixed), strict=True):
        assert one.area == pytest.approx(other.area, rel=1e-13)
        assert len(one.segments) == len(other.segments)
    assert [face.area_nm2 for face in plain.faces()] == pytest.approx([face.area_nm2 for face in mixed.faces()])


def in_format(arrays: meshes.Arrays, suffix: str, folder: Path) -> tuple[bytes, str | None]:
    """The mesh as a file of another format, and the name of its array of regions."""
    made = meshes.by_meshio(arrays, "medit:ref" if suffix == ".mesh" else "region")
    path = folder / f"mesh{suffix}"
    if suffix == ".inp":
        (kind, groups), *_ = arrays[2].items()
        made = meshio.Mesh(
            arrays[0], [(kind, arrays[1][kind])], cell_sets={str(n): [np.flatnonzero(groups == n)] for n in (1, 2)}
        )
    meshio.write(path, made)
    return path.read_bytes(), None


@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".inp", ".mesh"])
def test_other_formats_give_the_same_drawing(suffix: str, tmp_path: Path) -> None:
    # Medit files know no curved triangles.
    arrays = round_mesh(order=1 if suffix == ".mesh" else 2)
    content, array = in_format(arrays, suffix, tmp_path)
    read = mesh(content, f"s{suffix}", array=array)
    plain = mesh(meshes.msh(arrays, NAMES))
    assert read.group_names == ("2", "1")
    for one, other in zip(loops_of(plain), loops_of(read), strict=True):
        assert one.sample(3) == pytest.approx(other.sample(3), abs=1e-9)


def test_which_array_tells_the_regions(tmp_path: Path) -> None:
    """One array of integers, or one of a known name; never one of several, and never numbers with a decimal point."""
    points, cells, groups = round_mesh()
    (kind,) = cells
    regions = groups[kind]

    def vtu(**arrays: np.ndarray) -> bytes:
        made = meshio.Mesh(points, list(cells.items()), cell_data={name: [values] for name, values in arrays.items()})
        meshio.write(tmp_path / "m.vtu", made)
        return (tmp_path / "m.vtu").read_bytes()

    floats, other = regions.astype(float), np.arange(len(regions)) // 5
    for arrays, array, chosen in (
        ({"doping": regions, "phi": floats}, None, "doping"),
        ({"part": other, "material": regions, "density": floats}, None, "material"),
        ({"part": other, "side": regions}, "side", "side"),
        ({"material": other, "side": regions}, "side", "side"),
    ):
        shape = mesh(vtu(**arrays), "s.vtu", array=array)
        assert shape.region_array == chosen
        assert sorted(shape.group_names) == ["1", "2"]
        drawn = Section(shape, groups=(Group("1", "GaAs"), Group("2", "AlAs")))
        rows = dict(describe(Problem("mesh", drawn, Carriers(temperature_K=(4.2,)))))
        assert rows["section.array"].startswith(chosen)
        assert ("chosen" in rows["section.array"]) == (array is None)
    for arrays, array, words in (
        ({"part": other, "side": regions}, None, r"that may tell the regions \(part, side\); give array"),
        ({"region": other, "material": regions}, None, r"\(region, material\); give array"),
        ({"region": floats}, None, "names no regions; export cell data with an integer"),
        ({"phi": floats}, "phi", "^array: must hold one integer a cell"),
    ):
        with pytest.raises(InputError, match=words):
            mesh(vtu(**arrays), "s.vtu", array=array)
    assert mesh(meshes.msh(round_mesh(), NAMES)).region_array is None


@pytest.mark.parametrize("file_format", ["gmsh22", "gmsh"])
@pytest.mark.parametrize("binary", [False, True])
def test_msh_of_both_versions_as_text_and_binary(file_format: str, binary: bool, tmp_path: Path) -> None:
    points, cells, groups = round_mesh()
    made = meshio.Mesh(
        points,
        list(cells.items()),
        cell_data={name: [groups["triangle6"].astype(np.int32)] for name in ("gmsh:physical", "gmsh:geometrical")},
        field_data={"core": np.array([1, 2]), "shell": np.array([2, 2])},
        point_data={"gmsh:dim_tags": np.array([[2, 1]] * len(points))},
    )
    path = tmp_path / "m.msh"
    if file_format == "gmsh":  # meshio writes no entities, so Gmsh itself has to
        _by_gmsh((points, cells, groups), path, binary)
    else:
        made.write(path, file_format=file_format, binary=binary)
    read, plain = mesh(path.read_bytes()), mesh(meshes.msh((points, cells, groups), NAMES, "2.2"))
    assert read.group_names == ("shell", "core")
    for one, other in zip(loops_of(plain), loops_of(read), strict=True):
        assert one.sample(3) == pytest.approx(other.sample(3), abs=1e-9)
    assert mesh(meshes.msh((points, cells, groups), NAMES)).map == plain.map


def _by_gmsh(arrays: meshes.Arrays, path: Path, binary: bool) -> None:
    points, cells, groups = arrays
    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    try:
        gmsh.option.setNumber("General.Terminal", 0)
        for number, name in NAMES.items():
            gmsh.model.addDiscreteEntity(2, number)
            gmsh.model.addPhysicalGroup(2, [number], number, name)
        gmsh.model.mesh.addNodes(2, 1, np.arange(1, len(points) + 1), points.ravel())
        for number in NAMES:
            mine = cells["triangle6"][groups["triangle6"] == number] + 1
            gmsh.model.mesh.addElementsByType(number, 9, [], mine.ravel())
        gmsh.option.setNumber("Mesh.Binary", int(binary))
        gmsh.write(str(path))
    finally:
        gmsh.finalize()


def test_energies_do_not_depend_on_the_format(tmp_path: Path) -> None:
    arrays = round_mesh()
    texts = [("s.msh", meshes.msh(arrays, NAMES)), ("s.msh", meshes.msh(arrays, NAMES, "2.2"))]
    texts.append(("s.vtu", in_format(arrays, ".vtu", tmp_path)[0]))
    found = [solved(section(mesh(content, name)), 1e-4).energies_eV for name, content in texts]
    assert found[0] == pytest.approx(found[1], rel=1e-12)
    assert found[0] == pytest.approx(found[2], rel=1e-9)


def test_curved_sides_of_quads() -> None:
    """A square of quads of order two whose outer middles bulge: each bulge adds 2/3 of chord times height."""
    points, cells, groups = meshes.rectangle(8.0, 8.0, 2, 2, kind="quad8")
    below = (points[:, 1] == 0) & np.isin(points[:, 0], [2.0, 6.0])
    points[below, 1] = -0.5
    shape = mesh(meshes.msh((points, cells, groups), NAMES))
    assert shape.loop().area == pytest.approx(64 + 2 * 2 / 3 * 4 * 0.5, rel=1e-13)
    assert sum(isinstance(s, Parabolas) for s in shape.loop().segments) == 2
    assert areas(section(shape))["shell"] == pytest.approx(64 + 8 / 3, rel=1e-9)


def test_named_lines_name_edges() -> None:
    points, cells, groups = meshes.rectangle(9.0, 5.0, 3, 2)
    top = np.flatnonzero(points[:, 1] == 5.0)
    cells["line"], groups["line"] = np.column_stack([top[:-1], top[1:]]), np.full(len(top) - 1, 7)
    shape = mesh(meshes.msh((points, cells, groups), NAMES, lines={7: "gate"}))
    assert shape.edge_names() == ("gate", "rim")
    named = {segment.name: segment for segment in shape.loop().segments}
    assert named["gate"].start[1] == named["gate"].end[1] == pytest.approx(2.5)
    assert [segment.name for segment in shape.loop().segments].count("rim") == 3


# --- holes, parts, layers, patches, what is outside ------------------------------------------------------------------


def without(arrays: meshes.Arrays, out: Callable[[np.ndarray], np.ndarray]) -> meshes.Arrays:
    """A mesh less the cells whose centre lies where `out` says."""
    points, cells, groups = arrays
    kept = {kind: ~out(points[rows].mean(axis=1)) for kind, rows in cells.items()}
    return points, {k: r[kept[k]] for k, r in cells.items()}, {k: g[kept[k]] for k, g in groups.items()}


def test_a_hole_is_a_hole_and_a_void_group_too() -> None:
    tube = mesh(meshes.msh(without(round_mesh(), lambda p: np.hypot(p[:, 0], p[:, 1]) < 5), NAMES))
    (face,) = tube.faces()
    described = section(tube)
    assert [piece.name for piece in described.pieces()] == ["shell", "gap"]
    assert areas(described) == {"shell": pytest.approx(face.area_nm2, rel=1e-8)}
    whole = mesh(meshes.msh(round_mesh(), NAMES))
    void = Section(whole, groups=(Group("shell", "one"), Group("core", "void")))
    assert areas(void) == {"shell": pytest.approx(face.area_nm2, rel=1e-8)}
    assert face.area_nm2 == pytest.approx(math.pi * 75, rel=1e-3)


def test_parts_that_touch_at_a_point_and_islands() -> None:
    """A checkerboard of four squares, two of each group: corners touch; and a square in a hole with air around."""
    points, cells, groups = meshes.rectangle(6.0, 6.0, 6, 6, kind="quad")
    center = points[cells["quad"]].mean(axis=1)
    groups["quad"] = np.where((center[:, 0] < 3) == (center[:, 1] < 3), 1, 2)
    shape = mesh(meshes.msh((points, cells, groups), NAMES))
    assert [face.area_nm2 for face in shape.faces()] == pytest.approx([9] * 4)
    assert areas(section(shape)) == pytest.approx({"core": 18, "shell": 18})
    moat = without(
        (points, cells, groups),
        lambda p: (np.abs(p[:, :2] - 3).max(axis=1) > 1) & (np.abs(p[:, :2] - 3).max(axis=1) < 2),
    )
    island = mesh(meshes.msh(moat, {1: "a", 2: "b"}))
    assert sum(face.area_nm2 for face in island.faces()) == pytest.approx(36 - 12)
    assert sum(areas(section(island)).values()) == pytest.approx(24)


def test_a_ring_that_closes_at_one_point() -> None:
    """Cells around a square hole that reaches the outer corner: inner and outer boundary meet at one node."""
    points, cells, groups = meshes.rectangle(6.0, 6.0, 3, 3, kind="quad")
    pinched = without((points, cells, groups), lambda p: (np.abs(p[:, 0] - 3) < 1) & (np.abs(p[:, 1] - 3) < 1))
    pinched = without(pinched, lambda p: (p[:, 0] < 2) & (p[:, 1] < 2))
    shape = mesh(meshes.msh(pinched, NAMES))
    assert sum(areas(section(shape)).values()) == pytest.approx(36 - 8)


def test_outside_layers_and_patches() -> None:
    shape = mesh(meshes.msh(round_mesh(16, 8), NAMES))
    layered = section(shape, layers=(Layer(2, "one"),))
    assert areas(layered) == pytest.approx(
        {"core": math.pi * 25, "shell": math.pi * 75, "layer 1": math.pi * 44}, rel=1e-5
    )
    square = mesh(meshes.msh(meshes.rectangle(8, 6, 4, 3, split=2), NAMES))
    mitred = section(square, layers=(Layer(1, "one"),), patches=(Patch(Rectangle(2, 2), "one", (2, 0)),))
    assert areas(mitred) == pytest.approx({"core": 24, "shell": 20, "layer 1": 32, "patch 1": 4})
    described = section(square, outside="one")
    result = solved(replace(described, outside=None), 1e-4)
    assert sum(result.subbands[0].shares.values()) == pytest.approx(1)
    assert described.outermost == "outside"
    assert section(square).outermost == "core"


# --- geometries made elsewhere ----------------------------------------------------------------------------------------

SCRIPT = """
SetFactory("OpenCASCADE");
Disk(1) = {3, 4, 0, 8};
Disk(2) = {3, 4, 0, 5};
BooleanFragments{ Surface{1}; Delete; }{ Surface{2}; Delete; }
Physical Surface("channel") = {2};
Physical Surface("cladding") = {3};
"""


def test_a_script_is_drawn_to_its_circles(tmp_path: Path) -> None:
    shape = mesh(SCRIPT.encode(), "s.geo", meshed=cad_file.meshed(InputFile("s.geo", SCRIPT.encode())))
    assert {face.group: face.area_nm2 for face in shape.faces()} == pytest.approx(
        {"channel": math.pi * 25, "cladding": math.pi * 39}, rel=1e-7
    )
    (tmp_path / "s.geo").write_text(SCRIPT)
    (tmp_path / "w.toml").write_text(
        '[section]\nshape = "mesh"\nfile = "s.geo"\nunit = "nm"\n'
        '[section.group_materials]\nchannel = "GaAs"\ncladding = "Al0.3Ga0.7As"\n[carriers]\ntemperature = "4.2 K"\n'
    )
    assert load(tmp_path / "w.toml").section.shape.loop().area == pytest.approx(math.pi * 64, rel=1e-7)


@pytest.mark.parametrize("suffix", [".step", ".brep"])
def test_faces_without_names_are_numbered(suffix: str, tmp_path: Path) -> None:
    """Two squares that touch, drawn apart: one edge between them."""
    path = tmp_path / f"s{suffix}"
    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    try:
        gmsh.option.setNumber("General.Terminal", 0)
        gmsh.model.occ.addRectangle(0, 0, 0, 4, 4)
        gmsh.model.occ.addRectangle(4, 0, 0, 5, 4)
        gmsh.model.occ.synchronize()
        gmsh.write(str(path))
    finally:
        gmsh.finalize()
    file = InputFile(path.name, path.read_bytes())
    shape = ImportedMesh(file, "nm", meshed=cad_file.meshed(file))
    assert {face.group: face.area_nm2 for face in shape.faces()} == pytest.approx({"surface 1": 16, "surface 2": 20})
    with pytest.raises(InputError, match="has to be meshed first"):
        ImportedMesh(file, "nm")


@pytest.mark.parametrize(
    ("name", "content", "kind", "words"),
    [
        ("s.geo", 'SystemCall "touch hacked";', InputError, "does more than draw \\('SystemCall'\\)"),
        ("s.geo", 'Printf("x") > "f.txt";', InputError, "does more than draw"),
        ("s.geo", "Point(1) = {0, 0, 0};", InputError, "holds no faces"),
        ("s.geo", "Point(1 = {", MeshError, "Gmsh could not"),
        ("s.geo", 'SetFactory("OpenCASCADE");\nBox(1) = {0, 0, 0, 1, 1, 1};', InputError, "holds a solid"),
        ("s.step", "ISO-10303-21; nonsense", MeshError, "Gmsh could not"),
        ("s.brep", "DBRep_DrawableShape\n\x01", InputError, "holds no faces"),
    ],
)
def test_geometries_that_are_refused(name: str, content: str, kind: type[Exception], words: str) -> None:
    with pytest.raises(kind, match=words) as caught:
        cad_file.meshed(InputFile(name, content.encode()))
    assert "\n" not in str(caught.value)
    assert not Path("hacked").exists()


# --- what is refused --------------------------------------------------------------------------------------------------


def changed(change: Callable[[meshes.Arrays], None], **options: object) -> bytes:
    """A small mesh of triangles after a change."""
    points, cells, groups = meshes.rectangle(6.0, 4.0, 3, 2)
    arrays = (points.copy(), {k: v.copy() for k, v in cells.items()}, {k: v.copy() for k, v in groups.items()})
    change(arrays)
    return meshes.msh(arrays, NAMES, **options)  # type: ignore[arg-type]


def put(place: object, value: object) -> Callable[[meshes.Arrays], None]:
    def change(arrays: meshes.Arrays) -> None:
        arrays[0][place] = value  # type: ignore[index]

    return change


def cells(*rows: tuple[int, ...], group: int = 2) -> Callable[[meshes.Arrays], None]:
    """More cells."""

    def change(arrays: meshes.Arrays) -> None:
        arrays[1]["triangle"] = np.vstack([arrays[1]["triangle"], rows])
        arrays[2]["triangle"] = np.append(arrays[2]["triangle"], [group] * len(rows))

    return change


def apart(arrays: meshes.Arrays) -> None:
    """The last column gets nodes of its own, at the same places."""
    points, rows, groups = meshes.rectangle(2.0, 4.0, 1, 2)
    mine = arrays[0][arrays[1]["triangle"]].mean(axis=1)[:, 0] < 4
    many = len(arrays[0])
    arrays[1]["triangle"] = np.vstack([arrays[1]["triangle"][mine], rows["triangle"] + many])
    arrays[2]["triangle"] = np.append(arrays[2]["triangle"][mine], groups["triangle"])
    arrays[0].resize((many + len(points), 3), refcheck=False)
    arrays[0][many:] = points + np.array([4, 0, 0])


def hanging(arrays: meshes.Arrays) -> None:
    """The last column has one cell less high: a node of the other side hangs."""
    _, rows, groups = meshes.rectangle(2.0, 4.0, 1, 1)
    mine = arrays[0][arrays[1]["triangle"]].mean(axis=1)[:, 0] < 4
    ends = [int(np.flatnonzero((arrays[0] == (4, y, 0)).all(axis=1))[0]) for y in (0, 4)]
    new = np.array([*ends, *(int(np.flatnonzero((arrays[0] == (6, y, 0)).all(axis=1))[0]) for y in (0, 4))])
    arrays[1]["triangle"] = np.vstack([arrays[1]["triangle"][mine], new[rows["triangle"]]])
    arrays[2]["triangle"] = np.append(arrays[2]["triangle"][mine], groups["triangle"])


def upright(arrays: meshes.Arrays) -> None:
    arrays[0][:, 1:] = arrays[0][:, [2, 1]]


def no_group(arrays: meshes.Arrays) -> None:
    arrays[2]["triangle"][3] = 0


GOOD = changed(lambda arrays: None)
BAD: dict[str, tuple[bytes, str, str]] = {
    "metres declared nm": (changed(put(slice(None), 1e-9)), "unit", "."),
    "no place": (changed(put((4, 1), np.nan)), "file", "node 5 has no finite place"),
    "no place at all": (changed(put(slice(None), np.nan)), "file", "no node with a finite place"),
    "out of plane": (changed(put((4, 2), 1.0)), "file", "does not lie in one plane"),
    "upright": (changed(upright), "file", "plane of constant y"),
    "zero area": (changed(cells((0, 3, 6))), "file", "has no area"),
    "one cell twice": (changed(cells((0, 3, 4))), "file", "overlap|more than two cells"),
    "over another": (changed(cells((2, 9, 11))), "file", "overlap|cross|hang"),
    "duplicate nodes": (changed(apart), "file", r"nodes \d+ and \d+ stand at the same place"),
    "hanging node": (changed(hanging), "file", "hangs on another cell's edge"),
    "no group": (changed(no_group), "file", "1 of its 12 cells are in no named region"),
    "unknown node": (GOOD.replace(b"\n1 1 4 5\n", b"\n1 1 4 99\n"), "file", "node 99, which is not there"),
    "truncated in cells": (GOOD[: GOOD.index(b"$EndElements") - 20], "file", "cut off"),
    "truncated in nodes": (GOOD[: GOOD.index(b"$EndNodes") - 20], "file", "cut off"),
    "no numbers": (GOOD.replace(b"\n0 2 0\n", b"\n0 two 0\n"), "file", "something else where numbers should be"),
    "another version": (GOOD.replace(b"4.1 0 8", b"3.0 0 8"), "file", "of version 3.0"),
    "no mesh": (b"hello", "file", "does not begin with"),
    "empty": (b" \n", "file", "is empty"),
    "solid cells": (GOOD.replace(b"\n2 2 2 12\n", b"\n2 2 4 12\n"), "file", "3D mesh"),
    "third order": (GOOD.replace(b"\n2 2 2 12\n", b"\n2 2 21 12\n"), "file", "above the second order"),
    "too many cells": (GOOD.replace(b"\n1 12 1 12\n", b"\n1 5000000 1 5000000\n"), "file", "need some 3.5 GB"),
    "a huge count": (GOOD.replace(b"\n2 2 2 12\n", b"\n2 2 2 999999999\n"), "file", "ends too early"),
}  # fmt: skip


def in_metres() -> bytes:
    points, rows, groups = meshes.rectangle(6e-9, 4e-9, 3, 2)
    return meshes.msh((points, rows, groups), NAMES)


BAD["metres declared nm"] = (in_metres(), "unit", r"6e-09 nm large.*is the file in m\? then write unit = \"m\"")


@pytest.mark.parametrize(("content", "field", "words"), BAD.values(), ids=BAD.keys())
def test_bad_meshes_are_refused_in_one_line(content: bytes, field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        mesh(content)
    assert caught.value.field == field
    assert str(caught.value).isprintable()


def test_the_good_mesh_is_good() -> None:
    assert mesh(GOOD).loop().area == pytest.approx(24)
    assert mesh(in_metres(), unit="m").loop().area == pytest.approx(24)


def test_too_many_cells_are_refused_before_they_are_read(monkeypatch: pytest.MonkeyPatch) -> None:
    """The counts stand at the head of a VTU file: nothing else of it is looked at."""
    monkeypatch.setattr(imported_mesh, "_by_meshio", lambda *_: pytest.fail("read"))
    head = f'<VTKFile><UnstructuredGrid><Piece NumberOfPoints="9" NumberOfCells="{mesh_data.MOST_CELLS + 1}">'
    with pytest.raises(InputError, match="GB of memory"):
        mesh(head.encode(), "s.vtu")


@pytest.mark.parametrize(
    ("groups", "field", "words"),
    [
        ((Group("core", "one"),), "group_materials", r"gives no material to 'shell' \(235.\d nm\^2 around 0, 0\)"),
        ((Group("core", "one"), Group("shel", "one")), "group_materials.shel", "did you mean 'shell'"),
        ((Group("core", "one"), Group("shell", "one"), Group("core", "two")), "group_materials", "a group twice"),
        ((Group("core", "void"), Group("shell", "void")), "material", "nothing is left for carriers"),
        ((Group("core", "one", "excluded"), Group("shell", "void")), "material", "nothing is left for carriers"),
    ],
)
def test_groups_that_are_refused(groups: tuple[Group, ...], field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        Section(mesh(meshes.msh(round_mesh(), NAMES)), groups=groups)
    assert caught.value.field == field


def test_layers_around_what_has_no_parallel_curve() -> None:
    points, rows, groups = meshes.rectangle(8.0, 8.0, 2, 2, kind="quad8")
    points[(points[:, 1] == 0) & (points[:, 0] == 2), 1] = -0.5
    with pytest.raises(InputError, match="corners between curves") as caught:
        section(mesh(meshes.msh((points, rows, groups), NAMES)), layers=(Layer(2, "one"),))
    assert caught.value.field == "layers[1].thickness"


# --- content, not paths -----------------------------------------------------------------------------------------------


def test_the_content_counts_and_the_result_keeps_it(tmp_path: Path) -> None:
    text = (
        '[section]\nshape = "mesh"\nfile = "NAME"\nunit = "nm"\n[section.group_materials]\n'
        'core = "GaAs"\nshell = {material = "Al0.3Ga0.7As", offset = "0.01 eV"}\n'
        '[carriers]\ntemperature = "4.2 K"\n[accuracy]\nsubbands = 1\nenergy = "1 meV"\n'
    )
    content = meshes.msh(round_mesh(), NAMES)
    digests = {}
    for name, data in (
        ("a.msh", content),
        ("b.msh", content),
        ("c.msh", content.replace(b"\n10 0 0\n", b"\n10.01 0 0\n")),
    ):
        (tmp_path / name).write_bytes(data)
        (tmp_path / "w.toml").write_text('title = "one"\n' + text.replace("NAME", name))
        digests[name] = load(tmp_path / "w.toml").digest
    assert digests["a.msh"] == digests["b.msh"] != digests["c.msh"]
    (tmp_path / "w.toml").write_text('title = "one"\n' + text.replace("NAME", "a.msh"))
    problem = load(tmp_path / "w.toml")
    target = write(solve(problem), tmp_path / "result", figures=False)
    assert (target / "inputs" / "a.msh").read_bytes() == content
    again = load(target / "input.toml")
    assert again.digest == problem.digest
    (target / "inputs" / "notes.txt").write_text("mine")
    write(solve(again), tmp_path / "result", figures=False, replace=True)
    assert (target / "inputs" / "notes.txt").read_text() == "mine"
    assert load(target / "input.toml").digest == problem.digest
