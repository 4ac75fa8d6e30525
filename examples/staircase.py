"""The staircase of a round GaAs wire, 24 nm wide, at 4.2, 77 and 300 K: steps of 1, 2, 2, 1, ... conductance quanta.

    python examples/staircase.py [PICTURE.png]

All levels of a circle but those without angular momentum are pairs, which open as one step of twice the height. Closed
form: G/G0 is the sum of 1/(1 + exp((E - E_F)/kT)) over the states, E = hbar^2 j^2/(2 m R^2) for the zeros j of the
Bessel functions (R. Landauer (1957), for ideal contacts and no scattering).
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, k, m_e
from scipy.special import expit, jn_zeros

import wiresolve as ws

DIAMETER_nm, MASS, TEMPERATURES_K = 24.0, 0.067, (4.2, 77.0, 300.0)
GAAS = ws.Material.given("GaAs", electron_mass=MASS, source="J. Appl. Phys. 89, 5815 (2001)")


def landauer(fermi_eV: np.ndarray, temperature_K: float) -> np.ndarray:
    """Conductance in G0 from the zeros of 40 Bessel functions; the first left out lies 6 eV high."""
    total = np.zeros_like(fermi_eV)
    for momentum in range(40):
        energy_eV = (hbar * jn_zeros(momentum, 20) / (DIAMETER_nm / 2 * 1e-9)) ** 2 / (2 * MASS * m_e * e)
        states = expit((fermi_eV[:, None] - energy_eV) / (k * temperature_K / e)).sum(axis=1)
        total += states if momentum == 0 else 2 * states
    return total


def main(picture: str | None = None) -> tuple[ws.Result, dict[float, float]]:
    section = ws.Section(shape=ws.shapes.Circle(diameter_nm=DIAMETER_nm), material="GaAs")
    carriers, accuracy = ws.Carriers(temperature_K=TEMPERATURES_K), ws.Accuracy(subbands=8, energy_eV=1e-6)
    result = ws.solve(ws.Problem("Staircase", section, carriers, accuracy, (GAAS,)))
    warm = [curve for curve in result.conductance if curve.temperature_K > 0]
    off = {c.temperature_K: float(np.abs(c.values - landauer(c.fermi_eV, c.temperature_K)).max()) for c in warm}
    for row in result.verdict.steps:
        steps = ", ".join(f"{step['height_G0']:g} {step['kind']}" for step in row["levels"])
        print(f"{row['temperature_K']:g} K: {steps}; within {off[row['temperature_K']]:.0e} G0 of Landauer's sum")
    if picture:
        figure = Figure(figsize=(5.5, 4.0), dpi=150, layout="constrained")
        axes = figure.subplots()
        fermi_eV = np.linspace(0.0, 0.16, 65)
        for curve, colour in zip(warm, ("#E69F00", "#009E73", "#CC79A7"), strict=True):
            axes.plot(1e3 * curve.fermi_eV, curve.values, color=colour, label=f"{curve.temperature_K:g} K, wiresolve")
            axes.plot(1e3 * fermi_eV, landauer(fermi_eV, curve.temperature_K), ".", ms=4, color="#262626", zorder=3)
        axes.plot([], [], ".", ms=4, color="#262626", label="sum over zeros of Bessel functions")
        axes.set(xlim=(0, 160), xlabel="Fermi level (meV)", ylim=(0, 8), yticks=[0, 1, 3, 5, 6, 8])
        axes.set(ylabel="Conductance ($G_0 = 2e^2/h$)", title=f"Round GaAs wire, {DIAMETER_nm:g} nm wide")
        axes.grid(axis="y", color="#e4e4e4")
        axes.legend(frameon=False)
        figure.savefig(picture)
    return result, off


if __name__ == "__main__":
    main(*sys.argv[1:2])
