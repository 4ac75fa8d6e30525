"""The steps of a sweep, and what is said of it in words."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.gate_result import GatePoint, GateStep
from wiresolve.physics.capacitance import limit_text
from wiresolve.physics.conductance import in_series
from wiresolve.physics.gate_steps import THERMAL_WIDTH_KT, gate_steps, step_width_eV
from wiresolve.physics.spread import in_words
from wiresolve.physics.transistor_summary import TransistorSummary
from wiresolve.physics.transmission import transmission_of
from wiresolve.physics.wording import line_density, with_bar
from wiresolve.step_motion import Motion

Array = NDArray[np.float64]

HALF_nm = 0.5
PLATEAU_WIDTHS, SHOULDER_WIDTHS = 10 / THERMAL_WIDTH_KT, 4 / THERMAL_WIDTH_KT
"""Equal steps 10 kT apart have 95 % of contrast between them, 4 kT apart 22 %: in widths of 3.53 kT."""
_STEPS = 3


@dataclass(frozen=True)
class OpenStep:
    """A step with the number of its lowest subband by energy (from 0), and coupling and error bar where it opens."""

    step: GateStep
    subband: int
    coupling: float
    error_eV: float

    def at(self, voltage_V: float, coupling: float, rest_eV: float) -> OpenStep:
        """The same at a voltage where its level is within `rest_eV` of the Fermi level."""
        step = replace(
            self.step,
            opens_at_V=voltage_V,
            error_V=(self.error_eV + rest_eV) / coupling,
            width_V=self.step.width_V * self.coupling / coupling,
        )
        return replace(self, step=step, coupling=coupling)


def steps_of(problem: Problem, points: Sequence[GatePoint]) -> tuple[OpenStep, ...]:
    """Where the listed subbands meet the Fermi level; subbands that do within their errors are one step."""
    if len(points) < 2:
        return ()
    rows = sorted(points, key=lambda point: point.gate_voltage_V)
    kelvin = problem.carriers.temperature_K[0]
    energy, coupling, error = (
        np.array([getattr(p, name) for p in rows]) for name in ("energy_eV", "coupling", "error_eV")
    )
    found = gate_steps([p.gate_voltage_V for p in rows], energy, coupling, error, kelvin)
    # Where groups of valleys cross, a number in the list is another subband farther on: that where it opens counts.
    after = [int(np.argmax(below)) if (below := energy[:, n] <= 0).any() else -1 for n in range(energy.shape[1])]
    degeneracy = np.array([rows[i].degeneracy[n] for n, i in enumerate(after)])
    valley = [rows[i].valley[n] for n, i in enumerate(after)]
    order = np.argsort(np.where(np.isfinite(found.voltage_V), found.voltage_V, np.inf), kind="stable")
    steps: list[OpenStep] = []
    # What is open where the sweep begins keeps its place in the count.
    open_before = rows[0].energy_eV < 0
    before = len(np.unique(rows[0].level[open_before]))
    through = transmission_of(problem.transport).part(np.arange(energy.shape[1]))
    resistance = 0.0 if problem.transport is None else problem.transport.contact_resistance_ohm
    modes, members = float((rows[0].degeneracy * through)[open_before].sum()) / 2, list[int]()
    below_G0 = float(in_series(modes, resistance))
    for place, n in enumerate(order):
        members.append(int(n))
        following = order[place + 1] if place + 1 < len(order) else None
        if following is not None and _together(found.voltage_V, found.error_V, int(n), int(following)):
            continue
        if not math.isfinite(found.voltage_V[n]):
            break
        modes += float((degeneracy * through)[members].sum()) / 2
        plateau_G0, first = float(in_series(modes, resistance)), members[0]
        step = GateStep(
            level=before + len(steps) + 1,
            valley=valley[first],
            opens_at_V=float(np.mean(found.voltage_V[members])),
            error_V=float(np.max(found.error_V[members])),
            height_G0=plateau_G0 - below_G0,
            plateau_G0=plateau_G0,
            width_V=width_eV(problem) / float(found.coupling[first]),
            subbands=len(members),
        )
        bar = float(found.error_V[first] * found.coupling[first])
        steps.append(OpenStep(step, min(members), float(found.coupling[first]), bar))
        members, below_G0 = [], plateau_G0
    return tuple(steps)


def width_eV(problem: Problem) -> float:
    """How wide a step is in energy (`gate_steps.step_width_eV`)."""
    curvature = None if problem.transport is None else problem.transport.saddle_curvature_eV
    return step_width_eV(problem.carriers.temperature_K[0], curvature)


def _together(voltage: Array, error: Array, one: int, other: int) -> bool:
    if not (math.isfinite(voltage[one]) and math.isfinite(voltage[other])):
        return math.isfinite(voltage[one]) == math.isfinite(voltage[other])
    return bool(abs(voltage[other] - voltage[one]) <= error[one] + error[other])


def warnings_of(points: Sequence[GatePoint], steps: Sequence[OpenStep]) -> list[tuple[str, str, str]]:
    """Warnings (code, text, remedy) on what the list of subbands, or the points of the sweep, leave out."""
    rows = sorted(points, key=lambda point: point.gate_voltage_V)
    last, notes = rows[-1], []
    filled, listed = int((last.filled_energy_eV < 0).sum()), int((last.energy_eV < 0).sum())
    if filled > listed:
        text = (
            f"at {last.gate_voltage_V:.4g} V {filled} subbands lie below the Fermi level and {len(last.energy_eV)} are"
        )
        text += " listed: further steps open that are not told"
        notes.append(("steps-unlisted", text, f"ask for subbands = {filled + 2} under [accuracy]"))
    widths = [one.step.width_V for one in steps if math.isfinite(one.step.width_V)]
    apart = max((b.gate_voltage_V - a.gate_voltage_V for a, b in pairwise(rows)), default=0.0)
    if widths and 0 < min(widths) < apart:
        count = math.ceil((last.gate_voltage_V - rows[0].gate_voltage_V) / min(widths)) + 1
        text = f"points of the sweep are up to {apart:.3g} V apart, and the narrowest step is {min(widths):.2g} V wide:"
        text += " the columns of gate_curve.csv show no staircase; figures and report draw it from levels interpolated"
        text += " between the points and the openings, which are solved for"
        notes.append(("sweep-coarse", text, f"sweep a shorter way, or in count = {count} points"))
    return notes


def sentences(
    problem: Problem,
    points: Sequence[GatePoint],
    steps: Sequence[OpenStep],
    motions: Sequence[Motion],
    where: str,
    run: TransistorSummary | None,
    drain_V: float | None,
) -> list[str]:
    """The verdict on a sweep, sentence by sentence.

    Parameters
    ----------
    where : where the carriers sit at the end of the sweep that holds most of them.
    run : the transistor between the ends of the sweep, at the largest drain voltage.
    """
    rows = sorted(points, key=lambda point: point.gate_voltage_V)
    last = max(points, key=lambda point: point.line_density_per_nm)
    kelvin = problem.carriers.temperature_K[0]
    said = [_opening(problem, rows, steps, kelvin)]
    said += [_moved(steps, motions)] if motions else []
    if last.line_density_per_nm > 0 and last.quantum_F_per_m > 0:
        limit, geometry = limit_text(last.quantum_F_per_m, last.geometric_F_per_m), ""
        state = "the gate lies on the channel itself"
        if math.isfinite(last.geometric_F_per_m):
            state = f"the channel is {limit}"
            geometry = f"{1e9 * last.geometric_F_per_m:.3g} nF/m by geometry and "
        said.append(
            f"At {last.gate_voltage_V:.4g} V {state}: the gate's capacitance is"
            f" {1e9 * last.capacitance_F_per_m:.3g} nF/m, of {geometry}"
            f"{1e9 * last.quantum_F_per_m:.3g} nF/m by the density of states; a volt on the gate moves the first level"
            f" by {last.gate_coupling:.3g} eV."
        )
        said.append(f"It holds {line_density(last.line_density_per_nm)} there, {where}.")
    if run is not None and drain_V is not None:
        said.append(_as_transistor(run, drain_V, rows))
    said.append(_rests_on(problem))
    return said


def _opening(problem: Problem, rows: Sequence[GatePoint], steps: Sequence[OpenStep], kelvin: float) -> str:
    assert problem.voltages is not None
    gate, first, final = problem.voltages.gate, rows[0], rows[-1]
    span = f"between {first.gate_voltage_V:.4g} V and {final.gate_voltage_V:.4g} V on gate '{gate}'"
    if not steps:
        state = "open" if first.energy_eV[0] < 0 else "closed"
        return f"Design estimate: no listed subband opens {span}; the first is {state} where the sweep begins."
    some = [s.step for s in steps[:_STEPS]]
    opened = _listed([f"{with_bar(s.opens_at_V, s.error_V)} V" for s in some])
    text = f"Design estimate: {span}, {_counted(len(some), 'step')} open at {opened}"
    if len(steps) > len(some):
        least = "at least " if (rows[-1].filled_energy_eV < 0).sum() > (rows[-1].energy_eV < 0).sum() else ""
        text = f"Design estimate: {span}, {least}{len(steps)} steps open, the first {len(some)} at {opened}"
    heights = _listed([f"{s.height_G0:.3g}" for s in some])
    text += f", of {heights} G0"
    width = width_eV(problem)
    if width > 0:
        each = "" if len(some) == 1 else "the first "
        text += f", {each}{1e3 * some[0].width_V:.3g} mV wide at {kelvin:g} K ({1e3 * width:.3g} meV over the coupling)"
        text += _told_apart(some, final.gate_voltage_V - first.gate_voltage_V)
    already = len(np.unique(first.level[first.energy_eV < 0]))
    if already:
        text += f"; {_counted(already, 'level')} {'is' if already == 1 else 'are'} open where the sweep begins"
    return text + "."


def _told_apart(steps: Sequence[GateStep], span_V: float) -> str:
    """Whether a plateau is seen between the first two steps: about 10 kT apart they are, below 2.6 kT they are one."""
    if len(steps) < 2:
        return ", wider than the sweep: no plateau is seen" if steps[0].width_V > span_V else ""
    apart = (steps[1].opens_at_V - steps[0].opens_at_V) / steps[0].width_V
    if apart >= PLATEAU_WIDTHS:
        return ", far enough apart for a plateau after the first"
    if apart >= SHOULDER_WIDTHS:
        return ", so close that the first leaves a shoulder and no plateau"
    return ", so close that the first two cannot be told apart"


def _moved(steps: Sequence[OpenStep], motions: Sequence[Motion]) -> str:
    rows = []
    for motion in motions:
        small = HALF_nm if motion.value_nm >= 5 else 0.1
        size = "half a nanometre" if small == HALF_nm else "a tenth of a nanometre"
        by = _listed([f"{1e3 * small * v:+.2g}" for v in motion.per_nm_V])
        rows.append(f"{size} more of {in_words(motion.of)} by {by} mV")
    count = len(motions[0].per_nm_V)
    what = "The first step moves" if count == 1 else f"The first {count} steps move"
    return f"{what} with {'; with '.join(rows)}."


def _as_transistor(run: TransistorSummary, drain_V: float, rows: Sequence[GatePoint]) -> str:
    low, high = rows[0].gate_voltage_V, rows[-1].gate_voltage_V
    text = f"As a transistor at {drain_V:g} V on the drain it carries {_amperes(run.on_current_A)} at {high:.4g} V and"
    text += f" {_amperes(run.off_current_A)} at {low:.4g} V"
    if math.isfinite(run.subthreshold_slope_mV_per_decade):
        text += f", {run.subthreshold_slope_mV_per_decade:.3g} mV a decade there"
    if math.isfinite(run.injection_velocity_m_per_s):
        text += f"; carriers enter at {run.injection_velocity_m_per_s:.2g} m/s"
    if run.ballistic_part < 0.999:
        text += f" and scattering leaves {100 * run.ballistic_part:.0f} % of the ballistic current"
    return text + "."


def _rests_on(problem: Problem) -> str:
    work = [g for g in problem.gates if g.work_function_eV is not None]
    scale = "the work function and the affinity" if work else "the line-up voltage"
    text = f"All voltages rest on {scale} given and on "
    charged = any(surface.charge_per_nm2 is not None for surface in problem.surfaces)
    text += "the charges given" if charged else "an insulator without charge of its own"
    if any(surface.pinned_at_eV is not None for surface in problem.surfaces):
        text += " and a surface that stays pinned"
    transport = problem.transport
    if transport is None or transport.is_open:
        text += ", step heights and currents on contacts and a channel that scatter nothing"
    return text + "."


def _amperes(current: float) -> str:
    for factor, unit in ((1e3, "mA"), (1e6, "uA"), (1e9, "nA"), (1e12, "pA")):
        if abs(current) * factor >= 1:
            return f"{current * factor:.3g} {unit}"
    return f"{current:.2g} A"


def _listed(parts: Sequence[str]) -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"


def _counted(number: int, noun: str) -> str:
    return f"one {noun}" if number == 1 else f"{number} {noun}s"


def measures_of(
    steps: Sequence[OpenStep], run: TransistorSummary | None, more: Mapping[str, float | None]
) -> dict[str, float | None]:
    """The numbers of a whole curve by names with units as suffixes."""
    found: dict[str, float | None] = {"threshold_by_first_level_V": steps[0].step.opens_at_V if steps else None}
    if run is not None:
        found |= {
            "on_current_A": run.on_current_A,
            "off_current_A": run.off_current_A,
            "ballistic_part": run.ballistic_part,
            "subthreshold_slope_mV_per_decade": run.subthreshold_slope_mV_per_decade,
            "barrier_lowering_mV_per_V": run.barrier_lowering_mV_per_V,
            "injection_velocity_m_per_s": run.injection_velocity_m_per_s,
            "transconductance_S": run.transconductance_S,
        }
    return found | dict(more)
