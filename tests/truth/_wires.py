"""Wires of the reference values, built the short way."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Potential, Problem
from wiresolve.describe.section import Patch, Section
from wiresolve.describe.shapes import Polygon, Rectangle, Shape
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]

LAPLACE = Material.given("unit", electron_mass=HBAR2_OVER_2M0, conduction_edge_eV=0.0)
"""The material with hbar^2/2m = 1 eV nm^2: an energy in eV is an eigenvalue of minus the Laplacian in 1/nm^2."""


def material(name: str, mass: float, edge_eV: float = 0.0) -> Material:
    """An isotropic mass in m0 and a band edge."""
    return Material.given(name, electron_mass=mass, conduction_edge_eV=edge_eV)


def wire(
    section: Section,
    materials: Sequence[Material],
    count: int,
    accuracy_eV: float,
    potential: Potential | None = None,
    temperature_K: float = 4.2,
) -> Problem:
    """A problem from its section; cold, so that nothing is solved above the listed states."""
    return Problem(
        title="reference value",
        section=section,
        carriers=Carriers(temperature_K=(temperature_K,)),
        accuracy=Accuracy(subbands=count, energy_eV=accuracy_eV),
        materials=tuple(materials),
        potential=potential,
    )


def energies(problem: Problem) -> Array:
    """The listed energies in eV; whatever the program itself doubts is not compared."""
    return checked(solve(problem)).energies_eV


def checked(result: Result) -> Result:
    """The result, whose accuracy must have been met with no state missed."""
    assert result.accuracy_met
    assert result.states_missed == 0
    return result


def eigenvalues(shape: Shape, count: int, accuracy: float, patches: Sequence[Patch] = ()) -> Array:
    """The lowest eigenvalues of minus the Laplacian, zero on the boundary, in 1/nm^2."""
    section = Section(shape=shape, material=LAPLACE.name, patches=tuple(patches))
    return energies(wire(section, [LAPLACE], count, accuracy))


def regular_polygon(sides: int, circumradius_nm: float = 1.0) -> Polygon:
    """A regular polygon by its corners."""
    angles = 2 * math.pi * np.arange(sides) / sides
    corners = circumradius_nm * np.column_stack([np.cos(angles), np.sin(angles)])
    return Polygon(points_nm=tuple((float(x), float(y)) for x, y in corners))


def half_plane(direction_deg: float, reach_nm: float = 4.0) -> Patch:
    """A hole that takes away all beyond a line through the origin, on the side to which `direction_deg` points."""
    angle = math.radians(direction_deg)
    center = (reach_nm / 2 * math.cos(angle), reach_nm / 2 * math.sin(angle))
    square = Rectangle(width_nm=reach_nm, height_nm=reach_nm, rotation_deg=direction_deg)
    return Patch(shape=square, material="void", center_nm=center)
