"""The image self-energy of a carrier in a wire whose permittivity differs from that of its surroundings.

A charge at the distance rho R from the axis of an infinite cylinder (radius R, permittivity e_i, around it e_o) has the
self-energy e^2/(4 pi eps0 R) s(rho) with

    s = 1/(pi e_i) sum_m int_0^inf dx A_m(x) I_m(x rho)^2,  A_m = (e_o - e_i) K_m' K_m / (e_i I_m' K_m - e_o K_m' I_m)

(the reaction field of the cylinder's Green function: Y. M. Niquet and others, Phys. Rev. B 73, 165319 (2006);
A. F. Slachmuylders and others, Phys. Rev. B 74, 235321 (2006)). With v_m = x |K_m'| I_m - 1/2, which is small but for
the lowest m, and L = 2 (e_i - e_o)/(e_i + e_o), the Wronskian gives A_m = x |K_m'| K_m L/(1 - L v_m). The part L alone,
which holds the pole at the surface, sums to complete elliptic integrals by Graf's addition theorem and Parseval's
theorem; what is left converges fast.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from numpy.typing import NDArray

from wiresolve.units import E2_OVER_4PI_EPS0

Array = NDArray[np.float64]
_STEP = 0.16
"""Of ln x in the trapezoidal rule, which converges exponentially for these integrands."""
_NEAREST = (1e-14, 1e-3)
"""Where x begins: the order 0 falls off like x ln x there, what is left of the others like x^3."""
_STATE_ORDERS, _STATE_POINTS, _STATE_STEP = 40, 20, 0.32
"""Of the ground state's table, which is good to six digits."""


def surface_part(rho: Array) -> Array:
    """sum_m int_0^inf dx x |K_m'| K_m I_m(x rho)^2 = pi/8 (K/(1 + rho) + E/(1 - rho)), K and E of 4 rho/(1 + rho)^2."""
    from scipy.special import ellipe, ellipk

    modulus = 4 * rho / (1 + rho) ** 2
    return np.asarray(np.pi / 8 * (ellipk(modulus) / (1 + rho) + ellipe(modulus) / (1 - rho)))


def self_energy(rho: float, inside: float, outside: float) -> float:
    """s(rho) in units of e^2/(4 pi eps0 R), to ten digits.

    Parameters
    ----------
    rho : distance from the axis over the radius, 0 <= rho < 1.
    inside, outside : relative permittivities of the wire and of its surroundings.
    """
    jump = 2 * (inside - outside) / (inside + outside)
    # Terms fall like rho^(2 m).
    count = math.ceil(-14 / math.log(rho)) + 8 if rho > 0.05 else 8
    weight, v = _terms(np.array([rho]), count, 16 / (1 - rho), _STEP)
    rest = float(np.sum(weight[0] * jump * v / (1 - jump * v)))
    return jump / (math.pi * inside) * (float(surface_part(np.array(rho))) + rest)


def ground_state_shift(inside: float, outside: float, radius_nm: float) -> float:
    """Expectation in eV of the self-energy in the lowest state of a round hard wall, J_0(j rho), to six digits.

    Parameters
    ----------
    inside, outside : relative permittivities of the wire and of its surroundings.
    """
    return _mean_shift(inside, outside, radius_nm, 0)


def second_state_shift(inside: float, outside: float, radius_nm: float) -> float:
    """The same in the second level, J_1(j rho) times a sine or cosine of the angle, to five digits."""
    return _mean_shift(inside, outside, radius_nm, 1)


def _mean_shift(inside: float, outside: float, radius_nm: float, order: int) -> float:
    jump = 2 * (inside - outside) / (inside + outside)
    surfaces, weights, v = _lowest_states()
    mean = surfaces[order] + float(np.sum(weights[order] * jump * v / (1 - jump * v)))
    return E2_OVER_4PI_EPS0 / radius_nm * jump / (math.pi * inside) * mean


@cache
def _lowest_states() -> tuple[tuple[float, ...], Array, Array]:
    """Of both states the surface part's mean and the nodes' weights, (2, n), and v: none depends on permittivities."""
    from scipy.special import jn_zeros, jv

    nodes, weights = np.polynomial.legendre.leggauss(_STATE_POINTS)
    rho = (nodes + 1) / 2
    zeros = [jn_zeros(order, 1)[0] for order in (0, 1)]
    densities = np.array([weights * rho * (jv(k, z * rho) / jv(k + 1, z)) ** 2 for k, z in enumerate(zeros)])
    weight, v = _terms(rho, _STATE_ORDERS, 60.0 * _STATE_ORDERS, _STATE_STEP)
    return tuple(float(d @ surface_part(rho)) for d in densities), densities @ weight, v


def _terms(rho: Array, count: int, farthest: float, step: float) -> tuple[Array, Array]:
    """Of all orders and nodes in one row: the surface part's terms at each distance, (rho, n), and v, (n,)."""
    weights, vs = [], []
    for orders, nearest in ((np.arange(1), _NEAREST[0]), (np.arange(1, count), _NEAREST[1])):
        x = np.exp(np.arange(math.log(nearest), math.log(farthest), step))
        weight, v = _integrand(rho, orders, x)
        weights.append((weight * (x * step)).reshape(len(rho), -1))
        vs.append(v.ravel())
    return np.hstack(weights), np.concatenate(vs)


def _integrand(rho: Array, orders: NDArray[np.int64], x: Array) -> tuple[Array, Array]:
    """x |K_m'| K_m I_m(x rho)^2, both signs of m, (rho, m, x), and v_m(x), (m, x)."""
    from scipy.special import ive, kve

    m = orders[:, None]
    with np.errstate(over="ignore", invalid="ignore"):
        bessel = kve(np.arange(orders[0], orders[-1] + 2)[:, None], x)
        slope = x * bessel[1:] / bessel[:-1] - m  # x |K_m'| / K_m
        v = slope * bessel[:-1] * ive(m, x) - 0.5
        inner = bessel[:-1] * ive(m, x * rho[:, None, None]) * np.exp(-x * (1 - rho[:, None, None]))
        weight = slope * inner**2 * np.where(m == 0, 1.0, 2.0)
    # Where a function leaves the range of numbers (large m, small x) v is nothing.
    sound = np.isfinite(v) & np.isfinite(weight).all(axis=0)
    return np.where(sound, weight, 0.0), np.where(sound, v, 0.0)
