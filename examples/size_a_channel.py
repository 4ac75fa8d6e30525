"""Size a round channel: which diameter puts the first two levels of an InP wire 10 kT apart at 77 K?

    python examples/size_a_channel.py [PICTURE.png]

10 kT is about what lets the first step of the conductance end in a plateau. Closed form for hard walls, from the zeros
of the Bessel functions: E_2 - E_1 = 4 (j11^2 - j01^2) hbar^2/(2 m D^2), about 1356.2 meV nm^2/(m D^2) with m in m0.
"""

import math
import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, k, m_e
from scipy.optimize import brentq
from scipy.special import jn_zeros

import wiresolve as ws

MASS, TEMPERATURE_K, WANTED_kT = 0.0795, 77.0, 10.0
INP = ws.Material.given("InP", electron_mass=MASS, source="J. Appl. Phys. 89, 5815 (2001)")


def first_step(diameter_nm: float) -> dict:
    section = ws.Section(shape=ws.shapes.Circle(diameter_nm=diameter_nm), material="InP")
    carriers, accuracy = ws.Carriers(temperature_K=TEMPERATURE_K), ws.Accuracy(subbands=3, energy_eV=1e-6)
    return ws.solve(ws.Problem("Round channel", section, carriers, accuracy, (INP,))).verdict.steps[0]["levels"][0]


def closed_kT(diameter_nm: float) -> float:
    factor = 4 * (jn_zeros(1, 1)[0] ** 2 - jn_zeros(0, 1)[0] ** 2) * hbar**2 / (2 * m_e * e) * 1e18
    return factor / (MASS * diameter_nm**2) / (k * TEMPERATURE_K / e)


def main(picture: str | None = None) -> tuple[float, float, float]:
    found_nm = brentq(lambda diameter: first_step(diameter)["spacing_over_kT"] - WANTED_kT, 8.0, 40.0, xtol=1e-4)
    closed_nm = math.sqrt(closed_kT(1.0) / WANTED_kT)
    step = first_step(found_nm)
    print(f"diameter {found_nm:.3f} nm, closed form {closed_nm:.3f} nm")
    print(f"there the first step ends in a {step['kind']}, its contrast is {step['contrast']:.0%}")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes = figure.subplots()
        line, points = np.linspace(9, 31, 200), np.arange(10, 31, 4)
        spacings = [first_step(diameter)["spacing_over_kT"] for diameter in points]
        axes.semilogy(line, closed_kT(line), color="#0072B2", label="zeros of Bessel functions")
        axes.semilogy(points, spacings, "o", color="#D55E00", label="wiresolve")
        axes.plot([9, found_nm, found_nm], [WANTED_kT, WANTED_kT, 2], color="#8c8c8c", lw=1)
        axes.text(found_nm + 0.2, 2.1, f"{found_nm:.2f} nm")
        axes.set(xlim=(9, 31), xlabel="Diameter (nm)", ylim=(2, 40), title="Round InP wire with hard walls")
        axes.set_ylabel(f"First spacing (kT at {TEMPERATURE_K:g} K)")
        axes.set_yticks([2, 5, 10, 20, 40], ["2", "5", "10", "20", "40"])
        axes.minorticks_off()
        axes.legend(frameon=False)
        figure.savefig(picture)
    return found_nm, closed_nm, step["contrast"]


if __name__ == "__main__":
    main(*sys.argv[1:2])
