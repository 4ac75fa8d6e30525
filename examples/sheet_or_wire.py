"""Sheet or wire: from which width on does a sheet of GaAs, 5 nm thick, stop being a wire at 300 K?

    python examples/sheet_or_wire.py [PICTURE.png]

The effective dimension is twice the mean energy of thin carriers above the lowest subband in kT: 1 in a wire with all
cross motion frozen out, towards 2 in a wide sheet (from above, as the lowest level of a box is not at zero). Closed
form for hard walls: in each direction the energies are a n^2, a = hbar^2 pi^2/(2 m L^2), so that it adds
2 sum a (n^2 - 1) exp(-a n^2/kT)/(kT sum exp(-a n^2/kT)), n = 1, 2, 3, ...
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import hbar, k, m_e
from scipy.optimize import brentq

import wiresolve as ws

MASS, THICKNESS_nm, TEMPERATURE_K, HALFWAY = 0.067, 5.0, 300.0, 1.5
GAAS = ws.Material.given("GaAs", electron_mass=MASS, source="J. Appl. Phys. 89, 5815 (2001)")


def dimension(width_nm: float) -> float:
    shape = ws.shapes.Rectangle(width_nm=width_nm, height_nm=THICKNESS_nm)
    section, carriers = ws.Section(shape=shape, material="GaAs"), ws.Carriers(temperature_K=TEMPERATURE_K)
    problem = ws.Problem("Sheet or wire", section, carriers, ws.Accuracy(subbands=6, energy_eV=1e-5), (GAAS,))
    return ws.solve(problem).verdict.effective_dimension[0]["d"]


def box(size_nm: float) -> float:
    lowest_kT = (hbar * np.pi / (size_nm * 1e-9)) ** 2 / (2 * MASS * m_e * k * TEMPERATURE_K)
    above_kT = lowest_kT * (np.arange(1, 500) ** 2 - 1)
    return 2 * above_kT @ np.exp(-above_kT) / np.exp(-above_kT).sum()


def main(picture: str | None = None) -> tuple[float, float]:
    found_nm = brentq(lambda width: dimension(width) - HALFWAY, 10.0, 40.0, xtol=1e-3)
    closed_nm = brentq(lambda width: 1 + box(width) + box(THICKNESS_nm) - HALFWAY, 10.0, 40.0)
    print(f"the effective dimension passes {HALFWAY:g} at a width of {found_nm:.2f} nm, closed form {closed_nm:.2f} nm")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes = figure.subplots()
        line, points = np.geomspace(5, 100, 200), np.geomspace(6, 90, 10)
        axes.semilogx(line, [1 + box(w) + box(THICKNESS_nm) for w in line], color="#0072B2", label="sums over a box")
        axes.semilogx(points, [dimension(w) for w in points], "o", color="#D55E00", label="wiresolve")
        axes.plot([5, found_nm, found_nm], [HALFWAY, HALFWAY, 0.9], color="#8c8c8c", lw=1)
        axes.text(1.03 * found_nm, 0.94, f"{found_nm:.1f} nm")
        axes.set(xlim=(5, 100), xlabel="Width (nm)", ylim=(0.9, 2.2), title=f"GaAs sheet, {THICKNESS_nm:g} nm thick")
        axes.set_ylabel(f"Effective dimension at {TEMPERATURE_K:g} K")
        axes.set_xticks([5, 10, 20, 50, 100], ["5", "10", "20", "50", "100"])
        axes.minorticks_off()
        axes.legend(frameon=False)
        figure.savefig(picture)
    return found_nm, closed_nm


if __name__ == "__main__":
    main(*sys.argv[1:2])
