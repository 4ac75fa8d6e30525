"""How thin is too thin for germanium? In a fin along [100] its light L valleys rise past the heavy Delta valleys.

    python examples/germanium_fin.py [PICTURE.png]

Closed form for the Delta valleys, whose axes stand along the fin's sides: sums over a box with hard walls, here
hbar^2 pi^2 (1/(m_l W^2) + 1/(m_t H^2))/2. The L valleys lean, which couples x to y: their level comes from products of
integrated Legendre polynomials, 20 each way. Both are E (1 + alpha E), as masses grow with energy.
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from numpy.polynomial import legendre
from scipy.constants import e, hbar, m_e
from scipy.linalg import eigh
from scipy.optimize import brentq

import wiresolve as ws

HEIGHT_nm, DELTA_ABOVE_eV, UNIT = 10.0, 0.204, hbar**2 / (2 * m_e * e) * 1e18  # eV nm^2
LEANING = ws.Valley("L", 0.0, 1.59, 0.0815, axis=(1, 1, 1), zone_boundary=True, nonparabolicity_per_eV=0.3)
UPRIGHT = ws.Valley("Delta", DELTA_ABOVE_eV, 0.92, 0.19, axis=(1, 0, 0), nonparabolicity_per_eV=0.5)
GERMANIUM = ws.Material.given("Ge", valleys=(LEANING, UPRIGHT), crystal="diamond", source="NSM Archive")


def solved_eV(width_nm: float) -> tuple[float, float]:
    section = ws.Section(shape=ws.shapes.Rectangle(width_nm=width_nm, height_nm=HEIGHT_nm), material="Ge")
    carriers, accuracy = ws.Carriers(temperature_K=300.0), ws.Accuracy(subbands=8, energy_eV=1e-5)
    problem = ws.Problem("Fin", section, carriers, accuracy, (GERMANIUM,), ws.Orientation((1, 0, 0), (0, 0, 1)))
    lowest = {band.valley.split()[0]: band.energy_eV for band in reversed(ws.solve(problem).subbands)}
    return lowest["L"], lowest.get("Delta", np.nan)


def grown_eV(level_eV: float, valley: ws.Valley) -> float:
    alpha = valley.nonparabolicity_per_eV
    return valley.height_eV + (np.sqrt(1 + 4 * alpha * level_eV) - 1) / (2 * alpha)


def closed_eV(width_nm: float) -> tuple[float, float]:
    box = UNIT * np.pi**2 * (1 / UPRIGHT.longitudinal_mass / width_nm**2 + 1 / UPRIGHT.transverse_mass / HEIGHT_nm**2)
    at, weight = legendre.leggauss(24)
    slope = legendre.legvander(at, 20)[:, 1:]  # of functions that are zero at both ends
    value = np.array([legendre.legval(at, legendre.legint(np.eye(21)[n], lbnd=-1)) for n in range(1, 21)]).T
    mass, stiff, mixed = (a.T @ (weight[:, None] * b) for a, b in ((value, value), (slope, slope), (slope, value)))
    across, less = 1 / LEANING.transverse_mass, (1 / LEANING.transverse_mass - 1 / LEANING.longitudinal_mass) / 3
    sheared = np.kron(mixed, mixed.T) + np.kron(mixed.T, mixed)
    kinetic = (across - less) * (np.kron(stiff, mass) / width_nm**2 + np.kron(mass, stiff) / HEIGHT_nm**2)
    kinetic -= less * sheared / (width_nm * HEIGHT_nm)
    leaning = 4 * UNIT * eigh(kinetic, np.kron(mass, mass), eigvals_only=True, subset_by_index=(0, 0))[0]
    return grown_eV(leaning, LEANING), grown_eV(box, UPRIGHT)


def main(picture: str | None = None) -> tuple[float, float]:
    found_nm, closed_nm = (brentq(lambda w, f=f: np.diff(f(w))[0], 3.0, 4.5, xtol=1e-4) for f in (solved_eV, closed_eV))
    print(f"Delta lies lowest in fins below {found_nm:.3f} nm, closed form {closed_nm:.3f} nm")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes, line, points = figure.subplots(), np.linspace(2.5, 6.5), [2.75, 3.25, 3.75, 4.5, 5.25, 6]
        axes.set_prop_cycle(color=["#0072B2", "#D55E00"])
        axes.plot(
            line, [closed_eV(width) for width in line], label=["L: Legendre polynomials", "Delta: sums over a box"]
        )
        axes.plot(points, [solved_eV(width) for width in points], "o", label=["L: wiresolve", "Delta: wiresolve"])
        axes.plot([found_nm, found_nm], [0, solved_eV(found_nm)[0]], color="#8c8c8c", lw=1)
        axes.text(found_nm + 0.05, 0.02, f"{found_nm:.2f} nm")
        axes.set(xlim=(2.5, 6.5), xlabel="Width (nm)", ylim=(0, 0.6), ylabel="Lowest level (eV)")
        axes.set_title(f"Germanium fin along [100], {HEIGHT_nm:g} nm high")
        axes.legend(frameon=False)
        figure.savefig(picture)
    return found_nm, closed_nm


if __name__ == "__main__":
    main(*sys.argv[1:2])
