"""Materials: the cited table (`materials.json`), alloys by formula, and materials that a user gives."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np

from wiresolve.describe import checks
from wiresolve.errors import InputError

InverseMass = tuple[tuple[float, float, float], ...]
"""Three rows of three numbers in 1/m0 in the wire's frame (x, y, axis); empty where no mass is known."""
LIGHTEST, HEAVIEST = 1e-3, 100.0
GIVEN_SCALE = "wire file"
"""Name of the scale on which a user's own conduction edges stand."""
GIVEN = "given in the wire file"
HOTTEST_FIT_K = 600.0


@dataclass(frozen=True)
class MaterialValue:
    """One number that a result depends on; `checked` tells whether it was compared with a text that prints it."""

    name: str
    quantity: str
    value: float
    unit: str
    temperature_K: float | None
    source: str
    checked: bool


@dataclass(frozen=True)
class Material:
    """A material at one lattice temperature.

    `inverse_mass` is in 1/m0 in the wire's frame, () where none is given (an insulator that keeps carriers out);
    `conduction_edge_eV` stands on the scale named `edge_scale`, and edges of different scales cannot be compared.
    `notes` are warnings (code, text, remedy) about using it as one parabolic valley.
    """

    name: str
    inverse_mass: InverseMass
    conduction_edge_eV: float | None
    edge_scale: str | None
    permittivity: float | None
    valley: str = "zone centre"
    valley_degeneracy: int = 1
    electron_affinity_eV: float | None = None
    gap_eV: float | None = None
    source: str = ""
    values: tuple[MaterialValue, ...] = ()
    notes: tuple[tuple[str, str, str], ...] = ()

    @property
    def electron_mass(self) -> float | None:
        """The mass in m0 where it is the same in all directions."""
        if not self.inverse_mass:
            return None
        first = self.inverse_mass[0][0]
        even = all(
            v == (first if i == j else 0.0) for i, row in enumerate(self.inverse_mass) for j, v in enumerate(row)
        )
        return 1 / first if even else None

    @classmethod
    def given(
        cls,
        name: str,
        *,
        electron_mass: float | None = None,
        inverse_mass: Sequence[Sequence[float]] | None = None,
        conduction_edge_eV: float | None = None,
        permittivity: float | None = None,
        electron_affinity_eV: float | None = None,
        valley_degeneracy: int = 1,
        source: str = "",
    ) -> Material:
        """A user's own material, from one isotropic mass in m0 or a 3 x 3 inverse mass in 1/m0 (wire frame).

        Raises `InputError` where a value is no number, out of range, or the tensor not symmetric positive definite.
        """
        checks.text("name", name, 60)
        if electron_mass is not None and inverse_mass is not None:
            raise InputError("electron_mass", "stands beside inverse_mass", remedy="keep one of the two")
        tensor: InverseMass = ()
        if electron_mass is not None:
            inverse = 1 / checks.in_range("electron_mass", electron_mass, LIGHTEST, HEAVIEST, "m0")
            tensor = ((inverse, 0.0, 0.0), (0.0, inverse, 0.0), (0.0, 0.0, inverse))
        elif inverse_mass is not None:
            tensor = _tensor(inverse_mass)
        elif permittivity is None:
            raise InputError(
                "electron_mass", "is missing", remedy="give electron_mass = 0.067 or an inverse_mass in 1/m0"
            )
        edge = _optional("conduction_edge", conduction_edge_eV, -100, 100, "eV")
        relative = _optional("permittivity", permittivity, 1, 1e5, "")
        affinity = _optional("electron_affinity", electron_affinity_eV, -10, 20, "eV")
        valleys = checks.whole("valley_degeneracy", valley_degeneracy, 1, 48)
        if source != "":
            checks.text("source", source, 500)
        cited = f"{GIVEN}: {source}" if source else GIVEN

        rows: list[tuple[str, float, str]] = []
        if electron_mass is not None:
            rows.append(("electron_mass", float(electron_mass), "m0"))
        elif tensor:
            axes = ((0, 0, "xx"), (1, 1, "yy"), (2, 2, "zz"), (0, 1, "xy"), (0, 2, "xz"), (1, 2, "yz"))
            rows += [(f"inverse_mass_{at}", tensor[i][j], "1/m0") for i, j, at in axes]
        rows += [("conduction_edge", edge, "eV")] if edge is not None else []
        rows += [("permittivity", relative, "")] if relative is not None else []
        rows += [("electron_affinity", affinity, "eV")] if affinity is not None else []
        return cls(
            name=name,
            inverse_mass=tensor,
            conduction_edge_eV=edge,
            edge_scale=None if edge is None else GIVEN_SCALE,
            permittivity=relative,
            valley_degeneracy=valleys,
            electron_affinity_eV=affinity,
            source=source,
            values=tuple(
                MaterialValue(name, quantity, value, unit, None, cited, False) for quantity, value, unit in rows
            ),
        )


def _optional(field: str, value: object, low: float, high: float, unit: str) -> float | None:
    return None if value is None else checks.in_range(field, value, low, high, unit)


def _tensor(rows: object) -> InverseMass:
    """A checked, exactly symmetric inverse mass."""
    field, wanted = "inverse_mass", "write three rows of three numbers in 1/m0"
    if not isinstance(rows, Sequence | np.ndarray) or isinstance(rows, str) or len(rows) != 3:
        raise InputError(field, "must be 3 x 3 numbers", rows, wanted)
    entries = []
    for i, row in enumerate(rows):
        if not isinstance(row, Sequence | np.ndarray) or isinstance(row, str) or len(row) != 3:
            raise InputError(field, "must be 3 x 3 numbers", row, wanted)
        entries.append([checks.finite(f"{field}[{i + 1}][{j + 1}]", value) for j, value in enumerate(row)])
    matrix = np.array(entries)
    size = float(np.abs(matrix).max())
    if size > 1e9:
        raise InputError(field, f"must lie below {1 / LIGHTEST:g} 1/m0", size)
    if float(np.abs(matrix - matrix.T).max()) > 1e-9 * size:
        i, j = divmod(int(np.argmax(np.abs(matrix - matrix.T))), 3)
        rule = f"must be symmetric, but its entries {i + 1},{j + 1} and {j + 1},{i + 1} differ"
        raise InputError(field, rule, [float(matrix[i, j]), float(matrix[j, i])])
    matrix = (matrix + matrix.T) / 2
    low, *_, high = np.linalg.eigvalsh(matrix)
    if low <= 0:
        raise InputError(field, "must be positive definite", remedy=f"its lowest eigenvalue is {low:.4g} 1/m0")
    if low < 1 / HEAVIEST * (1 - 1e-12) or high > 1 / LIGHTEST * (1 + 1e-12):
        rule = f"its masses must lie between {LIGHTEST:g} m0 and {HEAVIEST:g} m0"
        raise InputError(field, rule, f"{1 / high:.4g} m0 to {1 / low:.4g} m0")
    a, b, c = ((float(x), float(y), float(z)) for x, y, z in matrix)
    return a, b, c


@cache
def _data() -> Mapping[str, Any]:
    read: dict[str, Any] = json.loads(Path(__file__).with_name("materials.json").read_text(encoding="utf-8"))
    return MappingProxyType(read)


def table_names() -> tuple[str, ...]:
    """Names that `look_up` knows: the compounds, and of each alloy family one member as an example."""
    return (*_data()["compounds"], "Al0.3Ga0.7As", "In0.53Ga0.47As")


def alloy_families() -> tuple[tuple[str, str, tuple[str, str]], ...]:
    """Alloy families: name, whose fraction counts, and the compounds at fraction 1 and 0."""
    return tuple((name, a["fraction_of"], (a["ends"][0], a["ends"][1])) for name, a in _data()["alloys"].items())


_FRACTION = r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)"
_ALLOY = re.compile(rf"([A-Z][a-z]?){_FRACTION}([A-Z][a-z]?){_FRACTION}([A-Z][a-z]?)")


def alloy_fraction(name: str) -> tuple[str, float] | None:
    """Family and fraction of an alloy's formula ("Al0.3Ga0.7As" -> "AlGaAs", 0.3); None where it is none.

    Raises `InputError` where the formula belongs to a family but its fractions are not in [0, 1] with the sum 1.
    """
    parts = _ALLOY.fullmatch(name)
    if parts is None:
        return None
    metals = {parts[1]: float(parts[2]), parts[3]: float(parts[4])}
    for family, of, (first, second) in alloy_families():
        if {f"{metal}{parts[5]}" for metal in metals} != {first, second} or len(metals) != 2:
            continue
        other = next(metal for metal in metals if metal != of)
        x, y = metals[of], metals[other]
        if not (0 <= x <= 1 and 0 <= y <= 1):
            raise InputError(
                "material", "an alloy's fractions must lie between 0 and 1", name, "write e.g. " + _example(family)
            )
        if abs(x + y - 1) > 1e-6:
            raise InputError("material", f"the fractions of {of} and {other} must add up to 1", name)
        return family, x
    return None


def _example(family: str) -> str:
    return {"AlGaAs": "Al0.3Ga0.7As", "InGaAs": "In0.53Ga0.47As"}[family]


def look_up(name: str, lattice_temperature_K: float) -> Material:
    """The table's material of this name at this lattice temperature.

    The conduction edge is the valence edge (the scale on which InSb's is zero) plus the gap at this temperature
    (Y. P. Varshni, Physica 34, 149 (1967), eq. 1); an alloy's value is (1 - x) a + x b - x (1 - x) bowing.
    Raises `InputError` for an unknown name, with the nearest known ones.
    """
    kelvin = checks.in_range("lattice_temperature", lattice_temperature_K, 0, 2000, "K")
    data = _data()
    if name in data["alloys"]:
        raise InputError("material", "an alloy needs its fractions", name, f'write e.g. "{_example(name)}"')
    if name in data["compounds"]:
        return _assembled(name, _compound(name, data["compounds"][name], kelvin), kelvin)
    found = alloy_fraction(name)
    if found is None:
        raise unknown(name, ())
    family, x = found
    return _assembled(name, _alloy(name, data["alloys"][family], x, kelvin), kelvin)


def unknown(name: str, others: Sequence[str]) -> InputError:
    """The error for a material that neither the table nor `others` (the user's own) has."""
    words = (*others, *table_names())
    remedy = checks.nearest(name, words) or "known are " + ", ".join(words[:12]) + "."
    return InputError("material", "is not a known material", name, f"{remedy} Or describe it under [materials.NAME]")


@dataclass(frozen=True)
class _Number:
    value: float
    checked: bool
    source: str
    temperature_K: float | None


def _cited(row: Mapping[str, Any]) -> str:
    low, high = row.get("low"), row.get("high")
    spread = f"; {low:g} to {high:g} in the literature" if low is not None and low != high else ""
    note = f"; {row['note']}" if row.get("note") else ""
    return f"{row['source']}{spread}{note}"


def _compound(name: str, rows: Mapping[str, Mapping[str, Any]], kelvin: float) -> dict[str, _Number]:
    found = {}
    for quantity in ("electron_mass", "valence_edge", "permittivity", "electron_affinity"):
        row = rows[quantity]
        found[quantity] = _Number(row["value"], row["checked"], _cited(row), row["temperature_K"])
    for gap in ("gap", "x_gap"):
        if gap in rows:
            cold, slope, bend = rows[gap], rows[f"{gap}_slope_meV_per_K"], rows[f"{gap}_bend_K"]
            # Y. P. Varshni, Physica 34, 149 (1967), eq. 1
            value = (
                cold["value"] - slope["value"] * 1e-3 * kelvin**2 / (kelvin + bend["value"])
                if kelvin
                else cold["value"]
            )
            sure = cold["checked"] and (kelvin == 0 or (slope["checked"] and bend["checked"]))
            fit = f"; {cold['value']:g} eV at 0 K less {slope['value']:g} meV/K T^2 / (T + {bend['value']:g} K)"
            note = f"; {slope['note']}" if slope["note"] else ""
            found[gap] = _Number(value, sure, _cited(cold) + fit + note, kelvin)
    return found


def _alloy(name: str, family: Mapping[str, Any], x: float, kelvin: float) -> dict[str, _Number]:
    compounds, (one, zero) = _data()["compounds"], family["ends"]
    end, start = _compound(one, compounds[one], kelvin), _compound(zero, compounds[zero], kelvin)
    found = {}
    for quantity, bowing in family["bowing"].items():
        a, b = start[quantity], end[quantity]
        if bowing["values"] is None:
            value = next(at + slope * x for upto, at, slope in bowing["pieces"] if x <= upto)
            sure = bowing["checked"]
        else:
            bend = sum(c * x**power for power, c in enumerate(bowing["values"]))
            value = (1 - x) * a.value + x * b.value - x * (1 - x) * bend
            # At an end the alloy is the compound, whatever is known of the way between.
            sure = a.checked if x == 0 else b.checked if x == 1 else a.checked and b.checked and bowing["checked"]
        source = f"{bowing['source']}; between {zero} and {one}" + (f"; {bowing['note']}" if bowing["note"] else "")
        found[quantity] = _Number(value, sure, source, a.temperature_K if a.temperature_K == b.temperature_K else None)
    return found


def _assembled(name: str, numbers: Mapping[str, _Number], kelvin: float) -> Material:
    mass, valence, gap = numbers["electron_mass"], numbers["valence_edge"], numbers["gap"]
    scale = str(_data()["edge_scale"])
    if gap.value <= 0:
        rule = f"the fitted gap of {name} closes below this temperature"
        raise InputError("lattice_temperature", rule, f"{kelvin:g} K", "describe the material under [materials.NAME]")
    edge = _Number(
        valence.value + gap.value,
        valence.checked and gap.checked,
        f"valence edge ({scale}) plus gap",
        gap.temperature_K,
    )
    listed = {
        "electron_mass": (mass, "m0"),
        "valence_edge": (valence, "eV"),
        "gap": (gap, "eV"),
        "conduction_edge": (edge, "eV"),
        "permittivity": (numbers["permittivity"], ""),
        "electron_affinity": (numbers["electron_affinity"], "eV"),
    }
    values = tuple(
        MaterialValue(name, quantity, n.value, unit, n.temperature_K, n.source, n.checked)
        for quantity, (n, unit) in listed.items()
    )
    inverse = 1 / mass.value
    return Material(
        name=name,
        inverse_mass=((inverse, 0.0, 0.0), (0.0, inverse, 0.0), (0.0, 0.0, inverse)),
        conduction_edge_eV=edge.value,
        edge_scale=scale,
        permittivity=numbers["permittivity"].value,
        electron_affinity_eV=numbers["electron_affinity"].value,
        gap_eV=gap.value,
        source="cited table; see its values",
        values=values,
        notes=_notes(name, numbers, kelvin),
    )


def _notes(name: str, numbers: Mapping[str, _Number], kelvin: float) -> tuple[tuple[str, str, str], ...]:
    notes, gap, x_gap = [], numbers["gap"].value, numbers.get("x_gap")
    if x_gap is not None and x_gap.value < gap:
        text = (
            f"in {name} the X valleys lie {(gap - x_gap.value) * 1e3:.0f} meV below the zone centre, and only the zone"
        )
        text += " centre is solved: its barrier for electrons is lower than the conduction edge used here"
        notes.append(
            ("indirect-gap", text, "use an Al fraction below 0.41, or do not rely on states near that barrier")
        )
    if kelvin > HOTTEST_FIT_K:
        text = f"the gap of {name} is extrapolated to {kelvin:g} K, beyond what its fit was made for"
        notes.append(("lattice-temperature", text, "set lattice_temperature, or describe the material yourself"))
    return tuple(notes)
