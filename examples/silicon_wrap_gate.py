"""A silicon channel in a wrap-around gate at 300 K: what does it carry on and off, and how sharply does it switch?

    python examples/silicon_wrap_gate.py [PICTURE.png]

While hardly any electron is there the gate moves the levels one to one: the current falls by a factor of ten each
ln(10) kT/e = 59.5 mV. Once they are, oxide and electrons share the voltage: the capacitance stays below that of two
coaxial cylinders, 2 pi eps/ln(outer/inner).
"""

import sys
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, epsilon_0, k

import wiresolve as ws

WIRE = Path(__file__).resolve().parents[1] / "geometries" / "silicon_wrap_gate.toml"
RADIUS_nm, OXIDE_nm, OXIDE_PERMITTIVITY = 3.0, 1.0, 3.9


def main(picture: str | None = None) -> tuple[ws.GateCurve, float, float]:
    curve = ws.gate_curve(ws.load(WIRE))
    coaxial = 2 * np.pi * epsilon_0 * OXIDE_PERMITTIVITY / np.log((RADIUS_nm + OXIDE_nm) / RADIUS_nm)
    gates = sorted({run.gate_voltage_V for run in curve.transistor})
    drains = sorted({run.drain_voltage_V for run in curve.transistor})
    current = {(run.gate_voltage_V, run.drain_voltage_V): run.current_A for run in curve.transistor}
    off, next_ = (current[gate, drains[-1]] for gate in gates[:2])
    slope_mV = 1e3 * (gates[1] - gates[0]) / np.log10(next_ / off)
    print(f"on {1e6 * current[gates[-1], drains[-1]]:.1f} uA, off {off:.1e} A at a drain voltage of {drains[-1]:g} V")
    print(f"{slope_mV:.2f} mV a decade, ln(10) kT/e is {1e3 * np.log(10) * k * curve.temperature_K / e:.2f} mV")
    most = max(point.capacitance_F_per_m for point in curve.points)
    print(f"at most {1e12 * most:.0f} pF/m, coaxial cylinders have {1e12 * coaxial:.0f} pF/m")
    if picture:
        figure = Figure(figsize=(7.5, 3.6), dpi=150, layout="constrained")
        transfer, output = figure.subplots(1, 2)
        for drain, colour in zip((drains[0], drains[-1]), ("#56B4E9", "#0072B2"), strict=True):
            currents = [current[gate, drain] for gate in gates]
            transfer.semilogy(gates, currents, color=colour, label=f"drain at {drain:g} V")
        for gate, colour in zip(gates[-1:-8:-2], ("#0072B2", "#009E73", "#E69F00", "#CC79A7"), strict=False):
            output.plot([0, *drains], [0, *(1e6 * current[gate, d] for d in drains)], ".-", color=colour)
            output.text(1.02 * drains[-1], 1e6 * current[gate, drains[-1]], f"{gate:.2g} V", color=colour, va="center")
        transfer.set(xlabel="Gate voltage (V)", ylabel="Current (A)", title="Transfer")
        transfer.legend(frameon=False)
        output.set(xlabel="Drain voltage (V)", ylabel="Current (uA)", title="Output, gate voltages marked")
        output.set(xlim=(0, 1.18 * drains[-1]), ylim=(0, None))
        figure.savefig(picture)
    return curve, slope_mV, coaxial


if __name__ == "__main__":
    main(*sys.argv[1:2])
