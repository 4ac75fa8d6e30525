"""The wire as a volume, read back with PyVista and integrated with VTK's own shape functions."""

from __future__ import annotations

import itertools
import math
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import pyvista
from vtkmodules.vtkCommonCore import vtkIdList
from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_WEDGE, VTK_WEDGE
from vtkmodules.vtkFiltersGeneral import vtkCellValidator

from tests.synthetic import CORE_NM, MASS, RADIUS_NM, charged_result, core_shell_result, rectangle_result
from tests.test_series import LEANING, TENSOR
from wiresolve.describe.wirefile import parse
from wiresolve.errors import InputError
from wiresolve.fem.mesh import oriented
from wiresolve.output import volume as volumes
from wiresolve.output.volume import write_volume
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.wave_numbers import wave_numbers
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

LENGTH_NM = 30.0


def read(result: Result, path: Path, *, linear: bool = False, length_nm: float = LENGTH_NM) -> pyvista.UnstructuredGrid:
    write_volume(replace(result, mesh=oriented(result.mesh)), path / "volume.vtu", length_nm, linear=linear)
    return pyvista.read(path / "volume.vtu")


def integral(grid: pyvista.UnstructuredGrid, *squared: str) -> float:
    """Integral of the sum of squares of point data over Lagrange wedges, by VTK's functions and Gauss rules."""
    t, w = np.polynomial.legendre.leggauss(6)
    t, w = (t + 1) / 2, w / 2
    at = [
        (u, v * (1 - u), z, a * b * c * (1 - u))
        for (u, a), (v, b), (z, c) in itertools.product(zip(t, w, strict=True), repeat=3)
    ]
    cell, count = grid.GetCell(0), grid.GetCell(0).GetNumberOfPoints()
    shape, slope = np.empty((len(at), count)), np.empty((len(at), 3, count))
    for row, (*point, _) in enumerate(at):
        functions, derivatives = [0.0] * count, [0.0] * (3 * count)
        cell.InterpolateFunctions(point, functions)
        cell.InterpolateDerivs(point, derivatives)
        shape[row], slope[row] = functions, np.reshape(derivatives, (3, count))
    nodes, ids = np.empty((grid.n_cells, count), dtype=np.int64), vtkIdList()
    for number in range(grid.n_cells):
        grid.GetCellPoints(number, ids)
        nodes[number] = [ids.GetId(i) for i in range(count)]
    total, weights = 0.0, np.array([weight for *_, weight in at])
    for own in nodes:
        determinant = np.linalg.det(slope @ grid.points[own])
        assert (determinant > 0).all()
        values = sum((shape @ grid.point_data[name][own].astype(float)) ** 2 for name in squared) if squared else 1.0
        total += float(weights @ (determinant * values))
    return total


def interpolated_wave(turn: float, degree: int = 4) -> float:
    """Mean of |p|^2, p the polynomial of a degree through exp(i x) at even places of a stretch of length `turn`."""
    nodes = np.linspace(-1, 1, degree + 1)
    t, w = np.polynomial.legendre.leggauss(12)
    wave = np.exp(0.5j * turn * nodes)
    coefficients = np.linalg.solve(np.vander(nodes), wave)
    return float(w @ np.abs(np.polyval(coefficients, t)) ** 2 / 2)


def test_nodes_of_a_wedge_stand_where_vtk_expects_them(tmp_path: Path) -> None:
    """Points of a prism of straight cells lie where their cell's parametric coordinates say."""
    grid = read(rectangle_result(), tmp_path)
    assert set(grid.celltypes) == {VTK_LAGRANGE_WEDGE}
    for number in (0, grid.n_cells - 1):
        cell = grid.GetCell(number)
        assert cell.GetNumberOfPoints() == 75
        own = np.array([cell.GetPoints().GetPoint(i) for i in range(75)])
        place = np.array([cell.GetParametricCoords()[i] for i in range(225)]).reshape(75, 3)
        origin, ways = own[0], np.array([own[1] - own[0], own[2] - own[0], own[3] - own[0]])
        assert own == pytest.approx(origin + place @ ways, abs=1e-12)
        assert np.linalg.det(ways) > 0


@pytest.mark.parametrize("linear", [False, True])
def test_cells_are_sound(tmp_path: Path, linear: bool) -> None:
    """VTK's own check of cells finds no fault: none is turned over, none is bent wrongly."""
    validator = vtkCellValidator()
    grid = read(core_shell_result(1), tmp_path, linear=linear)
    # Its look at each flat face takes long: some cells of all regions and planes.
    some = grid.extract_cells(np.arange(0, grid.n_cells, 101)) if linear else grid
    validator.SetInputData(some)
    validator.Update()
    assert not pyvista.wrap(validator.GetOutput()).cell_data["ValidityState"].any()


def test_volume_is_area_times_length(tmp_path: Path) -> None:
    assert integral(read(rectangle_result(), tmp_path)) == pytest.approx(200 * LENGTH_NM, rel=1e-12)
    grid = read(core_shell_result(1), tmp_path)
    # Quartic arcs: as exact as the section's own area.
    assert integral(grid) == pytest.approx(math.pi * RADIUS_NM**2 * LENGTH_NM, rel=1e-7)
    core = grid.extract_cells(grid.cell_data["layer"] == grid.field_data["layer_names"].tolist().index("core"))
    assert integral(core) == pytest.approx(math.pi * CORE_NM**2 * LENGTH_NM, rel=1e-7)


def test_a_mode_holds_one_carrier_a_length(tmp_path: Path) -> None:
    """The polynomial mode of a rectangle, which cells hold exactly, times the wave, which they interpolate."""
    grid = read(rectangle_result(), tmp_path)
    found = integral(grid, "psi_01_real_per_nm", "psi_01_imaginary_per_nm")
    assert found == pytest.approx(LENGTH_NM, rel=1e-4)
    # One wave over four cells. Single precision (6e-8) averages out over thousands of nodes.
    assert found == pytest.approx(LENGTH_NM * interpolated_wave(2 * math.pi / 4), rel=1e-8)


def test_a_mode_runs_along_the_axis_as_a_plane_wave(tmp_path: Path) -> None:
    result = rectangle_result()
    grid = read(result, tmp_path)
    k = grid.field_data["k_per_nm"]
    # Without a Fermi level one wave fits into the length.
    assert k == pytest.approx([2 * math.pi / LENGTH_NM], rel=1e-15)
    assert grid.field_data["length_nm"].tolist() == [LENGTH_NM]
    x, y, z = grid.points.T
    psi = 30 / 200**2.5 * (x + 10) * (10 - x) * (y + 5) * (5 - y)
    scale = float(psi.max())
    assert grid.point_data["psi_01_real_per_nm"] == pytest.approx(psi * np.cos(k[0] * z), abs=1e-7 * scale)
    assert grid.point_data["psi_01_imaginary_per_nm"] == pytest.approx(psi * np.sin(k[0] * z), abs=1e-7 * scale)
    assert grid.point_data["density_01_per_nm2"] == pytest.approx(psi**2, abs=1e-7 * scale**2)
    assert grid.point_data.active_scalars_name == "density_01_per_nm2"


def test_the_fronts_of_a_leaning_valley_are_slanted(tmp_path: Path) -> None:
    """psi exp(i k (z - s.r)) with s = W^-1 w (F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967), section II)."""
    result = solve(parse(LEANING, Path()))
    grid = read(result, tmp_path)
    lean = np.linalg.solve(TENSOR[:2, :2], TENSOR[:2, 2])
    count = len(result.mesh.points)
    psi, z = np.resize(result.modes[:, 0], len(grid.points)), grid.points[:, 2]
    assert np.array_equal(grid.points[:count, :2], result.mesh.points)
    wave = psi * np.exp(2j * math.pi / LENGTH_NM * (z - grid.points[:, :2] @ lean))
    assert grid.point_data["psi_01_real_per_nm"] == pytest.approx(wave.real, abs=1e-7)
    assert grid.point_data["psi_01_imaginary_per_nm"] == pytest.approx(wave.imag, abs=1e-7)
    assert grid.point_data["density_01_per_nm2"] == pytest.approx(psi**2, abs=1e-7)


def test_modes_below_the_fermi_level_have_its_wave_number(tmp_path: Path) -> None:
    """hbar^2 k^2/2m = E_F - E for the first and the pair above it; the others lie higher and get one wave."""
    given = core_shell_result(4)
    carriers = replace(given.problem.carriers, fermi_level_eV=0.08)
    grid = read(replace(given, problem=replace(given.problem, carriers=carriers)), tmp_path)
    energy = given.energies_eV
    assert energy[2] < 0.08 < energy[3]
    fermi = np.sqrt(MASS * (0.08 - energy[:3]) / HBAR2_OVER_2M0)
    assert grid.field_data["k_per_nm"] == pytest.approx([*fermi, 2 * math.pi / LENGTH_NM], rel=1e-12)
    assert grid.field_data["fermi_level_eV"].tolist() == [0.08]
    # Four cells at least for each wave.
    assert len(np.unique(grid.points[:, 2])) - 1 >= 16 * fermi[0] * LENGTH_NM / (2 * math.pi)


def test_wave_numbers_where_masses_grow_and_where_bands_are_tables() -> None:
    """Kane's relation, hbar^2 k^2/2m = e (1 + alpha e) less its value at the minimum, m being the mass of the edge (E.
    O. Kane, J. Phys. Chem. Solids 1, 249 (1957)); and a table with two minima, E = E0 + c (k^2 - q^2)^2."""
    alpha, mass = 2.0, 0.03
    k, start = np.linspace(0, 1, 301), 0.05
    wells = 0.1 + 0.5 * (k**2 - 0.3**2) ** 2
    spectrum = Spectrum(
        energy_eV=np.array([start, 0.1]),
        error_eV=np.zeros(2),
        # At the minimum; and at that of a table from its second derivative, 8 c q^2.
        axial_mass=np.array([mass * (1 + 2 * alpha * start), HBAR2_OVER_2M0 / (4 * 0.5 * 0.3**2)]),
        degeneracy=np.array([2, 2]),
        level=np.array([1, 2]),
        listed=2,
        k_per_nm=k,
        band_eV=np.array([np.full(len(k), np.nan), wells]),
        edge_eV=np.zeros(2),
        nonparabolicity_per_eV=np.array([alpha, 0.0]),
    )
    value = 0.12 * (1 + alpha * 0.12) - start * (1 + alpha * start)
    # The larger of the two wave numbers at which the second band is met.
    wide = math.sqrt(0.3**2 + math.sqrt(0.02 / 0.5))
    assert wave_numbers(spectrum, 0.12) == pytest.approx([math.sqrt(mass * value / HBAR2_OVER_2M0), wide], rel=1e-6)
    assert np.isnan(wave_numbers(spectrum, 0.07)).tolist() == [False, True]
    assert np.isnan(wave_numbers(spectrum, 0.04)).all()


def test_flat_wedges_go_through_the_same_points(tmp_path: Path) -> None:
    result = core_shell_result(2)
    curved, flat = read(result, tmp_path), read(result, tmp_path, linear=True)
    assert set(flat.celltypes) == {VTK_WEDGE}
    assert np.array_equal(curved.points, flat.points)
    assert set(curved.point_data.keys()) == set(flat.point_data.keys())
    for name in curved.point_data:
        assert np.array_equal(curved.point_data[name], flat.point_data[name])
    assert flat.n_cells == curved.n_cells * 64
    sizes = flat.compute_cell_sizes(length=False, area=False)
    section = sizes.cell_data["Volume"].sum() / LENGTH_NM
    assert section == pytest.approx(math.pi * RADIUS_NM**2, rel=2e-3)
    core = bytes(flat.field_data["layer_names_utf8"]).decode().split("\n").index("core")
    inside = sizes.cell_data["Volume"][flat.cell_data["layer"] == core].sum() / LENGTH_NM
    assert inside == pytest.approx(math.pi * CORE_NM**2, rel=3e-3)
    assert bytes(flat.field_data["valley_utf8"]).decode() == "zone centre\n" * 2


def test_what_does_not_change_along_the_axis_is_there_on_every_plane(tmp_path: Path) -> None:
    grid = read(charged_result(), tmp_path)
    squared = (grid.points[:, :2] ** 2).sum(axis=1)
    assert grid.point_data["potential_V"] == pytest.approx(0.1 - squared / 2000, abs=1e-8)
    carriers = 1e-3 * np.maximum(1 - squared / CORE_NM**2, 0)
    assert grid.point_data["density_per_nm3"] == pytest.approx(carriers, abs=1e-10)
    own = grid.field_data["layer_names"].tolist().index("core")
    centres = np.hypot(*grid.cell_centers().points[:, :2].T)
    assert np.array_equal(grid.cell_data["layer"] == own, centres < CORE_NM)
    assert set(np.unique(grid.cell_data["band_edge_of_first_valleys_eV"])) == {0.0, 0.3}


def test_what_lies_around_the_wire_is_left_out(tmp_path: Path) -> None:
    result = core_shell_result(1)
    core, shell = (next(r for r in result.mesh.regions if r.name == name) for name in ("core", "layer 1"))
    around = replace(result.mesh, regions=(replace(shell, name="beside"), core))
    grid = read(replace(result, mesh=around), tmp_path)
    assert integral(grid) == pytest.approx(math.pi * CORE_NM**2 * LENGTH_NM, rel=1e-7)


def test_modes_of_which_there_is_no_room_are_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    given = core_shell_result(4)
    carriers = replace(given.problem.carriers, fermi_level_eV=0.08)
    filled = replace(given, problem=replace(given.problem, carriers=carriers))
    grid = read(filled, tmp_path)
    assert grid.field_data["left_out"].tolist() == []
    # Two cells show one wave. Over 20 nm the first mode (k = 0.32/nm) has more, the pair (0.2/nm) has less.
    monkeypatch.setattr(volumes, "MOST_CELLS", 2)
    long = read(filled, tmp_path, length_nm=20.0)
    assert long.field_data["subband"].tolist() == [2, 3, 4]
    assert long.field_data["valley"].tolist() == ["zone centre"] * 3
    assert long.field_data["energy_eV"] == pytest.approx(given.energies_eV[1:], rel=1e-15)
    assert "psi_01_real_per_nm" not in long.point_data
    assert long.field_data["left_out"].tolist() == ["subband 1: waves too short to be shown over 20 nm"]
    monkeypatch.undo()
    monkeypatch.setattr(volumes, "MOST_VALUES", 1)
    least = read(filled, tmp_path)
    assert least.field_data["subband"].tolist() == [1]
    assert least.field_data["left_out"].tolist() == ["subbands 2, 3, 4: the file would be too large"]


def test_the_same_result_gives_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a", "b"):
        write_volume(core_shell_result(2), tmp_path / name, LENGTH_NM)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


@pytest.mark.parametrize("length_nm", [0.0, -1.0, math.inf, math.nan])
def test_a_length_is_positive(tmp_path: Path, length_nm: float) -> None:
    with pytest.raises(InputError, match="length_nm"):
        write_volume(core_shell_result(1), tmp_path / "volume.vtu", length_nm)
    assert list(tmp_path.iterdir()) == []


SCRIPT = """
import sys
import numpy as np
import pyvista
plotter = pyvista.Plotter(off_screen=True, window_size=(300, 300))
if sys.argv[1] != "nothing":
    grid = pyvista.read(sys.argv[1])
    cut = grid.clip(normal="x", origin=(0, 0, 15)) if "volume" in sys.argv[1] else grid
    plotter.add_mesh(cut, scalars=sys.argv[2], cmap="coolwarm", show_scalar_bar=False, lighting=False)
    plotter.camera_position = sys.argv[3]
else:
    plotter.add_mesh(pyvista.Sphere())
np.save(sys.argv[4], plotter.screenshot(return_img=True))
"""


def picture(path: Path, file: str, scalars: str, view: str) -> np.ndarray:
    """(300, 300, 3) what PyVista draws off-screen, in a process of its own: without a graphics library VTK ends it."""
    for given in ("nothing", file):
        out = path / "picture.npy"
        run = subprocess.run(
            [sys.executable, "-c", SCRIPT, given, scalars, view, str(out)], capture_output=True, text=True, check=False
        )
        if given == "nothing" and run.returncode:
            pytest.skip("VTK cannot draw here: it needs EGL or OSMesa")
        assert run.returncode == 0, run.stderr
    return np.load(path / "picture.npy").astype(int)


@pytest.mark.parametrize("linear", [False, True])
def test_a_cut_through_the_volume_shows_the_wave(tmp_path: Path, linear: bool) -> None:
    """Red, blue, red along the axis: one whole wave of the first mode."""
    write_volume(core_shell_result(1), tmp_path / "volume.vtu", LENGTH_NM, linear=linear)
    image = picture(tmp_path, str(tmp_path / "volume.vtu"), "psi_01_real_per_nm", "yz")
    middle = image[:, 150]
    warm = middle[:, 0] - middle[:, 2]
    ends, centre = np.abs(warm) > 60, slice(140, 160)
    found = np.flatnonzero(ends)
    # From top to bottom: positive, negative in the middle, positive.
    assert warm[found[0]] > 0 and warm[found[-1]] > 0
    assert (warm[centre] < -60).all()
    assert (np.diff(np.sign(warm[found])) != 0).sum() == 2


def test_the_section_shows_a_mode(tmp_path: Path) -> None:
    """The second mode of a round wire is positive on one side and negative on the other, by the same amount."""
    from wiresolve.output.vtk import write_modes

    write_modes(core_shell_result(2), tmp_path / "modes.vtu")
    image = picture(tmp_path, str(tmp_path / "modes.vtu"), "psi_02_per_nm", "xy")
    warm = image[150, :, 0] - image[150, :, 2]
    assert warm[:150].min() < -100 and warm[150:].max() > 100
    assert (np.abs(image - image[0, 0]).sum(axis=2) > 10).mean() > 0.2
