"""Measured points outside of what was computed are counted, and the shift of gate voltages is that of closed forms."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from tests.gate_sweeps import PlateSweep, swept_problem
from tests.synthetic import core_shell_result
from wiresolve.gate_curve import gate_curve
from wiresolve.gate_result import GateCurve, GateStep
from wiresolve.output.measured import Measured
from wiresolve.output.measured_outside import (
    first_passes,
    lineup_shift_V,
    missed_by_curves,
    missed_by_sweep,
    outside,
)


def fermi_step(low_V: float, high_V: float, middle_V: float, height_G0: float = 1.0, count: int = 401) -> Measured:
    """A thermally rounded step, 10 mV wide in its exponent: half of its height is passed at its middle, exactly."""
    volts = np.linspace(low_V, high_V, count)
    return Measured("gate_voltage_V", volts, height_G0 / (1 + np.exp(-(volts - middle_V) / 0.01)), "made")


def stepped(plateau_G0: float = 1.0) -> GateCurve:
    """A sweep from 0 V to 0.3 V whose first step opens at 0.02 V."""
    step = GateStep(1, "zone centre", 0.02, 1e-3, plateau_G0, plateau_G0, 0.03)
    return replace(gate_curve(swept_problem(), solver=PlateSweep), steps=(step,))


def test_a_line_passes_where_it_does() -> None:
    points = Measured("gate_voltage_V", [3.0, 1.0, 2.0, 2.0], [3.0, 1.0, 1.5, 2.5], "made")  # not in order; y = x
    assert first_passes(points, 1.75) == pytest.approx(1.75, rel=1e-15)
    assert math.isnan(first_passes(points, 0.5))
    assert math.isnan(first_passes(points, 3.5))


def test_the_first_rise_counts() -> None:
    points = Measured("gate_voltage_V", np.arange(5.0), [0.0, 1.0, 0.0, 1.0, 2.0], "made")
    assert first_passes(points, 0.5) == 0.5


@pytest.mark.parametrize("height_G0", [1.0, 0.79, 2.0])
def test_the_shift_is_that_of_the_middles(height_G0: float) -> None:
    points = fermi_step(-2.0, 0.0, -1.6, height_G0)
    assert lineup_shift_V(points, 0.02, height_G0, height_G0) == pytest.approx(-1.62, abs=1e-12)
    # A step on top of an open level.
    raised = replace(points, conductance_G0=points.conductance_G0 + 1)
    assert lineup_shift_V(raised, 0.02, 1 + height_G0, height_G0) == pytest.approx(-1.62, abs=1e-12)


def test_points_outside_are_counted_and_the_way_is_said() -> None:
    points = fermi_step(-2.0, 0.0, -1.6)
    assert outside(points, 0.0, 0.3) == 400
    said = missed_by_sweep(stepped(), points)
    assert said.startswith("400 of 401 measured points lie outside of the sweep, 0 V to 0.3 V")
    assert 'lineup_voltage = "-1.62 V" for gate wrap' in said
    assert "(-1.62 V)" in said
    assert "0.5 G0, at -1.6 V" in said


def test_a_work_function_moves_likewise() -> None:
    curve = stepped()
    gate = replace(curve.problem.gates[0], lineup_voltage_V=None, work_function_eV=4.6)
    said = missed_by_sweep(replace(curve, problem=replace(curve.problem, gates=(gate,))), fermi_step(-2.0, 0.0, -1.6))
    assert 'work_function = "2.98 eV"' in said


def test_nothing_is_said_without_need() -> None:
    assert missed_by_sweep(stepped(), fermi_step(0.0, 0.3, 0.1)) == ""
    assert "nowhere rises through its middle, 2 G0" in missed_by_sweep(stepped(4.0), fermi_step(-1.0, 1.0, 0.0))
    none = replace(stepped(), steps=())
    assert missed_by_sweep(none, fermi_step(-1.0, 1.0, 0.0)).endswith("no step opens in it that could be compared")


def test_points_outside_of_the_fermi_levels_are_counted() -> None:
    result = core_shell_result(3)
    inside = float(result.energies_eV.min())
    assert missed_by_curves(result, Measured("fermi_level_eV", [inside], [1.0], "made")) == ""
    said = missed_by_curves(result, Measured("fermi_level_eV", [inside, 9.0, -9.0], [1.0, 1.0, 0.0], "made"))
    assert said.startswith("2 of 3 measured points lie outside of the Fermi levels shown, ")
