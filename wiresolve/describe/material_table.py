"""The cited table `materials.json`: its compounds at a temperature, and alloys between them."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path
from types import MappingProxyType
from typing import Any

PROVENANCES = ("checked", "derived", "memory", "conflict")
"""Where a value is from, the surest first; a value computed from several is as unsure as the least sure of them."""
NOT_MIXED = (
    "luttinger_",
    "hole_",
    "electron_g_factor",
    "kane_set_mass",
    "kane_energy_without_remote_term",
    "gap_deformation",
)
"""Quantities of compounds that an alloy is not given by a straight line between them."""
FIT_PARTS = ("_gap_slope", "_gap_bend")


@dataclass(frozen=True)
class Number:
    """A value with what is known of it (`wiresolve.describe.material.MaterialValue` without its names)."""

    value: float
    unit: str
    low: float
    high: float
    temperature_K: float | None
    source: str
    provenance: str
    valid: str = ""


Numbers = dict[str, Number]


@cache
def data() -> Mapping[str, Any]:
    """The file's content."""
    read: dict[str, Any] = json.loads(Path(__file__).with_name("materials.json").read_text(encoding="utf-8"))
    return MappingProxyType(read)


def compounds() -> tuple[str, ...]:
    """Names of the table's materials, without alloys."""
    return tuple(data()["compounds"])


def alloys() -> tuple[str, ...]:
    """Names of the table's alloy families."""
    return tuple(data()["alloys"])


def kane_nonparabolicity(mass: float, gap_eV: float, splitting_eV: float) -> float:
    """Nonparabolicity in 1/eV of a zone-centre valley, (1-m)^2/G (3G^2 + 4GD + 2D^2)/((G + D)(3G + 2D)).

    E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957); W. Fawcett, A. D. Boardman, S. Swain, J. Phys. Chem. Solids 31,
    1963 (1970); M. A. Littlejohn and others, J. Appl. Phys. 48, 4587 (1977).

    Parameters
    ----------
    mass : m in m0.
    gap_eV, splitting_eV : the gap G and the spin-orbit splitting D of the valence band.
    """
    g, d = gap_eV, splitting_eV
    return (1 - mass) ** 2 / g * (3 * g**2 + 4 * g * d + 2 * d**2) / ((g + d) * (3 * g + 2 * d))


def compound(name: str, kelvin: float) -> Numbers:
    """All numbers of a compound, its gaps at this lattice temperature."""
    rows: Mapping[str, Mapping[str, Any]] = data()["compounds"][name]["values"]
    cold = {quantity: _read(row) for quantity, row in rows.items() if row["value"] is not None}
    found = dict(cold)
    for quantity in rows:
        if f"{quantity}_slope" in rows:
            found[quantity] = _warmed(cold, quantity, kelvin)
    for quantity, row in rows.items():
        if "follows" in row:
            found[quantity] = _following(cold, quantity, str(row["follows"]), kelvin)
    if "zone_centre_nonparabolicity" in rows and "zone_centre_nonparabolicity" not in found:
        found["zone_centre_nonparabolicity"] = _kane(found, rows["zone_centre_nonparabolicity"])
    return found


def _read(row: Mapping[str, Any]) -> Number:
    source = f"{row['source']}; {row['note']}" if row["note"] else str(row["source"])
    value = float(row["value"])
    low, high = float(row["low"]), float(row["high"])
    return Number(value, row["unit"], low, high, row["temperature_K"], source, row["provenance"], row["valid"])


def _shift(numbers: Numbers, quantity: str, kelvin: float) -> float:
    """How far a gap has fallen since 0 K: Y. P. Varshni, Physica 34, 149 (1967), eq. 1."""
    if kelvin == 0:
        return 0.0
    slope, bend = numbers[f"{quantity}_slope"].value, numbers[f"{quantity}_bend"].value
    return slope * 1e-3 * kelvin**2 / (kelvin + bend)


def _warmed(numbers: Numbers, quantity: str, kelvin: float) -> Number:
    cold, slope, bend = (numbers[f"{quantity}{part}"] for part in ("", "_slope", "_bend"))
    shift = _shift(numbers, quantity, kelvin)
    fit = f"; {cold.value:g} eV at 0 K less {slope.value:g} meV/K T^2 / (T + {bend.value:g} K)"
    extra = f"; {slope.source.partition('; ')[2]}" if "; " in slope.source else ""
    sure = cold.provenance if kelvin == 0 else worst(cold, slope, bend)
    source = cold.source + fit + extra
    return Number(cold.value - shift, "eV", cold.low - shift, cold.high - shift, kelvin, source, sure, slope.valid)


def _following(numbers: Numbers, quantity: str, leader: str, kelvin: float) -> Number:
    """A gap that has no fit of its own: it keeps its distance from another one of the material."""
    cold = numbers[quantity]
    shift = _shift(numbers, leader, kelvin) - _shift(numbers, leader, cold.temperature_K or 0.0)
    at = f"{cold.value:g} eV at {cold.temperature_K or 0:g} K"
    source = f"{cold.source}; {at}, shifting with temperature as the {leader.replace('_', ' ')}"
    sure = worst(cold, replace(cold, provenance="derived"))
    return Number(cold.value - shift, "eV", cold.low - shift, cold.high - shift, kelvin, source, sure, "0 to 600 K")


def _kane(numbers: Numbers, row: Mapping[str, Any]) -> Number:
    gap, splitting = numbers["zone_centre_gap"], numbers["spin_orbit_splitting"]
    if "zone_centre_mass" in numbers:
        mass = numbers["zone_centre_mass"].value
    else:
        along, across = (numbers[f"zone_centre_{part}_mass"].value for part in ("longitudinal", "transverse"))
        mass = (along * across**2) ** (1 / 3)
    value = kane_nonparabolicity(mass, gap.value, splitting.value)
    low, high = (value if row[bound] is None else float(row[bound]) for bound in ("low", "high"))
    source = f"{row['source']}; {row['note']}" if row["note"] else str(row["source"])
    low, high = min(low, value), max(high, value)
    return Number(value, row["unit"], low, high, gap.temperature_K, source, "derived", "energies below the gap's size")


def worst(*numbers: Number) -> str:
    """The least sure provenance of several numbers."""
    return max((n.provenance for n in numbers), key=PROVENANCES.index)


def alloy(family: str, x: float, kelvin: float) -> Numbers:
    """All numbers of an alloy at a fraction x: (1 - x) a + x b - x (1 - x) bowing, each at the lattice temperature.

    At x = 0 and x = 1 it is the compound.
    """
    about = data()["alloys"][family]
    one, zero = about["ends"]
    if x in (0, 1):
        return compound(one if x == 1 else zero, kelvin)
    end, start = compound(one, kelvin), compound(zero, kelvin)
    found: Numbers = {}
    for quantity in dict.fromkeys((*start, *end)):
        row = about["bowing"].get(quantity)
        if row is not None and isinstance(row["values"], str):
            found[quantity] = _held(start if row["values"] == zero else end, quantity, row)
        elif row is not None and "pieces" in row:
            found[quantity] = _pieced(start[quantity], row, x)
        elif quantity in start and quantity in end and (row is not None or _mixes(quantity)):
            found[quantity] = _mixed(start[quantity], end[quantity], row, x, f"{zero} and {one}")
    splitting = {"zone_centre_mass", "zone_centre_gap", "spin_orbit_splitting"}
    if splitting <= found.keys():
        row = data()["compounds"][zero]["values"]["zone_centre_nonparabolicity"]
        found["zone_centre_nonparabolicity"] = _kane(found, {**row, "low": None, "high": None, "note": ""})
    return found


def _mixes(quantity: str) -> bool:
    return not quantity.startswith(NOT_MIXED) and not quantity.endswith((*FIT_PARTS, "zone_centre_nonparabolicity"))


def _held(numbers: Numbers, quantity: str, row: Mapping[str, Any]) -> Number:
    number = numbers[quantity]
    source = f"{row['note']}; {number.source}"
    return replace(number, source=source, provenance=worst(number, replace(number, provenance=row["provenance"])))


def _pieced(like: Number, row: Mapping[str, Any], x: float) -> Number:
    value = next(at + slope * x for upto, at, slope in row["pieces"] if x <= upto)
    source = f"{row['source']}; {row['note']}"
    return Number(value, like.unit, value, value, like.temperature_K, source, row["provenance"])


def _mixed(a: Number, b: Number, row: Mapping[str, Any] | None, x: float, between: str) -> Number:
    """A quantity between two compounds, on a straight line or bowed."""
    if row is None:
        row = {"values": [0.0], "source": f"a straight line between {between}", "provenance": "derived", "note": ""}
        source = row["source"]
    else:
        source = f"{row['source']}; between {between}" + (f"; {row['note']}" if row["note"] else "")
    bend = sum(c * x**power for power, c in enumerate(row["values"]))
    bends = (row.get("low") or bend, row.get("high") or bend)
    value, low, high = (
        (1 - x) * p + x * q - x * (1 - x) * c
        for p, q, c in ((a.value, b.value, bend), (a.low, b.low, max(bends)), (a.high, b.high, min(bends)))
    )
    kelvin = a.temperature_K if a.temperature_K == b.temperature_K else None
    sure = worst(a, b, replace(a, provenance=row["provenance"]))
    covered = row.get("covered")
    valid = "" if covered is None else f"fractions from {covered[0]:g} to {covered[1]:g}"
    return Number(value, a.unit, min(low, value), max(high, value), kelvin, source, sure, valid)


def covered(family: str, quantity: str, x: float) -> tuple[float, float] | None:
    """The fractions that a quantity's data cover, where x lies outside of them; else None."""
    if x in (0, 1):
        return None
    row = data()["alloys"][family]["bowing"].get(quantity, {})
    low, high = row.get("covered", (0.0, 1.0))
    return None if low <= x <= high else (low, high)
