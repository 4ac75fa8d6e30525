"""A section's pieces drawn in a Gmsh session: surfaces that meet without gaps, each with the piece that owns it."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import Any

import numpy as np

from wiresolve.describe.curves import Arc, EllipseArc, Line, Loop, Parabolas, Point, Segment, Spline
from wiresolve.describe.planar_map import outlines, undirected
from wiresolve.describe.section import GAP, VOID, Piece

_LENGTHS = 1e-4
"""How exactly Gmsh integrates lengths along splines and chains: the usual 1e-9 takes seconds across many joints."""


def draw(gmsh: Any, pieces: Sequence[Piece]) -> dict[int, int]:
    """Draw pieces in painting order, later over earlier; the number of the owning piece by each surface's tag.

    `gmsh` is the module, with a session begun; nothing is synchronised.
    """
    occ, loops = gmsh.model.occ, [p.loop for p in pieces]
    if any(isinstance(segment, Spline | Parabolas) for loop in loops for segment in loop.segments):
        gmsh.option.setNumber("Mesh.LcIntegrationPrecision", _LENGTHS)
    if any(piece.holes is not None for piece in pieces):
        return _map(occ, pieces)
    if _strictly_nested(loops):
        # Rings share their curves, which saves the Boolean operation that the general case needs.
        curves = [_curve_loop(occ, loop) for loop in loops]
        return {int(occ.addPlaneSurface(curves[i : i + 2])): i for i in range(len(curves))}
    return _fragmented(occ, [(i, occ.addPlaneSurface([_curve_loop(occ, loop)])) for i, loop in enumerate(loops)])


def _fragmented(occ: Any, surfaces: list[tuple[int, int]]) -> dict[int, int]:
    """Owners of the parts into which (piece, surface) cut each other: the last piece that covers a part."""
    parts = [(2, tag) for _, tag in surfaces]
    _, children = occ.fragment(parts[:1], parts[1:])
    owners = zip(surfaces, children, strict=True)
    return {tag: piece for (piece, _), some in owners for dim, tag in some if dim == 2}


def _map(occ: Any, pieces: Sequence[Piece]) -> dict[int, int]:
    """Faces of a map from the curves that they share, rings around it, and patches that cut it.

    It is known what bounds every face, so that no Boolean operation is needed unless there are patches.
    """
    of_map = [i for i, piece in enumerate(pieces) if piece.holes is not None]
    first, last = of_map[0], of_map[-1]
    points: dict[Point, int] = {}
    curves: dict[tuple[Point, ...], int] = {}

    def point(at: Point) -> int:
        if at not in points:
            points[at] = occ.addPoint(*at, 0)
        return points[at]

    def closed(loop: Loop) -> int:
        row = []
        for segment in loop.segments:
            key = undirected(segment)
            if key not in curves:
                curves[key] = _curve(occ, segment, point(segment.start), point(segment.end))
            row.append(curves[key])
        return int(occ.addCurveLoop(row))

    # Surroundings are no rings: the map is painted over them.
    flat = [i for i in range(first) if pieces[i].name.split()[0] in ("beside", "below", "above")]
    ring = [i for i in range(first) if i not in flat]
    rings = [_curve_loop(occ, pieces[i].loop) for i in ring]
    owner = {int(occ.addPlaneSurface(rings[n : n + 2])): i for n, i in enumerate(ring[:-1])}
    # A gap between faces is drawn by nothing; a face of void is, as its curves bound others, and is taken out later.
    faces = [(i, pieces[i].loop, pieces[i].holes or ()) for i in of_map if flat or not _is_gap(pieces[i])]
    if ring:
        around = [closed(loop) for loop in outlines([(loop, holes) for _, loop, holes in faces])]
        owner[int(occ.addPlaneSurface([rings[-1], *around]))] = ring[-1]
    for i, loop, holes in faces:
        owner[int(occ.addPlaneSurface([closed(loop), *(closed(hole) for hole in holes)]))] = i
    patches = range(last + 1, len(pieces))
    if not patches and not flat:
        return owner
    beneath = [(i, int(occ.addPlaneSurface([_curve_loop(occ, pieces[i].loop)]))) for i in flat]
    painted = [(i, int(occ.addPlaneSurface([_curve_loop(occ, pieces[i].loop)]))) for i in patches]
    return _fragmented(occ, [*beneath, *((i, tag) for tag, i in owner.items()), *painted])


def _is_gap(piece: Piece) -> bool:
    return piece.name == GAP and piece.material == VOID


def _strictly_nested(loops: Sequence[Loop]) -> bool:
    """Each loop strictly inside the one before it, by a clearance of a thousandth of its size."""
    for outer, inner in pairwise(loops):
        samples = inner.sample(24)
        if not np.all(outer.contains(samples)):
            return False
        wall = outer.sample(24)
        gap = np.sqrt(((samples[:, None] - wall[None]) ** 2).sum(-1)).min()
        if gap < 1e-3 * np.sqrt(outer.area):
            return False
    return True


def _curve_loop(occ: Any, loop: Loop) -> int:
    circle = loop.is_circle
    # A circle whose segments have names of their own is cut at their ends: a gate covers a part of it.
    if circle is not None and len({segment.name for segment in loop.segments}) == 1:
        (x, y), radius = circle
        return int(occ.addCurveLoop([occ.addCircle(x, y, 0, radius)]))
    segments = loop.segments
    ends = [occ.addPoint(*segment.start, 0) for segment in segments]
    curves = [_curve(occ, s, ends[i], ends[(i + 1) % len(ends)]) for i, s in enumerate(segments)]
    return int(occ.addCurveLoop(curves))


def _curve(occ: Any, segment: Segment, first: int, last: int) -> int:
    if isinstance(segment, Line):
        return int(occ.addLine(first, last))
    if isinstance(segment, Arc) and abs(segment.sweep) < 3.1:
        center = occ.addPoint(*segment.center, 0)
        curve = occ.addCircleArc(first, center, last)
        occ.remove([(0, center)])
        return int(curve)
    if isinstance(segment, EllipseArc) and first == last:
        major, minor, tilt = segment.semi_x, segment.semi_y, segment.tilt
        if minor > major:
            major, minor, tilt = minor, major, tilt + np.pi / 2
        curve = occ.addEllipse(*segment.center, 0, major, minor)
        occ.rotate([(1, curve)], *segment.center, 0, 0, 0, 1, tilt)
        return int(curve)
    if isinstance(segment, Spline | Parabolas):
        poles, knots = segment.poles()
        inner = [occ.addPoint(x, y, 0) for x, y in poles[1:-1]]
        degree, within = (3, 1) if isinstance(segment, Spline) else (2, 2)
        ends = degree + (first != last)  # of a closed curve both ends are one knot
        many = [ends, *[within] * (len(knots) - 2), ends]
        curve = occ.addBSpline([first, *inner, last], degree=degree, knots=knots.tolist(), multiplicities=many)
    else:
        inner = [occ.addPoint(x, y, 0) for x, y in segment.point(np.linspace(0, 1, 257))[1:-1]]
        curve = occ.addSpline([first, *inner, last])
    occ.remove([(0, point) for point in inner])
    return int(curve)
