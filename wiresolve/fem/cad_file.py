"""Geometries made elsewhere (STEP, BREP, Gmsh's scripts), meshed so finely that second-order edges are exact.

Gmsh can end the whole process over a broken file, or never come back. So it works in a process of its own, which runs
this module.
"""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

import numpy as np

from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import Block, MeshData
from wiresolve.errors import InputError, MeshError
from wiresolve.fem import meshing

LONGEST_s = 120
"""Seconds that Gmsh gets for a file."""
TURN_CELLS = 120
"""Edges around a full turn: parabolas then miss a circle by (2 pi / 120)^4 / 512, 1.5e-8 of its radius."""
_KINDS = {1: ("line", 2), 8: ("line3", 3), 2: ("triangle", 3), 9: ("triangle6", 6)}
_ACTIONS = (
    r"SystemCall|NonBlockingSystemCall|System|OnelabRun|OnelabComputeAction|Include|Merge|Open|Save|Print|Parse|Plugin"
    r"|ShapeFromFile|CreateDir|Exit|Abort|GetEnv|MergeWithBoundingBox|Macro|Function|Call"
)
_FORBIDDEN = re.compile(
    r"\b(" + _ACTIONS + r")\b|(?:Printf|Error|Warning)\s*\([^;]*\)\s*>|\b(General|Solver|Print|PostProcessing)\s*\."
)


def meshed(file: InputFile) -> MeshData:
    """The faces of a geometry as a mesh, each face's physical group as its cells' group.

    Faces of a geometry without physical groups are named "surface 1", "surface 2" and so on, in Gmsh's order.

    Raises
    ------
    InputError
        The file holds no plane faces, or a script that does more than draw.
    MeshError
        Gmsh failed on it.
    """
    if file.suffix == ".geo":
        _only_draws(file)
    with tempfile.TemporaryDirectory() as folder:
        given, made = Path(folder, f"drawing{file.suffix}"), Path(folder, "mesh.npz")
        given.write_bytes(file.content)
        home = str(Path(__file__).resolve().parents[2])
        paths = os.pathsep.join(p for p in (home, os.environ.get("PYTHONPATH", "")) if p)
        try:
            done = subprocess.run(
                [sys.executable, "-m", __name__, str(given), str(made)],
                stdin=subprocess.DEVNULL,
                capture_output=True,
                timeout=LONGEST_s,
                env=os.environ | {"PYTHONPATH": paths},
                cwd=folder,
                check=False,
            )
        except subprocess.TimeoutExpired:
            raise MeshError(f"{file.name}: Gmsh did not come to an end within {LONGEST_s} s") from None
        if not made.exists():
            raise MeshError(f"{file.name}: Gmsh could not read it, and ended with code {done.returncode}")
        with np.load(made) as found:
            said = json.loads(str(found["said"]))
            if "fault" in said:
                raise InputError("file", said["fault"], file.name, said["remedy"])
            if "failed" in said:
                raise MeshError(f"{file.name}: {said['failed']}")
            blocks = [Block(kind, found[f"nodes{k}"], found[f"group{k}"]) for k, kind in enumerate(said["kinds"])]
            return MeshData(
                found["points"], tuple(blocks), tuple(said["names"]), np.arange(1, len(found["points"]) + 1)
            )


def _only_draws(file: InputFile) -> None:
    """InputError for a script with commands that act outside of the drawing."""
    text = re.sub(r"//[^\n]*|/\*.*?\*/", " ", file.text("file"), flags=re.S)
    if (found := _FORBIDDEN.search(text)) is not None:
        word = " ".join(found[0].split())[:30]
        rule = f"is a script that does more than draw ('{word}'), so it is not run"
        raise InputError("file", rule, file.name, "take that out, or mesh it yourself and give the mesh")


def _faces(gmsh: Any, path: Path) -> tuple[dict[str, Any], dict[str, Any]]:
    """Arrays of the mesh, and what is to be said of them."""
    gmsh.open(str(path))
    model = gmsh.model
    if path.suffix != ".geo":
        model.occ.removeAllDuplicates()  # faces that touch get one edge there
        model.occ.synchronize()
    surfaces = [tag for _, tag in model.getEntities(2)]
    if model.getEntities(3):
        return {}, {"fault": "holds a solid", "remedy": "export the faces of the plane cross-section"}
    if not surfaces:
        return {}, {"fault": "holds no faces", "remedy": "draw plane surfaces, not only curves"}
    low_x, low_y, _, high_x, high_y, _ = model.getBoundingBox(-1, -1)
    gmsh.option.setNumber("Mesh.MeshSizeMax", max(high_x - low_x, high_y - low_y) / 6)
    model.mesh.generate(2)
    model.mesh.setOrder(2)
    tags, xyz, _ = model.mesh.getNodes()
    by_tag = np.zeros(int(tags.max()) + 1, dtype=np.int64)
    by_tag[tags.astype(np.int64)] = np.arange(len(tags))
    names: list[str] = []
    group_of = {dim: _groups(model, dim, names) for dim in (1, 2)}
    if not group_of[2]:
        group_of[2] = {tag: len(names) + k for k, tag in enumerate(surfaces)}
        names += [f"surface {k}" for k in range(1, len(surfaces) + 1)]
    arrays: dict[str, Any] = {"points": xyz.reshape(-1, 3)}
    kinds: list[str] = []
    for dim in (1, 2):
        for _, entity in model.getEntities(dim):
            if dim == 1 and entity not in group_of[1]:
                continue
            for number, _, nodes in zip(*model.mesh.getElements(dim, entity), strict=True):
                kind, count = _KINDS[int(number)]
                rows = by_tag[np.asarray(nodes, dtype=np.int64)].reshape(-1, count)
                arrays[f"nodes{len(kinds)}"] = rows
                arrays[f"group{len(kinds)}"] = np.full(len(rows), group_of[dim].get(entity, -1))
                kinds.append(kind)
    return arrays, {"kinds": kinds, "names": names}


def _groups(model: Any, dimension: int, names: list[str]) -> dict[int, int]:
    """For each entity the place of its physical group's name in `names`, which grows."""
    found: dict[int, int] = {}
    for _, group in model.getPhysicalGroups(dimension):
        name = model.getPhysicalName(dimension, group) or str(group)
        for entity in model.getEntitiesForPhysicalGroup(dimension, group):
            found[int(entity)] = len(names)
        names.append(name)
    return found


def _main(given: str, made: str) -> None:
    gmsh = meshing.library()
    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    for option, value in {**meshing.OPTIONS, "Mesh.MeshSizeFromCurvature": TURN_CELLS}.items():
        gmsh.option.setNumber(option, value)
    arrays: dict[str, Any] = {}
    try:
        arrays, said = _faces(gmsh, Path(given))
    except Exception as fault:  # Gmsh raises bare exceptions
        said = {"failed": f"Gmsh could not mesh it ({meshing.short(fault).replace(given, Path(given).name)})"}
    np.savez(made, said=json.dumps(said), **arrays)


if __name__ == "__main__":
    _main(sys.argv[1], sys.argv[2])
