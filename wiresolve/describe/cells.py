"""Cells of an imported mesh as half edges: checked, turned counter-clockwise, and matched with their neighbours."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wiresolve.describe.mesh_data import CELLS, Array, Ints, MeshData
from wiresolve.errors import InputError

_PLANE = 1e-6
"""Nodes may lie this far from one plane, as a part of the size."""
_FLAT = 1e-9
"""A cell with less area than this part of its longest edge squared has none."""


@dataclass(frozen=True, eq=False)
class HalfEdges:
    """Edges of cells, each seen from its cell, which lies on its left.

    Attributes
    ----------
    points : (n, 2) nodes; numbers : (n,) what they are called in the file.
    start, end, middle : (e,) nodes; the middle is -1 where there is none.
    cell : (e,) the cell; twin : (e,) the same edge seen from the cell on its other side, or -1.
    group : (c,) each cell's group.
    inside : (c, 2) a point inside each cell.
    """

    points: Array
    numbers: Ints
    start: Ints
    end: Ints
    middle: Ints
    cell: Ints
    twin: Ints
    group: Ints
    inside: Array

    def control(self, edges: Ints) -> Array:
        """Control points of the edges as parabolas, (m, 2); halfway where an edge has no node in its middle."""
        a, b = self.points[self.start[edges]], self.points[self.end[edges]]
        bent = self.middle[edges] >= 0
        middle = np.where(bent[:, None], self.points[self.middle[edges]], (a + b) / 2)
        return np.asarray(2 * middle - (a + b) / 2)


def half_edges(field: str, data: MeshData, scale: float) -> HalfEdges:
    """The cells of a mesh, lengths times `scale`; InputError about `field` where they are no plane mesh."""
    plane = [block for block in data.blocks if block.kind in CELLS]
    if not plane:
        raise InputError(
            field, "holds no cells that fill an area", remedy="export triangles or quads with their groups"
        )
    used = np.unique(np.concatenate([block.nodes.ravel() for block in plane]))
    if (bad := ~np.isfinite(data.points[used]).all(axis=1)).any():
        raise InputError(field, f"node {data.numbers[used[bad][0]]} has no finite place", remedy="write the mesh anew")
    points = _flat(field, data.points, used) * scale
    start, end, middle, cell, group, inside, done = [], [], [], [], [], [], 0
    for block in plane:
        corners, order = CELLS[block.kind]
        many = len(block.nodes)
        for k in range(corners):
            start.append(block.nodes[:, k])
            end.append(block.nodes[:, (k + 1) % corners])
            middle.append(block.nodes[:, corners + k] if order == 2 else np.full(many, -1))
            cell.append(done + np.arange(many))
        group.append(block.group)
        inside.append(points[block.nodes[:, :corners]].mean(axis=1))
        done += many
    edges = HalfEdges(
        points=points,
        numbers=data.numbers,
        start=np.concatenate(start),
        end=np.concatenate(end),
        middle=np.concatenate(middle),
        cell=np.concatenate(cell),
        twin=np.zeros(0, dtype=np.int64),
        group=np.concatenate(group),
        inside=np.vstack(inside),
    )
    if (pinched := edges.start == edges.end).any():
        k = int(edges.cell[np.argmax(pinched)])
        x, y = edges.inside[k]
        rule = f"cell {k + 1} has one node at two corners, near ({x:.4g}, {y:.4g}) nm"
        raise InputError(field, rule, remedy="remove such cells, or make triangles of them")
    return _matched(field, _turned(field, edges))


def _flat(field: str, points: Array, used: Ints) -> Array:
    """The plane coordinates; InputError where the nodes used do not lie in one plane of constant z."""
    spread = np.ptp(points[used], axis=0)
    if spread[2] <= _PLANE * spread.max():
        return np.nan_to_num(points[:, :2])
    for name, flat in zip("xy", spread[:2] <= _PLANE * spread.max(), strict=True):
        if flat:
            raise InputError(field, f"lies in a plane of constant {name}", remedy="turn it into the plane of x and y")
    rule = "does not lie in one plane: z differs"
    raise InputError(field, rule, f"by {spread[2]:.3g} of {spread.max():.3g}", "export the plane cross-section")


def _turned(field: str, edges: HalfEdges) -> HalfEdges:
    """With every cell counter-clockwise; InputError for cells without area and folded ones."""
    every, cells = np.arange(len(edges.start)), len(edges.group)
    a, b, control = edges.points[edges.start], edges.points[edges.end], edges.control(every)
    long = np.zeros(cells)
    np.maximum.at(long, edges.cell, ((b - a) ** 2).sum(axis=1))
    center = edges.inside[edges.cell]
    twice = _cross(a - center, b - center) + 2 / 3 * _cross(control - a, b - a)
    area = np.bincount(edges.cell, twice, minlength=cells) / 2
    where = "near ({:.4g}, {:.4g}) nm"
    if (flat := ~(np.abs(area) > _FLAT * long)).any():
        k = int(np.argmax(flat))
        rule = f"cell {k + 1} has no area, {where.format(*edges.inside[k])}"
        raise InputError(field, rule, remedy="remove cells of zero area before exporting")
    back = (area < 0)[edges.cell]
    start, end = np.where(back, edges.end, edges.start), np.where(back, edges.start, edges.end)
    # At a corner of a sound cell the edge that leaves turns left of the one that arrives.
    n = edges.points.shape[0]
    leaving, arriving = edges.cell * n + start, edges.cell * n + end
    after = np.argsort(leaving)[np.searchsorted(np.sort(leaving), arriving)]
    corner = edges.points[end]
    turn = _cross(corner - control, control[after] - corner)
    if (folded := turn < -_FLAT * long[edges.cell]).any():
        k = int(edges.cell[np.argmax(folded)])
        rule = f"cell {k + 1} is folded or has its nodes in a wrong order, {where.format(*edges.inside[k])}"
        raise InputError(field, rule, remedy="mend the mesh where it was made")
    return replace(edges, start=start, end=end)


def _cross(u: Array, v: Array) -> Array:
    return np.asarray(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])


def _matched(field: str, edges: HalfEdges) -> HalfEdges:
    """With twins; InputError where more than two cells meet at an edge, or two from the same side."""
    n = len(edges.points)
    key = np.minimum(edges.start, edges.end) * n + np.maximum(edges.start, edges.end)
    order = np.argsort(key, kind="stable")
    same = key[order][1:] == key[order][:-1]
    if (same[1:] & same[:-1]).any():
        k = order[:-2][same[1:] & same[:-1]][0]
        raise InputError(field, f"more than two cells meet at the edge {_edge(edges, int(k))}", remedy=_OVERLAP)
    one, other = order[:-1][same], order[1:][same]
    if (wrong := edges.start[one] == edges.start[other]).any():
        k = int(one[wrong][0])
        raise InputError(field, f"two cells overlap at the edge {_edge(edges, k)}", remedy=_OVERLAP)
    if (wrong := edges.middle[one] != edges.middle[other]).any():
        k = int(one[wrong][0])
        rule = f"the cells on both sides of the edge {_edge(edges, k)} have different nodes in its middle"
        raise InputError(field, rule, remedy="merge duplicate nodes, and export cells of one order")
    twin = np.full(len(key), -1)
    twin[one], twin[other] = other, one
    return replace(edges, twin=twin)


_OVERLAP = "export a mesh whose cells do not overlap"


def _edge(edges: HalfEdges, k: int) -> str:
    a, b = edges.start[k], edges.end[k]
    x, y = (edges.points[a] + edges.points[b]) / 2
    return f"between nodes {edges.numbers[a]} and {edges.numbers[b]} near ({x:.4g}, {y:.4g}) nm"
