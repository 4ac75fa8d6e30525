"""A mass that grows with energy: round wires with a hard wall, and in a barrier with a growing mass of its own."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

from tests.truth._wires import checked, wire
from wiresolve.describe.materials import Material
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.result import Result
from wiresolve.solve import solve

HARD = (
    "E (1 + alpha E) = (hbar^2/2m)(j_ln/R)^2: E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957); closed form, exact for "
    "a hard wall on the conduction envelope"
)
FINITE = (
    "BenDaniel-Duke matching with m(E) = m (1 + (E - edge)/gap) on both sides: G. Bastard, Phys. Rev. B 24, 5693 "
    "(1981); D. F. Nelson, R. C. Miller, D. A. Kleinman, Phys. Rev. B 35, 7770 (1987); roots to 30 digits"
)
WITHIN = "1.5e-8 eV are asked for, a bar of twice the error; the wall that ends the barrier stays below that"
LIGHT, NARROW = (0.067, 0.61, 5.0), (0.0135, 4.1, 15.0)
"""Mass in m0, alpha in 1/eV, radius in nm."""
LIGHT_eV = ["0.1224055774684", "0.2845630438012", "0.4669280141903", "0.5249835507934"]
LIGHT_MASS = ["0.0770054319023", "0.0902601832003", "0.105166695880", "0.109912155442"]
NARROW_eV = ["0.05850550758221", "0.1225661170184", "0.1871767458254", "0.2068237624611"]
NARROW_MASS = ["0.0199765596894", "0.0270680691539", "0.0342204657629", "0.0363953905044"]
FOLD = (1, 2, 2, 1)
"""How often each level of a round wire comes, in the order of the tables."""
WIDE_GAP = [("0.053694598368275", 1), ("0.12889537405272", 2), ("0.21483585690028", 2), ("0.23555448210754", 1)]
NARROW_GAP = [
    ("0.070231555504965", 1),
    ("0.15879479580921", 2),
    ("0.25329054071043", 2),
    ("0.28370299638673", 1),
    ("0.34933528576535", 2),
    ("0.40020308342224", 2),
    ("0.44510134548070", 2),
    ("0.50660695471985", 2),
]


def spread(values: list[str]) -> list[float]:
    return [float(text) for text, fold in zip(values, FOLD, strict=True) for _ in range(fold)]


def entries(table: list[tuple[str, int]]) -> list[float]:
    return [float(text) for text, fold in table for _ in range(fold)]


@lru_cache(maxsize=2)
def hard(mass: float, alpha: float, radius_nm: float) -> Result:
    inside = Material.given("inside", electron_mass=mass, nonparabolicity_per_eV=alpha, conduction_edge_eV=0.0)
    section = Section(shape=Circle(diameter_nm=2 * radius_nm), material="inside")
    return checked(solve(wire(section, [inside], 6, 1e-9)))


def energies(case: tuple[float, float, float]) -> Any:
    return hard(*case).energies_eV


def masses(case: tuple[float, float, float]) -> list[float]:
    return [band.axial_mass or 0.0 for band in hard(*case).subbands]


def finite(
    well: tuple[float, float], barrier: tuple[float, float], step_eV: float, radius_nm: float, count: int
) -> Any:
    """Energies of a round wire in a material that goes on; masses and gaps of both, the gap being 1/alpha."""
    inside = Material.given("inside", electron_mass=well[0], nonparabolicity_per_eV=1 / well[1], conduction_edge_eV=0.0)
    outside = Material.given(
        "outside", electron_mass=barrier[0], nonparabolicity_per_eV=1 / barrier[1], conduction_edge_eV=step_eV
    )
    section = Section(shape=Circle(diameter_nm=2 * radius_nm), material="inside", outside="outside")
    return checked(solve(wire(section, [inside, outside], count, 1.5e-8))).energies_eV


TRUTH: list[dict[str, Any]] = [
    {
        "id": "nonparabolic.hard-wall.light",
        "what": "levels of a round wire, mass 0.067, alpha 0.61/eV, radius 5 nm (eV)",
        "value": spread(LIGHT_eV),
        "digits": 8,
        "source": HARD,
        "tolerance_reason": "1e-9 eV are asked for; hbar^2/2m0 differs by 1.4e-9 between CODATA 2018 and 2022",
        "compute": lambda: energies(LIGHT),
    },
    {
        "id": "nonparabolic.hard-wall.narrow",
        "what": "levels of a round wire, mass 0.0135, alpha 4.1/eV, radius 15 nm (eV)",
        "value": spread(NARROW_eV),
        "digits": 8,
        "source": HARD,
        "tolerance_reason": "1e-9 eV are asked for; hbar^2/2m0 differs by 1.4e-9 between CODATA 2018 and 2022",
        "compute": lambda: energies(NARROW),
    },
    {
        "id": "nonparabolic.axial-mass.light",
        "what": "axial masses m (1 + 2 alpha E) of the same levels, mass 0.067 (m0)",
        "value": spread(LIGHT_MASS),
        "digits": 8,
        "source": HARD,
        "tolerance_reason": "it follows the energy, of which 1e-9 eV are asked for",
        "compute": lambda: masses(LIGHT),
    },
    {
        "id": "nonparabolic.axial-mass.narrow",
        "what": "axial masses m (1 + 2 alpha E) of the same levels, mass 0.0135 (m0)",
        "value": spread(NARROW_MASS),
        "digits": 7,
        "source": HARD,
        "tolerance_reason": "it follows the energy, of which 1e-9 eV are asked for",
        "compute": lambda: masses(NARROW),
    },
    {
        "id": "nonparabolic.finite-barrier.wide-gap",
        "what": "levels of a round wire of radius 6 nm in a barrier of 0.25 eV, gaps 1.519 and 1.89 eV (eV)",
        "value": entries(WIDE_GAP),
        "digits": 8,
        "scale": 1.0,
        "source": FINITE,
        "tolerance_reason": WITHIN,
        "compute": lambda: finite((0.067, 1.519), (0.092, 1.89), 0.25, 6.0, 6),
    },
    {
        "id": "nonparabolic.finite-barrier.narrow-gap",
        "what": "levels of a round wire of radius 8 nm in a barrier of 0.52 eV, gaps 0.417 and 1.4236 eV (eV)",
        "value": entries(NARROW_GAP),
        "digits": 8,
        "scale": 1.0,
        "source": FINITE,
        "tolerance_reason": WITHIN,
        "compute": lambda: finite((0.026, 0.417), (0.0795, 1.4236), 0.52, 8.0, 14),
    },
]
