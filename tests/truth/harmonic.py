"""Harmonic sections: ladders of equal steps along x and y."""

from __future__ import annotations

from typing import Any

from tests.truth._wires import energies, material, wire
from wiresolve.describe.problem import Potential
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Ellipse, Shape

LADDERS = "(n_x + 1/2) hw_x + (n_y + 1/2) hw_y: V. Fock, Z. Phys. 47, 446 (1928), without a magnetic field"


def ladder(spacing_x_eV: float, spacing_y_eV: float, count: int) -> list[float]:
    steps = [(i + 0.5, j + 0.5) for i in range(count) for j in range(count)]
    return sorted(x * spacing_x_eV + y * spacing_y_eV for x, y in steps)[:count]


def solved(shape: Shape, spacing_x_eV: float, spacing_y_eV: float, count: int, accuracy_eV: float) -> Any:
    problem = wire(
        Section(shape=shape, material="well"),
        [material("well", 0.067)],
        count,
        accuracy_eV,
        Potential(harmonic_eV=(spacing_x_eV, spacing_y_eV)),
    )
    return energies(problem)


TRUTH: list[dict[str, Any]] = [
    {
        "id": "harmonic.isotropic",
        "what": "harmonic section, steps of 5 meV both ways, ten levels in eV",
        "value": ladder(0.005, 0.005, 10),
        "digits": 6,
        "source": LADDERS,
        "tolerance_reason": "asked for 1e-7 eV, got finer; the wall lies over six oscillator lengths out",
        "compute": lambda: solved(Circle(diameter_nm=190.0), 0.005, 0.005, 10, 1e-7),
    },
    {
        "id": "harmonic.anisotropic",
        "what": "harmonic section, steps of 4 meV along x and 6 meV along y, eight levels in eV",
        "value": ladder(0.004, 0.006, 8),
        "digits": 6,
        "source": LADDERS,
        "tolerance_reason": "asked for 1e-7 eV, got finer; the wall lies over six oscillator lengths out",
        "compute": lambda: solved(Ellipse(width_nm=210.0, height_nm=175.0), 0.004, 0.006, 8, 1e-7),
    },
]
