"""Materials and their values as text, with what stands behind each value."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import asdict

from wiresolve.describe.material import Material, MaterialValue, Valley
from wiresolve.output.tables import aligned, paragraphs


def listing(materials: Sequence[Material]) -> list[str]:
    """One line a material: crystal, lowest valley with its masses in m0, smallest gap, permittivity, unsure values."""
    rows = [["name", "crystal", "lowest valley", "mass", "gap", "permittivity", "unsure"]]
    rows.append(["", "", "", "m0", "eV", "", "of all"])
    for material in materials:
        lowest = material.valleys[0] if material.valleys else None
        gap, relative = ("" if n is None else f"{n:.4g}" for n in (material.gap_eV, material.permittivity))
        unsure = sum(v.provenance in ("memory", "conflict") for v in material.values)
        valley = "" if lowest is None else f"{material.valley_degeneracy} {lowest.name}"
        row = [material.name, material.crystal or "", valley, _masses(lowest), gap, relative]
        rows.append([*row, f"{unsure} of {len(material.values)}"])
    return aligned(rows, left={0, 1, 2})


def _masses(valley: Valley | None) -> str:
    if valley is None:
        return ""
    along, across = valley.longitudinal_mass, valley.transverse_mass
    if along is None or across is None:
        return "tensor"
    return f"{along:.4g}" if along == across else f"{along:.4g} along, {across:.4g} across"


def value_table(values: Sequence[MaterialValue]) -> list[str]:
    """The values of a material: number, unit, what sources span, temperature, provenance, and the sources below."""
    sources = list(dict.fromkeys(value.source for value in values))
    rows = [["quantity", "value", "unit", "literature", "at", "provenance", "source"]]
    for v in values:
        spread = "" if v.low is None or v.high is None or v.low == v.high else f"{v.low:.6g} to {v.high:.6g}"
        at = "" if v.temperature_K is None else f"{v.temperature_K:g} K"
        number = f"[{sources.index(v.source) + 1}]"
        rows.append([v.quantity, f"{v.value:.6g}", v.unit, spread, at, v.standing, number])
    lines = [*aligned(rows, left={0, 2, 3, 5}), ""]
    for valid in dict.fromkeys(v.valid for v in values if v.valid):
        head = f"{valid[:1].upper()}{valid[1:]}" if valid.startswith("given") else f"For {valid}"
        lines += paragraphs(f"{head}: {', '.join(v.quantity for v in values if v.valid == valid)}.")
    lines += [""] if any(v.valid for v in values) else []
    for k, source in enumerate(sources, 1):
        lines += paragraphs(f"[{k}] {source}")
    return lines


def as_json(materials: Sequence[tuple[Material, Sequence[MaterialValue]]]) -> str:
    """Materials with their valleys and values as JSON."""
    found = [
        {
            "name": material.name,
            "crystal": material.crystal,
            "valleys": [asdict(valley) for valley in material.valleys],
            "unsolved_valleys": [{"name": name, "height_eV": height} for name, height in material.unsolved_valleys],
            "edges": [{"scale": scale, "conduction_edge_eV": edge} for scale, edge in material.edges],
            "notes": [{"code": code, "text": text, "remedy": remedy} for code, text, remedy in material.notes],
            "values": [asdict(value) for value in values],
        }
        for material, values in materials
    ]
    return json.dumps(found, indent=2, ensure_ascii=False, allow_nan=False)
