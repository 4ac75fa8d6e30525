"""Carriers and potential in balance: few passes, Gauss's law, derivatives, all valleys, cold limits, exchange."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from math import log, pi

import numpy as np
import pytest
from numpy.typing import NDArray

from tests import independent_round
from tests.charged_wires import GATE, OnMesh, at_temperature, of_round, on_mesh
from wiresolve.describe.gates import Gate, Insulator
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.errors import ConvergenceError
from wiresolve.physics import selfconsistent
from wiresolve.physics.charged_subbands import certify_on
from wiresolve.physics.exchange import exchange_correlation_eV
from wiresolve.physics.gate_answer import answered, channel_capacitance
from wiresolve.physics.listed_rows import listed_rows
from wiresolve.physics.response import response
from wiresolve.physics.selfconsistent import Balanced
from wiresolve.units import KB

Array = NDArray[np.float64]

PASSES = 8
HIGHEST_V = 0.7


@cache
def round_wire(temperature_K: float) -> OnMesh:
    """The InAs wire on one mesh, good where it is fullest."""
    wire = replace(independent_round.INAS, temperature_K=4.2, gate_potential_V=HIGHEST_V)
    return OnMesh(at_temperature(of_round(wire, 4, 1e-4), temperature_K), _mesh().meshes)


@cache
def _mesh() -> OnMesh:
    wire = replace(independent_round.INAS, temperature_K=4.2, gate_potential_V=HIGHEST_V)
    return on_mesh(of_round(wire, 4, 1e-4))


@cache
def swept(temperature_K: float) -> tuple[Balanced, ...]:
    """From pinch-off to beyond ten filled levels (those with an angular momentum counted twice)."""
    voltages = independent_round.sweep_potentials_V(temperature_K, 8)
    return tuple(round_wire(temperature_K).sweep(voltages.tolist()))


@cache
def silicon(model: str, temperature_K: float, gate_V: float) -> tuple[OnMesh, Balanced]:
    """A round silicon wire along [110]: valleys in two groups of one shape each, or masses that grow."""
    gate = Gate(GATE, "rim", voltage_V=gate_V, lineup_voltage_V=0.0, insulator=Insulator("SiO2", 1.0))
    problem = Problem(
        title="silicon",
        section=Section(shape=Circle(diameter_nm=6.0), material="Si", lattice_temperature_K=300.0),
        carriers=Carriers(temperature_K=(temperature_K,), model=model),
        accuracy=Accuracy(4, 1e-3),
        orientation=Orientation((1, 1, 0), (0, 0, 1)),
        gates=(gate,),
    )
    here = on_mesh(problem)
    return here, here.at({})


def fourth_order(of: dict[int, float], step: float) -> float:
    """The derivative from values at -2, -1, 1 and 2 steps."""
    return (8 * (of[1] - of[-1]) - (of[2] - of[-2])) / (12 * step)


def around(here: OnMesh, voltage: float, step: float) -> dict[int, Balanced]:
    """Balances at whole numbers of steps from a voltage."""
    middle = here.at({GATE: voltage})
    return {0: middle} | {n: here.at({GATE: voltage + n * step}, middle) for n in (-2, -1, 1, 2)}


@pytest.mark.parametrize("temperature", [300.0, 4.2, 0.0])
def test_a_sweep_takes_few_passes(temperature: float) -> None:
    points = swept(temperature)
    assert max(point.passes for point in points) <= PASSES
    assert max(point.residual_V for point in points) <= 1e-7
    assert (points[0].occupied.energy_eV > 2 * KB * temperature).all()
    filled = [(point.occupied.energy_eV < 0).sum() for point in points]
    assert filled[-1] >= 10
    assert filled == sorted(filled)


@pytest.mark.parametrize("temperature", [300.0, 4.2, 0.0])
def test_gates_and_carriers_are_neutral(temperature: float) -> None:
    for point in swept(temperature):
        assert point.gauss_error <= 1e-8
        carriers = point.occupied.total_per_nm
        assert point.charges_per_nm()[GATE] == pytest.approx(carriers, rel=1e-8, abs=1e-17)
        assert carriers == pytest.approx(float(point.occupied.line_density_per_nm.sum()), rel=1e-12)


def test_no_charge_follows_the_gate_whole() -> None:
    """An empty wire's potential is the gate's, so that nothing is left of the field."""
    cold = swept(0.0)[0]
    assert cold.occupied.total_per_nm == 0
    assert cold.potential_V == pytest.approx(np.zeros(len(cold.potential_V)), abs=1e-12)


def test_one_pass_more_changes_nothing() -> None:
    point = swept(4.2)[-2]
    again = round_wire(4.2).at({GATE: float(independent_round.sweep_potentials_V(4.2, 8)[-2])}, point)
    assert again.passes <= 2
    assert np.abs(again.potential_V - point.potential_V).max() <= 1e-8


def test_start_does_not_matter() -> None:
    here = round_wire(4.2)
    voltage = {GATE: float(independent_round.sweep_potentials_V(4.2, 8)[4])}
    assert np.abs(here.at(voltage).potential_V - swept(4.2)[4].potential_V).max() <= 1e-8


@pytest.mark.parametrize(("temperature", "voltage"), [(77.0, 0.3), (4.2, 0.45), (4.2, 0.035)])
def test_capacitance_is_the_slope_of_the_carriers(temperature: float, voltage: float) -> None:
    step = 0.05 * KB * temperature
    points = around(round_wire(temperature), voltage, step)
    slope = fourth_order({n: p.occupied.total_per_nm for n, p in points.items()}, step)
    found = response(points[0], GATE)
    assert found.carriers_per_V_nm == pytest.approx(slope, rel=1e-6)
    on_gate = fourth_order({n: p.charges_per_nm()[GATE] for n, p in points.items()}, step)
    assert found.charges_per_V_nm[GATE] == pytest.approx(on_gate, rel=1e-6)
    assert found.charges_per_V_nm[GATE] == pytest.approx(found.carriers_per_V_nm, rel=1e-7)


def test_response_of_the_potential_and_density_are_slopes() -> None:
    step = 0.1 * KB * 77.0
    points = around(round_wire(77.0), 0.4, step)
    found = response(points[0], GATE)
    for of, name in ((lambda p: p.potential_V, "potential"), (lambda p: p.occupied.carriers_per_nm3, "density")):
        slope = np.asarray(fourth_order({n: of(p) for n, p in points.items()}, step))
        answer = found.potential if name == "potential" else found.density_per_nm3
        assert np.abs(answer - slope).max() <= 2e-6 * np.abs(slope).max()


def test_couplings_are_slopes_of_the_levels() -> None:
    here, step = round_wire(77.0), 0.1 * KB * 77.0
    points = around(here, 0.3, step)
    occupied = points[0].occupied
    found = answered(points[0], occupied.density_per_nm2[:, :, :3], np.array([1, 2, 2]), GATE)
    energies = {n: float(p.occupied.energy_eV[0]) for n, p in points.items()}
    assert found.coupling[0] == pytest.approx(-fourth_order(energies, step), rel=1e-6)
    pair = {n: float(p.occupied.energy_eV[1:3].mean()) for n, p in points.items()}
    assert found.coupling[1:] == pytest.approx([-fourth_order(pair, step)] * 2, rel=1e-6)
    assert found.empty_coupling == pytest.approx(1.0, abs=1e-12)


def test_geometric_capacitance_of_the_wrap_is_coaxial() -> None:
    wire = independent_round.INAS
    coaxial = 2 * pi * independent_round.EPSILON0_PER_V_NM * wire.insulator_permittivity
    coaxial /= log(1 + wire.insulator_nm / wire.radius_nm)
    wire = replace(wire, temperature_K=4.2, gate_potential_V=HIGHEST_V)
    stage = on_mesh(of_round(wire, 4, 1e-5)).stage
    assert channel_capacitance(stage, GATE) == pytest.approx(coaxial, rel=1e-8)


@pytest.mark.parametrize("temperature", [300.0, 77.0])
def test_several_valley_groups_answer_together(temperature: float) -> None:
    here, point = silicon("parabolic", temperature, 0.5)
    assert len(here.stage.carriers.channels) == 2
    held = [float(point.occupied.line_density_per_nm[point.occupied.channel == c].sum()) for c in (0, 1)]
    assert min(held) > 1e-6 * max(held)
    assert point.gauss_error <= 1e-8
    step = 0.1 * KB * temperature
    points = around(here, 0.5, step)
    slope = fourth_order({n: p.occupied.total_per_nm for n, p in points.items()}, step)
    assert response(points[0], GATE).carriers_per_V_nm == pytest.approx(slope, rel=1e-6)


def test_growing_masses_answer_as_differences_say() -> None:
    """With other steps than the program's own."""
    here, point = silicon("nonparabolic", 300.0, 0.5)
    assert (point.occupied.alpha_per_eV > 0).all()
    assert point.gauss_error <= 1e-8
    assert point.passes <= 12
    step = 0.2 * KB * 300.0
    points = around(here, 0.5, step)
    slope = fourth_order({n: p.occupied.total_per_nm for n, p in points.items()}, step)
    found = answered(point, point.occupied.density_per_nm2[:, :, :1], np.array([1]), GATE)
    assert found.carriers_per_V_nm == pytest.approx(slope, rel=1e-5)
    energies = {n: float(p.occupied.energy_eV[0]) for n, p in points.items()}
    assert found.coupling[0] == pytest.approx(-fourth_order(energies, step), rel=1e-4)


def test_growing_masses_hold_more() -> None:
    grown, flat = silicon("nonparabolic", 300.0, 0.5)[1], silicon("parabolic", 300.0, 0.5)[1]
    assert grown.occupied.total_per_nm > flat.occupied.total_per_nm


def test_the_coldest_carriers_approach_those_without_temperature() -> None:
    """Off the steps the difference goes with the square of the temperature (Sommerfeld)."""
    voltage = {GATE: 0.4}
    still = round_wire(0.0).at(voltage)
    off = []
    for kelvin in (4.0, 2.0):
        cold = round_wire(kelvin).at(voltage)
        off.append(abs(cold.occupied.total_per_nm - still.occupied.total_per_nm))
        assert cold.potential_V == pytest.approx(still.potential_V, abs=1e-5 * kelvin**2)
    assert off[0] / off[1] == pytest.approx(4, rel=0.1)
    assert off[1] < 1e-4 * still.occupied.total_per_nm


def test_levels_a_list_takes_hold_what_the_balance_counts() -> None:
    here, point = round_wire(4.2), swept(4.2)[-2]
    rows = listed_rows(certify_on(here.wire, here.meshes, point, (8,), 8, 1e-4, 5.0))
    order = np.argsort(point.occupied.energy_eV)[:8]
    assert rows.energy_eV == pytest.approx(point.occupied.energy_eV[order], abs=1e-8)
    assert rows.line_density_per_nm == pytest.approx(point.occupied.line_density_per_nm[order], rel=1e-6, abs=1e-12)


def test_a_failure_says_how_far_it_came(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(selfconsistent, "MOST_PASSES", 2)
    with pytest.raises(ConvergenceError, match=r"after 2 passes they still change by \d[.\de-]* V"):
        round_wire(4.2).at({GATE: 0.5})


def test_passes_are_told() -> None:
    here, told = round_wire(77.0), list[tuple[int, float]]()
    held = here.meshes.field.held_values({GATE: 0.4})
    point = selfconsistent.balance(here.stage, held, on_pass=lambda number, change: told.append((number, change)))
    assert [number for number, _ in told] == list(range(1, len(told) + 1))
    assert told[point.passes - 1][1] <= selfconsistent.TOLERANCE_V < told[point.passes - 2][1]


def test_exchange_and_correlation_at_a_density() -> None:
    """r_s = 2 of a mass 0.067 in a permittivity 12.9, the formula evaluated anew in rydberg units."""
    mass, permittivity, r_s = 0.067, 12.9, 2.0
    bohr_nm = 0.0529177210544 * permittivity / mass  # CODATA 2022
    rydberg_eV = 13.605693122990 * mass / permittivity**2
    density = 3 / (4 * pi * (r_s * bohr_nm) ** 3)
    x = r_s / 21
    # Exchange alone: -2 (9 pi / 4)^(1/3) / (pi r_s) Ry (Kohn and Sham 1965); Hedin and Lundqvist's factor on top.
    exchange = -2 * (9 * pi / 4) ** (1 / 3) / (pi * r_s) * rydberg_eV
    wanted = exchange * (1 + 0.7734 * x * log(1 + 1 / x))
    found = exchange_correlation_eV(np.array(density), np.array(mass), np.array(permittivity))
    assert float(found) == pytest.approx(wanted, rel=1e-7)


def test_exchange_scales_with_the_effective_units() -> None:
    """At equal r_s the energy goes with m / kappa^2."""
    first = exchange_correlation_eV(np.array(1e-4), np.array(0.05), np.array(10.0))
    other = exchange_correlation_eV(np.array(1e-4 * (2.0 / 1.5) ** 3), np.array(0.1), np.array(15.0))
    assert float(other / first) == pytest.approx(2.0 / 1.5**2, rel=1e-12)
    dense = exchange_correlation_eV(np.array([1e6, 8e6]), np.array(1.0), np.array(1.0))
    assert float(dense[1] / dense[0]) == pytest.approx(2.0, rel=1e-2)  # exchange's cube root
    assert float(exchange_correlation_eV(np.array(0.0), np.array(1.0), np.array(1.0))) == pytest.approx(0, abs=1e-8)


@cache
def with_exchange() -> tuple[OnMesh, Balanced]:
    """The InAs wire with exchange and correlation."""
    wire = replace(independent_round.INAS, temperature_K=77.0, gate_potential_V=0.3)
    problem = of_round(wire, 2, 1e-4)
    here = on_mesh(replace(problem, carriers=replace(problem.carriers, interaction="local density")))
    return here, here.at({})


def test_exchange_lowers_levels_and_draws_carriers_in() -> None:
    _, point = with_exchange()
    plain = round_wire(77.0).at({GATE: 0.3})
    assert point.occupied.energy_eV[0] < plain.occupied.energy_eV[0] - 1e-3
    assert point.occupied.total_per_nm > plain.occupied.total_per_nm
    assert point.gauss_error <= 1e-8
    assert point.residual_V <= 1e-7


def test_couplings_are_slopes_of_the_levels_with_exchange_too() -> None:
    here, point = with_exchange()
    found = answered(point, point.occupied.density_per_nm2[:, :, :1], np.array([1]), GATE)
    step = 0.02 * KB * 77.0
    energies = {n: float(here.at({GATE: 0.3 + n * step}, point).occupied.energy_eV[0]) for n in (-2, -1, 1, 2)}
    assert found.coupling[0] == pytest.approx(-fourth_order(energies, step), rel=1e-4)


def test_exchange_is_that_of_the_density_in_balance() -> None:
    """And felt by the electrons, but no part of the electrostatic potential."""
    here, point = with_exchange()
    wire, nodes = independent_round.INAS, here.stage.carriers.space.nodes
    density = point.density_at_points()[nodes]
    wanted = exchange_correlation_eV(density, np.array(wire.mass), np.array(wire.permittivity))
    assert point.exchange_V is not None
    assert -point.exchange_V[nodes] == pytest.approx(wanted, abs=1e-8)
    assert point.function.values[nodes] == pytest.approx(point.potential_V[nodes] - wanted, abs=1e-8)


def test_exchange_slope_is_that_of_the_carriers() -> None:
    here, point = with_exchange()
    step = 0.2 * KB * 77.0
    points = {n: here.at({GATE: 0.3 + n * step}, point) for n in (-2, -1, 1, 2)}
    slope = fourth_order({n: p.occupied.total_per_nm for n, p in points.items()}, step)
    found = answered(point, point.occupied.density_per_nm2[:, :, :1], np.array([1]), GATE)
    assert found.carriers_per_V_nm == pytest.approx(slope, rel=1e-4)
