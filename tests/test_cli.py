"""The command line: exit codes, one line for each mistake, nothing left behind, data apart from messages."""

from __future__ import annotations

import errno
import importlib
import json
import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
import pyvista
from click.testing import CliRunner, Result

import wiresolve as ws
from tests.synthetic import core_shell_result
from wiresolve.cli import program
from wiresolve.doctor import GMSH_LIBRARIES, examine, gmsh_starts, missing_library
from wiresolve.errors import ConvergenceError, MeshError
from wiresolve.output import figures, folder

GOOD = """title = "A round probe"
[section]
shape = "circle"
diameter = "10 nm"
material = "probe"
[materials.probe]
electron_mass = 0.05
conduction_edge = "0 eV"
source = "invented"
[carriers]
kind = "electrons"
temperature = "300 K"
[accuracy]
subbands = 4
energy = "0.1 meV"
"""
SQUARE = 'shape = "polygon"\nunit = "nm"\npoints = '
BAD = {
    "unknown shape": ('"circle"', '"circel"'),
    "unknown key": ("diameter =", "diametre ="),
    "no unit": ('"10 nm"', "10"),
    "wrong unit": ('"10 nm"', '"10 eV"'),
    "negative size": ('"10 nm"', '"-10 nm"'),
    "absurd size": ('"10 nm"', '"1 m"'),
    "tiny size": ('"10 nm"', '"1e-6 nm"'),
    "mass not a number": ("0.05", "nan"),
    "negative mass": ("0.05", "-0.05"),
    "unknown material": ('material = "probe"', 'material = "GaAz"'),
    "alloy fraction": ('material = "probe"', 'material = "Al1.7Ga-0.7As"'),
    "nothing but void": ('material = "probe"', 'material = "void"'),
    "no state": ("subbands = 4", "subbands = 0"),
    "half a state": ("subbands = 4", "subbands = 4.5"),
    "a word for a number": ("subbands = 4", 'subbands = "many"'),
    "a million states": ("subbands = 4", "subbands = 1000000"),
    "accuracy of nothing": ('"0.1 meV"', '"0 meV"'),
    "holes": ('"electrons"', '"holes"'),
    "bow tie": ('shape = "circle"\ndiameter = "10 nm"', SQUARE + "[[0,0],[10,10],[10,0],[0,10]]"),
    "collinear": ('shape = "circle"\ndiameter = "10 nm"', SQUARE + "[[0,0],[5,5],[10,10]]"),
    "no TOML": (GOOD, "this is = = no toml ["),
    "empty": (GOOD, ""),
}


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty current folder with one wire file."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "wire.toml").write_text(GOOD)
    return tmp_path


def run(*words: str, **options: Any) -> Result:
    """One command in this process."""
    return CliRunner().invoke(program, [str(word) for word in words], **options)


def one_line(result: Result) -> str:
    """The only line on stderr, which starts as every error does."""
    (line,) = result.stderr.strip().splitlines()
    assert line.startswith("wiresolve: error: ")
    assert "Traceback" not in line
    return line


def left(place: Path) -> list[str]:
    return sorted(p.name for p in place.iterdir())


def answer_with(monkeypatch: pytest.MonkeyPatch, made: Callable[[], Any]) -> None:
    """Put something quick in the place of the solver."""
    monkeypatch.setattr(importlib.import_module("wiresolve.solve"), "solve", lambda problem, on_progress=None: made())


def fail_with(monkeypatch: pytest.MonkeyPatch, fault: BaseException) -> None:
    def raises() -> None:
        raise fault

    answer_with(monkeypatch, raises)


@pytest.mark.parametrize("name", BAD)
def test_bad_input_is_one_line_and_code_2(here: Path, name: str) -> None:
    old, new = BAD[name]
    assert old in GOOD
    (here / "wire.toml").write_text(GOOD.replace(old, new))
    for command in (("solve", "wire.toml", "--out", "out", "--quiet"), ("check", "wire.toml"), ("mesh", "wire.toml")):
        result = run(*command)
        assert (result.exit_code, result.stdout) == (2, "")
        assert "wire.toml" in one_line(result)
    assert left(here) == ["wire.toml"]


@pytest.mark.parametrize(
    ("content", "says"),
    [(b"\x00\x01\xff", "UTF-8"), (b"title = 'x'\n" + b"#" * 2_000_000, "too large"), (None, "no such file")],
)
def test_files_that_are_no_wire_files(here: Path, content: bytes | None, says: str) -> None:
    if content is None:
        (here / "wire.toml").unlink()
    else:
        (here / "wire.toml").write_bytes(content)
    result = run("solve", "wire.toml")
    assert result.exit_code == 2
    assert says in one_line(result)
    assert not (here / "results").exists()


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("frob",), "No such command 'frob'"),
        (("solve",), "Missing argument 'FILE'"),
        (("solve", "wire.toml", "--frob"), "No such option"),
        (("solve", "wire.toml", "--accuracy", "0.1"), "--accuracy"),
        (("solve", "wire.toml", "--accuracy", "0.1 nm"), "--accuracy"),
        (("solve", "wire.toml", "--accuracy", "1e-40 meV"), "--accuracy"),
        (("materials", "Unobtainium"), "Unobtainium"),
        (("materials", "--temperature", "warm"), "--temperature"),
    ],
)
def test_wrong_usage_is_one_line_and_code_2(here: Path, words: tuple[str, ...], says: str) -> None:
    result = run(*words)
    assert (result.exit_code, result.stdout) == (2, "")
    assert says in one_line(result)
    assert left(here) == ["wire.toml"]


def test_control_characters_do_not_reach_the_terminal(here: Path) -> None:
    (here / "wire.toml").write_text(GOOD.replace("diameter", '"dia\\u001b[2Jmeter"'))
    result = run("check", "wire.toml")
    assert result.exit_code == 2
    assert "\x1b" not in one_line(result)


@pytest.mark.parametrize(
    ("fault", "code", "says"),
    [
        (MeshError("the layer is too thin"), 3, "the layer is too thin"),
        (ConvergenceError("states are missing"), 4, "states are missing"),
        (ZeroDivisionError("two\nlines"), 1, "internal fault"),
        (MemoryError(), 1, "out of memory"),
        (KeyboardInterrupt(), 130, "interrupted"),
        (OSError(errno.ENOSPC, "No space left on device"), 2, "disk is full"),
        (OSError("libGLU.so.1: cannot open shared object file: No such file or directory"), 1, "libglu1-mesa"),
    ],
)
def test_each_fault_has_its_code(
    here: Path, monkeypatch: pytest.MonkeyPatch, fault: BaseException, code: int, says: str
) -> None:
    monkeypatch.delenv("WIRESOLVE_DEBUG", raising=False)
    fail_with(monkeypatch, fault)
    result = run("solve", "wire.toml", "--out", "out")
    assert (result.exit_code, result.stdout) == (code, "")
    assert len(result.stderr.strip().splitlines()) == 1
    assert says in result.stderr
    assert left(here) == ["wire.toml"]


def test_debugging_shows_where_a_fault_arose(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fail_with(monkeypatch, ZeroDivisionError("oops"))
    monkeypatch.setenv("WIRESOLVE_DEBUG", "1")
    result = run("solve", "wire.toml")
    assert result.exit_code == 1
    assert "Traceback" in result.stderr
    assert result.stderr.strip().splitlines()[-1].startswith("wiresolve: error: internal fault")


def test_solve_answers_and_writes(here: Path) -> None:
    result = run("solve", "wire.toml")
    assert (result.exit_code, result.stderr) == (0, "")
    assert left(here) == ["results", "wire.toml"]
    assert left(here / "results") == ["wire"]
    target = here / "results" / "wire"
    assert left(target) == ["figures", "input.toml", "modes.vtu", "result.json", "subbands.csv"]
    data = json.loads((target / "result.json").read_text())
    # The first zero of J_0 is 2.404825557695773; hbar^2 / 2 m0 = 0.0380998 eV nm^2, the wall at 5 nm.
    exact = 0.038099821 / (0.05 * 25) * 2.404825557695773**2
    assert data["subbands"][0]["energy_eV"] == pytest.approx(exact, abs=1e-4)
    assert data["verdict"]["text"].split()[:4] == result.stdout.split("\n", 1)[1].split()[:4]
    assert "results/wire" in result.stdout
    assert ws.load(target / "input.toml").digest == ws.load(here / "wire.toml").digest
    again = run("solve", "wire.toml", "--accuracy", "1 meV", "--no-figures")
    assert again.exit_code == 0
    assert left(target) == ["input.toml", "modes.vtu", "result.json", "subbands.csv"]
    assert ws.load(target / "input.toml").accuracy.energy_eV == 1e-3


def test_json_is_the_file(here: Path) -> None:
    result = run("solve", "wire.toml", "--out", "out", "--json", "--no-figures")
    assert (result.exit_code, result.stderr) == (0, "")
    assert result.stdout == (here / "out" / "result.json").read_text()


def test_quiet_says_nothing(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    result = run("solve", "wire.toml", "--quiet", "--no-figures")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")
    assert (here / "results" / "wire" / "result.json").is_file()


def test_an_existing_folder_is_refused_before_solving(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fail_with(monkeypatch, AssertionError("the solver was started"))
    (here / "out").mkdir()
    result = run("solve", "wire.toml", "--out", "out")
    assert result.exit_code == 2
    assert "--out: exists already" in one_line(result)
    assert "say --replace" in result.stderr
    (here / "out" / "notes.txt").write_text("mine")
    result = run("solve", "wire.toml", "--out", "out", "--replace")
    assert result.exit_code == 2
    assert left(here / "out") == ["notes.txt"]


def test_a_read_only_place_is_refused_before_solving(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fail_with(monkeypatch, AssertionError("the solver was started"))

    def refuse(*_: object, **__: object) -> None:
        raise OSError(errno.EROFS, os.strerror(errno.EROFS))

    monkeypatch.setattr(Path, "mkdir", refuse)
    for words in (("solve", "wire.toml", "--out", "a/b"), ("solve", "wire.toml"), ("mesh", "wire.toml")):
        result = run(*words)
        assert result.exit_code == 2
        assert "Read-only file system" in one_line(result)
        assert "probe" not in result.stderr
    assert left(here) == ["wire.toml"]


def test_a_full_disk_leaves_nothing(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))

    def refuse(*_: object) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(folder.vtk, "write_modes", refuse)
    result = run("solve", "wire.toml", "--out", "deep/out")
    assert result.exit_code == 2
    assert "the disk is full" in one_line(result)
    assert left(here) == ["wire.toml"]


def test_an_interrupted_write_keeps_the_last_result(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    assert run("solve", "wire.toml", "--no-figures").exit_code == 0
    before = (here / "results" / "wire" / "result.json").read_bytes()

    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    answer_with(monkeypatch, lambda: core_shell_result(2))
    monkeypatch.setattr(figures, "save_all", interrupt)
    result = run("solve", "wire.toml")
    assert (result.exit_code, result.stdout) == (130, "")
    assert left(here / "results") == ["wire"]
    assert (here / "results" / "wire" / "result.json").read_bytes() == before


def test_an_interruption_is_one_line(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fail_with(monkeypatch, KeyboardInterrupt())
    result = run("solve", "wire.toml")
    assert (result.exit_code, result.stdout, result.stderr) == (130, "", "wiresolve: interrupted\n")


def test_notes_beside_the_last_result_stay(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    run("solve", "wire.toml", "--no-figures")
    (here / "results" / "wire" / "notes.txt").write_text("mine")
    assert run("solve", "wire.toml", "--no-figures").exit_code == 0
    assert (here / "results" / "wire" / "notes.txt").read_text() == "mine"


def test_missed_accuracy_is_code_5_and_marked(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: replace(core_shell_result(2), accuracy_met=False))
    for extra in ((), ("--strict",)):
        result = run("solve", "wire.toml", "--out", "out", "--replace", "--no-figures", *extra)
        assert result.exit_code == 5
        assert "accuracy missed: wanted 0.1 meV" in one_line(result)
        assert "ACCURACY MISSED" in result.stdout
        data = json.loads((here / "out" / "result.json").read_text())
        assert data["status"].startswith("accuracy missed")
        assert data["accuracy_met"] is False
        assert "# status accuracy missed" in (here / "out" / "subbands.csv").read_text()


def test_strict_turns_a_warning_into_code_2(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    result = run("solve", "wire.toml", "--strict", "--quiet", "--no-figures")
    assert (result.exit_code, result.stdout) == (2, "")
    assert "warnings under --strict: open-barrier" in one_line(result)
    data = json.loads((here / "results" / "wire" / "result.json").read_text())
    assert data["status"] == "warnings under --strict: open-barrier"
    answer_with(monkeypatch, lambda: replace(core_shell_result(1), warnings=()))
    assert run("solve", "wire.toml", "--strict", "--quiet", "--no-figures").exit_code == 0


def test_a_plain_terminal_can_show_the_table(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    result = CliRunner(charset="ascii").invoke(program, ["solve", "wire.toml", "--no-figures"])
    assert result.exit_code == 0
    assert "22.838 +/- 0.003" in result.stdout


def test_mesh_writes_the_section(here: Path) -> None:
    result = run("mesh", "wire.toml")
    assert (result.exit_code, result.stderr) == (0, "")
    grid = pyvista.read(here / "results" / "wire.mesh.vtu")
    assert f"{grid.n_cells:,} curved cells of degree 4" in result.stdout
    assert "78.5398 nm^2" in result.stdout  # pi 5^2
    assert left(here / "results") == ["wire.mesh.vtu"]
    assert run("mesh", "wire.toml", "--out", "results/wire.mesh.vtu").exit_code == 2
    assert run("mesh", "wire.toml", "--out", "results/wire.mesh.vtu", "--replace").exit_code == 0
    assert run("mesh", "wire.toml", "--out", "results").exit_code == 2


def test_a_mesh_never_takes_the_place_of_what_is_no_mesh(here: Path) -> None:
    (here / "notes.txt").write_text("mine")
    os.link(here / "wire.toml", here / "same.vtu")
    for out, says in (
        ("wire.toml", "is the input file itself"),
        ("./same.vtu", "is the input file itself"),
        ("notes.txt", "is no .vtu file"),
    ):
        for extra in ((), ("--replace",)):
            result = run("mesh", "wire.toml", "--out", out, *extra)
            assert result.exit_code == 2
            assert says in one_line(result)
    assert (here / "wire.toml").read_text() == GOOD
    assert (here / "notes.txt").read_text() == "mine"


def test_check_prints_units_and_solves_nothing(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fail_with(monkeypatch, AssertionError("the solver was started"))
    result = run("check", "wire.toml")
    assert (result.exit_code, result.stderr) == (0, "")
    for part in ("10 nm", "300 K", "0.1 meV", "0.05 m0", "hard wall"):
        assert part in result.stdout
    assert left(here) == ["wire.toml"]


def test_materials_come_with_their_sources() -> None:
    listing = run("materials")
    assert listing.exit_code == 0
    for name in ("Si", "GaAs", "InAs", "InSb", "GaN", "SiO2", "In0.53Ga0.47As", "Si0.7Ge0.3"):
        assert name in listing.stdout
    assert "6 Delta" in listing.stdout
    assert "0.9163 along, 0.1905 across" in listing.stdout
    values = run("materials", "Al0.2Ga0.8As", "--temperature", "77 K")
    assert values.exit_code == 0
    for part in ("zone_centre_gap", "77 K", "from memory", "sources differ", "checked", "[1] ", "X_transverse_mass"):
        assert part in values.stdout
    inas = run("materials", "InAs").stdout
    for part in ("luttinger_1", "elastic_C44", "kane_energy", "0.022 to 0.027", "shear_deformation_001"):
        assert part in inas
    assert "warning alloy-range" in run("materials", "Al0.5Ga0.5As").stdout


def test_materials_as_json() -> None:
    (silicon,) = json.loads(run("materials", "Si", "--json").stdout)
    assert silicon["valleys"][0]["name"] == "Delta"
    assert silicon["crystal"] == "diamond"
    mass = next(v for v in silicon["values"] if v["quantity"] == "Delta_longitudinal_mass")
    assert (mass["value"], mass["low"], mass["high"], mass["provenance"]) == (0.9163, 0.903, 0.98, "checked")
    assert {entry["name"] for entry in json.loads(run("materials", "--json").stdout)} >= {"Si", "GaN", "vacuum"}


def test_materials_of_a_users_file(here: Path) -> None:
    text = '[ours]\nextends = "InAs"\nelectron_mass = 0.0235\nsource = "invented"\n'
    Path("lab.toml").write_text(text, encoding="utf-8")
    assert "ours" in run("materials", "--file", "lab.toml").stdout
    one = run("materials", "ours", "--file", "lab.toml")
    assert "given in lab.toml, replaces 0.024: invented" in " ".join(one.stdout.split())
    assert run("materials", "InAs", "--file", "lab.toml").exit_code == 0
    unknown = run("materials", "our", "--file", "lab.toml")
    assert (unknown.exit_code, "'ours'" in unknown.stderr) == (2, True)
    assert "--file" not in unknown.stderr
    assert "Or name the file that describes it with --file" in " ".join(run("materials", "ours").stderr.split())
    Path("lab.toml").write_text(text.replace("0.0235", "0"), encoding="utf-8")
    bad = run("materials", "--file", "lab.toml")
    assert (bad.exit_code, bad.stdout) == (2, "")
    assert "--file: lab.toml: ours.electron_mass: must be positive" in bad.stderr
    assert "there is no such file" in run("materials", "--file", "none.toml").stderr


def test_a_missing_library_is_named_with_its_package() -> None:
    message = "OSError: libXft.so.2: cannot open shared object file: No such file or directory"
    assert missing_library(message) == "libXft.so.2"
    assert missing_library("ModuleNotFoundError: No module named 'gmsh'") is None
    found = gmsh_starts((sys.executable, "-c", f"raise OSError({message!r})"))
    assert not found.ok
    assert "libXft.so.2" in found.text
    assert GMSH_LIBRARIES in found.text
    crashed = gmsh_starts((sys.executable, "-c", "import os; os.abort()"))
    assert not crashed.ok
    assert "it ended with code -6" in crashed.text
    assert gmsh_starts().ok


def test_the_doctor_finds_eight_wires_right() -> None:
    findings = list(examine())
    assert [finding.text for finding in findings if not finding.ok] == []
    wires = [finding.text for finding in findings if "exact" in finding.text]
    assert len(wires) == 8
    assert all(text.startswith("ok ") for text in wires)


def test_the_doctor_reports_what_is_wrong(monkeypatch: pytest.MonkeyPatch) -> None:
    doctor = importlib.import_module("wiresolve.doctor")
    broken = doctor.Finding(False, "Gmsh needs the system library libGLU.so.1")
    monkeypatch.setattr(doctor, "gmsh_starts", lambda: broken)
    result = run("doctor")
    assert result.exit_code == 1
    assert broken.text in result.stdout
    assert "something is amiss" in result.stdout
    assert "circle" not in result.stdout


def test_a_wrong_energy_fails_the_doctor() -> None:
    known = importlib.import_module("wiresolve.known_wires")
    wire = known.rectangle()
    shifted = replace(wire, exact_eV=tuple(1.0001 * energy for energy in wire.exact_eV))
    ok, text = known.compare(shifted)
    assert not ok
    assert text.startswith("NOT OK")


def test_help_and_version() -> None:
    assert run("--help").exit_code == 0
    assert run("--version").stdout.strip() == ws.__version__
    bare = run()
    assert bare.exit_code == 2
    assert "Usage: wiresolve" in bare.stderr


def test_the_package_loads_names_lazily_and_keeps_solve_a_function() -> None:
    script = (
        "import sys, wiresolve as ws\n"
        "assert 'numpy' not in sys.modules\n"
        "from wiresolve.solve import solve\n"
        "import wiresolve.solve\n"
        "assert ws.solve is solve, ws.solve\n"
        "assert set(ws.__all__) <= set(dir(ws))\n"
        "for name in ws.__all__: getattr(ws, name)\n"
        "assert ws.shapes.Circle(diameter_nm=3.0).kind == 'circle'\n"
        "try: ws.frob\n"
        "except AttributeError as fault: print(fault)\n"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert (done.stdout.strip(), done.stderr) == ("module 'wiresolve' has no attribute 'frob'", "")


def test_the_module_is_the_program(here: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "wiresolve", "check", "missing.toml"], capture_output=True, text=True, check=False
    )
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.startswith("wiresolve: error: missing.toml: there is no such file")
