"""Matrix elements: dipoles, slopes at walls, and the Coulomb form factor of a rectangle and of a round hard wall."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from scipy.special import jn_zeros, jv

from tests.plain_modes import disk, rectangle
from tests.truth.disk import ZEROS
from tests.truth.rectangle import SEPARATION
from wiresolve.mode_elements import form_factors

WIDTH, HEIGHT = 1.0, 1.7
"""Of `tests.plain_modes.rectangle`, in nm."""


def box() -> list[float]:
    """Largest <1|y|j> along the long side, and what moving all four walls does to the lowest level."""
    _, found = rectangle(3e-7)
    return [float(np.abs(found.dipole_y_nm[0]).max()), float(found.roughness_eV_per_nm[0, 0, 0])]


def disk_dipole() -> float:
    """(sum over the second level of |<1|r|j>|^2) of the unit disk: radii by Gauss's rule, angles by hand."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    r = (nodes + 1) / 2
    first, second = (float(jn_zeros(m, 1)[0]) for m in (0, 1))
    parts = [
        jv(m, zero * r) / (math.sqrt((math.pi if m else 2 * math.pi) / 2) * abs(jv(m + 1, zero)))
        for m, zero in ((0, first), (1, second))
    ]
    return float(2 * (math.pi * np.sum(weights / 2 * r**2 * parts[0] * parts[1])) ** 2)


def round_sums() -> float:
    """The same from the program."""
    _, found = disk(3e-7)
    return float(found.level_sums("dipole_nm")[1][0, 1])


def round_coulomb() -> list[float]:
    """F_1111 at the axial wave numbers 0.5 and 2 over the radius."""
    result, _ = disk(3e-7)
    return [float(f) for f in form_factors(result, [0.5, 2.0], [0]).values[:, 0, 0, 0, 0]]


TRUTH: list[dict[str, Any]] = [
    {
        "id": "matrix-elements.rectangle",
        "what": "dipole <1|y|2> and the slope term of all walls, rectangle 1 by 1.7",
        "value": [16 / (9 * math.pi**2) * HEIGHT, -4 * math.pi**2 * (1 / WIDTH**3 + 1 / HEIGHT**3)],
        "digits": 8,
        "source": SEPARATION,
        "tolerance_reason": "asked for 3e-7 of energies from 13.3 to 93",
        "compute": box,
    },
    {
        "id": "matrix-elements.disk-dipole",
        "what": "|<1|r|j>|^2 summed over the second level, unit disk",
        "value": disk_dipole(),
        "digits": 9,
        "source": ZEROS + "; norms DLMF 10.22.37, the radial integral by Gauss's rule",
        "tolerance_reason": "asked for 3e-7 of energies from 5.8 to 30",
        "compute": round_sums,
    },
    {
        "id": "matrix-elements.disk-coulomb",
        "what": "Coulomb form factor F_1111(q) of the unit disk, q = 0.5 and 2",
        "value": [1.5467517285655, 0.482504641206079],
        "digits": 9,
        "source": "Graf's addition theorem, DLMF 10.44.3: integrals of I_0(q r<) K_0(q r>) by mpmath to 20 digits",
        "tolerance_reason": "asked for 3e-7 of energies from 5.8 to 30",
        "compute": round_coulomb,
    },
]
