"""Warnings: each has a case that triggers it and one that does not, and what it says is checked."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from pathlib import Path

import meshio
import numpy as np
import pytest
from click.testing import CliRunner

from wiresolve.cli import program
from wiresolve.describe.potential import Potential
from wiresolve.describe.wirefile import parse
from wiresolve.errors import InputError
from wiresolve.physics.charge_remarks import Ring, image_shift_eV
from wiresolve.physics.fermi import fermi_integral
from wiresolve.result import Result
from wiresolve.solve import solve

UNIT = 0.0380998211096858
"""hbar^2/2m0 in eV nm^2."""


def text(
    section: str,
    rest: str = "",
    subbands: int = 3,
    energy: str = "1 meV",
    carriers: str = 'temperature = "77 K"',
) -> str:
    head = f'title = "remarks"\n[section]\n{section}\n{rest}\n[carriers]\n{carriers}\n[accuracy]\n'
    return f'{head}subbands = {subbands}\nenergy = "{energy}"\n'


def wire(*parts: str, folder: Path | None = None, **more: object) -> Result:
    return solve(parse(text(*parts, **more), folder or Path()))  # type: ignore[arg-type]


def codes(result: Result) -> set[str]:
    return {warned.code for warned in result.warnings}


def said(result: Result, code: str) -> str:
    return next(warned.text for warned in result.warnings if warned.code == code)


def circle(diameter: float, material: str) -> str:
    return f'shape = "circle"\ndiameter = "{diameter} nm"\nmaterial = "{material}"'


def square(side: float, material: str) -> str:
    return f'shape = "rectangle"\nwidth = "{side} nm"\nheight = "{side} nm"\nmaterial = "{material}"'


def shell(thickness: float, material: str, carriers: str = "admitted") -> str:
    return f'[[section.layers]]\nthickness = "{thickness} nm"\nmaterial = "{material}"\ncarriers = "{carriers}"\n'


SI_110 = "[orientation]\naxis = [1, 1, 0]\nup = [0, 0, 1]\n"
OWN = "[materials.{name}]\nelectron_mass = {mass}\n{more}"
PARABOLIC = 'temperature = "77 K"\nmodel = "parabolic"'
BEYOND = '\noutside = "wall"'


def own(name: str, mass: float, more: str = "") -> str:
    return OWN.format(name=name, mass=mass, more=more)


WELL = own("well", 0.067, 'conduction_edge = "0 eV"\n') + own("wall", 0.092, 'conduction_edge = "0.3 eV"\n')
NEXT = '[[section.patches]]\nshape = "circle"\ndiameter = "20 nm"\ncenter = ["{} nm", "0 nm"]\nmaterial = "GaAs"\n'

# Of each code: a wire that it warns of, and one like it that it does not.
CASES = {
    "accuracy-coarse": (
        (circle(30, "GaAs"), "", 6, "1 meV", 'temperature = "0.001 K"'),
        (circle(30, "GaAs"), "", 6, "1 meV", 'temperature = "4 K"'),
    ),
    "open-barrier": (
        (circle(10, "well"), shell(6, "wall") + WELL, 6),
        (circle(10, "well"), shell(6, "wall") + WELL, 3),
    ),
    "wall-too-near": (
        (circle(10, "well"), shell(1, "wall") + WELL, 1),
        (circle(10, "well"), shell(6, "wall") + WELL, 1),
    ),
    "outermost-states": (
        (circle(6, "well"), shell(20, "wall") + WELL, 6),
        (circle(10, "well"), shell(6, "wall") + WELL, 3),
    ),
    "soft-wall": (
        (circle(20, "GaAs"), shell(5, "Al0.3Ga0.7As", "excluded")),
        (circle(60, "GaAs"), shell(5, "Al0.3Ga0.7As", "excluded")),
    ),
    "mass-range": ((circle(4, "GaAs"), "", 3), (circle(12, "GaAs"), "", 3)),
    "parabolic-forced": (
        (circle(20, "InAs"), "", 3, "1 meV", PARABOLIC),
        (circle(20, "mine"), own("mine", 0.02), 3, "1 meV", PARABOLIC),
    ),
    "valley-close": ((circle(5, "GaAs"), SI_110, 1), (circle(12, "GaAs"), SI_110, 1)),
    "lattice-mismatch": (
        (circle(20, "GaAs"), shell(5, "In0.53Ga0.47As", "excluded"), 1),
        (circle(20, "GaAs"), shell(5, "AlAs", "excluded"), 1),
    ),
    "surface-accumulation": ((circle(40, "InAs"), "", 1), (circle(40, "InAs"), shell(5, "InP"), 1)),
    "dielectric-mismatch": (
        (square(6, "Si"), shell(2, "SiO2", "excluded") + SI_110, 3),
        (circle(20, "GaAs"), shell(6, "Al0.3Ga0.7As", "excluded"), 3),
    ),
    "carrier-charge": (
        (circle(20, "GaAs"), "", 3, "1 meV", 'temperature = "77 K"\nfermi_level = "0.2 eV"'),
        (circle(20, "GaAs"), "", 3, "1 meV", 'temperature = "77 K"\nfermi_level = "0.01 eV"'),
    ),
    "separate-pieces": ((circle(20, "GaAs"), NEXT.format(50), 2), (circle(20, "GaAs"), NEXT.format(15), 2)),
    "alloy-range": ((circle(20, "Al0.5Ga0.5As"), SI_110, 1), (circle(20, "Al0.3Ga0.7As"), SI_110, 1)),
    "lattice-temperature": (
        (circle(20, "GaAs") + '\nlattice_temperature = "900 K"', "", 1),
        (circle(20, "GaAs") + '\nlattice_temperature = "300 K"', "", 1),
    ),
    "crystal-phase": (
        (circle(40, "InAs"), "[orientation]\naxis = [1, 1, 1]\nup = [1, -1, 0]\n", 1),
        (circle(40, "InAs"), SI_110, 1),
    ),
}


@pytest.mark.parametrize("code", CASES)
def test_a_warning_stands_where_it_must_and_nowhere_else(code: str) -> None:
    warned, quiet = (wire(*parts) for parts in CASES[code])
    assert code in codes(warned)
    assert code not in codes(quiet)
    assert all(w.text and w.remedy for w in warned.warnings)


def test_a_plain_wire_has_no_warnings() -> None:
    assert codes(wire(circle(16, "GaAs"), shell(8, "Al0.3Ga0.7As") + SI_110)) == set()
    assert codes(wire(circle(20, "GaAs"), SI_110)) == set()
    assert codes(wire(circle(20, "GaAs"))) == set()


def test_forced_parabolic_masses_tell_their_error() -> None:
    """The round hard wall has e (1 + alpha e) = hbar^2 j^2 / 2 m R^2 exactly, with e from the nonparabolic solve."""
    mine = own("mine", 0.02, "nonparabolicity = 2.0\n")
    warned = wire(circle(20, "mine"), mine, energy="1e-6 eV", carriers=PARABOLIC)
    assert "parabolic-forced" in codes(warned)
    parts = said(warned, "parabolic-forced")
    first, second = (UNIT / 0.02 * (zero / 10) ** 2 for zero in (2.404825557695773, 3.831705970207512))
    real = [(math.sqrt(1 + 8 * e) - 1) / 4 for e in (first, second)]
    assert f"first level lies {1e3 * (first - real[0]):.3g} meV too high" in parts
    assert (
        f"spacing of {1e3 * (second - first):.3g} meV is {1e3 * (second - first - real[1] + real[0]):.3g} meV" in parts
    )
    right = wire(circle(20, "mine"), mine, energy="1e-6 eV")
    assert [right.subbands[i].energy_eV for i in (0, 1)] == pytest.approx(real, abs=2e-6)
    assert "far from true" in wire(circle(10, "mine"), mine, carriers=PARABOLIC).verdict.text
    assert "far from true" not in warned.verdict.text


def test_masses_of_silicon_are_warned_of_by_quantity() -> None:
    """On-current below 5 nm, threshold below 3 nm: J. Wang and others, cond-mat/0412278."""
    current = said(wire(square(4, "Si"), SI_110, 1), "mass-range")
    assert "on-current" in current
    assert "on-current and the threshold voltage" not in current
    assert "4 nm wide" in current
    assert "on-current and the threshold voltage" in said(wire(square(2.5, "Si"), SI_110, 1), "mass-range")
    assert "mass-range" in codes(wire(square(4, "Si0.8Ge0.2"), SI_110, 1))
    assert "mass-range" not in codes(wire(square(5.5, "Si"), SI_110, 1))


def test_real_walls_are_named_with_their_height_and_depth() -> None:
    """Radius 5 nm, barrier 0.3 eV, masses 0.067 and 0.092: 0.0732 eV (tests/truth/finite_barrier.py), not 0.1316."""
    hard = wire(circle(10, "well"), shell(5, "wall", "excluded") + WELL, energy="0.01 meV")
    parts = said(hard, "soft-wall")
    assert "barrier is 0.3 eV high" in parts
    depth = float(parts.split("stood ")[1].split(" nm")[0])
    assert hard.subbands[0].energy_eV == pytest.approx(0.1316, abs=1e-4)
    assert hard.subbands[0].energy_eV * (5 / (5 + depth)) ** 2 == pytest.approx(0.07323175, rel=0.05)
    turned = wire(circle(20, "GaAs"), shell(5, "InAs", "excluded"))
    assert "it would hold carriers" in said(turned, "soft-wall")
    assert "soft-wall" not in codes(wire(circle(8, "GaAs"), shell(5, "void")))
    assert "soft-wall" in codes(wire(square(3, "Si"), shell(2, "SiO2", "excluded") + SI_110, 1))


def test_bound_or_not_or_unsure() -> None:
    """Three levels are bound in this well (a pair is two entries): see tests/truth/finite_barrier.py."""
    shallow = wire(circle(10, "well"), shell(6, "wall") + WELL, 8, "0.1 meV")
    bound = [subband.bound for subband in shallow.subbands]
    assert bound[:3] == [True] * 3
    assert bound[-1] is False
    assert f"from number {bound.index(False) + 1} on" in said(shallow, "open-barrier")
    assert all(s.bound or s.energy_eV > 0.29 for s in shallow.subbands)
    thin = wire(circle(5, "well"), shell(0.5, "wall") + WELL, 1)
    assert thin.subbands[0].bound is None
    assert "it alone lifts number 1 above the edge" in said(thin, "wall-too-near")


def test_a_given_potential_moves_the_barrier_too() -> None:
    """A constant potential moves all energies and changes nothing else."""
    problem = parse(text(circle(10, "well"), shell(6, "wall") + WELL, 3), Path())
    still = solve(problem)
    lifted = solve(replace(problem, potential=Potential(function=lambda x, y: 0.0 * x + 0.4)))
    assert [s.bound for s in lifted.subbands] == [s.bound for s in still.subbands] == [True] * 3
    assert codes(lifted) == codes(still) == set()
    assert lifted.subbands[0].energy_eV == pytest.approx(still.subbands[0].energy_eV + 0.4, abs=1e-5)
    silicon = parse(text(square(6, "Si"), shell(2, "SiO2", "excluded") + SI_110, 1), Path())
    moved = solve(replace(silicon, potential=Potential(function=lambda x, y: 0.0 * x - 1.0)))
    assert [w.text for w in moved.warnings] == [w.text for w in solve(silicon).warnings]


def test_a_field_that_pulls_carriers_out_is_refused_or_marked() -> None:
    field = '[potential]\nfield = ["{} V/nm", "0 V/nm"]\n'
    with pytest.raises(InputError, match="pulls carriers out"):
        wire(circle(10, "well") + BEYOND, field.format(0.03) + WELL)
    # Behind a wall the same field is allowed: the layer ends where it is drawn.
    assert wire(circle(10, "well"), shell(4, "wall") + field.format(0.03) + WELL, 1).subbands
    marked = wire(circle(10, "well") + BEYOND, field.format(0.006) + WELL, 4)
    assert codes(marked) >= {"open-barrier", "outermost-states"}
    assert codes(wire(circle(10, "well") + BEYOND, field.format(0.0005) + WELL, 1)) == set()


def test_a_material_outside_is_extended_until_no_wall_is_seen() -> None:
    result = wire(circle(10, "well") + BEYOND, WELL, energy="0.1 meV")
    assert codes(result) == set()
    assert max(abs(s.wall_effect_eV) for s in result.subbands if s.wall_effect_eV is not None) < 1e-6
    assert "behind a hard wall" not in " ".join(result.not_modelled)
    assert "behind a hard wall" in " ".join(wire(circle(10, "GaAs")).not_modelled)


def test_misfit_is_told_with_its_size() -> None:
    """InAs on GaAs: 0.60583 against 0.565325 nm; a 2 (1 - C12/C11) misfit with -7.17 eV, 53.8 and 118.8 GPa (300 K)."""
    parts = said(wire(circle(20, "GaAs"), shell(5, "InAs", "excluded"), 1), "lattice-mismatch")
    shift = -7.17 * 2 * (1 - 53.8 / 118.8) * (0.60583 / 0.565325 - 1)
    assert "7.2 % larger than that of GaAs" in parts
    assert "if GaAs took up all of it, its conduction edge would move by" in parts
    assert float(parts.split("by about ")[1].split(" meV")[0]) == pytest.approx(1e3 * shift, rel=0.02)


def test_image_charges_are_told_with_their_size() -> None:
    """Closed form for a round wire of 5 nm radius, 11.7 in 3.9: 19.899 meV (see tests/truth/image_charge.py)."""
    silicon = own("well", 0.3, "permittivity = 11.7\n") + "[materials.oxide]\npermittivity = 3.9\n"
    warned = wire(circle(10, "well"), shell(50, "oxide", "excluded") + silicon)
    assert "falls from 11.7 where the carriers are to 3.9 around it" in said(warned, "dielectric-mismatch")
    assert "about +20 meV" in said(warned, "dielectric-mismatch")
    assert "vacuum" not in said(warned, "dielectric-mismatch")
    bare = wire(circle(10, "well"), own("well", 0.3, "permittivity = 12.9\n"))
    assert "about +71 meV, with vacuum where nothing is drawn" in " ".join(bare.not_modelled)
    unknown = wire(circle(10, "well"), own("well", 0.3))
    assert "dielectric-mismatch" not in codes(unknown)


def test_charge_is_told_with_the_density_that_does_no_harm() -> None:
    """e^2 N/(pi eps0 eps): 4 x 1.44 eV nm over 12.9, per carrier and nm; the spacing is that of the verdict."""
    result = wire(circle(20, "GaAs"), carriers='temperature = "77 K"\nfermi_level = "0.2 eV"')
    parts = said(result, "carrier-charge")
    assert result.line_density_per_nm is not None
    assert f"eps = {4e3 * 1.4399645 * result.line_density_per_nm / 12.9:.3g} meV" in parts
    spacing = result.subbands[1].energy_eV - result.subbands[0].energy_eV
    harmless = spacing * 12.9 / (4 * 1.4399645)
    assert f"at {harmless:.2g} per nm" in " ".join(result.not_modelled)
    remedy = next(w.remedy for w in result.warnings if w.code == "carrier-charge")
    level = float(remedy.split("a fermi_level below ")[1].split(" meV")[0]) / 1e3
    held = float(result.line_density(level, 77.0))
    assert 0.98 * harmless < held <= harmless
    crowded = wire(circle(20, "GaAs"), carriers='temperature = "77 K"\nfermi_level = "0.9 eV"')
    assert "e^2 n L^2 / eps of more than 1 eV (L" in said(crowded, "carrier-charge")


def test_image_charges_of_several_layers_are_one_number() -> None:
    """An oxide of 3.9 lifts levels and one of 22 around it lowers them; what is said of the sum agrees everywhere."""
    oxides = "[materials.one]\npermittivity = 3.9\n[materials.two]\npermittivity = 22.0\n"
    layers = shell(2, "one", "excluded") + shell(4, "two", "excluded")
    result = wire(circle(8, "well"), layers + own("well", 0.3, "permittivity = 11.7\n") + oxides)
    text = said(result, "dielectric-mismatch")
    assert "11.7 where the carriers are and, from there outwards, 3.9, then 22" in text
    assert "rises" not in text and "falls" not in text
    inner, outer = Ring(4.0, 11.7, 3.9, 0.0), Ring(6.0, 3.9, 22.0, 0.0)
    shift = 1e3 * image_shift_eV([inner, outer])
    assert float(text.split("all levels by about ")[1].split(" meV")[0]) == pytest.approx(shift, rel=0.05)
    words = text.split("would move all levels by ")[1].split(", and the first spacing")[0]
    assert f"(they would move all levels by {words})" in " ".join(result.not_modelled)


def test_valleys_that_were_not_solved_are_named() -> None:
    small = wire(circle(5, "GaAs"), "", 1)
    assert any("give an [orientation]" in w.remedy for w in small.warnings if w.code == "valley-close")
    assert "Valleys of another kind" in small.verdict.text
    crossed = wire(circle(4, "GaAs"), SI_110, 1)
    assert crossed.subbands[0].valley.startswith("X")
    assert "the L valleys lies" in " ".join(w.text for w in crossed.warnings if w.code == "valley-close")


def fan(count: int, radius: float, folder: Path) -> str:
    """A mesh of a regular polygon, first order, whose corners lie on a circle."""
    angle = math.tau * np.arange(count) / count
    points = np.vstack(
        [[(0.0, 0.0, 0.0)], np.column_stack([radius * np.cos(angle), radius * np.sin(angle), 0 * angle])]
    )
    cells = np.column_stack([np.zeros(count, dtype=int), 1 + np.arange(count), 1 + (np.arange(count) + 1) % count])
    groups = {"gmsh:physical": [np.ones(count, dtype=int)], "gmsh:geometrical": [np.ones(count, dtype=int)]}
    mesh = meshio.Mesh(points, [("triangle", cells)], cell_data=groups, field_data={"wire": np.array([1, 2])})
    mesh.write(folder / f"fan{count}.msh", file_format="gmsh22", binary=False)
    table = '[section.group_materials]\nwire = "GaAs"\n'
    return f'shape = "mesh"\nfile = "fan{count}.msh"\nunit = "nm"\n{table}'


def test_polygons_for_circles_are_warned_of(tmp_path: Path) -> None:
    """A polygon of n corners on a circle lacks 2 pi^2 / 3 n^2 of its area, and E goes like 1/area."""
    rough = wire(fan(24, 8.0, tmp_path), energy="0.5 meV", folder=tmp_path)
    assert "polygonal-outline" in codes(rough)
    parts = said(rough, "polygonal-outline")
    highest = rough.subbands[-1].energy_eV
    told = float(parts.split("up to about ")[1].split(" meV")[0])
    assert told == pytest.approx(1e3 * highest * 2 * math.pi**2 / (3 * 24**2), rel=0.1)
    assert "too high" in parts
    assert "polygonal-outline" not in codes(wire(fan(240, 8.0, tmp_path), energy="0.5 meV", folder=tmp_path))


def test_rough_potential_files_are_warned_of(tmp_path: Path) -> None:
    table = '[potential]\nfile = "{}"\nlength_unit = "nm"\nenergy_unit = "meV"\n'
    x, y = (axis.ravel() for axis in np.meshgrid(np.linspace(-9, 9, 19), np.linspace(-9, 9, 19)))
    noise = np.random.default_rng(7).normal(0, 5, len(x))
    for name, energy in (("noisy.csv", noise), ("smooth.csv", 0.05 * x**2)):
        np.savetxt(tmp_path / name, np.column_stack([x, y, energy]), delimiter=",", header="x,y,energy", comments="")
    noisy = wire(circle(14, "GaAs"), table.format("noisy.csv"), 1, folder=tmp_path)
    assert "potential-file" in codes(noisy)
    assert "potential-file" not in codes(wire(circle(14, "GaAs"), table.format("smooth.csv"), 1, folder=tmp_path))


def test_separate_pieces_are_one_answer_each() -> None:
    apart = wire(*CASES["separate-pieces"][0], energy="0.1 meV")
    assert "2 separate pieces" in apart.verdict.text
    assert apart.subbands[1].energy_eV == pytest.approx(apart.subbands[0].energy_eV, abs=2e-5)


def test_only_what_matters_is_listed_as_left_out() -> None:
    alone, layered = wire(circle(20, "GaAs")), wire(circle(20, "GaAs"), shell(5, "AlAs"))
    assert not any(left.startswith("strain") for left in alone.not_modelled)
    assert any(left.startswith("strain") for left in layered.not_modelled)
    assert not any("growth of the mass" in left for left in alone.not_modelled)
    assert any(
        "growth of the mass with energy in mine" in left
        for left in wire(circle(20, "mine"), own("mine", 0.1)).not_modelled
    )


def test_strict_makes_warnings_an_exit_code(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "wire.toml").write_text(text(circle(20, "GaAs"), shell(5, "Al0.3Ga0.7As", "excluded") + SI_110))
    ran = CliRunner().invoke(program, ["solve", "wire.toml", "--strict", "--quiet", "--no-figures"])
    assert ran.exit_code == 2
    kept = json.loads((tmp_path / "results" / "wire" / "result.json").read_text())
    assert kept["status"] == "warnings under --strict: soft-wall"
    assert [w["code"] for w in kept["warnings"]] == ["soft-wall"]


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
    unlike = CROSSING.replace("electron_mass = 1.0", "electron_mass = 1.0\nvalley_degeneracy = 6")
    with pytest.raises(InputError, match="valley_degeneracy differs"):
        solve(parse(unlike, Path()))
