"""A reduced space in which E(k) of one channel is cheap at every wave number, also where H(k) has a part linear in k.

States at a few k span it. Every band of the reduced problem is followed from k to k by the overlap of its states, so
that bands may cross; the space grows where it is worst, by new vectors at its end, so that what was followed stays.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem import eigen
from wiresolve.physics.solved import Solved

Array = NDArray[np.float64]

_NODES = 5
"""Energies at which the eigenvalues of T(E) are worked out where masses grow differently from place to place: between
them they are as smooth as 1/m(E)."""
_MET_eV = 1e-13
_NEW = 1e-10
"""A new vector counts when this share of its square norm lies outside the space."""


@dataclass(frozen=True, eq=False)
class AxialSpace:
    """H(k), or T(E, k), in a basis.

    Attributes
    ----------
    solved : the channel, with its states at k = 0.
    basis : (n, d) on the unknowns, orthonormal in the mass matrix.
    orders : what 1, k and k^2 multiply, each the parts of T(E) (one part for constant masses), (d, d).
    window_eV : energies between which the states are wanted.
    """

    solved: Solved
    basis: NDArray[Any]
    orders: tuple[tuple[NDArray[Any], ...], ...]
    window_eV: tuple[float, float]

    @property
    def size(self) -> int:
        """d."""
        return int(self.basis.shape[1])

    def joined(self, states: NDArray[Any]) -> AxialSpace:
        """The space with further states (n, m) at its end, as far as they are new."""
        mass = _mass(self.solved)
        rest = np.asarray(states, dtype=complex)
        rest = rest / np.sqrt(np.real(np.einsum("ij,ij->j", rest.conj(), mass @ rest)))
        for _ in range(2):
            rest = rest - self.basis @ (self.basis.conj().T @ (mass @ rest))
        values, vectors = np.linalg.eigh(_hermitian(rest.conj().T @ (mass @ rest)))
        kept = values > _NEW
        new = rest @ (vectors[:, kept] / np.sqrt(values[kept]))
        new = new - self.basis @ (self.basis.conj().T @ (mass @ new))
        basis = np.hstack([self.basis, new])
        orders = []
        for order, known in enumerate(self.orders):
            parts = []
            for matrix, old in zip(_matrices(self.solved, order), known, strict=True):
                d = basis.shape[1]
                part = np.zeros((d, d), dtype=complex)
                part[: len(old), : len(old)] = old
                if matrix is not None:
                    column = basis.conj().T @ (matrix @ new)
                    part[:, len(old) :] = column
                    part[len(old) :, : len(old)] = column[: len(old)].conj().T
                parts.append(part)
            orders.append(tuple(parts))
        return replace(self, basis=basis, orders=tuple(orders))

    def up_to(self, top_eV: float) -> AxialSpace:
        """The same for energies up to another one."""
        return replace(self, window_eV=(self.window_eV[0], max(self.window_eV[1], top_eV)))

    def grown(self, k_per_nm: float, count: int) -> AxialSpace:
        """The space with the lowest states at another wave number."""
        return self.joined(self.solved.lowest(min(count, self.basis.shape[0] // 2), k_per_nm)[1])

    def states(self, k_per_nm: float) -> tuple[Array, NDArray[Any]]:
        """All energies (d,), ascending, and states (d, d) in the basis, at a wave number."""
        parts = self._parts(k_per_nm)
        if self.solved.relation is not None:
            values, vectors = np.linalg.eigh(_hermitian(parts[0]))
            return self.solved.relation.energy(values), vectors
        family = self.solved.local_mass
        assert family is not None
        low, high = self.window_eV
        nodes = (low + high) / 2 + (high - low) / 2 * np.cos(np.pi * (np.arange(_NODES) + 0.5) / _NODES)
        table, middle, turned = np.empty((_NODES, self.size)), _NODES // 2, None
        for a in (middle, *(i for i in range(_NODES) if i != middle)):
            matrix = sum(w * p for w, p in zip(family.weights(float(nodes[a])), parts, strict=True))
            values, vectors = np.linalg.eigh(_hermitian(matrix))
            if turned is None:
                turned = vectors
            else:
                values = values[matched(turned, vectors)]
            table[a] = values
        energy = _where_met(nodes, table, low, high)
        assert turned is not None
        order = np.argsort(energy, kind="stable")
        return energy[order], turned[:, order]

    def excess(self, k_per_nm: float, energies: Array, vectors: NDArray[Any], solver: eigen.Factor) -> Array:
        """How far energies (m,) lie above the full problem's: residuals in the energy norm at k = 0, (m,)."""
        family, states = self.solved.local_mass, self.basis @ vectors
        mass = _mass(self.solved)
        if self.solved.relation is not None:
            values = self.solved.relation.value(energies)
            residual = self.solved.pencil.at(k_per_nm) @ states - (mass @ states) * values
            norm = 1 / self.solved.relation.slope(energies)
        else:
            assert family is not None
            moved, parts = family.moved(k_per_nm), self._parts(k_per_nm)
            # The states come from one energy for all: at its own each has a closer one.
            for i, energy in enumerate(energies):
                matrix = sum(w * p for w, p in zip(family.weights(float(energy)), parts, strict=True))
                own = np.linalg.eigh(_hermitian(matrix))[1]
                best = int(np.argmax(np.abs(own.conj().T @ vectors[:, i])))
                states[:, i] = self.basis @ own[:, best]
            residual = moved.residuals(energies, states)[0]
            norm = moved.norms(energies, states)
        step = solver.solve(residual)
        return np.asarray(np.real(np.einsum("ij,ij->j", residual.conj(), step)) / norm)

    def solver(self) -> eigen.Factor:
        """The factor that `excess` needs."""
        family, solved = self.solved.local_mass, self.solved
        if solved.relation is not None:
            return eigen.factor(solved.pencil.h0, solved.pencil.mass, solved.shift_eV)
        assert family is not None
        return eigen.factor(family.at(family.middle_eV), family.mass, solved.shift_eV)

    def _parts(self, k_per_nm: float) -> list[NDArray[Any]]:
        return [a + k_per_nm * b + k_per_nm**2 * c for a, b, c in zip(*self.orders, strict=True)]


@dataclass(frozen=True, eq=False)
class Followed:
    """All bands of a reduced space along k.

    Attributes
    ----------
    k_per_nm : (p,) from 0 on, ascending.
    energy_eV : (p, d) a column a band, by energy at k = 0.
    vectors : their states in the basis, (d, d) at each k.
    """

    k_per_nm: Array
    energy_eV: Array
    vectors: tuple[NDArray[Any], ...]

    def at(self, space: AxialSpace, k_per_nm: float) -> tuple[Array, NDArray[Any]]:
        """Energies (d,) and states (d, d) of all bands at any wave number of the grid's range, `space` as it is now.

        Bands are told by the nearest wave number of the grid; near k = 0, where bands of opposite slope may meet, by
        the first one beside it.
        """
        near = max(int(np.argmin(np.abs(self.k_per_nm - k_per_nm))), 1)
        energy, vectors = space.states(k_per_nm)
        known = self.vectors[near]
        picked = matched(known, vectors[: len(known)])
        return energy[picked], vectors[:, picked]


def axial_space(solved: Solved, top_eV: float) -> AxialSpace:
    """The space of the states at k = 0, for energies up to `top_eV`."""
    low = float(solved.energy_eV[0])
    sizes = [len(_matrices(solved, order)) for order in range(3)]
    empty = np.zeros((0, 0), dtype=complex)
    blank = AxialSpace(
        solved,
        np.zeros((len(solved.pencil.kept), 0), dtype=complex),
        tuple((empty,) * size for size in sizes),
        (low, max(top_eV, low + 1e-3)),
    )
    return blank.joined(solved.unknown_states)


def followed(space: AxialSpace, k_per_nm: Array) -> Followed:
    """All bands along k (p,), from 0 on in steps that are small against what changes the states."""
    energies: list[Array] = []
    states: list[NDArray[Any]] = []
    for k in k_per_nm:
        energy, vectors = space.states(float(k))
        if states:
            picked = matched(states[-1], vectors)
            energy, vectors = energy[picked], vectors[:, picked]
        energies.append(energy)
        states.append(vectors)
    return Followed(k_per_nm, np.array(energies), tuple(states))


def matched(before: NDArray[Any], after: NDArray[Any]) -> NDArray[np.intp]:
    """For each column of `before` the column of `after` that is its continuation."""
    from scipy.optimize import linear_sum_assignment

    alike = np.abs(before.conj().T @ after) ** 2
    return np.asarray(linear_sum_assignment(alike, maximize=True)[1])


def _where_met(nodes: Array, table: Array, low: float, high: float) -> Array:
    """Where each eigenvalue (nodes, d) of T(E), a polynomial inside the window and straight beyond, meets E."""
    half, centre = (high - low) / 2, (high + low) / 2
    series = np.asarray(np.polynomial.chebyshev.chebfit((nodes - centre) / half, table, len(nodes) - 1), dtype=float)
    slopes = np.asarray(np.polynomial.chebyshev.chebder(series) / half, dtype=float)
    energy = table[len(nodes) // 2].copy()
    for _ in range(12):
        inside = np.clip(energy, low, high)
        t = (inside - centre) / half
        value = _each(series, t)
        slope = np.minimum(_each(slopes, t), 0.0)
        step = (energy - value - slope * (energy - inside)) / (1 - slope)
        energy = energy - step
        if np.abs(step).max() < _MET_eV:
            break
    return np.asarray(energy)


def _each(series: Array, t: Array) -> Array:
    """Each row's own Chebyshev series (order, d) at its own place (d,)."""
    return np.asarray(np.einsum("jd,dj->d", series, np.polynomial.chebyshev.chebvander(t, len(series) - 1)))


def _mass(solved: Solved) -> Any:
    return solved.pencil.mass if solved.local_mass is None else solved.local_mass.mass


def _matrices(solved: Solved, order: int) -> tuple[Any | None, ...]:
    family, pencil = solved.local_mass, solved.pencil
    if family is None:
        return ((pencil.h0, pencil.h1, pencil.h2)[order],)
    if order == 0:
        return family.matrices
    return family.axial_matrices(order)


def _hermitian(matrix: Any) -> NDArray[Any]:
    return np.asarray((matrix + matrix.conj().T) / 2)
