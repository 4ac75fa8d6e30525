"""Transistors at the top of their barrier against a 20-digit root, limits, laws and conservation; capacitance parts."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics.capacitance import (
    in_F_per_m,
    is_quantum_limited,
    limit_text,
    parts,
    per_V_nm,
    quantum_capacitance_per_V_nm,
)
from wiresolve.physics.conductance import openings_of_rows, transmitted_conductance
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import line_density_by_subband
from wiresolve.physics.transistor import Rows, SpectrumStates, Transistor, injection_velocity_m_per_s
from wiresolve.physics.transistor_summary import transistor_summary
from wiresolve.physics.transmission import Given, MeanFreePath, Open, Saddle
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, FARAD_PER_M, HBAR2_OVER_2M0, KB


def rows(**more: Any) -> Rows:
    """Three subbands, the second of another mass and degeneracy."""
    states = {
        "energy_eV": np.array([0.20, 0.26, 0.33]),
        "axial_mass": np.array([0.19, 0.55, 0.19]),
        "degeneracy": np.array([4, 8, 4]),
    }
    return Rows(**{**states, **more})


def device(**more: Any) -> Transistor:
    """A channel with all couplings; 0.3 nF/m."""
    given: dict[str, Any] = {
        "states": rows(),
        "transmission": Open(),
        "temperature_K": 300.0,
        "gate_coupling": 0.9,
        "drain_coupling": 0.05,
        "capacitance_per_V_nm": float(per_V_nm(3e-10)),
        "reference_per_nm": 0.002,
    }
    return Transistor(**{**given, **more})


def by_root(gate: float, drain: float, through: float, temperature: float) -> tuple[float, float, float]:
    """U, n and I of `device()` with one transmission, from polylogarithms and a root to 20 digits."""
    with mpmath.workdps(20):
        kT = mpmath.mpf(KB) * temperature
        states = list(zip([0.20, 0.26, 0.33], [0.19, 0.55, 0.19], [4, 8, 4], strict=True))

        def density(shift: Any) -> Any:
            total = mpmath.mpf(0)
            for energy, mass, g in states:
                n = g * mpmath.sqrt(mass * kT / (4 * mpmath.pi * mpmath.mpf(HBAR2_OVER_2M0)))
                source, far = (
                    -mpmath.re(mpmath.polylog(0.5, -mpmath.exp((-energy - shift - v) / kT))) for v in (0, drain)
                )
                total += n / 2 * ((2 - through) * source + through * far)
            return total

        capacitance = mpmath.mpf(3e-10) / FARAD_PER_M
        shift = mpmath.findroot(
            lambda u: u + 0.9 * gate + 0.05 * drain - (density(u) - 0.002) / capacitance,
            (-0.9 * gate, -0.5 * gate + 0.1),
        )
        flux = sum(
            g
            / mpmath.mpf(2)
            * (mpmath.log1p(mpmath.exp((-e - shift) / kT)) - mpmath.log1p(mpmath.exp((-e - shift - drain) / kT)))
            for e, _, g in states
        )
        return float(shift), float(density(shift)), float(CONDUCTANCE_QUANTUM_SIEMENS * through * kT * flux)


@pytest.mark.parametrize(
    ("through", "gate", "drain"), [(1.0, 0.1, 0.5), (0.4, 0.4, 0.3), (1.0, 0.8, 0.05), (0.7, 0.6, 1e-4)]
)
def test_against_a_root_with_polylogarithms(through: float, gate: float, drain: float) -> None:
    point = device(transmission=Given((through,))).at(gate, drain)
    shift, density, current = by_root(gate, drain, through, 300.0)
    assert float(point.level_shift_eV) == pytest.approx(shift, abs=1e-14)
    assert float(point.line_density_per_nm) == pytest.approx(density, rel=1e-11)
    assert float(point.current_A) == pytest.approx(current, rel=1e-11)


@settings(max_examples=40)
@given(st.floats(-1, 2), st.floats(-0.5, 1), st.sampled_from([0.0, 1e-3, 4.2, 77.0, 300.0]), st.floats(-4, 3))
def test_the_shift_solves_its_equation(gate: float, drain: float, temperature: float, log_capacitance: float) -> None:
    channel = device(temperature_K=temperature, capacitance_per_V_nm=10**log_capacitance, transmission=Given((0.7,)))
    point = channel.at(gate, drain)
    shift, c = float(point.level_shift_eV), channel.capacitance_per_V_nm

    def excess(u: float) -> float:
        return u + 0.9 * gate + 0.05 * drain - (float(channel.density(u, drain)) - 0.002) / c

    # the equation rises: its root lies between the two neighbours, a few units in the last place away
    unit = 4e-15 * max(1.0, abs(shift), 0.002 / c)
    assert excess(shift - unit) <= 0 <= excess(shift + unit)


def test_equilibrium_is_left_alone_and_no_current_flows() -> None:
    states = rows(energy_eV=np.array([-0.02, 0.05, 0.1]))
    held = float(states.density(np.zeros(()), 77.0).sum())
    for transmission in (Open(), Given((0.3,))):
        point = device(states=states, reference_per_nm=held, temperature_K=77.0, transmission=transmission).at(0.0, 0.0)
        assert float(point.level_shift_eV) == pytest.approx(0, abs=1e-15)
        assert float(point.line_density_per_nm) == pytest.approx(held, rel=1e-13)
        assert float(point.current_A) == 0


def test_a_small_drain_voltage_gives_the_linear_conductance() -> None:
    channel = device(transmission=MeanFreePath(30.0, 60.0))
    point = channel.at(0.7, 1e-9)
    modes = openings_of_rows(channel.states.openings.energy_eV + float(point.level_shift_eV), [4, 8, 4])
    linear = CONDUCTANCE_QUANTUM_SIEMENS * float(transmitted_conductance(modes, Given((2 / 3,)), 0.0, 300.0))
    assert float(point.current_A) / 1e-9 == pytest.approx(linear, rel=1e-6)


def test_exchanged_contacts_reverse_the_current() -> None:
    # a ballistic channel seen from the other contact: -V, the gate counted from there, the same barrier
    channel = device(drain_coupling=0.1, gate_coupling=0.8, reference_per_nm=0.0)
    drain = 0.3
    seen = channel.at(0.6, drain)
    # from the drain the levels lie V higher: U' = U + V, and a_G (V_G - V) - (1 - a_G - a_D) V = the same drive
    other = replace(channel, drain_coupling=1 - 0.8 - 0.1).at(0.6 - drain, -drain)
    assert float(other.level_shift_eV) == pytest.approx(float(seen.level_shift_eV) + drain, abs=1e-14)
    assert float(other.current_A) == pytest.approx(-float(seen.current_A), rel=1e-12)


def test_absolute_zero_in_closed_form() -> None:
    # one subband, drain Fermi level below it: n = (g/2 pi) k_F, n = C (V - E)/e, I = G0 g/2 (depth)
    mass, capacitance, gate = 0.067, 0.4, 0.35
    channel = Transistor(
        Rows(np.array([0.1]), np.array([mass]), np.array([2])), Open(), 0.0, 1.0, 0.0, capacitance, 0.0
    )
    point = channel.at(gate, 2.0)
    # depth d = -E - U: with n = s sqrt(d), V - E - d = s sqrt(d)/C, a quadratic in sqrt(d)
    s = np.sqrt(mass / HBAR2_OVER_2M0) / np.pi / capacitance
    root = (-s + np.sqrt(s * s + 4 * (gate - 0.1))) / 2
    assert float(point.level_shift_eV) == pytest.approx(-0.1 - root**2, rel=1e-13)
    assert float(point.line_density_per_nm) == pytest.approx(s * capacitance * root, rel=1e-12)
    assert float(point.current_A) == pytest.approx(CONDUCTANCE_QUANTUM_SIEMENS * root**2, rel=1e-12)
    below = channel.at(0.05, 2.0)
    assert float(below.level_shift_eV) == pytest.approx(-0.05, rel=1e-13)
    assert float(below.current_A) == float(below.line_density_per_nm) == 0


def test_cold_is_the_limit_of_absolute_zero() -> None:
    gate = np.linspace(0, 1.2, 13)
    frozen, cold = (device(temperature_K=t).at(gate, 0.2) for t in (0.0, 1e-4))
    assert cold.level_shift_eV == pytest.approx(frozen.level_shift_eV, abs=1e-7)
    assert cold.current_A == pytest.approx(frozen.current_A, rel=1e-6, abs=1e-12)


@pytest.mark.parametrize("alpha", [None, 2.0])
def test_transconductance_is_the_slope_of_the_current(alpha: float | None) -> None:
    channel = device(states=rows(alpha_per_eV=alpha), transmission=Given((0.6, 0.9)))
    gate, h = np.array([0.05, 0.25, 0.4, 0.8]), 1e-3
    at = [channel.at(gate + m * h, 0.3).current_A for m in (-2, -1, 1, 2)]
    slope = (at[0] - 8 * at[1] + 8 * at[2] - at[3]) / (12 * h)
    assert channel.transconductance(gate, 0.3) == pytest.approx(slope, rel=1e-6)


def test_below_threshold_a_decade_takes_kT_over_the_coupling() -> None:
    slope = device(reference_per_nm=0.0).subthreshold_slope_mV_per_decade(-0.5, 0.5)
    assert float(slope) == pytest.approx(1e3 * np.log(10) * KB * 300 / 0.9, rel=1e-9)
    # ln 10 kT/e at 300 K: 59.5 mV
    full = device(gate_coupling=1.0, reference_per_nm=0.0).subthreshold_slope_mV_per_decade(-0.5, 0.5)
    assert float(full) == pytest.approx(59.526, abs=2e-3)


def test_barrier_lowering_is_the_ratio_of_the_couplings() -> None:
    # at one small current U is the same but for the drain's share of the charge, so dV_G = -(a_D/a_G) dV_D
    lowering = device(reference_per_nm=0.0).barrier_lowering_mV_per_V(1e-15, 1.0, 1.5)
    assert lowering == pytest.approx(1e3 * 0.05 / 0.9, rel=1e-9)


def test_gate_voltage_for_a_current_and_back() -> None:
    channel = device()
    current = np.array([1e-12, 1e-8, 1e-5])
    gate = channel.gate_voltage_at(current, 0.4)
    assert channel.at(gate, 0.4).current_A == pytest.approx(current, rel=1e-11)
    with pytest.raises(InputError, match="more than"):
        channel.gate_voltage_at(1.0, 0.4)
    with pytest.raises(InputError, match="positive"):
        channel.gate_voltage_at(-1e-9, 0.4)


def test_injection_velocity_of_one_parabola() -> None:
    channel = Transistor(Rows(np.array([0.1]), np.array([0.19]), np.array([4])), Open(), 300.0, 1.0, 0.0, 1.0, 0.0)
    point = channel.at([0.0, 0.3, 0.9], 0.5)
    eta = -(0.1 + point.level_shift_eV) / (KB * 300)
    assert point.injection_velocity_m_per_s == pytest.approx(injection_velocity_m_per_s(eta, 0.19, 300.0), rel=1e-11)
    # above saturation all current is carried by the source's half at this speed
    carried = FARAD_PER_M * point.line_density_per_nm * point.injection_velocity_m_per_s
    assert carried == pytest.approx(point.current_A, rel=1e-5)


def test_backscattering_keeps_the_ballistic_current_above_its_share() -> None:
    # the returning carriers raise the barrier, so I < T I_ballistic at a gate voltage where charge counts
    ballistic, scattered = (device(transmission=kind).at(0.7, 0.5) for kind in (Open(), Given((0.5,))))
    assert 0 < float(scattered.current_A) < 0.5 * float(ballistic.current_A)
    assert float(scattered.level_shift_eV) > float(ballistic.level_shift_eV)


def test_a_spectrum_does_what_its_rows_do() -> None:
    count = 3
    spectrum = Spectrum(
        energy_eV=[0.20, 0.26, 0.33],
        error_eV=np.zeros(count),
        axial_mass=[0.19, 0.55, 0.19],
        degeneracy=[4, 8, 4],
        level=[1, 2, 3],
        listed=count,
    )
    gate = np.array([0.1, 0.4, 0.8])
    plain, from_spectrum = (device(states=s) for s in (rows(), SpectrumStates(spectrum)))
    a, b = plain.at(gate, 0.3), from_spectrum.at(gate, 0.3)
    assert b.current_A == pytest.approx(a.current_A, rel=1e-12)
    assert b.line_density_per_nm == pytest.approx(a.line_density_per_nm, rel=1e-12)
    found = from_spectrum.transconductance(gate, 0.3)
    assert found == pytest.approx(plain.transconductance(gate, 0.3), rel=1e-6)
    with_tail = Spectrum(
        **{k: getattr(spectrum, k) for k in ("energy_eV", "error_eV", "axial_mass", "degeneracy", "level", "listed")},
        tails=(parabolic_tail([0.35, 0.45], [0.0, 80.0], 0.19),),
    )
    more = device(states=SpectrumStates(with_tail))
    assert (more.at(gate, 0.3).line_density_per_nm > b.line_density_per_nm).all()
    h = 1e-3
    at = [more.at(0.8 + m * h, 0.3).current_A for m in (-2, -1, 1, 2)]
    slope = (at[0] - 8 * at[1] + 8 * at[2] - at[3]) / (12 * h)
    assert more.transconductance(0.8, 0.3) == pytest.approx(slope, rel=1e-5)


@pytest.mark.parametrize("temperature_K", [0.0, 77.0])
def test_the_bands_of_a_spectrum_hold_what_they_do_in_equilibrium(temperature_K: float) -> None:
    # a table, a parabola and a mass that grows with energy, counted from an edge below the minima
    k = np.linspace(0.0, 0.9, 31)
    nothing = np.full(31, np.nan)
    spectrum = Spectrum(
        energy_eV=[0.1, 0.15, 0.2],
        error_eV=np.zeros(3),
        axial_mass=[0.1, 0.2, 0.1],
        degeneracy=[2, 4, 2],
        level=[1, 2, 3],
        listed=3,
        k_per_nm=k,
        band_eV=np.stack([0.1 + HBAR2_OVER_2M0 / 0.1 * k**2 / (1 + k**2), nothing, nothing]),
        edge_eV=np.full(3, 0.05),
        nonparabolicity_per_eV=np.array([0.0, 0.0, 1.3]),
    )
    fermi = np.array([[0.0, 0.12], [0.18, 0.35]])
    expected = line_density_by_subband(spectrum, fermi, temperature_K)
    found = SpectrumStates(spectrum).density(fermi, temperature_K)
    assert found[:3] == pytest.approx(expected, rel=1e-7)
    assert not found[3].any()


def test_a_nonparabolic_subband_holds_more() -> None:
    # T = 0: k = sqrt(d (1 + alpha d) m/(hbar^2/2 m0))
    states = rows(alpha_per_eV=np.array([1.0, 0.0, 1.0]))
    k = np.sqrt(0.1 * 1.1 * 0.19 / HBAR2_OVER_2M0), np.sqrt(0.04 * 0.55 / HBAR2_OVER_2M0)
    expected = [4 * k[0] / np.pi, 8 * k[1] / np.pi, 0]
    assert states.density(np.array(0.30), 0.0) == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize(
    "change",
    [
        {"temperature_K": -1.0},
        {"gate_coupling": 0.0},
        {"drain_coupling": -0.1},
        {"capacitance_per_V_nm": 0.0},
        {"transmission": Saddle(1e-3)},
    ],
)
def test_bad_devices_are_refused(change: dict[str, Any]) -> None:
    with pytest.raises(InputError):
        device(**change)


# Capacitance


def test_units_of_capacitance() -> None:
    assert float(in_F_per_m(1.0)) == pytest.approx(1.602176634e-10, rel=1e-14)  # SI 2019: e
    assert float(per_V_nm(in_F_per_m(0.37))) == pytest.approx(0.37, rel=1e-15)


@pytest.mark.parametrize("temperature_K", [4.2, 300.0])
def test_quantum_capacitance_is_the_slope_of_the_density(temperature_K: float) -> None:
    states, h = rows(alpha_per_eV=np.array([0.0, 1.5, 0.0])), 1e-2 * KB * temperature_K
    fermi = np.array([0.15, 0.2, 0.27, 0.5])
    at = [states.density(fermi + m * h, temperature_K).sum(axis=0) for m in (-2, -1, 1, 2)]
    slope = (at[0] - 8 * at[1] + 8 * at[2] - at[3]) / (12 * h)
    assert quantum_capacitance_per_V_nm(states, fermi, temperature_K) == pytest.approx(slope, rel=1e-7)


def test_quantum_capacitance_at_absolute_zero() -> None:
    states = Rows(np.array([0.1]), np.array([0.067]), np.array([2]))
    found = quantum_capacitance_per_V_nm(states, [0.05, 0.1, 0.11], 0.0)
    # 2/pi dk/dE = (1/pi) sqrt(m/(hbar^2/2m0 d)): topic "one subband 10 meV below the Fermi level"
    assert found[0] == 0
    assert found[1] == np.inf
    assert found[2] == pytest.approx(4.22110407688, rel=1e-9)


def test_parts_add_up_in_series() -> None:
    made = parts([0.2, 0.5], 1.0, [0.5, 4.0])
    for c, g, q, rest in zip([0.2, 0.5], [1.0, 1.0], [0.5, 4.0], made.centroid_per_V_nm, strict=True):
        assert 1 / g + 1 / q + 1 / rest == pytest.approx(1 / c, rel=1e-14)
    assert float(parts(0.9, 1.0, 20.0).centroid_per_V_nm) == pytest.approx(1 / (1 / 0.9 - 1.05), rel=1e-12)
    assert float(parts(0.99, 1.0, 20.0).centroid_per_V_nm) < 0
    assert np.isnan(float(parts(0.0, 1.0, 0.0).centroid_per_V_nm))
    # on an opening at T = 0 the quantum part takes no voltage
    assert float(parts(0.5, 1.0, np.inf).centroid_per_V_nm) == pytest.approx(1.0)


def test_the_quantum_limit_by_its_thresholds() -> None:
    assert is_quantum_limited([0.5, 1.0, 2.0], 1.0).tolist() == [True, False, False]
    assert limit_text(0.05, 1.0).startswith("deep")
    assert limit_text(0.5, 1.0) == "in the quantum-capacitance limit"
    assert limit_text(2.0, 1.0) == "limited by its geometry"


# Summary


def test_summary_of_a_scattering_channel() -> None:
    # on-current and charge from the root, off in the exponential tail
    channel = device(gate_coupling=0.9, reference_per_nm=0.002, transmission=Given((0.4,)))
    made = transistor_summary(channel, channel, 0.3, 0.2, -0.5, 0.4)
    _, density, current = by_root(0.4, 0.3, 0.4, 300.0)
    assert made.on_current_A == pytest.approx(current, rel=1e-11)
    assert made.on_density_per_nm == pytest.approx(density, rel=1e-11)
    assert made.ballistic_part == pytest.approx(current / by_root(0.4, 0.3, 1.0, 300.0)[2], rel=1e-10)
    assert made.subthreshold_slope_mV_per_decade == pytest.approx(1e3 * np.log(10) * KB * 300 / 0.9, rel=1e-4)
    # the drain's coupling, and the thermal tail of the drain's own carriers at the low voltage, exp(-0.2 V/kT)
    assert made.barrier_lowering_mV_per_V == pytest.approx(1e3 * 0.05 / 0.9, rel=1e-2)
    cold = device(temperature_K=0.0)
    frozen = transistor_summary(cold, cold, 0.3, 0.2, -0.5, 0.6)
    assert frozen.off_current_A == 0
    assert np.isnan(frozen.subthreshold_slope_mV_per_decade)


def test_summary_needs_voltages_in_order() -> None:
    with pytest.raises(InputError, match="low_drain_V"):
        transistor_summary(device(), device(), 0.3, 0.3, 0.0, 0.5)
