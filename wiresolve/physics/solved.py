"""The states of one operator on one pair of meshes, each energy with its bar."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.nonparabolic import Relation
from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen, estimate
from wiresolve.fem.enrich import Enriched, enrich
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.space import Space
from wiresolve.physics import local_enrich, local_mass
from wiresolve.physics.local_mass import LocalMass
from wiresolve.physics.pencil import Operator, Pencil, build
from wiresolve.physics.semiclassical import PhaseSpace, phase_space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
OperatorOf = Callable[[Mesh], Operator]
"""The operator over a mesh's regions."""

SPARE = 4
"""States solved beyond the wanted ones, so that a level at the end is seen whole."""


@dataclass(frozen=True, eq=False)
class Solved:
    """States of one operator on one mesh with their bars.

    Attributes
    ----------
    pencil : of constant masses, or with every mass at the energy of the middle of the wanted states (`local_mass`).
    energy_eV, bar_eV, level : (m,) ascending, m at least the wanted number; levels from 1.
    value_eV : (m,) the pencil's eigenvalues, of which the energies follow by `relation`; the energies themselves where
        masses differ from place to place in how they grow (`relation` None).
    states : (nodes x bands, m) on all nodes of the space; orthonormal in the mass matrix, or each normalised where
        `relation` is None.
    shift_eV : a value below all eigenvalues of the pencil.
    bar_factor : how many falls wide the bars are.
    local_mass : the operator at every energy, where `relation` is None.
    """

    pencil: Pencil
    operator: Operator
    energy_eV: Array
    bar_eV: Array
    level: Ints
    value_eV: Array
    states: NDArray[Any]
    enriched: Enriched
    enriched_pencil: Pencil
    shift_eV: float
    phase_space: PhaseSpace
    bar_factor: float
    relation: Relation | None
    local_mass: LocalMass | None = None

    @property
    def unknown_states(self) -> NDArray[Any]:
        """The states on the pencil's unknowns."""
        return np.asarray(self.states[self.pencil.kept])

    @property
    def share_eV(self) -> Array:
        """(c, m) each cell's share of the fall of each energy."""
        slope = 1.0 if self.relation is None else self.relation.slope(self.energy_eV)
        return np.asarray(self.enriched.indicator_eV * slope)

    @property
    def sheared(self) -> bool:
        """Whether terms linear in k are there: minima may lie off k = 0."""
        return self.pencil.has(1)

    def count_below(self, energy_eV: float, k_per_nm: float = 0.0) -> int:
        """Number of states of the discrete problem below an energy, at a wave number along the wire."""
        if self.relation is None:
            return self._family_at(k_per_nm).count_below(energy_eV)
        value = float(self.relation.value(np.array(energy_eV)))
        return eigen.count_below(self.pencil.at(k_per_nm), self.pencil.mass, value)

    def lowest(self, count: int, k_per_nm: float = 0.0) -> tuple[Array, NDArray[Any]]:
        """(count,) energies of the lowest states and (unknowns, count) states at a wave number, without bars."""
        if self.relation is None:
            found = self._family_at(k_per_nm).lowest(count, self.phase_space, polished=False)
            return found.energy_eV, found.states
        values, states = eigen.lowest(self.pencil.at(k_per_nm), self.pencil.mass, count, self.shift_eV)
        return self.relation.energy(values), states

    def _family_at(self, k_per_nm: float) -> LocalMass:
        assert self.local_mass is not None
        return self.local_mass.moved(k_per_nm) if k_per_nm else self.local_mass

    def reordered(self, order: Ints) -> Solved:
        """The same states in another order, (m,) numbers of states."""
        enriched = replace(
            self.enriched,
            energy_eV=self.enriched.energy_eV[order],
            fall_eV=self.enriched.fall_eV[order],
            indicator_eV=self.enriched.indicator_eV[:, order],
            states=self.enriched.states[:, order],
        )
        return replace(
            self,
            energy_eV=self.energy_eV[order],
            bar_eV=self.bar_eV[order],
            level=self.level[order],
            value_eV=self.value_eV[order],
            states=self.states[:, order],
            enriched=enriched,
        )


def levels(energy_eV: Array, bar_eV: Array) -> Ints:
    """Clusters of neighbouring energies that are equal within their bars, numbered from 1, shape (m,)."""
    apart = np.diff(energy_eV) > bar_eV[:-1] + bar_eV[1:]
    return np.asarray(1 + np.concatenate([[0], np.cumsum(apart)])[: len(energy_eV)], dtype=np.int64)


def spaces(coarse: Mesh, fine: Mesh, operator: Operator) -> tuple[Space, Space]:
    """Spaces of degree 4 and 6 on a pair of meshes, for an operator and others with the same potential."""
    return Space(coarse), Space(fine, composite=operator.varies and not operator.smooth)


def solve_on(
    coarse: Mesh, fine: Mesh, operator_of: OperatorOf, count: int, factor: float = estimate.BAR_FACTOR
) -> Solved:
    """States and bars (`factor` falls wide) on a pair of meshes (degree 4 and 6 over the same triangles)."""
    operator = operator_of(coarse)
    return solve_in(*spaces(coarse, fine, operator), operator, count, factor)


def solve_in(
    coarse: Space,
    fine: Space,
    operator: Operator,
    count: int,
    factor: float = estimate.BAR_FACTOR,
    polished: bool = True,
) -> Solved:
    """States and bars (`factor` falls wide) on a pair of spaces (degree 4 and 6 over the same triangles).

    Parameters
    ----------
    polished : where masses grow differently from place to place, solve to the last residual; without it energies have
        some eight digits, which is enough to find the next mesh (`finished` does the rest).
    """
    cells = phase_space(coarse, operator)
    relation = operator.relation
    if relation is None:
        return _solve_local(coarse, fine, operator, count, factor, cells, polished)
    pencil, above = build(coarse, operator), build(fine, operator)
    unknowns = len(pencil.kept)
    check_count(count, unknowns)
    bottom, top = (float(relation.value(np.array(e))) for e in (cells.bottom_eV, cells.energy_of(count)))
    shift = bottom - 1e-3 * (top - bottom)
    value, states = eigen.lowest(pencil.h0, pencil.mass, count, shift)
    full = pencil.spread(states)
    if unknowns >= eigen.SINGLE_FROM:
        pencil.forget()
    enriched = enrich(
        coarse,
        fine,
        value,
        full,
        (pencil.local(), above.local()),
        above.local_mass,
        shift,
        operator.bands,
        operator.varies,
    )
    energy, bar, level = _with_bars(value, enriched, factor, relation)
    return Solved(
        pencil, operator, energy, bar, level, value, full, enriched, above, shift, cells, factor, relation
    )  # fmt: skip


def lowest_energy(space: Space, operator: Operator) -> float:
    """The lowest energy of an operator on a space, without a bar: it lies above the true one."""
    cells = phase_space(space, operator)
    relation = operator.relation
    if relation is None:
        return float(local_mass.family(space, operator, cells, 1).lowest(1, cells, polished=False).energy_eV[0])
    pencil = build(space, operator)
    shift = float(relation.value(np.array(cells.bottom_eV))) - 1e-6
    value, _ = eigen.lowest(pencil.h0, pencil.mass, 1, shift)
    return float(relation.energy(value)[0])


def slanted(operator: Operator) -> bool:
    """Whether axis-plane terms of the inverse mass are left, which make H(k) linear in k."""
    return any(bool(np.any(c.quadratic[:2, 2])) for c in operator.by_region)


def check_count(count: int, unknowns: int) -> None:
    """ConvergenceError where a mesh is too small for so many states."""
    if count > unknowns // 2:
        raise ConvergenceError(f"{count} states were asked of a mesh with {unknowns} unknowns")


def _with_bars(value: Array, enriched: Enriched, factor: float, relation: Relation) -> tuple[Array, Array, Ints]:
    """Energies, bars, one for each level, and the levels that these bars make."""
    energy = relation.energy(value)
    slope = relation.slope(energy)
    alone = estimate.bars(enriched, factor) * slope
    bar = estimate.shared(alone, levels(energy, alone))
    return energy, bar, levels(energy, bar)


def finished(solved: Solved) -> Solved:
    """The same states solved to their last residual, with bars of their own."""
    family = solved.local_mass
    if family is None:
        return solved
    states = solved.unknown_states
    _, size = family.residuals(solved.energy_eV, states)
    if size.max() <= local_mass.RESIDUAL:
        return solved
    found = family.polish(local_mass.Found(solved.energy_eV, states, float(size.max())))
    if found.residual > local_mass.RESIDUAL:
        count = len(solved.energy_eV)
        return solve_in(family.space, solved.enriched.space, solved.operator, count, solved.bar_factor)
    finer = local_mass.family(solved.enriched.space, solved.operator, solved.phase_space, len(found.energy_eV))
    return replace(solved, **_local_states(family, finer, found, solved.bar_factor))


def _solve_local(
    coarse: Space, fine: Space, operator: Operator, count: int, factor: float, cells: PhaseSpace, polished: bool
) -> Solved:
    """The same where masses grow with energy, differently from place to place."""
    family = local_mass.family(coarse, operator, cells, count)
    check_count(count, len(family.kept))
    found = family.lowest(count, cells, polished)
    finer = local_mass.family(fine, operator, cells, count)
    middle = family.middle_eV
    return Solved(
        pencil=build(coarse, operator.at(middle)),
        operator=operator,
        enriched_pencil=build(fine, operator.at(middle)),
        shift_eV=family.shift_eV,
        phase_space=cells,
        bar_factor=factor,
        relation=None,
        local_mass=family,
        **_local_states(family, finer, found, factor),
    )


def _local_states(family: LocalMass, finer: LocalMass, found: local_mass.Found, factor: float) -> dict[str, Any]:
    """What `Solved` holds of the states of T(E), with their bars from the enriched step."""
    enriched = local_enrich.enrich(family, finer, found)
    alone = estimate.bars(enriched, factor)
    bar = estimate.shared(alone, levels(found.energy_eV, alone))
    return {
        "energy_eV": found.energy_eV,
        "bar_eV": bar,
        "level": levels(found.energy_eV, bar),
        "value_eV": found.energy_eV,
        "states": family.spread(found.states),
        "enriched": enriched,
    }


def certify_at(solved: Solved, k_per_nm: float, count: int) -> Solved:
    """The states at another k on the same meshes, with bars of their own."""
    relation = solved.relation
    if relation is None:
        return _certify_local(solved, k_per_nm, count + SPARE)
    pencil = solved.pencil
    value, states = eigen.lowest(pencil.at(k_per_nm), pencil.mass, count + SPARE, solved.shift_eV)
    full = pencil.spread(states)
    enriched = enrich(
        pencil.space,
        solved.enriched.space,
        value,
        full,
        (pencil.local(k_per_nm), solved.enriched_pencil.local(k_per_nm)),
        solved.enriched_pencil.local_mass,
        solved.shift_eV,
        solved.operator.bands,
        solved.operator.varies,
    )
    energy, bar, level = _with_bars(value, enriched, solved.bar_factor, relation)
    return replace(
        solved, energy_eV=energy, bar_eV=bar, level=level, value_eV=value, states=full, enriched=enriched
    )  # fmt: skip


def _certify_local(solved: Solved, k_per_nm: float, count: int) -> Solved:
    cells, known = solved.phase_space, len(solved.energy_eV)
    assert solved.local_mass is not None
    family = solved.local_mass.moved(k_per_nm)
    finer = local_mass.family(solved.enriched.space, solved.operator, cells, known).moved(k_per_nm)
    found = family.lowest(count, cells)
    return replace(solved, local_mass=family, **_local_states(family, finer, found, solved.bar_factor))
