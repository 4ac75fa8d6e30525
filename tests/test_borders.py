"""Borders of regions: lengths against those of the drawn curves."""

from __future__ import annotations

import math

import pytest

from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.physics.borders import Borders, borders_of


def found(section: Section) -> Borders:
    with Mesher(section.pieces()) as mesher:
        return borders_of(mesher.mesh(SizeField(4.0, turn_cells=12))[0])


def test_a_shell_around_a_core() -> None:
    borders = found(Section(Circle(16), "GaAs", layers=(Layer(8, "AlAs"), Layer(2, "GaAs", carriers="excluded"))))
    assert set(borders.between) == {("core", "layer 1"), ("layer 1", "layer 2")}
    assert borders.between["core", "layer 1"] == pytest.approx(math.pi * 16, rel=1e-2)
    assert borders.between["layer 1", "layer 2"] == pytest.approx(math.pi * 32, rel=1e-2)
    assert borders.free == {"layer 2": pytest.approx(math.pi * 36, rel=1e-2)}
    assert set(borders.around("layer 1")) == {"core", "layer 2"}
    wanted = {"core": 64 * math.pi, "layer 1": (256 - 64) * math.pi, "layer 2": (324 - 256) * math.pi}
    assert borders.areas_nm2 == pytest.approx(wanted, rel=5e-3)


def test_holes_and_patches_on_the_rim() -> None:
    hole = Patch(Rectangle(4, 4), "void", (-6, 0))
    fin = Patch(Rectangle(6, 10), "InAs", (0, 10))
    borders = found(Section(Rectangle(30, 10), "GaAs", patches=(hole, fin)))
    assert borders.between == {("core", "patch 2"): pytest.approx(6)}
    assert borders.free["core"] == pytest.approx(80 - 6 + 16)
    assert borders.free["patch 2"] == pytest.approx(26)
    assert borders.areas_nm2 == pytest.approx({"core": 300 - 16, "patch 2": 60})
