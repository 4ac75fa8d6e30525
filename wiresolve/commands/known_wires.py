"""Eight wires whose energies are known in closed form, and the comparison of `solve` with them.

The energies are computed here with SciPy's special functions and root finder, apart from anything that the solver
uses. Masses, barriers and sizes are invented.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy import optimize, special

from wiresolve.describe.wirefile import parse
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]

MASS, BARRIER_MASS, BARRIER_eV = 0.067, 0.092, 0.25
UNIT = HBAR2_OVER_2M0 / MASS
"""hbar^2 / (2 m) of the invented material in eV nm^2."""
_WELL = f"[materials.well]\nelectron_mass = {MASS}\nconduction_edge = '0 eV'\nsource = 'invented'\n"
_WALL = f"[materials.wall]\nelectron_mass = {BARRIER_MASS}\nconduction_edge = '{BARRIER_eV} eV'\nsource = 'invented'\n"


@dataclass(frozen=True)
class KnownWire:
    """A wire file without its accuracy, and its lowest energies in eV, one for every orbital state, ascending."""

    name: str
    text: str
    exact_eV: tuple[float, ...]


def compare(wire: KnownWire, wanted: str = "1e-3 meV") -> tuple[bool, str]:
    """Solve a wire; a state is right where it lies within its bar and the bar within what is wanted.

    Returns whether all states are right, and a line with the state that is nearest to the end of its bar.
    """
    count = len(wire.exact_eV)
    carriers = "[carriers]\nkind = 'electrons'\ntemperature = '77 K'\n"
    accuracy = f"[accuracy]\nsubbands = {count}\nenergy = '{wanted}'\n"
    result = solve(parse(f"title = '{wire.name}'\n{wire.text}{carriers}{accuracy}", Path()))
    exact, found, bars = np.array(wire.exact_eV), result.energies_eV[:count], result.errors_eV[:count]
    if len(found) < count:
        return False, f"NOT OK  {wire.name}: {len(found)} states of {count} found"
    off = np.abs(found - exact)
    # The closed forms are good to ten digits at least.
    ok = bool(np.all(off <= bars + 1e-10 * exact)) and result.accuracy_met and result.states_missed == 0
    at = int(np.argmax(off / (bars + 1e-10 * exact)))
    return ok, (
        f"{'ok    ' if ok else 'NOT OK'}  {wire.name:<28} {count} states, closest call state {at + 1}:"
        f" {1e3 * found[at]:.6f} meV, exact {1e3 * exact[at]:.6f}, off by {1e3 * off[at]:.1e}, bar {1e3 * bars[at]:.1e}"
    )


def circle() -> KnownWire:
    """Hard wall at 10 nm: zeros of the Bessel functions J_m (DLMF 10.21)."""
    energies = UNIT / 10.0**2 * _bessel_zeros() ** 2
    return KnownWire(
        "circle", "[section]\nshape = 'circle'\ndiameter = '20 nm'\nmaterial = 'well'\n" + _WELL, _first(energies, 8)
    )


def ellipse() -> KnownWire:
    """Semi-axes 10 and 6 nm with inverse masses in the ratio of their squares: a circle once both are scaled to 1."""
    scale = 0.15
    tensor = [[100 * scale, 0.0, 0.0], [0.0, 36 * scale, 0.0], [0.0, 0.0, 10.0]]
    text = (
        "[section]\nshape = 'ellipse'\nwidth = '20 nm'\nheight = '12 nm'\nmaterial = 'stretched'\n"
        f"[materials.stretched]\ninverse_mass = {tensor}\n"
        "conduction_edge = '0 eV'\nsource = 'invented'\n"
    )
    return KnownWire("ellipse, anisotropic mass", text, _first(HBAR2_OVER_2M0 * scale * _bessel_zeros() ** 2, 6))


def rectangle() -> KnownWire:
    """17 nm by 9 nm: pi^2 (i^2/w^2 + j^2/h^2), i and j from 1."""
    i, j = np.meshgrid(np.arange(1, 12), np.arange(1, 12))
    energies = UNIT * math.pi**2 * (i**2 / 17.0**2 + j**2 / 9.0**2)
    text = "[section]\nshape = 'rectangle'\nwidth = '17 nm'\nheight = '9 nm'\nmaterial = 'well'\n" + _WELL
    return KnownWire("rectangle", text, _first(energies, 8))


def equilateral() -> KnownWire:
    """Side 22 nm: (16 pi^2 / 9 a^2) (i^2 + i j + j^2), i and j from 1 (Lame 1852)."""
    i, j = np.meshgrid(np.arange(1, 12), np.arange(1, 12))
    energies = UNIT * 16 * math.pi**2 / (9 * 22.0**2) * (i**2 + i * j + j**2)
    text = "[section]\nshape = 'triangle'\nside = '22 nm'\nmaterial = 'well'\n" + _WELL
    return KnownWire("equilateral triangle", text, _first(energies, 8))


def half_square() -> KnownWire:
    """Legs of 18 nm: the states of the square that change sign across its diagonal, pi^2 (i^2 + j^2) / a^2, i > j."""
    i, j = np.meshgrid(np.arange(1, 12), np.arange(1, 12))
    energies = UNIT * math.pi**2 / 18.0**2 * (i**2 + j**2)[i > j]
    text = "[section]\nshape = 'polygon'\nunit = 'nm'\npoints = [[0, 0], [18, 0], [0, 18]]\nmaterial = 'well'\n" + _WELL
    return KnownWire("triangle 45-45-90", text, _first(energies, 6))


def tube() -> KnownWire:
    """Walls at 5 and 11 nm: J_m(5 k) Y_m(11 k) = J_m(11 k) Y_m(5 k) (DLMF 10.21(x))."""

    def cross(k: Array, m: int) -> Array:
        return np.asarray(special.jv(m, 5 * k) * special.yv(m, 11 * k) - special.jv(m, 11 * k) * special.yv(m, 5 * k))

    roots = [(k, m) for m in range(7) for k in _roots(partial(cross, m=m), np.linspace(0.05, 1.6, 400))]
    energies = [UNIT * k**2 for k, m in roots for _ in range(2 if m else 1)]
    text = (
        "[section]\nshape = 'circle'\ndiameter = '10 nm'\nmaterial = 'void'\n"
        "[[section.layers]]\nthickness = '6 nm'\nmaterial = 'well'\n" + _WELL
    )
    return KnownWire("tube", text, _first(energies, 7))


def finite_barrier() -> KnownWire:
    """Core of 8 nm in a barrier with a hard wall at 16 nm, below the barrier's edge.

    J_m(k r) inside, I_m(q r) K_m(16 q) - K_m(q r) I_m(16 q) outside, value and slope over mass joined at 8 nm
    (BenDaniel and Duke, Phys. Rev. 152, 683 (1966)).
    """

    def mismatch(energy: Array, m: int) -> Array:
        k, q = np.sqrt(energy / UNIT), np.sqrt((BARRIER_eV - energy) * BARRIER_MASS / HBAR2_OVER_2M0)
        far_i, far_k = special.iv(m, 16 * q), special.kv(m, 16 * q)
        outside = special.iv(m, 8 * q) * far_k - special.kv(m, 8 * q) * far_i
        slope = q * (special.ivp(m, 8 * q) * far_k - special.kvp(m, 8 * q) * far_i)
        return np.asarray(k * special.jvp(m, 8 * k) * outside / MASS - special.jv(m, 8 * k) * slope / BARRIER_MASS)

    grid = np.linspace(1e-3, BARRIER_eV - 1e-3, 500)
    roots = [(e, m) for m in range(6) for e in _roots(partial(mismatch, m=m), grid)]
    energies = [e for e, m in roots for _ in range(2 if m else 1)]
    text = (
        "[section]\nshape = 'circle'\ndiameter = '16 nm'\nmaterial = 'well'\n"
        "[[section.layers]]\nthickness = '8 nm'\nmaterial = 'wall'\n" + _WELL + _WALL
    )
    return KnownWire("circle, finite barrier", text, _first(energies, 5))


def harmonic() -> KnownWire:
    """Level spacings 20 and 30 meV; the wall at 45 nm, six oscillator lengths out, moves no level by 1e-9 meV."""
    i, j = np.meshgrid(np.arange(12), np.arange(12))
    energies = 0.020 * (i + 0.5) + 0.030 * (j + 0.5)
    text = (
        "[section]\nshape = 'circle'\ndiameter = '90 nm'\nmaterial = 'well'\n"
        "[potential]\nharmonic = { x = '20 meV', y = '30 meV' }\n" + _WELL
    )
    return KnownWire("harmonic section", text, _first(energies, 5))


KNOWN_WIRES: tuple[Callable[[], KnownWire], ...] = (
    circle,
    ellipse,
    rectangle,
    equilateral,
    half_square,
    tube,
    finite_barrier,
    harmonic,
)


def _first(energies_eV: object, count: int) -> tuple[float, ...]:
    return tuple(np.sort(np.ravel(np.asarray(energies_eV, dtype=np.float64)))[:count].tolist())


def _bessel_zeros() -> Array:
    """Zeros of J_m in no order, those of m > 0 twice (two angles)."""
    zeros = [special.jn_zeros(m, 5) for m in range(9) for _ in range(2 if m else 1)]
    return np.concatenate(zeros)


def _roots(function: Callable[[Array], Array], grid: Array) -> list[float]:
    """Roots of a smooth function, one in each step of the grid over which its sign changes."""
    values = function(grid)
    changes = np.flatnonzero(np.sign(values[:-1]) * np.sign(values[1:]) < 0)
    return [float(optimize.brentq(function, grid[i], grid[i + 1], xtol=1e-15, rtol=1e-14)) for i in changes]
