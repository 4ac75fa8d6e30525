"""Thermopower and electronic thermal conductance: quadrature, limits and the quantised values."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics.conductance import Openings, openings, openings_of_rows
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.thermoelectric import LORENZ_V2_PER_K2, THERMAL_QUANTUM_W_PER_K2, thermoelectric
from wiresolve.physics.transmission import Given, Open, Saddle, Transmission
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

T = 40.0
UNIT = KB * T


def by_quadrature(levels: list[tuple[float, float]], fermi: float, width: float) -> tuple[float, float, float]:
    """G/G0, L_1/L_0 and L_2/L_0 - (L_1/L_0)^2 of steps (opening, weight), all energies in kT, by Gauss's rule."""
    points, weights = np.polynomial.legendre.leggauss(20)
    lowest = max(min(opening for opening, _ in levels) - fermi, 0.0)
    sums = np.zeros(3)
    for opening, weight in levels:
        y = opening - fermi
        piece = 0.5 * min(1.0, width or 1.0)
        edges = y + np.arange(0.0 if not width else -np.ceil((y + 100) / piece), np.ceil(100 / piece) + 1) * piece
        edges = edges if y > 0 else np.append(edges, edges[-1] + np.arange(1, np.ceil(-y / piece) + 1) * piece)
        x = (edges[:-1, None] + piece / 2 * (points + 1)).ravel()
        tunnels = 1.0 if not width else np.exp(-np.logaddexp(0, -(x - y) / width))
        bell = np.exp(-np.abs(x)) / (1 + np.exp(-np.abs(x))) ** 2
        density = bell * tunnels * np.tile(piece / 2 * weights, len(edges) - 1)
        sums += weight * np.array([density @ (x - lowest) ** j for j in range(3)])
    mean = sums[1] / sums[0]
    return float(sums[0]), float(lowest + mean), float(sums[2] / sums[0] - mean**2)


def found(modes: Openings, kind: Transmission, fermi_kT: float) -> tuple[float, float, float]:
    """The same three from the program."""
    result = thermoelectric(modes, kind, fermi_kT * UNIT, T)
    conductance, seebeck = float(result.conductance_G0), float(result.seebeck_V_per_K)
    heat = float(result.thermal_conductance_W_per_K)
    return conductance, -seebeck / KB, heat / (CONDUCTANCE_QUANTUM_SIEMENS * conductance * KB**2 * T)


LEVELS = [(0.0, 1.0), (6.0, 2.0), (9.0, 0.5)]
MODES = openings_of_rows([0.0, 6.0 * UNIT, 9.0 * UNIT], [2, 4, 1])


@pytest.mark.parametrize("fermi", [-60.0, -8.0, -1.0, 0.0, 3.0, 7.0, 25.0])
def test_open_steps_against_quadrature(fermi: float) -> None:
    expected = by_quadrature(LEVELS, fermi, 0.0)
    assert found(MODES, Open(), fermi) == pytest.approx(expected, rel=2e-12, abs=1e-13)


@pytest.mark.parametrize("width", [0.03, 0.7, 1.0, 1.4, 12.0])
@pytest.mark.parametrize("fermi", [-12.0, 0.0, 4.0])
def test_saddles_against_quadrature(width: float, fermi: float) -> None:
    kind = Saddle(2 * np.pi * width * UNIT)
    expected = by_quadrature(LEVELS, fermi, kind.width_eV / UNIT)
    assert found(MODES, kind, fermi) == pytest.approx(expected, rel=1e-11, abs=1e-13)


@pytest.mark.parametrize("eta", [-1e4, -500.0, -45.0])
def test_thin_carriers_hold_one_kT_above_their_opening(eta: float) -> None:
    # Boltzmann: <x> = -eta + 1, variance 1
    result = thermoelectric(openings_of_rows([0.0], [2]), Open(), eta * UNIT, T)
    assert float(result.seebeck_V_per_K) == pytest.approx(-KB * (1 - eta), rel=1e-13)
    if eta > -600:
        heat = CONDUCTANCE_QUANTUM_SIEMENS * np.exp(eta) * KB**2 * T
        assert float(result.thermal_conductance_W_per_K) == pytest.approx(heat, rel=1e-12)
    assert np.isfinite(float(result.power_factor_W_per_K2))


def test_tunnelling_carriers_below_a_wide_saddle() -> None:
    # width w > kT: T ~ e^(x/w) at the Fermi level; with a = kT/w, <x> = d ln(pi a/sin pi a)/da = 1/a - pi cot(pi a)
    for a in (0.2, 0.5, 0.8):
        kind = Saddle(2 * np.pi * UNIT / a)
        result = thermoelectric(openings_of_rows([0.0], [2]), kind, -3000 * UNIT, T)
        assert float(result.seebeck_V_per_K) == pytest.approx(-KB * (1 / a - np.pi / np.tan(np.pi * a)), rel=1e-11)


@pytest.mark.parametrize("eta", [60.0, 1e4])
def test_plateaus_have_no_thermopower_and_conduct_heat_in_quanta(eta: float) -> None:
    modes = openings_of_rows([0.0, 0.0, 0.0], [2, 2, 4])
    result = thermoelectric(modes, Given((1.0, 0.5, 0.25)), eta * UNIT, T)
    transmitted = 2 * 1.0 + 2 * 0.5 + 4 * 0.25
    assert abs(float(result.seebeck_V_per_K)) < 1e-22 * KB + 100 * np.exp(-eta) * KB
    assert float(result.thermal_conductance_W_per_K) == pytest.approx(
        transmitted * THERMAL_QUANTUM_W_PER_K2 * T, rel=1e-13
    )
    siemens = CONDUCTANCE_QUANTUM_SIEMENS * float(result.conductance_G0)
    assert float(result.thermal_conductance_W_per_K) / (siemens * T) == pytest.approx(LORENZ_V2_PER_K2, rel=1e-13)


def test_absolute_zero_is_the_limit() -> None:
    modes = openings_of_rows([0.01, 0.02, 0.03], [2, 2, 2])
    fermi = np.array([0.005, 0.01, 0.015, 0.02, 0.025, 0.03])
    cold = thermoelectric(modes, Open(), fermi, 0.0)
    near = thermoelectric(modes, Open(), fermi, 1e-6)
    # peaks of (k/e) ln 2/(N - 1/2): P. Streda, J. Phys. Condens. Matter 1, 1025 (1989), from memory
    peaks = -KB * np.log(2) / (np.array([1, 2, 3]) - 0.5)
    assert cold.seebeck_V_per_K[1::2] == pytest.approx(peaks, rel=1e-14)
    assert near.seebeck_V_per_K[1::2] == pytest.approx(peaks, rel=1e-12)
    assert cold.seebeck_V_per_K[0] == -np.inf
    assert cold.seebeck_V_per_K[2::2].tolist() == [0, 0]
    assert not cold.thermal_conductance_W_per_K.any()
    assert cold.power_factor_W_per_K2[0] == 0
    assert near.power_factor_W_per_K2 == pytest.approx(cold.power_factor_W_per_K2, rel=1e-11)
    tunnelling = thermoelectric(modes, Saddle(0.001), fermi, 0.0)
    assert not tunnelling.seebeck_V_per_K.any()


def test_a_saddle_at_low_temperature_obeys_motts_law() -> None:
    # S = -(pi^2/3)(k^2 T/e) d ln G/dE (N. F. Mott), the next term being of order T^2
    modes, kind, energy, h = openings_of_rows([0.01, 0.02], [2, 2]), Saddle(0.006), 0.013, 1e-5

    def log_conductance(at: float) -> float:
        return float(np.log(sum(kind.at(at, e, 0) for e in (0.01, 0.02))))

    slope = (log_conductance(energy + h) - log_conductance(energy - h)) / (2 * h)
    result = thermoelectric(modes, kind, energy, 0.02)
    assert float(result.seebeck_V_per_K) == pytest.approx(-LORENZ_V2_PER_K2 * 0.02 * slope, rel=1e-5)


@pytest.mark.parametrize("kind", [Open(), Saddle(0.004)], ids=["open", "saddle"])
def test_the_tail_counts_like_the_steps_it_stands_for(kind: Transmission) -> None:
    def wire(energies: Any, **more: Any) -> Openings:
        n = len(energies)
        states = np.full(n, 0.067), np.full(n, 2), np.arange(1, n + 1), n
        return openings(Spectrum(energies, np.zeros(n), *states, **more))

    many = wire([0.05, *(0.1 + (np.arange(400) + 0.5) * 5e-5)])
    tail = wire([0.05], tails=(parabolic_tail([0.1, 0.12], [0.0, 800.0], 0.067, points=201),))
    for fermi in (0.04, 0.08):
        a, b = (thermoelectric(modes, kind, fermi, T) for modes in (many, tail))
        assert float(a.seebeck_V_per_K) == pytest.approx(float(b.seebeck_V_per_K), rel=2e-4)
        assert float(a.thermal_conductance_W_per_K) == pytest.approx(float(b.thermal_conductance_W_per_K), rel=2e-4)


def test_shapes_and_bad_temperature() -> None:
    modes = openings_of_rows([0.0], [2])
    assert thermoelectric(modes, Open(), np.zeros((2, 3)), T).seebeck_V_per_K.shape == (2, 3)
    with pytest.raises(InputError, match="temperature"):
        thermoelectric(modes, Open(), 0.0, -1.0)
