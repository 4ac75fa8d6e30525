"""Motion along the wire: axial masses and E(k) against closed forms and direct solves."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import jv, jvp, kv, kvp

from wiresolve.describe.wirefile import parse
from wiresolve.fem import eigen
from wiresolve.physics.listing import listing
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
from wiresolve.solve import solve

HBAR2_OVER_2M0 = 0.0380998211096858

ROUND = """
title = "finite barrier"
[section]
shape = "circle"
diameter = "10 nm"
material = "well"
outside = "barrier"
[materials.well]
electron_mass = 0.067
conduction_edge = "0 eV"
[materials.barrier]
electron_mass = 0.092
conduction_edge = "0.3 eV"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 3
energy = "1e-4 meV"
"""

SKEW = """
title = "axis-plane terms across a jump"
[section]
shape = "hexagon"
across_flats = "9 nm"
material = "core"
[[section.layers]]
thickness = "4 nm"
material = "shell"
[materials.core]
inverse_mass = [[20, 0, 8], [0, 20, 3], [8, 3, 20]]
conduction_edge = "0 eV"
[materials.shell]
inverse_mass = [[10, 0, 0], [0, 10, 0], [0, 0, 10]]
conduction_edge = "0.3 eV"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 4
energy = "1e-3 meV"
"""


def round_level(angular: int, k: float) -> float:
    """Lowest level of the round finite well at k by matching J and K (Bastard, Wave Mechanics Applied to Semiconductor
    Heterostructures, 1988, chapter III; D. J. BenDaniel and C. B. Duke, Phys. Rev. 152, 683 (1966))."""
    radius, edge, inner, outer = 5.0, 0.3, 0.067, 0.092

    def mismatch(energy: float) -> float:
        p = np.sqrt(inner * energy / HBAR2_OVER_2M0 - k**2)
        q = np.sqrt(outer * (edge - energy) / HBAR2_OVER_2M0 + k**2)
        return float(
            p / inner * jvp(angular, p * radius) * kv(angular, q * radius)
            - q / outer * jv(angular, p * radius) * kvp(angular, q * radius)
        )

    low = HBAR2_OVER_2M0 * k**2 / inner + 1e-6
    grid = np.linspace(low, edge + HBAR2_OVER_2M0 * k**2 / outer - 1e-9, 400)
    signs = np.sign([mismatch(e) for e in grid])
    first = int(np.flatnonzero(signs[1:] != signs[:-1])[0])
    return float(brentq(mismatch, grid[first], grid[first + 1], xtol=1e-15))


def certified(text: str) -> tuple[Wire, Certified]:
    wire = Wire(parse(text, Path()))
    accuracy = wire.problem.accuracy
    return wire, certify(wire.draw, wire.channels, accuracy.subbands, accuracy.energy_eV)


def test_dispersion_of_a_round_well_with_a_mass_jump() -> None:
    """E(k) of the two lowest levels from the matching condition at each k, and the axial mass from its curvature."""
    result = solve(parse(ROUND, Path()))
    k = result.dispersion.k_per_nm
    chosen = np.flatnonzero((k > 0) & (k < 0.35))[::4]
    assert len(chosen) >= 3
    for i, angular in ((0, 0), (1, 1), (2, 1)):
        exact = [round_level(angular, float(k[j])) for j in chosen]
        np.testing.assert_allclose(result.dispersion.energy_eV[i, chosen], exact, atol=3e-6)
        step = 1e-2
        curvature = (round_level(angular, step) - round_level(angular, 0.0)) / step**2
        subband = result.subbands[i]
        assert subband.axial_mass == pytest.approx(HBAR2_OVER_2M0 / curvature, rel=2e-5)
        assert subband.axial_mass_error < 1e-4 * subband.axial_mass
        assert subband.k_min_per_nm == 0.0


def test_axial_mass_of_one_material_is_its_own() -> None:
    """Hard wall, one isotropic mass: the axial mass is that mass to rounding."""
    text = ROUND.replace('outside = "barrier"', 'outside = "hard wall"')
    for subband in solve(parse(text, Path())).subbands:
        assert subband.axial_mass == pytest.approx(0.067, rel=1e-12)


def test_second_order_terms_are_those_of_the_dispersion() -> None:
    """Axis-plane terms that jump: the mass from perturbation theory against a fine difference of direct solves."""
    wire, found = certified(SKEW)
    masses = listing(wire, found)
    pencil, step = found.solved[0].pencil, 0.01
    energy, _ = eigen.lowest(pencil.at(step), pencil.mass, 8, found.solved[0].shift_eV)
    half = (energy[:4] - found.solved[0].energy_eV[:4]) / step**2
    finite = HBAR2_OVER_2M0 / half
    level = found.solved[0].level[:4]
    for number in np.unique(level):
        pick = level == number
        np.testing.assert_allclose(
            np.sort(masses.axial_mass[:4][pick]), np.sort(finite[pick]), rtol=2e-3, err_msg=f"level {number}"
        )
    without = HBAR2_OVER_2M0 / np.diag(pencil.expected(2, found.solved[0].unknown_states))[:4].real
    assert (masses.axial_mass[:4] > 1.02 * without).all()


def test_reduced_space_is_as_good_as_it_says() -> None:
    """E(k) of the reduced space lies above direct solves by no more than its bound, also between its points."""
    wire, found = certified(SKEW)
    bands = listing(wire, found).by_channel[0].bands
    pencil = found.solved[0].pencil
    assert bands.error_bound_eV <= 1e-6
    for j in (7, 23, 38, 52):
        energy, _ = eigen.lowest(pencil.at(float(bands.k_per_nm[j])), pencil.mass, 6, found.solved[0].shift_eV)
        above = np.sort(bands.energy_eV[:, j]) - energy[:4]  # rows follow bands, which may cross
        assert (above > -1e-12).all()
        assert (above <= 2 * bands.error_bound_eV + 1e-12).all()


def test_minimum_off_the_centre_is_found() -> None:
    """A jump of the axis-plane term strong enough to bend E(k) downwards at k = 0: the minimum lies off it."""
    text = (
        SKEW.replace("[[20, 0, 8], [0, 20, 3], [8, 3, 20]]", "[[20, 0, 19.0], [0, 20, 0], [19.0, 0, 20]]")
        .replace("[[10, 0, 0], [0, 10, 0], [0, 0, 10]]", "[[20, 0, -19.0], [0, 20, 0], [-19.0, 0, 20]]")
        .replace('conduction_edge = "0.3 eV"', 'conduction_edge = "0.02 eV"')
        .replace('energy = "1e-3 meV"', 'energy = "0.1 meV"')
    )
    result = solve(parse(text, Path()))
    lowest = result.dispersion.energy_eV.min(axis=1)
    assert any(subband.k_min_per_nm > 0.1 for subband in result.subbands)
    for subband, bottom, row in zip(result.subbands, lowest, result.dispersion.energy_eV, strict=True):
        assert subband.energy_eV == pytest.approx(bottom, abs=2e-5)
        assert subband.energy_eV <= row[0] + subband.error_eV
        if row[0] - bottom > 1e-3:
            assert subband.k_min_per_nm > 0
