"""Self-consistent wires of the reference values, solved by the program."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np

from tests import independent_round, independent_square
from tests.charged_wires import GATE, OnMesh, at_temperature, certified, of_round, of_square
from wiresolve.physics.charged_subbands import ChargedSubbands, certify_on
from wiresolve.physics.response import response

ROUND = {
    "InAs, 77 K": replace(independent_round.INAS, gate_potential_V=0.4),
    "silicon, 300 K": independent_round.SILICON,
    "GaAs with donors, 77 K": independent_round.GALLIUM_ARSENIDE,
}
ACCURACY_eV = 1e-6
HIGHEST_V = 0.7


@cache
def round_wire(name: str, subbands: int) -> ChargedSubbands:
    """A wire of `ROUND`."""
    return certified(of_round(ROUND[name], subbands, ACCURACY_eV))[0]


@cache
def square_wire(name: str, subbands: int) -> ChargedSubbands:
    """A case of `independent_square.CASES`."""
    return certified(of_square(independent_square.CASES[name], subbands, ACCURACY_eV))[0]


@cache
def _fullest(subbands: int) -> ChargedSubbands:
    wire = replace(independent_round.INAS, temperature_K=4.2, gate_potential_V=HIGHEST_V)
    return certified(of_round(wire, subbands, ACCURACY_eV))[0]


@cache
def swept(
    temperature_K: float, gate_V: tuple[float, ...], subbands: int
) -> tuple[list[float], list[float], list[float]]:
    """Carriers, capacitances and subband energies at gate potentials, all on the mesh of the fullest wire."""
    fullest = _fullest(subbands)
    problem = at_temperature(of_round(independent_round.INAS, subbands, ACCURACY_eV), temperature_K)
    here = OnMesh(problem, fullest.meshes)
    carriers, capacitance, energies = [], [], []
    for balanced in here.sweep(gate_V):
        found = certify_on(here.wire, here.meshes, balanced, fullest.needs, subbands, ACCURACY_eV, fullest.bar_factor)
        carriers.append(balanced.occupied.total_per_nm)
        capacitance.append(response(balanced, GATE).carriers_per_V_nm)
        energies += np.asarray(found.certified.energy_eV).tolist()
    return carriers, capacitance, energies


def in_pairs(levels_eV: tuple[float, ...], momenta: tuple[int, ...]) -> list[float]:
    """Levels of a round wire as subbands: those with an angular momentum stand twice."""
    return [e for e, momentum in zip(levels_eV, momenta, strict=True) for _ in range(2 if momentum else 1)]
