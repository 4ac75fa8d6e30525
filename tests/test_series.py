"""Series for ParaView, read back with PyVista: over any value, a surveyed parameter, and the axial wave number."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from scipy.special import jv
from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE

from tests.gate_sweeps import PlateSweep, swept_problem
from tests.synthetic import RADIUS_NM, core_shell_result, rectangle_result
from tests.test_axial_bands import ROUND, SKEW, round_level
from tests.test_vtk import integrals
from wiresolve.describe.gates import Gate
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Rectangle
from wiresolve.describe.wirefile import parse
from wiresolve.errors import InputError
from wiresolve.fem.space import Space
from wiresolve.gate_curve import gate_curve
from wiresolve.mode_groups import channels_of
from wiresolve.output.point_fields import PointFields
from wiresolve.output.series import write_along_axis, write_series, write_survey
from wiresolve.output.vtk import grid, plane
from wiresolve.physics.axial_modes import AxialModes, axial_modes
from wiresolve.physics.wire import Wire
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0

TENSOR = np.array([[4.0, 0.5, 1.5], [0.5, 3.0, -0.8], [1.5, -0.8, 5.0]])
"""An inverse mass in 1/m0 of a valley that leans towards the axis."""
LEANING = """
title = "A valley that leans towards the axis"
[section]
shape = "rectangle"
width = "8 nm"
height = "5 nm"
material = "leaning"
[materials.leaning]
inverse_mass = [[4.0, 0.5, 1.5], [0.5, 3.0, -0.8], [1.5, -0.8, 5.0]]
conduction_edge = "0 eV"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 3
energy = "0.1 meV"
"""


@lru_cache(maxsize=4)
def solved(text: str) -> Result:
    return solve(parse(text, Path()))


def frames(path: Path) -> list[tuple[float, pyvista.UnstructuredGrid]]:
    reader, found = pyvista.get_reader(str(path)), []
    for number, value in enumerate(reader.time_values):
        reader.set_active_time_point(number)
        found.append((value, reader.read()[0]))
    return found


def along(result: Result, k_per_nm: list[float] | np.ndarray) -> list[AxialModes]:
    wire, valleys = Wire(result.problem), [s.valley for s in result.subbands]
    channels = channels_of(result)
    return list(axial_modes(wire, channels, result.mesh, result.modes, valleys, result.spectrum, k_per_nm))


def test_values_ascend_whatever_their_order(tmp_path: Path) -> None:
    mesh = rectangle_result().mesh
    given = {0.3: 1.0, -0.1: 2.0, 0.0: 3.0}
    made = [(value, grid(mesh, {"height_nm": np.full(len(mesh.points), h)})) for value, h in given.items()]
    written = write_series(tmp_path, "tilt", [made[0], (0.7, None), *made[1:]])
    assert written == tmp_path / "tilt.pvd"
    # A frame that is not there keeps its number.
    names = sorted(p.name for p in (tmp_path / "tilt").iterdir())
    assert names == ["frame_0001.vtu", "frame_0003.vtu", "frame_0004.vtu"]
    found = frames(written)
    assert [value for value, _ in found] == [-0.1, 0.0, 0.3]
    assert [own.point_data["height_nm"][0] for _, own in found] == [2.0, 3.0, 1.0]


@pytest.mark.parametrize("value", [0.1, np.nan])
def test_each_frame_has_a_value_of_its_own(tmp_path: Path, value: float) -> None:
    mesh = rectangle_result().mesh
    with pytest.raises(InputError, match="frames"):
        write_series(tmp_path, "tilt", [(0.1, grid(mesh)), (value, grid(mesh))])


def test_a_survey_has_the_value_as_time_and_in_each_frame(tmp_path: Path) -> None:
    results = [(width, rectangle_result(width)) for width in (30.0, 20.0)]
    found = frames(write_survey(results, tmp_path, of="section.width"))
    assert [value for value, _ in found] == [20.0, 30.0]
    for value, own in found:
        assert own.field_data["section_width_nm"].tolist() == [value]
        assert np.ptp(own.points[:, 0]) == pytest.approx(value, rel=1e-14)
        assert integrals(own, own.point_data["psi_01_per_nm"]).sum() == pytest.approx(1, abs=1e-12)


def test_results_of_a_survey_list_as_many_subbands(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="as many subbands"):
        write_survey([(1.0, core_shell_result(1)), (2.0, core_shell_result(2))], tmp_path)


def test_modes_of_a_round_wire_with_a_mass_jump_at_any_wave_number(tmp_path: Path) -> None:
    """Inside the well the lowest mode is J0(p r), p^2 = m E(k) 2/hbar^2 - k^2, and the next pair J1(p r): with k the
    barrier of the heavier mass sinks, and p falls (G. Bastard, Wave Mechanics Applied to Semiconductor
    Heterostructures, 1988, chapter III, at k = 0)."""
    found = frames(write_along_axis(solved(ROUND), tmp_path, 4))
    assert [value for value, _ in found] == pytest.approx(np.linspace(0, found[-1][0], 4), rel=1e-12)
    before = None
    for k, own in found:
        if k > 0.35:  # the independent formula holds for states below the barrier's edge
            break
        radius = np.hypot(*own.points[:, :2].T)
        inside = (radius > 1e-9) & (radius < 5.0 - 1e-6)
        assert own.field_data["k_per_nm"].tolist() == [k]
        levels = [round_level(angular, k) for angular in (0, 1, 1)]
        assert own.field_data["energy_eV"] == pytest.approx(levels, abs=1e-7)
        wave = [np.sqrt(0.067 * level / HBAR2_OVER_2M0 - k**2) for level in levels]
        psi = own.point_data["psi_01_per_nm"]
        centre = psi[np.argmin(radius)] / jv(0, wave[0] * radius.min())
        assert psi[inside] == pytest.approx(centre * jv(0, wave[0] * radius[inside]), abs=2e-5 * centre)
        pair = np.hypot(own.point_data["psi_02_per_nm"], own.point_data["psi_03_per_nm"])[inside]
        around = jv(1, wave[1] * radius[inside])
        assert pair / around == pytest.approx(np.full(len(pair), np.median(pair / around)), rel=2e-3)
        # The frame of the pair stays.
        lobe = own.point_data["psi_02_per_nm"]
        assert before is None or lobe @ before > 0.99 * np.linalg.norm(lobe) * np.linalg.norm(before)
        before = lobe
        for index in (1, 2, 3):
            assert integrals(own, own.point_data[f"psi_0{index}_per_nm"]).sum() == pytest.approx(1, abs=1e-8)
    assert before is not None


def test_modes_of_a_leaning_valley_turn_across_the_section(tmp_path: Path) -> None:
    """One tensor all over: psi_k = psi_0 exp(-i k s.r) with s = W^-1 w, and E = E_0 + hbar^2 k^2 (W_zz - w.s) / 2m0
    (F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967), section II, for a layer)."""
    result = solved(LEANING)
    lean = np.linalg.solve(TENSOR[:2, :2], TENSOR[:2, 2])
    stiffness = HBAR2_OVER_2M0 * (TENSOR[2, 2] - TENSOR[:2, 2] @ lean)
    for k, own in frames(write_along_axis(result, tmp_path, 3)):
        assert own.field_data["energy_eV"] == pytest.approx(result.energies_eV + stiffness * k**2, abs=1e-9)
        turn = np.exp(-1j * k * own.points[:, :2] @ lean)
        for index in (1, 2, 3):
            still = result.modes[:, index - 1]
            parts = [own.point_data[f"psi_0{index}_{part}_per_nm"] for part in ("real", "imaginary")]
            assert parts[0] == pytest.approx((still * turn).real, abs=1e-12)
            assert parts[1] == pytest.approx((still * turn).imag, abs=1e-12)
            assert own.point_data[f"density_0{index}_per_nm2"] == pytest.approx(still**2, abs=1e-12)
        assert own.point_data.active_scalars_name == "psi_01_real_per_nm"
        # The first mode has no nodal line: its phase goes on all over the section.
        inner = np.abs(result.modes[:, 0]) > 1e-3 * np.abs(result.modes[:, 0]).max()
        phase = own.point_data["phase_01_rad"] + k * own.points[:, :2] @ lean
        assert np.ptp(phase[inner]) < 1e-9


def test_states_of_a_skew_wire_are_states_at_each_wave_number(tmp_path: Path) -> None:
    """Where axis-plane terms jump the states are complex: orthonormal, of their subband's E(k), and without a jump in
    phase from one wave number to the next."""
    result = solved(SKEW.replace('energy = "1e-3 meV"', 'energy = "0.05 meV"'))
    k = np.linspace(0, float(result.dispersion.k_per_nm[-1]) / 2, 7)
    space, before = Space(result.mesh), None
    mass = space.mass
    bars = result.errors_eV.max() + result.dispersion.error_bound_eV
    for own, energy in zip(along(result, k), result.spectrum.band_energies(k).T, strict=True):
        assert own.energy_eV == pytest.approx(energy, abs=3 * bars)
        states = own.states[space.nodes]
        assert states.conj().T @ (mass @ states) == pytest.approx(np.eye(4), abs=1e-7)
        assert own.complex_.all()
        if before is not None and own.k_per_nm > k[1]:
            overlap = np.einsum("im,im->m", before.conj(), mass @ states)
            assert (overlap.real > 0.5).all()
            assert np.abs(overlap.imag).max() < 1e-6
        before = states
    # A carrier each, by VTK's own functions.
    for _, own in frames(write_along_axis(result, tmp_path, 2)):
        for index in (1, 4):
            parts = (own.point_data[f"psi_0{index}_{part}_per_nm"] for part in ("real", "imaginary"))
            assert sum(integrals(own, part).sum() for part in parts) == pytest.approx(1, abs=1e-8)


def test_modes_of_a_charged_wire_move_in_its_potential(tmp_path: Path) -> None:
    """With a mass that grows with energy: E(k) of the states found again is that of the subbands."""
    problem = Problem(
        "gated",
        Section(Rectangle(9.0, 7.0), "InAs"),
        Carriers(temperature_K=(30.0,)),
        Accuracy(subbands=3, energy_eV=1e-3),
        gates=(
            Gate("top", ("top",), 0.45, lineup_voltage_V=0.0),
            Gate("bottom", ("bottom",), 0.15, lineup_voltage_V=0.0),
        ),
    )
    result = solve(problem)
    assert result.line_density_per_nm is not None and result.line_density_per_nm > 1e-3
    found = frames(write_along_axis(result, tmp_path, 3))
    for (k, own), energy in zip(found, result.spectrum.band_energies(np.array([v for v, _ in found])).T, strict=True):
        assert own.field_data["energy_eV"] == pytest.approx(energy, abs=1e-6), k
        assert integrals(own, own.point_data["psi_01_per_nm"]).sum() == pytest.approx(1, abs=1e-8)
        # What does not depend on k is that of the result.
        assert np.array_equal(own.point_data["potential_V"], found[0][1].point_data["potential_V"])
        carriers = [f"carriers_0{index}_per_nm3" for index in (1, 2, 3)]
        assert all(np.array_equal(own.point_data[c], found[0][1].point_data[c]) for c in carriers)


def test_points_of_a_gate_curve_hold_what_a_result_does(tmp_path: Path) -> None:
    """Time is the gate voltage; a point that failed is left out; carriers are those of each subband, spread."""
    curve = gate_curve(swept_problem(4), solver=lambda problem: PlateSweep(problem, failing=(1,)))
    fields = PointFields(curve)
    given = ((p.gate_voltage_V, plane(fields.of(p)) if p.converged else None) for p in curve.points)
    found = frames(write_series(tmp_path, "gate_curve", given, files="points", stem="point"))
    assert [value for value, _ in found] == [p.gate_voltage_V for p in curve.converged]
    assert sorted(p.name for p in (tmp_path / "points").iterdir())[1] == "point_0003.vtu"
    for (value, own), point in zip(found, curve.converged, strict=True):
        assert own.field_data["gate_voltage_V"].tolist() == [value]
        assert np.array_equal(own.field_data["energy_eV"], point.energy_eV)
        assert own.field_data["input_digest"].tolist() == [curve.problem.digest]
        psi, held = own.point_data["psi_02_per_nm"], point.line_density_by_subband_per_nm[1]
        assert own.point_data["carriers_02_per_nm3"] == pytest.approx(held * psi**2, rel=1e-14)
        area = integrals(own, np.ones(own.n_points)).sum()
        assert area == pytest.approx(np.pi * RADIUS_NM**2, rel=1e-5)
        nodes = own.cells_dict[VTK_LAGRANGE_TRIANGLE]
        edge = own.cell_data["band_edge_of_first_valleys_eV"][:, None]
        assert own.point_data["potential_energy_eV"][nodes] == pytest.approx(
            edge - own.point_data["potential_V"][nodes], abs=1e-14
        )
        core = own.field_data["layer_names"].tolist().index("core")
        assert (edge[own.cell_data["layer"] == core] == 0).all()
        assert (edge[own.cell_data["layer"] != core] > 0.2).all()


def test_the_first_frame_is_the_result(tmp_path: Path) -> None:
    result = solved(ROUND)
    (own, _) = along(result, [0.0, 0.1])
    assert own.states == pytest.approx(result.modes, abs=1e-14)
    assert own.energy_eV == pytest.approx(result.energies_eV, abs=1e-8)


@pytest.mark.parametrize("k_per_nm", [[], [0.1, 0.2], [0.0, 0.2, 0.1], [0.0, np.nan]])
def test_wave_numbers_ascend_from_zero(k_per_nm: list[float]) -> None:
    with pytest.raises(InputError, match="k_per_nm"):
        along(rectangle_result(), k_per_nm)


def test_one_frame_is_no_series(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="count"):
        write_along_axis(rectangle_result(), tmp_path, 1)


def test_the_same_result_gives_the_same_bytes(tmp_path: Path) -> None:
    result = solved(ROUND)
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        write_along_axis(result, tmp_path / name, 2, linear=True)
    for file in ("along_axis.pvd", "along_axis/k_0001.vtu", "along_axis/k_0002.vtu"):
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes()


def test_nothing_that_draws_is_loaded() -> None:
    script = (
        "import sys\n"
        "from tests.synthetic import rectangle_result\n"
        "from wiresolve.output import series, volume, vtk\n"
        "volume.volume(rectangle_result(), 10.0, linear=True)\n"
        "vtk.save(vtk.grid(rectangle_result().mesh), '/dev/null')\n"
        "print(*(m for m in sys.modules if 'Rendering' in m or 'OpenGL' in m or m in ('pyvista', 'matplotlib')))"
    )
    run = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert (run.stdout.strip(), run.stderr) == ("", "")


def test_a_gate_series_can_be_written_frame_by_frame(tmp_path: Path) -> None:
    """Frames are taken one at a time: no more than one is held."""
    mesh, taken = rectangle_result().mesh, []

    def one_by_one() -> Iterator[tuple[float, Any]]:
        for number in range(3):
            taken.append(len(list((tmp_path / "points").iterdir())))
            yield float(number), grid(mesh)

    write_series(tmp_path, "gate_curve", one_by_one(), files="points", stem="point")
    assert taken == [0, 1, 2]
    assert (tmp_path / "gate_curve.pvd").is_file()
