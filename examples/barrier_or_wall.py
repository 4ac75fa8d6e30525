"""A hard wall is not a barrier: the lowest level of a round GaAs core in Al0.3Ga0.7As at 77 K.

    python examples/barrier_or_wall.py [PICTURE.png]

Closed forms: with a hard wall E = hbar^2 j01^2/(2 m R^2). With a barrier of height V and mass M that goes on outside,
J0(kr) within the core meets K0(qr) at R with equal value and slope over mass: k J1(kR) K0(qR)/m = q K1(qR) J0(kR)/M,
where k^2 = 2 m E/hbar^2 and q^2 = 2 M (V - E)/hbar^2. Masses are those of the band edge.
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e
from scipy.optimize import brentq
from scipy.special import j0, j1, jn_zeros, k0, k1

import wiresolve as ws

CORE, BARRIER = "GaAs", "Al0.3Ga0.7As"


def problem(diameter_nm: float, outside: str) -> ws.Problem:
    section = ws.Section(shape=ws.shapes.Circle(diameter_nm=diameter_nm), material=CORE, outside=outside)
    carriers, accuracy = ws.Carriers(temperature_K=77.0, model="parabolic"), ws.Accuracy(subbands=1, energy_eV=1e-5)
    return ws.Problem("Barrier or wall", section, carriers, accuracy)


def solved_meV(diameter_nm: float) -> list[float]:
    return [1e3 * ws.solve(problem(diameter_nm, outside)).energies_eV[0] for outside in ("hard wall", BARRIER)]


def closed_meV(diameter_nm: float) -> list[float]:
    radius, unit = diameter_nm / 2, hbar**2 / (2 * m_e * e) * 1e21  # nm, meV nm^2
    core, barrier = map(problem(diameter_nm, BARRIER).resolved_materials().get, (CORE, BARRIER))
    mass, other = core.electron_mass, barrier.electron_mass
    height = 1e3 * (barrier.conduction_edge_eV - core.conduction_edge_eV)

    def mismatch(energy: float) -> float:
        k, q = radius * np.sqrt([energy * mass / unit, (height - energy) * other / unit])
        return k / mass * j1(k) * k0(q) - q / other * k1(q) * j0(k)

    wall = unit / mass * (jn_zeros(0, 1)[0] / radius) ** 2
    return [wall, brentq(mismatch, 1e-3, 0.999999 * min(wall, height), xtol=1e-10)]


def main(picture: str | None = None) -> tuple[list[float], list[float]]:
    found, closed = solved_meV(20.0), closed_meV(20.0)
    print(f"barrier   {found[1]:.2f} meV, closed form {closed[1]:.2f} meV")
    print(f"hard wall {found[0]:.2f} meV, closed form {closed[0]:.2f} meV: {found[0] / found[1] - 1:.0%} too high")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes = figure.subplots()
        line, points = np.linspace(7, 31, 100), np.arange(8, 31, 2)
        axes.set_prop_cycle(color=["#E69F00", "#0072B2"])
        axes.plot(line, [closed_meV(d) for d in line], label=["hard wall: closed form", "barrier: closed form"])
        axes.plot(points, [solved_meV(d) for d in points], "o", label=["hard wall: wiresolve", "barrier: wiresolve"])
        axes.set(xlim=(7, 31), xlabel="Diameter of the core (nm)", ylim=(0, 250), ylabel="Lowest level (meV)")
        axes.legend(title=f"{CORE} in {BARRIER} at 77 K", frameon=False)
        figure.savefig(picture)
    return found, closed


if __name__ == "__main__":
    main(*sys.argv[1:2])
