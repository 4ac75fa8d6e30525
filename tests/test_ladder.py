"""Line density and conductance do not depend on how many subbands were asked for.

Few states are listed, more are solved on the same mesh, and the rest is counted; all is held against sums over whole
ladders of levels: rectangles and circles in closed form, a round core in a shell by the matching of Bessel functions.
"""

from __future__ import annotations

from functools import lru_cache
from math import pi

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import special

from wiresolve.describe.material import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Rectangle, Shape
from wiresolve.describe.valley import Valley
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.smooth_count import Places, SmoothCount, smooth_count
from wiresolve.physics.statistics import line_density
from wiresolve.physics.transport import conductance
from wiresolve.physics.wire import Wire
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

HOT_K = 300.0
WIDTH_nm, HEIGHT_nm = 100.0, 80.0
LONG, ACROSS, GROWTH = 0.916, 0.19, 0.5
"""Masses and growth in 1/eV of valleys that lie off the zone centre, as in silicon."""
LIGHT, STEEP = 0.023, 2.7
"""A light mass that grows fast, as in narrow gaps."""
CORE, SHELL = (LIGHT, STEEP, 0.0, 12.0), (0.08, 0.8, 0.5, 20.0)
"""Mass, growth in 1/eV, edge in eV and outer radius in nm of a round core and its shell."""


def problem(
    shape: Shape,
    materials: tuple[Material, ...],
    count: int,
    fermi_eV: float,
    orientation: Orientation | None = None,
    layers: tuple[Layer, ...] = (),
    accuracy_eV: float = 1e-3,
) -> Problem:
    return Problem(
        "ladder",
        Section(shape, materials[0].name, layers),
        Carriers(temperature_K=(HOT_K,), fermi_level_eV=fermi_eV),
        Accuracy(count, accuracy_eV),
        materials,
        orientation,
    )


def light_material() -> Material:
    return Material.given("light", electron_mass=LIGHT, nonparabolicity_per_eV=STEEP, conduction_edge_eV=0.0)


def heavy_material() -> Material:
    valley = Valley("Delta", 0.0, LONG, ACROSS, (1, 0, 0), nonparabolicity_per_eV=GROWTH)
    return Material("heavy", valleys=(valley,), conduction_edge_eV=0.0, crystal="diamond")


# Sums over whole ladders


def kane(value_eV: Array, alpha: float) -> Array:
    """E of E (1 + alpha E) = value."""
    return np.asarray(2 * value_eV / (1 + np.sqrt(1 + 4 * alpha * value_eV)))


def filled(energy_eV: Array, fermi_eV: float) -> Array:
    return np.asarray(special.expit((fermi_eV - energy_eV) / (KB * HOT_K)))


def sums(
    levels_eV: Array, axial_mass: float, alpha: float, degeneracy: int, fermi_eV: float, edge_eV: float = 0.0
) -> Array:
    """Line density in 1/nm and conductance in G0 of minima whose constant-mass energies are `levels_eV`."""
    top = float(levels_eV.max())
    ends = np.sqrt((top - levels_eV + 1e-9) * axial_mass / HBAR2_OVER_2M0)
    points, weights = np.polynomial.legendre.leggauss(48)
    density = 0.0
    for at, weight in zip((points + 1) / 2, weights / 2, strict=True):
        energy = edge_eV + kane(levels_eV + HBAR2_OVER_2M0 / axial_mass * (ends * at) ** 2, alpha)
        density += weight * float((ends * filled(energy, fermi_eV)).sum())
    modes = float(filled(edge_eV + kane(levels_eV, alpha), fermi_eV).sum())
    return np.array([degeneracy / pi * density, degeneracy / 2 * modes])


def box_levels(masses: tuple[float, float], width_nm: float, height_nm: float, top_eV: float) -> Array:
    i, j = np.arange(1, 400)[:, None], np.arange(1, 400)
    values = HBAR2_OVER_2M0 * pi**2 * (i**2 / masses[0] / width_nm**2 + j**2 / masses[1] / height_nm**2)
    return np.asarray(values[values < top_eV])


@lru_cache(maxsize=4)
def disk_levels(mass: float, radius_nm: float, top_eV: float) -> Array:
    """Zeros of Bessel functions, pairs twice (DLMF 10.21)."""
    reach = radius_nm * np.sqrt(top_eV * mass / HBAR2_OVER_2M0)
    zeros = [special.jn_zeros(m, int(reach / pi) + 3) for m in range(int(reach) + 2) for _ in range(2 if m else 1)]
    found = np.concatenate(zeros)
    return np.asarray(HBAR2_OVER_2M0 / mass * (found[found < reach] / radius_nm) ** 2)


def measured(result: Result, fermi_eV: float) -> Array:
    spectrum = result.spectrum
    return np.array([float(line_density(spectrum, fermi_eV, HOT_K)), float(conductance(spectrum, fermi_eV, HOT_K))])


@pytest.mark.parametrize("count", [1, 12])
def test_a_thick_wire_of_all_valleys_holds_what_the_rectangle_holds(count: int) -> None:
    """Along [110] on (001): [001] has the long mass upright; the four others lean, with (l + t)/2 along the wire."""
    across = 2 / (1 / LONG + 1 / ACROSS)
    wire = problem(Rectangle(WIDTH_nm, HEIGHT_nm), (heavy_material(),), count, 0.05, Orientation((1, 1, 0), (0, 0, 1)))
    result = solve(wire)
    upright, lying = (
        box_levels(masses, WIDTH_nm, HEIGHT_nm, 0.8) for masses in ((ACROSS, LONG), (across, ACROSS))
    )  # fmt: skip
    for fermi in (-0.1, 0.0, 0.05):
        exact = sums(upright, ACROSS, GROWTH, 4, fermi) + sums(lying, (LONG + ACROSS) / 2, GROWTH, 8, fermi)
        assert measured(result, fermi) == pytest.approx(exact, rel=2e-3)


@pytest.mark.parametrize(("count", "within"), [(1, 4e-3), (10, 1e-3), (40, 5e-4)])
def test_a_mass_that_grows_fast_is_counted_with_its_growth(count: int, within: float) -> None:
    result = solve(problem(Rectangle(WIDTH_nm, HEIGHT_nm), (light_material(),), count, 0.2))
    levels = box_levels((LIGHT, LIGHT), WIDTH_nm, HEIGHT_nm, 3.0)
    for fermi in (0.0, 0.1, 0.2):
        assert measured(result, fermi) == pytest.approx(sums(levels, LIGHT, STEEP, 2, fermi), rel=within)


@pytest.mark.parametrize(("radius_nm", "count"), [(50.0, 1), (50.0, 10), (15.0, 8)])
def test_valleys_far_up_have_tails_of_their_own(radius_nm: float, count: int) -> None:
    """Heavy valleys that hold few carriers do not make the light ones heavier; filled, they count as they are.

    In the thin wire light states are solved far above the heavy valleys' first, which are counted only.
    """
    centre = Valley("zone centre", 0.0, 0.067, 0.067, (0, 0, 1), zone_boundary=True, nonparabolicity_per_eV=0.6)
    upper = Valley("L", 0.3, 0.22, 0.22, (1, 1, 1), zone_boundary=True, nonparabolicity_per_eV=0.4)
    material = Material("two", valleys=(centre, upper), conduction_edge_eV=0.0, crystal="zincblende")
    shape, orientation = Circle(diameter_nm=2 * radius_nm), Orientation((1, 1, 0), (0, 0, 1))
    result = solve(problem(shape, (material,), count, 0.3 if radius_nm < 20 else 0.1, orientation))
    lower, higher = disk_levels(0.067, radius_nm, 2.0), disk_levels(0.22, radius_nm, 1.5)
    (fold,) = {s.valley_degeneracy for s in result.subbands}
    for fermi in (0.0, 0.1, 0.3):
        exact = sums(lower, 0.067, 0.6, 2 * fold, fermi) + sums(higher, 0.22, 0.4, 8, fermi, edge_eV=0.3)
        assert measured(result, fermi) == pytest.approx(exact, rel=4e-3)


def test_states_that_are_not_listed_have_the_mass_along_the_wire_where_valleys_lean() -> None:
    """Two materials so alike that the closed form of one holds: (l + t)/2 along the wire, not the tensor itself."""
    parts = []
    for name, long in (("core", LONG), ("shell", LONG * 1.004)):
        valley = Valley("Delta", 0.0, long, ACROSS, (1, 0, 0))
        parts.append(Material(name, valleys=(valley,), conduction_edge_eV=0.0, crystal="diamond"))
    result = solve(
        problem(Circle(12.0), tuple(parts), 1, 0.1, Orientation((1, 1, 0), (0, 0, 1)), (Layer(3.0, "shell"),))
    )
    spectrum = result.spectrum
    lying = np.flatnonzero(spectrum.degeneracy == 8)
    assert len(lying) >= 5
    assert spectrum.axial_mass[lying] == pytest.approx((LONG + ACROSS) / 2, rel=6e-3)


# A core in a shell


def radial(order: int, energy_eV: Array, k_squared: Array) -> Array:
    """Zero at the levels of angular order `order`: matching of value and of derivative over m (1 + alpha (E - edge)).

    Regular on the axis and zero at the outer wall; each solution is scaled so that it is smooth where waves turn into
    decays (DLMF 10.25), so that it has no poles and its zeros are the levels.
    """
    (_, _, _, inner), (_, _, _, outer) = CORE, SHELL
    q, lighter = [], []
    for mass, alpha, edge, _ in (CORE, SHELL):
        above = energy_eV - edge
        q.append(above * (1 + alpha * above) * mass / HBAR2_OVER_2M0 - k_squared)
        lighter.append(1 / (mass * (1 + alpha * above)))
    root = np.sqrt(np.maximum(np.abs(q), 1e-12))
    core, shell = root[0] * inner, (root[1] * inner, root[1] * outer)
    wave = q[0] > 0
    value = np.where(wave, special.jv(order, core), special.iv(order, core)) / root[0] ** order
    slope = np.where(wave, special.jvp(order, core), special.ivp(order, core)) / root[0] ** (order - 1)
    j, y, i, k = (
        (lambda f: [f(order, x) for x in shell])(special.jv),
        *([f(order, x) for x in shell] for f in (special.yv, special.iv, special.kv)),
    )
    dj, dy, di, dk = (f(order, shell[0]) for f in (special.jvp, special.yvp, special.ivp, special.kvp))
    wave = q[1] > 0
    there = np.where(wave, -pi / 2 * (j[0] * y[1] - y[0] * j[1]), i[0] * k[1] - k[0] * i[1])
    steep = np.where(wave, -pi / 2 * (dj * y[1] - dy * j[1]), di * k[1] - dk * i[1]) * root[1]
    return np.asarray(lighter[0] * slope * there - lighter[1] * steep * value)


@lru_cache(maxsize=1)
def shell_levels() -> tuple[Array, list[tuple[int, list[Array]]]]:
    """Wave numbers, and for each angular order its levels at each of them, up to 0.75 eV."""
    wave_numbers = np.linspace(0.0, 1.5, 16)
    grid = np.linspace(0.004, 0.75, 300)
    found = []
    for order in range(16):
        values = radial(order, grid[:, None], wave_numbers**2)
        row, column = np.nonzero(np.sign(values[1:]) != np.sign(values[:-1]))
        low, high, sign = grid[row], grid[row + 1], np.sign(values[row, column])
        for _ in range(22):
            middle = (low + high) / 2
            same = np.sign(radial(order, middle, wave_numbers[column] ** 2)) == sign
            low, high = np.where(same, middle, low), np.where(same, high, middle)
        each = [np.sort(middle[column == i]) for i in range(len(wave_numbers))]
        found.append((order, each))
    return wave_numbers, found


def shell_sums(fermi_eV: float) -> Array:
    """Line density and conductance: the trapezoidal rule in k is as good as exact, as all is even and smooth in k."""
    wave_numbers, found = shell_levels()
    weights = np.full(len(wave_numbers), wave_numbers[1])
    weights[0] /= 2
    density, modes = 0.0, 0.0
    for order, each in found:
        held = [float(filled(levels, fermi_eV).sum()) * (2 if order else 1) for levels in each]
        density += 2 / pi * float(weights @ held)
        modes += held[0]
    return np.array([density, modes])


@lru_cache(maxsize=4)
def core_shell(count: int) -> Result:
    parts = [
        Material.given(name, electron_mass=m, nonparabolicity_per_eV=a, conduction_edge_eV=e)
        for name, (m, a, e, _) in (("core", CORE), ("shell", SHELL))
    ]
    layers = (Layer(SHELL[3] - CORE[3], "shell"),)
    return solve(problem(Circle(2 * CORE[3]), tuple(parts), count, 0.3, None, layers, 1e-4))


@pytest.mark.parametrize("count", [1, 4, 8, 20])
def test_unlike_growth_in_core_and_shell(count: int) -> None:
    for fermi in (0.1, 0.2, 0.3):
        assert measured(core_shell(count), fermi) == pytest.approx(shell_sums(fermi), rel=3e-3)


def test_the_sum_over_the_radial_ladder_is_the_one_of_another_program() -> None:
    """2.858/nm and 12.00 G0 at 0.3 eV came from radial finite elements and a spline in k, made apart from this file."""
    assert shell_sums(0.3) == pytest.approx([2.8575, 12.0003], rel=2e-4)


def test_solved_states_that_are_not_listed_bend_as_the_radial_ones_do() -> None:
    spectrum = core_shell(8).spectrum
    wave_numbers, found = shell_levels()
    k = np.array([0, 3, 6])
    assert wave_numbers[k] == pytest.approx([0, 0.3, 0.6])
    for state in range(8, 16):
        rows = np.vstack(
            [np.column_stack([each[i][: len(each[6])] for i in k]) for _, each in found if len(each[6])]
        )  # fmt: skip
        exact = rows[np.argmin(np.abs(rows[:, 0] - spectrum.energy_eV[state]))]
        band = spectrum.bands[state]
        assert band is not None
        assert band.energy(wave_numbers[k]) == pytest.approx(exact, abs=1.5e-4)


# The smooth count


@pytest.mark.parametrize("axis", [(1, 1, 0), (1, 0, 0)])
def test_the_smooth_count_is_the_closed_one_up_to_its_constant(axis: tuple[int, int, int]) -> None:
    """A rectangle's constant is 1/4 for its corners (M. Kac, Am. Math. Mon. 73, 1 (1966)), whatever the masses."""
    wire = Wire(problem(Rectangle(40.0, 30.0), (heavy_material(),), 4, 0.05, Orientation(axis, (0, 0, 1))))
    with Mesher(wire.draw(0.0)) as mesher:
        mesh, _ = mesher.mesh(SizeField(15.0))
    for group in wire.groups:
        count = smooth_count(Space(mesh), wire.operator(mesh, group))
        inverse = group.inverse_mass["heavy"]
        values = np.sort(box_levels((1 / inverse[0, 0], 1 / inverse[1, 1]), 40.0, 30.0, 1.0))
        energy = kane(values, GROWTH)
        difference = np.arange(len(energy)) + 0.5 - count.count(energy, np.zeros(len(energy)))
        assert len(energy) > 300
        assert float(difference[-300:].mean()) == pytest.approx(0.25, abs=0.12)


def places(edge_eV: float, stiffness: float = 0.6, axial: float = 0.6, alpha: float = 0.0) -> Places:
    return Places(*(np.array([value]) for value in (edge_eV, stiffness, axial, alpha)))


NOWHERE = Places(*(np.zeros(0),) * 4)


def test_a_step_is_a_wall_where_it_is_high_and_nothing_where_there_is_none() -> None:
    energy, still = np.array([0.05, 0.2, 0.7]), np.zeros(3)
    low, high = places(0.0), places(1e9)
    wall = SmoothCount(low, np.array([900.0]), low, np.array([70.0]), (NOWHERE, NOWHERE), np.zeros(0))
    for sides in ((low, high), (high, low)):
        step = SmoothCount(low, np.array([900.0]), NOWHERE, np.zeros(0), sides, np.array([70.0]))
        assert step.count(energy, still) == pytest.approx(wall.count(energy, still), rel=1e-4)
    none = SmoothCount(low, np.array([900.0]), NOWHERE, np.zeros(0), (low, low), np.array([70.0]))
    assert none.count(energy, still) == pytest.approx(900 * energy / 0.6 / (4 * pi), rel=1e-13)


def test_a_step_that_just_holds_a_wave_counts_by_its_closed_integral() -> None:
    """At the step's own height, for equal masses: arccos t from 0 to 1 integrates to 1, so k L (1/pi^2 - 1/4pi)."""
    energy = np.array([0.3])
    sides = (places(0.0), places(0.3))
    found = SmoothCount(sides[0], np.zeros(1), NOWHERE, np.zeros(0), sides, np.array([50.0])).count(energy, np.zeros(1))
    assert found == pytest.approx(50 * np.sqrt(0.3 / 0.6) * (1 / pi**2 - 1 / (4 * pi)), rel=1e-5)


@pytest.mark.parametrize("known", [0, 40])
def test_states_of_a_tail_are_the_closed_power(known: int) -> None:
    """Without walls N grows as v - a k^2, so the states after the first ones grow as (v - v_first)^(3/2)."""
    area, stiffness, axial, alpha = 8000.0, 0.4, 0.9, 1.5
    inside = places(0.1, stiffness, axial, alpha)
    count = SmoothCount(inside, np.array([area]), NOWHERE, np.zeros(0), (NOWHERE, NOWHERE), np.zeros(0))
    per_value = area / (4 * pi * stiffness)
    start = 0.1 + float(kane(np.array(known / per_value), alpha))
    energy = start + np.linspace(0, 0.6, 200) ** 2
    tail = count.tail(energy, known, 0.0, 6)
    value = (energy - 0.1) * (1 + alpha * (energy - 0.1)) - known / per_value
    assert tail.modes == pytest.approx(6 * per_value * value, rel=1e-9, abs=1e-9)
    states = 6 / pi * per_value * 2 / 3 * np.maximum(value, 0) ** 1.5 / np.sqrt(axial)
    assert tail.states_per_nm[1:] == pytest.approx(states[1:], rel=1e-6)
    assert tail.states_per_nm[0] == 0
