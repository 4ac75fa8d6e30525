"""The driver of a gate sweep, with points in closed form: order, starts, failures, finished points, plain data."""

from __future__ import annotations

import csv
import importlib
import json
import math
from dataclasses import replace
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

import wiresolve as ws
from tests.gate_sweeps import PlateSweep, recording, swept_problem
from wiresolve.errors import ConvergenceError, InputError
from wiresolve.gate_curve import GateCurve, GatePoint, gate_curve
from wiresolve.gate_result import GateStep, failed_point
from wiresolve.output.gate_curve_tables import gate_curve_csv, gate_curve_json, step_table, summary, transistor_csv
from wiresolve.physics.pace import rounded_time
from wiresolve.units import KB


def solved(problem: Any = None, **how: Any) -> tuple[GateCurve, PlateSweep]:
    sweeps: list[PlateSweep] = []
    curve = gate_curve(problem or swept_problem(), solver=recording(sweeps, **how))
    (sweep,) = sweeps
    return curve, sweep


def test_points_are_asked_for_in_order_each_from_the_last_one() -> None:
    curve, sweep = solved()
    at = curve.problem.voltages.points
    assert sweep.asked == list(range(7))
    assert sweep.starts == [None, *at[:-1]]
    assert [p.gate_voltage_V for p in curve.points] == list(at)
    assert curve.mesh is sweep.mesh
    assert (curve.failed, curve.failure, curve.accuracy_met, curve.transistor) == ((), "", True, ())
    assert curve.versions["wiresolve"]
    assert repr(curve) == "<GateCurve 'A round wire under a wrap gate': 7 of 7 points from 0 V to 0.3 V>"


def test_a_sweep_goes_down_as_well() -> None:
    down = swept_problem()
    down = replace(down, voltages=replace(down.voltages, from_V=0.3, to_V=0.0))
    curve, _ = solved(down)
    assert [p.gate_voltage_V for p in curve.points] == sorted((p.gate_voltage_V for p in curve.points), reverse=True)


def test_a_failed_point_is_marked_and_the_next_starts_from_the_last_good_one() -> None:
    told = []
    sweeps: list[PlateSweep] = []
    curve = gate_curve(
        swept_problem(),
        on_point=lambda place, point: told.append((place, point.converged)),
        solver=recording(sweeps, failing=(2, 3)),
    )
    at = curve.problem.voltages.points
    assert sweeps[0].starts == [None, at[0], at[1], at[1], at[1], at[4], at[5]]
    assert told == [(n, n not in (2, 3)) for n in range(7)]
    assert [p.converged for p in curve.points] == [n not in (2, 3) for n in range(7)]
    bad = curve.points[2]
    assert bad.gate_voltage_V == bad.voltages_V["wrap"] == at[2]
    assert "2 mV after 40 passes" in bad.note
    assert math.isnan(bad.conductance_G0)
    assert math.isnan(bad.conductance_S)
    assert bad.energy_eV.size == bad.potential_V.size == bad.modes.size == 0
    assert curve.failure == "2 of 7 points did not converge, the first at 0.1 V (the last good one at 0.05 V)"
    first = gate_curve(swept_problem(), solver=recording([], failing=(0,)))
    assert first.failure == "1 of 7 points did not converge, the first at 0 V (none before it is good)"


def test_a_point_that_says_itself_that_it_failed_is_no_start() -> None:
    class Doubtful(PlateSweep):
        def point(self, gate_voltage_V: float, previous: GatePoint | None) -> GatePoint:
            found = super().point(gate_voltage_V, previous)
            return replace(found, converged=False, note="stuck") if self.asked[-1] == 1 else found

    sweeps = []

    def solver(problem: Any) -> PlateSweep:
        sweeps.append(Doubtful(problem))
        return sweeps[0]

    curve = gate_curve(swept_problem(3), solver=solver)
    assert sweeps[0].starts == [None, 0.0, 0.0]
    assert [p.note for p in curve.failed] == ["stuck"]


def test_no_point_at_all_is_an_error() -> None:
    with pytest.raises(ConvergenceError, match=r"none of the 7 points converged; the first, at 0 V: .*40 passes"):
        solved(failing=range(7))


def test_finished_points_are_not_solved_again() -> None:
    whole, _ = solved(swept_problem(drain_V=(0.1,)))
    sweeps: list[PlateSweep] = []
    finished = {n: whole.points[n] for n in (0, 1, 4)}
    problem = swept_problem(drain_V=(0.1,))
    curve = gate_curve(problem, finished=finished, solver=recording(sweeps))
    at = whole.problem.voltages.points
    assert sweeps[0].asked == [2, 3, 5, 6]
    assert sweeps[0].starts == [at[1], at[2], at[4], at[5]]
    assert gate_curve_json(curve) == gate_curve_json(whole)


def test_points_of_another_sweep_are_refused() -> None:
    whole, _ = solved()
    with pytest.raises(InputError, match="not of this sweep"):
        gate_curve(swept_problem(5), finished={1: whole.points[1]}, solver=recording([]))
    with pytest.raises(InputError, match="not of this sweep"):
        gate_curve(swept_problem(), finished={7: whole.points[6]}, solver=recording([]))
    cut = replace(whole.points[1], potential_V=whole.points[1].potential_V[:-1])
    with pytest.raises(InputError, match="another mesh"):
        gate_curve(swept_problem(), finished={1: cut}, solver=recording([]))


def test_what_is_no_sweep_is_refused() -> None:
    for lacking, says in (({"voltages": None}, "voltages: is missing"), ({"gates": (), "voltages": None}, "no gate")):
        with pytest.raises(InputError, match=says) as caught:
            gate_curve(swept_problem(**lacking), solver=recording([]))
        assert "\n" not in str(caught.value)


def test_progress_tells_the_place_and_the_time_left(monkeypatch: pytest.MonkeyPatch) -> None:
    clock = iter(np.arange(0.0, 1000.0, 10.0))
    watch = SimpleNamespace(perf_counter=lambda: float(next(clock)))
    monkeypatch.setattr(importlib.import_module("wiresolve.gate_curve"), "time", watch)
    told: list[tuple[str, float, str]] = []
    gate_curve(swept_problem(4), on_progress=lambda *t: told.append(t), solver=recording([]))
    # One look at the clock at the start and one before each point but the first: the first took 10 s.
    assert told == [
        ("mesh", 0.0, ""),
        ("gate voltage", 0.0, "1 of 4"),
        ("gate voltage", 0.25, "2 of 4, about 30 s left"),
        ("gate voltage", 0.5, "3 of 4, about 20 s left"),
        ("gate voltage", 0.75, "4 of 4, about 10 s left"),
        ("steps", 1.0, ""),
    ]


@pytest.mark.parametrize(
    ("seconds", "text"), [(0.2, "1 s"), (7.4, "7 s"), (43, "45 s"), (99, "100 s"), (130, "2 min"), (9000, "2.5 h")]
)
def test_times_are_round(seconds: float, text: str) -> None:
    assert rounded_time(seconds) == text


def test_plain_data_is_json_without_holes() -> None:
    curve, _ = solved(swept_problem(drain_V=(0.05, 0.2)), failing=(1,), measures={"threshold_V": math.nan, "n": 2})
    data = json.loads(gate_curve_json(curve, "marked"))
    assert data["schema"] == "wiresolve-gate-curve-1"
    assert data["status"] == "marked"
    assert data["input_digest"] == curve.problem.digest
    assert data["energy_zero"]["text"] == "source's Fermi level"
    assert data["gates"] == [{"name": "wrap", "voltage_V": 0.0}]
    assert (data["swept_gate"], data["temperature_K"]) == ("wrap", 77.0)
    assert data["measures"] == {"threshold_V": None, "n": 2}
    assert len(data["points"]) == 7
    assert len(data["transistor"]) == 12
    assert data["points"][1]["conductance_G0"] is None
    assert data["points"][1]["energy_eV"] == []
    # Exact: every float is written so that it reads back as it was.
    assert data["points"][2]["energy_eV"] == curve.points[2].energy_eV.tolist()
    assert "modes" not in data["points"][2]
    assert data["steps"][2]["opens_at_V"] is None
    assert {m["source"] for m in data["materials"]}


def rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))


def test_the_csv_holds_the_points_exactly() -> None:
    curve, _ = solved(failing=(1,))
    text = gate_curve_csv(curve, "marked")
    assert text.startswith("# wiresolve gate curve of A round wire under a wrap gate\n")
    assert f"# status marked; input digest {curve.problem.digest}\n" in text
    table = rows(text)
    assert len(table) == 7
    for row, point in zip(table, curve.points, strict=True):
        assert float(row["gate_voltage_V"]) == point.gate_voltage_V
        assert row["converged"] == ("true" if point.converged else "false")
        if not point.converged:
            assert row["conductance_G0"] == row["energy_1_eV"] == row["coupling_6"] == ""
            assert "40 passes" in row["note"]
            continue
        for name in ("line_density_per_nm", "capacitance_F_per_m", "gate_coupling", "conductance_G0", "residual_V"):
            assert float(row[name]) == getattr(point, name)
        assert float(row["conductance_S"]) == pytest.approx(7.748091729e-5 * point.conductance_G0, rel=1e-9)
        for n in range(6):
            assert float(row[f"energy_{n + 1}_eV"]) == point.energy_eV[n]
            assert float(row[f"line_density_{n + 1}_per_nm"]) == point.line_density_by_subband_per_nm[n]
        assert float(row["level_spacing_eV"]) == point.more["level_spacing_eV"]
        assert float(row["charge_on_wrap_per_nm"]) == point.gate_charge_per_nm["wrap"]
    units = ("_V", "_nm", "_m", "_eV", "_G0", "_S")
    plain = ("gate_coupling", "coupling_", "level_", "valley_", "passes", "gauss_error", "converged", "note")
    assert [h for h in table[0] if not h.endswith(units) and not h.startswith(plain)] == []


def test_the_transistor_table_follows_the_closed_form() -> None:
    """At a large drain voltage only the source injects: I = G0 kT/e sum of ln(1 + exp(-E/kT)) (K. Natori, J. Appl.
    Phys. 76, 4879 (1994); from memory)."""
    curve, _ = solved(swept_problem(drain_V=(0.01, 5.0)))
    table = rows(transistor_csv(curve))
    assert list(table[0]) == [
        "gate_voltage_V",
        "drain_voltage_V",
        "current_A",
        "line_density_per_nm",
        "gate_coupling",
        "drain_coupling",
    ]
    far = [float(r["current_A"]) for r in table if float(r["drain_voltage_V"]) == 5.0]
    thermal = KB * 77.0
    limit = [7.748091729e-5 * thermal * np.log1p(np.exp(-p.energy_eV / thermal)).sum() for p in curve.points]
    assert far == pytest.approx(limit, rel=1e-9)


def test_steps_and_verdict_are_printed() -> None:
    curve, sweep = solved(swept_problem(31), failing=(3,))
    text = summary(curve, "results/wire", "marked")
    assert text.startswith("A round wire under a wrap gate\n30 points; the first step opens below 0.2 V.\n")
    assert "30 of 31 points" in text
    assert "FAILED at 0.03 V: the residual stays at 2 mV" in text
    assert text.endswith("Marked: marked.\n\nFiles: results/wire")
    assert max(map(len, text.splitlines())) <= 96
    lines = step_table(curve)
    # Solved once more at the voltage printed, the first level is at the Fermi level.
    opens = float(lines[2].split()[1])
    point = sweep._solved(opens)
    assert abs(point.energy_eV[0]) < 1e-4
    assert lines[2].split()[4:6] == ["1", "1"]
    assert lines[3].split()[4:6] == ["2", "3"]
    assert lines[-1] == "levels 3, 4 open at no voltage of this sweep"


def test_steps_without_numbers_are_printed() -> None:
    curve, _ = solved(swept_problem(3))
    assert step_table(replace(curve, steps=())) == []
    closed = GateStep(1, "", math.nan, math.nan, 1.0, 1.0, math.nan)
    assert step_table(replace(curve, steps=(closed,))) == ["level 1 opens at no voltage of this sweep"]
    opened = replace(closed, opens_at_V=0.25, error_V=0.001)
    assert step_table(replace(curve, steps=(opened,)))[2].split() == ["1", "0.250", "±", "0.001", "1", "1"]


def test_a_missed_accuracy_is_known() -> None:
    curve, _ = solved(swept_problem(3))
    points = (replace(curve.points[0], error_eV=curve.points[0].error_eV * 10), *curve.points[1:])
    coarse = replace(curve, points=points)
    assert not coarse.accuracy_met
    assert coarse.largest_error_eV == pytest.approx(2e-4)
    assert "ACCURACY MISSED: asked for 0.1 meV, the largest bar is 0.2 meV" in summary(coarse)


def test_a_failed_point_has_every_field() -> None:
    point = failed_point({"wrap": 0.2, "back": -1.0}, "wrap", "stuck")
    assert (point.gate_voltage_V, point.voltages_V, point.passes) == (0.2, {"wrap": 0.2, "back": -1.0}, 0)
    assert point.to_dict()["capacitance_F_per_m"] is None


def test_the_package_shows_the_function() -> None:
    assert ws.gate_curve is gate_curve
    assert ws.GateCurve is GateCurve
