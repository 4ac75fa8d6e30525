"""Tables of a wire file that describe doping, gates, surfaces, surroundings, a sweep and transport."""

from __future__ import annotations

from typing import Any

from wiresolve.describe import checks
from wiresolve.describe.doping import FULL, UNDOPED, Doping
from wiresolve.describe.gates import ArcPart, Gate, Insulator, Slab, Surface, Surroundings, Touch
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.describe.tables import Table, under
from wiresolve.errors import InputError
from wiresolve.units import parse_quantity

DOPING_KEYS = ("donors", "acceptors", "ionisation", "donor_depth", "acceptor_depth")
DEVICE_KEYS = ("gates", "surfaces", "surroundings", "voltages", "transport")
GATE_KEYS = ("name", "touches", "insulator", "lineup_voltage", "work_function", "voltage")
SURFACE_KEYS = ("touches", "pinned_at", "charge_density")
SURROUNDINGS_KEYS = ("below", "above", "beside")
VOLTAGES_KEYS = ("gate", "from", "to", "count", "drain")
TRANSPORT_KEYS = ("length", "mean_free_path", "transmission", "saddle", "contact_resistance")
INSULATOR_KEYS, SLAB_KEYS = ("material", "thickness", "carriers"), ("material", "thickness")
ARC_KEYS, STACK_END_KEYS = ("from", "to"), ("gate",)
_TOUCHES = 'write e.g. touches = "rim", or a list of edges'


def doping(table: Table) -> Doping:
    """The dopants that the keys of a part give."""
    donors, acceptors = (table.optional_quantity(key, "density") for key in ("donors", "acceptors"))
    depths = (table.optional_quantity(key, "energy") for key in ("donor_depth", "acceptor_depth"))
    ionisation = table.data.get("ionisation", FULL)
    if not any(key in table for key in DOPING_KEYS):
        return UNDOPED
    if donors is None and acceptors is None:
        given = next(key for key in DOPING_KEYS if key in table)
        raise InputError(table.at(given), "is given without donors or acceptors", remedy='write donors = "1e18 cm^-3"')
    return under(table.path, lambda: Doping(donors or 0.0, acceptors or 0.0, ionisation, *depths))


def device(top: Table) -> dict[str, Any]:
    """The fields of a problem that gates, surfaces, surroundings, a sweep and transport fill."""
    found: dict[str, Any] = {}
    if "gates" in top:
        found["gates"] = tuple(_gate(entry) for entry in top.tables("gates"))
    if "surfaces" in top:
        found["surfaces"] = tuple(_surface(entry) for entry in top.tables("surfaces"))
    if "surroundings" in top:
        found["surroundings"] = _surroundings(top.table("surroundings"))
    if "voltages" in top:
        names = [gate.name for gate in found.get("gates", ())]
        found["voltages"] = _voltages(top.table("voltages"), names)
    if "transport" in top:
        found["transport"] = _transport(top.table("transport"))
    return found


def _touches(table: Table) -> tuple[Touch, ...]:
    if "touches" not in table:
        return ()
    where, given = table.at("touches"), table.data["touches"]
    rows = given if isinstance(given, list) else [given]
    if not rows:
        raise InputError(where, "is empty", remedy=_TOUCHES)
    found: list[Touch] = []
    for k, entry in enumerate(rows, 1):
        path = f"{where}[{k}]" if isinstance(given, list) else where
        if isinstance(entry, dict):
            arc = Table(path, entry)
            arc.only(ARC_KEYS)
            ends = [arc.quantity(key, "angle", sample) for key, sample in (("from", '"30 deg"'), ("to", '"150 deg"'))]
            found.append(under(path, lambda ends=ends: ArcPart(*ends)))  # type: ignore[misc]
        elif isinstance(entry, str):
            found.append(checks.text(path, entry, 80))
        else:
            raise InputError(path, "must be the name of an edge", entry, _TOUCHES)
    return tuple(found)


def _gate(table: Table) -> Gate:
    table.only(GATE_KEYS)
    name, touches = table.text("name", '"wrap"', 60), _touches(table)
    insulator = None
    if "insulator" in table:
        part = table.table("insulator")
        part.only(INSULATOR_KEYS)
        material, thickness = part.text("material", '"HfO2"'), part.quantity("thickness", "length", '"3 nm"')
        options = {"carriers": part.data["carriers"]} if "carriers" in part else {}
        insulator = under(part.path, lambda: Insulator(material, thickness, **options))
    values: dict[str, Any] = {
        "voltage_V": table.optional_quantity("voltage", "voltage") or 0.0,
        "lineup_voltage_V": table.optional_quantity("lineup_voltage", "voltage"),
        "work_function_eV": table.optional_quantity("work_function", "energy"),
    }
    return under(table.path, lambda: Gate(name, touches, insulator=insulator, **values))


def _surface(table: Table) -> Surface:
    table.only(SURFACE_KEYS)
    touches = _touches(table)
    pinned = table.optional_quantity("pinned_at", "energy")
    charge = table.optional_quantity("charge_density", "sheet density")
    return under(table.path, lambda: Surface(touches, pinned, charge))


def _surroundings(table: Table) -> Surroundings:
    table.only(SURROUNDINGS_KEYS)
    values: dict[str, Any] = {}
    for side in ("below", "above"):
        slabs, gate = _stack(table, side)
        values |= {side: slabs, f"{side}_gate": gate}
    values["beside"] = table.text("beside", '"air"') if "beside" in table else None
    return under(table.path, lambda: Surroundings(**values))


def _stack(table: Table, side: str) -> tuple[tuple[Slab, ...], str | None]:
    """The layers below or above, and the gate in which they end."""
    given, where = table.data.get(side, []), table.at(side)
    if not isinstance(given, list):
        remedy = f'write {side} = [{{material = "SiO2", thickness = "100 nm"}}, "back"]'
        raise InputError(where, "must be a list of layers, from the section outwards", given, remedy)
    slabs: list[Slab] = []
    for k, entry in enumerate(given, 1):
        path = f"{where}[{k}]"
        if isinstance(entry, dict) and "gate" not in entry:
            part = Table(path, entry)
            part.only(SLAB_KEYS)
            material, thickness = part.text("material", '"SiO2"'), part.quantity("thickness", "length", '"100 nm"')
            slabs.append(under(path, lambda m=material, t=thickness: Slab(m, t)))  # type: ignore[misc]
            continue
        if isinstance(entry, dict):
            part = Table(path, entry)
            part.only(STACK_END_KEYS)
            entry = part.text("gate", '"back"')
        elif not isinstance(entry, str):
            raise InputError(path, "must be a layer {material, thickness} or the name of a gate", entry)
        name = checks.text(path, entry, 60)
        if k < len(given):
            raise InputError(path, "a gate ends the list: nothing behind it matters", name, "put it last")
        return tuple(slabs), name
    return tuple(slabs), None


def _voltages(table: Table, gates: list[str]) -> Voltages:
    table.only(VOLTAGES_KEYS)
    if "gate" in table or len(gates) > 1:
        gate = table.text("gate", f'"{gates[0]}"' if gates else '"wrap"')
    elif gates:
        gate = gates[0]
    else:
        raise InputError(table.path, "sweeps a gate, and there is none", remedy="describe it in [[gates]]")
    begin, end = table.quantity("from", "voltage", '"-0.5 V"'), table.quantity("to", "voltage", '"1 V"')
    count = table.required("count", "50")
    given = table.data.get("drain", [])
    rows, where = given if isinstance(given, list) else [given], table.at("drain")
    drains = tuple(
        parse_quantity(v, "voltage", f"{where}[{k}]" if isinstance(given, list) else where)
        for k, v in enumerate(rows, 1)
    )
    return under(table.path, lambda: Voltages(gate, begin, end, count, drains))


def _transport(table: Table) -> Transport:
    table.only(TRANSPORT_KEYS)
    if not table.data:
        raise InputError(table.path, "is empty", remedy='write e.g. contact_resistance = "500 ohm", or take it out')
    values: dict[str, Any] = {
        "length_nm": table.optional_quantity("length", "length"),
        "mean_free_path_nm": table.optional_quantity("mean_free_path", "length"),
        "saddle_curvature_eV": table.optional_quantity("saddle", "energy"),
        "contact_resistance_ohm": table.optional_quantity("contact_resistance", "resistance") or 0.0,
    }
    if "transmission" in table:
        given = table.data["transmission"]
        values["transmission"] = tuple(given) if isinstance(given, list) else (given,)
    return under(table.path, lambda: Transport(**values))
