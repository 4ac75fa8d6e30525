"""Sectors of a disk: Bessel functions of fractional order; cut out by patches of nothing."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import mpmath

from tests.truth._wires import eigenvalues, half_plane
from wiresolve.describe.section import Patch
from wiresolve.describe.shapes import Circle, Rectangle

SOURCE = (
    "zeros of Bessel functions of order m pi/angle: DLMF 10.21; M. Abramowitz and I. A. Stegun (1964), Table 9.5; "
    "G. N. Watson, Theory of Bessel Functions (1944), Table VII"
)
HALF_DISK = [
    "14.681970642123893257",
    "26.374616427163390770",
    "40.706465818200319742",
    "49.218456321694603670",
    "57.582940903291124744",
    "70.849998919095859862",
    "76.938928333647396510",
    "95.277572544037151517",
    "98.726272477249388487",
    "103.49945389513658033",
]
SIXTY = [
    "40.706465818200319742",
    "95.277572544037151517",
    "98.726272477249388487",
    "169.39544982609944817",
    "178.33734124162951127",
    "184.66880733916814004",
]
ONE_HUNDRED_TWENTY = [
    "20.190728556426629975",
    "40.706465818200319742",
    "59.679515944109418881",
    "66.954311925104805326",
    "95.277572544037151517",
    "98.726272477249388487",
]
"""Eigenvalues of the unit disk's sectors."""


def three_quarters(count: int) -> list[float]:
    """Sector of 270 degrees: orders 2/3, 4/3, 2... from mpmath's zeros."""
    zeros = [mpmath.besseljzero(mpmath.mpf(2 * m) / 3, n) for m in range(1, 8) for n in range(1, 4)]
    return sorted(float(zero**2) for zero in zeros)[:count]


def cut(patches: Sequence[Patch], count: int, accuracy: float) -> Any:
    return eigenvalues(Circle(diameter_nm=2.0), count, accuracy, patches)


QUADRANT = Patch(shape=Rectangle(width_nm=2.0, height_nm=2.0), material="void", center_nm=(1.0, -1.0))

TRUTH: list[dict[str, Any]] = [
    {
        "id": "sector.180",
        "what": "half of a disk, ten levels",
        "value": [float(text) for text in HALF_DISK],
        "digits": 8,
        "source": SOURCE,
        "tolerance_reason": "asked for 1e-6 of energies from 14.7 on",
        "compute": lambda: cut([half_plane(250.0)], 10, 1e-6),
    },
    {
        "id": "sector.60",
        "what": "sector of 60 degrees, six levels",
        "value": [float(text) for text in SIXTY],
        "digits": 8,
        "source": SOURCE,
        "tolerance_reason": "asked for 1e-6 of energies from 40.7 on",
        "compute": lambda: cut([half_plane(-90.0), half_plane(150.0)], 6, 1e-6),
    },
    {
        "id": "sector.120",
        "what": "sector of 120 degrees, six levels",
        "value": [float(text) for text in ONE_HUNDRED_TWENTY],
        "digits": 8,
        "source": SOURCE,
        "tolerance_reason": "asked for 1e-6 of energies from 20.2 on",
        "compute": lambda: cut([half_plane(-90.0), half_plane(210.0)], 6, 1e-6),
    },
    {
        "id": "sector.270",
        "what": "three quarters of a disk, a re-entrant corner, eight levels",
        "value": three_quarters(8),
        "digits": 8,
        "source": SOURCE + "; zeros by mpmath",
        "tolerance_reason": "asked for 1e-6 of energies from 11 on",
        "compute": lambda: cut([QUADRANT], 8, 1e-6),
    },
]
