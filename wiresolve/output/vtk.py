"""Modes and meshes as VTK files (`.vtu`), curved Lagrange triangles or flat ones, through VTK's own writer.

Only VTK's data model and XML modules are loaded: nothing here draws, so no display or graphics library is needed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh
from wiresolve.output.fields import Fields, flat_cells
from wiresolve.output.mode_fields import mode_fields
from wiresolve.result import Result

if TYPE_CHECKING:
    from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid

Ints = NDArray[np.int64]
CURVED = "curved, of degree {degree}: integrals are exact with the cells' own functions"
FLAT = "flat, through the nodes of curved cells of degree {degree}: integrals are approximate"
_COMPRESSION = 3
"""Of zlib; higher levels take twice as long and save nothing."""


def write_modes(result: Result, path: str | Path, *, linear: bool = False) -> None:
    """Write the envelope functions of a result on its mesh.

    Point data: `psi_01_per_nm`, ... (normalised to 1 over the section) and `density_01_per_nm2`, ... (their squares at
    the nodes); of complex modes `psi_01_real_per_nm`, `psi_01_imaginary_per_nm` and `phase_01_rad` in place of the
    first; `carriers_01_per_nm3`, ..., what each subband holds, where a Fermi level is known; `potential_energy_eV`, the
    band edge of the first subband's valleys with the potential, from the energy zero (points where it jumps are there
    once for each region; not a number where carriers are kept out). With gates or charge also `potential_V` and
    `density_per_nm3`.

    Cell data: `layer` and `material` (indices into the field data `layer_names`, `material_names`) and the cell fields
    of the result (`axial_mass_of_first_valleys_m0`, `band_edge_of_first_valleys_eV`). Field data, one value a subband:
    `subband`, `energy_eV`, `error_eV`, `level`, `valley` (label of its group), `k_min_per_nm`, `spin_degeneracy`,
    `valley_degeneracy`, `axial_mass_m0` (not a number where E(k) starts linearly), `line_density_per_nm` where known;
    and `title`, `energy_zero`, `input_digest`, `cells`. Coordinates are in nm in the plane z = 0. The same result gives
    the same bytes.

    Parameters
    ----------
    linear : flat triangles through the nodes of the curved cells, for programs that know no others; integrals over
        them are approximate, as the field data `cells` says. Texts are UTF-8 numbers there (`input_digest_utf8`; lines
        end with 10), because many programs know no strings.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    save(plane(mode_fields(result), linear=linear), path)


def write_section(mesh: Mesh, path: str | Path, *, linear: bool = False) -> None:
    """Write a mesh alone, with `layer` and `material` on its cells.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    save(plane(Fields(mesh, active="layer"), linear=linear), path)


def grid(
    mesh: Mesh,
    point_data: Mapping[str, NDArray[Any]] | None = None,
    cell_data: Mapping[str, NDArray[Any]] | None = None,
    field_data: Mapping[str, NDArray[Any]] | None = None,
    texts: Mapping[str, Sequence[str]] | None = None,
    *,
    linear: bool = False,
    active: str = "",
) -> vtkUnstructuredGrid:
    """A VTK grid of a mesh with named arrays.

    Parameters
    ----------
    mesh : surroundings farther away than four sizes of all else are left out.
    point_data, cell_data : arrays of shape (points,) and (cells,) by name.
    field_data, texts : numbers and lists of strings that belong to the whole file.
    linear, active : as in `plane`, and the array that is shown at first.
    """
    given = Fields(mesh, point_data or {}, cell_data or {}, {}, field_data or {}, texts or {}, active)
    return plane(given, linear=linear)


def plane(fields: Fields, *, linear: bool = False) -> vtkUnstructuredGrid:
    """A VTK grid of fields in the plane z = 0.

    Parameters
    ----------
    linear : flat triangles through the nodes, in place of `VTK_LAGRANGE_TRIANGLE` cells of the mesh's degree.
    """
    from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_TRIANGLE, VTK_TRIANGLE

    fields = prepared(fields, linear=linear)
    mesh = fields.mesh
    cells, kind = mesh.cells, VTK_LAGRANGE_TRIANGLE
    if linear:
        parts = flat_cells(mesh.degree)
        cells, kind = cells[:, parts].reshape(-1, 3), VTK_TRIANGLE
        repeated = {name: np.repeat(values, len(parts)) for name, values in fields.cells.items()}
        fields = replace(fields, cells=repeated)
    return assembled(np.column_stack([mesh.points, np.zeros(len(mesh.points))]), cells, kind, fields)


def prepared(fields: Fields, *, linear: bool) -> Fields:
    """Fields as they are written: with regions, without what is far away, jumps torn apart, kind of cells said."""
    made, said = fields.with_regions().near().torn(), (FLAT if linear else CURVED).format(degree=fields.mesh.degree)
    return replace(made, texts={**made.texts, "cells": [said]})


def assembled(points: NDArray[np.float64], cells: Ints, kind: int, fields: Fields) -> vtkUnstructuredGrid:
    """A VTK grid of one kind of cells.

    Parameters
    ----------
    points : (n, 3) in nm.
    cells : (c, nodes per cell) in the order that VTK has for `kind`.
    fields : the arrays, of these numbers of points and cells. With flat cells texts are written as numbers.
    """
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
    from vtkmodules.vtkCommonDataModel import VTK_TRIANGLE, VTK_WEDGE, vtkCellArray, vtkUnstructuredGrid

    if kind in (VTK_TRIANGLE, VTK_WEDGE):
        fields = fields.with_texts_as_numbers()

    def attach(target: Any, arrays: Mapping[str, NDArray[Any]]) -> None:
        for name, values in arrays.items():
            array = numpy_to_vtk(np.ascontiguousarray(values), deep=True)
            array.SetName(name)
            target.AddArray(array)

    out = vtkUnstructuredGrid()
    places = vtkPoints()
    places.SetData(numpy_to_vtk(np.ascontiguousarray(points), deep=True))
    out.SetPoints(places)
    count, nodes = cells.shape
    lists = vtkCellArray()
    lists.SetData(
        numpy_to_vtkIdTypeArray(np.arange(count + 1, dtype=np.int64) * nodes, deep=True),
        numpy_to_vtkIdTypeArray(np.ascontiguousarray(cells, dtype=np.int64).ravel(), deep=True),
    )
    out.SetCells(kind, lists)
    attach(out.GetCellData(), fields.cells)
    attach(out.GetPointData(), fields.points)
    attach(out.GetFieldData(), fields.numbers)
    for name, lines in fields.texts.items():
        array = vtkStringArray()
        array.SetName(name)
        for line in lines:
            array.InsertNextValue(line)
        out.GetFieldData().AddArray(array)
    for data in (out.GetPointData(), out.GetCellData()):
        if fields.active and data.HasArray(fields.active):
            data.SetActiveScalars(fields.active)
    return out


def save(data: vtkUnstructuredGrid, path: str | Path, *, compressed: bool = False) -> None:
    """Write a grid as a `.vtu` file; OSError where it cannot be written.

    Parameters
    ----------
    compressed : by zlib, for arrays that repeat themselves; the digits of a mode are as good as random, and a quarter
        of their size costs three quarters of the time.
    """
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    # VTK reports a full disk on its own error stream and returns; written to memory first, Python raises OSError.
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(data)
    writer.SetDataModeToAppended()
    writer.SetHeaderTypeToUInt64()
    if compressed:
        writer.SetCompressorTypeToZLib()
        writer.SetCompressionLevel(_COMPRESSION)
    else:
        writer.SetCompressorTypeToNone()
    writer.WriteToOutputStringOn()
    if not writer.Write():
        raise RuntimeError("VTK could not serialise the mesh")
    Path(path).write_text(writer.GetOutputString(), encoding="utf-8")
