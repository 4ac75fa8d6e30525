"""Broken wire files: one line that names file and key, exit code 2, and never anything but an `InputError`."""

from __future__ import annotations

import copy
import json
import math
import random
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from wiresolve.describe import wirefile
from wiresolve.describe.problem import Problem
from wiresolve.errors import InputError

GEOMETRIES = sorted((Path(__file__).resolve().parents[1] / "geometries").glob("*.toml"))
GOOD = """
title = "good"
[section]
shape = "circle"
diameter = "10 nm"
material = "probe"
[[section.layers]]
thickness = "2 nm"
material = "wall"
[materials.probe]
electron_mass = 0.05
conduction_edge = "0 eV"
source = "invented"
[materials.wall]
inverse_mass = [[10, 1, 0], [1, 10, 0], [0, 0, 10]]
conduction_edge = "0.3 eV"
[potential]
field = ["0.01 V/nm", "0 V/nm"]
[orientation]
axis = [1, 1, 0]
up = [0, 0, 1]
[carriers]
kind = "electrons"
temperature = "300 K"
[accuracy]
subbands = 4
energy = "0.1 meV"
"""
LAYER = '[[section.layers]]\nthickness = "2 nm"\nmaterial = "wall"\n'
CIRCLE = 'shape = "circle"\ndiameter = "10 nm"'


def polygon(points: str) -> tuple[str, str]:
    """A change of the good file's circle to a polygon without the layer's mitre in the way."""
    return CIRCLE, f'shape = "polygon"\nunit = "nm"\npoints = {points}'


# What is replaced by what, and what the message must hold.
CASES: dict[str, tuple[str, str, tuple[str, ...]]] = {
    "unknown key": ("diameter =", "diametre =", ("section.diametre", "a circle", "'diameter'")),
    "unknown table": ("[accuracy]", "[acuracy]", ("acuracy", "'accuracy'")),
    "unknown key of a layer": ("thickness =", "thicknes =", ("section.layers[1].thicknes", "'thickness'")),
    "unknown key of a material": ("electron_mass", "electron_mas", ("materials.probe.electron_mas", "'electron_mass'")),
    "another shape's key": (CIRCLE, f'{CIRCLE}\nwidth = "3 nm"', ("section.width", "a circle", "diameter")),
    "unknown shape": ('"circle"', '"circel"', ("section.shape", "'circle'", '"hexagon"')),
    "no shape": ('shape = "circle"\n', "", ("section.shape", "is missing")),
    "shape is a number": ('"circle"', "7", ("section.shape", "got 7")),
    "no size": ('diameter = "10 nm"\n', "", ("section.diameter", "is missing", 'diameter = "10 nm"')),
    "outline of nowhere": (CIRCLE, 'shape = "outline"\nfile = "a.csv"', ("section.file", "no folder to look in")),
    "mesh of a material": (CIRCLE, 'shape = "mesh"', ("section.material", "no key of a mesh")),
    "potential of nowhere": ("[potential]", '[potential]\nfile = "v.csv"', ("potential.file", "no folder to look in")),
    "bare number": ('"10 nm"', "10", ("section.diameter", "needs its unit", 'diameter = "10 nm"')),
    "bare energy": ('"0.1 meV"', "0.1", ("accuracy.energy", 'energy = "0.1 meV"')),
    "unitless accuracy": ('"0.1 meV"', '"0.1"', ("accuracy.energy", 'energy = "0.1 meV"')),
    "accuracy in nm": ('"0.1 meV"', '"0.1 nm"', ("accuracy.energy", 'energy = "0.1 meV"')),
    "bare Fermi level": ("subbands", "fermi_level = 0.1\nsubbands", ("accuracy.fermi_level", "[carriers]")),
    "decimal comma": ('"10 nm"', '"20,5 nm"', ("section.diameter", "decimal point", 'diameter = "20.5 nm"')),
    "length in um": ('"10 nm"', '"20 um"', ("section.diameter", "got '20 um'", "10000 nm")),
    "layer in um": ('"2 nm"', '"0.6 um"', ("section.layers[1].thickness", "got '0.6 um'")),
    "temperature in mK": ('"300 K"', '["4 K", "3e6 mK"]', ("carriers.temperature", "got '3e6 mK'")),
    "layers at the top": ("[[section.layers]]", "[[layers]]", ("layers: ", "write [[section.layers]]")),
    "patches at the top": ("[[section.layers]]", "[[patches]]", ("patches: ", "write [[section.patches]]")),
    "radius": ("diameter =", "radius =", ("section.radius", "did you mean 'diameter'? (twice the radius)")),
    "size of a circle": ("diameter =", "size =", ("section.size", "did you mean 'diameter'?")),
    "width of a circle": ("diameter =", "width =", ("section.width", "did you mean 'diameter'?")),
    "diameter of a hexagon": (
        '"circle"',
        '"hexagon"',
        ("section.diameter", "did you mean 'across_flats' or 'across_corners'?"),
    ),
    "title in a table": (CIRCLE, f'{CIRCLE}\ntitle = "late"', ("section.title", "above the first table")),
    "temp": ("temperature =", "temp =", ("carriers.temp", "did you mean 'temperature'?")),
    "mass": ("electron_mass", "mass", ("materials.probe.mass", "did you mean 'electron_mass'?")),
    "the start of a key": ("[accuracy]", "fermi = 3\n[accuracy]", ("carriers.fermi", "did you mean 'fermi_level'?")),
    "missing unit": ('"10 nm"', '"10"', ("section.diameter", "unit is missing")),
    "wrong unit": ('"10 nm"', '"10 eV"', ("section.diameter", "must be a length", "unit of energy")),
    "unknown unit": ('"10 nm"', '"10 parsec"', ("section.diameter", "'parsec'", "nm")),
    "negative": ('"10 nm"', '"-10 nm"', ("section.diameter", "must be positive")),
    "zero": ('"10 nm"', '"0 nm"', ("section.diameter", "must be positive")),
    "one metre": ('"10 nm"', '"1 m"', ("section.diameter", "10000 nm")),
    "below an atom": ('"10 nm"', '"1e-6 nm"', ("section.diameter", "0.1 nm")),
    "length is nan": ('"10 nm"', '"nan nm"', ("section.diameter", "finite")),
    "rotation of a circle": (CIRCLE, f'{CIRCLE}\nrotation = "400 deg"', ("section.rotation", "360")),
    "corner of a circle": (CIRCLE, f'{CIRCLE}\ncorner_radius = "1 nm"', ("section.corner_radius", "no corners")),
    "mass is nan": ("0.05", "nan", ("materials.probe.electron_mass", "finite")),
    "mass is inf": ("0.05", "inf", ("materials.probe.electron_mass", "finite")),
    "mass is negative": ("0.05", "-0.05", ("materials.probe.electron_mass", "positive")),
    "mass is text": ("0.05", '"heavy"', ("materials.probe.electron_mass", "number", "'heavy'")),
    "mass is a huge number": ("0.05", "9" * 4000, ("beyond the 64 bits",)),
    "inverse mass not symmetric": ("[1, 10, 0]", "[2, 10, 0]", ("materials.wall.inverse_mass", "symmetric")),
    "inverse mass not definite": ("[0, 0, 10]", "[0, 0, -10]", ("materials.wall.inverse_mass", "positive definite")),
    "inverse mass of the wrong size": ("[0, 0, 10]]", "]", ("materials.wall.inverse_mass", "3 x 3")),
    "no material": ('material = "probe"\n', "", ("section.material", "is missing")),
    "unknown material": ('material = "probe"', 'material = "GaAz"', ("section.material", "'GaAs'")),
    "nearest own material": ('material = "probe"', 'material = "prob"', ("section.material", "'probe'")),
    "alloy fraction": ('material = "probe"', 'material = "Al1.7Ga-0.7As"', ("section.material", "between 0 and 1")),
    "no common scale": ('material = "probe"', 'material = "GaAs"', ("section", "no common offset scale")),
    "no edge": ('conduction_edge = "0.3 eV"', "", ("materials.wall.conduction_edge", "one scale")),
    "all void": (f'material = "probe"\n{LAYER}', 'material = "void"\n', ("section.material", "nothing is left")),
    "all excluded": (
        f'material = "probe"\n{LAYER}',
        f'material = "void"\n{LAYER}carriers = "excluded"\n',
        ("section.material", "nothing is left"),
    ),
    "patch over all": (
        LAYER,
        f'{LAYER}[[section.patches]]\nshape = "circle"\ndiameter = "15 nm"\nmaterial = "void"\n',
        ("section.patches", "nothing for carriers"),
    ),
    "layer too thin": ('"2 nm"', '"1e-9 nm"', ("section.layers[1].thickness", "0.05 nm")),
    "layer negative": ('"2 nm"', '"-2 nm"', ("section.layers[1].thickness", "positive")),
    "layer too thick": ('"2 nm"', '"600 nm"', ("section.layers[1].thickness", "50 times")),
    "layers is one table": ("[[section.layers]]", "[section.layers]", ("section.layers", "[[section.layers]]")),
    "layers is a number": (LAYER, "layers = 3\n", ("section.layers", "list of tables")),
    "section is a list": ("[section]", "[[section]]", ("section", "list of tables")),
    "bow-tie": (*polygon("[[0,0],[10,10],[10,0],[0,10]]"), ("section.points", "point 1 to 2", "point 3 to 4")),
    "two points": (*polygon("[[0,0],[10,10]]"), ("section.points", "at least 3")),
    "collinear": (*polygon("[[0,0],[5,5],[10,10]]"), ("section.points", "one line")),
    "repeated point": (*polygon("[[0,0],[10,0],[10,0],[0,10]]"), ("section.points", "points 2 and 3 coincide")),
    "closed by hand": (*polygon("[[0,0],[10,0],[0,10],[0,0]]"), ("section.points", "leave the last point out")),
    "points with units": (*polygon('[["0 nm",0],[10,0],[0,10]]'), ("section.points[1]", "'unit'")),
    "points are numbers": (*polygon("[1,2,3]"), ("section.points[1]", "pair")),
    "points are text": (*polygon('"many"'), ("section.points", "pairs")),
    "point is inf": (*polygon("[[0,0],[10,0],[inf,10]]"), ("section.points[3]", "finite")),
    "points without unit": (
        CIRCLE,
        'shape = "polygon"\npoints = [[0,0],[10,0],[0,10]]',
        ("section.unit", "is missing"),
    ),
    "points in eV": (
        CIRCLE,
        'shape = "polygon"\nunit = "eV"\npoints = [[0,0],[10,0],[0,10]]',
        ("section.unit", "length"),
    ),
    "zero states": ("subbands = 4", "subbands = 0", ("accuracy.subbands", "1 to 500")),
    "states text": ("subbands = 4", 'subbands = "many"', ("accuracy.subbands", "'many'")),
    "states fraction": ("subbands = 4", "subbands = 4.5", ("accuracy.subbands", "4.5")),
    "states true": ("subbands = 4", "subbands = true", ("accuracy.subbands", "True")),
    "a million states": ("subbands = 4", "subbands = 1000000", ("accuracy.subbands", "1000000")),
    "accuracy zero": ('"0.1 meV"', '"0 meV"', ("accuracy.energy", "positive")),
    "accuracy silly": ('"0.1 meV"', '"1e-40 meV"', ("accuracy.energy", "1e-09 eV")),
    "negative temperature": ('"300 K"', '"-3 K"', ("carriers.temperature", "0 K")),
    "no temperature": ('temperature = "300 K"\n', "", ("carriers.temperature", "is missing")),
    "temperature of many": ('"300 K"', '["300 K", "x"]', ("carriers.temperature[2]",)),
    "holes": ('"electrons"', '"holes"', ("carriers.kind", "bands mix")),
    "muons": ('"electrons"', '"muons"', ("carriers.kind", "'muons'")),
    "no carriers": ('[carriers]\nkind = "electrons"\ntemperature = "300 K"\n', "", ("carriers", "[carriers]")),
    "not orthogonal": ("[0, 0, 1]", "[0, 1, 0]", ("orientation.up", "up = [-1, 1, 0]")),
    "no axis": ("[1, 1, 0]", "[0, 0, 0]", ("orientation.axis", "zero")),
    "axis of texts": ("axis = [1, 1, 0]", 'axis = ["1", 1, 0]', ("orientation.axis[1]", "whole number")),
    "field of one": ('["0.01 V/nm", "0 V/nm"]', '["0.01 V/nm"]', ("potential.field", "list of two")),
    "field in V": ('"0.01 V/nm"', '"0.01 V"', ("potential.field[1]", "unit of voltage")),
    "harmonic half": ("[potential]", '[potential]\nharmonic = {x = "5 meV"}', ("potential.harmonic.y", "is missing")),
    "title is a number": ('"good"', "3", ("title", "text")),
    "offset without unit": (CIRCLE, f"{CIRCLE}\noffset = 0.1", ("section.offset", 'offset = "0.1 eV"')),
    "carriers misspelt": (CIRCLE, f'{CIRCLE}\ncarriers = "exclude"', ("section.carriers", "'excluded'")),
    "a date": ('"10 nm"', "2001-01-01", ("section.diameter", "quotes")),
    "not TOML": ("[section]", "[section", ("is not TOML", "line")),
    "duplicate key": (CIRCLE, f'shape = "circle"\n{CIRCLE}', ("holds shape twice, the second time in line",)),
    "bare accuracy in eV": ('"0.1 meV"', "1e-4", ("accuracy.energy", 'energy = "0.1 meV"')),
    "Fermi energy": ("[accuracy]", "fermi_energy = 3\n[accuracy]", ("carriers.fermi_energy", "'fermi_level'")),
    "square": ('"circle"', '"square"', ("section.shape", "did you mean 'rectangle'?")),
    "ampere for Angstrom": ('"10 nm"', '"100 A"', ("section.diameter", "use Angstrom")),
}


def refusal(text: str, name: str = "wire.toml") -> str:
    """The message with which a wire file is refused, after the checks that hold for every refusal."""
    with pytest.raises(InputError) as caught:
        wirefile.parse(text, name=name)
    assert caught.value.exit_code == 2
    message = str(caught.value)
    assert message.startswith(name)
    assert len(message) < 600
    assert message.isprintable()  # hence one line
    return message


@pytest.mark.parametrize("key", ["glow", "colour", "note", "rim", "edge", "mesh_size"])
def test_nothing_far_off_is_guessed(key: str) -> None:
    assert "did you mean" not in refusal(GOOD.replace(CIRCLE, f"{CIRCLE}\n{key} = 1"))


def test_the_good_file_is_good() -> None:
    assert isinstance(wirefile.parse(GOOD), Problem)


@pytest.mark.parametrize(("old", "new", "words"), CASES.values(), ids=CASES.keys())
def test_one_line_that_names_the_key(old: str, new: str, words: tuple[str, ...]) -> None:
    assert old in GOOD
    message = refusal(GOOD.replace(old, new, 1))
    assert [word for word in words if word not in message] == []


def test_the_field_is_the_path_of_the_key() -> None:
    assert refusal(GOOD.replace('"2 nm"', '"2"')).startswith(
        "wire.toml: section.layers[1].thickness: the unit is missing"
    )
    assert refusal('section = 3\n[carriers]\ntemperature = "4 K"').startswith("wire.toml: section: must be one table")
    assert "\n" not in refusal('"a\\nb\\u202e" = 3')
    assert refusal("", "a/b.toml").startswith("a/b.toml: is empty")


@pytest.mark.parametrize("depth", [500, 100_000])
def test_deep_nesting(depth: int) -> None:
    refusal("x = " + "[" * depth + "]" * depth)
    refusal("x" + ".x" * depth + " = 1")


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    def read(path: Path) -> str:
        with pytest.raises(InputError) as caught:
            wirefile.read(path)
        message = str(caught.value)
        assert message.startswith(str(path))
        assert "\n" not in message
        return message

    assert "no such file" in read(tmp_path / "missing.toml")
    assert "is no file" in read(tmp_path)
    latin, empty, binary, large = (tmp_path / f"{name}.toml" for name in ("latin", "empty", "binary", "large"))
    latin.write_bytes('title = "\xe9"'.encode("latin-1"))
    assert "not UTF-8" in read(latin)
    empty.write_text(" \n\t\n")
    assert "is empty" in read(empty)
    binary.write_bytes(b"\x00\x01\x02")
    assert "not TOML" in read(binary)
    with large.open("wb") as file:
        file.truncate(100_000_000)  # sparse: takes no space
    assert "100.0 MB" in read(large)
    good = tmp_path / "good.toml"
    good.write_bytes(b"\xef\xbb\xbf" + GOOD.encode())
    assert wirefile.read(good).title == "good"  # a byte-order mark is no fault


# Wire files changed at random: what values and keys are changed to.
PIECES = [
    *(
        "",
        "nm",
        "10",
        "0 nm",
        "-3 nm",
        "7 nm",
        "1e-3 nm",
        "1e400 nm",
        "nan eV",
        "0.3 eV",
        "4 K",
        "1 m",
        "5 deg",
        "x" * 500,
    ),
    *("void", "hard wall", "GaAs", "AlGaAs", "Al2Ga-1As", "Al0.3Ga0.7As", "InSb", "excluded", "\u202e\n", "\u00b5"),
    *("circle", "hexagon", "polygon", "triangle", "mesh", 0, 1, -1, 2, 7, 500, 10**9, 2**62, -(2**63), True, False),
    *(
        0.5,
        -0.0,
        1e-300,
        1e300,
        math.nan,
        math.inf,
        -math.inf,
        [],
        [0],
        [1, 2],
        [0, 0, 1],
        [1.5, 2],
        [[[[]]]],
        [[], []],
    ),
    *([[0, 0], [9, 0], [0, 9]], [[1, 2, 3]] * 3, ["1 nm", "2 nm"], ["1 K", "1 K"], [{}], {}, {"shape": "circle"}),
    *({"x": "1 meV"}, {"bottom": "0 nm"}, {"rim": "3 nm"}),
]
KEYS = [
    *("shape", "material", "diameter", "width", "height", "points", "unit", "corner_radius", "rotation", "center"),
    *(
        "layers",
        "patches",
        "thickness",
        "sides",
        "carriers",
        "offset",
        "outside",
        "lattice_temperature",
        "electron_mass",
    ),
    *("inverse_mass", "harmonic", "temperature", "fermi_level", "subbands", "energy", "axis", "up", "valleys"),
    *("", "a.b", "\u043a", "x" * 300),
]


def written(value: object) -> str:
    """Any value as inline TOML."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{json.dumps(k, ensure_ascii=False)} = {written(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(written, value)) + "]"
    if isinstance(value, bool):
        return str(value).lower()
    return json.dumps(value, ensure_ascii=False) if isinstance(value, str) else repr(value)


def places(value: Any) -> Iterator[tuple[Any, Any]]:
    """All (container, key) of a nested value."""
    for key in list(value) if isinstance(value, dict) else range(len(value)):
        yield value, key
        if isinstance(value[key], dict | list):
            yield from places(value[key])


def changed_value(value: object, chance: random.Random) -> object:
    """A value near the given one, or any other."""
    if chance.random() < 0.4:
        if isinstance(value, str) and " " in value and value.split()[0].replace(".", "").isdigit():
            number = float(value.split()[0]) * 10 ** chance.uniform(-4, 4) * chance.choice([1, 1, 1, -1, 0])
            return f"{number:.6g} {value.split(None, 1)[1]}"
        if isinstance(value, int | float) and not isinstance(value, bool):
            return value * chance.choice([-1, 0.5, 2, 3, 1.0001, 10**6]) + chance.choice([0, 0, 1])
    return copy.deepcopy(chance.choice(PIECES))


def changed_data(data: dict[str, Any], chance: random.Random) -> str:
    """A valid TOML text with one to three values or keys of `data` changed."""
    data = copy.deepcopy(data)
    for _ in range(chance.randint(1, 3)):
        container, key = chance.choice(list(places(data)))
        act = chance.random()
        if act < 0.6:
            container[key] = changed_value(container[key], chance)
        elif act < 0.75:
            del container[key]
        elif isinstance(container, dict):
            container[chance.choice(KEYS)] = changed_value(container[key], chance)
        else:
            container.append(copy.deepcopy(container[key]))
        if not data:
            break
    return "\n".join(f"{json.dumps(k, ensure_ascii=False)} = {written(v)}" for k, v in data.items()) or "# nothing"


def changed_text(text: str, chance: random.Random) -> str:
    """The text with a few characters or lines changed, mostly no TOML any more."""
    for _ in range(chance.randint(1, 4)):
        at = chance.randrange(len(text))
        until = min(len(text), at + chance.choice([1, 1, 3, 20, 200]))
        act = chance.randrange(5)
        if act == 0:
            text = text[:at] + text[until:]
        elif act == 1:
            text = text[:at] + chance.choice('"[]{}=.,#\n\t\x00\x7f5e-é\u2028') + text[at:]
        elif act == 2:
            text = text[:at] + text[at:until] * 2 + text[until:]
        elif act == 3:
            lines = text.splitlines(keepends=True)
            chance.shuffle(lines)
            text = "".join(lines)
        else:
            text = text[:until]
        text = text or "\n"
    return text


def test_two_thousand_changed_wire_files() -> None:
    chance = random.Random(20)
    originals = [GOOD, *(path.read_text(encoding="utf-8") for path in GEOMETRIES)]
    parsed = [tomllib.loads(text) for text in originals]
    valid = understood = 0
    for trial in range(2400):
        which = chance.randrange(len(originals))
        text = changed_text(originals[which], chance) if trial % 2 else changed_data(parsed[which], chance)
        if trial % 2 == 0:
            tomllib.loads(text)
            valid += 1
        try:
            problem = wirefile.parse(text, name="changed.toml")
        except InputError as error:
            message = str(error)
            assert message.startswith("changed.toml"), text
            assert message.isprintable(), text
        else:
            understood += 1
            assert wirefile.parse(wirefile.dump(problem)).digest == problem.digest, text
    assert valid >= 1000
    assert 100 < understood < 1200  # the changes neither miss everything nor break everything
