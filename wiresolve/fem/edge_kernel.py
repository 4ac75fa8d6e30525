"""Double integrals of the kernel K0(q |r - r'|) along the edges of a boundary, to ten digits and more.

Edges that lie apart are integrated by Gauss's rule. The kernel has the logarithm's pole where an edge meets itself or
its neighbour: there the square of both parameters is cut into triangles with a vertex at the pole (M. G. Duffy, SIAM J.
Numer. Anal. 19, 1260 (1982)), and powers of the variables flatten what is left of the logarithm.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.fluxes import edge_functions, edge_rule

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_APART, _NEAR = 0.8, 0.12
"""Distance in lengths of the longer edge from which one rule an edge is enough, or four parts of it."""
_POINTS, _PARTS = 10, (4, 24)
"""Points of the rule, and into how many parts an edge is cut where another one is near, or very near."""
_FLAT = 20
"""Points of the rules in the flattened variables."""
_CHUNK = 4_000_000


def kernel_products(points: Array, nodes: Ints, density: NDArray[Any], q_per_nm: float) -> NDArray[Any]:
    """(m, m) of int int g_i(s) K0(q |r(s) - r(s')|) g_j(s') ds ds'.

    Parameters
    ----------
    points : (e, degree + 1, 2) nodes of the edges in nm.
    nodes : (e, 2) numbers of the edges' ends: equal numbers are one point.
    density : (e, degree + 1, m) the functions g at the nodes.
    """
    from scipy.special import k0

    degree, count = points.shape[1] - 1, len(points)
    _, weights, values, slopes = edge_rule(degree, _POINTS)
    at = np.einsum("qn,enx->eqx", values, points)
    length = np.linalg.norm(np.einsum("qn,enx->eqx", slopes, points), axis=2) * weights
    held = (np.einsum("qn,enm->eqm", values, density) * length[..., None]).reshape(count * _POINTS, -1)
    flat = at.reshape(-1, 2)
    special = _close(points, at, nodes)
    total: Any = np.zeros((density.shape[2],) * 2, dtype=density.dtype)
    step = max(1, _CHUNK // (len(flat) * _POINTS))
    for start in range(0, count, step):
        rows = slice(start * _POINTS, min(start + step, count) * _POINTS)
        distance = np.hypot(*np.moveaxis(flat[rows, None] - flat, 2, 0))
        apart = np.ones((min(start + step, count) - start, count), dtype=bool)
        mine = (special[0] >= start) & (special[0] < start + step)
        apart[special[0][mine] - start, special[1][mine]] = False
        wide = np.repeat(np.repeat(apart, _POINTS, axis=0), _POINTS, axis=1)
        kernel = np.zeros_like(distance)
        kernel[wide] = k0(q_per_nm * distance[wide])
        total = total + held[rows].T @ (kernel @ held)
    for one, two, first, second, weight in _rules(special, degree):
        total = total + _summed(points, density, q_per_nm, (one, two), (first, second), weight)
    return np.asarray(total)


def _summed(
    points: Array, density: NDArray[Any], q: float, edges: tuple[Ints, Ints], at: tuple[Array, Array], weight: Array
) -> NDArray[Any]:
    """What pairs of edges add, by a rule in both parameters, (r,) each."""
    from scipy.special import k0

    degree, nodes = points.shape[1] - 1, points.shape[1]
    places, speeds, functions = [], [], []
    for own, parameter in zip(edges, at, strict=True):
        values, slopes = edge_functions(degree, parameter)
        places.append(np.einsum("rn,enx->erx", values, points[own]))
        speeds.append(np.linalg.norm(np.einsum("rn,enx->erx", slopes, points[own]), axis=2))
        functions.append(values)
    distance = np.linalg.norm(places[0] - places[1], axis=2)
    kernel = k0(q * np.maximum(distance, 1e-300)) * weight * speeds[0] * speeds[1]
    products = np.einsum("ra,rb->rab", *functions).reshape(len(weight), -1)
    local = (kernel @ products).reshape(-1, nodes, nodes)
    m = density.shape[2]
    return np.asarray(density[edges[0]].reshape(-1, m).T @ (local @ density[edges[1]]).reshape(-1, m))


def _close(points: Array, at: Array, nodes: Ints) -> tuple[Ints, Ints, Array, Ints]:
    """Pairs of edges that need more than one rule: both numbers, distance, and how they touch.

    0 is an edge with itself; 1 to 4 end and start, start and end, both starts, both ends; 5 no touch.
    """
    from scipy.spatial import cKDTree

    chord = np.linalg.norm(np.diff(points, axis=1), axis=2).sum(axis=1)
    middle = points.mean(axis=1)
    tree = cKDTree(middle)
    reach = (0.5 + _APART) * chord
    near = tree.query_ball_point(middle, reach + 0.5 * chord.max())
    one = np.repeat(np.arange(len(points)), [len(n) for n in near])
    two = np.concatenate([np.asarray(n, dtype=np.int64) for n in near])
    both = np.unique(np.vstack([np.column_stack([one, two]), np.column_stack([two, one])]), axis=0)
    one, two = both.T
    samples = np.concatenate([points[:, :1], at, points[:, -1:]], axis=1)
    distance = np.empty(len(one))
    for start in range(0, len(one), 20_000):
        rows = slice(start, start + 20_000)
        gap = samples[one[rows], :, None] - samples[two[rows], None, :]
        distance[rows] = np.hypot(gap[..., 0], gap[..., 1]).min(axis=(1, 2))
    kind = np.full(len(one), 5)
    for number, (a, b) in enumerate(((1, 0), (0, 1), (0, 0), (1, 1)), start=1):
        kind[nodes[one, a] == nodes[two, b]] = number
    kind[one == two] = 0
    kept = (kind < 5) | (distance < _APART * np.maximum(chord[one], chord[two]))
    relative = distance / np.maximum(chord[one], chord[two])
    return one[kept], two[kept], relative[kept], kind[kept]


def _rules(special: tuple[Ints, Ints, Array, Ints], degree: int) -> list[tuple[Ints, Ints, Array, Array, Array]]:
    """Pairs with a rule for both parameters each."""
    one, two, distance, kind = special
    made = []

    def add(picked: NDArray[np.bool_], first: Array, second: Array, weight: Array) -> None:
        numbers = np.flatnonzero(picked)
        size = max(1, 400_000 // len(weight))
        for start in range(0, len(numbers), size):
            rows = numbers[start : start + size]
            made.append((one[rows], two[rows], first, second, weight))

    u, along = _flattened(4)
    w, across = _flattened(6)
    grid = np.ravel(u[:, None] + 0 * w)
    # An edge with itself: t' = t (1 - w), and the same mirrored; the pole is at w = 0.
    gap, weight = np.ravel(u[:, None] * (1 - w)), np.ravel((u * along)[:, None] * across)
    add(kind == 0, np.r_[grid, gap], np.r_[gap, grid], np.r_[weight, weight])
    nodes, plain = np.polynomial.legendre.leggauss(_FLAT)
    v, even = (nodes + 1) / 2, plain / 2
    part, weight = np.ravel(u[:, None] * v), np.ravel((u * along)[:, None] * even)
    whole = np.ravel(u[:, None] + 0 * v)
    first, second, weight = np.r_[whole, part], np.r_[part, whole], np.r_[weight, weight]
    for number, (a, b) in enumerate(((1, 0), (0, 1), (0, 0), (1, 1)), start=1):
        add(kind == number, 1 - first if a else first, 1 - second if b else second, weight)
    for parts, picked in zip(_PARTS, (distance >= _NEAR, distance < _NEAR), strict=True):
        at, own = (np.polynomial.legendre.leggauss(_POINTS)[i] for i in (0, 1))
        starts = np.arange(parts) / parts
        line, mass = np.ravel(starts[:, None] + (at + 1) / (2 * parts)), np.tile(own / (2 * parts), parts)
        add(
            (kind == 5) & picked,
            np.repeat(line, len(line)),
            np.tile(line, len(line)),
            np.ravel(mass[:, None] * mass),
        )
    return made


def _flattened(power: int) -> tuple[Array, Array]:
    """Points and weights on (0, 1) that crowd at 0 so that a logarithm there does no harm."""
    nodes, weights = np.polynomial.legendre.leggauss(_FLAT)
    x = (nodes + 1) / 2
    return x**power, weights / 2 * power * x ** (power - 1)
