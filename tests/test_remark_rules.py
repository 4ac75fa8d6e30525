"""The rules behind warnings, as functions: closed forms, published sizes, and drawn widths."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import constants

from wiresolve.describe.material import Material
from wiresolve.describe.materials import look_up
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Hexagon, Rectangle, Triangle
from wiresolve.physics.borders import Borders
from wiresolve.physics.boundary_remarks import OuterBarrier, bound_state, on_outer_barrier, wall_depth_nm
from wiresolve.physics.charge_remarks import (
    Ring,
    charge_energy_eV,
    harmless_density_per_nm,
    image_shift_eV,
    rings,
    spacing_shift_eV,
)
from wiresolve.physics.image_charge import ground_state_shift, second_state_shift
from wiresolve.physics.material_remarks import (
    hydrostatic_shift_eV,
    misfit,
    narrowest_nm,
    on_silicon,
    on_surfaces,
    on_two_bands,
    on_valleys,
    parabolic_error_eV,
)
from wiresolve.physics.wording import figures, meV, signed_meV


def test_parabolic_error_is_that_of_the_closed_relation() -> None:
    real, alpha = np.array([0.0, 0.02, 0.3]), np.array([2.5, 2.5, 0.0])
    parabolic = real * (1 + alpha * real)
    assert parabolic_error_eV(parabolic, alpha) == pytest.approx(parabolic - real, abs=1e-15)
    # Published size: InAs hexagon, 39.5 against 36.2 meV for alpha = 2.5 (from memory of the design study).
    assert float(parabolic_error_eV(np.array([0.0395]), np.array([2.5]))[0]) == pytest.approx(0.0033, abs=2e-4)


def test_a_bound_state_is_one_only_if_the_free_wall_agrees() -> None:
    assert bound_state(0.1, 0.0, 0.2) is True
    assert bound_state(0.21, 0.02, 0.2) is None
    assert bound_state(0.21, 0.005, 0.2) is False
    assert bound_state(0.21, None, 0.2) is False
    barrier = OuterBarrier("shell", False, np.array([0.2, 0.2, np.nan, 0.3]), np.array([0.0, 0.02, np.nan, 0.0]))
    energy = np.array([0.1, 0.21, 0.25, 0.31])
    assert barrier.bound(energy) == [True, None, None, False]
    notes, said = on_outer_barrier(barrier, energy, 1e-3)
    assert [code for code, _, _ in notes] == ["open-barrier", "wall-too-near"]
    assert "number 4 on" in said[0]
    assert "lifts number 2 above" in notes[1][1]


def test_a_high_barrier_stands_farther_out() -> None:
    """GaAs in 0.23 eV, R = 10 nm: 32.9 meV behind a hard wall, 23.24 meV with the barrier (masses 0.067 and 0.092)."""
    depth = wall_depth_nm(0.067, 0.092, 0.23)
    assert depth == pytest.approx(math.sqrt(0.0380998 * 0.092 / 0.23) / 0.067)
    assert 32.9 * (10 / (10 + depth)) ** 2 == pytest.approx(23.24, rel=0.02)


def test_widths_between_parallel_lines() -> None:
    turned = Section(Rectangle(25, 5, 0, 17.3), "Si")
    assert narrowest_nm(turned, "core") == pytest.approx(5)
    assert narrowest_nm(Section(Circle(7), "Si"), "core") == pytest.approx(7, rel=1e-3)
    assert narrowest_nm(Section(Hexagon(across_flats_nm=6), "Si"), "core") == pytest.approx(6)
    assert narrowest_nm(Section(Triangle(side_nm=10), "Si"), "core") == pytest.approx(10 * math.sqrt(3) / 2)
    shells = Section(Rectangle(20, 20), "SiO2", layers=(Layer(3, "Si", sides=(("top", 2.0),)),), carriers="excluded")
    assert narrowest_nm(shells, "layer 1") == 2
    fin = Section(Rectangle(40, 20), "SiO2", patches=(Patch(Rectangle(4, 12), "Si", (0, 10)),), carriers="excluded")
    assert narrowest_nm(fin, "patch 1") == pytest.approx(4)


def test_silicon_is_known_by_its_valleys() -> None:
    silicon, rich, poor = (look_up(name, 300.0) for name in ("Si", "Si0.7Ge0.3", "Si0.05Ge0.95"))
    assert [bool(on_silicon(4.9, "core", m)) for m in (silicon, rich, poor)] == [True, True, False]
    assert not on_silicon(5.0, "core", silicon)
    assert not on_silicon(2.0, "core", look_up("GaAs", 300.0))


def test_two_bands_up_to_half() -> None:
    assert on_two_bands(np.array([0.1, 0.2]), np.array([2.4, 2.4]), ["InAs"] * 2) == []
    (note,) = on_two_bands(np.array([0.1, 0.25]), np.array([2.4, 2.4]), ["InAs"] * 2)
    assert (
        "from number 2 on, energies lie beyond the range of the two-band mass of InAs: number 2 lies 250 meV" in note[1]
    )


def test_misfit_of_like_crystals_only() -> None:
    """Lattice constants at 300 K: InAs 0.60583, GaAs 0.565325, Si 0.5431, Ge 0.5658 nm."""
    gallium, indium = look_up("GaAs", 300.0), look_up("InAs", 300.0)
    assert misfit(gallium, indium) == pytest.approx(0.60583 / 0.565325 - 1)
    assert misfit(look_up("Si", 300.0), look_up("Ge", 300.0)) == pytest.approx(0.5658 / 0.5431 - 1, rel=1e-3)
    assert misfit(gallium, look_up("GaN", 300.0)) is None
    assert misfit(gallium, look_up("SiO2", 300.0)) is None
    shift = hydrostatic_shift_eV(indium, "zone centre", 0.01, 300.0)
    assert shift == pytest.approx(-5.08 * 2 * (1 - 45.26 / 83.29) * 0.01)
    assert hydrostatic_shift_eV(indium, "X", 0.01, 300.0) is None
    assert hydrostatic_shift_eV(Material.given("mine", electron_mass=0.1), "zone centre", 0.01, 300.0) is None


def test_bare_surfaces_only() -> None:
    materials = {"core": look_up("InAs", 77.0), "layer 1": look_up("InP", 77.0)}
    bare = Borders({}, {"core": 30.0}, {})
    covered = Borders({("core", "layer 1"): 30.0}, {"layer 1": 50.0}, {})
    assert on_surfaces(bare, materials, ["core"])[0][0] == "surface-accumulation"
    assert on_surfaces(covered, materials, ["core", "layer 1"]) == []
    assert on_surfaces(bare, {"core": look_up("In0.53Ga0.47As", 77.0)}, ["core"]) == []
    assert on_surfaces(bare, {"core": look_up("In0.9Ga0.1As", 77.0)}, ["core"])


def test_valleys_within_six_kT_or_a_tenth_of_an_eV() -> None:
    solved = {"zone centre": 0.1, "L": 0.19}
    notes, said = on_valleys(solved, {"X": (0.15, "give an [orientation]"), "Y": (0.3, "")}, 0.001)
    assert [code for code, _, _ in notes] == ["valley-close"] * 2
    assert "90 meV above" in notes[0][1]
    assert "50 meV above" in notes[1][1]
    assert said == ["Valleys of another kind (L, X) lie close."]
    assert on_valleys({"zone centre": 0.1, "L": 0.21}, {}, 0.001) == ([], [])
    assert on_valleys({"zone centre": 0.1, "L": 0.21}, {}, 0.026)[0]


def test_charge_by_gauss_law() -> None:
    """From axis to rim of an even cylinder the energy falls by e^2 N/(4 pi eps0 eps); e^2 n L^2 is four times that."""
    drop = constants.e * 0.1e9 / (4 * math.pi * constants.epsilon_0 * 12.9)
    assert charge_energy_eV(0.1, 12.9) == pytest.approx(4 * drop)
    assert charge_energy_eV(harmless_density_per_nm(0.05, 12.9), 12.9) == pytest.approx(0.05)


def test_image_charges_of_nested_rings() -> None:
    """A shell like the core or like the surroundings is not there; a perfect conductor hides what lies behind."""
    whole = ground_state_shift(12.0, 2.0, 10.0)
    like_core = [Ring(5.0, 12.0, 12.0, 0.0), Ring(10.0, 12.0, 2.0, 0.0)]
    like_outside = [Ring(10.0, 12.0, 2.0, 0.0), Ring(20.0, 2.0, 2.0, 0.0)]
    assert image_shift_eV(like_core) == pytest.approx(whole)
    assert image_shift_eV(like_outside) == pytest.approx(whole)
    metal = [Ring(10.0, 12.0, 1e9, 0.0), Ring(20.0, 1e9, 2.0, 0.0)]
    # What is left falls like one over the root of the shell's permittivity.
    assert image_shift_eV(metal) == pytest.approx(image_shift_eV(metal[:1]), rel=5e-3)
    assert image_shift_eV([]) == spacing_shift_eV([], 5.0) == 0
    wider = second_state_shift(12.0, 2.0, 10.0) - whole
    assert spacing_shift_eV(like_core, 10.0) == pytest.approx(wider)
    assert spacing_shift_eV(like_core, 5.0) == pytest.approx(wider / 4)


def test_rings_are_found_from_the_inside_outwards() -> None:
    def of(permittivity: float | None) -> Material:
        return Material.given("m", electron_mass=0.1, permittivity=permittivity)

    borders = Borders(
        {("core", "layer 1"): 31.4, ("layer 1", "layer 2"): 62.8},
        {"layer 2": 94.2},
        {"core": 78.5, "layer 1": 235.6, "layer 2": 392.7},
    )
    materials = {"core": of(12.9), "layer 1": of(12.0), "layer 2": of(3.9)}
    inner, outer = rings(borders, materials, "core")
    # Core and first layer are nearly alike: one wire of 10 nm radius.
    assert (inner.radius_nm, inner.inside, inner.outside, inner.bare) == (pytest.approx(10, rel=1e-3), 12.9, 3.9, 0)
    assert (outer.radius_nm, outer.inside, outer.outside, outer.bare) == (pytest.approx(15, rel=1e-3), 3.9, 1.0, 1)
    assert rings(borders, materials, "core", endless=frozenset({"layer 2"})) == (inner,)
    assert rings(borders, {**materials, "core": of(None)}, "core") == ()
    assert rings(borders, {**materials, "layer 2": of(None)}, "core") == ()


def test_numbers_in_sentences() -> None:
    assert (figures(162.34, 2), figures(0.0123456), meV(4.0129, 3)) == ("160", "0.0123", "4010 meV")
    assert (signed_meV(0.0444), signed_meV(-0.562)) == ("+44 meV", "-560 meV")
