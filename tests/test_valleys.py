"""Several groups of valleys in one wire: which symmetry joins them, one list of all, and what follows for transport."""

from __future__ import annotations

import numpy as np
import pytest

from wiresolve.describe.material import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Rectangle, Shape
from wiresolve.describe.valley import Valley
from wiresolve.errors import InputError
from wiresolve.fem import eigen
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.pencil import build
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

LONG, ACROSS = 0.916, 0.19
DELTA = Valley("Delta", longitudinal_mass=LONG, transverse_mass=ACROSS, axis=(1, 0, 0))
SILICON = Material("silicon", valleys=(DELTA,), conduction_edge_eV=0.0, crystal="diamond")
ALONG_110 = Orientation((1, 1, 0), (0, 0, 1))


def problem(
    shape: Shape,
    materials: tuple[Material, ...] = (SILICON,),
    orientation: Orientation | None = ALONG_110,
    count: int = 8,
    accuracy: float = 1e-5,
    layers: tuple[Layer, ...] = (),
    temperature: float = 4.2,
) -> Problem:
    section = Section(shape, materials[0].name, layers)
    carriers = Carriers(temperature_K=(temperature,))
    return Problem("valleys", section, carriers, Accuracy(count, accuracy), materials, orientation)


def degeneracies(shape: Shape, orientation: Orientation) -> list[int]:
    return sorted(g.degeneracy for g in Wire(problem(shape, orientation=orientation)).groups)


@pytest.mark.parametrize(
    ("shape", "axis", "up", "expected"),
    [
        (Circle(diameter_nm=6.0), (1, 0, 0), (0, 0, 1), [2, 4]),
        (Rectangle(width_nm=6.0, height_nm=6.0), (1, 0, 0), (0, 0, 1), [2, 4]),  # a square turns by 90 degrees
        (Rectangle(width_nm=8.0, height_nm=6.0), (1, 0, 0), (0, 0, 1), [2, 2, 2]),  # a rectangle does not
        (Rectangle(width_nm=8.0, height_nm=6.0), (1, 0, 0), (0, 1, 1), [2, 4]),  # its mirror swaps [010] and [001]
        (Rectangle(width_nm=6.0, height_nm=6.0, rotation_deg=10.0), (1, 0, 0), (0, 0, 1), [2, 4]),
        (Circle(diameter_nm=6.0), (1, 1, 1), (1, -1, 0), [6]),
        (Hexagon(across_flats_nm=6.0), (1, 1, 1), (1, -1, 0), [6]),
        (Ellipse(width_nm=8.0, height_nm=6.0), (1, 1, 1), (1, -1, 0), [2, 4]),
        (Ellipse(width_nm=8.0, height_nm=6.0, rotation_deg=10.0), (1, 1, 1), (1, -1, 0), [2, 2, 2]),
    ],
)
def test_valleys_are_grouped_by_the_symmetry_of_section_and_crystal(
    shape: Shape, axis: tuple[int, int, int], up: tuple[int, int, int], expected: list[int]
) -> None:
    assert degeneracies(shape, Orientation(axis, up)) == expected


def test_groups_that_a_symmetry_joins_have_equal_levels() -> None:
    """A whisker of a difference breaks the square: the same valleys, now in three groups, lie at the same energies."""
    orientation = Orientation((1, 0, 0), (0, 0, 1))
    whole = solve(problem(Rectangle(width_nm=6.0, height_nm=6.0), orientation=orientation, count=6))
    split = solve(problem(Rectangle(width_nm=6.0 + 1e-6, height_nm=6.0), orientation=orientation, count=9))
    for band in whole.subbands[:3]:
        alike = [s for s in split.subbands if abs(s.energy_eV - band.energy_eV) < 2e-5]
        assert sum(s.valley_degeneracy for s in alike) >= band.valley_degeneracy
    assert {s.valley_degeneracy for s in split.subbands} == {2}


def test_a_sheet_of_silicon_has_the_two_ladders_of_the_closed_form() -> None:
    """5 x 25 nm on (001) along [110]: width mass 0.315 and axial mass 0.553 of the oblique valleys (2 ml mt/(ml + mt)
    and (ml + mt)/2; A. Rahman, M. S. Lundstrom, A. W. Ghosh, J. Appl. Phys. 97, 053702 (2005))."""
    width, height, count = 25.0, 5.0, 24
    result = solve(problem(Rectangle(width_nm=width, height_nm=height), count=count, accuracy=1e-6))
    oblique = 2 * LONG * ACROSS / (LONG + ACROSS)
    m, n = np.meshgrid(np.arange(1, 30), np.arange(1, 6), indexing="ij")
    energies = {}
    for label, across, up in (("Delta [100] [010]", oblique, ACROSS), ("Delta [001]", ACROSS, LONG)):
        levels = HBAR2_OVER_2M0 * np.pi**2 * ((m / width) ** 2 / across + (n / height) ** 2 / up)
        energies[label] = np.sort(levels.ravel())
    merged = np.sort(np.concatenate(list(energies.values())))[:count]
    np.testing.assert_allclose(result.energies_eV, merged, atol=1e-6)
    for label, exact in energies.items():
        found = [s for s in result.subbands if s.valley == label]
        np.testing.assert_allclose([s.energy_eV for s in found], exact[: len(found)], atol=1e-6)
        mass = (LONG + ACROSS) / 2 if label != "Delta [001]" else ACROSS
        assert [s.axial_mass for s in found] == pytest.approx([mass] * len(found), rel=1e-9)
        assert {s.valley_degeneracy for s in found} == {4 if label != "Delta [001]" else 2}
    assert oblique == pytest.approx(0.315, abs=5e-4)
    assert pytest.approx(0.553, abs=1e-9) == (LONG + ACROSS) / 2


def test_the_list_is_complete_over_all_valleys() -> None:
    """Every channel is counted up to the highest listed energy, those without a listed state too."""
    ready = Wire(problem(Circle(diameter_nm=6.0), count=7))
    found = certify(ready.draw, ready.channels, 7, 1e-5)
    assert found.missed == 0
    assert sum(found.listed) == 7
    for channel, solved, listed in zip(found.channels, found.solved, found.listed, strict=True):
        assert solved.count_below(float(found.energy_eV[-1]) + 1e-9) == listed, channel.label


def test_a_lost_state_of_one_valley_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    ready = Wire(problem(Circle(diameter_nm=6.0), count=7))
    whole = certify(ready.draw, ready.channels, 7, 1e-5)
    honest, calls = eigen.lowest, []

    def blind(*given: object, **more: object) -> tuple[np.ndarray, np.ndarray]:
        energy, states = honest(*given, **more)  # type: ignore[arg-type]
        calls.append(len(energy))
        if len(calls) > 2:
            return energy, states
        return np.delete(energy, 1), np.delete(states, 1, axis=1)

    monkeypatch.setattr(eigen, "lowest", blind)
    found = certify(ready.draw, ready.channels, 7, 1e-5)
    assert found.missed == 0
    np.testing.assert_allclose(found.energy_eV, whole.energy_eV, atol=2e-5)


def test_conductance_counts_every_valley() -> None:
    """At T = 0 the staircase rises by spin times valley at each minimum, over all valleys merged."""
    result = solve(problem(Circle(diameter_nm=6.0), count=8, accuracy=1e-6))
    fermi = (result.energies_eV[:-1] + result.energies_eV[1:]) / 2
    steps = np.cumsum([s.valley_degeneracy for s in result.subbands])[:-1]
    np.testing.assert_allclose(result.conductance_at(fermi, 0.0), steps, atol=1e-12)


def test_line_density_is_the_sum_over_valleys() -> None:
    """Warm and thin: n = sum g sqrt(m kT/2 pi hbar^2) exp((E_F - E)/kT) over all valleys' closed-form levels."""
    width, height, temperature = 9.0, 6.0, 300.0
    result = solve(problem(Rectangle(width_nm=width, height_nm=height), count=10, temperature=temperature))
    m, n = np.meshgrid(np.arange(1, 40), np.arange(1, 40), indexing="ij")
    thermal = 8.617333262e-5 * temperature
    fermi, total = -0.1, 0.0
    oblique = 2 * LONG * ACROSS / (LONG + ACROSS)
    for across, up, mass, count in ((oblique, ACROSS, (LONG + ACROSS) / 2, 4), (ACROSS, LONG, ACROSS, 2)):
        levels = HBAR2_OVER_2M0 * np.pi**2 * ((m / width) ** 2 / across + (n / height) ** 2 / up)
        states = 2 * count / 2 * np.sqrt(mass * thermal / (np.pi * HBAR2_OVER_2M0))
        total += states * np.exp((fermi - levels) / thermal).sum()
    assert result.line_density(fermi, temperature) == pytest.approx(total, rel=2e-3)


def gamma_and_l(gap_eV: float) -> Material:
    """An invented material: a light zone centre, and L valleys `gap_eV` above it."""
    centre = Valley.isotropic(0.05)
    heavy = Valley("L", gap_eV, 1.6, 0.1, (1, 1, 1), zone_boundary=True)
    return Material("mixed", valleys=(centre, heavy), conduction_edge_eV=0.0, crystal="zincblende")


def test_kinds_of_valleys_compete_in_a_small_wire() -> None:
    """The zone centre is lowest in bulk, the L valleys in a thin wire: confinement lifts a light mass more."""
    orientation = Orientation((1, 1, 1), (1, -1, 0))
    wide, thin = (solve(problem(Circle(diameter_nm=d), (gamma_and_l(0.3),), orientation, count=4)) for d in (20.0, 3.5))
    assert wide.subbands[0].valley == "zone centre"
    assert thin.subbands[0].valley.startswith("L ")
    assert thin.subbands[0].valley_degeneracy in (1, 3)


def test_valleys_far_above_cost_nothing_and_are_told() -> None:
    orientation = Orientation((1, 1, 1), (1, -1, 0))
    ready = Wire(problem(Circle(diameter_nm=30.0), (gamma_and_l(0.25),), orientation, count=2))
    found = certify(ready.draw, ready.channels, 2, 1e-5)
    assert [c.valley for c in found.channels] == ["zone centre"]
    assert sorted(c.valley for c, _ in found.above) == ["L", "L"]
    for channel, energy in found.above:
        assert energy > 0.25, channel.label


def without_orientation() -> Result:
    return solve(problem(Circle(diameter_nm=12.0), (gamma_and_l(0.3),), None, count=2))


def test_without_an_orientation_the_zone_centre_alone_is_solved() -> None:
    result = without_orientation()
    assert {s.valley for s in result.subbands} == {"zone centre"}


def test_where_shear_jumps_and_masses_grow_both_ways_of_treating_it_agree() -> None:
    """Two materials of equal tensors and unlike alpha: a phase factor removes the shear exactly; kept in the operator
    it must leave energies at its minimum and the band there as they are."""
    first = Valley("Delta", 0.0, LONG, ACROSS, (1, 0, 0), nonparabolicity_per_eV=0.5)
    second = Valley("Delta", 0.0, LONG, ACROSS, (1, 0, 0), nonparabolicity_per_eV=1.5)
    core = Material("core", valleys=(first,), conduction_edge_eV=0.0, crystal="diamond")
    shell = Material("shell", valleys=(second,), conduction_edge_eV=0.2, crystal="diamond")
    wire = Wire(problem(Circle(diameter_nm=6.0), (core, shell), layers=(Layer(2.0, "shell"),)))
    group = next(g for g in wire.groups if g.degeneracy == 4)
    with Mesher(wire.draw(0.0)) as mesher:
        mesh, _ = mesher.mesh(SizeField(1.2, turn_cells=12))
    plain, space = wire.operator(mesh, group), Space(mesh)
    assert plain.by_region[0].quadratic[0, 2, 0, 0] == 0
    tensor = HBAR2_OVER_2M0 * group.inverse_mass["core"][:, :, None, None]
    from dataclasses import replace

    sheared = replace(plain, by_region=tuple(replace(c, quadratic=tensor) for c in plain.by_region))
    cells = phase_space(space, plain)
    straight, leaning = (local_mass.family(space, operator, cells, 4) for operator in (plain, sheared))
    assert leaning.sheared
    assert not straight.sheared
    for k in (0.0, 0.3, 0.8):
        # The phase factor is exp(-i k s.r): it multiplies states, which polynomials of a finite degree follow closely.
        one, other = (family.moved(k).lowest(4, cells).energy_eV for family in (straight, leaning))
        np.testing.assert_allclose(one, other, atol=2e-6)


def test_build_keeps_the_relation_to_one_edge_and_alpha() -> None:
    wire = Wire(problem(Circle(diameter_nm=6.0)))
    with Mesher(wire.draw(0.0)) as mesher:
        mesh, _ = mesher.mesh(SizeField(2.0))
    operator = wire.operator(mesh)
    assert operator.relation is not None
    assert operator.relation.alpha_per_eV == 0.0
    assert build(Space(mesh), operator).uniform_axial_eV_nm2 == pytest.approx(2 * HBAR2_OVER_2M0 / (LONG + ACROSS))


def turned_problem(angle_deg: float, nonparabolicity: float | None = None) -> Problem:
    """An ellipse of two materials whose valleys lean against all axes, section and tensors turned about the wire."""
    c, s = np.cos(np.radians(angle_deg)), np.sin(np.radians(angle_deg))
    turn = np.array([[c, -s, 0], [s, c, 0], [0, 0, 1]])
    ready = Wire(problem(Circle(diameter_nm=6.0), orientation=Orientation((1, 1, -2), (1, -1, 0))))
    valleys = tuple(
        Valley(
            f"valley {i + 1}",
            inverse_mass=tuple(tuple(row) for row in (turn @ g.inverse_mass["silicon"] @ turn.T).tolist()),
            degeneracy=g.degeneracy,
            nonparabolicity_per_eV=nonparabolicity,
        )
        for i, g in enumerate(ready.groups)
    )
    material = Material("turned", valleys=valleys, conduction_edge_eV=0.0)
    shape = Ellipse(width_nm=8.0, height_nm=5.0, rotation_deg=angle_deg)
    return problem(shape, (material,), None, count=8, accuracy=2e-9)


@pytest.mark.parametrize("nonparabolicity", [None, 0.5])
def test_section_and_crystal_turned_together_by_any_angle(nonparabolicity: float | None) -> None:
    upright = solve(turned_problem(0.0, nonparabolicity))
    for angle in (17.3, 101.0):
        turned = solve(turned_problem(angle, nonparabolicity))
        np.testing.assert_allclose(turned.energies_eV, upright.energies_eV, atol=1e-9)
        masses = [[s.axial_mass for s in r.subbands] for r in (upright, turned)]
        np.testing.assert_allclose(masses[1], masses[0], rtol=1e-9)
        assert [s.valley for s in turned.subbands] == [s.valley for s in upright.subbands]


def test_a_tensor_mass_is_a_stretched_section() -> None:
    """x -> x sqrt(m_x): a circle with masses m_x, m_y is an ellipse with one mass, to 1e-8 of each energy."""
    tensor = ((1 / 0.2, 0.0, 0.0), (0.0, 1 / 0.8, 0.0), (0.0, 0.0, 1 / 0.5))
    leaning = Material("a", valleys=(Valley("zone centre", inverse_mass=tensor),), conduction_edge_eV=0.0)
    round_one = solve(problem(Circle(diameter_nm=6.0), (leaning,), None, accuracy=1e-9))
    plain = Material("b", valleys=(Valley.isotropic(0.2),), conduction_edge_eV=0.0)
    stretched = solve(problem(Ellipse(width_nm=6.0, height_nm=12.0), (plain,), None, accuracy=1e-9))
    np.testing.assert_allclose(round_one.energies_eV, stretched.energies_eV, rtol=1e-8)


UNLIKE = Valley("X", longitudinal_mass=0.9, transverse_mass=0.2, axis=(1, 0, 0))


@pytest.mark.parametrize(
    "other",
    [
        Valley("X", longitudinal_mass=0.9, transverse_mass=0.2, axis=(1, 0, 0), zone_boundary=True),
        Valley("X", longitudinal_mass=0.9, transverse_mass=0.2, axis=(1, 1, 1)),
        Valley("X", longitudinal_mass=0.3, transverse_mass=0.3),
        Valley("X", inverse_mass=((5.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 5.0))),
    ],
)
def test_unlike_valleys_of_one_name_are_refused(other: Valley) -> None:
    first = Material("first", valleys=(UNLIKE,), conduction_edge_eV=0.0, crystal="diamond")
    second = Material("second", valleys=(other,), conduction_edge_eV=0.3, crystal="diamond")
    wire = Wire(problem(Circle(diameter_nm=6.0), (first, second), layers=(Layer(2.0, "second"),)))
    with pytest.raises(InputError, match=r"(unlike|differs)"):
        _ = wire.groups


def test_a_valley_that_continues_all_others_has_no_direction() -> None:
    with pytest.raises(InputError, match="no direction of its own"):
        Valley("any", longitudinal_mass=0.9, transverse_mass=0.2, axis=(1, 0, 0))
