"""Broken gates, surfaces, surroundings, sweeps, transport and doping: one line that names file and key, exit code 2."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from typing import Any

import pytest

from wiresolve.describe import wirefile
from wiresolve.describe.doping import Doping
from wiresolve.describe.gates import ArcPart, Gate, Insulator, Slab, Surface, Surroundings
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.describe.problem import Carriers, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle
from wiresolve.errors import InputError

GOOD = """
title = "good"
[section]
shape = "hexagon"
across_flats = "40 nm"
material = "InAs"
[[section.layers]]
thickness = "5 nm"
material = "InAs"
donors = "1e17 cm^-3"
[carriers]
temperature = "4.2 K"
[[gates]]
name = "finger"
touches = ["top"]
insulator = {material = "HfO2", thickness = "3 nm"}
lineup_voltage = "0 V"
[[gates]]
name = "back"
lineup_voltage = "0 V"
voltage = "0.5 V"
[[surfaces]]
touches = ["side 2", "side 3"]
charge_density = "1e11 cm^-2"
[surroundings]
below = [{material = "SiO2", thickness = "100 nm"}, "back"]
beside = "air"
[voltages]
gate = "back"
from = "0 V"
to = "1 V"
count = 11
drain = "1 mV"
[transport]
length = "100 nm"
mean_free_path = "200 nm"
[materials.oxide]
electron_mass = 1
source = "invented"
"""
SECOND = '[[gates]]\nname = "second"\ntouches = "{}"\nlineup_voltage = "0 V"\n[[surfaces]]'
PATCH = '[[section.patches]]\nshape = "circle"\ndiameter = "6 nm"\nmaterial = "InAs"\ncenter = ["{}", "{}"]\n[carriers]'
CIRCLE = ('shape = "hexagon"\nacross_flats = "40 nm"', 'shape = "circle"\ndiameter = "40 nm"')

# What is replaced by what, and what the message must hold.
CASES: dict[str, tuple[str, str, tuple[str, ...]]] = {
    "unknown edge": ('["top"]', '["tpo"]', ("gates[1].touches", "'tpo'", "'top'", "'side 1'", "'core rim'")),
    "unknown inner edge": ('["side 2", "side 3"]', '"layer 2 rim"', ("surfaces[1].touches", "'layer 1 rim'")),
    "unknown side of a layer": ('["side 2", "side 3"]', '"core side 7"', ("surfaces[1].touches", "no edge")),
    "unknown key": ("lineup_voltage", "lineup", ("gates[1].lineup", "'lineup_voltage'")),
    "gates in the section": ("[[gates]]", "[[section.gates]]", ("section.gates", "write [[gates]]")),
    "one table of gates": ("[[gates]]", "[gatesx]\n[[gates]]", ("gatesx", "'gates'")),
    "no name": ('name = "finger"\n', "", ("gates[1].name", "is missing")),
    "same name": ('name = "finger"', 'name = "back"', ("gates[2].name", "'back'")),
    "a reserved name": ('name = "finger"', 'name = "drain"', ("gates[1].name", "'drain'")),
    "no line-up": ('lineup_voltage = "0 V"', "", ("gates[1].lineup_voltage", "work_function")),
    "two line-ups": (
        'lineup_voltage = "0 V"',
        'lineup_voltage = "0 V"\nwork_function = "4.6 eV"',
        ("gates[1].work_function", "beside a lineup_voltage"),
    ),
    "a bare voltage": ('voltage = "0.5 V"', "voltage = 0.5", ("gates[2].voltage", 'voltage = "0.5 V"')),
    "a work function in V": ('lineup_voltage = "0 V"', 'work_function = "4.6 V"', ("gates[1].work_function", "energy")),
    "touches nothing": ('touches = ["top"]', "touches = []", ("gates[1].touches", "is empty")),
    "touches a number": ('touches = ["top"]', "touches = 3", ("gates[1].touches", "name of an edge")),
    "touches twice": ('["top"]', '["top", "top"]', ("gates[1].touches", "twice")),
    "gate that is nowhere": (', "back"]', "]", ("gates[2].touches", "'back'", "neither touches")),
    "gate in two places": (', "back"]', ', "finger"]', ("gates[1].touches", "ends a stack")),
    "unknown gate below": (', "back"]', ', "bck"]', ("surroundings.below", "'bck'", "'back'")),
    "gate before its end": (', "back"]', ', "back", "back"]', ("surroundings.below[2]", "ends the list")),
    "gate without a layer": (
        '{material = "SiO2", thickness = "100 nm"}, ',
        "",
        ("surroundings.below", "nothing between", 'touches = "bottom"'),
    ),
    "nothing beside": ('beside = "air"\n', "", ("surroundings.beside", "is missing", '"air"')),
    "void beside": ('beside = "air"', 'beside = "void"', ("surroundings.beside", '"air"')),
    "unknown material beside": ('beside = "air"', 'beside = "airr"', ("surroundings.beside", "'airr'", "'air'")),
    "unknown insulator": ('"HfO2"', '"HfO3"', ("gates[1].insulator.material", "'HfO3'", "'HfO2'")),
    "no permittivity": ('"HfO2"', '"oxide"', ("materials.oxide.permittivity", "is missing")),
    "no permittivity below": ('"SiO2"', '"oxide"', ("materials.oxide.permittivity", "is missing")),
    "no affinity": (
        'material = "InAs"\n[[section.layers]]\nthickness = "5 nm"\nmaterial = "InAs"',
        'material = "AlSb"\n[[section.layers]]\nthickness = "5 nm"\nmaterial = "AlSb"',
        ("materials.AlSb.electron_affinity", "is missing", "finger"),
    ),
    "thick insulator of a bay": ('thickness = "3 nm"', 'thickness = "0 nm"', ("gates[1].insulator.thickness",)),
    "gates on one edge": ("[[surfaces]]", SECOND.format("top"), ("gates[3].touches", "'finger'", "'second'", "touch")),
    "gate on the rim of others": ("[[surfaces]]", SECOND.format("rim"), ("gates[3].touches", "touch")),
    "gate inside": ("[[surfaces]]", SECOND.format("core rim"), ("gates[3].touches", "inside the section", "layer 1")),
    "gate inside a piece": (
        "[carriers]",
        PATCH.format("0 nm", "0 nm").replace('"6 nm"', '"60 nm"'),
        ("gates[1].touches", "inside the section, in patch 1"),
    ),
    "gate where a patch sticks out": (
        "[carriers]",
        PATCH.format("-25 nm", "3 nm"),
        ("gates[1].touches", "patch 1 sticks", "encloses"),
    ),
    "angles on a hexagon": ('["top"]', '{from = "0 deg", to = "90 deg"}', ("gates[1].touches", "circle", "hexagon")),
    "angles without an end": ('["top"]', '{from = "0 deg"}', ("gates[1].touches.to", "is missing")),
    "angles of nothing": ('["top"]', '{from = "0 deg", to = "360 deg"}', ("gates[1].touches.to", '"rim"')),
    "surface on nothing": ('touches = ["side 2", "side 3"]\n', "", ("surfaces[1].touches", "is missing")),
    "surface without a value": ('charge_density = "1e11 cm^-2"', "", ("surfaces[1].charge_density", "pinned_at")),
    "surface with two": (
        'charge_density = "1e11 cm^-2"',
        'charge_density = "1e11 cm^-2"\npinned_at = "0 eV"',
        ("surfaces[1].charge_density", "beside pinned_at"),
    ),
    "a volume density of a surface": ("1e11 cm^-2", "1e11 cm^-3", ("surfaces[1].charge_density", "density")),
    "pinned beside a gate": (
        'touches = ["side 2", "side 3"]\ncharge_density = "1e11 cm^-2"',
        'touches = "side 3"\npinned_at = "0 eV"\n[[gates]]\nname = "x"\ntouches = "side 2"\nlineup_voltage = "0 V"',
        ("surfaces[1].touches", "'x'", "touch"),
    ),
    "negative donors": ("1e17 cm^-3", "-1e17 cm^-3", ("section.layers[1].donors", "negative", "-1e17 cm^-3")),
    "more donors than atoms": ("1e17 cm^-3", "1e24 cm^-3", ("section.layers[1].donors", "atoms")),
    "donors without a unit": ('"1e17 cm^-3"', "1e17", ("section.layers[1].donors", "cm^-3")),
    "partial without a depth": (
        'donors = "1e17 cm^-3"',
        'donors = "1e17 cm^-3"\nionisation = "partial"',
        ("section.layers[1].donor_depth", "6 meV"),
    ),
    "depth of the ionised": (
        'donors = "1e17 cm^-3"',
        'donors = "1e17 cm^-3"\ndonor_depth = "6 meV"',
        ("section.layers[1].donor_depth", '"partial"'),
    ),
    "unknown ionisation": (
        'donors = "1e17 cm^-3"',
        'donors = "1e17 cm^-3"\nionisation = "half"',
        ("section.layers[1].ionisation", "'half'", '"partial"'),
    ),
    "ionisation of nothing": ('donors = "1e17 cm^-3"', 'ionisation = "full"', ("layers[1].ionisation", "donors")),
    "misplaced donors": ("[carriers]", '[carriers]\ndonors = "1e17 cm^-3"', ("carriers.donors", "[section]")),
    "doped void": (
        'material = "InAs"\n[[section.layers]]',
        'material = "void"\nacceptors = "1e17 cm^-3"\n[[section.layers]]',
        ("section.acceptors", "void"),
    ),
    "a Fermi level": (
        "[carriers]",
        '[carriers]\nfermi_level = "0.1 eV"',
        ("carriers.fermi_level", "zero of energy", "gate voltages"),
    ),
    "several temperatures": ('"4.2 K"', '["4.2 K", "77 K"]', ("carriers.temperature", "must be one")),
    "unknown interaction": (
        "[carriers]",
        '[carriers]\ninteraction = "local"',
        ("carriers.interaction", "'local density'"),
    ),
    "an outside material": (
        "[[section.layers]]",
        'outside = "GaAs"\n[[section.layers]]',
        ("section.outside", "as a layer"),
    ),
    "sweep of a stranger": ('gate = "back"', 'gate = "bakc"', ("voltages.gate", "'bakc'", "'back'")),
    "sweep of one of two": ('gate = "back"\n', "", ("voltages.gate", "is missing")),
    "sweep of no points": ("count = 11", "count = 0", ("voltages.count", "from 2 to 10000")),
    "sweep of one point": ("count = 11", "count = 1", ("voltages.count", "from 2 to 10000")),
    "sweep of a million points": ("count = 11", "count = 1000000", ("voltages.count", "from 2 to 10000")),
    "sweep of half a point": ("count = 11", "count = 1.5", ("voltages.count", "whole number")),
    "sweep without a count": ("count = 11\n", "", ("voltages.count", "is missing")),
    "sweep to its start": ('to = "1 V"', 'to = "0 V"', ("voltages.to", "begins")),
    "drain twice": ('"1 mV"', '["1 mV", "0.001 V"]', ("voltages.drain", "twice")),
    "drain in eV": ('"1 mV"', '["1 meV"]', ("voltages.drain[1]", "voltage")),
    "length alone": ('mean_free_path = "200 nm"\n', "", ("transport.mean_free_path", "length alone")),
    "mean free path alone": ('length = "100 nm"\n', "", ("transport.length", "is missing")),
    "transmission above one": (
        'length = "100 nm"\nmean_free_path = "200 nm"',
        "transmission = [1, 1.5]",
        ("transport.transmission", "between 0 and 1", "1.5"),
    ),
    "negative transmission": (
        'length = "100 nm"\nmean_free_path = "200 nm"',
        "transmission = -0.1",
        ("transport.transmission", "between 0 and 1"),
    ),
    "transmission said twice": (
        'mean_free_path = "200 nm"',
        'mean_free_path = "200 nm"\ntransmission = 0.5',
        ("transport.transmission", "beside mean_free_path"),
    ),
    "saddle and transmission": (
        'length = "100 nm"\nmean_free_path = "200 nm"',
        'transmission = 0.5\nsaddle = "1 meV"',
        ("transport.saddle", "beside transmission"),
    ),
    "negative contact": (
        "[transport]",
        '[transport]\ncontact_resistance = "-5 ohm"',
        ("transport.contact_resistance",),
    ),
    "contact without a unit": (
        "[transport]",
        "[transport]\ncontact_resistance = 500",
        ("transport.contact_resistance", "500 ohm"),
    ),
    "nothing about transport": ('length = "100 nm"\nmean_free_path = "200 nm"', "", ("transport", "is empty")),
}


def refusal(text: str) -> str:
    """The message with which a wire file is refused, after the checks that hold for every refusal."""
    tomllib.loads(text)
    with pytest.raises(InputError) as caught:
        wirefile.parse(text, name="wire.toml")
    assert caught.value.exit_code == 2
    message = str(caught.value)
    assert message.startswith("wire.toml: ")
    assert len(message) < 600
    assert message.isprintable()  # hence one line
    return message


def test_the_good_file_is_good() -> None:
    assert wirefile.parse(GOOD).charged


@pytest.mark.parametrize(("old", "new", "words"), CASES.values(), ids=CASES.keys())
def test_one_line_that_names_the_key(old: str, new: str, words: tuple[str, ...]) -> None:
    assert old in GOOD
    text = GOOD.replace(old, new, 1)
    if "AlSb" in new:
        text = text.replace('lineup_voltage = "0 V"', 'work_function = "4.6 eV"', 1)
        text += "[orientation]\naxis = [1, 1, 0]\nup = [0, 0, 1]\n"
    message = refusal(text)
    assert [word for word in words if word not in message] == [], message


def round_wire(*gates: str, section: str = "", surfaces: str = "") -> str:
    """A round wire's file with these gates, each given by its `touches` and what else its table holds."""
    text = f'[section]\nshape = "circle"\ndiameter = "20 nm"\nmaterial = "InAs"\n{section}'
    text += '\n[carriers]\ntemperature = "4.2 K"\n'
    for k, touches in enumerate(gates):
        text += f'[[gates]]\nname = "g{k}"\nlineup_voltage = "0 V"\ntouches = {touches}\n'
    return text + surfaces


COAT = 'insulator = {material = "HfO2", thickness = "3 nm"}'


@pytest.mark.parametrize(
    ("gates", "words"),
    [
        (('{from = "0 deg", to = "90 deg"}', '{from = "80 deg", to = "120 deg"}'), ("gates[2].touches", "meet")),
        (('{from = "0 deg", to = "90 deg"}', '{from = "90 deg", to = "120 deg"}'), ("gates[2].touches", "meet")),
        (('{from = "300 deg", to = "10 deg"}', '{from = "-5 deg", to = "20 deg"}'), ("gates[2].touches", "meet")),
        (('"rim"', '{from = "90 deg", to = "120 deg"}'), ("gates[2].touches", "both lie on the rim")),
        (('{from = "90 deg", to = "120 deg"}', '"rim"'), ("gates[2].touches", "both lie on the rim")),
        (('"rim"', '"rim"'), ("gates[2].touches", "both lie on 'rim'")),
        (('"top"',), ("gates[1].touches", "'top'", "'rim'")),
        (
            (f'{{from = "0 deg", to = "90 deg"}}\n{COAT}', '{from = "180 deg", to = "190 deg"}'),
            ("gates[2].insulator", "'g0'", "same round rim"),
        ),
        (('{from = "0 deg", to = "90 deg"}', '{from = "90.001 deg", to = "120 deg"}'), ("touches", "within 0.01 deg")),
        (("[3]",), ("gates[1].touches[1]", "name of an edge")),
        (('{from = "0 deg", end = "3 deg"}',), ("gates[1].touches.end", "from, to")),
        ((f'"core rim"\n{COAT}',), ("gates[1].insulator", "around the section only", "layer")),
    ],
)
def test_gates_on_a_round_rim(gates: tuple[str, ...], words: tuple[str, ...]) -> None:
    message = refusal(round_wire(*gates))
    assert [word for word in words if word not in message] == [], message


def test_what_an_isolated_section_may_hold() -> None:
    assert "must be neutral" in refusal(round_wire(section='acceptors = "1e17 cm^-3"'))
    surface = '[[surfaces]]\ntouches = "rim"\ncharge_density = "-1e11 cm^-2"\n'
    message = refusal(round_wire(surfaces=surface))
    assert "must be neutral" in message
    assert "e/nm" in message
    assert wirefile.parse(round_wire(surfaces=surface.replace("-1e11", "1e11"))).charged
    assert wirefile.parse(round_wire('"rim"', section='acceptors = "1e17 cm^-3"')).charged


def test_a_gate_on_a_void_is_refused() -> None:
    shell = '[[section.layers]]\nthickness = "3 nm"\nmaterial = "void"'
    assert "cut away by a void" in refusal(round_wire('"rim"', section=shell))


def test_a_sweep_needs_a_gate() -> None:
    sweep = '[voltages]\nfrom = "0 V"\nto = "1 V"\ncount = 3\n'
    assert refusal(round_wire() + sweep).startswith("wire.toml: voltages: sweeps a gate, and there is none")
    assert "voltages" in refusal(round_wire() + sweep + 'gate = "g"')


def test_a_thin_layer_below_a_round_wire() -> None:
    around = '[surroundings]\nbelow = [{material = "SiO2", thickness = "0.1 nm"}]\nbeside = "air"\n'
    assert "surroundings.below[1].thickness: is too thin" in refusal(round_wire('"rim"') + around)


WIRE = Section(Circle(20), "InAs")
COLD = Carriers(temperature_K=(4.2,))


@pytest.mark.parametrize(
    ("build", "field"),
    [
        (lambda: Gate("g", 3, lineup_voltage_V=0.0), "touches"),
        (lambda: Gate("g", ("rim",), lineup_voltage_V=float("nan")), "lineup_voltage"),
        (lambda: Gate("g", ("rim",), lineup_voltage_V=0.0, voltage_V=1e6), "voltage"),
        (lambda: Gate("g", (), lineup_voltage_V=0.0, insulator=Insulator("HfO2", 3.0)), "insulator"),
        (lambda: Gate("g", ("rim",), lineup_voltage_V=0.0, insulator="HfO2"), "insulator"),
        (lambda: Insulator("HfO2", -1.0), "thickness"),
        (lambda: Insulator("HfO2", 1.0, "maybe"), "carriers"),
        (lambda: Surface(()), "touches"),
        (lambda: Surface(("rim",), charge_per_nm2=1e3), "charge_density"),
        (lambda: ArcPart(0, 720), "to"),
        (lambda: Slab("void", 10), "material"),
        (lambda: Surroundings(("SiO2",), beside="air"), "below"),
        (lambda: Surroundings((Slab("SiO2", 1),), (Slab("SiO2", 1),), "air", "g", "g"), "above"),
        (lambda: Voltages("g", 0, True, 3), "to"),
        (lambda: Voltages("g", 0, 1, 3, tuple(range(101))), "drain"),
        (lambda: Transport(transmission=()), "transmission"),
        (lambda: Transport(0.0, 1.0), "length"),
        (lambda: Doping(acceptors_per_nm3=-1e-9), "acceptors"),
        (lambda: Section(Circle(20), "InAs", doping=1e-3), "doping"),
        (lambda: Layer(2, "void", doping=Doping(1e-4)), "donors"),
        (lambda: Problem("a", WIRE, COLD, gates=("wrap",)), "gates"),
        (lambda: Problem("a", WIRE, COLD, surroundings="air"), "surroundings"),
    ],
)
def test_the_classes_refuse_what_they_cannot_be(build: Callable[[], Any], field: str) -> None:
    with pytest.raises(InputError) as caught:
        build()
    assert caught.value.field == field
