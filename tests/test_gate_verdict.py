"""A sweep's points, its steps and how they move, against a separate solver; and what is said of the steps."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq

from tests import independent_round
from tests.charged_wires import GATE, of_round
from tests.independent_round import INAS, Filled, Round
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.gate_result import GatePoint, GateStep, failed_point
from wiresolve.gate_verdict import OpenStep, measures_of, sentences, steps_of
from wiresolve.physics.capacitance import per_V_nm
from wiresolve.step_motion import Motion
from wiresolve.sweep import WireSweep
from wiresolve.units import KB

Array = NDArray[np.float64]

KELVIN = 77.0
WIRE = replace(INAS, temperature_K=KELVIN)
EXACT = Voltages(GATE, 0.05, 0.45, 6)
STEPS = Voltages(GATE, 0.0, 0.45, 10)


def subbands(solved: Filled, count: int) -> list[float]:
    """Levels with an angular momentum count twice."""
    return [e for e, momentum, _ in solved.levels for _ in range(2 if momentum else 1)][:count]


@cache
def exact_points() -> tuple[GatePoint, ...]:
    """Six points to 1e-6 eV."""
    return run(WireSweep(of_round(WIRE, 5, 1e-6, EXACT)), EXACT)


@cache
def separate() -> tuple[Filled, ...]:
    """The same points by the separate solver."""
    return tuple(independent_round.sweep(WIRE, np.array(EXACT.points)))


def run(sweep: WireSweep, voltages: Voltages) -> tuple[GatePoint, ...]:
    """All points, each from the last one."""
    points: list[GatePoint] = []
    for voltage in voltages.points:
        points.append(sweep.point(voltage, points[-1] if points else None))
    return tuple(points)


@cache
def coarse() -> tuple[WireSweep, tuple[GatePoint, ...]]:
    """Many points, as for planning."""
    sweep = WireSweep(of_round(WIRE, 5, 1e-4, STEPS))
    return sweep, run(sweep, STEPS)


@cache
def opening_V(momentum: int, wire: Round = WIRE, level_eV: float = 0.0) -> float:
    """Where the separate solver's lowest level of an angular momentum is at the Fermi level, or so far above it."""

    def energy(voltage: float) -> float:
        solved = independent_round.solve(replace(wire, gate_potential_V=voltage, points=40, states=24))
        return next(e for e, m, _ in solved.levels if m == momentum) - level_eV

    return float(brentq(energy, -0.1, 0.5, xtol=1e-9 if level_eV == 0 else 1e-5))


def test_points_are_those_of_the_separate_solver() -> None:
    wanted = separate()
    for point, solved in zip(exact_points(), wanted, strict=True):
        assert point.converged
        assert point.passes <= 8
        assert point.gauss_error <= 1e-8
        assert point.energy_eV == pytest.approx(subbands(solved, 5), abs=1e-6)
        assert point.line_density_per_nm == pytest.approx(solved.line_density_per_nm, rel=1e-6)
        assert per_V_nm(point.capacitance_F_per_m) == pytest.approx(solved.capacitance_per_V_nm, rel=1e-6)


def test_couplings_are_those_of_the_separate_solver() -> None:
    wanted = separate()
    for point, solved in zip(exact_points(), wanted, strict=True):
        slopes = [
            -d for (_, m, _), d in zip(solved.levels, solved.level_slopes, strict=True) for _ in range(2 if m else 1)
        ]
        assert point.coupling == pytest.approx(slopes[:5], rel=1e-5)
        assert point.gate_coupling == point.coupling[0]


def test_parts_of_the_capacitance_are_in_series() -> None:
    for point in exact_points()[1:]:
        parts = point.geometric_F_per_m, point.quantum_F_per_m, point.centroid_F_per_m
        assert 1 / point.capacitance_F_per_m == pytest.approx(sum(1 / part for part in parts), rel=1e-10)
        coaxial = 2 * np.pi * independent_round.EPSILON0_PER_V_NM * 9.0 / np.log(20 / 15)
        assert per_V_nm(point.geometric_F_per_m) == pytest.approx(coaxial, rel=1e-8)


def test_listed_subbands_hold_the_carriers() -> None:
    for point, solved in zip(exact_points(), separate(), strict=True):
        each = [n / (2 if m else 1) for _, m, n in solved.levels for _ in range(2 if m else 1)][:5]
        assert point.line_density_by_subband_per_nm == pytest.approx(each, rel=1e-5, abs=1e-12)


def test_conductance_is_the_staircase_of_the_levels() -> None:
    for point, solved in zip(exact_points(), separate(), strict=True):
        energies = np.array([e for e, m, _ in solved.levels for _ in range(2 if m else 1)])
        fermi = 1 / (1 + np.exp(np.clip(energies / (KB * KELVIN), -500, 500)))
        assert point.conductance_G0 == pytest.approx(float(fermi.sum()), rel=2e-5)


def test_steps_open_where_single_solves_say() -> None:
    sweep, points = coarse()
    steps = sweep.steps(points)
    assert [step.height_G0 for step in steps] == [1, 2, 2]
    assert [step.plateau_G0 for step in steps] == [1, 3, 5]
    for step, momentum in zip(steps, (0, 1, 2), strict=True):
        assert step.opens_at_V == pytest.approx(opening_V(momentum), abs=max(step.error_V, 2e-4))


def test_width_is_the_range_in_which_the_level_passes_the_fermi_level() -> None:
    """From 1.76 kT above to as far below: half of the full width at half maximum of -df/dE, 4 ln(1 + sqrt 2) kT."""
    half = 2 * math.log(1 + math.sqrt(2)) * KB * KELVIN
    sweep, points = coarse()
    for step, momentum in zip(sweep.steps(points), (0, 1, 2), strict=True):
        wanted = opening_V(momentum, level_eV=-half) - opening_V(momentum, level_eV=half)
        assert step.width_V == pytest.approx(wanted, rel=0.02)


def test_steps_move_with_the_diameter_as_solves_of_other_wires_say() -> None:
    """A diameter half a nanometre larger in all: 0.25 to either side."""
    sweep, points = coarse()
    steps = sweep.steps(points)
    for step, momentum in zip(steps, (0, 1, 2), strict=True):
        larger, smaller = (
            opening_V(momentum, replace(WIRE, radius_nm=WIRE.radius_nm + sign * 0.125)) for sign in (1, -1)
        )
        assert step.moves_V_per_nm == pytest.approx((larger - smaller) / 0.5, rel=2e-2)


def test_steps_move_with_the_insulator_as_solves_of_other_wires_say() -> None:
    sweep, points = coarse()
    measures = sweep.judged(points, sweep.steps(points), ()).measures
    for number, momentum in enumerate((0, 1, 2), 1):
        moved = measures[f"step_{number}_moves_with_gates[1].insulator.thickness_V_per_nm"]
        thicker, thinner = (
            opening_V(momentum, replace(WIRE, insulator_nm=WIRE.insulator_nm + sign * 0.25)) for sign in (1, -1)
        )
        assert moved == pytest.approx((thicker - thinner) / 0.5, rel=2e-2, abs=2e-5)


def test_steps_do_not_need_every_point() -> None:
    """With twice the spacing they stay within their bars."""
    sweep, points = coarse()
    fewer = WireSweep(sweep.problem)
    fewer.__dict__["_ends"] = sweep._ends  # the same mesh
    whole, some = sweep.steps(points), fewer.steps(points[::2])
    assert [one.height_G0 for one in some] == [one.height_G0 for one in whole]
    for one, other in zip(whole, some, strict=True):
        assert abs(one.opens_at_V - other.opens_at_V) <= one.error_V + other.error_V
    assert steps_of(sweep.problem, points[:1]) == ()


def test_heights_are_those_that_a_measurement_shows() -> None:
    """Levels of 1, 2 and 2 subbands behind 2 kohm, of which each lets 0.9 through: 1/(1/G + R), R in h/(2 e^2)."""
    sweep, points = coarse()
    given = Transport(transmission=(0.9,), contact_resistance_ohm=2000.0)
    steps = steps_of(replace(sweep.problem, transport=given), points)
    ohm = 12906.403729652257  # h/(2 e^2), CODATA 2022
    plateaus = [1 / (1 / (0.9 * count) + 2000 / ohm) for count in (1, 3, 5)]
    assert [one.step.plateau_G0 for one in steps] == pytest.approx(plateaus, rel=1e-12)
    assert [one.step.height_G0 for one in steps] == pytest.approx(np.diff([0, *plateaus]), rel=1e-12)
    assert [one.step.subbands for one in steps] == [1, 2, 2]


def test_bars_of_steps_hold() -> None:
    sweep, points = coarse()
    for step, momentum in zip(sweep.steps(points), (0, 1, 2), strict=True):
        assert abs(step.opens_at_V - opening_V(momentum)) <= step.error_V


def test_a_failed_point_does_not_count() -> None:
    """The driver gives only those that converged; a point's failure leaves no numbers."""
    failed = failed_point({GATE: 0.1}, GATE, "no balance")
    assert not failed.converged
    assert np.isnan(failed.line_density_per_nm)


def step(number: int, volts: float, height: float = 1.0) -> OpenStep:
    """A made-up step."""
    opened = GateStep(number, "zone centre", volts, 1e-4, height, float(number), 0.025)
    return OpenStep(opened, subband=number - 1, coupling=0.9, error_eV=1e-4)


def said(steps: list[OpenStep], motions: tuple[Motion, ...] = ()) -> str:
    """The verdict's sentences on made-up steps."""
    problem = of_round(WIRE, 5, 1e-4, STEPS)
    return " ".join(sentences(problem, coarse()[1], steps, motions, "in the middle", None, None))


def test_no_step_is_said() -> None:
    text = said([])
    assert "no listed subband opens between 0 V and 0.45 V on gate 'wrap'" in text
    assert "the first is closed where the sweep begins" in text


def test_one_step_is_said() -> None:
    text = said([step(1, 0.125)], (Motion("section.diameter", 30.0, (-0.012,)),))
    assert "one step open" in text
    assert "at 0.1250 ± 0.0001 V, of 1 G0" in text
    assert "The first step moves with half a nanometre more of diameter by -6 mV." in text
    assert "25 mV wide at 77 K" in text


def test_five_steps_are_said_by_the_first_three() -> None:
    steps = [step(n, 0.1 * n, 1.0 + (n == 2)) for n in range(1, 6)]
    text = said(steps, (Motion("gates[1].insulator.thickness", 2.0, (0.01, 0.02, 0.03)),))
    assert (
        "5 steps open, the first 3 at 0.1000 ± 0.0001 V, 0.2000 ± 0.0001 V and 0.3000 ± 0.0001 V, of 1, 2 and 1 G0"
        in text
    )
    assert "The first 3 steps move with a tenth of a nanometre more of the insulator's thickness by" in text
    assert "+1, +2 and +3 mV" in text


def test_what_numbers_rest_on_is_said() -> None:
    text = said([step(1, 0.125)])
    assert "All voltages rest on the line-up voltage given" in text
    assert "contacts and a channel that scatter nothing" in text
    last = coarse()[1][-1]
    found = re.search(r"It holds ([\d.]+e\d+) carriers per cm \(([\d.]+) per nm\) there, in the middle\.", text)
    assert found is not None
    assert float(found[1]) == pytest.approx(1e7 * last.line_density_per_nm, rel=5e-3)
    assert float(found[2]) == pytest.approx(last.line_density_per_nm, rel=5e-3)


def test_measures_have_names_with_units() -> None:
    found = measures_of([step(1, 0.125)], None, {"geometric_F_per_m": 1e-9})
    assert found == {"threshold_by_first_level_V": 0.125, "geometric_F_per_m": 1e-9}
    assert measures_of([], None, {}) == {"threshold_by_first_level_V": None}


def test_a_sweep_is_judged() -> None:
    sweep, points = coarse()
    steps = sweep.steps(points)
    judged = sweep.judged(points, steps, ())
    assert judged.measures["threshold_by_first_level_V"] == pytest.approx(opening_V(0), abs=5e-4)
    moved = judged.measures["step_2_moves_with_section.diameter_V_per_nm"]
    assert moved == steps[1].moves_V_per_nm
    assert "3 steps open at" in judged.verdict_text
    # The wire is thick, its charge screens the gate: it sits near the faces where it is full.
    assert " carriers per cm (" in judged.verdict_text
