"""The enriched step for masses that grow with energy: the same idea as `fem.enrich`, with an operator for each state.

Each state is carried to degree 6 and corrected there by what its own residual T(E) x - E M x asks for, with one factor
for all; states and corrections together span the space in which the small problem T(E) is solved.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.enrich import Enriched, Piece, condensed_solve, prolong, summed
from wiresolve.physics.local_mass import Found, LocalMass, reduced

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Cells = slice | Ints


def enrich(coarse: LocalMass, fine: LocalMass, found: Found) -> Enriched:
    """States of degree 4 improved at degree 6, with each cell's share of the fall of the energy."""
    energies, space = found.energy_eV, fine.space
    full = coarse.spread(found.states)
    before = prolong(coarse.space, space, full)
    cells = _Cells(fine)
    middle = fine.middle_eV

    def pieces() -> Iterator[Piece]:
        for chunk in space.chunks():
            dofs = space.dofs[chunk]
            parts, mass = cells.on(chunk)
            local = before[dofs]
            definite = cells.weighted(parts, chunk, middle) - fine.shift_eV * mass
            yield chunk, dofs, definite, cells.residual(parts, mass, chunk, local, energies)

    step = condensed_solve(space, 1, pieces, before.shape[1])
    basis = np.hstack([before, step / np.maximum(np.linalg.norm(step, axis=0), 1e-300)])
    small, gram = cells.projected(basis)
    values, vectors = np.linalg.eigh(gram)
    kept = values > 1e-12 * values[-1]
    turn = vectors[:, kept] / np.sqrt(values[kept])
    improved, mix = reduced(
        [turn.conj().T @ part @ turn for part in small], fine.weights, fine.slopes, len(energies), energies
    )
    mix = turn @ mix
    after = basis @ mix
    # Inside a level the two blocks may be turned against each other: the difference is taken to the projection.
    overlap = np.linalg.solve(gram[: len(energies), : len(energies)], gram[: len(energies)] @ mix)
    norms = fine_norms(small, fine, improved, mix)
    share = np.empty((len(space.cells), len(energies)))
    for chunk in space.chunks():
        dofs = space.dofs[chunk]
        parts, mass = cells.on(chunk)
        local = after[dofs] - before[dofs] @ overlap
        image = cells.residual(parts, mass, chunk, local, np.full(len(energies), fine.shift_eV), at=energies)
        share[chunk] = np.einsum("cim,cim->cm", local.conj(), image).real / norms
    share = np.maximum(share, 0)
    unlike = np.flatnonzero(~(coarse.space.straight & space.straight) | fine.operator.varies)
    rough = _Cells(coarse)
    for start in range(0, len(unlike), 1024):
        pick = unlike[start : start + 1024]
        there = _energy(cells, pick, before, energies)
        here = _energy(rough, pick, full, energies)
        share[pick] += np.abs(there - here) / norms
    return Enriched(space, improved, energies - improved, share, after)


def fine_norms(small: list[NDArray[Any]], fine: LocalMass, energies: Array, mix: NDArray[Any]) -> Array:
    """-d<T(E) - E M>/dE of the improved states."""
    found = np.empty(len(energies))
    for i, energy in enumerate(energies):
        fall = sum(w * part for w, part in zip(fine.slopes(float(energy)), small, strict=True))
        found[i] = 1 - float(np.real(mix[:, i].conj() @ fall @ mix[:, i]))
    return found


def _energy(cells: _Cells, pick: Ints, states: NDArray[Any], energies: Array) -> Array:
    """Each cell's part of <T(E) - E M>, (cells, m)."""
    parts, mass = cells.on(pick)
    local = states[cells.family.space.dofs[pick]]
    return np.asarray(np.einsum("cim,cim->cm", local.conj(), cells.residual(parts, mass, pick, local, energies)).real)


class _Cells:
    """Element matrices of the parts of T(E), each made once where the mesh is small."""

    def __init__(self, family: LocalMass) -> None:
        self.family = family
        self._kept: dict[int, tuple[list[NDArray[Any]], NDArray[Any]]] = {}

    def on(self, pick: Cells) -> tuple[list[NDArray[Any]], NDArray[Any]]:
        """The parts' element matrices on some cells, and those of the inner product."""
        key = pick.start if isinstance(pick, slice) else -1
        if key in self._kept:
            return self._kept[key]
        space = self.family.space
        made: dict[int, NDArray[Any]] = {}
        parts = []
        for part in self.family.parts:
            if id(part.pencil) not in made:
                made[id(part.pencil)] = part.pencil.local(self.family.k_per_nm)(space, pick)
            parts.append(made[id(part.pencil)])
        found = parts, space.elements({("1", "1"): space.ones}, pick)
        if key == 0 and isinstance(pick, slice) and pick.stop >= len(space.cells):
            self._kept[key] = found
        return found

    def factors(self, pick: Cells, energy: float) -> list[Array]:
        """Each part's weight in each cell."""
        count = len(self.family.space.cells[pick])
        return [
            np.full(count, weight) if part.cells is None else weight * part.cells[pick]
            for weight, part in zip(self.family.weights(energy), self.family.parts, strict=True)
        ]

    def weighted(self, parts: list[NDArray[Any]], pick: Cells, energy: float) -> NDArray[Any]:
        """Element matrices of T(E)."""
        total: Any = 0
        for factor, part in zip(self.factors(pick, energy), parts, strict=True):
            total = total + factor[:, None, None] * part
        return np.asarray(total)

    def residual(
        self,
        parts: list[NDArray[Any]],
        mass: NDArray[Any],
        pick: Cells,
        local: NDArray[Any],
        energies: Array,
        at: Array | None = None,
    ) -> NDArray[Any]:
        """(T(at) - E M) of each state in each cell, (c, n, m); `at` is E unless given."""
        out = -(mass @ local) * energies
        seen = {id(part): part for part in parts}
        made = {key: part @ local for key, part in seen.items()}
        images = [made[id(part)] for part in parts]
        for i, energy in enumerate(energies if at is None else at):
            for factor, image in zip(self.factors(pick, float(energy)), images, strict=True):
                out[:, :, i] += factor[:, None] * image[:, :, i]
        return np.asarray(out)

    def projected(self, basis: NDArray[Any]) -> tuple[list[NDArray[Any]], NDArray[Any]]:
        """The parts and the inner product in a basis (nodes, d): (d, d) each."""
        d = basis.shape[1]
        small = [np.zeros((d, d), dtype=basis.dtype) for _ in self.family.parts]
        gram = np.zeros((d, d), dtype=basis.dtype)
        for chunk in self.family.space.chunks():
            local = basis[self.family.space.dofs[chunk]]
            parts, mass = self.on(chunk)
            for i, (part, matrix) in enumerate(zip(self.family.parts, parts, strict=True)):
                mine = slice(None) if part.cells is None else np.flatnonzero(part.cells[chunk])
                small[i] += summed(local[mine], matrix[mine] @ local[mine])
            gram += summed(local, mass @ local)
        return small, gram
