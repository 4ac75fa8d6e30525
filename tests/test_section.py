"""The section: what is painted over what, names, partial coats, what is hidden, and the outline around everything."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from wiresolve.describe.outside import outside_loop
from wiresolve.describe.section import Layer, Patch, Piece, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Triangle
from wiresolve.errors import InputError


def core_shell() -> Section:
    return Section(Circle(16), "GaAs", layers=(Layer(8, "Al0.3Ga0.7As"), Layer(2, "GaAs", carriers="excluded")))


def test_painting_goes_inwards_and_then_over() -> None:
    section = Section(
        Circle(16),
        "GaAs",
        layers=core_shell().layers,
        patches=(Patch(Circle(4), "void", (3, 0)), Patch(Circle(2), "InAs", (3, 0), offset_eV=0.1)),
        carriers="excluded",
        offset_eV=-0.02,
    )
    names = [piece.name for piece in section.pieces()]
    assert names == ["layer 2", "layer 1", "core", "patch 1", "patch 2"]
    assert [piece.carriers for piece in section.pieces()] == [False, True, False, False, True]
    assert [piece.offset_eV for piece in section.pieces()] == [0, 0, -0.02, 0, 0.1]
    assert [piece.loop.is_circle for piece in section.pieces()][:3] == [((0, 0), 18), ((0, 0), 16), ((0, 0), 8)]
    assert section.pieces()[4].loop.centroid == pytest.approx((3, 0))


def test_outermost_layer() -> None:
    assert Section(Circle(16), "GaAs").outermost == "core"
    assert core_shell().outermost == "layer 2"
    assert Section(Circle(16), "GaAs", outside="AlAs").outermost == "outside"
    assert Section(Circle(16), "GaAs", outside="hard wall") == Section(Circle(16), "GaAs")


def test_layers_of_polygons_add_up() -> None:
    split = Section(Hexagon(across_flats_nm=20), "GaAs", layers=(Layer(2, "AlAs"), Layer(3, "AlAs")))
    whole = Section(Hexagon(across_flats_nm=20), "GaAs", layers=(Layer(5, "AlAs"),))
    assert split.pieces()[0].loop.sample(1) == pytest.approx(whole.pieces()[0].loop.sample(1), abs=1e-12)


def test_partial_coats_add_up_side_by_side() -> None:
    first = Layer(2, "AlAs", sides=(("bottom", 0.0), ("side 3", 4.0)))
    section = Section(Rectangle(10, 6), "GaAs", layers=(first, Layer(1, "GaAs")))
    outer = section.pieces()[0].loop.sample(1)
    assert (outer[:, 0].min(), outer[:, 0].max()) == pytest.approx((-8, 8))
    assert (outer[:, 1].min(), outer[:, 1].max()) == pytest.approx((-4, 8))
    inner = section.pieces()[1].loop.sample(1)
    assert (inner[:, 1].min(), inner[:, 1].max()) == pytest.approx((-3, 7))


def test_partial_coat_of_a_rounded_corner() -> None:
    coat = Layer(2, "AlAs", sides=(("bottom", 0.0),))
    core, coated = (
        Rectangle(20, 10, corner_radius_nm=3),
        Section(Rectangle(20, 10, corner_radius_nm=3), "GaAs", (coat,)),
    )
    loop = coated.pieces()[0].loop
    # By hand: the core's lower 3 nm with its roundings, bare; above them 24 by 9 whose upper corners have the radius 5.
    assert loop.area == pytest.approx(20 * 3 + 24 * 9 - (2 - math.pi / 2) * (25 + 9), rel=1e-13)
    assert sorted(math.degrees(angle) for _, angle in loop.corners()) == pytest.approx([90, 90, 270, 270])
    both = Section(core, "GaAs", (coat, Layer(1, "GaAs")))
    assert both.pieces()[0].loop.area == pytest.approx(26 * 14 - (2 - math.pi / 2) * (36 + 16), rel=1e-13)
    assert both.pieces()[0].loop.contains(loop.sample(7) * (1 - 1e-9)).all()
    assert loop.contains(core.loop().sample(7) * (1 - 1e-9)).all()


def test_hidden_pieces_are_found_out() -> None:
    covered = Section(Circle(10), "GaAs", patches=(Patch(Rectangle(11, 11), "InAs"),))
    assert [piece.name for piece in covered.visible()] == ["patch 1"]
    sliver = Section(Circle(10), "GaAs", patches=(Patch(Circle(9.99), "InAs"),))
    assert [piece.name for piece in sliver.visible()] == ["core", "patch 1"]
    halves = (Patch(Rectangle(10, 20), "InAs", (-5, 0)), Patch(Rectangle(10, 20), "InP", (5, 0)))
    assert [p.name for p in Section(Circle(10), "GaAs", patches=halves).visible()] == ["patch 1", "patch 2"]
    split = Section(Circle(10), "GaAs", patches=(halves[0], Patch(Rectangle(9.9, 20), "InP", (5, 0))))
    assert [p.name for p in split.visible()] == ["core", "patch 1", "patch 2"]
    corners = Section(Rectangle(10, 10), "GaAs", patches=(Patch(Circle(14), "InAs"),))
    assert [p.name for p in corners.visible()] == ["core", "patch 1"]
    assert [p.name for p in Section(Rectangle(10, 10), "GaAs", patches=(Patch(Circle(15), "InAs"),)).visible()] == [
        "patch 1"
    ]


def coated(*sides: tuple[str, float]) -> Section:
    return Section(Rectangle(9, 9), "GaAs", (Layer(1, "AlAs", sides=sides),))


@pytest.mark.parametrize(
    ("build", "field", "words"),
    [
        (lambda: Section(Circle(10), "void"), "material", "nothing is left for carriers"),
        (lambda: Section(Circle(10), "GaAs", carriers="excluded"), "material", "nothing is left for carriers"),
        (lambda: Section(Circle(10), "void", outside="GaAs"), "material", "nothing is left for carriers"),
        (lambda: Section(Circle(10), "GaAs", carriers="none"), "carriers", '"admitted", "excluded"'),
        (lambda: Section(Circle(10), "GaAs", offset_eV=math.inf), "offset", "finite"),
        (lambda: Section(Circle(10), "GaAs", offset_eV=90), "offset", "between -20 eV and 20 eV"),
        (lambda: Section(Circle(10), "GaAs", outside="void"), "outside", "hard wall"),
        (lambda: Section(Circle(10), "GaAs", lattice_temperature_K=-1), "lattice_temperature", "between 0 K and 2000"),
        (lambda: Section(Circle(10), "GaAs", patches=(Patch(Circle(11), "void"),)), "patches", "leave nothing"),
        (lambda: Section(Circle(10), "GaAs", (Layer(501, "AlAs"),)), r"layers\[1\].thickness", "50 times the core"),
        (lambda: Section(Circle(9999), "GaAs", (Layer(0.05, "AlAs"),)), r"layers\[1\].thickness", "too thin"),
        (lambda: Section(Circle(10), "GaAs", (Layer(1, "A", sides=(("top", 2),)),)), r"layers\[1\].sides", "no edge"),
        (lambda: coated(("north", 2)), r"layers\[1\].sides", "'top'"),
        (lambda: coated(("rim", 0)), r"layers\[1\].sides", "no thickness"),
        (lambda: coated(("top", 2), ("side 3", 1)), r"layers\[1\].sides", "two"),
        (lambda: Section(Circle(10), "GaAs", Layer(1, "AlAs")), "layers", "list of Layer"),
        (lambda: Layer(-1, "AlAs"), "thickness", "must be positive"),
        (lambda: Layer(1e-9, "AlAs"), "thickness", "between 0.05 nm"),
        (lambda: Layer(1, ""), "material", "must not be empty"),
        (lambda: Layer(1, "AlAs", sides=(("top", -1),)), "sides.top", "must be positive"),
        (lambda: Patch(Circle(3), "AlAs", (1e6, 0)), "center", "between"),
        (lambda: Patch(Circle(3), "AlAs", (1, 2, 3)), "center", "two lengths"),
        (lambda: Patch("circle", "AlAs"), "shape", "must be a shape"),
        (lambda: Section(Circle(10), "GaAs", (Layer(1, "AlAs"),) * 51), "layers", "at most 50"),
    ],
)  # fmt: skip
def test_what_is_refused(build: Callable[[], object], field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        build()
    assert caught.match(f"^{field}: ")


def test_outside_of_a_round_wire_is_a_circle() -> None:
    assert outside_loop(core_shell().pieces(), 7).is_circle == ((0, 0), 25)
    sticks_out = Section(Circle(10), "GaAs", patches=(Patch(Circle(4), "InAs", (5, 0)),))
    assert outside_loop(sticks_out.pieces(), 7).is_circle is None


@pytest.mark.parametrize("gap", [-5e-5, 0.0, 1e-5, 5e-5])
def test_outlines_that_touch_without_crossing_are_refused(gap: float) -> None:
    """A circle in a circle, a circle in an ellipse, a hexagon around a circle: within a tenth of a picometre."""
    for core, patch, x in (
        (Circle(20), Circle(8), 6 - gap),
        (Ellipse(20, 12), Circle(12 - 2 * gap), 0),
        (Circle(20 - 2 * gap), Hexagon(across_flats_nm=20), 0),
        (Circle(20), Circle(8), 14 + gap),
    ):
        with pytest.raises(InputError, match=r"patches\[1\]: its outline touches that of core without crossing it"):
            Section(core, "GaAs", patches=(Patch(patch, "InAs", (x, 0)),))


def test_outlines_that_meet_cleanly_are_drawn() -> None:
    """What is clearly apart or overlaps, sides on top of each other, and tangents that end in a corner."""
    sheet = Rectangle(20, 10)
    stadium = Section(sheet, "GaAs", patches=(Patch(Circle(10), "GaAs", (10, 0)), Patch(Circle(10), "GaAs", (-10, 0))))
    assert len(stadium.visible()) == 3
    for core, patch, x in (
        (Circle(20), Circle(8), 6.01),
        (Circle(20), Circle(8), 5.99),
        (Circle(20), Circle(20), 0),
        (Rectangle(20, 10, 2), Rectangle(20, 10, 2), 1),
        (Circle(20), Hexagon(across_corners_nm=20), 0),
    ):
        Section(core, "GaAs", patches=(Patch(patch, "InAs", (x, 0)),))


def distance_between(points: np.ndarray, others: np.ndarray) -> float:
    return float(np.hypot(*(points[:, None] - others[None]).transpose(2, 0, 1)).min())


@pytest.mark.parametrize(
    "section",
    [
        Section(Hexagon(across_flats_nm=20), "GaAs", (Layer(3, "AlAs"),)),
        Section(Ellipse(30, 6, 20), "GaAs"),
        Section(Ellipse(30, 6, 20), "GaAs", (Layer(2, "AlAs"),)),
        Section(Triangle(side_nm=20, corner_radius_nm=3), "GaAs"),
        Section(Polygon(((0, 0), (36, 0), (36, 12), (12, 12), (12, 30), (0, 30))), "GaAs"),
        Section(Rectangle(40, 10), "InP", patches=(Patch(Rectangle(10, 20), "InAs", (0, 15)),)),
        Section(Circle(10), "GaAs", patches=(Patch(Circle(4), "InAs", (5, 0)),)),
    ],
    ids=["hexagon", "ellipse", "coated ellipse", "rounded", "L", "fin", "blister"],
)
@pytest.mark.parametrize("distance", [0.5, 20.0])
def test_outside_keeps_its_distance_and_is_convex(section: Section, distance: float) -> None:
    pieces = section.pieces()
    loop = outside_loop(pieces, distance)
    inner = np.vstack([piece.loop.sample(60) for piece in pieces])
    assert loop.contains(inner).all()
    assert distance_between(loop.sample(60), inner) >= distance * (1 - 1e-12)
    assert loop.corners() == ()
    along = np.vstack([segment.tangent(np.array([0.0, 0.5, 0.99])) for segment in loop.segments])
    turns = along[:, 0] * np.roll(along[:, 1], -1) - along[:, 1] * np.roll(along[:, 0], -1)
    assert (turns > -1e-9 * np.abs(turns).max()).all()
    assert len(loop.segments) <= 48


def test_outside_of_a_hexagon_is_the_rounded_hexagon() -> None:
    loop = outside_loop([Piece("core", Hexagon(across_flats_nm=20).loop(), "GaAs", True, 0.0)], 5)
    flats = Hexagon(across_flats_nm=20).loop()
    # Steiner's formula for the area around a convex figure: A + P d + pi d^2.
    assert loop.area == pytest.approx(flats.area + 5 * flats.perimeter + 25 * math.pi, rel=1e-12)
