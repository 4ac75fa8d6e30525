"""Rates: how fast errors fall on smooth sections, beside corners, and on meshes that are graded to them."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache

import numpy as np
import pytest
from numpy.typing import NDArray

from tests.truth import disk, ellipse, polygon
from tests.truth._wires import LAPLACE, wire
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Shape
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.physics.solved import solve_on
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]

SMOOTH: dict[str, tuple[Shape, list[float], float]] = {
    "circle": (Circle(diameter_nm=2.0), disk.from_table(6), np.pi),
    "ellipse 5:4": (Ellipse(width_nm=2.0, height_nm=1.6), [float(t) for t in ellipse.TABLE[0.8]], 0.8 * np.pi),
    "ellipse 2:1": (Ellipse(width_nm=2.0, height_nm=1.0), [float(t) for t in ellipse.TABLE[0.5]], 0.5 * np.pi),
}
"""Shape, eigenvalues (their sources stand in tests/truth), area."""
CORNERED: dict[str, tuple[Shape, list[float], float]] = {
    "hexagon": (
        Hexagon(across_corners_nm=2.0),
        [float(text) for text, degeneracy in polygon.HEXAGON for _ in range(degeneracy)],
        3.0,
    ),
    "L": (Polygon(points_nm=polygon.L_CORNERS), [float(text) for text in polygon.L_SHAPE], 4 / 3),
}
"""Shape, eigenvalues, and the rate on uniform meshes: twice the exponent pi/angle of the sharpest corner."""
COUNT = 6


def problem(shape: Shape, accuracy: float = 1e-3) -> Wire:
    return Wire(wire(Section(shape=shape, material=LAPLACE.name), [LAPLACE], COUNT, accuracy))


def slope(x: Array, y: Array) -> float:
    return float(np.polyfit(np.log(x), np.log(y), 1)[0])


@lru_cache(maxsize=8)
def uniform(name: str) -> tuple[Array, Array, Array, Array]:
    """Mesh sizes, unknowns, relative errors of the lowest levels (meshes, COUNT) and areas, on uniform meshes."""
    shape, exact, _ = (SMOOTH | CORNERED)[name]
    largest = 0.32 if name == "ellipse 2:1" else 0.4
    sizes, unknowns, errors, areas = [], [], [], []
    ready = problem(shape)
    with Mesher(ready.draw(0.0)) as mesher:
        for size in np.geomspace(largest, 0.3 * largest, 6):
            solved = solve_on(*mesher.mesh(SizeField(float(size))), ready.operator, COUNT)
            # what Gmsh made of the size that it was asked
            sizes.append(len(solved.pencil.space.mesh.cells) ** -0.5)
            unknowns.append(len(solved.pencil.kept))
            errors.append(np.abs(solved.energy_eV[:COUNT] / exact[:COUNT] - 1))
            areas.append(solved.pencil.space.area_nm2)
    return np.array(sizes), np.array(unknowns), np.array(errors), np.array(areas)


@lru_cache(maxsize=8)
def graded(name: str, accuracies: Sequence[float] = (1e-2, 1e-3, 1e-4, 1e-5, 1e-6)) -> tuple[Array, Array]:
    """Unknowns and the largest relative error of the meshes at which the refinement stops."""
    shape, exact, _ = CORNERED[name]
    unknowns, errors = [], []
    for accuracy in accuracies:
        ready = problem(shape, accuracy)
        solved = certify(ready.draw, ready.channels, COUNT, accuracy).solved[0]
        unknowns.append(len(solved.pencil.kept))
        errors.append(float(np.abs(solved.energy_eV[:COUNT] / exact[:COUNT] - 1).max()))
    return np.array(unknowns), np.array(errors)


@pytest.mark.parametrize("name", SMOOTH)
def test_energies_of_smooth_sections_fall_as_the_eighth_power_of_the_cell_size(name: str) -> None:
    sizes, _, errors, _ = uniform(name)
    rates = [slope(sizes, errors[:, i]) for i in range(COUNT)]
    # Six unstructured meshes scatter a rate by half a power.
    assert min(rates) > 7.0, rates
    assert np.mean(rates) > 7.3, rates


@pytest.mark.parametrize("name", SMOOTH)
def test_curved_cells_fill_a_smooth_section_as_fast(name: str) -> None:
    # The energies can be no better than the outline: d(energy)/energy is of the order of d(area)/area.
    sizes, _, _, areas = uniform(name)
    error = np.abs(areas / SMOOTH[name][2] - 1)
    above = error > 1e-13
    assert above.sum() >= 3
    assert slope(sizes[above], error[above]) > 7.3


@pytest.mark.parametrize("name", CORNERED)
def test_corners_set_the_rate_of_uniform_meshes(name: str) -> None:
    sizes, _, errors, _ = uniform(name)
    theory = CORNERED[name][2]
    assert slope(sizes, errors[:, 0]) == pytest.approx(theory, abs=0.4)


def test_a_state_that_does_not_feel_the_corner_keeps_the_full_rate() -> None:
    # The third level of the L is that of its squares: a product of sines, smooth everywhere.
    sizes, _, errors, _ = uniform("L")
    assert slope(sizes, errors[:, 2]) > 7.3


@pytest.mark.parametrize("name", CORNERED)
def test_graded_meshes_win_back_the_rate_of_smooth_sections(name: str) -> None:
    unknowns, errors = graded(name)
    # h^8 is unknowns^-4; the uniform meshes' rates are -1.5 and -0.67
    assert slope(unknowns, errors) < -3.0
    assert slope(uniform(name)[1], uniform(name)[2].max(axis=1)) > -2.0


@pytest.mark.parametrize(("name", "times"), [("hexagon", 30.0), ("L", 3000.0)])
def test_graded_meshes_are_far_better_at_the_same_size(name: str, times: float) -> None:
    unknowns, errors = graded(name)
    uniform_unknowns, uniform_errors = uniform(name)[1], uniform(name)[2].max(axis=1)
    # the uniform meshes' error where the best graded one stands, along their line in the logarithms
    line = np.polyfit(np.log(uniform_unknowns), np.log(uniform_errors), 1)
    assert np.exp(np.polyval(line, np.log(unknowns[-1]))) > times * errors[-1]
