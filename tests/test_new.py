"""The starting files of `wiresolve new`: each can be solved as it stands, and so can each of its options be taken."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from click.testing import CliRunner

from wiresolve.cli import program
from wiresolve.commands.start import STARTS, starting_file
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.shape_tables import SHAPES, keys_of
from wiresolve.describe.wirefile import SECTION_KEYS
from wiresolve.loading import load
from wiresolve.output.schema import wire_schema
from wiresolve.solve import solve

FILES = {"outline": "outline.csv", "mesh": "section.geo"}
"""The files that two of them name."""
NOT_SHOWN = {"across_corners", "side", "scale", "array"}
"""Keys that stand in a remark because another one excludes them."""


def written(name: str, folder: Path, text: str | None = None) -> Path:
    """A starting file in a folder, with the small file that its own comments show."""
    text = starting_file(name) if text is None else text
    (folder / "my.toml").write_text(text, encoding="utf-8")
    if name in FILES:
        shown = [line[4:] for line in text.splitlines() if line.startswith("#   ")]
        assert len(shown) > 2
        (folder / FILES[name]).write_text("\n".join(shown) + "\n", encoding="utf-8")
    return folder / "my.toml"


def options(text: str) -> Iterator[tuple[str, str]]:
    """The first line of each option, and the file with its "#" taken away: a key, or a table with all of its keys."""
    lines, at = text.split("\n"), 0
    while at < len(lines):
        end = at + 1
        if lines[at].startswith("#["):
            while end < len(lines) and re.match(r"#[\[a-z]", lines[end]):
                end += 1
        elif not re.match(r"#[a-z_]+ =", lines[at]):
            at = end
            continue
        yield lines[at], "\n".join([*lines[:at], *(line[1:] for line in lines[at:end]), *lines[end:]])
        at = end


def test_there_is_one_for_each_shape() -> None:
    assert {*STARTS} == {*SHAPES, "outline", "mesh", "core-shell", "wrap-gate"}
    listing = CliRunner().invoke(program, ["new"])
    assert (listing.exit_code, listing.stderr) == (0, "")
    assert all(f"{name} " in listing.stdout for name in STARTS)
    wrong = CliRunner().invoke(program, ["new", "circel"])
    assert (wrong.exit_code, wrong.stdout) == (2, "")
    assert len(wrong.stderr.strip().splitlines()) == 1


@pytest.mark.parametrize("name", STARTS)
def test_it_can_be_solved_as_it_stands(name: str, tmp_path: Path) -> None:
    result = CliRunner().invoke(program, ["new", name])
    assert (result.exit_code, result.stderr) == (0, "")
    assert result.stdout == starting_file(name)
    assert max(map(len, result.stdout.splitlines())) <= 120
    problem = load(written(name, tmp_path, result.stdout))
    # Coarser and with fewer subbands: it has to run, not to be good.
    solved = solve(replace(problem, accuracy=replace(problem.accuracy, subbands=3, energy_eV=5e-3)))
    assert solved.accuracy_met
    assert len(solved.subbands) >= 3
    assert np.all(np.diff(solved.energies_eV) >= 0)
    assert solved.energies_eV[0] > (0.0 if name != "wrap-gate" else -1.0)


@pytest.mark.parametrize("name", STARTS)
def test_each_option_can_be_taken(name: str, tmp_path: Path) -> None:
    fits = jsonschema.Draft202012Validator(wire_schema())
    found = list(options(starting_file(name)))
    assert len(found) > 4
    for line, text in [("", starting_file(name)), *found]:
        load(written(name, tmp_path, text))
        assert fits.is_valid(tomllib.loads(text)), line


@pytest.mark.parametrize("name", LENGTH_KEYS)
def test_the_keys_of_the_shape_are_there(name: str) -> None:
    text = starting_file(name)
    shown = set(re.findall(r"^#?([a-z_]+) = ", text, flags=re.MULTILINE))
    shown |= set(re.findall(r"^#?\[+section\.([a-z_]+)\]+", text, flags=re.MULTILINE))
    shown |= set(re.findall(r"\bacross_corners\b|\bside\b|\bscale\b|\barray\b", text))
    own = set(keys_of(name, ())) - ({"rotation"} if name == "circle" else set())
    assert sorted(own - shown - NOT_SHOWN) == []
    assert len(shown & {"shape", *SECTION_KEYS}) >= 3
