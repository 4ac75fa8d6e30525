"""Form factors against closed forms and separate quadratures, and their bars against true errors."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import iv, k0, kv

from tests.plain_modes import HEIGHT, WIDTH, by_pairs, disk, quantum_numbers, radial, rectangle
from tests.truth._wires import LAPLACE, checked, wire
from wiresolve.describe.section import Patch, Section
from wiresolve.describe.shapes import Rectangle
from wiresolve.errors import InputError
from wiresolve.fem.edge_kernel import kernel_products
from wiresolve.mode_elements import form_factors, plane_form_factors
from wiresolve.solve import solve

Array = NDArray[np.float64]
NODES, WEIGHTS = np.polynomial.legendre.leggauss(40)
UNIT, UNIT_WEIGHTS = (NODES + 1) / 2, WEIGHTS / 2
"""Gauss's rule on (0, 1)."""
CROWDED, CROWDED_WEIGHTS = UNIT**3, 3 * UNIT**2 * UNIT_WEIGHTS
"""The same with points that crowd at 0, where K0 has a logarithm."""


def box_wave(i: int, k: int, size: float, q: float) -> complex:
    """<i|exp(i q x)|k> of a box around the origin, from the integral of two cosines."""
    total = 0j
    for number, sign in ((i - k, 1.0), (i + k, -1.0)):
        a = number * math.pi / size
        # int_0^L cos(a t) exp(i q t) dt / L
        for way in (1, -1):
            p = q + way * a
            total += sign * (1.0 if p == 0 else (np.exp(1j * p * size) - 1) / (1j * p * size)) / 2
    return complex(total * np.exp(-1j * q * size / 2))


def test_plane_waves_in_a_rectangle() -> None:
    result, _ = rectangle(3e-7)
    waves = [(0.0, 0.0), (0.7, 0.0), (1.3, -2.1), (20.0, 35.0)]
    found = plane_form_factors(result, waves)
    for number, (qx, qy) in enumerate(waves):
        truth = by_pairs(lambda i, k, q=qx: box_wave(i, k, WIDTH, q), lambda i, k, q=qy: box_wave(i, k, HEIGHT, q))
        error = np.abs(np.abs(found.values[number]) - np.abs(truth))
        assert error.max() < 1e-8
        assert (error <= found.errors[number]).all()
    products = found.values[2][0, 1] * found.values[2][1, 4] * found.values[2][4, 0]
    truth = by_pairs(lambda i, k: box_wave(i, k, WIDTH, 1.3), lambda i, k: box_wave(i, k, HEIGHT, -2.1))
    assert products == pytest.approx(truth[0, 1] * truth[1, 4] * truth[4, 0], rel=1e-6, abs=1e-12)


def round_coulomb(first: Callable[[Array], Array], second: Callable[[Array], Array], order: int, q: float) -> float:
    """int int r r' f(r) g(r') I_m(q r<) K_m(q r>) dr dr' over the unit disk, by nested Gauss rules."""
    inner = []
    for r in CROWDED:
        part = r * UNIT_WEIGHTS * (UNIT * r) * iv(order, q * UNIT * r)
        inner.append((np.sum(part * second(UNIT * r)), np.sum(part * first(UNIT * r))))
    below, other = np.array(inner).T
    outer = CROWDED_WEIGHTS * CROWDED * kv(order, q * CROWDED)
    return float(np.sum(outer * (first(CROWDED) * below + second(CROWDED) * other)))


@pytest.mark.parametrize("q", [0.03, 0.8, 12.0])
def test_coulomb_form_factors_of_a_disk(q: float) -> None:
    """Graf's addition theorem (DLMF 10.44.3): K0 of a distance is the sum of I_m(q r<) K_m(q r>) cos m angle."""
    result, _ = disk(3e-7)
    found = form_factors(result, q, [0, 1, 2])
    zero, one = radial(0, 1)[1], radial(1, 1)[1]
    direct = (2 * math.pi) ** 2 * round_coulomb(lambda r: zero(r) ** 2, lambda r: zero(r) ** 2, 0, q)
    exchange = 4 * math.pi**2 * round_coulomb(lambda r: zero(r) * one(r), lambda r: zero(r) * one(r), 1, q)
    mixed = (2 * math.pi) ** 2 * round_coulomb(lambda r: zero(r) ** 2, lambda r: one(r) ** 2, 0, q)
    values, bars = found.values[0], found.errors[0]
    sums = {
        "direct": (values[0, 0, 0, 0], bars[0, 0, 0, 0], direct),
        "exchange": (sum(values[0, j, j, 0] for j in (1, 2)), 2 * bars[0, 1, 1, 0], exchange),
        "mixed": (sum(values[0, 0, j, j] for j in (1, 2)), 2 * bars[0, 0, 1, 1], mixed),
    }
    for name, (value, bar, truth) in sums.items():
        assert value == pytest.approx(truth, rel=1e-8), name
        assert abs(value - truth) <= bar + 1e-12 * abs(truth), name
    assert values == pytest.approx(values.transpose(2, 3, 0, 1), abs=1e-12)


def box_correlation(pairs: tuple[int, int, int, int], size: float, apart: Array) -> Array:
    """int f_i f_j (x) f_k f_l (x + d) dx of a box, both signs of d added, for distances d >= 0."""

    def density(a: int, b: int, x: Array) -> Array:
        return 2 / size * np.sin(a * math.pi * x / size) * np.sin(b * math.pi * x / size)

    i, j, k, l_ = pairs
    x = UNIT * (size - apart[..., None])
    ahead = density(i, j, x) * density(k, l_, x + apart[..., None])
    behind = density(i, j, x + apart[..., None]) * density(k, l_, x)
    return np.asarray((ahead + behind) @ UNIT_WEIGHTS * (size - apart))


def box_coulomb(states: tuple[tuple[int, int], ...], q: float) -> float:
    """F_ijkl of the rectangle: correlations along both axes, then triangles whose vertex is at the kernel's pole."""
    (ix, iy), (jx, jy), (kx, ky), (lx, ly) = states
    radius, weight = UNIT**4, UNIT_WEIGHTS * 4 * UNIT**3
    total = 0.0
    for wide in (True, False):
        slope = UNIT[None, :] * np.ones((len(radius), 1))
        along = radius[:, None] * np.ones_like(slope)
        x = WIDTH * (along if wide else along * slope)
        y = HEIGHT * (along * slope if wide else along)
        kernel = k0(q * np.hypot(x, y))
        both = box_correlation((ix, jx, kx, lx), WIDTH, x) * box_correlation((iy, jy, ky, ly), HEIGHT, y)
        total += WIDTH * HEIGHT * float(np.sum((weight * radius)[:, None] * UNIT_WEIGHTS * kernel * both))
    return total


def test_coulomb_form_factors_of_a_rectangle() -> None:
    result, _ = rectangle(3e-7)
    picked = [0, 1, 3]
    found = form_factors(result, [0.05, 2.0], picked)
    states = [quantum_numbers()[i] for i in picked]
    for n, q in enumerate((0.05, 2.0)):
        for i, j, k, l_ in ((0, 0, 0, 0), (0, 1, 1, 0), (0, 0, 1, 1), (0, 2, 2, 0), (1, 2, 2, 1)):
            truth = box_coulomb((states[i], states[j], states[k], states[l_]), q)
            error = abs(found.values[n, i, j, k, l_] - truth)
            assert error < 1e-8 * abs(found.values[n, 0, 0, 0, 0])
            assert error <= found.errors[n, i, j, k, l_] + 1e-11


def test_bars_of_coulomb_form_factors_hold() -> None:
    for accuracy_eV in (1e-2, 1e-4):
        result, _ = rectangle(accuracy_eV)
        found = form_factors(result, 1.0, [0, 1])
        states = quantum_numbers()[:2]
        for i, j, k, l_ in ((0, 0, 0, 0), (0, 1, 1, 0), (0, 0, 1, 1), (1, 1, 1, 1)):
            truth = box_coulomb((states[i], states[j], states[k], states[l_]), 1.0)
            error = abs(found.values[0, i, j, k, l_] - truth)
            assert error <= found.errors[0, i, j, k, l_] < 2e-3 * accuracy_eV


def test_coulomb_form_factor_of_separate_pieces() -> None:
    """Two rectangles with a slit between them: a product of four Gauss rules, far from the kernel's pole."""
    slit = Patch(shape=Rectangle(width_nm=0.6, height_nm=3.0), material="void", center_nm=(0.1, 0.0))
    section = Section(shape=Rectangle(width_nm=4.0, height_nm=1.5), material=LAPLACE.name, patches=(slit,))
    result = checked(solve(wire(section, [LAPLACE], 2, 1e-7)))
    pieces = ((-2.0, -0.2), (0.4, 2.0))
    q, few = 0.7, np.polynomial.legendre.leggauss(24)
    states = sorted(
        (math.pi**2 * (n**2 / (b - a) ** 2 + m**2 / 1.5**2), n, m, (a, b))
        for a, b in pieces
        for n in (1, 2, 3)
        for m in (1, 2)
    )[:2]
    assert states[0][3] != states[1][3]
    found = form_factors(result, q)
    at, weight = (few[0] + 1) / 2, few[1] / 2
    grids = []
    for _, n, m, (a, b) in states:
        x, y = np.meshgrid(a + (b - a) * at, 1.5 * (at - 0.5), indexing="ij")
        rho = np.outer(2 * np.sin(n * math.pi * at) ** 2 * weight, 2 * np.sin(m * math.pi * at) ** 2 * weight)
        grids.append((x.ravel(), y.ravel(), rho.ravel()))
    (x, y, rho), (u, v, sigma) = grids
    truth = float(rho @ k0(q * np.hypot(x[:, None] - u, y[:, None] - v)) @ sigma)
    assert found.values[0, 0, 0, 1, 1] == pytest.approx(truth, rel=1e-8)
    assert abs(found.values[0, 0, 1, 1, 0]) < 1e-12


@pytest.mark.parametrize("q", [0.0, math.nan, math.inf, [[1.0]]])
def test_wave_numbers_that_are_none(q: float) -> None:
    result, _ = disk(1e-4)
    with pytest.raises(InputError, match="q_per_nm"):
        form_factors(result, q)


@pytest.mark.parametrize("indices", [[6], [-1], [], [1, 1]])
def test_modes_that_are_not_listed(indices: list[int]) -> None:
    result, _ = disk(1e-4)
    with pytest.raises(InputError, match="indices"):
        form_factors(result, 0.1, indices)


def test_wave_vectors_that_are_none() -> None:
    result, _ = disk(1e-4)
    with pytest.raises(InputError, match="pairs"):
        plane_form_factors(result, [0.1, 0.2, 0.3])


def ring(edges: int, degree: int, radius: float) -> tuple[Array, Array]:
    """Angles (e, nodes) and points (e, nodes, 2) of edges around a circle."""
    angle = 2 * math.pi * (np.arange(edges)[:, None] + np.arange(degree + 1) / degree) / edges
    return angle, radius * np.stack([np.cos(angle), np.sin(angle)], axis=2)


def closed(edges: int) -> NDArray[np.int64]:
    return np.column_stack([np.arange(edges), (np.arange(edges) + 1) % edges])


def test_kernel_along_a_circle_converges_to_its_eigenvalues() -> None:
    """int K0(q |r - r'|) cos m angle' ds' = 2 pi R I_m(q R) K_m(q R) cos m angle (Graf's theorem at equal radii)."""
    radius, q, errors = 1.3, 0.7, []
    truth = [
        2 * math.pi * radius**2 * (1 if m else 2) * math.pi * iv(m, q * radius) * kv(m, q * radius) for m in (0, 1)
    ]
    for edges in (12, 24, 48):
        angle, points = ring(edges, 6, radius)
        found = kernel_products(points, closed(edges), np.stack([np.ones_like(angle), np.cos(angle)], axis=2), q)
        errors.append(np.abs(np.diag(found) / truth - 1).max())
        assert abs(found[0, 1]) < 1e-12
    assert errors[0] < 1e-9
    assert errors[2] < 1e-12


@pytest.mark.parametrize("breaks", [np.linspace(0, 1, 9), np.array([0.0, 0.02, 0.05, 0.1, 0.2, 0.4, 0.7, 0.9, 1.0])])
def test_kernel_along_a_square_does_not_depend_on_its_edges(breaks: Array) -> None:
    """A constant density on a square of side 1: sides with themselves, with opposite and with neighbouring ones."""
    q, corners = 0.9, np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]])
    parts = breaks[:-1, None] + np.diff(breaks)[:, None] * np.arange(5) / 4
    sides = [corners[s] + parts[..., None] * (corners[(s + 1) % 4] - corners[s]) for s in range(4)]
    points = np.concatenate(sides)
    found = kernel_products(points, closed(len(points)), np.ones((len(points), 5, 1)), q)[0, 0]
    d, weight = UNIT**6, UNIT_WEIGHTS * 6 * UNIT**5
    same = 2 * np.sum(weight * (1 - d) * k0(q * d))
    opposite = 2 * np.sum(UNIT_WEIGHTS * (1 - UNIT) * k0(q * np.hypot(UNIT, 1)))
    # Neighbours: the square of both distances from the corner, as two triangles.
    neighbours = 2 * np.sum((weight * d)[:, None] * UNIT_WEIGHTS * k0(q * d[:, None] * np.hypot(1, UNIT)))
    assert found == pytest.approx(4 * same + 4 * opposite + 8 * neighbours, rel=1e-12)


def test_phases_of_modes_go_through_form_factors() -> None:
    result, _ = disk(1e-4)
    phase = np.array([0.3, -1.1, 2.0, 0.7, 1.9, -0.4])
    picked = [0, 1, 2]
    turned = replace(result, modes=result.modes * np.exp(1j * phase))
    plain, other = (form_factors(each, 0.6, picked).values[0] for each in (result, turned))
    pair = np.exp(1j * (phase[:3] - phase[:3, None]))
    assert other == pytest.approx(plain * pair[:, :, None, None] * pair, abs=1e-12)
