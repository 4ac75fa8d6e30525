"""The separate self-consistent solvers agree with stored digits, closed forms and laws; the baseline with its law."""

from __future__ import annotations

import importlib.util
from dataclasses import replace
from math import ceil, cosh, log, pi
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest

from tests import independent_round as round_wire
from tests import independent_square as square_wire
from tests.independent_round import EPSILON0_PER_V_NM
from tests.truth.self_consistent_round import SPECTRAL, SWEEP, Point
from tests.truth.self_consistent_square import SOLVED

ROUND = {
    "InAs, 77 K": replace(round_wire.INAS, gate_potential_V=0.4),
    "silicon, 300 K": round_wire.SILICON,
    "GaAs with donors, 77 K": round_wire.GALLIUM_ARSENIDE,
}


@pytest.mark.parametrize("name", SPECTRAL)
def test_round_wire_has_the_digits_of_two_other_codes(name: str) -> None:
    wanted, solved = SPECTRAL[name], round_wire.solve(ROUND[name])
    assert [momentum for _, momentum, _ in solved.levels[:8]] == [momentum for _, momentum, _ in wanted["levels"]]
    assert [e for e, *_ in solved.levels[:8]] == pytest.approx([e for e, *_ in wanted["levels"]], rel=0, abs=1e-10)
    densities = [density * 1e9 for *_, density in solved.levels[:8]]
    assert densities == pytest.approx([density for *_, density in wanted["levels"]], rel=1e-8)
    assert solved.line_density_per_nm * 1e9 == pytest.approx(wanted["line_density_per_m"], rel=1e-10)
    assert -solved.centre_potential_V == pytest.approx(wanted["centre_edge_eV"], abs=1e-10)
    assert -solved.surface_potential_V == pytest.approx(wanted["surface_edge_eV"], abs=1e-10)


@pytest.mark.parametrize("point", SWEEP[2::5] + SWEEP[4::10], ids=lambda point: f"{point.temperature_K}-{point.index}")
def test_stored_sweep_does_not_depend_on_the_resolution(point: Point) -> None:
    voltage = float(round_wire.sweep_potentials_V(point.temperature_K)[point.index])
    wire = replace(round_wire.INAS, temperature_K=point.temperature_K, gate_potential_V=voltage, points=46, states=28)
    solved = round_wire.solve(wire)
    assert [e for e, *_ in solved.levels[:6]] == pytest.approx(point.levels_eV, rel=0, abs=2e-10)
    assert [momentum for _, momentum, _ in solved.levels[:6]] == list(point.momenta)
    assert solved.line_density_per_nm == pytest.approx(point.line_density_per_nm, rel=1e-9)
    assert solved.capacitance_per_V_nm == pytest.approx(point.capacitance_per_V_nm, rel=1e-9)


@pytest.mark.parametrize("temperature", [77.0, 4.2, 0.0])
def test_capacitance_and_levers_are_slopes(temperature: float) -> None:
    wire = replace(round_wire.INAS, temperature_K=temperature, gate_potential_V=0.55)
    step = 2e-4
    below, here, above = (round_wire.solve(replace(wire, gate_potential_V=0.55 + d)) for d in (-step, 0.0, step))
    slope = (above.line_density_per_nm - below.line_density_per_nm) / (2 * step)
    assert here.capacitance_per_V_nm == pytest.approx(slope, rel=1e-5)
    slopes = [(a[0] - b[0]) / (2 * step) for a, b in zip(above.levels[:5], below.levels[:5], strict=True)]
    assert here.level_slopes[:5] == pytest.approx(slopes, rel=1e-5)


def test_depleted_round_wire_meets_the_closed_form() -> None:
    """Uniform donors without electrons: e N R^2 / (4 eps) in the channel, e N pi R^2 / C in the insulator."""
    wire = replace(round_wire.SILICON, radius_nm=10.0, donors_per_nm3=0.01, gate_potential_V=-3.0)
    solved = round_wire.solve(wire)
    inside = 0.01 * 100 / (4 * 11.7 * EPSILON0_PER_V_NM)
    outside = 0.01 * 100 * log(1.1) / (2 * 3.9 * EPSILON0_PER_V_NM)
    assert solved.centre_potential_V - solved.surface_potential_V == pytest.approx(inside, rel=1e-10)
    assert solved.surface_potential_V + 3.0 == pytest.approx(outside, rel=1e-10)


@pytest.mark.parametrize("name", SOLVED)
def test_square_wire_on_a_coarse_grid_has_the_stored_digits(name: str) -> None:
    """With two permittivities the coarse grid's levels are off by 4e-9 to 9e-9 eV, as the finer ones show."""
    wanted, wire = SOLVED[name], square_wire.CASES[name]
    coarse = square_wire.Grid(layers=3, ratio=0.2, degree=9, fall=1.5, states={"B": 18, "E": 6}.get(name, 4))
    solved = square_wire.solve(wire, coarse, tolerance_V=1e-10)
    close = 1e-9 if wire.permittivity == wire.insulator_permittivity else 3e-8
    assert [e for e, *_ in solved.levels[: len(wanted.levels_eV)]] == pytest.approx(wanted.levels_eV, rel=0, abs=close)
    assert solved.line_density_per_nm == pytest.approx(wanted.line_density_per_nm, rel=10 * close)
    assert solved.centre_potential_V == pytest.approx(wanted.centre_potential_V, abs=close)
    assert solved.face_potential_V == pytest.approx(wanted.face_potential_V, abs=close)
    donors = wire.donors_per_nm3 * wire.side_nm**2
    assert solved.gate_charge_per_nm == pytest.approx(solved.line_density_per_nm - donors, abs=1e-9)


def test_depleted_square_wire_meets_its_series() -> None:
    """Uniform donors without electrons, equal permittivities: a sine series in x with its closed sum in y."""
    wire = replace(square_wire.CASES["D"], temperature_K=0.0, gate_potential_V=-3.0)
    solved = square_wire.solve(wire, square_wire.Grid(layers=4, degree=12, states=4))
    assert solved.line_density_per_nm == 0
    width, half = wire.side_nm + 2 * wire.insulator_nm, wire.side_nm / 2
    total = 0.0
    for n in range(1, 4001, 2):
        k = n * pi / width
        # component of a block |x| < half in cos(k x), then phi'' - k^2 phi = -rho within |y| < half
        part = 4 / (n * pi) * np.sin(k * half)
        edge = cosh_ratio(k * (width / 2 - half), k * width / 2)
        total += part * (1 - edge) / k**2
    scale = wire.donors_per_nm3 / (EPSILON0_PER_V_NM * wire.permittivity)
    assert solved.centre_potential_V + 3.0 == pytest.approx(scale * total, rel=1e-9)


def cosh_ratio(a: float, b: float) -> float:
    """cosh(a) / cosh(b) for 0 <= a <= b."""
    return cosh(a) / cosh(b) if b < 300 else float(np.exp(a - b))


def damped() -> ModuleType:
    script = Path(__file__).resolve().parents[1] / "scripts" / "_damped.py"
    specification = importlib.util.spec_from_file_location("_damped", script)
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


@pytest.mark.parametrize("mixing", [0.5, 0.3, 0.1])
def test_damped_iteration_needs_as_many_passes_as_its_law_says(mixing: float) -> None:
    """With potential(density(phi)) = 1 - slope phi each step is 1 - mixing (1 + slope) of the one before."""
    slope = 0.8
    found = damped().damped_passes(lambda phi: slope * phi, lambda n: 1 - n, np.zeros(3), mixing)
    # the first step is 1; step number p is rate^(p - 1)
    assert found == 1 + ceil(log(1e-6) / log(1 - mixing * (1 + slope)))


def test_damped_iteration_that_does_not_arrive_says_so() -> None:
    module = damped()
    steep = (lambda phi: 9.0 * phi, lambda n: 1 - n, np.zeros(3))
    assert module.damped_passes(*steep, 0.5) is None
    assert module.damped_passes(*steep, 0.05, most=5) is None
    assert module.best_damped_passes(*steep) == (2, 0.1)  # 1 - 0.1 (1 + 9) = 0: there in one step
    assert module.best_damped_passes(lambda phi: 99.0 * phi, lambda n: 1 - n, np.zeros(3)) is None
