"""Figures: drawn headless, the same bytes twice, to scale, and true to the functions that they show."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from matplotlib import rcParams
from PIL import Image

from tests.synthetic import CORE_NM, RADIUS_NM, core_shell_result, round_mesh, round_modes
from wiresolve.describe.problem import Carriers
from wiresolve.output import figures
from wiresolve.output.raster import edges, outline, raster
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS


def signed_area(loop: np.ndarray) -> float:
    x, y = loop.T
    return float(0.5 * np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]))


def test_outlines_are_circles_around_their_regions() -> None:
    found = edges(round_mesh())
    shell, core = outline(found, 0), outline(found, 1)
    assert len(core) == 1
    assert np.hypot(*core[0].T) == pytest.approx(CORE_NM, rel=1e-6)
    # Straight pieces lie inside the arc; the hole of the shell runs clockwise.
    areas = sorted(signed_area(loop) for loop in shell)
    assert areas == pytest.approx([-np.pi * CORE_NM**2, np.pi * RADIUS_NM**2], rel=1e-3)
    assert sum(found.on_outline) < len(found.lines)
    assert np.array_equal(np.unique(found.regions), [-1, 0, 1])


def test_pixels_show_the_function() -> None:
    mesh = round_mesh()
    orders = [(0, 1, False), (1, 1, True), (2, 1, False)]
    half = 1.05 * RADIUS_NM
    pixels = raster(mesh, (-half, half, -half, half), 90)
    centre = -half + (np.arange(90) + 0.5) * 2 * half / 90
    x, y = np.meshgrid(centre, centre)
    inside = np.hypot(x, y) < RADIUS_NM
    exact = round_modes(np.column_stack([x.ravel(), y.ravel()]), orders)
    for column in range(3):
        image = pixels.image(round_modes(mesh.points, orders)[:, column])
        assert np.isfinite(image[np.hypot(x, y) < RADIUS_NM - 0.05]).all()
        assert np.isnan(image[np.hypot(x, y) > RADIUS_NM + 0.05]).all()
        shown = np.isfinite(image) & inside
        # A cell's place is found between its nodes with straight lines, good to a few thousandths of the largest value.
        off = np.abs(image - exact[:, column].reshape(image.shape))[shown]
        assert off.max() < 4e-3 * np.abs(exact[:, column]).max()


def test_all_figures_are_written_twice_alike(tmp_path: Path) -> None:
    result = core_shell_result()
    before = dict(rcParams)
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        figures.save_all(result, tmp_path / name)
    assert dict(rcParams) == before
    names = {f"{name}.{kind}" for name in figures.FIGURES for kind in ("png", "svg")}
    assert {p.name for p in (tmp_path / "a").iterdir()} == names
    for name in names:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
    for path in (tmp_path / "a").glob("*.png"):
        with Image.open(path) as image:
            colours = np.unique(np.asarray(image.convert("RGB")).reshape(-1, 3), axis=0)
            width_mm = image.width / image.info["dpi"][0] * 25.4
        assert len(colours) > 20, path
        assert width_mm == pytest.approx(86, abs=0.3) or width_mm == pytest.approx(178, abs=0.3), path


def test_the_scale_bar_is_to_scale() -> None:
    figure = figures.section(core_shell_result())
    drawing, key = figure.axes
    bar = key.lines[0]
    drawn = np.ptp(key.transData.transform(bar.get_xydata())[:, 0])
    length_nm = float(key.texts[0].get_text().removesuffix(" nm"))
    (left, _), (right, top) = drawing.transData.transform([(0, 0), (length_nm, length_nm)])
    assert drawn == pytest.approx(right - left, rel=1e-9)
    assert top - drawing.transData.transform((0, 0))[1] == pytest.approx(right - left, rel=1e-9)
    texts = [text.get_text() for text in key.texts]
    assert texts[1:] == ["core: GaAs", "layer 1: Al0.3Ga0.7As"]


def test_microsiemens_stand_beside_the_quantum() -> None:
    result = core_shell_result()
    left, right = figures.conductance(result).axes
    ratio = np.array(right.get_ylim()) / np.maximum(left.get_ylim(), 1e-300)
    # G0 = 2 e^2 / h = 77.48091729 microsiemens (CODATA 2018, exact).
    assert ratio[1] == pytest.approx(77.48091729, rel=1e-9)
    assert ratio[1] == pytest.approx(1e6 * CONDUCTANCE_QUANTUM_SIEMENS)
    assert [line.get_label() for line in left.lines[:3]] == ["4.2 K", "77 K", "300 K"]


def test_a_pair_is_drawn_as_two_and_counted_as_four() -> None:
    ladder = figures.levels(core_shell_result(3)).axes[0]
    texts = [text.get_text() for text in ladder.texts if "±" in text.get_text()]
    assert [text.split()[-1] for text in texts] == ["(×2)", "(×4)"]
    assert len(ladder.patches) == 3


def test_one_subband_and_many(tmp_path: Path) -> None:
    for count in (1, 30):
        result = core_shell_result(count)
        grid = figures.modes(result)
        assert len(grid.axes) == min(count, figures.MOST_MODES)
        figures.levels(result)
        figures.dispersion(result)


def test_one_level_without_bar_or_temperature_can_be_drawn(tmp_path: Path) -> None:
    result = core_shell_result(1)
    problem = replace(result.problem, carriers=Carriers(temperature_K=(0.0,)))
    bare = replace(result, problem=problem, subbands=(replace(result.subbands[0], error_eV=0.0),), conductance=())
    assert len(figures.save_all(bare, tmp_path)) == 2 * len(figures.FIGURES)


def test_neither_pyplot_nor_a_renderer_is_loaded() -> None:
    script = (
        "import sys, wiresolve.output.figures, wiresolve.output.vtk\n"
        "import vtkmodules.vtkIOXML, vtkmodules.util.numpy_support\n"
        "print(*(m for m in sys.modules if 'pyplot' in m or 'Rendering' in m or 'OpenGL' in m or m == 'pyvista'))"
    )
    run = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert (run.stdout.strip(), run.stderr) == ("", "")
