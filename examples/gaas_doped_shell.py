"""Electrons that move to the corners: a GaAs core in a shell whose doping rises.

    python examples/gaas_doped_shell.py [PICTURE.png]

Without a gate the wire is neutral: its electrons a nm are donors times the area of the doped shell, sqrt(3)/2 times the
difference of its squared widths. Few of them sit in the middle; many push each other away, up to the corners of the
core, which are nearest to the donors. Told is the share within 12 nm of a corner; evenly spread it would be 29 %.
"""

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure
from matplotlib.patches import RegularPolygon
from scipy.interpolate import griddata

import wiresolve as ws

WIRE = Path(__file__).resolve().parents[1] / "geometries" / "gaas_doped_shell.toml"
DONORS_per_cm3, NEAR_nm = (1e16, 5e16, 1e17, 2e17), 12.0
CORE_nm, INNER_nm, OUTER_nm = 60.0, 80.0, 100.0  # widths from flat to flat of the core and of the doped shell


def solved(donors_per_cm3: float) -> ws.Result:
    problem = ws.load(WIRE)
    spacer, shell = problem.section.layers
    shell = replace(shell, doping=replace(shell.doping, donors_per_nm3=1e-21 * donors_per_cm3))
    return ws.solve(replace(problem, section=replace(problem.section, layers=(spacer, shell))))


def pixels(result: ws.Result) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Density in 1/nm^3 on a grid over the core."""
    x, y = np.meshgrid(np.linspace(-36, 36, 289), np.linspace(-36, 36, 289))
    return x, y, griddata(result.mesh.points, result.charge.density_per_nm3, (x, y))


def corner_share(result: ws.Result) -> float:
    x, y, density = pixels(result)
    corners = CORE_nm / np.sqrt(3) * np.exp(1j * np.pi / 3 * np.arange(6))
    near = np.abs(x + 1j * y - corners[:, None, None]).min(axis=0) < NEAR_nm
    return float(density[near].sum() / density.sum())


def main(picture: str | None = None) -> tuple[list[float], list[float], list[float]]:
    results = [solved(donors) for donors in DONORS_per_cm3]
    shares = [corner_share(result) for result in results]
    area_nm2 = np.sqrt(3) / 2 * (OUTER_nm**2 - INNER_nm**2)
    lines, given = [float(r.line_density_per_nm or 0) for r in results], [1e-21 * d * area_nm2 for d in DONORS_per_cm3]
    for donors, line, fixed, share in zip(DONORS_per_cm3, lines, given, shares, strict=True):
        print(f"{donors:.0e} donors per cm^3: {line:.4f} electrons a nm ({fixed:.4f} donors), {share:.0%} near corners")
    if picture:
        figure = Figure(figsize=(7.5, 2.5), dpi=150, layout="constrained")
        for axes, result, donors in zip(figure.subplots(1, 4), results, DONORS_per_cm3, strict=True):
            x, y, density = pixels(result)
            axes.pcolormesh(x, y, density, cmap="viridis", rasterized=True)
            axes.add_patch(
                RegularPolygon((0, 0), 6, radius=CORE_nm / np.sqrt(3), orientation=np.pi / 6, fc="none", ec="w")
            )
            axes.set(aspect="equal", xticks=[], yticks=[], title=f"{donors:.0e} cm$^{{-3}}$")
        figure.suptitle("Electrons in the GaAs core, each picture to its own maximum; outlined in white")
        figure.savefig(picture)
    return shares, lines, given


if __name__ == "__main__":
    main(*sys.argv[1:2])
