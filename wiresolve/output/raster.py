"""Curved meshes on paper: outlines as smooth lines, and functions on the mesh as pixel values."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.lagrange import triangle
from wiresolve.fem.mesh import Mesh

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

SEGMENTS = 8
"""Straight pieces that a curved edge is drawn with: below a hundredth of a millimetre from the curve on any figure."""


def degree_of(mesh: Mesh) -> int:
    """Polynomial degree of a mesh's cells, from their number of nodes (p + 1)(p + 2)/2."""
    return (math.isqrt(8 * mesh.cells.shape[1] + 1) - 3) // 2


@dataclass(frozen=True, eq=False)
class Edges:
    """The edges of a mesh, each once, as polylines.

    Attributes
    ----------
    lines : (e, SEGMENTS + 1, 2) in nm.
    ends : (e, 2) vertex numbers, in the direction of the first cell that has the edge.
    regions : (e, 2) region on the left and on the right; -1 outside of the mesh.
    """

    lines: Array
    ends: Ints
    regions: Ints

    @property
    def on_outline(self) -> NDArray[np.bool_]:
        """(e,) edges between two regions or at the border of the mesh."""
        return np.asarray(self.regions[:, 0] != self.regions[:, 1])


def edges(mesh: Mesh) -> Edges:
    """The curved edges of a mesh and what lies on their two sides."""
    degree, cells = degree_of(mesh), mesh.cells
    inner = degree - 1
    rows, owner = [], []
    for side, (a, b) in enumerate(((0, 1), (1, 2), (2, 0))):
        middle = cells[:, 3 + side * inner : 3 + (side + 1) * inner]
        rows.append(np.column_stack([cells[:, a], middle, cells[:, b]]))
        owner.append(np.arange(len(cells)))
    nodes, cell = np.vstack(rows), np.concatenate(owner)
    key = np.sort(nodes[:, [0, -1]], axis=1)
    order = np.lexsort((cell, key[:, 1], key[:, 0]))
    key, nodes, cell = key[order], nodes[order], cell[order]
    first = np.r_[True, np.any(key[1:] != key[:-1], axis=1)]
    at = np.flatnonzero(first)
    twin = np.r_[~first[1:], False][at]
    right = np.where(twin, mesh.region[cell[np.minimum(at + 1, len(cell) - 1)]], -1)
    knots, t = np.arange(degree + 1) / degree, np.linspace(0, 1, SEGMENTS + 1)
    basis = np.ones((len(t), degree + 1))
    for i, knot in enumerate(knots):
        for other in np.delete(knots, i):
            basis[:, i] *= (t - other) / (knot - other)
    lines = np.einsum("tn,enx->etx", basis, mesh.points[nodes[at]])
    return Edges(lines, nodes[at][:, [0, -1]], np.column_stack([mesh.region[cell[at]], right]))


def outline(found: Edges, region: int) -> list[Array]:
    """Closed polylines around one region, the region on their left (holes run clockwise)."""
    ahead = (found.regions[:, 0] == region) & (found.regions[:, 1] != region)
    back = (found.regions[:, 1] == region) & (found.regions[:, 0] != region)
    lines = np.concatenate([found.lines[ahead], found.lines[back][:, ::-1]])
    ends = np.concatenate([found.ends[ahead], found.ends[back][:, ::-1]])
    leaving: dict[int, list[int]] = {}
    for number, start in enumerate(ends[:, 0].tolist()):
        leaving.setdefault(start, []).append(number)
    loops = []
    for start in ends[:, 0].tolist():
        vertex, parts = start, []
        while leaving.get(vertex):
            number = leaving[vertex].pop()
            parts.append(lines[number][:-1])
            vertex = int(ends[number, 1])
        if parts:
            loops.append(np.concatenate([*parts, parts[0][:1]]))
    return loops


def outermost(found: Edges, region: int) -> tuple[list[Array], int]:
    """The loops around a region, and which of them is the outermost."""
    loops = outline(found, region)
    return loops, max(range(len(loops)), key=lambda n: float(loops[n][:, 0].max()))


def outlines(mesh: Mesh, found: Edges) -> Array:
    """Polylines between regions and around them; where a material goes on outside, the end of its mesh is none."""
    drawn = found.on_outline
    for number, region in enumerate(mesh.regions):
        if region.name == "outside" and (found.regions == number).any():
            loops, last = outermost(found, number)
            rim = set(map(tuple, loops[last].tolist()))
            bordering = (found.regions == number).any(axis=1) & (found.regions == -1).any(axis=1)
            ends = [all(tuple(p) in rim for p in line[[0, -1]].tolist()) for line in found.lines]
            drawn = drawn & ~(bordering & np.array(ends))
    return found.lines[drawn]


def near(lines: Array, extent: tuple[float, float, float, float]) -> list[Array]:
    """Those of the polylines (e, n, 2) that may be seen in a frame of left, right, bottom and top."""
    low, high = lines.min(axis=1), lines.max(axis=1)
    left, right, bottom, top = extent
    seen = (high >= [left, bottom]).all(axis=1) & (low <= [right, top]).all(axis=1)
    return list(lines[seen])


@dataclass(frozen=True, eq=False)
class Raster:
    """Where the pixels of an image lie in a mesh.

    Attributes
    ----------
    extent : left, right, bottom, top in nm.
    shape : rows, columns; row 0 at the bottom.
    pixel : (m,) numbers of the pixels inside, row by row.
    nodes, weights : (m, nodes a cell) the value at a pixel is ``sum(weights * f[nodes])``.
    cell : (m,) the cell in which the pixel lies.
    """

    extent: tuple[float, float, float, float]
    shape: tuple[int, int]
    pixel: Ints
    nodes: Ints
    weights: Array
    cell: Ints

    def image(self, values: Array) -> Array:
        """Pixel values (rows, columns) of a function given at the mesh's nodes; NaN outside."""
        return self._filled(np.einsum("ma,ma->m", self.weights, values[self.nodes]))

    def by_cell(self, values: Array) -> Array:
        """Pixel values (rows, columns) of what has one value a cell; NaN outside."""
        return self._filled(values[self.cell])

    def _filled(self, values: Array) -> Array:
        out = np.full(self.shape[0] * self.shape[1], np.nan)
        out[self.pixel] = values
        return out.reshape(self.shape)


def raster(mesh: Mesh, extent: tuple[float, float, float, float], columns: int) -> Raster:
    """Locate the pixels of an image with square pixels, `columns` wide.

    Each cell is cut into degree^2 triangles between its nodes, straight enough to find a pixel's place in the
    reference triangle; there the cell's own functions are evaluated.
    """
    left, right, bottom, top = extent
    step = (right - left) / columns
    rows = max(1, round((top - bottom) / step))
    degree = degree_of(mesh)
    small = _subdivision(degree)
    corner = ((mesh.points - [left, bottom]) / step - 0.5)[mesh.cells[:, small]].reshape(-1, 3, 2)
    low = np.maximum(np.ceil(corner.min(axis=1) - 1e-3).astype(np.int64), 0)
    high = np.minimum(np.floor(corner.max(axis=1) + 1e-3).astype(np.int64), [columns - 1, rows - 1])
    span = np.maximum(high - low + 1, 0)
    count = span[:, 0] * span[:, 1]
    which = np.repeat(np.arange(len(corner)), count)
    within = np.arange(len(which)) - np.repeat(np.cumsum(count) - count, count)
    x = low[which, 0] + within % np.maximum(span[which, 0], 1)
    y = low[which, 1] + within // np.maximum(span[which, 0], 1)
    origin, edge1, edge2 = corner[:, 0], corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    twice_area = edge1[:, 0] * edge2[:, 1] - edge1[:, 1] * edge2[:, 0]
    twice_area = np.where(twice_area == 0, np.inf, twice_area)
    dx, dy = x - origin[which, 0], y - origin[which, 1]
    u = (dx * edge2[which, 1] - dy * edge2[which, 0]) / twice_area[which]
    v = (dy * edge1[which, 0] - dx * edge1[which, 1]) / twice_area[which]
    slack = 1e-3 + 1e-3 / np.sqrt(np.abs(twice_area[which]))
    inside = np.flatnonzero((u >= -slack) & (v >= -slack) & (u + v <= 1 + slack))
    pixel, chosen = np.unique(y[inside] * columns + x[inside], return_index=True)
    chosen = inside[chosen]
    cell, part = np.divmod(which[chosen], len(small))
    reference = triangle(degree).nodes[small[part]]
    bary = np.column_stack([1 - u[chosen] - v[chosen], u[chosen], v[chosen]])
    weights = _functions(degree, np.einsum("mi,mix->mx", bary, reference))
    shown = (left, right, bottom, bottom + rows * step)
    return Raster(shown, (rows, columns), pixel.astype(np.int64), mesh.cells[cell], weights, cell)


def _subdivision(degree: int) -> Ints:
    """The degree^2 triangles between the nodes of a cell, shape (degree^2, 3)."""
    lattice = np.rint(triangle(degree).nodes * degree).astype(int)
    at = {(int(i), int(j)): n for n, (i, j) in enumerate(lattice)}
    out = []
    for i in range(degree):
        for j in range(degree - i):
            out.append((at[i, j], at[i + 1, j], at[i, j + 1]))
            if i + j < degree - 1:
                out.append((at[i + 1, j], at[i + 1, j + 1], at[i, j + 1]))
    return np.array(out, dtype=np.int64)


def _functions(degree: int, at: Array) -> Array:
    """Lagrange functions at many reference points, as products over the three barycentric coordinates."""
    lattice = np.rint(triangle(degree).nodes * degree).astype(int)
    weights = np.ones((len(at), len(lattice)))
    for coordinate, power in (
        (1 - at.sum(axis=1), degree - lattice.sum(axis=1)),
        (at[:, 0], lattice[:, 0]),
        (at[:, 1], lattice[:, 1]),
    ):
        factors = [np.ones(len(at))]
        for step in range(degree):
            factors.append(factors[-1] * (degree * coordinate - step) / (step + 1))
        weights *= np.stack(factors, axis=1)[:, power]
    return weights
