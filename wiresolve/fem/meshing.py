"""Curved meshes of a section: Gmsh draws, sizes and curves; nothing else imports it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from functools import cache
from types import TracebackType
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.section import VOID, Piece
from wiresolve.errors import InputError, MeshError
from wiresolve.fem.mesh import Mesh, Region, blended, folded, oriented
from wiresolve.fem.sketch import draw

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


def library() -> Any:
    """The Gmsh module, loaded when it is first needed."""
    import gmsh

    return gmsh


@dataclass(frozen=True)
class Grading:
    """Cell size ``outer_nm (r / reach_nm)^power``, not below `smallest_nm`, at distance r from a corner."""

    x: float
    y: float
    reach_nm: float
    outer_nm: float
    power: float
    smallest_nm: float


@dataclass(frozen=True, eq=False)
class SizeField:
    """How large cells may be: the smallest of what its parts say.

    Attributes
    ----------
    largest_nm : everywhere.
    gradings : around corners.
    spots : (x, y, radius, size) circles in which cells are at most so large.
    growing : (x, y, radius, rate): outside this circle `largest_nm` grows by so much for each nm of distance.
    turn_cells : at least so many cells around a full turn of a curve (0: no matter how many).
    triangles, sizes_nm : (t, 3, 2) and (t, 3): linear interpolation in a triangulation of the section.
    """

    largest_nm: float
    gradings: tuple[Grading, ...] = ()
    spots: tuple[tuple[float, float, float, float], ...] = ()
    growing: tuple[float, float, float, float] | None = None
    turn_cells: int = 0
    triangles: Array | None = None
    sizes_nm: Array | None = None


@dataclass
class Mesher:
    """A Gmsh session that holds one drawn section; use it as a context manager.

    Raises `InputError` where the drawing leaves nothing for carriers, `MeshError` where it cannot be drawn or meshed.
    """

    pieces: Sequence[Piece]
    _gmsh: Any = field(init=False, repr=False, default=None)
    _owner: dict[int, int] = field(init=False, repr=False, default_factory=dict)

    def __enter__(self) -> Self:
        self._gmsh = gmsh = library()
        if gmsh.isInitialized():
            raise MeshError("Gmsh is in use in this process; call gmsh.finalize() first")
        gmsh.initialize([], readConfigFiles=False, interruptible=False)
        try:
            for option, value in OPTIONS.items():
                gmsh.option.setNumber(option, value)
            self._draw()
        except InputError:
            gmsh.finalize()
            raise
        except Exception as fault:
            gmsh.finalize()
            raise MeshError(f"the section could not be drawn: {short(fault)}") from fault
        except BaseException:
            gmsh.finalize()
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._gmsh.finalize()

    def _draw(self) -> None:
        drawn, occ = draw(self._gmsh, self.pieces), self._gmsh.model.occ
        holes = [tag for tag, i in drawn.items() if self.pieces[i].material == VOID]
        if holes:
            occ.remove([(2, tag) for tag in holes], recursive=False)
        occ.synchronize()
        self._owner = {tag: i for tag, i in drawn.items() if tag not in holes}
        if not any(self.pieces[i].carriers for i in self._owner.values()):
            raise InputError(
                "section",
                "nothing is left for carriers once the layers and patches are painted",
                remedy="make the patches smaller, or admit carriers in one of them",
            )

    @property
    def extent_nm(self) -> float:
        """The larger side of the drawing's bounding box."""
        low_x, low_y, _, high_x, high_y, _ = self._gmsh.model.getBoundingBox(-1, -1)
        return float(max(high_x - low_x, high_y - low_y))

    def mesh(self, size: SizeField) -> tuple[Mesh, Mesh]:
        """Meshes of degree 4 and 6 over the same triangles.

        Raises
        ------
        MeshError
            Gmsh failed, or a curved cell stayed folded after five refinements around it.
        """
        most = None
        for _ in range(6):
            coarse, fine = self._generate(size)
            bent = folded(coarse) | folded(fine)
            if not bent.any():
                return coarse, fine
            most = most or 10 * len(coarse.cells) + 2000
            if len(coarse.cells) > most:
                break
            size = _smaller_where(coarse, bent, size)
        raise MeshError(
            f"{int(bent.sum())} curved cells stay folded near ({_place(coarse, bent)}) nm;"
            " a layer is too thin beside the curvature of its wall: make it thicker"
        )

    def _generate(self, size: SizeField) -> tuple[Mesh, Mesh]:
        gmsh = self._gmsh
        try:
            gmsh.model.mesh.clear()
            self._set_size(size)
            gmsh.model.mesh.generate(2)
            meshes = []
            for degree in (4, 6):
                gmsh.model.mesh.setOrder(degree)
                meshes.append(self._read(degree))
        except (MeshError, KeyboardInterrupt):
            raise
        except Exception as fault:
            raise MeshError(f"the section could not be meshed: {short(fault)}") from fault
        return meshes[0], meshes[1]

    def _set_size(self, size: SizeField) -> None:
        gmsh = self._gmsh
        fields = gmsh.model.mesh.field
        for tag in fields.list():
            fields.remove(tag)
        for tag in gmsh.view.getTags():
            gmsh.view.remove(tag)
        gmsh.option.setNumber("Mesh.MeshSizeMax", size.largest_nm if size.growing is None else 1e22)
        gmsh.option.setNumber("Mesh.MeshSizeFromCurvature", size.turn_cells)
        parts = []
        if size.growing is not None:
            x, y, radius, rate = size.growing
            across = 2 * self.extent_nm
            parts.append(self._ball(x, y, radius, across, size.largest_nm, size.largest_nm + rate * across))
        alike: dict[tuple[float, float, float, float], list[int]] = {}
        for g in size.gradings:
            key = (g.smallest_nm, g.outer_nm, g.reach_nm, g.power)
            alike.setdefault(key, []).append(self._point_near(g.x, g.y))
        for (smallest, outer, reach, power), points in alike.items():
            distance = fields.add("Distance")
            fields.setNumbers(distance, "PointsList", points)
            law = fields.add("MathEval")
            # Plain decimals only: Gmsh's parser ends the process on anything that it cannot read.
            fields.setString(law, "F", f"{smallest:.15f}+{outer:.12f}*(F{distance}/{reach:.12f})^{power:.6f}")
            parts.append(law)
        for x, y, radius, cell in size.spots:
            parts.append(self._ball(x, y, radius, 2 * radius, cell, size.largest_nm))
        if size.triangles is not None and size.sizes_nm is not None:
            view = gmsh.view.add("size")
            corners = np.zeros((len(size.triangles), 12))
            corners[:, 0:3], corners[:, 3:6] = size.triangles[:, :, 0], size.triangles[:, :, 1]
            corners[:, 9:12] = size.sizes_nm
            gmsh.view.addListData(view, "ST", len(corners), corners.ravel())
            tag = fields.add("PostView")
            fields.setNumber(tag, "ViewTag", view)
            parts.append(tag)
        if parts:
            least = fields.add("Min")
            fields.setNumbers(least, "FieldsList", parts)
            fields.setAsBackgroundMesh(least)

    def _ball(self, x: float, y: float, radius: float, thickness: float, inside: float, outside: float) -> int:
        """A field of one size in a circle, another one farther out, and a straight line between over a thickness."""
        fields = self._gmsh.model.mesh.field
        ball = int(fields.add("Ball"))
        values = {"XCenter": x, "YCenter": y, "Radius": radius, "Thickness": thickness, "VIn": inside, "VOut": outside}
        for name, value in values.items():
            fields.setNumber(ball, name, value)
        return ball

    def _point_near(self, x: float, y: float) -> int:
        """The drawing's point nearest to a place."""
        model = self._gmsh.model
        places = {tag: model.getValue(0, tag, []) for _, tag in model.getEntities(0)}
        return int(min(places, key=lambda tag: (places[tag][0] - x) ** 2 + (places[tag][1] - y) ** 2))

    def _read(self, degree: int) -> Mesh:
        gmsh, count = self._gmsh, (degree + 1) * (degree + 2) // 2
        tags, xyz, _ = gmsh.model.mesh.getNodes()
        cells, region = [], []
        names = {i: self.pieces[i].name for i in set(self._owner.values())}
        used = sorted({name: i for i, name in names.items()}.values(), key=lambda i: self._rank(i))
        place = {i: [names[k] for k in used].index(name) for i, name in names.items()}
        for surface in sorted(self._owner):
            kinds, _, nodes = gmsh.model.mesh.getElements(2, surface)
            if len(kinds) != 1:
                raise MeshError(f"a part of {self.pieces[self._owner[surface]].name!r} is too small to be meshed")
            cells.append(np.asarray(nodes[0], dtype=np.int64).reshape(-1, count))
            region.append(np.full(len(cells[-1]), place[self._owner[surface]]))
        by_tag = np.zeros(int(tags.max()) + 1, dtype=np.int64)
        by_tag[tags.astype(np.int64)] = np.arange(len(tags))
        old = by_tag[np.vstack(cells)]
        kept = np.unique(old)
        renumber = np.full(len(tags), -1)
        renumber[kept] = np.arange(len(kept))
        ends = [gmsh.model.mesh.getNodes(0, tag)[0] for _, tag in gmsh.model.getEntities(0)]
        corners = renumber[by_tag[np.concatenate(ends).astype(np.int64)]] if ends else np.zeros(0, dtype=np.int64)
        regions = tuple(Region(p.name, p.material, p.carriers, p.offset_eV) for p in (self.pieces[i] for i in used))
        points = np.ascontiguousarray(xyz.reshape(-1, 3)[kept, :2])
        for curve, edges in self._curved_edges(degree):
            self._balance(curve, renumber[by_tag[edges]], points, degree)
        corners = corners[corners >= 0]
        return blended(oriented(Mesh(degree, points, renumber[old], np.concatenate(region), regions, corners)))

    def _rank(self, piece: int) -> tuple[int, int]:
        """From the core, or a map's innermost face, outwards; then patches, what is outside, and what is around it."""
        if self.pieces[piece].holes is not None:
            return 0, -piece
        kind, _, number = self.pieces[piece].name.partition(" ")
        if kind == "insulator":
            return _KINDS.index(kind), piece
        return _KINDS.index(kind), int(number or 0)

    def _curved_edges(self, degree: int) -> Iterator[tuple[int, Ints]]:
        """Curves that are not straight, with the node tags of their edges: two ends, then the inner ones."""
        model = self._gmsh.model
        for _, curve in model.getEntities(1):
            if model.getType(1, curve) != "Line":
                _, _, nodes = model.mesh.getElements(1, curve)
                if len(nodes) == 1:
                    yield curve, np.asarray(nodes[0], dtype=np.int64).reshape(-1, degree + 1)

    def _balance(self, curve: int, edges: Ints, points: Array, degree: int) -> None:
        """Move the inner nodes of edges so that each edge meets its curve at Gauss-Lobatto points.

        Gmsh puts equal steps on the curve, which leaves an area between curve and edge of a fixed sign and caps
        energies at size^6; an edge through the Lobatto points leaves areas that cancel within it, and size^8 is kept
        (quadrature of degree 2 p - 1: DLMF 3.5(v)).
        """
        edges = edges[(edges >= 0).all(axis=1)]
        if not len(edges):
            return
        model = self._gmsh.model
        place = np.zeros((len(edges), 3, 3))
        place[:, :, :2] = points[edges[:, [0, 1, 2 + (degree - 1) // 2]]]
        first, last, middle = np.asarray(model.getParametrization(1, curve, place.ravel())).reshape(-1, 3).T
        low, high = (float(bound[0]) for bound in model.getParametrizationBounds(1, curve))
        # The seam of a closed curve has two parameters: the one on the side of the edge's middle counts.
        for end in (first, last):
            end += (high - low) * np.rint((middle - end) / (high - low))
        lobatto, carry = _lobatto(degree)
        parameter = first[:, None] + lobatto * (last - first)[:, None]
        on_curve = np.asarray(model.getValue(1, curve, parameter.ravel())).reshape(len(edges), -1, 3)[:, :, :2]
        on_curve[:, 0], on_curve[:, -1] = points[edges[:, 0]], points[edges[:, 1]]
        points[edges[:, 2:]] = np.einsum("is,esx->eix", carry, on_curve)


@cache
def _lobatto(degree: int) -> tuple[Array, Array]:
    """Gauss-Lobatto points on (0, 1), and the interpolant through them at the inner equal steps."""
    inner = np.polynomial.legendre.Legendre.basis(degree).deriv().roots()
    at = (np.concatenate([[-1.0], np.sort(inner.real), [1.0]]) + 1) / 2
    steps = np.arange(1, degree) / degree
    powers = np.arange(degree + 1)
    carry = np.linalg.solve((at[:, None] ** powers).T, (steps[:, None] ** powers).T).T
    return at, np.asarray(carry, dtype=float)


OPTIONS = {
    "General.Terminal": 0,
    "General.Verbosity": 0,
    "General.NumThreads": 1,
    "Geometry.OCCParallel": 0,
    "Mesh.Algorithm": 6,
    "Mesh.MeshSizeFromPoints": 0,
    "Mesh.MeshSizeExtendFromBoundary": 0,
    "Mesh.HighOrderOptimize": 0,  # its optimiser can abort the process
}


_KINDS = ("core", "layer", "patch", "outside", "insulator", "below", "above", "beside")
_MANY = 12
"""Folded cells above which the whole mesh is sized anew; fewer are mended by spots, which leave the rest as it is."""


def short(fault: BaseException) -> str:
    """What an exception says, on one line."""
    return " ".join(str(fault).split())[:160] or type(fault).__name__


def _smaller_where(mesh: Mesh, marked: NDArray[np.bool_], size: SizeField) -> SizeField:
    """The size field with cells of less than half of today's size at the marked ones."""
    corner = mesh.points[mesh.cells[:, :3]]
    edge = np.linalg.norm(corner - np.roll(corner, 1, axis=1), axis=2)
    if marked.sum() > _MANY:
        longest = edge.max(axis=1)
        at_vertex = np.full(len(mesh.points), np.inf)
        np.minimum.at(at_vertex, mesh.cells[:, :3], np.where(marked, 0.35, 0.75)[:, None] * longest[:, None])
        return replace(size, triangles=corner, sizes_nm=at_vertex[mesh.cells[:, :3]])
    corner, edge = corner[marked], edge[marked]
    spots = [
        (float(x), float(y), 0.6 * float(longest), 0.5 * float(mean))
        for (x, y), longest, mean in zip(corner.mean(axis=1), edge.max(axis=1), edge.mean(axis=1), strict=True)
    ]
    return replace(size, spots=(*size.spots, *spots))


def _place(mesh: Mesh, marked: NDArray[np.bool_]) -> str:
    x, y = mesh.points[mesh.cells[marked][0, :3]].mean(axis=0)
    return f"{x:.3g}, {y:.3g}"
