"""The solved states as they are listed: canonical modes, shares, axial masses, E(k), and the spectrum with its tail."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.section import Piece
from wiresolve.fem import eigen
from wiresolve.physics import modes
from wiresolve.physics.axial_bands import AxialBands, curvature, dispersion
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.subbands import Certified, Solved, certify_at, levels
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

SPIN = 2
"""Both spins share each effective-mass state."""
_THERMAL_REACH = 12.0
"""States are solved up to this many kT above the lowest (20 above the Fermi level); above, they are counted by area."""
_FERMI_REACH = 20.0
_ROUGH = 0.02
"""States above the listed ones are used while their error is below this many kT."""
_MOST_THERMAL = 80
_K_POINTS = 61
_AXIAL_eV = 1e-6
"""E(k) between the minima is never asked for more closely than this: the mesh is made for k = 0."""


@dataclass(frozen=True, eq=False)
class Listing:
    """What is known of each solved state, the wanted ones first (m states, m at least the wanted number).

    Attributes
    ----------
    energy_eV, bar_eV, k_min_per_nm : (m,) minimum over k, its bar, and where it lies.
    axial_mass, axial_mass_error : (m,) in m0 at the minimum; NaN where E(k) starts linearly.
    states : (nodes, m) canonical envelope functions at k = 0.
    """

    energy_eV: Array
    bar_eV: Array
    k_min_per_nm: Array
    axial_mass: Array
    axial_mass_error: Array
    states: NDArray[Any]
    shares: Mapping[str, Array]
    bands: AxialBands
    parabolic: bool
    valley: str
    valley_degeneracy: int


def listing(wire: Wire, certified: Certified) -> Listing:
    """Everything that is listed of the certified states."""
    solved = certified.solved
    whole = int(solved.level[-1])
    unknowns = modes.canonical(solved.pencil, solved.unknown_states, solved.level, whole)
    states = solved.pencil.spread(unknowns)
    coarse = curvature(solved.pencil, solved.energy_eV, unknowns, solved.level, solved.shift_eV)
    # The same at degree 6 shows what the mesh still does to the mass.
    fine_states = solved.enriched.states[solved.enriched_pencil.kept]
    fine = curvature(solved.enriched_pencil, solved.enriched.energy_eV, fine_states, solved.level, solved.shift_eV)
    mass = HBAR2_OVER_2M0 / coarse
    error = solved.bar_factor * np.abs(HBAR2_OVER_2M0 / fine - mass) + 1e-12 * np.abs(mass)

    reach = _energy_reach(wire, certified)
    stiffness = np.nanmedian(np.abs(coarse)) if np.isfinite(coarse).any() else HBAR2_OVER_2M0
    k = np.linspace(0, np.sqrt(reach / stiffness), _K_POINTS)
    bands = dispersion(
        solved.pencil, solved.energy_eV, unknowns, k, solved.shift_eV,
        max(0.1 * wire.problem.accuracy.energy_eV, _AXIAL_eV), certified.wanted,
    )  # fmt: skip
    energy, bar, k_min = solved.energy_eV.copy(), solved.bar_eV.copy(), np.zeros(len(solved.energy_eV))
    below = energy[: certified.wanted] - bands.energy_eV.min(axis=1) > bar[: certified.wanted]
    if below.any():
        energy, bar, k_min, mass, error = _off_centre(
            solved, bands, np.flatnonzero(below), energy, bar, k_min, mass, error
        )
    material = wire.materials[carrying_piece(wire).material]
    parabola = solved.energy_eV[: certified.wanted, None] + coarse[: certified.wanted, None] * k**2
    parabolic = bool(np.isfinite(coarse).all() and np.abs(bands.energy_eV - parabola).max() < 1e-9)
    return Listing(
        energy, bar, k_min, mass, error, states, modes.shares(solved.pencil.space, states), bands, parabolic,
        material.valley, material.valley_degeneracy,
    )  # fmt: skip


def carrying_piece(wire: Wire) -> Piece:
    """The piece with the lowest band edge that admits carriers."""
    pieces = [p for p in reversed(wire.problem.section.visible()) if p.carriers]
    return min(pieces, key=lambda p: wire.edge_eV(p.material, p.offset_eV))


def _energy_reach(wire: Wire, certified: Certified) -> float:
    """How far up E(k) is wanted: the listed span, and 12 kT."""
    energy = certified.solved.energy_eV[: certified.wanted]
    hottest = max(wire.problem.carriers.temperature_K)
    return float(max(energy[-1] - energy[0], _THERMAL_REACH * KB * hottest, 0.02 * abs(energy[0]), 1e-3))


def _off_centre(
    solved: Solved,
    bands: AxialBands,
    which: NDArray[np.int64],
    energy: Array,
    bar: Array,
    k_min: Array,
    mass: Array,
    error: Array,
) -> tuple[Array, Array, Array, Array, Array]:
    """Minima that lie off k = 0: where they are, and their energies solved there with bars of their own."""
    k = bands.k_per_nm
    for i in which:
        j = int(np.clip(np.argmin(bands.energy_eV[i]), 1, len(k) - 2))
        parabola = np.polyfit(k[j - 1 : j + 2] - k[j], bands.energy_eV[i, j - 1 : j + 2], 2)
        k_min[i] = k[j] - parabola[1] / (2 * parabola[0])
        there = certify_at(solved, float(k_min[i]), i + 1)
        energy[i], bar[i] = there.energy_eV[i], there.bar_eV[i]
        mass[i] = HBAR2_OVER_2M0 / parabola[0]
        error[i] = abs(mass[i]) * (4 * (bar[i] + bands.error_bound_eV) / (parabola[0] * (k[1] - k[0]) ** 2) + 1e-3)
    return energy, bar, k_min, mass, error


def spectrum_of(wire: Wire, certified: Certified, found: Listing) -> Spectrum:
    """The listed subbands, the states above them that temperature can reach, and a semiclassical tail."""
    solved, wanted = certified.solved, certified.wanted
    degeneracy = SPIN * found.valley_degeneracy
    hottest = KB * max(*wire.problem.carriers.temperature_K, 1.0)
    fermi = wire.problem.carriers.fermi_level_eV
    lowest = float(solved.energy_eV[0])
    ceiling = lowest + _THERMAL_REACH * hottest
    if fermi is not None:
        ceiling = max(ceiling, fermi + _FERMI_REACH * KB * wire.problem.carriers.temperature_K[0])
    known = len(solved.energy_eV)
    expected = int(solved.phase_space.count(np.array(ceiling))) + 4
    count = min(max(known, expected), max(known, _MOST_THERMAL), len(solved.pencil.kept) // 4)
    energy, bar, states = found.energy_eV, found.bar_eV, found.states
    stiffness = _mean_stiffness(wire, solved)
    mass = found.axial_mass
    if count > known:
        above, vectors = eigen.lowest(solved.pencil.h0, solved.pencil.mass, count, solved.shift_eV)
        # Unrefined states: the error of a smooth state of degree 4 grows like E^5.
        height = np.maximum((above[known:] - solved.shift_eV) / (energy[-1] - solved.shift_eV), 1.0)
        rough = bar[-1] * height**5
        # Where these errors would count against kT, the count by area is the better one.
        count = known + int(np.searchsorted(rough, _ROUGH * hottest))
        energy = np.concatenate([energy, above[known:count]])
        bar = np.concatenate([bar, rough[: count - known]])
        states = np.hstack([states, solved.pencil.spread(vectors[:, known:count])])
        axial = np.diag(solved.pencil.expected(2, vectors[:, known:count])).real
        mass = np.concatenate([mass, HBAR2_OVER_2M0 / axial])
    unknown = ~(np.isfinite(mass) & (mass > 0))
    unknown[:wanted] &= found.parabolic
    mass = np.where(unknown, HBAR2_OVER_2M0 / stiffness, mass)
    order = np.argsort(energy, kind="stable")
    directions, names = _directions(wire, solved, states)
    tail_energy = np.linspace(energy.max() + 1e-9, max(energy.max(), ceiling) + 40 * hottest, 257)
    tail = solved.phase_space.count(tail_energy)
    tail = degeneracy * np.maximum.accumulate(np.maximum(tail - len(energy), 0.0))
    tail[0] = 0.0  # what the solved states are short of the smooth count joins in the first interval
    table = None if found.parabolic else np.full((len(energy), len(found.bands.k_per_nm)), np.nan)
    if table is not None:
        table[:wanted] = found.bands.energy_eV
    level = levels(energy[order], bar[order])
    return Spectrum(
        energy_eV=energy[order],
        error_eV=bar[order],
        axial_mass=np.where(np.isfinite(mass) & (mass > 0), mass, np.nan)[order],
        degeneracy=np.full(len(energy), degeneracy),
        level=level,
        listed=wanted,
        k_per_nm=None if table is None else found.bands.k_per_nm,
        band_eV=None if table is None else table[order],
        tail_energy_eV=tail_energy,
        tail_count=tail,
        tail_axial_mass=_tail_mass(solved, float(tail_energy[0]), ceiling),
        direction_energy_eV=None if directions is None else directions[order],
        direction_names=names,
    )


def _mean_stiffness(wire: Wire, solved: Solved) -> float:
    """hbar^2/2m along the axis, averaged over the section."""
    space = solved.pencil.space
    by_region = np.array([float(c.quadratic[2, 2, 0, 0].real) for c in solved.operator.by_region])
    weights = space.quadrature_weights.sum(axis=1)
    return float(np.average(by_region[space.mesh.region[space.cells]], weights=weights))


def _tail_mass(solved: Solved, low_eV: float, high_eV: float) -> float:
    """Axial mass in m0 of the states counted by area: sqrt(m) averaged as they come, since a density goes like it."""
    space = solved.pencil.space
    weights = space.quadrature_weights.sum(axis=1)
    region = space.mesh.region[space.cells]
    middle = 0.5 * (low_eV + max(high_eV, low_eV + 1e-3))
    share, root = 0.0, 0.0
    for index, c in enumerate(solved.operator.by_region):
        area = float(weights[region == index].sum())
        in_plane = float(np.sqrt(np.linalg.det(c.quadratic[:2, :2, 0, 0].real)))
        states = area * max(middle - float(c.constant[0, 0].real), 0.0) / in_plane
        share += states
        root += states * float(np.sqrt(HBAR2_OVER_2M0 / c.quadratic[2, 2, 0, 0].real))
    return (root / share) ** 2 if share > 0 else 1.0


def _directions(wire: Wire, solved: Solved, states: NDArray[Any]) -> tuple[Array | None, tuple[str, ...]]:
    axes = wire.separating_axes
    if axes is None:
        return None, ()
    found = modes.direction_energies(solved.pencil, states, axes, wire.axis_parts)
    # The band edge belongs to no direction.
    return found, ("width", "height")
