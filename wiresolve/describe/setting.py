"""What is drawn around a section: insulators and surroundings, and the curves on which gates and surfaces lie."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from wiresolve.describe import edges as named
from wiresolve.describe import round_rims
from wiresolve.describe.curves import Line, Loop, Point, Segment
from wiresolve.describe.edges import Edges, is_material
from wiresolve.describe.gates import ArcPart, Gate, Surface, Surroundings, Touch
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.section import ADMITTED, EXCLUDED, Layer, Piece, Section
from wiresolve.describe.shapes import Cornered
from wiresolve.errors import InputError

REACH = 1000.0
"""How far surroundings go, in sizes of what they surround."""
SINK = 5e-3
"""How deep a round face is sunk into a flat one that it rests on, as a part of the size."""
FLATTEST_deg = 10.0
"""Smallest angle that a face may leave between itself and the flat one on which it rests."""
_SAME = 1e-9
_TOUCH = 1e-6
"""Metals nearer to each other than this part of the size touch."""


class Described(Protocol):
    """What a drawing needs of a problem."""

    @property
    def section(self) -> Section:
        """The cross-section."""

    @property
    def gates(self) -> tuple[Gate, ...]:
        """The gates."""

    @property
    def surfaces(self) -> tuple[Surface, ...]:
        """Pinned and charged edges."""

    @property
    def surroundings(self) -> Surroundings | None:
        """What lies around."""


@dataclass(frozen=True)
class Boundary:
    """The curves of a gate's metal, or of a surface."""

    name: str
    segments: tuple[Segment, ...]

    @property
    def length_nm(self) -> float:
        """Length of all its curves."""
        return Loop(self.segments).perimeter


@dataclass(frozen=True)
class Setting:
    """A drawing of all that the field goes through.

    Attributes
    ----------
    around : insulators and surroundings in painting order, to be painted before the section.
    gates : the metal's face of each gate, in the order of the problem's gates.
    surfaces : of each surface, in the order of the problem's surfaces ("surface 1", ...).
    rim : the outline of the section's outermost layer where it had to be cut at the ends of a gate, else None.
    box : lower left and upper right corner of the surroundings; None without.
    """

    around: tuple[Piece, ...]
    gates: tuple[Boundary, ...]
    surfaces: tuple[Boundary, ...]
    rim: Loop | None = None
    box: tuple[Point, Point] | None = None

    def pieces(self, section: Section) -> tuple[Piece, ...]:
        """Everything that is painted, in order: the surroundings, the insulators, the section."""
        own = section.pieces()
        if self.rim is not None:
            own = (replace(own[0], loop=self.rim), *own[1:])
        return (*self.around, *own)


def setting(problem: Described, reach: float = REACH) -> Setting:
    """Draw insulators and surroundings, and find the curves of gates and surfaces.

    The box of surroundings has its lower (upper) edge at the far end of a stack that ends in a gate; all its other
    edges lie `reach` times the size of section, insulators and stacks away. What no stack fills in it is of the
    material `beside`. Flat layers begin at the lowest (highest) point of section and insulators. Where this is a round
    face, which would touch the flat one in a cusp that no mesh resolves, the flat face is moved by `SINK` times the
    size into it, so that a round wire rests on a narrow foot (7 % of its width to either side).

    Raises `InputError` where a name is unknown, metals touch, or a gate would lie inside the section.
    """
    section = problem.section
    arcs = _arcs(problem)
    edges = Edges.of(section, arcs)
    rim = Loop(edges.rim) if arcs else None
    _check_claims(problem, edges)
    rings: list[Piece] = []
    metals: dict[str, Boundary] = {}
    for k, gate in enumerate(problem.gates, 1):
        if gate.touches:
            try:
                ring, face = _metal(problem, gate, edges)
            except InputError as error:
                raise error.under(f"gates[{k}]") from None
            metals[gate.name] = Boundary(gate.name, face)
            rings += [ring] if ring is not None and all(ring.loop != other.loop for other in rings) else []
    surfaces = []
    for k, surface in enumerate(problem.surfaces, 1):
        try:
            segments = edges.segments(surface.touches)
            _check_seen(edges, segments)
        except InputError as error:
            raise error.under(f"surfaces[{k}]") from None
        surfaces.append(Boundary(f"surface {k}", segments))
    slabs, box = _surroundings(problem, rings, metals, reach)
    found = tuple(metals[gate.name] for gate in problem.gates if gate.name in metals)
    whole = Setting((*slabs, *rings), found, tuple(surfaces), rim, box)
    _check_apart(problem, whole)
    return whole


def _arcs(problem: Described) -> list[ArcPart]:
    """Parts of the section's own rim on which gates or surfaces end."""
    rows = [gate.touches for gate in problem.gates if gate.insulator is None] + [s.touches for s in problem.surfaces]
    return [touch for row in rows for touch in row if isinstance(touch, ArcPart)]


def _metal(problem: Described, gate: Gate, edges: Edges) -> tuple[Piece | None, tuple[Segment, ...]]:
    """A gate's insulator and the curves of its metal."""
    section, insulator = problem.section, gate.insulator
    face = edges.segments(gate.touches) if insulator is None else edges.segments(_names(gate.touches))
    outer = [touch for touch in gate.touches if edges.is_outer(touch)]
    _check_outside(edges, face)
    if len(outer) == len(gate.touches):
        _check_inside_rim(section)
    if insulator is None:
        return None, face
    if len(outer) < len(gate.touches):
        inner = next(touch for touch in gate.touches if touch not in outer)
        remedy = 'list it as a layer with carriers = "excluded", and let the gate touch that layer\'s edge'
        raise InputError("insulator", "can be drawn around the section only", inner, remedy)
    loop, names = _grown(section, gate, edges)
    ring = Piece(f"insulator of {gate.name}", loop, insulator.material, insulator.carriers == ADMITTED, 0.0)
    if named.is_round(section):
        alike = [g for g in problem.gates if g.insulator is not None and g.insulator == insulator]
        ends = [touch for g in alike for touch in g.touches if isinstance(touch, ArcPart)]
        ring = replace(ring, loop=round_rims.cut(loop, ends))
        own = [touch for touch in gate.touches if isinstance(touch, ArcPart)]
        if own:
            segments = tuple(s for part in own for s in round_rims.within(ring.loop, part))
            return ring, segments
    shape = section.shape
    if names is None or not isinstance(shape, Cornered):
        return ring, ring.loop.segments
    return ring, tuple(named.on_sides(shape, loop.segments, names))


def _names(touches: Sequence[Touch]) -> tuple[Touch, ...]:
    return tuple(touch for touch in touches if isinstance(touch, str))


def _grown(section: Section, gate: Gate, edges: Edges) -> tuple[Loop, tuple[str, ...] | None]:
    """The outline of a gate's insulator, and the sides that it coats (None: the whole rim)."""
    insulator, coats, sides = gate.insulator, None, None
    assert insulator is not None
    if isinstance(section.shape, Cornered):
        sides = edges.sides(gate.touches)
        bare = [side for side in section.shape.sides_of("rim") if side not in sides]
        coats, sides = tuple((side, 0.0) for side in bare), sides if bare else None
    elif isinstance(section.shape, ImportedMesh) and gate.touches != ("rim",):
        remedy = "draw it as a group of the mesh, or let the gate touch the whole rim"
        raise InputError("insulator", "cannot be drawn on a part of a mesh's rim", remedy=remedy)
    coat = Layer(insulator.thickness_nm, insulator.material, EXCLUDED, sides=coats or None)
    try:
        return replace(section, layers=(*section.layers, coat)).pieces()[0].loop, sides
    except InputError as error:
        raise InputError("insulator.thickness", error.rule, error.given, error.remedy) from None


def _check_inside_rim(section: Section) -> None:
    """InputError for a patch that sticks out of the outermost outline, which gates lie on."""
    if not section.patches or isinstance(section.shape, ImportedMesh):
        return
    pieces = section.pieces()
    size = float(np.ptp(pieces[0].loop.sample(8), axis=0).max())
    t, beside = (np.arange(33) + 0.5) / 33, named.nearest(pieces[0].loop.segments)
    for piece in pieces[-len(section.patches) :]:
        for segment in piece.loop.segments:
            along = segment.tangent(t)
            inwards = np.column_stack([-along[:, 1], along[:, 0]]) / np.hypot(*along.T)[:, None] * beside * size
            if not pieces[0].loop.contains(segment.point(t) + inwards).all():
                rule = f"lies on the section's rim, out of which {piece.name} sticks"
                remedy = "draw the section so that its core or a layer encloses all patches"
                raise InputError("touches", rule, remedy=remedy)


def _check_outside(edges: Edges, face: Sequence[Segment]) -> None:
    """InputError unless a metal has the section on one side and nothing of it on the other."""
    for left, right in edges.owners(face):
        if is_material(left) and is_material(right):
            assert left is not None and right is not None
            rule = f"puts the gate inside the section, between {left.name} and {right.name}"
            if left is right:
                rule = f"puts the gate inside the section, in {left.name}"
            raise InputError("touches", rule, remedy='a gate lies on the outer boundary, or on that of a "void"')
        if not is_material(left) and not is_material(right):
            raise InputError(
                "touches", "names an edge that is cut away by a void", remedy="let the gate touch the rest"
            )


def _check_seen(edges: Edges, segments: Sequence[Segment]) -> None:
    """InputError for an edge that is painted over, at least in part."""
    for left, right in edges.owners(segments):
        if left is right:
            what = f"painted over by {left.name}" if left is not None else "outside the section"
            rule = f"names an edge that is, at least in part, {what}"
            raise InputError("touches", rule, remedy="name the edge of what is painted there")


def _check_claims(problem: Described, edges: Edges) -> None:
    """InputError where gates would share an edge, or insulators would share a round rim."""
    taken: dict[str, str] = {}
    parts: list[tuple[str, ArcPart]] = []
    insulated: dict[str, Gate] = {}
    outline = problem.section.shape
    for k, gate in enumerate(problem.gates, 1):
        field = f"gates[{k}].touches"
        for touch in gate.touches:
            if isinstance(touch, ArcPart):
                if not named.is_round(problem.section):
                    try:
                        Edges.of(problem.section, [touch])
                    except InputError as error:
                        raise error.under(f"gates[{k}]") from None
                for other, part in parts:
                    if round_rims.overlap(part, touch):
                        raise _touching(field, gate.name, other, "their parts of the rim meet")
                if other := taken.get("rim", ""):
                    raise _touching(field, gate.name, other, "both lie on the rim")
                parts.append((gate.name, touch))
                continue
            whole = isinstance(outline, Cornered) and touch in outline.edge_names()
            for name in edges.sides([touch]) if whole else (touch,):
                if (other := taken.get(name, "")) and other != gate.name:
                    raise _touching(field, gate.name, other, f"both lie on '{name}'")
                if name == "rim" and (others := [o for o, _ in parts if o != gate.name]):
                    raise _touching(field, gate.name, others[0], "both lie on the rim")
                taken[name] = gate.name
        if named.is_round(problem.section) and any(edges.is_outer(t) for t in gate.touches if _known(edges, t)):
            for other_gate in insulated.values():
                if other_gate.insulator != gate.insulator:
                    rule = f"must be that of gate '{other_gate.name}', which lies on the same round rim"
                    raise InputError(f"gates[{k}].insulator", rule, remedy="or draw the insulator as a layer")
            insulated[gate.name] = gate


def _known(edges: Edges, touch: Touch) -> bool:
    try:
        edges.segments([touch])
    except InputError:
        return False
    return True


def _touching(field: str, one: str, other: str, where: str) -> InputError:
    rule = f"gates '{other}' and '{one}' touch: {where}"
    return InputError(field, rule, remedy="leave a gap between them, or make them one gate")


def _check_apart(problem: Described, whole: Setting) -> None:
    """InputError where metals, or pinned edges, meet at a point, or two boundaries share a curve."""
    held = [(f"gates[{k}].touches", f"gate '{b.name}'", b, True) for k, b in enumerate(whole.gates, 1)]
    for k, (surface, boundary) in enumerate(zip(problem.surfaces, whole.surfaces, strict=True), 1):
        held.append((f"surfaces[{k}].touches", boundary.name, boundary, surface.pinned_at_eV is not None))
    if len(held) < 2:
        return
    size = float(np.ptp(np.vstack([p.loop.sample(8) for p in problem.section.pieces()]), axis=0).max())
    for j, (field, one, a, fixed) in enumerate(held):
        for _, other, b, also in held[:j]:
            if _share(a.segments, b.segments, _TOUCH * size):
                raise InputError(
                    field, f"{one} and {other} lie on the same edge", remedy="give them edges of their own"
                )
            if fixed and also and _near(a.segments, b.segments, _TOUCH * size):
                rule = f"{other} and {one} touch: the potential would jump there"
                raise InputError(field, rule, remedy="leave a gap between them, or make them one")


def _share(one: Sequence[Segment], other: Sequence[Segment], near: float) -> bool:
    """Whether curves of two rows run on top of each other."""
    t = np.array([0.25, 0.5, 0.75])
    return any(bool((distances(a.point(t), b) < near).all()) for a in one for b in other) or any(
        bool((distances(b.point(t), a) < near).all()) for a in one for b in other
    )


def _near(one: Sequence[Segment], other: Sequence[Segment], near: float) -> bool:
    t = np.linspace(0, 1, 33)
    return any(
        bool((distances(a.point(t), b) < near).any() or (distances(b.point(t), a) < near).any())
        for a in one
        for b in other
    )


def distances(points: np.ndarray, segment: Segment) -> np.ndarray:
    """How far points (n, 2) are from a curve, in nm, shape (n,); from chords of a bent one."""
    marks = segment.point(np.linspace(0, 1, 2 if isinstance(segment, Line) else 513))
    start, along = marks[:-1], np.diff(marks, axis=0)
    off = points[:, None] - start[None]
    t = np.clip(np.einsum("ijk,jk->ij", off, along) / np.maximum((along**2).sum(axis=1), 1e-300), 0, 1)
    return np.asarray(np.hypot(*np.moveaxis(off - t[:, :, None] * along[None], 2, 0)).min(axis=1))


def _surroundings(
    problem: Described, rings: Sequence[Piece], metals: dict[str, Boundary], reach: float
) -> tuple[list[Piece], tuple[Point, Point] | None]:
    """The box and the flat layers in it; the faces of gates at its ends are added to `metals`."""
    given = problem.surroundings
    if given is None:
        return [], None
    assert given.beside is not None
    segments = [s for piece in (*rings, *problem.section.pieces()) for s in piece.loop.segments]
    points = np.vstack([s.point(np.linspace(0, 1, 2 if isinstance(s, Line) else 4097)) for s in segments])
    (left, low), (right, high) = points.min(axis=0), points.max(axis=0)
    size = float(max(right - left, high - low))
    stacks = {"below": given.below, "above": given.above}
    whole = size + sum(slab.thickness_nm for row in stacks.values() for slab in row)
    far = reach * whole
    x0, x1 = float(left) - far, float(right) + far
    ends, pieces = {}, []
    for side, sense, edge in (("below", -1, float(low)), ("above", 1, float(high))):
        sink = SINK * size if stacks[side] and _leaves_cusp(segments, edge, sense, size) else 0.0
        face = edge - sense * sink
        for k, slab in enumerate(stacks[side], 1):
            if slab.thickness_nm < 4 * sink:
                rule = f"is too thin: a round face is sunk by {sink:.2g} nm into what it rests on"
                remedy = f"at least {4 * sink:.2g} nm, or give the section a flat side there"
                raise InputError(f"surroundings.{side}[{k}].thickness", rule, f"{slab.thickness_nm:g} nm", remedy)
            outer = face + sense * slab.thickness_nm
            loop = _rectangle(x0, min(face, outer), x1, max(face, outer))
            pieces.append(Piece(f"{side} {k}", loop, slab.material, False, 0.0))
            face, sink = outer, 0.0
        gate = given.below_gate if side == "below" else given.above_gate
        ends[side] = face if gate is not None else edge + sense * far
        if gate is not None:
            a, b = (x0, face), (x1, face)
            metals[gate] = Boundary(gate, (Line(a, b, gate) if side == "below" else Line(b, a, gate),))
    y0, y1 = ends["below"], ends["above"]
    return [Piece("beside", _rectangle(x0, y0, x1, y1), given.beside, False, 0.0), *pieces], ((x0, y0), (x1, y1))


def _rectangle(x0: float, y0: float, x1: float, y1: float) -> Loop:
    corners = ((x0, y0), (x1, y0), (x1, y1), (x0, y1))
    rows = zip(corners, corners[1:] + corners[:1], ("bottom", "right", "top", "left"), strict=True)
    return Loop(tuple(Line(a, b, name) for a, b, name in rows))


def _leaves_cusp(segments: Sequence[Segment], edge: float, sense: int, size: float) -> bool:
    """Whether a curve leaves the lowest (highest) line at a small angle, other than along it."""
    steep = math.sin(math.radians(FLATTEST_deg))
    for segment in segments:
        t = np.array([0.0, 1.0]) if isinstance(segment, Line) else np.linspace(0, 1, 4097)
        depth = sense * (edge - segment.point(t)[:, 1])  # 0 on the flat face, positive away from it
        if depth.min() > _SAME * size * (1 if isinstance(segment, Line) else 100) or depth.max() < _SAME * size:
            continue
        (dx, dy), *_ = segment.tangent(t[[int(np.argmin(depth))]])
        if abs(dy) < steep * math.hypot(dx, dy):
            return True
    return False
