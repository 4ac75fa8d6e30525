"""The examples run, draw their picture, and print numbers that closed forms or another method give too.

Each number is compared with a reference that is computed here by another way than in the example.
"""

from __future__ import annotations

import importlib.util
import subprocess
import sys
from itertools import pairwise
from math import log, pi, sqrt
from pathlib import Path
from types import ModuleType
from typing import Any

import mpmath
import numpy as np
import pytest
from PIL import Image
from scipy.linalg import eigh_tridiagonal
from scipy.special import expit

import wiresolve as ws

REPOSITORY = Path(__file__).resolve().parents[1]
PATHS = sorted((REPOSITORY / "examples").glob("*.py"))
PICTURES = REPOSITORY / "examples" / "pictures"
# CODATA 2022: hbar^2/(2 m0) in eV nm^2, Boltzmann's constant in eV/K.
HBAR2_OVER_2M0, BOLTZMANN = 0.0380998212, 8.617333262e-5
# Zeros of J_n, M. Abramowitz and I. A. Stegun (1964), Table 9.5, as (zero, number of states for each spin).
ZEROS = (
    (2.4048255577, 1), (3.8317059702, 2), (5.1356223018, 2), (5.5200781103, 1), (6.3801618960, 2),
    (7.0155866698, 2), (7.5883424345, 2), (8.4172441404, 2), (8.6537279129, 1), (8.7714838160, 2),
)  # fmt: skip

# Gap in eV at 0 K and how it falls with temperature (eV/K, K) of GaAs and AlAs.
GAPS = ((1.519, 0.5405e-3, 204.0), (3.099, 0.885e-3, 530.0))


def loaded(name: str) -> ModuleType:
    """An example as a module."""
    specification = importlib.util.spec_from_file_location(name, REPOSITORY / "examples" / f"{name}.py")
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


def run(name: str, folder: Path) -> Any:
    """What an example's `main` returns; the picture that it draws is looked at in passing."""
    path = folder / f"{name}.png"
    found = loaded(name).main(str(path))
    with Image.open(path) as image:
        colours = np.unique(np.asarray(image.convert("RGB")).reshape(-1, 3), axis=0)
        assert image.width >= 500
    assert len(colours) > 20
    return found


def extrapolated(levels: Any, points: int) -> Any:
    """Levels of a method of second order, from two grids (L. F. Richardson)."""
    return (4 * levels(2 * points) - levels(points)) / 3


def test_mesh_a_section(tmp_path: Path) -> None:
    found_nm2, closed_nm2, unknowns = run("mesh_a_section", tmp_path)

    def rounded_hexagon(flats: float, radius: float) -> float:
        # J. Steiner: what lies within `radius` of a convex figure, here of the hexagon between the corners' centres.
        inner = flats - 2 * radius
        return sqrt(3) / 2 * inner**2 + 2 * sqrt(3) * inner * radius + pi * radius**2

    core = rounded_hexagon(24, 4)
    expected = [core, rounded_hexagon(36, 10) - core]
    assert closed_nm2 == pytest.approx(expected, rel=1e-13)
    # Cells of fourth degree follow a circle to the sixth power of their size at least; straight ones would be 1e-3 off.
    assert found_nm2 == pytest.approx(expected, rel=1e-8)
    hexagon = ws.shapes.Hexagon(across_flats_nm=24, corner_radius_nm=4)
    section = ws.Section(shape=hexagon, material="GaAs", layers=(ws.Layer(thickness_nm=6, material="Al0.3Ga0.7As"),))
    problem = ws.Problem("The same", section, ws.Carriers(temperature_K=77.0), ws.Accuracy(subbands=4))
    assert unknowns == ws.solve(problem).summary.unknowns


def test_size_a_channel(tmp_path: Path) -> None:
    found_nm, closed_nm, contrast = run("size_a_channel", tmp_path)
    spacing = 4 * HBAR2_OVER_2M0 * (ZEROS[1][0] ** 2 - ZEROS[0][0] ** 2)
    assert spacing == pytest.approx(1.3562, abs=5e-5)
    expected = sqrt(spacing / 0.0795 / (10 * BOLTZMANN * 77))
    assert closed_nm == pytest.approx(expected, rel=1e-8)
    # An error of 1e-6 eV in a spacing of 0.066 eV moves the diameter by 8e-6 of it; the search ends at 1e-4 nm.
    assert found_nm == pytest.approx(expected, rel=2e-5)
    # Steps of heights 1 and 2, 10 kT apart: between their peaks exp(-x) + 2 exp(x - 10) is least at x = 5 - ln(2)/2.
    dip = sum(height / (4 * np.cosh((5 - log(2) / 2 - at) / 2) ** 2) for height, at in ((1, 0), (2, 10)))
    assert contrast == pytest.approx(1 - 4 * dip, abs=2e-3)


def test_sheet_or_wire(tmp_path: Path) -> None:
    found_nm, closed_nm = run("sheet_or_wire", tmp_path)

    def box(size_nm: float) -> Any:
        # The sum over exp(-a n^2) is (theta_3(0, exp(-a)) - 1)/2, and the mean energy its logarithmic derivative.
        a = HBAR2_OVER_2M0 / 0.067 * (mpmath.pi / size_nm) ** 2 / (BOLTZMANN * 300)
        slope = mpmath.diff(lambda b: mpmath.log((mpmath.jtheta(3, 0, mpmath.exp(-b)) - 1) / 2), a)
        return -2 * a * (slope + 1)

    expected = float(mpmath.findroot(lambda width: 1 + box(width) + box(5) - 1.5, (15, 20), solver="anderson"))
    assert closed_nm == pytest.approx(expected, rel=1e-7)
    # The search ends at 1e-3 nm, where the dimension is known to 5e-5.
    assert found_nm == pytest.approx(expected, abs=2e-3)


def test_barrier_or_wall(tmp_path: Path) -> None:
    found_meV, closed_meV = run("barrier_or_wall", tmp_path)
    # I. Vurgaftman, J. R. Meyer, L. R. Ram-Mohan, J. Appl. Phys. 89, 5815 (2001): gaps at 77 K, their bowing, a valence
    # offset of 0.53 eV for each Al fraction. The mass of the alloy is linear between 0.067 and 0.15 (NSM Archive).
    gallium, aluminium = (gap - slope * 77**2 / (77 + bend) for gap, slope, bend in GAPS)
    height = 0.3 * (aluminium - gallium) - 0.3 * 0.7 * (-0.127 + 1.310 * 0.3) - 0.3 * 0.53
    mass, other, radius = 0.067, 0.067 + 0.3 * 0.083, 10.0

    def lowest(points: int) -> float:
        # Finite volumes along the radius, a face of them on the wall of the core; far out a hard wall.
        step = 4 * radius / points
        middle, face = (np.arange(points) + 0.5) * step, np.arange(1, points + 1) * step
        inside = middle < radius
        inverse_mass = np.where(inside, 1 / mass, 1 / other)
        flow = HBAR2_OVER_2M0 * face / step**2 * 2 / (1 / inverse_mass + 1 / np.append(inverse_mass[1:], 1 / other))
        flow[-1] *= 2
        diagonal = (flow + np.append(0, flow[:-1])) / middle + np.where(inside, 0, height)
        off = -flow[:-1] / np.sqrt(middle[:-1] * middle[1:])
        return float(eigh_tridiagonal(diagonal, off, select="i", select_range=(0, 0))[0][0])

    expected = [HBAR2_OVER_2M0 / mass * (ZEROS[0][0] / radius) ** 2, extrapolated(lowest, 1000)]
    assert closed_meV == pytest.approx([1e3 * energy for energy in expected], rel=2e-6)
    assert found_meV == pytest.approx([1e3 * energy for energy in expected], abs=1e-2)  # as asked for
    assert found_meV[0] / found_meV[1] - 1 > 0.3


def test_staircase(tmp_path: Path) -> None:
    result, off = run("staircase", tmp_path)
    energy = np.array([HBAR2_OVER_2M0 / 0.067 * (zero / 12) ** 2 for zero, _ in ZEROS])
    states = np.array([count for _, count in ZEROS])
    cold, warm, _ = result.verdict.steps
    assert [step["height_G0"] for step in cold["levels"]] == states[:5].tolist()
    assert [step["opens_at_eV"] for step in cold["levels"]] == pytest.approx(energy[:5], abs=1e-6)  # as asked for
    assert {step["kind"] for step in cold["levels"]} == {"plateau"}
    # At 77 K: how deep dG/dE_F dips between two steps, below the smaller of its values at them.
    contrasts = []
    for low, high in pairwise(energy[:5]):
        occupied = expit((np.linspace(low, high, 20_001)[:, None] - energy) / (BOLTZMANN * 77))
        slope = (states * occupied * (1 - occupied)).sum(axis=1)
        contrasts.append(1 - slope.min() / min(slope[0], slope[-1]))
    assert [step["contrast"] for step in warm["levels"][:4]] == pytest.approx(contrasts, abs=1e-4)
    assert [step["kind"] for step in warm["levels"][:4]] == ["shoulder", "shoulder", "merged", "shoulder"]
    # The example's own sum, at a Fermi level to which the tabulated zeros are enough.
    at = np.array([0.05])
    expected = (states * expit((at - energy) / (BOLTZMANN * 77))).sum()
    assert loaded("staircase").landauer(at, 77.0)[0] == pytest.approx(expected, rel=1e-7)
    # Bars of 1e-6 eV move G by up to g/4 1e-6 eV/kT; at 300 K levels above the solved ones are counted semiclassically.
    assert off[4.2] < 1.5e-3
    assert off[77.0] < 1e-4
    assert off[300.0] < 1e-3


def test_own_potential(tmp_path: Path) -> None:
    found_eV, closed_eV = run("own_potential", tmp_path)
    kinetic = HBAR2_OVER_2M0 / 0.067

    def depths(points: int) -> Any:
        step = 60.0 / points
        depth = step * np.arange(1, points)
        diagonal = 2 * kinetic / step**2 - 0.3 * np.exp(-depth / 10)
        beside = np.full(points - 2, -kinetic / step**2)
        return eigh_tridiagonal(diagonal, beside, select="i", select_range=(0, 2))[0]

    across = kinetic * (pi * np.arange(1, 6) / 24) ** 2
    expected = np.sort(np.add.outer(extrapolated(depths, 1500), across).ravel())[:4]
    assert closed_eV == pytest.approx(expected, abs=2e-8)
    assert found_eV == pytest.approx(expected, abs=1e-6)  # 1e-5 was asked for


@pytest.mark.parametrize("path", PATHS, ids=lambda path: path.stem)
def test_examples_are_short_and_tested(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert 20 <= len(text.splitlines()) <= 64
    assert "import wiresolve as ws\n" in text
    assert "from wiresolve" not in text
    assert f"python examples/{path.name} [PICTURE.png]" in text
    assert f"test_{path.stem}" in globals()


def test_there_is_a_picture_of_each() -> None:
    assert {path.stem for path in PICTURES.iterdir()} == {"core_shell", *(path.stem for path in PATHS)}
    for path in PICTURES.iterdir():
        assert path.suffix == ".png"
        assert path.stat().st_size <= 250_000
    with Image.open(PICTURES / "core_shell.png") as image:
        assert image.width / image.info["dpi"][0] * 25.4 == pytest.approx(178, abs=0.5)
    assert "](examples/pictures/core_shell.png)" in (REPOSITORY / "README.md").read_text(encoding="utf-8")


def test_an_example_can_be_started(tmp_path: Path) -> None:
    words = [sys.executable, "-W", "error", str(REPOSITORY / "examples" / "mesh_a_section.py"), "drawn.png"]
    done = subprocess.run(words, cwd=tmp_path, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout.count("closed form") == 2
    assert (tmp_path / "drawn.png").stat().st_size > 0
