"""The cross-section: a core, layers around it, patches over them, and what lies outside."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np

from wiresolve.describe import checks
from wiresolve.describe.curves import Arc, Line, Loop, Point, Segment, Spline, circle
from wiresolve.describe.shapes import Shape
from wiresolve.errors import InputError

VOID = "void"
"""The material of a hole."""
ADMITTED, EXCLUDED = "admitted", "excluded"
HARD_WALL = "hard wall"
MOST_LAYERS, MOST_PATCHES = 50, 200
THICKEST = 50.0
"""A layer may be this many times as thick as the core is wide."""
FINEST = 1e-5
"""A layer may be this small a part of the section's size; thinner ones could not be meshed."""
LARGEST_OFFSET_eV = 20.0


def _carriers(value: object) -> str:
    return checks.choice("carriers", value, (ADMITTED, EXCLUDED))


def _offset(value: object) -> float:
    return checks.in_range("offset", value, -LARGEST_OFFSET_eV, LARGEST_OFFSET_eV, "eV")


@dataclass(frozen=True)
class Layer:
    """A shell of constant thickness; `sides` gives edges of a polygon ("bottom", "side 2") a thickness of their own."""

    thickness_nm: float
    material: str
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    sides: tuple[tuple[str, float], ...] | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        set_(self, "thickness_nm", checks.length("thickness", self.thickness_nm, checks.THINNEST_nm))
        set_(self, "material", checks.text("material", self.material, 60))
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))
        if self.sides is not None:
            coats = []
            for name, value in self.sides.items() if isinstance(self.sides, Mapping) else self.sides:
                coat = checks.finite(f"sides.{name}", value)
                if coat != 0:
                    coat = checks.length(f"sides.{name}", coat, checks.THINNEST_nm)
                coats.append((name, coat))
            set_(self, "sides", tuple(coats) or None)

    def coats(self, shape: Shape) -> dict[str, float]:
        """Thickness in nm of each numbered side that `sides` names, for a core of this shape."""
        found: dict[str, float] = {}
        by: dict[str, str] = {}
        for name, thickness in self.sides or ():
            for side in shape.sides_of(name):
                if found.get(side, thickness) != thickness:
                    raise InputError("sides", f"'{by[side]}' and '{name}' give {side} two thicknesses")
                found[side], by[side] = thickness, name
        return found


@dataclass(frozen=True)
class Patch:
    """A shape painted over what is there, its centroid at `center_nm` (from the core's centroid)."""

    shape: Shape
    material: str
    center_nm: Point = (0.0, 0.0)
    carriers: str = ADMITTED
    offset_eV: float = 0.0

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if not isinstance(self.shape, Shape):
            raise InputError("shape", "must be a shape such as Circle(diameter_nm=10)", self.shape)
        set_(self, "material", checks.text("material", self.material, 60))
        try:
            x, y = self.center_nm
        except (TypeError, ValueError):
            raise InputError("center", "must be two lengths", self.center_nm) from None
        far = checks.LONGEST_nm
        set_(self, "center_nm", tuple(checks.in_range("center", v, -far, far, "nm") for v in (x, y)))
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))


@dataclass(frozen=True)
class Piece:
    """One painted region: its outline, what it is made of, whether carriers may be in it, and its edge's shift."""

    name: str
    loop: Loop
    material: str
    carriers: bool
    offset_eV: float


@dataclass(frozen=True)
class Section:
    """A cross-section, from the core's shape outwards.

    `layers` go outwards; `patches` are painted in their order. `outside` is None for a hard wall around everything, or
    a material that goes on. `carriers` and `offset_eV` are the core's. Raises `InputError` where the parts do not fit.
    """

    shape: Shape
    material: str
    layers: tuple[Layer, ...] = ()
    patches: tuple[Patch, ...] = ()
    outside: str | None = None
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    lattice_temperature_K: float | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if not isinstance(self.shape, Shape):
            raise InputError("shape", "must be a shape such as Circle(diameter_nm=10)", self.shape)
        set_(self, "material", checks.text("material", self.material, 60))
        for name, kind in (("layers", Layer), ("patches", Patch)):
            given = getattr(self, name)
            if not isinstance(given, Sequence) or not all(isinstance(part, kind) for part in given):
                raise InputError(name, f"must be a list of {kind.__name__}", given)
            set_(self, name, tuple(given))
        if len(self.layers) > MOST_LAYERS:
            raise InputError("layers", f"a section can have at most {MOST_LAYERS} layers", f"{len(self.layers)} layers")
        if len(self.patches) > MOST_PATCHES:
            raise InputError("patches", f"a section can have at most {MOST_PATCHES} patches", f"{len(self.patches)}")
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))
        if self.outside == HARD_WALL:
            set_(self, "outside", None)
        if self.outside is not None:
            checks.text("outside", self.outside, 60)
            if self.outside == VOID:
                raise InputError("outside", "nothing outside is a hard wall", VOID, f'write outside = "{HARD_WALL}"')
        if self.lattice_temperature_K is not None:
            kelvin = checks.in_range("lattice_temperature", self.lattice_temperature_K, 0, 2000, "K")
            set_(self, "lattice_temperature_K", kelvin)
        pieces = self.pieces()
        xs, ys = np.vstack([piece.loop.sample(8) for piece in pieces]).T
        size = float(max(np.ptp(xs), np.ptp(ys)))
        for k, layer in enumerate(self.layers, 1):
            thin = min([layer.thickness_nm, *(t for _, t in layer.sides or () if t > 0)])
            if thin < FINEST * size:
                rule = f"is too thin for a section {size:.3g} nm wide"
                raise InputError(f"layers[{k}].thickness", rule, f"{thin:g} nm", f"at least {FINEST * size:.2g} nm")
        if not any(piece.carriers for piece in pieces):
            rule = "nothing is left for carriers: every part is void or keeps them out"
            raise InputError("material", rule, remedy="admit carriers in the core, a layer or a patch")
        if not any(piece.carriers for piece in self.visible()):
            rule = "the patches leave nothing for carriers"
            raise InputError("patches", rule, remedy="make them smaller, or admit carriers in one of them")

    def pieces(self) -> tuple[Piece, ...]:
        """What is painted, later over earlier: the outermost layer first, inwards to the core, then the patches."""
        return self._pieces

    @cached_property
    def _pieces(self) -> tuple[Piece, ...]:
        core = Piece(
            "core", self.shape.loop(), self.material, self._admits(self.material, self.carriers), self.offset_eV
        )
        painted = [core]
        widest = float(np.max(np.ptp(core.loop.sample(8), axis=0))) if self.layers else 0.0
        through, coats = 0.0, {side: 0.0 for side in self.shape.edge_names() if side.startswith("side ")}
        single = False
        for k, layer in enumerate(self.layers, 1):
            if layer.thickness_nm > THICKEST * widest:
                rule = f"is more than {THICKEST:g} times the core's size"
                given = f"{layer.thickness_nm:g} nm"
                raise InputError(f"layers[{k}].thickness", rule, given, "a thinner layer confines just as well")
            through += layer.thickness_nm
            try:
                own = layer.coats(self.shape)
                if own and coats and not any(own.get(side, layer.thickness_nm) for side in coats):
                    raise InputError("sides", "leaves no thickness on any side")
                single = single or bool(layer.sides)
                coats = {side: done + own.get(side, layer.thickness_nm) for side, done in coats.items()}
                loop = self.shape.coated(through, coats if single else {})
            except InputError as error:
                raise error.under(f"layers[{k}]") from None
            admits = self._admits(layer.material, layer.carriers)
            painted.insert(0, Piece(f"layer {k}", loop, layer.material, admits, layer.offset_eV))
        for k, patch in enumerate(self.patches, 1):
            admits = self._admits(patch.material, patch.carriers)
            loop = patch.shape.loop().moved(*patch.center_nm)
            painted.append(Piece(f"patch {k}", loop, patch.material, admits, patch.offset_eV))
        return tuple(painted)

    @staticmethod
    def _admits(material: str, carriers: str) -> bool:
        return material != VOID and carriers == ADMITTED

    def visible(self) -> tuple[Piece, ...]:
        """The pieces of which the later ones leave something (judged at points along all outlines)."""
        return self._visible

    @cached_property
    def _visible(self) -> tuple[Piece, ...]:
        pieces = self.pieces()
        if not self.patches:
            return pieces
        size = float(np.ptp(np.vstack([p.loop.sample(8) for p in pieces]), axis=0).max())
        probes = np.vstack([_beside(piece.loop, 1e-6 * size) for piece in pieces])
        seen, free = [], np.ones(len(probes), dtype=bool)
        for piece in reversed(pieces):
            inside = piece.loop.contains(probes)
            if (inside & free).any():
                seen.append(piece)
            free &= ~inside
        return tuple(reversed(seen))

    @property
    def outermost(self) -> str:
        """Name of the outermost layer: "outside" where a material goes on, else the last layer, else "core"."""
        if self.outside is not None:
            return "outside"
        return f"layer {len(self.layers)}" if self.layers else "core"


def _beside(loop: Loop, distance: float) -> np.ndarray:
    """Points close to both sides of an outline, denser towards the ends of its segments, where pockets are left."""
    rows, ends = [], np.array([1e-5, 1e-4, 1e-3, 1e-2])
    for segment in loop.segments:
        whole = isinstance(segment, Spline) or len(loop.segments) < 3
        count = 64 if whole else 16
        t = np.concatenate([(np.arange(count) + 0.5) / count, ends, 1 - ends])
        points, along = segment.point(t), segment.tangent(t)
        outward = np.column_stack([along[:, 1], -along[:, 0]]) / np.hypot(*along.T)[:, None]
        rows += [points - distance * outward, points + distance * outward]
    return np.vstack(rows)


def outside_loop(pieces: Sequence[Piece], distance_nm: float) -> Loop:
    """An outline at least `distance_nm` outside all pieces, for a material that goes on outside.

    A circle where the outermost outline is one; otherwise the convex hull of lines and of the tangents of curves,
    grown with round corners.
    """
    distance = checks.length("distance", distance_nm, 1e-3)
    ring = pieces[0].loop.is_circle
    if ring is not None:
        (x, y), radius = ring
        others = [piece.loop.sample(16) - (x, y) for piece in pieces[1:]]
        if all(float(np.hypot(*points.T).max()) <= radius * (1 + 1e-9) for points in others):
            return circle(radius + distance, "outside", (x, y))
    return _round_grown(_hull([p for piece in pieces for s in piece.loop.segments for p in _around(s)]), distance)


def _around(segment: Segment) -> list[Point]:
    """Corners of an open polygon that encloses the segment from its outer side, with turns of 45 degrees at most."""
    if isinstance(segment, Line):
        return [segment.start, segment.end]
    parts = 8 if not isinstance(segment, Arc) else max(1, math.ceil(abs(segment.sweep) / (math.pi / 4) - 1e-9))
    if isinstance(segment, Spline):
        parts = 16
    t = np.linspace(0, 1, parts + 1)
    points, along = segment.point(t), segment.tangent(t)
    found: list[Point] = [(float(points[0, 0]), float(points[0, 1])), (float(points[-1, 0]), float(points[-1, 1]))]
    for (p, q), (u, v) in zip(pairwise(points), pairwise(along), strict=True):
        cross = u[0] * v[1] - u[1] * v[0]
        if abs(cross) < 1e-9 * math.hypot(*u) * math.hypot(*v):
            continue
        s = ((q[0] - p[0]) * v[1] - (q[1] - p[1]) * v[0]) / cross
        found.append((float(p[0] + s * u[0]), float(p[1] + s * u[1])))
    return found


def _hull(points: list[Point]) -> list[Point]:
    """Corners of the convex hull, counter-clockwise (Andrew's monotone chain), without those of straight sides."""
    ordered = sorted(set(points))
    size = max(max(abs(x), abs(y)) for x, y in ordered)

    def chain(row: Sequence[Point]) -> list[Point]:
        kept: list[Point] = []
        for point in row:
            while len(kept) > 1:
                (ax, ay), (bx, by) = kept[-2], kept[-1]
                if (bx - ax) * (point[1] - ay) - (by - ay) * (point[0] - ax) > 1e-9 * size * math.dist(kept[-2], point):
                    break
                kept.pop()
            kept.append(point)
        return kept[:-1]

    return chain(ordered) + chain(ordered[::-1])


def _round_grown(corners: list[Point], distance: float) -> Loop:
    normals = []
    for a, b in zip(corners, corners[1:] + corners[:1], strict=True):
        long = math.dist(a, b)
        normals.append(((b[1] - a[1]) / long, (a[0] - b[0]) / long))
    segments: list[Segment] = []
    for k, (x, y) in enumerate(corners):
        (ux, uy), (vx, vy) = normals[k - 1], normals[k]
        sweep = math.atan2(ux * vy - uy * vx, ux * vx + uy * vy)
        segments.append(Arc((x, y), distance, math.atan2(uy, ux), sweep, "outside"))
        bx, by = corners[(k + 1) % len(corners)]
        start, end = (x + distance * vx, y + distance * vy), (bx + distance * vx, by + distance * vy)
        segments.append(Line(start, end, "outside"))
    return Loop(tuple(segments))
