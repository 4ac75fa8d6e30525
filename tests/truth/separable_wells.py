"""Finite wells along x and y that add up: the sums of the levels of two square wells."""

from __future__ import annotations

from typing import Any

from tests.truth._wires import energies, material, wire
from wiresolve.describe.section import Patch, Section
from wiresolve.describe.shapes import Rectangle

SUMS = (
    "sums of levels of finite square wells, separation of variables: G. Bastard, Wave Mechanics Applied to "
    "Semiconductor Heterostructures (1988), chapter I (citation from memory); roots to 15 digits"
)
REASON = "asked for 3e-8 eV; far walls move the highest level by less"
OBLONG = ["0.07962808079364074", "0.1780098679280724", "0.2028098410229446"]
"""10 nm and 0.3 eV deep along x, 8 nm and 0.25 eV deep along y; the states below the continuum."""
SQUARE = [
    "0.06841688089428164",
    "0.1667986680287133",
    "0.1667986680287133",
    "0.2651804551631450",
]
"""10 nm and 0.3 eV deep along x and along y; without the pair just below the continuum."""


def wells(
    size_nm: tuple[float, float], depth_eV: tuple[float, float], far_nm: float, count: int, accuracy_eV: float
) -> Any:
    """The well in the middle, strips to its sides with the one step, corners with both, hard walls far off."""
    (width_nm, height_nm), (depth_x_eV, depth_y_eV) = size_nm, depth_eV
    wide, high = width_nm + 2 * far_nm, height_nm + 2 * far_nm
    section = Section(
        shape=Rectangle(width_nm=wide, height_nm=high),
        material="well",
        offset_eV=depth_x_eV + depth_y_eV,
        patches=(
            Patch(shape=Rectangle(width_nm=wide, height_nm=height_nm), material="well", offset_eV=depth_x_eV),
            Patch(shape=Rectangle(width_nm=width_nm, height_nm=high), material="well", offset_eV=depth_y_eV),
            Patch(shape=Rectangle(width_nm=width_nm, height_nm=height_nm), material="well"),
        ),
    )
    return energies(wire(section, [material("well", 0.067)], count, accuracy_eV))


TRUTH: list[dict[str, Any]] = [
    {
        "id": "wells.oblong",
        "what": "finite wells of 10 nm and 8 nm, 0.3 and 0.25 eV deep, mass 0.067: bound levels in eV",
        "value": [float(text) for text in OBLONG],
        "digits": 7,
        "source": SUMS,
        "tolerance_reason": REASON,
        "compute": lambda: wells((10.0, 8.0), (0.3, 0.25), 25.0, 3, 3e-8),
    },
    {
        "id": "wells.square",
        "what": "two finite wells of 10 nm, 0.3 eV deep, mass 0.067: bound levels in eV",
        "value": [float(text) for text in SQUARE],
        "digits": 7,
        "source": SUMS,
        "tolerance_reason": REASON,
        "compute": lambda: wells((10.0, 10.0), (0.3, 0.3), 22.0, 4, 3e-8),
    },
]
