"""Triangles with closed forms: equilateral, half a square, half an equilateral one."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from tests.truth._wires import eigenvalues
from wiresolve.describe.shapes import Polygon, Triangle

LAME = (
    "G. Lame, Lecons sur la theorie mathematique de l'elasticite (1852); M. A. Pinsky, SIAM J. Math. Anal. 11, 819 "
    "(1980); B. J. McCartin, SIAM Rev. 45, 267 (2003)"
)
HALF_EQUILATERAL = [
    "122.82174365800090726",
    "228.09752393628739919",
    "333.37330421457389113",
    "368.46523097400272177",
    "491.28697463200362903",
    "543.92486477114687499",
    "649.20064504943336693",
    "684.29257180886219757",
]
"""(16 pi^2/9)(m^2 + m n + n^2), m > n >= 1: half of an equilateral triangle of side 1."""


def equilateral(count: int) -> list[float]:
    """(16 pi^2/9)(m^2 + m n + n^2), m, n >= 1, for side 1; states with m != n are pairs."""
    m, n = np.meshgrid(np.arange(1, 12), np.arange(1, 12))
    return np.sort((16 * math.pi**2 / 9 * (m**2 + m * n + n**2)).ravel())[:count].tolist()


def half_square(count: int) -> list[float]:
    """pi^2 (i^2 + j^2), i > j: the states of the unit square that change sign across its diagonal."""
    i, j = np.meshgrid(np.arange(1, 12), np.arange(1, 12))
    return np.sort(math.pi**2 * (i**2 + j**2)[i > j])[:count].tolist()


TRUTH: list[dict[str, Any]] = [
    {
        "id": "triangle.equilateral",
        "what": "equilateral triangle of side 1, ten levels",
        "value": equilateral(10),
        "digits": 9,
        "source": LAME,
        "tolerance_reason": "asked for 1e-6 of energies from 52.6 to 333",
        "compute": lambda: eigenvalues(Triangle(side_nm=1.0), 10, 1e-6),
    },
    {
        "id": "triangle.45-45-90",
        "what": "half of the unit square, eight levels",
        "value": half_square(8),
        "digits": 9,
        "source": "the antisymmetric states of the square, elementary",
        "tolerance_reason": "asked for 1e-6 of energies from 49.3 on",
        "compute": lambda: eigenvalues(Polygon(points_nm=((0, 0), (1, 0), (0, 1))), 8, 1e-6),
    },
    {
        "id": "triangle.30-60-90",
        "what": "half of an equilateral triangle of side 1, eight levels",
        "value": [float(text) for text in HALF_EQUILATERAL],
        "digits": 9,
        "source": "B. J. McCartin, SIAM Rev. 45, 267 (2003)",
        "tolerance_reason": "asked for 1e-6 of energies from 123 on",
        "compute": lambda: eigenvalues(Polygon(points_nm=((0, 0), (0.5, 0), (0, math.sqrt(3) / 2))), 8, 1e-6),
    },
]
