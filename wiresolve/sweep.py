"""What solves the points of a gate sweep: one mesh, good at both ends, and each point from the last."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.fem.mesh import Mesh
from wiresolve.gate_result import GatePoint, GateStep, Judged, TransistorPoint
from wiresolve.gate_verdict import gate_steps_of, judged_sweep
from wiresolve.physics import conductance
from wiresolve.physics.capacitance import in_F_per_m, parts, per_V_nm
from wiresolve.physics.charged_subbands import ChargedSubbands, Meshes, certify_charged, certify_on
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.gate_answer import answered, channel_capacitance
from wiresolve.physics.listed_rows import listed_rows
from wiresolve.physics.scale_length import drain_coupling, scale_length_nm
from wiresolve.physics.selfconsistent import Balanced, balance
from wiresolve.physics.thermoelectric import thermoelectric
from wiresolve.physics.transistor import Rows, Transistor
from wiresolve.physics.transmission import Open, Transmission, transmission_of
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]
Progress = Callable[[str, float, str], None]

MIDDLE = 0.5
"""Where the drain's field is taken: half-way along the channel, where the barrier of a symmetric one is highest."""
_EMPTY = 1e-9
"""Below this part of the geometric capacitance an answer says nothing of the channel's capacitance."""


@dataclass
class WireSweep:
    """The points of one problem's sweep, all on one mesh. Keeps the last balance as the next start."""

    problem: Problem
    on_progress: Progress | None = None
    _last: tuple[float, Balanced] | None = field(default=None, repr=False)
    _needs: tuple[int, ...] = field(default=(), repr=False)

    @cached_property
    def charged(self) -> ChargedWire:
        """The wire made ready."""
        return ChargedWire(Wire(self.problem))

    @cached_property
    def _ends(self) -> tuple[ChargedSubbands, ...]:
        """The subbands at both ends of the sweep, for which the mesh is made."""
        voltages, accuracy = self.problem.voltages, self.problem.accuracy
        assert voltages is not None
        ends = [{voltages.gate: v} for v in (voltages.from_V, voltages.to_V)]
        return certify_charged(self.charged, ends, accuracy.subbands, accuracy.energy_eV, self.on_progress)

    @property
    def meshes(self) -> Meshes:
        """The pair of meshes of all points."""
        return self._ends[0].meshes

    @property
    def mesh(self) -> Mesh:
        """The mesh of every point."""
        return self.meshes.coarse

    @property
    def _swept(self) -> str:
        assert self.problem.voltages is not None
        return self.problem.voltages.gate

    @cached_property
    def transmission(self) -> Transmission:
        """What gets through at an energy."""
        return transmission_of(self.problem.transport)

    @cached_property
    def geometric_per_V_nm(self) -> float:
        """The swept gate's capacitance to the section as if it were a metal."""
        return channel_capacitance(self._ends[0].balanced.stage, self._swept)

    @cached_property
    def scale_length_nm(self) -> float:
        """How far the drain's field reaches along the wire."""
        poisson = self.meshes.field
        relative = {(a, a): poisson.permittivity for a in ("x", "y")}
        stiffness = poisson.space.matrix(relative)
        mass = poisson.space.matrix({("1", "1"): poisson.permittivity})
        return scale_length_nm(stiffness, mass, poisson.free)

    def point(self, gate_voltage_V: float, previous: GatePoint | None) -> GatePoint:
        """The point at a voltage of the swept gate.

        Raises
        ------
        ConvergenceError
            Carriers and potential could not be brought to agree.
        """
        solved = self._solved(gate_voltage_V, previous)
        return self._measured(gate_voltage_V, solved)

    def _solved(self, voltage: float, previous: GatePoint | None) -> ChargedSubbands:
        meshes, accuracy = self.meshes, self.problem.accuracy
        stage = self._ends[0].balanced.stage
        held = meshes.field.held_values(self.charged.gate_V({self._swept: voltage}))
        before, guess = None, None
        if previous is not None and self._last is not None and self._last[0] == previous.gate_voltage_V:
            before = self._last[1]
        elif previous is not None and len(previous.potential_V):
            guess = previous.potential_V.copy()
            guess[meshes.field.held] = held
        balanced = balance(stage, held, before, guess)
        self._last = voltage, balanced
        needs = self._needs or self._ends[0].needs
        factor = self._ends[0].bar_factor
        found = certify_on(self.charged, meshes, balanced, needs, accuracy.subbands, accuracy.energy_eV, factor)
        self._needs = found.needs
        return found

    def _measured(self, voltage: float, solved: ChargedSubbands) -> GatePoint:
        problem, balanced = self.problem, solved.balanced
        kelvin, occupied = problem.carriers.temperature_K[0], solved.balanced.occupied
        rows = listed_rows(solved)
        answer = answered(balanced, rows.states, rows.level, self._swept)
        quantum = float(occupied.density_slope_per_eV_nm.sum())
        series = parts(answer.carriers_per_V_nm, self.geometric_per_V_nm, quantum)
        order = np.argsort(occupied.energy_eV, kind="stable")
        energy, degeneracy = occupied.energy_eV[order], occupied.degeneracy[order]
        opened = conductance.openings_of_rows(energy, degeneracy)
        through = conductance.transmitted_conductance(opened, self.transmission, np.array(0.0), kelvin)
        resistance = 0.0 if problem.transport is None else problem.transport.contact_resistance_ohm
        heat = thermoelectric(opened, self.transmission, np.array(0.0), kelvin)
        modes = np.zeros((len(self.mesh.points), len(rows.energy_eV)))
        modes[solved.certified.space.nodes] = rows.states
        return GatePoint(
            gate_voltage_V=voltage,
            voltages_V={gate.name: gate.voltage_V for gate in problem.gates} | {self._swept: voltage},
            energy_eV=rows.energy_eV,
            error_eV=rows.error_eV,
            axial_mass=rows.axial_mass,
            degeneracy=rows.degeneracy,
            valley=rows.valley,
            level=rows.level,
            line_density_by_subband_per_nm=rows.line_density_per_nm,
            line_density_per_nm=occupied.total_per_nm,
            gate_charge_per_nm=balanced.charges_per_nm(),
            capacitance_F_per_m=float(in_F_per_m(series.total_per_V_nm)),
            geometric_F_per_m=float(in_F_per_m(series.geometric_per_V_nm)),
            quantum_F_per_m=float(in_F_per_m(series.quantum_per_V_nm)),
            centroid_F_per_m=float(in_F_per_m(series.centroid_per_V_nm)),
            gate_coupling=float(answer.coupling[0]),
            coupling=answer.coupling,
            conductance_G0=float(conductance.in_series(through, resistance)),
            passes=balanced.passes,
            residual_V=balanced.residual_V,
            gauss_error=balanced.gauss_error,
            converged=True,
            note="",
            potential_V=balanced.potential_V,
            density_per_nm3=balanced.density_at_points(),
            modes=modes,
            more={
                "empty_coupling": answer.empty_coupling,
                "seebeck_V_per_K": float(heat.seebeck_V_per_K),
                "thermal_conductance_W_per_K": float(heat.thermal_conductance_W_per_K),
            },
            filled_energy_eV=energy,
            filled_axial_mass=occupied.axial_mass[order],
            filled_alpha_per_eV=occupied.alpha_per_eV[order],
            filled_degeneracy=degeneracy,
        )

    def steps(self, points: Sequence[GatePoint]) -> tuple[GateStep, ...]:
        """The conductance steps of the listed subbands, those that open together as one."""
        return gate_steps_of(self.problem, points)

    def transistor(self, points: Sequence[GatePoint]) -> tuple[TransistorPoint, ...]:
        """Currents at every drain voltage."""
        found = []
        for point in points:
            device = self.device(point)
            drains = np.array(self._drains)
            run = device.at(0.0, drains)
            found += [
                TransistorPoint(
                    point.gate_voltage_V, float(v), float(i), float(n), device.gate_coupling, device.drain_coupling
                )
                for v, i, n in zip(drains, run.current_A, run.line_density_per_nm, strict=True)
            ]
        return tuple(found)

    @property
    def _drains(self) -> tuple[float, ...]:
        assert self.problem.voltages is not None
        return self.problem.voltages.drain_V

    def device(self, point: GatePoint) -> Transistor:
        """The channel as a transistor whose gate voltage counts from a point's."""
        rows = Rows(point.filled_energy_eV, point.filled_axial_mass, point.filled_degeneracy, point.filled_alpha_per_eV)
        empty = point.more["empty_coupling"]
        total = float(per_V_nm(point.capacitance_F_per_m))
        # dU/dV = -empty + (dn/dV)/C at each point: what of the coupling is lost to charge tells the capacitance.
        capacitance = self.geometric_per_V_nm / max(empty, _EMPTY)
        lost = empty - point.gate_coupling
        if total > _EMPTY * self.geometric_per_V_nm and lost > _EMPTY:
            capacitance = total / lost
        # A saddle's tunnelling belongs to a constriction, not to the top of a long barrier.
        kind = self.transmission if self.transmission.width_eV == 0 else Open()
        kelvin = self.problem.carriers.temperature_K[0]
        return Transistor(rows, kind, kelvin, empty, self.drain_coupling, capacitance, point.line_density_per_nm)

    @cached_property
    def drain_coupling(self) -> float:
        """How far the barrier falls for each volt on the drain; 0 for a channel whose length is not given."""
        transport = self.problem.transport
        if transport is None or transport.length_nm is None or not len(self.meshes.field.held):
            return 0.0
        return float(drain_coupling(self.scale_length_nm, transport.length_nm, MIDDLE))

    def judged(
        self, points: Sequence[GatePoint], steps: tuple[GateStep, ...], run: tuple[TransistorPoint, ...]
    ) -> Judged:
        """The verdict, warnings and the numbers that belong to the whole curve."""
        return judged_sweep(self, points, steps, run)
