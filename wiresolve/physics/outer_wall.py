"""The outer wall where the outermost layer is a barrier: what it does to the states, and how far away it must be."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem import eigen
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import SizeField
from wiresolve.physics import local_mass
from wiresolve.physics.pencil import build
from wiresolve.physics.semiclassical import PhaseSpace
from wiresolve.physics.solved import Solved

Array = NDArray[np.float64]

_GROWTH = 4.0
"""How much larger cells are far out in a material that goes on outside."""


@dataclass(frozen=True)
class Barrier:
    """The outermost layer where it is a barrier: its region, edge and stiffness, and whether it may be extended."""

    region: str
    edge_eV: float
    stiffness_eV_nm2: float
    extendable: bool


def wall_effect(solved: Solved, barrier: Barrier, count: int, k_per_nm: float = 0.0) -> Array:
    """How far each of the lowest energies, at a k, falls when the outer hard wall is left free, (count,) in eV."""
    space = solved.pencil.space
    region = [r.name for r in space.mesh.regions].index(barrier.region)
    released = space.rim_of(region)
    if solved.relation is None:
        free = local_mass.family(space, solved.operator, solved.phase_space, count + 2, released)
        free = free.moved(k_per_nm) if k_per_nm else free
        energy = free.lowest(count + 2, solved.phase_space, start=solved.states[free.kept, : count + 2]).energy_eV
    else:
        pencil = build(space, solved.operator, released)
        value, _ = eigen.lowest(pencil.at(k_per_nm), pencil.mass, count + 2, solved.shift_eV)
        energy = solved.relation.energy(value)
    return np.asarray(solved.energy_eV[:count] - energy[:count])


def first_distance(cells: PhaseSpace, barrier: Barrier) -> float:
    """A first guess of how far the outermost layer must reach: 8 decay lengths at half its height."""
    return least_distance(barrier, barrier.edge_eV - cells.bottom_eV)


def least_distance(barrier: Barrier, height_eV: float) -> float:
    """8 decay lengths at half a barrier's height."""
    return float(8 * np.sqrt(2 * barrier.stiffness_eV_nm2 / max(height_eV, 1e-3)))


def farthest(solved: Solved, barrier: Barrier) -> float:
    """How far the outermost layer is extended at most.

    States just below its edge, or above, would push it out for ever and fill it with states of its own: 24 decay
    lengths at half its height, or three times the size of what it surrounds, and the wall's effect is said.
    """
    space = solved.pencil.space
    name = [r.name for r in space.mesh.regions].index(barrier.region)
    weights = space.quadrature_weights[space.mesh.region[space.cells] != name]
    return float(max(3 * first_distance(solved.phase_space, barrier), 3 * np.sqrt(weights.sum())))


def further(energy_eV: Array, effect_eV: Array, barrier: Barrier, accuracy_eV: float) -> float:
    """How much farther the wall must be for the bound states not to see it, 0 where it is far enough.

    A state that only the free wall leaves below the barrier's edge counts too: a wall farther out may bind it. The hard
    wall's own share is about half of the effect. It falls as exp(-2 distance/decay length); a thousandth of the
    accuracy costs little more than a tenth.
    """
    bound = energy_eV - effect_eV < barrier.edge_eV
    wish = np.maximum(1e-3 * accuracy_eV, 1e-11)
    if not bound.any() or effect_eV[bound].max() <= wish:
        return 0.0
    depth = barrier.edge_eV - np.minimum(energy_eV, (2 * energy_eV - effect_eV) / 2)
    decay = np.sqrt(np.maximum(depth, 1e-6) / barrier.stiffness_eV_nm2)
    return float((np.log(np.maximum(effect_eV[bound], 1e-300) / wish) / (2 * decay[bound])).max() * 1.15)


def coarser_outside(size: SizeField, rough: Mesh, barrier: Barrier, top_eV: float) -> SizeField:
    """Cells that grow away from what the outer material surrounds: states decay there, or have long waves."""
    corner = rough.cells[:, :3]
    outer = rough.region == [r.name for r in rough.regions].index(barrier.region)
    wave = np.sqrt(max(top_eV - barrier.edge_eV, 0) / barrier.stiffness_eV_nm2)
    grown = min(_GROWTH * size.largest_nm, max(2 / wave, size.largest_nm) if wave else np.inf)
    sizes = np.full(len(rough.points), grown)
    sizes[np.unique(corner[~outer])] = size.largest_nm
    return replace(size, largest_nm=grown, triangles=rough.points[corner], sizes_nm=sizes[corner])
