"""The number of states by phase-space counting: a first guess of sizes, and the tail above the solved states.

N(E) = integral of m (E - V)+ / (2 pi hbar^2) over the section, less (length of the walls) x sqrt(2 m (E - V)) /
(4 pi hbar) averaged over the section (H. Weyl's law with its boundary term; M. Kac, Am. Math. Mon. 73, 1 (1966)), with
m = 1/sqrt(det W) from the in-plane inverse mass W; where the mass grows with energy, m (E - V) stands for
m (E - V)(1 + alpha (E - V)).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.space import Space
from wiresolve.physics.fermi import fermi_integral
from wiresolve.physics.pencil import Operator
from wiresolve.units import KB

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PhaseSpace:
    """What the count needs of a section: small pieces of it with area, edge and stiffness.

    Attributes
    ----------
    area_nm2, edge_eV, stiffness_eV_nm2 : (p,) each piece's area, lowest energy, and hbar^2/2m = sqrt(det A).
    wall_nm : length of the walls.
    alpha_per_eV : (p,) how the mass grows with energy.
    """

    area_nm2: Array
    edge_eV: Array
    stiffness_eV_nm2: Array
    wall_nm: float
    alpha_per_eV: Array

    @property
    def bottom_eV(self) -> float:
        """Lowest energy in the section."""
        return float(self.edge_eV.min())

    def wave_numbers_squared(self, energy_eV: Array) -> Array:
        """In 1/nm^2, in each piece (last axis) at each energy; 0 where the energy lies below its edge."""
        above = np.maximum(np.asarray(energy_eV)[..., None] - self.edge_eV, 0)
        return np.asarray(above * (1 + self.alpha_per_eV * above) / self.stiffness_eV_nm2)

    def count(self, energy_eV: Array) -> Array:
        """Orbital states below each energy (same shape), never negative."""
        above = self.wave_numbers_squared(energy_eV)
        inside = (self.area_nm2 * above).sum(axis=-1) / (4 * np.pi)
        share = self.area_nm2 / self.area_nm2.sum()
        return np.asarray(np.maximum(inside - self.wall_nm * (share * np.sqrt(above)).sum(axis=-1) / (4 * np.pi), 0))

    def energy_of(self, count: float) -> float:
        """The energy below which `count` states lie."""
        low, step = self.bottom_eV, 1e-3
        while self.count(np.array(low + step)) < count:
            step *= 2
        grid = low + step * np.linspace(0, 1, 257)
        return float(np.interp(count, np.maximum.accumulate(self.count(grid)), grid))


def phase_space(space: Space, operator: Operator) -> PhaseSpace:
    """The phase space of a one-band operator on the space's cells."""
    region = space.mesh.region[space.cells]
    edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])[region]
    stiffness = np.array([np.sqrt(np.linalg.det(c.quadratic[:2, :2, 0, 0].real)) for c in operator.by_region])[region]
    weights = space.quadrature_weights
    alpha = np.array(operator.nonparabolicity_per_eV or [0.0] * len(operator.by_region))[region]
    if operator.potential is None:
        # Without a varying potential a region is one piece.
        regions = np.unique(region)
        area = np.array([weights[region == r].sum() for r in regions])
        first = [int(np.argmax(region == r)) for r in regions]
        return PhaseSpace(area, edge[first], stiffness[first], space.wall_length_nm, alpha[first])
    energy = edge[:, None] + operator.potential_on(space)
    spread, growth = (np.broadcast_to(by_cell[:, None], weights.shape).ravel() for by_cell in (stiffness, alpha))
    return PhaseSpace(weights.ravel(), energy.ravel(), spread, space.wall_length_nm, growth)


def free_carriers(
    space: Space, operators: Sequence[Operator], degeneracies: Sequence[int], temperature_K: float
) -> Callable[[Array], tuple[Array, Array]]:
    """Carriers in 1/nm^3 as in a bulk crystal, and their derivative, as a function of the potential in V, both (c, q).

    n = g (kT)^(3/2) / (8 pi^(3/2) sqrt(det A)) F_(1/2)((phi - edge)/kT), A = hbar^2/2m being the 3 x 3 tensor and the
    Fermi level 0 (J. S. Blakemore, Solid-State Electronics 25, 1067 (1982), for F_j).
    """
    thermal = KB * temperature_K
    region = space.mesh.region[space.cells]
    parts = []
    for operator, degeneracy in zip(operators, degeneracies, strict=True):
        edge = np.array([float(c.constant[0, 0].real) for c in operator.by_region])[region]
        stiffness = np.array([np.sqrt(np.linalg.det(c.quadratic[:, :, 0, 0].real)) for c in operator.by_region])
        states = degeneracy * (thermal / np.pi) ** 1.5 / (8 * stiffness[region])
        parts.append((states[:, None], edge[:, None] + operator.potential_on(space)))

    def filled(potential_V: Array) -> tuple[Array, Array]:
        density, slope = np.zeros(potential_V.shape), np.zeros(potential_V.shape)
        for states, edge in parts:
            eta = (potential_V - edge) / thermal
            density += states * fermi_integral(0.5, eta)
            slope += states / thermal * fermi_integral(-0.5, eta)
        return density, slope

    return filled
