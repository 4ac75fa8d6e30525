"""Materials in the wire file and in files of their own: valleys, replaced values, and what is refused."""

from __future__ import annotations

import json
import random
import tomllib
from pathlib import Path
from typing import Any

import pytest

from wiresolve.describe import material_file, wirefile
from wiresolve.describe.material import Material
from wiresolve.describe.material_changes import resolved
from wiresolve.describe.materials import look_up, unknown
from wiresolve.describe.problem import Problem
from wiresolve.errors import InputError

WIRE = """
title = "own materials"
[section]
shape = "circle"
diameter = "10 nm"
material = "{}"
[carriers]
temperature = "4.2 K"
[orientation]
axis = [1, 1, 0]
up = [0, 0, 1]
"""
SILICON = """
[materials.own]
conduction_edge = "0.1 eV"
permittivity = 11.7
source = "invented"
valleys = [
  {name = "Delta", axis = [1, 0, 0], longitudinal_mass = 0.916, transverse_mass = 0.19, nonparabolicity = 0.5},
  {name = "L", axis = [1, 1, 1], longitudinal_mass = 1.6, transverse_mass = 0.1, edge = "0.8 eV", zone_boundary = true},
]
"""
LAB = """
[InAs]
extends = "InAs"
electron_mass = 0.0235
source = "cyclotron resonance of our own wires"

[glass]
permittivity = 4.1
electron_affinity = "1.0 eV"
crystal = "amorphous"
source = "invented"

[bent]
electron_mass = 0.05
nonparabolicity = 1.2
gap = "0.8 eV"
conduction_edge = "0 eV"
crystal = "zincblende"
lattice_constant = "0.6 nm"
source = "invented"
"""


def parse(text: str, folder: Path | None = None) -> Problem:
    return wirefile.parse(text, folder, "wire.toml")


def test_valleys_of_the_wire_file() -> None:
    material = parse(WIRE.format("own") + SILICON).resolved_materials()["own"]
    assert [(v.name, v.height_eV, v.axis, v.zone_boundary) for v in material.valleys] == [
        ("Delta", 0.0, (1, 0, 0), False),
        ("L", 0.8, (1, 1, 1), True),
    ]
    assert material.valley_degeneracy == 6
    assert material.valleys[0].nonparabolicity_per_eV == 0.5
    assert material.conduction_edge_eV == 0.1
    assert all(v.source == "given with the wire: invented" for v in material.values)


def test_materials_of_a_file(tmp_path: Path) -> None:
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    problem = parse('materials_file = "lab.toml"\n' + WIRE.format("InAs"), tmp_path)
    found = problem.resolved_materials()["InAs"]
    assert found.electron_mass == 0.0235
    assert found.edges == look_up("InAs", 4.2).edges
    mass = next(v for v in found.values if v.quantity == "zone_centre_mass")
    assert mass.source == "given in lab.toml, replaces 0.024: cyclotron resonance of our own wires"
    assert mass.provenance == "given"
    bent, glass = (next(m for m in problem.materials if m.name == name) for name in ("bent", "glass"))
    assert (bent.gap_eV, bent.crystal, bent.lattice_constant_nm) == (0.8, "zincblende", 0.6)
    assert bent.valleys[0].nonparabolicity_per_eV == 1.2
    assert glass.insulator
    assert glass.values[0].source == "given in lab.toml: invented"
    listed = parse('materials_file = ["lab.toml"]\n' + WIRE.format("bent"), tmp_path)
    assert listed.materials == problem.materials


@pytest.mark.parametrize("name", ["InAs", "glass", "bent", "own"])
def test_round_trips(name: str, tmp_path: Path) -> None:
    """What is written out reads back to the same problem, digest and values, without the file."""
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    own = "InAs" if name == "glass" else name
    problem = parse('materials_file = "lab.toml"\n' + WIRE.format(own) + SILICON, tmp_path)
    back = wirefile.parse(wirefile.dump(problem))
    assert back.plain() == problem.plain()
    assert back.digest == problem.digest
    assert back.resolved_materials() == problem.resolved_materials()
    assert {m.name: m for m in back.materials}[name] == {m.name: m for m in problem.materials}[name]


def test_lattices_and_the_crystal_can_be_replaced(tmp_path: Path) -> None:
    lab = """
[strained]
extends = "InAs"
lattice_constant = "0.61 nm"
source = "invented"
[phase]
extends = "InAs"
crystal = "wurtzite"
lattice_constant = "0.428 nm"
lattice_constant_c = "0.7 nm"
valleys = [{name = "zone centre", axis = [0, 0, 1], longitudinal_mass = 0.03, transverse_mass = 0.04}]
source = "invented"
[half]
extends = "InAs"
crystal = "wurtzite"
valleys = [{name = "zone centre", longitudinal_mass = 0.03, transverse_mass = 0.03}]
source = "invented"
"""
    (tmp_path / "lab.toml").write_text(lab, encoding="utf-8")
    problem = parse('materials_file = "lab.toml"\n' + WIRE.format("strained"), tmp_path)
    strained, phase, half = (resolved(m, 4.2) for m in problem.materials)
    listed = {v.quantity: (v.value, v.unit, v.source) for v in strained.values}
    cited = look_up("InAs", 4.2).lattice_constant_nm
    assert listed["lattice_constant"] == (0.61, "nm", f"given in lab.toml, replaces {cited:.6g}: invented")
    assert strained.lattice_constant_nm == 0.61
    assert strained.valleys == look_up("InAs", 4.2).valleys
    assert (phase.crystal, phase.c_over_a) == ("wurtzite", pytest.approx(0.7 / 0.428))
    # What the table tells of the cubic lattice is no lattice constant of the hexagonal one.
    assert half.lattice_constant_nm is None
    assert "lattice_constant" not in {v.quantity for v in half.values}
    back = wirefile.parse(wirefile.dump(problem))
    assert back.materials == problem.materials
    assert back.digest == problem.digest


def test_a_name_of_the_table_is_told(tmp_path: Path) -> None:
    """A user's own Si stands in place of the table's, and every value says so; twice in a list of names it is not."""
    text = '[{}]\nelectron_mass = 0.3\npermittivity = 12\nsource = "invented"\n'
    for name, told in (("Si", True), ("In0.5Ga0.5As", True), ("LabSi", False), ("In0.5Ga0.6As", False)):
        (tmp_path / "lab.toml").write_text(text.format(json.dumps(name)), encoding="utf-8")
        problem = parse('materials_file = "lab.toml"\n' + WIRE.format(name), tmp_path)
        instead = f", in place of the table's {name}" if told else ""
        sources = {v.source for v in problem.resolved_materials()[name].values}
        assert sources == {f"given in lab.toml{instead}: invented"}
    assert str(unknown("Zz", ("Si",))).split().count("Si,") == 1


EDGES = """
[LabSi]
source = "invented"
extends = "Si"
conduction_edge = "-4.5 eV"
[LabOx]
source = "invented"
extends = "SiO2"
"""


def test_a_given_edge_is_never_dropped(tmp_path: Path) -> None:
    """Where materials meet on a scale on which a given edge does not stand, it is refused."""
    shell = '[[section.layers]]\nthickness = "2 nm"\nmaterial = "LabOx"\n{}'
    wire = 'materials_file = "lab.toml"\n' + WIRE.format("LabSi")

    def read(lab: str, more: str = "") -> Problem:
        (tmp_path / "lab.toml").write_text(lab, encoding="utf-8")
        return parse(wire + shell.format(more), tmp_path)

    with pytest.raises(
        InputError, match="LabSi gives a conduction_edge, and LabOx beside it has none on that"
    ) as caught:
        read(EDGES)
    assert "materials.LabSi.conduction_edge" in caught.value.field
    assert "'-4.5 eV'; give one to each of them, or take it out" in str(caught.value)
    both = read(EDGES + 'conduction_edge = "-1.3 eV"\n').resolved_materials()
    assert both["LabOx"].conduction_edge_eV - both["LabSi"].conduction_edge_eV == pytest.approx(3.2)
    # The other way round: the oxide's edge, and none of the semiconductor.
    with pytest.raises(InputError, match="LabOx gives a conduction_edge, and LabSi beside it has none"):
        read(EDGES.replace('conduction_edge = "-4.5 eV"\n', "") + 'conduction_edge = "-1.3 eV"\n')
    # Alone it counts: beside a material that keeps carriers out.
    alone = read(EDGES, 'carriers = "excluded"\n')
    assert alone.energy_zero()[1] == -4.5


def test_the_digest_depends_on_what_is_in_the_file(tmp_path: Path) -> None:
    digests = set()
    for mass in (0.0235, 0.0236):
        (tmp_path / "lab.toml").write_text(LAB.replace("0.0235", str(mass)), encoding="utf-8")
        digests.add(parse('materials_file = "lab.toml"\n' + WIRE.format("InAs"), tmp_path).digest)
    table = parse(WIRE.format("InAs")).digest
    assert len(digests | {table}) == 3
    # A replaced value leaves the others to the table: their values belong to the digest too.
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    warm = parse('materials_file = "lab.toml"\n' + WIRE.format("InAs").replace("4.2 K", "77 K"), tmp_path)
    assert warm.resolved_materials()["InAs"].gap_eV == look_up("InAs", 77).gap_eV


def refused(text: str, folder: Path | None = None) -> str:
    with pytest.raises(InputError) as caught:
        parse(text, folder)
    message = str(caught.value)
    assert message.startswith("wire.toml: ")
    assert message.isprintable()
    return message


IN_THE_FILE = {
    "no source": ('source = "cyclotron resonance of our own wires"\n', "", ("InAs.source: is missing",)),
    "wrong unit": ('"1.0 eV"', '"1.0 nm"', ("glass.electron_affinity", "unit of length")),
    "no unit": ('"1.0 eV"', "1.0", ("glass.electron_affinity", '"1.0 eV"')),
    "unknown key": ("permittivity", "permitivity", ("glass.permitivity", "'permittivity'")),
    "nan": ("0.0235", "nan", ("InAs.electron_mass", "finite")),
    "infinite": ("1.2", "inf", ("bent.nonparabolicity", "finite")),
    "negative": ("0.0235", "-1", ("InAs.electron_mass", "positive")),
    "text for a number": ("4.1", '"4.1"', ("glass.permittivity", "a number")),
    "unit of a bare number": ("1.2", '"1.2 1/eV"', ("bent.nonparabolicity", "a number")),
    "gap beside extends": ('extends = "InAs"', 'extends = "InAs"\ngap = "0.4 eV"', ("InAs.gap", "extends another")),
    "crystal": ('"zincblende"', '"cubic"', ("bent.crystal", "'cubic'")),
    "extends no text": ('extends = "InAs"', "extends = 3", ("InAs.extends", "text")),
    "table is a value": ("[InAs]", "stone = 3\n[InAs]", ("stone", "one table")),
    "not TOML": ("[glass]", "[glass", ("is not TOML",)),
    "void": ("[glass]", "[void]", ("void", "meaning of its own")),
    "empty": (LAB, "", ("holds no material",)),
    "as in the wire file": ("[InAs]", "[materials.InAs]", ("lab.toml: materials", "write [InAs]")),
    "another crystal's valleys": ("extends", 'crystal = "wurtzite"\nextends', ("InAs.crystal", "give valleys")),
    "no crystal": ("extends", 'crystal = "amorphous"\nextends', ("InAs.crystal", "'amorphous'")),
    "binary": ("invented", "inven\x00ted", ("is not TOML",)),
}


@pytest.mark.parametrize(("old", "new", "words"), IN_THE_FILE.values(), ids=IN_THE_FILE.keys())
def test_one_line_names_file_and_key(old: str, new: str, words: tuple[str, ...], tmp_path: Path) -> None:
    assert old in LAB
    (tmp_path / "lab.toml").write_text(LAB.replace(old, new, 1), encoding="utf-8")
    message = refused('materials_file = "lab.toml"\n' + WIRE.format("bent"), tmp_path)
    assert "materials_file: lab.toml" in message
    assert [word for word in words if word not in message] == []


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    text = 'materials_file = "lab.toml"\n' + WIRE.format("GaAs")
    assert "there is no such file" in refused(text, tmp_path)
    (tmp_path / "lab.toml").mkdir()
    assert "is no file" in refused(text, tmp_path)
    (tmp_path / "latin.toml").write_bytes(b'[a]\nsource = "\xe9"')
    assert "not UTF-8" in refused(text.replace("lab", "latin"), tmp_path)
    assert "materials_file" in refused(text.replace('"lab.toml"', "3"), tmp_path)
    assert "materials_file[1]" in refused(text.replace('"lab.toml"', "[3]"), tmp_path)
    assert "materials_file" in refused(text.replace('"lab.toml"', '{a = "b"}'), tmp_path)


def test_one_name_twice(tmp_path: Path) -> None:
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    text = 'materials_file = ["lab.toml", "lab.toml"]\n' + WIRE.format("bent")
    assert "describes 'InAs', which lab.toml describes too" in refused(text, tmp_path)
    inline = 'materials_file = "lab.toml"\n' + WIRE.format("bent") + "[materials.bent]\nelectron_mass = 0.1\n"
    assert "describes 'bent', which the wire file describes too" in refused(inline, tmp_path)


IN_THE_WIRE = {
    "unknown key of a valley": (
        "zone_boundary = true",
        "zone_border = true",
        ("valleys[2].zone_border", "zone_boundary"),
    ),
    "a mass is missing": (", transverse_mass = 0.19", "", ("materials.own.valleys[1].transverse_mass", "is missing")),
    "no name": ('name = "Delta", ', "", ("valleys[1].name", "is missing")),
    "two of a name": ('"L"', '"Delta"', ("materials.own.valleys", "names of their own")),
    "axis of two": ("[1, 1, 1]", "[1, 1]", ("valleys[2].axis", "three whole numbers")),
    "axis zero": ("[1, 1, 1]", "[0, 0, 0]", ("valleys[2].axis", "must not be zero")),
    "axis with halves": ("[1, 1, 1]", "[0.5, 1, 1]", ("valleys[2].axis[1]", "whole number")),
    "edge without unit": ('"0.8 eV"', "0.8", ("valleys[2].edge", '"0.8 eV"')),
    "boundary is a text": ("= true", '= "yes"', ("valleys[2].zone_boundary", "true or false")),
    "a mass too": ("permittivity = 11.7", "electron_mass = 0.3", ("materials.own.electron_mass", "beside valleys")),
    "alpha": ("nonparabolicity = 0.5", "nonparabolicity = -0.5", ("valleys[1].nonparabolicity", "between 0")),
    "extends nothing known": ('source = "invented"', 'extends = "GaAz"', ("materials.own.extends", "'GaAs'")),
    "no orientation": ("[orientation]\naxis = [1, 1, 0]\nup = [0, 0, 1]\n", "", ("orientation: is missing", "own")),
    "up": ("up = [0, 0, 1]", "up = [0, 1, 1]", ("orientation.up", "the nearest is up")),
    "axis of the wire": ("axis = [1, 1, 0]", "axis = [0, 0, 0]", ("orientation.axis", "must not be zero")),
    "half of an index": ("up = [0, 0, 1]", "up = [0, 0, 1.5]", ("orientation.up[3]", "whole number")),
}


@pytest.mark.parametrize(("old", "new", "words"), IN_THE_WIRE.values(), ids=IN_THE_WIRE.keys())
def test_one_line_names_the_key_of_a_valley(old: str, new: str, words: tuple[str, ...]) -> None:
    text = WIRE.format("own") + SILICON
    assert old in text
    message = refused(text.replace(old, new, 1))
    assert [word for word in words if word not in message] == []


def test_a_python_material_is_written_out_whole() -> None:
    """Materials that Python code makes, the table's own among them, come back through the text."""
    for name in ("Si", "GaAs", "InSb", "Al0.5Ga0.5As", "GaN", "SiO2"):
        material = look_up(name, 4.2)
        problem = parse(WIRE.format("GaAs").replace("[1, 1, 0]", "[1, 0, 0]"))
        given = Problem(
            "wire", problem.section, problem.carriers, materials=(material,), orientation=problem.orientation
        )
        back = wirefile.parse(wirefile.dump(given))
        assert back.digest == given.digest
        one, other = back.materials[0], given.materials[0]
        assert one.valleys == other.valleys
        assert one.edges == other.edges
        assert (one.crystal, one.c_over_a, one.insulator) == (other.crystal, other.c_over_a, other.insulator)


def test_materials_of_a_file_by_themselves(tmp_path: Path) -> None:
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    found = material_file.read("--file", tmp_path / "lab.toml")
    assert [m.name for m in found] == ["InAs", "glass", "bent"]
    assert all(isinstance(m, Material) and m.given_in == "lab.toml" for m in found)


ODD: list[Any] = [
    *(0, 1, -1, 1e300, 1e-300, float("nan"), float("inf"), True, "", "x", "0.1 eV", "1e999 eV", "nan eV", "6 nm", "eV"),
    *([], {}, [[]], [1, 0, 0], [0, 0, 0], [1.5, 0, 0], ["a"], [{}], [{"name": "X"}], 2**70, "\u0000", "x" * 2000),
    *([[1, 0, 0], [0, 1, 0], [0, 0, 1]], [[1, 0, 0], [0, 1, 0], [0, 0]], "wurtzite", "GaAs", "any", -0.0),
]


def changed(table: dict[str, Any], pick: random.Random) -> dict[str, Any]:
    """A copy of nested tables with one key, value or entry replaced, dropped or added."""
    found = json.loads(json.dumps(table))
    place: Any = found
    while True:
        keys = list(place) if isinstance(place, dict) else list(range(len(place)))
        if not keys:
            break
        key = pick.choice(keys)
        if isinstance(place[key], dict | list) and place[key] and pick.random() < 0.7:
            place = place[key]
            continue
        action = pick.random()
        if action < 0.15:
            del place[key]
        elif action < 0.3 and isinstance(place, dict):
            place[pick.choice(material_file.MATERIAL_KEYS + material_file.VALLEY_KEYS + ("", "mass"))] = pick.choice(
                ODD
            )
        else:
            place[key] = pick.choice(ODD)
        break
    return dict(found)


def written(value: Any) -> str:
    """Any value as inline TOML."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{json.dumps(k)} = {written(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(written, value)) + "]"
    if isinstance(value, bool):
        return str(value).lower()
    return json.dumps(value) if isinstance(value, str) else repr(value)


def test_twelve_hundred_changed_material_files(tmp_path: Path) -> None:
    """A file is either read, and then every material resolves or is refused in one line, or refused in one line."""
    good = tomllib.loads(LAB) | tomllib.loads(SILICON)["materials"]
    pick, path, read = random.Random(5), tmp_path / "lab.toml", 0
    refusals: list[str] = []
    for k in range(1200):
        data = changed(changed(good, pick) if k % 3 == 0 else good, pick)
        text = "".join(f"{json.dumps(key)} = {written(value)}\n" for key, value in data.items())
        if k % 4 == 0:  # and the text itself damaged
            at = pick.randrange(len(text))
            text = text[:at] + pick.choice(["", "\u0007", "]", '"', "=", "é", "\n"]) + text[at + pick.randrange(3) :]
        path.write_text(text, encoding="utf-8")
        try:
            found = material_file.read("--file", path)
            for material in found:
                resolved(material, pick.choice([0.0, 4.2, 300.0]))
        except InputError as error:
            refusals.append(str(error))
            continue
        read += 1
        if read % 3 == 0:
            problem = parse(f"materials_file = {written(str(path))}\n" + WIRE.format("GaAs"), tmp_path)
            back = wirefile.parse(wirefile.dump(problem))
            assert back.digest == problem.digest, text
            assert back.materials == problem.materials, text
    assert all(message.isprintable() and len(message) < 800 for message in refusals)
    assert len(refusals) > 100
    assert read > 100
