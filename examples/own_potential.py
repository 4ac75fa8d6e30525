"""A potential of your own: a gate on top of a GaAs fin pulls its band edge down, less and less with the depth.

    python examples/own_potential.py [PICTURE.png]

Any function of x and y will do; here -V exp(-depth/L). Closed form: along y the modes are J_nu(z exp(-depth/(2 L)))
with z^2 = 8 m V L^2/hbar^2, the wall on top picks the orders by J_nu(z) = 0, and E = -hbar^2 nu^2/(8 m L^2) (the lower
end of the fin is too deep to matter); along x the fin is a box.
"""

import sys
from itertools import pairwise

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e
from scipy.optimize import brentq
from scipy.special import jv

import wiresolve as ws

WIDTH_nm, HEIGHT_nm, MASS, BENDING_eV, FADING_nm = 24.0, 60.0, 0.067, 0.3, 10.0
UNIT_eV_nm2 = hbar**2 / (2 * MASS * m_e * e) * 1e18
GAAS = ws.Material.given("GaAs", electron_mass=MASS, source="J. Appl. Phys. 89, 5815 (2001)")


def potential_eV(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return -BENDING_eV * np.exp((y - HEIGHT_nm / 2) / FADING_nm)


def closed_form_eV(count: int) -> np.ndarray:
    z = 2 * FADING_nm * np.sqrt(BENDING_eV / UNIT_eV_nm2)
    nu = np.linspace(0.1, z, 300)
    orders = np.array([brentq(jv, a, b, args=(z,)) for a, b in pairwise(nu) if jv(a, z) * jv(b, z) < 0])
    depth_eV = -UNIT_eV_nm2 * (orders / (2 * FADING_nm)) ** 2
    width_eV = UNIT_eV_nm2 * (np.arange(1, 10) * np.pi / WIDTH_nm) ** 2
    return np.sort(np.add.outer(depth_eV, width_eV).ravel())[:count]


def main(picture: str | None = None) -> tuple[np.ndarray, np.ndarray]:
    section = ws.Section(shape=ws.shapes.Rectangle(width_nm=WIDTH_nm, height_nm=HEIGHT_nm), material="GaAs")
    carriers, accuracy = ws.Carriers(temperature_K=77.0), ws.Accuracy(subbands=4, energy_eV=1e-5)
    well = ws.Potential(function=potential_eV)
    result = ws.solve(ws.Problem("Fin under a gate", section, carriers, accuracy, (GAAS,), potential=well))
    closed_eV = closed_form_eV(4)
    for found, bar, closed in zip(result.energies_eV, result.errors_eV, closed_eV, strict=True):
        print(f"{1e3 * found:.5f} ± {1e3 * bar:.5f} meV, closed form {1e3 * closed:.5f} meV")
    if picture:
        figure = Figure(figsize=(7.0, 2.9), dpi=150, layout="constrained")
        profile, *maps = figure.subplots(1, 5, sharey=True)
        (x, y), depth = result.mesh.points.T, np.linspace(-10, HEIGHT_nm / 2, 100)
        profile.plot(1e3 * potential_eV(0 * depth, depth), depth, color="#0072B2")
        profile.set(xlabel="Potential (meV)", ylabel="y (nm)", ylim=(-10, HEIGHT_nm / 2), box_aspect=40 / WIDTH_nm)
        for axes, mode, energy_eV in zip(maps, result.modes.T, result.energies_eV, strict=False):
            axes.tricontourf(x, y, mode**2, levels=24, cmap="cividis")
            axes.set(aspect="equal", xlabel="x (nm)", title=f"{1e3 * energy_eV:.2f} meV")
        figure.savefig(picture)
    return result.energies_eV, closed_eV


if __name__ == "__main__":
    main(*sys.argv[1:2])
