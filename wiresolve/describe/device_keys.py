"""The keys of gates, charge and operation in a wire file, with their meaning."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from wiresolve.describe import operation, section
from wiresolve.describe.doping import FULL, PARTIAL
from wiresolve.describe.key_kinds import Choice, Either, Inner, Key, Number, Quantity, Row, Text, Whole

_DENSITY = Quantity("density", zero=True)
DOPING = (
    Key("donors", _DENSITY, "density of donors: on `[section]` (the core), a layer, a patch or a group of a mesh"),
    Key("acceptors", _DENSITY, "density of acceptors, likewise"),
    Key(
        "ionisation",
        Choice((FULL, PARTIAL)),
        "`full` (default), or `partial`: the charged part follows the Fermi level",
    ),
    Key(
        "donor_depth",
        Quantity("energy", "6 meV", zero=True),
        "for `partial`: how far the donors' level lies below the conduction edge",
    ),
    Key(
        "acceptor_depth",
        Quantity("energy", "30 meV", zero=True),
        "for `partial`: how far the acceptors' level lies above the valence edge, which needs a `gap`",
    ),
)
_EDGE = Text("rim", 80, ("rim", "top", "bottom", "left", "right"))
_ARC = Inner("arc", sample='{from = "30 deg", to = "150 deg"}')
_TOUCHES = Either((_EDGE, Row(Either((_EDGE, _ARC)), 1)))
ARC = (
    Key(
        "from",
        Quantity("angle", "30 deg", signed=True),
        "where the part of a round rim begins, counter-clockwise from +x",
    ),
    Key("to", Quantity("angle", "150 deg", signed=True), "where the part of a round rim ends"),
)
INSULATOR = (
    Key("material", Text("HfO2", 60), "of the insulator"),
    Key("thickness", Quantity("length", "3 nm"), "of the insulator"),
    Key(
        "carriers",
        Choice((section.EXCLUDED, section.ADMITTED)),
        "`excluded` (default); `admitted` lets states reach into it, and it needs masses then",
    ),
)
GATE = (
    Key("name", Text("wrap", 60), "any name; several gates are several `[[gates]]`"),
    Key(
        "touches",
        _TOUCHES,
        "the edge on which the gate lies, or a list of edges (see the names of sides above); part of a round rim "
        'is `{from = "30 deg", to = "150 deg"}` in such a list, counter-clockwise from +x. Left out where the gate '
        "ends a stack of `[surroundings]`",
    ),
    Key(
        "insulator",
        Inner("insulator", sample='{material = "HfO2", thickness = "3 nm"}'),
        '`{material, thickness}`, drawn between section and gate; `carriers = "admitted"` lets states reach into '
        "it, and it needs masses then",
    ),
    Key(
        "lineup_voltage",
        Quantity("voltage", "0 V", signed=True),
        "the voltage at which, with no charge anywhere, the wire's lowest band edge meets the source's Fermi "
        "level; or instead",
    ),
    Key(
        "work_function",
        Quantity("energy", "4.4 eV", zero=True),
        "of the metal, from which and the affinity at the lowest band edge that voltage follows",
    ),
    Key("voltage", Quantity("voltage", signed=True), "against the source; `0 V` if not given"),
)
SURFACE = (
    Key("touches", _TOUCHES, "as for gates, in `[[surfaces]]`; edges without gate and surface let no field through"),
    Key(
        "pinned_at", Quantity("energy", "-0.1 eV", signed=True), "the band edge there, from the Fermi level; or instead"
    ),
    Key("charge_density", Quantity("sheet density", signed=True), "of the surface, positive or negative"),
)
SLAB = (
    Key("material", Text("SiO2", 60), "of the layer"),
    Key("thickness", Quantity("length", "100 nm"), "of the layer"),
)
STACK_END = (Key("gate", Text("back", 60), "the name of the gate that ends the list"),)
_STACK = Row(
    Either((Inner("slab"), Text("back", 60), Inner("stack end"))),
    0,
    sample='[{material = "SiO2", thickness = "100 nm"}, "back"]',
)
SURROUNDINGS = (
    Key("below", _STACK, "flat layers from the section downwards; the name of a gate may end the list"),
    Key("above", _STACK, "flat layers from the section upwards; the name of a gate may end the list"),
    Key("beside", Text("air", 60), "the material of all other room"),
)
_DRAIN = Quantity("voltage", "0.05 V", zero=True)
VOLTAGES = (
    Key("gate", Text("wrap", 60), "the gate that is swept; may be left out where there is one gate"),
    Key("from", Quantity("voltage", "-0.5 V", signed=True), "the first voltage"),
    Key("to", Quantity("voltage", "1 V", signed=True), "the last voltage"),
    Key("count", Whole(21, 2, operation.MOST_POINTS), "at how many voltages (2 to 10,000), equally far apart"),
    Key(
        "drain",
        Either((_DRAIN, Row(_DRAIN, 0, operation.MOST_DRAINS, distinct=True))),
        "drain voltages, one or a list, for `transistor.csv`",
    ),
)
_SHARE = Number(1, 0, 1)
TRANSPORT = (
    Key(
        "length",
        Quantity("length", "100 nm"),
        "from source to drain: says how far the drain reaches into the channel, and needs one of the next two keys",
    ),
    Key(
        "mean_free_path",
        Quantity("length", "200 nm"),
        "of backscattering: an electron gets through with the probability path/(path + length), the `length` being "
        "given",
    ),
    Key(
        "transmission",
        Either((_SHARE, Row(_SHARE, 1, operation.MOST_TRANSMISSIONS))),
        "instead: a number from 0 to 1 (1: ballistic), or a list of them, one a subband by energy, the last for "
        "all higher ones",
    ),
    Key(
        "saddle",
        Quantity("energy", "2 meV"),
        "instead: ħω of a constriction whose barrier is an upside-down parabola along the wire (M. Büttiker, Phys. "
        "Rev. B 41, 7906 (1990))",
    ),
    Key(
        "contact_resistance",
        Quantity("resistance", zero=True),
        "of both contacts together, in series with the conductance",
    ),
)
TOP = (
    Key("gates", Inner("gate", many=True), "each a `[[gates]]`"),
    Key("surfaces", Inner("surface", many=True), "edges with a pinned potential or a charge, each a `[[surfaces]]`"),
    Key("surroundings", Inner("surroundings"), "what lies below, above and beside the section"),
    Key("voltages", Inner("voltages"), "the sweep of a gate, for `wiresolve gate-curve`"),
    Key("transport", Inner("transport"), "what an electron meets between source and drain"),
)
TABLES: Mapping[str, tuple[Key, ...]] = MappingProxyType(
    {
        "gate": GATE,
        "insulator": INSULATOR,
        "arc": ARC,
        "surface": SURFACE,
        "surroundings": SURROUNDINGS,
        "slab": SLAB,
        "stack end": STACK_END,
        "voltages": VOLTAGES,
        "transport": TRANSPORT,
    }
)
