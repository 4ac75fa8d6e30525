"""Measured points: read with their units, refused where they cannot be meant, and laid where they belong."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.gate_sweeps import PlateSweep, swept_problem
from tests.synthetic import core_shell_result
from wiresolve.errors import InputError
from wiresolve.gate_curve import gate_curve
from wiresolve.gate_result import GateCurve
from wiresolve.output import figures, gate_curve_figures, measured
from wiresolve.output.measured import Measured
from wiresolve.output.measured_points import MOST_SHOWN


def written(folder: Path, text: str) -> Path:
    path = folder / "points.csv"
    path.write_text(text, encoding="utf-8")
    return path


# 2 e^2/h is 7.748091729863649e-5 S, or 12906.403729652257 ohm: CODATA 2022, exact.
@pytest.mark.parametrize(
    ("text", "quantity", "x", "conductance_G0"),
    [
        ("gate_voltage_V,conductance_G0\n-0.5,0.25\n0,1\n", "gate_voltage_V", (-0.5, 0.0), (0.25, 1.0)),
        ("gate_voltage_mV,conductance_S\n-500,7.748091729863649e-5\n", "gate_voltage_V", (-0.5,), (1.0,)),
        ("fermi_level_meV,conductance_uS\n12.5,154.96183459727298\n", "fermi_level_eV", (0.0125,), (2.0,)),
        ("fermi_level_eV,resistance_ohm\n0.1,12906.403729652257\n", "fermi_level_eV", (0.1,), (1.0,)),
        ("gate_voltage_V,resistance_kohm\n1,25.812807459304514\n", "gate_voltage_V", (1.0,), (0.5,)),
        ("gate_voltage_V,resistance_ohm\n-2,inf\n", "gate_voltage_V", (-2.0,), (0.0,)),
        # Other columns, blanks, remarks, a byte order mark; decimal commas where semicolons separate; tabs.
        ("\ufeff# a\n\ntime_s, conductance_G0 ,gate_voltage_V\n# b\n7, 2.5 ,1e-1\n", "gate_voltage_V", (0.1,), (2.5,)),
        ("gate_voltage_V;conductance_G0\n-0,5;1,25\n0.5;2\n", "gate_voltage_V", (-0.5, 0.5), (1.25, 2.0)),
        ("gate_voltage_V\tconductance_G0\n-1\t-0.01\n", "gate_voltage_V", (-1.0,), (-0.01,)),
    ],
)
def test_columns_and_units(
    tmp_path: Path, text: str, quantity: str, x: tuple[float, ...], conductance_G0: tuple[float, ...]
) -> None:
    found = measured.read(written(tmp_path, text))
    assert (found.quantity, found.source) == (quantity, "points.csv")
    assert found.x == pytest.approx(x, rel=1e-14)
    assert found.conductance_G0 == pytest.approx(conductance_G0, rel=1e-14)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "holds no lines"),
        ("gate_voltage_V,conductance_G0\n", "no points"),
        ("gate_voltage,conductance_G0\n1,2\n", "has no column gate_voltage_V"),
        ("gate_voltage_V,current_A\n1,2\n", "has no column conductance_G0"),
        ("1,2\n3,4\n", "has no column"),
        ("gate_voltage_V,conductance_G0,conductance_uS\n1,2,3\n", "several columns"),
        ("gate_voltage_V,gate_voltage_mV,conductance_uS\n1,2,3\n", "several columns"),
        ("gate_voltage_V,conductance_G0\n1,2\n1\n", "line 3 is no row"),
        ("gate_voltage_V,conductance_G0\n# x\n1,two\n", "line 3 is no row"),
        ("gate_voltage_V,conductance_G0\n1,nan\n", "line 2 is no row"),
        ("gate_voltage_V,conductance_G0\n1,inf\n", "line 2 holds a number that is not finite"),
        ("gate_voltage_V,resistance_ohm\n1,5\n2,0\n", "line 3 holds a resistance that is not positive"),
    ],
)
def test_files_that_cannot_be_meant(tmp_path: Path, text: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        measured.read(written(tmp_path, text))
    assert "\n" not in str(caught.value)


def test_misspelt_columns_are_named(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="gate_voltage_V") as caught:
        measured.read(written(tmp_path, "gate_voltag_V,conductance_G0\n1,2\n"))
    assert caught.value.remedy


def test_files_that_are_not_there_or_no_text(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such file"):
        measured.read(tmp_path / "none.csv")
    with pytest.raises(InputError, match="is no file"):
        measured.read(tmp_path)
    (tmp_path / "picture.csv").write_bytes(b"\x89PNG\xff\xfe")
    with pytest.raises(InputError, match="not UTF-8"):
        measured.read(tmp_path / "picture.csv")


@pytest.mark.parametrize(
    ("x", "conductance_G0"), [([], []), ([1.0, 2.0], [1.0]), ([np.nan], [1.0]), ([[1.0]], [[1.0]])]
)
def test_points_are_checked(x: Any, conductance_G0: Any) -> None:
    with pytest.raises(InputError):
        Measured("gate_voltage_V", x, conductance_G0)


def test_points_are_kept_as_they_were_given() -> None:
    given = np.array([1.0, 2.0])
    found = Measured("gate_voltage_V", given, given)
    given[0] = 7.0
    assert found.x.tolist() == [1.0, 2.0]
    with pytest.raises(ValueError, match="read-only"):
        found.x[0] = 3.0
    with pytest.raises(InputError):
        Measured("voltage", given, given)


def test_the_lever_arm_turns_volts_into_a_fermi_level() -> None:
    """At the opening voltage the Fermi level is at the first level; a volt more lifts it by the lever arm."""
    volts = Measured("gate_voltage_V", [-1.0, 0.0, 0.5], [0.5, 1.0, 3.0], "device 4")
    found = volts.on_fermi_axis(0.04, opens_at_V=-1.0, first_level_eV=0.02)
    assert found.quantity == "fermi_level_eV"
    assert found.x == pytest.approx([0.02, 0.06, 0.08])
    assert found.conductance_G0 is not None and found.source == "device 4"
    with pytest.raises(InputError, match="must not be zero"):
        volts.on_fermi_axis(0.0, -1.0, 0.02)
    with pytest.raises(InputError, match="gate_voltage_V"):
        found.on_fermi_axis(0.04, -1.0, 0.02)


def solved_sweep() -> GateCurve:
    return gate_curve(swept_problem(), solver=PlateSweep)


def drawn(axes: Any) -> Any:
    """The measured points on axes."""
    (line,) = [line for line in axes.lines if line.get_marker() == "o" and line.get_markerfacecolor() == "none"]
    return line


def test_points_lie_over_both_staircases(tmp_path: Path) -> None:
    result, curve = core_shell_result(6), solved_sweep()
    at = np.array([0.04, 0.06, 0.08, 9.0])
    points = Measured("fermi_level_eV", at, [1.0, 1.1, 12.0, 99.0], "wire 3")
    axes = figures.conductance(result, points).axes[0]
    assert drawn(axes).get_xdata() == pytest.approx(1e3 * at[:3])
    assert drawn(axes).get_ydata().tolist() == [1.0, 1.1, 12.0]
    assert axes.get_ylim()[1] > 12.0 and axes.get_xlim() == figures.conductance(result).axes[0].get_xlim()
    assert [text.get_text() for text in axes.get_legend().get_texts()] == [
        "4.2 K",
        "77 K",
        "300 K",
        "wire 3: 3 of 4 in view",
    ]
    volts = Measured("gate_voltage_V", [0.05, 0.1, 0.2, 5.0], [0.1, 0.9, 1.0, 2.0], "wire 4")
    axes = gate_curve_figures.staircase(curve, volts).axes[0]
    assert drawn(axes).get_xdata().tolist() == [0.05, 0.1, 0.2]
    assert [text.get_text() for text in axes.get_legend().get_texts()] == [
        "computed",
        "wire 4: 3 of 4 in view",
    ]
    assert axes.get_xlim() == gate_curve_figures.staircase(curve).axes[0].get_xlim()
    assert len(figures.save_all(result, tmp_path, points)) == 3 * len(figures.drawable(result))
    assert "wire 3" in (tmp_path / "conductance.svg").read_text(encoding="utf-8")
    gate_curve_figures.save_all(curve, tmp_path, volts)
    assert "wire 4" in (tmp_path / "staircase.svg").read_text(encoding="utf-8")


def test_the_words_about_many_points_stay_inside_the_figure() -> None:
    x = np.linspace(-1.0, 1.0, 20 * MOST_SHOWN)
    many = Measured("gate_voltage_V", x, np.ones_like(x), "the wire of the third cooldown")
    figure = gate_curve_figures.staircase(solved_sweep(), many)
    figure.canvas.draw()
    legend, frame = figure.axes[0].get_legend(), figure.bbox
    assert legend.get_texts()[-1].get_text().endswith("of 30,000 in view, 1 of 3 drawn")
    box, label = legend.get_window_extent(), figure.axes[0].xaxis.label.get_window_extent()
    assert box.x0 >= 0 and box.x1 <= frame.x1 and box.y0 >= 0
    assert box.y1 <= label.y0 + 1


def test_points_on_another_axis_are_refused() -> None:
    volts = Measured("gate_voltage_V", [0.1], [1.0])
    with pytest.raises(InputError, match=r"on_fermi_axis"):
        figures.conductance(core_shell_result(2), volts)
    with pytest.raises(InputError, match="gate_voltage_V"):
        gate_curve_figures.staircase(solved_sweep(), replace(volts, quantity="fermi_level_eV"))


def test_of_very_many_points_some_are_drawn_and_it_is_said() -> None:
    result = core_shell_result(3)
    x = np.linspace(0.02, 0.05, 10 * MOST_SHOWN)
    axes = figures.conductance(result, Measured("fermi_level_eV", x, np.ones_like(x), "long")).axes[0]
    assert drawn(axes).get_xdata() == pytest.approx(1e3 * x[::10])
    assert axes.get_legend().get_texts()[-1].get_text() == f"long: {10 * MOST_SHOWN:,} in view, 1 of 10 drawn"
    far = figures.conductance(result, Measured("fermi_level_eV", [5.0], [1.0], "far")).axes[0]
    assert far.get_legend().get_texts()[-1].get_text() == "far: none of 1 in view"


@pytest.mark.parametrize("row", ["inf,1", "1,inf", "1e400,2"])
def test_numbers_without_end_are_told_by_their_line(tmp_path: Path, row: str) -> None:
    (tmp_path / "points.csv").write_text(f"fermi_level_meV,conductance_G0\n10,0.5\n{row}\n", encoding="utf-8")
    with pytest.raises(InputError, match="line 3 holds a number that is not finite"):
        measured.read(tmp_path / "points.csv")
