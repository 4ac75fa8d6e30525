"""Round hard wall: squares of the zeros of the Bessel functions."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy import special

from tests.truth._wires import eigenvalues
from wiresolve.describe.shapes import Circle

ZEROS = (
    "zeros j_m,n of the Bessel functions: DLMF 10.21; M. Abramowitz and I. A. Stegun (1964), Table 9.5; G. N. Watson, "
    "Theory of Bessel Functions (1944), Table VII"
)
TABLE = {
    (0, 1): "2.404825557695772768621632",
    (1, 1): "3.831705970207512315614436",
    (2, 1): "5.135622301840682556301402",
    (0, 2): "5.520078110286310649596604",
    (3, 1): "6.380161895923983506236615",
    (1, 2): "7.015586669815618753537050",
    (4, 1): "7.588342434503804385069630",
    (2, 2): "8.417244140399864857783614",
    (0, 3): "8.653727912911012216954199",
    (5, 1): "8.771483815959954019122867",
    (3, 2): "9.761023129981669678545389",
    (6, 1): "9.936109524217684894693089",
}
"""j_m,n by (m, n), ascending without a gap; each with m > 0 belongs to a pair of states."""


def from_table(count: int) -> list[float]:
    """Lowest eigenvalues of the unit disk, pairs twice."""
    return [float(zero) ** 2 for (m, _), zero in TABLE.items() for _ in range(2 if m else 1)][:count]


def from_scipy(count: int) -> list[float]:
    """The same from SciPy's own zeros, which reach farther."""
    zeros = [special.jn_zeros(m, 10) for m in range(30) for _ in range(2 if m else 1)]
    return (np.sort(np.concatenate(zeros)) ** 2)[:count].tolist()


TRUTH: list[dict[str, Any]] = [
    {
        "id": "disk.hard-wall",
        "what": "round hard wall of radius 1, ten levels",
        "value": from_table(10),
        "digits": 10,
        "source": ZEROS,
        "tolerance_reason": "asked for 3e-8 of energies from 5.8 to 57.6; bars are twice the error",
        "compute": lambda: eigenvalues(Circle(diameter_nm=2.0), 10, 3e-8),
    },
    {
        "id": "disk.many",
        "what": "round hard wall, 30 levels",
        "value": from_scipy(30),
        "digits": 7,
        "source": ZEROS + "; computed by SciPy",
        "tolerance_reason": "asked for 2e-5 of energies from 5.8 to 154: the thirtieth to 1e-7",
        "compute": lambda: eigenvalues(Circle(diameter_nm=2.0), 30, 2e-5),
    },
]
