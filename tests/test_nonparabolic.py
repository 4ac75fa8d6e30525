"""Masses that grow with energy: matching at any k, counting, residuals, bars, densities, limits of the model."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
import pytest
from scipy import integrate, optimize, special

from wiresolve.bands.nonparabolic import Relation
from wiresolve.describe.material import Material
from wiresolve.describe.potential import Potential
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Hexagon, Rectangle
from wiresolve.errors import InputError
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.pencil import build
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0, KB

WELL, BARRIER, STEP, RADIUS = (0.026, 1 / 0.417), (0.0795, 1 / 1.4236), 0.52, 8.0


def material(name: str, mass: float, alpha: float, edge: float = 0.0) -> Material:
    return Material.given(name, electron_mass=mass, nonparabolicity_per_eV=alpha, conduction_edge_eV=edge)


def problem(section: Section, materials: list[Material], count: int, accuracy: float, **more: Any) -> Problem:
    carriers = Carriers(temperature_K=(77.0,), model=more.pop("model", "nonparabolic"))
    return Problem("growing mass", section, carriers, Accuracy(count, accuracy), tuple(materials), **more)


ROUND = Section(shape=Circle(diameter_nm=2 * RADIUS), material="well", outside="barrier")
PAIR = [material("well", *WELL), material("barrier", *BARRIER, STEP)]


@lru_cache(maxsize=1)
def round_wire() -> Result:
    return solve(problem(ROUND, PAIR, 6, 1e-6))


def matched(order: int, k_per_nm: float, low: float, high: float) -> float:
    """The one root in (low, high) of the matching condition at an axial k: G. Bastard, Phys. Rev. B 24, 5693 (1981)."""

    def mismatch(energy: float) -> float:
        inside = WELL[0] * (1 + WELL[1] * energy)
        outside = BARRIER[0] * (1 + BARRIER[1] * (energy - STEP))
        q = np.sqrt(inside * energy / HBAR2_OVER_2M0 - k_per_nm**2)
        kappa = np.sqrt(outside * (STEP - energy) / HBAR2_OVER_2M0 + k_per_nm**2)
        left = q * special.jvp(order, q * RADIUS) / inside * special.kv(order, kappa * RADIUS)
        right = kappa * special.kvp(order, kappa * RADIUS) / outside * special.jv(order, q * RADIUS)
        return float(left - right)

    return float(optimize.brentq(mismatch, low, high, xtol=1e-14))


def test_bands_in_motion_are_those_of_the_matching_condition() -> None:
    """E(k) of the lowest two levels against the matching condition at the same k."""
    result = round_wire()
    k, bands = result.dispersion.k_per_nm, result.dispersion.energy_eV
    for j in (10, 25, 40):
        for row, order in ((0, 0), (1, 1)):
            near = float(bands[row, j])
            exact = matched(order, float(k[j]), near - 2e-3, near + 2e-3)
            assert abs(near - exact) <= 2e-6 + result.dispersion.error_bound_eV
    assert result.dispersion.error_bound_eV < 1e-5


def test_axial_mass_is_the_curvature_of_the_matching_condition() -> None:
    step = 0.02
    for index, order in ((0, 0), (1, 1)):
        energy = round_wire().subbands[index].energy_eV
        above = matched(order, step, energy - 1e-3, energy + 2e-2) - matched(order, 0.0, energy - 1e-3, energy + 1e-3)
        half = matched(order, step / 2, energy - 1e-3, energy + 2e-2) - matched(
            order, 0.0, energy - 1e-3, energy + 1e-3
        )
        curvature = (16 * half - above) / (3 * step**2)
        assert round_wire().subbands[index].axial_mass == pytest.approx(HBAR2_OVER_2M0 / curvature, rel=1e-5)


def certified(count: int = 6, accuracy: float = 1e-5, **more: Any) -> Certified:
    wire = Wire(problem(ROUND, PAIR, count, accuracy, **more))
    return certify(wire.draw, wire.channels, count, accuracy)


def test_states_are_solved_to_their_residual_and_counted() -> None:
    solved = certified().solved[0]
    family = solved.local_mass
    assert family is not None
    _, size = family.residuals(solved.energy_eV, solved.unknown_states)
    assert size.max() <= local_mass.RESIDUAL
    for i in range(5):
        if solved.energy_eV[i + 1] - solved.energy_eV[i] > 1e-3:
            assert solved.count_below(float(solved.energy_eV[i : i + 2].mean())) == i + 1


def test_bars_hold_against_the_matching_condition() -> None:
    truth = [
        0.070231555504965,
        0.15879479580921,
        0.15879479580921,
        0.25329054071043,
        0.25329054071043,
        0.28370299638673,
    ]
    for accuracy in (1e-3, 1e-4, 1e-5):
        found = certified(accuracy=accuracy)
        error = np.abs(found.energy_eV - truth)
        assert (error <= found.bar_eV + 1e-8).all()
        assert np.median(found.bar_eV / error) < 20


def test_one_relation_in_all_regions_and_the_general_way_agree() -> None:
    """A hexagon split in two regions of equal edge, alpha and mass is solved with one relation; a whisker of a
    difference in alpha sends the same wire the general way, and moves nothing."""
    shape, accuracy = Hexagon(across_flats_nm=10.0), 1e-6
    section = Section(shape=shape, material="a", layers=(Layer(5.0, "b"),))
    same = solve(problem(section, [material("a", 0.03, 2.0), material("b", 0.03, 2.0)], 6, accuracy))
    other = solve(problem(section, [material("a", 0.03, 2.0), material("b", 0.03, 2.0 + 1e-9)], 6, accuracy))
    np.testing.assert_allclose(same.energies_eV, other.energies_eV, atol=2 * accuracy)
    masses = [[s.axial_mass for s in r.subbands] for r in (same, other)]
    np.testing.assert_allclose(masses[0], masses[1], rtol=2e-4)


def test_with_a_potential_a_shift_of_all_energies_changes_nothing() -> None:
    """The mass follows E - V: a constant potential moves every level by itself; a mass that ignored it would not."""
    section = Section(shape=Rectangle(width_nm=14.0, height_nm=9.0), material="a")
    plain = solve(problem(section, [material("a", 0.03, 2.0)], 4, 1e-5))
    lifted = solve(
        problem(section, [material("a", 0.03, 2.0)], 4, 1e-5, potential=Potential(function=lambda x, y: 0.2 + 0 * x))
    )
    np.testing.assert_allclose(lifted.energies_eV - 0.2, plain.energies_eV, atol=2e-5)
    # One relation for all in the first, T(E) between nine energies in the second.
    np.testing.assert_allclose(
        [s.axial_mass for s in lifted.subbands], [s.axial_mass for s in plain.subbands], rtol=1e-4
    )


def test_line_density_and_conductance_follow_the_same_form() -> None:
    """Density against the integral of the Fermi function over E (1 + alpha E) = value + hbar^2 k^2 / 2m."""
    mass, alpha, temperature, fermi = 0.023, 2.5, 300.0, 0.25
    section = Section(shape=Circle(diameter_nm=16.0), material="a")
    result = solve(problem(section, [material("a", mass, alpha)], 3, 1e-6))
    levels = (HBAR2_OVER_2M0 / mass) * (np.array([special.jn_zeros(n, 1)[0] for n in (0, 1, 1)]) / 8.0) ** 2
    relation = Relation(0.0, alpha)
    for index, value in enumerate(levels):

        def filling(k: float, value: float = float(value)) -> float:
            energy = float(relation.energy(np.array(value + HBAR2_OVER_2M0 / mass * k**2)))
            return float(special.expit((fermi - energy) / (KB * temperature)))

        exact = 2 / np.pi * integrate.quad(filling, 0, 3.0, epsabs=1e-12, limit=200)[0]
        from wiresolve.physics.statistics import line_density_by_subband

        found = float(line_density_by_subband(result.spectrum, fermi, temperature)[index])
        assert found == pytest.approx(exact, rel=1e-6)


def test_parabolic_model_leaves_the_mass_alone() -> None:
    section = Section(shape=Circle(diameter_nm=20.0), material="a")
    growing = [material("a", 0.023, 2.5)]
    plain = solve(problem(section, growing, 1, 1e-6, model="parabolic"))
    exact = HBAR2_OVER_2M0 / 0.023 * (special.jn_zeros(0, 1)[0] / 10.0) ** 2
    assert plain.subbands[0].energy_eV == pytest.approx(exact, abs=1e-6)
    assert plain.subbands[0].axial_mass == pytest.approx(0.023, rel=1e-9)
    assert solve(problem(section, growing, 1, 1e-6)).subbands[0].energy_eV < exact - 0.005


def test_a_mass_below_zero_is_outside_the_model() -> None:
    """In a barrier so high that the energies lie below its valence edge the form has no meaning."""
    materials = [material("well", 0.026, 2.4), material("barrier", 0.08, 2.0, 3.0)]
    with pytest.raises(InputError, match="not positive"):
        solve(problem(Section(Circle(diameter_nm=10.0), "well", (Layer(2.0, "barrier"),)), materials, 2, 1e-4))


def test_an_unknown_model_is_refused() -> None:
    with pytest.raises(InputError, match="model"):
        Carriers(temperature_K=(300.0,), model="quadratic")


def test_the_operator_follows_every_energy_where_a_potential_varies() -> None:
    """T(E) as a sum of fixed matrices against the operator assembled at that energy, far up and close to its end."""
    section = Section(Circle(diameter_nm=16.0), "core", (Layer(3.0, "shell"),))
    materials = [material("core", 0.023, 2.0), material("shell", 0.08, 0.7, 0.6)]
    wire = Wire(problem(section, materials, 4, 1e-4, potential=Potential(field_V_per_nm=(0.01, 0.004))))
    with Mesher(wire.draw(0.0)) as mesher:
        mesh, _ = mesher.mesh(SizeField(3.0, turn_cells=10))
    operator, space = wire.operator(mesh), Space(mesh)
    cells = phase_space(space, operator)
    family = local_mass.family(space, operator, cells, 4)
    lowest = max(family.floor_eV, cells.bottom_eV + 0.2 * (cells.energy_of(1) - cells.bottom_eV))
    for energy in (lowest, 0.07, 0.4, 3.0):
        exact = build(space, operator.at(energy)).h0
        assert abs(family.at(energy) - exact).max() <= 1e-9 * abs(exact).max()


def test_a_hot_narrow_gap_wire_in_a_field_is_solved() -> None:
    """Heat reaches far above the listed states: the operator must be right there too."""
    section = Section(Circle(diameter_nm=60.0), "a")
    carriers = Carriers(temperature_K=(300.0,), fermi_level_eV=0.1)
    field = Potential(field_V_per_nm=(0.003, 0.0))
    few = solve(Problem("hot", section, carriers, Accuracy(2, 1e-4), (material("a", 0.0135, 4.1),), potential=field))
    assert few.accuracy_met
    assert few.dispersion.error_bound_eV < 1e-4
    assert few.line_density_per_nm is not None
