"""The drawing around a section: insulators, faces of gates, surfaces, surroundings; all against plain geometry."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import wiresolve as ws
from wiresolve.describe import round_rims
from wiresolve.describe.curves import Arc, Line, Loop, Segment
from wiresolve.describe.gates import ArcPart, Gate, Insulator, Slab, Surface, Surroundings
from wiresolve.describe.problem import Carriers, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.setting import SINK, Setting, setting
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Rectangle, Shape, Triangle
from wiresolve.describe.summary import describe
from wiresolve.errors import InputError
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.named_edges import edges_along

GEOMETRIES = Path(__file__).resolve().parents[1] / "geometries"
COLD = Carriers(temperature_K=(4.2,))
OXIDE = Insulator("HfO2", 3.0)


def gate(*touches: str | ArcPart, name: str = "g", insulator: Insulator | None = None) -> Gate:
    return Gate(name, touches, lineup_voltage_V=0.0, insulator=insulator)


def problem(
    section: Section | Shape,
    *gates: Gate,
    surfaces: tuple[Surface, ...] = (),
    surroundings: Surroundings | None = None,
) -> Problem:
    drawn = section if isinstance(section, Section) else Section(section, "InAs")
    return Problem("a", drawn, COLD, gates=gates, surfaces=surfaces, surroundings=surroundings)


def lines(segments: tuple[Segment, ...]) -> set[tuple[tuple[float, float], tuple[float, float]]]:
    """Straight segments by their ends, to a millionth of a nm."""
    rounded = []
    for segment in segments:
        assert isinstance(segment, Line)
        rounded.append(tuple((round(x, 6) + 0.0, round(y, 6) + 0.0) for x, y in (segment.start, segment.end)))
    return set(rounded)


def covered(one: Problem, drawn: Setting) -> None:
    """Every curve of a gate or a surface is a row of mesh edges, and pieces are all there."""
    with Mesher(drawn.pieces(one.section)) as mesher:
        mesh, _ = mesher.mesh(SizeField(largest_nm=mesher.extent_nm / 12, turn_cells=16))
    assert {region.name for region in mesh.regions} == {piece.name for piece in drawn.pieces(one.section)}
    for boundary in (*drawn.gates, *drawn.surfaces):
        assert edges_along(mesh, boundary.segments).missing_nm == pytest.approx(0, abs=1e-6 * boundary.length_nm)


def test_a_wrap_gate_is_a_grown_outline() -> None:
    section = Section(Circle(20), "InAs", layers=(Layer(4, "GaAs"),))
    one = problem(section, gate("rim", insulator=OXIDE, name="wrap"))
    drawn = setting(one)
    assert [(p.name, p.material, p.carriers) for p in drawn.around] == [("insulator of wrap", "HfO2", False)]
    assert drawn.around[0].loop.is_circle == ((0, 0), 17)
    assert drawn.gates[0].name == "wrap"
    assert drawn.gates[0].length_nm == pytest.approx(2 * math.pi * 17, rel=1e-12)
    assert [p.name for p in drawn.pieces(section)] == ["insulator of wrap", "layer 1", "core"]
    covered(one, drawn)


def test_a_bare_gate_lies_on_the_outermost_layer() -> None:
    section = Section(Rectangle(10, 6), "InAs", layers=(Layer(2, "GaAs"),))
    drawn = setting(problem(section, gate("top")))
    assert drawn.around == ()
    assert lines(drawn.gates[0].segments) == {((7.0, 5.0), (-7.0, 5.0))}


def test_an_insulator_on_some_sides_carries_metal_on_these_only() -> None:
    """Three sides of a 30 x 20 nm fin under 3 nm: the sides reach down to the fin's foot, which stays bare."""
    one = problem(Rectangle(30, 20), gate("left", "top", "right", insulator=OXIDE))
    drawn = setting(one)
    x, y = drawn.around[0].loop.sample(1).T
    assert (x.min(), x.max(), y.min(), y.max()) == pytest.approx((-18, 18, -10, 13))
    assert lines(drawn.gates[0].segments) == {
        ((18.0, -10.0), (18.0, 13.0)),
        ((18.0, 13.0), (-18.0, 13.0)),
        ((-18.0, 13.0), (-18.0, -10.0)),
    }
    covered(one, drawn)


def test_a_blunt_end_of_a_coat_is_no_metal() -> None:
    """On a rounded fin the coat of the top ends bluntly where the rounding begins: the metal is its flat part."""
    one = problem(Rectangle(30, 20, corner_radius_nm=4), gate("top", insulator=OXIDE))
    drawn = setting(one)
    assert lines(drawn.gates[0].segments) == {((11.0, 13.0), (-11.0, 13.0))}
    covered(one, drawn)


def test_roundings_between_touched_sides_belong_to_the_metal() -> None:
    drawn = setting(problem(Rectangle(30, 20, corner_radius_nm=4), gate("left", "top", "right")))
    arcs = [segment for segment in drawn.gates[0].segments if isinstance(segment, Arc)]
    assert sorted((round(a.center[0], 9), round(a.center[1], 9)) for a in arcs) == [(-11, 6), (11, 6)]
    assert drawn.gates[0].length_nm == pytest.approx(22 + 2 * 12 + math.pi * 4, rel=1e-12)


def test_several_gates_have_rings_of_their_own() -> None:
    thin = Insulator("SiO2", 1.0)
    gates = (gate("top", insulator=OXIDE, name="a"), gate("bottom", insulator=thin, name="b"))
    one = problem(Rectangle(30, 20), *gates)
    drawn = setting(one)
    assert [p.name for p in drawn.around] == ["insulator of a", "insulator of b"]
    assert lines(drawn.gates[0].segments) == {((15.0, 13.0), (-15.0, 13.0))}
    assert lines(drawn.gates[1].segments) == {((-15.0, -11.0), (15.0, -11.0))}
    covered(one, drawn)


@pytest.mark.parametrize("shape", [Circle(20), Ellipse(30, 20, rotation_deg=20)], ids=["circle", "ellipse"])
@pytest.mark.parametrize("insulator", [None, OXIDE], ids=["bare", "insulated"])
def test_metal_on_a_part_of_a_round_rim_ends_at_its_angles(shape: Shape, insulator: Insulator | None) -> None:
    parts = ArcPart(20, 160), ArcPart(200, -20)
    one = problem(shape, *(gate(p, insulator=insulator, name=n) for p, n in zip(parts, "ab", strict=True)))
    drawn = setting(one)
    assert len(drawn.around) == (insulator is not None)  # two gates on one rim share their insulator
    for part, face in zip(parts, drawn.gates, strict=True):
        for (x, y), angle in ((face.segments[0].start, part.from_deg), (face.segments[-1].end, part.to_deg)):
            assert (math.degrees(math.atan2(y, x)) - angle + 180) % 360 - 180 == pytest.approx(0, abs=1e-6)
    if isinstance(shape, Circle):
        radius = 10.0 if insulator is None else 13.0
        assert drawn.gates[0].length_nm == pytest.approx(radius * math.radians(140), rel=1e-12)
    else:
        outline = shape.loop() if insulator is None else shape.grown(3.0)
        around = setting(problem(shape, gate(ArcPart(0, 180), insulator=insulator))).gates[0]
        assert around.length_nm == pytest.approx(outline.perimeter / 2, rel=1e-7)  # symmetric about its centre
    covered(one, drawn)


def test_a_cut_rim_encloses_what_the_whole_one_does() -> None:
    for loop in (Circle(20).loop(), Ellipse(30, 20, 33).loop(), Ellipse(30, 20, 33).grown(2.5)):
        cut = round_rims.cut(loop, [ArcPart(10, 47.3), ArcPart(180, 350)])
        assert cut.area == pytest.approx(loop.area, rel=1e-8)
        ends = [(segment.end, after.start) for segment, after in zip(cut.segments, cut.segments[1:], strict=False)]
        assert max(math.dist(a, b) for a, b in ends) < 1e-12 * 30
        assert round_rims.cut(loop, []) is loop


def test_parts_of_a_rim_overlap_across_zero() -> None:
    assert round_rims.overlap(ArcPart(330, 30), ArcPart(20, 40))
    assert round_rims.overlap(ArcPart(0, 90), ArcPart(90, 100))
    assert round_rims.overlap(ArcPart(10, 350), ArcPart(100, 120))
    assert not round_rims.overlap(ArcPart(330, 30), ArcPart(31, 329))


def test_surfaces_find_outer_and_inner_edges() -> None:
    section = Section(
        Hexagon(across_flats_nm=40),
        "InAs",
        layers=(Layer(5, "GaAs"),),
        patches=(Patch(Circle(6), "GaAs", (2.0, 3.0)),),
    )
    inner, outer = 40 / math.sqrt(3), 50 / math.sqrt(3)
    lengths = {"top": outer, "core rim": 6 * inner, "layer 1 side 1": outer, "core side 2": inner, "core top": inner}
    for name, length in (lengths | {"patch 1 rim": 6 * math.pi}).items():
        one = problem(section, surfaces=(Surface((name,), charge_per_nm2=1e-3),))
        drawn = setting(one)
        assert drawn.surfaces[0].length_nm == pytest.approx(length, rel=1e-12)
        covered(one, drawn)


def test_no_two_surfaces_share_an_edge() -> None:
    twice = (Surface(("core rim",), charge_per_nm2=1e-3), Surface(("core top",), charge_per_nm2=1e-3))
    with pytest.raises(InputError, match=r"surfaces\[2\].touches: surface 2 and surface 1 lie on the same edge"):
        problem(Section(Hexagon(40), "InAs", layers=(Layer(5, "GaAs"),)), surfaces=twice)


def test_a_charged_rim_lies_between_section_and_insulator() -> None:
    one = problem(Circle(20), gate("rim", insulator=OXIDE), surfaces=(Surface(("rim",), charge_per_nm2=-1e-3),))
    drawn = setting(one)
    assert drawn.surfaces[0].length_nm == pytest.approx(math.pi * 20, rel=1e-12)
    covered(one, drawn)


def test_a_gate_may_fill_a_hole() -> None:
    tube = Section(Circle(10), "void", layers=(Layer(5, "InAs"),))
    one = problem(tube, gate("core rim", name="inner"), gate("rim", name="outer", insulator=OXIDE))
    drawn = setting(one)
    assert [face.length_nm for face in drawn.gates] == pytest.approx([10 * math.pi, 26 * math.pi], rel=1e-12)


BACK = Surroundings((Slab("SiO2", 100), Slab("Si", 50)), beside="air", below_gate="back")


def test_a_back_gate_ends_the_box() -> None:
    """A hexagon 60 nm across flats, 120/sqrt(3) wide: flat layers begin at its lower face, y = -30."""
    one = problem(Hexagon(60), Gate("back", lineup_voltage_V=0.0), surroundings=BACK)
    drawn = setting(one, reach=3.0)
    wide = 120 / math.sqrt(3)
    far = 3.0 * (wide + 150)
    assert [p.name for p in drawn.pieces(one.section)] == ["beside", "below 1", "below 2", "core"]
    box = np.array([(-wide / 2 - far, -180), (wide / 2 + far, 30 + far)])
    assert np.array(drawn.box) == pytest.approx(box, rel=1e-12)
    for name, low, high in (("below 1", -130.0, -30.0), ("below 2", -180.0, -130.0), ("beside", -180.0, box[1, 1])):
        y = next(p.loop.sample(1)[:, 1] for p in drawn.around if p.name == name)
        assert (y.min(), y.max()) == pytest.approx((low, high), abs=1e-12)
    (face,) = drawn.gates[0].segments
    assert (face.start, face.end) == ((pytest.approx(box[0, 0]), -180.0), (pytest.approx(box[1, 0]), -180.0))
    assert all(not piece.carriers for piece in drawn.around)
    covered(one, drawn)


def test_two_plates() -> None:
    around = Surroundings((Slab("air", 20),), (Slab("air", 30),), "air", "low", "high")
    one = problem(Rectangle(40, 10), *(Gate(n, lineup_voltage_V=0.0) for n in ("high", "low")), surroundings=around)
    drawn = setting(one, reach=2.0)
    assert [face.name for face in drawn.gates] == ["high", "low"]
    heights = [face.segments[0].start[1] for face in drawn.gates]
    assert heights == [35.0, -25.0]
    covered(one, drawn)


@pytest.mark.parametrize(
    ("shape", "sunk"),
    [
        (Circle(60), True),
        (Hexagon(60), False),
        (Hexagon(60, rotation_deg=30), False),  # on a corner, whose faces rise by 30 degrees
        (Rectangle(40, 20, corner_radius_nm=3), True),
        (Rectangle(40, 20, rotation_deg=4), True),
        (Triangle(side_nm=30), False),
    ],
)
def test_what_would_rest_on_a_cusp_is_sunk(shape: Shape, sunk: bool) -> None:
    one = problem(shape, Gate("back", lineup_voltage_V=0.0), surroundings=BACK)
    drawn = setting(one, reach=2.0)
    x, y = shape.loop().sample(4096).T
    top = next(p.loop.sample(1)[:, 1].max() for p in drawn.around if p.name == "below 1")
    depth = SINK * max(np.ptp(x), np.ptp(y)) if sunk else 0.0
    assert top - y.min() == pytest.approx(depth, abs=1e-5)
    covered(one, drawn)


def test_insulators_rest_on_what_is_below() -> None:
    gates = (gate("rim", insulator=OXIDE, name="wrap"), Gate("back", lineup_voltage_V=0.0))
    one = problem(Hexagon(60), *gates, surroundings=BACK)
    drawn = setting(one, reach=2.0)
    assert [p.name for p in drawn.around] == ["beside", "below 1", "below 2", "insulator of wrap"]
    assert next(p.loop.sample(1)[:, 1].max() for p in drawn.around if p.name == "below 1") == pytest.approx(-33)
    covered(one, drawn)


def test_outlines_and_meshes_can_be_wrapped_and_laid_down() -> None:
    """The shipped outline and mesh, under 3 nm of insulator and on a substrate with a back gate."""
    for name in ("outline", "imported_mesh"):
        shipped = ws.load(GEOMETRIES / f"{name}.toml")
        section = replace(shipped.section, outside=None)
        gates = gate("rim", insulator=OXIDE, name="wrap"), Gate("back", lineup_voltage_V=0.0)
        one = replace(shipped, section=section, carriers=COLD, gates=gates, surroundings=BACK)
        covered(one, setting(one, reach=2.0))


def test_symmetry_is_that_of_the_gates_too() -> None:
    rows = {}
    for name, touches in (("rim", ("rim",)), ("top", ("top",)), ("three", ("side 1", "side 3", "side 5"))):
        rows[name] = dict(describe(problem(Hexagon(40), gate(*touches))))["section.symmetry"]
    assert "sixfold" in rows["rim"]
    assert "threefold" in rows["three"]
    assert rows["top"].startswith("one mirror line, at 90 deg from x")


def test_voltages_do_not_move_the_drawing() -> None:
    one = problem(Circle(20), gate("rim", insulator=OXIDE))
    assert setting(one.at_voltages({"g": 0.7})) == setting(one)
    assert setting(replace(one, gates=(replace(one.gates[0], insulator=None),))) != setting(one)


def test_lengths_of_boundaries_need_no_closed_loop() -> None:
    arc = Arc((0.0, 0.0), 2.0, 0.3, 1.1, "rim")
    assert Loop((arc,)).perimeter == pytest.approx(2.2, rel=1e-14)
