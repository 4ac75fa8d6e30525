"""Which valley carries? Silicon wires along [110] and [100]: the lowest are two of its six valleys, or four of them.

    python examples/which_valley.py [PICTURE.png]

Closed forms: the mass along the wire is m_z = m_l cos^2 + m_t sin^2 of the angle between valley and wire; across it a
valley has the masses m_t and m_l m_t/m_z. Stretched by their roots the circle is an ellipse, whose lowest level is
where the Mathieu function Mc_0(q, xi) is zero at the rim: it is E (1 + alpha E), and m_z grows by 1 + 2 alpha E.
"""

import sys

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e
from scipy.optimize import brentq
from scipy.special import jn_zeros, mathieu_modcem1

import wiresolve as ws

DIAMETER_nm, LONG, ACROSS, ALPHA_per_eV = 6.0, 0.916, 0.19, 0.5
DELTA = ws.Valley("Delta", 0.0, LONG, ACROSS, axis=(1, 0, 0), nonparabolicity_per_eV=ALPHA_per_eV)
SILICON = ws.Material.given("Si", valleys=(DELTA,), crystal="diamond", source="Rev. Mod. Phys. 55, 645 (1983)")
# The wire's direction; its groups of valleys with their angles to it in degrees.
WIRES = {
    (1, 1, 0): {"Delta [001]": 90, "Delta [100] [010]": 45},
    (1, 0, 0): {"Delta [010] [001]": 90, "Delta [100]": 0},
}


def solved(axis: tuple[int, int, int], diameter_nm: float) -> dict[str, tuple[float, float, int]]:
    """Lowest level in meV, mass along the wire, and number of valleys of each group."""
    section, turned = ws.Section(shape=ws.shapes.Circle(diameter_nm), material="Si"), ws.Orientation(axis, (0, 0, 1))
    carriers, accuracy = ws.Carriers(temperature_K=300.0), ws.Accuracy(subbands=6, energy_eV=1e-6)
    bands = ws.solve(ws.Problem("Which valley", section, carriers, accuracy, (SILICON,), turned)).subbands
    return {b.valley: (1e3 * b.energy_eV, b.axial_mass, b.valley_degeneracy) for b in reversed(bands)}


def closed(degrees: float, diameter_nm: float) -> tuple[float, float]:
    along = LONG * np.cos(np.radians(degrees)) ** 2 + ACROSS * np.sin(np.radians(degrees)) ** 2
    low, high = diameter_nm / 2 * np.sqrt(sorted([ACROSS, LONG * ACROSS / along]))  # half axes of the ellipse
    level, around = (jn_zeros(0, 1)[0] / np.array([low, high])) ** 2  # levels of the circles within and around
    if (focus := np.sqrt(high**2 - low**2)) > 1e-3 * high:
        level = brentq(lambda v: mathieu_modcem1(0, v * focus**2 / 4, np.arctanh(low / high))[0], around, level)
    energy = (np.sqrt(1 + 4 * ALPHA_per_eV * level * hbar**2 / (2 * m_e * e) * 1e18) - 1) / (2 * ALPHA_per_eV)
    return 1e3 * energy, along * (1 + 2 * ALPHA_per_eV * energy)


def main(picture: str | None = None) -> dict[str, tuple[tuple[float, float, int], tuple[float, float]]]:
    pairs = {n: (f, closed(WIRES[a][n], DIAMETER_nm)) for a in WIRES for n, f in solved(a, DIAMETER_nm).items()}
    for name, ((energy, mass, valleys), exact) in pairs.items():
        print(f"{valleys} {name}: {energy:.3f} meV, mass {mass:.4f}, closed form {exact[0]:.3f} meV, {exact[1]:.4f}")
    if picture:
        figure, line, points = Figure((7.0, 3.6), 150, layout="constrained"), np.linspace(3, 13), [4, 6, 8, 10, 12]
        for axes, (axis, groups) in zip(figure.subplots(1, 2, sharey=True), WIRES.items(), strict=True):
            found = [solved(axis, diameter) for diameter in points]
            for colour, (name, degrees) in zip(("#0072B2", "#D55E00"), groups.items(), strict=True):
                axes.loglog(line, [closed(degrees, d)[0] for d in line], color=colour)
                label = f"{found[0][name][2]} valleys, mass {closed(degrees, 99)[1]:.2f}"
                axes.plot(points, [levels[name][0] for levels in found], "o", color=colour, label=label)
            axes.set(xlim=(3, 13), xlabel="Diameter (nm)", title=f"Silicon along [{axis[0]}{axis[1]}{axis[2]}]")
            axes.minorticks_off()
            axes.set_xticks(points, points)
            axes.set_yticks([20, 50, 100, 200, 400], ["20", "50", "100", "200", "400"])
            axes.legend(frameon=False)
        figure.axes[0].set_ylabel("Lowest level of each group (meV)")
        figure.savefig(picture)
    return pairs


if __name__ == "__main__":
    main(*sys.argv[1:2])
