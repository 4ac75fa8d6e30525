"""Poisson's equation on a section and what is around it: the potential of gates, fixed charge and surfaces.

-div(permittivity grad phi) = density, with phi in V, lengths in nm and charge in e; phi is held at gates and pinned
surfaces, elsewhere on the outer boundary no field goes through. What carriers add is in `nonlinear_poisson`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.eigen import Factor, definite
from wiresolve.fem.enrich import Piece, condensed_solve, prolong
from wiresolve.fem.named_edges import NamedEdges
from wiresolve.fem.space import Space
from wiresolve.units import EPSILON0_PER_V_NM

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

PINNED = "pinned"
"""The name under which `Field.charges` gives the charge of all pinned surfaces together."""
_KEPT = 5000
"""Cells up to which element matrices are kept: 30 MB at degree 6."""
_NEUTRAL = 1e-9
"""Net charge, as a part of all charge, up to which a section with nothing held counts as neutral."""


@dataclass(frozen=True, eq=False)
class Pinned:
    """A surface at which phi is given, in V: one value, or one for each edge."""

    edges: NamedEdges
    potential_V: float | Array


@dataclass(frozen=True, eq=False)
class SheetCharge:
    """Charge on edges in e/nm^2: one value, or one for each edge."""

    edges: NamedEdges
    charge_per_nm2: float | Array


@dataclass(frozen=True, eq=False)
class Field:
    """Poisson's equation on one mesh: all that does not depend on voltages or carriers.

    Potentials and loads are arrays on all points of the mesh.

    Attributes
    ----------
    space : all cells of the mesh (`Space.whole`).
    permittivity : (c,) relative to vacuum.
    density_per_nm3 : (c,) fixed charge in e/nm^3.
    gates : the edges of each gate.
    pinned, sheets : surfaces with a given potential, and charged ones.
    """

    space: Space
    permittivity: Array
    density_per_nm3: Array
    gates: Mapping[str, NamedEdges]
    pinned: Sequence[Pinned] = ()
    sheets: Sequence[SheetCharge] = field(default=())

    @cached_property
    def stiffness(self) -> sparse.csr_array:
        """(n, n) int permittivity eps0 grad u . grad v in e/V."""
        return self.space.gathered(lambda _, cells: self.elements(cells))

    def elements(self, cells: slice | Ints) -> Array:
        """Element matrices of the stiffness on some cells, (k, nodes, nodes); kept where the mesh is small."""
        if len(self.space.cells) > _KEPT:
            return self.space.elements(self._form, cells)
        return np.asarray(self._all_elements[cells])

    @cached_property
    def _all_elements(self) -> Array:
        return np.concatenate([self.space.elements(self._form, chunk) for chunk in self.space.chunks()])

    @property
    def _form(self) -> dict[tuple[str, str], Array]:
        epsilon = EPSILON0_PER_V_NM * self.permittivity
        return {("x", "x"): epsilon, ("y", "y"): epsilon}

    @cached_property
    def gate_points(self) -> dict[str, Ints]:
        """Mesh points of each gate, ascending."""
        return {name: edges.points for name, edges in self.gates.items()}

    @cached_property
    def held(self) -> Ints:
        """(h,) mesh points at which phi is given: gates and pinned surfaces."""
        some = [*self.gate_points.values(), *(surface.edges.points for surface in self.pinned)]
        return np.unique(np.concatenate(some)) if some else np.zeros(0, dtype=np.int64)

    @cached_property
    def free(self) -> Ints:
        """(f,) the other mesh points."""
        return np.flatnonzero(~self.is_held)

    @cached_property
    def is_held(self) -> Flags:
        """(n,) whether phi is given at a mesh point."""
        flags = np.zeros(len(self.space.nodes), dtype=bool)
        flags[self.held] = True
        return flags

    @cached_property
    def fixed_load(self) -> Array:
        """(n,) integrals in e of the fixed charge, in the cells and on edges, with every node's function."""
        total = np.zeros(len(self.space.nodes))
        if self.density_per_nm3.any():
            _, parts = self.space.tabulated
            local = (self.density_per_nm3[:, None] * self.space.quadrature_weights) @ parts[2]
            total += np.bincount(self.space.dofs.ravel(), local.ravel(), minlength=len(total))
        for sheet in self.sheets:
            total += sheet.edges.load(sheet.charge_per_nm2)
        return total

    @cached_property
    def _pinned_V(self) -> Array:
        """(n,) phi at pinned points; the mean of what the edges say where two of them meet."""
        total, count = np.zeros(len(self.space.nodes)), np.zeros(len(self.space.nodes))
        for surface in self.pinned:
            nodes = surface.edges.nodes
            each = np.broadcast_to(np.asarray(surface.potential_V, dtype=float), (len(nodes),))
            np.add.at(total, nodes, each[:, None])
            np.add.at(count, nodes, 1.0)
        return total / np.maximum(count, 1)

    def held_values(self, potential_V: Mapping[str, float]) -> Array:
        """(h,) phi at the held points, from phi on each gate; where a pinned surface meets a gate, the gate counts.

        Raises `KeyError` where a gate has no value.
        """
        values = self._pinned_V.copy()
        for name, points in self.gate_points.items():
            values[points] = potential_V[name]
        return values[self.held]

    @cached_property
    def factor(self) -> Factor:
        """The factor of the free points' block: made once for all voltages and loads."""
        block = self.stiffness[self.free][:, self.free]
        if len(self.held):
            return definite(block)
        # Nothing is held: phi is known but for a constant, which the first point's value takes out.
        return definite(block[1:][:, 1:])

    @cached_property
    def _to_held(self) -> sparse.csr_array:
        """(f, h) the free points' rows and the held points' columns of the stiffness."""
        return sparse.csr_array(self.stiffness[self.free][:, self.held])

    def solve_linear(self, load: Array, held_values: Array) -> Array:
        """phi (n,) for a load (n,) in e, fixed charge included by the caller, and phi at the held points.

        With nothing held, phi has the mean zero over the area.

        Raises
        ------
        ValueError
            Nothing is held and the total charge is not zero: no such phi exists.
        """
        phi = np.zeros(len(self.space.nodes))
        if len(self.held):
            phi[self.held] = held_values
            phi[self.free] = self.factor.solve(load[self.free] - self._to_held @ held_values)
            return phi
        if abs(load.sum()) > _NEUTRAL * np.abs(load).sum():
            raise ValueError(
                f"nothing holds the potential, so the section must be neutral; its charge is {load.sum():.3g} e/nm"
            )
        phi[1:] = self.factor.solve(load[1:])
        return np.asarray(phi - self.integral(phi) / self.space.area_nm2)

    def integral(self, values: Array) -> float:
        """int of a function (n,) over the area."""
        _, parts = self.space.tabulated
        return float((self.space.quadrature_weights * (values[self.space.dofs] @ parts[2].T)).sum())

    def charges(self, phi: Array, load: Array) -> dict[str, float]:
        """Charge in e/nm of each gate, and of all pinned surfaces under "pinned".

        Consistent nodal fluxes, the residual of the equation at the held points: their sum and the sum of the whole
        load (fixed charge included by the caller) cancel to rounding where the equation holds at all free points, and
        for no load they are the derivatives of the energy by the voltages.
        """
        # A constant has no field: without it rounding does not make charge of a high voltage.
        level = float(phi[self.held].mean()) if len(self.held) else 0.0
        residual = self.stiffness @ (phi - level) - load
        found, of_gates = {}, np.zeros(len(residual), dtype=bool)
        for name, points in self.gate_points.items():
            found[name] = float(residual[points].sum())
            of_gates[points] = True
        if self.pinned:
            found[PINNED] = float(residual[self.is_held & ~of_gates].sum())
        return found

    def energy(self, phi: Array) -> float:
        """Field energy (1/2) int permittivity eps0 |grad phi|^2 in eV/nm."""
        return float(phi @ (self.stiffness @ phi)) / 2


def poisson_field(
    space: Space,
    permittivity_by_region: Sequence[float] | Array,
    gates: Mapping[str, NamedEdges],
    pinned: Sequence[Pinned] = (),
    sheets: Sequence[SheetCharge] = (),
    density_by_region_per_nm3: Sequence[float] | Array | None = None,
) -> Field:
    """The field of a mesh from one permittivity, and one fixed charge, for each of its regions.

    Raises
    ------
    ValueError
        The space has not all cells, an edge list is empty, or two gates share a point.
    """
    if not space.whole:
        raise ValueError("electrostatics needs a space of all cells: Space(mesh, whole=True)")
    for name, edges in gates.items():
        if not len(edges.nodes):
            raise ValueError(f"no edge of the mesh lies on the gate {name!r}")
    names = list(gates)
    for i, one in enumerate(names):
        for other in names[i + 1 :]:
            if len(np.intersect1d(gates[one].points, gates[other].points)):
                raise ValueError(f"the gates {one!r} and {other!r} touch")
    density = np.zeros(len(space.mesh.regions)) if density_by_region_per_nm3 is None else density_by_region_per_nm3
    return Field(space, space.field(permittivity_by_region), space.field(density), dict(gates), pinned, sheets)


def capacitances(poisson: Field) -> tuple[tuple[str, ...], Array]:
    """The gates' names and their capacitance matrix (g, g) in e/(V nm), all pinned surfaces at zero.

    C_ij is the charge of gate i for one volt on gate j. Its diagonal is twice the field's energy, so that its error is
    the square of the field's and of one sign.
    """
    names = tuple(poisson.gates)
    nothing = np.zeros(len(poisson.space.nodes))
    zero = np.zeros(len(nothing))
    columns = []
    for name in names:
        values = zero.copy()
        values[poisson.gate_points[name]] = 1.0
        phi = poisson.solve_linear(nothing, values[poisson.held])
        found = poisson.charges(phi, nothing)
        columns.append([found[other] for other in names])
    return names, np.array(columns).T


@dataclass(frozen=True, eq=False)
class Improved:
    """phi at degree 6 on the same triangles.

    Attributes
    ----------
    phi : (n6,) at the points of the degree-6 mesh.
    before : (n6,) the degree-4 phi there.
    share_eV_per_nm : (c,) each cell's part of the difference's energy int permittivity eps0 |grad(phi - before)|^2, and
        how much the energy of `before` differs between the two geometries of a curved cell.
    """

    phi: Array
    before: Array
    share_eV_per_nm: Array

    @property
    def change_V(self) -> float:
        """The largest change of phi at a point."""
        return float(np.abs(self.phi - self.before).max())


def at_quadrature(coarse: Space, phi: Array, fine: Space, cells: Ints | None = None) -> Array:
    """A function (n,) of one space at the quadrature points (c, q) of another one over the same cells."""
    carried = prolong(coarse, fine, phi[:, None])[:, 0]
    _, parts = fine.tabulated
    return np.asarray(carried[fine.dofs if cells is None else fine.dofs[cells]] @ parts[2].T)


def improved(
    coarse: Field,
    fine: Field,
    phi: Array,
    held_values: Array,
    density: Array | None = None,
    slope: Array | None = None,
    cells: Ints | None = None,
) -> Improved:
    """The degree-4 phi improved at degree 6: one linear solve, inner nodes condensed cell by cell.

    Parameters
    ----------
    held_values : (h6,) phi at the fine field's held points (`fine.held_values`).
    density, slope : (k, q6) the carriers' charge in e/nm^3 and its derivative by phi (not positive; None: none) at the
        fine space's quadrature points, for the degree-4 phi there (`at_quadrature`). With a slope the carriers answer
        to the change, as in a Newton step; without it their charge stays.
    cells : (k,) numbers of the carriers' cells among those of the space.
    """
    space = fine.space
    before = prolong(coarse.space, space, phi[:, None])[:, 0]
    start = before.copy()
    start[fine.held] = held_values
    weights, (_, _, values) = space.quadrature_weights, space.tabulated[1]
    place = np.full(len(space.cells), -1)
    if cells is not None:
        place[cells] = np.arange(len(cells))
    edge_load = sum((sheet.edges.load(sheet.charge_per_nm2) for sheet in fine.sheets), np.zeros(len(before)))
    # A load that is no integral over cells is shared among the cells of its node, to be summed again.
    edge_share = edge_load / np.maximum(np.bincount(space.dofs.ravel(), minlength=len(before)), 1)

    def pieces() -> Iterator[Piece]:
        for chunk in space.chunks():
            dofs, here = space.dofs[chunk], place[chunk]
            matrix = fine.elements(chunk).copy()
            charge = np.broadcast_to(fine.density_per_nm3[chunk, None], weights[chunk].shape).copy()
            some = np.flatnonzero(here >= 0)
            if density is not None:
                charge[some] += density[here[some]]
            load = (charge * weights[chunk]) @ values + edge_share[dofs] - np.einsum("cij,cj->ci", matrix, start[dofs])
            if slope is not None and len(some):
                pairs = (values[:, :, None] * values[:, None, :]).reshape(len(values), -1)
                added = (-slope[here[some]] * weights[chunk][some]) @ pairs
                matrix[some] += added.reshape(len(some), values.shape[1], -1)
            yield chunk, dofs, matrix, load[:, :, None]

    after = start + condensed_solve(space, 1, pieces, 1, fine.is_held)[:, 0]
    share = np.empty(len(space.cells))
    for chunk in space.chunks():
        share[chunk] = _energy_of((after - before)[space.dofs[chunk]], fine.elements(chunk))
    unlike = np.flatnonzero(~(coarse.space.straight & space.straight))
    if len(unlike):
        there = _energy_of(before[space.dofs[unlike]], fine.elements(unlike))
        here = _energy_of(phi[coarse.space.dofs[unlike]], coarse.elements(unlike))
        share[unlike] += np.abs(there - here)
    return Improved(after, before, share)


def _energy_of(local: Array, matrix: Array) -> Array:
    return np.asarray(np.einsum("ci,cij,cj->c", local, matrix, local, optimize=True))
