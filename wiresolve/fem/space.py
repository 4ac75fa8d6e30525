"""Matrices of a curved mesh: real scalar blocks weighted by fields; nothing else imports scikit-fem.

The nodes of a Lagrange mesh are its degrees of freedom, so a function is known by its values at the mesh's points and
functions of neighbouring cells match by construction. Quadrature and the reference quartic come from scikit-fem.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import cache, cached_property
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse import csgraph

from wiresolve.fem.lagrange import LagrangeTriangle, triangle
from wiresolve.fem.mesh import Mesh, is_straight

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]
Field = Array
"""A scalar field: (cells,) constant in each cell, or (cells, quadrature points)."""
Form = Mapping[tuple[str, str], Field]
"""Fields D_ab of the form sum_ab int (d_a u) D_ab (d_b v), with a, b among "x", "y" and "1" (no derivative)."""

_SLOT = {"x": 0, "y": 1, "1": 2}
_CHUNK = 2048


@cache
def _rule(order: int) -> tuple[Array, Array]:
    from skfem.quadrature import get_quadrature
    from skfem.refdom import RefTri

    points, weights = get_quadrature(RefTri, order)
    return np.ascontiguousarray(points.T), np.asarray(weights)


@cache
def _composite_rule(order: int) -> tuple[Array, Array]:
    """The rule on each of the 16 like parts of the reference triangle."""
    at, weights = _rule(order)
    corners = np.array([(i, j) for i in range(4) for j in range(4 - i)]) / 4
    upright = [corner + at / 4 for corner in corners]
    turned = [corner + (1 - at) / 4 for corner in corners if corner.sum() < 0.75 - 1e-9]
    return np.vstack([*upright, *turned]), np.tile(weights / 16, 16)


@cache
def _tabulated(degree: int, order: int, composite: bool) -> tuple[Array, Array]:
    at, weights = _composite_rule(12) if composite else _rule(order)
    return weights, _reference_parts(triangle(degree), at)


@cache
def _reference_tensor(degree: int) -> Array:
    """int (d_a phi_i)(d_b phi_j) over the reference triangle, shape (9, n, n), with a, b = x, y, 1."""
    at, weights = _rule(2 * degree)
    parts = _reference_parts(triangle(degree), at)
    tensor = np.einsum("q,aqi,bqj->abij", weights, parts, parts, optimize=True)
    return np.asarray(tensor.reshape(9, parts.shape[2], -1))


@cache
def reference_mass(degree: int) -> Array:
    """int phi_i phi_j over the reference triangle, shape (n, n)."""
    count = triangle(degree).count
    return np.asarray(_reference_tensor(degree)[8].reshape(count, count))


def _reference_parts(element: LagrangeTriangle, at: Array) -> Array:
    """Reference derivatives and values, shape (3, points, functions)."""
    return np.concatenate([element.gradients(at), element.values(at)[None]])


@dataclass(frozen=True, eq=False)
class Space:
    """Continuous functions of the mesh's degree on the cells that carriers may enter, or on all of them.

    Attributes
    ----------
    mesh : the curved mesh; functions live at `nodes`, a subset of its points.
    composite : fields that vary inside cells are integrated on 16 parts of each, which sees what one rule cannot (a
        kink of a potential).
    whole : all cells belong to the space, those that carriers are kept out of too; "admitted" below means all then.
    """

    mesh: Mesh
    composite: bool = False
    whole: bool = False

    @cached_property
    def cells(self) -> Ints:
        """(c,) numbers of the cells that carriers may enter, or of all cells."""
        return np.arange(len(self.mesh.cells)) if self.whole else np.flatnonzero(self.mesh.admitted)

    @cached_property
    def nodes(self) -> Ints:
        """(n,) mesh points that belong to these cells."""
        return np.unique(self.mesh.cells[self.cells])

    @cached_property
    def dofs(self) -> Ints:
        """(c, nodes per cell) numbers of the cells' nodes among `nodes`."""
        number = np.full(len(self.mesh.points), -1)
        number[self.nodes] = np.arange(len(self.nodes))
        return np.asarray(number[self.mesh.cells[self.cells]])

    @cached_property
    def wall(self) -> Flags:
        """(n,) nodes on a wall: edges that only one admitted cell has."""
        return self._on_edges(self._lonely_edges)

    def rim_of(self, region: int) -> Flags:
        """(n,) wall nodes on edges of one region's cells."""
        here = self.mesh.region[self.cells] == region
        return self._on_edges(self._lonely_edges & here[:, None])

    def _on_edges(self, lonely: Flags) -> Flags:
        degree, dofs = self.mesh.degree, self.dofs
        flags = np.zeros(len(self.nodes), dtype=bool)
        for edge in range(3):
            inner = 3 + edge * (degree - 1) + np.arange(degree - 1)
            local = np.concatenate([[edge, (edge + 1) % 3], inner])
            flags[dofs[lonely[:, edge]][:, local]] = True
        return flags

    @cached_property
    def _lonely_edges(self) -> Flags:
        """(c, 3) edges that only one admitted cell has."""
        ends = np.sort(self.dofs[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1)
        key = ends[:, 0] * len(self.nodes) + ends[:, 1]
        _, index, count = np.unique(key, return_inverse=True, return_counts=True)
        return np.asarray((count[index.ravel()] == 1).reshape(-1, 3))

    @cached_property
    def parts(self) -> int:
        """Number of parts that walls keep from each other."""
        size, dofs = len(self.nodes), self.dofs
        inner = ~self.wall[dofs]
        rows = np.broadcast_to(dofs[:, -1:], dofs.shape)
        links = sparse.coo_array((np.ones(int(inner.sum())), (rows[inner], dofs[inner])), shape=(size, size))
        _, label = csgraph.connected_components(links.tocsr(), directed=False)
        return len(np.unique(label[dofs[:, -1]]))

    @property
    def wall_length_nm(self) -> float:
        """Length of the walls, by the chords of their cells."""
        corner = self.mesh.points[self.mesh.cells[self.cells][:, :3]]
        chord = np.linalg.norm(np.roll(corner, -1, axis=1) - corner, axis=2)
        return float(chord[self._lonely_edges].sum())

    @cached_property
    def free(self) -> Ints:
        """(f,) nodes that are not on a wall, numbers among `nodes`."""
        return np.flatnonzero(~self.wall)

    @cached_property
    def straight(self) -> Flags:
        """(c,) cells with an affine map."""
        return is_straight(self.mesh)[self.cells]

    @property
    def quadrature_order(self) -> int:
        """Order of the rule on curved cells and for fields that vary inside a cell."""
        return 2 * self.mesh.degree + 4

    @property
    def _varying_rule(self) -> tuple[Array, Array]:
        return _composite_rule(12) if self.composite else _rule(self.quadrature_order)

    @property
    def tabulated(self) -> tuple[Array, Array]:
        """Weights (q,) of the rule for varying fields; reference derivatives and values there, (3, q, functions)."""
        return _tabulated(self.mesh.degree, self.quadrature_order, self.composite)

    @property
    def reference_points(self) -> Array:
        """(q, 2) reference places of `quadrature_points`, the same in every cell."""
        return self._varying_rule[0]

    @cached_property
    def quadrature_points(self) -> Array:
        """(c, q, 2) points in nm at which a varying field is wanted."""
        at, _ = self._varying_rule
        values = triangle(self.mesh.degree).values(at)
        return np.asarray(
            np.einsum("qa,cax->cqx", values, self.mesh.points[self.mesh.cells[self.cells]], optimize=True)
        )

    @cached_property
    def quadrature_weights(self) -> Array:
        """(c, q) weights in nm^2 that go with `quadrature_points`."""
        at, weights = self._varying_rule
        slopes = triangle(self.mesh.degree).gradients(at)
        local = self.mesh.points[self.mesh.cells[self.cells]]
        jacobian = np.einsum("rqa,cax->cqxr", slopes, local, optimize=True)
        det = jacobian[..., 0, 0] * jacobian[..., 1, 1] - jacobian[..., 0, 1] * jacobian[..., 1, 0]
        return np.asarray(det * weights)

    def gradients_of(self, local: NDArray[Any]) -> NDArray[Any]:
        """(c, q, 2, m) gradients at the quadrature points of functions (c, nodes, m) given cell by cell."""
        at, _ = self._varying_rule
        slopes = triangle(self.mesh.degree).gradients(at)
        jacobian = np.einsum("rqa,cax->cqxr", slopes, self.mesh.points[self.nodes[self.dofs]], optimize=True)
        there = np.einsum("rqa,cam->cqrm", slopes, local, optimize=True)
        return np.asarray(np.einsum("cqrx,cqrm->cqxm", np.linalg.inv(jacobian), there, optimize=True))

    def elements(self, form: Form, cells: slice | Ints) -> Array:
        """Element matrices of a form on some of the cells, shape (len(cells), n, n)."""
        nodes, straight = self.nodes[self.dofs[cells]], self.straight[cells]
        constant = {key: field[cells] for key, field in form.items() if field.ndim == 1}
        varying = {key: field[cells] for key, field in form.items() if field.ndim == 2}
        plain = straight if set(varying) <= {("1", "1")} else np.zeros_like(straight)
        out = np.zeros((*nodes.shape, nodes.shape[1]))
        if plain.any():
            if constant:
                out[plain] = self._straight(nodes[plain], {key: field[plain] for key, field in constant.items()})
            if varying:
                out[plain] += self._straight_varying(nodes[plain], varying["1", "1"][plain])
        if not plain.all():
            both = {key: field[~plain] for key, field in (*constant.items(), *varying.items())}
            out[~plain] = self._curved(nodes[~plain], both)
        return out

    def _straight_varying(self, nodes: Ints, field: Field) -> Array:
        at, weights = self._varying_rule
        values = triangle(self.mesh.degree).values(at)
        pairs = (values[:, :, None] * values[:, None, :]).reshape(len(weights), -1)
        corner = self.mesh.points[nodes[:, :3]]
        first, second = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
        det = first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]
        return np.asarray((field * weights * det[:, None]) @ pairs).reshape(len(nodes), nodes.shape[1], -1)

    def _straight(self, nodes: Ints, form: Form) -> Array:
        corner = self.mesh.points[nodes[:, :3]]
        jacobian = np.stack([corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]], axis=2)
        det = jacobian[:, 0, 0] * jacobian[:, 1, 1] - jacobian[:, 0, 1] * jacobian[:, 1, 0]
        pull = np.zeros((len(nodes), 3, 3))
        pull[:, 0, 0], pull[:, 0, 1] = jacobian[:, 1, 1] / det, -jacobian[:, 0, 1] / det
        pull[:, 1, 0], pull[:, 1, 1] = -jacobian[:, 1, 0] / det, jacobian[:, 0, 0] / det
        pull[:, 2, 2] = 1
        fields = np.zeros((len(nodes), 3, 3))
        for (a, b), values in form.items():
            fields[:, _SLOT[a], _SLOT[b]] += values
        weights = (pull @ fields @ pull.transpose(0, 2, 1)) * det[:, None, None]
        tensor = _reference_tensor(self.mesh.degree)
        n = tensor.shape[1]
        return np.asarray((weights.reshape(-1, 9) @ tensor.reshape(9, -1)).reshape(-1, n, n))

    def _curved(self, nodes: Ints, form: Form) -> Array:
        varying = any(field.ndim == 2 for field in form.values())
        at, weights = self._varying_rule if varying else _rule(self.quadrature_order)
        parts = _reference_parts(triangle(self.mesh.degree), at)
        count, q = parts.shape[2], len(weights)
        out = np.empty((len(nodes), count, count))
        size = max(1, _CHUNK * 12 // q)
        for start in range(0, len(nodes), size):
            chunk = slice(start, start + size)
            local = self.mesh.points[nodes[chunk]]
            c = len(local)
            jacobian = np.einsum("rqa,cax->cqxr", parts[:2], local, optimize=True)
            det = jacobian[..., 0, 0] * jacobian[..., 1, 1] - jacobian[..., 0, 1] * jacobian[..., 1, 0]
            down = np.empty((c, 3, q, count))
            gx, gy = parts[0][None], parts[1][None]
            inverse = (jacobian / det[..., None, None])[..., None]
            down[:, 0] = inverse[:, :, 1, 1] * gx - inverse[:, :, 1, 0] * gy
            down[:, 1] = inverse[:, :, 0, 0] * gy - inverse[:, :, 0, 1] * gx
            down[:, 2] = parts[2]
            right = np.zeros_like(down)
            for (a, b), values in form.items():
                field = values[chunk]
                scale = (field[:, None] if field.ndim == 1 else field) * det * weights
                right[:, _SLOT[a]] += scale[..., None] * down[:, _SLOT[b]]
            stacked = down.reshape(c, 3 * q, count)
            out[chunk] = stacked.transpose(0, 2, 1) @ right.reshape(c, 3 * q, count)
        return out

    def chunks(self) -> Iterator[slice]:
        """Slices of the cells, small enough that element matrices of one fit the cache of a laptop."""
        for start in range(0, len(self.cells), _CHUNK):
            yield slice(start, min(start + _CHUNK, len(self.cells)))

    def matrix(self, form: Form) -> sparse.csr_array:
        """The form on all `nodes` (walls included), shape (n, n)."""
        return self.gathered(lambda space, cells: space.elements(form, cells))

    def gathered(
        self, local: Callable[[Space, slice | Ints], NDArray[Any]], only: Flags | None = None
    ) -> sparse.csr_array:
        """The sum of element matrices on all `nodes` (walls included), shape (n, n).

        Parameters
        ----------
        local : makes the element matrices (k, nodes, nodes) of some of the space's cells.
        only : (c,) cells that count, or None for all.
        """
        numbers = np.arange(len(self.cells)) if only is None else np.flatnonzero(only)
        dofs = self.dofs[numbers].astype(np.int32)
        n, count = len(self.nodes), dofs.shape[1]
        data: NDArray[Any] = np.empty((len(dofs), count, count))
        for start in range(0, len(numbers), _CHUNK):
            made = local(self, numbers[start : start + _CHUNK])
            if np.iscomplexobj(made) and not np.iscomplexobj(data):
                data = data.astype(complex)
            data[start : start + _CHUNK] = made
        rows = np.broadcast_to(dofs[:, :, None], data.shape).ravel()
        columns = np.broadcast_to(dofs[:, None, :], data.shape).ravel()
        return sparse.csr_array((data.ravel(), (rows, columns)), shape=(n, n))

    def field(self, by_region: Any) -> Field:
        """(c,) a field that is constant in each region, from one number a region."""
        return np.asarray(by_region, dtype=float)[self.mesh.region[self.cells]]

    @property
    def ones(self) -> Field:
        """(c,) the field 1."""
        return np.ones(len(self.cells))

    def quartic_basis(self) -> tuple[Any, Ints]:
        """scikit-fem's quartic basis on the same curved cells, for forms of one's own, and its numbers of `nodes`.

        Returns
        -------
        basis : ``skfem.CellBasis`` of ``ElementTriP4`` on a mesh whose map is quartic too.
        number : (n,) the basis's number of each of this space's nodes: ``ours = theirs[number]``.

        Raises
        ------
        ValueError
            The space's degree is not 4.
        """
        from skfem import Basis, MeshTri, MeshTri2
        from skfem.assembly import Dofs
        from skfem.element import ElementTriP4

        if self.mesh.degree != 4:
            raise ValueError(f"scikit-fem has a quartic triangle, none of degree {self.mesh.degree}")

        vertices, corner = np.unique(self.dofs[:, :3], return_inverse=True)
        corner = corner.reshape(-1, 3)
        # The quartic's functions match across edges only where each cell's vertices ascend.
        order = np.argsort(corner, axis=1)
        ascending = np.take_along_axis(corner, order, axis=1).T
        points = self.mesh.points[self.nodes]
        numbering = Dofs(MeshTri(points[vertices].T, ascending), ElementTriP4())
        ours, theirs = (
            np.rint(4 * np.column_stack([1 - nodes.sum(axis=1), nodes])).astype(int)
            for nodes in (triangle(4).nodes, ElementTriP4.doflocs)
        )
        place = {tuple(weights): i for i, weights in enumerate(ours)}
        number = np.empty(len(self.nodes), dtype=np.int64)
        for turn in np.unique(order, axis=0):
            same = (order == turn).all(axis=1)
            for j, weights in enumerate(theirs):
                turned = np.empty(3, dtype=int)
                turned[turn] = weights
                number[self.dofs[same, place[tuple(turned)]]] = numbering.element_dofs[j, same]
        places = np.empty((2, numbering.N))
        places[:, number] = points.T
        curved = MeshTri2(places, ascending, elem=ElementTriP4)
        return Basis(curved, ElementTriP4(), intorder=self.quadrature_order), number

    @property
    def mass(self) -> sparse.csr_array:
        """The matrix of int u v."""
        return self.matrix({("1", "1"): self.ones})

    @cached_property
    def area_nm2(self) -> float:
        """Area that carriers may enter."""
        return float(self.quadrature_weights.sum())

    @property
    def center_nm(self) -> Array:
        """(2,) centroid of that area."""
        weights = self.quadrature_weights[..., None]
        return np.asarray((weights * self.quadrature_points).sum(axis=(0, 1)) / self.area_nm2)
