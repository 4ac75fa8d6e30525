"""Self-consistent electrons of a round wire in a wrap-around gate: a radial spectral method of its own.

Shares no finite element, mesh or eigenvalue code with the program: only constants and the Fermi-Dirac integral. With
x = 2 (r/R)^2 - 1 every smooth axisymmetric function is a polynomial in x. The states with angular momentum l are
r^l (1 - r^2/R^2) times Jacobi polynomials P^(2,l)(x), the potential is a Legendre series, and both are integrated by
Gauss's rule in x. The potential minimises a convex functional, whose Newton steps use the exact response of the density
(all pairs of states), with a line search; at T = 0 too, where the density has a square root at every level's edge.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from math import log, pi

import numpy as np
from numpy.typing import NDArray
from scipy.special import eval_jacobi, roots_legendre

from wiresolve.physics.fermi import fermi_integral
from wiresolve.units import E2_OVER_4PI_EPS0, HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

EPSILON0_PER_V_NM = 1 / (4 * pi * E2_OVER_4PI_EPS0)
"""Vacuum permittivity in e/(V nm)."""


@dataclass(frozen=True)
class Round:
    """A round wire, a hard wall at its radius, an insulator up to the gate; the band edge is minus the potential.

    `mass` is that of the section, `axial_mass` along the wire; energies count from the Fermi level.
    """

    radius_nm: float
    mass: float
    axial_mass: float
    permittivity: float
    insulator_nm: float
    insulator_permittivity: float
    temperature_K: float
    gate_potential_V: float
    valleys: int = 1
    donors_per_nm3: float = 0.0
    points: int = 56
    states: int = 40


@dataclass(frozen=True, eq=False)
class Filled:
    """A self-consistent solution: the potential at the points, levels (energy, l, line density) in ascending order."""

    radius_nm: Array
    potential_V: Array
    density_per_nm3: Array
    levels: tuple[tuple[float, int, float], ...]
    line_density_per_nm: float
    capacitance_per_V_nm: float  # dN/dV of the gate, in e/(V nm), by implicit differentiation
    level_slopes: tuple[float, ...]  # dE/dV of each level
    centre_potential_V: float
    surface_potential_V: float
    last_step_V: float
    steps: int


def line_density(energy_eV: Array, axial_mass: float, valleys: int, temperature_K: float) -> tuple[Array, Array, Array]:
    """Electrons per nm in levels at `energy_eV` above the Fermi level (both spins), the derivative and the integral
    from the energy to infinity (minus the grand potential)."""
    energy = np.asarray(energy_eV, dtype=float)
    curvature = HBAR2_OVER_2M0 / axial_mass
    if temperature_K == 0:
        depth = np.maximum(-energy, 0.0)
        root = np.sqrt(depth / curvature)
        with np.errstate(divide="ignore"):
            slope = np.where(depth > 0, -1 / (2 * curvature * np.where(depth > 0, root, 1.0)), 0.0)
        return 2 * valleys / pi * root, 2 * valleys / pi * slope, 2 * valleys / pi * root * depth * 2 / 3
    thermal = KB * temperature_K
    factor = 2 * valleys * np.sqrt(thermal / (4 * pi * curvature))
    eta = -energy / thermal
    return (
        factor * fermi_integral(-0.5, eta),
        -factor / thermal * fermi_integral(-1.5, eta),
        factor * thermal * fermi_integral(0.5, eta),
    )


@cache
def points(count: int) -> tuple[Array, Array]:
    x, w = roots_legendre(count)
    return x, w


@cache
def radial_basis(momentum: int, states: int, count: int) -> tuple[Array, Array]:
    """Values (count, states) at the points and kinetic matrix, for R = 1, hbar^2/2m = 1, norm 1 in the plane."""
    x, w = points(count)
    k = np.arange(states)
    # derivative in x of (1+x)^(l/2) (1-x) P_k, without the factor (1+x)^(l/2 - 1)
    value = np.array([eval_jacobi(n, 2, momentum, x) for n in k]).T
    slope = np.array([(n + momentum + 3) / 2 * eval_jacobi(n - 1, 3, momentum + 1, x) if n else 0 * x for n in k]).T
    half = ((1 + x) / 2) ** (momentum / 2)
    psi = (half * (1 - x))[:, None] * value
    # d/ds = 4 s d/dx, s^2 = (1+x)/2: s d psi/ds = l psi + half 2 (1+x) d[(1-x) P]/dx
    inner = (2 * (1 + x))[:, None] * ((1 - x)[:, None] * slope - value) * half[:, None]
    angular = momentum * psi
    radial = angular + inner
    area = 2 * pi * w / 4
    norm = 1 / np.sqrt(area @ psi**2)
    psi, radial, angular = psi * norm, radial * norm, angular * norm
    s2 = (1 + x) / 2
    kinetic = (radial.T * (area / s2)) @ radial + (angular.T * (area / s2)) @ angular
    # orthonormal but for rounding: made so, the eigenvalues keep their last digits
    root = np.linalg.inv(np.linalg.cholesky((psi.T * area) @ psi)).T
    return psi @ root, root.T @ (kinetic + kinetic.T) @ root / 2


@cache
def poisson_basis(count: int) -> tuple[Array, Array, Array]:
    """Legendre polynomials at the points (count, count), their Dirichlet form 2 pi int r u' v' dr, values at x = -1."""
    x, w = points(count)
    values: Array = np.asarray(np.polynomial.legendre.legvander(x, count - 1), dtype=float)
    rows = [np.polynomial.legendre.legval(x, np.polynomial.legendre.legder(row)) for row in np.eye(count)]
    slopes: Array = np.array(rows, dtype=float).T
    form: Array = 2 * pi * (slopes.T * (2 * (1 + x) * w)) @ slopes
    return values, form, np.where(np.arange(count) % 2, -1.0, 1.0)


class Radial:
    """The discrete wire: `area` (weights of the plane at the points), states, Poisson's equation, density response."""

    def __init__(self, wire: Round) -> None:
        self.wire = wire
        x, w = points(wire.points)
        self.radius = wire.radius_nm * np.sqrt((1 + x) / 2)
        self.area = 2 * pi * wire.radius_nm**2 * w / 4
        values, form, centre = poisson_basis(wire.points)
        gate = 2 * pi * EPSILON0_PER_V_NM * wire.insulator_permittivity / log(1 + wire.insulator_nm / wire.radius_nm)
        matrix = EPSILON0_PER_V_NM * wire.permittivity * form + gate * np.ones_like(form)  # P_n(1) = 1
        inverse = np.linalg.inv(values)
        self.stiffness = inverse.T @ matrix @ inverse  # on the values at the points
        self.gate_load = gate * inverse.sum(axis=0)
        self.to_surface, self.to_centre = inverse.sum(axis=0), centre @ inverse
        self.donors = self.area * wire.donors_per_nm3

    def states(self, potential: Array) -> list[tuple[int, Array, Array]]:
        """(l, energies, values at the points) for l = 0, 1, ... as far as levels are filled or near."""
        wire = self.wire
        scale = HBAR2_OVER_2M0 / wire.mass / wire.radius_nm**2
        found = []
        for momentum in range(200):
            psi, kinetic = radial_basis(momentum, wire.states, wire.points)
            hamilton = scale * kinetic - (psi.T * (self.area * potential / wire.radius_nm**2)) @ psi
            energy, vectors = np.linalg.eigh(hamilton)
            found.append((momentum, energy, psi @ vectors / wire.radius_nm))
            if energy[0] > 45 * KB * wire.temperature_K + 0.02 and momentum >= 4:
                break
        return found

    def electrons(self, states: list[tuple[int, Array, Array]]) -> tuple[Array, float]:
        """Electrons per nm^3 at the points and the sum over the levels of the integrated line density."""
        density, total = np.zeros_like(self.area), 0.0
        for momentum, energy, psi in states:
            pair = 2 if momentum else 1
            filling, _, integral = self.filling(energy)
            density += pair * (psi**2) @ filling
            total += pair * integral.sum()
        return density, total

    def filling(self, energy: Array) -> tuple[Array, Array, Array]:
        return line_density(energy, self.wire.axial_mass, self.wire.valleys, self.wire.temperature_K)

    def response(self, states: list[tuple[int, Array, Array]]) -> Array:
        """dn/dU = -dn/dphi (points, points), symmetric and negative: it acts on potentials times `area`."""
        total = np.zeros((len(self.area), len(self.area)))
        for momentum, energy, psi in states:
            filling, slope, _ = self.filling(energy)
            filled = int(np.count_nonzero(filling > 1e-18))
            if not filled:
                continue
            gap = energy[:filled, None] - energy
            with np.errstate(divide="ignore", invalid="ignore"):
                quotient = (filling[:filled, None] - filling) / gap
            quotient[:, filled:] *= 2  # each such pair stands once in this rectangle
            quotient[np.arange(filled), np.arange(filled)] = slope[:filled]
            products = (psi[:, :filled, None] * psi[:, None, :]).reshape(len(psi), -1)
            total += (2 if momentum else 1) * (products * quotient.ravel()) @ products.T
        return total


def solve(wire: Round, start: Array | None = None, tolerance_V: float = 1e-9, most: int = 80) -> Filled:
    """The self-consistent solution; `start` is a potential at the points (the gate's everywhere if None).

    Newton's steps end with one below `tolerance_V`: they converge quadratically, what is left is rounding (1e-12 V).
    """
    radial = Radial(wire)
    area = radial.area
    load = radial.donors + radial.gate_load * wire.gate_potential_V
    phi = np.linalg.solve(radial.stiffness, load) if start is None else start
    states = radial.states(phi)
    density, _ = radial.electrons(states)
    size, steps = np.inf, 0
    while size > tolerance_V and steps < most:
        steps += 1
        gradient = radial.stiffness @ phi + area * density - load
        hessian = radial.stiffness - area[:, None] * radial.response(states) * area
        step = -np.linalg.solve(hessian, gradient)
        size = float(np.abs(step).max())
        # the functional is convex: its slope along the step rises, and is to be brought near zero
        low, high, at = 0.0, np.inf, 1.0
        before = abs(float(step @ gradient))
        for _ in range(40):
            trial = phi + at * step
            states = radial.states(trial)
            density, _ = radial.electrons(states)
            slope = float(step @ (radial.stiffness @ trial + area * density - load))
            if size <= 1e-8 or abs(slope) <= 0.3 * before:
                break
            low, high = (low, at) if slope > 0 else (at, high)
            at = (low + high) / 2 if np.isfinite(high) else 2 * at
        phi = trial
    response = -radial.response(states)
    hessian = radial.stiffness + area[:, None] * response * area
    rate = np.linalg.solve(hessian, radial.gate_load)  # dphi/dV
    levels = []
    for momentum, energy, psi in states:
        filling, _, _ = radial.filling(energy)
        lever = -(psi.T**2) @ (area * rate)
        pair = 2 if momentum else 1
        levels += [(e, momentum, pair * f, d) for e, f, d in zip(energy, filling, lever, strict=True)]
    levels.sort(key=lambda level: level[0])
    return Filled(
        radius_nm=radial.radius,
        potential_V=phi,
        density_per_nm3=density,
        levels=tuple((float(e), m, float(f)) for e, m, f, _ in levels),
        line_density_per_nm=float(area @ density),
        capacitance_per_V_nm=float(area @ response @ (area * rate)),
        level_slopes=tuple(float(d) for *_, d in levels),
        centre_potential_V=float(radial.to_centre @ phi),
        surface_potential_V=float(radial.to_surface @ phi),
        last_step_V=size,
        steps=steps,
    )


def sweep(wire: Round, gate_potentials_V: Array) -> list[Filled]:
    """Solutions at each gate potential, each started from the last one."""
    found: list[Filled] = []
    for voltage in gate_potentials_V:
        start = found[-1].potential_V if found else None
        found.append(solve(replace(wire, gate_potential_V=float(voltage)), start))
    return found


INAS = Round(15.0, 0.026, 0.026, 15.15, 5.0, 9.0, 77.0, 0.0)
"""An InAs-like wire, 30 nm thick in 5 nm of insulator: that of the sweeps."""
SILICON = Round(5.0, 0.19, 0.916, 11.7, 1.0, 3.9, 300.0, 0.5, valleys=2)
GALLIUM_ARSENIDE = Round(20.0, 0.067, 0.067, 12.9, 10.0, 3.9, 77.0, -0.3, donors_per_nm3=1e-3)


def sweep_potentials_V(temperature_K: float, count: int = 50) -> Array:
    """Gate potentials for `INAS` from pinch-off to beyond ten filled levels (those with l > 0 count twice)."""
    return np.linspace(-0.2 if temperature_K > 200 else 0.0, 0.7, count)
