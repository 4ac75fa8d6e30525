"""Results with states in closed form, for the tests of matrix elements: a rectangle, and the unit disk."""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import jn_zeros, jv

from tests.truth._wires import LAPLACE, checked, wire
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Rectangle, Shape
from wiresolve.mode_elements import MatrixElements, matrix_elements
from wiresolve.result import Result
from wiresolve.solve import solve

Array = NDArray[np.float64]
WIDTH, HEIGHT, COUNT = 1.0, 1.7, 8
NODES, WEIGHTS = np.polynomial.legendre.leggauss(80)
UNIT, UNIT_WEIGHTS = (NODES + 1) / 2, WEIGHTS / 2
"""Gauss's rule on (0, 1)."""


@lru_cache(maxsize=8)
def plain(shape: Shape, count: int, accuracy_eV: float) -> Result:
    """A hard wall around hbar^2/2m = 1 eV nm^2."""
    return checked(solve(wire(Section(shape=shape, material=LAPLACE.name), [LAPLACE], count, accuracy_eV)))


@lru_cache(maxsize=8)
def rectangle(accuracy_eV: float) -> tuple[Result, MatrixElements]:
    result = plain(Rectangle(width_nm=WIDTH, height_nm=HEIGHT), COUNT, accuracy_eV)
    return result, matrix_elements(result)


@lru_cache(maxsize=4)
def disk(accuracy_eV: float) -> tuple[Result, MatrixElements]:
    result = plain(Circle(diameter_nm=2.0), 6, accuracy_eV)
    return result, matrix_elements(result)


def quantum_numbers() -> list[tuple[int, int]]:
    """(i, j) of the lowest states of the rectangle, which are single."""
    known = [((i / WIDTH) ** 2 + (j / HEIGHT) ** 2, i, j) for i in range(1, 9) for j in range(1, 9)]
    return [(i, j) for _, i, j in sorted(known)[:COUNT]]


def box_dipole(i: int, k: int, size: float) -> float:
    """<i|x|k> of a box of this size from the origin's middle: -8 L i k/(pi^2 (i^2 - k^2)^2) for odd i + k."""
    return 0.0 if (i + k) % 2 == 0 else -8 * size * i * k / (math.pi * (i * i - k * k)) ** 2


def box_slopes(i: int, k: int, size: float) -> float:
    """Sum over both walls of the products of outward slopes."""
    return 2 / size * (i * k * math.pi**2 / size**2) * (1 + (-1) ** (i + k))


def by_pairs(one: Callable[[int, int], complex], two: Callable[[int, int], complex]) -> Array:
    numbers = quantum_numbers()
    return np.array([[one(a[0], b[0]) * two(a[1], b[1]) for b in numbers] for a in numbers])


def same(i: int, k: int) -> float:
    return float(i == k)


def radial(order: int, number: int) -> tuple[float, Callable[[Array], Array]]:
    """Zero and radial part of a state of the unit disk, of integral 1 with the angle (DLMF 10.22.37)."""
    zero = float(jn_zeros(order, number)[-1])
    norm = math.sqrt((math.pi if order else 2 * math.pi) / 2) * abs(jv(order + 1, zero))
    return zero, lambda r: jv(order, zero * r) / norm
