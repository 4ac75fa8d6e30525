"""What it costs that masses grow with energy: said before a long sweep, for whoever may do without."""

from __future__ import annotations

import math

import numpy as np

from wiresolve.bands.valleys import ValleyGroup
from wiresolve.describe import drawing
from wiresolve.describe.problem import PARABOLIC
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB

KEPT_KT = 20.0
"""States of the section so far above the Fermi level hold carriers that count."""
MANY = 30.0
"""Below so many of them, growing masses take little time."""
SAMPLE_eV = 0.05


def growth_per_eV(wire: Wire, group: ValleyGroup) -> float:
    """The largest alpha of E (1 + alpha E) among the materials that admit carriers; 0 where masses do not grow."""
    if wire.problem.carriers.model == PARABOLIC:
        return 0.0
    return max(group.nonparabolicity_per_eV[material.name] for material in wire.carrying)


def kept_states(wire: Wire) -> float:
    """About how many states of the section lie within `KEPT_KT` above its edge, over the groups whose masses grow.

    A m E / (2 pi hbar^2) of each group: the first term of H. Weyl, Math. Ann. 71, 441 (1912), for a mass sqrt(m_x m_y).
    """
    areas = drawing.visible_areas(wire.problem.section)
    inside = [(piece.material, areas[piece.name]) for piece in wire.problem.section.visible() if piece.carriers]
    reach_eV = KEPT_KT * KB * wire.problem.carriers.temperature_K[0]
    count = 0.0
    for group in wire.groups:
        if growth_per_eV(wire, group) > 0:
            for material, area_nm2 in inside:
                mass = 1 / math.sqrt(np.linalg.det(group.inverse_mass[material][:2, :2]))
                count += area_nm2 * mass * reach_eV / (4 * math.pi * HBAR2_OVER_2M0)
    return count


def cost_text(wire: Wire) -> str:
    """That a sweep of a wide section will take long because masses grow, and what constant ones would change.

    Empty where there is no sweep, where masses do not grow, or where few states are kept at a point.
    """
    voltages = wire.problem.voltages
    if voltages is None or kept_states(wire) < MANY:
        return ""
    alpha, label = max((growth_per_eV(wire, group), group.label) for group in wire.groups)
    return (
        f"masses grow with energy (by {alpha:.3g}/eV in {label}) and many states hold carriers: each of the"
        f" {len(voltages.points)} points takes ten times as long, or more, as with"
        ' model = "parabolic" under [carriers],'
        f" which raises a level at E above the band edge by about {alpha:.3g}/eV x E^2"
        f" ({1e3 * alpha * SAMPLE_eV**2:.2g} meV at {1e3 * SAMPLE_eV:g} meV)"
    )
