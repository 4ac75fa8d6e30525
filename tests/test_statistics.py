"""Fermi integrals, line density, Fermi level and density of states against closed forms and quadrature."""

from __future__ import annotations

from itertools import pairwise
from math import pi, sqrt
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics.fermi import fermi_integral, occupation
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import (
    density_of_states,
    fermi_level,
    line_density,
    line_density_by_subband,
    subband_density,
    tail_density,
)
from wiresolve.physics.tabulated_band import tabulated_band
from wiresolve.physics.tail import Tail, added
from wiresolve.physics.thermal import boltzmann_sums
from wiresolve.units import HBAR2_OVER_2M0, KB


def ladder(energies_eV: Any, mass: float = 0.067, degeneracy: int = 2, **more: Any) -> Spectrum:
    """Parabolas of one mass, each a level of its own."""
    count = len(energies_eV)
    states = {
        "energy_eV": energies_eV,
        "error_eV": np.zeros(count),
        "axial_mass": np.full(count, mass),
        "degeneracy": np.full(count, degeneracy),
        "level": np.arange(1, count + 1),
        "listed": count,
    }
    return Spectrum(**{**states, **more})


def box_levels_eV(width_nm: float, height_nm: float, mass: float, highest_eV: float) -> np.ndarray:
    """Levels of a hard-wall rectangle up to an energy, closed form."""
    unit = HBAR2_OVER_2M0 * pi**2 / mass
    most = [int(side * sqrt(highest_eV / unit)) + 1 for side in (width_nm, height_nm)]
    i, j = np.meshgrid(np.arange(1, most[0] + 1), np.arange(1, most[1] + 1))
    energies = unit * ((i / width_nm) ** 2 + (j / height_nm) ** 2).ravel()
    return np.sort(energies[energies <= highest_eV])


# Fermi-Dirac integrals


def polylogarithm(order: float, eta: float) -> float:
    """F_j from mpmath, to 30 digits: -Li_(j+1)(-e^eta), for large eta by Hurwitz's zeta function (DLMF 25.12.13)."""
    with mpmath.workdps(60):
        s, x = mpmath.mpf(order) + 1, mpmath.mpf(eta)
        if eta < 30:
            return float(-mpmath.polylog(s, -mpmath.exp(x)).real)
        a = mpmath.mpf(1) / 2 - 1j * x / (2 * mpmath.pi)
        return float(-((2 * mpmath.pi) ** s * mpmath.expjpi(s / 2) / mpmath.gamma(s) * mpmath.zeta(1 - s, a)).real)


@pytest.mark.parametrize(
    ("order", "accuracy"),
    [(-1.5, 2e-14), (-1, 1e-15), (-0.5, 5e-15), (0, 1e-15), (0.5, 2e-13), (1, 1e-15), (1.5, 2e-12)],
)
def test_fermi_integral_agrees_with_mpmath(order: float, accuracy: float) -> None:
    etas = [-60.0, -40.0, -3.0, -1.0, -1e-3, 0.0, 1e-3, 0.7, 2.0, 4.4, 9.0, 17.0, 29.0]
    if order != round(order):  # the other branch of the reference is for half orders
        etas += [40.0, 50.2, 50.3, 75.0, 1e3, 1e4]
    expected = np.array([polylogarithm(order, eta) for eta in etas])
    assert fermi_integral(order, etas) == pytest.approx(expected, rel=accuracy, abs=0)


@pytest.mark.parametrize("order", [-1.5, -0.5, 0.5, 1.5])
def test_fermi_integral_tends_to_its_limits(order: float) -> None:
    thin, dense = fermi_integral(order, [-1e4, -650.0]), fermi_integral(order, [1e4])
    assert thin[0] == 0
    assert thin[1] == pytest.approx(np.exp(-650.0), rel=1e-14)
    # leading terms of Sommerfeld's series; the next is of relative size eta^-4
    leading = mpmath.mpf(10**4) ** (order + 1) / mpmath.gamma(order + 2)
    expected = float(leading * (1 + pi**2 / 6 * (order + 1) * order / 1e8))
    assert dense[0] == pytest.approx(expected, rel=1e-15)


@given(st.floats(-30, 60), st.sampled_from([-0.5, 0.0, 0.5, 1.0, 1.5]))
def test_fermi_integrals_are_each_others_derivatives(eta: float, order: float) -> None:
    step = 1e-3
    outer = fermi_integral(order, eta + step * np.array([-2, -1, 1, 2]))
    slope = outer @ np.array([1, -8, 8, -1]) / (12 * step)
    assert slope == pytest.approx(float(fermi_integral(order - 1, eta)), rel=1e-8, abs=1e-20)


def test_fermi_integral_keeps_shapes_and_refuses_other_orders() -> None:
    assert fermi_integral(-0.5, np.zeros((2, 0, 3))).shape == (2, 0, 3)
    assert fermi_integral(0.5, -1.0).shape == ()
    assert np.isnan(fermi_integral(-0.5, np.nan))
    for order in (0.3, -2, 7):
        with pytest.raises(InputError, match="whole or half number"):
            fermi_integral(order, 0.0)


def test_occupation_at_absolute_zero_is_a_step() -> None:
    assert occupation([0.1, 0.2, 0.3], 0.2, 0.0).tolist() == [1.0, 0.5, 0.0]
    assert occupation([0.1, 0.3], 0.2, 1e-300).tolist() == [1.0, 0.0]


# Line density


@pytest.mark.parametrize("temperature_K", [0.05, 4.2, 77.0, 300.0])
def test_a_parabola_holds_what_quadrature_over_k_finds(temperature_K: float) -> None:
    mass, degeneracy, kT = 0.19, 4, KB * temperature_K
    for eta in (-8.0, 0.0, 3.0, 25.0):
        scale = sqrt(mass * kT / HBAR2_OVER_2M0)
        edge = sqrt(max(eta, 0.0))
        found, _ = quad(
            lambda x, eta=eta: 1 / (1 + np.exp(x * x - eta)), 0, edge + 8, points=[edge], epsabs=0, epsrel=1e-12
        )
        density = subband_density(0.1, mass, degeneracy, 0.1 + eta * kT, temperature_K)
        assert float(density) == pytest.approx(degeneracy / pi * scale * found, rel=1e-10)


def test_absolute_zero_is_the_limit_of_low_temperature() -> None:
    spectrum = ladder([0.05, 0.08, 0.13], tails=(parabolic_tail([0.13, 0.2], [0.0, 5.0], 0.067),))
    fermi = np.array([0.04, 0.06, 0.1, 0.19])
    cold = line_density(spectrum, fermi, 0.0)
    assert line_density(spectrum, fermi, 1e-2) == pytest.approx(cold, rel=1e-7, abs=1e-30)
    assert line_density(spectrum, fermi, 1e-300) == pytest.approx(cold, rel=1e-14)
    assert cold[0] == 0


def test_temperatures_and_fermi_levels_broadcast() -> None:
    spectrum = ladder([0.05, 0.08], tails=(parabolic_tail([0.08, 0.2], [0.0, 5.0], 0.067),))
    fermi, temperatures = np.linspace(0.0, 0.2, 5), np.array([0.0, 4.2, 300.0])
    together = line_density(spectrum, fermi, temperatures[:, None])
    assert together.shape == (3, 5)
    for row, temperature in zip(together, temperatures, strict=True):
        assert row == pytest.approx(line_density(spectrum, fermi, temperature), rel=1e-14)
    assert line_density_by_subband(spectrum, 0.1, 77.0).shape == (2,)


def test_density_scales_with_degeneracy_and_root_of_mass_and_ignores_the_zero_of_energy() -> None:
    fermi = np.linspace(0.0, 0.2, 7)
    base = line_density(ladder([0.05, 0.08]), fermi, 77.0)
    assert line_density(ladder([0.05, 0.08], degeneracy=12), fermi, 77.0) == pytest.approx(6 * base, rel=1e-14)
    assert line_density(ladder([0.05, 0.08], mass=0.268), fermi, 77.0) == pytest.approx(2 * base, rel=1e-14)
    assert line_density(ladder([3.05, 3.08]), fermi + 3, 77.0) == pytest.approx(base, rel=1e-11)


# Bands from a table


def cubic_band(square: float, cube: float, k_end: float, mass: float, lowest_eV: float = 0.1) -> tuple[Any, Any, Any]:
    """E = lowest + square k^2 + cube k^3 (a cubic spline repeats it exactly) as a table, and E(k) with its parabola."""
    k = np.linspace(0.0, k_end, 33)
    shift = lowest_eV - min(0.0, 4 * square**3 / (27 * cube**2) if square < 0 else 0.0)

    def energy(x: float) -> float:
        if x <= k_end:
            return shift + square * x**2 + cube * x**3
        return energy(k_end) + HBAR2_OVER_2M0 / mass * (x**2 - k_end**2)

    return k, np.array([energy(x) for x in k]), energy


STIFF = HBAR2_OVER_2M0 / 0.05
BANDS = {
    "steeper than its parabola": cubic_band(STIFF, 0.3, 0.6, 0.05),
    "minimum off the centre": cubic_band(-0.4, 0.9, 0.7, 0.05),
}


@pytest.mark.parametrize("name", BANDS)
@pytest.mark.parametrize("temperature_K", [4.2, 77.0, 300.0])
def test_a_tabulated_band_holds_what_quadrature_finds(name: str, temperature_K: float) -> None:
    k, table, energy = BANDS[name]
    band = tabulated_band(k, table, 0.1, 0.05)
    assert band is not None
    kT = KB * temperature_K
    turns = [x for x in (0.8 / (3 * 0.9), k[-1]) if x > 0]
    fermi = np.array([0.1 - 30 * kT, 0.1 - 3 * kT, 0.101, 0.12, 0.16, 0.3])
    expected = []
    for level in fermi:
        crossings = [x for x in np.linspace(0.01, 2, 400) if abs(energy(x) - level) < 3 * kT][:40]
        found, _ = quad(
            lambda x, level=level: 1 / (1 + np.exp(min((energy(x) - level) / kT, 700.0))),
            0,
            3,
            points=sorted({*turns, *crossings}),
            limit=2000,
            epsabs=0,
            epsrel=1e-11,
        )
        expected.append(found)
    shared = band.occupied_length(fermi, np.array(temperature_K))
    alone = [float(band.occupied_length(level, np.array(temperature_K))) for level in fermi]
    assert shared == pytest.approx(expected, rel=1e-8)
    assert alone == pytest.approx(expected, rel=1e-8)


def test_a_tabulated_band_at_absolute_zero_counts_the_k_below_the_fermi_level() -> None:
    k, table, energy = BANDS["minimum off the centre"]
    band = tabulated_band(k, table, 0.1, 0.05)
    assert band is not None
    centre = energy(0.0)
    assert band.k_min_per_nm == pytest.approx(0.8 / 2.7, rel=1e-12)
    assert band.turning_eV == pytest.approx([centre, 0.1], rel=1e-12)
    assert band.turning_modes.tolist() == [-1.0, 2.0]
    for level in (0.101, 0.105, centre - 1e-9, centre + 1e-9, 0.2, 0.5):
        roots = [float(r.real) for r in np.roots([0.9, -0.4, 0, centre - level]) if abs(r.imag) < 1e-7 and r.real >= 0]
        inside = [r for r in roots if r <= k[-1]]
        if level < centre:
            expected = max(inside) - min(inside)
        elif inside:
            expected = max(inside)
        else:
            expected = sqrt(k[-1] ** 2 + (level - energy(k[-1])) * 0.05 / HBAR2_OVER_2M0)
        assert float(band.occupied_length(level, np.array(0.0))) == pytest.approx(expected, rel=1e-7)


def test_nonparabolic_band_from_a_table_agrees_with_its_closed_form() -> None:
    # E (1 + E/gap) = hbar^2 k^2 / 2m, so k(E) is known; a table of 49 points up to 0.9 eV
    mass, gap = 0.023, 0.4
    k = np.linspace(0.0, 1.3, 49)
    table = 0.05 + (np.sqrt(1 + 4 * HBAR2_OVER_2M0 * k**2 / mass / gap) - 1) * gap / 2
    spectrum = ladder([0.05], mass=mass, k_per_nm=k, band_eV=table[None, :])
    above = np.array([0.01, 0.1, 0.3])
    expected = 2 / pi * np.sqrt(above * (1 + above / gap) * mass / HBAR2_OVER_2M0)
    assert line_density(spectrum, 0.05 + above, 0.0) == pytest.approx(expected, rel=2e-5)
    kT = KB * 300
    thermal = [
        quad(
            lambda e, m=m: (
                2 / pi * sqrt(e * (1 + e / gap) * mass / HBAR2_OVER_2M0) / (4 * kT * np.cosh((e - m) / 2 / kT) ** 2)
            ),
            0,
            m + 40 * kT,
            points=[m],
        )[0]
        for m in above
    ]
    assert line_density(spectrum, 0.05 + above, 300.0) == pytest.approx(thermal, rel=1e-4)


def test_a_table_of_a_parabola_is_the_closed_form() -> None:
    k = np.linspace(0.0, 0.8, 20)
    table = 0.05 + HBAR2_OVER_2M0 / 0.067 * k**2
    spectrum = ladder([0.05], k_per_nm=k, band_eV=table[None, :])
    assert spectrum.bands == (None,)
    # pushed out of the closed form by a cubic term of a few 1e-9 eV it must give the same numbers
    bent = ladder([0.05], k_per_nm=k, band_eV=(table + 8e-9 * k**3)[None, :])
    assert bent.bands[0] is not None
    fermi = np.linspace(-0.1, 0.4, 11)
    for temperature in (0.0, 4.2, 300.0):
        straight = line_density(spectrum, fermi, temperature)
        assert line_density(bent, fermi, temperature) == pytest.approx(straight, rel=3e-7, abs=1e-30)
    assert boltzmann_sums(bent, 300.0).energy_kT == pytest.approx(0.5, rel=1e-7)


def test_two_bands_that_cross_at_the_centre_start_linearly() -> None:
    # E = a k^2 -+ v k: the same parabola twice, shifted by -+ k0; together they hold what two parabolas hold
    mass, k0 = 0.05, 0.1
    k = np.linspace(0.0, 0.8, 33)
    drop = STIFF * k0**2
    low, high = STIFF * (k - k0) ** 2 + 0.1, STIFF * (k + k0) ** 2 + 0.1
    bands = {"k_per_nm": k, "band_eV": np.array([low, high])}
    spectrum = ladder([0.1, 0.1 + drop], degeneracy=1, axial_mass=[mass, np.nan], **bands)
    twin = ladder([0.1, 0.1], mass=mass, degeneracy=1)
    fermi = np.array([0.105, 0.12, 0.3])
    for temperature in (0.0, 77.0):
        assert line_density(spectrum, fermi, temperature) == pytest.approx(
            line_density(twin, fermi, temperature), rel=1e-9
        )


def test_tables_that_belong_to_another_band_are_refused() -> None:
    k = np.linspace(0.0, 0.6, 20)
    falling = 0.1 - 0.2 * k**2
    with pytest.raises(InputError, match="end where the energy rises"):
        tabulated_band(k, falling, float(falling.min()), 0.05)
    with pytest.raises(InputError, match="subband's energy"):
        tabulated_band(k, 0.2 + STIFF * k**2, 0.1, 0.05)


# Tail


@pytest.mark.parametrize("temperature_K", [0.0, 20.0, 300.0])
def test_the_tail_holds_what_many_subbands_hold(temperature_K: float) -> None:
    # 4000 subbands a millionth of an eV apart against their smooth count
    minima = 0.1 + (np.arange(4000) + 0.5) * 1e-5
    tail = parabolic_tail([0.1, 0.12, 0.14], [0.0, 4000.0, 8000.0], 0.067)
    many, smooth = ladder([0.05, *minima]), ladder([0.05], tails=(tail,))
    fermi = np.array([0.02, 0.11, 0.13, 0.2])
    found = tail_density(smooth, fermi, temperature_K)
    expected = line_density_by_subband(many, fermi, temperature_K)[1:].sum(axis=0)
    assert found == pytest.approx(expected, rel=1e-5, abs=1e-30)
    assert line_density(smooth, fermi, temperature_K) == pytest.approx(
        line_density(many, fermi, temperature_K), rel=1e-5
    )
    if temperature_K:
        thin, counted = boltzmann_sums(smooth, temperature_K), boltzmann_sums(many, temperature_K)
        assert float(thin.share[0]) == pytest.approx(float(counted.share[0]), rel=1e-6)
        assert float(thin.energy_kT) == pytest.approx(float(counted.energy_kT), rel=1e-6)


@pytest.mark.parametrize("distance_kT", [1.0, 15.0, 30.0])
def test_the_line_density_leaves_no_tail_out(distance_kT: float) -> None:
    temperature = 50.0
    start = 0.05 + distance_kT * KB * temperature
    spectrum = ladder([0.05], tails=(parabolic_tail([start, start + 0.2], [0.0, 1e9], 0.067),))
    fermi = np.array([-0.1, 0.04, 0.06])
    solved = line_density_by_subband(spectrum, fermi, temperature)[0]
    tail = tail_density(spectrum, fermi, temperature)
    assert (tail > 1e-8 * solved).all()
    assert line_density(spectrum, fermi, temperature) == pytest.approx(solved + tail, rel=1e-15)


@pytest.mark.parametrize("temperature_K", [0.0, 77.0])
def test_tails_add_up_whatever_their_energies_are(temperature_K: float) -> None:
    one, other = parabolic_tail([0.1, 0.3], [0.0, 50.0], 0.067, 301), parabolic_tail([0.17, 0.5], [0.0, 9.0], 0.3, 97)
    together = added((one, other))
    assert together is not None
    assert added(()) is None
    fermi = np.array([0.05, 0.12, 0.2, 3.0])
    assert together.line_density(fermi, temperature_K) == pytest.approx(
        one.line_density(fermi, temperature_K) + other.line_density(fermi, temperature_K), rel=1e-12, abs=1e-30
    )
    assert together.mean_modes(fermi, temperature_K) == pytest.approx(
        one.mean_modes(fermi, temperature_K) + other.mean_modes(fermi, temperature_K), rel=1e-12, abs=1e-30
    )


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("energy_eV", [0.1]),
        ("energy_eV", [0.1, 0.1]),
        ("energy_eV", [0.1, np.nan]),
        ("modes", [1.0, 2.0]),
        ("modes", [0.0, -1.0]),
        ("modes", [0.0, 1.0, 2.0]),
        ("states_per_nm", [0.0, np.inf]),
        ("states_per_nm", [0.1, 0.2]),
    ],
)
def test_a_tail_that_does_not_fit_together_is_refused(name: str, value: Any) -> None:
    sound: dict[str, Any] = {"energy_eV": [0.1, 0.2], "modes": [0.0, 3.0], "states_per_nm": [0.0, 1.0]}
    Tail(**sound)
    with pytest.raises(InputError, match=f"tails.{name}"):
        Tail(**{**sound, name: value})


# Fermi level


@pytest.mark.parametrize("temperature_K", [0.0, 0.05, 4.2, 300.0])
@pytest.mark.parametrize("density_per_nm", [1e-12, 1e-5, 0.03, 0.7, 40.0])
def test_fermi_level_and_line_density_undo_each_other(temperature_K: float, density_per_nm: float) -> None:
    spectrum = ladder([0.05, 0.08, 0.08, 0.13], tails=(parabolic_tail([0.13, 0.5], [0.0, 40.0], 0.067),))
    level = fermi_level(spectrum, density_per_nm, temperature_K)
    assert type(level) is float
    if temperature_K == 0 and density_per_nm == 1e-12:
        assert level == pytest.approx(0.05, abs=1e-15)  # nearer to the edge than a float can tell
    else:
        tolerance = 1e-9 if temperature_K else 1e-6
        assert float(line_density(spectrum, level, temperature_K)) == pytest.approx(density_per_nm, rel=tolerance)


def test_fermi_level_of_one_subband_is_the_closed_form_at_absolute_zero() -> None:
    level = fermi_level(ladder([0.05]), 0.1, 0.0)
    assert level == pytest.approx(0.05 + HBAR2_OVER_2M0 / 0.067 * (pi * 0.1 / 2) ** 2, rel=1e-13)


@pytest.mark.parametrize("density", [0.0, -0.1, np.nan, np.inf, 1e30])
def test_impossible_densities_are_refused(density: float) -> None:
    with pytest.raises(InputError, match=r"^line_density: "):
        fermi_level(ladder([0.05]), density, 77.0)


@pytest.mark.parametrize("temperature", [-1.0, np.nan, np.inf])
def test_impossible_temperatures_are_refused(temperature: float) -> None:
    for call in (
        lambda: line_density(ladder([0.05]), 0.1, temperature),
        lambda: fermi_level(ladder([0.05]), 0.1, temperature),
        lambda: boltzmann_sums(ladder([0.05]), temperature),
    ):
        with pytest.raises(InputError, match=r"^temperature: must be zero or positive"):
            call()


# Density of states


def test_bins_hold_the_states_between_their_edges() -> None:
    spectrum = ladder([0.05, 0.08, 0.08])
    edges = np.array([0.0, 0.04, 0.0501, 0.06, 0.08, 0.1, 0.3])
    found = density_of_states(spectrum, edges)

    def below(energy: float) -> float:
        return sum(2 / pi * sqrt(max(energy - e, 0) * 0.067 / HBAR2_OVER_2M0) for e in (0.05, 0.08, 0.08))

    expected = [(below(b) - below(a)) / (b - a) for a, b in pairwise(edges)]
    assert found.per_eV_nm == pytest.approx(expected, rel=1e-12)
    assert found.singular_at_eV.tolist() == [0.05, 0.08]
    coarse = density_of_states(spectrum, edges[[0, 2, 6]])
    widths = np.diff(edges)
    assert coarse.per_eV_nm[1] * 0.2499 == pytest.approx(float((found.per_eV_nm * widths)[2:].sum()), rel=1e-12)


def test_the_divergence_at_an_edge_is_not_smoothed() -> None:
    # the average over a bin of width w that starts at the edge is 2 sqrt(w) c / w: it grows as w^-1/2
    spectrum = ladder([0.05])
    averages = [density_of_states(spectrum, [0.05, 0.05 + w]).per_eV_nm[0] for w in (1e-4, 1e-6, 1e-8)]
    assert averages[1] / averages[0] == pytest.approx(10, rel=1e-8)
    assert averages[2] / averages[1] == pytest.approx(10, rel=1e-6)


def test_extrema_of_a_table_are_listed_as_edges() -> None:
    k, table, energy = BANDS["minimum off the centre"]
    spectrum = ladder([0.1], mass=0.05, k_per_nm=k, band_eV=table[None, :])
    assert density_of_states(spectrum, [0.0, 0.2]).singular_at_eV == pytest.approx([0.1, energy(0.0)], rel=1e-12)


def test_a_wide_thin_rectangle_has_the_staircase_of_a_sheet() -> None:
    mass, height = 0.067, 8.0
    rungs = HBAR2_OVER_2M0 * pi**2 / mass / height**2 * np.array([1, 4])
    # between the first and second rung and above the second, away from the rungs themselves
    edges = np.array([rungs[0] + 0.05, rungs[0] + 0.15, rungs[1] + 0.05, rungs[1] + 0.15])
    sheet = mass / (2 * pi * HBAR2_OVER_2M0)  # m / (pi hbar^2) a rung, both spins
    errors = []
    for width in (400.0, 1600.0):
        found = density_of_states(ladder(box_levels_eV(width, height, mass, edges[-1]), mass), edges).per_eV_nm / width
        errors.append(np.abs(found[[0, 2]] / (sheet * np.array([1, 2])) - 1))
    # the walls at the two ends take states away in proportion to 1/width, with ripples
    assert (errors[1] < 0.006).all()
    assert errors[0] / errors[1] == pytest.approx([4, 4], rel=0.25)


def test_a_large_square_has_the_root_of_bulk() -> None:
    mass = 0.067
    edges = np.array([0.10, 0.15, 0.20])
    # (1/2 pi^2) (2m/hbar^2)^(3/2) sqrt(E), both spins, averaged over the bins
    bulk = (mass / HBAR2_OVER_2M0) ** 1.5 / (2 * pi**2) * (2 / 3) * np.diff(edges**1.5) / np.diff(edges)
    errors = []
    for side in (150.0, 300.0):
        found = density_of_states(ladder(box_levels_eV(side, side, mass, 0.2), mass), edges).per_eV_nm / side**2
        errors.append(np.abs(found / bulk - 1))
    assert (errors[1] < 0.04).all()
    assert errors[0] / errors[1] == pytest.approx([2, 2], rel=0.1)


def test_bad_edges_are_refused() -> None:
    for edges in ([0.1], [0.2, 0.1], [[0.1, 0.2]], [0.1, np.nan]):
        with pytest.raises(InputError, match=r"^edges_eV: must be two ascending"):
            density_of_states(ladder([0.05]), edges)


# The spectrum itself


@pytest.mark.parametrize(
    ("field", "value"),
    [
        ("energy_eV", [0.08, 0.05]),
        ("energy_eV", [0.05, np.nan]),
        ("energy_eV", []),
        ("error_eV", [0.0]),
        ("error_eV", [0.0, -1e-6]),
        ("axial_mass", [0.067, 0.0]),
        ("axial_mass", [0.067, np.nan]),
        ("axial_mass", [0.067, np.inf]),
        ("degeneracy", [2, 0]),
        ("degeneracy", [2, 2.5]),
        ("level", [2, 1]),
        ("level", [2, 3]),
        ("listed", 0),
        ("listed", 3),
        ("k_per_nm", [0.1, 0.2, 0.3, 0.4]),
        ("k_per_nm", [0.0, 0.2, 0.3]),
        ("band_eV", np.zeros((2, 5))),
        ("tails", (parabolic_tail([0.07, 0.2], [0.0, 3.0], 0.067),)),
        ("direction_energy_eV", np.zeros((2, 3))),
    ],
)
def test_a_spectrum_that_does_not_fit_together_is_refused(field: str, value: Any) -> None:
    k = np.linspace(0.0, 0.3, 4)
    sound: dict[str, Any] = {
        "k_per_nm": k,
        "band_eV": np.array([[0.05], [0.08]]) + HBAR2_OVER_2M0 / 0.067 * k**2,
        "tails": (parabolic_tail([0.08, 0.2], [0.0, 3.0], 0.067),),
        "direction_energy_eV": np.zeros((2, 2)),
        "direction_names": ("x", "y"),
    }
    ladder([0.05, 0.08], **sound)
    if field == "axial_mass":
        sound["band_eV"] = None
    with pytest.raises(InputError) as caught:
        ladder(**{"energies_eV": [0.05, 0.08], **sound, field: value})
    assert "\n" not in str(caught.value)
