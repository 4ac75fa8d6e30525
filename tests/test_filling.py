"""How many carriers a subband holds, and how many dopants are charged, against quadrature and closed forms."""

from __future__ import annotations

from math import pi

import mpmath
import numpy as np
import pytest

from wiresolve.physics.dopants import Dopants
from wiresolve.physics.fermi import fermi_integral
from wiresolve.physics.filling import Filling
from wiresolve.units import HBAR2_OVER_2M0, KB


def by_quadrature(temperature_K: float, alpha: float, depth_eV: float) -> float:
    """1/pi int dk f(E(k)) over k > 0 twice, with E from hbar^2 k^2 / 2 m0 = E (1 + alpha E), to 20 digits."""
    mpmath.mp.dps = 20
    thermal, scale = mpmath.mpf(KB * temperature_K), mpmath.mpf(HBAR2_OVER_2M0)

    def energy(k: mpmath.mpf) -> mpmath.mpf:
        square = scale * k * k
        return 2 * square / (1 + mpmath.sqrt(1 + 4 * alpha * square))

    def occupied(k: mpmath.mpf) -> mpmath.mpf:
        return 1 / (1 + mpmath.exp((energy(k) - depth_eV) / thermal))

    reached = [d for d in (depth_eV + n * float(thermal) for n in (-20, -8, -3, 0, 3, 8, 20, 60)) if d > 0]
    breaks = [mpmath.mpf(0), *(mpmath.sqrt(d * (1 + alpha * d) / scale) for d in reached)]
    return float(mpmath.quad(occupied, breaks) / mpmath.pi)


@pytest.mark.parametrize("temperature", [1.0, 77.0, 300.0])
@pytest.mark.parametrize("alpha", [0.0, 0.6, 4.1])
@pytest.mark.parametrize("depth_kT", [-12.0, -1.5, 0.0, 2.0, 40.0])
def test_density_is_the_integral_over_wave_numbers(temperature: float, alpha: float, depth_kT: float) -> None:
    depth = depth_kT * KB * temperature
    found = float(Filling(temperature, alpha).density(np.array(depth)))
    # a hundredth of what a balance of charge may lack, 1e-8
    assert found == pytest.approx(by_quadrature(temperature, alpha, depth), rel=1e-10)


def test_a_deep_subband_of_a_light_grown_mass() -> None:
    """Thousands of kT deep: the bulk of the filling is the T = 0 one, with Sommerfeld's correction on top."""
    depth, kelvin, alpha = 0.9, 4.2, 4.1
    inside = np.sqrt(depth * (1 + alpha * depth) / HBAR2_OVER_2M0) / pi
    g, g1, g2 = depth * (1 + alpha * depth), 1 + 2 * alpha * depth, 2 * alpha
    second = (g2 / (2 * np.sqrt(g)) - g1**2 / (4 * g**1.5)) / np.sqrt(HBAR2_OVER_2M0) / pi
    wanted = inside + pi**2 / 6 * (KB * kelvin) ** 2 * second
    assert float(Filling(kelvin, alpha).density(np.array(depth))) == pytest.approx(wanted, rel=1e-12)


@pytest.mark.parametrize("alpha", [0.0, 0.6, 4.1])
@pytest.mark.parametrize("temperature", [0.0, 4.2, 300.0])
def test_slope_is_the_derivative(alpha: float, temperature: float) -> None:
    filling = Filling(temperature, alpha)
    depth = np.array([0.003, 0.02, 0.15]) if temperature == 0 else np.array([-8.0, -1.0, 0.5, 6.0]) * KB * temperature
    step = 1e-3 * (depth if temperature == 0 else KB * temperature)
    difference = (
        8 * (filling.density(depth + step) - filling.density(depth - step))
        - (filling.density(depth + 2 * step) - filling.density(depth - 2 * step))
    ) / (12 * step)
    assert filling.slope(depth) == pytest.approx(difference, rel=1e-9)


@pytest.mark.parametrize("alpha", [0.0, 0.6])
def test_no_temperature_fills_up_to_the_fermi_level(alpha: float) -> None:
    depth = np.array([-0.3, -1e-12, 0.0, 0.01, 0.2])
    density, slope = Filling(0.0, alpha).both(depth)
    wave_number = np.sqrt(depth[3:] * (1 + alpha * depth[3:]) / HBAR2_OVER_2M0)
    assert density.tolist()[:3] == [0, 0, 0]
    assert density[3:] == pytest.approx(wave_number / pi, rel=1e-14)
    assert slope[:2].tolist() == [0, 0]
    assert np.isposinf(slope[2])
    assert slope[3:] == pytest.approx((1 + 2 * alpha * depth[3:]) / (2 * pi * HBAR2_OVER_2M0 * wave_number), rel=1e-14)


@pytest.mark.parametrize("alpha", [0.0, 0.6])
def test_cold_approaches_no_temperature_with_its_square(alpha: float) -> None:
    depth = np.array([0.02, 0.1])
    still = Filling(0.0, alpha).density(depth)
    off = [np.abs(Filling(kelvin, alpha).density(depth) - still) for kelvin in (8.0, 4.0)]
    assert off[0] / off[1] == pytest.approx([4, 4], rel=2e-2)


def test_growth_of_the_mass_vanishes_with_alpha() -> None:
    depth = np.array([-0.05, 0.0, 0.08])
    parabolic = Filling(77.0).both(depth)
    for almost, exact in zip(Filling(77.0, 1e-13).both(depth), parabolic, strict=True):
        assert almost == pytest.approx(exact, rel=1e-11)
    thermal = KB * 77.0
    unit = np.sqrt(thermal / (4 * pi * HBAR2_OVER_2M0))
    assert parabolic[0] == pytest.approx(unit * fermi_integral(-0.5, depth / thermal), rel=1e-13)


@pytest.mark.parametrize("alpha", [0.0, 2.0])
@pytest.mark.parametrize("temperature", [1.0, 300.0])
def test_table_stands_in_for_the_filling(alpha: float, temperature: float) -> None:
    """Hermite's error is h^4/384 of the fourth derivative: for exp(d/kT), h being kT/8, 6.4e-7."""
    filling, thermal = Filling(temperature, alpha), KB * temperature
    depth = np.linspace(-15, 25, 4001) * thermal
    density, slope = filling.table(float(depth[0]), float(depth[-1]))(depth)
    exact, steep = filling.both(depth)
    assert np.abs(density / exact - 1).max() < 1e-6
    assert np.abs(slope / steep - 1).max() < 1e-4


def test_tables_of_other_ranges_agree() -> None:
    """What Newton's method sees must not depend on how far the potential has moved so far."""
    filling, depth = Filling(77.0), np.linspace(-0.03, 0.02, 101)
    one, other = filling.table(-0.03, 0.02)(depth), filling.table(-0.0517, 0.0931)(depth)
    assert np.abs(one[0] / other[0] - 1).max() < 1e-12
    assert np.abs(one[1] / other[1] - 1).max() < 1e-12


def dopants(temperature_K: float) -> Dopants:
    """A cell with donors, one with acceptors and one with neither; levels at -0.05 eV and -1.3 eV."""
    return Dopants(
        np.array([1e-3, 0.0, 0.0]),
        np.array([-0.05, 0.0, 0.0]),
        np.array([0.0, 2e-3, 0.0]),
        np.array([0.0, -1.3, 0.0]),
        temperature_K,
    )


def test_part_of_the_dopants_is_charged_by_the_fermi_level() -> None:
    """N+ = N / (1 + 2 exp((E_F - E_D)/kT)), N- = N / (1 + 4 exp((E_A - E_F)/kT)), levels lowered by the potential."""
    kelvin, potential = 300.0, np.array([[-0.2, -0.05, 0.0, 0.1], [-1.5, -1.3, -1.25, 0.0], [0.1, 0.2, 0.3, 0.4]])
    thermal = KB * kelvin
    density, slope = dopants(kelvin).charge(potential)
    donors = 1e-3 / (1 + 2 * np.exp((0 - (-0.05 - potential[0])) / thermal))
    acceptors = -2e-3 / (1 + 4 * np.exp((-1.3 - potential[1]) / thermal))
    assert density[0] == pytest.approx(donors, rel=1e-12)
    assert density[1] == pytest.approx(acceptors, rel=1e-12)
    assert density[2].tolist() == slope[2].tolist() == [0, 0, 0, 0]
    step = 1e-5
    higher, lower = (dopants(kelvin).charge(potential + sign * step)[0] for sign in (1, -1))
    assert slope == pytest.approx((higher - lower) / (2 * step), rel=1e-6, abs=1e-16)


def test_a_donor_at_the_fermi_level_is_charged_in_one_of_three() -> None:
    """Two states of the neutral one against one of the charged one; of an acceptor one in five."""
    density, _ = dopants(77.0).charge(np.array([[-0.05], [-1.3], [0.0]]))
    assert density[0, 0] == pytest.approx(1e-3 / 3, rel=1e-12)
    assert density[1, 0] == pytest.approx(-2e-3 / 5, rel=1e-12)


def test_cold_dopants_are_charged_or_not() -> None:
    """5 meV from their level all or none are charged to 1e-24; colder than 1 K they do not change."""
    potential = np.array([[-0.2, -0.055, -0.045, 0.3], [-1.4, -1.305, -1.295, 0.0], [0.0, 0.0, 0.0, 0.0]])
    density, slope = dopants(0.0).charge(potential)
    assert density[0] == pytest.approx([1e-3, 1e-3, 0, 0], abs=1e-20)
    assert density[1] == pytest.approx([0, 0, -2e-3, -2e-3], abs=1e-20)
    assert np.abs(slope).max() < 1e-20
    assert (dopants(1.0).charge(potential)[0] == density).all()
