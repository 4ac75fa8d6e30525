"""Gate sweeps made by hand for the tests of the driver and the files: a wire and a plate capacitor in closed form.

All levels of a round hard wall fall together by u. The plates of capacitance C hold the carriers' charge, C (V - u) =
e n(u), and n is that of parabolic subbands: so dE/dV = -C/(C + C_quantum) and 1/C_total = 1/C + 1/C_quantum.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
from scipy import constants
from scipy.optimize import brentq
from scipy.special import expit, jn_zeros

from tests.synthetic import CORE_NM, MASS, RADIUS_NM, round_mesh, round_modes, round_orders
from wiresolve.describe.gates import Gate
from wiresolve.describe.operation import Voltages
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle
from wiresolve.errors import ConvergenceError
from wiresolve.fem.mesh import Mesh
from wiresolve.gate_result import GatePoint, GateStep, Judged, TransistorPoint
from wiresolve.physics.statistics import subband_density
from wiresolve.result import Warned
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, HBAR2_OVER_2M0, KB

GEOMETRIC_F_PER_M, CENTROID_F_PER_M = 3e-10, 2e-9
SERIES_F_PER_M = 1 / (1 / GEOMETRIC_F_PER_M + 1 / CENTROID_F_PER_M)
PER_NM_V = 1e-9 / constants.e
"""From F/m to elementary charges for each nm and volt."""
OPENS_EV = 0.1
"""The first level from the source's Fermi level at no voltage."""
TOML = """title = "A round wire under a wrap gate"
[section]
shape = "circle"
diameter = "16 nm"
material = "GaAs"
[[section.layers]]
thickness = "4 nm"
material = "Al0.3Ga0.7As"
[[gates]]
name = "wrap"
touches = "rim"
lineup_voltage = "0 V"
[voltages]
gate = "wrap"
from = "0 V"
to = "0.3 V"
count = 7
[carriers]
kind = "electrons"
temperature = "77 K"
[accuracy]
subbands = 6
energy = "0.1 meV"
"""


def swept_problem(
    count: int = 7, temperature_K: float = 77.0, drain_V: tuple[float, ...] = (), **others: Any
) -> Problem:
    """A round core in a shell under a wrap gate, swept from 0 to 0.3 V."""
    fields: dict[str, Any] = {
        "title": "A round wire under a wrap gate",
        "section": Section(Circle(2 * CORE_NM), "GaAs", (Layer(RADIUS_NM - CORE_NM, "Al0.3Ga0.7As"),)),
        "carriers": Carriers(temperature_K=(temperature_K,)),
        "accuracy": Accuracy(subbands=6, energy_eV=1e-4),
        "gates": (Gate("wrap", ("rim",), lineup_voltage_V=0.0),),
        "voltages": Voltages("wrap", 0.0, 0.3, count, drain_V),
    }
    return Problem(**(fields | others))


@cache
def _mesh() -> Mesh:
    return round_mesh(6.0)


class PlateSweep:
    """Solves points in closed form; counts them; may fail at some voltages, or be stopped at one.

    `failing` are places of the sweep from 0, `stopping` maps one to what is raised there, `delay_s` slows it down.
    """

    def __init__(
        self,
        problem: Problem,
        failing: Iterable[int] = (),
        stopping: dict[int, BaseException] | None = None,
        delay_s: float = 0.0,
        **judged: Any,
    ) -> None:
        self.problem, self.mesh, self.asked, self.starts = problem, _mesh(), [], []
        self._failing, self._stopping, self._delay_s = set(failing), stopping or {}, delay_s
        self._judged = judged
        orders = round_orders(problem.accuracy.subbands)
        zeros = np.array([jn_zeros(m, n)[-1] for m, n, _ in orders])
        above = HBAR2_OVER_2M0 / MASS * (zeros / RADIUS_NM) ** 2
        self.energy_eV = OPENS_EV + above - above[0]
        self.level = np.unique(above.round(9), return_inverse=True)[1].astype(np.int64) + 1
        self.modes = round_modes(self.mesh.points, orders)

    def point(self, gate_voltage_V: float, previous: GatePoint | None) -> GatePoint:
        voltages = self.problem.voltages
        assert voltages is not None
        place = voltages.points.index(gate_voltage_V)
        self.asked.append(place)
        self.starts.append(None if previous is None else previous.gate_voltage_V)
        time.sleep(self._delay_s)
        if place in self._stopping:
            raise self._stopping[place]
        if place in self._failing:
            raise ConvergenceError(f"the residual stays at 2 mV after 40 passes at {gate_voltage_V:g} V")
        return self._solved(gate_voltage_V)

    def _solved(self, voltage: float) -> GatePoint:
        kelvin = self.problem.carriers.temperature_K[0]

        def density(u: float) -> Any:
            return subband_density(self.energy_eV - u, MASS, 2, 0.0, kelvin)

        def excess(u: float) -> float:
            return SERIES_F_PER_M * PER_NM_V * (voltage - u) - float(density(u).sum())

        u = float(brentq(excess, voltage - 10.0, voltage, xtol=1e-15))
        step = 1e-5
        quantum = float((density(u + step) - density(u - step)).sum()) / (2 * step) / PER_NM_V
        coupling = SERIES_F_PER_M / (SERIES_F_PER_M + quantum)
        energy, each = self.energy_eV - u, density(u)
        thermal = KB * kelvin
        opened = expit(-energy / thermal) if thermal else (energy < 0).astype(float)
        total = float(each.sum())
        return GatePoint(
            gate_voltage_V=voltage,
            voltages_V={gate.name: voltage for gate in self.problem.gates},
            energy_eV=energy,
            error_eV=np.full(len(energy), 2e-5),
            axial_mass=np.full(len(energy), MASS),
            degeneracy=np.full(len(energy), 2, dtype=np.int64),
            valley=("zone centre",) * len(energy),
            level=self.level,
            line_density_by_subband_per_nm=each,
            line_density_per_nm=total,
            gate_charge_per_nm={"wrap": total},
            capacitance_F_per_m=quantum * coupling,
            geometric_F_per_m=GEOMETRIC_F_PER_M,
            quantum_F_per_m=quantum,
            centroid_F_per_m=CENTROID_F_PER_M,
            gate_coupling=coupling,
            coupling=np.full(len(energy), coupling),
            conductance_G0=float(opened.sum()),
            passes=4,
            residual_V=3e-8,
            gauss_error=2e-11,
            converged=True,
            note="",
            potential_V=u - 1e-3 * np.hypot(*self.mesh.points.T) ** 2,
            density_per_nm3=self.modes**2 @ each,
            modes=self.modes,
            more={"level_spacing_eV": float(self.energy_eV[1] - self.energy_eV[0])},
        )

    def transistor(self, points: Sequence[GatePoint]) -> tuple[TransistorPoint, ...]:
        """The current at an unmoved barrier: differences of the contacts' Fermi functions, integrated."""
        voltages, thermal = self.problem.voltages, KB * self.problem.carriers.temperature_K[0]
        assert voltages is not None
        found = []
        for point in points:
            for drain in voltages.drain_V:
                filled = np.logaddexp(0, -point.energy_eV / thermal) - np.logaddexp(
                    0, (-drain - point.energy_eV) / thermal
                )
                current = CONDUCTANCE_QUANTUM_SIEMENS * thermal * float(filled.sum())
                density, coupling = point.line_density_per_nm, point.gate_coupling
                found.append(TransistorPoint(point.gate_voltage_V, drain, current, density, coupling, 0.0))
        return tuple(found)

    def steps(self, points: Sequence[GatePoint]) -> tuple[GateStep, ...]:
        """Where each level is at the Fermi level: its u is known there, and V = u + e n(u)/C; the width is 3.53 kT
        over the coupling there."""
        found, plateau = [], 0.0
        kelvin = self.problem.carriers.temperature_K[0]
        for level in range(1, int(self.level.max()) + 1):
            first = int(np.flatnonzero(self.level == level)[0])
            energy = [float(p.energy_eV[first]) for p in points]
            height = float((self.level == level).sum())
            plateau += height
            opens, width = math.nan, math.nan
            if energy[-1] < 0 < energy[0]:
                u = float(self.energy_eV[first])
                opens = u + float(subband_density(self.energy_eV - u, MASS, 2, 0.0, kelvin).sum()) / (
                    SERIES_F_PER_M * PER_NM_V
                )
                width = 3.53 * KB * kelvin / self._solved(opens).gate_coupling
            found.append(GateStep(level, "zone centre", opens, 1e-4, height, plateau, width, -0.01, int(height)))
        return tuple(found)

    def judged(
        self, points: Sequence[GatePoint], steps: tuple[GateStep, ...], transistor: tuple[TransistorPoint, ...]
    ) -> Judged:
        return replace(Judged(f"{len(points)} points; the first step opens below 0.2 V."), **self._judged)


WARNED = Warned("open-barrier", "The barrier is 4 nm thick and leaks.", "Make the shell thicker.")


def recording(into: list[PlateSweep], **how: Any) -> Callable[..., PlateSweep]:
    """A solver that keeps the sweeps it makes in a list."""

    def made(problem: Problem, on_progress: object = None) -> PlateSweep:
        into.append(PlateSweep(problem, **how))
        return into[-1]

    return made
