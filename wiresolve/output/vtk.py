"""Modes and meshes as VTK files (`.vtu`) of curved Lagrange triangles, through VTK's own writer.

Only VTK's data model and XML modules are loaded: nothing here draws, so no display or graphics library is needed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh
from wiresolve.result import Result

if TYPE_CHECKING:
    from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid

SEEN = 4.0
SURROUNDINGS = ("below", "above", "beside")


def write_modes(result: Result, path: str | Path) -> None:
    """Write the envelope functions of a result on its curved mesh.

    Point data: `psi_01_per_nm`, ... (normalised to 1 over the section) and `density_01_per_nm2`, ... (their squares at
    the nodes). Cell data: `layer` and `material` (indices into the field data `layer_names`, `material_names`) and the
    cell fields of the result (`axial_mass_of_first_valleys_m0`, `band_edge_of_first_valleys_eV`). Field data, one value
    a subband: `energy_eV`, `error_eV`, `level`, `valley` (label of its group), `spin_degeneracy`, `valley_degeneracy`,
    `axial_mass_m0` (not a number where E(k) starts linearly); and `input_digest`. Coordinates are in nm in the plane z
    = 0. The same result gives the same bytes.

    With gates or charge there are also the point data `potential_V`, `density_per_nm3` and
    `potential_energy_eV`: the band edge of the first subband's valleys less the potential, from the Fermi level; of two
    materials that meet the lower one, and not a number where carriers are kept out.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    width = max(2, len(str(len(result.subbands))))
    points: dict[str, NDArray[Any]] = {}
    for column, subband in enumerate(result.subbands):
        psi = np.ascontiguousarray(result.modes[:, column])
        points[f"psi_{subband.index:0{width}d}_per_nm"] = psi
        points[f"density_{subband.index:0{width}d}_per_nm2"] = psi**2
    if result.charge is not None and (energy := result.potential_energy_eV) is not None:
        points["potential_V"] = result.charge.potential_V
        points["density_per_nm3"] = result.charge.density_per_nm3
        points["potential_energy_eV"] = energy
    fields: dict[str, NDArray[Any]] = {
        "energy_eV": result.energies_eV,
        "error_eV": result.errors_eV,
        "level": np.array([s.level for s in result.subbands], dtype=np.int32),
        "spin_degeneracy": np.array([s.spin_degeneracy for s in result.subbands], dtype=np.int32),
        "valley_degeneracy": np.array([s.valley_degeneracy for s in result.subbands], dtype=np.int32),
        "axial_mass_m0": np.array([np.nan if s.axial_mass is None else s.axial_mass for s in result.subbands]),
    }
    texts = {"valley": [s.valley for s in result.subbands], "input_digest": [result.problem.digest]}
    save(grid(result.mesh, points, result.cell_fields, fields, texts), path)


def write_section(mesh: Mesh, path: str | Path) -> None:
    """Write a mesh alone, with `layer` and `material` on its cells.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    save(grid(mesh), path)


def grid(
    mesh: Mesh,
    point_data: Mapping[str, NDArray[Any]] | None = None,
    cell_data: Mapping[str, NDArray[Any]] | None = None,
    field_data: Mapping[str, NDArray[Any]] | None = None,
    texts: Mapping[str, list[str]] | None = None,
) -> vtkUnstructuredGrid:
    """A VTK grid of `VTK_LAGRANGE_TRIANGLE` cells with named arrays.

    Parameters
    ----------
    mesh : its cells list their nodes in the order that VTK uses too. Surroundings farther away than `SEEN` sizes of
        all else are left out, or nothing of the wire would be seen.
    point_data, cell_data : arrays of shape (points,) and (cells,) by name.
    field_data, texts : numbers and lists of strings that belong to the whole file.
    """
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
    from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE, vtkCellArray, vtkUnstructuredGrid

    def attach(target: Any, name: str, values: NDArray[Any]) -> None:
        array = numpy_to_vtk(np.ascontiguousarray(values), deep=True)
        array.SetName(name)
        target.AddArray(array)

    def attach_texts(target: Any, name: str, lines: list[str]) -> None:
        array = vtkStringArray()
        array.SetName(name)
        for line in lines:
            array.InsertNextValue(line)
        target.AddArray(array)

    if (near := _near(mesh)) is not None:
        kept, used = near
        number = np.full(len(mesh.points), -1)
        number[used] = np.arange(len(used))
        point_data = {name: values[used] for name, values in (point_data or {}).items()}
        cell_data = {name: values[kept] for name, values in (cell_data or {}).items()}
        mesh = replace(
            mesh,
            points=mesh.points[used],
            cells=number[mesh.cells[kept]],
            region=mesh.region[kept],
            corners=number[mesh.corners][number[mesh.corners] >= 0],
        )
    out = vtkUnstructuredGrid()
    xyz = np.zeros((len(mesh.points), 3))
    xyz[:, :2] = mesh.points
    points = vtkPoints()
    points.SetData(numpy_to_vtk(xyz, deep=True))
    out.SetPoints(points)
    count, nodes = mesh.cells.shape
    cells = vtkCellArray()
    cells.SetData(
        numpy_to_vtkIdTypeArray(np.arange(count + 1, dtype=np.int64) * nodes, deep=True),
        numpy_to_vtkIdTypeArray(np.ascontiguousarray(mesh.cells, dtype=np.int64).ravel(), deep=True),
    )
    out.SetCells(VTK_LAGRANGE_TRIANGLE, cells)

    names = list(dict.fromkeys(region.material for region in mesh.regions))
    of_region = np.array([names.index(region.material) for region in mesh.regions], dtype=np.int32)
    attach(out.GetCellData(), "layer", np.asarray(mesh.region, dtype=np.int32))
    attach(out.GetCellData(), "material", of_region[mesh.region])
    for name, values in (cell_data or {}).items():
        attach(out.GetCellData(), name, values)
    for name, values in (point_data or {}).items():
        attach(out.GetPointData(), name, values)
    for name, values in (field_data or {}).items():
        attach(out.GetFieldData(), name, values)
    attach_texts(out.GetFieldData(), "layer_names", [region.name for region in mesh.regions])
    attach_texts(out.GetFieldData(), "material_names", names)
    for name, lines in (texts or {}).items():
        attach_texts(out.GetFieldData(), name, lines)
    return out


def _near(mesh: Mesh) -> tuple[NDArray[np.int64], NDArray[np.int64]] | None:
    """Cells and points without the surroundings farther than `SEEN` sizes of the rest; None where all are near."""
    far = np.array([region.name.split()[0] in SURROUNDINGS for region in mesh.regions])
    if not far.any():
        return None
    corner = mesh.points[mesh.cells[:, :3]]
    own = corner[~far[mesh.region]].reshape(-1, 2)
    low, high = own.min(axis=0), own.max(axis=0)
    reach = SEEN * float((high - low).max())
    inside = ((corner >= low - reach) & (corner <= high + reach)).all(axis=(1, 2))
    kept = np.flatnonzero(inside | ~far[mesh.region])
    return kept, np.unique(mesh.cells[kept])


def save(data: vtkUnstructuredGrid, path: str | Path) -> None:
    """Write a grid as a `.vtu` file; OSError where it cannot be written."""
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    # VTK reports a full disk on its own error stream and returns; written to memory first, Python raises OSError.
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(data)
    writer.SetDataModeToAppended()
    writer.SetHeaderTypeToUInt64()
    writer.WriteToOutputStringOn()
    if not writer.Write():
        raise RuntimeError("VTK could not serialise the mesh")
    Path(path).write_text(writer.GetOutputString(), encoding="ascii")
