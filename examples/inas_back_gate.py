"""An InAs wire on a back gate at 4.2 K: at which gate voltages do its steps open, and how strong is the gate?

    python examples/inas_back_gate.py [PICTURE.png]

With contacts that reflect nothing each level adds 1/(1 + exp(E/kT)) conductance quanta, E from the source's Fermi level
(R. Landauer (1957)). The gate can do no more than charge a metal wire of the same shape. That capacitance lies between
those of the circle within the hexagon in air and of the circle around it in oxide: 2 pi eps/arccosh(height/radius).
"""

import sys
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, epsilon_0, k
from scipy.special import expit

import wiresolve as ws

WIRE = Path(__file__).resolve().parents[1] / "geometries" / "inas_back_gate.toml"
ACROSS_FLATS_nm, OXIDE_nm, OXIDE_PERMITTIVITY = 40.0, 100.0, 3.9


def above_plane(radius_nm: float, permittivity: float) -> float:
    """Capacitance in F/m of a round metal wire, its axis as high above the gate as the hexagon's."""
    height_nm = OXIDE_nm + ACROSS_FLATS_nm / 2
    return 2 * np.pi * epsilon_0 * permittivity / np.arccosh(height_nm / radius_nm)


def main(picture: str | None = None) -> tuple[ws.GateCurve, np.ndarray, tuple[float, float]]:
    curve = ws.gate_curve(ws.load(WIRE))
    thermal_eV = k * curve.temperature_K / e
    landauer = np.array([expit(-point.energy_eV / thermal_eV).sum() for point in curve.points])
    found = np.array([point.conductance_G0 for point in curve.points])
    bounds = above_plane(ACROSS_FLATS_nm / 2, 1.0), above_plane(ACROSS_FLATS_nm / np.sqrt(3), OXIDE_PERMITTIVITY)
    for step in (step for step in curve.steps if np.isfinite(step.opens_at_V)):
        print(f"{step.height_G0:g} G0 more from {step.opens_at_V:.3f} V on")
    geometric, low, high = (1e12 * c for c in (curve.points[-1].geometric_F_per_m, *bounds))
    print(f"a metal wire would have {geometric:.1f} pF/m, between {low:.1f} and {high:.1f} pF/m")
    print(f"the listed levels give the conductance within {np.abs(found - landauer).max():.0e} G0")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes = figure.subplots()
        voltage = [point.gate_voltage_V for point in curve.points]
        opened = [step for step in curve.steps if np.isfinite(step.opens_at_V)]
        at, height = [voltage[0], *(s.opens_at_V for s in opened), voltage[-1]], [0, *(s.plateau_G0 for s in opened)]
        axes.step(at, [*height, height[-1]], where="post", color="#b0b0b0", lw=1, label="where levels open")
        axes.plot(voltage, found, "o", ms=4, color="#0072B2", label="wiresolve, 4.2 K")
        axes.plot(voltage, landauer, ".", ms=3, color="#262626", label="sum over its levels")
        axes.set(xlim=(voltage[0], voltage[-1]), ylim=(0, None), xlabel="Voltage of the back gate (V)")
        axes.set(ylabel="Conductance ($G_0 = 2e^2/h$)", title=f"InAs hexagon at {curve.temperature_K:g} K")
        axes.grid(axis="y", color="#e4e4e4")
        axes.legend(frameon=False)
        figure.savefig(picture)
    return curve, landauer, bounds


if __name__ == "__main__":
    main(*sys.argv[1:2])
