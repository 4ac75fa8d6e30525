"""The wire file: units, every key, exact round trips."""

from __future__ import annotations

import math
import tomllib
from pathlib import Path

import pytest

from wiresolve.describe import drawing, shape_tables, wirefile
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Trapezoid, Triangle
from wiresolve.errors import InputError
from wiresolve.units import UNITS, format_quantity, parse_quantity

GEOMETRIES = sorted((Path(__file__).resolve().parents[1] / "geometries").glob("*.toml"))

EVERYTHING = """
title = "Every key at once: \\"quoted\\" and µ"

[section]
shape = "hexagon"
across_flats = "0.03 um"
corner_radius = "20 Angstrom"
rotation = "30 deg"
material = "well"
outside = "around it"
carriers = "admitted"
offset = "-5 meV"
lattice_temperature = "300 K"

[[section.layers]]
thickness = "3 nm"
material = "wall"
sides = {bottom = "0 nm", "side 3" = "5 nm"}
offset = "0.01 eV"

[[section.layers]]
thickness = "2 nm"
material = "oxide"
carriers = "excluded"

[[section.patches]]
shape = "ellipse"
width = "6 nm"
height = "3 nm"
rotation = "45 deg"
center = ["4 nm", "-2 nm"]
material = "void"

[[section.patches]]
shape = "polygon"
unit = "Angstrom"
points = [[0, 0], [20, 0], [0, 20]]
material = "well"
carriers = "excluded"
offset = "0.2 eV"

[orientation]
axis = [1, 1, 1]
up = [1, -1, 0]

[materials.well]
inverse_mass = [[20.0, 1, 0], [1, 10.0, 0.5], [0, 0.5, 5.0]]
conduction_edge = "0 eV"
permittivity = 12
valley_degeneracy = 2
source = "invented"

[materials.wall]
electron_mass = 0.07
conduction_edge = "250 meV"
electron_affinity = "4.07 eV"

[materials."around it"]
electron_mass = 0.0123456789
conduction_edge = "0.3 eV"

[materials.oxide]
permittivity = 3.9

[potential]
field = ["0.01 V/nm", "100 kV/cm"]
harmonic = {x = "5 meV", y = "0 eV"}

[carriers]
kind = "electrons"
temperature = ["4.2 K", "500 mK"]
fermi_level = "0.15 eV"

[accuracy]
subbands = 7
energy = "10 ueV"
"""


def test_every_key_is_understood() -> None:
    found = wirefile.parse(EVERYTHING)
    section = found.section
    assert section.shape == Hexagon(across_flats_nm=30.0, corner_radius_nm=2.0, rotation_deg=30.0)
    assert section.layers == (
        Layer(3.0, "wall", offset_eV=0.01, sides=(("bottom", 0.0), ("side 3", 5.0))),
        Layer(2.0, "oxide", carriers="excluded"),
    )
    assert section.patches == (
        Patch(Ellipse(6.0, 3.0, 45.0), "void", (4.0, -2.0)),
        Patch(Polygon(((0, 0), (2, 0), (0, 2))), "well", carriers="excluded", offset_eV=0.2),
    )
    assert (section.outside, section.offset_eV, section.lattice_temperature_K) == ("around it", -0.005, 300)
    assert found.orientation == Orientation((1, 1, 1), (1, -1, 0))
    assert found.potential == Potential(field_V_per_nm=(0.01, 0.01), harmonic_eV=(0.005, 0.0))
    assert found.carriers == Carriers(temperature_K=(4.2, 0.5), fermi_level_eV=0.15)
    assert found.accuracy == Accuracy(7, 1e-5)
    assert [m.name for m in found.materials] == ["well", "wall", "around it", "oxide"]
    well, wall, *_ = found.materials
    assert well.inverse_mass == ((20, 1, 0), (1, 10, 0.5), (0, 0.5, 5))
    assert (well.valley_degeneracy, well.permittivity, well.source) == (2, 12, "invented")
    assert (wall.electron_mass, wall.conduction_edge_eV, wall.electron_affinity_eV) == (0.07, 0.25, 4.07)


def test_defaults() -> None:
    text = '[section]\nshape = "circle"\ndiameter = "10 nm"\nmaterial = "GaAs"\n[carriers]\ntemperature = "4.2 K"\n'
    found = wirefile.parse(text, name="some/where/thin.toml")
    assert found == Problem("thin", Section(Circle(10), "GaAs"), Carriers(temperature_K=(4.2,)))
    assert found.accuracy == Accuracy(10, 1e-4)


COLD = Carriers(temperature_K=(0.1 + 0.2,))
SHAPES = [
    Circle(10.1),
    Ellipse(1 / 3 * 100, 7.7, -12.5),
    Rectangle(30, 20, 2.2, 90),
    Hexagon(across_corners_nm=20.02),
    Triangle(side_nm=math.pi),
    Triangle(base_nm=9.9, height_nm=14.1, corner_radius_nm=0.3),
    Trapezoid(20, 11, 9.3, rotation_deg=180),
    Polygon(((0.1, 0.2), (36, 0), (36.3, 12), (12, 12), (12, 30), (0, 30)), corner_radius_nm=0.7),
]


@pytest.mark.parametrize("shape", SHAPES, ids=[s.kind for s in SHAPES])
def test_shapes_come_back_exactly(shape: Circle) -> None:
    problem = Problem("shape", Section(shape, "GaAs", patches=(Patch(shape, "InAs", (1 / 3, 0)),)), COLD)
    back = wirefile.parse(wirefile.dump(problem))
    assert back.section.shape == shape
    assert back.section.patches == problem.section.patches
    assert back.carriers == COLD
    assert back.digest == problem.digest


@pytest.mark.parametrize("path", GEOMETRIES, ids=[p.stem for p in GEOMETRIES])
def test_geometries_are_read_and_come_back(path: Path, tmp_path: Path) -> None:
    problem = wirefile.read(path)
    for name, content in problem.files:
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_bytes(content)
    again = wirefile.parse(wirefile.dump(problem), tmp_path)
    assert again.digest == problem.digest
    assert wirefile.dump(again) == wirefile.dump(problem)
    assert path.read_text(encoding="utf-8").startswith("# ")
    assert 1e-4 <= problem.accuracy.energy_eV <= 5e-4


def test_every_shape_has_a_geometry() -> None:
    used = {wirefile.read(path).section.shape.kind for path in GEOMETRIES}
    assert used == {*shape_tables.SHAPES, "outline", "mesh"}
    assert len({wirefile.read(path).title for path in GEOMETRIES}) == len(GEOMETRIES) >= 15


def test_everything_comes_back() -> None:
    problem = wirefile.parse(EVERYTHING)
    text = wirefile.dump(problem)
    again = wirefile.parse(text)
    assert again == problem
    assert again.digest == problem.digest
    assert tomllib.loads(text)["title"] == problem.title


def test_a_material_from_python_comes_back() -> None:
    for mass in (0.05, 0.067, 1 / 3, 0.0135, 0.9, 99.9):
        own = Material.given("own", electron_mass=mass, conduction_edge_eV=1 / 3)
        problem = Problem("own", Section(Circle(10), "own"), COLD, materials=(own,))
        back = wirefile.parse(wirefile.dump(problem))
        assert back.materials[0].inverse_mass == own.inverse_mass
        assert back.digest == problem.digest


def test_a_function_cannot_be_written() -> None:
    potential = Potential(function=lambda x, y: 0.01 * x, field_V_per_nm=(0.01, 0.0))
    problem = Problem("ramp", Section(Circle(10), "GaAs"), COLD, potential=potential)
    text = wirefile.dump(problem)
    assert text.startswith("# The potential is (also) a Python function")
    back = wirefile.parse(text)
    assert back.potential == Potential(field_V_per_nm=(0.01, 0.0))
    assert back.digest != problem.digest


def test_odd_names_and_titles_come_back() -> None:
    for name in ("with space", 'quo"ted', "back\\slash", "dot.ted", "ünï", "true", "1"):
        own = Material.given(name, electron_mass=0.05, source=f"about {name}")
        problem = Problem(name, Section(Circle(10), name), COLD, materials=(own,))
        assert wirefile.parse(wirefile.dump(problem)).digest == problem.digest


def test_a_wire_files_own_material_takes_the_place_of_the_tables() -> None:
    text = wirefile.dump(Problem("own", Section(Circle(10), "GaAs"), COLD))
    own = wirefile.parse(text + "[materials.GaAs]\nelectron_mass = 0.07\n")
    assert own.resolved_materials()["GaAs"].electron_mass == pytest.approx(0.07)
    assert "given with the wire" in own.resolved_materials()["GaAs"].values[0].source


def test_describe_tells_everything_with_units() -> None:
    rows = dict(wirefile.describe(wirefile.parse(EVERYTHING)))
    assert "across_flats 30 nm" in rows["section.shape"]
    assert "0 nm on 'bottom'" in rows["section.layers[1]"]
    assert rows["section.patches[1]"].endswith("void")
    assert rows["accuracy.energy"] == "0.01 meV"
    assert rows["carriers.temperature"].startswith("4.2 K (kT = 0.3619 meV), 0.5 K")
    assert "around it" in rows["section.outside"]
    assert rows["orientation.axis"] == "1 1 1"
    assert rows["potential.field"] == "0.01 V/nm and 0.01 V/nm"
    assert "(given with the wire" in rows["materials.wall.electron_mass"]
    core = dict(wirefile.describe(wirefile.parse(wirefile.dump(Problem("a", Section(Circle(10), "GaAs"), COLD)))))
    assert "78.5398 nm^2" in core["section.core.area"]
    assert "on the common scale" in core["energy_zero"]


GAAS, INAS = "GaAs", "InAs"
# The part of an ellipse with half axes 1 and 3 beyond 2/3 of the longer one.
CAP = 3 * (math.acos(2 / 3) - 2 / 3 * math.sqrt(1 - 4 / 9))
POKE = (7.3, 10.01 - math.sqrt(8))
# Two unit circles whose centres are d apart share the lens 2 acos(d/2) - d/2 sqrt(4 - d^2).
LENS = 2 * math.acos(0.5) - math.sqrt(3) / 2


@pytest.mark.parametrize(
    ("section", "area", "width", "height"),
    [
        (Section(Circle(10), GAAS, (Layer(3, INAS), Layer(2, GAAS))), math.pi * 100, 20, 20),
        (Section(Circle(10), GAAS, patches=(Patch(Circle(10), INAS, (5, 0)),)), 25 * (2 * math.pi - LENS), 15, 10),
        (Section(Circle(10), GAAS, patches=(Patch(Circle(4), INAS, (1, 1)),)), math.pi * 25, 10, 10),
        (Section(Rectangle(56, 20), GAAS, patches=(Patch(Rectangle(16, 28), GAAS, (0, 24)),)), 1568, 56, 48),
        (Section(Rectangle(20, 10), GAAS, patches=(Patch(Rectangle(20, 10), INAS),)), 200, 20, 10),
        (Section(Rectangle(20, 10), GAAS, patches=(Patch(Rectangle(10, 20), INAS),)), 300, 20, 20),
        # A square on its tip pokes 0.01 nm out of a long side: a triangle of 1e-4 nm^2.
        (
            Section(Rectangle(90, 20), GAAS, patches=(Patch(Rectangle(4, 4, rotation_deg=45), INAS, POKE),)),
            1800.0001,
            90,
            20.01,
        ),
        (Section(Rectangle(90, 20), GAAS, patches=(Patch(Ellipse(2, 6), INAS, (13.1, 8)),)), 1800 + CAP, 90, 21),
        (Section(Ellipse(10, 4, 45), GAAS), math.pi * 10, 58**0.5, 58**0.5),
    ],
)
def test_describe_measures_the_whole_section(section: Section, area: float, width: float, height: float) -> None:
    pieces = section.pieces()
    assert drawing.area(pieces) == pytest.approx(area, rel=1e-9)
    assert drawing.reach(pieces) == pytest.approx((width, height), rel=1e-6)
    rows = dict(wirefile.describe(Problem("whole", section, COLD)))
    across = 2 * math.sqrt(area / math.pi)
    assert rows["section.area"] == f"{area:.6g} nm^2, as a circle of {across:.6g} nm diameter"
    assert rows["section.size"] == f"{width:.6g} nm wide, {height:.6g} nm high"
    assert rows.get("section.thinnest_layer") == ("2 nm (layer 2)" if section.layers else None)


def test_every_default_is_written_out() -> None:
    text = """
title = "thin"
[section]
shape = "rectangle"
width = "10 nm"
height = "9 nm"
material = "own"
[[section.layers]]
thickness = "2 nm"
material = "own"
[[section.patches]]
shape = "circle"
diameter = "3 nm"
material = "own"
[materials.own]
electron_mass = 0.05
[carriers]
temperature = "4.2 K"
"""
    written = tomllib.loads(wirefile.dump(wirefile.parse(text)))
    part = {"carriers": "admitted", "offset": "0.0 eV"}
    section = written["section"]
    (layer,), (patch,) = section.pop("layers"), section.pop("patches")
    corners = {"corner_radius": "0.0 nm", "rotation": "0.0 deg"}
    rectangle = {"shape": "rectangle", "width": "10.0 nm", "height": "9.0 nm", "material": "own"}
    around = {"outside": "hard wall", "lattice_temperature": "4.2 K"}
    assert section == rectangle | corners | part | around
    assert layer == {"thickness": "2.0 nm", "material": "own"} | part
    assert patch == {"shape": "circle", "diameter": "3.0 nm", "center": ["0.0 nm", "0.0 nm"], "material": "own"} | part
    assert written["carriers"] == {"kind": "electrons", "temperature": ["4.2 K"], "model": "nonparabolic"}
    assert written["accuracy"] == {"subbands": 10, "energy": "0.0001 eV"}
    assert written["materials"]["own"] == {"electron_mass": 0.05, "valley_degeneracy": 1}


def test_equal_problems_have_equal_digests() -> None:
    plus, minus = (Problem("a", Section(Circle(10), GAAS, offset_eV=zero), COLD) for zero in (0.0, -0.0))
    assert plus == minus
    assert plus.digest == minus.digest


# By definition of the prefixes; 1 Angstrom = 0.1 nm.
@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("6 nm", "length", 6.0),
        ("6nm", "length", 6.0),
        (" 0.1 um ", "length", 100.0),
        ("0.1 µm", "length", 100.0),
        ("5 Angstrom", "length", 0.5),
        ("5 angstrom", "length", 0.5),
        ("5 \u00c5", "length", 0.5),
        ("5 \u212b", "length", 0.5),
        ("1e-9 m", "length", 1.0),
        ("-3. nm", "length", -3.0),
        (".5 nm", "length", 0.5),
        ("0.1 meV", "energy", 1e-4),
        ("3 ueV", "energy", 3e-6),
        ("77 K", "temperature", 77.0),
        ("15 deg", "angle", 15.0),
        (f"{math.pi!r} rad", "angle", 180.0),
        ("0.01 V/nm", "electric field", 0.01),
        ("1 MV/cm", "electric field", 0.1),
        ("100 kV/cm", "electric field", 0.01),
        ("1e7 V/m", "electric field", 0.01),
        ("250 mV", "voltage", 0.25),
        ("1e18 cm^-3", "density", 1e-3),
        ("1e18 1/cm^3", "density", 1e-3),
        ("1e24 m^-3", "density", 1e-3),
        ("1e12 cm^-2", "sheet density", 1e-2),
        ("1e6 cm^-1", "line density", 0.1),
        ("1 nm^-1", "wave number", 1.0),
        ("1e9 1/m", "wave number", 1.0),
    ],
)
def test_quantities(text: str, dimension: str, value: float) -> None:
    assert parse_quantity(text, dimension, "here") == value


@pytest.mark.parametrize("dimension", UNITS)
def test_quantities_come_back_exactly(dimension: str) -> None:
    for value in (0.0, 1 / 3, 1e-7, -2.5e17, math.pi, 5e-324, 1.7e308):
        assert parse_quantity(format_quantity(value, dimension), dimension, "here") == value
    for unit in UNITS[dimension]:
        shown = format_quantity(0.123456789012, dimension, unit, 12)
        assert parse_quantity(shown, dimension, "here") == pytest.approx(0.123456789012, rel=1e-11)


@pytest.mark.parametrize(
    ("text", "dimension", "words"),
    [
        (10, "length", r'write e.g. diameter = "10 nm"'),
        (0.5, "energy", r'write e.g. diameter = "0.5 eV"'),
        (True, "length", "must be a length in quotes"),
        (["10 nm"], "length", "must be a length in quotes"),
        (None, "energy", "must be an energy in quotes"),
        ("10", "length", "the unit is missing"),
        ("nm", "length", "a number and a unit"),
        ("", "length", "a number and a unit"),
        ("10 eV", "length", "'eV' is a unit of energy"),
        ("10 NM", "length", "'NM' is no known unit of length.*use nm"),
        ("10 furlong", "length", "no known unit"),
        ("nan nm", "length", "finite"),
        ("-inf nm", "length", "finite"),
        ("1e999 nm", "length", "finite"),
        ("1e99999 nm", "length", "no known unit|a number and a unit"),
        ("1,5 nm", "length", r'decimal point.*write e.g. diameter = "1.5 nm"$'),
        ("1,500 nm", "length", r'decimal point.*"1.500 nm" or "1500 nm"$'),
        ("1,5", "length", r'decimal point.*"1.5 nm"$'),
        ("10 nm nm", "length", "no known unit"),
        ("٣ nm", "length", "a number and a unit"),
        ("1" * 100 + " nm", "length", "a number and a unit"),
    ],
)
def test_refused_quantities(text: object, dimension: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        parse_quantity(text, dimension, "section.diameter")
    assert caught.match("^section.diameter: ")


@pytest.mark.parametrize(
    ("text", "dimension", "field", "remedy"),
    [
        ("0.1", "energy", "carriers.fermi_level", 'fermi_level = "0.1 eV"'),
        (0.1, "energy", "carriers.fermi_level", 'fermi_level = "0.1 eV"'),
        ("0.1", "energy", "accuracy.energy", 'energy = "0.1 meV"'),
        (0.1, "energy", "accuracy.energy", 'energy = "0.1 meV"'),
        ("7", "energy", "potential.harmonic.x", 'x = "7 meV"'),
        ("0.1", "energy", "--accuracy", '--accuracy "0.1 meV"'),
        ("0.1 nm", "energy", "--accuracy", '--accuracy "0.1 meV"'),
        ("0,1 meV", "energy", "--accuracy", '--accuracy "0.1 meV"'),
        ("300", "temperature", "--temperature", '--temperature "300 K"'),
        ("warm", "temperature", "--temperature", '--temperature "77 K"'),
        (4, "temperature", "carriers.temperature[2]", '"4 K"'),
        ("4", "temperature", "carriers.temperature[2]", '"4 K"'),
    ],
)
def test_the_spelling_that_is_proposed(text: object, dimension: str, field: str, remedy: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_quantity(text, dimension, field)
    assert caught.value.remedy == f"write e.g. {remedy}"
    quoted = remedy.split('"')[1]
    assert math.isfinite(parse_quantity(quoted, dimension, field))
