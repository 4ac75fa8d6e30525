"""What solves the points of a gate sweep: one mesh, good at both ends, and each point from the last."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.errors import ConvergenceError, InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.gate_result import GatePoint, GateStep, Judged, TransistorPoint
from wiresolve.gate_verdict import OpenStep, measures_of, sentences, steps_of, warnings_of, width_eV
from wiresolve.physics import conductance, remarks
from wiresolve.physics.capacitance import in_F_per_m, parts, per_V_nm
from wiresolve.physics.charge_sentence import where
from wiresolve.physics.charged_subbands import ChargedSubbands, Meshes, certify_charged, certify_on
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.gate_answer import answered, channel_capacitance
from wiresolve.physics.gate_steps import threshold_by_extrapolation_V
from wiresolve.physics.ladder import spectrum_of
from wiresolve.physics.listed_rows import ListedRows, followed_rows, listed_rows
from wiresolve.physics.listing import listing
from wiresolve.physics.opening import opening, subband_eV
from wiresolve.physics.remarks import Remarks
from wiresolve.physics.scale_length import drain_coupling, scale_length_nm
from wiresolve.physics.selfconsistent import Balanced, Stage, balance
from wiresolve.physics.thermoelectric import thermoelectric
from wiresolve.physics.transistor import Rows, Transistor
from wiresolve.physics.transistor_summary import TransistorSummary, transistor_summary
from wiresolve.physics.transmission import Open, Transmission, transmission_of
from wiresolve.physics.wire import Wire
from wiresolve.result import Warned
from wiresolve.step_motion import Motion, step_motions

Array = NDArray[np.float64]
Progress = Callable[[str, float, str], None]

MIDDLE = 0.5
"""Where the drain's field is taken: half-way along the channel, where the barrier of a symmetric one is highest."""
_MOST_SOLVED = 12
"""Steps whose voltage is solved for, not interpolated."""
_CLOSE_eV = 1e-6
_EVEN = 0.01
"""How closely the ends of a step are found, of half its width."""
_EMPTY = 1e-9
"""Below this part of the geometric capacitance an answer says nothing of the channel's capacitance."""


@dataclass
class WireSweep:
    """The points of one problem's sweep, all on one mesh. Keeps the last balance as the next start."""

    problem: Problem
    on_progress: Progress | None = None
    _last: tuple[float, Balanced] | None = field(default=None, repr=False)
    _opened: tuple[OpenStep, ...] | None = field(default=None, repr=False)
    _moved: tuple[Motion, ...] | None = field(default=None, repr=False)

    @cached_property
    def charged(self) -> ChargedWire:
        """The wire made ready."""
        return ChargedWire(Wire(self.problem))

    @cached_property
    def _ends(self) -> tuple[ChargedSubbands, ...]:
        """The subbands at both ends of the sweep, for which the mesh is made, or where they could be solved."""
        voltages, accuracy = self.problem.voltages, self.problem.accuracy
        assert voltages is not None
        first, last = voltages.from_V, voltages.to_V
        # One end may be beyond what can be solved: the mesh is then made for what can.
        for some in ((first, last, (first + last) / 2), (first,), (last,), ((first + last) / 2,)):
            try:
                ends = [{voltages.gate: v} for v in some]
                return certify_charged(self.charged, ends, accuracy.subbands, accuracy.energy_eV, self.on_progress)
            except ConvergenceError as fault:
                reason = str(fault)
            except InputError as fault:
                reason = _beyond(fault)
        raise ConvergenceError(f"neither end of the sweep nor its middle could be solved: {reason}")

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
        return channel_capacitance(self._stage, self._swept)

    @cached_property
    def scale_length_nm(self) -> float:
        """How far the drain's field reaches along the wire."""
        poisson = self.meshes.field
        relative = {(a, a): poisson.permittivity for a in ("x", "y")}
        stiffness = poisson.space.matrix(relative)
        mass = poisson.space.matrix({("1", "1"): poisson.permittivity})
        return scale_length_nm(stiffness, mass, poisson.free)

    @cached_property
    def _stage(self) -> Stage:
        """The mesh with as many states of each group of valleys as the list takes anywhere, and two more."""
        stage = self._ends[0].balanced.stage
        return stage.listing([max(each) for each in zip(*(end.needs for end in self._ends), strict=True)])

    @cached_property
    def _bar_eV(self) -> Array:
        """(wanted,) the widest bar of each listed subband at the voltages for which the mesh is made."""
        return np.asarray(np.max([end.certified.bar_eV for end in self._ends], axis=0))

    def point(self, gate_voltage_V: float, previous: GatePoint | None) -> GatePoint:
        """The point at a voltage of the swept gate.

        Its bars are the widest of those at the voltages for which the mesh was made, and what the balance leaves.

        Raises
        ------
        ConvergenceError
            Carriers and potential could not be brought to agree.
        """
        held, before, guess = self._held(gate_voltage_V), None, None
        if previous is not None and self._last is not None and self._last[0] == previous.gate_voltage_V:
            before = self._last[1]
        elif previous is not None and len(previous.potential_V):
            guess = previous.potential_V.copy()
            guess[self.meshes.field.held] = held
        try:
            balanced = balance(self._stage, held, before, guess)
        except InputError as fault:
            raise ConvergenceError(_beyond(fault)) from fault
        self._last = gate_voltage_V, balanced
        return self._measured(gate_voltage_V, balanced, self._listed(balanced))

    def _listed(self, balanced: Balanced) -> ListedRows:
        """The listed subbands from the balance's own states, or solved for where these are not all."""
        accuracy, first = self.problem.accuracy, self._ends[0]
        rows = followed_rows(balanced, accuracy.subbands, self._bar_eV + balanced.residual_V)
        if rows is not None:
            return rows
        wanted, energy = accuracy.subbands, accuracy.energy_eV
        return listed_rows(
            certify_on(self.charged, self.meshes, balanced, first.needs, wanted, energy, first.bar_factor)
        )

    def _measured(self, voltage: float, balanced: Balanced, rows: ListedRows) -> GatePoint:
        problem = self.problem
        kelvin, occupied = problem.carriers.temperature_K[0], balanced.occupied
        answer = answered(balanced, rows.density_per_nm2, rows.level, self._swept)
        quantum = float(occupied.density_slope_per_eV_nm.sum())
        series = parts(answer.carriers_per_V_nm, self.geometric_per_V_nm, quantum)
        order = np.argsort(occupied.energy_eV, kind="stable")
        energy, degeneracy = occupied.energy_eV[order], occupied.degeneracy[order]
        opened = conductance.openings_of_rows(energy, degeneracy)
        through = conductance.transmitted_conductance(opened, self.transmission, np.array(0.0), kelvin)
        resistance = 0.0 if problem.transport is None else problem.transport.contact_resistance_ohm
        heat = thermoelectric(opened, self.transmission, np.array(0.0), kelvin)
        modes = np.zeros((len(self.mesh.points), len(rows.energy_eV)))
        modes[balanced.stage.carriers.space.nodes] = rows.states
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
            filled_nonparabolicity_per_eV=occupied.alpha_per_eV[order],
            filled_degeneracy=degeneracy,
        )

    def steps(self, points: Sequence[GatePoint]) -> tuple[GateStep, ...]:
        """The conductance steps of the listed subbands, those that open together as one."""
        found = self._steps(points)
        motions = self._motions(found)
        return tuple(
            replace(one.step, moves_V_per_nm=motions[0].per_nm_V[n])
            if motions and n < len(motions[0].per_nm_V)
            else one.step
            for n, one in enumerate(found)
        )

    def _steps(self, points: Sequence[GatePoint]) -> tuple[OpenStep, ...]:
        """The steps, each solved for where its level meets the Fermi level; worked out once."""
        if self._opened is None:
            rough = steps_of(self.problem, points)
            self._opened = tuple(
                self._solved_step(one, points) if n < _MOST_SOLVED else one for n, one in enumerate(rough)
            )
        return self._opened

    def _solved_step(self, one: OpenStep, points: Sequence[GatePoint]) -> OpenStep:
        """The voltage at which a level is at the Fermi level, by secants between the points beside it."""
        rows = sorted(points, key=lambda point: point.gate_voltage_V)
        energies = [(p.gate_voltage_V, float(p.energy_eV[one.subband])) for p in rows]
        low = max((v for v, e in energies if e > 0 and v <= one.step.opens_at_V), default=-math.inf)
        high = min((v for v, e in energies if e <= 0 and v >= one.step.opens_at_V), default=math.inf)
        stage = self._stage
        before = None if self._last is None else self._last[1]

        def energy_at(voltage: float) -> float:
            nonlocal before
            before = balance(stage, self._held(voltage), before)
            return subband_eV(before, one.subband)

        close = 0.1 * max(one.error_eV, _CLOSE_eV)
        try:
            found = opening(energy_at, one.step.opens_at_V, one.coupling, close, low, high)
        except ConvergenceError:
            return one
        coupling = max(found.coupling, 1e-12)
        half = width_eV(self.problem) / 2
        if half > 0:
            # Where the level fills, its coupling falls, up to twenty times within the step: what counts is the mean.
            reach, at = 2 * half / coupling, found.voltage_V
            try:
                before = None if self._last is None else self._last[1]
                first = opening(lambda v: energy_at(v) - half, at - reach / 2, coupling, _EVEN * half, high_V=at)
                last = opening(lambda v: energy_at(v) + half, at + reach / 2, coupling, _EVEN * half, low_V=at)
                coupling = 2 * half / (last.voltage_V - first.voltage_V)
            except ConvergenceError:
                pass
        return one.at(found.voltage_V, coupling, found.rest_eV)

    def _held(self, voltage: float) -> Array:
        """The held potentials at a voltage of the swept gate."""
        return self.meshes.field.held_values(self.charged.gate_V({self._swept: voltage}))

    def _motions(self, found: Sequence[OpenStep]) -> tuple[Motion, ...]:
        """How the steps move with the wire's dimensions; worked out once."""
        if self._moved is None:
            rows = [(one.step, one.subband, one.coupling) for one in found]
            self._moved = step_motions(self.problem, rows, self.on_progress)
        return self._moved

    def transistor(self, points: Sequence[GatePoint]) -> tuple[TransistorPoint, ...]:
        """Currents at every drain voltage."""
        found = []
        for point in points:
            device = self.device(point)
            drains = np.array(self._drains)
            run = device.at(0.0, drains)
            # What the carriers hold back of each volt: their density of states beside the capacitance.
            left = 1 / (1 + device.density_slope(run.level_shift_eV, drains) / device.capacitance_per_V_nm)
            rows = zip(drains, run.current_A, run.line_density_per_nm, left, strict=True)
            found += [
                TransistorPoint(
                    point.gate_voltage_V,
                    float(v),
                    float(i),
                    float(n),
                    float(device.gate_coupling * part),
                    float(device.drain_coupling * part),
                )
                for v, i, n, part in rows
            ]
        return tuple(found)

    @property
    def _drains(self) -> tuple[float, ...]:
        assert self.problem.voltages is not None
        return self.problem.voltages.drain_V

    def device(self, point: GatePoint) -> Transistor:
        """The channel as a transistor whose gate voltage counts from a point's."""
        rows = Rows(
            point.filled_energy_eV,
            point.filled_axial_mass,
            point.filled_degeneracy,
            point.filled_nonparabolicity_per_eV,
        )
        # Half-way the source holds as much as the drain, and of gate and charge what is left.
        empty = point.more["empty_coupling"]
        rest = 1 - 2 * self.drain_coupling
        total = float(per_V_nm(point.capacitance_F_per_m))
        # dU/dV = -empty + (dn/dV)/C at each point: what of the coupling is lost to charge tells the capacitance.
        capacitance = self.geometric_per_V_nm / max(empty, _EMPTY)
        lost = empty - point.gate_coupling
        if total > _EMPTY * min(self.geometric_per_V_nm, 1.0) and lost > _EMPTY:
            capacitance = total / lost
        # A saddle's tunnelling belongs to a constriction, not to the top of a long barrier.
        kind = self.transmission if self.transmission.width_eV == 0 else Open()
        kelvin = self.problem.carriers.temperature_K[0]
        held = point.line_density_per_nm
        return Transistor(rows, kind, kelvin, rest * empty, self.drain_coupling, capacitance / rest, held)

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
        problem, found = self.problem, self._steps(points)
        full = max(self._ends, key=lambda end: end.balanced.occupied.total_per_nm)
        summary = self._summary(points)
        drain = max(self._drains, default=None)
        text = sentences(
            problem, points, found, self._motions(found), where(full.balanced, self.charged.wire), summary, drain
        )
        more: dict[str, float | None] = {"geometric_F_per_m": float(in_F_per_m(self.geometric_per_V_nm))}
        if drain is not None and self.drain_coupling > 0:
            more |= {"scale_length_nm": self.scale_length_nm, "drain_coupling": self.drain_coupling}
        rows = sorted(points, key=lambda point: point.gate_voltage_V)
        if len(rows) > 1 and any(p.capacitance_F_per_m > 0 for p in rows):
            density = [p.line_density_per_nm for p in rows]
            slope = [float(per_V_nm(p.capacitance_F_per_m)) for p in rows]
            more["threshold_by_extrapolation_V"] = threshold_by_extrapolation_V(
                [p.gate_voltage_V for p in rows], density, slope
            )
        for motion in self._motions(found):
            for n, moved in enumerate(motion.per_nm_V, 1):
                more[f"step_{n}_moves_with_{motion.of}_V_per_nm"] = moved
        remarked = self._remarks(full)
        return Judged(
            " ".join(text),
            tuple(Warned(*w) for w in (*warnings_of(points, found), *remarked.warnings)),
            remarked.not_modelled,
            measures_of(found, summary, more),
        )

    def _remarks(self, full: ChargedSubbands) -> Remarks:
        """What is to be said of the wire, at the end of the sweep with most carriers."""
        wire, certified = self.charged.wire, full.certified
        found = listing(wire, certified)
        spectrum = spectrum_of(wire, certified, found)
        total = full.balanced.occupied.total_per_nm
        return remarks.on(remarks.Outcome(wire, certified, found, spectrum, total, full.balanced.function))

    def _summary(self, points: Sequence[GatePoint]) -> TransistorSummary | None:
        """The transistor between the ends of the sweep, at the largest drain voltage."""
        drain = max(self._drains, default=0.0)
        rows = sorted(points, key=lambda point: point.gate_voltage_V)
        if drain <= 0 or len(rows) < 2:
            return None
        off, on = self.device(rows[0]), self.device(rows[-1])
        low = min([v for v in self._drains if v > 0])
        return transistor_summary(off, on, drain, low if low < drain else drain / 2)


def sweep_of(problem: Problem, on_progress: Progress | None = None) -> WireSweep:
    """What solves the points of a problem's sweep."""
    return WireSweep(problem, on_progress)


def _beyond(fault: InputError) -> str:
    """What is wrong at a voltage that takes the masses out of their model; raises any other error again."""
    if fault.field != "carriers.model":
        raise fault
    return str(fault)
