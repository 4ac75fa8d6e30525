"""From an enriched step to error bars, and to the sizes of the next mesh.

How far the energy falls from degree 4 to degree 6 is the estimate of its error, and where the energy of the difference
sits is where the mesh must be finer. The rule that turns the fall into a bar stands on scripts/error_bar_study.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.corners import Corner
from wiresolve.fem.enrich import Enriched
from wiresolve.fem.meshing import SizeField
from wiresolve.fem.space import Space

Array = NDArray[np.float64]

BAR_FACTOR = 2.0
"""The bar is this times the fall of the energy from degree 4 to degree 6.

On a smooth section the fall is the whole error. Beside a corner of exponent a the error at degree p goes like p^(-4 a)
(I. Babuska and M. Suri, RAIRO Model. Math. Anal. Numer. 21, 199 (1987)): it is 1.8 falls at a slit, a = 1/2, which is
the sharpest corner that a wall can have. Where materials of very unequal mass meet, a can be smaller: `bar_factor`."""
BAR_FLOOR = 4e-13
"""No bar is below this times the largest energy of the block: rounding in the factor and in Rayleigh-Ritz."""


def bar_factor(corners: Sequence[Corner]) -> float:
    """What the fall is multiplied by: more than `BAR_FACTOR` where an interface is more singular than any wall."""
    lowest = min((corner.exponent for corner in corners), default=1.0)
    return float(max(BAR_FACTOR, 1.15 / (1 - (4 / 6) ** (4 * lowest))))


def bars(enriched: Enriched, factor: float) -> Array:
    """Error bars (m,) of the degree-4 energies: the fall times a factor."""
    # Errors of geometry and of the functions can cancel in the fall, but not in the cells' shares.
    fall = np.maximum(np.abs(enriched.fall_eV), 0.5 * enriched.indicator_eV.sum(axis=0))
    return np.asarray(factor * fall + BAR_FLOOR * np.abs(enriched.energy_eV).max())


def shared(bar: Array, levels: NDArray[np.int64]) -> Array:
    """Bars (m,) of which the entries of one level share the widest."""
    widest = np.array(bar)
    for level in np.unique(levels):
        widest[levels == level] = bar[levels == level].max()
    return widest


def finer(space: Space, share_eV: Array, before: SizeField, corners: Sequence[Corner], target_eV: float) -> SizeField:
    """The size field at which the fall of each wanted state would be `target_eV`.

    A cell's share of the fall goes like size^(2 p + 2) at degree p = 4, or like size^(2 a) beside a corner of exponent
    a; shares that are equal cost fewest cells.

    Parameters
    ----------
    share_eV : (c, m) each cell's share of the fall of every wanted state, on the space's cells.
    corners : the singular corners of the drawing, at which cells may shrink by much more than elsewhere.
    """
    mesh, cells = space.mesh, space.cells
    worst = share_eV.max(axis=1)
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
        spots=before.spots,
        turn_cells=before.turn_cells,
        triangles=corner,
        sizes_nm=sizes,
    )
