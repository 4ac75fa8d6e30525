"""Gates, surfaces, surroundings, sweeps, transport and doping: read, written, summed up, and resolved."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from wiresolve.describe import wirefile
from wiresolve.describe.doping import Doping
from wiresolve.describe.gates import ArcPart, Gate, Insulator, Slab, Surface, Surroundings
from wiresolve.describe.material import Material
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.describe.problem import Carriers, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Hexagon, Rectangle
from wiresolve.describe.summary import describe
from wiresolve.errors import InputError
from wiresolve.units import UNITS, parse_quantity

COLD = Carriers(temperature_K=(4.2,))
WRAP = Gate("wrap", ("rim",), lineup_voltage_V=0.1, insulator=Insulator("HfO2", 3.0))
EVERYTHING = """
title = "a device"
[section]
shape = "hexagon"
across_flats = "60 nm"
material = "GaAs"
acceptors = "2e16 cm^-3"
[[section.layers]]
thickness = "10 nm"
material = "Al0.3Ga0.7As"
donors = "1e18 cm^-3"
ionisation = "partial"
donor_depth = "6 meV"
[[section.patches]]
shape = "circle"
diameter = "10 nm"
material = "GaAs"
donors = "0 cm^-3"
acceptors = "1e17 cm^-3"
ionisation = "partial"
acceptor_depth = "30 meV"
[carriers]
temperature = "4.2 K"
interaction = "local density"
[[gates]]
name = "finger"
touches = ["top", "side 3"]
insulator = {material = "HfO2", thickness = "3 nm"}
work_function = "4.6 eV"
voltage = "-0.25 V"
[[gates]]
name = "back"
lineup_voltage = "0.2 V"
[[surfaces]]
touches = "core rim"
charge_density = "-2e11 cm^-2"
[[surfaces]]
touches = ["side 1"]
charge_density = "1e12 cm^-2"
[surroundings]
below = [{material = "SiO2", thickness = "100 nm"}, {material = "Si", thickness = "20 um"}, {gate = "back"}]
above = [{material = "air", thickness = "50 nm"}]
beside = "air"
[voltages]
gate = "back"
from = "-500 mV"
to = "1 V"
count = 7
drain = ["1 mV", "0.5 V"]
[transport]
length = "0.1 um"
mean_free_path = "200 nm"
contact_resistance = "1.5 kohm"
"""


def test_everything_is_read() -> None:
    problem = wirefile.parse(EVERYTHING)
    finger, back = problem.gates
    assert finger.touches == ("top", "side 3")
    assert finger.insulator == Insulator("HfO2", 3.0, "excluded")
    assert (finger.work_function_eV, finger.lineup_voltage_V, finger.voltage_V) == (4.6, None, -0.25)
    assert (back.touches, back.lineup_voltage_V, back.voltage_V, back.insulator) == ((), 0.2, 0.0, None)
    assert [s.charge_per_nm2 for s in problem.surfaces] == pytest.approx([-2e-3, 1e-2], rel=1e-15)
    assert problem.surroundings == Surroundings(
        (Slab("SiO2", 100.0), Slab("Si", 2e4)), (Slab("air", 50.0),), "air", "back", None
    )
    assert problem.voltages == Voltages("back", -0.5, 1.0, 7, (1e-3, 0.5))
    assert problem.transport == Transport(100.0, 200.0, contact_resistance_ohm=1500.0)
    assert problem.carriers.interaction == "local density"
    section = problem.section
    assert section.doping_of("core") == Doping(acceptors_per_nm3=2e-5)
    assert section.doping_of("layer 1") == Doping(1e-3, ionisation="partial", donor_depth_eV=6e-3)
    assert section.doping_of("patch 1").net_per_nm3 == pytest.approx(-1e-4, rel=1e-15)
    assert section.doping_of("insulator of finger") == section.doping_of("layer 2") == Doping()
    assert problem.charged


def test_what_is_written_is_read_back() -> None:
    problem = wirefile.parse(EVERYTHING)
    again = wirefile.parse(wirefile.dump(problem))
    assert again.digest == problem.digest
    assert (again.gates, again.surfaces, again.surroundings) == (problem.gates, problem.surfaces, problem.surroundings)
    assert (again.voltages, again.transport) == (problem.voltages, problem.transport)
    assert [again.section.doping_of(name) for name in ("core", "layer 1", "patch 1")] == [
        problem.section.doping_of(name) for name in ("core", "layer 1", "patch 1")
    ]


@pytest.mark.parametrize(
    "transport",
    [
        Transport(transmission=(0.3,)),
        Transport(transmission=(1, 0.5, 0)),
        Transport(saddle_curvature_eV=2e-3),
        Transport(contact_resistance_ohm=500),
        Transport(100, 50),
    ],
)
def test_every_kind_of_transport_is_written(transport: Transport) -> None:
    problem = Problem("a", Section(Circle(20), "InAs"), COLD, gates=(WRAP,), transport=transport)
    again = wirefile.parse(wirefile.dump(problem))
    assert again.transport == transport
    assert again.digest == problem.digest


def test_parts_of_a_rim_are_written() -> None:
    arc = ArcPart(-30, 200)
    pinned = Surface((arc,), pinned_at_eV=-0.1)
    problem = Problem("a", Section(Circle(20), "InAs"), COLD, surfaces=(pinned,))
    again = wirefile.parse(wirefile.dump(problem))
    assert again.surfaces == (pinned,)
    assert again.digest == problem.digest
    assert arc.sweep_deg == 230
    assert ArcPart(330, 30).sweep_deg == 60


def test_short_forms() -> None:
    """One gate needs no name in [voltages]; one edge no list; a drain may be one voltage; a gate a text in a list."""
    text = EVERYTHING.replace('{gate = "back"}', '"back"').replace('["side 1"]', '"side 1"')
    assert wirefile.parse(text).digest == wirefile.parse(EVERYTHING).digest
    text = """
    [section]
    shape = "circle"
    diameter = "20 nm"
    material = "InAs"
    [carriers]
    temperature = "4.2 K"
    [[gates]]
    name = "wrap"
    touches = "rim"
    lineup_voltage = "0 V"
    [voltages]
    from = "0 V"
    to = "0.3 V"
    count = 4
    drain = "1 mV"
    [transport]
    transmission = 0.5
    """
    problem = wirefile.parse(text)
    assert problem.voltages == Voltages("wrap", 0.0, 0.3, 4, (1e-3,))
    assert problem.transport is not None
    assert problem.transport.transmission == (0.5,)
    assert problem.gates[0].voltage_V == 0.0


def test_points_of_a_sweep_end_exactly_where_they_should() -> None:
    sweep = Voltages("wrap", -0.3, 0.7, 11)
    assert (sweep.points[0], sweep.points[-1], len(sweep.points)) == (-0.3, 0.7, 11)
    assert sweep.points == pytest.approx([-0.3 + 0.1 * k for k in range(11)], abs=1e-15)
    assert Voltages("wrap", 0.7, -0.3, 2).points == (0.7, -0.3)
    assert Voltages("wrap", -0.2, 0.6, 9).points[2] == 0.0


def test_the_line_up_follows_from_the_work_function() -> None:
    """W - affinity, with the affinity lessened where the edge is shifted up: the flat-band condition."""
    own = Material.given("soft", electron_mass=0.1, permittivity=10.0, electron_affinity_eV=4.2)
    metal = Gate("metal", ("rim",), work_function_eV=4.7)
    plain = Problem("a", Section(Circle(10), "soft"), COLD, materials=(own,), gates=(metal,))
    assert plain.lineup_V(metal) == pytest.approx(0.5, abs=1e-15)
    shifted = replace(plain, section=replace(plain.section, offset_eV=0.05))
    assert shifted.lineup_V(metal) == pytest.approx(0.55, abs=1e-15)
    assert plain.lineup_V(WRAP) == 0.1


def test_the_edge_of_the_zero_is_that_of_the_lowest_material() -> None:
    low = Material.given("low", electron_mass=0.1, permittivity=10.0, electron_affinity_eV=4.5, conduction_edge_eV=0.0)
    high = Material.given("high", electron_mass=0.1, permittivity=9.0, electron_affinity_eV=4.1, conduction_edge_eV=0.4)
    metal = Gate("metal", ("rim",), work_function_eV=4.7)
    section = Section(Circle(10), "high", layers=(Layer(3, "low"),))
    problem = Problem("a", section, COLD, materials=(low, high), gates=(metal,))
    assert problem.lineup_V(metal) == pytest.approx(0.2, abs=1e-15)
    text, value = problem.energy_zero()
    assert text == "Fermi level of the source; at line-up, the conduction edge of low (layer 1)"
    assert problem.edge_zero() == ("conduction edge of low (layer 1)", 0.0)
    assert value == 0.0


def test_other_voltages_leave_the_rest_as_it_is() -> None:
    problem = wirefile.parse(EVERYTHING)
    moved = problem.at_voltages({"back": 0.75})
    assert [gate.voltage_V for gate in moved.gates] == [-0.25, 0.75]
    assert moved.voltages == problem.voltages
    assert moved.digest != problem.digest
    assert moved.at_voltages({"back": 0.0}).digest == problem.digest
    with pytest.raises(InputError, match="no gate of this name"):
        problem.at_voltages({"bakc": 0.1})


def test_what_makes_a_problem_charged() -> None:
    plain = Problem("a", Section(Circle(20), "InAs"), COLD)
    assert not plain.charged
    assert not replace(plain, transport=Transport(transmission=(0.5,))).charged
    assert replace(plain, gates=(WRAP,)).charged
    assert replace(plain, surroundings=Surroundings(beside="air")).charged
    assert replace(plain, surfaces=(Surface(("rim",), pinned_at_eV=0.1),)).charged
    doped = Section(Circle(20), "InAs", patches=(Patch(Circle(5), "InAs", doping=Doping(1e-4)),))
    assert replace(plain, section=doped).charged
    assert replace(plain, section=replace(plain.section, doping=Doping())).digest == plain.digest


def test_each_part_of_a_device_is_in_the_digest() -> None:
    base = wirefile.parse(EVERYTHING)
    finger, back = base.gates
    assert base.surroundings is not None
    others = [
        replace(base, gates=(finger, replace(back, voltage_V=0.01))),
        replace(base, gates=(replace(finger, insulator=Insulator("HfO2", 3.5)), back)),
        replace(base, gates=(replace(finger, insulator=Insulator("SiO2", 3.0)), back)),
        replace(base, gates=(replace(finger, touches=("top",)), back)),
        replace(base, gates=(replace(finger, work_function_eV=4.61), back)),
        replace(base, surfaces=base.surfaces[:1]),
        replace(base, surfaces=(base.surfaces[0], Surface(("side 1",), pinned_at_eV=0.0))),
        replace(base, surroundings=replace(base.surroundings, beside="vacuum")),
        replace(base, voltages=None),
        replace(base, transport=None),
        replace(base, section=replace(base.section, doping=Doping(acceptors_per_nm3=2.1e-5))),
        replace(base, carriers=replace(base.carriers, interaction="hartree")),
    ]
    digests = [problem.digest for problem in (base, *others)]
    assert len(set(digests)) == len(digests)


def test_materials_outside_the_section_are_resolved() -> None:
    names = list(wirefile.parse(EVERYTHING).resolved_materials())
    assert set(names) == {"GaAs", "Al0.3Ga0.7As", "HfO2", "SiO2", "Si", "air"}
    air = wirefile.parse(EVERYTHING).resolved_materials()["air"]
    assert (air.permittivity, air.valleys) == (1.0, ())


def test_an_insulator_may_admit_carriers() -> None:
    own = Material.given("soft", electron_mass=0.1, permittivity=10.0, conduction_edge_eV=0.0)
    oxide = Material.given("oxide", electron_mass=0.4, permittivity=4.0, conduction_edge_eV=3.0)
    bare = Material.given("bare", permittivity=4.0)
    open_gate = replace(WRAP, insulator=Insulator("oxide", 2.0, "admitted"))
    problem = Problem("a", Section(Circle(10), "soft"), COLD, materials=(own, oxide), gates=(open_gate,))
    assert problem.edge_zero() == ("conduction edge of soft (core)", 0.0)
    with pytest.raises(InputError, match=r"gates\[1\].insulator: admits carriers, but its material has no mass"):
        replace(problem, materials=(own, bare), gates=(replace(WRAP, insulator=Insulator("bare", 2.0, "admitted")),))


def test_a_fixed_charge_that_electrons_balance_is_no_error() -> None:
    """Donors, or a positive surface; acceptors with at least as many donors beside them."""
    section = Section(Rectangle(10, 10), "InAs", layers=(Layer(5, "InAs", doping=Doping(acceptors_per_nm3=1e-4)),))
    core = Doping(donors_per_nm3=3.01e-4)  # the layer's area is 20 x 20 - 10 x 10 = 3 times the core's
    Problem("a", replace(section, doping=core), COLD)
    with pytest.raises(InputError, match="must be neutral"):
        Problem("a", replace(section, doping=Doping(donors_per_nm3=2.99e-4)), COLD)
    # 0.01 e/nm^2 on a rim of 80 nm is 0.8 e/nm, more than the layer's 0.03 e/nm.
    Problem("a", section, COLD, surfaces=(Surface(("rim",), charge_per_nm2=0.01),))
    Problem("a", section, COLD, gates=(WRAP,))
    Problem("a", section, COLD, surfaces=(Surface(("top",), pinned_at_eV=0.2),))


def test_areas_that_patches_leave() -> None:
    """A patch over core and layer takes from both: 4 x 4 nm, half of it on each side of the core's edge at x = 5."""
    layer, patch = Layer(5, "InAs", doping=Doping(acceptors_per_nm3=1e-3)), Patch(Rectangle(4, 4), "InAs", (5.0, 0.0))
    section = Section(Rectangle(10, 10), "InAs", layers=(layer,), patches=(patch,))
    need = 1e-3 * (300 - 8) / (100 - 8)
    Problem("a", replace(section, doping=Doping(need * 1.0001)), COLD)
    with pytest.raises(InputError, match="must be neutral"):
        Problem("a", replace(section, doping=Doping(need * 0.9999)), COLD)


def test_the_summary_names_everything_with_its_unit() -> None:
    rows = dict(describe(wirefile.parse(EVERYTHING)))
    assert "acceptors 2e+16 cm^-3" in rows["section.core"]
    assert "donors 1e+18 cm^-3 ionised in part from 6 meV" in rows["section.layers[1]"]
    for word in ("'finger'", "'top' and 'side 3'", "3 nm of HfO2", "4.6 eV", "-0.25 V", "nm long"):
        assert word in rows["gates[1]"]
    assert "at the end of what lies below" in rows["gates[2]"]
    assert "nm long" not in rows["gates[2]"]
    assert rows["gates[2]"].endswith("outside of its sweep")
    assert "if all dopants are charged" in rows["fixed_charge"]
    assert "-2e+11 cm^-2" in rows["surfaces[1]"]
    assert rows["surroundings.below"] == "100 nm of SiO2, then 20000 nm of Si, then gate 'back'"
    assert rows["voltages"] == "gate 'back' from -0.5 V to 1 V in 7 points, 0.25 V apart"
    assert rows["voltages.drain"] == "0.001 V, 0.5 V"
    assert rows["transport.mean_free_path"] == "200 nm"
    assert rows["transport.contact_resistance"] == "1500 ohm"
    assert rows["carriers.interaction"] == "local density"
    assert rows["energy_zero"].startswith("Fermi level of the source")
    round_wire = Problem(
        "a",
        Section(Circle(60), "InAs"),
        COLD,
        gates=(Gate("back", lineup_voltage_V=0.0),),
        surroundings=Surroundings((Slab("SiO2", 100),), beside="air", below_gate="back"),
    )
    assert "sunk 0.3 nm" in dict(describe(round_wire))["surroundings.below"]
    hexagon = replace(round_wire, section=Section(Hexagon(60), "InAs"))
    assert "sunk" not in dict(describe(hexagon))["surroundings.below"]


def test_the_summary_adds_up_the_fixed_charge() -> None:
    """A ring from 10 to 20 nm around: pi (20^2 - 10^2) nm^2 of 1e-3 donors a nm^3, and 2 pi 20 nm of -1e-3 e/nm^2."""
    shell = Layer(10, "GaAs", doping=Doping(1e-3))
    rim = Surface(("rim",), charge_per_nm2=-1e-3)
    charged = Problem("a", Section(Circle(20), "GaAs", (shell,)), COLD, surfaces=(rim,))
    text = dict(describe(charged))["fixed_charge"]
    assert float(text.split()[0]) == pytest.approx(math.pi * 0.3 - math.pi * 0.04, rel=1e-5)
    assert "carriers balance it" in text
    gated = replace(charged, surfaces=(), gates=(Gate("wrap", ("rim",), lineup_voltage_V=0.0),))
    text = dict(describe(gated))["fixed_charge"]
    assert float(text.split()[0]) == pytest.approx(math.pi * 0.3, rel=1e-5)
    assert "balance" not in text
    plain = replace(gated, section=Section(Circle(20), "GaAs"))
    assert "fixed_charge" not in dict(describe(plain))


@pytest.mark.parametrize("text", ["1e18 cm^-3", "1e18 1/cm^3", "1e18 cm-3", "1e18 /cm3", "1e18/cm3"])
def test_densities_as_they_are_typed(text: str) -> None:
    assert parse_quantity(text, "density", "donors") == 1e-3


def test_sheet_densities_as_they_are_typed() -> None:
    assert parse_quantity("1e12 cm-2", "sheet density", "s") == parse_quantity("1e12/cm2", "sheet density", "s") == 1e-2


def test_resistances_have_units() -> None:
    assert parse_quantity("1.5 kohm", "resistance", "r") == 1500.0
    assert next(iter(UNITS["resistance"])) == "ohm"
    with pytest.raises(InputError, match="500 ohm"):
        parse_quantity("500", "resistance", "r")
