"""The first mesh: how fine it must be about, which corners are singular, and how many states each channel may need."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from wiresolve.fem import estimate
from wiresolve.fem.corners import Corner, gradings, singular_corners
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.channel import Channel
from wiresolve.physics.outer_wall import coarser_outside
from wiresolve.physics.semiclassical import PhaseSpace, phase_space
from wiresolve.physics.solved import SPARE

MOST_VALUES = 12_000_000
"""Unknowns times states above which a mesh would leave a laptop's memory and patience: the best result so far is kept
and marked. A first mesh above it is made coarser."""
_NODES_PER_AREA = 18.0
"""Unknowns of an even mesh in a square of the cells' size."""
_COARSER = 300.0
"""How much less accurate the first mesh of a section with corners or interfaces is: the fit below knows smooth sections
only, and a second mesh that is sized by what the first one shows is cheaper than a first one that is too fine."""
_REACH = 1.5
"""Cells grow from a corner to their full size over this many full sizes."""
_TURN_CELLS = 10
"""Cells around a full turn of a curve, at least: larger ones beside a fillet would fold."""
_HARDLY = 0.4
"""Gradings to no less than this share of the largest cell are left away: they cost more than they save."""
_PER_WAVE = 1.55e-8
"""Relative error of a smooth section's energy at k h = 1, times (k h)^8: fitted on circles, for the first mesh only."""


@dataclass(frozen=True, eq=False)
class First:
    """What a rough mesh shows: sizes of the first mesh, singular corners, and how many states each channel may need."""

    size: SizeField
    corners: tuple[Corner, ...]
    cells: tuple[PhaseSpace, ...]
    needs: tuple[int, ...]


def first_size(
    mesher: Mesher,
    channels: Sequence[Channel],
    wanted: int,
    accuracy_eV: float,
    within: tuple[float, float, float, float] | None = None,
) -> First:
    """A size field for the first mesh, from the wave length of the highest wanted state and the singular corners.

    Parameters
    ----------
    within : (x, y, radius, rate): outside this circle, which holds the section, cells grow with the distance.
    """
    extent = mesher.extent_nm if within is None else 2 * within[2]
    rough, _ = mesher.mesh(SizeField(extent / 4, growing=within, turn_cells=_TURN_CELLS))
    space = Space(rough)
    operators = [c.operator_of(rough) for c in channels]
    cells = tuple(phase_space(space, operator) for operator in operators)
    top = _energy_of(cells, wanted + 1)
    needs = tuple(int(np.ceil(c.count(np.array(top)))) if c.bottom_eV < top else 0 for c in cells)
    wave_number = float(np.sqrt(max(c.wave_numbers_squared(np.array(top)).max() for c in cells)))
    sharpest: dict[tuple[float, float], Corner] = {}
    for operator, need in zip(operators, needs, strict=True):
        if need:
            inverse_mass = [np.asarray(c.quadratic[:2, :2, 0, 0].real) for c in operator.by_region]
            for corner in singular_corners(rough, inverse_mass):
                known = sharpest.get((corner.x, corner.y))
                if known is None or corner.exponent < known.exponent:
                    sharpest[corner.x, corner.y] = corner
    corners = tuple(sharpest.values())
    bottom = min(c.bottom_eV for c in cells)
    relative = accuracy_eV / estimate.BAR_FACTOR / 2 / (top - bottom)
    # How small the first mesh's innermost cells are; later meshes follow the indicators.
    least = float(np.clip((relative / 1e-3) ** 0.25, 0.05, 0.8))
    if corners or len(operators[0].by_region) > 1:
        relative *= _COARSER
    largest = (relative / _PER_WAVE) ** 0.125 / wave_number
    affordable = np.sqrt(_NODES_PER_AREA * space.area_nm2 * (wanted + SPARE) / MOST_VALUES)
    largest = min(max(largest, 0.4 / wave_number, affordable), 3.0 / wave_number, extent / 3)
    reach = min(float(np.sqrt(space.area_nm2) / 2), _REACH * largest)
    graded = gradings(corners, largest, reach, least) if least < _HARDLY else ()
    first = SizeField(largest, graded, growing=within, turn_cells=_TURN_CELLS)
    barriers = [
        c.barrier for c, n in zip(channels, needs, strict=True) if n and c.barrier is not None and c.barrier.extendable
    ]
    if barriers:
        lowest = min(barriers, key=lambda b: b.edge_eV)
        first = coarser_outside(first, rough, lowest, top)
    return First(first, corners, cells, needs)


def _energy_of(cells: Sequence[PhaseSpace], count: int) -> float:
    """The energy below which all channels together have `count` states."""
    low, high = min(c.energy_of(1) for c in cells), min(c.energy_of(count) for c in cells)
    grid = np.linspace(min(low, high), high, 129)
    total = np.sum([c.count(grid) for c in cells], axis=0)
    return float(np.interp(count, np.maximum.accumulate(total), grid)) if total[-1] > total[0] else high
