"""How the outlines of a section move with each of its dimensions, at the points of a mesh.

Each edge between regions, or at a wall, lies on the outline of a drawn piece: of several that coincide there, the one
that is painted last counts, since it covers the others (moved inwards alone it would open a gap; that side of the
derivative is left out). A dimension moves the point at a place along a segment to the same place along the same segment
of the section drawn with the dimension changed. The mesh's end of a material that goes on outside stays.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Arc, Line, Loop, Segment
from wiresolve.describe.dimensions import Dimension, dimensions
from wiresolve.describe.section import Piece, Section
from wiresolve.errors import InputError
from wiresolve.fem.outline import OutlineEdges
from wiresolve.physics.corner_motion import corner_velocities

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

RIM = "growth of rim"
_STEP = 1e-4
"""Change of a dimension, as a part of it, over which the motion is a difference."""
_FASTEST = 200.0
"""Points that would move this many times as far as the dimension changes are not the same points."""
_NEAR = 1e-3
"""An edge lies on an outline if its middle is this close, in lengths of the edge."""
_COINCIDE = 1e-9
"""Outlines this close to each other, as a part of the section's size, are one."""
_ONE_DIRECTION = 1e-6
"""Normals at a point are one where their matrix's eigenvalues differ by this factor: a corner of a milliradian."""
_WALL = 1e3
"""How much more an edge at a wall counts than an interface where they meet and cannot both move as they should."""
_RESTS = 1e-4
"""Motion along an edge, as a part of the whole, that may end within it: edges of a curve differ so in direction."""
_DENSE = 200
"""Unknowns up to which a dense solve is the faster one."""
_SAMPLES = 16
"""Places on each knot's step of a curve from which the nearest one is looked for."""


@dataclass(frozen=True, eq=False)
class OutlineMotion:
    """Velocities of the outlines' points.

    Attributes
    ----------
    names : of the dimensions: the key's path (`section.width`, `section.layers[1].thickness`), and
        "growth of rim", "growth of core" and so on, by which all of that outline moves outwards, corners staying sharp.
    velocity : (names, used points of the outlines, 2) in nm per nm.
    outward : (e,) 1 where an edge's normal points away from the piece whose outline it lies on, -1 where it points into
        it, 0 where the edge lies on none.
    unmoved : paths of dimensions that cannot change without changing what the outlines consist of.
    """

    edges: OutlineEdges
    names: tuple[str, ...]
    velocity: Array
    outward: Array
    unmoved: tuple[str, ...]


def outline_motion(section: Section, edges: OutlineEdges) -> OutlineMotion:
    """How the outlines of a section's mesh move with each of its dimensions, and as pieces grow.

    Growths that would tear a corner are left out: `matrix_elements` has them, with wider bars.
    """
    pieces = section.pieces()
    places = _places(pieces, edges)
    fields, unmoved = {}, []
    for dimension in dimensions(section):
        moved = _moved(places, pieces, dimension)
        if moved is None:
            unmoved.append(dimension.path)
        else:
            fields[dimension.path] = moved
    grown = dict(_growths(pieces, places, edges))
    for (name, moving), torn in zip(grown.items(), corner_velocities(edges, grown)[1], strict=True):
        # Where an outline ends at another one that stays, no smooth motion is its growth.
        if not torn:
            fields[name] = moving[:, None, None] * edges.normals
    velocity = _joined(edges, np.array(list(fields.values())).reshape(len(fields), *edges.nodes.shape, 2))
    outward = np.where(places.piece < 0, 0.0, places.ahead)
    return OutlineMotion(edges, tuple(fields), velocity, outward, tuple(unmoved))


def growths(section: Section, edges: OutlineEdges) -> dict[str, Array]:
    """By how much each edge moves to its right when one of the outlines grows by 1, (e,), by the growth's name."""
    pieces = section.pieces()
    return dict(_growths(pieces, _places(pieces, edges), edges))


@dataclass(frozen=True, eq=False)
class _Places:
    """Where edges lie: number of the piece and of the segment of its loop (e,), and parameters of their nodes (e, n).

    `ahead` (e,) is 1 where an edge has its piece on the left, and -1 where it has it on the right.
    """

    piece: Ints
    segment: Ints
    t: Array
    ahead: Array


def _segments(loop: Loop) -> tuple[Segment, ...]:
    """The loop's segments; a circle as one, since its mesh does not know the quarters."""
    ring = loop.is_circle
    if ring is None:
        return loop.segments
    return (Arc(ring[0], ring[1], 0.0, 2 * np.pi, loop.segments[0].name),)


def _places(pieces: Sequence[Piece], edges: OutlineEdges) -> _Places:
    points = edges.mesh.points[edges.nodes]
    count, nodes = points.shape[:2]
    middle = nodes // 2
    reach = _NEAR * np.linalg.norm(points[:, -1] - points[:, 0], axis=1)
    coincide = _COINCIDE * float(np.ptp(edges.mesh.points, axis=0).max())
    best = np.full(count, np.inf)
    piece, segment = np.full(count, -1), np.full(count, -1)
    for number, drawn in enumerate(pieces):
        distance, which = _nearest(_segments(drawn.loop), points[:, middle])
        # Later pieces cover earlier ones: an equal distance is enough for them.
        taken = (distance < reach) & (distance <= best + coincide)
        piece[taken], segment[taken] = number, which[taken]
        best = np.minimum(best, distance)
    t, ahead = np.zeros((count, nodes)), np.ones(count)
    for number, k, rows in _groups(piece, segment):
        part = _segments(pieces[number].loop)[k]
        t[rows] = _parameters(part, points[rows].reshape(-1, 2))[0].reshape(-1, nodes)
        along = np.einsum("ex,ex->e", part.tangent(t[rows, middle]), edges.tangents[rows, middle])
        ahead[rows] = np.where(along >= 0, 1.0, -1.0)
    return _Places(piece, segment, t, ahead)


def _groups(piece: Ints, segment: Ints) -> Iterator[tuple[int, int, Ints]]:
    """Edges by piece and segment."""
    order = np.lexsort((segment, piece))
    ordered = np.column_stack([piece, segment])[order]
    starts = np.flatnonzero(np.r_[True, (ordered[1:] != ordered[:-1]).any(axis=1)])
    for start, end in zip(starts, [*starts[1:], len(order)], strict=True):
        if ordered[start, 0] >= 0:
            yield int(ordered[start, 0]), int(ordered[start, 1]), order[start:end]


def _nearest(segments: Sequence[Segment], points: Array) -> tuple[Array, Ints]:
    """Distance of points (m, 2) to the nearest of the segments, and which one it is."""
    best, which = np.full(len(points), np.inf), np.zeros(len(points), dtype=np.int64)
    lines = [k for k, s in enumerate(segments) if isinstance(s, Line)]
    if lines:
        start = np.array([segments[k].start for k in lines])
        along = np.array([segments[k].end for k in lines]) - start
        for part in range(0, len(points), 1000):
            rows = slice(part, part + 1000)
            off = points[rows, None] - start
            t = np.clip(np.einsum("mlx,lx->ml", off, along) / (along**2).sum(axis=1), 0, 1)
            apart = np.linalg.norm(off - t[..., None] * along, axis=2)
            least = apart.argmin(axis=1)
            best[rows], which[rows] = apart[np.arange(len(least)), least], np.array(lines)[least]
    for k, segment in enumerate(segments):
        if not isinstance(segment, Line):
            _, apart = _parameters(segment, points)
            nearer = apart < best
            best[nearer], which[nearer] = apart[nearer], k
    return best, which


def _parameters(segment: Segment, points: Array) -> tuple[Array, Array]:
    """Parameters of the nearest places on a segment to points (m, 2), and the distances."""
    if isinstance(segment, Line):
        start, along = np.array(segment.start), np.array(segment.end) - np.array(segment.start)
        t = np.clip((points - start) @ along / (along @ along), 0, 1)
    elif isinstance(segment, Arc):
        off = points - np.array(segment.center)
        turn = np.arctan2(off[:, 1], off[:, 0]) - (segment.start_angle + segment.sweep / 2)
        turn -= 2 * np.pi * np.rint(turn / (2 * np.pi))
        t = np.clip(0.5 + turn / segment.sweep, 0, 1)
    else:
        from scipy.spatial import cKDTree

        knots = len(getattr(segment, "points", ())) or 32
        samples = np.linspace(0, 1, _SAMPLES * knots + 1)
        t = samples[cKDTree(segment.point(samples)).query(points)[1]]
        for _ in range(4):
            slope = segment.tangent(t)
            step = np.einsum("mx,mx->m", points - segment.point(t), slope) / (slope**2).sum(axis=1)
            t = np.clip(t + step, 0, 1)
    return t, np.linalg.norm(points - segment.point(t), axis=1)


def _moved(places: _Places, pieces: Sequence[Piece], dimension: Dimension) -> Array | None:
    """Velocities of the edges' nodes (e, n, 2); None where no other value can be drawn with the same segments."""
    step = _STEP * (abs(dimension.value_nm) or 1.0)
    found = []
    for value in (dimension.value_nm - step, dimension.value_nm + step):
        try:
            loops = dimension.loops(value)
        except InputError:
            continue
        points = _points(places, pieces, loops)
        if points is not None:
            found.append((value, points))
    if not found:
        return None
    if len(found) == 1:  # the dimension is at its limit
        points = _points(places, pieces, {number: pieces[number].loop for number in loops})
        assert points is not None
        found.append((dimension.value_nm, points))
    (one, before), (other, after) = found
    if np.abs(after - before).max(initial=0.0) > _FASTEST * abs(other - one):
        return None
    return np.asarray((after - before) / (other - one))


def _points(places: _Places, pieces: Sequence[Piece], loops: Mapping[int, Loop]) -> Array | None:
    """(e, n, 2) where the edges' nodes lie on other loops of some pieces, 0 on other pieces; None if segments miss."""
    out = np.zeros((*places.t.shape, 2))
    for number, loop in loops.items():
        own = np.flatnonzero(places.piece == number)
        if not len(own):
            continue
        given, other = _segments(pieces[number].loop), _segments(loop)
        same = _counterparts(given, other)
        if any(same[k] < 0 for k in np.unique(places.segment[own])):
            return None
        which = np.array(same)[places.segment[own]]
        straight = np.array([isinstance(s, Line) for s in other])
        ends = np.array([(s.start, s.end) for s in other])
        rows = own[straight[which]]
        line, t = ends[which[straight[which]]], places.t[rows][..., None]
        out[rows] = (1 - t) * line[:, None, 0] + t * line[:, None, 1]
        for _, k, curved in _groups(np.where(straight[which], -1, number), which):
            rows = own[curved]
            out[rows] = other[k].point(places.t[rows].ravel()).reshape(len(rows), -1, 2)
    return out


def _counterparts(given: Sequence[Segment], other: Sequence[Segment]) -> list[int]:
    """For each segment the number of the one with its name in another loop, -1 where there is none."""
    if [s.name for s in given] == [s.name for s in other]:
        return list(range(len(given)))
    numbers: dict[str, list[int]] = {}
    for k, segment in enumerate(other):
        numbers.setdefault(segment.name, []).append(k)
    names = [s.name for s in given]
    return [numbers[n][0] if names.count(n) == len(numbers.get(n, ())) == 1 else -1 for n in names]


def _growths(pieces: Sequence[Piece], places: _Places, edges: OutlineEdges) -> Iterator[tuple[str, Array]]:
    """Outward motion of the rim and of each piece's outline: by how much each edge moves to its right, (e,)."""
    rim = np.where(edges.rim & (places.piece >= 0), 1.0, 0.0)
    if rim.any():
        yield RIM, rim
    by_name: dict[str, list[int]] = {}
    for number, piece in enumerate(pieces):
        by_name.setdefault(piece.name, []).append(number)
    for name in sorted(by_name, key=_rank):
        outward = np.where(np.isin(places.piece, by_name[name]), places.ahead, 0.0)
        if outward.any() and not np.array_equal(outward, rim):
            yield f"growth of {name}", outward


def _rank(name: str) -> tuple[int, int]:
    """The core first, then layers outwards, patches, and what else there is."""
    kind, _, number = name.partition(" ")
    known = ("core", "layer", "patch")
    return (known.index(kind) if kind in known else len(known)), int(number) if number.isdigit() else 0


def _joined(edges: OutlineEdges, fields: Array) -> Array:
    """Velocities (k, used points, 2) from those along each edge (k, e, n, 2).

    Where edges meet that move differently, the point moves so that each of them moves along its normal as it should:
    exactly where two meet, in the mean of squares where more do (walls before interfaces). What such a point moves
    along an edge fades away towards the next corner, and not within one edge: a re-entrant corner would feel it.
    """
    ends = edges.local[:, [0, -1]].ravel()
    vertices, number, count = np.unique(ends, return_inverse=True, return_counts=True)
    normal, own = edges.normals[:, [0, -1]].reshape(-1, 2), fields[:, :, [0, -1]].reshape(len(fields), -1, 2)

    def gathered(values: Array) -> Array:
        total = np.zeros((len(vertices), *values.shape[1:]))
        np.add.at(total, number, values)
        return total

    mean = gathered(own.swapaxes(0, 1)) / count[:, None, None]  # (vertices, k, 2)
    # A point of a wall stays on the wall: the states of interfaces feel less of it.
    weight = np.repeat(np.where(edges.wall, _WALL, 1.0), 2)
    across = gathered(weight[:, None, None] * normal[:, :, None] * normal[:, None, :])
    low, _ = np.linalg.eigvalsh(across).T
    corner = low > _ONE_DIRECTION * np.trace(across, axis1=1, axis2=2)
    short = np.einsum("kex,ex->ek", own, normal) - np.einsum("ekx,ex->ek", mean[number], normal)
    missing = gathered((weight[:, None] * short)[:, :, None] * normal[:, None, :])
    at = mean + missing @ np.linalg.pinv(across, rcond=_ONE_DIRECTION, hermitian=True)
    along = np.column_stack([-normal[:, 1], normal[:, 0]])
    slide = np.einsum("ekx,ex->ek", at[number] - own.swapaxes(0, 1), along)  # (2 e, k)
    field = np.array(fields)
    if np.abs(slide).max(initial=0.0) > _RESTS * np.abs(own).max(initial=0.0):
        direction = np.zeros((len(vertices), 2))
        direction[number] = along
        free = _faded(
            edges, number, slide, np.where(corner[number], 0.0, np.einsum("ex,ex->e", along, direction[number]))
        )
        at += free[:, :, None] * direction[:, None]
        slide = np.einsum("ekx,ex->ek", at[number] - own.swapaxes(0, 1), along)
        t = (np.arange(edges.nodes.shape[1]) / (edges.nodes.shape[1] - 1))[:, None]
        first, last = slide[0::2].T[:, :, None], slide[1::2].T[:, :, None]
        tangents = np.stack([-edges.normals[..., 1], edges.normals[..., 0]], axis=2)
        field += ((1 - t[:, 0]) * first + t[:, 0] * last)[..., None] * tangents
    out = np.zeros((len(fields), len(edges.used), 2))
    out[:, edges.local[:, 1:-1]] = field[:, :, 1:-1]
    out[:, vertices] = at.swapaxes(0, 1)
    return out


def _faded(edges: OutlineEdges, number: Ints, slide: Array, sign: Array) -> Array:
    """How far vertices that are no corners slide along their outline, (vertices, k), for it to change least.

    Parameters
    ----------
    number : (2 e,) vertices at the ends of the edges.
    slide : (2 e, k) motion along each edge at its ends without that.
    sign : (2 e,) by which a vertex's slide counts along the edge; 0 at corners.
    """
    points = edges.mesh.points[edges.nodes[:, [0, -1]]]
    root = 1 / np.sqrt(np.linalg.norm(points[:, 1] - points[:, 0], axis=1))
    rows = np.repeat(np.arange(len(root)), 2)
    step = np.tile([-1.0, 1.0], len(root)) * root[rows]
    count = int(number.max()) + 1
    given = (step[:, None] * slide).reshape(-1, 2, slide.shape[1]).sum(axis=1)
    # A closed smooth outline may slide as a whole: the diagonal holds it.
    held = np.full(count, 1e-9 * float((root**2).max()))
    if count <= _DENSE:
        few = np.zeros((len(root), count))
        few[rows, number] += step * sign
        return np.asarray(np.linalg.solve(few.T @ few + np.diag(held), -(few.T @ given)))
    from scipy import sparse
    from scipy.sparse.linalg import splu

    change = sparse.csr_array((step * sign, (rows, number)), shape=(len(root), count))
    return np.asarray(splu(sparse.csc_array(change.T @ change + sparse.diags_array(held))).solve(-(change.T @ given)))
