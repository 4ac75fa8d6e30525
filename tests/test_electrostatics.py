"""Poisson's equation: closed forms, balances and invariances."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import iv

from wiresolve.describe.curves import Arc, EllipseArc, Line, Loop, Parabolas, Segment, Spline, circle
from wiresolve.describe.section import VOID, Piece
from wiresolve.errors import ConvergenceError
from wiresolve.fem.condensed import outside
from wiresolve.fem.estimate import finer
from wiresolve.fem.field_corners import field_corners
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.named_edges import NamedEdges, edges_along
from wiresolve.fem.space import Space
from wiresolve.physics.electrostatics import (
    Field,
    Pinned,
    SheetCharge,
    at_quadrature,
    capacitances,
    improved,
    poisson_field,
)
from wiresolve.physics.nonlinear_poisson import ChargedField, nonlinear
from wiresolve.units import EPSILON0_PER_V_NM, KB

Array = NDArray[np.float64]
OXIDE, SEMICONDUCTOR = 3.9, 11.7
LOBE = tuple(
    (5 * math.cos(t) + math.cos(2 * t), 4 * math.sin(t)) for t in np.linspace(0, 2 * math.pi, 16, endpoint=False)
)


def piece(name: str, loop: Loop, material: str = "any", carriers: bool = True) -> Piece:
    return Piece(name, loop, material, carriers, 0.0)


def box(width: float, height: float, x: float = 0.0, y: float = 0.0) -> Loop:
    """A rectangle from its lower left corner, its sides named."""
    corners = [(x, y), (x + width, y), (x + width, y + height), (x, y + height)]
    names = ("bottom", "right", "top", "left")
    return Loop(tuple(Line(corners[i], corners[(i + 1) % 4], name) for i, name in enumerate(names)))


def quarters(radius: float) -> tuple[Arc, ...]:
    """A circle of four quarters, named after where they are."""
    names = ("top", "left", "bottom", "right")
    return tuple(Arc((0.0, 0.0), radius, (k + 0.5) * math.pi / 2, math.pi / 2, n) for k, n in enumerate(names))


def pair_of(pieces: Sequence[Piece], size: float, turn_cells: int = 16) -> tuple[Mesh, Mesh]:
    with Mesher(pieces) as mesher:
        return mesher.mesh(SizeField(size, turn_cells=turn_cells))


@cache
def ring(size: float = 3.0) -> tuple[Mesh, Mesh]:
    """A wire of 10 nm radius in an insulator to 15 nm."""
    return pair_of([piece("layer 1", circle(15.0), carriers=False), piece("core", circle(10.0))], size)


def by_name(mesh: Mesh, values: Mapping[str, float]) -> list[float]:
    return [values[region.name] for region in mesh.regions]


def ring_field(mesh: Mesh, donors: float = 0.0, scale: float = 1.0) -> Field:
    return poisson_field(
        Space(mesh, whole=True),
        by_name(mesh, {"core": SEMICONDUCTOR * scale, "layer 1": OXIDE * scale}),
        {"gate": edges_along(mesh, circle(15.0).segments)},
        density_by_region_per_nm3=by_name(mesh, {"core": donors * scale, "layer 1": 0.0}),
    )


def electrons(phi: Array) -> tuple[Array, Array]:
    """Boltzmann's law at 77 K."""
    with np.errstate(over="ignore"):
        density = -1e-4 * np.exp(phi / (77 * KB))
    return density, density / (77 * KB)


class TestNamedEdges:
    @pytest.mark.parametrize("inner", [True, False])
    def test_length_and_second_moment_of_a_circle(self, inner: bool) -> None:
        radius = 10.0 if inner else 15.0
        edges = edges_along(ring()[0], circle(radius).segments)
        x, _ = ring()[0].points.T
        assert edges.length_nm == pytest.approx(2 * math.pi * radius, rel=1e-9)
        assert edges.load() @ x**2 == pytest.approx(math.pi * radius**3, rel=1e-8)
        assert edges.missing_nm < 1e-6
        assert np.array_equal(edges.cells[:, 1] >= 0, np.full(len(edges.nodes), inner))

    def test_a_density_of_each_edge_is_summed(self) -> None:
        edges = edges_along(ring()[0], circle(15.0).segments)
        each = np.linspace(1, 2, len(edges.nodes))
        assert edges.load(each).sum() == pytest.approx(each @ edges.weights_nm.sum(axis=1))

    def test_sides_of_a_rectangle(self) -> None:
        outline = box(8.0, 5.0)
        mesh, _ = pair_of([piece("core", outline)], 2.0)
        for side, length in zip(outline.segments, (8.0, 5.0, 8.0, 5.0), strict=True):
            assert edges_along(mesh, [side]).length_nm == pytest.approx(length, rel=1e-12)
        two = edges_along(mesh, outline.segments[:2])
        assert two.length_nm == pytest.approx(13.0)
        assert set(two.segment) == {0, 1}

    @pytest.mark.parametrize(
        "curve",
        [
            EllipseArc((0.0, 0.0), 6.0, 3.0, 0.3, 0.0, 2 * math.pi, "rim"),
            Spline((*LOBE, LOBE[0]), "rim"),
        ],
    )
    def test_other_closed_curves(self, curve: Segment) -> None:
        mesh, _ = pair_of([piece("core", Loop((curve,)))], 1.5, 24)
        edges = edges_along(mesh, [curve])
        t, weights = curve.quadrature()
        length = float(weights @ np.linalg.norm(curve.tangent(t), axis=1))
        assert edges.length_nm == pytest.approx(length, rel=1e-6)

    def test_a_chain_of_parabolas(self) -> None:
        chain = Parabolas(((6.0, 0.0), (4.5, 3.75), (0.0, 5.0), (-4.5, 3.75), (-6.0, 0.0)), "chain")
        mesh, _ = pair_of([piece("core", Loop((Line((-6.0, 0.0), (6.0, 0.0), "base"), chain)))], 1.0, 24)
        edges = edges_along(mesh, [chain])
        assert edges.missing_nm < 1e-5 * edges.length_nm
        assert edges.length_nm == pytest.approx(edges.wanted_nm, rel=1e-5)

    def test_a_curve_beside_the_mesh_has_no_edges(self) -> None:
        edges = edges_along(ring()[0], circle(15.1).segments)
        assert not len(edges.nodes)
        assert edges.missing_nm == pytest.approx(2 * math.pi * 15.1)

    def test_a_part_of_a_rim(self) -> None:
        parts = quarters(7.0)
        mesh, _ = pair_of([piece("core", Loop(parts))], 2.0, 12)
        assert edges_along(mesh, parts[1:2]).length_nm == pytest.approx(3.5 * math.pi, rel=1e-8)


class TestLinear:
    def test_layers_between_plates_are_in_series(self) -> None:
        lower, upper = box(4.0, 1.0), box(4.0, 2.0, y=1.0)
        mesh, _ = pair_of([piece("patch 1", lower), piece("patch 2", upper)], 1.0)
        gates = {"low": edges_along(mesh, lower.segments[:1]), "high": edges_along(mesh, upper.segments[2:3])}
        poisson = poisson_field(Space(mesh, whole=True), by_name(mesh, {"patch 1": 3.9, "patch 2": 22.0}), gates)
        names, matrix = capacitances(poisson)
        series = 4.0 * EPSILON0_PER_V_NM / (1.0 / 3.9 + 2.0 / 22.0)
        assert names == ("low", "high")
        assert matrix == pytest.approx(series * np.array([[1.0, -1.0], [-1.0, 1.0]]), rel=1e-12)

    def test_capacitance_is_twice_the_energy(self) -> None:
        pieces = [piece("layer 1", circle(10.0)), piece("core", circle(4.0, center=(3.0, 0.0)), VOID)]
        mesh, _ = pair_of(pieces, 2.5)
        gates = {
            "rim": edges_along(mesh, circle(10.0).segments),
            "core": edges_along(mesh, circle(4.0, center=(3.0, 0.0)).segments),
        }
        poisson = poisson_field(Space(mesh, whole=True), [9.0], gates)
        _, matrix = capacitances(poisson)
        phi = poisson.solve_linear(np.zeros(len(mesh.points)), poisson.held_values({"rim": 0.0, "core": 1.0}))
        assert matrix[1, 1] == pytest.approx(2 * poisson.energy(phi), rel=1e-12)
        assert matrix == pytest.approx(matrix.T, rel=1e-10)

    def test_capacitance_converges_like_the_eighth_power_of_the_size(self) -> None:
        exact, errors = 2 * math.pi * EPSILON0_PER_V_NM * 9.0 / math.acosh((16 + 100 - 9) / 80), []
        for turn in (16, 32):
            pieces = [piece("layer 1", circle(10.0)), piece("core", circle(4.0, center=(3.0, 0.0)), VOID)]
            mesh, _ = pair_of(pieces, 40.0 / turn, turn)
            gates = {
                "rim": edges_along(mesh, circle(10.0).segments),
                "core": edges_along(mesh, circle(4.0, center=(3.0, 0.0)).segments),
            }
            _, matrix = capacitances(poisson_field(Space(mesh, whole=True), [9.0], gates))
            errors.append((matrix[0, 0] / exact - 1, len(mesh.points)))
        (coarse, few), (fine, many) = errors
        assert math.log(coarse / fine) / math.log(many / few) * 2 > 7.0

    def test_charge_on_an_interface_is_a_jump_of_the_flux(self) -> None:
        mesh, (sheet, donors) = ring(1.5)[0], (0.02, 1e-3)
        core = ring_field(mesh, donors)
        interface = edges_along(mesh, circle(10.0).segments)
        poisson = poisson_field(
            core.space,
            by_name(mesh, {"core": SEMICONDUCTOR, "layer 1": OXIDE}),
            core.gates,
            sheets=[SheetCharge(interface, sheet)],
            density_by_region_per_nm3=by_name(mesh, {"core": donors, "layer 1": 0.0}),
        )
        load = poisson.fixed_load
        phi = poisson.solve_linear(load, poisson.held_values({"gate": 0.0}))
        line = sheet * 2 * math.pi * 10 + donors * math.pi * 100
        drop = line * math.log(1.5) / (2 * math.pi * EPSILON0_PER_V_NM * OXIDE)
        assert phi[interface.points] == pytest.approx(drop, rel=1e-7)
        assert poisson.charges(phi, load)["gate"] == pytest.approx(-line, rel=1e-7)
        assert poisson.charges(phi, load)["gate"] + load.sum() == pytest.approx(0.0, abs=1e-12 * line)

    def test_pinned_surfaces_count_in_the_balance(self) -> None:
        outline = box(6.0, 6.0)
        mesh, _ = pair_of([piece("core", outline)], 2.0)
        sides = [edges_along(mesh, [side]) for side in outline.segments]
        ramp = np.array([0.1 + 0.01 * i for i in range(len(sides[0].nodes))])
        poisson = poisson_field(
            Space(mesh, whole=True),
            [SEMICONDUCTOR],
            {"top": sides[2]},
            pinned=[Pinned(sides[0], ramp), Pinned(sides[1], 0.2)],
            density_by_region_per_nm3=[1e-3],
        )
        load = poisson.fixed_load
        phi = poisson.solve_linear(load, poisson.held_values({"top": 0.5}))
        found = poisson.charges(phi, load)
        assert set(found) == {"top", "pinned"}
        assert found["top"] + found["pinned"] + 36e-3 == pytest.approx(0.0, abs=1e-12)
        shared = np.intersect1d(sides[1].points, sides[2].points)
        assert phi[shared] == pytest.approx(0.5)
        inside = np.setdiff1d(sides[1].points, np.concatenate([sides[0].points, sides[2].points]))
        assert phi[inside] == pytest.approx(0.2)

    def test_all_voltages_shifted(self) -> None:
        outline = box(6.0, 4.0)
        mesh, _ = pair_of([piece("core", outline)], 1.5)
        gates = {"low": edges_along(mesh, outline.segments[:1]), "high": edges_along(mesh, outline.segments[2:3])}
        poisson = poisson_field(Space(mesh, whole=True), [9.0], gates, density_by_region_per_nm3=[2e-3])
        load = poisson.fixed_load
        one = poisson.solve_linear(load, poisson.held_values({"low": 0.1, "high": -0.3}))
        other = poisson.solve_linear(load, poisson.held_values({"low": 1.1, "high": 0.7}))
        assert other == pytest.approx(one + 1.0, abs=1e-12)

    def test_mirror(self) -> None:
        found = []
        for side in (-1.0, 1.0):
            off = circle(3.0, center=(2.0 * side, 1.0))
            mesh, _ = pair_of([piece("core", circle(8.0)), piece("patch 1", off)], 1.5, 24)
            gate = {"gate": edges_along(mesh, circle(8.0).segments)}
            density = by_name(mesh, {"core": 1e-3, "patch 1": -4e-3})
            poisson = poisson_field(
                Space(mesh, whole=True),
                by_name(mesh, {"core": 4.0, "patch 1": 12.0}),
                gate,
                density_by_region_per_nm3=density,
            )
            phi = poisson.solve_linear(poisson.fixed_load, poisson.held_values({"gate": 0.0}))
            x, y = mesh.points.T
            found.append([poisson.integral(phi), side * poisson.integral(phi * x), poisson.integral(phi * y)])
        assert found[0] == pytest.approx(found[1], rel=1e-6)

    def test_permittivity_and_charge_scaled_together(self) -> None:
        one, other = ring_field(ring()[0], 1e-3), ring_field(ring()[0], 1e-3, scale=7.0)
        phi = [f.solve_linear(f.fixed_load, f.held_values({"gate": 0.3})) for f in (one, other)]
        assert phi[0] == pytest.approx(phi[1], rel=1e-11)

    def test_nothing_held(self) -> None:
        mesh, _ = ring()
        # The shell takes back what the core has: outside of it there is no field.
        shell = -100.0 / 125.0 * 1e-3
        poisson = poisson_field(
            Space(mesh, whole=True),
            [SEMICONDUCTOR] * 2,
            {},
            density_by_region_per_nm3=by_name(mesh, {"core": 1e-3, "layer 1": shell}),
        )
        load = poisson.fixed_load
        phi = poisson.solve_linear(load, np.zeros(0))
        assert poisson.integral(phi) == pytest.approx(0.0, abs=1e-9)
        radius = np.hypot(*mesh.points.T)
        epsilon = EPSILON0_PER_V_NM * SEMICONDUCTOR
        inner = -1e-3 * radius**2 / (4 * epsilon)
        at_rim = -1e-3 * 100 / (4 * epsilon)
        enclosed = 1e-3 * 100 - shell * 100
        outer = at_rim - shell * (radius**2 - 100) / (4 * epsilon) - enclosed / (2 * epsilon) * np.log(radius / 10)
        wanted = np.where(radius <= 10, inner, outer)
        assert phi - phi.mean() == pytest.approx(wanted - wanted.mean(), abs=1e-6)

    def test_nothing_held_but_charged(self) -> None:
        poisson = poisson_field(Space(ring()[0], whole=True), [9.0, 9.0], {}, density_by_region_per_nm3=[1e-3, 0.0])
        with pytest.raises(ValueError, match="must be neutral"):
            poisson.solve_linear(poisson.fixed_load, np.zeros(0))

    def test_bad_input(self) -> None:
        mesh, _ = ring()
        rim = edges_along(mesh, circle(15.0).segments)
        with pytest.raises(ValueError, match="space of all cells"):
            poisson_field(Space(mesh), [1.0, 1.0], {"gate": rim})
        with pytest.raises(ValueError, match="no edge of the mesh lies on the gate 'far'"):
            poisson_field(Space(mesh, whole=True), [1.0, 1.0], {"far": edges_along(mesh, circle(20.0).segments)})
        with pytest.raises(ValueError, match="'one' and 'two' touch"):
            poisson_field(Space(mesh, whole=True), [1.0, 1.0], {"one": rim, "two": rim})


class TestOutside:
    def test_what_is_left_is_the_complement(self) -> None:
        poisson = ring_field(ring()[0])
        matrix, free = poisson.stiffness, poisson.free
        inner, outer = free[::7], np.setdiff1d(free, free[::7])
        found = outside(matrix, inner, outer)
        whole = matrix.toarray()
        less = whole[np.ix_(inner, outer)] @ np.linalg.solve(whole[np.ix_(outer, outer)], whole[np.ix_(outer, inner)])
        wanted = whole[np.ix_(inner, inner)] - less
        assert found.reduced.toarray() == pytest.approx(wanted, abs=1e-12 * np.abs(wanted).max())

    def test_nothing_outside(self) -> None:
        poisson = ring_field(ring()[0])
        found = outside(poisson.stiffness, poisson.free, np.zeros(0, dtype=np.int64))
        assert found.factor is None
        assert (found.reduced != poisson.stiffness[poisson.free][:, poisson.free]).nnz == 0

    def test_a_step_solves_the_whole_equation(self) -> None:
        mesh, _ = ring()
        poisson = ring_field(mesh)
        charged = ChargedField(poisson, np.flatnonzero(mesh.admitted))
        load = np.cos(np.arange(len(mesh.points)))
        found = charged.solve(poisson.held_values({"gate": -3.0}), electrons, np.zeros(len(mesh.points)), 1e-10)
        # So few electrons do not answer: the step is the linear solution.
        step = charged.stepped(found.factor, load)
        assert step == pytest.approx(poisson.solve_linear(load, np.zeros(len(poisson.held))), rel=1e-6, abs=1e-6)


class TestNonlinear:
    def solved(
        self, gate_V: float, start_V: float = 0.0, donors: float = 0.0, scale: float = 1.0
    ) -> tuple[Field, Array, Array]:
        mesh, _ = ring()
        poisson = ring_field(mesh, donors, scale)
        found = nonlinear(
            poisson,
            poisson.held_values({"gate": gate_V}),
            lambda phi: tuple(scale * part for part in electrons(phi)),  # type: ignore[return-value]
            np.flatnonzero(mesh.admitted),
            np.full(len(mesh.points), start_V),
            1e-10,
        )
        return poisson, found.phi, found.load

    def test_a_charge_in_proportion_to_the_potential(self) -> None:
        # Screening in proportion: phi = phi(R) I0(r/l)/I0(R/l), the modified Bessel function (elementary).
        mesh, _ = ring(1.5)
        poisson, length = ring_field(mesh), 4.0
        slope = -EPSILON0_PER_V_NM * SEMICONDUCTOR / length**2
        charged = ChargedField(poisson, np.flatnonzero(mesh.admitted))
        start = np.zeros(len(mesh.points))
        held = poisson.held_values({"gate": 1.0})
        found = charged.solve(held, lambda phi: (slope * phi, np.full_like(phi, slope)), start, 1e-9)
        x = 10.0 / length
        inside = 2 * math.pi * EPSILON0_PER_V_NM * SEMICONDUCTOR * x * iv(1, x) / iv(0, x)
        outside = 2 * math.pi * EPSILON0_PER_V_NM * OXIDE / math.log(1.5)
        surface = outside / (inside + outside)
        radius = np.hypot(*mesh.points.T)
        core = radius < 10.0 + 1e-6
        assert found.factors == 1
        assert found.phi[core] == pytest.approx(surface * iv(0, radius[core] / length) / iv(0, x), rel=2e-6)
        assert poisson.charges(found.phi, found.load)["gate"] == pytest.approx(surface * inside, rel=1e-7)

    @pytest.mark.parametrize("gate_V", [-1.0, 0.3, 2.0])
    def test_the_start_does_not_matter_and_charge_balances(self, gate_V: float) -> None:
        poisson, phi, load = self.solved(gate_V)
        for start in (-2.0, 1.0):
            assert self.solved(gate_V, start)[1] == pytest.approx(phi, abs=1e-9)
        total = load.sum()
        assert poisson.charges(phi, load)["gate"] + total == pytest.approx(0.0, abs=1e-8 * abs(total) + 1e-12)

    def test_permittivity_and_charge_scaled_together(self) -> None:
        assert self.solved(0.7)[1] == pytest.approx(self.solved(0.7, scale=5.0)[1], abs=1e-9)

    def test_isolated_section_is_neutral(self) -> None:
        mesh, _ = ring()
        donors = 2e-3
        poisson = poisson_field(
            Space(mesh, whole=True),
            [SEMICONDUCTOR] * 2,
            {},
            density_by_region_per_nm3=by_name(mesh, {"core": donors, "layer 1": 0.0}),
        )
        for start in (-1.0, 0.0, 1.0):
            found = nonlinear(
                poisson,
                np.zeros(0),
                electrons,
                np.flatnonzero(mesh.admitted),
                np.full(len(mesh.points), start),
                1e-10,
            )
            # Donors and electrons in the same place cancel there: the potential is flat.
            assert found.load.sum() == pytest.approx(0.0, abs=1e-9 * donors * math.pi * 100)
            assert found.phi == pytest.approx(77 * KB * math.log(donors / 1e-4), abs=1e-8)

    @pytest.mark.parametrize("start", [-0.5, 0.1, 1.0])
    def test_a_root_with_an_edge_at_zero_temperature(self, start: float) -> None:
        # Between plates, density -c sqrt(phi) makes phi = (a y)^4 from where it is zero: phi'' = 12 a^4 y^2.
        height, rise = 6.0, 0.15
        factor = 12 * EPSILON0_PER_V_NM * SEMICONDUCTOR * rise**2
        outline = box(1.0, height)
        with Mesher([piece("core", outline)]) as mesher:
            mesh, _ = mesher.mesh(SizeField(1.0))
        gates = {name: edges_along(mesh, [outline.segments[k]]) for name, k in (("low", 0), ("high", 2))}
        poisson = poisson_field(Space(mesh, whole=True), [SEMICONDUCTOR], gates)

        def density(phi: Array) -> tuple[Array, Array]:
            root = np.sqrt(np.maximum(phi, 0.0))
            with np.errstate(divide="ignore"):
                return -factor * root, np.where(root > 0, -factor / (2 * root), 0.0)

        held = poisson.held_values({"low": 0.0, "high": (rise * height) ** 4})
        found = nonlinear(poisson, held, density, np.arange(len(mesh.cells)), np.full(len(mesh.points), start), 1e-9)
        assert found.phi == pytest.approx((rise * mesh.points[:, 1]) ** 4, abs=1e-8)

    def test_steps_that_do_not_suffice_are_told(self) -> None:
        mesh, _ = ring()
        poisson = ring_field(mesh)
        charged = ChargedField(poisson, np.flatnonzero(mesh.admitted))
        with pytest.raises(ConvergenceError, match="after 2 steps"):
            charged.solve(poisson.held_values({"gate": 2.0}), electrons, np.zeros(len(mesh.points)), 1e-12, steps=2)

    def test_the_last_solution_is_a_start(self) -> None:
        mesh, _ = ring()
        poisson = ring_field(mesh)
        charged = ChargedField(poisson, np.flatnonzero(mesh.admitted))
        one = charged.solve(poisson.held_values({"gate": 0.500}), electrons, np.zeros(len(mesh.points)), 1e-10)
        two = charged.solve(poisson.held_values({"gate": 0.501}), electrons, one, 1e-10)
        assert two.phi == pytest.approx(self.solved(0.501)[1], abs=1e-9)
        assert two.iterations < one.iterations


class TestImproved:
    def fields(self, size: float) -> tuple[Field, Field, Array]:
        meshes = ring(size)
        return ring_field(meshes[0]), ring_field(meshes[1]), np.flatnonzero(meshes[0].admitted)

    def test_a_newton_step_finds_what_degree_six_does(self) -> None:
        coarse, fine, cells = self.fields(2.0)
        held = [f.held_values({"gate": 0.6}) for f in (coarse, fine)]
        phi = nonlinear(coarse, held[0], electrons, cells, np.zeros(len(coarse.space.nodes)), 1e-11).phi
        full = nonlinear(fine, held[1], electrons, cells, np.zeros(len(fine.space.nodes)), 1e-11).phi
        density, slope = electrons(at_quadrature(coarse.space, phi, fine.space, cells))
        better = improved(coarse, fine, phi, held[1], density, slope, cells)
        before = np.abs(full - better.before).max()
        assert np.abs(full - better.phi).max() < 0.01 * before
        assert better.change_V == pytest.approx(before, rel=0.02)

    def test_shares_add_up_to_the_error_of_the_capacitance(self) -> None:
        outer, inner = circle(10.0), circle(4.0, center=(4.0, 0.0))
        meshes = pair_of([piece("layer 1", outer), piece("core", inner, VOID)], 2.0, 24)
        coarse, fine = (
            poisson_field(
                Space(m, whole=True),
                [9.0],
                {"rim": edges_along(m, outer.segments), "core": edges_along(m, inner.segments)},
            )
            for m in meshes
        )
        voltages = {"rim": 0.0, "core": 1.0}
        nothing = np.zeros(len(coarse.space.nodes))
        phi = coarse.solve_linear(nothing, coarse.held_values(voltages))
        better = improved(coarse, fine, phi, fine.held_values(voltages))
        # Smythe's closed form for circles off each other's centre (from memory).
        exact = 2 * math.pi * EPSILON0_PER_V_NM * 9.0 / math.acosh((16 + 100 - 16) / 80)
        error = coarse.charges(phi, nothing)["core"] - exact
        assert 0.5 * abs(error) < better.share_eV_per_nm.sum() < 5 * abs(error)

    def test_refined_to_the_ends_of_gates(self) -> None:
        # Two facing quarters of a rim: the other two pose the same problem, so that C = eps.
        parts = quarters(7.0)
        right, left = parts[3], parts[1]
        voltages, errors = {"right": 1.0, "left": 0.0}, []
        with Mesher([piece("core", Loop(parts))]) as mesher:
            size = SizeField(3.0, turn_cells=12)
            for _ in range(3):
                meshes = mesher.mesh(size)
                edges: list[dict[str, NamedEdges]] = [
                    {s.name: edges_along(m, [s]) for s in (right, left)} for m in meshes
                ]
                coarse, fine = (
                    poisson_field(Space(m, whole=True), [1.0], e) for m, e in zip(meshes, edges, strict=True)
                )
                nothing = np.zeros(len(coarse.space.nodes))
                phi = coarse.solve_linear(nothing, coarse.held_values(voltages))
                errors.append(coarse.charges(phi, nothing)["right"] / EPSILON0_PER_V_NM - 1)
                share = improved(coarse, fine, phi, fine.held_values(voltages)).share_eV_per_nm
                corners = field_corners(meshes[0], [1.0], [e.nodes for e in edges[0].values()])
                # r^(1/2): at degree p the energy's error goes like p^(-2), so that the share is 5/9 of it.
                assert share.sum() / EPSILON0_PER_V_NM == pytest.approx(5 / 9 * errors[-1], rel=0.15)
                size = finer(coarse.space, share[:, None], size, corners, 1e-6 * EPSILON0_PER_V_NM)
        assert [round(c.exponent, 6) for c in corners] == [0.5] * 4
        assert errors[2] < 0.05 * errors[1]
        assert errors[1] < 0.2 * errors[0]


class TestFieldCorners:
    def exponents(
        self, pieces: Sequence[Piece], permittivity: Mapping[str, float], held: Sequence[Segment]
    ) -> dict[tuple[float, float], float]:
        mesh, _ = pair_of(pieces, 2.0)
        edges = [edges_along(mesh, [segment]).nodes for segment in held]
        found = field_corners(mesh, by_name(mesh, permittivity), edges)
        return {(round(c.x, 6) + 0.0, round(c.y, 6) + 0.0): c.exponent for c in found}

    def test_reentrant_corner_held_or_not(self) -> None:
        points = [(0.0, 0.0), (6.0, 0.0), (6.0, 3.0), (3.0, 3.0), (3.0, 6.0), (0.0, 6.0)]
        sides = [Line(p, points[(i + 1) % 6], "side") for i, p in enumerate(points)]
        shape = [piece("core", Loop(tuple(sides)))]
        for held in ([], sides):
            assert self.exponents(shape, {"core": 1.0}, held) == {(3.0, 3.0): pytest.approx(2 / 3)}
        mixed = self.exponents(shape, {"core": 1.0}, [sides[2]])
        assert mixed[3.0, 3.0] == pytest.approx(1 / 3)

    def test_a_strip_of_metal_inside_ends_like_a_slit(self) -> None:
        halves = [piece("below 1", box(8.0, 3.0)), piece("above 1", box(8.0, 3.0, y=3.0))]
        strip = [piece("patch 1", box(4.0, 3.0))]
        found = self.exponents(
            [*halves, *strip],
            dict.fromkeys(("below 1", "above 1", "patch 1"), 5.0),
            [Line((0.0, 3.0), (4.0, 3.0), "x")],
        )
        assert found == {(4.0, 3.0): pytest.approx(0.5, rel=1e-5)}

    def test_a_corner_of_high_permittivity(self) -> None:
        # A quarter of weight k in a plane of weight 1: the symmetric exponent is (4/pi) arctan of
        # sqrt((3 + k)/(1 + 3 k)) (R. B. Kellogg, Appl. Anal. 4, 101 (1975)).
        pieces = [piece("below 1", box(8.0, 8.0)), piece("patch 1", box(4.0, 4.0))]
        k = 11.7
        found = self.exponents(pieces, {"below 1": 1.0, "patch 1": k}, [])
        wanted = 4 / math.pi * math.atan(math.sqrt((3 + k) / (1 + 3 * k)))
        wanted = min(wanted, 2 - wanted)
        assert found[4.0, 4.0] == pytest.approx(wanted, rel=1e-6)
