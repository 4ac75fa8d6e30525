"""The command line: exit codes, one line for each mistake, nothing left behind, data apart from messages."""

from __future__ import annotations

import contextlib
import errno
import importlib
import inspect
import json
import os
import re
import shutil
import subprocess
import sys
import threading
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
from wiresolve.commands.doctor import GMSH_LIBRARIES, examine, gmsh_starts, missing_library
from wiresolve.commands.terminal import EVEN_STAGES, Pace
from wiresolve.errors import ConvergenceError, MeshError
from wiresolve.output import figures, folder, writing

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

    def refuse(*_: object, **__: object) -> None:
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

    def interrupt(*_: object, **__: object) -> None:
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
    doctor = importlib.import_module("wiresolve.commands.doctor")
    broken = doctor.Finding(False, "Gmsh needs the system library libGLU.so.1")
    monkeypatch.setattr(doctor, "gmsh_starts", lambda: broken)
    result = run("doctor")
    assert result.exit_code == 1
    assert broken.text in result.stdout
    assert "something is amiss" in result.stdout
    assert "circle" not in result.stdout


def test_a_wrong_energy_fails_the_doctor() -> None:
    known = importlib.import_module("wiresolve.commands.known_wires")
    wire = known.rectangle()
    shifted = replace(wire, exact_eV=tuple(1.0001 * energy for energy in wire.exact_eV))
    ok, text = known.compare(shifted)
    assert not ok
    assert text.startswith("NOT OK")


def test_options_reach_what_is_written(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answer_with(monkeypatch, lambda: core_shell_result(1))
    (here / "points.csv").write_text("fermi_level_meV,conductance_G0\n10,0.1\n30,1.0\n")
    asked: dict[str, Any] = {}
    known = set(inspect.signature(writing.write).parameters)
    monkeypatch.setattr(writing, "write", lambda result, folder, **options: asked.update(options))
    assert run("solve", "wire.toml", "--quiet").exit_code == 0
    plain = {"report": False, "vtk": "curved", "quadrature": False, "matrix_elements": False, "figures": True}
    assert asked == {**plain, "axial_frames": 0, "replace": True, "status": "done", "field": "--out"}
    words = ("--report", "--vtk", "linear", "--extrude", "0.03 um", "--axial-frames", "5", "--quadrature")
    words += ("--matrix-elements", "--measured", "points.csv", "--no-figures", "--out", "out")
    assert run("solve", "wire.toml", "--quiet", *words).exit_code == 0
    measured = asked.pop("measured")
    assert measured.x.tolist() == pytest.approx([0.010, 0.030])
    fuller = {"report": True, "vtk": "linear", "quadrature": True, "matrix_elements": True, "figures": False}
    fuller |= {"axial_frames": 5, "replace": False, "status": "done", "field": "--out"}
    assert asked.pop("extrude_nm") == pytest.approx(30.0)
    assert asked == fuller
    # Each of them is one that `write` has.
    assert {*fuller, "extrude_nm", "measured"} <= known


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("--extrude", "30"), "--extrude: the unit is missing"),
        (("--extrude", "30 eV"), "--extrude: must be a length"),
        (("--extrude", "0 nm"), "--extrude: must be positive"),
        (("--axial-frames", "1"), "--axial-frames"),
        (("--vtk", "round"), "--vtk"),
        (("--measured", "none.csv"), "--measured: there is no such file"),
        (("--measured", "wire.toml"), "--measured: has no column"),
        (("--measured", "gate.csv"), "--measured: is against a gate voltage"),
        (("--quiet", "--verbose"), "--verbose and --quiet contradict each other"),
        (("-v", "--quiet"), "--verbose and --quiet contradict each other"),
    ],
)
def test_what_cannot_be_written_is_said_before_solving(
    here: Path, monkeypatch: pytest.MonkeyPatch, words: tuple[str, ...], says: str
) -> None:
    fail_with(monkeypatch, AssertionError("the solver was started"))
    (here / "gate.csv").write_text("gate_voltage_V,conductance_uS\n0.1,0.1\n")
    result = run("solve", "wire.toml", *words)
    assert (result.exit_code, result.stdout) == (2, "")
    assert says in one_line(result)


def test_the_log_goes_to_stderr_and_stops_with_the_command(here: Path) -> None:
    result = run("mesh", "wire.toml", "-v")
    assert result.exit_code == 0
    lines = result.stderr.strip().splitlines()
    assert any("mesh" in line and "unknowns" in line for line in lines)
    assert all(line.startswith("wiresolve: ") for line in lines)
    assert "curved cells" in result.stdout
    again = run("mesh", "wire.toml")
    assert (again.exit_code, again.stderr) == (0, "")


def test_data_for_programs(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    checked = json.loads(run("check", "wire.toml", "--json").stdout)
    assert checked["section"]["diameter"] == "10.0 nm"
    assert checked["carriers"]["kind"] == "electrons"
    meshed = json.loads(run("mesh", "wire.toml", "--json").stdout)
    assert meshed["area_by_layer_nm2"]["core"] == pytest.approx(78.5398163397, rel=1e-9)  # pi 5^2
    assert meshed["cells_by_layer"] == {"core": meshed["cells"]}
    assert (meshed["degree"], meshed["accuracy_met"]) == (4, True)
    for words in (("check", "wire.toml"), ("mesh", "wire.toml")):
        quiet = run(*words, "--quiet")
        assert (quiet.exit_code, quiet.stdout, quiet.stderr) == (0, "", "")
    doctor = importlib.import_module("wiresolve.commands.doctor")
    monkeypatch.setattr(doctor, "examine", lambda: iter([doctor.Finding(True, "a"), doctor.Finding(False, "b")]))
    found = run("doctor", "--json")
    assert found.exit_code == 1
    assert json.loads(found.stdout) == {
        "sound": False,
        "findings": [{"ok": True, "text": "a"}, {"ok": False, "text": "b"}],
    }


def test_data_stay_data_on_a_plain_terminal(here: Path) -> None:
    text = GOOD.replace("A round probe", "Größe \U0001d53c, ħω")
    (here / "wire.toml").write_text(text, encoding="utf-8")
    plain = CliRunner(charset="ascii")
    assert json.loads(plain.invoke(program, ["check", "wire.toml", "--json"]).stdout)["title"] == "Größe \U0001d53c, ħω"
    schemas = importlib.import_module("wiresolve.output.schema")
    assert json.loads(plain.invoke(program, ["schema", "wire"]).stdout) == schemas.wire_schema()


@pytest.mark.skipif(not hasattr(os, "openpty"), reason="this system has no pseudo-terminals")
def test_a_bar_is_drawn_on_a_terminal(here: Path) -> None:
    ours, theirs = os.openpty()
    drawn: list[bytes] = []

    def read() -> None:
        with contextlib.suppress(OSError):  # the end of a terminal
            while data := os.read(ours, 4096):
                drawn.append(data)

    reader = threading.Thread(target=read)
    reader.start()
    command = [sys.executable, "-m", "wiresolve", "mesh", "wire.toml"]
    shown = {**os.environ, "TERM": "xterm", "NO_COLOR": "1"}
    done = subprocess.run(command, stdout=subprocess.PIPE, stderr=theirs, env=shown, text=True, check=False)
    os.close(theirs)
    reader.join(20)
    os.close(ours)
    assert done.returncode == 0
    assert "curved cells" in done.stdout
    text = b"".join(drawn).decode()
    assert "mesh" in text
    assert "0:00:0" in text
    assert not re.search(r"\x1b\[(3|4)\d", text)  # NO_COLOR is heeded


@pytest.mark.parametrize("kind", ["wire", "result", "gate-curve"])
def test_schemas_are_printed(kind: str) -> None:
    schemas = importlib.import_module("wiresolve.output.schema")
    result = run("schema", kind)
    assert (result.exit_code, result.stderr) == (0, "")
    assert json.loads(result.stdout) == schemas.schema(kind)


def test_a_report_is_written_of_a_result(here: Path) -> None:
    assert run("solve", "wire.toml", "--no-figures", "--accuracy", "1 meV").exit_code == 0
    place = here / "results" / "wire"
    result = run("report", "results/wire")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "File: results/wire/report.html\n", "")
    assert (place / "report.html").read_text(encoding="utf-8").lstrip().lower().startswith("<!doctype html>")
    assert run("report", "results/wire", "--quiet").exit_code == 0  # its own page may be written anew
    (here / "mine.html").write_text("mine")
    refused = run("report", "results/wire", "--out", "mine.html")
    assert "--out: exists already" in one_line(refused)
    assert (refused.exit_code, (here / "mine.html").read_text()) == (2, "mine")
    assert run("report", "results/wire", "--out", "mine.html", "--replace").exit_code == 0
    assert (here / "mine.html").read_bytes() == (place / "report.html").read_bytes()
    assert left(place) == ["input.toml", "modes.vtu", "report.html", "result.json", "subbands.csv"]


@pytest.mark.parametrize(
    ("place", "says"),
    [("none", "there is no such folder"), ("wire.toml", "is no folder"), ("empty", "holds no result")],
)
def test_a_report_of_no_result(here: Path, place: str, says: str) -> None:
    (here / "empty").mkdir()
    result = run("report", place)
    assert (result.exit_code, result.stdout) == (2, "")
    assert f"RESULT_DIR: {says}" in one_line(result)
    assert left(here) == ["empty", "wire.toml"]
    assert left(here / "empty") == []


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_scripts_for_completion(shell: str) -> None:
    result = run("completion", shell)
    assert result.exit_code == 0
    assert f"_WIRESOLVE_COMPLETE={shell}_complete" in result.stdout
    assert "wiresolve" in result.stdout
    if path := shutil.which(shell):
        parsed = subprocess.run([path, "-n"], input=result.stdout, capture_output=True, text=True, check=False)
        assert (parsed.returncode, parsed.stderr) == (0, "")


@pytest.mark.parametrize(
    ("typed", "proposed"),
    [
        ("wiresolve ga", {"gate-curve"}),
        ("wiresolve solve --ax", {"--axial-frames"}),
        ("wiresolve solve --vtk ", {"curved", "linear"}),
        ("wiresolve new tr", {"triangle", "trapezoid"}),
        ("wiresolve schema ", {"wire", "result", "gate-curve"}),
        ("wiresolve materials InA", {"InAs"}),
    ],
)
def test_what_a_shell_proposes(typed: str, proposed: set[str]) -> None:
    words = typed.split(" ")
    asked = {"_WIRESOLVE_COMPLETE": "bash_complete", "COMP_WORDS": typed, "COMP_CWORD": str(len(words) - 1)}
    done = subprocess.run(
        [sys.executable, "-m", "wiresolve"], env={**os.environ, **asked}, capture_output=True, text=True, check=False
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert {line.partition(",")[2] for line in done.stdout.split()} >= proposed
    assert all(line.partition(",")[2].startswith(words[-1]) for line in done.stdout.split())


@pytest.mark.parametrize("words", ["--help", "solve --help", "new", "new circle", "completion zsh"])
def test_what_answers_at_once_loads_nothing_heavy(words: str) -> None:
    script = (
        "import sys\nfrom wiresolve.cli import main\n"
        f"try: main({words.split()!r})\nexcept SystemExit as end: assert not end.code\n"
        "print('loaded:', *sorted({name.split('.')[0] for name in sys.modules}))"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert {"numpy", "scipy", "rich", "matplotlib"} & set(done.stdout.rpartition("loaded:")[2].split()) == set()


def test_time_left_follows_the_pace() -> None:
    now = [0.0]
    pace = Pace(lambda: now[0])
    stage = EVEN_STAGES[0]
    assert pace.left(stage, 0.0) == ""
    now[0] = 1.0
    assert pace.left(stage, 0.1) == ""  # too early to say
    now[0] = 10.0
    assert pace.left(stage, 0.25) == "about 30 s left"
    assert pace.left("mesh", 0.5) == ""
    now[0] = 20.0
    assert pace.left("mesh", 0.6) == ""  # meshes take longer and longer
    assert pace.left(stage, 0.5) == ""
    now[0] = 24.0
    assert pace.left(stage, 0.75) == "about 4 s left"


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
        "assert set(ws._HOMES) <= set(dir(ws))\n"
        "for name in ws._HOMES: getattr(ws, name)\n"
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
