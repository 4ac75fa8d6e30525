"""Symmetries: the point groups that geometry gives, never more, and closed under products."""

from __future__ import annotations

import math

import numpy as np
import pytest

from wiresolve.describe.potential import Potential
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Shape, Trapezoid, Triangle
from wiresolve.describe.symmetry import IDENTITY, Symmetry, described, symmetries


def alone(shape: Shape, **more: object) -> Section:
    return Section(shape, "GaAs", **more)  # type: ignore[arg-type]


def regular(count: int, tilt: float = 0.1) -> Polygon:
    angles = tilt + math.tau * np.arange(count) / count
    return Polygon(tuple((10 * math.cos(a), 10 * math.sin(a)) for a in angles))


def stack(kinds: tuple[str, ...], offsets: tuple[float, ...]) -> Section:
    """Sheets one above the other in a round insulator."""
    sheets = [Patch(Rectangle(20, 4), kind, (0, y)) for kind, y in zip(kinds, offsets, strict=True)]
    return Section(Circle(60), "SiO2", patches=tuple(sheets), carriers="excluded")


def checked(symmetry: Symmetry) -> int:
    """The number of maps, after checking that they are a group of orthogonal matrices."""
    maps = np.array(symmetry.maps)
    assert symmetry.maps[0] == IDENTITY
    for one in maps:
        assert one @ one.T == pytest.approx(np.eye(2), abs=1e-12)
        apart = np.abs((one @ maps)[:, None] - maps[None]).max(axis=(2, 3))
        assert ((apart < 1e-9).sum(axis=1) == 1).all()
    return len(maps)


COUNTS = {
    "ellipse": (alone(Ellipse(10, 6)), 4),
    "tilted ellipse with a parallel shell": (alone(Ellipse(10, 6, 17.3), layers=(Layer(2, "AlAs"),)), 4),
    "rectangle": (alone(Rectangle(10, 6)), 4),
    "tilted rectangle": (alone(Rectangle(10, 6, 0, 17.3)), 4),
    "rounded rectangle": (alone(Rectangle(10, 6, 1.5, 17.3)), 4),
    "stadium": (alone(Rectangle(10, 6, 3)), 4),
    "square": (alone(Rectangle(8, 8)), 8),
    "rounded square": (alone(Rectangle(8, 8, 2, 31)), 8),
    "almost a square": (alone(Rectangle(8, 8.00001)), 4),
    "hexagon": (alone(Hexagon(across_flats_nm=20)), 12),
    "rounded hexagon with shells": (
        alone(Hexagon(across_flats_nm=20, corner_radius_nm=2, rotation_deg=9), layers=(Layer(2, "AlAs"),)),
        12,
    ),
    "equilateral": (alone(Triangle(side_nm=10)), 6),
    "rounded equilateral": (alone(Triangle(side_nm=10, corner_radius_nm=1, rotation_deg=-77)), 6),
    "isosceles": (alone(Triangle(base_nm=10, height_nm=6)), 2),
    "trapezoid": (alone(Trapezoid(12, 8, 6)), 2),
    "scalene": (alone(Polygon(((0, 0), (10, 0), (3, 7)))), 1),
    "parallelogram": (alone(Polygon(((0, 0), (10, 0), (13, 6), (3, 6)))), 2),
    "rhombus": (alone(Polygon(((-8, 0), (0, -5), (8, 0), (0, 5)))), 4),
    "heptagon": (alone(regular(7)), 14),
    "regular polygon of 36 sides": (alone(regular(36)), 72),
    "round core in a hexagon": (
        Section(Hexagon(across_flats_nm=30), "AlAs", patches=(Patch(Circle(10), "GaAs"),)),
        12,
    ),
    "core off the centre": (Section(Circle(30), "AlAs", patches=(Patch(Circle(10), "GaAs", (3, 4)),)), 2),
    "one of two equal cores twice": (
        Section(
            Circle(30), "AlAs", patches=(*[Patch(Circle(6), "GaAs", (8, 2))] * 2, Patch(Circle(6), "GaAs", (-8, -2)))
        ),
        2,
    ),
    "two equal cores": (
        Section(Circle(30), "AlAs", patches=(Patch(Circle(6), "GaAs", (8, 2)), Patch(Circle(6), "GaAs", (-8, -2)))),
        4,
    ),
    "two unlike cores": (
        Section(Circle(30), "AlAs", patches=(Patch(Circle(6), "GaAs", (8, 2)), Patch(Circle(6), "InAs", (-8, -2)))),
        2,
    ),
    "two cores of unlike offset": (
        Section(
            Circle(30),
            "AlAs",
            patches=(Patch(Circle(6), "GaAs", (8, 2)), Patch(Circle(6), "GaAs", (-8, -2), offset_eV=0.1)),
        ),
        2,
    ),
    "skew pair of ellipses": (
        Section(
            Circle(40),
            "AlAs",
            patches=(Patch(Ellipse(8, 4, 30), "GaAs", (10, 0)), Patch(Ellipse(8, 4, 30), "GaAs", (-10, 0))),
        ),
        2,
    ),
    "two sheets": (stack(("GaAs", "GaAs"), (-8, 8)), 4),
    "two sheets of unlike material": (stack(("GaAs", "InAs"), (-8, 8)), 2),
    "three sheets painted from one side": (stack(("GaAs", "InAs", "GaAs"), (-8, 0, 8)), 4),
    "three sheets, one too high": (stack(("GaAs", "InAs", "GaAs"), (-8, 0, 8.5)), 2),
    "fin with two sheets": (
        Section(
            Rectangle(60, 20),
            "SiO2",
            patches=(Patch(Rectangle(20, 4), "GaAs", (0, 14)), Patch(Rectangle(20, 4), "GaAs", (0, 22))),
            carriers="excluded",
        ),
        2,
    ),
    "coat on one side": (alone(Rectangle(10, 6), layers=(Layer(2, "AlAs", sides=(("bottom", 0.0),)),)), 2),
    "coat on two neighbours": (
        alone(Rectangle(8, 8), layers=(Layer(2, "AlAs", sides=(("bottom", 0.0), ("left", 0.0))),)),
        2,
    ),
    "coat on opposite sides": (
        alone(Rectangle(8, 8), layers=(Layer(2, "AlAs", sides=(("left", 0.0), ("right", 0.0))),)),
        4,
    ),
    "hole in a hexagon": (Section(Hexagon(across_flats_nm=30), "GaAs", patches=(Patch(Rectangle(6, 6), "void"),)), 4),
    "notch that turns one way": (
        Section(
            Rectangle(20, 20),
            "GaAs",
            patches=tuple(
                Patch(
                    Rectangle(2, 4, 0, angle),
                    "void",
                    (7 * math.cos(at) - 3 * math.sin(at), 7 * math.sin(at) + 3 * math.cos(at)),
                )
                for angle, at in ((0, 0), (90, math.pi / 2), (180, math.pi), (270, 1.5 * math.pi))
            ),
        ),
        4,
    ),
}


@pytest.mark.parametrize("name", COUNTS)
def test_the_group_has_as_many_maps_as_geometry_gives(name: str) -> None:
    section, count = COUNTS[name]
    found = symmetries(section)
    assert not found.continuous
    assert checked(found) == count


def test_round_sections_have_every_map() -> None:
    tube = Section(Circle(10), "void", layers=(Layer(5, "GaAs"), Layer(2, "AlAs")), outside="GaAs")
    for section in (alone(Circle(10)), tube, alone(Rectangle(8, 8, 4)), alone(Ellipse(6, 6, 20))):
        found = symmetries(section)
        assert (found.continuous, found.maps) == (True, (IDENTITY,))
        assert described(found) == "circle: every rotation and reflection"
    moved = Section(Circle(30), "AlAs", patches=(Patch(Circle(10), "GaAs", (1e-6, 0)),))
    assert not symmetries(moved).continuous


def test_order_of_painting_breaks_what_outlines_share() -> None:
    """Two crossing bars of unlike material: the later one runs through, so a quarter turn is no symmetry."""
    bars = (Patch(Rectangle(20, 4), "GaAs"), Patch(Rectangle(4, 20), "GaAs"))
    alike = Section(Circle(40), "AlAs", patches=bars)
    assert checked(symmetries(alike)) == 8
    unlike = Section(Circle(40), "AlAs", patches=(bars[0], Patch(Rectangle(4, 20), "InAs")))
    assert checked(symmetries(unlike)) == 4
    # A piece of another kind painted between two equal ones that it overlaps covers one and is covered by the other.
    between = (
        Patch(Rectangle(10, 4), "GaAs", (-8, 0)),
        Patch(Rectangle(10, 4), "InAs"),
        Patch(Rectangle(10, 4), "GaAs", (8, 0)),
    )
    assert checked(symmetries(Section(Circle(60), "AlAs", patches=between))) == 2
    apart = tuple(Patch(patch.shape, patch.material, (1.25 * patch.center_nm[0], 0)) for patch in between)
    assert checked(symmetries(Section(Circle(60), "AlAs", patches=apart))) == 4


def test_the_centre_is_found() -> None:
    fin = COUNTS["coat on two neighbours"][0]
    # Square of 8 at the origin and its coated outline of 10 about (1, 1): the mean by area is 100/164 along both.
    assert symmetries(fin).center_nm == pytest.approx((100 / 164, 100 / 164))
    assert symmetries(COUNTS["tilted rectangle"][0]).center_nm == (0.0, 0.0)
    maps = symmetries(fin).maps
    assert maps[1] == pytest.approx(np.array([[0.0, 1.0], [1.0, 0.0]]))


def test_a_field_leaves_what_keeps_its_direction() -> None:
    up = Potential(field_V_per_nm=(0.0, 0.01))
    assert symmetries(alone(Circle(10)), up).maps == (IDENTITY, ((-1.0, 0.0), (0.0, 1.0)))
    assert symmetries(alone(Hexagon(across_flats_nm=20)), up).maps == (IDENTITY, ((-1.0, 0.0), (0.0, 1.0)))
    slanted = Potential(field_V_per_nm=(0.01, 0.003))
    found = symmetries(alone(Circle(10)), slanted)
    assert checked(found) == 2
    assert np.array(found.maps[1]) @ (0.01, 0.003) == pytest.approx((0.01, 0.003))
    assert checked(symmetries(alone(Rectangle(10, 6)), slanted)) == 1
    assert checked(symmetries(alone(Rectangle(10, 6)), Potential(field_V_per_nm=(0.0, 0.0)))) == 4
    turned = math.radians(17.3)
    along = Potential(field_V_per_nm=(0.01 * math.cos(turned), 0.01 * math.sin(turned)))
    assert checked(symmetries(COUNTS["tilted rectangle"][0], along)) == 2


def test_a_well_leaves_what_keeps_the_axes() -> None:
    well = Potential(harmonic_eV=(0.005, 0.005))
    diagonal = {IDENTITY, ((-1.0, 0.0), (0.0, -1.0)), ((1.0, 0.0), (0.0, -1.0)), ((-1.0, 0.0), (0.0, 1.0))}
    assert set(symmetries(alone(Circle(10)), well).maps) == diagonal
    assert set(symmetries(alone(Hexagon(across_flats_nm=20)), well).maps) == diagonal
    assert checked(symmetries(COUNTS["tilted rectangle"][0], well)) == 2
    assert checked(symmetries(COUNTS["coat on two neighbours"][0], well)) == 1
    # The centre lies on the y axis, about which the well is even.
    assert checked(symmetries(COUNTS["coat on one side"][0], well)) == 2
    both = Potential(harmonic_eV=(0.005, 0.002), field_V_per_nm=(0.01, 0.0))
    assert symmetries(alone(Circle(10)), both).maps == (IDENTITY, ((1.0, 0.0), (0.0, -1.0)))


def test_of_a_function_nothing_is_claimed() -> None:
    anything = Potential(function=lambda x, y: 0.0 * x, name="flat")
    assert symmetries(alone(Circle(10)), anything) == Symmetry((0.0, 0.0), False, (IDENTITY,))


@pytest.mark.parametrize("angle", [0.0, 12.0, 45.0, 90.0, 133.7])
def test_the_group_turns_with_the_section(angle: float) -> None:
    still = symmetries(alone(Trapezoid(12, 8, 6)))
    turned = symmetries(alone(Trapezoid(12, 8, 6, rotation_deg=angle)))
    c, s = math.cos(math.radians(angle)), math.sin(math.radians(angle))
    turn = np.array([[c, -s], [s, c]])
    assert np.array(turned.maps[1]) == pytest.approx(turn @ np.array(still.maps[1]) @ turn.T, abs=1e-9)


def test_in_words() -> None:
    assert described(symmetries(alone(Hexagon(across_flats_nm=20)))) == "sixfold with reflections (12 operations)"
    assert described(symmetries(COUNTS["scalene"][0])) == "none"
    assert described(symmetries(COUNTS["trapezoid"][0])) == "one mirror line, at 90 deg from x (2 operations)"
    assert described(symmetries(COUNTS["parallelogram"][0])) == "twofold without reflections (2 operations)"
    assert described(symmetries(COUNTS["heptagon"][0])) == "7-fold with reflections (14 operations)"
