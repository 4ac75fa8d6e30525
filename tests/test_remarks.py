"""Warnings: each has a case that triggers it and one that does not, and what it says is checked."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from wiresolve.describe.wirefile import parse
from wiresolve.errors import InputError
from wiresolve.physics.fermi import fermi_integral
from wiresolve.result import Result
from wiresolve.solve import solve


def wire(section: str, rest: str = "", subbands: int = 3, energy: str = "0.1 meV") -> Result:
    text = f'title = "remarks"\n[section]\n{section}\n{rest}\n[carriers]\ntemperature = "77 K"\n[accuracy]\n'
    return solve(parse(f'{text}subbands = {subbands}\nenergy = "{energy}"\n', Path()))


def codes(result: Result) -> set[str]:
    return {warned.code for warned in result.warnings}


def circle(diameter: float, material: str) -> str:
    return f'shape = "circle"\ndiameter = "{diameter} nm"\nmaterial = "{material}"'


def shell(thickness: float, material: str) -> str:
    return f'[[section.layers]]\nthickness = "{thickness} nm"\nmaterial = "{material}"\n'


def test_mass_range_gives_the_size_of_the_error() -> None:
    """E (1 + alpha E) = parabolic energy in closed form (E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957))."""
    result = wire(circle(14, "InSb"))
    assert "mass-range" in codes(result)
    assert "outside its range" in result.verdict.text
    alpha = (1 - 0.0135) ** 2 / 0.2349
    parabolic = 0.0380998211 / 0.0135 * (2.404825558 / 7) ** 2
    expected = 1e3 * ((1 + 4 * alpha * parabolic) ** 0.5 - 1) / (2 * alpha)
    text = next(warned.text for warned in result.warnings if warned.code == "mass-range")
    said = float(text.split("lies near ")[1].split(" meV")[0])
    assert said == pytest.approx(expected, rel=0.02)
    wide = wire(circle(80, "InAs"))
    assert "mass-range" not in codes(wide)
    assert "outside its range" not in wide.verdict.text


def test_open_barrier_and_wall_too_near() -> None:
    deep = wire(circle(16, "GaAs"), shell(8, "Al0.3Ga0.7As"))
    assert codes(deep) == set()
    assert all(subband.bound for subband in deep.subbands)
    shallow = wire(circle(16, "GaAs"), shell(8, "Al0.3Ga0.7As"), subbands=10)
    assert codes(shallow) >= {"open-barrier", "wall-too-near"}
    assert [subband.bound for subband in shallow.subbands].index(False) == 8
    assert "from number 9 on" in next(w.text for w in shallow.warnings if w.code == "open-barrier")
    thin = wire(circle(8, "GaAs"), shell(1.5, "Al0.3Ga0.7As"), subbands=1)
    assert codes(thin) >= {"wall-too-near"}


def test_a_material_outside_is_extended_until_no_wall_is_seen() -> None:
    result = wire(circle(10, "GaAs") + '\noutside = "Al0.3Ga0.7As"', subbands=3)
    assert codes(result) <= {"mass-range"}
    assert max(abs(s.wall_effect_eV) for s in result.subbands) < 1e-6
    assert "behind a hard wall" not in " ".join(result.not_modelled)
    assert "behind a hard wall" in " ".join(wire(circle(10, "GaAs")).not_modelled)


def test_separate_pieces() -> None:
    other = '[[section.patches]]\nshape = "circle"\ndiameter = "20 nm"\ncenter = ["{} nm", "0 nm"]\nmaterial = "GaAs"\n'
    apart = wire(circle(20, "GaAs"), other.format(50), subbands=2)
    assert "separate-pieces" in codes(apart)
    assert "2 separate pieces" in apart.verdict.text
    assert apart.subbands[1].energy_eV == pytest.approx(apart.subbands[0].energy_eV, abs=2e-5)
    assert "separate-pieces" not in codes(wire(circle(20, "GaAs"), other.format(15), subbands=2))


def test_only_what_matters_is_listed_as_left_out() -> None:
    alone, layered = wire(circle(20, "GaAs")), wire(circle(20, "GaAs"), shell(5, "AlAs"))
    assert not any(text.startswith("strain") for text in alone.not_modelled)
    assert any(text.startswith("strain") for text in layered.not_modelled)
    assert "indirect-gap" in codes(layered)
    assert "indirect-gap" not in codes(alone)


CROSSING = """
title = "two boxes of unlike mass"
[section]
shape = "rectangle"
width = "10 nm"
height = "10 nm"
material = "light"
[[section.patches]]
shape = "rectangle"
width = "3 nm"
height = "3 nm"
center = ["20 nm", "0 nm"]
material = "heavy"
[materials.light]
electron_mass = 0.067
conduction_edge = "0 eV"
[materials.heavy]
electron_mass = 1.0
conduction_edge = "0.08 eV"
[carriers]
temperature = "300 K"
fermi_level = "0.25 eV"
[accuracy]
subbands = 3
"""


def test_bands_of_unlike_mass_keep_their_carriers_where_they_cross() -> None:
    """Closed form: two separate boxes, sums of squares, each band a parabola of its own mass."""
    result = solve(parse(CROSSING, Path()))
    unit, thermal = 0.0380998211096858, 8.617333262e-5 * 300
    waves = np.arange(1, 13)
    total, found = 0.0, []
    for mass, side, edge in ((0.067, 10.0, 0.0), (1.0, 3.0, 0.08)):
        levels = edge + unit / mass * (np.pi / side) ** 2 * (waves[:, None] ** 2 + waves[None] ** 2)
        states = 2 * np.sqrt(mass * thermal / (4 * np.pi * unit))
        density = states * fermi_integral(-0.5, (0.25 - levels.ravel()) / thermal)
        total += float(density.sum())
        found += list(zip(levels.ravel(), density, strict=True))
    assert result.line_density_per_nm == pytest.approx(total, rel=1e-3)
    for subband, (energy, density) in zip(result.subbands, sorted(found), strict=False):
        assert subband.energy_eV == pytest.approx(energy, abs=1e-4)
        assert subband.line_density_per_nm == pytest.approx(density, rel=5e-3)


def test_unlike_valley_degeneracies_are_refused() -> None:
    text = CROSSING.replace("electron_mass = 1.0", "electron_mass = 1.0\nvalley_degeneracy = 6")
    with pytest.raises(InputError, match="valley_degeneracy differs"):
        solve(parse(text, Path()))
