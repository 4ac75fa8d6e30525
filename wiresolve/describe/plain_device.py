"""Doping, gates, surfaces, surroundings and operation as plain nested data in the words of the wire file."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from wiresolve.describe.doping import FULL, Doping
from wiresolve.describe.gates import Gate, Slab, Surface, Surroundings, Touch
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.units import format_quantity


def of_doping(doping: Doping) -> dict[str, Any]:
    """The keys of a part's doping; none where there is no dopant."""
    found: dict[str, Any] = {}
    if not doping.any:
        return found
    for kind in ("donor", "acceptor"):
        if density := getattr(doping, f"{kind}s_per_nm3"):
            found[f"{kind}s"] = format_quantity(density, "density")
    if doping.ionisation != FULL:
        found["ionisation"] = doping.ionisation
    for kind in ("donor", "acceptor"):
        if (depth := getattr(doping, f"{kind}_depth_eV")) is not None:
            found[f"{kind}_depth"] = format_quantity(depth, "energy")
    return found


def of_device(
    gates: Sequence[Gate],
    surfaces: Sequence[Surface],
    surroundings: Surroundings | None,
    voltages: Voltages | None,
    transport: Transport | None,
) -> dict[str, Any]:
    """The tables of a device; none of those that are not given."""
    found: dict[str, Any] = {}
    if gates:
        found["gates"] = [_of_gate(gate) for gate in gates]
    if surfaces:
        found["surfaces"] = [_of_surface(surface) for surface in surfaces]
    if surroundings is not None:
        found["surroundings"] = _of_surroundings(surroundings)
    if voltages is not None:
        found["voltages"] = _of_voltages(voltages)
    if transport is not None:
        found["transport"] = _of_transport(transport)
    return found


def _of_touches(touches: Sequence[Touch]) -> list[Any]:
    return [
        touch
        if isinstance(touch, str)
        else {"from": format_quantity(touch.from_deg, "angle"), "to": format_quantity(touch.to_deg, "angle")}
        for touch in touches
    ]


def _of_gate(gate: Gate) -> dict[str, Any]:
    found: dict[str, Any] = {"name": gate.name}
    if gate.touches:
        found["touches"] = _of_touches(gate.touches)
    if (between := gate.insulator) is not None:
        thickness = format_quantity(between.thickness_nm, "length")
        found["insulator"] = {"material": between.material, "thickness": thickness, "carriers": between.carriers}
    if gate.lineup_voltage_V is not None:
        found["lineup_voltage"] = format_quantity(gate.lineup_voltage_V, "voltage")
    if gate.work_function_eV is not None:
        found["work_function"] = format_quantity(gate.work_function_eV, "energy")
    return found | {"voltage": format_quantity(gate.voltage_V, "voltage")}


def _of_surface(surface: Surface) -> dict[str, Any]:
    found: dict[str, Any] = {"touches": _of_touches(surface.touches)}
    if surface.pinned_at_eV is not None:
        found["pinned_at"] = format_quantity(surface.pinned_at_eV, "energy")
    if surface.charge_per_nm2 is not None:
        found["charge_density"] = format_quantity(surface.charge_per_nm2, "sheet density")
    return found


def _of_surroundings(around: Surroundings) -> dict[str, Any]:
    found: dict[str, Any] = {}
    for side, slabs, gate in (("below", around.below, around.below_gate), ("above", around.above, around.above_gate)):
        if slabs:
            found[side] = [*(_of_slab(slab) for slab in slabs), *([] if gate is None else [gate])]
    return found | {"beside": around.beside}


def _of_slab(slab: Slab) -> dict[str, Any]:
    return {"material": slab.material, "thickness": format_quantity(slab.thickness_nm, "length")}


def _of_voltages(sweep: Voltages) -> dict[str, Any]:
    found: dict[str, Any] = {"gate": sweep.gate, "from": format_quantity(sweep.from_V, "voltage")}
    found |= {"to": format_quantity(sweep.to_V, "voltage"), "count": sweep.count}
    if sweep.drain_V:
        found["drain"] = [format_quantity(v, "voltage") for v in sweep.drain_V]
    return found


def _of_transport(transport: Transport) -> dict[str, Any]:
    found: dict[str, Any] = {}
    if transport.length_nm is not None:
        found["length"] = format_quantity(transport.length_nm, "length")
    if transport.mean_free_path_nm is not None:
        found["mean_free_path"] = format_quantity(transport.mean_free_path_nm, "length")
    if transport.transmission is not None:
        found["transmission"] = list(transport.transmission)
    if transport.saddle_curvature_eV is not None:
        found["saddle"] = format_quantity(transport.saddle_curvature_eV, "energy")
    return found | {"contact_resistance": format_quantity(transport.contact_resistance_ohm, "resistance")}
