"""One enriched step: the states of degree 4, improved at degree 6 on the same triangles.

The states are carried to degree 6 (geometry included), improved there by one step of inverse iteration whose inner
nodes are condensed cell by cell, and ended by Rayleigh-Ritz.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.eigen import ritz_from, solve_definite
from wiresolve.fem.lagrange import triangle
from wiresolve.fem.space import Space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Local = Callable[[Space, slice | Ints], NDArray[Any]]
"""Element matrices of an operator on some cells of a space, shape (cells, nodes x bands, nodes x bands)."""
Piece = tuple[slice, Ints, NDArray[Any], NDArray[Any]]
"""Some cells: which, their rows (c, n), element matrices (c, n, n), and loads (c, n, m)."""


@dataclass(frozen=True, eq=False)
class Enriched:
    """States improved at degree 6.

    Attributes
    ----------
    space : the space of degree 6.
    energy_eV : (m,) energies there.
    fall_eV : (m,) how far below the degree-4 energies they lie.
    indicator_eV : (c, m) each cell's share of the fall.
    states : (nodes x bands, m) the improved states at the nodes of `space`.
    """

    space: Space
    energy_eV: Array
    fall_eV: Array
    indicator_eV: Array
    states: NDArray[Any]


def enrich(
    coarse: Space,
    fine: Space,
    energies: Array,
    states: NDArray[Any],
    hamiltonians: tuple[Local, Local],
    mass: Local,
    shift: float,
    bands: int = 1,
    varying: bool = False,
) -> Enriched:
    """One step of inverse iteration at `shift`, below all states, in the finer space.

    Parameters
    ----------
    energies, states : (m,) and (nodes x bands, m), the degree-4 block on all nodes of `coarse`.
    hamiltonians : element matrices of H on the coarse and on the fine space.
    mass : element matrices of the inner product, on either.
    varying : the operator has fields that vary inside cells.
    """
    parts = _Parts(fine, hamiltonians[1], mass, bands)
    before = prolong(coarse, fine, states, bands)
    after = _inverse_iteration(parts, before, shift)
    small_h, small_m = (np.zeros((after.shape[1],) * 2, dtype=after.dtype) for _ in range(2))
    for _, dofs, h, w in parts:
        local = after[dofs]
        small_h += summed(local, h @ local)
        small_m += summed(local, w @ local)
    improved, turn = ritz_from(small_h, small_m)
    after = after @ turn
    # Inside a level the two bases may be turned against each other: the difference is taken to the projection.
    overlap = np.zeros_like(small_m)
    for _, dofs, _, w in parts:
        overlap += summed(before[dofs], w @ after[dofs])
    indicator = np.empty((len(fine.cells), after.shape[1]))
    for chunk, dofs, h, w in parts:
        local = after[dofs] - before[dofs] @ overlap
        indicator[chunk] = np.einsum("cim,cim->cm", local.conj(), (h - shift * w) @ local).real
    indicator = np.maximum(indicator, 0)
    # The two degrees differ in the geometry of curved cells too, and in how varying fields are integrated.
    unlike = np.flatnonzero(~(coarse.straight & fine.straight) | varying)
    for start in range(0, len(unlike), 1024):
        cells = unlike[start : start + 1024]
        local = before[with_bands(fine.dofs[cells], bands)]
        there = _local_energy(local, hamiltonians[1](fine, cells), mass(fine, cells), energies)
        local = states[with_bands(coarse.dofs[cells], bands)]
        here = _local_energy(local, hamiltonians[0](coarse, cells), mass(coarse, cells), energies)
        indicator[cells] += np.abs(there - here)
    return Enriched(fine, improved, energies - improved, indicator, after)


def prolong(coarse: Space, fine: Space, states: NDArray[Any], bands: int = 1) -> NDArray[Any]:
    """Degree-4 states (nodes x bands, m) at the nodes of the finer space over the same cells."""
    carry = triangle(coarse.mesh.degree).values(triangle(fine.mesh.degree).nodes)
    m = states.shape[1]
    by_node = states.reshape(-1, bands * m)
    out = np.zeros((len(fine.nodes), bands * m), dtype=states.dtype)
    for chunk in fine.chunks():
        out[fine.dofs[chunk]] = carry @ by_node[coarse.dofs[chunk]]
    return out.reshape(-1, m)


def with_bands(dofs: Ints, bands: int) -> Ints:
    """Rows of the cells' nodes, node-major: (c, nodes) to (c, nodes x bands)."""
    if bands == 1:
        return dofs
    return np.asarray((dofs[:, :, None] * bands + np.arange(bands)).reshape(len(dofs), -1))


@dataclass(frozen=True, eq=False)
class _Parts:
    """The cells in chunks with their rows and element matrices; on a small mesh the matrices are made once."""

    space: Space
    hamiltonian: Local
    mass: Local
    bands: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "_kept", {})

    def __iter__(self) -> Iterator[tuple[slice, Ints, NDArray[Any], NDArray[Any]]]:
        kept: dict[int, tuple[slice, Ints, NDArray[Any], NDArray[Any]]] = self.__dict__["_kept"]
        for chunk in self.space.chunks():
            found = kept.get(chunk.start)
            if found is None:
                dofs = with_bands(self.space.dofs[chunk], self.bands)
                found = chunk, dofs, self.hamiltonian(self.space, chunk), self.mass(self.space, chunk)
                if len(self.space.cells) <= 2 * len(dofs):
                    kept[chunk.start] = found
            yield found


def _inverse_iteration(parts: _Parts, block: NDArray[Any], shift: float) -> NDArray[Any]:
    """(H - shift M)^-1 M applied to a block on all nodes, zero on the walls."""

    def pieces() -> Iterator[Piece]:
        for chunk, dofs, h, w in parts:
            yield chunk, dofs, h - shift * w, w @ block[dofs]

    return condensed_solve(parts.space, parts.bands, pieces, block.shape[1])


def condensed_solve(
    space: Space,
    bands: int,
    pieces: Callable[[], Iterator[Piece]],
    columns: int,
    held: NDArray[np.bool_] | None = None,
) -> NDArray[Any]:
    """Solve S y = load for `columns` loads on all nodes, zero on the walls, inner nodes condensed cell by cell.

    Parameters
    ----------
    pieces : makes an iterator over the cells in chunks, called twice: the chunk, its rows, and its element matrices of
        S, Hermitian positive definite, and loads.
    held : (nodes,) where y is zero, in place of the walls.
    """
    element = triangle(space.mesh.degree)
    outer = (element.count - element.inner) * bands
    unknown = np.zeros(len(space.nodes), dtype=bool)
    unknown[space.dofs[:, : element.count - element.inner]] = True
    unknown &= ~(space.wall if held is None else held)
    unknown = np.repeat(unknown, bands)
    number = np.full(len(unknown), -1, dtype=np.int32)
    number[unknown] = np.arange(unknown.sum(), dtype=np.int32)
    condensed: Any = None
    right: Any = None
    for chunk, dofs, s, load in pieces():
        if condensed is None:
            kind = np.result_type(load.dtype, s.dtype)
            condensed = np.empty((len(space.cells), outer, outer), dtype=kind)
            right = np.zeros((int(unknown.sum()) + 1, columns), dtype=kind)
        pulled, given = _condensation(s, load, outer)
        condensed[chunk] = s[:, :outer, :outer] - s[:, :outer, outer:] @ pulled
        # Rows on the walls have the number -1: they end in a last row that is dropped.
        np.add.at(right, number[dofs[:, :outer]], load[:, :outer] - s[:, :outer, outer:] @ given)
    rim = number[with_bands(space.dofs[:, : element.count - element.inner], bands)]
    matrix = _gathered(condensed, rim, int(unknown.sum()))
    kind = condensed.dtype
    del condensed
    solved = solve_definite(matrix, right[:-1])
    del matrix, right
    out = np.zeros((len(unknown), columns), dtype=kind)
    out[unknown] = solved
    for _, dofs, s, load in pieces():
        pulled, given = _condensation(s, load, outer)
        out[dofs[:, outer:]] = given - pulled @ out[dofs[:, :outer]]
    return out


def _condensation(s: NDArray[Any], load: NDArray[Any], outer: int) -> tuple[NDArray[Any], NDArray[Any]]:
    """What the inner nodes answer to the outer ones and to their own load."""
    both = np.linalg.solve(s[:, outer:, outer:], np.concatenate([s[:, outer:, :outer], load[:, outer:]], axis=2))
    return both[:, :, :outer], both[:, :, outer:]


def _gathered(elements: NDArray[Any], rows: NDArray[np.int32], size: int) -> sparse.csc_array:
    """The sum of element matrices (c, n, n) at numbered rows (c, n); the number -1 is left out."""
    walls = (rows < 0).any(axis=1)
    held = rows[walls] < 0
    elements[walls] *= ~(held[:, :, None] | held[:, None, :])
    rows = np.maximum(rows, 0)
    down = np.broadcast_to(rows[:, :, None], elements.shape).ravel()
    across = np.broadcast_to(rows[:, None, :], elements.shape).ravel()
    return sparse.csc_array((elements.ravel(), (down, across)), shape=(size, size))


def summed(left: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
    """Sum over cells and nodes of conj(left) right: (c, n, m) twice to (m, m)."""
    m = left.shape[2]
    return np.asarray(left.reshape(-1, m).conj().T @ right.reshape(-1, m))


def _local_energy(local: NDArray[Any], h: NDArray[Any], w: NDArray[Any], energies: Array) -> Array:
    """Each cell's part of <H - E>, (cells, m): it differs between two geometries of one curved cell."""
    return np.asarray(np.einsum("cim,cim->cm", local.conj(), h @ local - (w @ local) * energies).real)
