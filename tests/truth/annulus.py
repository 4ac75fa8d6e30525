"""Tube between two round hard walls: zeros of the cross-products of Bessel functions."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cache
from typing import Any

import mpmath
import numpy as np
from scipy import special

from tests.truth._wires import LAPLACE, energies, wire
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle

CROSS_PRODUCTS = (
    "roots of J_m(k) Y_m(ka) = J_m(ka) Y_m(k): DLMF 10.21(x); M. Abramowitz and I. A. Stegun (1964), Table 9.7 (in "
    "another variable)"
)
TABLE: dict[float, dict[int, Sequence[str]]] = {
    0.2: {
        0: ("3.8159563304570763944", "7.7855317032359974558"),
        2: ("5.2217682704525048729",),
        4: ("7.5903755400495372298",),
    },
    0.5: {
        1: ("6.3931567616212700108",),
        3: ("7.4577401360510904490",),
        4: ("8.2667304353601038979",),
    },
    0.8: {
        0: ("15.698087893726759357",),
        2: ("15.855349447038581570",),
        3: ("16.049740798885850037",),
        5: ("16.656419276068448393",),
    },
}
"""Roots k_m,n, n = 1, 2..., by inner radius (the outer one is 1) and m: the lowest of those that are tabulated."""


MOST = 12
"""Roots that are polished, more than any entry asks for."""


@cache
def roots(inner: float) -> list[tuple[float, int]]:
    """(k, m) of the lowest states in ascending order, bracketed by SciPy and polished by mpmath to 20 digits."""

    def cross(k: Any, m: int) -> Any:
        return special.jv(m, inner * k) * special.yv(m, k) - special.jv(m, k) * special.yv(m, inner * k)

    def exact(k: Any, m: int) -> Any:
        return mpmath.besselj(m, inner * k) * mpmath.bessely(m, k) - mpmath.besselj(m, k) * mpmath.bessely(m, inner * k)

    grid = np.linspace(1.0, 20.0, 2000)
    brackets = []
    for m in range(8):
        values = cross(grid, m)
        brackets += [(i, m) for i in np.flatnonzero(np.sign(values[:-1]) * np.sign(values[1:]) < 0)]
    found = []
    for i, m in sorted(brackets)[:MOST]:
        with mpmath.workdps(20):
            ends = (mpmath.mpf(float(grid[i])), mpmath.mpf(float(grid[i + 1])))
            found.append((float(mpmath.findroot(lambda k, m=m: exact(k, m), ends, solver="anderson")), m))
    return sorted(found)


def all_levels(inner: float, count: int) -> list[float]:
    """Lowest eigenvalues from the roots, pairs twice."""
    return [k**2 for k, m in roots(inner) for _ in range(2 if m else 1)][:count]


def tabulated(inner: float, count: int) -> tuple[list[int], list[float]]:
    """Places among the lowest `count` states, and eigenvalues there, of those that the table has."""
    places, values = [], []
    seen: dict[int, int] = {}
    place = 0
    for _, m in roots(inner):
        number = seen[m] = seen.get(m, 0) + 1
        row = TABLE[inner].get(m, ())
        for _ in range(2 if m else 1):
            if place < count and number <= len(row):
                places.append(place)
                values.append(float(row[number - 1]) ** 2)
            place += 1
    return places, values


def solved(inner: float, count: int, accuracy: float) -> Any:
    tube = Section(
        shape=Circle(diameter_nm=2 * inner),
        material="void",
        layers=(Layer(thickness_nm=1 - inner, material=LAPLACE.name),),
    )
    return energies(wire(tube, [LAPLACE], count, accuracy))


def entry(inner: float, count: int, accuracy: float, digits: int, reason: str) -> list[dict[str, Any]]:
    places, values = tabulated(inner, count)
    computed: list[Any] = []

    def once() -> Any:
        if not computed:
            computed.append(solved(inner, count, accuracy))
        return computed[0]

    return [
        {
            "id": f"annulus.{inner}",
            "what": f"tube with radii {inner} and 1, {count} levels",
            "value": all_levels(inner, count),
            "digits": digits,
            "source": CROSS_PRODUCTS + "; roots by mpmath",
            "tolerance_reason": reason,
            "compute": once,
        },
        {
            "id": f"annulus.{inner}-tabulated",
            "what": f"the same, {len(values)} of them from a table",
            "value": values,
            "digits": digits,
            "source": CROSS_PRODUCTS,
            "tolerance_reason": reason,
            "compute": lambda: once()[places],
        },
    ]


TRUTH: list[dict[str, Any]] = [
    *entry(0.2, 10, 5e-7, 8, "asked for 5e-7 of energies from 14.6 on"),
    *entry(0.5, 9, 1e-6, 8, "asked for 1e-6 of energies from 39 on"),
    *entry(0.8, 11, 5e-6, 8, "asked for 5e-6 of energies from 246 on"),
]
