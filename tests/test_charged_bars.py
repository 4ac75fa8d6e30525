"""The bars of levels in a potential of their own charge hold, against solvers that share nothing with the program."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from tests import independent_round, independent_square
from tests.charged_wires import certified, of_round, of_square
from tests.independent_round import INAS, Round
from tests.truth.self_consistent_round import SPECTRAL
from tests.truth.self_consistent_square import SOLVED
from wiresolve.physics.charged_subbands import ChargedSubbands

Array = NDArray[np.float64]

ROUND = {
    "InAs at 77 K": replace(INAS, gate_potential_V=0.4),
    "silicon": independent_round.SILICON,
    "GaAs with donors": independent_round.GALLIUM_ARSENIDE,
    "dense at 4.2 K": replace(INAS, temperature_K=4.2, gate_potential_V=0.7),
    "empty at 0 K": replace(INAS, temperature_K=0.0, gate_potential_V=0.0),
    "depleted": replace(independent_round.GALLIUM_ARSENIDE, gate_potential_V=-1.0),
    "donors only": replace(independent_round.GALLIUM_ARSENIDE, gate_potential_V=0.1, temperature_K=4.2),
}
CASES = [*ROUND, *SOLVED]
LISTED = 6


@cache
def wanted(name: str) -> tuple[float, ...]:
    """The lowest subbands of a case."""
    if name in SOLVED:
        return SOLVED[name].levels_eV[:LISTED]
    solved = independent_round.solve(ROUND[name])
    pairs = [e for e, momentum, _ in solved.levels for _ in range(2 if momentum else 1)]
    return tuple(pairs[:LISTED])


@cache
def found(name: str, accuracy_eV: float) -> ChargedSubbands:
    """A case on the mesh that an accuracy asks for."""
    count = len(wanted(name))
    if name in SOLVED:
        return certified(of_square(independent_square.CASES[name], count, accuracy_eV))[0]
    wire: Round = ROUND[name]
    return certified(of_round(wire, count, accuracy_eV))[0]


@pytest.mark.parametrize("accuracy_eV", [1e-4, 2e-5])
@pytest.mark.parametrize("name", CASES)
def test_bars_hold(name: str, accuracy_eV: float) -> None:
    """Over all cases the largest error is 0.50 of its bar; half of the errors are below 0.17 of theirs."""
    solved = found(name, accuracy_eV)
    bar = solved.certified.bar_eV
    assert (bar <= accuracy_eV).all()
    assert (np.abs(solved.certified.energy_eV - wanted(name)) <= bar).all()


@pytest.mark.parametrize("name", CASES)
def test_the_potential_has_a_part_in_the_bars(name: str) -> None:
    """Not more than all of it; none at all only where the potential is the gate's."""
    solved = found(name, 1e-4)
    part = solved.potential_error_eV
    assert (part <= solved.certified.bar_eV).all()
    if name == "empty at 0 K":
        assert (part < 1e-9).all()
    else:
        assert (part > 1e-9).all()


def test_the_potentials_part_falls_with_the_mesh() -> None:
    name = "InAs at 77 K"
    assert found(name, 5e-6).potential_error_eV.max() < 0.5 * found(name, 1e-4).potential_error_eV.max()


def test_bars_are_not_all_far_too_wide() -> None:
    """Of a planner's use: a bar should not be a hundred times what is off."""
    ratios = [
        np.abs(found(name, 1e-4).certified.energy_eV - wanted(name)) / found(name, 1e-4).certified.bar_eV
        for name in CASES
    ]
    assert np.median(np.concatenate(ratios)) > 0.01
    assert max(ratio.max() for ratio in ratios) > 0.1


def test_bars_share_the_balance_they_stand_on() -> None:
    """The line densities of the silicon wire's levels, coarse, agree with two other codes within what bars allow."""
    solved = found("silicon", 1e-4)
    total = SPECTRAL["silicon, 300 K"]["line_density_per_m"] * 1e-9
    bar, thermal = float(solved.certified.bar_eV.max()), 0.025852
    assert abs(solved.balanced.occupied.total_per_nm / total - 1) <= bar / thermal


@pytest.mark.parametrize(("kelvin", "volts"), [(4.2, 1.0), (4.2, 2.0), (0.0, 1.0), (300.0, 1.0)])
def test_bars_hold_what_filled_states_beyond_the_list_do(kelvin: float, volts: float) -> None:
    """A dozen filled levels and two listed: a coarse mesh moves the others' charge, and with it the listed levels."""
    wire = Round(10.0, 0.05, 0.05, 12.0, 2.0, 3.9, kelvin, volts)
    listed = certified(of_round(wire, 2, 2e-4))[0].certified
    levels = independent_round.solve(wire).levels
    exact = np.array([e for e, momentum, _ in levels for _ in range(2 if momentum else 1)][:2])
    assert (listed.bar_eV <= 2e-4).all()
    assert (np.abs(listed.energy_eV - exact) <= listed.bar_eV).all()
