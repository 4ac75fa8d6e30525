"""The examples with gates and charge run, draw their picture, and obey laws that do not come from the program.

Their sweeps are shortened here to a few voltages; the wire files are otherwise as they are shipped.
"""

from __future__ import annotations

import importlib.util
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from math import acosh, cosh, log, pi, sqrt
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import expit, j0, j1, y0, y1

import wiresolve as ws
from tests.test_geometries import Level, hexagon, silicon_wire

Array = NDArray[np.float64]
REPOSITORY = Path(__file__).resolve().parents[1]
# CODATA 2022: hbar^2/(2 m0) in eV nm^2, Boltzmann's constant in eV/K, e in C, h in J s, epsilon_0 in F/m.
HBAR2_OVER_2M0, BOLTZMANN, CHARGE, PLANCK = 0.0380998212, 8.617333262e-5, 1.602176634e-19, 6.62607015e-34
EPSILON0 = 8.8541878188e-12
SILICA = 3.9
PER_NM_V = 1e-9 / CHARGE
"""From F/m to elementary charges for each nm and volt."""


def loaded(name: str) -> ModuleType:
    """An example as a module."""
    specification = importlib.util.spec_from_file_location(name, REPOSITORY / "examples" / f"{name}.py")
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


def swept(problem: ws.Problem, **changed: Any) -> ws.Problem:
    assert problem.voltages is not None
    coarse = replace(problem.accuracy, energy_eV=changed.pop("accuracy_eV", problem.accuracy.energy_eV))
    return replace(problem, voltages=replace(problem.voltages, **changed), accuracy=coarse)


def run(name: str, path: Path, **changed: Any) -> Any:
    """What an example's `main` returns where the sweep of its wire file is changed; its picture is looked at."""
    module, load = loaded(name), ws.load
    with pytest.MonkeyPatch.context() as patch:
        # What other sizes do to the steps has tests of its own.
        patch.setattr("wiresolve.sweep.step_motions", lambda *_: ())
        if changed:
            patch.setattr(ws, "load", lambda wire: swept(load(wire), **changed))
        found = module.main(str(path))
    with Image.open(path) as image:
        assert image.width >= 500
        assert len(np.unique(np.asarray(image.convert("RGB")).reshape(-1, 3), axis=0)) > 20
    return found


@pytest.fixture(scope="module")
def ran(tmp_path_factory: pytest.TempPathFactory) -> Callable[..., Any]:
    """`run`, once for each example."""
    folder = tmp_path_factory.mktemp("pictures")
    return cache(lambda name, **changed: run(name, folder / f"{name}.png", **changed))


def charges_balance(curve: ws.GateCurve) -> None:
    """Gauss: no field leaves, so what the gates carry is what the electrons do; wherever there are any to speak of."""
    for point in curve.points:
        if point.line_density_per_nm > 1e-4:
            assert sum(point.gate_charge_per_nm.values()) == pytest.approx(point.line_density_per_nm, rel=1e-8)


def parts_in_series(curve: ws.GateCurve) -> None:
    """Electrons cannot hold more charge than their density of states and the empty geometry in series let them.

    The centroid adds to it: they stay away from the surface that the geometric part takes for a metal's.
    """
    for point in curve.points:
        if point.line_density_per_nm > 1e-4:
            series = 1 / (1 / point.geometric_F_per_m + 1 / point.quantum_F_per_m)
            assert 0 < point.capacitance_F_per_m < series < point.geometric_F_per_m


# A silicon channel in a wrap gate: 6 nm wide, 1 nm of oxide. The metal's work function 4.4 eV and silicon's affinity
# 4.05 eV (S. M. Sze) line up at 0.35 V.

LINEUP_V, DRAIN_V, TRANSMITTED = 0.35, 0.6, 60 / (60 + 20)
OFF_V, NEXT_V, ON_V = -0.2, 0.1, 0.7


@pytest.fixture(scope="module")
def channel(ran: Callable[..., Any]) -> Any:
    return ran("silicon_wrap_gate", accuracy_eV=1e-3, from_V=OFF_V, to_V=ON_V, count=4, drain_V=(0.05, DRAIN_V))


def test_silicon_wrap_gate(channel: Any) -> None:
    curve, slope_mV, coaxial = channel
    assert coaxial == pytest.approx(2 * pi * EPSILON0 * SILICA / log(4 / 3), rel=1e-9)
    assert [p.geometric_F_per_m for p in curve.points] == pytest.approx(4 * [coaxial], rel=1e-7)
    assert slope_mV == pytest.approx(1e3 * log(10) * BOLTZMANN * 300, rel=1e-4)
    parts_in_series(curve)
    charges_balance(curve)


def empty_channel() -> list[Level]:
    """Levels without charge, from the Fermi level at `OFF_V`, by polynomials on the disk."""
    return [(energy + LINEUP_V - OFF_V, count, mass) for energy, count, mass in silicon_wire()]


def test_silicon_channel_in_the_off_state(channel: Any) -> None:
    # The few electrons of the highest barrier are those of levels that are known; E (1 + alpha E) = level + k^2-term.
    thermal, alpha = BOLTZMANN * 300, 0.5
    expected = 0.0
    for energy, count, mass in empty_channel():
        bare = energy - LINEUP_V + OFF_V
        band_edge_mass = mass / (1 + 2 * alpha * bare)

        def filled(k: float, bare: float = bare, mass: float = band_edge_mass) -> float:
            squared = bare * (1 + alpha * bare) + HBAR2_OVER_2M0 / mass * k * k
            return float(np.exp(-(2 * squared / (1 + sqrt(1 + 4 * alpha * squared)) - bare) / thermal))

        expected += 2 * count / pi * quad(filled, 0, 6, epsabs=1e-12)[0] * np.exp(-energy / thermal)
    # Of a mass that grows along the wire the program takes one number a level: that may leave a thousandth.
    assert channel[0].points[0].line_density_per_nm == pytest.approx(expected, rel=1e-3)


def reach_nm() -> float:
    """How far the drain's field reaches into a round channel: the slowest exp(-z/length) with the gate grounded."""

    def mismatch(k: float) -> float:
        beyond = j0(3 * k) * y0(4 * k) - y0(3 * k) * j0(4 * k)
        slope = j1(3 * k) * y0(4 * k) - y1(3 * k) * j0(4 * k)
        return float(11.7 * j1(3 * k) * beyond - SILICA * slope * j0(3 * k))

    return 1 / float(brentq(mismatch, 0.3, 0.6))


def test_silicon_channel_carries_what_passes_the_barrier(channel: Any) -> None:
    # Over a high barrier the current of a level is transmission x g e kT/h exp(-E/kT) (1 - exp(-eV/kT)), whatever its
    # dispersion; the drain lowers the barrier by 1/(2 cosh(L/2 length)) of its voltage.
    thermal = BOLTZMANN * 300
    over = sum(2 * count * np.exp(-energy / thermal) for energy, count, _ in empty_channel())
    for run_ in channel[0].transistor[:2]:
        drain = run_.drain_voltage_V
        coupling = 1 / (2 * cosh(20 / (2 * reach_nm())))
        assert run_.drain_coupling == pytest.approx(coupling, rel=1e-5)
        lowered = np.exp(coupling * drain / thermal) * -np.expm1(-drain / thermal)
        expected = TRANSMITTED * CHARGE**2 / PLANCK * thermal * over * lowered
        assert run_.current_A == pytest.approx(expected, rel=1e-4)


def test_silicon_channel_stays_below_the_ballistic_limit(channel: Any) -> None:
    # K. Natori, J. Appl. Phys. 76, 4879 (1994): with as many electrons, all of them from the source, the most that
    # levels can carry is sum g e kT/h ln(1 + exp((U - E)/kT)). Of the part t that is transmitted of them, 2 - t are
    # there: t/(2 - t) of it where electrons are few (M. Lundstrom), t/(2 - t)^2 in one level of a degenerate wire.
    curve, thermal = channel[0], BOLTZMANN * 300
    point, on = curve.points[-1], curve.transistor[-1]
    assert (on.gate_voltage_V, on.drain_voltage_V) == (pytest.approx(ON_V), DRAIN_V)
    rows = list(
        zip(
            point.filled_energy_eV,
            point.filled_axial_mass,
            point.filled_degeneracy,
            point.filled_nonparabolicity_per_eV,
            strict=True,
        )
    )

    def density(lowered_eV: float) -> float:
        """From one contact: half of what a wire in balance holds. k' = (1 + 2 alpha e)/(2 sqrt(e (1 + alpha e)))."""
        total = 0.0
        for energy, mass, states, alpha in rows:

            def held(root: float, e0: float = energy, a: float = alpha) -> float:
                e = root * root
                return float((1 + 2 * a * e) / sqrt(1 + a * e) * expit((lowered_eV - e0 - e) / thermal))

            total += states * sqrt(mass / HBAR2_OVER_2M0) / pi * quad(held, 0, 1.2)[0]
        return total / 2

    lowered = float(brentq(lambda u: density(u) - on.line_density_per_nm, -0.3, 0.5))
    energies, states = np.array([row[0] for row in rows]), np.array([row[2] for row in rows])
    limit = CHARGE**2 / PLANCK * thermal * float(states @ np.logaddexp(0, (lowered - energies) / thermal))
    assert TRANSMITTED / (2 - TRANSMITTED) ** 2 < on.current_A / limit < TRANSMITTED / (2 - TRANSMITTED)


# A silicon sheet, 25 nm x 5 nm with corners of 2 nm, in 1 nm of oxide.


@pytest.fixture(scope="module")
def sheet(ran: Callable[..., Any]) -> Any:
    return ran("silicon_sheet", to_V=0.4, accuracy_eV=2e-3)


def test_silicon_sheet(sheet: Any) -> None:
    curve, (low, high) = sheet
    # Tubes of field lines along the normals, and a potential of d/thickness: lower and upper bound of any capacitance.
    assert low == pytest.approx(EPSILON0 * SILICA * (44 + 2 * pi / log(1.5)), rel=1e-9)
    assert high == pytest.approx(EPSILON0 * SILICA * (44 + 4 * pi + pi), rel=1e-9)
    assert low < curve.points[0].geometric_F_per_m < high
    parts_in_series(curve)
    charges_balance(curve)


def test_valleys_of_the_empty_sheet(sheet: Any) -> None:
    # The levels of a section lie between those of a rectangle around it and of one within it, which its corners touch.
    # Masses across and along the thickness: J. C. Hensel and others, Phys. Rev. 138, A225 (1965).
    point, cut = sheet[0].points[0], 2 * 2 * (1 - 1 / sqrt(2))

    def level(width: float, height: float, across: float, upwards: float) -> float:
        above = HBAR2_OVER_2M0 * pi**2 * (1 / (across * width**2) + 1 / (upwards * height**2))
        return above + LINEUP_V - point.gate_voltage_V

    leaning_across = 2 / (1 / 0.9163 + 1 / 0.1905)  # along x, halfway between the axes of a leaning valley
    for name, across, upwards in (("Delta [001]", 0.1905, 0.9163), ("Delta [100] [010]", leaning_across, 0.1905)):
        listed = [e for e, valley in zip(point.energy_eV, point.valley, strict=True) if valley == name]
        if listed:
            assert level(25, 5, across, upwards) < listed[0] < level(25 - cut, 5 - cut, across, upwards)
    assert point.valley[0] == "Delta [001]"
    assert point.axial_mass[0] == pytest.approx(0.1905, rel=1e-4)


# An InAs hexagon, 40 nm from flat to flat, on 100 nm of oxide over a gate, at 4.2 K.


@pytest.fixture(scope="module")
def back_gated(ran: Callable[..., Any]) -> Any:
    return ran("inas_back_gate", count=3)


def test_inas_back_gate(back_gated: Any) -> None:
    curve, landauer, (low, high) = back_gated
    points, thermal = curve.points, BOLTZMANN * 4.2
    closed = [sum(1 / (1 + np.exp(np.minimum(p.energy_eV / thermal, 700.0)))) for p in points]
    assert landauer == pytest.approx(closed, rel=1e-7, abs=1e-12)
    assert [p.conductance_G0 for p in points] == pytest.approx(closed, abs=1e-8)
    assert closed[-1] > 3
    charges_balance(curve)
    parts_in_series(curve)
    # More metal or more permittivity is more capacitance: the circle inside in air, and that around in oxide.
    assert low == pytest.approx(2 * pi * EPSILON0 / acosh(120 / 20), rel=1e-9)
    assert high == pytest.approx(2 * pi * EPSILON0 * SILICA / acosh(120 / (40 / sqrt(3))), rel=1e-9)
    assert low < points[0].geometric_F_per_m < high
    # From one voltage to the next no more electrons come than into a metal wire, and once there are some not many fewer
    # (1/C of a few levels and of the room that they leave at the surface is under a fifth of the oxide's).
    metal = points[0].geometric_F_per_m * PER_NM_V * (points[2].gate_voltage_V - points[1].gate_voltage_V)
    gained = points[2].line_density_per_nm - points[1].line_density_per_nm
    assert 0.8 * metal < gained < metal


def test_empty_wire_on_a_back_gate(back_gated: Any) -> None:
    # At the line-up voltage nothing bends the bands: levels of the hexagon (30 nm in `hexagon`; the spectrum's scale
    # goes with the squared size before the mass grows with energy).
    point, scale = back_gated[0].points[0], (30 / 40) ** 2
    assert point.gate_voltage_V == 0
    reference = [e for e, _, _ in hexagon()][:6]
    ground = hexagon()[0]
    alpha = (ground[2] / 0.024 - 1) / (2 * ground[0])
    squared = np.array(reference) * (1 + alpha * np.array(reference)) * scale
    expected = 2 * squared / (1 + np.sqrt(1 + 4 * alpha * squared))
    assert point.energy_eV[:6] == pytest.approx(expected, abs=float(point.error_eV.max()) + 1e-9)


# A GaAs hexagon in AlGaAs, doped from 10 nm beyond the core on.


def test_gaas_doped_shell(ran: Callable[..., Any]) -> None:
    shares, lines, given = ran("gaas_doped_shell")
    area = sqrt(3) / 2 * (100**2 - 80**2)
    assert given == pytest.approx([area * donors for donors in (1e-5, 5e-5, 1e-4, 2e-4)], rel=1e-12)
    assert lines == pytest.approx(given, rel=1e-8)
    # Six sectors of 120 degrees and 12 nm in a hexagon of 60 nm: what electrons spread evenly would have there.
    even = 6 * (pi / 3) * 12**2 / (sqrt(3) / 2 * 60**2)
    assert shares == sorted(shares)
    assert shares[0] < 0.5 * even < 1.2 * even < shares[-1]


# A constriction whose barrier is an upside-down parabola of 8 meV along the wire.


@pytest.fixture(scope="module")
def constriction(ran: Callable[..., Any]) -> Any:
    return ran("saddle_constriction", from_V=0.04, to_V=0.22, count=4)


def buettiker(levels_eV: Array, temperature_K: float) -> float:
    """G0 at a temperature: one mode of T(E) = 1/(1 + exp(-2 pi E/(hbar omega))) times -df/dE, level by level."""
    thermal = BOLTZMANN * temperature_K

    def part(x: float, level: float) -> float:
        return float(expit(2 * pi * (x * thermal - level) / 8e-3) * expit(x) * expit(-x))

    return sum(quad(part, -40, 40, args=(float(level),), epsabs=1e-12)[0] for level in levels_eV)


def test_saddle_constriction(constriction: Any) -> None:
    curve, closed = constriction
    found = [point.conductance_G0 for point in curve.points]
    assert found == pytest.approx([buettiker(p.energy_eV, 4.2) for p in curve.points], abs=1e-6)
    # Cold steps are hardly rounder than at T = 0: to second order by (pi kT)^2/6 times the curvature of T(E), which is
    # at most (2 pi/hbar omega)^2/(6 sqrt 3) for each mode.
    thermal = BOLTZMANN * 4.2
    most = (pi * thermal) ** 2 / 6 * (2 * pi / 8e-3) ** 2 / (6 * sqrt(3))
    assert found == pytest.approx(list(closed), abs=3 * most)
    assert np.ptp(found) > 2


def test_half_is_transmitted_where_a_step_opens(constriction: Any) -> None:
    step = constriction[0].steps[0]
    assert step.height_G0 == step.plateau_G0 == 1
    problem = ws.load(REPOSITORY / "geometries" / "saddle_constriction.toml")
    there = ws.gate_curve(swept(problem, from_V=step.opens_at_V, to_V=step.opens_at_V + 5e-3, count=2)).points[0]
    # One mode, symmetric in the energy: a tenth of a meV off its opening changes it by 0.02 at most.
    assert there.conductance_G0 == pytest.approx(0.5, abs=0.02)
