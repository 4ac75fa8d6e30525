"""Potentials from files: closed forms, frames, what is told of their error, and what does not cover a section."""

from __future__ import annotations

import math
from pathlib import Path

import meshio
import numpy as np
import pytest

from tests import meshes
from tests.truth.harmonic import ladder
from wiresolve.describe import wirefile
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.materials import Material
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.potential import Potential
from wiresolve.describe.potential_file import PotentialFile
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Group, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.errors import InputError
from wiresolve.loading import load
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

MASS, SPACING_eV = 0.067, 0.02
STIFFNESS = MASS * SPACING_eV**2 / (4 * HBAR2_OVER_2M0)
"""Half of m w^2, in eV/nm^2, for levels 20 meV apart."""


def well(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.asarray(STIFFNESS * (x**2 + y**2))


def grid(half: float, count: int) -> np.ndarray:
    line = np.linspace(-half, half, count)
    return np.stack(np.meshgrid(line, line, indexing="ij"), -1).reshape(-1, 2)


def scattered(half: float, count: int) -> np.ndarray:
    """Points at random, the corners of a square among them."""
    chance = np.random.default_rng(5)
    corners = half * np.array([(-1, -1), (1, -1), (1, 1), (-1, 1)])
    return np.vstack([corners, chance.uniform(-half, half, (count, 2))])


def table(points: np.ndarray, energy_eV: np.ndarray, length: float = 1.0, energy: float = 1.0) -> InputFile:
    rows = [
        f"{x / length:.17g},{y / length:.17g},{e / energy:.17g}" for (x, y), e in zip(points, energy_eV, strict=True)
    ]
    return InputFile("phi.csv", "\n".join(["x,y,energy", *rows]).encode())


def problem(section: Section, potential: Potential, count: int = 6, accuracy_eV: float = 1e-5) -> Problem:
    one = Material.given("one", electron_mass=MASS, conduction_edge_eV=0.0)
    return Problem(
        "file", section, Carriers(temperature_K=(4.2,)), Accuracy(count, accuracy_eV), (one,), None, potential
    )


WIDE = Section(Circle(110), "one")


def test_harmonic_well_on_a_grid() -> None:
    """Equal steps, as in the closed form: a bicubic spline has a parabola exactly."""
    points = grid(60, 31)
    given = PotentialFile(table(points, well(*points.T)), "nm", "eV")
    result = solve(problem(WIDE, Potential(file=given)))
    assert (np.abs(result.energies_eV - ladder(SPACING_eV, SPACING_eV, 6)) < result.errors_eV + 1e-6).all()
    assert given.error_eV < 1e-9


def test_units_are_those_that_are_said() -> None:
    points = grid(60, 31)
    same = PotentialFile(table(points, well(*points.T), 1000.0, 1e-3), "um", "meV").over(Circle(110))
    assert same(np.array([7.0]), np.array([-3.0])) == pytest.approx(well(np.array([7.0]), np.array([-3.0])), rel=1e-9)


def test_harmonic_well_at_scattered_points() -> None:
    """Levels off by no more than the error that is told; where it is told it is not told in vain."""
    points = scattered(60, 3000)
    given = PotentialFile(table(points, well(*points.T)), "nm", "eV")
    result = solve(problem(WIDE, Potential(file=given), 3, 1e-4))
    off = np.abs(result.energies_eV - ladder(SPACING_eV, SPACING_eV, 3))
    assert (off < given.error_eV + result.errors_eV).all()
    assert 1e-6 < given.error_eV < 2e-3
    assert Potential(file=given).file_error_eV == given.error_eV
    assert Potential(field_V_per_nm=(0.01, 0)).file_error_eV is None


def bumps(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.asarray(0.1 * np.sin(x / 3) * np.cos(y / 4))


@pytest.mark.parametrize("count", [41, 61, 81])
def test_the_error_that_is_told_is_the_error(count: int) -> None:
    """Against the function itself at random places: 19 of 20 are below, and it is no more than 30 times too large."""
    points = grid(20, count)
    given = PotentialFile(table(points, bumps(*points.T)), "nm", "eV")
    x, y = np.random.default_rng(2).uniform(-19, 19, (2, 4000))
    off = np.quantile(np.abs(given.over(Circle(38))(x, y) - bumps(x, y)), 0.95)
    assert off < given.error_eV < 30 * off


def test_noise_is_not_smoothed_away_in_the_error() -> None:
    points = grid(20, 61)
    noise = 1e-3 * np.random.default_rng(3).normal(size=len(points))
    given = PotentialFile(table(points, bumps(*points.T) + noise), "nm", "eV")
    assert 1e-3 < given.error_eV < 6e-3


def test_it_adds_to_a_field() -> None:
    """The same field from a file and as a field: twice as strong together."""
    points = grid(8, 9)
    given = PotentialFile(table(points, 0.01 * points[:, 0]), "nm", "eV")
    both, twice = Potential(field_V_per_nm=(0.01, 0.0), file=given), Potential(field_V_per_nm=(0.02, 0.0))
    section = Section(Rectangle(12, 10), "one")
    found = [solve(problem(section, potential, 3, 1e-4)) for potential in (both, twice)]
    assert found[0].energies_eV == pytest.approx(found[1].energies_eV, abs=2e-6)


# --- a field of a mesh, and its frame --------------------------------------------------------------------------------

CENTER = (30.0, -12.0)


def on_a_mesh(value: object, center: tuple[float, float] = CENTER) -> tuple[bytes, bytes]:
    """A disk somewhere, as VTU with regions and a point array, and the same as MSH."""
    arrays = meshes.disk(10.0, 8, center=center)
    made = meshes.by_meshio(arrays)
    made.point_data["phi"] = value(arrays[0][:, 0] - center[0], arrays[0][:, 1] - center[1])  # type: ignore[operator]
    return made, meshes.msh(arrays, {2: "wire"})


def slope(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.asarray(0.01 * x)


def test_one_frame_for_mesh_and_potential(tmp_path: Path) -> None:
    """Both exported from one place: origin = "file" keeps them on top of each other, turned section or not."""
    made, msh = on_a_mesh(slope)
    made.write(tmp_path / "phi.vtu")
    file = InputFile("phi.vtu", (tmp_path / "phi.vtu").read_bytes())
    shape = ImportedMesh(InputFile("s.msh", msh), "nm", rotation_deg=90)
    section = Section(shape, groups=(Group("wire", "one"),))
    given = PotentialFile(file, "nm", "eV", "phi", "file")
    # Turned by a quarter, what rose along x rises along y.
    assert given.over(shape)(np.array([0.0, 3.0]), np.array([5.0, -4.0])) == pytest.approx([0.05, -0.04], abs=1e-9)
    by_file = solve(problem(section, Potential(file=given), 3, 1e-4))
    by_field = solve(problem(Section(Circle(20), "one"), Potential(field_V_per_nm=(0.0, 0.01)), 3, 1e-4))
    assert by_file.energies_eV == pytest.approx(by_field.energies_eV, rel=1e-4)
    with pytest.raises(InputError, match="origin: is missing: the section comes from a file"):
        problem(section, Potential(file=PotentialFile(file, "nm", "eV", "phi")))
    with pytest.raises(InputError, match=r"potential\.file: does not cover the section"):
        problem(section, Potential(file=PotentialFile(file, "nm", "eV", "phi", "section")))
    with pytest.raises(InputError, match=r"potential\.origin: a circle comes from no file"):
        problem(Section(Circle(9), "one"), Potential(file=given))


def test_the_frame_of_an_outline() -> None:
    """Pixels downwards, potential in nm of the same picture, y downwards too."""
    picture = np.array([(50, 10), (80, 70), (20, 70)])
    made = Outline(InputFile("o.csv", "\n".join(f"{x},{y}" for x, y in picture).encode()), scale_nm=0.5, y_down=True)
    points = np.stack(np.meshgrid(np.linspace(5, 45, 9), np.linspace(0, 40, 9), indexing="ij"), -1).reshape(-1, 2)
    given = PotentialFile(table(points, 0.01 * points[:, 1]), "nm", "eV", origin="file").over(made)
    # The tip is at row 10 of the picture, 5 nm from its top.
    tip = made.loop().sample(1)[np.argmax(made.loop().sample(1)[:, 1])]
    assert given(*tip) == pytest.approx(0.05, abs=1e-9)


def test_curved_walls_between_nodes_are_covered(tmp_path: Path) -> None:
    """Second-order walls bulge beyond the hull of the nodes; there the slope goes on."""
    made, _ = on_a_mesh(slope, (0.0, 0.0))
    made.write(tmp_path / "phi.vtu")
    given = PotentialFile(InputFile("phi.vtu", (tmp_path / "phi.vtu").read_bytes()), "nm", "eV", "phi")
    angle = np.linspace(0, 2 * math.pi, 1001)
    x, y = 10 * np.cos(angle), 10 * np.sin(angle)
    assert given.over(Circle(20))(x, y) == pytest.approx(0.01 * x, abs=1e-6)


# --- in a wire file --------------------------------------------------------------------------------------------------

TEXT = """title = "given"
[section]
shape = "circle"
diameter = "10 nm"
material = "GaAs"
[carriers]
temperature = "4.2 K"
[potential]
field = ["0.001 V/nm", "0 V/nm"]
file = "phi.csv"
length_unit = "nm"
energy_unit = "meV"
"""


def test_round_trip_and_digest(tmp_path: Path) -> None:
    points = grid(8, 9)
    content = table(points, well(*points.T), energy=1e-3).content
    (tmp_path / "phi.csv").write_bytes(content)
    (tmp_path / "wire.toml").write_text(TEXT)
    given = load(tmp_path / "wire.toml")
    assert given.files == (("inputs/phi.csv", content),)
    rows = dict(wirefile.describe(given))
    assert rows["potential.file"].startswith("phi.csv, nm and meV, between its points known to")
    (tmp_path / "inputs").mkdir()
    (tmp_path / "inputs" / "phi.csv").write_bytes(content)
    assert wirefile.parse(wirefile.dump(given), tmp_path).digest == given.digest
    (tmp_path / "phi.csv").write_bytes(content.replace(b"-8,-8", b"-8,-8.001"))
    assert load(tmp_path / "wire.toml").digest != given.digest


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('length_unit = "nm"\n', "", "potential.length_unit: is missing"),
        ('energy_unit = "meV"\n', "", "potential.energy_unit: is missing"),
        ('"meV"', '"V"', "potential.energy_unit"),
        ('"phi.csv"', '"psi.csv"', "potential.file: there is no such file"),
        ('file = "phi.csv"\n', "", "potential.length_unit: belongs to a file, and none is given"),
        ('"10 nm"', '"20 nm"', "potential.file: does not cover the section: at "),
        ('"phi.csv"', '"phi.csv"\narray = "phi"', "potential.array: belongs to a VTU file"),
        ('"phi.csv"', '"phi.csv"\norigin = "file"', "potential.origin: a circle comes from no file"),
        ('"phi.csv"', '"phi.csv"\norigin = "center"', "potential.origin: must be one of"),
    ],
)
def test_bad_keys(old: str, new: str, words: str, tmp_path: Path) -> None:
    points = grid(8, 9)
    (tmp_path / "phi.csv").write_bytes(table(points, well(*points.T), energy=1e-3).content)
    (tmp_path / "wire.toml").write_text(TEXT.replace(old, new, 1))
    with pytest.raises(InputError) as caught:
        load(tmp_path / "wire.toml")
    assert words in str(caught.value)
    assert str(caught.value).isprintable()


def rows_of(points: np.ndarray, energy: float = 0.01) -> str:
    return "\n".join(f"{x},{y},{energy}" for x, y in points)


@pytest.mark.parametrize(
    ("name", "text", "field", "words"),
    [
        ("p.csv", "1,2,3\n", "file", "too few points"),
        ("p.csv", rows_of(grid(5, 5)) + "\n1,2\n", "file", "line 26 is no row of 3 numbers"),
        ("p.csv", rows_of(grid(5, 5)) + "\n1,2,inf\n", "file", "not finite"),
        ("p.csv", rows_of(grid(5, 5), 1e4), "energy_unit", "beyond 100 eV"),
        ("p.csv", rows_of(np.column_stack([np.arange(20), np.arange(20)])), "file", "on one line"),
        (
            "p.csv",
            rows_of(np.vstack([scattered(5, 30), [(1, 1), (1, 1)]])),
            "file",
            "points 35 and 36 at the same place",
        ),
        ("p.png", "x", "file", "no form that a potential can have"),
        ("p.vtu", "<VTKFile>", "array", "is missing"),
    ],
)
def test_bad_tables(name: str, text: str, field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        PotentialFile(InputFile(name, text.encode()), "nm", "eV").over(Circle(8))
    assert caught.value.field == field


def test_bad_arrays(tmp_path: Path) -> None:
    made, _ = on_a_mesh(slope)
    made.point_data["two"] = np.zeros((len(made.points), 2))
    meshio.write(tmp_path / "p.vtu", made)
    content = (tmp_path / "p.vtu").read_bytes()
    for array, words in (
        ("psi", "is no point data of the file, which has 'phi', 'two'"),
        ("two", "one number a point"),
    ):
        with pytest.raises(InputError, match=words) as caught:
            PotentialFile(InputFile("p.vtu", content), "nm", "eV", array)
        assert caught.value.field == "array"
    with pytest.raises(InputError, match="cannot be read as VTU"):
        PotentialFile(InputFile("p.vtu", content[:400]), "nm", "eV", "phi")
