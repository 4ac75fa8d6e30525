"""From coefficients to the matrix pencil H(k) = H0 + k H1 + k^2 H2 with its mass matrix.

A coefficient is a sum of (scalar field) x (constant N x N matrix). A form of scalar fields gives one real block; blocks
and matrices are combined by Kronecker products, node by node, so that no form is complex and no model has an assembly
of its own.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, Protocol, runtime_checkable

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.bands.coefficients import Coefficients
from wiresolve.bands.nonparabolic import Relation
from wiresolve.fem.space import Field, Form, Space

Array = NDArray[np.float64]
Cells = slice | NDArray[np.int64]
_AXES = ("x", "y")


@runtime_checkable
class OnCells(Protocol):
    """A function that knows its values on the cells of any space over its triangles, without looking for points."""

    def on(self, space: Space) -> Array:
        """(c, q) values at the space's quadrature points."""


@dataclass(frozen=True, eq=False)
class Term:
    """A form of scalar fields times a constant matrix: a part of H_order."""

    order: int
    form: Form
    matrix: NDArray[Any]


@dataclass(frozen=True, eq=False)
class Operator:
    """The operator of one valley or band model over a section: coefficients by region, and scalar fields in eV.

    Attributes
    ----------
    by_region : one entry a region of the mesh.
    potential : energy in eV at points (x, y) in nm, the same for all bands; None for none.
    coupling : further constant terms, each a function of (x, y) times an N x N Hermitian matrix.
    nonparabolicity_per_eV : alpha of each region (one band only), or () for constant masses.
    mass_energy_eV : the energy at which masses are taken: m (1 + alpha (E - edge - potential)); None for the edge's.
    kinetic_scale : what all quadratic coefficients are multiplied by on a space, in place of 1.
    smooth : the potential is known to have no kink inside a region, so that one rule a cell integrates it.
    """

    by_region: tuple[Coefficients, ...]
    potential: Callable[[Array, Array], Array] | None = None
    coupling: tuple[tuple[Callable[[Array, Array], Array], NDArray[Any]], ...] = ()
    nonparabolicity_per_eV: tuple[float, ...] = ()
    mass_energy_eV: float | None = None
    kinetic_scale: Callable[[Space], Field] | None = None
    smooth: bool = False

    @property
    def bands(self) -> int:
        """N."""
        return self.by_region[0].bands

    @property
    def varies(self) -> bool:
        """Whether a field varies inside the regions."""
        return self.potential is not None or bool(self.coupling)

    @property
    def nonparabolic(self) -> bool:
        """Whether masses grow with energy."""
        return any(self.nonparabolicity_per_eV)

    @property
    def relation(self) -> Relation | None:
        """The one relation of energies and constant-mass eigenvalues that holds in all regions, if there is one."""
        if not self.nonparabolic:
            return Relation(0.0, 0.0)
        edges = {float(c.constant[0, 0].real) for c in self.by_region}
        alphas = set(self.nonparabolicity_per_eV)
        if self.varies or len(edges) > 1 or len(alphas) > 1:
            return None
        return Relation(edges.pop(), alphas.pop())

    def at(self, energy_eV: float) -> Operator:
        """The operator with every mass taken at one energy."""
        return replace(self, mass_energy_eV=energy_eV)

    def mass_ratio(self, space: Space, energy_eV: float) -> Field:
        """m(E)/m, (c,) where it is constant in cells, else (c, q)."""
        alpha = space.field(self.nonparabolicity_per_eV)
        edge = space.field([float(c.constant[0, 0].real) for c in self.by_region])
        if self.potential is None:
            return np.asarray(1 + alpha * (energy_eV - edge))
        higher = self.potential_on(space)
        return np.asarray(1 + alpha[:, None] * (energy_eV - edge[:, None] - higher))

    def potential_on(self, space: Space) -> Array:
        """(c, q) the potential in eV at a space's quadrature points, 0 without one."""
        if isinstance(self.potential, OnCells):
            return self.potential.on(space)
        at = space.quadrature_points
        if self.potential is None:
            return np.zeros(at.shape[:2])
        return np.asarray(self.potential(at[..., 0], at[..., 1]), dtype=float)

    def terms(self, space: Space) -> tuple[Term, ...]:
        """The operator as terms on a space; equal matrices share one form."""
        lighter = None if self.kinetic_scale is None else self.kinetic_scale(space)
        if self.mass_energy_eV is not None and self.nonparabolic:
            lighter = 1 / self.mass_ratio(space, self.mass_energy_eV)
        gathered: dict[tuple[int, bytes], tuple[dict[tuple[str, str], Field], NDArray[Any]]] = {}

        def add(order: int, slot: tuple[str, str], field: Field, matrix: NDArray[Any]) -> None:
            matrix = np.asarray(matrix)
            if not matrix.any():
                return
            # One form serves a matrix and its multiples: the scale goes into the field.
            lead = matrix.flat[np.flatnonzero(matrix)[0]]
            scale = abs(lead) if matrix.size > 1 else (lead if np.isreal(lead) else lead.imag)
            unit = matrix / scale
            form, _ = gathered.setdefault((order, np.round(unit, 12).tobytes()), ({}, unit))
            part = field * float(np.real(scale))
            before = form.get(slot)
            if before is not None and before.ndim != part.ndim:
                before, part = (f[:, None] if f.ndim == 1 else f for f in (before, part))
            form[slot] = part if before is None else before + part

        for index, c in enumerate(self.by_region):
            if not np.any(space.mesh.region[space.cells] == index):
                continue
            here = space.field(np.arange(len(self.by_region)) == index)
            moving = here
            if lighter is not None:
                moving = here * lighter if lighter.ndim == 1 else here[:, None] * lighter
            for i, a in enumerate(_AXES):
                for j, b in enumerate(_AXES):
                    add(0, (a, b), moving, c.quadratic[i, j])
                add(0, ("1", a), here, -0.5j * c.linear[i])
                add(0, (a, "1"), here, 0.5j * c.linear[i])
                add(1, (a, "1"), moving, 1j * c.quadratic[i, 2])
                add(1, ("1", a), moving, -1j * c.quadratic[2, i])
            add(0, ("1", "1"), here, c.constant)
            add(1, ("1", "1"), here, c.linear[2])
            add(2, ("1", "1"), moving, c.quadratic[2, 2])
        for function, matrix in self.coupling:
            at = space.quadrature_points
            add(0, ("1", "1"), np.asarray(function(at[..., 0], at[..., 1]), dtype=float), matrix)
        if self.potential is not None:
            add(0, ("1", "1"), self.potential_on(space), np.eye(self.bands))
        return tuple(Term(order, form, _plain(matrix)) for (order, _), (form, matrix) in gathered.items())


@dataclass(frozen=True, eq=False)
class Pencil:
    """H(k) = h0 + k h1 + k^2 h2 and the mass matrix, on the free nodes (or on all, with a natural outer boundary).

    Attributes
    ----------
    space, bands : where it lives; rows are node-major, band by band.
    terms : what it was made of.
    kept : (n,) rows of all nodes x bands that are unknowns.
    """

    space: Space
    bands: int
    terms: tuple[Term, ...]
    kept: NDArray[np.int64]

    def _sum(self, order: int) -> Any:
        total = None
        for term in self.terms:
            if term.order == order:
                block = self.space.matrix(term.form)
                part = block * term.matrix[0, 0] if self.bands == 1 else sparse.kron(block, term.matrix, format="csr")
                total = part if total is None else total + part
        if total is None:
            return None
        return sparse.csr_array(total[self.kept][:, self.kept])

    @cached_property
    def h0(self) -> Any:
        """H at k = 0."""
        return self._sum(0)

    @cached_property
    def h1(self) -> Any:
        """The coefficient of k, or None where it vanishes."""
        return self._sum(1)

    @cached_property
    def h2(self) -> Any:
        """The coefficient of k^2, or None."""
        return self._sum(2)

    @cached_property
    def mass(self) -> Any:
        """The matrix of the inner product."""
        mass = self.space.mass
        full = mass if self.bands == 1 else sparse.kron(mass, np.eye(self.bands), format="csr")
        return sparse.csr_array(full[self.kept][:, self.kept])

    def forget(self) -> None:
        """Let go of the assembled matrices; they are made again when they are asked for."""
        for name in ("h0", "h1", "h2", "mass"):
            self.__dict__.pop(name, None)

    def at(self, k_per_nm: float) -> Any:
        """H(k)."""
        total = self.h0
        if k_per_nm and self.h1 is not None:
            total = total + k_per_nm * self.h1
        if k_per_nm and self.h2 is not None:
            total = total + k_per_nm**2 * self.h2
        return total

    def local(self, k_per_nm: float = 0.0) -> Callable[[Space, Cells], NDArray[Any]]:
        """Element matrices of H(k), shape (cells, nodes x bands, nodes x bands), on this pencil's space."""

        def elements(space: Space, cells: Cells) -> NDArray[Any]:
            total: Any = 0
            for term in self.terms:
                if term.order == 0 or k_per_nm:
                    block = space.elements(term.form, cells) * k_per_nm**term.order
                    total = total + (block * term.matrix[0, 0] if self.bands == 1 else np.kron(block, term.matrix))
            if np.ndim(total) == 0:  # no part of this order
                shape = space.dofs[cells].shape
                return np.zeros((shape[0], shape[1] * self.bands, shape[1] * self.bands))
            return np.asarray(total)

        return elements

    def local_mass(self, space: Space, cells: Cells) -> NDArray[Any]:
        """Element matrices of the inner product."""
        block = space.elements({("1", "1"): space.ones}, cells)
        return block if self.bands == 1 else np.kron(block, np.eye(self.bands))

    def has(self, order: int) -> bool:
        """Whether the operator has a part of this order in k."""
        return any(term.order == order for term in self.terms)

    @property
    def uniform_axial_eV_nm2(self) -> float | None:
        """The number a where H(k) = H0 + a k^2 with one a for the whole section and all bands, else None."""
        second = [term for term in self.terms if term.order == 2]
        if self.has(1) or len(second) != 1 or set(second[0].form) != {("1", "1")}:
            return None
        field, matrix = second[0].form["1", "1"], second[0].matrix
        same = np.allclose(field, field.flat[0], rtol=1e-14) and np.array_equal(
            matrix, matrix[0, 0] * np.eye(self.bands)
        )
        return float(field.flat[0] * matrix[0, 0].real) if same else None

    def expected(self, order: int, states: NDArray[Any]) -> NDArray[Any]:
        """<i|H_order|j> of states (n, m) of the pencil, (m, m), cell by cell: no large matrix is made for it."""
        full = self.spread(states)
        total: Any = np.zeros((states.shape[1], states.shape[1]))
        if not states.shape[1]:
            return np.asarray(total)
        for chunk in self.space.chunks():
            dofs = self.space.dofs[chunk]
            if self.bands > 1:
                dofs = (dofs[:, :, None] * self.bands + np.arange(self.bands)).reshape(len(dofs), -1)
            local = full[dofs]
            for term in self.terms:
                if term.order == order:
                    block = self.space.elements(term.form, chunk)
                    block = block * term.matrix[0, 0] if self.bands == 1 else np.kron(block, term.matrix)
                    image = (block @ local).reshape(-1, local.shape[2])
                    total = total + local.conj().reshape(-1, local.shape[2]).T @ image
        return np.asarray(total)

    def spread(self, states: NDArray[Any]) -> NDArray[Any]:
        """States (n, m) of the pencil on all nodes of the space, zero on the walls: (nodes x bands, m)."""
        full = np.zeros((len(self.space.nodes) * self.bands, states.shape[1]), dtype=states.dtype)
        full[self.kept] = states
        return full


def build(space: Space, operator: Operator, released: NDArray[np.bool_] | None = None) -> Pencil:
    """The pencil of an operator.

    Parameters
    ----------
    released : (n,) wall nodes of the space at which the boundary is left free (natural) in place of a hard wall.
    """
    held = space.wall if released is None else space.wall & ~released
    kept = (np.flatnonzero(~held)[:, None] * operator.bands + np.arange(operator.bands)).ravel()
    return Pencil(space, operator.bands, operator.terms(space), kept)


def _plain(matrix: NDArray[Any]) -> NDArray[Any]:
    return np.asarray(matrix.real) if not np.iscomplexobj(matrix) or not matrix.imag.any() else matrix
