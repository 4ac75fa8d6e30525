"""Limits of solved sections: one, two and three dimensions, the sheet's staircase, the root of bulk, many subbands.

The limits of the formulas themselves, with levels in closed form, stand in test_statistics and test_verdict. Here the
levels are solved: few are listed, more are solved roughly, and the rest is counted by the semiclassical tail.
"""

from __future__ import annotations

from functools import lru_cache
from math import pi

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import special

from tests.truth._wires import material, wire
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Rectangle, Shape
from wiresolve.physics.fermi import occupation
from wiresolve.physics.statistics import subband_density
from wiresolve.result import Result, ThermalCurve
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0, KB

Array = NDArray[np.float64]

MASS = 0.067
SHEET_nm = 5.0
PER_SHEET = MASS / (2 * pi * HBAR2_OVER_2M0)
"""Density of states of a sheet's subband in 1/(eV nm^2): m/(pi hbar^2), both spins."""


@lru_cache(maxsize=16)
def solved(shape: Shape, temperature_K: float, count: int = 10) -> Result:
    """At the default accuracy, as a user would."""
    section = Section(shape=shape, material="channel")
    return solve(wire(section, [material("channel", MASS)], count, 1e-4, temperature_K=temperature_K))


def disk(diameter_nm: float) -> Shape:
    return Circle(diameter_nm=diameter_nm)


def sheet(width_nm: float) -> Shape:
    return Rectangle(width_nm=width_nm, height_nm=SHEET_nm)


def disk_levels_eV(diameter_nm: float, top_eV: float) -> Array:
    """All levels of a round hard wall below `top_eV`, pairs twice (zeros of Bessel functions, DLMF 10.21)."""
    radius = diameter_nm / 2
    reach = float(np.sqrt(top_eV * MASS / HBAR2_OVER_2M0)) * radius
    zeros = [special.jn_zeros(m, int(reach / pi) + 3) for m in range(int(reach) + 2) for _ in range(2 if m else 1)]
    found = np.sort(np.concatenate(zeros))
    return np.asarray(HBAR2_OVER_2M0 / MASS * (found[found < reach] / radius) ** 2)


def box_levels_eV(width_nm: float, height_nm: float, top_eV: float) -> Array:
    i, j = np.meshgrid(np.arange(1, 600), np.arange(1, 40))
    levels = HBAR2_OVER_2M0 * pi**2 / MASS * ((i / width_nm) ** 2 + (j / height_nm) ** 2)
    return np.sort(levels[levels < top_eV])


def dimension(levels_eV: Array, temperature_K: float) -> float:
    """1 along the axis, and twice the mean energy across it in kT."""
    above = (levels_eV - levels_eV[0]) / (KB * temperature_K)
    weight = np.exp(-above)
    return float(1 + 2 * (above * weight).sum() / weight.sum())


def dimension_found(result: Result) -> float:
    return float(result.verdict.effective_dimension[0]["d"])


def states_below(levels_eV: Array, energy_eV: Array) -> Array:
    """Number of states per nm below each energy, both spins: 2 k_F/pi a level."""
    root = np.sqrt(np.maximum(energy_eV[:, None] - levels_eV, 0) * MASS / HBAR2_OVER_2M0)
    return np.asarray(2 / pi * root.sum(axis=1))


def states_counted(result: Result) -> Array:
    """The same from the bins of a result, at their upper edges."""
    states = result.density_of_states
    return np.cumsum(states.per_eV_nm * np.diff(states.edges_eV))


# One, two, three dimensions


def test_a_narrow_wire_is_one_dimensional() -> None:
    assert dimension_found(solved(disk(5.0), 4.2)) == pytest.approx(1, abs=1e-12)
    at_room = dimension_found(solved(disk(5.0), 300.0))
    assert at_room == pytest.approx(dimension(disk_levels_eV(5.0, 4.0), 300.0), abs=1e-9)


def test_a_wide_thin_sheet_is_two_dimensional() -> None:
    found = [dimension_found(solved(sheet(width), 300.0)) for width in (10.0, 40.0, 400.0)]
    exact = [dimension(box_levels_eV(width, SHEET_nm, 1.5), 300.0) for width in (10.0, 40.0, 400.0)]
    assert found == pytest.approx(exact, abs=2e-3)
    assert found[0] < 1.7 < found[1] < 2 < found[2]
    assert found[2] == pytest.approx(2, abs=0.03)
    width, height = solved(sheet(400.0), 300.0).verdict.effective_dimension[0]["directions"]
    assert not width["frozen"]
    assert height["frozen"]


@pytest.mark.parametrize("diameter_nm", [20.0, 60.0, 100.0, 200.0])
def test_a_large_disk_is_three_dimensional(diameter_nm: float) -> None:
    # from 2.04 in the thinnest of these, past 3 (walls keep the lowest level above the band edge), and down to 3
    exact = dimension(disk_levels_eV(diameter_nm, 1.0), 300.0)
    # states that are not listed are not refined: a hundredth is what they cost
    assert dimension_found(solved(disk(diameter_nm), 300.0)) == pytest.approx(exact, abs=0.015)
    assert diameter_nm < 50 or exact == pytest.approx(3, abs=0.09)


# Density of states


def test_the_density_of_states_counts_every_state_of_the_solved_section() -> None:
    for shape, levels in (
        (sheet(150.0), box_levels_eV(150.0, SHEET_nm, 1.2)),
        (disk(60.0), disk_levels_eV(60.0, 0.2)),
    ):
        result = solved(shape, 4.2, 40)
        upper = result.density_of_states.edges_eV[1:]
        listed = upper <= result.energies_eV[-1]
        exact = states_below(levels, upper[listed])
        # an energy that is off by its bar moves the count by a step's share
        assert states_counted(result)[listed] == pytest.approx(exact, rel=3e-3, abs=3e-3 * exact[-1])


def test_the_density_of_states_is_complete_up_to_its_last_bin() -> None:
    # As far as a result tells a density of states, none may be missing, above the last listed subband either.
    result = solved(sheet(150.0), 4.2, 60)
    edges = result.density_of_states.edges_eV
    exact = np.diff(states_below(box_levels_eV(150.0, SHEET_nm, 1.5), edges)) / np.diff(edges)
    last = slice(-10, None)
    assert result.density_of_states.per_eV_nm[last].mean() == pytest.approx(exact[last].mean(), rel=0.1)


def test_a_wide_sheet_has_the_staircase_of_two_dimensions() -> None:
    width = 150.0
    result = solved(sheet(width), 4.2, 60)
    edges, counted = result.density_of_states.edges_eV, states_counted(result)
    rungs = HBAR2_OVER_2M0 * pi**2 / MASS / SHEET_nm**2 * np.array([1, 4])
    assert result.energies_eV[0] == pytest.approx(rungs[0], rel=2e-3)
    # The first rung alone: bins from 0.1 eV above it to the last listed subband or the second rung.
    top = min(result.energies_eV[-1], rungs[1])
    first, last = np.searchsorted(edges[1:], [rungs[0] + 0.1, top]) + np.array([0, -1])
    mean = (counted[last] - counted[first]) / (edges[last + 1] - edges[first + 1]) / width
    assert mean == pytest.approx(PER_SHEET, rel=0.03)


def test_a_large_disk_has_the_root_of_three_dimensions() -> None:
    def missing(diameter_nm: float, count: int) -> float:
        result = solved(disk(diameter_nm), 4.2, count)
        top = float(result.energies_eV[-1])
        place = int(np.searchsorted(result.density_of_states.edges_eV[1:], top)) - 1
        energy = float(result.density_of_states.edges_eV[place + 1])
        # (2m E/hbar^2)^(3/2)/(3 pi^2) states a volume
        bulk = (energy * MASS / HBAR2_OVER_2M0) ** 1.5 / (3 * pi**2) * pi * (diameter_nm / 2) ** 2
        return 1 - float(states_counted(result)[place]) / bulk

    few, many = missing(60.0, 20), missing(60.0, 80)
    # What the walls take away falls as 1/(k D), that is, as one over the root of the number of subbands.
    assert 0 < many < few
    assert few / many == pytest.approx(2, rel=0.25)


# Many subbands


def curve(curves: tuple[ThermalCurve, ...], temperature_K: float) -> ThermalCurve:
    return next(c for c in curves if c.temperature_K == temperature_K)


@pytest.mark.parametrize(("count", "close"), [(10, 0.015), (40, 0.0015)])
def test_density_and_conductance_of_hundreds_of_subbands(count: int, close: float) -> None:
    # At room temperature far more subbands of 100 nm are filled than are listed.
    result, levels = solved(disk(100.0), 300.0, count), disk_levels_eV(100.0, 1.2)
    density, conductance = curve(result.density, 300.0), curve(result.conductance, 300.0)
    chosen = slice(None, None, 40)
    filled = [float(subband_density(levels, MASS, 2, fermi, 300.0).sum()) for fermi in density.fermi_eV[chosen]]
    conducting = [float(occupation(levels, fermi, 300.0).sum()) for fermi in conductance.fermi_eV[chosen]]
    assert conducting[-1] > 2 * count
    assert density.values[chosen] == pytest.approx(np.array(filled), rel=close)
    assert conductance.values[chosen] == pytest.approx(np.array(conducting), rel=close)
