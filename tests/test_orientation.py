"""Which wires need their crystal's directions, which materials stand on one scale, and which valleys they share."""

from __future__ import annotations

from dataclasses import replace

import pytest

from wiresolve.describe.material import Material, Valley
from wiresolve.describe.materials import look_up
from wiresolve.describe.problem import Carriers, Orientation, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.errors import InputError

COLD = Carriers(temperature_K=(4.2,))
ALONG_110 = Orientation((1, 1, 0), (0, 0, 1))
ALONG_111 = Orientation((1, 1, 1), (1, -1, 0))
ALONG_C = Orientation((0, 0, 1), (1, 0, 0))


def wire(
    core: str,
    *layers: str | Layer,
    orientation: Orientation | None = None,
    materials: tuple[Material, ...] = (),
    **section: object,
) -> Problem:
    shells = tuple(layer if isinstance(layer, Layer) else Layer(3, layer) for layer in layers)
    drawn = Section(Circle(10), core, shells, **section)  # type: ignore[arg-type]
    return Problem("wire", drawn, COLD, materials=materials, orientation=orientation)


@pytest.mark.parametrize(
    ("core", "layers", "why"),
    [
        ("Si", (), "the Delta valleys of Si"),
        ("Ge", (), "the L valleys of Ge"),
        ("AlAs", (), "the X valleys of AlAs"),
        ("Al0.6Ga0.4As", (), "the X valleys of Al0.6Ga0.4As"),
        ("Si0.7Ge0.3", ("Si",), "the Delta valleys of Si"),
        ("GaN", (), "GaN is wurtzite"),
    ],
)
def test_an_orientation_is_asked_for(core: str, layers: tuple[str, ...], why: str) -> None:
    with pytest.raises(InputError, match=r"^orientation: is missing") as caught:
        wire(core, *layers)
    assert why in str(caught.value)
    assert "write [orientation]" in str(caught.value)
    along = ALONG_C if core == "GaN" else ALONG_110
    assert wire(core, *layers, orientation=along).orientation == along
    # Carriers that are kept out need none.
    assert wire("GaAs", Layer(2, core, carriers="excluded")).orientation is None


def test_no_orientation_is_asked_for_where_only_higher_valleys_have_a_direction() -> None:
    assert wire("GaAs").shared_valleys() == ("zone centre", "L", "X")
    # The lowest edge is the zone centre's in GaAs, though AlAs has X below its own zone centre.
    assert wire("GaAs", "AlAs").energy_zero()[0] == "conduction edge of GaAs (core)"
    with pytest.raises(InputError, match="X valleys of AlAs"):
        wire("Al0.9Ga0.1As", "AlAs")
    round_ = Valley("round", 0.0, 0.4, 0.4, (1, 1, 1), zone_boundary=True)
    assert wire("round", materials=(Material.given("round", valleys=[round_]),)).orientation is None


def test_the_energy_zero_names_a_higher_valley_where_it_is_the_lowest_shared() -> None:
    low = Valley("low", 0.0, 0.2, 0.2)
    high = Valley("high", 0.1, 0.3, 0.3)
    core = Material.given("core", valleys=[low, high], conduction_edge_eV=0.0)
    shell = Material.given("shell", valleys=[replace(high, height_eV=0.0)], conduction_edge_eV=0.5)
    problem = wire("core", "shell", materials=(core, shell))
    assert problem.shared_valleys() == ("high",)
    assert problem.energy_zero() == ("high edge of core (core)", pytest.approx(0.1))


def test_silicon_in_oxide() -> None:
    """The tunnelling mass of an insulator continues every valley; its edge is set by the electron affinities."""
    problem = wire("Si", "SiO2", orientation=ALONG_110, outside="vacuum")
    found = problem.resolved_materials()
    assert problem.shared_valleys() == ("Delta",)
    edges = {name: m.conduction_edge_eV for name, m in found.items()}
    assert edges == {"Si": -4.05, "SiO2": -0.95, "vacuum": 0.0}
    assert {m.edge_scale for m in found.values()} == {"vacuum level"}
    listed = {v.quantity: v for v in found["Si"].values}["conduction_edge"]
    assert (listed.value, listed.source) == (-4.05, "on the scale 'vacuum level'")


def test_two_semiconductors_in_an_oxide() -> None:
    """Their offset is that of their family, not of their affinities (0.33 eV); the oxide follows the lowest edge."""
    found = wire("GaAs", "Al0.3Ga0.7As", "Al2O3").resolved_materials()
    gaas, algaas, oxide = (m.conduction_edge_eV or 0.0 for m in found.values())
    assert algaas - gaas == pytest.approx(0.25914, abs=2e-4)
    assert oxide - gaas == pytest.approx(4.07 - 1.27, abs=1e-12)
    assert next(v.value for v in found["Al2O3"].values if v.quantity == "conduction_edge") == oxide
    assert {m.edge_scale for m in found.values()} == {"valence edge of InSb = 0"}


@pytest.mark.parametrize(
    ("core", "shell", "words"),
    [
        ("GaAs", "Si", "the edge of GaAs stands on the scale 'valence edge of InSb = 0' or 'vacuum level'"),
        ("InAs", "Ge", "no common offset scale"),
        ("GaAs", "GaN", "electron affinities do not give the step between two semiconductors"),
        ("AlSb", "SiO2", "no common offset scale"),  # the table has no affinity of AlSb
    ],
)
def test_no_common_scale_is_an_error(core: str, shell: str, words: str) -> None:
    with pytest.raises(InputError, match=r"^section: no common offset scale") as caught:
        wire(core, shell, orientation=ALONG_110)
    assert words in str(caught.value)
    assert "[materials.NAME]" in str(caught.value)
    # Kept out, it needs no scale.
    assert wire(core, Layer(2, shell, carriers="excluded"), orientation=ALONG_C).energy_zero()[1] is not None


def test_the_pair_without_a_scale_is_named_wherever_it_stands() -> None:
    with pytest.raises(InputError, match=r"the edge of GaAs .* that of Si on"):
        wire("SiO2", "GaAs", "Si", orientation=ALONG_110)


def test_an_alloy_of_silicon_and_germanium_has_a_scale() -> None:
    silicon, alloy, germanium = (
        wire("Si", "Si0.5Ge0.5", "Ge", orientation=ALONG_110).resolved_materials()[n]
        for n in ("Si", "Si0.5Ge0.5", "Ge")
    )
    assert {m.edge_scale for m in (silicon, alloy, germanium)} == {"average valence energy of the model solid"}
    # By hand: -7.03 + 0.044/3 + 1.17 and -6.35 + 0.296/3 + 0.742, at 0 K.
    assert look_up("Ge", 0).edges[0][1] - look_up("Si", 0).edges[0][1] == pytest.approx(0.336, abs=1e-9)
    assert wire("Si", "Ge", orientation=ALONG_110).shared_valleys() == ("Delta",)


def test_materials_without_a_common_valley() -> None:
    oxide = Material.given("oxide", electron_mass=0.5, conduction_edge_eV=3.0)
    silicon = Material.extending("channel", "Si", conduction_edge_eV=0.0)
    with pytest.raises(InputError, match="no valley in common: channel has Delta; oxide has zone centre") as caught:
        wire("channel", "oxide", materials=(silicon, oxide), orientation=ALONG_110)
    assert 'named "any"' in str(caught.value)
    any_ = Material.given("oxide", valleys=[Valley.isotropic(0.5, "any")], conduction_edge_eV=3.0)
    assert wire("channel", "oxide", materials=(silicon, any_), orientation=ALONG_110).shared_valleys() == ("Delta",)


def test_cubic_and_wurtzite_need_directions_of_their_own() -> None:
    cubic = Material.given(
        "cubic", valleys=[Valley("zone centre", 0.0, 0.1, 0.2, (1, 0, 0), True)], conduction_edge_eV=0.0
    )
    hexagonal = Material.given("hexagonal", electron_mass=0.1, conduction_edge_eV=1.0, crystal="wurtzite")
    with pytest.raises(InputError, match="hexagonal is wurtzite and cubic is cubic"):
        wire("cubic", "hexagonal", materials=(cubic, hexagonal), orientation=ALONG_C)
    # A cubic material whose common valleys have no direction may stand beside it.
    even = Material.given("even", electron_mass=0.2, conduction_edge_eV=0.0, crystal="zincblende")
    assert wire("even", "hexagonal", materials=(even, hexagonal), orientation=ALONG_C).orientation == ALONG_C


def test_directions_in_wurtzite() -> None:
    across = Orientation((1, 0, 0), (1, 2, 0))  # at right angles in the hexagonal lattice only
    assert wire("GaN", orientation=across).orientation == across
    with pytest.raises(InputError, match=r"^orientation.up: must be at right angles"):
        wire("GaAs", orientation=across)
    with pytest.raises(InputError, match=r"the nearest is up = \[1, 2, 0\]"):
        wire("GaN", orientation=Orientation((1, 0, 0), (0, 1, 0)))
    bare = Material.given("bare", electron_mass=0.1, crystal="wurtzite")
    slanted = Orientation((1, 0, 1), (1, 2, 0))
    with pytest.raises(InputError, match=r"^materials.bare.lattice_constant: is missing"):
        wire("bare", materials=(bare,), orientation=slanted)
    known = replace(bare, lattice_constant_nm=0.4, lattice_constant_c_nm=0.65)
    assert wire("bare", materials=(known,), orientation=slanted).orientation == slanted
    assert wire("bare", materials=(bare,), orientation=across).orientation == across


@pytest.mark.parametrize(
    ("core", "orientation", "warned"),
    [
        ("InAs", ALONG_111, True),
        ("InP", ALONG_111, True),
        ("GaAs", Orientation((-1, 1, 1), (0, 1, -1)), True),
        ("In0.53Ga0.47As", ALONG_111, True),
        ("Ga0.47In0.53As", ALONG_111, True),
        ("InSb", ALONG_111, False),  # stays zincblende
        ("GaSb", ALONG_111, False),
        ("Ge", ALONG_111, False),
        ("InAs", ALONG_110, False),
        ("InAs", None, True),
        ("InP", None, False),
        ("GaAs", None, False),
        ("In0.53Ga0.47As", None, False),
        ("InSb", None, False),
    ],
)
def test_crystal_phase(core: str, orientation: Orientation | None, warned: bool) -> None:
    notes = wire(core, orientation=orientation).resolved_materials()[core].notes
    assert ("crystal-phase" in {code for code, _, _ in notes}) == warned
    if core == "InAs" and warned:
        assert "0.46 eV" in notes[0][1]
        assert ("if it was grown along [111]" in notes[0][1]) == (orientation is None)


def test_crystal_phase_is_one_warning_for_a_wire_that_was_grown() -> None:
    def noted(problem: Problem) -> list[str]:
        found = problem.resolved_materials().values()
        return [text for m in found for code, text, _ in m.notes if code == "crystal-phase"]

    for orientation in (None, ALONG_111):
        (text,) = noted(wire("InAs", "InP", orientation=orientation))
        assert text.startswith("InAs and InP in the table are zincblende, but ")
    (text,) = noted(wire("GaAs", "Al0.3Ga0.7As", "GaAs", orientation=ALONG_111))
    assert text.startswith("GaAs and Al0.3Ga0.7As in the table are zincblende")
    # Without an orientation only those are told of of which it is known what differs.
    assert noted(wire("GaAs", "Al0.3Ga0.7As", "GaAs")) == []
    # A patch or a shape that is etched is no grown wire, and a user's own InAs may be what it wants.
    etched = Section(Rectangle(10, 10), "InAs")
    assert noted(Problem("wire", etched, COLD)) == []
    assert noted(wire("InAs", patches=(Patch(Rectangle(2, 2), "InAs"),))) == []
    own = Material.given("InAs", electron_mass=0.03)
    assert noted(wire("InAs", materials=(own,))) == []


def test_a_users_own_material_has_a_phase_of_its_own() -> None:
    own = Material.given("InAs", electron_mass=0.03, crystal="wurtzite")
    along = Orientation((0, 0, 1), (1, 0, 0))
    assert wire("InAs", materials=(own,), orientation=along).resolved_materials()["InAs"].notes == ()
