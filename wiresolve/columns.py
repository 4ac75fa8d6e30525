"""A result's tables as named columns: what CSV files and data frames have in common.

They are made of plain data, as `result.json` and `gate_curve.json` hold it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import Any

from wiresolve.physics.sensitivity import PER_LENGTH

Plain = Mapping[str, Any]
SUBBAND = (
    "index",
    "level",
    "valley",
    "energy_eV",
    "error_eV",
    "k_min_per_nm",
    "axial_mass",
    "axial_mass_error",
    "spin_degeneracy",
    "valley_degeneracy",
    "layer",
    "bound",
    "wall_effect_eV",
    "line_density_per_nm",
)
POINT = (
    "line_density_per_nm",
    "capacitance_F_per_m",
    "geometric_F_per_m",
    "quantum_F_per_m",
    "centroid_F_per_m",
    "gate_coupling",
    "conductance_G0",
    "conductance_S",
)
LISTED: Mapping[str, str] = {
    "energy_{}_eV": "energy_eV",
    "error_{}_eV": "error_eV",
    "level_{}": "level",
    "line_density_{}_per_nm": "line_density_by_subband_per_nm",
    "coupling_{}": "coupling",
    "valley_{}": "valley",
}
"""Columns of a gate curve that each listed subband has, and what they hold."""
LAST = ("passes", "residual_V", "gauss_error", "converged", "note")


def subbands(rows: Sequence[Plain], sensitivities: Sequence[Plain]) -> dict[str, list[Any]]:
    """The columns of `subbands.csv`: a subband's keys, its share of each layer, its motion with each dimension."""
    found = {name: [row[name] for row in rows] for name in SUBBAND}
    for place in dict.fromkeys(place for row in rows for place in row["shares"]):
        found[f"share_{place.replace(' ', '_')}"] = [row["shares"].get(place, 0.0) for row in rows]
    for moved in sensitivities:
        if moved["unit"] == PER_LENGTH:
            found[f"by_{_word(moved['of'], '[^A-Za-z0-9]+')}_{PER_LENGTH}"] = [float(v) for v in moved["values"]]
    return found


def gate_curve(points: Sequence[Plain], swept: str) -> dict[str, list[Any]]:
    """The columns of `gate_curve.csv`: numbers of each point, then numbered ones of each listed subband.

    What a point lacks is None.
    """
    found: dict[str, list[Any]] = {"gate_voltage_V": [p["gate_voltage_V"] for p in points]}
    for name in dict.fromkeys(name for p in points for name in p["voltages_V"] if name != swept):
        found[f"voltage_of_{_word(name)}_V"] = [p["voltages_V"].get(name) for p in points]
    found |= {name: [p[name] for p in points] for name in POINT}
    for name in dict.fromkeys(name for p in points for name in p["gate_charge_per_nm"]):
        found[f"charge_on_{_word(name)}_per_nm"] = [p["gate_charge_per_nm"].get(name) for p in points]
    most = max((len(p["energy_eV"]) for p in points), default=0)
    for head, name in LISTED.items():
        for n in range(most):
            found[head.format(n + 1)] = [p[name][n] if n < len(p[name]) else None for p in points]
    for name in dict.fromkeys(name for p in points for name in p["more"]):
        found[name] = [p["more"].get(name) for p in points]
    return found | {name: [p[name] for p in points] for name in LAST}


def _word(name: str, other: str = r"\W+") -> str:
    """A name as part of a column's head."""
    return re.sub(other, "_", name).strip("_")
