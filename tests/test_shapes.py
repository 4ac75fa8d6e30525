"""Shapes: areas, lengths, corners and parallel outlines against closed forms; what is refused."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.special import ellipe

from wiresolve.describe import polygons
from wiresolve.describe.curves import Arc, Line, Loop
from wiresolve.describe.shapes import (
    Circle,
    Ellipse,
    Hexagon,
    Polygon,
    Rectangle,
    Shape,
    Trapezoid,
    Triangle,
)
from wiresolve.errors import InputError

L_POINTS = ((0, 0), (36, 0), (36, 12), (12, 12), (12, 30), (0, 30))
L_SHAPE = Polygon(L_POINTS)
NOTCHED = Polygon(((0, 0), (30, 0), (30, 9), (16, 9), (16, 4), (14, 4), (14, 9), (0, 9)))
BOW_TIE = ((0, 0), (10, 10), (10, 0), (0, 10))
ROOT3 = math.sqrt(3)


def degrees(opposite: float, adjacent: float) -> float:
    return math.degrees(math.atan2(opposite, adjacent))


# Closed forms: shape, area, perimeter, interior angles of its corners in degrees.
KNOWN: list[tuple[Shape, float, float, list[float]]] = [
    (Circle(10), 25 * math.pi, 10 * math.pi, []),
    # Perimeter of an ellipse: 4 a E(1 - b^2/a^2), the complete elliptic integral.
    (Ellipse(20, 10), 50 * math.pi, 40 * float(ellipe(0.75)), []),
    (Ellipse(8, 40, rotation_deg=33), 80 * math.pi, 80 * float(ellipe(0.96)), []),
    (Ellipse(7, 7), 12.25 * math.pi, 7 * math.pi, []),
    (Rectangle(30, 20), 600, 100, [90] * 4),
    (Rectangle(30, 20, corner_radius_nm=4), 600 - (4 - math.pi) * 16, 100 - (8 - 2 * math.pi) * 4, []),
    (Rectangle(30, 20, corner_radius_nm=10, rotation_deg=70), 200 + 100 * math.pi, 20 + 20 * math.pi, []),
    (Hexagon(across_flats_nm=40), 800 * ROOT3, 240 / ROOT3, [120] * 6),
    (Hexagon(across_corners_nm=40), 600 * ROOT3, 120, [120] * 6),
    (Triangle(side_nm=12), 36 * ROOT3, 36, [60] * 3),
    (Triangle(base_nm=6, height_nm=4), 12, 16, [2 * degrees(3, 4), degrees(4, 3), degrees(4, 3)]),
    (Trapezoid(20, 10, 12), 180, 56, [degrees(12, 5), degrees(12, 5), 180 - degrees(12, 5), 180 - degrees(12, 5)]),
    (Trapezoid(10, 20, 12), 180, 56, [degrees(12, 5), degrees(12, 5), 180 - degrees(12, 5), 180 - degrees(12, 5)]),
    (L_SHAPE, 648, 132, [90] * 5 + [270]),
    (Polygon(L_POINTS, corner_radius_nm=2, rotation_deg=-25), 648 - (4 - math.pi) * 4, 132 - 6 * (4 - math.pi), []),
]  # fmt: skip
NAMES = [f"{shape.kind}{k}" for k, (shape, *_) in enumerate(KNOWN)]


@pytest.mark.parametrize(("shape", "area", "perimeter", "angles"), KNOWN, ids=NAMES)
def test_measures_are_the_closed_forms(shape: Shape, area: float, perimeter: float, angles: list[float]) -> None:
    loop = shape.loop()
    assert loop.area == pytest.approx(area, rel=1e-13)
    assert loop.perimeter == pytest.approx(perimeter, rel=1e-12)
    assert loop.centroid == pytest.approx((0, 0), abs=1e-12)
    found = sorted(math.degrees(angle) for _, angle in loop.corners())
    assert found == pytest.approx(sorted(angles), abs=1e-9)
    for before, after in zip(loop.segments, (*loop.segments[1:], loop.segments[0]), strict=True):
        assert math.dist(before.end, after.start) < 1e-12 * perimeter


@pytest.mark.parametrize("shape", [shape for shape, *_ in KNOWN], ids=NAMES)
def test_moving_and_turning_keep_the_measures(shape: Shape) -> None:
    loop = shape.loop()
    away = loop.rotated(0.7).moved(3, -5)
    assert away.area == pytest.approx(loop.area, rel=1e-12)
    assert away.centroid == pytest.approx((3, -5), abs=1e-11)
    assert sorted(a for _, a in away.corners()) == pytest.approx(sorted(a for _, a in loop.corners()), abs=1e-9)


@pytest.mark.parametrize("segment", [s for shape, *_ in KNOWN for s in shape.loop().segments][::3])
def test_tangent_is_the_derivative_of_the_point(segment: Line | Arc) -> None:
    t, h = np.linspace(0.1, 0.9, 5), 1e-6
    slope = (segment.point(t + h) - segment.point(t - h)) / (2 * h)
    assert segment.tangent(t) == pytest.approx(slope, rel=1e-7, abs=1e-7)


# Steiner's formula for the area inside a parallel curve at distance t: A + P t + pi t^2 where no corner is mitred
# (a convex mitre of turn w adds (tan(w/2) - w/2) t^2, a concave corner takes as much away).
@pytest.mark.parametrize("t", [0.1, 2.0, 9.0])
@pytest.mark.parametrize("shape", [shape for shape, *_ in KNOWN if shape.kind != "polygon"], ids=NAMES[:-2])
def test_parallel_outline_encloses_what_steiner_says(shape: Shape, t: float) -> None:
    loop = shape.loop()
    turns = [math.pi - angle for _, angle in loop.corners()]
    area = loop.area + loop.perimeter * t + math.pi * t**2 + sum(math.tan(w / 2) - w / 2 for w in turns) * t**2
    assert shape.grown(t).area == pytest.approx(area, rel=1e-9)


def test_parallel_outline_of_a_concave_polygon() -> None:
    # By hand: the L grown by 3 is an L of legs 42 x 18 and 18 x 36.
    assert L_SHAPE.grown(3).area == pytest.approx(42 * 18 + 18 * 18, rel=1e-13)
    assert sorted(math.degrees(a) for _, a in L_SHAPE.grown(3).corners()) == pytest.approx([90] * 5 + [270])
    # Rounded by 2: the five outer corners have the radius 5, the inner one (2 - 3 < 0) has become sharp.
    rounded = Polygon(L_POINTS, corner_radius_nm=2).grown(3)
    assert rounded.area == pytest.approx(42 * 18 + 18 * 18 - 5 * (1 - math.pi / 4) * 25, rel=1e-12)
    assert [math.degrees(a) for _, a in rounded.corners()] == pytest.approx([270])
    # Grown by less, the inner corner keeps a radius of 2 - 1.5.
    less = Polygon(L_POINTS, corner_radius_nm=2).grown(1.5)
    area = 39 * 15 + 15 * 18 - (5 * 3.5**2 - 0.5**2) * (1 - math.pi / 4)
    assert less.area == pytest.approx(area, rel=1e-12)


@pytest.mark.parametrize(("width", "height", "t"), [(20, 10, 2.0), (10, 20, 7.0), (40, 8, 0.5), (20, 19, 5.0)])
def test_parallel_curve_of_an_ellipse_keeps_its_distance(width: float, height: float, t: float) -> None:
    a, b = width / 2, height / 2
    curve = Ellipse(width, height).grown(t).segments[0]
    for x, y in curve.point(np.linspace(0, 0.999, 37)):
        around = math.atan2(y / b, x / a)

        def squared(s: float, x: float = x, y: float = y) -> float:
            return (x - a * math.cos(s)) ** 2 + (y - b * math.sin(s)) ** 2

        foot = minimize_scalar(squared, bounds=(around - 0.9, around + 0.9), method="bounded", options={"xatol": 1e-12})
        assert math.sqrt(foot.fun) == pytest.approx(t, abs=1e-9 * width)


def test_hexagon_has_flats_at_top_and_bottom() -> None:
    points = Hexagon(across_flats_nm=40).loop().sample(1)
    assert np.ptp(points[:, 1]) == pytest.approx(40)
    assert np.ptp(points[:, 0]) == pytest.approx(80 / ROOT3)


def test_grown_circle_and_hexagon_are_circle_and_hexagon() -> None:
    assert Circle(10).grown(3).is_circle == ((0, 0), 8)
    flats = Hexagon(across_flats_nm=20).grown(5).sample(1)
    assert flats == pytest.approx(Hexagon(across_flats_nm=30).loop().sample(1), abs=1e-12)


def test_square_rounded_all_the_way_is_a_circle() -> None:
    found = Rectangle(10, 10, corner_radius_nm=5).loop().is_circle
    assert found is not None
    assert found[1] == pytest.approx(5)
    assert Rectangle(10, 9, corner_radius_nm=4.5).loop().is_circle is None


def inside_ellipse(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    turned = math.radians(33)
    u, v = x * math.cos(turned) + y * math.sin(turned), -x * math.sin(turned) + y * math.cos(turned)
    return (u / 4) ** 2 + (v / 20) ** 2 < 1


def inside_round_rectangle(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    u, v = np.maximum(np.abs(x) - 11, 0), np.maximum(np.abs(y) - 6, 0)
    return np.hypot(u, v) < 4


def inside_l(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    cx, cy = (36 * 12 * 18 + 12 * 18 * 6) / 648, (36 * 12 * 6 + 12 * 18 * 21) / 648
    u, v = x + cx, y + cy
    return ((u > 0) & (u < 36) & (v > 0) & (v < 12)) | ((u > 0) & (u < 12) & (v > 0) & (v < 30))


@pytest.mark.parametrize(
    ("loop", "formula"),
    [
        (Circle(20).loop(), lambda x, y: np.hypot(x, y) < 10),
        (Ellipse(8, 40, 33).loop(), inside_ellipse),
        (Rectangle(30, 20, 4).loop(), inside_round_rectangle),
        (L_SHAPE.loop(), inside_l),
        (Ellipse(20, 20.0000001).grown(3), lambda x, y: np.hypot(x, y) < 13),
    ],
    ids=["circle", "ellipse", "rounded", "L", "spline"],
)
def test_contains_agrees_with_the_formula(loop: Loop, formula: Callable[[np.ndarray, np.ndarray], np.ndarray]) -> None:
    random = np.random.default_rng(7)
    points = random.uniform(-25, 25, (4000, 2))
    # Rays through the joints of arcs and the corners of polygons must not be counted twice or not at all.
    heights = np.concatenate([loop.sample(2)[:, 1], [0.0]])
    points = np.vstack([points, *(np.column_stack([random.uniform(-25, 25, 40), np.full(40, y)]) for y in heights)])
    shifts = 1e-3 * np.array([(0, 0), (1, 1), (1, -1), (-1, 1), (-1, -1)])
    around = np.array([formula(*(points + shift).T) for shift in shifts])
    clear = (around == around[0]).all(axis=0)  # not on the outline itself
    assert clear.sum() > 4000
    assert np.array_equal(loop.contains(points[clear]), around[0][clear])


def test_sides_are_numbered_from_the_bottom_one_counter_clockwise() -> None:
    names = [s.name for s in Rectangle(4, 2).loop().segments]
    assert names == ["side 1", "side 2", "side 3", "side 4"]
    middles = [s.point(np.array([0.5]))[0].tolist() for s in Rectangle(4, 2).loop().segments]
    assert middles == [[0, -1], [2, 0], [0, 1], [-2, 0]]
    # A polygon listed clockwise from its top is the same polygon.
    assert Polygon(((0, 30), (12, 30), (12, 12), (36, 12), (36, 0), (0, 0))) == L_SHAPE
    bottom = L_SHAPE.loop().segments[0]
    assert bottom.name == "side 1"
    assert math.dist(bottom.start, bottom.end) == 36


def test_edges_by_direction() -> None:
    assert Hexagon(across_flats_nm=10).sides_of("right") == ("side 2", "side 3")
    assert Hexagon(across_flats_nm=10).sides_of("top") == ("side 4",)
    assert "top" not in Triangle(side_nm=10).edge_names()
    assert Triangle(side_nm=10).edge_names()[-1] == "rim"
    assert L_SHAPE.sides_of("top") == ("side 3", "side 5")
    assert Circle(3).edge_names() == ("rim",)
    with pytest.raises(InputError, match="'bottom'"):
        Rectangle(4, 2).sides_of("botom")


def test_coats_of_single_sides() -> None:
    coated = Rectangle(10, 6).coated(2, {"side 1": 0.0})
    x, y = coated.sample(1).T
    assert (x.min(), x.max(), y.min(), y.max()) == (-7, 7, -3, 5)
    hexagon = Hexagon(across_flats_nm=20).coated(0, {"side 2": 3.0})
    side = hexagon.segments[1]
    normal = (math.cos(-math.pi / 6), math.sin(-math.pi / 6))
    assert np.array(side.start) @ normal == pytest.approx(13)
    assert np.array(side.end) @ normal == pytest.approx(13)
    with pytest.raises(InputError, match="no sides to coat singly"):
        Circle(3).coated(2, {"bottom": 1.0})


def test_smallest_feature_is_the_thinnest_part() -> None:
    assert L_SHAPE.smallest_feature_nm == 12
    assert Rectangle(30, 5).smallest_feature_nm == 5
    thin = Polygon(((0, 0), (30, 0), (30, 30), (16, 30), (16, 1), (14, 1), (14, 30), (0, 30)))
    assert thin.smallest_feature_nm == 1


@pytest.mark.parametrize(
    ("build", "field", "words"),
    [
        (lambda: Circle(-10), "diameter", "must be positive"),
        (lambda: Circle(0), "diameter", "must be positive"),
        (lambda: Circle(1e9), "diameter", "between 0.1 nm and 10000 nm"),
        (lambda: Circle(1e-6), "diameter", "between 0.1 nm and 10000 nm"),
        (lambda: Circle(math.nan), "diameter", "finite"),
        (lambda: Circle("10"), "diameter_nm", "must be a number"),
        (lambda: Circle(True), "diameter", "must be a number"),
        (lambda: Ellipse(10, -1), "height", "must be positive"),
        (lambda: Ellipse(9000, 1), "width", "1000 times as long as wide"),
        (lambda: Ellipse(10, 5, rotation_deg=4000), "rotation", "between -360 deg and 360 deg"),
        (lambda: Rectangle(10, 5, corner_radius_nm=3), "corner_radius", "at most 2.5 nm fits"),
        (lambda: Rectangle(10, 5, corner_radius_nm=-1), "corner_radius", "must be positive"),
        (lambda: Hexagon(), "across_flats", "exactly one"),
        (lambda: Hexagon(across_flats_nm=3, across_corners_nm=3), "across_flats", "exactly one"),
        (lambda: Triangle(), "side", "is missing"),
        (lambda: Triangle(base_nm=3), "height", "is missing"),
        (lambda: Triangle(side_nm=3, height_nm=3), "side", "either"),
        (lambda: Triangle(base_nm=1, height_nm=900), "height", "folds back at point 3"),
        (lambda: Polygon(BOW_TIE), "points", "from point 1 to 2 crosses that from point 3 to 4"),
        (lambda: Polygon(((0, 0), (9, 0), (9, 9), (4, 0), (0, 9))), "points", "crosses"),
        (lambda: Polygon(((0, 0), (10, 10))), "points", "at least 3 points"),
        (lambda: Polygon(((0, 0), (5, 5), (10, 10))), "points", "points 1 to 3 lie on one line"),
        (lambda: Polygon(((0, 0), (10, 0), (10, 0), (0, 10))), "points", "points 2 and 3 coincide"),
        (lambda: Polygon(((0, 0), (10, 0), (0, 10), (0, 0))), "points", "closes by itself"),
        (lambda: Polygon(((0, 0), (10, 0), (8, 1e-6))), "points", "one line"),
        (lambda: Polygon(((0, 0), (10, 0), (20, 0), (15, 0), (5, 9))), "points", "crosses|folds back"),
        (lambda: Polygon(((0, 0), (10, 0), (math.inf, 10))), r"points\[3\]", "finite"),
        (lambda: Polygon(((0, 0), (10, 0), (0, 10, 3))), r"points\[3\]", "pair"),
        (lambda: Polygon(((0, 0), (0.01, 0), (0, 0.01))), "points", "between 0.1 nm"),
        (lambda: Polygon(tuple((math.cos(k / 200), math.sin(k / 200)) for k in range(1200))), "points", "at most 1000"),
        (lambda: NOTCHED.grown(2), "thickness", "vanishes|crosses"),
        (lambda: Polygon(L_POINTS, 5).coated(3, {"side 3": 0}), "thickness", "at least as thick as its radius"),
        (lambda: Polygon(L_POINTS, corner_radius_nm=5).grown(20), "thickness", "no longer fit"),
    ],
)  # fmt: skip
def test_what_is_refused(build: Callable[[], object], field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        build()
    assert caught.match(f"^{field}: ")
    assert "\n" not in str(caught.value)


def test_points_on_a_straight_side_are_kept_and_grow() -> None:
    square = Polygon(((0, 0), (5, 0), (10, 0), (10, 10), (0, 10)))
    assert square.loop().area == pytest.approx(100, rel=1e-14)
    assert len(square.loop().corners()) == 4
    assert square.grown(1).area == pytest.approx(144)
    with pytest.raises(InputError, match="equally thick"):
        square.coated(1, {"side 1": 2.0})


def test_a_polygon_of_many_points_is_checked_in_full() -> None:
    n = 400
    around = [(10 * math.cos(2 * math.pi * k / n), 10 * math.sin(2 * math.pi * k / n)) for k in range(n)]
    assert polygons.crossing(around) is None
    around[100], around[101] = around[101], around[100]
    assert polygons.crossing(around) is not None
