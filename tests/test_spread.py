"""What an error of a dimension does, in words, in tables and along the outline."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.patches import PathPatch

from tests.synthetic import core_shell_result
from tests.truth._wires import material, wire
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Polygon, Rectangle
from wiresolve.fem.outline import outline_edges
from wiresolve.output.canvas import ENDS
from wiresolve.output.outline_figure import sensitivity
from wiresolve.output.tables import sensitivity_table, subbands_csv
from wiresolve.physics.outline_motion import outline_motion
from wiresolve.physics.sensitivity import OutlineSensitivity, Sensitivity, outline_sensitivity
from wiresolve.physics.spread import same_width_K, sentence
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire
from wiresolve.result import Result
from wiresolve.units import HBAR2_OVER_2M0, KB

LEVEL = np.array([1, 2, 2, 3])


def by(of: str, *values: float) -> Sensitivity:
    return Sensitivity(of, "eV_per_nm", np.array(values))


def test_a_spread_is_as_wide_as_a_temperature() -> None:
    """Half of the height of 1/(4 kT cosh^2(E/2kT)) against that of a normal distribution."""
    kelvin = same_width_K(1e-3)
    assert kelvin == pytest.approx(7.75, abs=0.005)
    half = 0.5 * 2e-3 * math.sqrt(2 * math.log(2)) / (2 * KB * kelvin)
    assert 1 / math.cosh(half) ** 2 == pytest.approx(0.5, rel=1e-12)


def test_the_sentence_names_what_matters_most() -> None:
    section = Section(Rectangle(20.0, 10.0), "GaAs")
    found = [
        by("section.width", -1e-3, -4e-3, -4e-3, 0.0),
        by("section.height", -8e-3, -8.4e-3, -8.2e-3, 0.0),
        by("growth of rim", -18e-3, -24.8e-3, -24.4e-3, 0.0),
        Sensitivity("materials.GaAs.electron_mass", "eV_per_m0", np.full(4, -1.0)),
    ]
    text = sentence(section, found, LEVEL, 4.2)
    assert text == (
        "Half a nanometre of height moves the first level by about -4.00 meV and the first spacing by about -0.150 meV;"
        " half a nanometre of width by about -0.500 meV and the first spacing by about -1.50 meV; such a spread of"
        " height (standard deviation) blurs the first step as 31 K would, more than the 4.2 K of the carriers."
    )
    assert text.replace("more than the 4.2 K", "less than the 77 K") == sentence(section, found, LEVEL, 77.0)


def test_small_dimensions_outlines_and_nothing() -> None:
    thin = Section(Circle(16.0), "GaAs", layers=(Layer(2.0, "Al0.3Ga0.7As"),))
    text = sentence(thin, [by("section.layers[1].thickness", -5e-3)], np.array([1]), 0.0)
    assert text.startswith(
        "A tenth of a nanometre of thickness of layer 1 moves the first level by about -0.500 meV; such"
    )
    assert "spacing" not in text
    assert text.endswith("as 3.9 K would.")
    drawn = Section(Polygon(((0.0, 0.0), (20.0, 0.0), (4.0, 12.0))), "GaAs")
    assert "outward growth of rim moves" in sentence(drawn, [by("growth of rim", -5e-3)], np.array([1]), 0.0)
    assert "outward growth of group 7 moves" in sentence(drawn, [by("growth of 7", -5e-3)], np.array([1]), 0.0)
    assert sentence(thin, [by("section.layers[1].thickness", -1e-6)], np.array([1]), 4.2) == ""
    assert sentence(thin, [], np.array([1]), 4.2) == ""


def test_large_motions_are_said_to_be_linear() -> None:
    """Half a nanometre of -8 meV per nm is 4 meV: 10 % of 40 meV."""
    section, found = Section(Rectangle(20.0, 10.0), "GaAs"), [by("section.height", -8e-3)]
    small, large, whole = (sentence(section, found, np.array([1]), 0.0, e) for e in (0.0401, 0.025, 0.001))
    assert "linear" not in small
    assert large.endswith("These are linear estimates, and 16 % of the first level is no small motion.")
    assert "more than the whole of the first level" in whole


def test_a_motion_that_stands_there_under_two_names_is_told_once() -> None:
    values = (-1.5e-3, -4e-3, -4e-3, -7e-3, -7e-3, -8e-3)
    twice = (by("section.layers[1].thickness", *values), by("growth of rim", *values), by("growth of 7", *values))
    assert [row.split()[0] for row in sensitivity_table(listed(*twice))[1:]] == ["layers[1].thickness"]
    other = by("growth of 7", *(2 * v for v in values))
    rows = sensitivity_table(listed(twice[0], other))[1:]
    assert [row.split("  ")[0] for row in rows] == ["layers[1].thickness", "growth of group 7"]


def listed(*found: Sensitivity) -> Result:
    """Six made-up subbands in four levels (1, 2 2, 3 3, 4)."""
    result = core_shell_result(count=6, sensitivities=found)
    assert [s.level for s in result.subbands] == [1, 2, 2, 3, 3, 4]
    return result


def test_table_of_levels() -> None:
    found = (
        by("section.diameter", -1.5e-3, -4e-3, -4e-3, -7e-3, -7e-3, -8e-3),
        by("section.layers[1].thickness", -2e-6, -4e-6, -4e-6, -6e-6, -6e-6, -7e-6),
        by("section.patches[1].width", -0.5e-3, -2e-3, 1.25e-3, 0.0, 0.0, 12.3456e-3),
        Sensitivity("materials.GaAs.electron_mass", "eV_per_m0", np.full(6, -1.0)),
    )
    header, *rows, more = sensitivity_table(listed(*found))
    assert header.split("  ")[0] == "meV for each nm of"
    assert [row.split()[0] for row in rows] == ["diameter", "patches[1].width"]
    assert rows[0].split()[1:] == ["-1.500", "-4.000", "-7.000", "-8.000"]
    assert rows[1].split()[1:] == ["-0.500", "-2.000", "to", "+1.250", "+0.000", "+12.35"]
    assert more == "and 1 more, see result.json"
    assert sensitivity_table(listed()) == []


def test_columns_of_the_subbands() -> None:
    values = (-1.5e-3, -4e-3, -4e-3, -7e-3, -7e-3, -8e-3)
    mass = Sensitivity("materials.GaAs.electron_mass", "eV_per_m0", np.full(6, -1.0))
    text = subbands_csv(listed(by("section.layers[1].thickness", *values), by("growth of rim", *values), mass))
    rows = list(csv.DictReader(io.StringIO("".join(x for x in text.splitlines(True) if not x.startswith("#")))))
    assert [name for name in rows[0] if name.startswith("by_")] == [
        "by_section_layers_1_thickness_eV_per_nm",
        "by_growth_of_rim_eV_per_nm",
    ]
    assert [float(row["by_growth_of_rim_eV_per_nm"]) for row in rows] == list(values)


def along(section: Section, count: int) -> tuple[OutlineSensitivity, float]:
    own = material("well", 0.067)
    made = Wire(wire(section, [own], count, 1e-6))
    done = certify(made.draw, made.channels, count, 1e-6)
    motion = outline_motion(section, outline_edges(done.space.mesh))
    return outline_sensitivity(motion, done.solved, done.minima, done.entries, done.level), float(done.energy_eV[0])


def test_along_a_circle() -> None:
    """By symmetry each nm of the outline has the same share of -2 E/R, for one state and for the mean of a pair."""
    found, energy = along(Section(Circle(16.0), "well"), 3)
    share = -2 * energy / 8.0 / (2 * math.pi * 8.0)
    np.testing.assert_allclose(found.level_eV_per_nm2, share, rtol=2e-3)
    second = (3.8317059702075125 / 2.404825557695773) ** 2  # zeros of J1 and J0, DLMF 10.21
    assert found.spacing_eV_per_nm2 is not None
    np.testing.assert_allclose(found.spacing_eV_per_nm2, (second - 1) * share, rtol=2e-2)
    length = np.linalg.norm(np.diff(found.segments, axis=1)[:, 0], axis=1)
    assert length.sum() == pytest.approx(2 * math.pi * 8.0, rel=1e-3)


def test_along_a_rectangle() -> None:
    """-(hbar^2/2m) (d psi/dn)^2 of sin sin on each of its sides."""
    width, height = 14.0, 8.0
    found, _ = along(Section(Rectangle(width, height), "well"), 1)
    x, y = found.segments.mean(axis=1).T
    unit = HBAR2_OVER_2M0 / 0.067 * 4 / (width * height) * math.pi**2
    beside = np.abs(np.abs(x) - width / 2) < 1e-9
    exact = np.where(beside, np.cos(math.pi * y / height) ** 2 / width**2, np.cos(math.pi * x / width) ** 2 / height**2)
    np.testing.assert_allclose(found.level_eV_per_nm2, -unit * exact, atol=2e-3 * unit / height**2)
    assert found.spacing_eV_per_nm2 is None


def pairs(patch: PathPatch) -> np.ndarray:
    """The pieces of straight line that a patch draws, (m, 2, 2)."""
    return np.asarray(patch.get_path().vertices).reshape(-1, 2, 2)


def test_figure_shows_what_was_found() -> None:
    corner = np.array([[-5.0, -3.0], [5.0, -3.0], [5.0, 3.0], [-5.0, 3.0]])
    segments = np.stack([corner, np.roll(corner, -1, axis=0)], axis=1)
    values = np.array([-1e-3, -2e-3, -1e-3, 3e-3])
    both = core_shell_result(outline_sensitivity=OutlineSensitivity(segments, values, -values))
    figure = sensitivity(both)
    first, first_bar, second, _ = figure.axes
    for axes, shown in ((first, values), (second, -values)):
        casing, *shades = (p for p in axes.get_children() if isinstance(p, PathPatch))
        assert len(casing.get_path().vertices) == 2 * len(segments)
        colour = [
            next(s.get_edgecolor() for s in shades if any((pair == own).all() for pair in pairs(s))) for own in segments
        ]
        # One colour for one value, and the map's own: as far from its middle as the value is from zero.
        assert colour[0] == colour[2] and len({*colour}) == 3
        # The extreme of the outline may lie beyond the colours' ends, which are those of the next one.
        top = np.sort(np.abs(shown))[-2]
        ends = LinearSegmentedColormap.from_list("signed", ENDS)
        for value, own in zip(shown, colour, strict=True):
            np.testing.assert_allclose(own, ends(np.clip((value / top + 1) / 2, 0, 1)), atol=0.02)
        assert (axes.get_xlabel(), axes.get_ylabel()) == ("x (nm)", "y (nm)")
    assert first_bar.get_xlabel().startswith("meV")
    one = core_shell_result(outline_sensitivity=OutlineSensitivity(segments, values, None))
    assert len(sensitivity(one).axes) == 2
    for result in (one, both):
        assert "alike" not in figure_words(result)
        alike = tuple(replace(s, valley="L [1-11] [1-1-1]") for s in result.subbands)
        assert "First level: one of 2 alike valleys is shown" in figure_words(replace(result, subbands=alike))


def figure_words(result: Result) -> str:
    """All words beside the panels, which must lie inside the figure and below its colour bars."""
    figure = sensitivity(result)
    figure.canvas.draw()
    (caption,) = (text for text in figure.texts if "Outwards" in text.get_text())
    box = caption.get_window_extent()
    assert box.x0 >= 0 and box.x1 <= figure.bbox.x1 and box.y0 >= 0
    assert box.y1 <= min(axes.xaxis.label.get_window_extent().y0 for axes in figure.axes)
    return caption.get_text()
