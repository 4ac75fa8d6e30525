"""`modes.vtu`, read back with PyVista and integrated with VTK's own shape functions."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import pyvista
from vtkmodules.vtkCommonCore import vtkIdList
from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE

from tests.synthetic import CORE_NM, RADIUS_NM, charged_result, core_shell_result, rectangle_result
from wiresolve.describe.gates import Gate
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Rectangle
from wiresolve.output.vtk import write_modes, write_section
from wiresolve.solve import solve

EDGE = "band_edge_of_first_valleys_eV"


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
    assert set(grid.point_data.keys()) == set(wanted)
    assert set(grid.cell_data.keys()) == {"layer", "material", "axial_mass_of_first_valleys_m0", EDGE}
    assert grid.field_data["energy_eV"] == pytest.approx(result.energies_eV, rel=1e-15)
    assert grid.field_data["error_eV"] == pytest.approx(result.errors_eV, rel=1e-15)
    assert grid.field_data["level"].tolist() == [s.level for s in result.subbands]
    assert grid.field_data["valley"].tolist() == ["zone centre"] * 10
    assert grid.field_data["spin_degeneracy"].tolist() == [2] * 10
    assert grid.field_data["valley_degeneracy"].tolist() == [1] * 10
    assert grid.field_data["axial_mass_m0"].tolist() == [s.axial_mass for s in result.subbands]
    assert grid.field_data["input_digest"].tolist() == [result.problem.digest]
    materials = grid.field_data["material_names"].tolist()
    barrier = grid.cell_data["material"] == materials.index("Al0.3Ga0.7As")
    assert np.all(grid.cell_data[EDGE][barrier] == 0.3)
    assert np.all(grid.cell_data[EDGE][~barrier] == 0.0)
    assert np.all(grid.points[:, 2] == 0)
    assert grid.points[:, :2] == pytest.approx(result.mesh.points, abs=1e-12)


def test_the_same_result_gives_the_same_bytes(tmp_path: Path) -> None:
    result = core_shell_result(3)
    for name in ("a", "b"):
        write_modes(result, tmp_path / name)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


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
    # An electron's energy is the band edge less the potential in V: 0 in the core and 0.3 eV in the shell before it. On
    # the interface itself the core's counts.
    energy, shell = grid.point_data["potential_energy_eV"], radius > CORE_NM + 1e-5
    assert energy[shell] == pytest.approx(0.3 - 0.1 + radius[shell] ** 2 / 2000, abs=1e-12)
    assert energy[~shell] == pytest.approx(-0.1 + radius[~shell] ** 2 / 2000, abs=1e-12)


def test_where_carriers_are_kept_out_there_is_no_potential_energy(tmp_path: Path) -> None:
    result = charged_result(kept_out=True)
    tilted = replace(result.charge, given_eV=0.01 * result.mesh.points[:, 0])
    write_modes(replace(result, charge=tilted), tmp_path / "modes.vtu")
    grid = pyvista.read(tmp_path / "modes.vtu")
    radius, energy = np.hypot(*grid.points[:, :2].T), grid.point_data["potential_energy_eV"]
    shell = radius > CORE_NM + 1e-5
    assert np.isnan(energy[shell]).all()
    # A potential given beside is part of it.
    expected = 0.01 * grid.points[:, 0] - 0.1 + radius**2 / 2000
    assert energy[~shell] == pytest.approx(expected[~shell], abs=1e-12)
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
