"""A full inverse-mass tensor, oblique to the axis: valleys of silicon in round wires along [110] and [112]."""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

import numpy as np

from tests.truth._wires import checked, wire
from wiresolve.describe.materials import Material
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

LONG, ACROSS = 0.916, 0.19
"""Longitudinal and transverse mass of the valleys in m0."""
LEVELS = (
    "bottoms after the phase factor of F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967); digits by a spectral "
    "method of polynomials on the disk"
)
TRANSPORT = (
    "m_l cos^2 + m_t sin^2 of the angle to the axis: F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967); A. Rahman, "
    "M. S. Lundstrom, A. W. Ghosh, J. Appl. Phys. 97, 053702 (2005)"
)
TABLE: dict[float, list[str]] = {
    1 / 2: ["24.364484364", "54.155594307", "69.446598187", "97.416087562", "110.777466122", "141.875880113"],
    0.0: ["18.063083311", "30.394859898", "47.212683575", "60.721174296", "68.773324076", "80.214097561"],
    1 / 6: ["20.222912714", "38.466307307", "63.846991777", "64.326714647", "90.999805379", "98.056609765"],
    2 / 3: ["26.400235879", "61.899988102", "72.102419351", "113.148827699", "120.263509162", "146.269702347"],
}
"""Levels of the unit circle in hbar^2/(2 m0 R^2), by the squared cosine of the angle between valley and wire."""
RADIUS_nm = 2.0


@lru_cache(maxsize=8)
def solved(squared_cosine: float) -> Result:
    """A round wire whose valley leans against the axis; its lean points 25 degrees away from x."""
    along, across = math.sqrt(squared_cosine), math.sqrt(1 - squared_cosine)
    lean = np.array([across * math.cos(math.radians(25)), across * math.sin(math.radians(25)), along])
    tensor = np.eye(3) / ACROSS + (1 / LONG - 1 / ACROSS) * np.outer(lean, lean)
    valley = Material.given("valley", inverse_mass=tensor.tolist(), conduction_edge_eV=0.0)
    section = Section(shape=Circle(diameter_nm=2 * RADIUS_nm), material="valley")
    return checked(solve(wire(section, [valley], 6, 2e-9)))


def levels(squared_cosine: float) -> Any:
    return solved(squared_cosine).energies_eV * RADIUS_nm**2 / HBAR2_OVER_2M0


def axial_masses() -> list[float]:
    return [float(band.axial_mass or 0.0) for squared in TABLE for band in solved(squared).subbands]


NAMES = {1 / 2: "[110], oblique", 0.0: "[110], upright", 1 / 6: "[112], flat", 2 / 3: "[112], steep"}

TRUTH: list[dict[str, Any]] = [
    *(
        {
            "id": f"oblique.{NAMES[squared].replace('[', '').replace('], ', '-')}",
            "what": f"round silicon wire along {NAMES[squared]} valleys, six levels in hbar^2/(2 m0 R^2)",
            "value": [float(text) for text in TABLE[squared]],
            "digits": 8,
            "source": LEVELS,
            "tolerance_reason": "asked for 2e-9 eV of energies from 0.17 eV on; 9 digits are known",
            "compute": lambda squared=squared: levels(squared),
        }
        for squared in TABLE
    ),
    {
        "id": "oblique.axial-mass",
        "what": "axial masses of all these levels: 0.553, 0.19, 0.311, 0.674",
        "value": [LONG * squared + ACROSS * (1 - squared) for squared in TABLE for _ in range(6)],
        "digits": 12,
        "source": TRANSPORT,
        "tolerance_reason": "a closed form that the program takes, in double precision",
        "compute": axial_masses,
    },
]
