"""Step voltages of a sweep, their widths, and thresholds, against sweeps in closed form."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

from wiresolve.errors import InputError
from wiresolve.physics.gate_steps import (
    gate_steps,
    threshold_by_constant_density_V,
    threshold_by_extrapolation_V,
    threshold_by_first_level_V,
)
from wiresolve.units import KB


def sweep(count: int) -> tuple[Any, Any, Any]:
    """Two levels that fall, ever more slowly, with the gate voltage; the third never arrives."""
    voltage = np.linspace(0.0, 1.0, count)
    offsets = np.array([0.10, 0.17, 0.60])
    energy = offsets - 0.3 * np.log1p(voltage)[:, None]
    coupling = np.repeat(0.3 / (1 + voltage)[:, None], 3, axis=1)
    return voltage, energy, coupling


def test_crossings_widths_and_bars() -> None:
    voltage, energy, coupling = sweep(21)
    found = gate_steps(voltage, energy, coupling, np.full(energy.shape, 1e-5), 4.2)
    exact = np.exp(np.array([0.10, 0.17]) / 0.3) - 1
    assert found.voltage_V[:2] == pytest.approx(exact, rel=1e-7)
    assert found.coupling[:2] == pytest.approx(0.3 / (1 + exact), rel=1e-5)
    # 4 ln(1 + sqrt 2) kT is the width of -df/dE
    assert found.width_V[:2] == pytest.approx(3.52549434807817 * KB * 4.2 * (1 + exact) / 0.3, rel=1e-5)
    assert found.error_V[:2] == pytest.approx(1e-5 * (1 + exact) / 0.3, rel=1e-5)
    assert np.isnan([found.voltage_V[2], found.width_V[2], found.error_V[2]]).all()
    assert threshold_by_first_level_V(found) == found.voltage_V[0]


def test_crossings_converge_with_the_fourth_power_of_the_spacing() -> None:
    exact = np.exp(0.17 / 0.3) - 1
    errors = []
    for count in (6, 11, 21, 41):
        voltage, energy, coupling = sweep(count)
        errors.append(abs(gate_steps(voltage, energy, coupling, 0 * energy, 4.2).voltage_V[1] - exact))
    assert errors[-1] < errors[0] / 8**3.2


def test_a_failed_point_is_passed_over_and_a_cold_step_is_sharp() -> None:
    voltage, energy, coupling = sweep(41)
    energy[17] = np.nan
    found = gate_steps(voltage, energy, coupling, 0 * coupling, 0.0)
    assert found.voltage_V[:2] == pytest.approx(np.exp(np.array([0.10, 0.17]) / 0.3) - 1, rel=1e-6)
    assert found.width_V[:2].tolist() == [0, 0]


def test_a_sweep_that_starts_above_or_hits_a_point() -> None:
    voltage = np.array([0.0, 0.5, 1.0])
    energy = np.array([[0.05], [0.0], [-0.05]])
    found = gate_steps(voltage, energy, np.full((3, 1), 0.1), np.zeros((3, 1)), 1.0)
    assert found.voltage_V[0] == pytest.approx(0.5, abs=1e-15)
    below = gate_steps(voltage, energy - 1, np.full((3, 1), 0.1), np.zeros((3, 1)), 1.0)
    assert np.isnan(threshold_by_first_level_V(below))


def test_extrapolation_of_a_line_and_of_a_rounded_start() -> None:
    voltage = np.linspace(0, 1, 201)
    assert threshold_by_extrapolation_V(voltage, 3 * (voltage - 0.3), np.full(201, 3.0)) == pytest.approx(0.3)
    # softplus: its tangent far above the start meets zero there
    eta = (voltage - 0.4) / 0.01
    found = threshold_by_extrapolation_V(voltage, np.logaddexp(0, eta), 1 / (1 + np.exp(-eta)) / 0.01)
    assert found == pytest.approx(0.4, abs=1e-12)
    with pytest.raises(InputError, match="positive somewhere"):
        threshold_by_extrapolation_V(voltage, voltage, -voltage)


def test_constant_density() -> None:
    voltage = np.linspace(0, 1, 11)
    density = 1e-6 * np.exp(voltage / 0.05)
    assert threshold_by_constant_density_V(voltage, density, 1e-3) == pytest.approx(0.05 * np.log(1e3), rel=1e-12)
    curved = np.logaddexp(0, (voltage - 0.4) / 0.03)
    exact = brentq(lambda v: np.logaddexp(0, (v - 0.4) / 0.03) - 0.1, 0, 1)
    assert threshold_by_constant_density_V(voltage, curved, 0.1) == pytest.approx(exact, abs=0.01)
    assert np.isnan(threshold_by_constant_density_V(voltage, density, 1e9))
    with pytest.raises(InputError, match="at_per_nm"):
        threshold_by_constant_density_V(voltage, density, 0.0)


@pytest.mark.parametrize("voltage", [[0.0], [0.0, 0.0], [1.0, 0.0]])
def test_bad_sweeps_are_refused(voltage: Any) -> None:
    column = np.zeros((len(voltage), 1))
    with pytest.raises(InputError, match="gate_voltage_V"):
        gate_steps(voltage, column, column, column, 4.2)
    with pytest.raises(InputError, match="coupling"):
        gate_steps([0.0, 1.0], np.zeros((2, 2)), np.zeros((2, 1)), np.zeros((2, 2)), 4.2)
