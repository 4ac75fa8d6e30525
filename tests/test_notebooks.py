"""The notebooks run as they are, and find what closed forms and the makers of their data say."""

from __future__ import annotations

import importlib.util
import json
import os
import subprocess
import sys
from math import pi, sqrt
from pathlib import Path
from typing import Any

import nbformat
import numpy as np
import pytest
from scipy.special import expit

REPOSITORY = Path(__file__).resolve().parents[1]
EXAMPLES = REPOSITORY / "examples"
PATHS = sorted(EXAMPLES.glob("*.ipynb"))
# CODATA 2022: hbar^2/(2 m0) in eV nm^2, Boltzmann's constant in eV/K.
HBAR2_OVER_2M0, BOLTZMANN = 0.0380998212, 8.617333262e-5
# In a process of its own: what the kernel's libraries warn of is none of this project's errors.
RUN = """
import sys
import nbformat
from nbclient import NotebookClient
notebook = nbformat.read(sys.argv[1], as_version=4)
notebook.cells.append(nbformat.v4.new_code_cell(sys.argv[2]))
NotebookClient(notebook, timeout=240, kernel_name="python3", resources={"metadata": {"path": sys.argv[3]}}).execute()
print("".join(output.text for output in notebook.cells[-1].outputs))
"""


def run(name: str, values: str, folder: Path) -> Any:
    """What the names in a dictionary's text stand for at the end of a notebook, as plain data."""
    environment = dict(os.environ, PYTHONPATH=str(REPOSITORY), IPYTHONDIR=str(folder), JUPYTER_RUNTIME_DIR=str(folder))
    environment.pop("MPLBACKEND", None)
    told = f"import json\nprint(json.dumps({values}, default=lambda v: v.tolist()))"
    words = [sys.executable, "-c", RUN, str(EXAMPLES / f"{name}.ipynb"), told, str(EXAMPLES)]
    done = subprocess.run(words, env=environment, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr[-3000:]
    return json.loads(done.stdout.strip().splitlines()[-1])


def closed_eV(width_nm: float, mass: float, alpha_per_eV: float) -> np.ndarray:
    """Levels of a rectangle 8 nm high with hard walls whose mass grows as m (1 + alpha E): E (1 + alpha E) = k^2."""
    across, up = np.arange(1, 40)[:, None] / width_nm, np.arange(1, 20) / 8.0
    level = np.sort((HBAR2_OVER_2M0 / mass * pi**2 * (across**2 + up**2)).ravel())
    return (-1 + np.sqrt(1 + 4 * alpha_per_eV * level)) / (2 * alpha_per_eV)


def test_sizing_a_channel(tmp_path: Path) -> None:
    names = "mass", "alpha_per_eV", "masses", "widest_nm", "spacing_meV_per_nm", "first"
    more = '"energies": list(ridge(20.0).energies_eV), "kinds": [s["kind"] for s in steps]'
    found = run("sizing_a_channel", "{" + ", ".join(f'"{n}": {n}' for n in names) + f", {more}}}", tmp_path)
    mass, alpha = found["mass"], found["alpha_per_eV"]
    # I. Vurgaftman, J. R. Meyer, L. R. Ram-Mohan, J. Appl. Phys. 89, 5815 (2001): In0.53Ga0.47As has 0.0427 m0 or so.
    assert mass == pytest.approx(0.0427, abs=0.001)
    assert found["energies"] == pytest.approx(closed_eV(20.0, mass, alpha)[:5], abs=1e-6)  # as asked for
    # E (1 + alpha E) = level + hbar^2 k^2/2m: dE/d(k^2) is hbar^2/2m (1 + 2 alpha E).
    for width, axial in found["masses"].items():
        lowest = closed_eV(float(width), mass, alpha)[0]
        assert axial == pytest.approx(mass * (1 + 2 * alpha * lowest), rel=1e-5)
    # At the width found, dG/dE_F dips between the first two steps to a tenth of its smaller value at them.
    energy = closed_eV(found["widest_nm"], mass, alpha)
    occupied = expit((np.linspace(*energy[:2], 20_001)[:, None] - energy) / (BOLTZMANN * 77))
    slope = (occupied * (1 - occupied)).sum(axis=1)
    assert 1 - slope.min() / min(slope[0], slope[-1]) == pytest.approx(0.9, abs=1e-4)
    low, high = closed_eV(16 - 1e-4, mass, alpha), closed_eV(16 + 1e-4, mass, alpha)
    slopes_meV_per_nm = 1e3 * (high - low) / 2e-4
    assert found["first"]["section.width"] == pytest.approx(slopes_meV_per_nm[0], rel=1e-4)
    assert found["spacing_meV_per_nm"] == pytest.approx(slopes_meV_per_nm[1] - slopes_meV_per_nm[0], rel=1e-4)
    level = HBAR2_OVER_2M0 / mass * pi**2 / 64
    by_height = -2e3 * level / 8 / sqrt(1 + 4 * alpha * HBAR2_OVER_2M0 / mass * pi**2 * (1 / 256 + 1 / 64))
    assert found["first"]["section.height"] == pytest.approx(by_height, rel=1e-4)
    assert sorted(set(found["kinds"]), key=found["kinds"].index) == ["plateau", "shoulder", "merged"]


def maker() -> Any:
    """The script that invented the measured staircase."""
    path = REPOSITORY / "scripts" / "make_example_staircase.py"
    specification = importlib.util.spec_from_file_location(path.stem, path)
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


def test_reading_a_staircase(tmp_path: Path) -> None:
    names = "NAMES", "found", "bars", "covariance", "chi_square", "noise_G0", "pairs"
    more = '"wrong": [[name, factor, list(o), chi] for (name, factor), (o, chi) in wrong.items()]'
    told = run("reading_a_staircase", "{" + ", ".join(f'"{n}": {n}' for n in names) + f", {more}}}", tmp_path)
    made = maker()
    assert set(told["NAMES"]) == set(made.TRUE)
    # Four values within three bars: more often missed than once in ninety seeds would be a wrong bar.
    for name, value, bar in zip(told["NAMES"], told["found"], told["bars"], strict=True):
        assert abs(value - made.TRUE[name]) < 3 * bar, name
        assert bar < 0.02 * abs(made.TRUE[name])
    # 20 points tell the noise to a sixth or so; chi square goes with its inverse square.
    assert told["noise_G0"] == pytest.approx(1e-6 * made.NOISE_uS / 7.748091729e-5, rel=0.4)
    assert 0.5 < told["chi_square"] < 2
    # The covariance against the one of the model in closed form: J^T J from differences of the maker's own formula.
    jacobian = []
    for name in told["NAMES"]:
        step = 1e-4 * abs(made.TRUE[name])
        ends = [curve_G0(made, {**made.TRUE, name: made.TRUE[name] + sign * step}) for sign in (1, -1)]
        jacobian.append((ends[0] - ends[1]) / (2 * step))
    exact = np.linalg.inv(np.array(jacobian) @ np.array(jacobian).T) * told["noise_G0"] ** 2
    assert told["bars"] == pytest.approx(np.sqrt(np.diag(exact)), rel=0.1)
    right = {(name, factor): (others, chi) for name, factor, others, chi in told["wrong"]}
    (_, _, cool), chi = right["first step alone", 1.0]
    (_, _, warm), wrong_chi = right["first step alone", 1.2]
    # Only lever arm over temperature is in one step.
    assert warm / cool == pytest.approx(1.2, rel=1e-3)
    assert wrong_chi == pytest.approx(chi, rel=0.01)
    assert right["all points", 1.2][1] > 100 * right["all points", 1.0][1]


def curve_G0(made: Any, values: dict[str, float]) -> np.ndarray:
    """The maker's curve without noise, at other parameters."""
    from scipy.special import jn_zeros

    lowest = HBAR2_OVER_2M0 / made.MASS * (jn_zeros(0, 1)[0] / (made.DIAMETER_nm / 2)) ** 2
    fermi = lowest + values["lever_arm_eV_per_V"] * (made.VOLTAGES_V - values["opens_at_V"])
    through = made.wire_G0(fermi, values["electron_temperature_K"])
    return through / (1 + through * values["series_resistance_ohm"] * 7.748091729e-5)


def test_the_measured_staircase_is_what_its_script_makes(tmp_path: Path) -> None:
    made = maker()
    made.main(tmp_path / "again.csv")
    assert (tmp_path / "again.csv").read_bytes() == (EXAMPLES / "measured_staircase.csv").read_bytes()


@pytest.mark.parametrize("path", PATHS, ids=lambda path: path.stem)
def test_notebooks_are_small_and_show_what_they_found(path: Path) -> None:
    assert path.stat().st_size < 300_000
    notebook = nbformat.read(path, as_version=4)
    nbformat.validate(notebook)
    code = [cell for cell in notebook.cells if cell.cell_type == "code"]
    assert [cell.execution_count for cell in code] == list(range(1, len(code) + 1))
    kinds = [output.output_type for cell in code for output in cell.outputs]
    assert set(kinds) <= {"stream", "execute_result", "display_data"}
    assert all(output.name == "stdout" for cell in code for output in cell.outputs if output.output_type == "stream")
    text = path.read_text(encoding="utf-8")
    assert str(Path.home()) not in text and "/tmp" not in text
    # A test of its own looks at its numbers.
    assert f"test_{path.stem}" in globals()
