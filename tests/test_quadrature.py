"""`modes.npz` and `matrix_elements.csv`: what they hold is what plain sums and the elements themselves give."""

from __future__ import annotations

import csv
from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest

from tests.truth._wires import LAPLACE, checked, material, wire
from wiresolve.describe.gates import Gate, Insulator
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.describe.valley import Valley
from wiresolve.mode_elements import MatrixElements, matrix_elements
from wiresolve.output.matrix_element_tables import write_matrix_elements
from wiresolve.output.quadrature import write_points
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0


@lru_cache(maxsize=1)
def core_shell() -> tuple[Result, MatrixElements]:
    """A round core in a barrier, in a field."""
    layer = Layer(thickness_nm=5.0, material="barrier")
    section = Section(shape=Circle(diameter_nm=12.0), material="well", layers=(layer,))
    materials = [material("well", 0.067), material("barrier", 0.11, 0.3)]
    result = checked(solve(wire(section, materials, 5, 1e-5, Potential(field_V_per_nm=(0.002, 0.001)))))
    return result, matrix_elements(result)


def written(result: Result, folder: Path) -> dict[str, np.ndarray]:
    write_points(result, folder / "modes.npz")
    with np.load(folder / "modes.npz", allow_pickle=False) as file:
        return dict(file)


def of_levels(result: Result, values: np.ndarray) -> np.ndarray:
    """Sums over the modes of each level: inside one they are turned to a common frame."""
    level = np.array([s.level for s in result.subbands])
    return np.array([values[level == number].sum() for number in np.unique(level)])


def test_plain_sums_give_the_elements(tmp_path: Path) -> None:
    result, found = core_shell()
    held = written(result, tmp_path)
    weights, psi = held["weights_nm2"][:, None], held["modes_per_nm"]
    assert np.abs(psi.T @ (weights * psi) - np.eye(5)).max() < 1e-10
    for axis, name in enumerate(("dipole_x_nm", "dipole_y_nm")):
        place = held["points_nm"][:, axis][:, None]
        assert psi.T @ (weights * place * psi) == pytest.approx(getattr(found, name), abs=1e-10)
    shell = held["layer"] == held["layer_names"].tolist().index("layer 1")
    here = found.layers.index("layer 1")
    assert psi[shell].T @ (weights[shell] * psi[shell]) == pytest.approx(found.layer_overlap[here], abs=1e-10)
    assert weights.sum() == pytest.approx(np.pi * 11.0**2, rel=1e-8)
    assert held["input_digest"] == result.problem.digest


def test_plain_sums_give_the_energies(tmp_path: Path) -> None:
    """Kinetic energy from the gradients and the inverse masses, band edge and field from the tables: <H> is E."""
    result, _ = core_shell()
    held = written(result, tmp_path)
    weights, psi, slopes = held["weights_nm2"], held["modes_per_nm"], held["gradients_per_nm2"]
    tensor = HBAR2_OVER_2M0 * held["inverse_mass_per_m0"][0, held["layer"], :2, :2]
    kinetic = np.einsum("p,pxm,pxy,pym->m", weights, slopes, tensor, slopes)
    edge = held["band_edge_eV"][0, held["layer"]] + held["potential_eV"]
    energy = kinetic + np.einsum("p,p,pm->m", weights, edge, psi**2)
    assert of_levels(result, energy) == pytest.approx(of_levels(result, result.energies_eV), rel=1e-10)
    assert (held["energy_eV"] == result.energies_eV).all()
    assert held["potential_eV"] == pytest.approx(held["points_nm"] @ np.array([0.002, 0.001]), abs=1e-15)
    assert held["material_names"][held["material"]].tolist() == [
        "well" if name == "core" else "barrier" for name in held["layer_names"][held["layer"]]
    ]


def test_energies_of_a_charged_wire(tmp_path: Path) -> None:
    """The potential that gates and carriers make is in the file, and its modes are known to the elements."""
    channel = Material.given("channel", electron_mass=0.19, conduction_edge_eV=0.0, permittivity=11.7)
    oxide = Material.given("oxide", permittivity=3.9)
    problem = Problem(
        title="wrap",
        section=Section(shape=Circle(diameter_nm=8.0), material="channel"),
        carriers=Carriers(temperature_K=(300.0,)),
        accuracy=Accuracy(subbands=3, energy_eV=1e-5),
        materials=(channel, oxide),
        gates=(Gate("wrap", "rim", voltage_V=0.4, lineup_voltage_V=0.0, insulator=Insulator("oxide", 2.0)),),
    )
    result = solve(problem)
    held = written(result, tmp_path)
    weights, psi, slopes = held["weights_nm2"], held["modes_per_nm"], held["gradients_per_nm2"]
    kinetic = HBAR2_OVER_2M0 / 0.19 * np.einsum("p,pxm->m", weights, slopes**2)
    assert np.ptp(held["potential_eV"]) > 1e-3
    energy = kinetic + np.einsum("p,p,pm->m", weights, held["potential_eV"], psi**2)
    assert of_levels(result, energy) == pytest.approx(of_levels(result, result.energies_eV), abs=1e-10)
    found = matrix_elements(result)
    assert found.overlap == pytest.approx(np.eye(3), abs=1e-10)
    # A round wire: the first two levels are coupled by the same length along x and y.
    _, along_x, bar_x = found.level_sums("dipole_x_nm")
    _, along_y, bar_y = found.level_sums("dipole_y_nm")
    assert abs(along_x[0, 1] - along_y[0, 1]) <= bar_x[0, 1] + bar_y[0, 1]
    assert bar_x[0, 1] < 1e-2 * along_x[0, 1]


def test_valleys_have_tables_of_their_own(tmp_path: Path) -> None:
    valley = Valley("Delta", axis=(1, 0, 0), longitudinal_mass=0.916, transverse_mass=0.19)
    silicon = Material.given("silicon", valleys=[valley], conduction_edge_eV=0.0)
    result = solve(
        Problem(
            title="valleys",
            section=Section(shape=Rectangle(width_nm=7.0, height_nm=5.0), material="silicon"),
            carriers=Carriers(temperature_K=(4.2,)),
            accuracy=Accuracy(subbands=4, energy_eV=1e-5),
            materials=(silicon,),
            orientation=Orientation(axis=(1, 1, 0), up=(0, 0, 1)),
        )
    )
    held = written(result, tmp_path)
    assert [held["valley_names"][v] for v in held["valley"]] == [s.valley for s in result.subbands]
    upright = held["valley_names"].tolist().index("Delta [001]")
    assert np.diag(held["inverse_mass_per_m0"][upright, 0]) == pytest.approx([1 / 0.19, 1 / 0.916, 1 / 0.19], rel=1e-12)
    slopes, weights = held["gradients_per_nm2"], held["weights_nm2"]
    for n, v in enumerate(held["valley"]):
        tensor = HBAR2_OVER_2M0 * held["inverse_mass_per_m0"][v, 0, :2, :2]
        kinetic = np.einsum("p,px,xy,py->", weights, slopes[:, :, n], tensor, slopes[:, :, n])
        assert kinetic == pytest.approx(result.subbands[n].energy_eV, rel=1e-10)


def test_the_part_that_growing_masses_carry_elsewhere(tmp_path: Path) -> None:
    """One alpha all over: -d<T(E) - E>/dE is 1 + alpha e/(1 + alpha e), e being the energy above the edge."""
    narrow = Material.given("narrow", electron_mass=0.03, conduction_edge_eV=0.0, nonparabolicity_per_eV=2.0)
    section = Section(shape=Rectangle(width_nm=12.0, height_nm=9.0), material="narrow")
    result = checked(solve(wire(section, [narrow], 3, 1e-7)))
    held = written(result, tmp_path)
    grown = 2.0 * result.energies_eV
    assert held["carried"] == pytest.approx(1 + grown / (1 + grown), rel=1e-6)
    assert held["nonparabolicity_per_eV"].tolist() == [[2.0]]


def test_table_of_matrix_elements(tmp_path: Path) -> None:
    result, found = core_shell()
    write_matrix_elements(found, tmp_path / "matrix_elements.csv")
    lines = (tmp_path / "matrix_elements.csv").read_text(encoding="utf-8").splitlines()
    comments = [line for line in lines if line.startswith("#")]
    assert any(result.problem.digest in line for line in comments)
    rows = list(csv.DictReader(lines[len(comments) :]))
    assert len(rows) == 25
    for row in rows:
        i, j = int(row["from"]) - 1, int(row["to"]) - 1
        assert float(row["dipole_x_nm"]) == pytest.approx(found.dipole_x_nm[i, j], rel=1e-11)
        assert float(row["dipole_x_error_nm"]) == pytest.approx(found.dipole_x_error_nm[i, j], rel=1e-11)
        assert float(row["oscillator_y"]) == pytest.approx(found.oscillator_y[i, j], rel=1e-11)
        shell = found.layer_overlap[found.layers.index("layer 1"), i, j]
        assert float(row["overlap_in_layer_1"]) == pytest.approx(shell, rel=1e-11)
        rim = found.roughness_eV_per_nm[found.outlines.index("growth of rim"), i, j]
        assert float(row["roughness_rim_eV_per_nm"]) == pytest.approx(rim, rel=1e-11)
        assert "nan" not in row.values()


def test_a_hard_wall_writes_what_there_is(tmp_path: Path) -> None:
    section = Section(shape=Rectangle(width_nm=2.0, height_nm=1.0), material=LAPLACE.name)
    result = checked(solve(wire(section, [LAPLACE], 2, 1e-5)))
    held = written(result, tmp_path)
    assert held["layer_names"].tolist() == ["core"]
    assert (held["potential_eV"] == 0).all()
    assert held["carried"] == pytest.approx(1, abs=1e-12)
