"""The image self-energy: its definition summed as it stands, limits, and the ground state by another quadrature."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ellipe, ellipk, ive, ivp, jn_zeros, jv, kve, kvp

from wiresolve.physics.image_charge import ground_state_shift, second_state_shift, self_energy, surface_part


def as_defined(rho: float, inside: float, outside: float, orders: int) -> float:
    """s = 1/(pi e_i) sum_m int dx A_m I_m(x rho)^2, by Gauss quadrature in panels (see the module's source)."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    total = 0.0
    ends = (1e-12, 1e-9, 1e-6, 1e-4, 1e-2, 0.1, 1.0, 5.0, 15.0, 60.0)
    for low, high in pairwise(ends):
        x, step = low + (high - low) * (nodes + 1) / 2, weights * (high - low) / 2
        for m in range(orders if low > 1e-5 else 1):
            # I_m' and K_m' by their recurrences, scaled like the functions.
            i, k = ive(m, x), kve(m, x)
            i_slope, k_slope = ive(m + 1, x) + m / x * i, -kve(m + 1, x) + m / x * k
            reaction = (outside - inside) * k_slope * k / (inside * i_slope * k - outside * k_slope * i)
            total += (1 if m == 0 else 2) * float(step @ (reaction * ive(m, x * rho) ** 2 * np.exp(-2 * x * (1 - rho))))
    # Below 1e-4 the integrands of the higher orders have their constant limits.
    jump = (inside - outside) / (inside + outside)
    total += 2 * sum(1e-4 * jump * rho ** (2 * m) / (2 * m) for m in range(1, orders))
    return total / (np.pi * inside)


@pytest.mark.parametrize(("inside", "outside"), [(12.9, 1.0), (3.9, 11.7), (2.0, 80.0)])
def test_the_definition_is_met(inside: float, outside: float) -> None:
    assert self_energy(0.4, inside, outside) == pytest.approx(as_defined(0.4, inside, outside, 14), rel=1e-8)


def test_derivatives_of_the_definition_are_those_of_the_library() -> None:
    x = 1.7
    assert ive(4, x) + 3 / x * ive(3, x) == pytest.approx(ivp(3, x) * np.exp(-x))
    assert -kve(4, x) + 3 / x * kve(3, x) == pytest.approx(kvp(3, x) * np.exp(x))


def test_surface_part_is_the_sum_over_angles() -> None:
    """pi/16 int dtheta (1 - rho cos)/(1 + rho^2 - 2 rho cos)^(3/2), and its pole 1/(1 - rho) at the surface."""
    for rho in (0.0, 0.3, 0.8):
        whole = quad(lambda t, r=rho: (1 - r * np.cos(t)) / (1 + r * r - 2 * r * np.cos(t)) ** 1.5, 0, 2 * np.pi)[0]
        assert surface_part(np.array(rho)) == pytest.approx(np.pi / 16 * whole, rel=1e-9)
    assert float(surface_part(np.array(1 - 1e-6))) * 1e-6 == pytest.approx(np.pi / 8, rel=1e-4)
    assert (ellipk(0.0), ellipe(0.0)) == pytest.approx((np.pi / 2, np.pi / 2))


def test_at_the_surface_it_is_that_of_a_plane() -> None:
    """A charge at the distance d from a plane: e^2/(16 pi eps0 e_i d) (e_i - e_o)/(e_i + e_o)."""
    plane = (12.0 - 4.0) / (12.0 + 4.0) / (4 * 12.0 * 0.002)
    assert self_energy(0.998, 12.0, 4.0) == pytest.approx(plane, rel=2e-2)


def test_no_jump_no_energy() -> None:
    assert self_energy(0.5, 11.7, 11.7) == 0.0
    assert ground_state_shift(11.7, 11.7, 5.0) == 0.0
    assert ground_state_shift(11.7, 4.0, 5.0) > 0 > ground_state_shift(11.7, 20.0, 5.0)
    assert ground_state_shift(11.7, 4.0, 10.0) == pytest.approx(ground_state_shift(11.7, 4.0, 5.0) / 2)


@pytest.mark.parametrize(("inside", "outside"), [(12.9, 1.0), (11.7, 25.0)])
def test_means_of_the_lowest_states_are_those_over_the_radius(inside: float, outside: float) -> None:
    nodes, weights = np.polynomial.legendre.leggauss(16)
    for order, found in enumerate((ground_state_shift, second_state_shift)):
        zero, mean = jn_zeros(order, 1)[0], 0.0
        for low, high in ((0.0, 0.9), (0.9, 0.995)):
            for rho, weight in zip(low + (high - low) * (nodes + 1) / 2, weights * (high - low) / 2, strict=True):
                density = 2 * rho * (jv(order, zero * rho) / jv(order + 1, zero)) ** 2
                mean += weight * density * self_energy(float(rho), inside, outside)
        # What is left is psi ~ (1 - rho) times its slope at the wall, and the plane's energy.
        mean += (inside - outside) / (inside + outside) / (4 * inside) * zero**2 * 0.005**2
        assert found(inside, outside, 1.4399645469) == pytest.approx(mean, rel=2e-5)
