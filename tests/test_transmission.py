"""Transmission, conductance with it, contacts and a finite drain voltage: closed forms and 30-digit quadrature."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics import transport
from wiresolve.physics.conductance import (
    current,
    differential_conductance,
    in_series,
    openings,
    openings_of_rows,
    transmitted_conductance,
)
from wiresolve.physics.rounded import ramp, step, window
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.transmission import Given, MeanFreePath, Open, Saddle, Transmission, transmission_of
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, HBAR2_OVER_2M0, KB, RESISTANCE_QUANTUM_OHM


@dataclass(frozen=True)
class Table:
    """What an input file may say."""

    length_nm: float | None = None
    mean_free_path_nm: float | None = None
    transmission: tuple[float, ...] | None = None
    saddle_curvature_eV: float | None = None


def wire(energies_eV: Any, **more: Any) -> Spectrum:
    """Parabolas of one mass, spin degenerate, each a level of its own."""
    count = len(energies_eV)
    states = {
        "energy_eV": energies_eV,
        "error_eV": np.zeros(count),
        "axial_mass": np.full(count, 0.067),
        "degeneracy": np.full(count, 2),
        "level": np.arange(1, count + 1),
        "listed": count,
    }
    return Spectrum(**{**states, **more})


# Transmissions


def test_each_kind_at_its_opening_and_away() -> None:
    energy = np.array([-1.0, 0.0, 1.0])
    assert Open().at(energy, 0.0, 0).tolist() == [0, 0.5, 1]
    assert Given((0.8,)).at(energy, 0.0, 5).tolist() == [0, 0.4, 0.8]
    assert Given((0.8, 0.2)).at(1.0, 0.0, [0, 1, 7]).tolist() == [0.8, 0.2, 0.2]
    assert MeanFreePath(100.0, 50.0).at(energy, 0.0, 0).tolist() == pytest.approx([0, 1 / 6, 1 / 3])
    assert MeanFreePath(0.0, 50.0).at(1.0, 0.0, 0) == MeanFreePath(10.0, np.inf).at(1.0, 0.0, 0) == 1
    # Buettiker's form: 1/(1 + e^-2pi) one hbar omega_x above the top
    assert Saddle(0.002).at(0.012, 0.01, 0) == pytest.approx(1 / (1 + np.exp(-2 * np.pi)), rel=1e-13)
    assert Saddle(0.002).at([[0.0], [1.0]], [0.5, 0.5, 0.5], 0).shape == (2, 3)


def test_two_lengths_of_resistance_add_as_ohm_says() -> None:
    # (1 - T)/T = L/l adds up along the wire (S. Datta 1995, from memory)
    def excess(length: float) -> float:
        t = float(MeanFreePath(length, 30.0).part(0))
        return (1 - t) / t

    assert excess(70.0) + excess(55.0) == pytest.approx(excess(125.0), rel=1e-13)


def test_a_transport_table_becomes_one_transmission() -> None:
    assert transmission_of(None) == transmission_of(Table()) == Open()
    assert transmission_of(Table(length_nm=40, mean_free_path_nm=20)) == MeanFreePath(40, 20)
    assert transmission_of(Table(transmission=(0.5, 0.25))) == Given((0.5, 0.25))
    assert transmission_of(Table(saddle_curvature_eV=1e-3)) == Saddle(1e-3)


@pytest.mark.parametrize(
    ("table", "words"),
    [
        (Table(length_nm=40), "needs a mean_free_path"),
        (Table(mean_free_path_nm=40), "needs a length"),
        (Table(transmission=(0.5,), saddle_curvature_eV=1e-3), "only one"),
        (Table(length_nm=4, mean_free_path_nm=5, transmission=(0.5,)), "only one"),
        (Table(transmission=(1.5,)), "from 0 to 1"),
        (Table(transmission=()), "from 0 to 1"),
        (Table(transmission=(float("nan"),)), "from 0 to 1"),
        (Table(saddle_curvature_eV=0.0), "positive"),
        (Table(length_nm=-1, mean_free_path_nm=5), "zero or positive"),
        (Table(length_nm=1, mean_free_path_nm=0), "positive"),
    ],
)
def test_bad_tables_are_refused(table: Table, words: str) -> None:
    with pytest.raises(InputError, match=words):
        transmission_of(table)


# Steps rounded twice


def rounded(distance: float, first: float, second: float) -> float:
    """Two logistic widths, by quadrature over the narrower one in pieces shorter than its poles are away."""
    with mpmath.workdps(30):
        d, a, b = (mpmath.mpf(x) for x in (distance, *sorted((first, second))))
        ends = [mpmath.mpf(2 * i) for i in range(-40, 41 + int(min(max(-d / a, 0), 60 / (1 - a / b + 1e-9)) / 2))]
        total = mpmath.quad(
            lambda t: 1 / (4 * mpmath.cosh(t / 2) ** 2) / (1 + mpmath.exp(-(d + a * t) / b)), ends, maxdegree=5
        )
        return float(total)


@pytest.mark.parametrize(
    ("distance", "first", "second"),
    [
        (0.3, 1, 2),
        (-5, 1, 2),
        (20, 1, 0.5),
        (-20, 1, 1e-3),
        (-60, 1, 1.0001),
        (-80, 0.8, 1),
        (2.0, 1e-3, 1),
        (-50, 3, 1),
    ],
)
def test_a_step_rounded_twice_against_quadrature(distance: float, first: float, second: float) -> None:
    assert float(step(distance, first, second)) == pytest.approx(rounded(distance, first, second), rel=1e-12)


def test_equal_widths_in_closed_form() -> None:
    # the sum of two logistic variables: (1 - e^-x - x e^-x)/(1 - e^-x)^2, with z = e^x below the opening
    x = np.array([-700.0, -100.0, -30.0, -3.0, 3.0, 30.0])
    z = np.exp(-x[x > 0])
    above = (1 - z - x[x > 0] * z) / (1 - z) ** 2
    z = np.exp(x[x < 0])
    below = z * (z - 1 - x[x < 0]) / (1 - z) ** 2
    assert step(x, 1.0, 1.0) == pytest.approx(np.concatenate([below, above]), rel=1e-12)


def test_far_below_an_opening_the_two_leading_terms_remain() -> None:
    # residues: e^(d/b) (pi a/b)/sin(pi a/b) and the same with a and b exchanged
    for d, a, b in ((-300.0, 1.0, 1.3), (-200.0, 1.0, 0.9), (-150.0, 0.3, 0.37)):
        terms = [np.exp(d / v) * (np.pi * u / v) / np.sin(np.pi * u / v) for u, v in ((a, b), (b, a))]
        assert float(step(d, a, b)) == pytest.approx(sum(terms), rel=1e-11)


@given(st.floats(-30, 30), st.floats(-6, 3), st.floats(-6, 3))
def test_a_step_is_symmetric_in_its_widths_and_about_its_opening(d: float, log_first: float, log_second: float) -> None:
    first, second = 10**log_first, 10**log_second
    value = float(step(d, first, second))
    assert value == pytest.approx(float(step(d, second, first)), rel=1e-13)
    assert value + float(step(-d, first, second)) == pytest.approx(1, rel=1e-13)
    assert 0 <= value <= 1


def test_a_window_is_the_integral_of_the_step_and_a_narrow_one_loses_nothing() -> None:
    points, weights = np.polynomial.legendre.leggauss(60)
    for low, span, a, b in (
        (-1.0, 4.0, 1.0, 0.4),
        (25.0, 5.0, 1.0, 0.4),
        (-14.0, 4.0, 1.0, 0.9),
        (3.0, -5.0, 0.6, 1.5),
    ):
        expected = span / 2 * weights @ step(low + span / 2 * (points + 1), a, b)
        assert float(window(low, span, a, b)) == pytest.approx(expected, rel=1e-12)
        assert float(ramp(low + span, a, b) - ramp(low, a, b)) == pytest.approx(expected, rel=1e-11)
    for low in (-20.0, 0.0, 7.0):
        tiny = float(window(low, 1e-9, 1.0, 2.0)) / 1e-9
        assert tiny == pytest.approx(float(step(low + 5e-10, 1.0, 2.0)), rel=1e-13)


# Linear conductance


@pytest.mark.parametrize("temperature_K", [0.0, 4.2, 300.0])
def test_open_modes_are_those_of_the_plain_conductance(temperature_K: float) -> None:
    k = np.linspace(0.0, 0.7, 33)
    camel = 0.12 - 0.05 * np.cos(9 * k) + 0.8 * k**2  # a band with several extrema
    spectrum = wire(
        [0.05, camel.min()],
        k_per_nm=k,
        band_eV=np.stack([np.full(33, np.nan), camel]),
        tails=(parabolic_tail([0.13, 0.2], [0.0, 40.0], 0.067),),
    )
    assert spectrum.bands[1] is not None
    fermi = np.linspace(0.0, 0.3, 31)
    expected = transport.conductance(spectrum, fermi, temperature_K)
    found = transmitted_conductance(openings(spectrum), Open(), fermi, temperature_K)
    assert found == pytest.approx(expected, rel=1e-12, abs=1e-300)
    half = transmitted_conductance(openings(spectrum), Given((0.5,)), fermi, temperature_K)
    assert half == pytest.approx(expected / 2, rel=1e-12, abs=1e-300)


def test_each_subband_gets_its_own_transmission_and_the_tail_the_last() -> None:
    spectrum = wire([0.05, 0.10], degeneracy=[2, 4], tails=(parabolic_tail([0.2, 0.3], [0.0, 10.0], 0.067),))
    found = transmitted_conductance(openings(spectrum), Given((0.9, 0.5, 0.1)), [0.07, 0.15, 0.3], 0.0)
    assert found == pytest.approx([0.9, 0.9 + 2 * 0.5, 0.9 + 1 + 5 * 0.1], rel=1e-12)


def test_a_saddle_at_absolute_zero_and_a_saddle_of_no_width() -> None:
    modes, fermi = openings_of_rows([0.01, 0.02], [2, 4]), np.linspace(0, 0.03, 7)
    kind = Saddle(0.004)
    expected = kind.at(fermi, 0.01, 0) + 2 * kind.at(fermi, 0.02, 1)
    assert transmitted_conductance(modes, kind, fermi, 0.0) == pytest.approx(expected, rel=1e-13)
    sharp = transmitted_conductance(modes, Open(), fermi, 4.2)
    assert transmitted_conductance(modes, Saddle(1e-30), fermi, 4.2) == pytest.approx(sharp, rel=1e-13)
    # temperature and tunnelling round alike
    hot = transmitted_conductance(modes, Open(), fermi, kind.width_eV / KB)
    assert transmitted_conductance(modes, kind, fermi, 0.0) == pytest.approx(hot, rel=1e-13)
    assert transmitted_conductance(modes, kind, fermi, 1e-15) == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("temperature_K", [0.0, 20.0])
def test_a_saddle_treats_the_tail_as_the_steps_it_stands_for(temperature_K: float) -> None:
    many = openings(wire([0.05, *(0.1 + (np.arange(400) + 0.5) * 5e-5)]))
    tail = openings(wire([0.05], tails=(parabolic_tail([0.1, 0.12], [0.0, 800.0], 0.067, points=201),)))
    # far below 0.12 eV, where the steps end and the tail goes on
    fermi, kind = 0.06, Saddle(0.01)
    expected = transmitted_conductance(many, kind, fermi, temperature_K)
    assert transmitted_conductance(tail, kind, fermi, temperature_K) == pytest.approx(expected, rel=1e-5)
    for drain in (0.001, -0.003):
        steps = current(many, kind, fermi, drain, temperature_K, lowered_part=0.5)
        assert current(tail, kind, fermi, drain, temperature_K, lowered_part=0.5) == pytest.approx(steps, rel=1e-5)


def test_contacts_in_series() -> None:
    # 1/G + R in ohm, by hand
    assert float(in_series(2.0, 1000.0)) == pytest.approx(
        1 / (RESISTANCE_QUANTUM_OHM / 2 + 1000) / CONDUCTANCE_QUANTUM_SIEMENS, rel=1e-13
    )
    assert in_series([0.0, 3.0], 0.0).tolist() == [0, 3]
    assert float(in_series(1e9, 500.0)) == pytest.approx(RESISTANCE_QUANTUM_OHM / 500, rel=1e-4)
    for bad in (-1.0, float("nan")):
        with pytest.raises(InputError, match="contact_resistance"):
            in_series(1.0, bad)


# Finite drain voltage

KINDS: list[Transmission] = [Open(), Given((0.7, 0.3)), MeanFreePath(80.0, 120.0), Saddle(0.006)]


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: type(kind).__name__)
@pytest.mark.parametrize("part", [0.0, 0.5, 1.0])
def test_current_by_quadrature_of_the_two_fermi_functions(kind: Transmission, part: float) -> None:
    modes, fermi, drain, temperature = openings_of_rows([0.01, 0.03], [2, 4]), 0.02, 0.013, 30.0
    kT = KB * temperature
    nodes, weights = np.polynomial.legendre.leggauss(30)
    lowered = np.array([0.01, 0.03]) - part * drain
    edges = np.unique(np.concatenate([np.arange(-0.15, 0.25, 0.0025), lowered]))
    middle, half = (edges[1:] + edges[:-1]) / 2, np.diff(edges) / 2
    energy = (middle[:, None] + half[:, None] * nodes).ravel()
    weight = (half[:, None] * weights).ravel()
    difference = 1 / (1 + np.exp((energy - fermi) / kT)) - 1 / (1 + np.exp((energy - fermi + drain) / kT))
    through = sum(g / 2 * kind.at(energy, e, n) for n, (g, e) in enumerate(zip((2, 4), lowered, strict=True)))
    expected = CONDUCTANCE_QUANTUM_SIEMENS * weight @ (through * difference)
    found = current(modes, kind, fermi, drain, temperature, lowered_part=part)
    assert float(found) == pytest.approx(expected, rel=1e-11)


def test_absolute_zero_counts_the_window_above_each_opening() -> None:
    modes = openings_of_rows([0.01, 0.03], [2, 4])
    found = current(modes, Open(), 0.02, [0.005, 0.05, -0.015], 0.0, lowered_part=0.0)
    expected = CONDUCTANCE_QUANTUM_SIEMENS * np.array([0.005, 0.01, -(0.015 + 2 * 0.005)])
    assert found == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: type(kind).__name__)
@pytest.mark.parametrize("temperature_K", [0.0, 30.0])
def test_a_tiny_drain_voltage_is_linear(kind: Transmission, temperature_K: float) -> None:
    modes = openings_of_rows([0.01, 0.03], [2, 4])
    linear = transmitted_conductance(modes, kind, 0.021, temperature_K)
    for drain in (1e-10, -1e-10):
        small = current(modes, kind, 0.021, drain, temperature_K, lowered_part=0.5) / drain
        assert float(small) == pytest.approx(CONDUCTANCE_QUANTUM_SIEMENS * float(linear), rel=1e-12)
    zero = differential_conductance(modes, kind, 0.021, 0.0, temperature_K, lowered_part=0.3)
    assert float(zero) == pytest.approx(float(linear), rel=1e-13)


def test_differential_conductance_is_the_slope_of_the_current() -> None:
    modes, kind, h = openings_of_rows([0.01, 0.03], [2, 4]), Saddle(0.006), 1e-4
    drain = np.linspace(-0.05, 0.05, 9)
    at = [current(modes, kind, 0.02, drain + m * h, 30.0, lowered_part=0.4) for m in (-2, -1, 1, 2)]
    slope = (at[0] - 8 * at[1] + 8 * at[2] - at[3]) / (12 * h) / CONDUCTANCE_QUANTUM_SIEMENS
    found = differential_conductance(modes, kind, 0.02, drain, 30.0, lowered_part=0.4)
    assert found == pytest.approx(slope, rel=1e-8)


def test_half_plateaus_between_the_two_fermi_levels() -> None:
    # steps at 10 and 30 meV; the symmetric window of 8 mV has one end on each side of an opening
    modes = openings_of_rows([0.010, 0.030], [2, 2])
    found = differential_conductance(modes, Open(), [0.0, 0.010, 0.020, 0.030, 0.040], 0.008, 0.0, lowered_part=0.5)
    assert found.tolist() == [0, 0.5, 1, 1.5, 2]
    # where the levels stay with the source, the drain's Fermi level alone decides
    found = differential_conductance(modes, Open(), [0.010 + 1e-6, 0.020], 0.008, 0.0, lowered_part=0.0)
    assert found.tolist() == [0, 1]


@pytest.mark.parametrize("temperature_K", [0.0, 4.2, 300.0])
def test_contacts_take_their_part_of_the_drain_voltage(temperature_K: float) -> None:
    modes, resistance = openings_of_rows([0.01, 0.03], [2, 4]), 4000.0
    drain = np.array([-0.2, -0.01, 0.0, 1e-6, 0.03, 0.4])
    through = current(modes, Open(), 0.02, drain, temperature_K, lowered_part=0.5, contact_resistance_ohm=resistance)
    inner = drain - resistance * through
    again = current(modes, Open(), 0.02, inner, temperature_K, lowered_part=0.5)
    assert again == pytest.approx(through, rel=1e-12, abs=1e-22)
    linear = in_series(transmitted_conductance(modes, Open(), 0.02, temperature_K), resistance)
    assert through[3] / 1e-6 == pytest.approx(CONDUCTANCE_QUANTUM_SIEMENS * float(linear), rel=1e-4)


def test_bad_numbers_are_refused() -> None:
    modes = openings_of_rows([0.01], [2])
    with pytest.raises(InputError, match="temperature"):
        transmitted_conductance(modes, Open(), 0.0, -1.0)
    with pytest.raises(InputError, match="lowered_part"):
        current(modes, Open(), 0.0, 0.1, 4.2, lowered_part=1.5)
    with pytest.raises(InputError, match="contact_resistance"):
        current(modes, Open(), 0.0, 0.1, 4.2, lowered_part=0.5, contact_resistance_ohm=-3.0)


def test_a_band_with_two_minima_conducts_in_pairs_above_its_lower_ones() -> None:
    # E = E0 - b k^2 + c k^4: two modes a direction between the minima at +-k0 and the hump at k = 0, one above
    k = np.linspace(0.0, 0.8, 161)
    band = 0.1 - 0.5 * k**2 + 2.0 * k**4
    spectrum = wire([0.1 - 0.5**2 / 8], axial_mass=[HBAR2_OVER_2M0], k_per_nm=k, band_eV=band[None])
    found = transmitted_conductance(openings(spectrum), Given((0.8,)), [0.05, 0.08, 0.12], 0.0)
    assert found == pytest.approx([0, 1.6, 0.8], rel=1e-12)
