"""Figures: drawn headless, the same bytes twice, to scale, and true to the functions that they show."""

from __future__ import annotations

import io
import re
import subprocess
import sys
import zlib
from dataclasses import replace
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest
from fontTools.ttLib import TTFont
from matplotlib import get_data_path, rc_context, rcParams
from matplotlib.contour import ContourSet
from matplotlib.figure import Figure
from matplotlib.text import Text
from PIL import Image

from tests.gate_sweeps import PlateSweep, swept_problem
from tests.synthetic import CORE_NM, RADIUS_NM, charged_result, core_shell_result, round_mesh, round_modes
from wiresolve.describe.gates import Surroundings
from wiresolve.describe.problem import Carriers
from wiresolve.gate_curve import gate_curve
from wiresolve.output import figures, gate_curve_figures
from wiresolve.output.canvas import CYCLE, FAINT
from wiresolve.output.raster import edges, outline, outlines, raster
from wiresolve.output.section_figure import MOST_MODES
from wiresolve.output.style import DPI
from wiresolve.output.tables import subband_table
from wiresolve.physics.sensitivity import OutlineSensitivity
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
    names = {f"{name}.{kind}" for name in figures.drawable(result) for kind in ("png", "svg", "pdf")}
    assert {p.name for p in (tmp_path / "a").iterdir()} == names
    for name in names:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
    for path in (tmp_path / "a").glob("*.png"):
        with Image.open(path) as image:
            colours = np.unique(np.asarray(image.convert("RGB")).astype(np.int64) @ [1 << 16, 1 << 8, 1])
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


def words(axes: Any) -> list[str]:
    return [text.get_text() for text in axes.texts]


def titles(figure: Figure) -> list[Text]:
    """Of the modes, panel by panel."""
    return [text for text in figure.axes[0].texts if text.get_text().startswith("subband")]


def test_titles_of_modes_have_the_bars_of_the_table() -> None:
    result = core_shell_result(2)
    sharp = replace(result, subbands=tuple(replace(s, error_eV=3e-9) for s in result.subbands))
    table = subband_table(sharp)[2 : 2 + len(sharp.subbands)]
    for title, row in zip(titles(figures.modes(sharp)), table, strict=True):
        energy = title.get_text().splitlines()[1].removesuffix(" meV")
        assert energy.endswith("± 0.000004") or energy.endswith("± 0.000003")
        assert energy in row


def test_a_long_bar_of_kT_is_cut_and_says_so() -> None:
    """The levels span 35 meV: kT is 0.36 meV at 4.2 K, 6.6 meV at 77 K, 51.7 meV at 600 K (8.617333e-5 eV/K)."""
    result = core_shell_result(3)
    hot = replace(result, problem=replace(result.problem, carriers=Carriers(temperature_K=(4.2, 77.0, 600.0))))
    ladder = figures.levels(hot).axes[0]
    low, top = ladder.get_ylim()
    kelvin = [word for word in words(ladder) if "kT" in word]
    assert kelvin == ["kT at 77 K", "kT at 600 K, longer than shown", "too short to draw: kT at 4.2 K"]
    bars = [line.get_ydata() for line in ladder.lines if line.get_linewidth() == 3]
    assert [bars[0][0], bars[0][1] - bars[0][0]] == pytest.approx([1e3 * result.energies_eV[0], 6.635347], rel=1e-5)
    assert low < bars[1][0] < bars[1][1] <= top
    heads = [line for line in ladder.lines if line.get_marker() == "^"]
    assert [line.get_ydata()[0] for line in heads] == [bars[1][1]]
    for text in ladder.texts:
        box = text.get_window_extent()
        assert box.y1 <= ladder.title.get_window_extent().y0


def curves_of(axes: Any) -> list[Any]:
    """The lines of the dispersion without those that lead to labels."""
    return [line for line in axes.lines if len(line.get_xdata()) > 3 and line.get_color() != FAINT]


def test_labels_of_the_dispersion_stay_in_the_frame_and_have_lines() -> None:
    result = core_shell_result(30)
    figure = figures.dispersion(result)
    axes = figure.axes[0]
    frame = axes.get_window_extent()
    labels = [text for text in axes.texts if text.get_text().isdigit()]
    assert labels
    heights = sorted(text.get_window_extent().y0 for text in labels)
    for text in labels:
        box = text.get_window_extent()
        assert frame.y0 - 1 <= box.y0 and box.y1 <= frame.y1 + 1 and box.x1 <= figure.bbox.x1
    assert min(np.diff(heights), default=99) > 0.8 * 7 / 72 * figure.dpi
    curves = curves_of(axes)
    looks = {
        (s.level, line.get_color(), str(line._dash_pattern)) for s, line in zip(result.subbands, curves, strict=True)
    }
    assert len(looks) == len({look[1:] for look in looks}) == len({s.level for s in result.subbands})


def test_the_dispersion_is_cut_where_levels_would_run_together() -> None:
    result = core_shell_result(6)
    k = np.linspace(0, 6.0, 61)
    wide = replace(result.dispersion, k_per_nm=k, energy_eV=result.energies_eV[:, None] + 0.57 * k**2)
    axes = figures.dispersion(replace(result, dispersion=wide)).axes[0]
    assert axes.get_xlim()[1] < 1.5
    assert axes.get_xlabel().endswith("(1/nm)") and axes.get_ylabel() == "Energy (meV)"


def of_valleys(count: int) -> Any:
    result = core_shell_result(count)
    labels = ("L [1-11] [1-1-1]", "Delta [001]", "Delta [100] [010] [001]")
    named = tuple(replace(s, valley=labels[s.index % 3]) for s in result.subbands)
    return replace(result, subbands=named)


def test_modes_name_their_valleys() -> None:
    figure = figures.modes(of_valleys(4))
    assert [title.get_text().splitlines()[2] for title in titles(figure)] == [
        "Delta [001]",
        "Delta [100] [010] and 1 more",
        "L [1-11] [1-1-1]",
        "Delta [001]",
    ]
    (note,) = [text.get_text() for text in figure.texts]
    assert note.endswith("of valleys that are alike one is shown")
    boxes = [title.get_window_extent() for title in titles(figure)]
    assert all(box.x0 >= 0 and box.x1 <= figure.bbox.x1 and box.y1 <= figure.bbox.y1 for box in boxes)
    plain = figures.modes(core_shell_result(1))
    assert not plain.texts and len(titles(plain)[0].get_text().splitlines()) == 2


def test_groups_of_valleys_have_lines_of_their_own() -> None:
    result = of_valleys(4)
    for draw in (figures.levels, figures.dispersion):
        figure = draw(result)
        figure.canvas.draw()
        (legend,) = figure.legends
        handles = {text.get_text() for text in legend.get_texts()}
        box = legend.get_window_extent()
        assert box.x0 >= 0 and box.x1 <= figure.bbox.x1 and box.y0 >= 0
        assert box.y1 <= figure.axes[0].xaxis.label.get_window_extent().y0 or draw is figures.levels
        shown = {"L [1-11] [1-1-1]", "Delta [001]", "Delta [100] [010] and 1 more"}
        assert shown <= handles
    curves = curves_of(figures.dispersion(result).axes[0])
    dashes = [str(line._dash_pattern) for line in curves]
    assert dashes[0] == dashes[3] and len(set(dashes)) == 3
    assert not figures.dispersion(core_shell_result(4)).legends


@pytest.mark.parametrize(("fermi_eV", "seen"), [(0.05, True), (-3.0, False), (9.0, False), (None, False)])
def test_the_fermi_level_is_marked(fermi_eV: float | None, seen: bool) -> None:
    result = core_shell_result(6)
    carriers = replace(result.problem.carriers, fermi_level_eV=fermi_eV)
    result = replace(result, problem=replace(result.problem, carriers=carriers))
    for draw, along in ((figures.conductance, "x"), (figures.dispersion, "y")):
        axes = draw(result).axes[0]
        said = [word for word in words(axes) if "Fermi" in word]
        dashed = [
            getattr(line, f"get_{along}data")()
            for line in axes.lines
            if line.get_linewidth() == 0.6 and line.is_dashed()
        ]
        if seen:
            assert said == ["Fermi level"]
            assert [list(ends) for ends in dashed] == [[50.0, 50.0]]
        else:
            assert dashed == []
            assert said == [] if fermi_eV is None else said[0].startswith(f"Fermi level {1e3 * fermi_eV:.4g} meV")


def test_energies_are_in_meV() -> None:
    result = core_shell_result(6)
    for draw, name in ((figures.density_of_states, "Energy (meV)"), (figures.conductance, "Fermi level (meV)")):
        axes = draw(result).axes[0]
        assert axes.get_xlabel() == name
        low, high = axes.get_xlim()
        assert low < 1e3 * result.energies_eV[0] < 1e3 * result.energies_eV[-1] < high
    # The area under the curve is the number of states a nm, whatever the unit.
    data = result.density_of_states
    stairs = figures.density_of_states(result).axes[0].patches[0].get_data()
    area = np.sum(stairs.values * np.diff(stairs.edges))
    assert area == pytest.approx(np.sum(data.per_eV_nm * np.diff(data.edges_eV)), rel=1e-12)


def test_a_material_that_goes_on_outside_fills_the_frame() -> None:
    result = core_shell_result(1)
    regions = tuple(replace(r, name="outside") if r.name == "layer 1" else r for r in result.mesh.regions)
    open_mesh = replace(result.mesh, regions=regions)
    rim = outlines(result.mesh, edges(result.mesh))
    assert np.hypot(*rim.reshape(-1, 2).T).max() == pytest.approx(RADIUS_NM, rel=1e-6)
    kept = outlines(open_mesh, edges(open_mesh))
    assert np.hypot(*kept.reshape(-1, 2).T) == pytest.approx(CORE_NM, rel=1e-5)
    figure = figures.section(replace(result, mesh=open_mesh))
    figure.canvas.draw()
    image = np.asarray(figure.canvas.buffer_rgba())
    axes = figure.axes[0].get_window_extent()
    corner = image[image.shape[0] - round(axes.y0) - 6, round(axes.x0) + 5, :3]
    # Beyond the rim of the mesh, and coloured all the same.
    assert (corner < 250).any()


def test_one_subband_and_many(tmp_path: Path) -> None:
    for count in (1, 30):
        result = core_shell_result(count)
        grid = figures.modes(result)
        assert len(titles(grid)) == min(count, MOST_MODES)
        figures.levels(result)
        figures.dispersion(result)


def test_one_level_without_bar_or_temperature_can_be_drawn(tmp_path: Path) -> None:
    result = core_shell_result(1)
    problem = replace(result.problem, carriers=Carriers(temperature_K=(0.0,)))
    bare = replace(result, problem=problem, subbands=(replace(result.subbands[0], error_eV=0.0),), conductance=())
    assert len(figures.save_all(bare, tmp_path)) == 3 * len(figures.drawable(bare))


def test_neither_pyplot_nor_a_renderer_is_loaded() -> None:
    script = (
        "import sys, wiresolve.output.figures, wiresolve.output.vtk\n"
        "import vtkmodules.vtkIOXML, vtkmodules.util.numpy_support\n"
        "print(*(m for m in sys.modules if 'pyplot' in m or 'Rendering' in m or 'OpenGL' in m or m == 'pyvista'))"
    )
    run = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert (run.stdout.strip(), run.stderr) == ("", "")


def test_what_there_are_no_data_for_is_not_drawn(tmp_path: Path) -> None:
    plain, charged = core_shell_result(1), charged_result()
    assert set(figures.FIGURES) - set(figures.drawable(plain)) == {"sensitivity", "charge"}
    assert set(figures.FIGURES) - set(figures.drawable(charged)) == {"sensitivity"}
    segments = OutlineSensitivity(np.array([[[0.0, 0.0], [1.0, 0.0]], [[1.0, 0.0], [1.0, 1.0]]]), np.ones(2), None)
    assert "sensitivity" in figures.drawable(replace(plain, outline_sensitivity=segments))
    with pytest.raises(ValueError, match="no charge"):
        figures.charge(plain)
    written = figures.save_all(charged, tmp_path)
    assert {path.stem for path in written} == set(figures.drawable(charged))
    again = tmp_path / "again"
    again.mkdir()
    for path in figures.save_all(charged, again):
        assert path.read_bytes() == (tmp_path / path.name).read_bytes(), path.name


@pytest.mark.parametrize("kept_out", [False, True])
def test_charge_is_drawn_to_scale_and_true_to_its_values(kept_out: bool) -> None:
    left, left_bar, right, right_bar = figures.charge(charged_result(kept_out=kept_out)).axes
    x0, x1, y0, y1 = left.images[0].get_extent()
    shown = np.ma.filled(left.images[0].get_array().astype(float), np.nan)
    rows, columns = shown.shape
    x, y = np.meshgrid(
        x0 + (np.arange(columns) + 0.5) * (x1 - x0) / columns, y0 + (np.arange(rows) + 0.5) * (y1 - y0) / rows
    )
    radius = np.hypot(x, y)
    core, shell = radius < CORE_NM - 0.1, (radius > CORE_NM + 0.1) & (radius < RADIUS_NM - 0.1)
    # In meV: the edge, 0 or 300, less the potential of 100 mV at the centre.
    assert shown[core] == pytest.approx(-100 + radius[core] ** 2 / 2, abs=0.2)
    if kept_out:
        assert np.isnan(shown[shell]).all()
    else:
        assert shown[shell] == pytest.approx(200 + radius[shell] ** 2 / 2, abs=0.2)
    # 1e-3 carriers a cubic nanometre are 1e18 a cubic centimetre.
    dense = np.ma.filled(right.images[0].get_array().astype(float), np.nan)
    assert dense[core] == pytest.approx(1 - (radius[core] / CORE_NM) ** 2, abs=0.01)
    for axes in (left, right):
        (at_x, at_y), (to_x, to_y) = axes.transData.transform([(0, 0), (1, 1)])
        assert to_x - at_x == pytest.approx(to_y - at_y, rel=1e-9)
    assert [bar.get_xlabel() for bar in (left_bar, right_bar)] == ["meV from the Fermi level", "10¹⁸ cm⁻³"]
    assert ("blank" in figures.charge(charged_result(kept_out=kept_out)).texts[0].get_text()) == kept_out


def test_the_fermi_level_is_where_the_band_edge_passes_through_it() -> None:
    """-0.1 eV + r^2/(500 nm^2 / eV) is zero at r = sqrt(50) nm = 7.0711 nm; between core and shell it only jumps."""
    result = charged_result()
    squared = (result.mesh.points**2).sum(axis=1)
    steep = replace(result.charge, potential_V=0.1 - squared / 500)
    figure = figures.charge(replace(result, charge=steep))
    lines = [c for c in figure.axes[0].collections if isinstance(c, ContourSet)]
    (points,) = [line.get_paths()[0].vertices for line in lines]
    assert np.hypot(*points.T) == pytest.approx(50**0.5, abs=0.02)
    assert "Fermi level" in figure.texts[0].get_text()
    flat = replace(result.charge, potential_V=0.1 + 0 * squared)
    figure = figures.charge(replace(result, charge=flat))
    assert not [c for c in figure.axes[0].collections if isinstance(c, ContourSet)]
    assert "Fermi level" not in figure.texts[0].get_text()


def test_figures_of_a_charged_wire_count_from_its_fermi_level() -> None:
    result, plain = charged_result(), core_shell_result(3)
    conductance = figures.conductance(result).axes[0]
    assert "potential kept" in conductance.get_xlabel()
    assert conductance.get_title(loc="left").startswith("Not the staircase of a gate")
    assert figures.conductance(plain).axes[0].get_title(loc="left").startswith("Ballistic")
    assert figures.density_of_states(result).axes[0].get_xlabel() == "Energy from the Fermi level (meV)"
    assert figures.levels(result).axes[0].get_ylabel() == "Energy from the Fermi level (meV)"
    assert figures.levels(plain).axes[0].get_ylabel() == "Energy (meV)"
    below = replace(result, subbands=tuple(replace(s, energy_eV=s.energy_eV - 0.03) for s in result.subbands))
    dashed = [line for line in figures.levels(below).axes[0].lines if line.is_dashed()]
    assert [list(line.get_ydata()) for line in dashed] == [[0.0, 0.0]]


def test_surroundings_are_shown_as_a_margin_and_not_to_their_ends() -> None:
    result = charged_result()
    mesh = result.mesh
    # The shell as if it were the air around the core: it goes on far beyond what is shown.
    regions = tuple(replace(r, name="beside", material="air") if r.name == "layer 1" else r for r in mesh.regions)
    problem = replace(result.problem, surroundings=Surroundings(beside="air"))
    far = np.where(np.hypot(*mesh.points.T)[:, None] > CORE_NM + 1e-5, 1e3 * mesh.points, mesh.points)
    wide = replace(
        result,
        mesh=replace(mesh, regions=regions, points=far),
        problem=problem,
        modes=np.exp(-(far**2).sum(1))[:, None],
    )
    low, high = figures.section(wide).axes[0].get_xlim()
    assert -low == pytest.approx(high)
    assert 1.1 * CORE_NM < high < 1.5 * CORE_NM
    (low, high), (bottom, top) = (figures.charge(wide).axes[0].get_xlim(), figures.charge(wide).axes[0].get_ylim())
    assert max(-low, high, -bottom, top) < 1.1 * CORE_NM


def pdf_streams(content: bytes) -> list[bytes]:
    """What a PDF holds, decompressed."""
    found = []
    for match in re.finditer(rb"stream\r?\n(.*?)\r?\nendstream", content, re.DOTALL):
        try:
            found.append(zlib.decompress(match[1]))
        except zlib.error:
            found.append(match[1])
    return found


def pdf_text(content: bytes) -> list[str]:
    """The lines of text of a PDF whose fonts are of two-byte codes, by the tables that tell their letters."""
    streams = pdf_streams(content)
    letters: dict[int, str] = {}
    for stream in streams:
        for first, _, texts in re.findall(rb"<([0-9a-f]{4})> <([0-9a-f]{4})> \[([^]]*)\]", stream):
            for place, text in enumerate(re.findall(rb"<([0-9a-f]*)>", texts)):
                letters[int(first, 16) + place] = bytes.fromhex(text.decode()).decode("utf-16-be")
    found = []
    for block in re.findall(rb"BT\n(.*?)\nET", b"".join(s for s in streams if b"BT\n" in s), re.DOTALL):
        shown = b"".join(re.findall(rb"\(((?:\\.|[^\\)])*)\)", block, re.DOTALL))
        codes = re.sub(rb"\\(.)", rb"\1", shown, flags=re.DOTALL)
        found.append("".join(letters[int.from_bytes(codes[k : k + 2], "big")] for k in range(0, len(codes), 2)))
    return found


def svg_text(content: str) -> list[str]:
    spaced = "{http://www.w3.org/2000/svg}text"
    return ["".join(text.itertext()) for text in ElementTree.fromstring(content).iter(spaced)]


def shown_text(figure: Figure) -> set[str]:
    """Every line of text of a figure but the numbers along its axes."""
    texts = list(figure.texts)
    for axes in figure.axes:
        texts += [*axes.texts, axes.title, axes._left_title]
        texts += [axes.xaxis.label, axes.yaxis.label] if axes.axison else []
    for legend in (*figure.legends, *(axes.get_legend() for axes in figure.axes)):
        texts += [] if legend is None else legend.get_texts()
    return {line for text in texts for line in text.get_text().splitlines()}


def test_text_stays_text_in_svg_and_pdf(tmp_path: Path) -> None:
    segments = np.array([[[0.0, 0.0], [1.0, 0.0]], [[1.0, 0.0], [1.0, 1.0]]])
    outline = OutlineSensitivity(segments, np.array([1.0, -1.0]), None)
    for result in (replace(core_shell_result(6), outline_sensitivity=outline), charged_result()):
        figures.save_all(result, tmp_path)
        for name in figures.drawable(result):
            wanted = shown_text(figures.FIGURES[name](result))
            assert wanted, name
            content = (tmp_path / f"{name}.pdf").read_bytes()
            assert wanted <= set(svg_text((tmp_path / f"{name}.svg").read_text(encoding="utf-8"))), name
            assert wanted <= set(pdf_text(content)), name
            # TrueType, embedded; no letters as drawings of their own (Type 3).
            assert content.count(b"/CIDFontType2") == content.count(b"/FontFile2") >= 1
            assert b"/Type3" not in content and b"/CreationDate" not in content


def test_every_kind_of_file_has_the_width_of_a_column_or_a_page(tmp_path: Path) -> None:
    result = core_shell_result(6)
    figures.save_all(result, tmp_path)
    for name in figures.drawable(result):
        svg = (tmp_path / f"{name}.svg").read_text(encoding="utf-8")
        box = re.search(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", (tmp_path / f"{name}.pdf").read_bytes())
        svg_box = re.search(r'<svg[^>]* width="([\d.]+)pt" height="([\d.]+)pt"|<svg[^>]* height="([\d.]+)pt"', svg)
        assert box is not None and svg_box is not None
        wide_pt = float(re.search(r'<svg[^>]*\bwidth="([\d.]+)pt"', svg)[1])  # type: ignore[index]
        # A point is 1/72 inch, an inch 25.4 mm.
        for points in (float(box[1]), wide_pt):
            assert min(abs(points * 25.4 / 72 - width) for width in (86, 178)) < 0.01


def test_callers_settings_change_nothing(tmp_path: Path) -> None:
    result, files = core_shell_result(4), {}
    odd = {"font.size": 22, "font.family": "serif", "axes.grid": True, "svg.fonttype": "path", "pdf.fonttype": 3}
    odd |= {"savefig.dpi": 40, "lines.marker": "x", "axes.facecolor": "0.5", "savefig.bbox": "tight"}
    for name, settings in (("plain", {}), ("odd", odd)):
        with rc_context(settings):
            figure = figures.conductance(result)
        with rc_context(odd if name == "plain" else {}):
            for kind in ("png", "svg", "pdf"):
                path = tmp_path / f"{name}.{kind}"
                figure.savefig(path)
                files[name, kind] = path.read_bytes()
    for kind in ("png", "svg", "pdf"):
        assert files["plain", kind] == files["odd", kind]
    (tmp_path / "all").mkdir()
    figures.save_all(result, tmp_path / "all")
    # As saved with the others, whoever saves it.
    for kind in ("svg", "pdf"):
        assert files["plain", kind] == (tmp_path / "all" / f"conductance.{kind}").read_bytes()


def test_notebooks_show_a_figure_at_its_size() -> None:
    content, about = figures.dispersion(core_shell_result(2))._repr_png_()  # type: ignore[attr-defined]
    with Image.open(io.BytesIO(content)) as image:
        assert image.width / image.info["dpi"][0] * 25.4 == pytest.approx(86, abs=0.3)
    assert about["width"] == round(86 / 25.4 * 96)


def test_modes_of_a_level_are_joined() -> None:
    """Levels of a round hard wall: one, two, two, one, two, ... entries."""
    figure = figures.modes(core_shell_result(6))
    axes = figure.axes[0]
    joins = [line for line in axes.lines if len(line.get_xdata()) == 2]
    assert len(joins) == 2
    for line, (first, last) in zip(joins, ((1, 2), (3, 4)), strict=True):
        ends = [titles(figure)[n].get_window_extent() for n in (first, last)]
        left, right = axes.transData.transform(np.column_stack(line.get_data()))
        assert left[0] < ends[0].x0 and ends[1].x1 < right[0]
        assert left[1] >= max(box.y1 for box in ends)
    (note,) = [text.get_text() for text in figure.texts]
    assert note == "modes of one level are joined by a line"
    alone = figures.modes(core_shell_result(1))
    assert not alone.axes[0].lines and not alone.texts


def test_pixels_of_modes_lie_within_their_outlines() -> None:
    """Eight modes in two rows: each picture is 24 nm wide within a frame 1 % wider on both sides, as its outline is."""
    figure = figures.modes(core_shell_result(8))
    axes = figure.axes[0]
    (image,) = axes.images
    left, right, bottom, top = image.get_extent()
    inked = np.asarray(image.get_array())[:, :, 3] > 0
    rows, columns = inked.shape
    assert ((right - left) / columns, (top - bottom) / rows) == pytest.approx((25.4 / DPI, 25.4 / DPI))
    (path,) = [patch for patch in axes.patches if not patch.get_fill()]
    points = path.get_path().vertices
    at = np.floor((points - [left, bottom]) / (25.4 / DPI)).astype(int)
    # Inked pixels end where the outlines do, to a pixel.
    assert np.flatnonzero(inked.any(axis=0))[[0, -1]] == pytest.approx([at[:, 0].min(), at[:, 0].max()], abs=1)
    assert np.flatnonzero(inked.any(axis=1))[[0, -1]] == pytest.approx([at[:, 1].min(), at[:, 1].max()], abs=1)


def test_the_font_of_figures_is_a_part_of_dejavu() -> None:
    """The same outlines and widths, hence the same look; letters that it lacks come from the whole font."""
    part = TTFont(Path(figures.__file__).with_name("fonts") / "figures.ttf")
    whole = TTFont(Path(get_data_path(), "fonts", "ttf", "DejaVuSans.ttf"))
    assert {"GPOS", "GSUB", "MATH"}.isdisjoint(part.keys())
    letters, others = part.getBestCmap(), whole.getBestCmap()
    assert set(map(chr, range(33, 127))) | set("µ²°±×–−“”←→↓↑…") <= set(map(chr, letters))
    for code, name in letters.items():
        assert part["hmtx"][name] == whole["hmtx"][others[code]]
    assert part["name"].getDebugName(1) == "DejaVu Sans Figures"
    assert "Bitstream" in (Path(figures.__file__).with_name("fonts") / "LICENSE_DEJAVU").read_text(encoding="utf-8")


def test_rare_letters_are_drawn_too(recwarn: pytest.WarningsRecorder, tmp_path: Path) -> None:
    result = core_shell_result(1)
    spelt = replace(result, problem=replace(result.problem, title="Ж wire, Ω"))
    figures.section(spelt).savefig(tmp_path / "rare.pdf")
    assert not recwarn.list
    assert "Ж wire, Ω" in "".join(pdf_text((tmp_path / "rare.pdf").read_bytes()))


def test_colours_are_those_that_were_published() -> None:
    """M. Okabe and K. Ito, Color Universal Design (2008): red, green and blue of their eight colours, from memory."""
    published = {
        "blue": (0, 114, 178),
        "orange": (230, 159, 0),
        "bluish green": (0, 158, 115),
        "reddish purple": (204, 121, 167),
        "sky blue": (86, 180, 233),
        "vermilion": (213, 94, 0),
        "yellow": (240, 228, 66),
        "black": (0, 0, 0),
    }
    assert [tuple(bytes.fromhex(code[1:])) for code in CYCLE] == list(published.values())


def test_units_stand_on_every_axis() -> None:
    unit = re.compile(r"\((m?eV|V|µA|µS|nm|1/nm|1/\(meV nm\)|nF/m|G0 = 2e²/h)\)$|\bmeV\b|cm⁻³$")
    plain, charged, curve = core_shell_result(6), charged_result(), gate_curve(swept_problem(), solver=PlateSweep)
    drawn = [figures.FIGURES[name](result) for result in (plain, charged) for name in figures.drawable(result)]
    drawn += [gate_curve_figures.FIGURES[name](curve) for name in gate_curve_figures.drawable(curve)]
    labels = [
        axis.label.get_text()
        for figure in drawn
        for axes in figure.axes
        if axes.axison
        for axis in (axes.xaxis, axes.yaxis)
    ]
    named = [label for label in labels if label]
    assert len(named) > 25
    assert [label for label in named if not unit.search(label)] == []
