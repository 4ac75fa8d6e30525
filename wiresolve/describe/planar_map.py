"""An imported mesh as a drawing: faces, one for each connected part of a group, whose loops share their curves."""

from __future__ import annotations

import math
from collections.abc import Hashable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from wiresolve.describe import crossings, strands
from wiresolve.describe.cells import HalfEdges, half_edges
from wiresolve.describe.curves import Line, Loop, Parabolas, Point, Segment
from wiresolve.describe.mesh_data import LINES, Array, Ints, MeshData
from wiresolve.describe.strands import Missed
from wiresolve.errors import InputError

MOST_FACES, MOST_CURVES = 500, 5000
_SAME = 1e-9
"""Nodes this close, as a part of the size, are one."""
RIM, INTERFACE = "rim", "interface"


@dataclass(frozen=True)
class Face:
    """A connected part of a group of cells: its outer loop, its holes (counter-clockwise too), its area in nm^2."""

    group: str
    outer: Loop
    holes: tuple[Loop, ...]
    area_nm2: float

    @property
    def centroid(self) -> Point:
        """Centre of its area."""
        return _centroid([self.outer], self.holes)


def _centroid(around: Sequence[Loop], holes: Sequence[Loop]) -> Point:
    moments = [(sign * loop.area, loop.centroid) for sign, loops in ((1, around), (-1, holes)) for loop in loops]
    whole = sum(area for area, _ in moments)
    return sum(a * c[0] for a, c in moments) / whole, sum(a * c[1] for a, c in moments) / whole


@dataclass(frozen=True)
class PlanarMap:
    """Faces that share their curves, from the largest outer loop to the smallest.

    `outlines` are the outer boundaries of all faces together, `gaps` the holes that no cell fills. `missed` is what
    edges miss of the smooth curves that they seem to stand for.
    """

    faces: tuple[Face, ...]
    outlines: tuple[Loop, ...]
    gaps: tuple[Loop, ...]
    missed: Missed = field(compare=False)

    @property
    def area_nm2(self) -> float:
        """Area of all faces."""
        return sum(face.area_nm2 for face in self.faces)

    @property
    def centroid(self) -> Point:
        """Centre of the area of all faces."""
        return _centroid(self.outlines, self.gaps)

    def placed(self, dx: float, dy: float, angle: float) -> PlanarMap:
        """The same map moved, then turned about the origin."""

        def put(loop: Loop) -> Loop:
            return loop.moved(dx, dy).rotated(angle)

        faces = tuple(replace(f, outer=put(f.outer), holes=tuple(map(put, f.holes))) for f in self.faces)
        return replace(self, faces=faces, outlines=tuple(map(put, self.outlines)), gaps=tuple(map(put, self.gaps)))


def planar_map(where: str, data: MeshData, scale: float) -> PlanarMap:
    """The drawing that a mesh gives, lengths times `scale`.

    Raises `InputError` about the key `where` where cells overlap, nodes hang or stand twice, or groups are missing.
    """
    edges = half_edges(where, data, scale)
    if (bare := edges.group < 0).any():
        k = int(np.argmax(bare))
        x, y = edges.inside[k]
        rule = f"{int(bare.sum())} of its {len(bare)} cells are in no named region, one near ({x:.4g}, {y:.4g}) nm"
        raise InputError(where, rule, remedy="put every cell into a physical group, or the like")
    return _Builder(where, edges, _line_names(data)).build(data.names)


def _line_names(data: MeshData) -> dict[tuple[int, int], str]:
    """Names of the groups of lines, by the lines' ends in ascending order."""
    found = {}
    for block in data.blocks:
        if block.kind in LINES:
            for (a, b), group in zip(block.nodes[:, :2].tolist(), block.group.tolist(), strict=True):
                if group >= 0:
                    found[min(a, b), max(a, b)] = data.names[group]
    return found


def undirected(segment: Segment) -> tuple[Point, ...]:
    """The same for a curve of a map and for this curve run through backwards."""
    points = segment.points if isinstance(segment, Parabolas) else (segment.start, segment.end)
    return min(points, points[::-1])


def outlines(loops: Sequence[tuple[Loop, tuple[Loop, ...]]]) -> list[Loop]:
    """Outer boundaries of faces, each given by its outer loop and its holes, that share their curves."""
    seen: dict[tuple[Point, ...], int] = {}
    for outer, holes in loops:
        for loop in (outer, *holes):
            for segment in loop.segments:
                seen[undirected(segment)] = seen.get(undirected(segment), 0) + 1
    directed = [
        ((segment.start, segment.end), (segment,))
        for outer, holes in loops
        for segment in (*outer.segments, *(_reversed(s) for hole in holes for s in hole.segments))
        if seen[undirected(segment)] == 1
    ]
    found, _ = traced("outline", directed)
    return [a for a in found if not any(b is not a and b.contains(a.sample(3)).all() for b in found)]


@dataclass(frozen=True)
class _Strand:
    """Curves between two nodes at which more than two edges meet, or a ring; `sides` are the faces left and right."""

    ends: tuple[int, int]
    sides: tuple[int, int]
    forward: tuple[Segment, ...]

    @property
    def backward(self) -> tuple[Segment, ...]:
        return tuple(_reversed(segment) for segment in reversed(self.forward))


def _reversed(segment: Segment) -> Segment:
    if isinstance(segment, Parabolas):
        return Parabolas(segment.points[::-1], segment.name)
    assert isinstance(segment, Line)
    return Line(segment.end, segment.start, segment.name)


@dataclass(frozen=True)
class _Builder:
    where: str
    edges: HalfEdges
    line_names: dict[tuple[int, int], str]

    def build(self, names: tuple[str, ...]) -> PlanarMap:
        edges = self.edges
        part, count = self._parts()
        if count > MOST_FACES:
            rule = f"falls into {count} separate regions; at most {MOST_FACES} can be drawn"
            raise InputError(self.where, rule, remedy="number regions, not single cells")
        left = part[edges.cell]
        right = np.where(edges.twin >= 0, part[edges.cell[edges.twin]], -1)
        walls = np.flatnonzero((left != right) & ((edges.twin < 0) | (left < right)))
        self._sound(walls)
        names_of = [self._name(edge, int(right[edge])) for edge in walls.tolist()]
        size = float(np.ptp(edges.points[edges.start[walls]], axis=0).max())
        drawn, missed = [], Missed()
        for row in _rows(edges, walls, [*zip(left[walls].tolist(), right[walls].tolist(), names_of, strict=True)]):
            nodes = np.append(edges.start[row], edges.end[row[-1]])
            sides, name = (int(left[row[0]]), int(right[row[0]])), self._name(int(row[0]), int(right[row[0]]))
            found, lost = strands.curves(edges.points[nodes], edges.control(row), name, size)
            drawn.append(_Strand((int(nodes[0]), int(nodes[-1])), sides, tuple(found)))
            missed = missed.and_also(lost if sides[1] < 0 else replace(lost, area_nm2=0.0))
        if (curves := sum(len(s.forward) for s in drawn)) > MOST_CURVES:
            rule = f"its regions are bounded by {curves} curves; at most {MOST_CURVES} can be drawn"
            raise InputError(self.where, rule, remedy="export a coarser mesh, or one of second order")
        return self._assembled(names, part, count, drawn, missed)

    def _parts(self) -> tuple[Ints, int]:
        """For each cell the connected part of its group, and how many parts there are."""
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        edges, cells = self.edges, len(self.edges.group)
        inner = np.flatnonzero(edges.twin >= 0)
        a, b = edges.cell[inner], edges.cell[edges.twin[inner]]
        same = edges.group[a] == edges.group[b]
        graph = coo_array((np.ones(int(same.sum())), (a[same], b[same])), shape=(cells, cells))
        count, part = connected_components(graph, directed=False)
        return part.astype(np.int64), int(count)

    def _name(self, edge: int, right: int) -> str:
        a, b = int(self.edges.start[edge]), int(self.edges.end[edge])
        return self.line_names.get((min(a, b), max(a, b)), RIM if right < 0 else INTERFACE)

    def _sound(self, walls: Ints) -> None:
        """InputError for nodes that stand twice, nodes on other cells' edges, and edges that cross."""
        from scipy.spatial import cKDTree

        edges = self.edges
        ends = np.unique(np.concatenate([edges.start[walls], edges.end[walls]]))
        places = edges.points[ends]
        size = float(np.ptp(places, axis=0).max())
        tree = cKDTree(places)
        twice = tree.query_pairs(_SAME * size, output_type="ndarray")
        if len(twice):
            a, b = sorted(int(edges.numbers[ends[k]]) for k in twice[0])
            x, y = places[twice[0][0]]
            rule = (
                f"nodes {a} and {b} stand at the same place, ({x:.4g}, {y:.4g}) nm, so their cells do not hang together"
            )
            raise InputError(self.where, rule, remedy="merge duplicate nodes before exporting")
        start, end, control = edges.points[edges.start[walls]], edges.points[edges.end[walls]], edges.control(walls)
        middle = (start + 2 * control + end) / 4
        reach = np.hypot(*(end - start).T) / 2 * (1 + 1e-6) + np.hypot(*(middle - (start + end) / 2).T)
        near = tree.query_ball_point((start + end) / 2, reach)
        edge = np.repeat(np.arange(len(walls)), [len(row) for row in near])
        node = np.concatenate([np.asarray(row, dtype=np.int64) for row in near])
        own = (ends[node] == edges.start[walls][edge]) | (ends[node] == edges.end[walls][edge])
        edge, node = edge[~own], node[~own]
        along = end[edge] - start[edge]
        off = places[node] - start[edge]
        long = np.hypot(*along.T)
        t = (along * off).sum(axis=1) / long**2
        bow = 2 * t * (1 - t) * _side(along, control[edge] - start[edge]) / long
        hanging = (t > 1e-9) & (t < 1 - 1e-9) & (np.abs(_side(along, off) / long - bow) < 1e-6 * long)
        if hanging.any():
            k = int(np.argmax(hanging))
            x, y = places[node[k]]
            rule = f"node {edges.numbers[ends[node[k]]]} hangs on another cell's edge, at ({x:.4g}, {y:.4g}) nm"
            raise InputError(
                self.where, rule, remedy="export a conforming mesh: every node a corner of all cells there"
            )
        bent = np.hypot(*(middle - (start + end) / 2).T) > 1e-6 * np.hypot(*(end - start).T)
        marks = [
            start,
            *((1 - t) ** 2 * start + 2 * t * (1 - t) * control + t**2 * end for t in (0.25, 0.5, 0.75)),
            end,
        ]
        straight = np.flatnonzero(~bent)
        begins, stops = [start[straight]], [end[straight]]
        knots = [np.column_stack([edges.start[walls], edges.end[walls]])[straight]]
        numbers = [edges.start[walls], *(len(edges.points) + 3 * np.arange(len(walls)) + k for k in range(3))]
        numbers.append(edges.end[walls])
        owner = [straight]
        for k in range(4):
            begins.append(marks[k][bent])
            stops.append(marks[k + 1][bent])
            knots.append(np.column_stack([numbers[k], numbers[k + 1]])[bent])
            owner.append(np.flatnonzero(bent))
        hit = crossings.first(np.vstack(begins), np.vstack(stops), np.vstack(knots))
        if hit is not None:
            x, y = np.vstack(begins)[hit[0]]
            rule = f"edges of its regions cross near ({x:.4g}, {y:.4g}) nm: cells overlap"
            raise InputError(self.where, rule, remedy="export a mesh whose cells do not overlap")

    def _assembled(
        self, names: tuple[str, ...], part: Ints, count: int, drawn: list[_Strand], missed: Missed
    ) -> PlanarMap:
        first = np.unique(part, return_index=True)[1]
        directed: list[list[Directed]] = [[] for _ in range(count)]
        rim: list[Directed] = []
        for strand in drawn:
            left, right = strand.sides
            directed[left].append((strand.ends, strand.forward))
            if right >= 0:
                directed[right].append((strand.ends[::-1], strand.backward))
            else:
                rim.append((strand.ends, strand.forward))
        faces = []
        for k in range(count):
            outer, holes = traced(self.where, directed[k])
            if len(outer) != 1:
                x, y = self.edges.inside[first[k]]
                rule = f"the region around ({x:.4g}, {y:.4g}) nm has no single outline: cells overlap"
                raise InputError(self.where, rule, remedy="export a mesh whose cells do not overlap")
            area = outer[0].area - sum(hole.area for hole in holes)
            faces.append(Face(names[self.edges.group[first[k]]], outer[0], tuple(holes), area))
        self._once(faces, self.edges.inside[first])
        outlines, gaps = traced(self.where, rim)
        for loop in outlines:
            missed = missed.and_also(strands.missed_by_lines(loop.segments))
        for face in faces:
            missed = missed.and_also(replace(strands.missed_by_lines(face.outer.segments), area_nm2=0.0))
        order = sorted(range(count), key=lambda k: -faces[k].outer.area)
        return PlanarMap(tuple(faces[k] for k in order), tuple(outlines), tuple(gaps), missed)

    def _once(self, faces: list[Face], inside: Array) -> None:
        """InputError where a point of one face lies in another."""
        cover = np.zeros(len(inside), dtype=int)
        for face in faces:
            here = face.outer.contains(inside)
            for hole in face.holes:
                here &= ~hole.contains(inside)
            cover += here
        if (wrong := cover > 1).any():
            x, y = inside[np.argmax(wrong)]
            rule = f"two regions lie on top of each other near ({x:.4g}, {y:.4g}) nm"
            raise InputError(self.where, rule, remedy="export a mesh whose cells do not overlap")


Node = Hashable
Directed = tuple[tuple[Node, Node], tuple[Segment, ...]]


def traced(where: str, strands_: Sequence[Directed]) -> tuple[list[Loop], list[Loop]]:
    """Loops of directed strands with the area on their left: those around it, and holes (turned over).

    A strand is its first and last node and its curves. InputError about `where` if they do not close.
    """
    leaving: dict[Node, list[int]] = {}
    for k, ((a, _), _) in enumerate(strands_):
        leaving.setdefault(a, []).append(k)
    free = set(range(len(strands_)))
    outer, holes = [], []
    while free:
        row: list[int] = [min(free)]
        free.discard(row[0])
        while row:
            at = strands_[row[-1]][0][1]
            begins = next((i for i, k in enumerate(row) if strands_[k][0][0] == at), None)
            if begins is not None:  # back at a node of the row: what lies between is a loop
                loop = Loop(tuple(s for k in row[begins:] for s in strands_[k][1]))
                if loop.area > 0:
                    outer.append(loop)
                else:
                    holes.append(Loop(tuple(_reversed(s) for s in reversed(loop.segments))))
                row = row[:begins]
                continue
            onward = [k for k in leaving.get(at, []) if k in free]
            if not onward:
                raise InputError(where, "has a region whose outline is not closed", remedy="mend the mesh")
            row.append(_next(strands_, row[-1], onward))
            free.discard(row[-1])
    return outer, holes


def _next(strands_: Sequence[Directed], before: int, onward: list[int]) -> int:
    """Which strand goes on around the same cells: the first one clockwise from where the last one came from."""
    if len(onward) == 1:
        return onward[0]
    back = -strands_[before][1][-1].tangent(np.array([1.0]))[0]

    def clockwise(k: int) -> float:
        ahead = strands_[k][1][0].tangent(np.array([0.0]))[0]
        turn = math.atan2(back[0] * ahead[1] - back[1] * ahead[0], float(back @ ahead))
        return (-turn) % (2 * math.pi)

    return min(onward, key=clockwise)


def _side(u: Array, v: Array) -> Array:
    return np.asarray(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])


def _rows(edges: HalfEdges, walls: Ints, sides: list[tuple[int, int, str]]) -> list[Ints]:
    """The edges in rows that end where more than two of them meet, or where the faces or the name beside change."""
    start, end = edges.start[walls], edges.end[walls]
    meeting = np.bincount(np.concatenate([start, end]), minlength=len(edges.points))
    leaves = {node: k for k, node in enumerate(start.tolist()) if meeting[node] == 2}
    after = [leaves.get(node, -1) for node in end.tolist()]
    after = [k if k >= 0 and sides[k] == sides[at] else -1 for at, k in enumerate(after)]
    free = set(range(len(walls)))
    rows = []

    def follow(first: int) -> list[int]:
        row = [first]
        free.discard(first)
        while (k := after[row[-1]]) in free:
            row.append(k)
            free.discard(k)
        return row

    for k in sorted(free - {k for k in after if k >= 0}):
        rows.append(walls[follow(k)])
    while free:  # rings, from their sharpest corner on
        ring = walls[follow(min(free))]
        control = edges.control(ring)
        leaving, arriving = control - edges.points[edges.start[ring]], edges.points[edges.end[ring]] - control
        back = np.roll(arriving, 1, axis=0)
        kink = np.abs(np.arctan2(_side(back, leaving), (back * leaving).sum(axis=1)))
        rows.append(np.roll(ring, -int(np.argmax(np.round(kink, 6)))))
    return rows
