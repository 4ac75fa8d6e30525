"""The material table against published numbers, alloys, and what a user may give."""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest

from wiresolve.describe.materials import Material, alloy_families, alloy_fraction, look_up, table_names
from wiresolve.errors import InputError


# Gaps at 300 K: NSM Archive, Ioffe Institute; AlAs: S. Adachi, J. Appl. Phys. 58, R1 (1985); In0.53Ga0.47As:
# K.-H. Goetz and others, J. Appl. Phys. 54, 4543 (1983). The table has them from 0 K by a fit, from another source.
@pytest.mark.parametrize(
    ("name", "gap_eV", "tolerance_eV"),
    [
        ("GaAs", 1.424, 0.002),
        ("AlAs", 3.018, 0.016),
        ("InAs", 0.354, 0.001),
        ("InP", 1.344, 0.010),
        ("InSb", 0.17, 0.005),
        ("GaSb", 0.725, 0.002),
        ("In0.53Ga0.47As", 0.740, 0.006),
    ],
)
def test_gaps_at_room_temperature(name: str, gap_eV: float, tolerance_eV: float) -> None:
    assert look_up(name, 300).gap_eV == pytest.approx(gap_eV, abs=tolerance_eV)


# I. Vurgaftman, J. R. Meyer, L. R. Ram-Mohan, J. Appl. Phys. 89, 5815 (2001); InAs: see the table's note.
@pytest.mark.parametrize(
    ("name", "mass", "gap_eV"),
    [
        ("GaAs", 0.067, 1.519),
        ("AlAs", 0.15, 3.099),
        ("InP", 0.0795, 1.4236),
        ("InSb", 0.0135, 0.235),
        ("GaSb", 0.039, 0.812),
        ("InAs", 0.024, 0.417),
    ],
)
def test_masses_and_cold_gaps(name: str, mass: float, gap_eV: float) -> None:
    material = look_up(name, 0)
    assert material.electron_mass == pytest.approx(mass, rel=1e-14)
    assert material.gap_eV == gap_eV


def test_edges_stand_on_one_scale() -> None:
    assert len({look_up(name, 4.2).edge_scale for name in table_names()}) == 1
    for name in table_names():
        material = look_up(name, 77)
        values = {v.quantity: v.value for v in material.values}
        assert material.conduction_edge_eV == pytest.approx(values["valence_edge"] + values["gap"], rel=1e-14)


def test_conduction_offsets() -> None:
    def offset(one: str, other: str, kelvin: float) -> float:
        a, b = look_up(one, kelvin).conduction_edge_eV, look_up(other, kelvin).conduction_edge_eV
        assert a is not None
        assert b is not None
        return a - b

    # By hand from the 2001 review: gap 1.519 + 0.3 * 1.58 - 0.21 * (-0.127 + 1.31 * 0.3), valence offset 0.53 * 0.3.
    cubic = 0.3 * 1.58 - 0.21 * (-0.127 + 1.31 * 0.3) - 0.3 * 0.53
    assert offset("Al0.3Ga0.7As", "GaAs", 0) == pytest.approx(cubic, abs=1e-12)
    # 0.26 eV between In0.53Ga0.47As and InP on the same scale; 0.20 to 0.28 in the literature.
    assert offset("InP", "In0.53Ga0.47As", 0) == pytest.approx(0.26, abs=0.01)


def test_alloy_ends_are_the_compounds() -> None:
    for family, of, ends in alloy_families():
        assert of in family
        for fraction, compound in zip((1, 0), ends, strict=True):
            metals = {"AlGaAs": ("Al", "Ga"), "InGaAs": ("In", "Ga")}[family]
            alloy = look_up(f"{metals[0]}{fraction}{metals[1]}{1 - fraction}As", 77)
            end = look_up(compound, 77)
            assert alloy.electron_mass == pytest.approx(end.electron_mass, rel=1e-13)
            assert alloy.conduction_edge_eV == pytest.approx(end.conduction_edge_eV, rel=1e-13)
            assert alloy.permittivity == pytest.approx(end.permittivity, rel=1e-13)
            checked = {v.quantity: v.checked for v in end.values}
            for value in alloy.values:
                if value.quantity != "electron_affinity":
                    assert value.checked == checked[value.quantity], (compound, value.quantity)


def test_either_order_of_an_alloy() -> None:
    one, other = look_up("Al0.3Ga0.7As", 4), look_up("Ga0.7Al0.3As", 4)
    assert one.conduction_edge_eV == other.conduction_edge_eV
    assert other.name == "Ga0.7Al0.3As"
    assert alloy_fraction("In.53Ga.47As") == ("InGaAs", 0.53)
    assert alloy_fraction("GaAs") is None


def test_every_value_has_its_source_and_only_found_ones_are_checked() -> None:
    for name in table_names():
        for value in look_up(name, 4.2).values:
            assert len(value.source) > 20
            assert value.name == name
    checked = {v.quantity for v in look_up("GaAs", 4.2).values if v.checked}
    assert checked == {"electron_mass", "permittivity", "electron_affinity"}
    # A gap is checked only where no fit from memory stands between it and the text: at 0 K.
    assert "gap" in {v.quantity for v in look_up("GaAs", 0).values if v.checked}
    assert not any(v.checked for v in look_up("In0.53Ga0.47As", 4.2).values)


def test_the_choices_between_sources_are_said() -> None:
    def source(name: str, quantity: str) -> str:
        return next(v.source for v in look_up(name, 4.2).values if v.quantity == quantity)

    assert "0.026" in source("InAs", "electron_mass")
    assert "43 meV" in source("Al0.3Ga0.7As", "gap")
    assert "0.46" in source("Al0.3Ga0.7As", "valence_edge")


def test_notes_become_warnings() -> None:
    def codes(name: str, kelvin: float) -> set[str]:
        return {code for code, text, remedy in look_up(name, kelvin).notes if text and remedy}

    assert codes("Al0.3Ga0.7As", 4.2) == set()
    assert codes("Al0.46Ga0.54As", 4.2) == {"indirect-gap"}
    assert codes("AlAs", 300) == {"indirect-gap"}
    assert codes("InAs", 4.2) == set()
    assert codes("GaAs", 900) == {"lattice-temperature"}


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("GaAz", "'GaAs'"),
        ("gaas", "'GaAs'"),
        ("AlGaAs", '"Al0.3Ga0.7As"'),
        ("Al1.7Ga-0.7As", "between 0 and 1"),
        ("Al-0.1Ga1.1As", "between 0 and 1"),
        ("Al0.3Ga0.6As", "must add up to 1"),
        ("Al0.3In0.7As", "not a known material"),
        ("Al0.3Ga0.7Sb", "not a known material"),
        ("unobtainium", "known are GaAs"),
    ],
)
def test_unknown_materials(name: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        look_up(name, 300)
    assert caught.match("^material: ")


def test_a_gap_that_has_closed_is_refused() -> None:
    with pytest.raises(InputError, match="closes"):
        look_up("InSb", 1900)


def test_given_materials() -> None:
    tensor = ((20.0, 1.0, 0.5), (1.0, 10.0, 0.0), (0.5, 0.0, 5.0))
    tilted = Material.given("tilted", inverse_mass=tensor, conduction_edge_eV=0.1, source="invented")
    assert tilted.inverse_mass == tensor
    assert tilted.electron_mass is None
    assert {v.quantity: v.value for v in tilted.values}["inverse_mass_xz"] == 0.5
    assert all("invented" in v.source and not v.checked for v in tilted.values)
    even = Material.given("even", electron_mass=0.05)
    assert even.electron_mass == 0.05
    assert even.conduction_edge_eV is None
    assert even.values[0].source == "given in the wire file"
    oxide = Material.given("oxide", permittivity=3.9)
    assert oxide.inverse_mass == ()


INDEFINITE = [[1, 2, 0], [2, 1, 0], [0, 0, 1]]


@pytest.mark.parametrize(
    ("values", "field", "words"),
    [
        ({}, "electron_mass", "is missing"),
        ({"electron_mass": 0}, "electron_mass", "must be positive"),
        ({"electron_mass": -0.05}, "electron_mass", "must be positive"),
        ({"electron_mass": 1e-4}, "electron_mass", "between 0.001 m0 and 100 m0"),
        ({"electron_mass": 200.0}, "electron_mass", "between 0.001 m0 and 100 m0"),
        ({"electron_mass": math.nan}, "electron_mass", "finite"),
        ({"electron_mass": "heavy"}, "electron_mass", "must be a number"),
        ({"electron_mass": True}, "electron_mass", "must be a number"),
        ({"electron_mass": 0.1, "inverse_mass": INDEFINITE}, "electron_mass", "one of the two"),
        ({"inverse_mass": INDEFINITE}, "inverse_mass", "positive definite"),
        ({"inverse_mass": [[1, 0.2, 0], [0.1, 1, 0], [0, 0, 1]]}, "inverse_mass", "entries 1,2 and 2,1 differ"),
        ({"inverse_mass": [[1, 0], [0, 1]]}, "inverse_mass", "3 x 3"),
        ({"inverse_mass": [[1, 0, 0], [0, 1, 0], 7]}, "inverse_mass", "3 x 3"),
        ({"inverse_mass": [[1, 0, 0], [0, math.inf, 0], [0, 0, 1]]}, r"inverse_mass\[2\]\[2\]", "finite"),
        ({"inverse_mass": [[1e300, 0, 0], [0, 1, 0], [0, 0, 1]]}, "inverse_mass", "below"),
        ({"inverse_mass": [[1, 0, 0], [0, 1, 0], [0, 0, 1e-5]]}, "inverse_mass", "between 0.001 m0 and 100 m0"),
        ({"electron_mass": 0.1, "permittivity": 0.5}, "permittivity", "between 1 and"),
        ({"electron_mass": 0.1, "conduction_edge_eV": 1e9}, "conduction_edge", "between"),
        ({"electron_mass": 0.1, "valley_degeneracy": 2.5}, "valley_degeneracy", "whole number"),
        ({"electron_mass": 0.1, "valley_degeneracy": 0}, "valley_degeneracy", "whole number"),
        ({"electron_mass": 0.1, "source": 7}, "source", "text"),
    ],
)
def test_refused_values(values: dict[str, object], field: str, words: str) -> None:
    build: Callable[..., Material] = Material.given
    with pytest.raises(InputError, match=words) as caught:
        build("probe", **values)
    assert caught.match(f"^{field}: ")
