"""Materials by name: the cited table at a lattice temperature, and alloys by their formula."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from functools import lru_cache
from types import MappingProxyType

from wiresolve.describe import checks, material_table
from wiresolve.describe.material import (
    ANY_VALLEY,
    GIVEN,
    GIVEN_SCALE,
    VACUUM_LEVEL,
    ZONE_CENTRE,
    Material,
    MaterialValue,
    Note,
    Valley,
    in_order,
)
from wiresolve.describe.material_table import Number, Numbers
from wiresolve.errors import InputError

__all__ = [
    "GIVEN",
    "GIVEN_SCALE",
    "Material",
    "MaterialValue",
    "Valley",
    "alloy_families",
    "alloy_fraction",
    "known",
    "look_up",
    "table_names",
    "table_values",
    "unknown",
]

HOTTEST_FIT_K = 600.0
NEAR_eV = 0.15
"""Valleys this near to the lowest count where an alloy's data end."""
VALLEY_KINDS = {"zone_centre": ZONE_CENTRE, "X": "X", "Delta": "Delta", "L": "L"}
"""Prefixes of the table's quantities, and the valleys that they are of."""
AXES = {"X": (1, 0, 0), "Delta": (1, 0, 0), "L": (1, 1, 1), ZONE_CENTRE: (0, 0, 1)}
VALLEY_PARTS = ("_gap", "_mass", "_nonparabolicity")
"""Ends of the quantities that belong to a valley."""
PARTS = ("gap", "mass", "longitudinal_mass", "transverse_mass", "nonparabolicity")


def table_names() -> tuple[str, ...]:
    """Names that `look_up` knows: the compounds, and of each alloy family one member as an example."""
    return (*material_table.compounds(), *(_example(family) for family in material_table.alloys()))


def alloy_families() -> tuple[tuple[str, str, tuple[str, str]], ...]:
    """Alloy families: name, whose fraction counts, and the materials at fraction 1 and 0."""
    families = material_table.data()["alloys"]
    return tuple((name, a["fraction_of"], (a["ends"][0], a["ends"][1])) for name, a in families.items())


_FRACTION = r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)"
_ALLOY = re.compile(rf"([A-Z][a-z]?){_FRACTION}([A-Z][a-z]?){_FRACTION}([A-Z][a-z]?)?")


def alloy_fraction(name: str) -> tuple[str, float] | None:
    """Family and fraction of an alloy's formula ("Al0.3Ga0.7As" -> "AlGaAs", 0.3); None where it is none.

    Raises `InputError` where the formula belongs to a family but its fractions are not in [0, 1] with the sum 1.
    """
    parts = _ALLOY.fullmatch(name)
    if parts is None:
        return None
    mixed = {parts[1]: float(parts[2]), parts[3]: float(parts[4])}
    for family, of, (first, second) in alloy_families():
        if {f"{element}{parts[5] or ''}" for element in mixed} != {first, second} or len(mixed) != 2:
            continue
        other = next(element for element in mixed if element != of)
        x, y = mixed[of], mixed[other]
        if not (0 <= x <= 1 and 0 <= y <= 1):
            raise InputError(
                "material", "an alloy's fractions must lie between 0 and 1", name, "write e.g. " + _example(family)
            )
        if abs(x + y - 1) > 1e-6:
            raise InputError("material", f"the fractions of {of} and {other} must add up to 1", name)
        return family, x
    return None


def _example(family: str) -> str:
    return str(material_table.data()["alloys"][family]["example"])


@lru_cache(maxsize=256)
def look_up(name: str, lattice_temperature_K: float, others: tuple[str, ...] = ()) -> Material:
    """The table's material of this name at this lattice temperature; `others` are known too, for the error.

    A valley's edge is the valence edge plus its gap at this temperature (Y. P. Varshni, Physica 34, 149 (1967), eq. 1).
    Raises `InputError` for an unknown name, with the nearest known ones.
    """
    kelvin = checks.in_range("lattice_temperature", lattice_temperature_K, 0, 2000, "K")
    numbers, like, alloy = _numbers(name, kelvin, others)
    return _assembled(name, numbers, like, alloy, kelvin)


def table_values(name: str, lattice_temperature_K: float) -> tuple[MaterialValue, ...]:
    """Everything that the table holds of a material: what a wire uses first, then what later models need."""
    used = look_up(name, lattice_temperature_K).values
    known = {value.quantity for value in used}
    numbers, _, _ = _numbers(name, float(lattice_temperature_K))
    return (*used, *(_value(name, quantity, n) for quantity, n in numbers.items() if quantity not in known))


def _numbers(name: str, kelvin: float, others: tuple[str, ...] = ()) -> tuple[Numbers, str, tuple[str, float] | None]:
    """A material's numbers, the compound or family whose facts it shares, and an alloy's family and fraction."""
    if name in material_table.alloys():
        raise InputError("material", "an alloy needs its fractions", name, f'write e.g. "{_example(name)}"')
    if name in material_table.compounds():
        return material_table.compound(name, kelvin), name, None
    found = alloy_fraction(name)
    if found is None:
        raise unknown(name, others)
    return material_table.alloy(*found, kelvin), material_table.data()["alloys"][found[0]]["ends"][0], found


def known(name: str) -> bool:
    """Whether `look_up` has a material of this name, or knows what is amiss with its fractions."""
    return name in (*table_names(), *material_table.alloys()) or alloy_fraction(name) is not None


_MEANT: Mapping[str, str] = MappingProxyType(
    {
        **{"silicon": "Si", "germanium": "Ge", "gallium arsenide": "GaAs", "aluminium arsenide": "AlAs"},
        **{"indium arsenide": "InAs", "indium phosphide": "InP", "indium antimonide": "InSb"},
        **{"gallium antimonide": "GaSb", "aluminium antimonide": "AlSb", "gallium nitride": "GaN"},
        **{"silicon dioxide": "SiO2", "silicon oxide": "SiO2", "silica": "SiO2", "oxide": "SiO2"},
        **{"alumina": "Al2O3", "aluminium oxide": "Al2O3", "hafnia": "HfO2", "hafnium oxide": "HfO2"},
    }
)
"""English names of materials."""


def unknown(name: str, others: Sequence[str], otherwise: str = "Or describe it under [materials.NAME]") -> InputError:
    """The error for a material that neither the table nor `others` (the user's own) has."""
    words = tuple(dict.fromkeys((*others, *table_names())))
    remedy = checks.nearest(name, words, meant=_MEANT) or "known are " + ", ".join(words[:16]) + "."
    return InputError("material", "is not a known material", name, f"{remedy} {otherwise}")


def _value(name: str, quantity: str, n: Number) -> MaterialValue:
    return MaterialValue(
        name, quantity, n.value, n.unit, n.temperature_K, n.source, n.provenance == "checked", n.low, n.high,
        n.provenance, n.valid,
    )  # fmt: skip


def _assembled(name: str, numbers: Numbers, like: str, alloy: tuple[str, float] | None, kelvin: float) -> Material:
    about = material_table.data()["compounds"][like]
    gaps = {kind: numbers[f"{kind}_gap"].value for kind in VALLEY_KINDS if f"{kind}_gap" in numbers}
    if gaps and min(gaps.values()) <= 0:
        rule = f"the fitted gap of {name} closes below this temperature"
        raise InputError("lattice_temperature", rule, f"{kelvin:g} K", "describe the material under [materials.NAME]")
    valleys = _valleys(numbers, gaps)
    solved = [kind for kind, valley in VALLEY_KINDS.items() if valley in {v.name for v in valleys}]
    lowest = min((gaps[kind] for kind in solved if kind in gaps), default=0.0)
    edges = _edges(numbers, lowest if gaps else None)
    permittivity, affinity = numbers.get("permittivity"), numbers.get("electron_affinity")
    gap = min(gaps.values()) if gaps else numbers["gap"].value if "gap" in numbers else None
    return Material(
        name=name,
        valleys=in_order(valleys),
        conduction_edge_eV=edges[0][1].value if edges else None,
        edge_scale=edges[0][0] if edges else None,
        edges=tuple((scale, edge.value) for scale, edge in edges),
        permittivity=permittivity.value if permittivity else None,
        electron_affinity_eV=affinity.value if affinity else None,
        gap_eV=gap,
        crystal=about["crystal"],
        lattice_constant_nm=numbers["lattice_constant"].value if "lattice_constant" in numbers else None,
        lattice_constant_c_nm=numbers["lattice_constant_c"].value if "lattice_constant_c" in numbers else None,
        insulator=about.get("insulator", False),
        source="cited table; see its values",
        values=_used(name, numbers, edges),
        unsolved_valleys=tuple((VALLEY_KINDS[k], gaps[k] - lowest) for k in gaps if k not in solved),
        notes=_notes(name, gaps, alloy, kelvin),
    )


def _valleys(numbers: Numbers, gaps: dict[str, float]) -> list[Valley]:
    """The valleys whose masses are known; heights count from the valence edge still."""
    if "tunnelling_mass" in numbers:
        return [Valley.isotropic(numbers["tunnelling_mass"].value, ANY_VALLEY)]
    found = []
    for kind, valley in VALLEY_KINDS.items():
        mass, along, across, alpha = (numbers.get(f"{kind}_{part}") for part in PARTS[1:])
        if kind not in gaps or (mass is None and (along is None or across is None)):
            continue
        bent = None if alpha is None else alpha.value
        if mass is not None:
            found.append(Valley.isotropic(mass.value, valley, height_eV=gaps[kind], nonparabolicity_per_eV=bent))
        elif along is not None and across is not None:
            masses, at_boundary = (along.value, across.value), valley != "Delta"
            found.append(Valley(valley, gaps[kind], *masses, AXES[valley], at_boundary, nonparabolicity_per_eV=bent))
    return found


def _edges(numbers: Numbers, lowest_gap: float | None) -> list[tuple[str, Number]]:
    """The conduction edge on every scale on which it is known, the best first."""
    scales, found = material_table.data()["scales"], []
    if lowest_gap is not None and "valence_edge" in numbers:
        found.append((scales["III-V"], _edge(numbers, numbers["valence_edge"], 0.0, lowest_gap, scales["III-V"])))
    elif lowest_gap is not None and "model_solid_valence_average" in numbers:
        top = numbers["spin_orbit_splitting"].value / 3
        average = numbers["model_solid_valence_average"]
        found.append((scales["group IV"], _edge(numbers, average, top, lowest_gap, scales["group IV"])))
    if "electron_affinity" in numbers:
        affinity = numbers["electron_affinity"]
        at = Number(0.0 - affinity.value, "eV", -affinity.high, -affinity.low, affinity.temperature_K, "", "derived")
        found.append((VACUUM_LEVEL, at))
    return found


def _edge(numbers: Numbers, valence: Number, top_eV: float, lowest_gap: float, scale: str) -> Number:
    gap = next(n for q, n in numbers.items() if q.endswith("_gap") and n.value == lowest_gap)
    source = f"valence edge ({scale}) plus gap" if not top_eV else f"{scale} plus a third of the spin-orbit splitting"
    source += " plus gap" if top_eV else ""
    low, high = valence.low + top_eV + gap.low, valence.high + top_eV + gap.high
    sure = material_table.worst(valence, gap)
    return Number(valence.value + top_eV + gap.value, "eV", low, high, gap.temperature_K, source, sure, gap.valid)


def _used(name: str, numbers: Numbers, edges: list[tuple[str, Number]]) -> tuple[MaterialValue, ...]:
    """The values that a wire of this material depends on."""
    wanted = [f"{kind}_{part}" for kind in VALLEY_KINDS for part in PARTS]
    wanted += ["tunnelling_mass", "gap", "spin_orbit_splitting", "valence_edge"]
    wanted += [] if "valence_edge" in numbers else ["model_solid_valence_average"]
    listed = {quantity: numbers[quantity] for quantity in wanted if quantity in numbers}
    if edges and edges[0][0] != VACUUM_LEVEL:
        listed["conduction_edge"] = edges[0][1]
    last = ("permittivity", "electron_affinity", "lattice_constant", "lattice_constant_c")
    listed |= {quantity: numbers[quantity] for quantity in last if quantity in numbers}
    return tuple(_value(name, quantity, n) for quantity, n in listed.items())


def _notes(name: str, gaps: dict[str, float], alloy: tuple[str, float] | None, kelvin: float) -> tuple[Note, ...]:
    notes: list[Note] = []
    if gaps and kelvin > HOTTEST_FIT_K:
        text = f"the gap of {name} is extrapolated to {kelvin:g} K, beyond what its fit was made for"
        notes.append(("lattice-temperature", text, "set lattice_temperature, or describe the material yourself"))
    if alloy is not None:
        notes += _outside_of_data(name, *alloy, gaps)
    return tuple(notes)


def _outside_of_data(name: str, family: str, x: float, gaps: dict[str, float]) -> list[Note]:
    """A note where the data of a valley near the lowest one end before this fraction."""
    near = [kind for kind in gaps if gaps[kind] < min(gaps.values()) + NEAR_eV]
    of = material_table.data()["alloys"][family]["fraction_of"]
    found: list[Note] = []
    for kind in near:
        for part in PARTS:
            covered = material_table.covered(family, f"{kind}_{part}", x)
            if covered is not None:
                what = f"{VALLEY_KINDS[kind]} {part.replace('_', ' ')}"
                text = f"the {what} of {family} is known from {of} fractions of {covered[0]:g} to {covered[1]:g} only,"
                text += f" and is extrapolated for {name}"
                found.append(("alloy-range", text, "describe the alloy yourself under [materials.NAME]"))
    return found
