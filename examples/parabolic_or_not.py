"""How wrong is a constant mass? The first two levels of a six-sided InAs wire, 30 nm across its flats.

    python examples/parabolic_or_not.py [PICTURE.png]

In a narrow gap the mass grows with energy (E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957)). Within hard walls
E (1 + alpha E) is what a constant mass gives, hbar^2 lambda/(2 m s^2) with the side s, and the eigenvalues lambda of a
hexagon of side 1 are known to many digits (R. S. Jones, arXiv:1712.06082).
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e

import wiresolve as ws

MASS, ALPHA_per_eV, FLATS_nm, MODELS = 0.023, 2.5, 30.0, ("parabolic", "nonparabolic")
EIGENVALUES = np.array([7.155339133926, 18.131677865534])  # of a hexagon of side 1; the second one is a pair
INAS = ws.Material.given("InAs", electron_mass=MASS, nonparabolicity_per_eV=ALPHA_per_eV, source="NSM Archive")


def solved_meV(flats_nm: float, model: str) -> np.ndarray:
    section = ws.Section(shape=ws.shapes.Hexagon(across_flats_nm=flats_nm), material="InAs")
    carriers, accuracy = ws.Carriers(temperature_K=77.0, model=model), ws.Accuracy(subbands=2, energy_eV=1e-6)
    return 1e3 * ws.solve(ws.Problem("Parabolic or not", section, carriers, accuracy, (INAS,))).energies_eV


def closed_meV(flats_nm: float, model: str) -> np.ndarray:
    level_eV = hbar**2 / (2 * MASS * m_e * e) * 1e18 * EIGENVALUES * 3 / flats_nm**2
    if model == "parabolic":
        return 1e3 * level_eV
    return 1e3 * (np.sqrt(1 + 4 * ALPHA_per_eV * level_eV) - 1) / (2 * ALPHA_per_eV)


def main(picture: str | None = None) -> tuple[list[np.ndarray], list[np.ndarray]]:
    found, closed = ([levels(FLATS_nm, model) for model in MODELS] for levels in (solved_meV, closed_meV))
    for model, levels, exact in zip(MODELS, found, closed, strict=True):
        print(f"{model}: {levels[0]:.3f} and {levels[1]:.3f} meV, closed form {exact[0]:.3f} and {exact[1]:.3f} meV")
    too_far = np.diff(found[0])[0] / np.diff(found[1])[0] - 1
    print(f"a constant mass puts the second level {too_far:.0%} too far above the first")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes, line, points = figure.subplots(), np.linspace(18, 82, 100), np.arange(20, 81, 10)
        for model, colour in zip(MODELS, ("#E69F00", "#0072B2"), strict=True):
            kind = "constant mass" if model == "parabolic" else "growing mass"
            spacings = [np.diff(closed_meV(flats, model))[0] for flats in line]
            axes.semilogy(line, spacings, color=colour, label=f"{kind}: eigenvalues of a hexagon")
            spacings = [np.diff(solved_meV(flats, model))[0] for flats in points]
            axes.semilogy(points, spacings, "o", color=colour, label=f"{kind}: wiresolve")
        axes.set(xlim=(18, 82), xlabel="Width across flats (nm)", ylabel="First spacing (meV)", title="InAs hexagon")
        axes.set_yticks([10, 20, 50, 100], ["10", "20", "50", "100"])
        axes.minorticks_off()
        axes.legend(frameon=False)
        figure.savefig(picture)
    return found, closed


if __name__ == "__main__":
    main(*sys.argv[1:2])
