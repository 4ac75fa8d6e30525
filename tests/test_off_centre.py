"""Bands that are lowest off k = 0, where axis-plane terms of the inverse mass jump: against a method of one's own.

The box in two halves of opposite shear along the cut keeps its parity under (x, y) -> (-x, -y) at every k: products of
polynomials, two pieces along x, give its bands parity by parity, in which they do not cross.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from numpy.polynomial import legendre
from scipy.linalg import eigh
from scipy.optimize import minimize_scalar, newton

from wiresolve.describe.material import Material
from wiresolve.describe.potential import Potential
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Patch, Section
from wiresolve.describe.shapes import Polygon, Rectangle
from wiresolve.describe.valley import Valley
from wiresolve.fem import eigen
from wiresolve.physics.listing import Listing, listing
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
from wiresolve.solve import solve

HBAR2_OVER_2M0 = 0.0380998211096858
WIDTH, HEIGHT, INVERSE, SHEAR = 12.0, 11.0, 5.0, 4.4


def tensor(shear: tuple[float, float], inverse: float = INVERSE) -> tuple[tuple[float, ...], ...]:
    return (inverse, 0.0, shear[0]), (0.0, inverse, shear[1]), (*shear, inverse)


def halves(
    shear: tuple[float, float], second_eV: float | None = None, alpha: float = 0.0, height: float = HEIGHT
) -> tuple[Section, tuple[Material, ...]]:
    """A box whose right half has the opposite shear, and perhaps a second kind of valleys without any."""
    materials = []
    for name, sign in (("left", 1.0), ("right", -1.0)):
        own = tensor((sign * shear[0], sign * shear[1]))
        valleys = [Valley("sheared", 0.0, inverse_mass=own, nonparabolicity_per_eV=alpha)]
        if second_eV is not None:
            valleys.append(Valley("plain", second_eV, inverse_mass=tensor((0.0, 0.0))))
        materials.append(Material.given(name, valleys=tuple(valleys), conduction_edge_eV=0.0))
    patch = Patch(Rectangle(width_nm=WIDTH / 2, height_nm=height), "right", center_nm=(WIDTH / 4, 0.0))
    return Section(Rectangle(width_nm=WIDTH, height_nm=height), "left", patches=(patch,)), tuple(materials)


def problem(
    section: Section,
    materials: tuple[Material, ...],
    subbands: int,
    accuracy_eV: float,
    potential: Potential | None = None,
    model: str = "nonparabolic",
) -> Problem:
    carriers = Carriers(temperature_K=(20.0,), model=model)
    return Problem("off centre", section, carriers, Accuracy(subbands, accuracy_eV), materials, None, potential)


def found_of(given: Problem) -> tuple[Certified, Listing]:
    wire = Wire(given)
    certified = certify(wire.draw, wire.channels, given.accuracy.subbands, given.accuracy.energy_eV)
    return certified, listing(wire, certified)


class Halves:
    """T(E, k) of the box in two halves of one parity, by polynomials: Gauss points, functions and slopes there."""

    def __init__(self, parity: int, height: float = HEIGHT, alpha: float = 0.0, harmonic_eV: float = 0.0) -> None:
        degree, (at, weight) = 13, legendre.leggauss(18)
        bubbles = [legendre.legint(np.eye(degree)[n], lbnd=-1) for n in range(1, degree)]
        right, y = (at + 1) * WIDTH / 4, at * height / 2  # the right half; the left one follows by parity
        value = np.array([legendre.legval(at, b) for b in bubbles])
        slope = np.array([legendre.legval(at, legendre.legder(b)) for b in bubbles])
        hat = np.vstack([(1 - at) / 2, value]), np.vstack([-np.ones_like(at) / 2, slope])
        pieces = []
        for across in (1, -1):  # even and odd functions of x; only even ones have a value at the cut
            own, own_slope = hat if across == 1 else (value, slope)
            odd = np.array([n % 2 for n in range(1, degree)])  # the n-th bubble has the parity of n + 1
            rows = np.flatnonzero((odd == 1) == (across * parity == 1))
            pieces.append(
                (
                    products(own, value[rows]),
                    products(own_slope, value[rows]) * 4 / WIDTH,
                    products(own, slope[rows]) * 2 / height,
                    np.full(len(own) * len(rows), across),
                )
            )
        self.value, self.by_x, self.by_y = (np.vstack([p[i] for p in pieces]) for i in range(3))
        across = np.concatenate([p[3] for p in pieces])
        self.across, self.same = across, across[:, None] == across
        self.weight = 2 * np.outer(weight * WIDTH / 4, weight * height / 2).ravel()  # both halves
        stiffness = harmonic_eV**2 / (4 * HBAR2_OVER_2M0 * INVERSE)
        self.potential = stiffness * (right[:, None] ** 2 + y**2).ravel()
        self.alpha = alpha
        # Orthonormal functions from here on.
        turn = np.linalg.inv(np.linalg.cholesky(self._form(self.weight, self.value, self.value) * self.same))
        self.value, self.by_x, self.by_y = turn @ self.value, turn @ self.by_x, turn @ self.by_y

    @staticmethod
    def _form(weight: np.ndarray, one: np.ndarray, two: np.ndarray) -> np.ndarray:
        return np.asarray((one * weight) @ two.T)

    def matrix(self, energy: float, k: float) -> np.ndarray:
        scale = HBAR2_OVER_2M0 * self.weight / (1 + self.alpha * (energy - self.potential))
        plain = INVERSE * (self._form(scale, self.by_x, self.by_x) + self._form(scale, self.by_y, self.by_y))
        plain = plain + INVERSE * k**2 * self._form(scale, self.value, self.value)
        plain = (plain + self._form(self.weight * self.potential, self.value, self.value)) * self.same
        # The shear is odd in x: between even and odd functions its integral over the halves adds up. Odd functions
        # count i times, so that all is real.
        mixed = self._form(scale, self.value, self.by_y) * ~self.same
        return np.asarray(plain + k * SHEAR * self.across[:, None] * (mixed.T - mixed))

    def level(self, k: float, n: int) -> float:
        """The n-th energy, from 0 on."""

        def above(energy: float) -> float:
            """How far the n-th eigenvalue of T(E, k) lies above E."""
            value = eigh(self.matrix(energy, abs(k)), eigvals_only=True, subset_by_index=(n, n))
            return float(value[0]) - energy

        return newton(above, 0.1, x1=0.1 + above(0.1), tol=1e-14) if self.alpha else above(0.0)

    def levels(self, k: float, count: int) -> np.ndarray:
        return np.array([self.level(k, n) for n in range(count)])


def products(one: np.ndarray, two: np.ndarray) -> np.ndarray:
    """All products of functions of x at some places and of functions of y at others."""
    return np.einsum("ip,jq->ijpq", one, two).reshape(len(one) * len(two), -1)


@cache
def minima_of(height: float, alpha: float, harmonic_eV: float, count: int) -> tuple[tuple[float, float, float], ...]:
    """Lowest energy, its k, and half of d2E/dk2 there (NaN where a band starts linearly) of each band, by energy."""
    rows = []
    k = np.linspace(0, 0.7, 8 if alpha else 15)
    for parity in (1, -1):
        box = Halves(parity, height, alpha, harmonic_eV)
        table = np.array([box.levels(float(q), count) for q in k])
        for n in range(count):
            j, at = int(np.argmin(table[:, n])), 0.0
            if j or box.level(k[1] / 4, n) < table[0, n] - 1e-9:
                span = (k[max(j - 1, 0)], k[j + 1])
                at = float(minimize_scalar(box.level, args=(n,), bounds=span, method="bounded").x)
            # Steps at which what five points leave out and rounding are both below 1e-6.
            h = 2e-3
            here = box.level(at, n)
            one, two = (box.level(at + s * h, n) + box.level(at - s * h, n) - 2 * here for s in (1, 2))
            linear = at == 0 and abs(box.level(h, n) - here) > 1e-2 * h
            rows.append((here, at, np.nan if linear else (16 * one - two) / (24 * h**2)))
    return tuple(sorted(rows))


def box_levels(count: int, height: float = HEIGHT) -> np.ndarray:
    """E = hbar^2 pi^2 (i^2/W^2 + j^2/H^2) / 2m of a box with hard walls."""
    each = [(i / WIDTH) ** 2 + (j / height) ** 2 for i in range(1, 8) for j in range(1, 8)]
    return np.asarray(HBAR2_OVER_2M0 * INVERSE * np.pi**2 * np.sort(each)[:count])


def check(found: Listing, expected: list[tuple[float, float, float]]) -> None:
    """Energies within their bars, wave numbers and masses within what is said of them."""
    for i, (energy, k, bend) in enumerate(expected):
        assert abs(found.energy_eV[i] - energy) <= found.bar_eV[i] + 1e-10, i
        assert found.k_min_per_nm[i] == pytest.approx(k, abs=2e-4), i
        if np.isnan(bend):
            assert np.isnan(found.axial_mass[i]), i
        else:
            mass = HBAR2_OVER_2M0 / bend
            assert abs(found.axial_mass[i] - mass) <= found.axial_mass_error[i] + 1e-6 * mass, i


def test_the_reference_itself() -> None:
    """At k = 0 it is the box; and it has what the tests are about: bands that pass others on their way down."""
    both = np.sort(np.concatenate([Halves(parity).levels(0.0, 6) for parity in (1, -1)]))
    np.testing.assert_allclose(both[:8], box_levels(8), rtol=1e-9)
    rows = minima_of(HEIGHT, 0.0, 0.0, 4)
    assert sum(k > 0.05 for _, k, _ in rows[:6]) >= 2


def test_all_minima_of_two_halves_are_listed() -> None:
    """Energies, places, masses; valleys of a second kind lie between what bands are at k = 0 and at their minima."""
    sheared = minima_of(HEIGHT, 0.0, 0.0, 4)
    falling = max(range(5), key=lambda i: box_levels(5)[i] - sheared[i][0])
    second = (box_levels(5)[falling] + sheared[falling][0]) / 2 - box_levels(1)[0]
    plain = [(e + second, 0.0, HBAR2_OVER_2M0 * INVERSE) for e in box_levels(6)]
    expected = sorted([*sheared, *plain])[:8]
    certified, found = found_of(problem(*halves((0.0, SHEAR), second), 8, 1e-5))
    check(found, expected)
    assert certified.missed == 0
    assert set(found.valley_kind) == {"sheared", "plain"}
    for own, n in zip(found.by_channel, certified.listed, strict=True):
        np.testing.assert_allclose(own.bands.energy_eV.min(axis=1), own.energy_eV[:n], atol=2e-6)


@pytest.mark.parametrize("subbands", [2, 3, 9])
def test_any_number_of_subbands_can_be_asked(subbands: int) -> None:
    """The lowest of the reference, each with a table that rises at its end, and all that is measured from them."""
    result = solve(problem(*halves((0.0, SHEAR)), subbands, 1e-4))
    expected = [energy for energy, _, _ in minima_of(HEIGHT, 0.0, 0.0, 6)[:subbands]]
    for subband, energy in zip(result.subbands, expected, strict=True):
        assert abs(subband.energy_eV - energy) <= subband.error_eV
    assert result.states_missed == 0
    table = result.dispersion.energy_eV
    assert (table[:, -1] > table[:, -2]).all()
    for band, energy in zip(result.spectrum.bands, result.spectrum.energy_eV, strict=True):
        assert band is None or band.lowest_eV == energy


def test_shear_across_the_cut_is_a_phase() -> None:
    """exp(-i k s |x|) takes the shear away, though it jumps: E(k) is the box and a parabola of 1/(W_zz - w^2/W)."""
    certified, found = found_of(problem(*halves((SHEAR, 0.0)), 6, 1e-5))
    axial = INVERSE - SHEAR**2 / INVERSE
    np.testing.assert_allclose(found.energy_eV, box_levels(6), atol=1e-5)
    assert (np.abs(found.energy_eV - box_levels(6)) <= found.bar_eV).all()
    assert (found.k_min_per_nm == 0).all()
    assert (np.abs(found.axial_mass - 1 / axial) <= found.axial_mass_error).all()
    assert (found.axial_mass_error < 2e-3).all()
    bands = found.by_channel[0].bands
    near = bands.k_per_nm < 0.5
    parabola = found.energy_eV[:, None] + HBAR2_OVER_2M0 * axial * bands.k_per_nm[near] ** 2
    np.testing.assert_allclose(bands.energy_eV[:, near], parabola, atol=2e-5)
    assert certified.missed == 0


def test_states_that_are_left_out_are_counted() -> None:
    """A survey of a space that lacks a state says so."""
    certified, _ = found_of(problem(*halves((0.0, SHEAR)), 5, 1e-4))
    (low,) = certified.minima
    assert low is not None
    assert (low.k_per_nm > 0).any()
    space = low.survey.space
    d = 3
    less = replace(space, basis=space.basis[:, :d], orders=tuple(tuple(p[:d, :d] for p in o) for o in space.orders))
    assert replace(low, survey=replace(low.survey, space=less)).missed() > 0


def test_masses_that_grow_with_energy() -> None:
    """T(E, k) with a potential: energies at the minima, where they are, and masses, also where E(k) starts linearly."""
    alpha, harmonic = 0.8, 0.06
    potential = Potential(harmonic_eV=(harmonic, harmonic))
    certified, found = found_of(problem(*halves((0.0, SHEAR), alpha=alpha), 2, 1e-4, potential))
    assert certified.solved[0].relation is None
    check(found, list(minima_of(HEIGHT, alpha, harmonic, 2)[:2]))
    assert certified.missed == 0
    assert (found.k_min_per_nm > 0).any()


@pytest.mark.parametrize("alpha", [0.0, 0.8])
def test_a_band_that_starts_linearly_has_no_mass(alpha: float) -> None:
    """In the square two states of one energy fall apart with k: one goes down from k = 0, one up."""
    potential = Potential(harmonic_eV=(0.06, 0.06)) if alpha else None
    _, found = found_of(problem(*halves((0.0, SHEAR), alpha=alpha, height=WIDTH), 3, 1e-4, potential))
    expected = minima_of(WIDTH, alpha, 0.06 if alpha else 0.0, 2)[:3]
    check(found, list(expected))
    assert np.isnan(expected[2][2])


def test_sensitivities_at_the_minima() -> None:
    """With edges at zero energies go as 1/length^2 (Euler): length times derivative adds up to -2 E, at any k_min."""
    result = solve(problem(*halves((0.0, SHEAR)), 4, 1e-5))
    lengths = {
        "section.width": WIDTH,
        "section.height": HEIGHT,
        "section.patches[1].width": WIDTH / 2,
        "section.patches[1].height": HEIGHT,
        "section.patches[1].center[1]": WIDTH / 4,
    }
    values = {s.of: s.values for s in result.sensitivities}
    total = sum(values[name] * length for name, length in lengths.items())
    energy = np.array([s.energy_eV for s in result.subbands])
    assert any(s.k_min_per_nm > 0 for s in result.subbands)
    np.testing.assert_allclose(total, -2 * energy, rtol=1e-3)


def ring(second_eV: float) -> tuple[Section, tuple[Material, ...]]:
    """A square ring of four parts with shear along it: k acts like a flux through the ring."""
    outer, inner, shear, inverse = 8.0, 5.0, 3.8, 4.0
    materials, patches = [], []
    for i, name in enumerate("BRTL"):
        turn = np.array(
            [[np.cos(i * np.pi / 2), -np.sin(i * np.pi / 2)], [np.sin(i * np.pi / 2), np.cos(i * np.pi / 2)]]
        )
        points = np.array([(-outer, -outer), (outer, -outer), (inner, -inner), (-inner, -inner)]) @ turn.round().T
        middle = np.array([0.0, -(outer + inner) / 2 - (outer - inner) ** 2 / (6 * (outer + inner))]) @ turn.round().T
        patches.append(Patch(Polygon(points_nm=tuple(map(tuple, points - middle))), name, center_nm=tuple(middle)))
        along = tuple(shear * turn.round()[:, 0])
        sheared = Valley("sheared", 0.0, inverse_mass=tensor((along[0], along[1]), inverse))
        plain = Valley("plain", second_eV, inverse_mass=tensor((0.0, 0.0), inverse))
        materials.append(Material.given(name, valleys=(sheared, plain), conduction_edge_eV=0.0))
    hole = Patch(Rectangle(width_nm=2 * inner, height_nm=2 * inner), "void")
    return Section(Rectangle(width_nm=2 * outer, height_nm=2 * outer), "B", patches=(*patches, hole)), tuple(materials)


def test_a_ring_against_direct_solves() -> None:
    """At every k the discrete problem has as many states below the highest listed minimum as listed bands there."""
    certified, found = found_of(problem(*ring(0.002), 6, 1e-4, model="parabolic"))
    bands, solved, n = found.by_channel[0].bands, certified.solved[0], certified.listed[0]
    chosen = np.flatnonzero(bands.k_per_nm < 0.4)[::4]
    top = float(found.energy_eV[-1])
    direct = np.array(
        [eigen.lowest(solved.pencil.at(k), solved.pencil.mass, 6, solved.shift_eV)[0] for k in bands.k_per_nm[chosen]]
    )
    followed = bands.energy_eV[:, chosen].T
    assert (np.sum(direct < top - 1e-5, axis=1) <= np.sum(followed < top, axis=1)).all()
    for row in followed.T:  # every point of a band is a state
        assert np.abs(direct[:, None, :] - row[:, None, None]).min(axis=2).max() < 2e-5
    own = found.by_channel[0]
    assert (own.k_min_per_nm[:n] > 0).any()
    for i in np.flatnonzero(own.k_min_per_nm[:n] > 0):
        there = eigen.lowest(solved.pencil.at(own.k_min_per_nm[i]), solved.pencil.mass, 6, solved.shift_eV)[0]
        assert np.abs(there - own.energy_eV[i]).min() < 1e-7
    assert certified.missed == 0
