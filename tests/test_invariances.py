"""What must not change an energy: turning, mirroring, scaling, units, and how equal material is divided.

Each pair of descriptions is meshed and solved on its own; the energies must agree within the two error bars, and the
bars are small.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Potential, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Trapezoid, Triangle
from wiresolve.describe.wirefile import parse
from wiresolve.result import Result
from wiresolve.solve import solve

ACCURACY_eV = 1e-7
WELL = Material.given("well", electron_mass=0.067, conduction_edge_eV=0.0)
BARRIER = Material.given("barrier", electron_mass=0.11, conduction_edge_eV=0.35)
COLD = Carriers(temperature_K=(4.2,))
SCALENE = ((0.0, 0.0), (17.0, 2.0), (5.0, 11.0))
L_CORNERS = ((0.0, 0.0), (8.0, 0.0), (8.0, 9.0), (-7.0, 9.0), (-7.0, -8.0), (0.0, -8.0))


def wire(
    section: Section,
    *materials: Material,
    potential: Potential | None = None,
    count: int = 6,
    accuracy_eV: float = ACCURACY_eV,
) -> Problem:
    return Problem(
        title="invariance",
        section=section,
        carriers=COLD,
        accuracy=Accuracy(subbands=count, energy_eV=accuracy_eV),
        materials=materials or (WELL, BARRIER),
        potential=potential,
    )


def solved(problem: Problem) -> Result:
    result = solve(problem)
    assert result.accuracy_met
    assert result.states_missed == 0
    assert (result.errors_eV <= problem.accuracy.energy_eV).all()
    return result


def assert_same(first: Problem, *others: Problem, scale: float = 1.0, mass_scale: float = 1.0) -> None:
    """Energies of the others are those of the first times `scale`, axial masses times `mass_scale`, levels the same."""
    one = solved(first)
    for problem in others:
        other = solved(problem)
        apart = np.abs(other.energies_eV - scale * one.energies_eV)
        assert (apart <= scale * one.errors_eV + other.errors_eV).all(), apart
        assert [s.level for s in other.subbands] == [s.level for s in one.subbands]
        for a, b in zip(one.subbands, other.subbands, strict=True):
            assert a.axial_mass is not None and a.axial_mass_error is not None
            assert b.axial_mass is not None and b.axial_mass_error is not None
            wide = mass_scale * a.axial_mass_error + b.axial_mass_error + 1e-9 * b.axial_mass
            assert abs(b.axial_mass - mass_scale * a.axial_mass) <= wide


def tensor(*, lean_deg: float = 0.0) -> np.ndarray:
    """A positive inverse mass, oblique to x, y and the axis, turned about the axis."""
    c, s = math.cos(math.radians(lean_deg)), math.sin(math.radians(lean_deg))
    turn = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])
    return turn @ np.array([[9.0, 1.5, 2.0], [1.5, 5.0, -1.0], [2.0, -1.0, 7.0]]) @ turn.T


def leaning(inverse_mass: np.ndarray, name: str = "leaning", edge_eV: float = 0.0) -> Material:
    return Material.given(name, inverse_mass=inverse_mass.tolist(), conduction_edge_eV=edge_eV)


# Turned and mirrored


def test_a_turned_core_and_shell() -> None:
    def turned(rotation: float) -> Problem:
        core = Hexagon(across_flats_nm=12.0, rotation_deg=rotation)
        layer = Layer(thickness_nm=4.0, material="barrier")
        return wire(Section(shape=core, material="well", layers=(layer,)), count=1)

    assert_same(turned(0.0), turned(17.0))


def test_a_turned_section_with_its_mass_and_field() -> None:
    def turned(angle_deg: float) -> Problem:
        c, s = math.cos(math.radians(angle_deg)), math.sin(math.radians(angle_deg))
        field = (0.004 * c - 0.002 * s, 0.004 * s + 0.002 * c)
        section = Section(shape=Ellipse(width_nm=18.0, height_nm=11.0, rotation_deg=angle_deg), material="leaning")
        return wire(section, leaning(tensor(lean_deg=angle_deg)), potential=Potential(field_V_per_nm=field))

    assert_same(turned(0.0), turned(31.0))


def test_turning_the_mass_alone_is_seen() -> None:
    section = Section(shape=Ellipse(width_nm=18.0, height_nm=11.0), material="leaning")
    one, other = (solved(wire(section, leaning(tensor(lean_deg=angle)), count=1)) for angle in (0.0, 31.0))
    assert abs(one.energies_eV[0] - other.energies_eV[0]) > 1e3 * ACCURACY_eV


def test_a_turned_patch_around_the_middle() -> None:
    def turned(angle_deg: float) -> Problem:
        c, s = math.cos(math.radians(angle_deg)), math.sin(math.radians(angle_deg))
        patch = Patch(
            shape=Rectangle(width_nm=7.0, height_nm=5.0, rotation_deg=10.0 + angle_deg),
            material="well",
            center_nm=(3.0 * c - 1.0 * s, 3.0 * s + 1.0 * c),
        )
        return wire(Section(shape=Circle(diameter_nm=22.0), material="barrier", patches=(patch,)), count=2)

    assert_same(turned(0.0), turned(53.0))


def test_a_mirrored_section_with_its_mass_and_field() -> None:
    flip = np.diag([-1.0, 1.0, 1.0])

    def mirrored(sign: float) -> Problem:
        inverse_mass = tensor() if sign > 0 else flip @ tensor() @ flip
        corners = tuple((sign * x, y) for x, y in SCALENE)
        section = Section(shape=Polygon(points_nm=corners), material="leaning")
        return wire(section, leaning(inverse_mass), potential=Potential(field_V_per_nm=(sign * 0.005, 0.003)))

    assert_same(mirrored(1.0), mirrored(-1.0))


def test_a_mirrored_section_of_two_materials() -> None:
    def mirrored(sign: float) -> Problem:
        patch = Patch(shape=Circle(diameter_nm=6.0), material="barrier", center_nm=(sign * 3.0, 1.0))
        shape = Trapezoid(bottom_nm=20.0, top_nm=12.0, height_nm=12.0)
        return wire(Section(shape=shape, material="well", patches=(patch,)))

    assert_same(mirrored(1.0), mirrored(-1.0))


def test_a_section_turned_about_its_axis_in_space() -> None:
    # A wire seen from its other end: x and the axis change sign, and with them the terms between them and y.
    flip = np.diag([-1.0, 1.0, -1.0])
    corners = tuple((-x, y) for x, y in SCALENE)
    assert_same(
        wire(Section(shape=Polygon(points_nm=SCALENE), material="leaning"), leaning(tensor())),
        wire(Section(shape=Polygon(points_nm=corners), material="leaning"), leaning(flip @ tensor() @ flip)),
    )


# Scaled


def test_energies_go_as_one_over_the_square_of_the_size() -> None:
    def scaled(by: float) -> Problem:
        corners = tuple((by * x, by * y) for x, y in L_CORNERS)
        section = Section(shape=Polygon(points_nm=corners), material="well")
        return wire(section, WELL, accuracy_eV=ACCURACY_eV / by**2)

    assert_same(scaled(1.0), scaled(3.0), scale=1 / 9)


def test_size_and_barrier_scale_together() -> None:
    def scaled(by: float) -> Problem:
        barrier = Material.given("barrier", electron_mass=0.11, conduction_edge_eV=0.35 / by**2)
        layer = Layer(thickness_nm=5.0 * by, material="barrier")
        section = Section(shape=Circle(diameter_nm=12.0 * by), material="well", layers=(layer,))
        return wire(section, WELL, barrier, accuracy_eV=ACCURACY_eV / by**2)

    assert_same(scaled(1.0), scaled(1.7), scale=1.7**-2)


def test_masses_and_barrier_scale_together() -> None:
    def scaled(by: float) -> Problem:
        well = Material.given("well", electron_mass=0.067 * by, conduction_edge_eV=0.0)
        barrier = Material.given("barrier", electron_mass=0.11 * by, conduction_edge_eV=0.35 / by)
        layer = Layer(thickness_nm=5.0, material="barrier")
        section = Section(shape=Ellipse(width_nm=13.0, height_nm=9.0), material="well", layers=(layer,))
        return wire(section, well, barrier, count=2, accuracy_eV=ACCURACY_eV / by)

    assert_same(scaled(1.0), scaled(2.5), scale=1 / 2.5, mass_scale=2.5)


def test_a_field_scales_with_size_and_mass() -> None:
    # hbar^2/(m L^2) and e F L keep their ratio
    def scaled(length: float, mass: float) -> Problem:
        field = 0.01 / (length**3 * mass)
        well = Material.given("well", electron_mass=0.067 * mass, conduction_edge_eV=0.0)
        section = Section(shape=Circle(diameter_nm=20.0 * length), material="well")
        potential = Potential(field_V_per_nm=(field, 0.5 * field))
        return wire(section, well, potential=potential, accuracy_eV=ACCURACY_eV / (length**2 * mass))

    assert_same(scaled(1.0, 1.0), scaled(1.3, 2.0), scale=1 / (1.3**2 * 2.0), mass_scale=2.0)


# Described in another way

FILE = """
title = "units"
[section]
shape = "ellipse"
width = "{width}"
height = "{height}"
material = "well"
[[section.layers]]
thickness = "{thickness}"
material = "barrier"
offset = "{offset}"
[materials.well]
electron_mass = 0.067
conduction_edge = "0 eV"
[materials.barrier]
electron_mass = 0.11
conduction_edge = "0.3 eV"
[carriers]
temperature = "4.2 K"
[accuracy]
subbands = 4
energy = "{energy}"
"""


def test_nanometres_and_metres() -> None:
    spellings = (
        {"width": "14 nm", "height": "10 nm", "thickness": "3 nm", "offset": "0.05 eV", "energy": "1e-7 eV"},
        {"width": "1.4e-8 m", "height": "1e-8 m", "thickness": "30 Angstrom", "offset": "50 meV", "energy": "0.1 ueV"},
    )
    assert_same(*(parse(FILE.format(**words), Path()) for words in spellings))


def test_one_shape_drawn_in_other_words() -> None:
    angles = 2 * np.pi * np.arange(6) / 6 + 0.3
    corners = tuple((40.0 + 8.0 * math.cos(a), -25.0 + 8.0 * math.sin(a)) for a in angles)
    shapes = (
        Hexagon(across_corners_nm=16.0),
        Polygon(points_nm=corners),
        Polygon(points_nm=corners[::-1]),
        Polygon(points_nm=corners[2:] + corners[:2], rotation_deg=-11.0),
    )
    assert_same(*(wire(Section(shape=shape, material="well"), WELL) for shape in shapes))


def test_width_and_height_of_a_turned_rectangle() -> None:
    shapes = Rectangle(width_nm=17.0, height_nm=9.0, rotation_deg=90.0), Rectangle(width_nm=9.0, height_nm=17.0)
    assert_same(*(wire(Section(shape=shape, material="well"), WELL) for shape in shapes))


def test_an_equilateral_triangle_by_base_and_height() -> None:
    shapes = Triangle(side_nm=18.0), Triangle(base_nm=18.0, height_nm=9.0 * math.sqrt(3))
    assert_same(*(wire(Section(shape=shape, material="well"), WELL) for shape in shapes))


# Divided in another way


def test_a_disk_divided_in_two_of_equal_material() -> None:
    whole = Section(shape=Circle(diameter_nm=18.0), material="well")
    ringed = Section(
        shape=Circle(diameter_nm=11.0), material="well", layers=(Layer(thickness_nm=3.5, material="well"),)
    )
    square = Patch(
        shape=Rectangle(width_nm=5.0, height_nm=7.0, rotation_deg=20.0), material="well", center_nm=(2.0, 1.0)
    )
    overlapping = Patch(shape=Circle(diameter_nm=6.0), material="well", center_nm=(-1.0, -3.0))
    sections = [whole, ringed, replace(whole, patches=(square,)), replace(whole, patches=(square, overlapping))]
    assert_same(*(wire(section, WELL) for section in sections))


def test_a_barrier_divided_in_two_of_equal_material() -> None:
    def layers(*thicknesses: float) -> Problem:
        shells = tuple(Layer(thickness_nm=t, material="barrier") for t in thicknesses)
        return wire(Section(shape=Hexagon(across_flats_nm=12.0), material="well", layers=shells), count=1)

    assert_same(layers(5.0), layers(1.5, 3.5))


def test_permuted_layers_of_equal_material() -> None:
    def layers(order: Sequence[int]) -> Problem:
        # three of the well's material, then a barrier: in which order the three stand does not matter
        thicknesses = [1.0, 2.0, 3.0]
        shells = tuple(Layer(thickness_nm=thicknesses[i], material="well") for i in order)
        outer = Layer(thickness_nm=3.0, material="barrier")
        return wire(Section(shape=Circle(diameter_nm=8.0), material="barrier", layers=(*shells, outer)))

    assert_same(layers((0, 1, 2)), layers((2, 0, 1)))


def test_exchanging_unequal_layers_is_seen() -> None:
    def layers(*names: str) -> Problem:
        shells = tuple(Layer(thickness_nm=3.0, material=name) for name in names)
        return wire(Section(shape=Circle(diameter_nm=8.0), material="well", layers=shells), count=1)

    one, other = solved(layers("well", "barrier")), solved(layers("barrier", "well"))
    assert abs(one.energies_eV[0] - other.energies_eV[0]) > 1e3 * ACCURACY_eV


def test_the_order_of_patches_that_do_not_touch() -> None:
    left = Patch(shape=Circle(diameter_nm=5.0), material="barrier", center_nm=(-4.0, 1.0))
    right = Patch(shape=Ellipse(width_nm=4.0, height_nm=3.0), material="void", center_nm=(4.0, -1.0))
    section = Section(shape=Rectangle(width_nm=18.0, height_nm=10.0), material="well")
    orders = (left, right), (right, left)
    assert_same(*(wire(replace(section, patches=order), count=3) for order in orders))


def test_a_core_in_a_shell_is_a_patch_in_a_disk() -> None:
    layered = Section(
        shape=Circle(diameter_nm=12.0), material="well", layers=(Layer(thickness_nm=5.0, material="barrier"),)
    )
    patched = Section(
        shape=Circle(diameter_nm=22.0),
        material="barrier",
        patches=(Patch(shape=Circle(diameter_nm=12.0), material="well"),),
    )
    assert_same(wire(layered), wire(patched))


def test_a_part_that_keeps_carriers_out_is_a_hole() -> None:
    hole = Patch(shape=Ellipse(width_nm=6.0, height_nm=4.0), material="void", center_nm=(2.0, 1.0))
    section = Section(shape=Circle(diameter_nm=18.0), material="well")
    closed = replace(hole, material="barrier", carriers="excluded")
    assert_same(wire(replace(section, patches=(hole,))), wire(replace(section, patches=(closed,))))


# Energies from another zero


def test_a_shift_of_all_band_edges() -> None:
    section = Section(
        shape=Circle(diameter_nm=13.0), material="well", layers=(Layer(thickness_nm=4.0, material="barrier"),)
    )

    def shifted(by_eV: float) -> Problem:
        edges = tuple(
            Material.given(
                m.name, electron_mass=m.electron_mass, conduction_edge_eV=(m.conduction_edge_eV or 0.0) + by_eV
            )
            for m in (WELL, BARRIER)
        )
        return wire(section, *edges)

    offset = replace(section, offset_eV=-0.3, layers=(replace(section.layers[0], offset_eV=-0.3),))
    problems = (shifted(0.0), shifted(0.7), wire(offset))
    assert_same(*problems)
    assert [problem.energy_zero()[1] for problem in problems] == pytest.approx([0.0, 0.7, -0.3], abs=1e-14)


def test_a_constant_potential_moves_all_energies_by_itself() -> None:
    section = Section(shape=Circle(diameter_nm=15.0), material="well")
    lifted = wire(section, WELL, potential=Potential(function=lambda x, y: 0.25 + 0 * x))
    one, other = solved(wire(section, WELL)), solved(lifted)
    assert (np.abs(other.energies_eV - one.energies_eV - 0.25) <= one.errors_eV + other.errors_eV).all()


def test_opposite_fields_on_a_section_that_a_half_turn_leaves_alone() -> None:
    patch = Patch(shape=Ellipse(width_nm=9.0, height_nm=4.0, rotation_deg=25.0), material="barrier")
    section = Section(shape=Ellipse(width_nm=18.0, height_nm=14.0), material="well", patches=(patch,))
    fields = [Potential(field_V_per_nm=(sign * 0.004, sign * -0.009)) for sign in (1, -1)]
    assert_same(*(wire(section, potential=field, count=4) for field in fields))


def test_opposite_fields_on_a_triangle_differ() -> None:
    section = Section(shape=Triangle(side_nm=20.0), material="well")
    up, down = (
        solved(wire(section, WELL, potential=Potential(field_V_per_nm=(0.0, f)), count=1)) for f in (0.01, -0.01)
    )
    assert abs(up.energies_eV[0] - down.energies_eV[0]) > 1e3 * ACCURACY_eV


def test_a_field_given_as_a_function() -> None:
    section = Section(shape=Triangle(side_nm=20.0), material="well")
    assert_same(
        wire(section, WELL, potential=Potential(field_V_per_nm=(0.004, -0.01))),
        wire(section, WELL, potential=Potential(function=lambda x, y: 0.004 * x - 0.01 * y)),
    )
