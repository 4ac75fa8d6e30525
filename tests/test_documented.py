"""What is documented is what there is: every command, option and key of a wire file, and none besides."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path

import click
import jsonschema
import pytest
from click.testing import CliRunner

from wiresolve.cli import EXAMPLE, program
from wiresolve.commands.options import Command
from wiresolve.describe import gate_tables, material_file, shape_tables, wirefile
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.output.schema import wire_schema

REPOSITORY = Path(__file__).resolve().parents[1]
README = (REPOSITORY / "README.md").read_text(encoding="utf-8")
SCRIPTS_OPTIONS = {"--lowest", "--check", "--yes"}
"""Options of the scripts of this repository and of the system, not of the program."""


def block(name: str) -> str:
    """A generated block of the README."""
    (found,) = re.findall(rf"<!-- begin: {name} -->(.*?)<!-- end: {name} -->", README, re.DOTALL)
    return str(found)


def first_cells(name: str) -> list[str]:
    """The code in the first column of a block's tables."""
    return re.findall(r"^\| `([^`]+)` \|", block(name), re.MULTILINE)


def options_of(command: click.Command) -> set[str]:
    """How the options of a command are written, --help apart."""
    return {name for p in command.params if isinstance(p, click.Option) for name in p.opts}


def reference() -> Iterator[tuple[str, str]]:
    """The commands that the README describes, each with its part of the reference."""
    parts = re.split(r"^\*\*`wiresolve ([\w-]+|\[OPTIONS\])[^`]*`\*\*$", block("commands"), flags=re.MULTILINE)[1:]
    yield from zip(parts[::2], parts[1::2], strict=True)


def test_every_command_is_documented_and_every_documented_one_exists() -> None:
    found = dict(reference())
    assert set(found) - {"[OPTIONS]"} == set(program.commands)
    for name, text in found.items():
        command = program if name == "[OPTIONS]" else program.commands[name]
        documented = {
            part.split()[0] for cell in re.findall(r"^\| `(-[^`]+)` \|", text, re.M) for part in cell.split(", ")
        }
        assert documented == options_of(command), name


def test_every_option_that_is_named_exists() -> None:
    real = {name for command in (program, *program.commands.values()) for name in options_of(command)}
    named = set(re.findall(r"(?<![\w-])(--[a-z][\w-]*)", README))
    assert sorted(named - real - SCRIPTS_OPTIONS - {"--help"}) == []


def documented_keys() -> dict[str, set[str]]:
    """The keys that the README's reference has, by block."""
    names = re.findall(r"<!-- begin: (keys of [^>]+) -->", README)
    assert len(names) == 11
    return {name: set(first_cells(name)) for name in names}


def read_keys() -> dict[str, set[str]]:
    """The keys that the reader takes, as they are to be documented, by block."""
    doping = set(gate_tables.DOPING_KEYS)
    sizes = {key for keys in LENGTH_KEYS.values() for key in keys}
    run = {
        "carriers": set(wirefile.CARRIER_KEYS) - {"interaction"},
        "accuracy": wirefile.ACCURACY_KEYS,
        "orientation": wirefile.ORIENTATION_KEYS,
        "potential": wirefile.POTENTIAL_KEYS,
    }
    gates = {
        "gates": gate_tables.GATE_KEYS,
        "surfaces": gate_tables.SURFACE_KEYS,
        "surroundings": gate_tables.SURROUNDINGS_KEYS,
        "voltages": gate_tables.VOLTAGES_KEYS,
        "transport": gate_tables.TRANSPORT_KEYS,
        "carriers": {"interaction"},
    }
    return {
        "keys of the file": set(wirefile.TOP_KEYS),
        "keys of the section": {"shape", *wirefile.SECTION_KEYS} - doping,
        "keys of shapes": {*LENGTH_KEYS, *sizes, "points", "unit", "corner_radius", "rotation"},
        "keys of layers": set(wirefile.LAYER_KEYS) - doping,
        "keys of patches": set(wirefile.PATCH_KEYS) - doping,
        "keys of outlines": set(shape_tables.OUTLINE_KEYS) - {"rotation"},
        "keys of meshes": set(shape_tables.MESH_KEYS) - {"rotation"},
        "keys of materials": set(material_file.MATERIAL_KEYS),
        "keys of valleys": set(material_file.VALLEY_KEYS),
        "keys of the run": {f"{table}.{key}" for table, keys in run.items() for key in keys},
        "keys of gates and charge": doping | {f"{table}.{key}" for table, keys in gates.items() for key in keys},
    }


def test_every_key_is_documented_and_every_documented_one_exists() -> None:
    assert documented_keys() == read_keys()


def test_keys_of_small_tables_are_named_where_they_stand() -> None:
    """Those of tables in one line have no table of their own in the reference."""
    text = "\n".join(block(name) for name in documented_keys())
    small = (gate_tables.INSULATOR_KEYS, gate_tables.SLAB_KEYS, gate_tables.ARC_KEYS, wirefile.HARMONIC_KEYS)
    for key in {key for keys in small for key in keys}:
        assert re.search(rf"[{{ ,]{key}(?=[ ,}}])", text), key


@pytest.mark.parametrize("number", range(len(re.findall(r"^```toml$", README, re.MULTILINE))))
def test_wire_files_of_the_readme_fit_the_schema(number: int) -> None:
    text = re.findall(r"^```toml\n(.*?)^```$", README, flags=re.DOTALL | re.MULTILINE)[number]
    data = tomllib.loads(text)
    schema = wire_schema()
    if "section" not in data and all(isinstance(value, dict) and "source" in value for value in data.values()):
        data, schema = {"materials": data}, {**schema, "required": []}  # a file of materials
    elif "section" not in data:
        schema = {**schema, "required": []}  # some tables of a wire file
    errors = jsonschema.Draft202012Validator(schema).iter_errors(data)
    assert [f"{error.json_path}: {error.message}" for error in errors] == []


@pytest.mark.parametrize("name", program.commands)
def test_help_ends_with_an_example_that_can_be_typed(name: str) -> None:
    command = program.commands[name]
    assert isinstance(command, Command)
    shown = CliRunner().invoke(program, [name, "--help"])
    assert shown.exit_code == 0
    assert shown.stdout.rstrip().splitlines()[-2:] == ["Example:", f"  {command.example}"]
    assert max(map(len, shown.stdout.splitlines())) <= 80
    typed, _, target = command.example.partition(" > ")
    first, second, *rest = shlex.split(typed)
    assert (first, second) == ("wiresolve", name)
    assert target or ">" not in command.example
    with command.make_context(name, list(rest), parent=click.Context(program)) as context:
        assert set(context.params) >= {p.name for p in command.params if isinstance(p, click.Argument)}
    for file in re.findall(r"geometries/\S+", command.example):
        assert (REPOSITORY / file).is_file()


def test_help_of_the_program_lists_the_commands_and_an_example() -> None:
    text = CliRunner().invoke(program, ["--help"]).stdout
    assert text.rstrip().endswith(EXAMPLE)
    listed = re.findall(r"^  ([a-z-]+)  +(\S.*)$", text.partition("Commands:")[2], re.MULTILINE)
    assert [name for name, _ in listed] == list(program.commands)
    assert [said for _, said in listed if said.endswith("...")] == []
    codes = (REPOSITORY / "README.md").read_text(encoding="utf-8").partition("| exit code |")[2].partition("\n\n")[0]
    for code in re.findall(r"^\| (\d+) \|", codes, re.MULTILINE):
        assert re.search(rf"\b{code} [a-z]", " ".join(text.split())), code


def test_options_mean_the_same_everywhere() -> None:
    """The same flag has the same text, but for what is printed or replaced; what works long can be told to be quiet."""
    for name in ("--accuracy", "--strict", "--quiet", "-v", "--no-figures", "--report", "--vtk"):
        texts = {
            p.help
            for c in program.commands.values()
            for p in c.params
            if isinstance(p, click.Option) and name in p.opts
        }
        assert len(texts) == 1, name
    for name in ("solve", "gate-curve", "mesh", "check", "report"):
        assert options_of(program.commands[name]) >= {"--quiet", "-v", "--verbose"}
    for name in ("solve", "gate-curve", "mesh", "check", "materials", "doctor"):
        assert "--json" in options_of(program.commands[name])


def test_the_reference_of_the_readme_is_fresh() -> None:
    run = subprocess.run(
        [sys.executable, "scripts/_readme.py", "--check"], cwd=REPOSITORY, capture_output=True, text=True, check=False
    )
    assert run.returncode == 0, run.stderr
