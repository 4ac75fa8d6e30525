"""Shapes of a section's core and patches: their outline with the centroid at the origin, and its parallel outlines."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

from wiresolve.describe import checks, polygons
from wiresolve.describe.curves import EllipseArc, Loop, Point, circle, turn
from wiresolve.describe.parallel_ellipse import parallel_to_ellipse
from wiresolve.errors import InputError

SLENDEREST = 1000.0
"""Shapes longer than this many times their width are refused."""


def _set(shape: Shape, **values: float) -> None:
    for name, value in values.items():
        object.__setattr__(shape, name, value)


def _rotation(value: object) -> float:
    return checks.in_range("rotation", value, -360, 360, "deg")


def _not_slender(field: str, a: float, b: float) -> None:
    if max(a, b) > SLENDEREST * min(a, b):
        rule = f"the shape is more than {SLENDEREST:g} times as long as wide"
        raise InputError(field, rule, f"{a:g} nm by {b:g} nm", "draw the part that confines")


class Shape:
    """What every shape can do; lengths in nm, the centroid at the origin, `rotation_deg` counter-clockwise."""

    kind: ClassVar[str]
    rotation_deg: float = 0.0

    def loop(self) -> Loop:
        """The outline, counter-clockwise."""
        raise NotImplementedError

    def grown(self, thickness_nm: float) -> Loop:
        """The outline at a constant distance outside this one; InputError where there is no simple one."""
        raise NotImplementedError

    def coated(self, thickness_nm: float, coats: Mapping[str, float]) -> Loop:
        """As `grown`, but sides named in `coats` ("side 2": nm) at their own distance; polygons only."""
        if coats:
            rule = f"a {self.kind} has no sides to coat singly"
            raise InputError("sides", rule, remedy="leave 'sides' out, or use a shape with corners")
        return self.grown(thickness_nm)

    @property
    def smallest_feature_nm(self) -> float:
        """The smallest width or side of the shape."""
        raise NotImplementedError

    def edge_names(self) -> tuple[str, ...]:
        """Names of the outline's parts that tables may use."""
        return ("rim",)

    def sides_of(self, edge: str) -> tuple[str, ...]:
        """The sides that an edge name stands for: "top" may be several; InputError for an unknown name."""
        raise InputError(
            "sides", f"a {self.kind} has no edge of this name", edge, checks.nearest(edge, self.edge_names())
        )


@dataclass(frozen=True)
class Circle(Shape):
    """A circle of a given diameter."""

    diameter_nm: float
    kind: ClassVar[str] = "circle"

    def __post_init__(self) -> None:
        _set(self, diameter_nm=checks.length("diameter", self.diameter_nm))

    def loop(self) -> Loop:
        """Four quarter arcs."""
        return circle(self.diameter_nm / 2)

    def grown(self, thickness_nm: float) -> Loop:
        """A larger circle."""
        return circle(self.diameter_nm / 2 + thickness_nm)

    @property
    def smallest_feature_nm(self) -> float:
        """The diameter."""
        return self.diameter_nm


@dataclass(frozen=True)
class Ellipse(Shape):
    """An ellipse, `width_nm` along x and `height_nm` along y before its rotation."""

    width_nm: float
    height_nm: float
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "ellipse"

    def __post_init__(self) -> None:
        _set(
            self,
            width_nm=checks.length("width", self.width_nm),
            height_nm=checks.length("height", self.height_nm),
            rotation_deg=_rotation(self.rotation_deg),
        )
        _not_slender("width", self.width_nm, self.height_nm)

    def loop(self) -> Loop:
        """One closed elliptic arc; a circle where the axes are equal."""
        if self.width_nm == self.height_nm:
            return circle(self.width_nm / 2)
        a, b, tilt = self.width_nm / 2, self.height_nm / 2, math.radians(self.rotation_deg)
        return Loop((EllipseArc((0.0, 0.0), a, b, tilt, 0.0, 2 * math.pi, "rim"),))

    def grown(self, thickness_nm: float) -> Loop:
        """The parallel curve, which is no ellipse: a closed spline within 1e-9 of the size of the exact one."""
        if self.width_nm == self.height_nm:
            return circle(self.width_nm / 2 + thickness_nm)
        if thickness_nm == 0:
            return self.loop()
        curve = parallel_to_ellipse(self.width_nm / 2, self.height_nm / 2, thickness_nm)
        return Loop((curve,)).rotated(math.radians(self.rotation_deg))

    @property
    def smallest_feature_nm(self) -> float:
        """The shorter axis."""
        return min(self.width_nm, self.height_nm)


class Cornered(Shape):
    """Shapes with corners, sharp or rounded: sides are numbered counter-clockwise from the bottom one."""

    corner_radius_nm: float

    def _drawn(self) -> tuple[Point, ...]:
        """Sharp corners, counter-clockwise, side 1 from the first to the second; anywhere in the plane."""
        raise NotImplementedError

    def _finish(self) -> None:
        radius = checks.finite("corner_radius", self.corner_radius_nm)
        if radius != 0:
            radius = checks.length("corner_radius", radius, checks.THINNEST_nm)
        _set(self, corner_radius_nm=radius, rotation_deg=_rotation(self.rotation_deg))
        if radius:
            self.loop()

    def _corners(self) -> tuple[Point, ...]:
        """Sharp corners as they stand: the outline's centroid at the origin, then rotated."""
        corners = self._drawn()
        x, y = polygons.rounded("corner_radius", corners, [self.corner_radius_nm] * len(corners)).centroid
        size = max(max(abs(p), abs(q)) for p, q in corners)
        x, y = (0.0 if abs(v) < 1e-14 * size else v for v in (x, y))
        angle = math.radians(self.rotation_deg)
        moved = (((p - x), (q - y)) for p, q in corners)
        return tuple(turn(p, angle) if angle else p for p in moved)

    def loop(self) -> Loop:
        """Sides as lines, rounded corners as arcs."""
        corners = self._corners()
        return polygons.rounded("corner_radius", corners, [self.corner_radius_nm] * len(corners))

    def grown(self, thickness_nm: float) -> Loop:
        """Mitred at sharp corners; a rounded corner keeps its centre."""
        return self.coated(thickness_nm, {})

    def coated(self, thickness_nm: float, coats: Mapping[str, float]) -> Loop:
        """Each side at its own distance, the sides prolonged until they meet.

        Where two sides of a rounded corner move by different distances, its radius grows by the smaller one; where one
        of them does not move at all, the coat of the other ends bluntly where the rounding begins.
        """
        corners = self._corners()
        away = [coats.get(f"side {k + 1}", thickness_nm) for k in range(len(corners))]
        outer = polygons.parallel("thickness", corners, away)
        if not self.corner_radius_nm:
            return polygons.rounded("thickness", outer, [0.0] * len(corners))
        points, radii, numbers = polygons.coated_corners("thickness", corners, outer, away, self.corner_radius_nm)
        try:
            return polygons.rounded("thickness", points, radii, numbers)
        except InputError as error:
            rule = f"at this thickness the rounded corners no longer fit: a radius of {error.given} {error.rule}"
            remedy = "make the layer thinner, or draw its outer outline as a patch of its own"
            raise InputError("thickness", rule, remedy=remedy) from None

    @property
    def smallest_feature_nm(self) -> float:
        """The smallest distance between a corner and another side, or the shortest side."""
        return polygons.smallest_feature(self._drawn())

    def _named_sides(self) -> dict[str, tuple[str, ...]]:
        corners = self._drawn()
        named: dict[str, tuple[str, ...]] = {f"side {k + 1}": (f"side {k + 1}",) for k in range(len(corners))}
        for name, (nx, ny) in {"bottom": (0, -1), "right": (1, 0), "top": (0, 1), "left": (-1, 0)}.items():
            facing = []
            for k, (a, b) in enumerate(zip(corners, corners[1:] + corners[:1], strict=True)):
                outward = ((b[1] - a[1]) * nx - (b[0] - a[0]) * ny) / math.dist(a, b)
                if outward > math.cos(math.pi / 4) - 1e-9:
                    facing.append(f"side {k + 1}")
            if facing:
                named[name] = tuple(facing)
        return named

    def edge_names(self) -> tuple[str, ...]:
        """Sides by number; bottom, right, top, left (what faces there within 45 degrees, unrotated); the whole rim."""
        return (*self._named_sides(), "rim")

    def sides_of(self, edge: str) -> tuple[str, ...]:
        """The numbered sides that an edge name stands for."""
        named = self._named_sides()
        named["rim"] = tuple(name for name in named if name.startswith("side "))
        if edge not in named:
            words = (
                ", ".join(f"'{n}'" for n in named) if len(named) < 16 else f"'side 1' to 'side {len(self._drawn())}'"
            )
            raise InputError("sides", f"a {self.kind} has no edge of this name", edge, f"its edges are {words}")
        return named[edge]


@dataclass(frozen=True)
class Rectangle(Cornered):
    """A rectangle, `width_nm` along x and `height_nm` along y before its rotation."""

    width_nm: float
    height_nm: float
    corner_radius_nm: float = 0.0
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "rectangle"

    def __post_init__(self) -> None:
        width, height = checks.length("width", self.width_nm), checks.length("height", self.height_nm)
        _set(self, width_nm=width, height_nm=height)
        _not_slender("width", width, height)
        self._finish()

    def _drawn(self) -> tuple[Point, ...]:
        x, y = self.width_nm / 2, self.height_nm / 2
        return (-x, -y), (x, -y), (x, y), (-x, y)


@dataclass(frozen=True)
class Hexagon(Cornered):
    """A regular hexagon with flats at top and bottom, by its width across flats or across corners."""

    across_flats_nm: float | None = None
    across_corners_nm: float | None = None
    corner_radius_nm: float = 0.0
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "hexagon"

    def __post_init__(self) -> None:
        if (self.across_flats_nm is None) == (self.across_corners_nm is None):
            raise InputError("across_flats", "a hexagon needs exactly one of across_flats and across_corners")
        if self.across_flats_nm is not None:
            _set(self, across_flats_nm=checks.length("across_flats", self.across_flats_nm))
        else:
            _set(self, across_corners_nm=checks.length("across_corners", self.across_corners_nm))
        self._finish()

    def _drawn(self) -> tuple[Point, ...]:
        if self.across_corners_nm is not None:
            side, half = self.across_corners_nm / 2, self.across_corners_nm / 4 * math.sqrt(3)
        else:
            assert self.across_flats_nm is not None
            side, half = self.across_flats_nm / math.sqrt(3), self.across_flats_nm / 2
        x = side / 2
        return (-x, -half), (x, -half), (side, 0.0), (x, half), (-x, half), (-side, 0.0)


@dataclass(frozen=True)
class Triangle(Cornered):
    """An equilateral triangle by its `side_nm`, or an isosceles one by `base_nm` and `height_nm`; the base is below."""

    side_nm: float | None = None
    base_nm: float | None = None
    height_nm: float | None = None
    corner_radius_nm: float = 0.0
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "triangle"

    def __post_init__(self) -> None:
        if self.side_nm is not None:
            if self.base_nm is not None or self.height_nm is not None:
                raise InputError("side", "a triangle has either a side, or a base and a height")
            _set(self, side_nm=checks.length("side", self.side_nm))
        elif self.base_nm is None or self.height_nm is None:
            missing = "height" if self.base_nm is not None else "base" if self.height_nm is not None else "side"
            raise InputError(missing, "is missing: a triangle needs its side, or a base and a height")
        else:
            base, height = checks.length("base", self.base_nm), checks.length("height", self.height_nm)
            _set(self, base_nm=base, height_nm=height)
            _not_slender("base", base, height)
        polygons.checked("height" if self.side_nm is None else "side", self._drawn())
        self._finish()

    def _drawn(self) -> tuple[Point, ...]:
        if self.side_nm is not None:
            base, height = self.side_nm, self.side_nm * math.sqrt(3) / 2
        else:
            assert self.base_nm is not None and self.height_nm is not None
            base, height = self.base_nm, self.height_nm
        return (-base / 2, 0.0), (base / 2, 0.0), (0.0, height)


@dataclass(frozen=True)
class Trapezoid(Cornered):
    """A symmetric trapezoid with parallel sides `bottom_nm` and `top_nm`, `height_nm` apart."""

    bottom_nm: float
    top_nm: float
    height_nm: float
    corner_radius_nm: float = 0.0
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "trapezoid"

    def __post_init__(self) -> None:
        bottom, top = checks.length("bottom", self.bottom_nm), checks.length("top", self.top_nm)
        height = checks.length("height", self.height_nm)
        _set(self, bottom_nm=bottom, top_nm=top, height_nm=height)
        _not_slender("height", height, max(bottom, top))
        polygons.checked("height", self._drawn())
        self._finish()

    def _drawn(self) -> tuple[Point, ...]:
        b, t, h = self.bottom_nm / 2, self.top_nm / 2, self.height_nm
        return (-b, 0.0), (b, 0.0), (t, h), (-t, h)


@dataclass(frozen=True)
class Polygon(Cornered):
    """A polygon through corner points in nm, in either direction; it is moved so that its centroid is the origin."""

    points_nm: tuple[Point, ...]
    corner_radius_nm: float = 0.0
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "polygon"

    def __post_init__(self) -> None:
        points = []
        try:
            rows = [tuple(row) for row in self.points_nm]
        except TypeError:
            raise InputError(
                "points", "must be pairs of numbers", self.points_nm, "write [[0, 0], [10, 0], ...]"
            ) from None
        for k, row in enumerate(rows):
            if len(row) != 2:
                raise InputError(f"points[{k + 1}]", "must be a pair of numbers", list(row), "write [10, 0]")
            x, y = (checks.in_range(f"points[{k + 1}]", float_like, -1e6, 1e6, "nm") for float_like in row)
            points.append((x, y))
        corners = polygons.from_bottom(polygons.checked("points", points))
        x_values, y_values = zip(*corners, strict=True)
        width, height = max(x_values) - min(x_values), max(y_values) - min(y_values)
        for word, extent in (("wide", width), ("high", height)):
            if not checks.SHORTEST_nm <= extent <= checks.LONGEST_nm:
                rule = f"the polygon must be between {checks.SHORTEST_nm:g} nm and {checks.LONGEST_nm:g} nm {word}"
                raise InputError("points", rule, f"{extent:g} nm")
        _not_slender("points", width, height)
        object.__setattr__(self, "points_nm", corners)
        self._finish()

    def _drawn(self) -> tuple[Point, ...]:
        return self.points_nm
