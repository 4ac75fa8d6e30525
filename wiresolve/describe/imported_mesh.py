"""Meshes made elsewhere, from the bytes of their file: MSH, and what meshio reads; nothing else imports it."""

from __future__ import annotations

import contextlib
import io
import re
import tempfile
import warnings
from collections.abc import Callable
from pathlib import Path, PurePath
from typing import Any, TypeVar

import numpy as np

from wiresolve.describe import msh_file
from wiresolve.describe.mesh_data import CELLS, LINES, MOST_CELLS, Array, Block, MeshData, too_many
from wiresolve.errors import InputError

FORMATS = {".msh": "gmsh", ".vtu": "vtu", ".vtk": "vtk", ".inp": "abaqus", ".mesh": "medit"}
"""Endings of the formats that are tested, with meshio's names for them."""
_PLANE = 1e-6
_Used = TypeVar("_Used")
REGION_ARRAYS = ("region", "material", "group", "gmsh:physical", "medit:ref", "cell_tags", "CellEntityIds")
"""Names of cell data that tell regions."""
_FLAT = 1e-9
_COUNTS = [
    rb"\$Elements\s+(\d{1,18})[ \r]*\n",
    rb"\$Elements\s+\d{1,18}\s+(\d{1,18})\s",
    rb'NumberOfCells="\s*(\d{1,18})',
    rb"\nCELLS\s+(\d{1,18})\s",
]
"""How files tell the number of their cells before these follow."""


def read(field: str, name: str, content: bytes, array: str | None = None) -> MeshData:
    """The mesh in a file's bytes; its `name` tells the format, `array` the cell data with the regions.

    Raises `InputError` about `field` for a format that is not known, a damaged file, or one with too many cells.
    """
    suffix = PurePath(name).suffix.lower()
    if suffix not in FORMATS:
        remedy = "convert it to MSH, VTU, VTK, Abaqus or Medit"
        raise InputError(field, f"'{suffix or name}' is no mesh format that can be read", remedy=remedy)
    if not content.strip():
        raise InputError(field, "is empty")
    for pattern in _COUNTS:
        for found in re.finditer(pattern, content[:4096] if b"NumberOf" in pattern else content):
            if int(found[1]) > MOST_CELLS:
                _refuse_cells(field, int(found[1]))
            break
    data = (
        msh_file.parse(field, content)
        if suffix == ".msh"
        else _by_meshio(field, suffix, content, lambda mesh: _converted(field, mesh, array))
    )
    if (count := sum(len(block.nodes) for block in data.blocks)) > MOST_CELLS:
        _refuse_cells(field, count)
    return data


def _refuse_cells(field: str, count: int) -> None:
    rule, given, remedy = too_many(count)
    raise InputError(field, rule, given, remedy)


def point_values(field: str, name: str, content: bytes, array: str) -> tuple[Array, Array]:
    """Points of the plane, shape (n, 2), and the values of a point array of a mesh's file there."""

    def chosen(mesh: Any) -> tuple[Array, Array]:
        if array not in mesh.point_data:
            has = ", ".join(f"'{n}'" for n in mesh.point_data) or "none"
            raise InputError("array", f"is no point data of the file, which has {has}", array)
        points, values = np.asarray(mesh.points, dtype=float), np.asarray(mesh.point_data[array], dtype=float)
        if values.shape not in ((len(points),), (len(points), 1)):
            raise InputError("array", "must hold one number a point", array)
        if not (np.isfinite(points).all() and np.isfinite(values).all()):
            raise InputError(field, "holds numbers that are not finite")
        if points.shape[1] == 3 and np.ptp(points[:, 2]) > _PLANE * np.ptp(points[:, :2]):
            raise InputError(field, "does not lie in one plane", remedy="export the plane cross-section")
        return points[:, :2], values.ravel()

    return _by_meshio(field, PurePath(name).suffix.lower(), content, chosen)


def _by_meshio(field: str, suffix: str, content: bytes, use: Callable[[Any], _Used]) -> _Used:
    """What `use` makes of the mesh that meshio reads; whatever goes wrong is an InputError about `field`."""
    import meshio

    said = io.StringIO()
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, f"mesh{suffix}")
        path.write_bytes(content)
        try:
            # meshio prints, warns, and for a file that it cannot read ends the program.
            with contextlib.redirect_stdout(said), contextlib.redirect_stderr(said), warnings.catch_warnings():
                warnings.simplefilter("ignore")
                mesh = meshio.read(path, FORMATS[suffix])
            return use(mesh)
        except InputError:
            raise
        except ModuleNotFoundError as fault:
            rule = f"keeps its numbers in a form that needs the package {fault.name}"
            raise InputError(field, rule, remedy="write it as XML or text, or as MSH or VTU") from None
        except (Exception, SystemExit) as fault:
            reason = (
                " ".join(f"{fault}".replace(str(path), "it").split())[:120] if not isinstance(fault, SystemExit) else ""
            )
            rule = f"cannot be read as {FORMATS[suffix].upper()}" + (f" ({reason})" if len(reason) > 3 else "")
            raise InputError(field, rule, remedy="it may be cut off; write it anew, or as MSH") from None


def _converted(field: str, mesh: Any, array: str | None) -> MeshData:
    points = np.asarray(mesh.points, dtype=float)
    if points.ndim != 2 or points.shape[1] not in (2, 3):
        raise InputError(field, "has nodes that are no points of a plane or of space")
    points = np.hstack([points, np.zeros((len(points), 3 - points.shape[1]))])
    labels, names, chosen = _labels(field, mesh, array)
    blocks = []
    for block, label in zip(mesh.cells, labels, strict=True):
        kind, nodes = block.type, np.asarray(block.data)
        if kind == "vertex" or not len(nodes):
            continue
        if kind not in CELLS and kind not in LINES:
            raise InputError(field, *_wrong_kind(kind))
        nodes = nodes.astype(np.int64)
        if nodes.min() < 0 or nodes.max() >= len(points):
            raise InputError(field, "has a cell with a node that is not there", remedy="write the file anew")
        blocks.append(Block(kind, nodes, label))
    return MeshData(points, tuple(blocks), names, np.arange(1, len(points) + 1), chosen)


def _wrong_kind(kind: str) -> tuple[str, str, str]:
    if kind.startswith(("tetra", "hexa", "wedge", "pyramid", "polyhedron")):
        return "is a 3D mesh", kind, "export the plane cross-section"
    if kind.startswith(("triangle", "quad", "line", "VTK_LAGRANGE")):
        return "holds cells above the second order", kind, "export first or second order"
    return "holds cells of a kind that cannot be used", kind, "export triangles or quads"


def _labels(field: str, mesh: Any, array: str | None) -> tuple[list[np.ndarray], tuple[str, ...], str | None]:
    """For each block the index of each cell's group; the groups' names; the cell data that tells them."""
    sets = {n: s for n, s in mesh.cell_sets.items() if not n.startswith("gmsh:")}
    if sets and array is None:
        return *_from_sets(field, mesh, sets), None
    whole = {}
    for name, parts in mesh.cell_data.items():
        values = [np.asarray(part) for part in parts]
        if all(v.ndim == 1 and v.dtype.kind in "iu" for v in values):
            whole[name] = values
    if array is not None:
        if array not in mesh.cell_data:
            has = ", ".join(f"'{n}'" for n in mesh.cell_data) or "none"
            raise InputError("array", f"is no cell data of the mesh, which has {has}", array)
        if array not in whole:
            raise InputError("array", "must hold one integer a cell", array, "export the regions as integers")
    named = [n for n in REGION_ARRAYS if n in whole] or list(whole)
    if array is None and len(named) != 1:
        has = f"has several arrays that may tell the regions ({', '.join(whole)})" if whole else "names no regions"
        remedy = 'give array = "NAME"' if whole else "export cell data with an integer for each region"
        raise InputError(field, has, remedy=remedy)
    chosen = named[0] if array is None else array
    values = whole[chosen]
    every = sorted({int(v) for part in values for v in np.unique(part)})
    known = {int(tag): name for name, (tag, dim) in _field_data(mesh).items() if dim == 2}
    place = {v: k for k, v in enumerate(every)}
    labels = [np.array([place[int(v)] for v in part], dtype=np.int64).reshape(-1) for part in values]
    return labels, tuple(known.get(v, str(v)) for v in every), chosen


def _field_data(mesh: Any) -> dict[str, tuple[int, int]]:
    return {n: (int(v[0]), int(v[1])) for n, v in mesh.field_data.items() if np.shape(v) == (2,)}


def _from_sets(field: str, mesh: Any, sets: dict[str, Any]) -> tuple[list[np.ndarray], tuple[str, ...]]:
    labels = [np.full(len(block.data), -1, dtype=np.int64) for block in mesh.cells]
    for index, parts in enumerate(sets.values()):
        for label, chosen in zip(labels, parts, strict=True):
            if chosen is None or not len(chosen):
                continue
            if (label[chosen] >= 0).any():
                raise InputError(field, "has cells that are in two groups at once", list(sets)[index])
            label[np.asarray(chosen, dtype=np.int64)] = index
    return labels, tuple(str(n)[:60] for n in sets)
