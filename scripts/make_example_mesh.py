"""Makes geometries/imported_mesh.msh: what a mesh from another program may look like.

    python scripts/make_example_mesh.py [FILE.msh]

A round core in a round shell as curved triangles of second order with physical groups, somewhere in the plane, in
micrometres.
"""

from __future__ import annotations

import sys
from pathlib import Path

import gmsh

TARGET = Path(__file__).resolve().parents[1] / "geometries" / "imported_mesh.msh"
CENTER_um, CORE_um, SHELL_um, CELL_um = (0.12, -0.04), 0.008, 0.016, 0.0026


def main(target: Path) -> None:
    """Draw, mesh and write."""
    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    try:
        for option, value in {
            "General.Terminal": 0,
            "Mesh.MeshSizeMax": CELL_um,
            "Mesh.MeshSizeFromCurvature": 56,
            "Mesh.MshFileVersion": 4.1,
            "Mesh.Binary": 0,
            "Mesh.SaveAll": 0,
        }.items():
            gmsh.option.setNumber(option, value)
        occ = gmsh.model.occ
        inner, outer = (occ.addCurveLoop([occ.addCircle(*CENTER_um, 0, radius)]) for radius in (CORE_um, SHELL_um))
        core, shell = occ.addPlaneSurface([inner]), occ.addPlaneSurface([outer, inner])
        occ.synchronize()
        rim = [tag for _, tag in gmsh.model.getBoundary([(2, core), (2, shell)], oriented=False)]
        gmsh.model.addPhysicalGroup(2, [core], name="channel")
        gmsh.model.addPhysicalGroup(2, [shell], name="cladding")
        gmsh.model.addPhysicalGroup(1, rim, name="wrap")
        gmsh.model.mesh.generate(2)
        gmsh.model.mesh.setOrder(2)
        gmsh.write(str(target))
    finally:
        gmsh.finalize()


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else TARGET)
