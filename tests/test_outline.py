"""Traced outlines: pixels are smoothed away, areas kept, levels those of the shape that was traced."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy.spatial import cKDTree

from tests.truth import disk as bessel
from tests.truth import ellipse
from wiresolve.describe import outline, outline_file, point_table, wirefile
from wiresolve.describe.curves import Line, Loop, Spline, circle
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.materials import Material
from wiresolve.describe.outline import Outline
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Shape
from wiresolve.errors import InputError
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0


def traced(points: np.ndarray) -> np.ndarray:
    """Points as the pixels into which they fall, each once."""
    pixels = np.rint(points).astype(int)
    return np.asarray(pixels[np.sort(np.unique(pixels, axis=0, return_index=True)[1])])


def stairs(points: np.ndarray) -> np.ndarray:
    """The same with only horizontal and vertical steps: the edges of pixels."""
    pixels = traced(points)
    rows = []
    for (x0, y0), (x1, y1) in zip(pixels, np.roll(pixels, -1, axis=0), strict=True):
        rows += [(x0, y0)] + ([(x1, y0)] if x0 != x1 and y0 != y1 else [])
    return np.array(list(dict.fromkeys(rows)))


def file(*curves: np.ndarray, name: str = "o.csv", separator: str = ",", head: str = "") -> InputFile:
    blocks = ["\n".join(separator.join(f"{v:.12g}" for v in row) for row in curve) for curve in curves]
    return InputFile(name, (head + "\n\n".join(blocks)).encode())


def around(
    shape: Shape, pixel: float = 1.0, count: int = 4000, center: tuple[float, float] = (77.3, 61.8)
) -> np.ndarray:
    """Points around a shape in pixels, somewhere in a picture."""
    loop = shape.loop()
    return loop.sample(count // len(loop.segments)) / pixel + center


def solved(section: Section, count: int = 4, accuracy_eV: float = 1e-5) -> Result:
    one = Material.given("one", electron_mass=HBAR2_OVER_2M0, conduction_edge_eV=0.0)
    return solve(
        Problem("outline", section, Carriers(temperature_K=(4.2,)), Accuracy(count, accuracy_eV), materials=(one,))
    )


# --- smoothing --------------------------------------------------------------------------------------------------------

SHAPES = [Circle(60), Ellipse(70, 40, 25), Hexagon(across_flats_nm=60, corner_radius_nm=6, rotation_deg=7)]


@pytest.mark.parametrize("trace", [traced, stairs])
@pytest.mark.parametrize("shape", SHAPES, ids=[s.kind for s in SHAPES])
def test_area_is_kept_and_points_are_near(shape: Shape, trace: object) -> None:
    points = trace(around(shape, 0.5))  # type: ignore[operator]
    made = Outline(file(points), scale_nm=0.5, pixel_nm=0.5)
    x, y = points.T * 0.5
    polygon = abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2
    loop = made.loop()
    assert loop.area == pytest.approx(polygon, rel=1e-9)
    assert loop.area == pytest.approx(shape.loop().area, rel=2e-3)
    assert loop.centroid == pytest.approx((0, 0), abs=1e-9)
    assert [type(segment) for segment in loop.segments] == [Spline]
    assert loop.corners() == ()
    away, _ = cKDTree(np.column_stack(made.in_file(*loop.sample(20000).T))).query(points * 0.5)
    assert away.max() < 1.05 * 0.5
    # The true wall is closer than a pixel everywhere, and on average much closer.
    true, here = shape.loop().sample(20000), loop.sample(3000)
    gap = cKDTree(true).query(here)[0]
    assert gap.max() < 0.5 * 0.5
    assert gap.mean() < 0.1 * 0.5


def test_levels_of_traced_circles_and_ellipses() -> None:
    """Closed forms, within what half a pixel of radius can do; and far fewer unknowns than points would make."""
    for shape, exact in ((Circle(60), np.array(bessel.from_table(4)) / 30**2),
                         (Ellipse(80, 40), np.array([float(v) for v in ellipse.TABLE[0.5][:4]]) / 40**2)):  # fmt: skip
        pixel, half = 0.5, min(shape.smallest_feature_nm, 60) / 2
        made = Outline(file(stairs(around(shape, pixel))), scale_nm=pixel, pixel_nm=pixel)
        result = solved(Section(made, "one"))
        assert np.abs(result.energies_eV / exact - 1).max() < 2 * 0.5 * pixel / half
        assert result.accuracy_met
        assert result.summary.unknowns < 3000


def test_five_hundred_noisy_points() -> None:
    """Points off a circle by Gaussian noise of a third of a pixel: a smooth curve, few unknowns, the circle's level."""
    chance = np.random.default_rng(8)
    angle = np.linspace(0, 2 * np.pi, 500, endpoint=False)
    radius = 20 + 0.3 * chance.normal(size=500)
    noisy = np.column_stack([radius * np.cos(angle), radius * np.sin(angle)])
    made = Outline(file(noisy), scale_nm=1.0, pixel_nm=1.0)
    result = solved(Section(made, "one"))
    assert result.summary.unknowns < 1500
    x, y = noisy.T
    area = np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)) / 2
    assert made.loop().area == pytest.approx(area, rel=1e-9)
    assert result.energies_eV[0] == pytest.approx(bessel.from_table(1)[0] * math.pi / area, rel=2e-3)
    plain = Outline(file(noisy), scale_nm=1.0)
    assert len(plain.loop().segments) == 500


def test_without_pixels_the_corners_stay() -> None:
    """A square given by its corners: pi^2 (i^2 + j^2) / a^2 to the bars, and what a polygon can do."""
    square = np.array([(0, 0), (6, 0), (6, 6), (0, 6)])
    made = Outline(file(square), scale_nm=2.0)
    assert [type(segment) for segment in made.loop().segments] == [Line] * 4
    result = solved(Section(made, "one"), 3)
    exact = [math.pi**2 * n / 144 for n in (2, 5, 5)]
    assert (np.abs(result.energies_eV - exact) <= result.errors_eV).all()
    layered = Section(made, "one", layers=(Layer(1, "one"),))
    assert layered.pieces()[0].loop.area == pytest.approx(14 * 14)
    assert made.smallest_feature_nm == pytest.approx(12)


# --- several curves, frames -------------------------------------------------------------------------------------------


def test_core_and_shells() -> None:
    rings = [traced(around(Circle(d), 0.25)) for d in (40, 20, 30)]
    made = Outline(file(*rings), scale_nm=0.25, pixel_nm=0.25)
    assert made.curve_count == 3
    section = Section(made, "one", (Layer(None, "two"), Layer(None, "three"), Layer(2.0, "four")))
    assert [piece.name for piece in section.pieces()] == ["layer 3", "layer 2", "layer 1", "core"]
    found = [piece.loop.area for piece in section.pieces()]
    assert found == pytest.approx([math.pi * r**2 for r in (22, 20, 15, 10)], rel=0.01)
    with Mesher(section.pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(8.0))
    assert Space(mesh).area_nm2 == pytest.approx(found[0], rel=1e-6)
    for layers, words in (
        ((Layer(None, "two"),), "has 3 curves, and 2 layers without a thickness"),
        ((), r"^layers: the outline has 3 curves.*'none of them'; write \[\[section.layers\]\]"),
        (
            (Layer(None, "two"), Layer(5, "x")),
            r"^layers\[2\].thickness: .*a curve is not used.*leave the thickness out",
        ),
        ((Layer(None, "two"), Layer(1, "x"), Layer(None, "three")), "is given between curves"),
        ((Layer(None, "two"),) * 3, "only 3 curves"),
    ):
        with pytest.raises(InputError, match=words):
            Section(made, "one", layers)
    with pytest.raises(InputError, match="is missing"):
        Section(Circle(10), "one", (Layer(None, "two"),))
    two = Outline(file(*rings[:2]), scale_nm=0.25, pixel_nm=0.25)
    one_wanted = "has 2 curves, and 1 layer without a thickness is wanted"
    with pytest.raises(InputError, match=rf"^layers\[1\].thickness: the outline {one_wanted}.*'50 nm'; leave the"):
        Section(two, "one", (Layer(50.0, "two"),))


def test_a_grown_layer_keeps_its_distance() -> None:
    made = Outline(file(traced(around(SHAPES[2], 0.5))), scale_nm=0.5, pixel_nm=0.5)
    inner, outer = made.loop().sample(20000), made.grown(5.0).sample(300)
    gap, _ = cKDTree(inner).query(outer)
    assert gap == pytest.approx(5.0, abs=1e-4)
    waist = np.array(
        [(0, 0), (4, 0), (4, 1.8), (8, 1.8), (8, 0), (12, 0), (12, 4), (8, 4), (8, 2.2), (4, 2.2), (4, 4), (0, 4)]
    )
    with pytest.raises(InputError, match=r"cross|vanishes"):
        Outline(file(waist), scale_nm=5.0).grown(15.0)


def test_y_down_turns_the_picture_over() -> None:
    """A triangle whose tip is at the top of the picture: row 0."""
    picture = np.array([(50, 10), (80, 70), (20, 70)])
    tip = {flag: Outline(file(picture), scale_nm=1.0, y_down=flag).loop().sample(1)[:, 1] for flag in (True, False)}
    assert sorted(np.round(tip[True])) == [-20, -20, 40]
    assert sorted(np.round(tip[False])) == [-40, 20, 20]
    made = Outline(file(picture), scale_nm=0.5, y_down=True, rotation_deg=30)
    back = np.column_stack(made.in_file(*made.loop().sample(1).T)) / 0.5
    assert {tuple(np.round(p).astype(int).tolist()) for p in back} == {tuple(p) for p in picture.tolist()}


def test_as_a_patch() -> None:
    made = Outline(file(np.array([(0, 0), (4, 0), (4, 2), (0, 2)])), scale_nm=1.0)
    section = Section(Circle(20), "one", patches=(Patch(made, "two", (3, 0)),))
    assert section.pieces()[1].loop.centroid == pytest.approx((3, 0))


# --- the file ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "text",
    [
        "0,0\n4,0\n4,2\n0,2",
        "x;y\n0;0\n4,0;0\n4;2,0\n0;2\n",
        "# traced\n0\t0\n4\t0\n4\t2\n0\t2\n0\t0\n",
        "x y\r\n  0   0\r\n4 0\r\n4 2\r\n0 2\r\n\r\n\r\n",
        "x, y, curve\n0, 0, a\n4, 0, a\n4, 2, a\n0, 2, a",
        "\ufeff0,2\n4,2\n4,0\n0,0",
    ],
)
def test_ways_to_write_a_rectangle(text: str) -> None:
    made = Outline(InputFile("o.csv", text.encode()), scale_nm=1.0)
    assert made.loop().area == pytest.approx(8)
    assert made.curve_count == 1


def test_curves_by_number_or_by_blank_lines() -> None:
    numbered = "\n".join(
        f"{x},{y},{n}"
        for n, size in ((1, 9), (2, 3))
        for x, y in ((-size, -size), (size, -size), (size, size), (-size, size))
    )
    made = Outline(InputFile("o.csv", numbered.encode()), scale_nm=1.0)
    assert [made.curve(k).area for k in (0, 1)] == pytest.approx([36, 324])


BOX = "0,0\n40,0\n40,20\n0,20\n"
STAR = np.column_stack([np.cos(np.arange(40) * 2 * np.pi / 40), np.sin(np.arange(40) * 2 * np.pi / 40)])
BAD: dict[str, tuple[str, dict[str, object], str, str]] = {
    "nothing": ("", {}, "file", "holds no points"),
    "names only": ("x,y\n", {}, "file", "holds no points"),
    "two points": ("0,0\n4,0\n", {}, "file", "too few points"),
    "two curves of one point": ("0,0\n\n4,0\n", {}, "file", "curve 1 has too few points"),
    "one column": ("1\n2\n3\n", {}, "file", "line 1 is no row of 2 numbers"),
    "words": (BOX + "a,b\n", {}, "file", "line 5 is no row"),
    "nan": (BOX + "nan,3\n", {}, "file", "line 5 holds a number that is not finite"),
    "four columns": ("1,2,3,4\n" * 4, {}, "file", "line 1 has 4 columns"),
    "a point twice": (
        "0,0\n40,0\n40,20\n40,0\n0,20\n", {}, "file", "points of the outline coincide: lines 2 and 4; leave out line 4"
    ),
    "crossing": ("0,0\n40,20\n40,0\n0,20\n", {}, "file", "the side from line 1 to 2 meets that from 3 to 4"),
    "one line": ("0,0\n10,10\n20,20\n30,30\n", {}, "file", "meets|no area"),
    "open": ("\n".join(f"{x:.9g},{y:.9g}" for x, y in 9 * STAR[:32]), {}, "file", r"is open: its last .* 32\)"),
    "side by side": (BOX + "\n60,0\n90,0\n90,20\n60,20\n", {}, "file", "does not go around"),
    "curves that cross": (BOX + "\n-1,-9\n30,-9\n30,29\n-1,29\n", {}, "file", "does not go around"),
    "curves that touch": (BOX + "\n0,0\n50,-5\n50,30\n-5,30\n", {}, "file", "come within|does not go around"),
    "absurd scale": (BOX, {"scale_nm": 1e-6}, "file", "between 0.1 nm and 10000 nm wide"),
    "no scale": (BOX, {"scale_nm": 0.0}, "scale", "must be positive"),
    "a pixel as large as the wire": (
        "\n".join(f"{x:.9g},{y:.9g}" for x, y in 9 * STAR), {"pixel_nm": 6.0}, "pixel_size", "only 2.7 pixels large"
    ),
    "too few to smooth": (BOX, {"pixel_nm": 1.0}, "file", "too few points to be smoothed"),
    "needle": ("0,0\n9000,0\n9000,2\n0,2\n", {}, "file", "more than 1000 times as long as wide"),
    "y_down": (BOX, {"y_down": "yes"}, "y_down", "true or false"),
    "latin": ("\udcff", {}, "file", "is not UTF-8"),
}  # fmt: skip


@pytest.mark.parametrize(("text", "options", "field", "words"), BAD.values(), ids=BAD.keys())
def test_bad_outlines(text: str, options: dict[str, object], field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        Outline(InputFile("o.csv", text.encode("utf-8", "surrogateescape")), **{"scale_nm": 1.0, **options})  # type: ignore[arg-type]
    assert caught.value.field == field
    assert str(caught.value).isprintable()


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        (
            'unit = "nm"\nscale = "1 nm"',
            "section.scale: is given beside a unit: an outline needs one of them, not both",
        ),
        ("", "section.scale: is missing: an outline needs the unit of its numbers, or the scale"),
    ],
)
def test_unit_or_scale(keys: str, words: str, tmp_path: Path) -> None:
    (tmp_path / "o.csv").write_text(BOX)
    wire = f'[section]\nshape = "outline"\nfile = "o.csv"\nmaterial = "GaAs"\n{keys}\n[carriers]\ntemperature = "4.2 K"'
    with pytest.raises(InputError, match=words):
        wirefile.parse(wire, tmp_path)


def test_double_clicks_and_steps_back_are_left_out() -> None:
    """A square of 10 pixels with repeated points and steps to a next pixel and back: the square's area all the same."""
    square = [(0, 0), (10, 0), (10, 10), (0, 10)]
    twice = [p for p in square for _ in range(3)]
    assert Outline(file(np.array(twice)), scale_nm=1.0).loop().area == pytest.approx(100)
    for k in range(4):  # the spike at any place of the list, at its ends too
        for step in ((1, 1), (0, 1), (-1, -1)):
            x, y = square[k]
            spiked = [*square[: k + 1], (x + step[0], y + step[1]), *square[k:]]
            for turn in range(6):
                rows = np.array(spiked[turn:] + spiked[:turn])
                (traced_,) = outline_file.read("file", file(rows), 1.0)
                assert sorted(map(tuple, traced_.points.tolist())) == sorted(square)
                with pytest.raises(InputError, match="coincide"):  # without a pixel's size nothing is left out
                    Outline(file(rows), scale_nm=1.0)
    long = [(0, 0), (3, 3), (0, 0), (10, 0), (10, 10), (0, 10)]
    with pytest.raises(InputError, match="lines 2 and 4; leave out line 4"):
        outline_file.read("file", file(np.array(long), head="x,y\n"), 1.0)


def test_several_faults_in_one_message() -> None:
    ring = np.round(100 * STAR).astype(int)
    back = [row for k, p in enumerate(ring) for row in ([p, p + 7, p] if k in (5, 9, 20) else [p])]
    told = "points of the outline coincide: lines .*; leave out one of each two"
    with pytest.raises(InputError, match=told) as caught:
        Outline(file(np.array(back)), scale_nm=1.0)
    assert all(f"{a} and {b}" in str(caught.value) for a, b in ((6, 8), (12, 14), (25, 27)))
    around_twice = np.vstack([ring, ring])
    mixed = np.random.default_rng(2).permutation(ring)
    one_twice = np.vstack([mixed, mixed[7:8]])
    for rows in (around_twice, mixed, one_twice):
        with pytest.raises(InputError, match="the order of the points is probably wrong") as caught:
            Outline(file(rows), scale_nm=1.0)
        assert str(caught.value).count(" and ") + str(caught.value).count(" meets ") <= 6
    swapped = ring.copy()
    swapped[[12, 13]] = ring[[13, 12]]
    with pytest.raises(InputError, match="the side from line 12 to 13 meets that from 14 to 15; list the points in"):
        Outline(file(swapped), scale_nm=1.0)


def test_too_many_points(monkeypatch: pytest.MonkeyPatch) -> None:
    angle = np.linspace(0, 2 * np.pi, 1200, endpoint=False)
    ring = np.column_stack([np.cos(angle), np.sin(angle)]) * 50
    with pytest.raises(InputError, match="give the pixel_size"):
        Outline(file(ring), scale_nm=1.0)
    assert Outline(file(ring), scale_nm=1.0, pixel_nm=0.1).loop().area == pytest.approx(math.pi * 2500, rel=1e-4)
    monkeypatch.setattr(outline_file, "MOST_POINTS", 1000)
    with pytest.raises(InputError, match="1,200 points"):
        Outline(file(ring), scale_nm=1.0)
    monkeypatch.setattr(point_table, "MOST_ROWS", 1000)
    with pytest.raises(InputError, match="more than 1,000 rows"):
        Outline(file(ring), scale_nm=1.0)


# --- nearly symmetric -------------------------------------------------------------------------------------------------


def wavy(fold: int, height: float) -> Loop:
    angle = np.linspace(0, 2 * np.pi, 240, endpoint=False)
    radius = 20 + height * np.cos(fold * angle)
    rows = np.column_stack([radius * np.cos(angle), radius * np.sin(angle)])
    return Loop((Spline((*map(tuple, rows.tolist()), tuple(rows[0].tolist())), "rim"),))  # type: ignore[arg-type]


def test_near_symmetry_in_words() -> None:
    assert outline.near_symmetry(circle(10)) == "nearly round (within 0 nm)"
    assert outline.near_symmetry(wavy(3, 0.3)) == "nearly round (within 0.3 nm)"
    said = outline.near_symmetry(wavy(3, 4.0))
    assert said is not None
    assert said.startswith("nearly threefold")
    bumpy = Polygon(((10, 0), (5, 8.66), (-5, 8.96), (-10, 0), (-5, -8.66), (5, -8.66)))
    assert "sixfold (within 0.2" in str(outline.near_symmetry(bumpy.loop()))
    assert outline.near_symmetry(Polygon(((0, 0), (30, 0), (30, 6), (6, 6), (6, 30), (0, 30))).loop()) is None
