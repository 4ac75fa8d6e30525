"""Which rotations and reflections take a section, and a potential in it, exactly to itself.

Only maps that are proven are told: each outline is taken to another one of the same matter, and no two unlike pieces
that may overlap change their order of painting. A symmetry may be missed (two outlines cut differently into segments);
none is claimed that is not there.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Arc, EllipseArc, Line, Loop, Point, Segment, Spline, cos_sin
from wiresolve.describe.doping import Doping
from wiresolve.describe.potential import Potential
from wiresolve.describe.section import VOID, Piece, Section
from wiresolve.describe.setting import Setting, distances

Array = NDArray[np.float64]
Matrix = tuple[tuple[float, float], tuple[float, float]]
IDENTITY: Matrix = ((1.0, 0.0), (0.0, 1.0))
ALIKE = 1e-9
"""Outlines that differ by less than this part of the section's size are the same."""
MARKS = 9
"""Points compared on each segment, both ends among them: five fix a conic."""
_ASTRAY = 2e-5
"""The same for the curves of gates, whose distance is taken from chords."""
MOST_MARKS = 128
"""Points compared on a closed curve of one segment, at parameters that its own symmetries exchange."""
IMPORTED = ("outline", "mesh")
"""Kinds of shapes that come from measured or meshed data, whose symmetry would be an accident of rounding."""
NAMES = {1: "no rotation", 2: "twofold", 3: "threefold", 4: "fourfold", 5: "fivefold", 6: "sixfold"}


@dataclass(frozen=True)
class Symmetry:
    """Maps about `center_nm` that take the section and its potential to themselves.

    `maps` are orthogonal 2 x 2 matrices that act on (x, y), the identity first, closed under products. Where
    `continuous`, every rotation and reflection is one, and `maps` holds the identity alone.
    """

    center_nm: Point
    continuous: bool
    maps: tuple[Matrix, ...]


def symmetries(section: Section, potential: Potential | None = None, around: Setting | None = None) -> Symmetry:
    """The symmetry of everything painted and doped, of the potential, and of gates and surroundings.

    A material that goes on outside is the same in all directions and breaks nothing. An electric field leaves the maps
    that keep its direction; a harmonic well those that take the x and y axes to themselves and keep the origin; a
    function or a file the identity alone. So do imported outlines.
    """
    found = _of_section(section, potential)
    if around is None:
        return found
    size = float(np.ptp(np.vstack([piece.loop.sample(8) for piece in section.pieces()]), axis=0).max())
    center = np.array(found.center_nm)
    turned = [k * math.pi / 2 for k in range(4)]
    maps = [*map(rotation, turned), *map(reflection, turned)] if found.continuous else list(found.maps)
    rings = [ring for piece in around.around if (ring := piece.loop.is_circle) is not None]
    whole = len(rings) == len(around.around) and all(math.dist(at, found.center_nm) <= ALIKE * size for at, _ in rings)
    if found.continuous and whole and all(_goes_round(b.segments) for b in (*around.gates, *around.surfaces)):
        return found
    rows = [piece.loop.segments for piece in around.around]
    rows += [boundary.segments for boundary in (*around.gates, *around.surfaces)]
    kept = [m for m in maps if all(_keeps(np.array(m), row, center, _ASTRAY * size) for row in rows)]
    return Symmetry(found.center_nm, False, _ordered(kept))


def _goes_round(segments: Sequence[Segment]) -> bool:
    return Loop(tuple(segments)).is_circle is not None


def _keeps(acting: Array, segments: Sequence[Segment], center: Array, near: float) -> bool:
    """Whether a map takes some curves to themselves, judged at points of each."""
    t = np.linspace(0, 1, MARKS)
    moved = np.vstack([(segment.point(t) - center) @ acting.T + center for segment in segments])
    return bool((np.min([distances(moved, segment) for segment in segments], axis=0) < near).all())


def _of_section(section: Section, potential: Potential | None) -> Symmetry:
    outlines = _outlines(section)
    if outlines is None or _arbitrary(potential):
        return Symmetry((0.0, 0.0), False, (IDENTITY,))
    rings, curves = outlines
    size = float(np.ptp(np.vstack([piece.loop.sample(8) for piece in section.pieces()]), axis=0).max())
    center = _center(section.pieces(), ALIKE * size)
    allowed = _Allowed(potential, np.array(center), ALIKE * size)
    doping = [section.doping_of(piece.name) for piece in section.pieces()]
    figure = _Figure(section.pieces(), rings, curves, np.array(center), ALIKE * size, doping)
    if not figure.curved and all(math.dist(at, center) <= figure.near for at, _ in rings.values()):
        if allowed.everything:
            return Symmetry(center, True, (IDENTITY,))
        # Of all rotations and reflections few keep a field or a well, and those can be named.
        return Symmetry(center, False, _ordered([m for m in allowed.candidates() if allowed(m)]))
    return Symmetry(center, False, _ordered([m for m in figure.maps() if allowed(m)]))


def described(symmetry: Symmetry) -> str:
    """The symmetry in words: "sixfold with reflections (12 operations)", "none", ..."""
    if symmetry.continuous:
        return "circle: every rotation and reflection"
    turns = [m for m in symmetry.maps if _determinant(m) > 0]
    mirrors = [m for m in symmetry.maps if _determinant(m) < 0]
    count = len(symmetry.maps)
    if count == 1:
        return "none"
    if len(turns) == 1:
        angle = math.degrees(math.atan2(mirrors[0][1][0], mirrors[0][0][0])) / 2 % 180
        return f"one mirror line, at {round(angle, 6):g} deg from x (2 operations)"
    fold = NAMES.get(len(turns), f"{len(turns)}-fold")
    return f"{fold} {'with' if mirrors else 'without'} reflections ({count} operations)"


def rotation(angle: float) -> Matrix:
    """The rotation by `angle` (radians), exact at quarter turns."""
    cosine, sine = cos_sin(angle)
    return (cosine, -sine), (sine, cosine)


def reflection(angle: float) -> Matrix:
    """The reflection that takes the direction x to the direction `angle` (radians): its mirror line lies halfway."""
    cosine, sine = cos_sin(angle)
    return (cosine, sine), (sine, -cosine)


def _determinant(matrix: Matrix) -> float:
    (a, b), (c, d) = matrix
    return a * d - b * c


def _ordered(maps: Sequence[Matrix]) -> tuple[Matrix, ...]:
    """Rotations before reflections, each by angle; the identity is first."""
    return tuple(sorted(maps, key=lambda m: (_determinant(m) < 0, round(math.atan2(m[1][0], m[0][0]), 9) % math.tau)))


class _Allowed:
    """Which maps a potential lets pass."""

    def __init__(self, potential: Potential | None, center: Array, near: float) -> None:
        given = potential.field_V_per_nm if potential is not None else None
        self.field = None if given is None or given == (0.0, 0.0) else np.array(given)
        self.well = potential is not None and potential.harmonic_eV is not None
        self.center, self.near = center, near

    @property
    def everything(self) -> bool:
        return self.field is None and not self.well

    def __call__(self, matrix: Matrix) -> bool:
        if matrix == IDENTITY:
            return True
        acting = np.array(matrix)
        # About the section's centre and about the origin, the well's, a map is the same only where it keeps both.
        astray = float(np.hypot(*(acting @ self.center - self.center)))
        if self.well and (matrix[0][1] != 0 or matrix[1][0] != 0 or astray > self.near):
            return False
        return self.field is None or bool(
            np.abs(acting @ self.field - self.field).max() <= ALIKE * np.abs(self.field).max()
        )

    def candidates(self) -> list[Matrix]:
        """Maps of a circle that might keep the potential; the identity and at least all that do."""
        if self.field is not None:
            return [IDENTITY, reflection(_snapped(2 * math.atan2(self.field[1], self.field[0])))]
        return [IDENTITY, rotation(math.pi), reflection(0.0), reflection(math.pi)]


def _arbitrary(potential: Potential | None) -> bool:
    """Whether a potential has a part of which nothing is known: a function, a file, whatever is not listed here."""
    known = ("field_V_per_nm", "harmonic_eV", "name")
    if potential is None:
        return False
    return any(
        getattr(potential, part.name) not in (None, "", ()) for part in fields(potential) if part.name not in known
    )


def _outlines(section: Section) -> tuple[dict[int, tuple[Point, float]], dict[int, Array]] | None:
    """Of each painted piece, by its number: centre and radius of a circle, else marks (segments, points, 2).

    None where an outline is imported or of a kind that marks cannot tell.
    """
    if any(shape.kind in IMPORTED for shape in (section.shape, *(patch.shape for patch in section.patches))):
        return None
    rings, curves = {}, {}
    for k, piece in enumerate(section.pieces()):
        ring, marks = piece.loop.is_circle, _marks(piece.loop)
        if ring is not None:
            rings[k] = ring
        elif marks is not None:
            curves[k] = marks
        else:
            return None
    return rings, curves


def _marks(loop: Loop) -> Array | None:
    """Points of each segment, its ends included; of a closed curve its points one by one, shape (n, 1, 2)."""
    only = loop.segments[0]
    if len(loop.segments) == 1:
        if isinstance(only, Spline):
            nodes = np.array(only.points[:-1])
            stride = max(1, len(nodes) // MOST_MARKS)
            return nodes[::stride, None, :] if len(nodes) % stride == 0 else None
        t = np.arange(MOST_MARKS) / MOST_MARKS
        return only.point(t)[:, None, :]
    if not all(isinstance(segment, Line | Arc | EllipseArc) for segment in loop.segments):
        return None
    t = np.linspace(0, 1, MARKS)
    return np.array([segment.point(t) for segment in loop.segments])


def _center(pieces: Sequence[Piece], near: float) -> Point:
    """The one point that every map must keep: the mean of the outlines' centroids, weighted by their areas."""
    areas = np.array([piece.loop.area for piece in pieces])
    at = areas @ np.array([piece.loop.centroid for piece in pieces]) / areas.sum()
    # The origin is exact where the true centre is: a well about it is then seen to share it.
    return (0.0, 0.0) if np.hypot(*at) <= near else (float(at[0]), float(at[1]))


def _snapped(angle: float) -> float:
    """The nearest multiple of 15 degrees where `angle` is one within rounding."""
    step = math.pi / 12
    return round(angle / step) * step if abs(angle / step - round(angle / step)) < 1e-8 else angle


class _Figure:
    """The painted outlines about their centre, and which maps take them to themselves."""

    def __init__(
        self,
        pieces: Sequence[Piece],
        rings: dict[int, tuple[Point, float]],
        curves: dict[int, Array],
        center: Array,
        near: float,
        doping: Sequence[Doping],
    ) -> None:
        self.matter = [
            (p.material, p.carriers, p.offset_eV, d) if p.material != VOID else (VOID,)
            for p, d in zip(pieces, doping, strict=True)
        ]
        self.rings = {k: (np.array(at) - center, radius) for k, (at, radius) in rings.items()}
        self.curves = {k: marks - center for k, marks in curves.items()}
        self.near = near
        self.boxes = [_box(piece.loop) for piece in pieces]
        self.centroids = [np.array(piece.loop.centroid) - center for piece in pieces]

    @property
    def curved(self) -> bool:
        """Whether any outline is no circle."""
        return bool(self.curves)

    def maps(self) -> list[Matrix]:
        """All maps, from the smallest turn and one reflection: their products are the whole group."""
        angles = self._rarest()
        if angles is None:
            return [IDENTITY]
        turns = sorted(float(a) for a in (angles - angles[0]) % math.tau)
        step = math.tau
        for angle in turns:
            fold = round(math.tau / angle) if angle > 1e-6 else 0
            if fold > 1 and abs(angle - math.tau / fold) < 1e-6 and self._kept(rotation(math.tau / fold)):
                step = math.tau / fold
                break
        fold = round(math.tau / step)
        found = [rotation(k * step) for k in range(fold)]
        for angle in angles:
            sum_ = _snapped(float(angles[0] + angle))
            if self._kept(reflection(sum_)):
                found += [reflection(sum_ + k * step) for k in range(fold)]
                break
        return found

    def _rarest(self) -> Array | None:
        """Angles of marks at one distance from the centre, in one kind of matter, that every map must permute: few."""
        rows: dict[tuple[object, ...], list[Array]] = {}
        for k, (at, _) in self.rings.items():
            rows.setdefault(("ring", *self.matter[k]), []).append(at[None])
        for k, marks in self.curves.items():
            rows.setdefault(("curve", *self.matter[k]), []).append(np.vstack([marks[:, 0], marks[:, -1]]))
        groups = []
        for found in rows.values():
            points = np.vstack(found)
            distance = np.hypot(*points.T)
            order = np.argsort(distance)
            cuts = np.flatnonzero(np.diff(distance[order]) > 10 * self.near) + 1
            for group in np.split(order, cuts):
                if distance[group[0]] > 1e3 * self.near:
                    x, y = points[group].T
                    groups.append(_distinct(np.arctan2(y, x), 10 * self.near / distance[group[0]]))
        return min(groups, key=len) if groups else None

    def _kept(self, matrix: Matrix) -> bool:
        """Whether the map takes every outline to one of the same matter and keeps what the order of painting shows."""
        onto = self._onto(np.array(matrix))
        if onto is None:
            return False
        for i in range(len(onto)):
            for j in range(i):
                if self.matter[i] != self.matter[j] and onto[i] < onto[j] and self._may_overlap(i, j):
                    return False
        return True

    def _onto(self, acting: Array) -> list[int] | None:
        """To which piece each piece is taken, one to one."""
        free, found = list(range(len(self.matter))), []
        for k in range(len(self.matter)):
            for other in free:
                if self.matter[other] == self.matter[k] and self._same(acting, k, other):
                    free.remove(other)
                    found.append(other)
                    break
            else:
                return None
        return found

    def _same(self, acting: Array, k: int, other: int) -> bool:
        if float(np.hypot(*(acting @ self.centroids[k] - self.centroids[other]))) > 100 * self.near:
            return False
        if k in self.rings and other in self.rings:
            (at, radius), (there, size) = self.rings[k], self.rings[other]
            return abs(radius - size) <= self.near and float(np.hypot(*(acting @ at - there))) <= self.near
        if k in self.curves and other in self.curves:
            return _same_curve(self.curves[k] @ acting.T, self.curves[other], self.near)
        return False

    def _may_overlap(self, i: int, j: int) -> bool:
        (low, high), (start, end) = self.boxes[i], self.boxes[j]
        return bool((np.minimum(high, end) - np.maximum(low, start) > self.near).all())


def _distinct(angles: Array, near: float) -> Array:
    """The angles without those that lie within `near` of the one before, around the circle."""
    ordered = np.sort(angles % math.tau)
    kept = ordered[(ordered - np.roll(ordered, 1)) % math.tau > near]
    return kept if len(kept) else ordered[:1]


def _box(loop: Loop) -> tuple[Array, Array]:
    """A box that surely holds the outline: a curved segment bulges over its chords by less than half of one."""
    low, high = np.full(2, np.inf), np.full(2, -np.inf)
    for segment in loop.segments:
        points = segment.point(np.linspace(0, 1, 2 if isinstance(segment, Line) else 65))
        bulge = 0.0 if isinstance(segment, Line) else float(np.hypot(*np.diff(points, axis=0).T).max()) / 2
        low, high = np.minimum(low, points.min(axis=0) - bulge), np.maximum(high, points.max(axis=0) + bulge)
    return low, high


def _same_curve(marks: Array, others: Array, near: float) -> bool:
    """Whether two closed outlines are the same: segment upon segment, whatever their direction and beginning."""
    if marks.shape != others.shape:
        return False
    middle = marks.shape[1] // 2
    # Both outlines follow their segments in order, so where one segment lies tells where all others must lie.
    apart = np.hypot(*(others[:, middle] - marks[0, middle]).T)
    for first in np.flatnonzero(apart <= near):
        for way in (1, -1):
            placed = others[(first + way * np.arange(len(others))) % len(others)][:, ::way]
            if float(np.abs(placed - marks).max()) <= near:
                return True
    return False
