"""Slips at the keyboard, in Python and in files beside the wire file: each is told with what was meant."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

import wiresolve as ws
from tests.synthetic import core_shell_result
from wiresolve.cli import program
from wiresolve.describe.gates import Gate, Slab, Surroundings
from wiresolve.describe.problem import Carriers, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.describe.summary import describe
from wiresolve.describe.wirefile import parse
from wiresolve.errors import InputError
from wiresolve.output import figures
from wiresolve.units import parse_quantity


def refused(act: Callable[[], object]) -> str:
    with pytest.raises(InputError) as caught:
        act()
    assert "\n" not in str(caught.value)
    return str(caught.value)


@pytest.mark.parametrize("act", [ws.solve, ws.gate_curve, ws.mesh])
def test_a_path_is_no_problem(act: Callable[[object], object]) -> None:
    said = refused(lambda: act("my.toml"))
    assert said == "problem: must be a Problem; got 'my.toml'; wiresolve.load(path) reads one from a wire file"


def test_a_number_in_a_text_is_told_by_the_argument() -> None:
    assert refused(lambda: Circle("16 nm")) == (  # type: ignore[arg-type]
        "diameter_nm: must be a number; got '16 nm'; write diameter_nm = 16.0"
    )
    assert "write width_nm = 16.0" in refused(lambda: Rectangle("16", 3.0))  # type: ignore[arg-type]
    said = refused(lambda: Rectangle(3.0, "1 um"))  # type: ignore[arg-type]
    assert said.startswith("height_nm: must be a number") and "write a number of nm" in said


def test_one_fermi_level_gives_one_float() -> None:
    result = core_shell_result(3)
    level = float(result.energies_eV[0]) + 0.01
    one = result.conductance_at(level, 77.0)
    assert type(one) is float
    assert type(result.line_density(level, 77.0)) is float
    assert type(result.fermi_level(0.01, 77.0)) is float
    assert result.conductance_at([level, level], 77.0) == pytest.approx(np.array([one, one]), rel=1e-15)


def test_what_a_prompt_completes_is_what_there_is() -> None:
    shown = [name for name in dir(ws) if not name.startswith("__")]
    assert "solve" in shown and "shapes" in shown and "__version__" in dir(ws)
    assert not {"Any", "ModuleType", "TYPE_CHECKING", "annotations", "importlib", "sys"} & set(shown)
    assert all(hasattr(ws, name) for name in shown)
    assert dir(figures) == sorted(figures.__all__)


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("new", "square"), "did you mean 'rectangle'?"),
        (("new", "cirle"), "did you mean 'circle'?"),
        (("slove",), "Did you mean 'solve'?"),
        (("materials", "Silicon"), "did you mean 'Si'?"),
        (("materials", "gallium arsenide"), "did you mean 'GaAs'?"),
    ],
)
def test_near_words_are_proposed(words: tuple[str, ...], says: str) -> None:
    result = CliRunner().invoke(program, list(words))
    assert result.exit_code == 2
    assert says in " ".join(result.stderr.split())


def test_small_bare_energies_are_in_eV() -> None:
    assert 'energy = "0.1 meV"' in refused(lambda: parse_quantity(1e-4, "energy", "accuracy.energy"))
    assert 'energy = "0.5 meV"' in refused(lambda: parse_quantity(0.5, "energy", "accuracy.energy"))
    assert 'fermi_level = "0.0001 eV"' in refused(lambda: parse_quantity(1e-4, "energy", "carriers.fermi_level"))


def test_what_stands_twice_is_named() -> None:
    good = '[section]\nshape = "circle"\ndiameter = "9 nm"\nmaterial = "GaAs"\n[carriers]\ntemperature = "4 K"\n'
    parse(good)
    said = refused(lambda: parse(good + 'kind = "electrons"\nkind = "electrons"\n'))
    assert "holds kind twice, the second time in line 8; take one of them out" in said
    said = refused(lambda: parse(good + '[section]\nshape = "circle"\n'))
    assert "holds [section] twice, the second time in line 7" in said


def test_a_missing_file_is_told_with_its_place(tmp_path: Path) -> None:
    text = '[section]\nshape = "outline"\nfile = "a.csv"\nscale = "1 nm"\nmaterial = "GaAs"\n'
    said = refused(lambda: parse(f'{text}[carriers]\ntemperature = "4 K"\n', tmp_path))
    assert f"got 'a.csv'; looked for {tmp_path / 'a.csv'}; paths are relative to the wire file" in said


def test_unknown_columns_are_to_be_renamed(tmp_path: Path) -> None:
    (tmp_path / "points.csv").write_text("Vg,G\n0,1\n")
    said = refused(lambda: ws.measured.read(tmp_path / "points.csv"))
    assert said.endswith("got 'Vg, G'; rename the columns in the first line, e.g. gate_voltage_V")


def test_endless_surroundings_are_called_so() -> None:
    around = Surroundings((Slab("SiO2", 100.0),), beside="air", below_gate="back")
    gate = Gate("back", (), lineup_voltage_V=0.0)
    section = Section(Rectangle(40.0, 20.0), "InAs")
    problem = Problem("fin", section, Carriers(temperature_K=(77.0,)), gates=(gate,), surroundings=around)
    size = dict(describe(problem))["surroundings.size"]
    assert size.startswith("endless (cut off at ") and " um by " in size
    assert "nm" not in size


def test_a_material_in_python_is_not_said_to_stand_in_a_file() -> None:
    own = ws.Material.given("ours", electron_mass=0.05, conduction_edge_eV=0.0)
    assert {value.source for value in own.values} == {"given with the wire"}
    problem = Problem("a", Section(Circle(9.0), "ours"), Carriers(temperature_K=(4.0,)), materials=(own,))
    assert replace(problem).digest == problem.digest
