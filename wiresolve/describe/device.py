"""What gates, surfaces, surroundings and a sweep need of each other, of the carriers and of the section."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, TypeVar

from wiresolve.describe import checks, drawing
from wiresolve.describe.gates import MOST_GATES, MOST_SURFACES, Gate, Surface, Surroundings
from wiresolve.describe.material import Material
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.describe.section import Section
from wiresolve.describe.setting import Setting
from wiresolve.errors import InputError

_Part = TypeVar("_Part")
_BALANCED = 1e-9


def listed(field: str, given: Any, kind: type[_Part], most: int) -> tuple[_Part, ...]:
    """`given` as a tuple of one kind of part; InputError otherwise."""
    if not isinstance(given, Sequence) or not all(isinstance(part, kind) for part in given):
        raise InputError(field, f"must be a list of {kind.__name__}", given)
    if len(given) > most:
        raise InputError(field, f"can be at most {most}", f"{len(given)} of them")
    return tuple(given)


def gates_and_surfaces(gates: Any, surfaces: Any) -> tuple[tuple[Gate, ...], tuple[Surface, ...]]:
    """Both as tuples; InputError for two gates of one name."""
    found = listed("gates", gates, Gate, MOST_GATES)
    for k, gate in enumerate(found, 1):
        if gate.name in [other.name for other in found[: k - 1]]:
            raise InputError(f"gates[{k}].name", "is that of another gate", gate.name, "give each a name of its own")
    return found, listed("surfaces", surfaces, Surface, MOST_SURFACES)


def check_names(
    gates: Sequence[Gate], surroundings: Surroundings | None, voltages: Voltages | None, transport: Transport | None
) -> None:
    """InputError for names of gates that are none, and for gates that are nowhere or in two places."""
    for field, given, kind in (
        ("surroundings", surroundings, Surroundings),
        ("voltages", voltages, Voltages),
        ("transport", transport, Transport),
    ):
        if given is not None and not isinstance(given, kind):
            raise InputError(field, f"must be a {kind.__name__}", given)
    names = [gate.name for gate in gates]
    ends = () if surroundings is None else surroundings.gate_names
    if surroundings is not None:
        for side in ("below", "above"):
            name = getattr(surroundings, f"{side}_gate")
            if name is not None and name not in names:
                raise InputError(f"surroundings.{side}", "there is no gate of this name", name, _gates(name, names))
    for k, gate in enumerate(gates, 1):
        if gate.touches and gate.name in ends:
            rule = f"is given, but gate '{gate.name}' ends a stack of the surroundings"
            raise InputError(f"gates[{k}].touches", rule, remedy="take it out, or name another gate there")
        if not gate.touches and gate.name not in ends:
            rule = f"is missing: gate '{gate.name}' neither touches the section nor ends a stack of the surroundings"
            remedy = f'write e.g. touches = "rim", or below = [..., "{gate.name}"] in [surroundings]'
            raise InputError(f"gates[{k}].touches", rule, remedy=remedy)
    if voltages is not None and voltages.gate not in names:
        if not names:
            rule = "sweeps a gate, and there is none"
            raise InputError("voltages", rule, remedy="describe it in [[gates]], or take [voltages] out")
        rule = "there is no gate of this name"
        raise InputError("voltages.gate", rule, voltages.gate, _gates(voltages.gate, names))


def _gates(given: str, names: Sequence[str]) -> str:
    if not names:
        return "describe it in [[gates]]"
    return checks.nearest(given, names) or "its gates are " + ", ".join(f"'{name}'" for name in names)


def around(gates: Sequence[Gate], surroundings: Surroundings | None) -> dict[str, str]:
    """Materials outside the section, each with the key that names it."""
    found: dict[str, str] = {}
    for k, gate in enumerate(gates, 1):
        if gate.insulator is not None:
            found.setdefault(gate.insulator.material, f"gates[{k}].insulator.material")
    if surroundings is not None:
        for side, slabs in (("below", surroundings.below), ("above", surroundings.above)):
            for k, slab in enumerate(slabs, 1):
                found.setdefault(slab.material, f"surroundings.{side}[{k}].material")
        assert surroundings.beside is not None
        found.setdefault(surroundings.beside, "surroundings.beside")
    return found


def check_states(section: Section, fermi_level_eV: float | None, temperatures_K: Sequence[float]) -> None:
    """InputError for what a problem whose charge moves its states cannot have."""
    if fermi_level_eV is not None:
        rule = "is the zero of energy where there are gates or charge"
        raise InputError("carriers.fermi_level", rule, f"{fermi_level_eV:g} eV", "take it out, and give gate voltages")
    if len(temperatures_K) > 1:
        rule = "must be one where there are gates or charge: the states depend on it"
        remedy = "write a file for each temperature"
        raise InputError("carriers.temperature", rule, f"{len(temperatures_K)} of them", remedy)
    if section.outside is not None:
        rule = "cannot be a material where there are gates or charge: where the field ends must be drawn"
        remedy = "draw the barrier as a layer of that material, with its thickness"
        raise InputError("section.outside", rule, section.outside, remedy)


def check_permittivity(materials: Mapping[str, Material]) -> None:
    """InputError for a material through which the field cannot be followed."""
    for name, material in materials.items():
        if material.permittivity is None:
            rule = "is missing: the field goes through it"
            remedy = f"write permittivity = 12 under [materials.{name}]"
            raise InputError(f"materials.{name}.permittivity", rule, remedy=remedy)


def lineup_V(gate: Gate, zero: tuple[Material, float], field: str) -> float:
    """The voltage at which, with no charge, the section's energy zero lines up with the source's Fermi level.

    With a work function W it is W - (affinity - shift): `zero` is the material of the energy zero and what its zero
    lies above the conduction edge. InputError at `field` where the affinity is not known.
    """
    if gate.lineup_voltage_V is not None:
        return gate.lineup_voltage_V
    material, shift = zero
    assert gate.work_function_eV is not None
    if material.electron_affinity_eV is None:
        rule = f"is missing: the work function of gate '{gate.name}' needs it"
        remedy = f"give it, or a lineup_voltage in place of {field}.work_function"
        raise InputError(f"materials.{material.name}.electron_affinity", rule, remedy=remedy)
    return gate.work_function_eV - material.electron_affinity_eV + shift


def check_neutral(section: Section, surfaces: Sequence[Surface], drawn: Setting) -> None:
    """InputError where nothing can neutralise what is fixed in an isolated section: electrons are negative."""
    if drawn.gates or any(surface.pinned_at_eV is not None for surface in surfaces):
        return
    plus = minus = 0.0
    for name, area in drawing.visible_areas(section).items():
        doping = section.doping_of(name)
        plus += doping.donors_per_nm3 * area
        minus += doping.acceptors_per_nm3 * area if doping.ionisation == "full" else 0.0
    for surface, boundary in zip(surfaces, drawn.surfaces, strict=True):
        charge = (surface.charge_per_nm2 or 0.0) * boundary.length_nm
        plus, minus = plus + max(charge, 0.0), minus + max(-charge, 0.0)
    if plus - minus < -_BALANCED * (plus + minus):
        rule = "a section without a gate or a pinned surface must be neutral, and electrons cannot neutralise"
        remedy = "add a gate or donors"
        raise InputError("section", rule, f"a fixed charge of {plus - minus:.4g} e/nm", remedy)
