"""`modes.vtu`, read back with PyVista and integrated with VTK's own shape functions."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import meshio
import numpy as np
import pytest
import pyvista
from vtkmodules.vtkCommonCore import vtkIdList
from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE, VTK_TRIANGLE

from tests.synthetic import (
    CORE_NM,
    RADIUS_NM,
    charged_result,
    core_shell_result,
    rectangle_problem,
    rectangle_result,
)
from wiresolve.describe.gates import Gate
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Hexagon, Rectangle
from wiresolve.output.fields import Fields
from wiresolve.output.mode_fields import modes_by_name
from wiresolve.output.vtk import plane, save, write_modes, write_section
from wiresolve.solve import solve

EDGE = "band_edge_of_first_valleys_eV"
SHEATHED = Section(Hexagon(across_flats_nm=8.0), "GaAs", layers=(Layer(thickness_nm=3.0, material="Al0.3Ga0.7As"),))


def integrals(grid: pyvista.UnstructuredGrid, values: np.ndarray) -> np.ndarray:
    """Integral of a nodal function's square over each cell, by VTK's functions and a collapsed Gauss rule."""
    t, w = np.polynomial.legendre.leggauss(9)
    t, w = (t + 1) / 2, w / 2
    u, v = np.meshgrid(t, t, indexing="ij")
    points = np.column_stack([u.ravel(), (v * (1 - u)).ravel()])
    weights = (w[:, None] * w[None, :] * (1 - u)).ravel()
    cell = grid.GetCell(0)
    shape, slope = [], []
    for point in points:
        functions, derivatives = [0.0] * 15, [0.0] * 45
        cell.InterpolateFunctions([*point, 0.0], functions)
        cell.InterpolateDerivs([*point, 0.0], derivatives)
        shape.append(functions)
        slope.append(np.reshape(derivatives[:30], (2, 15)))
    nodes = np.empty((grid.n_cells, 15), dtype=np.int64)
    ids = vtkIdList()
    for number in range(grid.n_cells):
        grid.GetCellPoints(number, ids)
        nodes[number] = [ids.GetId(i) for i in range(15)]
    at = grid.points[nodes][:, :, :2]
    jacobian = np.einsum("qda,cax->cqdx", np.array(slope), at)
    area = jacobian[..., 0, 0] * jacobian[..., 1, 1] - jacobian[..., 0, 1] * jacobian[..., 1, 0]
    inside = np.einsum("qa,ca->cq", np.array(shape), values[nodes])
    return np.einsum("q,cq,cq->c", weights, np.abs(area), inside**2)


def test_a_polynomial_mode_integrates_to_one(tmp_path: Path) -> None:
    write_modes(rectangle_result(), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert set(grid.celltypes) == {VTK_LAGRANGE_TRIANGLE}
    total = integrals(grid, grid.point_data["psi_01_per_nm"])
    assert total.sum() == pytest.approx(1, abs=1e-12)
    # The half on the left holds half of it, so cells carry their own values and not a permutation of them.
    left = grid.cell_centers().points[:, 0] < 0
    density = grid.point_data["density_01_per_nm2"]
    assert density == pytest.approx(grid.point_data["psi_01_per_nm"] ** 2, rel=1e-15)
    assert integrals(grid, np.ones(grid.n_points)).sum() == pytest.approx(200, rel=1e-12)
    assert 0.3 < total[left].sum() < 0.7


def test_curved_cells_hold_the_round_wire(tmp_path: Path) -> None:
    result = core_shell_result(5)
    write_modes(result, tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    area = integrals(grid, np.ones(grid.n_points))
    # Quartic arcs: the area is right to the eighth power of the angle that an edge spans.
    assert area.sum() == pytest.approx(math.pi * RADIUS_NM**2, rel=1e-7)
    core = grid.field_data["layer_names"].tolist().index("core")
    assert area[grid.cell_data["layer"] == core].sum() == pytest.approx(math.pi * CORE_NM**2, rel=1e-7)
    for index in range(1, 6):
        psi = grid.point_data[f"psi_{index:02d}_per_nm"]
        assert integrals(grid, psi).sum() == pytest.approx(1, abs=2e-4)


def test_names_and_fields_of_the_file(tmp_path: Path) -> None:
    result = core_shell_result(10)
    write_modes(result, tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    wanted = [
        f"{kind}_{i:02d}_{unit}" for i in range(1, 11) for kind, unit in (("psi", "per_nm"), ("density", "per_nm2"))
    ]
    assert set(grid.point_data.keys()) == {*wanted, "potential_energy_eV"}
    # What ParaView shows at first.
    assert grid.point_data.active_scalars_name == "psi_01_per_nm"
    assert set(grid.cell_data.keys()) == {"layer", "material", "axial_mass_of_first_valleys_m0", EDGE}
    assert grid.field_data["energy_eV"] == pytest.approx(result.energies_eV, rel=1e-15)
    assert grid.field_data["error_eV"] == pytest.approx(result.errors_eV, rel=1e-15)
    assert grid.field_data["level"].tolist() == [s.level for s in result.subbands]
    assert grid.field_data["valley"].tolist() == ["zone centre"] * 10
    assert grid.field_data["spin_degeneracy"].tolist() == [2] * 10
    assert grid.field_data["valley_degeneracy"].tolist() == [1] * 10
    assert grid.field_data["axial_mass_m0"].tolist() == [s.axial_mass for s in result.subbands]
    assert grid.field_data["subband"].tolist() == list(range(1, 11))
    assert grid.field_data["k_min_per_nm"].tolist() == [0.0] * 10
    assert grid.field_data["temperature_K"].tolist() == [4.2, 77.0, 300.0]
    assert grid.field_data["title"].tolist() == ["Round core in a shell"]
    assert grid.field_data["energy_zero"].tolist() == [result.energy_zero_text]
    assert grid.field_data["input_digest"].tolist() == [result.problem.digest]
    assert grid.field_data["cells"][0].startswith("curved, of degree 4")
    materials = grid.field_data["material_names"].tolist()
    barrier = grid.cell_data["material"] == materials.index("Al0.3Ga0.7As")
    assert np.all(grid.cell_data[EDGE][barrier] == 0.3)
    assert np.all(grid.cell_data[EDGE][~barrier] == 0.0)
    assert np.all(grid.points[:, 2] == 0)
    # The points of the mesh; those where the band edge jumps are there twice.
    at, found = result.mesh.points, {tuple(point) for point in grid.points[:, :2].tolist()}
    assert found == {tuple(point) for point in at.tolist()}
    on_interface = np.abs(np.hypot(*at.T) - CORE_NM) < 1e-5
    assert len(grid.points) == len(at) + on_interface.sum()


@pytest.mark.parametrize("linear", [False, True])
def test_the_same_result_gives_the_same_bytes(tmp_path: Path, linear: bool) -> None:
    result = core_shell_result(3)
    for name in ("a", "b"):
        write_modes(result, tmp_path / name, linear=linear)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


@pytest.mark.parametrize("section", [Section(Circle(9.0), "GaAs"), SHEATHED], ids=["round", "in a shell"])
def test_modes_of_a_solved_wire_hold_one_carrier_each(tmp_path: Path, section: Section) -> None:
    """The integral of the square by VTK's own functions, over curved cells and over straight ones at an interface."""
    problem = Problem("wire", section, Carriers(temperature_K=(77.0,)), Accuracy(subbands=6, energy_eV=1e-3))
    write_modes(solve(problem), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    for index in range(1, 7):
        assert integrals(grid, grid.point_data[f"psi_{index:02d}_per_nm"]).sum() == pytest.approx(1, abs=1e-8)


def test_complex_modes_have_both_parts_and_a_phase_that_goes_on(tmp_path: Path) -> None:
    """exp(i q.r) on a rectangle: its phase is q.r and turns more than once; a real mode beside it stays real."""
    result = rectangle_result()
    at, wave = result.mesh.points, np.array([0.9, -0.4])
    turning = np.exp(1j * at @ wave) / math.sqrt(200)
    both = np.column_stack([turning, result.modes[:, 0].astype(complex)])
    save(plane(Fields(result.mesh, modes_by_name(result.mesh, both))), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert set(grid.point_data.keys()) == {
        *("psi_01_real_per_nm", "psi_01_imaginary_per_nm", "phase_01_rad", "density_01_per_nm2"),
        *("psi_02_per_nm", "density_02_per_nm2"),
    }
    x = grid.points[:, :2] @ wave
    assert grid.point_data["psi_01_real_per_nm"] == pytest.approx(np.cos(x) / math.sqrt(200), abs=1e-14)
    assert grid.point_data["psi_01_imaginary_per_nm"] == pytest.approx(np.sin(x) / math.sqrt(200), abs=1e-14)
    assert grid.point_data["density_01_per_nm2"] == pytest.approx(1 / 200, rel=1e-14)
    phase = grid.point_data["phase_01_rad"]
    # Up to whole turns, the same ones everywhere.
    assert np.ptp(x) > 2 * math.pi
    assert phase - x == pytest.approx(
        np.full(len(x), 2 * math.pi * round((phase[0] - x[0]) / (2 * math.pi))), abs=1e-12
    )
    parts = [grid.point_data[f"psi_01_{part}_per_nm"] for part in ("real", "imaginary")]
    # Polynomials of degree 4 on cells of 5 nm: the wave turns by 5 rad in one.
    assert sum(integrals(grid, part).sum() for part in parts) == pytest.approx(1, abs=0.02)


def test_a_complex_polynomial_mode_integrates_to_one(tmp_path: Path) -> None:
    """sqrt(3/4) times the polynomial mode of the rectangle, and i x sqrt(3/4) / (w/2 sqrt(w h)): 3/4 and 1/4."""
    result = rectangle_result(20.0, 10.0)
    psi = math.sqrt(0.75) * result.modes + 0.5j * math.sqrt(3 / 200) * result.mesh.points[:, :1] / 10
    save(plane(Fields(result.mesh, modes_by_name(result.mesh, psi))), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    real, imaginary = (integrals(grid, grid.point_data[f"psi_01_{p}_per_nm"]).sum() for p in ("real", "imaginary"))
    assert (real, imaginary) == pytest.approx((0.75, 0.25), abs=1e-12)


def test_flat_cells_go_through_the_same_nodes(tmp_path: Path) -> None:
    result = rectangle_result()
    write_modes(result, tmp_path / "modes.vtu", linear=True)
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert set(grid.celltypes) == {VTK_TRIANGLE}
    assert grid.n_cells == 16 * len(result.mesh.cells)
    assert grid.points[:, :2] == pytest.approx(result.mesh.points, abs=0)
    assert np.array_equal(grid.point_data["psi_01_per_nm"], result.modes[:, 0])
    sizes = grid.compute_cell_sizes(length=False, volume=False).cell_data["Area"]
    assert sizes.sum() == pytest.approx(200, rel=1e-12)
    assert sizes.min() > 0
    corners = grid.cells_dict[VTK_TRIANGLE]
    psi, at = grid.point_data["psi_01_per_nm"][corners], grid.points[corners]
    # None is turned over.
    edges = at[:, 1:, :2] - at[:, :1, :2]
    assert (np.linalg.det(edges) > 0).all() or (np.linalg.det(edges) < 0).all()
    # The square of a linear function over a triangle: (sum of squares and products of the values) / 6.
    square = sizes / 12 * (psi.sum(axis=1) ** 2 + (psi**2).sum(axis=1))
    assert square.sum() == pytest.approx(1, abs=0.02)
    said = bytes(grid.field_data["cells_utf8"]).decode()
    assert said.startswith("flat") and "approximate" in said
    assert bytes(grid.field_data["input_digest_utf8"]).decode() == result.problem.digest + "\n"


def test_flat_cells_of_a_round_wire_are_its_polygon(tmp_path: Path) -> None:
    result = core_shell_result(2)
    write_modes(result, tmp_path / "modes.vtu", linear=True)
    grid = pyvista.read(tmp_path / "modes.vtu")
    radius = np.hypot(*result.mesh.points.T)
    angle = np.sort(np.arctan2(*result.mesh.points[radius > RADIUS_NM - 1e-4].T))
    steps = np.diff(np.append(angle, angle[0] + 2 * math.pi))
    area = RADIUS_NM**2 / 2 * np.sin(steps).sum()
    found = grid.compute_cell_sizes(length=False, volume=False).cell_data
    assert found["Area"].sum() == pytest.approx(area, rel=1e-6)
    core = bytes(grid.field_data["layer_names_utf8"]).decode().split("\n").index("core")
    assert found["Area"][found["layer"] == core].sum() == pytest.approx(math.pi * CORE_NM**2, rel=2e-3)


def test_flat_cells_are_read_by_programs_that_know_no_strings(tmp_path: Path) -> None:
    result = core_shell_result(2)
    write_modes(result, tmp_path / "modes.vtu", linear=True)
    mesh = meshio.read(tmp_path / "modes.vtu")
    assert [block.type for block in mesh.cells] == ["triangle"]
    # A first entry of each point, for those at interfaces are there twice.
    places = {tuple(point): n for n, point in enumerate(mesh.points[:, :2].tolist())}
    order = [places[tuple(point)] for point in result.mesh.points.tolist()]
    assert np.array_equal(mesh.point_data["psi_02_per_nm"][order], result.modes[:, 1])
    assert np.array_equal(mesh.field_data["energy_eV"], result.energies_eV)


def test_each_subband_has_its_carriers(tmp_path: Path) -> None:
    """What a subband holds, spread as its mode's square; only where it is known."""
    result = core_shell_result(2)
    held = tuple(replace(s, line_density_per_nm=0.1 * s.index) for s in result.subbands)
    write_modes(replace(result, subbands=held), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert grid.field_data["line_density_per_nm"].tolist() == [0.1, 0.2]
    for index in (1, 2):
        square = grid.point_data[f"psi_0{index}_per_nm"] ** 2
        assert grid.point_data[f"carriers_0{index}_per_nm3"] == pytest.approx(0.1 * index * square, rel=1e-14)


def test_a_potential_that_was_given_is_in_the_potential_energy(tmp_path: Path) -> None:
    """A field of 4 mV/nm along x on a wire of one material, from its band edge: an electron's energy rises by F x."""
    given = rectangle_problem(20.0, 10.0)
    tilted = replace(given, potential=Potential(field_V_per_nm=(0.004, 0.0)))
    write_modes(replace(rectangle_result(), problem=tilted), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert grid.point_data["potential_energy_eV"] == pytest.approx(0.004 * grid.points[:, 0], abs=1e-15)


def test_a_title_in_any_script_is_read_back(tmp_path: Path) -> None:
    result = rectangle_result()
    write_modes(replace(result, problem=replace(result.problem, title="Draht 4 – Größe")), tmp_path / "modes.vtu")
    assert pyvista.read(tmp_path / "modes.vtu").field_data["title"].tolist() == ["Draht 4 – Größe"]


def test_a_mesh_alone(tmp_path: Path) -> None:
    result = core_shell_result(1)
    write_section(result.mesh, tmp_path / "section.vtu")
    grid = pyvista.read(tmp_path / "section.vtu")
    assert grid.n_cells == len(result.mesh.cells)
    assert grid.point_data.keys() == []
    assert np.array_equal(grid.cell_data["layer"], result.mesh.region)


def test_cells_have_the_mass_of_the_valleys_that_carry_the_first_subband(tmp_path: Path) -> None:
    """Of silicon along [001], 4 nm wide and 30 nm high, up = [100]: the first subband is of the [010] valleys, whose
    heavy axis (0.916 m0) lies across the width, and its axial mass is the light one (0.19 m0)."""
    problem = Problem(
        title="Sheet on its edge",
        section=Section(Rectangle(4.0, 30.0), "Si"),
        orientation=Orientation(axis=(0, 0, 1), up=(1, 0, 0)),
        carriers=Carriers(temperature_K=(300.0,)),
        accuracy=Accuracy(subbands=3, energy_eV=1e-3),
    )
    result = solve(problem)
    write_modes(result, tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    assert grid.field_data["valley"].tolist()[0] == "Delta [010]"
    assert grid.cell_data["axial_mass_of_first_valleys_m0"] == pytest.approx(0.19, abs=0.002)
    assert grid.cell_data[EDGE] == pytest.approx(0.0, abs=1e-12)
    assert grid.field_data["valley_degeneracy"].tolist()[0] == 2


def test_a_charged_wire_has_its_potential_its_carriers_and_its_band_edge(tmp_path: Path) -> None:
    write_modes(charged_result(), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    radius = np.hypot(*grid.points[:, :2].T)
    assert grid.point_data["potential_V"] == pytest.approx(0.1 - radius**2 / 2000, abs=1e-12)
    density = grid.point_data["density_per_nm3"]
    assert density == pytest.approx(1e-3 * np.maximum(1 - (radius / CORE_NM) ** 2, 0), abs=1e-12)
    # An electron's energy is the band edge less the potential in V: 0 in the core and 0.3 eV in the shell before it, in
    # each cell at all of its nodes, those on the interface too.
    energy, nodes = grid.point_data["potential_energy_eV"], grid.cells_dict[VTK_LAGRANGE_TRIANGLE]
    edge = grid.cell_data[EDGE][:, None]
    assert set(edge.ravel()) == {0.0, 0.3}
    assert energy[nodes] == pytest.approx(edge - 0.1 + radius[nodes] ** 2 / 2000, abs=1e-12)


def test_where_carriers_are_kept_out_there_is_no_potential_energy(tmp_path: Path) -> None:
    result = charged_result(kept_out=True)
    tilted = replace(result.charge, given_eV=0.01 * result.mesh.points[:, 0])
    write_modes(replace(result, charge=tilted), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    radius, energy = np.hypot(*grid.points[:, :2].T), grid.point_data["potential_energy_eV"]
    nodes = grid.cells_dict[VTK_LAGRANGE_TRIANGLE]
    shell = np.isnan(grid.cell_data[EDGE])
    assert np.isnan(energy[nodes[shell]]).all()
    # A potential given beside is part of it.
    expected = 0.01 * grid.points[:, 0] - 0.1 + radius**2 / 2000
    assert energy[nodes[~shell]] == pytest.approx(expected[nodes[~shell]], abs=1e-12)
    assert np.isfinite(grid.point_data["potential_V"]).all()


def test_the_potential_of_a_wire_between_gates_is_that_of_a_plate_capacitor(tmp_path: Path) -> None:
    """An empty strip between two gates whose other sides let no field through: phi rises linearly, by Laplace."""
    given = (Gate("top", ("top",), -0.5, lineup_voltage_V=0.1), Gate("bottom", ("bottom",), -0.8, lineup_voltage_V=0.1))
    tilted = Potential(field_V_per_nm=(0.004, 0.0))
    problem = Problem(
        "strip",
        Section(Rectangle(8.0, 6.0), "GaAs"),
        Carriers(temperature_K=(77.0,)),
        Accuracy(subbands=1, energy_eV=1e-3),
        potential=tilted,
        gates=given,
    )
    result = solve(problem)
    write_modes(result, tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    x, y = grid.points[:, 0], grid.points[:, 1]
    potential = -0.75 + 0.3 * y / 6
    assert grid.point_data["potential_V"] == pytest.approx(potential, abs=1e-9)
    assert grid.point_data["potential_energy_eV"] == pytest.approx(0.004 * x - potential, abs=1e-9)
    assert np.abs(grid.point_data["density_per_nm3"]).max() < 1e-20
