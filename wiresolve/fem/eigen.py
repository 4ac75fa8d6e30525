"""Counted eigenpairs of a Hermitian pencil H - E M by shift-invert Lanczos with our own factor.

The factor of H - s M without pivoting (minimum degree on A + A^T) serves the iteration, and the signs of its pivots
count the states below the shift (Sylvester's law of inertia). The count is a proof for the discrete problem.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.linalg as dense
import scipy.sparse as sparse
import scipy.sparse.linalg as sparse_linalg
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError

Array = NDArray[np.float64]

_TOLERANCE = 1e-11
"""Of the iteration, relative; energies are as exact as its square after Rayleigh-Ritz."""
_SLICE = 60
"""States of one window where many are wanted."""
_ORDER = "MMD_AT_PLUS_A"
SINGLE_FROM = 60_000
"""Definite systems from this many unknowns on are factored in single precision."""


@dataclass(frozen=True, eq=False)
class Factor:
    """A factor of H - shift M: solves with it, and counts the states below the shift."""

    shift: float
    solver: Any
    kind: Any

    @property
    def below(self) -> int | None:
        """Number of states below the shift; None where the factor pivoted, which spoils the count."""
        if not np.array_equal(self.solver.perm_r, self.solver.perm_c):
            return None
        # The copy of the triangle that the diagonal needs is as large as the factor: it is made for a count only.
        return int(np.count_nonzero(self.solver.U.diagonal().real < 0))

    def solve(self, right: NDArray[Any]) -> NDArray[Any]:
        """(H - shift M)^-1 applied to one vector or to columns; complex ones by parts where the matrix is real."""
        if np.iscomplexobj(right) and not np.issubdtype(self.kind, np.complexfloating):
            parts = (self.solver.solve(np.ascontiguousarray(part)) for part in (right.real, right.imag))
            return np.asarray(next(parts) + 1j * next(parts))
        return np.asarray(self.solver.solve(np.ascontiguousarray(right, dtype=self.kind)))


def factor(hamiltonian: Any, mass: Any, shift: float) -> Factor:
    """Factor H - shift M symmetrically, without pivoting for size."""
    return _factor(sparse.csc_array(hamiltonian - shift * mass), shift)


def definite(matrix: Any, ordered: bool = False) -> Factor:
    """Factor a Hermitian positive definite matrix (n, n) for many solves.

    `ordered` says that rows and columns stand in an order of elimination already (`elimination_order`), which saves
    more than half of the time.
    """
    return _factor(sparse.csc_array(matrix), order="NATURAL" if ordered else _ORDER)


def elimination_order(matrix: Any) -> NDArray[np.int64]:
    """(n,) rows in the order in which a symmetric matrix (n, n) is best eliminated (minimum degree)."""
    return np.argsort(_factor(sparse.csc_array(matrix)).solver.perm_c)


def _factor(matrix: Any, shift: float = 0.0, order: str = _ORDER) -> Factor:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", sparse_linalg.MatrixRankWarning)
        try:
            solver = sparse_linalg.splu(
                matrix, permc_spec=order, diag_pivot_thresh=0.0, options={"SymmetricMode": True}
            )
        except RuntimeError as fault:
            raise ConvergenceError(f"the matrix at {shift:.6g} eV is singular: {fault}") from None
    return Factor(shift, solver, matrix.dtype)


def solve_definite(matrix: Any, right: NDArray[Any]) -> NDArray[Any]:
    """Solve a Hermitian positive definite system (n, n) for columns (n, m), to 1e-10.

    A large matrix is factored in single precision, which halves the memory, and conjugate gradients with that factor
    restore the digits in a few steps.
    """
    if matrix.shape[0] < SINGLE_FROM:
        return _factor(matrix).solve(right)
    single = np.complex64 if np.iscomplexobj(matrix) else np.float32
    rough = _factor(matrix.astype(single))
    blocks = [right[:, start : start + 6] for start in range(0, right.shape[1], 6)]
    return np.hstack([_conjugate_gradients(matrix, block, rough) for block in blocks])


def _conjugate_gradients(matrix: Any, right: NDArray[Any], rough: Factor) -> NDArray[Any]:
    scale = np.maximum(np.linalg.norm(right, axis=0), 1e-300)
    residual = right / scale
    answer, direction, before = np.zeros_like(residual), np.zeros_like(residual), np.ones(right.shape[1])
    for _ in range(60):
        step = rough.solve(residual).astype(residual.dtype)
        now = np.real(np.einsum("ij,ij->j", residual.conj(), step))
        direction = step + direction * (now / before)
        image = matrix @ direction
        along = now / np.maximum(np.real(np.einsum("ij,ij->j", direction.conj(), image)), 1e-300)
        answer += along * direction
        residual -= along * image
        before = np.maximum(now, 1e-300)
        if np.linalg.norm(residual, axis=0).max() < 1e-10:
            return np.asarray(answer * scale)
    raise ConvergenceError("the enriched step did not converge: the mesh's cells are too uneven")


def count_below(hamiltonian: Any, mass: Any, energy: float) -> int:
    """Number of states of the pencil below an energy.

    Raises
    ------
    ConvergenceError
        The factor had to pivot at this energy and at ten energies beside it.
    """
    width = 1e-9 * max(abs(energy), 1e-6)
    for step in range(10):
        below = factor(hamiltonian, mass, energy + step * width).below
        if below is not None:
            return below
    raise ConvergenceError(f"the states below {energy:.6g} eV could not be counted")


def lowest(
    hamiltonian: Any, mass: Any, count: int, shift: float, tolerance: float = _TOLERANCE
) -> tuple[Array, NDArray[Any]]:
    """The `count` states nearest above `shift`, which must lie below the spectrum or in a gap.

    Parameters
    ----------
    hamiltonian, mass : (n, n) sparse Hermitian matrices, `mass` positive definite.
    tolerance : of the iteration, relative; vectors are as exact, energies as its square.

    Returns
    -------
    (count,) ascending energies and (n, count) vectors, orthonormal in the mass matrix.
    """
    n = hamiltonian.shape[0]
    if count > n:
        raise ConvergenceError(f"{count} states were asked of a mesh with {n} unknowns")
    if n <= max(3 * count, 60):
        values, vectors = dense.eigh(hamiltonian.toarray(), mass.toarray(), subset_by_index=(0, count - 1))
        return values, vectors
    if count <= 2 * _SLICE:
        _, vectors = _nearest(hamiltonian, mass, factor(hamiltonian, mass, shift), count, tolerance)
    else:
        vectors = _sliced(hamiltonian, mass, count, shift)
    return ritz(hamiltonian, mass, vectors)


def _nearest(
    hamiltonian: Any, mass: Any, inverse: Factor, count: int, tolerance: float = _TOLERANCE
) -> tuple[Array, NDArray[Any]]:
    """The `count` states nearest to the factor's shift on either side, ascending."""
    n, kind = hamiltonian.shape[0], np.result_type(hamiltonian.dtype, mass.dtype)
    operator = sparse_linalg.LinearOperator((n, n), matvec=inverse.solve, dtype=kind)
    try:
        values, vectors = sparse_linalg.eigsh(
            hamiltonian,
            k=count,
            M=mass,
            sigma=inverse.shift,
            OPinv=operator,
            v0=_start(n, kind),
            tol=tolerance,
            ncv=min(n, 2 * count + 8),
        )
    except sparse_linalg.ArpackNoConvergence as fault:
        raise ConvergenceError(
            f"{len(fault.eigenvalues)} of {count} states converged; ask fewer states or a coarser accuracy"
        ) from None
    order = np.argsort(values, kind="stable")
    return values[order], vectors[:, order]


def _sliced(hamiltonian: Any, mass: Any, count: int, shift: float) -> NDArray[Any]:
    """A basis of the `count` lowest states, window after window: the cost grows with their number, not its square.

    Each window's factor counts the states below its shift, so every state has a number; a window is taken up to its
    last clear gap, and the next one starts there.
    """
    values, vectors = _nearest(hamiltonian, mass, factor(hamiltonian, mass, shift), _SLICE)
    done = _before_last_gap(values)
    energies, blocks = list(values[:done]), [vectors[:, :done]]
    ahead = 0.5
    for _ in range(40 + 4 * count // _SLICE):
        if len(energies) >= count:
            return np.hstack(blocks)[:, :count]
        known, top = len(energies), energies[-1]
        window = max(top - energies[-min(known, _SLICE)], 1e-9 * max(abs(top), 1e-9))
        inverse = factor(hamiltonian, mass, top + ahead * window)
        below = inverse.below
        if below is None:
            ahead *= 0.97
            continue
        values, vectors = _nearest(hamiltonian, mass, inverse, _SLICE + _SLICE // 2)
        first = below - int(np.sum(values < inverse.shift))
        if first > known:
            ahead *= 0.7
            continue
        done = _before_last_gap(values)
        if first + done <= known:
            ahead *= 1.2
            continue
        energies += list(values[known - first : done])
        blocks.append(vectors[:, known - first : done])
    raise ConvergenceError(f"{len(energies)} of {count} states were found; ask fewer states")


def _before_last_gap(values: Array) -> int:
    """How many ascending values stand before the last gap that is no splitting of a pair."""
    gaps = np.diff(values)
    clear = np.flatnonzero(gaps > 1e-3 * np.median(gaps[gaps > 0]))
    return int(clear[-1]) + 1 if len(clear) else 0


def ritz(hamiltonian: Any, mass: Any, block: NDArray[Any]) -> tuple[Array, NDArray[Any]]:
    """Rayleigh-Ritz in the span of `block` (n, m): ascending energies and vectors orthonormal in the mass matrix."""
    values, turn = ritz_from(block.conj().T @ (hamiltonian @ block), block.conj().T @ (mass @ block))
    return values, block @ turn


def ritz_from(hamiltonian: NDArray[Any], mass: NDArray[Any]) -> tuple[Array, NDArray[Any]]:
    """Energies (m,) and combinations (m, m) of a small dense pencil."""
    try:
        values, turn = dense.eigh(_hermitian(hamiltonian), _hermitian(mass))
    except np.linalg.LinAlgError:
        rule = "the solver's states are not independent; ask fewer states or a finer accuracy"
        raise ConvergenceError(rule) from None
    return values, turn


def _hermitian(matrix: NDArray[Any]) -> NDArray[Any]:
    return np.asarray((matrix + matrix.conj().T) / 2)


def _start(n: int, kind: Any) -> NDArray[Any]:
    # A fixed quasi-random vector: no global random state, and no symmetry that could hide a state.
    golden = 0.6180339887498949
    return np.asarray(0.1 + np.mod(np.arange(1, n + 1) * golden, 1.0), dtype=kind)
