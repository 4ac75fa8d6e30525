"""Round wires in a material that goes on outside, at rest and in motion along the axis."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from tests.truth._wires import LAPLACE, checked, energies, material, wire
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle
from wiresolve.physics.axial_bands import dispersion
from wiresolve.physics.solved import certify_at
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
from wiresolve.solve import solve

MATCHING = (
    "k J_l'(kR)/m_in K_l(qR) = q J_l(kR)/m_out K_l'(qR): D. J. BenDaniel and C. B. Duke, Phys. Rev. 152, 683 (1966); "
    "J. A. Brum and G. Bastard, Superlattices Microstruct. 4, 443 (1988) (citation from memory); roots to 15 digits"
)
CONSTANTS = "hbar^2/2m0 differs by 1.4e-9 between CODATA 2018 and 2022"


@dataclass(frozen=True)
class Wall:
    """A round wire of one radius, its mass, the mass outside, and the step between the band edges."""

    radius_nm: float
    mass: float
    mass_outside: float
    step_eV: float

    def problem(self, count: int, accuracy_eV: float) -> Problem:
        inside = material("inside", self.mass)
        outside = material("outside", self.mass_outside, self.step_eV)
        section = Section(shape=Circle(diameter_nm=2 * self.radius_nm), material="inside", outside="outside")
        return wire(section, [inside, outside], count, accuracy_eV)


LOW = Wall(radius_nm=5.0, mass=0.067, mass_outside=0.092, step_eV=0.3)
HIGH = Wall(radius_nm=10.0, mass=0.023, mass_outside=0.08, step_eV=0.52)
LOW_AT_REST = [("0.07323174934924063", 1), ("0.1818491775535154", 2)]
HIGH_AT_REST = [
    ("0.05288986597720337", 1),
    ("0.1391779882187263", 2),
    ("0.2543950522687101", 2),
    ("0.3067098504401117", 1),
    ("0.3923221264657129", 2),
    ("0.4979905518629348", 2),
]
LOW_IN_MOTION = [("0.1234718815788111", 1), ("0.2303544388604617", 2)]
"""At k = 0.3/nm."""
HIGH_IN_MOTION = [
    ("0.1178615146013047", 1),
    ("0.2024897807163096", 2),
    ("0.3153621257700825", 2),
    ("0.3675200835153770", 1),
    ("0.4491475403870825", 2),
]
"""At k = 0.2/nm."""
EQUAL_MASSES = [
    ("2.0549327778999658317", 1),
    ("3.2592904745324822865", 2),
    ("4.3422984321400222802", 2),
    ("4.6357693400867174614", 1),
    ("5.3498503012699371125", 2),
    ("5.7482425436198696902", 2),
]
"""Roots u of u J_l'(u)/J_l(u) = w K_l'(w)/K_l(w) with u^2 + w^2 = 36: E = step (u/6)^2."""
NORMAL_FREQUENCY, STEP_eV = 6.0, 9.0


def entries(table: list[tuple[str, int]]) -> list[float]:
    return [float(text) for text, degeneracy in table for _ in range(degeneracy)]


@lru_cache(maxsize=2)
def certified(wall: Wall, count: int, accuracy_eV: float) -> Certified:
    ready = Wire(wall.problem(count, accuracy_eV))
    found = certify(ready.draw, ready.channels, count, accuracy_eV)
    assert found.met
    return found


def in_motion(wall: Wall, k_per_nm: float, count: int, accuracy_eV: float) -> Any:
    """Energies at one k: the pencil at that k, solved."""
    solved = certified(wall, count, accuracy_eV).solved[0]
    return certify_at(solved, k_per_nm, count).energy_eV[:count]


def in_reduced_space(wall: Wall, k_per_nm: float, count: int, accuracy_eV: float) -> Any:
    """The same from the space that a few solved k span, as E(k) is found for a result."""
    solved = certified(wall, count, accuracy_eV).solved[0]
    k = k_per_nm * (np.arange(14) / 10)
    bands = dispersion(solved.pencil, solved.energy_eV, solved.unknown_states, k, solved.shift_eV, accuracy_eV, count)
    return bands.energy_eV[:, 10]


def equal_masses() -> Any:
    """hbar^2/2m = 1 eV nm^2 on both sides and a radius of 2 nm: (radius/1 nm)^2 (step/1 eV) = 36."""
    barrier = material("outside", LAPLACE.electron_mass or 0.0, STEP_eV)
    section = Section(shape=Circle(diameter_nm=4.0), material=LAPLACE.name, outside="outside")
    return energies(wire(section, [LAPLACE, barrier], 8, 1e-5))


def bound_states() -> list[float]:
    """How many of six states of LOW lie below the step, by the flag."""
    result = checked(solve(LOW.problem(6, 1e-4)))
    return [float(sum(bool(s.bound) for s in result.subbands))]


TRUTH: list[dict[str, Any]] = [
    {
        "id": "barrier.low",
        "what": "radius 5 nm, barrier 0.3 eV, masses 0.067 and 0.092: bound levels in eV",
        "value": entries(LOW_AT_REST),
        "digits": 7,
        "source": MATCHING,
        "tolerance_reason": f"asked for 2e-8 eV; {CONSTANTS}",
        "compute": lambda: in_motion(LOW, 0.0, 3, 2e-8),
    },
    {
        "id": "barrier.high",
        "what": "radius 10 nm, barrier 0.52 eV, masses 0.023 and 0.08: bound levels in eV",
        "value": entries(HIGH_AT_REST),
        "digits": 6,
        "source": MATCHING,
        "tolerance_reason": "asked for 1e-7 eV; the last level lies 22 meV below the step",
        "compute": lambda: in_motion(HIGH, 0.0, 10, 1e-7),
    },
    {
        "id": "barrier.bound",
        "what": "the first of the two holds three bound states",
        "value": [3.0],
        "digits": 7,
        "source": MATCHING,
        "tolerance_reason": "a count",
        "compute": bound_states,
    },
    {
        "id": "barrier.low-in-motion",
        "what": "the first at k = 0.3/nm along the axis, in eV",
        "value": entries(LOW_IN_MOTION),
        "digits": 7,
        "source": MATCHING,
        "tolerance_reason": f"asked for 2e-8 eV at k = 0; {CONSTANTS}",
        "compute": lambda: in_motion(LOW, 0.3, 3, 2e-8),
    },
    {
        "id": "barrier.high-in-motion",
        "what": "the second at k = 0.2/nm, in eV",
        "value": entries(HIGH_IN_MOTION),
        "digits": 6,
        "source": MATCHING,
        "tolerance_reason": "asked for 1e-7 eV at k = 0",
        "compute": lambda: in_motion(HIGH, 0.2, 10, 1e-7)[:8],
    },
    {
        "id": "barrier.high-reduced",
        "what": "the same from the reduced space of E(k)",
        "value": entries(HIGH_IN_MOTION),
        "digits": 6,
        "source": MATCHING,
        "tolerance_reason": "the space grows until its error is below 1e-7 eV",
        "compute": lambda: in_reduced_space(HIGH, 0.2, 10, 1e-7)[:8],
    },
    {
        "id": "barrier.equal-masses",
        "what": "round well of normalised depth 6, equal masses: eight bound levels over the depth",
        "value": [(u / NORMAL_FREQUENCY) ** 2 for u in entries(EQUAL_MASSES)][:8],
        "digits": 6,
        "source": "D. Gloge, Appl. Opt. 10, 2252 (1971), equation 3 (modes of a weakly guiding fibre)",
        "tolerance_reason": "asked for 1e-5 of energies from 1.06 to 7.2",
        "compute": lambda: equal_masses() / STEP_eV,
    },
]
