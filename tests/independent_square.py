"""Self-consistent electrons of a square wire in a square wrap-around gate: a spectral method of its own.

Shares no finite element, mesh or eigenvalue code with the program: only constants and the Fermi-Dirac integral. One
quadrant is enough. Each axis has a grid of elements that shrink geometrically towards the interface, on both sides of
it, with polynomials whose degree rises away from it, and functions of x and y are products of the two: exponentially
small errors although the potential is singular at the channel's corners. Poisson's matrix is a sum of Kronecker
products of integrals in one variable; the states are found in each of the four parities by inverse iteration; Newton's
steps use the response of the density over the pairs of computed states that matter.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import pi

import numpy as np
from numpy.typing import NDArray
from scipy import sparse
from scipy.linalg import eigh
from scipy.sparse.linalg import eigsh, splu
from scipy.special import roots_legendre

from tests.independent_round import EPSILON0_PER_V_NM, line_density
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Square:
    """A square channel (hard walls) in a square insulator with the gate outside; the band edge is minus the potential.

    `masses` along x, y and the wire; energies count from the Fermi level.
    """

    side_nm: float
    insulator_nm: float
    masses: tuple[float, float, float]
    permittivity: float
    insulator_permittivity: float
    temperature_K: float
    gate_potential_V: float
    valleys: int = 1
    donors_per_nm3: float = 0.0


@dataclass(frozen=True)
class Grid:
    """Elements of each axis: layers on each side of the interface, their ratio, the outermost degree and its fall."""

    layers: int = 7
    ratio: float = 0.2
    degree: int = 15
    fall: float = 1.6
    least: int = 4
    states: int = 12


@dataclass(frozen=True, eq=False)
class Filled:
    """A self-consistent solution: levels as (energy, parity in x, parity in y, line density) in ascending order."""

    levels: tuple[tuple[float, str, str, float], ...]
    line_density_per_nm: float
    gate_charge_per_nm: float
    centre_potential_V: float
    face_potential_V: float
    corner_potential_V: float
    potential_V: Array
    last_step_V: float
    steps: int


class Axis:
    """Lagrange polynomials on the elements of one half axis, from the centre (0) through the interface to the gate."""

    def __init__(self, half: float, beyond: float, grid: Grid) -> None:
        shrink = grid.ratio ** np.arange(1, grid.layers)
        inner = np.concatenate([[0.0], half * (1 - shrink), [half]])
        outer = np.concatenate([[half], half + beyond * shrink[::-1], [half + beyond]])
        degrees = [max(grid.least, round(grid.degree - grid.fall * k)) for k in range(grid.layers)]
        breaks = np.concatenate([inner, outer[1:]])
        degrees = degrees + degrees[::-1]
        self.count = sum(degrees) + 1
        self.inside = sum(degrees[: grid.layers]) + 1  # basis functions that are not zero in the channel
        rows_value: list[Array] = []
        rows_slope: list[Array] = []
        weights, first = [], 0
        self.points_inside = 0
        for number, degree in enumerate(degrees):
            left, right = breaks[number], breaks[number + 1]
            nodes = -np.cos(pi * np.arange(degree + 1) / degree)
            x, w = roots_legendre(3 * degree // 2 + 3)
            vander = np.polynomial.legendre.legvander(nodes, degree)
            to_legendre = np.linalg.inv(vander)
            value = np.polynomial.legendre.legvander(x, degree) @ to_legendre
            slopes = [np.polynomial.legendre.legval(x, np.polynomial.legendre.legder(e)) for e in np.eye(degree + 1)]
            slope = np.array(slopes).T @ to_legendre * 2 / (right - left)
            for rows, block in ((rows_value, value), (rows_slope, slope)):
                wide = np.zeros((len(x), self.count))
                wide[:, first : first + degree + 1] = block
                rows.append(wide)
            weights.append(w * (right - left) / 2)
            if number < grid.layers:
                self.points_inside += len(x)
            first += degree
        self.value, self.slope, self.weights = np.vstack(rows_value), np.vstack(rows_slope), np.concatenate(weights)
        self.value[abs(self.value) < 1e-15] = 0.0

    def integrals(self, points: int | None = None) -> tuple[sparse.csr_matrix, sparse.csr_matrix]:
        """Matrices of u'v' and u v over the first `points` quadrature points (all if None)."""
        value, slope, weights = self.value[:points], self.slope[:points], self.weights[:points]
        stiffness = (slope.T * weights) @ slope
        # constants have no slope: exactly so, or thin elements would make much of the rounding
        np.fill_diagonal(stiffness, 0.0)
        np.fill_diagonal(stiffness, -stiffness.sum(axis=1))
        return sparse.csr_matrix(stiffness), sparse.csr_matrix((value.T * weights) @ value)


class Quadrant:
    """The discrete wire. Functions of the whole quadrant are (count, count) arrays, of the channel (inside, inside)."""

    def __init__(self, wire: Square, grid: Grid) -> None:
        self.wire, self.grid = wire, grid
        self.axis = axis = Axis(wire.side_nm / 2, wire.insulator_nm, grid)
        stiff_in, mass_in = axis.integrals(axis.points_inside)
        stiff, mass = axis.integrals()
        # over the whole plane: 4 quadrants
        inner = sparse.kron(stiff_in, mass_in) + sparse.kron(mass_in, stiff_in)
        whole = sparse.kron(stiff, mass) + sparse.kron(mass, stiff)
        matrix = 4 * EPSILON0_PER_V_NM * (wire.permittivity * inner + wire.insulator_permittivity * (whole - inner))
        free = np.ones((axis.count, axis.count), dtype=bool)
        free[-1], free[:, -1] = False, False
        self.free = free
        self.full_matrix = sparse.csr_matrix(matrix)
        self.matrix = sparse.csc_matrix(self.full_matrix[free.ravel()][:, free.ravel()])
        self.solver = splu(self.matrix, permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True})
        n = axis.inside
        self.value = axis.value[: axis.points_inside, :n]
        self.area = 4 * np.outer(axis.weights[: axis.points_inside], axis.weights[: axis.points_inside])
        self.value2 = sparse.csr_matrix(sparse.kron(sparse.csr_matrix(self.value), sparse.csr_matrix(self.value)))
        a, m = stiff_in[:n, :n], mass_in[:n, :n]
        mx, my, _ = wire.masses
        self.kinetic = 4 * HBAR2_OVER_2M0 * (sparse.kron(a, m) / mx + sparse.kron(m, a) / my)
        self.overlap = sparse.csr_matrix(4 * sparse.kron(m, m))
        self.donors = self.load(np.full(self.area.shape, wire.donors_per_nm3))

    def load(self, density: Array) -> Array:
        """Integrals of densities (..., points, points) in the channel with every function, (..., count, count)."""
        n, found = self.axis.inside, np.zeros((*density.shape[:-2], self.axis.count, self.axis.count))
        found[..., :n, :n] = self.value.T @ (self.area * density) @ self.value
        return found

    def solve(self, load: Array, gate: float = 0.0) -> Array:
        """Potential (count, count) of a charge with the gate at a potential."""
        phi = np.full(load.shape, gate)
        phi[self.free] += self.solver.solve(load[self.free])
        return phi

    def states(self, phi: Array) -> list[tuple[str, str, Array, Array]]:
        """(parity in x, in y, energies, values at the points (states, points, points)) of each symmetry."""
        n = self.axis.inside
        at_points = self.value @ phi[:n, :n] @ self.value.T
        potential = self.value2.T @ sparse.diags_array((self.area * at_points).ravel()) @ self.value2
        hamilton = sparse.csr_matrix(self.kinetic - potential)
        floor = -float(at_points.max()) - 0.01
        found = []
        for x in ("even", "odd"):
            for y in ("even", "odd"):
                keep = np.zeros((n, n), dtype=bool)
                keep[int(x == "odd") : -1, int(y == "odd") : -1] = True
                chosen = np.flatnonzero(keep)
                h, s = (sparse.csc_matrix(m[chosen][:, chosen]) for m in (hamilton, self.overlap))
                if len(chosen) < 700:
                    energy, vectors = eigh(h.toarray(), s.toarray(), subset_by_index=(0, self.grid.states - 1))
                else:
                    start = np.random.default_rng(1).standard_normal(len(chosen))
                    energy, vectors = eigsh(h, self.grid.states, s, sigma=floor, v0=start, tol=1e-14)
                    order = np.argsort(energy)
                    energy, vectors = energy[order], vectors[:, order]
                    energy, turn = np.linalg.eigh(vectors.T @ (h @ vectors))  # orthonormal already: polish
                    vectors = vectors @ turn
                full = np.zeros((len(energy), n * n))
                full[:, chosen] = vectors.T
                psi = self.value @ full.reshape(-1, n, n) @ self.value.T
                found.append((x, y, energy, psi))
        return found

    def filling(self, energy: Array) -> tuple[Array, Array]:
        filled, slope, _ = line_density(energy, self.wire.masses[2], self.wire.valleys, self.wire.temperature_K)
        return filled, slope

    def electrons(self, states: list[tuple[str, str, Array, Array]]) -> Array:
        total = np.zeros(self.area.shape)
        for *_, energy, psi in states:
            total += np.tensordot(self.filling(energy)[0], psi**2, 1)
        return total

    def response(self, states: list[tuple[str, str, Array, Array]]) -> Array:
        """Rows b (pairs, free functions) with dn/dphi about sum b b^T: pairs that add little are left out."""
        rows = []
        most = max(float(self.filling(energy)[0].max()) for *_, energy, _ in states)
        largest = max(float(-self.filling(energy)[1].min()) for *_, energy, _ in states)
        for *_, energy, psi in states:
            filling, slope = self.filling(energy)
            for i in np.flatnonzero(filling > 1e-3 * most):
                with np.errstate(divide="ignore", invalid="ignore"):
                    factor = -2 * (filling[i] - filling[i:]) / (energy[i] - energy[i:])
                factor[0] = -slope[i]
                used = np.flatnonzero(factor > 2e-3 * largest)
                products = psi[i] * psi[i:][used] * np.sqrt(factor[used])[:, None, None]
                rows.append(self.load(products)[:, self.free])
        return np.vstack(rows) if rows else np.zeros((0, int(self.free.sum())))


def solve(wire: Square, grid: Grid, start: Array | None = None, tolerance_V: float = 1e-12, most: int = 30) -> Filled:
    """The self-consistent solution; `start` is the potential of a solution on the same grid (no charge if None)."""
    quadrant = Quadrant(wire, grid)
    gate = wire.gate_potential_V
    phi = np.full((quadrant.axis.count,) * 2, gate) if start is None else start.copy()
    phi[-1], phi[:, -1] = gate, gate
    size, last, steps = np.inf, np.inf, 0
    while steps < most:
        steps += 1
        states = quadrant.states(phi)
        density = quadrant.electrons(states)
        charge = quadrant.donors - quadrant.load(density)
        # Newton: (K + B B^T) step = K (target - phi)
        miss = (quadrant.solve(charge, gate) - phi)[quadrant.free]
        rows = quadrant.response(states)
        moved = quadrant.solver.solve(np.ascontiguousarray(rows.T)) if len(rows) else rows.T
        inner = np.eye(len(rows)) + rows @ moved
        step = miss - moved @ np.linalg.solve(inner, rows @ miss)
        last, size = size, float(np.abs(step).max())
        phi[quadrant.free] += step
        if size < tolerance_V or (size < 1e-10 and size > 0.5 * last):
            break
    states = quadrant.states(phi)
    density = quadrant.electrons(states)
    levels = []
    for x, y, energy, _ in states:
        levels += [(float(e), x, y, float(f)) for e, f in zip(energy, quadrant.filling(energy)[0], strict=True)]
    levels.sort()
    reaction = (quadrant.full_matrix @ phi.ravel()).reshape(phi.shape)
    return Filled(
        levels=tuple(levels),
        line_density_per_nm=float((quadrant.area * density).sum()),
        gate_charge_per_nm=float(reaction[~quadrant.free].sum()),
        centre_potential_V=float(phi[0, 0]),
        face_potential_V=float(phi[quadrant.axis.inside - 1, 0]),
        corner_potential_V=float(phi[quadrant.axis.inside - 1, quadrant.axis.inside - 1]),
        potential_V=phi,
        last_step_V=size,
        steps=steps,
    )


def capacitance_per_V_nm(wire: Square, grid: Grid, solved: Filled, step_V: float = 2e-3) -> float:
    """dN/dV of the gate in e/(V nm), by central differences of sixth order."""
    total = 0.0
    for shift, weight in ((1, 45.0), (2, -9.0), (3, 1.0)):
        for sign in (1, -1):
            there = replace(wire, gate_potential_V=wire.gate_potential_V + sign * shift * step_V)
            total += sign * weight * solve(there, grid, solved.potential_V).line_density_per_nm
    return total / (60 * step_V)


CASES = {
    "A": Square(10.0, 3.0, (0.05, 0.05, 0.05), 10.0, 10.0, 77.0, 0.35),
    "B": Square(8.0, 1.5, (0.19, 0.916, 0.19), 11.7, 3.9, 300.0, 0.55, valleys=2),
    "C": Square(10.0, 3.0, (0.05, 0.05, 0.05), 10.0, 10.0, 0.0, 0.35),
    "D": Square(10.0, 3.0, (0.05, 0.05, 0.05), 10.0, 10.0, 77.0, 0.0, donors_per_nm3=0.01),
    "E": Square(16.0, 4.0, (0.03, 0.08, 0.05), 14.0, 7.0, 4.2, 0.5),
}
