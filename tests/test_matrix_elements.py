"""Matrix elements against closed forms, separate quadratures and invariances, and their bars against true errors."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import iv, ivp, jn_zeros, jv, jvp, kv, kvp

from tests.plain_modes import (
    HEIGHT,
    UNIT,
    UNIT_WEIGHTS,
    WIDTH,
    box_dipole,
    box_slopes,
    by_pairs,
    disk,
    quantum_numbers,
    radial,
    rectangle,
    same,
)
from tests.truth import polygon
from tests.truth._wires import checked, material, wire
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Hexagon, Polygon, Rectangle, Triangle
from wiresolve.describe.valley import Valley
from wiresolve.errors import ConvergenceError, InputError
from wiresolve.mode_elements import MatrixElements, form_factors, matrix_elements
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]


def rectangle_truth() -> dict[str, Array]:
    """Sizes of the elements: signs of states are free."""
    slopes = by_pairs(lambda i, k: box_slopes(i, k, WIDTH), same) + by_pairs(
        same, lambda i, k: box_slopes(i, k, HEIGHT)
    )
    return {
        "dipole_x_nm": by_pairs(lambda i, k: box_dipole(i, k, WIDTH), same),
        "dipole_y_nm": by_pairs(same, lambda i, k: box_dipole(i, k, HEIGHT)),
        "roughness_eV_per_nm": -slopes,
    }


def test_dipoles_and_roughness_of_a_rectangle() -> None:
    _, found = rectangle(3e-7)
    for name, truth in rectangle_truth().items():
        values = getattr(found, name)
        values = values[0] if values.ndim == 3 else values
        assert np.abs(np.abs(values) - np.abs(truth)).max() < 1e-8 * np.abs(truth).max(), name
    assert found.outlines == ("growth of rim",)
    ground = found.dipole_x_nm[0, quantum_numbers().index((2, 1))]
    assert abs(ground) == pytest.approx(16 / (9 * math.pi**2) * WIDTH, rel=1e-8)


@pytest.mark.parametrize("accuracy_eV", [1e-2, 1e-4, 1e-6])
def test_bars_of_a_rectangle_hold_and_are_close(accuracy_eV: float) -> None:
    _, found = rectangle(accuracy_eV)
    for name, truth in rectangle_truth().items():
        values, bars = getattr(found, name), getattr(found, _bar_of(name))
        values, bars = (x[0] if x.ndim == 3 else x for x in (values, bars))
        error = np.abs(np.abs(values) - np.abs(truth))
        assert (error <= bars).all(), name
        assert bars.max() < 5 * error.max()


def _bar_of(name: str) -> str:
    for unit in ("_eV_per_nm", "_nm"):
        if name.endswith(unit):
            return f"{name.removesuffix(unit)}_error{unit}"
    return f"{name}_error"


def disk_dipoles() -> dict[tuple[int, int], float]:
    """Sums of |<i|x|j>|^2 + |<i|y|j>|^2 over levels of the unit disk: angles by hand, radii by Gauss's rule."""
    parts = [radial(0, 1)[1], radial(1, 1)[1], radial(2, 1)[1], radial(0, 2)[1]]

    def along(a: int, b: int) -> float:
        return float(np.sum(UNIT_WEIGHTS * UNIT**2 * parts[a](UNIT) * parts[b](UNIT)))

    # <0|x|1 cos> = pi R and the same with y and the sine; <1 cos|x|2 cos> = pi R/2 and so on, eight in all.
    return {
        (0, 1): 2 * (math.pi * along(0, 1)) ** 2,
        (1, 2): 4 * (math.pi * along(1, 2) / 2) ** 2,
        (1, 3): 2 * (math.pi * along(3, 1)) ** 2,
    }


def test_dipoles_and_roughness_of_a_disk() -> None:
    _, found = disk(3e-7)
    levels, sums, bars = found.level_sums("dipole_nm")
    assert levels.tolist() == [1, 2, 3, 4]
    for place, truth in disk_dipoles().items():
        assert sums[place] == pytest.approx(truth, rel=1e-8)
        assert abs(sums[place] - truth) <= bars[place]
    zeros = np.array([radial(m, n)[0] for m, n in ((0, 1), (1, 1), (1, 1), (2, 1), (2, 1), (0, 2))])
    truth_of = np.diag(-2 * zeros**2)
    # Products of slopes at the rim, j_a j_b of states alike in angle.
    truth_of[0, 5] = truth_of[5, 0] = 2 * zeros[0] * zeros[5]
    error = np.abs(np.abs(found.roughness_eV_per_nm[0]) - np.abs(truth_of))
    assert error.max() < 1e-8 * np.abs(truth_of).max()
    assert (error <= found.roughness_error_eV_per_nm[0]).all()


@pytest.mark.parametrize("accuracy_eV", [1e-2, 1e-4])
def test_bars_of_level_sums_of_a_disk_hold_and_are_close(accuracy_eV: float) -> None:
    _, found = disk(accuracy_eV)
    _, sums, bars = found.level_sums("dipole_nm")
    for place, truth in disk_dipoles().items():
        assert abs(sums[place] - truth) <= bars[place] < 20 * abs(sums[place] - truth)


INNER, OUTER, LIGHT, HEAVY, STEP_eV = 6.0, 11.0, 0.067, 0.11, 0.3


def matched(order: int, inner: float, outer: float) -> tuple[float, float]:
    """Lowest energy of a round well in a barrier with a hard wall around, and its probability outside the well."""
    a, b = HBAR2_OVER_2M0 / LIGHT, HBAR2_OVER_2M0 / HEAVY

    def outside(energy: float, r: Array | float) -> tuple[Array, Array]:
        c = math.sqrt((STEP_eV - energy) / b)
        ratio = iv(order, c * outer) / kv(order, c * outer)
        return iv(order, c * r) - ratio * kv(order, c * r), c * (ivp(order, c * r) - ratio * kvp(order, c * r))

    def mismatch(energy: float) -> float:
        k = math.sqrt(energy / a)
        value, slope = outside(energy, inner)
        return float(a * k * jvp(order, k * inner) * value - b * slope * jv(order, k * inner))

    first = jn_zeros(order, 1)[0] ** 2 * a / inner**2
    energy = float(brentq(mismatch, 0.2 * first, min(0.999 * first, 0.999 * STEP_eV), xtol=1e-15, rtol=1e-15))
    k = math.sqrt(energy / a)
    within = inner * UNIT
    beyond = inner + (outer - inner) * UNIT
    scale = jv(order, k * inner) / outside(energy, inner)[0]
    here = inner * np.sum(UNIT_WEIGHTS * within * jv(order, k * within) ** 2)
    there = (outer - inner) * np.sum(UNIT_WEIGHTS * beyond * (scale * outside(energy, beyond)[0]) ** 2)
    return energy, float(there / (here + there))


@lru_cache(maxsize=2)
def core_shell(accuracy_eV: float, count: int = 3) -> tuple[Result, MatrixElements]:
    layer = Layer(thickness_nm=OUTER - INNER, material="barrier")
    section = Section(shape=Circle(diameter_nm=2 * INNER), material="well", layers=(layer,))
    materials = [material("well", LIGHT), material("barrier", HEAVY, STEP_eV)]
    result = checked(solve(wire(section, materials, count, accuracy_eV)))
    return result, matrix_elements(result)


def test_penetration_of_a_finite_well() -> None:
    for accuracy_eV, close in ((1e-5, 1e-4), (1e-9, 1e-8)):
        _, found = core_shell(accuracy_eV)
        place = found.layers.index("layer 1")
        for state, order in ((0, 0), (1, 1), (2, 1)):
            error = abs(found.penetration[place, state] - matched(order, INNER, OUTER)[1])
            assert error < close
            assert error <= found.penetration_error[place, state]
        assert found.penetration.sum(axis=0) == pytest.approx(1, abs=1e-12)


def test_roughness_of_an_interface_and_of_a_far_wall() -> None:
    """Against the motion of the roots of the matching condition with each radius."""
    _, found = core_shell(1e-9)
    for name, inner, outer in (("growth of core", 1.0, 0.0), ("growth of rim", 0.0, 1.0)):
        place = found.outlines.index(name)
        for state, order in ((0, 0), (1, 1), (2, 1)):
            h = 2e-3
            steps = np.array([matched(order, INNER + s * h * inner, OUTER + s * h * outer)[0] for s in (-2, -1, 1, 2)])
            truth = float(np.array([1, -8, 8, -1]) @ steps) / (12 * h)
            assert found.roughness_eV_per_nm[place, state, state] == pytest.approx(truth, rel=1e-6)


def test_oscillator_strengths_add_up_to_the_mean_inverse_mass() -> None:
    """Thomas, Reiche and Kuhn with a mass that depends on place."""
    result, found = core_shell(1e-3, 40)
    share = found.penetration[:, 0]
    expected = sum(s / m for s, m in zip(share, (LIGHT, HEAVY), strict=True))
    assert found.layers == ("core", "layer 1")
    for rule, strength in ((found.sum_rule_x, found.oscillator_x), (found.sum_rule_y, found.oscillator_y)):
        assert rule[0] == pytest.approx(expected, rel=1e-10)
        total = float(strength[0].sum())
        assert 0.995 * rule[0] < total <= rule[0] * (1 + 1e-6)
        # Nothing but this mean mass fits: the core's alone would be farther off.
        assert abs(total - rule[0]) < 0.5 * abs(1 / LIGHT - rule[0])
    assert found.oscillator_x == pytest.approx(-found.oscillator_x.T, abs=1e-9)
    del result


GROWING = Material.given("narrow", electron_mass=0.026, conduction_edge_eV=0.0, nonparabolicity_per_eV=2.1)
WALL = Material.given("wide", electron_mass=0.08, conduction_edge_eV=0.5, nonparabolicity_per_eV=0.9)


def test_states_with_growing_masses_are_orthonormal_with_all_bands() -> None:
    section = Section(
        shape=Circle(diameter_nm=14.0), material="narrow", layers=(Layer(thickness_nm=4.0, material="wide"),)
    )
    found = matrix_elements(checked(solve(wire(section, [GROWING, WALL], 6, 1e-5))))
    assert np.abs(found.overlap - np.eye(6)).max() < 1e-7
    assert np.abs(found.envelope_overlap - np.eye(6)).max() > 0.01
    assert np.isnan(found.sum_rule_x).all()


def test_a_field_moves_growing_masses_by_the_mean_place() -> None:
    """dE/dF is the dipole <0|x|0> of all that the state holds, not of the envelope alone."""
    section = Section(shape=Triangle(base_nm=18.0, height_nm=12.0, rotation_deg=90.0), material="narrow")

    def solved(field: float) -> Result:
        given = Potential(field_V_per_nm=(field, 0.0)) if field else None
        return checked(solve(wire(section, [GROWING], 2, 1e-6, given)))

    step = 2e-4
    slope = (solved(step).energies_eV - solved(-step).energies_eV) / (2 * step)
    found = matrix_elements(solved(0.0))
    assert np.diag(found.dipole_x_nm) == pytest.approx(slope, rel=2e-5)


def test_unlike_valleys_have_no_elements() -> None:
    valley = Valley("Delta", axis=(1, 0, 0), longitudinal_mass=0.916, transverse_mass=0.19)
    silicon = Material.given("silicon", valleys=[valley], conduction_edge_eV=0.0)
    section = Section(shape=Rectangle(width_nm=7.0, height_nm=5.0), material="silicon")
    result = solve(
        Problem(
            title="valleys",
            section=section,
            carriers=Carriers(temperature_K=(4.2,)),
            accuracy=Accuracy(subbands=5, energy_eV=1e-5),
            materials=(silicon,),
            orientation=Orientation(axis=(1, 1, 0), up=(0, 0, 1)),
        )
    )
    found = matrix_elements(result)
    alike = np.array([[a == b for b in found.valley] for a in found.valley])
    assert not alike.all()
    for values in (found.overlap, found.dipole_x_nm, found.dipole_x_error_nm, found.roughness_eV_per_nm[0]):
        assert (np.isfinite(values) == alike).all()
    coulomb = form_factors(result, 0.3)
    expected = alike[:, :, None, None] & alike[None, None]
    assert (np.isfinite(coulomb.values[0]) == expected).all()
    assert np.isfinite(found.level_sums("dipole_nm")[1]).all()


def test_sums_over_levels_do_not_depend_on_the_frame() -> None:
    found = []
    for turn in (0.0, 17.0):
        section = Section(shape=Hexagon(across_flats_nm=20.0, rotation_deg=turn), material="light")
        result = checked(solve(wire(section, [material("light", 0.067)], 6, 1e-6)))
        found.append(matrix_elements(result).level_sums("dipole_nm"))
    (levels, one, bar), (others, two, other) = found
    assert levels.tolist() == others.tolist()
    assert (np.abs(one - two) <= bar + other).all()
    assert (bar < 1e-5 * one.max()).all()


def test_roughness_beside_a_re_entrant_corner() -> None:
    """The slope is infinite there; against energies of the L grown and shrunk by the same distance on all sides."""
    unit = 10.0

    def energies(grown: float) -> Array:
        corners = np.array(polygon.L_CORNERS) * unit
        before, after = corners - np.roll(corners, 1, axis=0), np.roll(corners, -1, axis=0) - corners
        normal = [np.column_stack([e[:, 1], -e[:, 0]]) / np.linalg.norm(e, axis=1)[:, None] for e in (before, after)]
        area = float(np.sum(corners[:, 0] * np.roll(corners[:, 1], -1) - np.roll(corners[:, 0], -1) * corners[:, 1]))
        moved = corners + grown * np.sign(area) * (normal[0] + normal[1])
        section = Section(shape=Polygon(points_nm=tuple(map(tuple, moved.tolist()))), material="light")
        result = checked(solve(wire(section, [material("light", 0.067)], 3, 3e-8)))
        return result.energies_eV if grown else np.diag(matrix_elements(result).roughness_eV_per_nm[0])

    h = 0.15
    steps = [energies(s * h) for s in (-2, -1, 1, 2)]
    truth = (steps[0] - 8 * steps[1] + 8 * steps[2] - steps[3]) / (12 * h)
    assert energies(0.0) == pytest.approx(truth, rel=2e-5)


def test_a_result_without_its_finer_mesh_gives_the_same() -> None:
    result, found = disk(1e-4)
    again = matrix_elements(replace(result, finer_mesh=None))
    assert again.roughness_eV_per_nm == pytest.approx(found.roughness_eV_per_nm, abs=1e-9)
    assert again.dipole_x_nm == pytest.approx(found.dipole_x_nm, abs=1e-12)


def test_modes_of_another_wire_are_refused() -> None:
    result, _ = disk(1e-4)
    entries = tuple(replace(s, energy_eV=s.energy_eV + 1.3) for s in result.subbands)
    with pytest.raises(ConvergenceError, match="not the states"):
        matrix_elements(replace(result, subbands=entries))


def test_other_bad_input() -> None:
    _, found = disk(1e-4)
    with pytest.raises(InputError, match="must be one of"):
        found.level_sums("mass")


def test_phases_of_modes_go_through() -> None:
    """Modes times exp(i phase): elements turn by the difference of phases, sizes and bars stay."""
    result, found = disk(1e-4)
    phase = np.array([0.3, -1.1, 2.0, 0.7, 1.9, -0.4])
    turned = matrix_elements(replace(result, modes=result.modes * np.exp(1j * phase)))
    factor = np.exp(1j * (phase - phase[:, None]))
    for name in ("dipole_x_nm", "overlap", "envelope_overlap", "roughness_eV_per_nm"):
        plain, other = getattr(found, name), getattr(turned, name)
        assert other == pytest.approx(plain * factor, abs=1e-9 * np.abs(plain).max()), name
    assert turned.oscillator_x == pytest.approx(found.oscillator_x, abs=1e-12)
    assert turned.dipole_x_error_nm == pytest.approx(found.dipole_x_error_nm, rel=1e-2, abs=1e-11)
