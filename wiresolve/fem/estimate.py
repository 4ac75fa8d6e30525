"""Error bars and error indicators from one enriched step: degree 4 against degree 6 on the same triangles.

The degree-4 states are carried to degree 6 (geometry included), improved there by one step of inverse iteration whose
inner nodes are condensed cell by cell, and ended by Rayleigh-Ritz. What the energy still falls is the estimate of its
error; where the energy of the difference sits is where the mesh must be finer. The rule that turns the fall into a
bar is fixed by the study in scripts/error_bar_study.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.corners import Corner
from wiresolve.fem.eigen import factor, ritz_from
from wiresolve.fem.lagrange import triangle
from wiresolve.fem.meshing import SizeField
from wiresolve.fem.space import Space

Array = NDArray[np.float64]
Local = Callable[[Space, slice | NDArray[np.int64]], NDArray[Any]]
"""Element matrices of an operator on some cells of a space, shape (cells, nodes x bands, nodes x bands)."""

BAR_FACTOR = 2.0
"""The bar is this times the fall of the energy from degree 4 to degree 6.

On a smooth section the fall is the whole error. Beside a corner of exponent a the error at degree p goes like p^(-4 a)
(I. Babuska and M. Suri, RAIRO Model. Math. Anal. Numer. 21, 199 (1987)): it is 1.8 falls at a slit, a = 1/2, which is
the sharpest corner that a wall can have."""
BAR_FLOOR = 4e-13
"""No bar is below this times the largest energy of the block: rounding in the factor and in Rayleigh-Ritz."""


@dataclass(frozen=True, eq=False)
class Enriched:
    """States improved at degree 6.

    Attributes
    ----------
    energy_eV : (m,) energies at degree 6.
    fall_eV : (m,) how far below the degree-4 energies they lie.
    indicator_eV : (c, m) each cell's share of the fall.
    states : (n, m) the improved states at the nodes of `space`.
    """

    space: Space
    energy_eV: Array
    fall_eV: Array
    indicator_eV: Array
    states: NDArray[Any]


def prolong(coarse: Space, fine: Space, states: NDArray[Any], bands: int = 1) -> NDArray[Any]:
    """Degree-4 states (nodes x bands, m) at the nodes of the finer space over the same cells."""
    carry = triangle(coarse.mesh.degree).values(triangle(fine.mesh.degree).nodes)
    m = states.shape[1]
    by_cell = states.reshape(-1, bands * m)[coarse.dofs]
    out = np.zeros((len(fine.nodes), bands * m), dtype=states.dtype)
    out[fine.dofs] = np.einsum("fa,cam->cfm", carry, by_cell, optimize=True)
    return out.reshape(-1, m)


def enrich(
    coarse: Space,
    fine: Space,
    energies: Array,
    states: NDArray[Any],
    hamiltonians: tuple[Local, Local],
    mass: Local,
    shift: float,
    bands: int = 1,
) -> Enriched:
    """One step of inverse iteration at `shift`, below all states, in the finer space.

    Parameters
    ----------
    energies, states : (m,) and (nodes x bands, m), the degree-4 block on all nodes of `coarse`.
    hamiltonians : element matrices of H on the coarse and on the fine space.
    mass : element matrices of the inner product, on either.
    """
    hamiltonian = hamiltonians[1]
    element = triangle(fine.mesh.degree)
    outer = (element.count - element.inner) * bands
    before = prolong(coarse, fine, states, bands)
    dofs = _with_bands(fine.dofs, bands)
    total, m = before.shape
    kind = np.result_type(before.dtype, hamiltonian(fine, slice(0, 1)).dtype)

    rows, columns, values, back, local_right, inner_right = [], [], [], [], np.zeros((total, m), dtype=kind), []
    for chunk in fine.chunks():
        h, w = hamiltonian(fine, chunk), mass(fine, chunk)
        s = h - shift * w
        right = w @ before[dofs[chunk]]
        solved = np.linalg.solve(s[:, outer:, outer:], np.concatenate([s[:, outer:, :outer], right[:, outer:]], axis=2))
        back.append(solved[:, :, :outer])
        inner_right.append(solved[:, :, outer:])
        edge = dofs[chunk][:, :outer]
        condensed = s[:, :outer, :outer] - s[:, :outer, outer:] @ back[-1]
        np.add.at(local_right, edge, right[:, :outer] - s[:, :outer, outer:] @ inner_right[-1])
        rows.append(np.broadcast_to(edge[:, :, None], condensed.shape).astype(np.int32).ravel())
        columns.append(np.broadcast_to(edge[:, None, :], condensed.shape).astype(np.int32).ravel())
        values.append(condensed.ravel())
    matrix = sparse.csr_array(
        (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))), shape=(total, total)
    )
    del rows, columns, values
    kept = np.zeros(total, dtype=bool)
    kept[dofs[:, :outer]] = True
    kept[np.flatnonzero(np.repeat(fine.wall, bands))] = False
    kept = np.flatnonzero(kept)
    identity = sparse.eye_array(len(kept), format="csr")
    after = np.zeros((total, m), dtype=kind)
    after[kept] = factor(matrix[kept][:, kept], identity, 0.0).solve(local_right[kept])
    del matrix
    for chunk, pulled, given in zip(fine.chunks(), back, inner_right, strict=True):
        after[dofs[chunk][:, outer:]] = given - pulled @ after[dofs[chunk][:, :outer]]

    small_h, small_m = np.zeros((m, m), dtype=kind), np.zeros((m, m), dtype=kind)
    for chunk in fine.chunks():
        local = after[dofs[chunk]]
        turned = local.conj().transpose(0, 2, 1)
        small_h += (turned @ (hamiltonian(fine, chunk) @ local)).sum(axis=0)
        small_m += (turned @ (mass(fine, chunk) @ local)).sum(axis=0)
    improved, turn = ritz_from(small_h, small_m)
    after = after @ turn
    # Inside a cluster the two bases may be turned against each other; the difference is taken to the projection.
    overlap = np.zeros((m, m), dtype=kind)
    for chunk in fine.chunks():
        overlap += (before[dofs[chunk]].conj().transpose(0, 2, 1) @ (mass(fine, chunk) @ after[dofs[chunk]])).sum(
            axis=0
        )
    indicator = np.empty((len(fine.cells), m))
    difference = after - before @ overlap
    for chunk in fine.chunks():
        local = difference[dofs[chunk]]
        s = hamiltonian(fine, chunk) - shift * mass(fine, chunk)
        indicator[chunk] = np.einsum("cim,cim->cm", local.conj(), s @ local).real
    indicator = np.maximum(indicator, 0)
    curved = np.flatnonzero(~(coarse.straight & fine.straight))
    for start in range(0, len(curved), 1024):
        cells = curved[start : start + 1024]
        indicator[cells] += np.abs(
            _local_energy(fine, cells, dofs, before, energies, hamiltonian, mass)
            - _local_energy(coarse, cells, _with_bands(coarse.dofs, bands), states, energies, hamiltonians[0], mass)
        )
    return Enriched(fine, improved, energies - improved, indicator, after)


def _local_energy(
    space: Space,
    cells: NDArray[np.int64],
    dofs: NDArray[np.int64],
    states: NDArray[Any],
    energies: Array,
    hamiltonian: Local,
    mass: Local,
) -> Array:
    """Each cell's part of <H - E>, (cells, m): it differs between two geometries of one curved cell."""
    local = states[dofs[cells]]
    image = hamiltonian(space, cells) @ local - (mass(space, cells) @ local) * energies
    return np.asarray(np.einsum("cim,cim->cm", local.conj(), image).real)


def _with_bands(dofs: NDArray[np.int64], bands: int) -> NDArray[np.int64]:
    if bands == 1:
        return dofs
    return np.asarray((dofs[:, :, None] * bands + np.arange(bands)).reshape(len(dofs), -1))


def bars(enriched: Enriched, levels: NDArray[np.int64] | None = None) -> Array:
    """Error bars (m,) of the degree-4 energies; entries of one level share the widest."""
    # Errors of geometry and of the functions can cancel in the fall, but not in the cells' shares.
    fall = np.maximum(np.abs(enriched.fall_eV), 0.5 * enriched.indicator_eV.sum(axis=0))
    bar = np.asarray(BAR_FACTOR * fall + BAR_FLOOR * np.abs(enriched.energy_eV).max())
    if levels is not None:
        for level in np.unique(levels):
            bar[levels == level] = bar[levels == level].max()
    return bar


def finer(enriched: Enriched, before: SizeField, corners: Sequence[Corner], target_eV: float, wanted: int) -> SizeField:
    """The size field at which the fall of each wanted state would be `target_eV`.

    A cell's share of the fall goes like size^(2 p + 2) at degree p = 4, or like size^(2 a) beside a corner of exponent
    a; shares that are equal cost fewest cells.

    Parameters
    ----------
    corners : the singular corners of the drawing; their gradings shrink with the mesh around them.
    """
    mesh, cells = enriched.space.mesh, enriched.space.cells
    share = enriched.indicator_eV[:, :wanted]
    worst = share.max(axis=1)
    worst = np.maximum(worst, 1e-10 * worst.max() + 1e-300)
    power = 2 * 4 + 2
    each = (target_eV / (worst ** (2 / power)).sum()) ** (power / (power - 2))
    ratio = np.clip((each / worst) ** (1 / power), 0.25, 1.6)
    corner = mesh.points[mesh.cells[:, :3]]
    edge = np.linalg.norm(corner - np.roll(corner, 1, axis=1), axis=2).mean(axis=1)
    wanted_size = edge.copy()
    wanted_size[cells] *= ratio
    total, count = np.zeros(len(mesh.points)), np.zeros(len(mesh.points))
    # Averages of the density of cells, so that a neighbour that may grow cannot talk a small one out of shrinking.
    np.add.at(total, mesh.cells[:, :3], wanted_size[:, None] ** -2)
    np.add.at(count, mesh.cells[:, :3], 1)
    at_vertex = (np.maximum(total, 1e-300) / np.maximum(count, 1)) ** -0.5
    sizes = at_vertex[mesh.cells[:, :3]]
    for point in corners:
        at_corner = np.hypot(*(corner - (point.x, point.y)).transpose(2, 0, 1)) < 1e-9
        touching = at_corner.any(axis=1)[cells]
        smaller = np.clip((each / worst[touching]) ** (0.5 / point.exponent), 0.02, 1.5)
        sizes[at_corner] = (edge[cells][touching] * smaller).min()
    return SizeField(
        largest_nm=float(sizes.max()),
        triangles=corner,
        sizes_nm=sizes,
    )
