"""How many edges make a circle? A round InP wire, 24 nm wide, read from meshes of first and of second order.

    python examples/straight_edges.py [PICTURE.png]

A mesh from elsewhere is meshed anew, as finely as the accuracy asks, but its outer sides stay what they are: N straight
ones are a polygon of the area A = N sin(2t)/2 R^2, t = pi/N, for which the circle's level E = hbar^2 z/(2 m R^2), with
z = j01^2, becomes E pi R^2/A (1 + 4 zeta(3)/N^3 + (12 - 2z) zeta(5)/N^5 + (8 + 4z) zeta(3)^2/N^6 + ...) (R. S. Jones,
arXiv:1712.06082). Sides of second order are parabolas, of A = N (sin(2t)/2 + 4/3 sin t (1 - cos t)) R^2, and next to
nothing but this area tells them from arcs.
"""

import sys
import tempfile
from pathlib import Path

import meshio
import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e
from scipy.special import jn_zeros, zeta

import wiresolve as ws

RADIUS_nm, MASS, EDGES, Z = 12.0, 0.0795, (8, 12, 24, 48), jn_zeros(0, 1)[0] ** 2
CIRCLE_meV = 1e3 * hbar**2 / (2 * MASS * m_e * e) * Z / (RADIUS_nm * 1e-9) ** 2
WIRE_FILE = f"""
title = "Edges"
[section]
shape = "mesh"
file = "mesh.msh"
unit = "nm"
group_materials = {{wire = "InP"}}
[materials.InP]
electron_mass = {MASS}
source = "J. Appl. Phys. 89, 5815 (2001)"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 1
energy = "1e-4 meV"
"""


def solved_meV(edges: int, order: int) -> float:
    """A fan of cells around the middle, and a wire file that reads it."""
    turns = np.pi * np.arange(2 * edges) / edges
    rim = RADIUS_nm * np.column_stack([np.cos(turns), np.sin(turns), 0 * turns])
    points, first = np.vstack([[[0, 0, 0]], rim, rim[::2] / 2]), 2 * np.arange(edges)
    after, spoke = (first + 2) % (2 * edges), 1 + 2 * edges + np.arange(edges)
    cells = np.column_stack([0 * first, 1 + first, 1 + after, spoke, 2 + first, np.roll(spoke, -1)])
    block = ("triangle6", cells) if order == 2 else ("triangle", cells[:, :3])
    tags, ones = ("gmsh:physical", "gmsh:geometrical"), np.ones(edges, dtype=int)
    mesh = meshio.Mesh(points, [block], cell_data={tag: [ones] for tag in tags}, field_data={"wire": np.array([1, 2])})
    with tempfile.TemporaryDirectory() as folder:
        meshio.write(Path(folder) / "mesh.msh", mesh, "gmsh22", binary=False)
        (Path(folder) / "wire.toml").write_text(WIRE_FILE, encoding="utf-8")
        return 1e3 * ws.solve(ws.load(Path(folder) / "wire.toml")).energies_eV[0]


def closed_meV(edges: int | np.ndarray, order: int) -> float | np.ndarray:
    half = np.pi / edges
    if order == 2:
        return CIRCLE_meV * half / (np.sin(2 * half) / 2 + 4 / 3 * np.sin(half) * (1 - np.cos(half)))
    series = 4 * zeta(3) / edges**3 + (12 - 2 * Z) * zeta(5) / edges**5 + (8 + 4 * Z) * zeta(3) ** 2 / edges**6
    return CIRCLE_meV * (1 + series) * half / (np.sin(2 * half) / 2)


def main(picture: str | None = None) -> dict[tuple[int, int], tuple[float, float]]:
    pairs = {(n, order): (solved_meV(n, order), closed_meV(n, order)) for order in (1, 2) for n in EDGES}
    for (edges, order), (found, closed) in pairs.items():
        off = f"{found / CIRCLE_meV - 1:.1e} above the circle"
        print(f"{edges} edges of order {order}: {found:.4f} meV, closed form {closed:.4f} meV, {off}")
    if picture:
        figure = Figure(figsize=(5.5, 3.8), dpi=150, layout="constrained")
        axes, line = figure.subplots(), np.linspace(7, 55)
        for order, colour, kind in ((1, "#D55E00", "straight"), (2, "#0072B2", "curved")):
            axes.loglog(line, closed_meV(line, order) / CIRCLE_meV - 1, color=colour, label=f"{kind}: closed form")
            found = [pairs[edges, order][0] / CIRCLE_meV - 1 for edges in EDGES]
            axes.loglog(EDGES, found, "o", color=colour, label=f"{kind}: wiresolve")
        axes.set(xlim=(7, 55), xlabel="Edges around the circle", ylabel="Level above the true one (relative)")
        axes.set_title("A circle in meshes of first and second order")
        axes.minorticks_off()
        axes.set_xticks(EDGES, EDGES)
        axes.legend(frameon=False)
        figure.savefig(picture)
    return pairs


if __name__ == "__main__":
    main(*sys.argv[1:2])
