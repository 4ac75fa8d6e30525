"""Mesh a candidate section from Python: a hexagonal core with rounded corners in a shell.

    python examples/mesh_a_section.py [PICTURE.png]

The mesh is the one that a solve ends on. Its cells have curved sides, of fourth degree through five nodes, so that few
of them hold the areas to many digits. Closed form: a hexagon of width F across its flats with corners rounded by r has
the area sqrt(3)/2 F^2 - 6 r^2 (tan 30 deg - pi/6); the shell is what a larger one has more.
"""

import sys

import numpy as np
from matplotlib.collections import PolyCollection
from matplotlib.figure import Figure
from numpy.polynomial import Polynomial

import wiresolve as ws

FLATS_nm, RADIUS_nm, SHELL_nm = 24.0, 4.0, 6.0
SIDES = [[0, 3, 4, 5, 1], [1, 6, 7, 8, 2], [2, 9, 10, 11, 0]]  # the nodes along the three sides of a cell
LAGRANGE = [Polynomial.fit(np.linspace(-1, 1, 5), one, 4) for one in np.eye(5)]  # between them


def hexagon_nm2(flats_nm: float, radius_nm: float) -> float:
    return np.sqrt(3) / 2 * flats_nm**2 - 6 * radius_nm**2 * (np.tan(np.pi / 6) - np.pi / 6)


def main(picture: str | None = None) -> tuple[list[float], list[float], int]:
    core = ws.shapes.Hexagon(across_flats_nm=FLATS_nm, corner_radius_nm=RADIUS_nm)
    shell = ws.Layer(thickness_nm=SHELL_nm, material="Al0.3Ga0.7As")
    section = ws.Section(shape=core, material="GaAs", layers=(shell,))
    made = ws.mesh(ws.Problem("Hexagon", section, ws.Carriers(temperature_K=77.0), ws.Accuracy(subbands=4)))
    mesh = made.mesh

    nodes_nm = mesh.points[mesh.cells[:, SIDES]]  # cells x sides x nodes x coordinates
    x_dy = [[(x * y.deriv()).integ(lbnd=-1)(1) for y in LAGRANGE] for x in LAGRANGE]
    cell_nm2 = np.einsum("csi,ij,csj->c", nodes_nm[..., 0], x_dy, nodes_nm[..., 1])  # Green's theorem
    layer = np.array([region.name for region in mesh.regions])[mesh.region]  # of each cell
    found_nm2 = [float(cell_nm2[layer == name].sum()) for name in ("core", "layer 1")]
    core_nm2, all_nm2 = hexagon_nm2(FLATS_nm, RADIUS_nm), hexagon_nm2(FLATS_nm + 2 * SHELL_nm, RADIUS_nm + SHELL_nm)
    print(f"{len(mesh.cells)} cells, {made.unknowns} unknowns, accuracy met: {made.met}")
    print(f"core:  {found_nm2[0]:.6f} nm^2, closed form {core_nm2:.6f} nm^2")
    print(f"shell: {found_nm2[1]:.6f} nm^2, closed form {all_nm2 - core_nm2:.6f} nm^2")
    if picture:
        figure = Figure(figsize=(5.0, 4.8), dpi=120, layout="constrained")
        axes = figure.subplots()
        outlines = np.einsum("csix,ip->cspx", nodes_nm, [one(np.linspace(-1, 1, 15)) for one in LAGRANGE])
        colours = np.where(layer == "core", "#6BACD3", "#F3CE85")
        axes.add_collection(PolyCollection(outlines.reshape(len(colours), -1, 2), fc=colours, ec="white", lw=0.6))
        axes.autoscale_view()
        axes.set(aspect="equal", xlabel="x (nm)", ylabel="y (nm)")
        axes.set_title(f"GaAs in Al0.3Ga0.7As: {len(mesh.cells)} curved cells")
        figure.savefig(picture)
    return found_nm2, [core_nm2, all_nm2 - core_nm2], made.unknowns


if __name__ == "__main__":
    main(*sys.argv[1:2])
