"""What notebooks show: sections to scale, tables and results, well-formed, escaped, on light and dark pages."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from tests.gate_sweeps import WARNED, PlateSweep, swept_problem
from tests.synthetic import core_shell_problem, core_shell_result
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle
from wiresolve.gate_curve import gate_curve
from wiresolve.loading import load
from wiresolve.result import Verdict, Warned
from wiresolve.subband import MOST_ROWS, Subbands, levels, states

GEOMETRIES = sorted((Path(__file__).resolve().parents[1] / "geometries").glob("*.toml"))
SVG = "{http://www.w3.org/2000/svg}"
NUMBER = r"-?\d+(?:\.\d+)?"


def parsed(text: str) -> ElementTree.Element:
    """Well-formed XML; entities of HTML are not used."""
    return ElementTree.fromstring(f"<page>{text}</page>")


def bar_px_per_nm(picture: ElementTree.Element) -> float:
    """The scale that the scale bar tells."""
    texts = [text.text or "" for text in picture.iter(f"{SVG}text")]
    length = float(next(text for text in texts if text.endswith(" nm")).removesuffix(" nm"))
    bar = next(p.attrib["d"] for p in picture.iter(f"{SVG}path") if "H" in p.attrib["d"])
    start, end = (float(found) for found in re.fullmatch(rf"M({NUMBER}) {NUMBER} H({NUMBER})", bar).groups())
    return (end - start) / length


def corners(path: str) -> np.ndarray:
    """Where the parts of a path end."""
    parts = re.findall(rf"[MLAQ][^MLAQZ]*?({NUMBER}) ({NUMBER}) ?(?=[MLAQZ])", path)
    return np.array(parts, dtype=float)


def filled(picture: ElementTree.Element) -> list[ElementTree.Element]:
    return [p for p in picture.iter(f"{SVG}path") if p.get("fill", "none").startswith("#")]


@pytest.mark.parametrize(
    ("section", "area_nm2"),
    [
        (Section(Rectangle(20, 8), "GaAs"), 160.0),
        (Section(Hexagon(across_flats_nm=10, rotation_deg=17), "GaAs"), 50 * math.sqrt(3)),
        (Section(Polygon(((0, 0), (10, 0), (10, 4), (4, 4), (4, 12), (0, 12))), "GaAs"), 72.0),
    ],
)
def test_straight_sections_are_to_scale(section: Section, area_nm2: float) -> None:
    picture = parsed(section._repr_html_())
    x, y = corners(filled(picture)[0].attrib["d"]).T / bar_px_per_nm(picture)
    # Pixels are written to a hundredth.
    assert abs(x @ np.roll(y, -1) - y @ np.roll(x, -1)) / 2 == pytest.approx(area_nm2, rel=2e-3)
    # y goes up in the section and down on the page: what is counter-clockwise there is clockwise here.
    assert x @ np.roll(y, -1) - y @ np.roll(x, -1) < 0


def test_up_is_up() -> None:
    section = Section(Rectangle(20, 8), "GaAs", patches=(Patch(Circle(4), "InP", center_nm=(0, 8)),))
    picture = parsed(section._repr_html_())
    ridge, disk = (corners(path.attrib["d"])[:, 1].mean() for path in filled(picture))
    assert disk < ridge


def test_arcs_are_those_of_circles_and_turned_ellipses() -> None:
    picture = parsed(Section(Ellipse(20, 10, rotation_deg=30), "GaAs")._repr_html_())
    scale = bar_px_per_nm(picture)
    arcs = re.findall(rf"A({NUMBER}) ({NUMBER}) ({NUMBER}) ([01]) ([01])", filled(picture)[0].attrib["d"])
    assert len(arcs) == 2
    for a, b, turn, _, sweep in arcs:
        assert (float(a) / scale, float(b) / scale) == pytest.approx((10, 5), rel=1e-3)
        # Counter-clockwise by 30 degrees is -30 where y goes down.
        assert (float(turn), sweep) == (-30, "0")
    outer, core = (corners(p.attrib["d"]) for p in filled(parsed(core_shell_problem().section._repr_html_())))
    width = np.ptp(outer, axis=0)
    assert np.ptp(core, axis=0) / width == pytest.approx([2 / 3, 2 / 3], abs=1e-3)
    assert width[0] == pytest.approx(240, abs=0.1)


def test_what_is_void_shows_the_page() -> None:
    tube = Section(Circle(8), "void", (Layer(3, "GaAs"),))
    text = tube._repr_html_()
    picture = parsed(text)
    assert len(filled(picture)) == 1
    (mask,) = picture.iter(f"{SVG}mask")
    assert f'mask="url(#{mask.attrib["id"]})"' in text
    assert "void" not in "".join(t.text or "" for t in picture.iter(f"{SVG}text"))
    # Names of masks are of the content: two tubes on a page do not share one.
    other = parsed(Section(Circle(9), "void", (Layer(3, "GaAs"),))._repr_html_())
    assert next(other.iter(f"{SVG}mask")).attrib["id"] != mask.attrib["id"]
    assert text == Section(Circle(8), "void", (Layer(3, "GaAs"),))._repr_html_()


def test_the_legend_says_what_is_where() -> None:
    section = Section(
        Circle(8), "GaAs", (Layer(3, "Al0.3Ga0.7As", carriers="excluded"),), outside="Al0.3Ga0.7As", carriers="admitted"
    )
    texts = [text.text for text in parsed(section._repr_html_()).iter(f"{SVG}text")]
    assert texts[1:] == ["core: GaAs", "layer 1: Al0.3Ga0.7As, carriers kept out", "outside: Al0.3Ga0.7As"]


@pytest.mark.parametrize("path", GEOMETRIES, ids=lambda path: path.stem)
def test_every_section_of_the_geometries_has_a_small_picture(path: Path) -> None:
    text = load(path).section._repr_html_()
    picture = next(parsed(text).iter(f"{SVG}svg"))
    assert len(text) < 20_000
    assert picture.get("role") == "img" and "Section" in picture.get("aria-label", "")
    wide, high = float(picture.attrib["width"]), float(picture.attrib["height"])
    for drawn in filled(picture):
        x, y = corners(drawn.attrib["d"]).T
        assert (x >= 0).all() and (x <= wide).all() and (y >= 0).all() and (y <= high).all()


def rows(text: str) -> list[list[str]]:
    return [["".join(cell.itertext()) for cell in row] for row in parsed(text).iter("tr")]


def test_the_table_has_bars_spacings_and_degeneracies() -> None:
    result = core_shell_result(3)
    assert isinstance(result.subbands, Subbands) and isinstance(result.subbands, tuple)
    head, *body = rows(result.subbands._repr_html_())
    assert head[:4] == ["level", "subband", "energy (meV)", "spacing to the next level (meV)"]
    # Of a round hard wall, 12 nm, 0.067 m0: (3.8317059702^2 - 2.4048255577^2) hbar^2/2mR^2 = 35.143 meV.
    assert [len(row) for row in body] == [len(head), len(head), len(head) - 2]
    assert float(body[0][3]) == pytest.approx(35.14, abs=0.006)
    assert body[0][2].startswith("22.838") and " ± " in body[0][2]
    assert body[1][:2] == ["2", "2"] and body[2][0] == "3"
    assert body[1][3] == ""
    assert body[0][4:] == ["0.0670", "2 × 1", "core"]
    (joined,) = {cell.get("rowspan") for cell in parsed(result.subbands._repr_html_()).iter("td")} - {None, "1"}
    assert joined == "2"


def test_long_tables_end_and_say_so() -> None:
    entries = core_shell_result(3).subbands
    many = Subbands(replace(entries[0], index=n + 1, level=n + 1) for n in range(MOST_ROWS + 7))
    text = many._repr_html_()
    assert len(rows(text)) == 1 + MOST_ROWS and "and 7 more" in text
    assert len(levels(many)) == len(many) and states(many[:2]) == 4


def test_columns_that_say_something() -> None:
    entries = core_shell_result(1).subbands
    named = Subbands([replace(entries[0], valley="Delta [001]", bound=False, axial_mass=None)])
    head, row = rows(named._repr_html_())
    assert head[-2:] == ["bound", "valleys"] and row[-2:] == ["no", "Delta [001]"]
    assert "none" in row


def test_a_result_tells_title_verdict_table_and_warnings() -> None:
    text = core_shell_result(3)._repr_html_()
    words = " ".join("".join(parsed(text).itertext()).split())
    for told in (
        "Round core in a shell",
        "One channel up to 77 K.",
        "warning open-barrier:",
        "Make the shell thicker.",
    ):
        assert told in words
    assert "22.838" in words and len(list(parsed(text).iter(f"{SVG}svg"))) == 1
    # Neither black nor white is set as a colour of text or page.
    assert not re.search(r"(?<!-)\b(color|background(-color)?)\s*:\s*(#|white|black)", text)
    assert "<script" not in text and "http" not in text.replace("http://www.w3.org/2000/svg", "")


def test_all_texts_are_escaped() -> None:
    evil = '<img src=x onerror="alert(1)">&'
    result = core_shell_result(2)
    spelt = replace(
        result,
        problem=replace(result.problem, title=evil),
        verdict=Verdict(evil, {}, (), ()),
        warnings=(Warned(evil, evil, evil),),
        energy_zero_text=evil,
        subbands=tuple(replace(s, valley=evil, layer=evil) for s in result.subbands),
    )
    text = spelt._repr_html_()
    assert "<img" not in text
    assert "".join(parsed(text).itertext()).count(evil) == 6 + 2 * 2
    picture = replace(result.problem.section, material=evil)._repr_html_()
    assert "<img" not in picture
    assert any(evil in (t.text or "") for t in parsed(picture).iter(f"{SVG}text"))


def test_a_gate_curve_tells_its_steps() -> None:
    """The steps of a made-up sweep; what failed is said, and what was not reached."""
    problem = replace(swept_problem(), title="<b>wrap</b>")
    curve = gate_curve(problem, solver=lambda given: PlateSweep(given, failing=(1,), warnings=(WARNED,)))
    text = curve._repr_html_()
    head, *body = rows(text)
    assert head == ["level", "opens at (V of wrap)", "height (G0)", "then (G0)"]
    assert [row[2:] for row in body[:3]] == [["1", "1"], ["2", "3"], ["2", "5"]]
    for row, step in zip(body, curve.steps, strict=True):
        if math.isfinite(step.opens_at_V):
            assert float(row[1].split(" ± ")[0]) == pytest.approx(step.opens_at_V, abs=1e-4)
        else:
            assert row[1] == "not reached"
    words = "".join(parsed(text).itertext())
    assert "<b>wrap</b>" in words and "warning open-barrier" in words and "1 of 7 points did not converge" in words
