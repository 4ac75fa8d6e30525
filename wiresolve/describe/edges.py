"""The named edges of a section: which curves a name stands for, and what lies on either side of them."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from wiresolve.describe import round_rims
from wiresolve.describe.curves import Array, Line, Loop, Segment, Spline
from wiresolve.describe.gates import ArcPart, Touch
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.planar_map import INTERFACE, RIM, undirected
from wiresolve.describe.section import VOID, Piece, Section
from wiresolve.describe.shapes import Circle, Cornered, Ellipse, Shape
from wiresolve.errors import InputError

BESIDE, BESIDE_SPLINE = 1e-5, 1e-4
"""How far beside a curve, as a part of the section's size, it is asked what lies there: splines contain by chords."""
_INNER = re.compile(r"(core|layer [1-9]\d{0,3}|patch [1-9]\d{0,3}) (.+)")
_SLANT = 1e-6


@dataclass(frozen=True)
class Edges:
    """What edge names mean on a section. `rim` is its outer boundary, cut where parts of a round one end."""

    section: Section
    rim: tuple[Segment, ...]

    @staticmethod
    def of(section: Section, parts: Sequence[ArcPart] = ()) -> Edges:
        """The edges of a section whose round rim is cut at the ends of these parts."""
        return Edges(section, outer_boundary(section) if not parts else round_rims.cut(_round(section), parts).segments)

    @property
    def names(self) -> tuple[str, ...]:
        """All names that tables may use: the outer boundary's, then those of pieces' outlines."""
        section = self.section
        inner = [] if section.groups else ["core rim"]
        inner += [f"layer {k} rim" for k in range(1, len(section.layers) + 1)]
        inner += [f"patch {k} rim" for k in range(1, len(section.patches) + 1)]
        return (*section.shape.edge_names(), *inner)

    def sides(self, touches: Sequence[Touch]) -> tuple[str, ...]:
        """The numbered sides of a shape with corners that names stand for, in order."""
        shape = self.section.shape
        assert isinstance(shape, Cornered)
        named = {side for touch in touches if isinstance(touch, str) for side in shape.sides_of(touch)}
        return tuple(side for side in shape.sides_of("rim") if side in named)

    def segments(self, touches: Sequence[Touch]) -> tuple[Segment, ...]:
        """The curves that names stand for; InputError for an unknown name."""
        found: list[Segment] = []
        outer = [touch for touch in touches if isinstance(touch, str) and not _INNER.fullmatch(touch)]
        for touch in touches:
            if isinstance(touch, ArcPart):
                found += round_rims.within(Loop(self.rim), touch)
            elif match := _INNER.fullmatch(touch):
                found += self._inner(touch, match[1], match[2])
        return tuple(dict.fromkeys(found + self._outer(outer)))

    def is_outer(self, touch: Touch) -> bool:
        """Whether a name is that of a part of the outer boundary."""
        if isinstance(touch, ArcPart):
            return True
        if _INNER.fullmatch(touch):
            return False
        rim = {undirected(segment) for segment in self.rim}
        return all(undirected(segment) in rim for segment in self._outer([touch]))

    def _outer(self, names: Sequence[str]) -> list[Segment]:
        shape = self.section.shape
        found: list[Segment] = []
        if isinstance(shape, Cornered) and names:
            for name in names:
                if name not in shape.edge_names():
                    raise self._unknown(name)
            return list(self.rim) if "rim" in names else on_sides(shape, self.rim, self.sides(names))
        for name in names:
            if name == RIM:
                found += self.rim
            elif isinstance(shape, ImportedMesh) and name in shape.edge_names() and name != INTERFACE:
                found += [s for s in self.rim if s.name == name] or self._lines_named(name)
            else:
                raise self._unknown(name)
        return found

    def _lines_named(self, name: str) -> list[Segment]:
        """Curves of a mesh between its faces, each once."""
        shape = self.section.shape
        assert isinstance(shape, ImportedMesh)
        loops = [loop for face in shape.faces() for loop in (face.outer, *face.holes)]
        return list({undirected(s): s for loop in loops for s in loop.segments if s.name == name}.values())

    def _inner(self, whole: str, piece_name: str, edge: str) -> list[Segment]:
        piece = next((p for p in self.section.pieces() if p.name == piece_name), None)
        if piece is None:
            raise self._unknown(whole)
        shape = self.section.shape
        if piece_name.startswith("patch"):
            shape = self.section.patches[int(piece_name[6:]) - 1].shape
        if edge == RIM:
            return list(piece.loop.segments)
        if not isinstance(shape, Cornered) or edge not in shape.edge_names():
            raise self._unknown(whole)
        return on_sides(shape, piece.loop.segments, shape.sides_of(edge))

    def _unknown(self, name: str) -> InputError:
        words = list(self.names)
        many = [w for w in words if not re.fullmatch(r"side \d+", w)]
        if len(words) > 24:
            count = len(words) - len(many)
            words = [f"side 1 to side {count}"] * bool(count) + many[:20]
        known = ", ".join(f"'{word}'" for word in words)
        return InputError("touches", "the section has no edge of this name", name[:40], f"its edges are {known}")

    @cached_property
    def _size(self) -> float:
        points = np.vstack([piece.loop.sample(8) for piece in self.section.pieces()])
        return float(np.ptp(points, axis=0).max())

    def owners(self, segments: Sequence[Segment]) -> list[tuple[Piece | None, Piece | None]]:
        """Of places along curves: the section's pieces on the left (inside a loop) and on the right; None: nothing."""
        t = (np.arange(9) + 0.5) / 9
        left, right = [], []
        beside = nearest([*segments, *self.rim])
        for segment in segments:
            points, along = segment.point(t), segment.tangent(t)
            away = np.column_stack([along[:, 1], -along[:, 0]]) / np.hypot(*along.T)[:, None] * beside * self._size
            left.append(points - away)
            right.append(points + away)
        return list(zip(self._owner(np.vstack(left)), self._owner(np.vstack(right)), strict=True)) if left else []

    def _owner(self, points: Array) -> list[Piece | None]:
        found: list[Piece | None] = [None] * len(points)
        for piece in self.section.pieces():
            inside = piece.loop.contains(points)
            for hole in piece.holes or ():
                inside &= ~hole.contains(points)
            for k in np.flatnonzero(inside):
                found[k] = piece
        return found


def outer_boundary(section: Section) -> tuple[Segment, ...]:
    """The outline of the outermost layer, or the outer boundaries of a mesh without layers."""
    if isinstance(section.shape, ImportedMesh) and not section.layers:
        return tuple(segment for loop in section.shape.map.outlines for segment in loop.segments)
    return section.pieces()[0].loop.segments


def nearest(segments: Sequence[Segment]) -> float:
    """How near to these curves it can be asked on which side of them a point lies, as a part of the size."""
    return BESIDE_SPLINE if any(isinstance(segment, Spline) for segment in segments) else BESIDE


def is_round(section: Section) -> bool:
    """Whether the outer boundary is a circle, an ellipse, or parallel to one."""
    return isinstance(section.shape, Circle | Ellipse)


def _round(section: Section) -> Loop:
    if not is_round(section):
        rule = "a part by two angles belongs to the rim of a circle or an ellipse"
        shape = section.shape
        names = ", ".join(f"'{name}'" for name in shape.edge_names()[:12])
        raise InputError("touches", rule, f"a section of shape {shape.kind}", f"its edges are {names}")
    return section.pieces()[0].loop


def on_sides(shape: Shape, segments: Sequence[Segment], sides: Sequence[str]) -> list[Segment]:
    """The segments of an outline that lie along numbered sides, roundings between two of these included.

    The blunt ends of a coat, which stand across its side, are no part of it.
    """
    count = len(shape.sides_of("rim"))
    corners = {f"corner {k}" for k in range(1, count + 1) if {f"side {k}", f"side {(k - 2) % count + 1}"} <= set(sides)}
    direction = {s.name: s for s in shape.loop().segments if isinstance(s, Line)}
    found = []
    for segment in segments:
        if segment.name in corners:
            found.append(segment)
        elif segment.name in sides and (own := direction.get(segment.name)) is not None:
            (ux, uy), (vx, vy) = segment.tangent(np.zeros(1))[0], own.tangent(np.zeros(1))[0]
            if abs(ux * vy - uy * vx) < _SLANT * math.hypot(ux, uy) * math.hypot(vx, vy):
                found.append(segment)
    return found


def is_material(piece: Piece | None) -> bool:
    """Whether something is there that is meshed."""
    return piece is not None and piece.material != VOID
