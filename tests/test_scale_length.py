"""How far the drain's field reaches: transcendental equations of round and plane sections, stable hyperbolic ratios."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import j0, j1, jn_zeros, y0, y1

from tests.synthetic import rectangle_mesh, round_mesh
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.space import Space
from wiresolve.physics.scale_length import drain_coupling, scale_length_nm

CORE_NM, RADIUS_NM = 8.0, 12.0


def solved(mesh: Mesh, permittivity: np.ndarray, held: np.ndarray) -> float:
    """Scale length of a mesh with a permittivity a region and flags of the held points."""
    space = Space(mesh)
    kappa = permittivity[mesh.region[space.cells]]
    stiffness, mass = space.matrix({("x", "x"): kappa, ("y", "y"): kappa}), space.matrix({("1", "1"): kappa})
    return scale_length_nm(stiffness, mass, ~held[space.nodes])


def round_equation(inverse: float, inner: float, outer: float) -> float:
    """Zero where J0(r/l) inside joins a solution that vanishes on the gate, with continuous kappa du/dr."""
    a, b = CORE_NM * inverse, RADIUS_NM * inverse
    value, slope = j0(a) * y0(b) - y0(a) * j0(b), -(j1(a) * y0(b) - y1(a) * j0(b))
    return float(-inner * j1(a) * value - outer * j0(a) * slope)


@pytest.mark.parametrize(("inner", "outer"), [(11.7, 3.9), (12.0, 20.0), (1.0, 1.0)])
def test_round_wrap_gate_against_bessel_functions(inner: float, outer: float) -> None:
    mesh = round_mesh(2.5)
    on_gate = np.abs(np.hypot(*mesh.points.T) - RADIUS_NM) < 1e-9
    # regions: 0 the shell, 1 the core; the lowest root lies below the zero of J0 at the core alone
    inverse = brentq(lambda x: round_equation(x, inner, outer), 0.3 / RADIUS_NM, 2.404 / CORE_NM, xtol=1e-15)
    assert solved(mesh, np.array([outer, inner]), on_gate) == pytest.approx(1 / inverse, rel=1e-8)
    if inner == outer:
        assert 1 / inverse == pytest.approx(RADIUS_NM / jn_zeros(0, 1)[0], rel=1e-12)


def test_two_plates_and_one() -> None:
    mesh = rectangle_mesh(9.0, 6.0, 2.0)
    top, bottom = (np.abs(mesh.points[:, 1] - y) < 1e-9 for y in (3.0, -3.0))
    # sin(pi y/t) between two plates, a quarter wave above one
    assert solved(mesh, np.array([7.0]), top | bottom) == pytest.approx(6 / np.pi, rel=1e-9)
    assert solved(mesh, np.array([7.0]), bottom) == pytest.approx(12 / np.pi, rel=1e-9)
    everywhere = top | bottom | (np.abs(np.abs(mesh.points[:, 0]) - 4.5) < 1e-9)
    expected = 1 / (np.pi * np.hypot(1 / 9, 1 / 6))
    assert solved(mesh, np.array([7.0]), everywhere) == pytest.approx(expected, rel=1e-8)


def test_without_a_gate_nothing_screens() -> None:
    mesh = rectangle_mesh(9.0, 6.0, 3.0)
    with pytest.raises(InputError, match="screens"):
        solved(mesh, np.array([7.0]), np.zeros(len(mesh.points), dtype=bool))


def test_drain_coupling_is_the_ratio_of_hyperbolic_sines() -> None:
    scale, length = 5.0, np.array([1.0, 12.0, 60.0])
    for where in (0.2, 0.5, 1.0):
        expected = np.sinh(where * length / scale) / np.sinh(length / scale)
        assert drain_coupling(scale, length, where) == pytest.approx(expected, rel=1e-13)
    assert drain_coupling(scale, length, 0.5) == pytest.approx(1 / (2 * np.cosh(length / 10)), rel=1e-13)
    # far too long or short for a plain ratio
    assert float(drain_coupling(1.0, 1e5, 0.5)) == 0
    assert float(drain_coupling(1.0, 1400.0, 0.5)) == pytest.approx(np.exp(-700.0), rel=1e-12)
    assert float(drain_coupling(1.0, 1e-12, 0.25)) == pytest.approx(0.25, rel=1e-10)
    assert drain_coupling(1.0, 3.0, 0.0) == 0


@pytest.mark.parametrize("given", [(0.0, 1.0, 0.5), (1.0, -1.0, 0.5), (1.0, 1.0, 1.2)])
def test_bad_lengths_are_refused(given: tuple[float, float, float]) -> None:
    with pytest.raises(InputError):
        drain_coupling(*given)
