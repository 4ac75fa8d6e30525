"""The JSON Schemas: whatever the program reads and writes fits them, and what it refuses does not."""

from __future__ import annotations

import copy
import functools
import json
import random
import tomllib
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.gate_sweeps import WARNED, PlateSweep, swept_problem
from tests.synthetic import charged_result, core_shell_result
from wiresolve.describe import gate_tables, material_file, shape_tables, wire_keys, wirefile
from wiresolve.describe.key_kinds import Either, Inner, Key, Kind, Named, Quantity, Row
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.errors import InputError
from wiresolve.gate_curve import gate_curve
from wiresolve.output import schema
from wiresolve.output.gate_curve_tables import gate_curve_json
from wiresolve.output.tables import result_json
from wiresolve.solve import solve
from wiresolve.units import UNITS, parse_quantity

GEOMETRIES = sorted((Path(__file__).parents[1] / "geometries").glob("*.toml"))
WIRE = schema.wire_schema()
VALIDATOR = jsonschema.Draft202012Validator(WIRE)
GOOD = """title = "probe"
[section]
shape = "circle"
diameter = "10 nm"
material = "GaAs"
[[section.layers]]
thickness = "4 nm"
material = "Al0.3Ga0.7As"
[carriers]
temperature = ["77 K", "300 K"]
[accuracy]
subbands = 4
"""


def flaws(text: str) -> list[str]:
    """Where a wire file does not fit the schema."""
    return [error.json_path for error in VALIDATOR.iter_errors(tomllib.loads(text))]


@pytest.mark.parametrize("kind", schema.KINDS)
def test_schemas_are_schemas(kind: str) -> None:
    made = schema.schema(kind)
    assert made["$schema"].endswith("2020-12/schema")
    jsonschema.Draft202012Validator.check_schema(made)
    # No keyword is used that older editors would pass over.
    later = ("$defs", "$ref", "prefixItems", "unevaluatedProperties", "dependentRequired", "dependentSchemas")
    assert [word for word in later if f'"{word}"' in json.dumps(made)] == []


def described(part: Any, path: str = "") -> Iterator[tuple[str, str]]:
    """Every key of a schema with its description; those that only narrow another part have none to give."""
    if isinstance(part, Mapping):
        for key, inner in part.get("properties", {}).items():
            yield f"{path}.{key}", inner.get("description", "")
        for key, inner in part.items():
            if key not in ("allOf", "if", "then", "else"):
                yield from described(inner, f"{path}.{key}")
    elif isinstance(part, list):
        for inner in part:
            yield from described(inner, path)


@pytest.mark.parametrize("kind", schema.KINDS)
def test_every_key_is_described(kind: str) -> None:
    found = list(described(schema.schema(kind)))
    assert len(found) > 60
    assert [path for path, text in found if not text.strip(" .")] == []


@pytest.mark.parametrize("path", GEOMETRIES, ids=lambda path: path.stem)
def test_geometries_fit(path: Path) -> None:
    assert flaws(path.read_text(encoding="utf-8")) == []


@pytest.mark.parametrize("path", GEOMETRIES, ids=lambda path: path.stem)
def test_resolved_wire_files_fit(path: Path) -> None:
    """`input.toml` of a result writes every default out, with exact numbers."""
    assert flaws(wirefile.dump(wirefile.read(path))) == []


@pytest.mark.parametrize(
    ("old", "new", "where"),
    [
        ("diameter =", "diametre =", "$.section"),
        ('"10 nm"', "10", "$.section.diameter"),
        ('"10 nm"', '"10"', "$.section.diameter"),
        ('"10 nm"', '"10 eV"', "$.section.diameter"),
        ('"10 nm"', '"-10 nm"', "$.section.diameter"),
        ('"10 nm"', '"0 nm"', "$.section.diameter"),
        ('"4 nm"', "4.0", "$.section.layers[0].thickness"),
        ("thickness =", "thicknes =", "$.section.layers[0]"),
        ('["77 K", "300 K"]', "[77, 300]", "$.carriers.temperature"),
        ('["77 K", "300 K"]', '["77 K", "77 K"]', "$.carriers.temperature"),
        ('"circle"', '"circel"', "$.section.shape"),
        ('"circle"', '"ellipse"', "$.section"),
        ("[accuracy]", "[acuracy]", "$"),
        ("subbands = 4", "subbands = 4.5", "$.accuracy.subbands"),
        ("subbands = 4", "subbands = 0", "$.accuracy.subbands"),
        ("subbands = 4", 'energy = "0.1 nm"', "$.accuracy.energy"),
        ('material = "GaAs"', "", "$.section"),
        ('thickness = "4 nm"', "", "$.section.layers[0]"),
        ("[carriers]", '[carriers]\nkind = "holes"', "$.carriers.kind"),
        ("[carriers]", "[materials.GaAs]\nelectron_mas = 0.07\n[carriers]", "$.materials.GaAs"),
        ("[carriers]", "[materials.GaAs]\nconduction_edge = 0.1\n[carriers]", "$.materials.GaAs.conduction_edge"),
        ("[carriers]", "[potential]\nfield = [0.1, 0]\n[carriers]", "$.potential.field[0]"),
        ("[carriers]", '[[gates]]\nname = "a"\ntouches = "rim"\n[carriers]', "$.gates[0]"),
        ("[carriers]", '[[gates]]\nname = "a"\nlineup_voltage = 0\n[carriers]', "$.gates[0].lineup_voltage"),
    ],
)
def test_slips_do_not_fit(old: str, new: str, where: str) -> None:
    assert flaws(GOOD) == []
    assert old in GOOD
    text = GOOD.replace(old, new, 1)
    assert where in flaws(text)
    with pytest.raises(InputError):
        wirefile.parse(text)


OTHERS: tuple[Any, ...] = (
    *("10 nm", "0 nm", "-3 nm", "+4nm", "0.1eV", "5 meV", "77 K", "0 K", "30 deg", "1e18 cm^-3", "0.5 V", "500 ohm"),
    *("GaAs", "void", "rim", "excluded", "partial", "full", "parabolic", "local density", "hard wall", "circle"),
    *(0, 1, 2.5, -1, True, [], [1, 1, 0], ["77 K", "300 K"], ["3 nm", "0 nm"], [{"from": "30 deg", "to": "90 deg"}]),
)
"""Values that stand somewhere in a wire file."""


def places(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """The paths of all keys and entries."""
    inner = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, part in inner:
        yield (*path, key)
        yield from places(part, (*path, key))


def test_whatever_the_reader_takes_fits() -> None:
    """Wire files changed at random: the schema refuses none that the reader takes."""
    chance, taken = random.Random(5), 0
    originals = [tomllib.loads(path.read_text(encoding="utf-8")) for path in GEOMETRIES if "mesh" not in path.stem]
    for _ in range(500):
        data = copy.deepcopy(chance.choice(originals))
        *path, last = chance.choice(list(places(data)))
        table = functools.reduce(lambda part, key: part[key], path, data)
        if isinstance(table[last], dict) and isinstance(table, list):
            continue  # a list of tables can hold nothing else
        if chance.random() < 0.3:
            del table[last]
        elif chance.random() < 0.6 or not isinstance(table, dict):
            table[last] = chance.choice(OTHERS)
        else:
            table[chance.choice(sorted(names(EVERY_KEY)))] = chance.choice(OTHERS)
        lines: list[str] = []
        wirefile._write(lines, "", data)
        text = "\n".join(lines)
        try:
            wirefile.parse(text, GEOMETRIES[0].parent)
        except InputError:
            continue
        taken += 1
        assert flaws(text) == [], text
    assert taken > 60


def dimensions(kind: Kind) -> Iterator[Quantity]:
    """The quantities in what may stand behind a key."""
    match kind:
        case Quantity():
            yield kind
        case Row() | Named():
            yield from dimensions(kind.of)
        case Either():
            for one in kind.kinds:
                yield from dimensions(one)
        case _:
            pass


EVERY_KEY: tuple[Key, ...] = (
    *wire_keys.TOP,
    *wire_keys.SHAPE,
    *wire_keys.OUTLINE,
    *wire_keys.MESH,
    *wire_keys.SECTION_OWN,
    *(key for table in wire_keys.TABLES.values() for key in table),
)
QUANTITIES = sorted({q for key in EVERY_KEY for q in dimensions(key.kind)}, key=repr)
NUMBERS = st.from_regex(r"[+-]?([0-9]{1,3}\.?[0-9]{0,3}|\.[0-9]{1,3})([eE][+-]?[0-9]{1,2})?", fullmatch=True)
SPACES = st.sampled_from(["", " ", "  "])
ANY_UNIT = st.sampled_from(sorted({unit for units in UNITS.values() for unit in units} | {"", "foot", "n m", "nm2"}))


@given(st.sampled_from(QUANTITIES), NUMBERS, SPACES, ANY_UNIT)
def test_the_pattern_of_a_quantity_is_what_the_reader_takes(
    quantity: Quantity, number: str, space: str, unit: str
) -> None:
    text = f"{number}{space}{unit}"
    fits = jsonschema.Draft202012Validator({"pattern": schema.pattern(quantity)}).is_valid(text)
    try:
        value = parse_quantity(text, quantity.dimension, "field")
    except InputError:
        assert not fits
        return
    # Zero may be written with a minus sign wherever it may be written; numbers below 1e-300 are as good as zero.
    allowed = quantity.signed or value > 0 or (value == 0 and quantity.zero)
    if value == 0 and not (quantity.signed or quantity.zero):
        assert not fits or "e-" in text.lower()
    elif not number.startswith("-") or quantity.signed:
        assert fits == allowed
    else:
        assert not fits


READ = {
    "layer": wirefile.LAYER_KEYS,
    "group": shape_tables.GROUP_KEYS,
    "material": material_file.MATERIAL_KEYS,
    "valley": material_file.VALLEY_KEYS,
    "orientation": wirefile.ORIENTATION_KEYS,
    "carriers": wirefile.CARRIER_KEYS,
    "accuracy": wirefile.ACCURACY_KEYS,
    "potential": wirefile.POTENTIAL_KEYS,
    "harmonic": wirefile.HARMONIC_KEYS,
    "gate": gate_tables.GATE_KEYS,
    "insulator": gate_tables.INSULATOR_KEYS,
    "arc": gate_tables.ARC_KEYS,
    "surface": gate_tables.SURFACE_KEYS,
    "surroundings": gate_tables.SURROUNDINGS_KEYS,
    "slab": gate_tables.SLAB_KEYS,
    "stack end": gate_tables.STACK_END_KEYS,
    "voltages": gate_tables.VOLTAGES_KEYS,
    "transport": gate_tables.TRANSPORT_KEYS,
}
"""The keys that the reader takes, by table."""


def names(keys: tuple[Key, ...]) -> set[str]:
    return {key.name for key in keys}


def test_the_schema_has_the_keys_of_the_reader_and_no_others() -> None:
    assert {name: names(keys) for name, keys in wire_keys.TABLES.items() if name != "patch"} == {
        name: set(keys) for name, keys in READ.items()
    }
    assert names(wire_keys.TOP) == set(wirefile.TOP_KEYS)
    shaped = names((*wire_keys.SHAPE, *wire_keys.OUTLINE, *wire_keys.MESH))
    for own, keys in ((wire_keys.SECTION_OWN, wirefile.SECTION_KEYS), (wire_keys.PATCH, wirefile.PATCH_KEYS)):
        assert names(own) == set(keys)
        every = {key for shape in LENGTH_KEYS for key in shape_tables.keys_of(shape, keys)}
        assert every == shaped | names(own)
    assert set(wire_keys.SHAPES) == set(LENGTH_KEYS) == {*shape_tables.SHAPES, "outline", "mesh"}


def test_no_key_is_described_twice_in_a_table() -> None:
    for keys in (*wire_keys.TABLES.values(), wire_keys.TOP, wire_keys.SHAPE, wire_keys.OUTLINE, wire_keys.MESH):
        assert len(names(keys)) == len(keys)
    for table in {key.kind.table for key in EVERY_KEY if isinstance(key.kind, Inner)} - {"section"}:
        assert table in wire_keys.TABLES


def check(kind: str, text: str) -> set[str]:
    """The keys of an output that fits its schema, and where they stand."""
    data = json.loads(text)
    errors = jsonschema.Draft202012Validator(schema.schema(kind)).iter_errors(data)
    assert [f"{error.json_path}: {error.message}" for error in errors] == []

    def paths(value: Any, path: str) -> Iterator[str]:
        if isinstance(value, Mapping):
            for key, inner in value.items():
                yield f"{path}.{key}"
                yield from paths(inner, f"{path}.{key}")
        elif isinstance(value, list):
            for inner in value:
                yield from paths(inner, f"{path}[]")

    return set(paths(data, "$"))


def documented(part: Mapping[str, Any], path: str = "$") -> Iterator[str]:
    """The keys that a schema names, but for those of names that users choose."""
    for key, inner in part.get("properties", {}).items():
        yield f"{path}.{key}"
        yield from documented(inner, f"{path}.{key}")
    if "items" in part:
        yield from documented(part["items"], f"{path}[]")


def test_results_fit() -> None:
    small = GOOD.replace('["77 K", "300 K"]', '"77 K"').replace("subbands = 4", 'subbands = 2\nenergy = "5 meV"')
    gated = small + '[[gates]]\nname = "wrap"\ntouches = "rim"\nvoltage = "0.1 V"\nlineup_voltage = "0 V"\n'
    head, _, tail = small.replace("GaAs", "InAs").partition("[[section.layers]]")  # its bare surface is warned of
    alone = head.replace('"circle"', '"rectangle"').replace('diameter = "10 nm"', 'width = "9 nm"\nheight = "7 nm"')
    found = check("result", result_json(solve(wirefile.parse(gated))))
    found |= check("result", result_json(solve(wirefile.parse(alone + tail.partition('As"\n')[2])), "marked"))
    # Everything that the schema documents is there in one of them.
    assert sorted(set(documented(schema.result_schema())) - found) == []


def test_results_made_by_hand_fit() -> None:
    """Their verdict is empty, and nothing else is left out."""
    for result in (core_shell_result(4), charged_result()):
        data = json.loads(result_json(result))
        errors = jsonschema.Draft202012Validator(schema.result_schema()).iter_errors(data)
        assert {error.json_path.split(".")[1] for error in errors} <= {"verdict"}


def test_a_result_with_a_key_too_many_does_not_fit() -> None:
    data = json.loads(result_json(core_shell_result(2)))
    validator = jsonschema.Draft202012Validator({**schema.result_schema(), "required": []})
    data["subbands"][0]["energy"] = 1.0
    assert "$.subbands[0]" in {error.json_path for error in validator.iter_errors(data)}


def test_gate_curves_fit() -> None:
    problem = swept_problem(4, drain_V=(0.1,))
    curve = gate_curve(problem, solver=lambda given: PlateSweep(given, failing=(1,), warnings=(WARNED,)))
    found = check("gate-curve", gate_curve_json(curve, "marked"))
    assert sorted(set(documented(schema.gate_curve_schema())) - found) == []
