"""Measured points that lie where nothing was computed, and how far gate voltages are apart then."""

from __future__ import annotations

import math

import numpy as np

from wiresolve.gate_result import GateCurve
from wiresolve.output.measured import Measured
from wiresolve.result import Result


def outside(measured: Measured, low: float, high: float) -> int:
    """How many points lie below `low` or above `high`, in the unit of `x`."""
    return int(((measured.x < low) | (measured.x > high)).sum())


def first_passes(measured: Measured, conductance_G0: float) -> float:
    """Where the conductance first passes a value from below, `x` rising; NaN where it does not.

    Straight lines join the points; of several at one `x` the mean counts.
    """
    x, place = np.unique(measured.x, return_inverse=True)
    value = np.bincount(place, weights=measured.conductance_G0) / np.bincount(place)
    rises = np.flatnonzero((value[:-1] < conductance_G0) & (value[1:] >= conductance_G0))
    if not len(rises):
        return math.nan
    n = int(rises[0])
    part = (conductance_G0 - value[n]) / (value[n + 1] - value[n])
    return float(x[n] + part * (x[n + 1] - x[n]))


def lineup_shift_V(measured: Measured, opens_at_V: float, plateau_G0: float, height_G0: float) -> float:
    """By how much the swept gate's line-up voltage is to be moved for a computed step to lie on the measured one.

    The measured step is where its conductance first passes the middle of the computed one, `height_G0` / 2 below
    `plateau_G0`; NaN where it does not. Moving the line-up voltage of the swept gate moves all steps by the same.
    """
    return first_passes(measured, plateau_G0 - height_G0 / 2) - opens_at_V


def missed_by_sweep(curve: GateCurve, measured: Measured) -> str:
    """What to say where measured points lie outside of a sweep; empty where none does."""
    at = [point.gate_voltage_V for point in curve.points]
    count = outside(measured, min(at), max(at))
    if not count:
        return ""
    said = _counted(count, measured, f"the sweep, {min(at):.6g} V to {max(at):.6g} V")
    step = next((s for s in curve.steps if math.isfinite(s.opens_at_V)), None)
    if step is None:
        return f"{said}; no step opens in it that could be compared"
    middle = step.plateau_G0 - step.height_G0 / 2
    shift = lineup_shift_V(measured, step.opens_at_V, step.plateau_G0, step.height_G0)
    computed = f"the first computed step opens at {step.opens_at_V:.3g} V"
    if not math.isfinite(shift):
        return f"{said}; {computed}, and the measured conductance nowhere rises through its middle, {middle:.3g} G0"
    gate = next(g for g in curve.problem.gates if g.name == curve.swept)
    key, new = "lineup_voltage", f"{curve.problem.lineup_V(gate) + shift:.4g} V"
    if gate.work_function_eV is not None:
        key, new = "work_function", f"{gate.work_function_eV + shift:.4g} eV"
    return (
        f"{said}; {computed}, the measured conductance passes its middle, {middle:.3g} G0, at"
        f' {step.opens_at_V + shift:.3g} V: {key} = "{new}" for gate {gate.name}, and a sweep moved by as much'
        f" ({shift:+.4g} V), would lay one upon the other"
    )


def missed_by_curves(result: Result, measured: Measured) -> str:
    """What to say where measured points lie outside of the Fermi levels shown; empty where none does."""
    from wiresolve.output.conductance_figure import shown_meV

    low, high = shown_meV(result)
    count = outside(measured, 1e-3 * low, 1e-3 * high)
    return _counted(count, measured, f"the Fermi levels shown, {low:.4g} meV to {high:.4g} meV") if count else ""


def _counted(count: int, measured: Measured, what: str) -> str:
    lie = "point lies" if len(measured.x) == 1 else "points lie"
    return f"{count} of {len(measured.x)} measured {lie} outside of {what}"
