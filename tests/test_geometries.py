"""`wiresolve solve` on wire files of geometries/: their levels against closed forms and other methods.

Material values are typed in here, not taken from the program's table. What the other methods leave open is told beside
each; the program must agree with them within its own error bar and that.
"""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from math import pi, sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner
from matplotlib.path import Path as Outline
from numpy.polynomial import chebyshev
from numpy.typing import NDArray
from scipy import sparse
from scipy.linalg import eigh
from scipy.optimize import brentq
from scipy.sparse.linalg import eigsh
from scipy.special import iv, ivp, jn_zeros, jv, jvp, kv, kvp

import wiresolve as ws
from wiresolve.cli import program

Array = NDArray[np.float64]
Level = tuple[float, int, float]
"""Energy in eV, number of valleys, mass along the wire."""

GEOMETRIES = Path(__file__).resolve().parents[1] / "geometries"
UNIT = 0.0380998212
"""hbar^2/(2 m0) in eV nm^2, CODATA 2022."""


def kane(level_eV: float, alpha_per_eV: float) -> float:
    """E (1 + alpha E) = level: E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957)."""
    return 2 * level_eV / (1 + sqrt(1 + 4 * alpha_per_eV * level_eV))


def nonparabolicity(gap_eV: float, mass: float, split_off_eV: float) -> float:
    """Kane's closed form with spin-orbit splitting: W. Fawcett and others, J. Phys. Chem. Solids 31, 1963 (1970)."""
    g, d = gap_eV, split_off_eV
    return (1 - mass) ** 2 / g * (3 * g * g + 4 * g * d + 2 * d * d) / ((g + d) * (3 * g + 2 * d))


def gap(at_zero_eV: float, slope_eV_per_K: float, bend_K: float, temperature_K: float) -> float:
    """Y. P. Varshni, Physica 34, 149 (1967)."""
    return at_zero_eV - slope_eV_per_K * temperature_K**2 / (temperature_K + bend_K)


# I. Vurgaftman, J. R. Meyer, L. R. Ram-Mohan, J. Appl. Phys. 89, 5815 (2001), at 4.2 K: mass, alpha. InAs' mass is that
# of C. R. Pidgeon, D. L. Mitchell, R. N. Brown, Phys. Rev. 154, 737 (1967).
GAAS_GAP, ALAS_GAP = gap(1.519, 0.5405e-3, 204.0, 4.2), gap(3.099, 0.885e-3, 530.0, 4.2)
ALLOY_GAP = 0.7 * GAAS_GAP + 0.3 * ALAS_GAP - 0.3 * 0.7 * (-0.127 + 1.310 * 0.3)
GAAS = 0.067, nonparabolicity(GAAS_GAP, 0.067, 0.341)
ALLOY = 0.067 + 0.3 * 0.083, nonparabolicity(ALLOY_GAP, 0.067 + 0.3 * 0.083, 0.7 * 0.341 + 0.3 * 0.28)
STEP_eV = ALLOY_GAP - GAAS_GAP - 0.3 * 0.53
INAS = 0.024, nonparabolicity(gap(0.417, 0.276e-3, 93.0, 4.2), 0.024, 0.39)


# Closed forms


def isotropic(eigenvalues: Array, mass: float, alpha: float) -> list[Level]:
    """Levels of one valley from eigenvalues of minus the Laplacian in 1/nm^2."""
    energies = [kane(UNIT / mass * value, alpha) for value in eigenvalues]
    return [(energy, 1, mass * (1 + 2 * alpha * energy)) for energy in energies]


def circle() -> list[Level]:
    values = [jn_zeros(m, 6)[n] ** 2 for m in range(9) for n in range(6) for _ in range(2 if m else 1)]
    return isotropic(np.sort(values) / 12.5**2, *GAAS)


def rectangle() -> list[Level]:
    n = np.arange(1, 9)
    return isotropic(np.sort(np.add.outer((pi * n / 30) ** 2, (pi * n / 20) ** 2).ravel()), *GAAS)


def hexagon() -> list[Level]:
    # Of the hexagon of side 1: L. M. Cureton and J. R. Kuttler, J. Sound Vib. 220, 83 (1999); R. S. Jones (2017).
    values = [
        7.155339133926,
        *2 * [18.131677865534],
        *2 * [32.451857514401],
        37.491352876798,
        47.629365773857,
        52.637890139143,
    ]
    return isotropic(np.array(values) / (30 / sqrt(3)) ** 2, *INAS)


def triangle() -> list[Level]:
    # G. Lame (1852); B. J. McCartin, SIAM Rev. 45, 267 (2003). GaN's mass is the same along c and across it:
    # I. Vurgaftman, J. R. Meyer, J. Appl. Phys. 94, 3675 (2003).
    values = [m * m + m * n + n * n for m in range(1, 12) for n in range(1, 12)]
    alpha = nonparabolicity(gap(3.51, 0.909e-3, 830.0, 77.0), 0.2, 0.017)
    return isotropic(np.sort(values) * (4 * pi / (3 * 16)) ** 2, 0.2, alpha)


def matched(radius_nm: float, wall_nm: float | None) -> list[Level]:
    """A round GaAs core in Al0.3Ga0.7As up to a wall: equal values and slopes over m (1 + alpha (E - edge)).

    D. J. BenDaniel and C. B. Duke, Phys. Rev. 152, 683 (1966); G. Bastard, Phys. Rev. B 24, 5693 (1981).
    """

    def mismatch(energy: float, m: int) -> float:
        mass, other = GAAS[0] * (1 + GAAS[1] * energy), ALLOY[0] * (1 + ALLOY[1] * (energy - STEP_eV))
        k, q = sqrt(energy * mass / UNIT), sqrt((STEP_eV - energy) * other / UNIT)
        value, slope = kv(m, q * radius_nm), q * kvp(m, q * radius_nm)
        if wall_nm is not None:
            back = kv(m, q * wall_nm) / iv(m, q * wall_nm)
            value, slope = value - back * iv(m, q * radius_nm), slope - back * q * ivp(m, q * radius_nm)
        return float(k / mass * jvp(m, k * radius_nm) * value - slope / other * jv(m, k * radius_nm))

    grid = np.linspace(1e-3, STEP_eV - 1e-6, 400)
    found = []
    for m in range(8):
        values = [mismatch(energy, m) for energy in grid]
        for low, high, left, right in zip(grid, grid[1:], values, values[1:], strict=False):
            if left * right < 0:
                found += [brentq(mismatch, low, high, args=(m,), xtol=1e-13)] * (2 if m else 1)
    return [(energy, 1, np.nan) for energy in sorted(found)]


# Other methods


def ritz(
    points: Array, weights: Array, bubble: tuple[Array, Array, Array], tensor: Array, degree: int, whole: int
) -> Array:
    """Levels in eV with `tensor` (1/m0), from polynomials times a bubble that is zero on the wall (values, d/dx, d/dy).

    Points are scaled to the square from -1 to 1, which the tensor must follow. Polynomials have at most `degree` in x
    and y, and `whole` together.
    """
    x, y = (chebyshev.chebvander(p, degree) for p in points.T)
    dx, dy = (
        np.array(
            [chebyshev.chebval(p, chebyshev.chebder(row)) if k else 0 * p for k, row in enumerate(np.eye(degree + 1))]
        ).T
        for p in points.T
    )
    value, along_x, along_y = (np.einsum("pi,pj->pij", a, b) for a, b in ((x, y), (dx, y), (x, dy)))
    i, j = np.divmod(np.arange((degree + 1) ** 2), degree + 1)
    kept = i + j <= whole
    value, along_x, along_y = (a.reshape(len(points), -1)[:, kept] for a in (value, along_x, along_y))
    inside, *slopes = (b[:, None] for b in bubble)
    parts = inside * along_x + slopes[0] * value, inside * along_y + slopes[1] * value
    weighted = weights[:, None]
    kinetic = sum(tensor[a, b] * parts[a].T @ (weighted * parts[b]) for a in (0, 1) for b in (0, 1))
    value = inside * value
    mass = value.T @ (weighted * value)
    return np.asarray(UNIT * eigh(kinetic, mass, eigvals_only=True, subset_by_index=(0, 11)))


def on_disk(radius_nm: float, tensor: Array, degree: int = 20) -> Array:
    at, weight = np.polynomial.legendre.leggauss(degree + 4)
    r, angle = np.meshgrid((at + 1) / 2, 2 * pi * np.arange(2 * degree + 8) / (2 * degree + 8), indexing="ij")
    points = np.column_stack([(r * np.cos(angle)).ravel(), (r * np.sin(angle)).ravel()])
    weights = (weight[:, None] * r).ravel()
    return ritz(
        points,
        weights,
        (1 - (points**2).sum(1), -2 * points[:, 0], -2 * points[:, 1]),
        tensor / radius_nm**2,
        degree,
        degree,
    )


def on_rectangle(width_nm: float, height_nm: float, tensor: Array, degree: int = 26) -> Array:
    if tensor[0, 1] == 0:
        n = np.arange(1, 13)
        across, upwards = (UNIT * tensor[k, k] * (pi * n / size) ** 2 for k, size in enumerate((width_nm, height_nm)))
        return np.sort(np.add.outer(across, upwards).ravel())
    at, weight = np.polynomial.legendre.leggauss(degree + 4)
    x, y = (a.ravel() for a in np.meshgrid(at, at, indexing="ij"))
    bubble = (1 - x * x) * (1 - y * y), -2 * x * (1 - y * y), -2 * y * (1 - x * x)
    scale = np.array([2 / width_nm, 2 / height_nm])
    return ritz(
        np.column_stack([x, y]),
        np.outer(weight, weight).ravel(),
        bubble,
        tensor * np.outer(scale, scale),
        degree,
        2 * degree,
    )


def leaning(direction: tuple[float, float, float], long: float, across: float) -> tuple[Array, float]:
    """Inverse mass in the section, and mass along the wire, of a valley along a direction of the wire's frame.

    F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967).
    """
    n = np.array(direction) / np.linalg.norm(direction)
    return np.eye(2) / across + (1 / long - 1 / across) * np.outer(n[:2], n[:2]), long * n[2] ** 2 + across * (
        1 - n[2] ** 2
    )


def valleys(levels: Array, edge: float, alpha: float, count: int, mass: float) -> list[Level]:
    energies = [kane(level, alpha) for level in levels]
    return [(edge + energy, count, mass * (1 + 2 * alpha * energy)) for energy in energies]


def silicon_wire() -> list[Level]:
    # J. C. Hensel, H. Hasegawa, M. Nakayama, Phys. Rev. 138, A225 (1965); C. Jacoboni, L. Reggiani, Rev. Mod. Phys. 55,
    # 645 (1983).
    upright, across = leaning((0, 1, 0), 0.9163, 0.1905)
    oblique, slanted = leaning((-1, 0, 1), 0.9163, 0.1905)
    return [
        *valleys(on_disk(3.0, upright), 0.0, 0.5, 2, across),
        *valleys(on_disk(3.0, oblique), 0.0, 0.5, 4, slanted),
    ]


def germanium_fin() -> list[Level]:
    # B. W. Levinger, D. R. Frankl, J. Phys. Chem. Solids 20, 281 (1961); Delta masses as silicon's. When cold the L gap
    # is 0.742 eV (at 0 K) and the Delta gap 0.946 eV (at 4.2 K), and both fall alike.
    found = []
    for direction, count in (((0, 1, sqrt(2)), 2), ((sqrt(2), 1, 0), 2)):
        tensor, mass = leaning(direction, 1.59, 0.0815)
        found += valleys(on_rectangle(4.0, 10.0, tensor), 0.0, 0.3, count, mass)
    height = 0.946 - gap(0.742, 0.48e-3, 235.0, 4.2)
    for direction, count in (((0, 1, 0), 2), ((-1, 0, 1), 4)):
        tensor, mass = leaning(direction, 0.92, 0.19)
        found += valleys(on_rectangle(4.0, 10.0, tensor), height, 0.5, count, mass)
    return found


def outline() -> list[Level]:
    """Finite volumes on squares of 0.4 nm, InAs within the inner curve of the file and InP within the outer one."""
    inas, inp = gap(0.417, 0.276e-3, 93.0, 77.0), gap(1.4236, 0.363e-3, 162.0, 77.0)
    alphas = nonparabolicity(inas, 0.024, 0.39), nonparabolicity(inp, 0.0795, 0.108)
    step = (-0.94 + inp) - (-0.59 + inas)
    rows = list(csv.reader((GEOMETRIES / "outline.csv").read_text(encoding="utf-8").splitlines()))[1:]
    breaks = [k for k, row in enumerate(rows) if not row]
    curves = [
        np.array(part, dtype=float) * 0.42
        for part in (rows[: breaks[0]], rows[breaks[0] + 1 : breaks[1] if breaks[1:] else None])
    ]
    size = 0.4
    low, high = curves[1].min(axis=0) - size, curves[1].max(axis=0) + size
    x, y = (np.arange(a, b, size) for a, b in zip(low, high, strict=True))
    at = np.column_stack([a.ravel() for a in np.meshgrid(x, y, indexing="ij")])
    core, inside = (Outline(curve).contains_points(at).reshape(len(x), len(y)) for curve in curves)
    number = np.full(inside.shape, -1)
    number[inside] = np.arange(inside.sum())
    energy = 0.03
    for _ in range(4):
        mass = np.where(core, 0.024 * (1 + alphas[0] * energy), 0.0795 * (1 + alphas[1] * (energy - step)))
        diagonal = np.where(core, 0.0, step)
        entries = []
        for axis in (0, 1):
            for shift in (1, -1):
                beside, other = np.roll(number, shift, axis), np.roll(mass, shift, axis)
                flow = UNIT / size**2 * 2 / (mass + other)
                diagonal = diagonal + np.where(beside >= 0, flow, 2 * UNIT / size**2 / mass)
                pair = inside & (beside >= 0)
                entries.append((number[pair], beside[pair], -flow[pair]))
        i, j, v = (np.concatenate(part) for part in zip(*entries, strict=True))
        count = int(inside.sum())
        matrix = sparse.coo_array((v, (i, j)), shape=(count, count)).tocsc() + sparse.diags_array(diagonal[inside])
        energy = float(eigsh(matrix.tocsc(), 1, sigma=0.0, v0=np.ones(count), return_eigenvectors=False)[0])
    return [(energy, 1, np.nan)]


CASES: dict[str, tuple[Callable[[], list[Level]], float]] = {
    # What the other method leaves open, in eV.
    "circle": (circle, 1e-9),
    "rectangle": (rectangle, 1e-9),
    "inas_hexagon": (hexagon, 1e-9),
    "gan_triangle": (triangle, 1e-9),
    "gaas_in_algaas": (lambda: matched(7.0, None), 1e-9),
    # The mesh's edges of second order are parabolas: N of them around, they leave (pi/N)^4/10 of the area.
    "imported_mesh": (lambda: matched(8.0, 16.0), 1e-6),
    "silicon_wire": (silicon_wire, 1e-8),
    # Polynomials close in on a level with a leaning mass like degree^-4.7: corners are as if of 153 degrees.
    "germanium_fin": (germanium_fin, 1e-6),
    # Steps of half a square along the interface, and the pixels that smoothing takes away.
    "outline": (outline, 0.15e-3),
}


@pytest.mark.parametrize("name", CASES)
def test_levels_of_the_wire_file(name: str, tmp_path: Path) -> None:
    reference, open_eV = CASES[name]
    words = [
        "solve",
        str(GEOMETRIES / f"{name}.toml"),
        "--out",
        str(tmp_path / "out"),
        "--no-figures",
        "--json",
        "--quiet",
    ]
    run = CliRunner().invoke(program, words)
    assert run.exit_code == 0, run.output
    result: dict[str, Any] = json.loads(run.stdout)
    assert result["states_missed"] == 0
    exact = sorted(reference())
    bands = result["subbands"]
    compared = list(zip(bands, exact, strict=False))
    assert len(compared) == (len(bands) if name != "outline" else 1)
    for band, (energy, count, mass) in compared:
        allowed = band["error_eV"] + abs(band["wall_effect_eV"] or 0.0) + open_eV
        assert abs(band["energy_eV"] - energy) <= allowed, (band["index"], band["energy_eV"], energy)
        assert band["valley_degeneracy"] == count
        if np.isfinite(mass):
            assert band["axial_mass"] == pytest.approx(mass, rel=1e-4)


@pytest.mark.parametrize("axis", [(1, 0, 0), (0, 0, 1)], ids=["c upwards", "c along the wire"])
def test_triangle_of_a_uniaxial_mass(axis: tuple[int, int, int]) -> None:
    # Stretched by the roots of its masses along x and y the section is the equilateral triangle of Lame. Masses are the
    # ends of what is measured for GaN: I. Vurgaftman, J. R. Meyer, J. Appl. Phys. 94, 3675 (2003).
    along_c, across, base = 0.20, 0.23, 16.0
    upwards = across if axis == (0, 0, 1) else along_c
    shape = ws.shapes.Triangle(base_nm=base, height_nm=base * sqrt(3 / 4 * across / upwards))
    valley = ws.Valley("zone centre", 0.0, along_c, across, axis=(0, 0, 1))
    nitride = ws.Material.given("nitride", valleys=(valley,), crystal="wurtzite")
    section, carriers = ws.Section(shape=shape, material="nitride"), ws.Carriers(temperature_K=77.0)
    turned = ws.Orientation(axis, (1, 0, 0) if axis == (0, 0, 1) else (0, 0, 1))
    result = ws.solve(ws.Problem("Uniaxial", section, carriers, ws.Accuracy(6, 1e-6), (nitride,), turned))
    values = np.sort([m * m + m * n + n * n for m in range(1, 9) for n in range(1, 9)])[:6]
    assert result.energies_eV == pytest.approx(UNIT / across * values * (4 * pi / (3 * base)) ** 2, abs=1e-6)
    masses = [band.axial_mass for band in result.subbands]
    assert masses == pytest.approx(6 * [along_c if axis == (0, 0, 1) else across], rel=1e-9)
