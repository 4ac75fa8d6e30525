"""The repository is what its own documents say: commands, files, examples, the agreed top level."""

from __future__ import annotations

import ast
import json
import math
import os
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import click
import pytest

import wiresolve.cli
from wiresolve.commands.doctor import GMSH_LIBRARIES
from wiresolve.describe import gate_tables, material_file, plain, shape_tables, wirefile
from wiresolve.describe.problem import Carriers, Orientation, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle

REPOSITORY = Path(__file__).resolve().parents[1]
README = (REPOSITORY / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (REPOSITORY / "DEVELOPERS.md").read_text(encoding="utf-8")
TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "LICENSE",
    "CHANGELOG.md",
    "pyproject.toml",
    "constraints.txt",
    ".ci",
    ".gitignore",
    "wiresolve",
    "geometries",
    "tests",
    "examples",
    "scripts",
}
LONGEST_MODULE = 450
FILE_KEYS = (shape_tables.MESH_KEYS, shape_tables.OUTLINE_KEYS, shape_tables.POTENTIAL_FILE_KEYS, ("outline", "mesh"))


def tracked() -> list[str]:
    """Paths of all files under version control."""
    # The folder may belong to somebody else than who runs the tests, as in a container.
    listing = subprocess.run(
        ["git", "-c", "safe.directory=*", "ls-files", "-z"], cwd=REPOSITORY, capture_output=True, text=True, check=True
    )
    return [name for name in listing.stdout.split("\0") if name]


def code_blocks(language: str) -> list[str]:
    """The README's fenced blocks of a language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", README, flags=re.DOTALL | re.MULTILINE)


def real_commands() -> dict[str, click.Command]:
    """The commands of the command line by name."""
    groups = [thing for thing in vars(wiresolve.cli).values() if isinstance(thing, click.Group)]
    return dict(groups[0].commands)


def test_top_level_holds_what_was_agreed() -> None:
    assert {name.split("/")[0] for name in tracked()} == TOP_LEVEL


def test_no_generated_file_is_tracked() -> None:
    endings = (".vtu", ".pvd", ".npz", ".h5", ".pyc", ".sqlite")
    assert [name for name in tracked() if name.endswith(endings) or name.startswith("results/")] == []


def test_modules_are_short() -> None:
    lengths = {
        str(path.relative_to(REPOSITORY)): len(path.read_text(encoding="utf-8").splitlines())
        for path in (REPOSITORY / "wiresolve").rglob("*.py")
    }
    assert {name: length for name, length in lengths.items() if length > LONGEST_MODULE} == {}


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_named_files_exist(text: str) -> None:
    named = re.findall(r"(?:\./)?((?:scripts|geometries|examples|tests|wiresolve|\.ci)/[\w./-]*\w)", text)
    assert named
    assert [name for name in named if not (REPOSITORY / name).exists() and name != "wiresolve/survey"] == []


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_named_scripts_can_be_started(text: str) -> None:
    scripts = re.findall(r"(?<!\w)\./(scripts/\w+)", text)
    assert scripts
    assert [name for name in scripts if not os.access(REPOSITORY / name, os.X_OK)] == []


def test_documented_commands_are_the_real_ones() -> None:
    documented = set(re.findall(r"`wiresolve (\w[\w-]*)", README))
    assert documented == set(real_commands())
    passed_through = re.search(r"^ +((?:[\w-]+ \| )+)--version\)", (REPOSITORY / "scripts" / "run").read_text(), re.M)
    assert passed_through
    assert set(passed_through[1].replace("|", " ").split()) == set(real_commands())


def test_documented_warnings_are_the_real_ones() -> None:
    rows = README.partition("### Warnings")[2].partition("\n## ")[0]
    code = re.compile(r"[a-z]+(-[a-z]+)+")
    real = set()
    for path in (REPOSITORY / "wiresolve").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            # A warning is a code, a text and a remedy.
            if isinstance(node, ast.Tuple) and len(node.elts) == 3 and isinstance(node.elts[0], ast.Constant):
                first = node.elts[0].value
                if isinstance(first, str) and code.fullmatch(first):
                    real.add(first)
    assert set(re.findall(r"^\| `(\S+)` \|", rows, re.MULTILINE)) == real


def test_generated_parts_of_the_readme_are_fresh() -> None:
    run = subprocess.run(
        [sys.executable, "scripts/_readme.py", "--check"], cwd=REPOSITORY, capture_output=True, text=True
    )
    assert run.returncode == 0, run.stderr


def test_wire_and_materials_file_of_the_readme_are_valid(tmp_path: Path) -> None:
    block, lab, *_ = code_blocks("toml")
    problem = wirefile.parse(block, REPOSITORY)
    assert problem.title == tomllib.loads(block)["title"]
    assert problem.accuracy.subbands == 10
    (tmp_path / "lab.toml").write_text(lab, encoding="utf-8")
    silicon, oxide = material_file.read("--file", tmp_path / "lab.toml")
    wire = Section(Circle(10), silicon.name, (Layer(2, oxide.name),))
    along = Orientation((1, 1, 0), (0, 0, 1))
    problem = Problem("wire", wire, Carriers(temperature_K=(300,)), materials=(silicon, oxide), orientation=along)
    assert problem.shared_valleys() == ("Delta", "L")


def test_gates_of_the_readme_are_valid() -> None:
    *_, wrap, back = code_blocks("toml")
    problem = wirefile.parse(wrap, REPOSITORY)
    assert problem.charged
    assert problem.voltages is not None
    section = wrap.partition("[[gates]]")[0]
    on_oxide = wirefile.parse(f'{section}{back}\n[carriers]\ntemperature = "4.2 K"\n', REPOSITORY)
    assert [gate.name for gate in on_oxide.gates] == ["back"]
    assert on_oxide.surroundings is not None
    assert on_oxide.surroundings.below_gate == "back"


def test_all_keys_of_gates_and_charge_are_documented() -> None:
    reference = README.partition("### The keys")[2].partition("\n### ")[0]
    given = {
        "gates": gate_tables.GATE_KEYS,
        "surfaces": gate_tables.SURFACE_KEYS,
        "surroundings": gate_tables.SURROUNDINGS_KEYS,
        "voltages": gate_tables.VOLTAGES_KEYS,
        "transport": gate_tables.TRANSPORT_KEYS,
    }
    assert set(given) == set(gate_tables.DEVICE_KEYS)
    keys = [f"{table}.{key}" for table, names in given.items() for key in names]
    keys += [*gate_tables.DOPING_KEYS, "carriers.interaction"]
    assert [key for key in keys if f"`{key}`" not in reference] == []


def test_all_keys_of_the_wire_file_are_documented() -> None:
    tables = (wirefile.SECTION_KEYS, wirefile.LAYER_KEYS, wirefile.PATCH_KEYS, material_file.MATERIAL_KEYS)
    keys = {key for table in (*tables, *plain.LENGTH_KEYS.values(), *FILE_KEYS) for key in table} | {
        *material_file.VALLEY_KEYS
    }
    reference = README.partition("## The wire file")[2].partition("## Command line")[0]
    assert (
        sorted(key for key in keys | set(shape_tables.SHAPES) if not re.search(rf"[`.\[]{key}[` \]]", reference)) == []
    )


def test_script_of_the_readme_runs(tmp_path: Path) -> None:
    block = code_blocks("python")[0]
    run = subprocess.run([sys.executable, "-W", "error", "-c", block], cwd=tmp_path, capture_output=True, text=True)
    assert run.returncode == 0, run.stderr
    assert run.stdout.strip()
    assert (tmp_path / "results" / "from_python" / "result.json").is_file()


def test_every_script_of_the_readme_is_run_here() -> None:
    assert len(code_blocks("python")) == 4


def test_matrix_elements_and_survey_of_the_readme_run(tmp_path: Path) -> None:
    _, _, elements, survey = code_blocks("python")
    begin = """
import json

import wiresolve as ws

def wire(width_nm):
    box = ws.Section(shape=ws.shapes.Rectangle(width_nm=width_nm, height_nm=6.0), material="GaAs")
    cold = ws.Carriers(temperature_K=(77.0,), model="parabolic")
    return ws.Problem("box", section=box, carriers=cold, accuracy=ws.Accuracy(subbands=3, energy_eV=1e-3))

result = ws.solve(wire(10.0))
"""
    end = """
print(json.dumps([float(elements.dipole_x_nm[0, 1]), float(coulomb.values[0, 0, 0, 0, 0])]))
"""
    script = begin + elements + survey + end
    run = subprocess.run([sys.executable, "-W", "error", "-c", script], cwd=tmp_path, capture_output=True, text=True)
    assert run.returncode == 0, run.stderr
    dipole, coulomb = json.loads(run.stdout)
    # Between the two lowest states of a wall-to-wall box: 16 / 9 pi^2 of its width (any textbook of quantum mechanics).
    assert abs(dipole) == pytest.approx(160 / (9 * math.pi**2), rel=1e-4)
    assert coulomb > 0
    assert len((tmp_path / "results" / "survey.pvd").read_text(encoding="utf-8").split("DataSet timestep")) == 4


def test_sweep_of_the_readme_runs(tmp_path: Path) -> None:
    _, block, *_ = code_blocks("python")
    *_, wrap, _ = code_blocks("toml")
    # Three points in place of nine, and coarser: it has to run, not to be good.
    short = (
        wrap.replace("count = 9", "count = 3").replace('"0.5 meV"', '"5 meV"').replace("subbands = 6", "subbands = 2")
    )
    assert short != wrap
    (tmp_path / "wire.toml").write_text(short, encoding="utf-8")
    run = subprocess.run([sys.executable, "-W", "error", "-c", block], cwd=tmp_path, capture_output=True, text=True)
    assert run.returncode == 0, run.stderr
    assert len(run.stdout.splitlines()) >= 1
    reference = README.partition("### What comes out of it")[2].partition("\n## ")[0]
    for file in ("gate_curve.csv", "transistor.csv"):
        lines = (tmp_path / "results" / "curve" / file).read_text(encoding="utf-8").splitlines()
        head = next(line for line in lines if not line.startswith("#"))
        columns = [
            column.replace("_wrap_", "_NAME_") for column in head.split(",") if not re.search(r"_2(_|$)", column)
        ]
        assert "gate_voltage_V" in columns
        assert [name for name in columns if f"`{name}`" not in reference] == []


def test_pins_cover_the_dependencies() -> None:
    project = tomllib.loads((REPOSITORY / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    wanted = project["dependencies"] + project["optional-dependencies"]["test"]
    pins = dict(
        line.split("==")
        for line in (REPOSITORY / "constraints.txt").read_text().splitlines()
        if not line.startswith("#")
    )
    names = {re.split(r"[<>=!~\[]", requirement)[0] for requirement in wanted}
    assert sorted(names - pins.keys()) == []
    assert all(re.fullmatch(r"[\w.]+", version) for version in pins.values())


def test_system_packages_are_the_same_everywhere() -> None:
    script = (REPOSITORY / "scripts" / "_environment.sh").read_text(encoding="utf-8")
    packages = [package for _, package in re.findall(r'^ +"(lib\S+\.so\.\d+) (lib\S+)"$', script, re.MULTILINE)]
    assert packages == GMSH_LIBRARIES.split()
    assert "apt-get install --yes " + " ".join(packages) in README


def test_continuous_integration_runs_the_readme_command() -> None:
    text = (REPOSITORY / ".ci" / "run").read_text(encoding="utf-8")
    assert "exec ./scripts/test" in text
    assert "./scripts/test" in code_blocks("")[1]
