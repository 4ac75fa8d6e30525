"""A linear surrounding condensed onto what it encloses: its unknowns are eliminated once for many solves."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray

from wiresolve.fem.eigen import Factor, definite, elimination_order

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_COLUMNS = 64


@dataclass(frozen=True, eq=False)
class Outside:
    """Unknowns that are eliminated, and what they leave of the matrix for the others.

    Attributes
    ----------
    inner, outer : (i,) and (o,) numbers of the unknowns that stay and of those that go.
    reduced : (i, i) the inner block less what the outer unknowns answer to it (Schur's complement).
    coupling : (o, i) the outer rows and inner columns.
    factor : of the outer block; None where there is nothing outside.
    """

    inner: Ints
    outer: Ints
    reduced: sparse.csr_array
    coupling: sparse.csr_array
    factor: Factor | None


def outside(matrix: sparse.csr_array, inner: Ints, outer: Ints) -> Outside:
    """Eliminate the outer unknowns of a symmetric positive definite matrix."""
    rows = matrix[inner]
    block = sparse.csr_array(rows[:, inner])
    below = matrix[outer]
    coupling = sparse.csr_array(below[:, inner])
    if not len(outer):
        return Outside(inner, outer, block, coupling, None)
    touched = np.unique(coupling.indices)
    own = sparse.csc_array(below[:, outer])
    factor = definite(own)
    answer = _answer(own, sparse.csr_array(coupling[:, touched]), factor)
    where = np.meshgrid(touched, touched, indexing="ij")
    less = sparse.coo_array((answer.ravel(), (where[0].ravel(), where[1].ravel())), shape=block.shape)
    return Outside(inner, outer, sparse.csr_array(block - less.tocsr()), coupling, factor)


def _answer(own: sparse.csc_array, coupling: sparse.csr_array, factor: Factor) -> Array:
    """coupling^T own^-1 coupling, dense: from the last pivots of one factor, or by solves where it pivoted."""
    outer, few = coupling.shape
    order = elimination_order(own)
    own, coupling = own[order][:, order], coupling[order]
    # The last block keeps the factor from small pivots; it is taken off again.
    last = sparse.diags_array(np.full(few, 4 * abs(own.diagonal()).max()))
    both = sparse.csc_array(sparse.block_array([[own, coupling], [coupling.T, last]]))
    solver = definite(both, ordered=True).solver
    place = solver.perm_c
    if np.array_equal(solver.perm_r, place) and (place[outer:] >= outer).all():
        at = place[outer:] - outer
        left = solver.L[outer:, outer:].toarray()
        remains = left @ solver.U[outer:, outer:].toarray()
        answer = last.toarray() - remains[np.ix_(at, at)]
    else:
        turned = np.empty_like(order)
        turned[order] = np.arange(outer)
        dense = coupling[turned].toarray()
        parts = [factor.solve(dense[:, k : k + _COLUMNS]) for k in range(0, few, _COLUMNS)]
        answer = dense.T @ np.hstack(parts)
    return np.asarray((answer + answer.T) / 2)
