"""The command `gate-curve` and its folder: whole or not there, resumed after any stop, read back by others."""

from __future__ import annotations

import errno
import importlib
import json
import math
import os
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from click.testing import CliRunner, Result
from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE

import wiresolve as ws
from tests.gate_sweeps import TOML, WARNED, PlateSweep, recording, swept_problem
from tests.synthetic import RADIUS_NM, core_shell_result
from tests.test_vtk import integrals
from wiresolve.cli import program
from wiresolve.errors import InputError, MeshError
from wiresolve.gate_curve import gate_curve
from wiresolve.output import gate_curve_figures, gate_curve_files, gate_curve_partial
from wiresolve.output.between_points import between_points_of

ALL = ["figures", "gate_curve.csv", "gate_curve.json", "gate_curve.pvd", "input.toml", "points"]
OUT = ("gate-curve", "wire.toml", "--out", "out", "--no-figures")


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty current folder with one wire file."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "wire.toml").write_text(TOML)
    return tmp_path


@pytest.fixture
def sweeps(monkeypatch: pytest.MonkeyPatch) -> list[PlateSweep]:
    """The sweeps made by the command, which are in closed form (see `solve_with`)."""
    made: list[PlateSweep] = []
    solve_with(monkeypatch, made)
    return made


def solve_with(monkeypatch: pytest.MonkeyPatch, made: list[PlateSweep], **how: Any) -> None:
    solver = recording(made, **how)
    monkeypatch.setattr(importlib.import_module("wiresolve.sweep"), "sweep_of", solver, raising=False)


def run(*words: str) -> Result:
    return CliRunner().invoke(program, [str(word) for word in words])


def one_line(result: Result) -> str:
    (line,) = result.stderr.strip().splitlines()
    assert line.startswith("wiresolve: ")
    return line


def left(place: Path) -> list[str]:
    return sorted(p.name for p in place.iterdir())


def contents(folder: Path) -> dict[str, bytes]:
    return {str(p.relative_to(folder)): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


def test_the_command_answers_and_writes(here: Path, sweeps: list[PlateSweep]) -> None:
    result = run("gate-curve", "wire.toml")
    assert (result.exit_code, result.stderr) == (0, "")
    assert left(here) == ["results", "wire.toml"]
    assert left(here / "results") == ["wire.gate-curve"]
    target = here / "results" / "wire.gate-curve"
    assert left(target) == ALL
    assert left(target / "points") == [f"point_{n:04d}.vtu" for n in range(1, 8)]
    names = [
        f"{name}.{kind}"
        for name in ("density_and_capacitance", "levels", "staircase")
        for kind in ("pdf", "png", "svg")
    ]
    assert left(target / "figures") == names
    assert ws.load(target / "input.toml").digest == ws.load(here / "wire.toml").digest
    data = json.loads((target / "gate_curve.json").read_text())
    assert data["status"] == "done"
    assert data["input_digest"] == ws.load(here / "wire.toml").digest
    assert "7 points; the first step opens below 0.2 V." in result.stdout
    assert result.stdout.endswith("Files: results/wire.gate-curve\n")
    assert sweeps[0].asked == list(range(7))


def test_drain_voltages_bring_the_transistor(here: Path, sweeps: list[PlateSweep]) -> None:
    (here / "wire.toml").write_text(TOML.replace("count = 7", 'count = 7\ndrain = ["0.05 V", "0.3 V"]'))
    assert run("gate-curve", "wire.toml", "--out", "out").exit_code == 0
    assert left(here / "out") == sorted([*ALL, "transistor.csv"])
    assert set(gate_curve_files.DRAWN) == set(gate_curve_figures.FIGURES)
    drawn = {p.stem for p in (here / "out" / "figures").iterdir()}
    assert drawn == set(gate_curve_files.DRAWN)
    assert len((here / "out" / "transistor.csv").read_text().splitlines()) == 4 + 14


def test_json_is_the_file_and_quiet_is_quiet(here: Path, sweeps: list[PlateSweep]) -> None:
    result = run(*OUT, "--json")
    assert (result.exit_code, result.stderr) == (0, "")
    assert result.stdout == (here / "out" / "gate_curve.json").read_text()
    result = run(*OUT, "--replace", "--quiet", "--accuracy", "1 meV")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")
    assert ws.load(here / "out" / "input.toml").accuracy.energy_eV == 1e-3


def test_a_failed_point_is_code_4_and_the_others_are_written(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solve_with(monkeypatch, [], failing=(2, 5))
    result = run(*OUT)
    assert result.exit_code == 4
    said = "2 of 7 points did not converge, the first at 0.1 V (the last good one at 0.05 V)"
    assert one_line(result) == f"wiresolve: error: {said}; the results are in out, marked so"
    assert "FAILED at 0.1 V" in result.stdout
    assert left(here) == ["out", "wire.toml"]
    data = json.loads((here / "out" / "gate_curve.json").read_text())
    assert data["status"] == said
    assert [p["converged"] for p in data["points"]] == [n not in (2, 5) for n in range(7)]
    assert left(here / "out" / "points") == [f"point_{n + 1:04d}.vtu" for n in range(7) if n not in (2, 5)]
    assert f"# status {said}" in (here / "out" / "gate_curve.csv").read_text()


def test_no_point_at_all_leaves_nothing(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solve_with(monkeypatch, [], failing=range(7))
    result = run("gate-curve", "wire.toml")
    assert (result.exit_code, result.stdout) == (4, "")
    assert "none of the 7 points converged" in one_line(result)
    assert left(here) == ["wire.toml"]


def test_warnings_and_missed_accuracy_have_their_codes(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solve_with(monkeypatch, [], warnings=(WARNED,), not_modelled=("strain",))
    result = run(*OUT, "--strict")
    assert result.exit_code == 2
    assert "warnings under --strict: open-barrier" in one_line(result)
    assert "warning open-barrier: The barrier is 4 nm thick" in result.stdout
    assert "Not modelled: strain." in result.stdout
    assert run(*OUT, "--replace").exit_code == 0
    result = run(*OUT, "--replace", "--accuracy", "0.01 meV")
    assert result.exit_code == 5
    assert "accuracy missed: wanted 0.01 meV, the largest bar is 0.02 meV" in one_line(result)


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ('[voltages]\ngate = "wrap"\nfrom = "0 V"\nto = "0.3 V"\ncount = 7\n', "", "voltages: is missing"),
        (TOML[TOML.index("[[gates]]") : TOML.index("[carriers]")], "", "gates: are missing: there is no gate"),
        ("count = 7", "count = 0", "count"),
        ("count = 7", "count = 10000000", "count"),
        ('gate = "wrap"', 'gate = "wrapp"', "wrap"),
    ],
)
def test_a_file_without_a_sweep_is_one_line(
    here: Path, sweeps: list[PlateSweep], old: str, new: str, says: str
) -> None:
    assert old in TOML
    (here / "wire.toml").write_text(TOML.replace(old, new))
    for words in (OUT, ("gate-curve", "wire.toml")):
        result = run(*words)
        assert (result.exit_code, result.stdout) == (2, "")
        line = one_line(result)
        assert line.startswith("wiresolve: error: wire.toml: ")
        assert says in line
    assert left(here) == ["wire.toml"]
    assert sweeps == []


@pytest.mark.parametrize("fault", [MeshError("too thin"), InputError("section", "leaves nothing")])
def test_a_fault_of_the_mesh_leaves_nothing(here: Path, monkeypatch: pytest.MonkeyPatch, fault: Exception) -> None:
    def refuse(*_: Any) -> PlateSweep:
        raise fault

    monkeypatch.setattr(importlib.import_module("wiresolve.sweep"), "sweep_of", refuse, raising=False)
    result = run("gate-curve", "wire.toml")
    assert result.exit_code == fault.exit_code  # type: ignore[attr-defined]
    assert left(here) == ["wire.toml"]


def test_an_older_folder_is_replaced_only_when_told(here: Path, sweeps: list[PlateSweep]) -> None:
    assert run(*OUT).exit_code == 0
    refused = run(*OUT)
    assert refused.exit_code == 2
    assert "--out: exists already" in one_line(refused)
    (here / "out" / "notes.txt").write_text("mine")
    assert run(*OUT, "--replace").exit_code == 0
    assert (here / "out" / "notes.txt").read_text() == "mine"
    # What `solve` wrote is no gate curve, and a gate curve is no result.
    ws.write(core_shell_result(1), here / "solved", figures=False)
    result = run("gate-curve", "wire.toml", "--out", "solved", "--replace")
    assert (result.exit_code, "holds no gate curve" in result.stderr) == (2, True)
    with pytest.raises(InputError, match="holds no result"):
        ws.write(core_shell_result(1), here / "out", replace=True)
    assert len(sweeps) == 2


def test_write_takes_a_curve_from_python(tmp_path: Path) -> None:
    curve = gate_curve(swept_problem(), solver=recording([], failing=(3,)))
    for name in ("a", "b"):
        assert ws.write(curve, tmp_path / name) == (tmp_path / name).resolve()
    assert left(tmp_path / "a") == ALL
    assert contents(tmp_path / "a") == contents(tmp_path / "b")
    assert json.loads((tmp_path / "a" / "gate_curve.json").read_text())["status"] == curve.failure
    with pytest.raises(InputError, match="exists already"):
        ws.write(curve, tmp_path / "a")


def test_an_interruption_keeps_what_is_done_and_a_later_run_goes_on(
    here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]
) -> None:
    assert run("gate-curve", "wire.toml", "--out", "whole", "--no-figures").exit_code == 0
    solve_with(monkeypatch, sweeps, failing=(1,), stopping={4: KeyboardInterrupt()})
    result = run(*OUT)
    assert (result.exit_code, result.stdout) == (130, "")
    kept = "3 of 7 points are kept in out.partial; the same command goes on from there"
    assert one_line(result) == f"wiresolve: interrupted; {kept}"
    assert left(here) == ["out.partial", "whole", "wire.toml"]
    points = [f"point_{n:04d}.{kind}" for n in (1, 3, 4) for kind in ("json", "npz")]
    assert left(here / "out.partial") == ["lock", "manifest.json", *points]
    manifest = json.loads((here / "out.partial" / "manifest.json").read_text())
    assert manifest["input_digest"] == ws.load(here / "wire.toml").digest
    assert manifest["wiresolve"] == ws.__version__
    assert manifest["mesh_digest"] == gate_curve_partial.mesh_digest(sweeps[0].mesh)
    # The point that failed is tried again; those that are done are not.
    solve_with(monkeypatch, sweeps)
    result = run(*OUT)
    assert result.exit_code == 0
    assert one_line(result) == "wiresolve: going on from out.partial, 3 of 7 points are done"
    assert sweeps[-1].asked == [1, 4, 5, 6]
    assert left(here) == ["out", "whole", "wire.toml"]
    # Nothing in the folder tells that the run was stopped.
    assert contents(here / "out") == contents(here / "whole")


@pytest.mark.parametrize("where", ["manifest", "point"])
def test_an_interruption_before_the_first_point_leaves_nothing(
    here: Path, monkeypatch: pytest.MonkeyPatch, where: str
) -> None:
    solve_with(monkeypatch, [], stopping={0: KeyboardInterrupt()})
    if where == "manifest":

        def stop(*_: object) -> None:
            raise KeyboardInterrupt

        monkeypatch.setattr(gate_curve_partial.Points, "_store", stop)
    result = run("gate-curve", "wire.toml")
    assert (result.exit_code, result.stderr) == (130, "wiresolve: interrupted\n")
    assert left(here) == ["wire.toml"]


def test_a_write_that_fails_keeps_the_points(
    here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]
) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    with monkeypatch.context() as patch:
        patch.setattr(gate_curve_files, "write_series", full)
        result = run(*OUT)
    assert result.exit_code == 2
    assert "the disk is full" in one_line(result)
    assert left(here) == ["out.partial", "wire.toml"]
    assert run(*OUT).exit_code == 0
    assert sweeps[-1].asked == []
    assert left(here) == ["out", "wire.toml"]


def test_a_full_disk_during_the_sweep_is_one_line(
    here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]
) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(np, "savez", full)
    result = run(*OUT)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "the disk is full" in one_line(result)
    assert left(here) == ["wire.toml"]


def stopped(here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]) -> None:
    """Leave an unfinished sweep of three points in out.partial."""
    solve_with(monkeypatch, sweeps, stopping={3: KeyboardInterrupt()})
    assert run(*OUT).exit_code == 130
    solve_with(monkeypatch, sweeps)
    assert len(left(here / "out.partial")) == 2 + 6


def test_points_of_another_file_are_refused(
    here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]
) -> None:
    stopped(here, monkeypatch, sweeps)
    (here / "wire.toml").write_text(TOML.replace('"16 nm"', '"17 nm"'))
    before, made = contents(here / "out.partial"), len(sweeps)
    result = run(*OUT)
    assert (result.exit_code, result.stdout) == (2, "")
    line = one_line(result)
    assert "--out: out.partial belongs to an unfinished sweep of another wire file" in line
    assert "say --restart" in line
    # Neither solved nor touched.
    assert (len(sweeps), contents(here / "out.partial")) == (made, before)
    assert run(*OUT, "--restart").exit_code == 0
    assert sweeps[-1].asked == list(range(7))
    assert left(here) == ["out", "wire.toml"]


@pytest.mark.parametrize(
    ("key", "says"), [("wiresolve", "another version of wiresolve"), ("mesh_digest", "on another mesh")]
)
def test_points_of_another_version_or_mesh_are_refused(
    here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep], key: str, says: str
) -> None:
    stopped(here, monkeypatch, sweeps)
    path = here / "out.partial" / "manifest.json"
    path.write_text(json.dumps(json.loads(path.read_text()) | {key: "other"}))
    before = contents(here / "out.partial")
    result = run(*OUT)
    assert result.exit_code == 2
    assert says in one_line(result)
    assert contents(here / "out.partial") == before


def test_a_torn_point_is_solved_again(here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]) -> None:
    stopped(here, monkeypatch, sweeps)
    (here / "out.partial" / "point_0001.json").write_text('{"gate_vol')
    (here / "out.partial" / "point_0002.npz").unlink()
    (here / "out.partial" / "point_0005.npz").write_bytes(b"half")
    (here / "out.partial" / "point_0006.json.fresh").write_text("{")
    assert run(*OUT).exit_code == 0
    assert sweeps[-1].asked == [0, 1, 3, 4, 5, 6]
    assert left(here) == ["out", "wire.toml"]


def test_a_folder_of_ones_own_is_never_touched(here: Path, sweeps: list[PlateSweep]) -> None:
    (here / "out.partial").mkdir()
    (here / "out.partial" / "thesis.txt").write_text("years of work")
    for extra in ((), ("--restart",)):
        result = run(*OUT, *extra)
        assert result.exit_code == 2
        assert "holds something else" in one_line(result)
    assert left(here / "out.partial") == ["thesis.txt"]
    assert sweeps == []


def test_two_runs_do_not_share_a_folder(here: Path, monkeypatch: pytest.MonkeyPatch, sweeps: list[PlateSweep]) -> None:
    pytest.importorskip("fcntl")
    stopped(here, monkeypatch, sweeps)
    problem = ws.load("wire.toml")
    with gate_curve_partial.kept_points(here / "out", problem) as points:
        assert sorted(points.open(restart=False)) == [0, 1, 2]
        result = run(*OUT)
        assert result.exit_code == 2
        assert "another run is at work in out.partial" in one_line(result)
    assert run(*OUT).exit_code == 0


SLOW = """
import sys
sys.path.insert(0, {repository!r})
import importlib
from tests.gate_sweeps import PlateSweep
from wiresolve.cli import main

sweep = importlib.import_module("wiresolve.sweep")
sweep.sweep_of = lambda problem, _: PlateSweep(problem, delay_s=0.3)
main(["gate-curve", "wire.toml", "--out", "out", "--no-figures"])
"""


@pytest.mark.parametrize("how", [signal.SIGKILL, signal.SIGTERM, signal.SIGINT])
def test_a_killed_run_goes_on(here: Path, sweeps: list[PlateSweep], how: signal.Signals) -> None:
    script = SLOW.format(repository=str(Path(__file__).resolve().parents[1]))
    started = subprocess.Popen(
        [sys.executable, "-c", script], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    for _ in range(600):
        if (here / "out.partial" / "point_0003.json").exists():
            break
        time.sleep(0.05)
    started.send_signal(how)
    out, err = started.communicate(timeout=60)
    codes = {signal.SIGKILL: -9, signal.SIGTERM: 143, signal.SIGINT: 130}
    assert (started.returncode, out) == (codes[how], ""), err
    assert left(here) == ["out.partial", "wire.toml"]
    done = len(list((here / "out.partial").glob("*.json"))) - 1
    assert 3 <= done < 7
    assert run(*OUT).exit_code == 0
    assert sweeps[-1].asked == list(range(done, 7))
    assert left(here) == ["out", "wire.toml"]
    assert run("gate-curve", "wire.toml", "--out", "whole", "--no-figures").exit_code == 0
    assert contents(here / "out") == contents(here / "whole")


def test_the_series_is_read_back(tmp_path: Path) -> None:
    curve = gate_curve(swept_problem(), solver=recording([], failing=(2,)))
    ws.write(curve, tmp_path / "out", figures=False)
    reader = pyvista.get_reader(str(tmp_path / "out" / "gate_curve.pvd"))
    good = curve.converged
    assert reader.time_values == [p.gate_voltage_V for p in good]
    for place in (0, 5):
        reader.set_active_time_point(place)
        grid = reader.read()[0]
        point = good[place]
        assert set(grid.celltypes) == {VTK_LAGRANGE_TRIANGLE}
        # Points where materials meet stand there once for each side.
        places = {tuple(at): n for n, at in enumerate(grid.points[:, :2].tolist())}
        order = [places[tuple(at)] for at in curve.mesh.points.tolist()]
        assert {f"psi_{n:02d}_per_nm" for n in range(1, 7)} < set(grid.point_data.keys())
        assert np.array_equal(grid.point_data["potential_V"][order], point.potential_V)
        assert np.array_equal(grid.point_data["density_per_nm3"][order], point.density_per_nm3)
        assert np.array_equal(grid.point_data["psi_03_per_nm"][order], point.modes[:, 2])
        assert np.array_equal(grid.field_data["energy_eV"], point.energy_eV)
        assert grid.field_data["gate_voltage_V"].tolist() == [point.gate_voltage_V]
        assert grid.field_data["input_digest"].tolist() == [curve.problem.digest]
        # VTK's own functions on curved cells: the wire's area, and modes that hold one electron each.
        area = integrals(grid, np.ones(grid.n_points)).sum()
        assert area == pytest.approx(math.pi * RADIUS_NM**2, rel=1e-5)
        assert integrals(grid, grid.point_data["psi_01_per_nm"]).sum() == pytest.approx(1, abs=2e-3)


def test_a_series_stands_alone(tmp_path: Path) -> None:
    gate_curve_files.write_series(gate_curve(swept_problem(2), solver=recording([])), tmp_path)
    assert left(tmp_path) == ["gate_curve.pvd", "points"]
    assert left(tmp_path / "points") == ["point_0001.vtu", "point_0002.vtu"]


def test_times_of_a_sweep_that_goes_down_ascend(tmp_path: Path) -> None:
    down = swept_problem(3)
    down = replace(down, voltages=replace(down.voltages, from_V=0.3, to_V=0.0))
    curve = gate_curve(down, solver=recording([]))
    gate_curve_files.write_series(curve, tmp_path)
    reader = pyvista.get_reader(str(tmp_path / "gate_curve.pvd"))
    assert reader.time_values == [0.0, 0.15, 0.3]
    reader.set_active_time_point(2)
    assert set(reader.read()[0].point_data["potential_V"]) == set(curve.points[0].potential_V)


def test_figures_say_what_they_show() -> None:
    curve = gate_curve(swept_problem(31, drain_V=(0.05, 0.3)), solver=recording([], failing=(4,)))
    for name, draw in gate_curve_figures.FIGURES.items():
        axes = draw(curve).axes[0]
        assert axes.get_ylabel().endswith((")",)), name
    levels = gate_curve_figures.levels(curve).axes[0]
    assert levels.get_xlabel() == "Voltage of the gate “wrap” (V)"
    assert levels.get_ylabel() == "Energy from the source's Fermi level (meV)"
    curves = [line for line in levels.lines if len(line.get_ydata()) > 31]
    assert len(curves) == 6
    # Lines go through the solved points; through the failed one too, which is marked.
    for point in (curve.points[n] for n in (0, 10, 30)):
        drawn = [np.interp(point.gate_voltage_V, *line.get_data()) for line in curves]
        assert sorted(drawn) == pytest.approx((1e3 * point.energy_eV).tolist())
    assert "× did not converge" in levels.get_title("left")
    stairs = gate_curve_figures.staircase(curve)
    assert stairs.axes[0].lines[1].get_ydata()[20] == curve.points[20].conductance_G0
    # Both scales of the staircase say the same: 77.48 microsiemens a step.
    assert stairs.axes[1].get_ylim()[1] == pytest.approx(77.48091729 * stairs.axes[0].get_ylim()[1], rel=1e-8)
    transfer = gate_curve_figures.transfer(curve)
    for axes in transfer.axes:
        current = axes.lines[1].get_ydata()
        found = next(t for t in curve.transistor if (t.gate_voltage_V, t.drain_voltage_V) == (0.3, 0.3))
        assert current[30] == pytest.approx(1e6 * found.current_A)
    output = gate_curve_figures.output(curve).axes[0]
    assert output.lines[0].get_xdata().tolist() == [0.0, 0.05, 0.3]
    assert output.lines[0].get_ydata()[0] == 0.0


def test_between_solved_points_figures_draw_the_staircase() -> None:
    """Seven points at 4.2 K, steps much narrower than the 50 mV between them, against 61 points in closed form."""
    coarse = gate_curve(swept_problem(7, temperature_K=4.2), solver=recording([]))
    exact = gate_curve(swept_problem(61, temperature_K=4.2), solver=recording([]))
    at, truth = (np.array([getattr(p, name) for p in exact.points]) for name in ("gate_voltage_V", "conductance_G0"))
    line = gate_curve_figures.staircase(coarse).axes[0].lines[0]
    drawn = np.interp(at, *line.get_data())
    straight = np.interp(at, [p.gate_voltage_V for p in coarse.points], [p.conductance_G0 for p in coarse.points])
    assert np.abs(straight - truth).mean() > 5 * np.abs(drawn - truth).mean()
    for half in (0.5, 2.0):  # the middles of the steps from 0 to 1 and from 1 to 3
        passed = [float(np.interp(half, conductance, volts)) for volts, conductance in (line.get_data(), (at, truth))]
        assert passed[0] == pytest.approx(passed[1], abs=2e-3)
    for flat in (0.08, 0.15, 0.2):
        assert np.interp(flat, *line.get_data()) == pytest.approx(np.interp(flat, at, truth), abs=1e-3)
    # Levels meet the Fermi level where steps open: that of the first subband, and of the two of the second level.
    lines = gate_curve_figures.levels(coarse).axes[0].lines[1:4]
    for step, curve in ((0, lines[0]), (1, lines[1]), (1, lines[2])):
        assert np.interp(coarse.steps[step].opens_at_V, *curve.get_data()) == pytest.approx(0.0, abs=1e-2)


def test_two_points_of_which_one_failed_are_joined_by_nothing() -> None:
    curve = gate_curve(swept_problem(2), solver=recording([], failing=(0,)))
    assert between_points_of(curve) is None
    assert np.isnan(gate_curve_figures.staircase(curve).axes[0].lines[0].get_ydata()).tolist() == [True, False]


@pytest.mark.parametrize("name", ["levels", "staircase", "density_and_capacitance", "transfer", "output"])
def test_texts_of_figures_stay_inside(name: str) -> None:
    curve = gate_curve(swept_problem(31, drain_V=(0.05, 0.1, 0.3)), solver=recording([], failing=(4,)))
    figure = gate_curve_figures.FIGURES[name](curve)
    figure.canvas.draw()
    frame = figure.bbox
    for axes in figure.axes:
        texts = [axes.title, axes._left_title, axes.xaxis.label, axes.yaxis.label, *axes.texts]
        for text in texts:
            if text.get_text():
                box = text.get_window_extent()
                assert box.x0 >= -1, text
                assert box.x1 <= frame.x1 + 1, text
                assert box.y0 >= -1, text
                assert box.y1 <= frame.y1 + 1, text


def test_a_cold_sweep_of_two_points_can_be_drawn(tmp_path: Path) -> None:
    curve = gate_curve(swept_problem(2, temperature_K=0.0), solver=recording([], failing=(0,)))
    written = gate_curve_figures.save_all(curve, tmp_path)
    assert len(written) == 9


def test_measured_points_outside_of_the_sweep_are_counted(here: Path, sweeps: list[PlateSweep]) -> None:
    (here / "points.csv").write_text("gate_voltage_V,conductance_G0\n-2,0\n-1,1\n0.1,1\n")
    result = run(*OUT, "--measured", "points.csv")
    assert (result.exit_code, len(sweeps)) == (0, 1)
    said = one_line(result)
    assert said.startswith("wiresolve: warning: 2 of 3 measured points lie outside of the sweep, 0 V to 0.3 V; ")
    quiet = run(*OUT, "--measured", "points.csv", "--replace", "--quiet")
    assert (quiet.exit_code, quiet.stdout, quiet.stderr) == (0, "", "")


def test_what_makes_a_sweep_long_is_said_before_it(
    here: Path, sweeps: list[PlateSweep], monkeypatch: pytest.MonkeyPatch
) -> None:
    growing = importlib.import_module("wiresolve.physics.growing_masses")
    monkeypatch.setattr(growing, "cost_text", lambda wire: f"{wire.problem.title} takes long")
    assert one_line(run(*OUT)).endswith(" takes long")
    assert run(*OUT, "--replace", "--quiet").stderr == ""
    assert "takes long" in " ".join(run("check", "wire.toml").stdout.split())
