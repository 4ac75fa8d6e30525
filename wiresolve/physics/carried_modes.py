"""States of one operator on a space as they carry charge: at points, in pairs, and solved again at degree 6.

Where a mass grows with energy the envelope holds a part of a carrier only. What the bands that were folded into the
mass hold goes with sqrt(alpha) s A^(1/2) grad psi, s = 1/(1 + alpha (E - V)): with it states of different energies are
orthogonal, int (psi_i* psi_j + alpha s_i s_j grad psi_i* A grad psi_j) = 0, which follows from their two equations, and
their norm is -d<T(E) - E>/dE. All matrix elements of functions of the place are taken between such states.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.fem.enrich import prolong
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.modes import canonical, frame_of
from wiresolve.physics.pencil import Operator, build
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.solved import SPARE, levels

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]
_MOST_VALUES = 2_000_000
"""Cells x quadrature points x states that are held at a time."""
_TURNED = 0.7
"""States of a level that overlap by less with the given ones are in another frame: they are turned towards these."""
_ATTEMPTS = 6


@dataclass(frozen=True, eq=False)
class CarriedModes:
    """States (nodes of the space, m) of a one-band operator at k = 0 with their energies there, (m,)."""

    space: Space
    operator: Operator
    energy_eV: Array
    states: NDArray[Any]

    @cached_property
    def tensor(self) -> Array:
        """(regions, 2, 2) hbar^2/2m at the edge, in eV nm^2."""
        return np.array([np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in self.operator.by_region])

    @cached_property
    def edge_eV(self) -> Array:
        """(regions,) band edges."""
        return np.array([float(c.constant[0, 0].real) for c in self.operator.by_region])

    @cached_property
    def alpha_per_eV(self) -> Array:
        """(regions,) how masses grow."""
        known = self.operator.nonparabolicity_per_eV
        return np.array(known) if self.operator.nonparabolic else np.zeros(len(self.operator.by_region))

    @cached_property
    def region(self) -> Ints:
        """(c,) of the space's cells."""
        return np.asarray(self.space.mesh.region[self.space.cells])

    @cached_property
    def _potential(self) -> Array | None:
        return self.operator.potential_on(self.space) if self.operator.potential is not None else None

    def lighter(self, cells: Ints) -> Array:
        """(c, q or 1, m) 1/(1 + alpha (E - V)), what the inverse masses are multiplied by."""
        alpha, edge = (x[self.region[cells]][:, None] for x in (self.alpha_per_eV, self.edge_eV))
        above = edge if self._potential is None else edge + self._potential[cells]
        return np.asarray(1 / (1 + alpha[..., None] * (self.energy_eV - above[..., None])))

    def values(self, cells: Ints) -> NDArray[Any]:
        """(c, q, m) psi at the quadrature points of some cells."""
        return np.asarray(self.space.tabulated[1][2] @ self.states[self.space.dofs[cells]])

    def slopes(self, cells: Ints) -> tuple[NDArray[Any], Array]:
        """Gradients of psi (c, q, 2, m) there, and what turns reference derivatives into them, (c, q, 2, 2)."""
        slopes = self.space.tabulated[1][:2]
        nodes = self.space.mesh.points[self.space.nodes[self.space.dofs[cells]]]
        pull = np.swapaxes(_inverse(np.einsum("rqa,cax->cqxr", slopes, nodes, optimize=True)), 2, 3)
        local = self.states[self.space.dofs[cells]]
        return pull @ np.stack([slopes[0] @ local, slopes[1] @ local], axis=2), pull

    def chunks(self, part: Flags | None = None) -> Iterator[Ints]:
        """Numbers of the space's cells, or of some of them, a few at a time."""
        cells = np.arange(len(self.space.cells)) if part is None else np.flatnonzero(part)
        size = max(8, _MOST_VALUES // (len(self.space.tabulated[0]) * (self.states.shape[1] + 1)))
        for start in range(0, len(cells), size):
            yield cells[start : start + size]

    def parts(self, cells: Ints) -> NDArray[Any]:
        """(c, q, parts, m) what is held at the quadrature points, as in the module's text, before normalisation."""
        psi = self.values(cells)
        if not self.operator.nonparabolic:
            return psi[:, :, None]
        slopes, _ = self.slopes(cells)
        root = np.swapaxes(np.linalg.cholesky(self.tensor), 1, 2) * np.sqrt(self.alpha_per_eV)[:, None, None]
        others = root[self.region[cells]][:, None] @ slopes * self.lighter(cells)[:, :, None]
        return np.concatenate([psi[:, :, None], others], axis=2)

    @cached_property
    def mass(self) -> Any:
        """The matrix of int u v on the space's nodes."""
        return self.space.mass

    @cached_property
    def norm(self) -> Array:
        """(m,) integral of what is held: 1 for constant masses and states of integral 1."""
        if not self.operator.nonparabolic:
            return np.asarray(np.einsum("im,im->m", self.states.conj(), self.mass @ self.states).real)
        total = np.zeros(self.states.shape[1])
        for cells in self.chunks():
            held = self.parts(cells)
            total += np.einsum("cq,cqdm->m", self.space.quadrature_weights[cells], np.abs(held) ** 2, optimize=True)
        return total

    def held(self, cells: Ints) -> NDArray[Any]:
        """(c, q, parts, m) in 1/nm, of integral 1."""
        return np.asarray(self.parts(cells) / np.sqrt(self.norm))

    def residual(self, part: Flags | None = None) -> NDArray[Any]:
        """(nodes, m) int (A s grad psi . grad phi + (V - E) psi phi) over some cells (c,) for each node's function."""
        space = self.space
        slopes, values = space.tabulated[1][:2], space.tabulated[1][2]
        out = np.zeros_like(self.states)
        for cells in self.chunks(part):
            weights = space.quadrature_weights[cells][..., None]
            edge = self.edge_eV[self.region[cells]][:, None]
            above = edge if self._potential is None else edge + self._potential[cells]
            grad, pull = self.slopes(cells)
            flux = self.tensor[self.region[cells]][:, None] @ grad * (self.lighter(cells) * weights)[:, :, None]
            pulled = np.swapaxes(pull, 2, 3) @ flux
            load = slopes[0].T @ pulled[:, :, 0] + slopes[1].T @ pulled[:, :, 1]
            load = load + values.T @ (self.values(cells) * (above[..., None] - self.energy_eV) * weights)
            np.add.at(out, space.dofs[cells], load)
        return out


def _inverse(matrix: Array) -> Array:
    """Of 2 x 2 matrices in the last two axes."""
    det = matrix[..., 0, 0] * matrix[..., 1, 1] - matrix[..., 0, 1] * matrix[..., 1, 0]
    turned = np.empty_like(matrix)
    turned[..., 0, 0], turned[..., 1, 1] = matrix[..., 1, 1], matrix[..., 0, 0]
    turned[..., 0, 1], turned[..., 1, 0] = -matrix[..., 0, 1], -matrix[..., 1, 0]
    return np.asarray(turned / det[..., None, None])


def stationary(modes: CarriedModes) -> CarriedModes:
    """The same with the energies that belong to the states: <T(E) - E> is zero."""
    for _ in range(8):
        rest = np.einsum("im,im->m", modes.states.conj(), modes.residual()).real
        step = rest / modes.norm
        modes = replace(modes, energy_eV=modes.energy_eV + step)
        if np.abs(step).max() < 1e-13 * max(float(np.abs(modes.energy_eV).max()), 1e-3):
            break
    return modes


def improved(modes: CarriedModes, fine: Space, bar_eV: Array) -> CarriedModes:
    """The states solved anew at degree 6 over the same triangles, each in the frame of the given ones.

    Parameters
    ----------
    bar_eV : (m,) bars of the energies, by which the levels are told.

    Raises
    ------
    ConvergenceError
        The given states are none of the operator's.
    """
    m = len(modes.energy_eV)
    order = np.argsort(modes.energy_eV, kind="stable")
    top = float(modes.energy_eV[order[-1]] + 2 * bar_eV[order[-1]])
    count = m + SPARE
    for _ in range(_ATTEMPTS):
        energy, states = _solved(modes, fine, count)
        if energy[-1] > top or count >= len(fine.free) // 2:
            break
        count += count // 2
    energy_eV, out = np.empty(m), np.empty((len(states), m), dtype=np.result_type(states, modes.states))
    level = np.empty(m, dtype=np.int64)
    level[order] = levels(modes.energy_eV[order], bar_eV[order])
    before = prolong(modes.space, fine, modes.states)
    pencil = build(fine, replace(modes.operator, potential=None, nonparabolicity_per_eV=()))
    mass_before = np.asarray(pencil.mass @ before[pencil.kept])
    frame = frame_of(build(modes.space, replace(modes.operator, potential=None, nonparabolicity_per_eV=())))
    for number in np.unique(level):
        own = np.flatnonzero(level == number)
        reach = 2 * float(bar_eV[own].max())
        low, high = float(modes.energy_eV[own].min()) - reach, float(modes.energy_eV[own].max()) + reach
        there = np.flatnonzero((energy >= low) & (energy <= high))
        if len(there) < len(own):
            raise ConvergenceError("modes are not the states of the operator: degree 6 has others at their energies")
        block = states[pencil.kept][:, there]
        # Every state of the level together: a frame needs no more, and a sign neither.
        turned = canonical(pencil, block, np.ones(len(there), dtype=np.int64), 2, frame)
        overlap = mass_before[:, own].conj().T @ turned
        share = np.abs(overlap)
        picked = np.array([int(np.argmax(row)) for row in share])
        if len(set(picked)) == len(own) and share[np.arange(len(own)), picked].min() > _TURNED:
            phase = overlap[np.arange(len(own)), picked]
            found = turned[:, picked] * (phase.conj() / np.abs(phase))
        else:
            left, _, right = np.linalg.svd(overlap, full_matrices=False)
            found = turned @ (left @ right).conj().T
        out[:, own] = pencil.spread(found)
        energy_eV[own] = energy[there[picked]]
    # The rule for kinks of a potential is not needed from here on.
    return CarriedModes(Space(fine.mesh), modes.operator, energy_eV, out)


def _solved(modes: CarriedModes, fine: Space, count: int) -> tuple[Array, NDArray[Any]]:
    """The lowest states at degree 6, on all nodes."""
    operator = modes.operator
    cells = phase_space(modes.space, operator)
    relation = operator.relation
    if relation is not None:
        pencil = build(fine, operator)
        bottom, top = (float(relation.value(np.array(e))) for e in (cells.bottom_eV, cells.energy_of(count)))
        value, states = eigen.lowest(pencil.h0, pencil.mass, count, bottom - 1e-3 * (top - bottom))
        return relation.energy(value), pencil.spread(states)
    family = local_mass.family(fine, operator, cells, count)
    start = prolong(modes.space, fine, modes.states)[family.kept]
    found = family.lowest(count, cells, start=start)
    return found.energy_eV, family.spread(found.states)


def between(modes: CarriedModes) -> tuple[NDArray[Any], NDArray[Any], Array]:
    """<i|x|j> and <i|y|j>, (2, m, m), the part of <i|j> in each region, (regions, m, m), and <i|x^2|i>, (2, m)."""
    m, space = modes.states.shape[1], modes.space
    squares = np.zeros((2, m))
    place: Any = np.zeros((2, m, m), dtype=modes.states.dtype)
    inside: Any = np.zeros((len(space.mesh.regions), m, m), dtype=modes.states.dtype)
    for number in np.unique(modes.region):
        for cells in modes.chunks(modes.region == number):
            held, area = modes.held(cells), space.quadrature_weights[cells]
            at = space.quadrature_points[cells]
            flat = held.reshape(-1, m)
            here = np.repeat(
                (area[..., None] * np.concatenate([np.ones((*area.shape, 1)), at], axis=2)), held.shape[2], 1
            )
            found = [flat.conj().T @ (weight[:, None] * flat) for weight in here.reshape(-1, 3).T]
            inside[number] += found[0]
            place += np.array(found[1:])
            density = (np.abs(held) ** 2).sum(axis=2)
            squares += np.einsum("cqx,cq,cqm->xm", at**2, area, density, optimize=True)
    return np.asarray(place), np.asarray(inside), squares


def plain_overlaps(modes: CarriedModes) -> NDArray[Any]:
    """(m, m) int psi_i* psi_j of the envelopes alone, each of integral 1."""
    gram = np.asarray(modes.states.conj().T @ (modes.mass @ modes.states))
    size = np.sqrt(np.diag(gram).real)
    return np.asarray(gram / size / size[:, None])
