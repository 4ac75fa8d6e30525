"""Valleys of silicon and germanium in round wires: which are alike, their masses along the wire, their levels."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np

from tests.truth._wires import checked
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.describe.valley import Valley
from wiresolve.physics.wire import Wire
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

Direction = tuple[int, int, int]

TRANSPORT = (
    "m_l cos^2 + m_t sin^2 of the angle to the axis: F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967); A. Rahman, "
    "M. S. Lundstrom, A. W. Ghosh, J. Appl. Phys. 97, 053702 (2005)"
)
LEVELS = (
    "bottoms after the phase factor of F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967); digits by a spectral "
    "method of polynomials on the disk"
)
SILICON = Valley("Delta", longitudinal_mass=0.916, transverse_mass=0.19, axis=(1, 0, 0))
HENSEL = Valley("Delta", longitudinal_mass=0.9163, transverse_mass=0.1905, axis=(1, 0, 0))
GERMANIUM = Valley("L", longitudinal_mass=1.59, transverse_mass=0.0815, axis=(1, 1, 1), zone_boundary=True)
"""Masses in m0: J. C. Hensel, H. Hasegawa, M. Nakayama, Phys. Rev. 138, A225 (1965) (from memory), common practice."""
RADIUS_nm = 3.0
UPRIGHT = ["18.063083311", "30.394859898", "47.212683575", "60.721174296", "68.773324076", "80.214097561"]
OBLIQUE = ["24.364484364", "54.155594307", "69.446598187", "97.416087562", "110.777466122", "141.875880113"]
"""Levels of the [001] and of the [100] and [010] valleys of a round silicon wire along [110], in hbar^2/(2 m0 R^2)."""
ACROSS: dict[Direction, Direction] = {
    (1, 0, 0): (0, 0, 1),
    (1, 1, 0): (0, 0, 1),
    (1, 1, 1): (1, -1, 0),
    (1, 1, -2): (1, -1, 0),
}


def problem(valley: Valley, axis: Direction, count: int = 4) -> Problem:
    material = Material("crystal", valleys=(valley,), conduction_edge_eV=0.0, crystal="diamond")
    return Problem(
        "valleys",
        Section(Circle(diameter_nm=2 * RADIUS_nm), "crystal"),
        Carriers(temperature_K=(4.2,)),
        Accuracy(count, 1e-8),
        (material,),
        Orientation(axis, ACROSS[axis]),
    )


def groups(valley: Valley, axis: Direction) -> list[float]:
    """How many valleys each group stands for and its mass along the wire, by that mass."""
    found = []
    for group in Wire(problem(valley, axis)).groups:
        (tensor,) = group.inverse_mass.values()
        along = tensor[2, 2] - tensor[2, :2] @ np.linalg.solve(tensor[:2, :2], tensor[:2, 2])
        found.append((1 / along, group.degeneracy))
    return [number for mass, count in sorted(found) for number in (count, mass)]


@lru_cache(maxsize=1)
def along_110() -> Any:
    return checked(solve(problem(SILICON, (1, 1, 0), 18)))


def levels(label: str) -> list[float]:
    scale = HBAR2_OVER_2M0 / RADIUS_nm**2
    return [band.energy_eV / scale for band in along_110().subbands if band.valley == label][:5]


def _groups(name: str, valley: Valley, axis: Direction, value: list[float]) -> dict[str, Any]:
    written = "[" + "".join(str(v) for v in axis) + "]"
    return {
        "id": f"valleys.{name}-{''.join(str(v) for v in axis)}",
        "what": f"{name}, round wire along {written}: valleys of each group, and their mass along the wire (m0)",
        "value": value,
        "digits": 9,
        "source": TRANSPORT,
        "tolerance_reason": "ten digits are printed",
        "compute": lambda: groups(valley, axis),
    }


TRUTH: list[dict[str, Any]] = [
    _groups("silicon", SILICON, (1, 0, 0), [4, 0.19, 2, 0.916]),
    _groups("silicon", SILICON, (1, 1, 1), [6, 0.432]),
    _groups("silicon", HENSEL, (1, 1, 0), [2, 0.1905, 4, 0.5534]),
    _groups("silicon", HENSEL, (1, 1, -2), [4, 0.3114666667, 2, 0.6743666667]),
    _groups("germanium", GERMANIUM, (1, 0, 0), [4, 0.5843333333]),
    _groups("germanium", GERMANIUM, (1, 1, 1), [3, 0.2491111111, 1, 1.59]),
    _groups("germanium", GERMANIUM, (1, 1, -2), [1, 0.0815, 2, 0.4167222222, 1, 1.4223888889]),
    {
        "id": "valleys.silicon-110.upright",
        "what": "levels of the [001] valleys of a round silicon wire along [110] (hbar^2/2m0R^2)",
        "value": [float(text) for text in UPRIGHT[:5]],
        "digits": 7,
        "source": LEVELS,
        "tolerance_reason": "1e-8 eV are asked for, which is 2e-6 of the unit",
        "compute": lambda: levels("Delta [001]"),
    },
    {
        "id": "valleys.silicon-110.oblique",
        "what": "levels of the [100] and [010] valleys of the same wire (hbar^2/2m0R^2)",
        "value": [float(text) for text in OBLIQUE[:5]],
        "digits": 7,
        "source": LEVELS,
        "tolerance_reason": "1e-8 eV are asked for, which is 2e-6 of the unit",
        "compute": lambda: levels("Delta [100] [010]"),
    },
]
