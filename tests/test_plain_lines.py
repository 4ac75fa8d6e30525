"""Where no terminal is, long work says what it does, and short work nothing; what makes a sweep long is said first."""

from __future__ import annotations

import threading
import time
from dataclasses import replace
from math import pi

import pytest

from tests.gate_sweeps import swept_problem
from wiresolve.commands.plain_lines import EVERY_s, FIRST_s, LOOK_s, PlainLines, watched
from wiresolve.commands.terminal import progress
from wiresolve.describe.problem import Carriers, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Rectangle
from wiresolve.physics.growing_masses import KEPT_KT, cost_text, growth_per_eV, kept_states
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB


def test_a_stage_is_told_once_and_again_later() -> None:
    now, said = [0.0], list[str]()
    lines = PlainLines(lambda: now[0], said.append)
    lines.report("mesh", "")
    now[0] = FIRST_s - 0.1
    lines.report("gate voltage", "2 of 9")
    lines.look()
    assert said == []
    now[0] = FIRST_s
    lines.look()
    assert said == ["after 10 s: gate voltage, 2 of 9"]
    now[0] = FIRST_s + EVERY_s - 1
    lines.report("gate voltage", "3 of 9")
    assert len(said) == 1
    now[0] += 1
    lines.look()
    assert said[1:] == ["after 40 s: gate voltage, 3 of 9"]
    lines.report("fabrication error", "section.width")
    assert said[2:] == ["after 40 s: fabrication error, section.width"]
    now[0] += 1
    lines.report("gate voltage", "4 of 9")  # a stage that comes back is not told at each turn
    assert len(said) == 3


def test_work_that_reports_nothing_is_watched() -> None:
    seen = threading.Event()
    lines = PlainLines(time.monotonic, lambda line: None)
    lines.look = seen.set  # type: ignore[method-assign]
    with watched(lines):
        assert seen.wait(20 * LOOK_s)
    assert not any(thread.name == "progress" for thread in threading.enumerate())


def test_short_work_leaves_stderr_clean(capsys: pytest.CaptureFixture[str]) -> None:
    with progress(True) as report:
        assert report is not None
        report("mesh", 0.5, "mesh 1")
    with progress(False) as report:
        assert report is None
    assert capsys.readouterr().err == ""


def long_work(**carriers: object) -> Problem:
    """A sheet of GaAs so wide that many states are kept at room temperature."""
    problem = swept_problem(count=17, temperature_K=300.0)
    return replace(
        problem,
        section=Section(Rectangle(200.0, 60.0), "GaAs"),
        carriers=replace(Carriers(temperature_K=(300.0,)), **carriers),  # type: ignore[arg-type]
    )


def test_states_are_those_of_a_box() -> None:
    """Weyl's law begins with the area of the quarter ellipse of a box's quantum numbers: pi/4 times its axes."""
    wire = Wire(long_work())
    mass = 1 / wire.groups[0].inverse_mass["GaAs"][0, 0]
    reach_eV = KEPT_KT * KB * 300
    axes = [size * (reach_eV * mass / HBAR2_OVER_2M0) ** 0.5 / pi for size in (200.0, 60.0)]
    assert kept_states(wire) == pytest.approx(pi / 4 * axes[0] * axes[1], rel=1e-9)


def test_long_sweeps_say_why() -> None:
    wire = Wire(long_work())
    text = cost_text(wire)
    alpha = growth_per_eV(wire, wire.groups[0])
    assert alpha > 0
    assert "each of the 17 points" in text
    assert 'model = "parabolic"' in text
    # alpha E^2, as E (1 + alpha E) is what a constant mass gives (E. O. Kane 1957).
    assert f"({1e3 * alpha * 0.05**2:.2g} meV at 50 meV)" in text


def test_short_sweeps_and_constant_masses_say_nothing() -> None:
    assert cost_text(Wire(long_work(model="parabolic"))) == ""
    assert cost_text(Wire(swept_problem())) == ""
    assert cost_text(Wire(replace(long_work(), gates=(), voltages=None))) == ""
