"""Sensitivities: closed forms, exact identities, the discrete energies of a mesh that moves, and drawn sections."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import scipy.linalg as dense
from numpy.typing import NDArray
from scipy import optimize, special

from tests.truth._wires import material, wire
from wiresolve.bands.effective_mass import coefficients
from wiresolve.bands.valleys import ValleyGroup
from wiresolve.describe.dimensions import dimensions
from wiresolve.describe.materials import Material
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Rectangle, Shape, Trapezoid
from wiresolve.describe.valley import Valley
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.outline import outline_edges
from wiresolve.fem.shape_derivative import Medium, Pairs, respond
from wiresolve.fem.space import Space
from wiresolve.physics import sensitivity
from wiresolve.physics.outline_motion import outline_motion
from wiresolve.physics.pencil import Operator, build
from wiresolve.physics.sensitivity import Sensitivity
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]
WELL, BARRIER = material("well", 0.067), material("barrier", 0.09, 0.23)


def solved(
    section: Section, count: int = 4, accuracy_eV: float = 1e-6, own: tuple[Material, ...] = (WELL, BARRIER)
) -> tuple[Certified, dict[str, Array]]:
    """The states of a section, and the values of all sensitivities by their names."""
    made = Wire(wire(section, own, count, accuracy_eV))
    done = certify(made.draw, made.channels, count, accuracy_eV)
    motion = outline_motion(section, outline_edges(done.space.mesh))
    assert motion.unmoved == ()
    found = sensitivity.sensitivities(motion, done.solved[0], made.materials, made.groups[0], count)
    return done, {s.of: s.values for s in found}


def differences(vary: Callable[[float], Section], step: float, count: int, accuracy_eV: float = 1e-7) -> Array:
    """Derivatives of the energies by four solves of sections drawn anew."""
    at = {k: solved_energies(vary(k * step), count, accuracy_eV) for k in (-2, -1, 1, 2)}
    return np.asarray((8 * (at[1] - at[-1]) - (at[2] - at[-2])) / (12 * step))


def solved_energies(section: Section, count: int, accuracy_eV: float) -> Array:
    made = Wire(wire(section, (WELL, BARRIER), count, accuracy_eV))
    return certify(made.draw, made.channels, count, accuracy_eV).energy_eV


def test_rectangle() -> None:
    width, height, mass = 20.0, 7.0, WELL.electron_mass
    assert mass is not None
    done, by = solved(Section(Rectangle(width, height), "well"), 8)
    unit = HBAR2_OVER_2M0 / mass * math.pi**2
    pairs = sorted((unit * (i**2 / width**2 + j**2 / height**2), i, j) for i in range(1, 9) for j in range(1, 9))[:8]
    i, j = np.array([(i, j) for _, i, j in pairs]).T
    across_x, across_y = -2 * unit * i**2 / width**3, -2 * unit * j**2 / height**3
    np.testing.assert_allclose(by["section.width"], across_x, rtol=1e-5)
    np.testing.assert_allclose(by["section.height"], across_y, rtol=1e-5)
    np.testing.assert_allclose(by["growth of rim"], 2 * (across_x + across_y), rtol=1e-5)
    np.testing.assert_allclose(by["materials.well.electron_mass"], -done.energy_eV / mass, rtol=1e-9)


def test_circle_and_the_split_of_its_pairs() -> None:
    """To an ellipse: dE = -int (hbar^2/2m) |d psi/dn|^2 v_n around the circle, psi like cos or sin of the angle."""
    mass = WELL.electron_mass
    assert mass is not None
    radius = 8.0
    unit = HBAR2_OVER_2M0 / mass / radius**2
    exact = unit * np.array([special.jn_zeros(0, 1)[0], *[special.jn_zeros(1, 1)[0]] * 2]) ** 2
    _, by = solved(Section(Circle(2 * radius), "well"), 3)
    np.testing.assert_allclose(by["growth of rim"], -2 * exact / radius, rtol=1e-6)
    np.testing.assert_allclose(by["section.diameter"], -exact / radius, rtol=1e-6)
    _, by = solved(Section(Ellipse(2 * radius, 2 * radius), "well"), 3)
    split = np.array([-1 / 2, -3 / 4, -1 / 4]) * exact / radius
    for name in ("section.width", "section.height"):
        np.testing.assert_allclose(by[name], split, rtol=1e-5)


@pytest.mark.parametrize(
    "section",
    [
        Section(Trapezoid(20.0, 12.0, 9.0, 1.5), "well"),
        Section(Hexagon(16.0, corner_radius_nm=2.0), "well"),
        Section(
            Rectangle(20.0, 6.0), "well", patches=(Patch(Rectangle(6.0, 9.0), "void", (1.0, 5.5)),)
        ),  # a notch, with re-entrant corners
        Section(Circle(8.0), "void", layers=(Layer(6.0, "well"),)),
    ],
    ids=["trapezoid", "hexagon", "notch", "tube"],
)
def test_scaling(section: Section) -> None:
    """E goes as size^-2 behind hard walls: sum of p dE/dp over all lengths is -2 E."""
    done, by = solved(section, 4)
    scaled = sum(d.value_nm * by[d.path] for d in dimensions(section))
    np.testing.assert_allclose(scaled, -2 * done.energy_eV, rtol=2e-5)


def finite_barrier(radius: float, mass: float, outside: float, step: float, order: int) -> float:
    """The lowest state with l = order of a round wire: kR J'(kR)/(m J) = qR K'(qR)/(m' K)."""

    def mismatch(energy: float) -> float:
        u = radius * math.sqrt(energy * mass / HBAR2_OVER_2M0)
        w = radius * math.sqrt((step - energy) * outside / HBAR2_OVER_2M0)
        inner = u * special.jvp(order, u) * special.kv(order, w) / mass
        return float(inner - w * special.kvp(order, w) * special.jv(order, u) / outside)

    ladder = np.linspace(1e-3, step * (1 - 1e-6), 400)
    values = np.array([mismatch(e) for e in ladder])
    first = int(np.flatnonzero(values[1:] * values[:-1] < 0)[0])
    return float(optimize.brentq(mismatch, ladder[first], ladder[first + 1], xtol=1e-15))


def test_finite_barrier() -> None:
    """Radius, both masses and the step between the edges, against derivatives of the closed form."""
    given = {"radius": 6.0, "mass": 0.067, "outside": 0.09, "step": 0.23}
    section = Section(Circle(12.0), "well", outside="barrier")
    _, by = solved(section, 3, 1e-7)
    names = {
        "radius": "growth of core",
        "mass": "materials.well.electron_mass",
        "outside": "materials.barrier.electron_mass",
        "step": "materials.barrier.conduction_edge",
    }
    for key, name in names.items():
        h = 1e-3 * given[key]
        low, high = ({**given, key: given[key] + step} for step in (-h, h))
        exact = [(finite_barrier(**high, order=n) - finite_barrier(**low, order=n)) / (2 * h) for n in (0, 1, 1)]
        np.testing.assert_allclose(by[name], exact, rtol=2e-5, err_msg=name)
    np.testing.assert_allclose(by["section.diameter"], by["growth of core"] / 2, rtol=1e-9)
    together = by["materials.well.conduction_edge"] + by["materials.barrier.conduction_edge"]
    assert together.sum() == pytest.approx(3.0, rel=1e-12)  # of a pair, each is listed in ascending order
    assert "growth of rim" not in by  # the mesh ends where nothing is drawn


CORE_SHELL = Section(Circle(14.0), "well", layers=(Layer(2.5, "barrier"),))
FIN = Section(Rectangle(20.0, 7.0), "well", patches=(Patch(Rectangle(5.0, 9.0), "barrier", (1.0, 0.5)),))
OFF_CENTRE = Section(Circle(16.0), "barrier", patches=(Patch(Circle(10.0), "well", (1.5, 0.5)),))
COAT = Section(
    Rectangle(14.0, 8.0), "well", layers=(Layer(3.0, "barrier", sides=(("bottom", 0.0), ("top", 2.0))),)
)  # fmt: skip


def with_layer(section: Section, **changes: Any) -> Section:
    return replace(section, layers=(replace(section.layers[0], **changes),))


def with_patch(section: Section, **changes: Any) -> Section:
    return replace(section, patches=(replace(section.patches[0], **changes),))


@pytest.mark.parametrize(
    ("name", "vary", "step"),
    [
        ("section.layers[1].thickness", lambda d: with_layer(CORE_SHELL, thickness_nm=2.5 + d), 0.15),
        ("section.layers[1].offset", lambda d: with_layer(CORE_SHELL, offset_eV=d), 2e-3),
        ("section.patches[1].center[1]", lambda d: with_patch(OFF_CENTRE, center_nm=(1.5 + d, 0.5)), 0.15),
        ("section.height", lambda d: replace(FIN, shape=Rectangle(20.0, 7.0 + d)), 0.15),
        ("section.layers[1].sides.top", lambda d: with_layer(COAT, sides=(("bottom", 0.0), ("top", 2.0 + d))), 0.15),
    ],
)
def test_central_differences(name: str, vary: Callable[[float], Section], step: float) -> None:
    """Sections drawn and meshed anew with a dimension changed; the step's own error is below 1e-6."""
    _, by = solved(vary(0.0), 2)
    numbers = differences(vary, step, 2)
    np.testing.assert_allclose(by[name], numbers, atol=1e-4 * np.abs(numbers).max(), rtol=0)


def test_uniform_growth_of_parts() -> None:
    """Outlines moved alone: a core that grows at the cost of its shell, and both together."""
    _, by = solved(CORE_SHELL, 3, 1e-7)
    # A larger core with its shell as thick as before moves both outlines.
    both = by["growth of core"] + by["growth of rim"]
    np.testing.assert_allclose(both, 2 * by["section.diameter"], rtol=1e-6)
    np.testing.assert_allclose(by["growth of rim"], by["section.layers[1].thickness"], rtol=1e-6)
    assert (by["growth of rim"] < 0).all()


def test_what_carriers_do_not_meet_moves_nothing() -> None:
    """An insulator around the core: its outer outline is no wall of theirs."""
    section = Section(Circle(12.0), "well", layers=(Layer(3.0, "barrier", carriers="excluded"),))
    _, by = solved(section, 3)
    np.testing.assert_array_equal(by["section.layers[1].thickness"], 0.0)
    np.testing.assert_allclose(by["growth of core"], 2 * by["section.diameter"], rtol=1e-9)
    assert not any(name.endswith(("offset", "conduction_edge")) for name in by)


def test_a_dimension_at_its_limit() -> None:
    """A stadium's ends are half circles: its radius can only be made smaller, its height only larger."""
    _, by = solved(Section(Rectangle(20.0, 8.0, 4.0), "well"), 3)
    _, near = solved(Section(Rectangle(20.0, 8.0, 3.98), "well"), 3)
    for name in ("section.corner_radius", "section.height", "section.width"):
        np.testing.assert_allclose(by[name], near[name], atol=2e-2 * np.abs(by[name]).max())


def group(masses: tuple[float, float], axis: Array) -> tuple[ValleyGroup, Array]:
    along, across = masses
    tensor = np.eye(3) / across + np.outer(axis, axis) * (1 / along - 1 / across)
    return ValleyGroup("Delta", "Delta", 2, {"well": tensor}, {"well": 0.0}, {"well": 0.0}), tensor


def test_masses_of_an_oblique_valley() -> None:
    """T = hbar^2/2 k W k is linear in W: along and across add up to dE/d(log m) = -E, and differences agree."""
    axis = np.array([1.0, 2.0, 1.5]) / np.sqrt(7.25)
    shape: Shape = Ellipse(12.0, 8.0)
    valley = Valley("Delta", longitudinal_mass=0.916, transverse_mass=0.19, axis=(0, 0, 1))
    own = Material("well", valleys=(valley,), conduction_edge_eV=0.0)
    with Mesher(Section(shape, "well").pieces()) as mesher:
        coarse, _ = mesher.mesh(SizeField(2.0))
    edges = outline_edges(coarse)
    space = Space(coarse)

    def lowest(masses: tuple[float, float]) -> tuple[float, Array, Operator]:
        operator = Operator((coefficients(group(masses, axis)[1], 0.0),))
        pencil = build(space, operator)
        value, state = dense.eigh(pencil.h0.toarray(), pencil.mass.toarray(), subset_by_index=[0, 0])
        return float(value[0]), pencil.spread(state), operator

    energy, state, operator = lowest((0.916, 0.19))
    medium = Medium(np.array([c.quadratic[:2, :2, 0, 0].real for c in operator.by_region]), np.zeros(1))
    response = respond(space, edges, medium, state, Pairs(np.zeros(1, int), np.zeros(1, int), np.array([energy])))
    found = {
        of: float(row[0] / response.norm[0])
        for of, _, row in sensitivity.by_masses(
            response, coarse.regions, {"well": own}, group((0.916, 0.19), axis)[0]
        )
    }  # fmt: skip
    assert list(found) == ["materials.well.Delta.longitudinal_mass", "materials.well.Delta.transverse_mass"]
    one, two = found.values()
    assert 0.916 * one + 0.19 * two == pytest.approx(-energy, rel=1e-10)
    h = 1e-4
    assert one == pytest.approx((lowest((0.916 + h, 0.19))[0] - lowest((0.916 - h, 0.19))[0]) / (2 * h), rel=1e-6)
    assert two == pytest.approx((lowest((0.916, 0.19 + h))[0] - lowest((0.916, 0.19 - h))[0]) / (2 * h), rel=1e-5)


TENSOR = np.array([[12.0, 3.0, 2.0], [3.0, 9.0, -1.0], [2.0, -1.0, 7.0]])


def discrete(mesh: Mesh, operator: Operator, k_per_nm: float, count: int = 3) -> tuple[Array, NDArray[Any]]:
    """Energies of a mesh with masses at these energies, each found where the n-th eigenvalue of T(E) meets E."""
    space = Space(mesh)
    energies, states = [], []
    for n in range(count):

        def meets(energy: float, n: int = n) -> tuple[float, NDArray[Any]]:
            pencil = build(space, operator.at(energy))
            value, vector = dense.eigh(pencil.at(k_per_nm).toarray(), pencil.mass.toarray(), subset_by_index=[n, n])
            return float(value[0]), pencil.spread(vector)[:, 0]

        energy = float(optimize.newton(lambda e, meets=meets: meets(e)[0] - e, 0.3, tol=1e-14))
        energies.append(energy)
        states.append(meets(energy)[1])
    return np.array(energies), np.column_stack(states)


@pytest.mark.parametrize(
    ("potential", "alpha", "k_per_nm"),
    [(False, (), 0.0), (True, (), 0.0), (False, (2.0, 0.7), 0.0), (True, (2.0, 0.7), 0.0), (False, (), 0.4)],
    ids=["plain", "potential", "nonparabolic", "both", "in motion"],
)
def test_exact_for_the_discrete_energies(potential: bool, alpha: tuple[float, ...], k_per_nm: float) -> None:
    """A coarse curved mesh of two materials stretched and sheared as a whole: no error of the mesh enters."""
    section = Section(Circle(12.0), "well", layers=(Layer(3.0, "barrier"),))
    with Mesher(section.pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(6.0, turn_cells=8))
    regions = [coefficients(TENSOR, 0.0), coefficients(1.3 * np.diag([11.0, 11.0, 11.0]), 0.4)]
    energy_at = (lambda x, y: 0.01 * x + 0.002 * (x + y) ** 2) if potential else None
    operator = Operator(tuple(regions), energy_at, nonparabolicity_per_eV=alpha)
    energies, states = discrete(mesh, operator, k_per_nm)
    depth = 2 if k_per_nm == 0 else 3
    medium = Medium(
        np.array([c.quadratic[:depth, :depth, 0, 0].real for c in regions]),
        np.array([0.0, 0.4]),
        np.array(alpha) if alpha else None,
        energy_at,
        k_per_nm,
    )
    edges = outline_edges(mesh)
    numbers = np.arange(3)
    response = respond(Space(mesh), edges, medium, states, Pairs(numbers, numbers, energies))
    stretch, shift = np.array([[0.3, 0.5], [-0.2, 0.7]]), np.array([0.4, -0.9])
    velocity = mesh.points @ stretch.T + shift
    found = (response.moved(edges, velocity[edges.used][None])[0] / response.norm).real
    h = 1e-5
    ahead, back = (discrete(replace(mesh, points=mesh.points + s * velocity), operator, k_per_nm)[0] for s in (h, -h))
    np.testing.assert_allclose(found, (ahead - back) / (2 * h), rtol=1e-6)


@pytest.mark.parametrize("alpha", [(), (1.5,)], ids=["parabolic", "nonparabolic"])
def test_straight_cells_in_a_potential(alpha: tuple[float, ...]) -> None:
    """Everything moved by a vector in a linear potential moves by its fall; a stretch agrees with differences."""
    with Mesher(Section(Rectangle(10.0, 8.0), "well").pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(4.0))
    slope = np.array([0.013, -0.021])
    operator = Operator(
        (coefficients(TENSOR, 0.0),), lambda x, y: slope[0] * x + slope[1] * y, nonparabolicity_per_eV=alpha
    )
    energies, states = discrete(mesh, operator, 0.0, 2)
    numbers = np.arange(2)
    grown = np.array(alpha) if alpha else None
    medium = Medium(HBAR2_OVER_2M0 * TENSOR[None, :2, :2], np.zeros(1), grown, operator.potential)
    edges = outline_edges(mesh)
    response = respond(Space(mesh), edges, medium, states, Pairs(numbers, numbers, energies))
    velocity = np.stack([np.broadcast_to([0.6, 0.8], mesh.points.shape), mesh.points @ [[0.3, -0.2], [0.5, 0.7]]])
    shifted, stretched = response.moved(edges, velocity[:, edges.used]) / response.norm
    np.testing.assert_allclose(shifted, slope @ [0.6, 0.8], rtol=1e-9)
    h = 1e-5
    ahead, back = (discrete(replace(mesh, points=mesh.points + s * velocity[1]), operator, 0.0, 2)[0] for s in (h, -h))
    np.testing.assert_allclose(stretched, (ahead - back) / (2 * h), rtol=1e-6)


def test_merged_entries() -> None:
    one = (Sensitivity("section.width", "eV_per_nm", np.array([1.0, 2.0])),)
    two = (
        Sensitivity("section.width", "eV_per_nm", np.array([5.0, 6.0, 7.0])),
        Sensitivity("materials.Si.Delta.transverse_mass", "eV_per_m0", np.array([-1.0, -2.0, -3.0])),
    )
    width, mass = sensitivity.merged([one, two], [(1, 0), (0, 0), (1, 1), (0, 1), (1, 2)])
    assert (width.of, mass.of) == ("section.width", "materials.Si.Delta.transverse_mass")
    np.testing.assert_array_equal(width.values, [5, 1, 6, 2, 7])
    np.testing.assert_array_equal(mass.values, [-1, 0, -2, 0, -3])


def test_dimensions_of_a_section() -> None:
    """Every length that is given, by the path of its key."""
    section = Section(
        Rectangle(20.0, 8.0, 1.0),
        "well",
        layers=(Layer(2.0, "barrier"), Layer(1.0, "barrier", sides=(("top", 3.0), ("left", 0.0)))),
        patches=(Patch(Circle(4.0), "void", (1.0, 2.0)),),
    )
    assert {d.path: d.value_nm for d in dimensions(section)} == {
        "section.width": 20.0,
        "section.height": 8.0,
        "section.corner_radius": 1.0,
        "section.layers[1].thickness": 2.0,
        "section.layers[2].thickness": 1.0,
        "section.layers[2].sides.top": 3.0,
        "section.patches[1].diameter": 4.0,
        "section.patches[1].center[1]": 1.0,
        "section.patches[1].center[2]": 2.0,
    }
    by_path = {d.path: d for d in dimensions(section)}
    with pytest.raises(InputError):
        by_path["section.corner_radius"].loops(5.0)
    assert by_path["section.patches[1].diameter"].loops(6.0)[3].area == pytest.approx(math.pi * 9)


def test_outline_of_a_tube_knows_rim_and_hole() -> None:
    with Mesher(Section(Circle(8.0), "void", layers=(Layer(6.0, "well"),)).pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(3.0, turn_cells=10))
    edges = outline_edges(mesh)
    radius = np.linalg.norm(mesh.points[edges.nodes], axis=2)
    assert edges.wall.all()
    np.testing.assert_allclose(radius[edges.rim], 10.0, rtol=1e-4)
    np.testing.assert_allclose(radius[~edges.rim], 4.0, rtol=1e-4)
    outward = np.einsum("enx,enx->en", edges.normals, mesh.points[edges.nodes]) / radius
    np.testing.assert_allclose(outward, np.where(edges.rim, 1.0, -1.0)[:, None] * np.ones(5), atol=1e-3)


def test_a_growth_that_tears_a_corner_is_not_told() -> None:
    """A core of which a patch takes the right half: its outline ends at walls, which stay while it grows."""
    half = Patch(shape=Rectangle(5.0, 6.0), material="barrier", center_nm=(2.5, 0.0))
    _, torn = solved(Section(Rectangle(10.0, 6.0), "well", patches=(half,)), 1, 1e-3)
    _, whole = solved(Section(Rectangle(10.0, 6.0), "well", layers=(Layer(2.0, "barrier"),)), 1, 1e-3)
    assert "growth of rim" in torn and "growth of core" not in torn
    assert {"growth of rim", "growth of core"} <= set(whole)
