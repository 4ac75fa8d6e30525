"""What a transistor is judged by: on- and off-current, subthreshold slope, barrier lowering, injection velocity."""

from __future__ import annotations

from dataclasses import dataclass, replace

from wiresolve.errors import InputError
from wiresolve.physics.transistor import Transistor
from wiresolve.physics.transmission import Open


@dataclass(frozen=True)
class TransistorSummary:
    """Of one channel at two gate voltages and one drain voltage.

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
    off: Transistor,
    on: Transistor,
    drain_V: float,
    low_drain_V: float,
    off_gate_V: float = 0.0,
    on_gate_V: float = 0.0,
) -> TransistorSummary:
    """The figures of merit of a channel that is known at two gate voltages: subthreshold slope at the off one, all
    others at the on one.

    Parameters
    ----------
    off, on : the same channel, each with its gate voltage counted from where its states are known.
    off_gate_V, on_gate_V : the two gate voltages, counted so.

    Raises
    ------
    InputError : for drain voltages that are not 0 < low < full.
    """
    if not 0 < low_drain_V < drain_V:
        raise InputError("low_drain_V", "must be positive and below the full drain voltage", (low_drain_V, drain_V))
    closed, opened = off.at(off_gate_V, drain_V), on.at(on_gate_V, drain_V)
    least, most = float(closed.current_A), float(opened.current_A)
    ballistic = float(replace(on, transmission=Open()).at(on_gate_V, drain_V).current_A)
    slope = lowering = float("nan")
    if least > 0:
        slope = float(off.subthreshold_slope_mV_per_decade(off_gate_V, drain_V))
        try:
            lowering = off.barrier_lowering_mV_per_V(least, low_drain_V, drain_V)
        except InputError:  # that current cannot flow at the low drain voltage at all
            lowering = float("nan")
    return TransistorSummary(
        on_current_A=most,
        off_current_A=least,
        ballistic_part=most / ballistic if ballistic > 0 else float("nan"),
        transconductance_S=float(on.transconductance(on_gate_V, drain_V)),
        injection_velocity_m_per_s=float(opened.injection_velocity_m_per_s),
        on_density_per_nm=float(opened.line_density_per_nm),
        subthreshold_slope_mV_per_decade=slope,
        barrier_lowering_mV_per_V=lowering,
    )
