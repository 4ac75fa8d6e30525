"""Followed states, and T(E) at the quadrature points, against `local_mass`, Bessel zeros and differences."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from scipy.special import jn_zeros

from wiresolve.bands.effective_mass import coefficients
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.fem import eigen
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space
from wiresolve.physics import local_mass
from wiresolve.physics.filling import Filling, tables
from wiresolve.physics.followed_states import RESIDUAL, Constant, Followed, followed, split_energies
from wiresolve.physics.grown_states import Grown, cell_tables
from wiresolve.physics.pencil import Operator, build
from wiresolve.physics.semiclassical import phase_space
from wiresolve.physics.unlisted import axial_motion, followed_value
from wiresolve.units import HBAR2_OVER_2M0

MASS, ALPHA, RADIUS_NM, COUNT = 0.03, 1.8, 6.0, 8


@cache
def round_mesh() -> Mesh:
    with Mesher(Section(Circle(2 * RADIUS_NM), "c").pieces()) as mesher:
        return mesher.mesh(SizeField(2.5))[0]


def strict(energy: Any) -> Any:
    return np.full(len(energy), RESIDUAL)


def grown(bend_eV: float) -> tuple[Grown, Operator, Space]:
    """A round wire whose potential rises to its rim by `bend_eV`, a little more to one side."""
    mesh = round_mesh()
    space = Space(mesh)
    x, y = mesh.points.T / RADIUS_NM
    rising = NodalFunction(mesh, bend_eV * (x**2 + 0.8 * y**2 + 0.1 * x))
    potential = rising if bend_eV else None
    operator = Operator(
        (coefficients(np.eye(3) / MASS, 0.0),), potential=potential, nonparabolicity_per_eV=(ALPHA,), smooth=True
    )
    pencil = build(space, operator)
    tables_ = cell_tables(space, operator, pencil.kept, pencil.mass)
    return Grown(tables_, operator.potential_on(space)), operator, space


def solved(form: Grown, operator: Operator, space: Space, count: int = COUNT) -> Followed:
    """States from two linear problems, followed to the end."""
    cells = phase_space(space, operator)
    blocks = [
        eigen.lowest(form.matrix(at), form.mass, count, form.bottom_eV - 1e-3, 1e-4)[1]
        for at in (cells.energy_of(2), cells.energy_of(count))
    ]
    first = np.linspace(cells.energy_of(1), cells.energy_of(count), count)
    start = Followed(first, np.hstack(blocks), form.factors(first, count), 0)
    found = followed(form, start, form.bottom_eV, strict, count)
    assert found is not None
    return found


def test_a_round_wire_of_one_material_follows_the_bessel_zeros() -> None:
    form, operator, space = grown(0.0)
    found = solved(form, operator, space)
    zeros = sorted(float(z) for m in range(6) for z in jn_zeros(m, 3) for _ in range(1 if m == 0 else 2))[:COUNT]
    value = HBAR2_OVER_2M0 / MASS * (np.array(zeros) / RADIUS_NM) ** 2
    exact = (np.sqrt(1 + 4 * ALPHA * value) - 1) / (2 * ALPHA)  # E (1 + alpha E) = value
    # the finite elements' own error at degree 4 on this mesh is what is left
    parabolic, _ = eigen.lowest(build(space, operator.at(0.0)).h0, form.mass, COUNT, -1e-3)
    assert found.energy_eV == pytest.approx(exact, rel=2 * float(np.abs(parabolic / value - 1).max()) + 1e-10)


@pytest.mark.parametrize("bend_eV", [0.05, 0.3])
def test_the_same_energies_as_local_mass(bend_eV: float) -> None:
    form, operator, space = grown(bend_eV)
    found = solved(form, operator, space)
    cells = phase_space(space, operator)
    family = local_mass.family(space, operator, cells, COUNT)
    other = family.lowest(COUNT, cells)
    assert np.abs(found.energy_eV - other.energy_eV).max() < 1e-9
    at = float(found.energy_eV[3])
    assert abs(form.matrix(at) - family.at(at)).max() < 1e-8 * abs(family.at(at)).max()
    between = float(other.energy_eV[4:6].mean())
    assert form.count_below(between) == family.count_below(between)
    mine = form.axial_motion(found.energy_eV, found.states, 0.04)
    theirs = axial_motion(family, other.energy_eV, other.states, 0, 0.04)
    assert mine[0] == pytest.approx(theirs[0], rel=1e-6)
    assert mine[1] == pytest.approx(theirs[1], rel=1e-4)


def test_the_density_is_what_a_change_of_the_potential_sees() -> None:
    form, operator, space = grown(0.2)
    found = solved(form, operator, space)
    density = form.density(found.energy_eV, found.states)
    weights = form.tables.weights
    assert np.einsum("cq,cqm->m", weights, density) == pytest.approx(np.ones(COUNT), rel=1e-12)
    x, y = np.moveaxis(space.quadrature_points, -1, 0) / RADIUS_NM
    change, step = x * y + 0.3 * x**2, 1e-4
    moved = [followed(Grown(form.tables, form.height_eV + s * step * change), found, form.bottom_eV - 1e-3, strict)
             for s in (1, -1)]  # fmt: skip
    assert moved[0] is not None
    assert moved[1] is not None
    slope = (moved[0].energy_eV - moved[1].energy_eV) / (2 * step)
    assert slope == pytest.approx(np.einsum("cq,cqm->m", weights * change, density), rel=1e-5, abs=1e-7)


def test_states_are_followed_into_another_potential() -> None:
    form, operator, space = grown(0.1)
    found = solved(form, operator, space)
    other, its_operator, _ = grown(0.13)
    there = followed(other, found, other.bottom_eV, strict)
    again = solved(other, its_operator, space)
    assert there is not None
    assert there.energy_eV[:-2] == pytest.approx(again.energy_eV[:-2], abs=1e-11)


def test_a_constant_hamiltonian_is_followed_as_well() -> None:
    _, operator, space = grown(0.1)
    pencil = build(space, operator.at(0.1))
    energy, states = eigen.lowest(pencil.h0, pencil.mass, COUNT, -0.01)
    form = Constant(pencil.h0, pencil.mass)
    shaken = states + 1e-3 * np.roll(states, 7, axis=0)
    found = followed(form, Followed(energy, shaken, form.factors(energy, COUNT), 0), -0.01, strict)
    assert found is not None
    assert found.energy_eV == pytest.approx(energy, rel=1e-12)
    assert form.count_below(float(energy[2:4].mean())) == 3


def test_factors_lie_between_states() -> None:
    energy = np.array([0.1, 0.2, 0.2, 0.4, 0.5])
    for groups in (1, 2, 5):
        at = split_energies(energy, 5, groups)
        assert 1 <= len(at) <= groups
        assert np.abs(np.array(at)[:, None] - energy).min() > 0.01


def test_tables_of_many_subbands() -> None:
    alpha, depth = np.array([0.0, 0.7, 0.0, 2.5]), np.array([0.1, -0.02, -0.3, 0.0])
    by = np.linspace(-0.05, 0.2, 41)
    n, rate = tables(77.0, alpha, depth, float(by.min()), float(by.max()))(by)
    for i in range(4):
        exact = Filling(77.0, float(alpha[i])).both(by + depth[i])
        assert n[:, i] == pytest.approx(exact[0], rel=1e-6)
        assert rate[:, i] == pytest.approx(exact[1], rel=1e-4)


def test_what_is_followed_between_states_that_mix_does_not_jump() -> None:
    """Two values whose states turn into each other: each at the ends, halfway their mean, and no jump in between."""
    angle = np.linspace(0, np.pi / 2, 201)
    overlap = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    found = followed_value(np.array([[1.0, 3.0]]), overlap)
    assert found[0] == 1 and found[-1] == pytest.approx(3, abs=1e-14) and found[100] == pytest.approx(2, abs=1e-12)
    assert 0 < np.diff(found).max() < 0.1
    # A small part p of the other state counts as p^2: what repels the levels goes like p, and has to stay.
    part = np.sin(angle[2]) ** 2
    assert found[2] - 1 == pytest.approx(2 * part**2, rel=0.01)
