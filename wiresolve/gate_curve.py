"""The driver of a gate sweep: asks for its points in order, goes on after one that fails, and joins finished ones."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping, Sequence
from types import MappingProxyType
from typing import Protocol

from wiresolve.describe.problem import Problem, require_problem
from wiresolve.errors import ConvergenceError, InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.gate_result import GateCurve, GatePoint, GateStep, Judged, TransistorPoint, failed_point
from wiresolve.physics.pace import rounded_time

__all__ = ["GateCurve", "GatePoint", "GateStep", "Judged", "Sweep", "TransistorPoint", "checked", "gate_curve"]

Progress = Callable[[str, float, str], None]
_NONE: Mapping[int, GatePoint] = MappingProxyType({})


class Sweep(Protocol):
    """What solves the points of one problem, all on one mesh."""

    @property
    def mesh(self) -> Mesh:
        """The mesh of every point."""

    def point(self, gate_voltage_V: float, previous: GatePoint | None) -> GatePoint:
        """The point at a voltage of the swept gate, with the last good one as a start.

        Raises
        ------
        ConvergenceError
            The point cannot be solved.
        """

    def transistor(self, points: Sequence[GatePoint]) -> tuple[TransistorPoint, ...]:
        """Currents at every drain voltage; `points` are those that converged, in the order of the sweep."""

    def steps(self, points: Sequence[GatePoint]) -> tuple[GateStep, ...]:
        """The conductance steps, from the same points."""

    def judged(
        self, points: Sequence[GatePoint], steps: tuple[GateStep, ...], transistor: tuple[TransistorPoint, ...]
    ) -> Judged:
        """The verdict, the warnings and the numbers that belong to the whole curve."""


Solver = Callable[[Problem], Sweep]


def solver_of(problem: Problem, on_progress: Progress | None = None) -> Sweep:
    """The sweep of finite elements; it tells of its meshes and of what it solves after the points."""
    from wiresolve.sweep import sweep_of

    return sweep_of(problem, on_progress)


def checked(problem: Problem) -> Problem:
    """The problem, if it has a gate and a sweep.

    Raises
    ------
    InputError
        It has none.
    """
    require_problem(problem)
    if not problem.gates:
        remedy = 'write [[gates]] with name, touches and lineup_voltage, and [voltages] with gate = "NAME"'
        raise InputError("gates", "are missing: there is no gate to sweep", remedy=remedy)
    if problem.voltages is None:
        remedy = f'write [voltages] with gate = "{problem.gates[0].name}", from = "0 V", to = "1 V" and count = 21'
        raise InputError("voltages", "is missing: it says which gate is swept", remedy=remedy)
    return problem


def gate_curve(
    problem: Problem,
    on_progress: Progress | None = None,
    finished: Mapping[int, GatePoint] = _NONE,
    on_point: Callable[[int, GatePoint], None] | None = None,
    solver: Solver | None = None,
) -> GateCurve:
    """Solve a problem at every voltage of its sweep.

    A point that does not converge is kept as such, and the next one starts from the last good one.

    Parameters
    ----------
    problem : with gates and voltages.
    on_progress : called with (stage, fraction done, detail) before each point.
    finished : points that are solved already, by their place in the sweep (from 0), on the mesh of this solver.
    on_point : called with the place and the point as soon as one is solved or has failed.
    solver : makes what solves the points (default: by finite elements).

    Raises
    ------
    InputError, MeshError
        There is no sweep, a finished point belongs to another one, or the section cannot be meshed.
    ConvergenceError
        No point converged at all.
    """
    from threadpoolctl import threadpool_limits

    from wiresolve.solve import versions

    voltages = checked(problem).voltages
    assert voltages is not None
    given = {gate.name: float(gate.voltage_V) for gate in problem.gates}
    at, points = voltages.points, []
    if on_progress is not None:
        on_progress("mesh", 0.0, "")
    # More BLAS threads only get in each other's way at these sizes.
    with threadpool_limits(limits=1, user_api="blas"):
        sweep = solver(problem) if solver is not None else solver_of(problem, on_progress)
        _check_finished(finished, at, sweep.mesh)
        left = _TimeLeft(len(at), len(finished))
        last: GatePoint | None = None
        for place, voltage in enumerate(at):
            point = finished.get(place)
            if point is None:
                if on_progress is not None:
                    on_progress("gate voltage", place / len(at), left.text(place))
                try:
                    point = sweep.point(voltage, last)
                except ConvergenceError as fault:
                    point = failed_point({**given, voltages.gate: voltage}, voltages.gate, str(fault))
                left.count()
                if on_point is not None:
                    on_point(place, point)
            points.append(point)
            last = point if point.converged else last
        good = tuple(p for p in points if p.converged)
        if not good:
            reason = f"the first, at {at[0]:g} V: {points[0].note}"
            raise ConvergenceError(f"none of the {len(at)} points converged; {reason}")
        if on_progress is not None:
            on_progress("steps", 1.0, "")
        steps = sweep.steps(good)
        transistor = sweep.transistor(good) if voltages.drain_V else ()
        judged = sweep.judged(good, steps, transistor)
    return GateCurve(
        problem=problem,
        mesh=sweep.mesh,
        points=tuple(points),
        steps=steps,
        transistor=transistor,
        verdict_text=judged.verdict_text,
        warnings=judged.warnings,
        not_modelled=judged.not_modelled,
        measures=judged.measures,
        versions=versions(),
    )


def _check_finished(finished: Mapping[int, GatePoint], at: Sequence[float], mesh: Mesh) -> None:
    """InputError where a finished point is not of this sweep."""
    for place, point in finished.items():
        if not (0 <= place < len(at) and point.gate_voltage_V == at[place]):
            raise InputError("finished", "holds a point that is not of this sweep", f"{point.gate_voltage_V:g} V")
        if point.converged and len(point.potential_V) != len(mesh.points):
            raise InputError("finished", "holds a point on another mesh", f"{point.gate_voltage_V:g} V")


class _TimeLeft:
    """How long the rest of a sweep will take, judged by the points solved in this run."""

    def __init__(self, total: int, finished: int) -> None:
        self._total, self._to_do, self._done = total, total - finished, 0
        self._begun = time.perf_counter()

    def count(self) -> None:
        """One more point is done."""
        self._done += 1

    def text(self, place: int) -> str:
        """For example "12 of 50, about 20 s left"."""
        text = f"{place + 1} of {self._total}"
        if not self._done:
            return text
        seconds = (time.perf_counter() - self._begun) / self._done * (self._to_do - self._done)
        return f"{text}, about {rounded_time(seconds)} left"
