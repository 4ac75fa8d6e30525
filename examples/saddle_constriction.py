"""A constriction with rounded steps: how far apart must levels be to show a plateau through a short barrier?

    python examples/saddle_constriction.py [PICTURE.png]

Along the wire the barrier is an upside-down parabola of curvature w, so that a level at E_n lets through
1/(1 + exp(2 pi (E_n - E)/(hbar w))): one half where it meets the Fermi level (M. Buettiker, Phys. Rev. B 41, 7906
(1990)). Without the barrier a step is as sharp as the temperature allows.
"""

import sys
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure

import wiresolve as ws

WIRE = Path(__file__).resolve().parents[1] / "geometries" / "saddle_constriction.toml"


def buettiker(energy_eV: np.ndarray, curvature_eV: float) -> float:
    """Conductance in G0 of levels counted from the Fermi level, spin included."""
    return float((1 / (1 + np.exp(2 * np.pi * energy_eV / curvature_eV))).sum())


def main(picture: str | None = None) -> tuple[ws.GateCurve, np.ndarray]:
    problem = ws.load(WIRE)
    assert problem.transport is not None
    curvature_eV = problem.transport.saddle_curvature_eV
    curve = ws.gate_curve(problem)
    closed = np.array([buettiker(point.energy_eV, curvature_eV) for point in curve.points])
    found = np.array([point.conductance_G0 for point in curve.points])
    for step in curve.steps:
        if np.isfinite(step.opens_at_V):
            print(f"at {step.opens_at_V:.3f} V a step of {step.height_G0:g} G0 is half open")
    print(f"Buettiker's closed form at T = 0 is met within {np.abs(found - closed).max():.0e} G0")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes = figure.subplots()
        voltage = [point.gate_voltage_V for point in curve.points]
        opened = [step for step in curve.steps if np.isfinite(step.opens_at_V)]
        at, height = [voltage[0], *(s.opens_at_V for s in opened), voltage[-1]], [0, *(s.plateau_G0 for s in opened)]
        axes.step(at, [*height, height[-1]], where="post", color="#b0b0b0", lw=1, label="without barrier, T = 0")
        axes.plot(voltage, found, color="#0072B2", label="wiresolve, through the saddle")
        axes.plot(voltage, closed, ".", ms=4, color="#262626", label="closed form of its levels, T = 0", zorder=3)
        axes.set(xlabel="Gate voltage (V)", ylabel="Conductance ($G_0 = 2e^2/h$)", title=problem.title)
        axes.set(xlim=(voltage[0], voltage[-1]), ylim=(0, None))
        axes.grid(axis="y", color="#e4e4e4")
        axes.legend(frameon=False)
        figure.savefig(picture)
    return curve, closed


if __name__ == "__main__":
    main(*sys.argv[1:2])
