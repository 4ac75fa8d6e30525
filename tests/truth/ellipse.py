"""Ellipses, and the round wire with unequal masses that has the same levels."""

from __future__ import annotations

from typing import Any

import numpy as np

from tests.truth._wires import eigenvalues, energies, wire
from wiresolve.describe.materials import Material
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Ellipse
from wiresolve.units import HBAR2_OVER_2M0

SOURCE = (
    "Mathieu functions, DLMF chapter 28; B. A. Troesch and H. R. Troesch, Math. Comp. 27, 755 (1973); digits by a "
    "spectral method of polynomials on the disk"
)
TABLE = {
    0.8: [
        "7.39968021506",
        "16.71044863795",
        "20.83544408942",
        "30.22725158392",
        "33.66614807936",
        "42.46007720431",
        "47.70695188104",
        "50.11783441819",
    ],
    0.5: [
        "14.26690641166",
        "25.10172248070",
        "40.11360648185",
        "46.94666173632",
        "59.50921654145",
        "63.69585590753",
        "83.38746495154",
        "84.09211683675",
    ],
}
"""Eigenvalues of the ellipse with semi-axes 1 and b, by b."""


def stretched_circle(b: float, accuracy: float, turn_deg: float = 40.0) -> Any:
    """The unit circle with masses 1 and b^2 along two axes, which are turned against x and y."""
    angle = np.radians(turn_deg)
    axes = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    tensor = np.eye(3)
    tensor[:2, :2] = axes.T @ np.diag([1.0, b**-2]) @ axes
    # hbar^2/2m0 times the inverse mass is the tensor in eV nm^2
    stretched = Material.given("stretched", inverse_mass=(tensor / HBAR2_OVER_2M0).tolist(), conduction_edge_eV=0.0)
    section = Section(shape=Circle(diameter_nm=2.0), material="stretched")
    return energies(wire(section, [stretched], 8, accuracy))


TRUTH: list[dict[str, Any]] = [
    *(
        {
            "id": f"ellipse.{b}",
            "what": f"ellipse with semi-axes 1 and {b}, eight levels",
            "value": [float(text) for text in TABLE[b]],
            "digits": 8,
            "source": SOURCE,
            "tolerance_reason": "asked for 3e-7 of energies from 7.4 on; 11 digits are known",
            "compute": lambda b=b: eigenvalues(Ellipse(width_nm=2.0, height_nm=2 * b), 8, 3e-7),
        }
        for b in TABLE
    ),
    *(
        {
            "id": f"ellipse.{b}-by-mass",
            "what": f"circle of radius 1, masses 1 and {b**2:.2f} along turned axes: the same levels",
            "value": [float(text) for text in TABLE[b]],
            "digits": 8,
            "source": SOURCE,
            "tolerance_reason": "asked for 3e-7 of energies from 7.4 on; 11 digits are known",
            "compute": lambda b=b: stretched_circle(b, 3e-7),
        }
        for b in TABLE
    ),
]
