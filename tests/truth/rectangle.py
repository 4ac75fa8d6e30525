"""Rectangles: sums of two squares, with equal and unequal masses, and the thin slab of common practice."""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

import numpy as np

from tests.truth._wires import checked, eigenvalues, energies, material, wire
from wiresolve.describe.materials import Material
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Rectangle
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0, KB

SEPARATION = "separation of variables: R. Courant and D. Hilbert, Methods of Mathematical Physics I (1953), chapter V"
ONE_BY_TWO = [
    "12.337005501361698274",
    "19.739208802178717238",
    "32.076214303540415511",
    "41.945818704629774130",
    "49.348022005446793094",
    "49.348022005446793094",
    "61.685027506808491368",
    "71.554631907897849987",
    "78.956835208714868951",
    "91.293840710076567224",
]
TWO_BY_THREE = [
    "3.5640238115044906124",
    "6.8538919452009434853",
    "10.966227112321509576",
    "12.337005501361698274",
    "14.256095246017962449",
    "19.739208802178717238",
    "20.013364479986754977",
    "23.303232613683207850",
    "26.593100747379660723",
    "27.415567780803773941",
]
"""Eigenvalues pi^2 (i^2/Lx^2 + j^2/Ly^2) of the rectangles 1 by 2 and 2 by 3."""
SLAB_nm, SHEET_nm, LIGHT_MASS = 5.0, 60.0, 0.19
SLAB_SPACING_eV = 3 * math.pi**2 * HBAR2_OVER_2M0 / (LIGHT_MASS * SLAB_nm**2)


def box(width: float, height: float, inverse_masses: tuple[float, float], count: int) -> list[float]:
    i, j = np.meshgrid(np.arange(1, 40), np.arange(1, 40))
    levels = (i / width) ** 2 * inverse_masses[0] + (j / height) ** 2 * inverse_masses[1]
    return np.sort(math.pi**2 * HBAR2_OVER_2M0 * levels.ravel())[:count].tolist()


def unequal_masses() -> Any:
    """14 nm by 9 nm, 0.92 along x and 0.19 along y."""
    tensor = [[1 / 0.92, 0, 0], [0, 1 / 0.19, 0], [0, 0, 1 / 0.19]]
    oblong = Material.given("oblong", inverse_mass=tensor, conduction_edge_eV=0.0)
    section = Section(shape=Rectangle(width_nm=14.0, height_nm=9.0), material="oblong")
    return energies(wire(section, [oblong], 10, 3e-9))


@lru_cache(maxsize=1)
def slab_spacing_eV() -> float:
    """From the lowest state of a sheet 5 nm by 60 nm to the lowest one that changes sign across the 5 nm.

    Of all states a field across the sheet couples only that one strongly to the lowest: it has the largest y.
    """
    section = Section(shape=Rectangle(width_nm=SHEET_nm, height_nm=SLAB_nm), material="light")
    result = checked(solve(wire(section, [material("light", LIGHT_MASS)], 22, 3e-8)))
    coupling = np.abs((result.modes * result.modes[:, :1] * result.mesh.points[:, 1:]).sum(axis=0))
    return float(result.energies_eV[int(np.argmax(coupling))] - result.energies_eV[0])


TRUTH: list[dict[str, Any]] = [
    {
        "id": "rectangle.one-by-two",
        "what": "rectangle 1 by 2, ten levels",
        "value": [float(text) for text in ONE_BY_TWO],
        "digits": 9,
        "source": SEPARATION,
        "tolerance_reason": "asked for 1e-7 of energies from 12.3 on",
        "compute": lambda: eigenvalues(Rectangle(width_nm=1.0, height_nm=2.0), 10, 1e-7),
    },
    {
        "id": "rectangle.two-by-three",
        "what": "rectangle 2 by 3, turned by 33 degrees, ten levels",
        "value": [float(text) for text in TWO_BY_THREE],
        "digits": 9,
        "source": SEPARATION,
        "tolerance_reason": "asked for 1e-7 of energies from 3.6 on",
        "compute": lambda: eigenvalues(Rectangle(width_nm=2.0, height_nm=3.0, rotation_deg=33.0), 10, 1e-7),
    },
    {
        "id": "rectangle.unequal-masses",
        "what": "14 nm by 9 nm, masses 0.92 and 0.19, ten levels in eV",
        "value": box(14.0, 9.0, (1 / 0.92, 1 / 0.19), 10),
        "digits": 7,
        "source": SEPARATION,
        "tolerance_reason": "asked for 3e-9 eV of energies from 0.027 eV on",
        "compute": unequal_masses,
    },
    {
        "id": "rectangle.slab",
        "what": "5 nm slab, mass 0.19 across: second level over first in eV, and in kT at 300 K",
        "value": [SLAB_SPACING_eV, SLAB_SPACING_eV / (KB * 300)],
        "digits": 7,
        "source": SEPARATION + "; 0.237 eV and 9.2 kT",
        "tolerance_reason": "the difference of two energies, each asked for 3e-8 eV",
        "compute": lambda: [slab_spacing_eV(), slab_spacing_eV() / (KB * 300)],
    },
    {
        "id": "rectangle.slab-in-practice",
        "what": "the same as it is remembered: about 250 meV, ten times kT, kT about 25 meV",
        "value": [250.0, 10.0, 25.0],
        "digits": 1,
        "source": "common practice",
        "tolerance_reason": "round numbers, good to a tenth",
        "compute": lambda: [1e3 * slab_spacing_eV(), slab_spacing_eV() / (KB * 300), 1e3 * KB * 300],
    },
]
