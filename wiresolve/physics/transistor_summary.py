"""What a transistor is judged by: on- and off-current, subthreshold slope, barrier lowering, injection velocity."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wiresolve.errors import InputError
from wiresolve.physics.transistor import Transistor
from wiresolve.physics.transmission import Open


@dataclass(frozen=True)
class TransistorSummary:
    """Of one transistor between two gate voltages at one drain voltage.

    `ballistic_part` is the on-current over that of the same channel with every carrier transmitted, at the same gate
    voltage. `barrier_lowering_mV_per_V` is taken at the off-current, between the low and the full drain voltage; it and
    the slope are NaN where nothing flows (T = 0).
    """

    on_current_A: float
    off_current_A: float
    ballistic_part: float
    transconductance_S: float
    injection_velocity_m_per_s: float
    on_density_per_nm: float
    subthreshold_slope_mV_per_decade: float
    barrier_lowering_mV_per_V: float


def transistor_summary(
    transistor: Transistor, off_gate_V: float, on_gate_V: float, drain_V: float, low_drain_V: float
) -> TransistorSummary:
    """The figures of merit; subthreshold slope at the off, all others at the on gate voltage.

    Raises
    ------
    InputError : for gate voltages that do not ascend, or drain voltages that are not 0 < low < full.
    """
    if not off_gate_V < on_gate_V:
        raise InputError("on_gate_V", "must lie above the off voltage", (off_gate_V, on_gate_V))
    if not 0 < low_drain_V < drain_V:
        raise InputError("low_drain_V", "must be positive and below the full drain voltage", (low_drain_V, drain_V))
    points = transistor.at(np.array([off_gate_V, on_gate_V]), drain_V)
    off, on = (float(current) for current in points.current_A)
    ballistic = float(replace(transistor, transmission=Open()).at(on_gate_V, drain_V).current_A)
    slope = lowering = float("nan")
    if off > 0:
        slope = float(transistor.subthreshold_slope_mV_per_decade(off_gate_V, drain_V))
        lowering = transistor.barrier_lowering_mV_per_V(off, low_drain_V, drain_V)
    return TransistorSummary(
        on_current_A=on,
        off_current_A=off,
        ballistic_part=on / ballistic if ballistic > 0 else float("nan"),
        transconductance_S=float(transistor.transconductance(on_gate_V, drain_V)),
        injection_velocity_m_per_s=float(points.injection_velocity_m_per_s[1]),
        on_density_per_nm=float(points.line_density_per_nm[1]),
        subthreshold_slope_mV_per_decade=slope,
        barrier_lowering_mV_per_V=lowering,
    )
