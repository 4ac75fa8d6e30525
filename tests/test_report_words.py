"""Numbers and words of a report: units by size, digits by the bar, quantities by names that a reader knows."""

from __future__ import annotations

import html
import json
import re
from pathlib import Path

import numpy as np
import pytest

from tests.gate_sweeps import PlateSweep, swept_problem
from wiresolve.gate_curve import gate_curve
from wiresolve.output import report, tables, writing
from wiresolve.output.measured import Measured
from wiresolve.output.report_blocks import materials, short

VALUE = {"quantity": "gap", "value": 1.0, "unit": "eV", "low": None, "high": None, "temperature_K": None}


def cells(page: str, caption: str) -> list[list[str]]:
    """The rows of a table as texts."""
    (body,) = re.findall(rf"<span>{re.escape(caption)}</span>.*?<tbody>(.*?)</tbody>", page, re.DOTALL)
    rows = re.findall(r"<tr>(.*?)</tr>", body)
    return [[html.unescape(text) for text in re.findall(r"<t[hd][^>]*>(.*?)</t[hd]>", row)] for row in rows]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A sweep with numbers of the whole of it, two dimensions and measured points most of which lie outside."""
    target = tmp_path_factory.mktemp("words") / "curve"
    volts = np.array([-1.0, -0.5, 0.05, 0.1, 7.0])
    points = Measured("gate_voltage_V", volts, np.ones(5), "wire 7")
    writing.write(gate_curve(swept_problem(5), solver=PlateSweep), target, figures=False, measured=points)
    file = target / "gate_curve.json"
    found = json.loads(file.read_text(encoding="utf-8"))
    found["measures"] = {
        "on_current_A": 2.5366e-5,
        "off_current_A": 7.052e-11,
        "geometric_F_per_m": 1.065e-9,
        "subthreshold_slope_mV_per_decade": 59.53,
        "step_1_moves_with_section.diameter_V_per_nm": -0.0311,
        "step_2_moves_with_section.diameter_V_per_nm": -0.0739,
        "step_1_moves_with_section.layers[1].thickness_V_per_nm": 0.00278,
    }
    file.write_text(json.dumps(found), encoding="utf-8")
    return target


def test_currents_have_the_prefix_of_their_size(folder: Path) -> None:
    page = report.html(folder)
    assert "<dd>25.37 µA<small>off 70.5 pA</small></dd>" in page
    rows = {row[0]: row[1:] for row in cells(page, "Numbers of the whole sweep")}
    assert rows["Current when on"] == ["25.37", "µA"]
    assert rows["Current when off"] == ["70.52", "pA"]
    assert rows["Geometric capacitance"] == ["1.065", "nF/m"]
    assert not any("_" in name for name in rows)


def test_all_motions_of_steps_are_told(folder: Path) -> None:
    rows = cells(report.html(folder), "How far steps move, in mV, for each nanometre by which a dimension grows")
    assert rows == [["diameter", "-31.1", "-73.9"], ["layers[1].thickness", "+2.78", ""]]


def test_measured_points_in_view_are_counted(folder: Path) -> None:
    assert "Circles: 2 of 5 measured points in view" in report.html(folder)


def test_what_a_publication_says_of_several_values_stands_below_it_once() -> None:
    sources = ["A. Author, J. 1, 2 (1999)", "A. Author, J. 1, 2 (1999); at 300 K", "B. Other, K. 3 (2001); a fit"]
    values = [{"name": "X", "provenance": "text", "source": source, **VALUE} for source in sources]
    page = materials(values)
    assert page.count("A. Author") == 1
    assert '<ol type="a"><li>the value as it stands there</li><li>at 300 K</li></ol>' in page
    assert "<li>B. Other, K. 3 (2001); a fit</li>" in page
    assert [row[-1] for row in cells(page, "X")] == ["[1a]", "[1b]", "[2]"]


@pytest.mark.parametrize(
    ("value", "bar", "shown"),
    [
        (32.3155604, 8e-8, "32.32 meV"),
        (0.0123456789, 1e-7, "0.01235 meV"),
        (1234.5678, 1e-4, "1234.57 meV"),
        (56.154, 0.3, "56.2 meV"),
        (56.154, 0.0, "56.15 meV"),
    ],
)
def test_a_tile_has_four_digits_and_the_bar_below(value: float, bar: float, shown: str) -> None:
    large, below = short(value, bar, "meV")
    assert large == shown
    assert below.startswith("± ") == (bar > 0)
    if bar > 0:
        assert float(below.removeprefix("± ").removesuffix(" meV, ")) >= bar


def test_bars_of_pictures_are_those_that_are_printed() -> None:
    assert tables.printed_bar("32.315560 ± 0.000001") == 1e-6
    assert tables.printed_bar("20") == 0
    for value, bar in ((32.3155604, 8e-8), (1.0, 0.004), (247.3, 31.0)):
        assert tables.printed_bar(tables.with_bar(value, bar)) >= bar


@pytest.mark.parametrize(
    ("share", "text"), [(0.9496, "94.9 %"), (0.95, "95.0 %"), (0.70789, "70.7 %"), (1.0, "100.0 %")]
)
def test_shares_are_cut_and_not_rounded(share: float, text: str) -> None:
    assert tables.percent(share) == text
