"""Round cores and shells with a jump of mass and edge at every interface."""

from __future__ import annotations

from typing import Any

from tests.truth._wires import energies, material, wire
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle

MATCHING = (
    "layers matched in psi and psi'/m: G. Bastard, Wave Mechanics Applied to Semiconductor Heterostructures (1988), "
    "chapter III (citation from memory); roots to 15 digits"
)
WELL, BARRIER = material("well", 0.067), material("barrier", 0.092, 0.3)
HARD_WALL = [
    ("0.07355277035391068", 1),
    ("0.08449389377635071", 2),
    ("0.1158260842748781", 2),
    ("0.1647472249883076", 2),
    ("0.2281867525770858", 2),
    ("0.2817068656684964", 1),
]
"""Barrier within 5 nm, well to 12 nm, hard wall there."""
OPEN = [
    ("0.04295504694916697", 1),
    ("0.04934933506623500", 2),
    ("0.06779228072689268", 2),
    ("0.09648995307080198", 2),
    ("0.1333453525486885", 2),
    ("0.1714074866807911", 1),
]
"""Barrier within 6 nm, well to 14 nm, barrier without end."""


def entries(table: list[tuple[str, int]]) -> list[float]:
    return [float(text) for text, degeneracy in table for _ in range(degeneracy)]


def shell(inner_nm: float, outer_nm: float, outside: str | None, count: int, accuracy_eV: float) -> Any:
    section = Section(
        shape=Circle(diameter_nm=2 * inner_nm),
        material="barrier",
        layers=(Layer(thickness_nm=outer_nm - inner_nm, material="well"),),
        outside=outside,
    )
    return energies(wire(section, [WELL, BARRIER], count, accuracy_eV))


TRUTH: list[dict[str, Any]] = [
    {
        "id": "core-shell.hard-wall",
        "what": "carriers in a shell from 5 to 12 nm around a barrier of 0.3 eV, ten levels in eV",
        "value": entries(HARD_WALL),
        "digits": 7,
        "source": MATCHING,
        "tolerance_reason": "asked for 1e-8 eV of energies from 0.074 eV on",
        "compute": lambda: shell(5.0, 12.0, None, 10, 1e-8),
    },
    {
        "id": "core-shell.open",
        "what": "carriers in a shell from 6 to 14 nm between barriers of 0.3 eV, ten levels in eV",
        "value": entries(OPEN),
        "digits": 6,
        "source": MATCHING,
        "tolerance_reason": "asked for 1e-7 eV of energies from 0.043 eV on",
        "compute": lambda: shell(6.0, 14.0, "barrier", 10, 1e-7),
    },
]
