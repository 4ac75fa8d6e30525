"""The wire as a volume for ParaView: the section swept along the axis, with each mode's plane wave."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import InputError
from wiresolve.fem.lagrange import triangle
from wiresolve.output.fields import Fields, flat_cells
from wiresolve.output.mode_fields import OF_RUN, numbered, section_fields
from wiresolve.output.vtk import assembled, prepared, save
from wiresolve.physics.axial_modes import slant
from wiresolve.physics.wave_numbers import wave_numbers
from wiresolve.physics.wire import Wire
from wiresolve.result import Result

if TYPE_CHECKING:
    from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

CELLS_A_WAVE, FEWEST_A_WAVE = 4, 2
"""Cells along the axis for the shortest wave: with 4 of them |psi|^2 of the interpolated wave is right to 1e-4, with 2
to 5e-3."""
MOST_CELLS = 128
"""Cells along the axis; modes whose waves are too short for them are left out."""
MOST_VALUES = 12_000_000
"""Values of all modes together (50 MB before compression); higher modes are left out beyond."""


def write_volume(result: Result, path: str | Path, length_nm: float, *, linear: bool = False) -> None:
    """Write a length of the wire as a volume, its modes as waves along it; surroundings are left out.

    A mode is psi(x, y) exp(i k z), z from 0 to the length, with psi the mode at k = 0 (times exp(-i k s.r) for a valley
    that leans towards the axis and has one mass tensor all over: the fronts of its wave are slanted). k is the Fermi
    wave number where there is a Fermi level and the mode lies below it, else one wave fits into the length.

    Point data, in single precision: `psi_01_real_per_nm`, `psi_01_imaginary_per_nm` and `density_01_per_nm2`, ... (the
    density integrates to the length), and `potential_energy_eV`, `potential_V` and `density_per_nm3` of `modes.vtu`.
    Cell and field data are those of `modes.vtu`, the latter of the modes that are there (`subband` lists them), with
    `k_per_nm`, `length_nm`, and `left_out`, which says of what modes there was no room. The same result gives the same
    bytes.

    Parameters
    ----------
    linear : flat wedges through the nodes of the curved ones, for programs that know no others.

    Raises
    ------
    InputError
        The length is not positive.
    OSError
        The file cannot be written.
    """
    save(volume(result, length_nm, linear=linear), path, compressed=True)


def volume(result: Result, length_nm: float, *, linear: bool = False) -> vtkUnstructuredGrid:
    """The volume as a VTK grid; parameters and errors are those of `write_volume`."""
    if not (np.isfinite(length_nm) and length_nm > 0):
        raise InputError("length_nm", "must be positive", length_nm, "give a length in nm like 30.0")
    still = section_fields(result)
    # Modes go through the cuts of the mesh by their numbers, still without their waves.
    states = {str(i): result.modes[:, i] for i in range(result.modes.shape[1])}
    fields = replace(still, points={**still.points, **states}).without_surroundings()
    fields = prepared(fields, linear=linear)
    mesh, k = fields.mesh, axial_waves(result, length_nm)
    waves = k * length_nm / (2 * np.pi)
    shown = waves <= MOST_CELLS / FEWEST_A_WAVE
    count = int(np.clip(np.ceil(CELLS_A_WAVE * waves[shown].max(initial=1.0)), 1, MOST_CELLS))
    z = length_nm * np.arange(count * mesh.degree + 1) / (count * mesh.degree)
    most = max(1, MOST_VALUES // (3 * len(z) * len(mesh.points)))
    modes = np.flatnonzero(shown)[:most]
    arrays = {name: fields.points[name] for name in fields.points if name not in states}
    swept = {name: np.tile(values, len(z)).astype(np.float32) for name, values in arrays.items()}
    wire = Wire(result.problem)
    leaning = {label: slant(wire, result.mesh, label) for label in {s.valley for s in result.subbands}}
    for mode in modes:
        number, psi = numbered(int(mode) + 1, len(k)), fields.points[str(mode)]
        if (lean := leaning[result.subbands[mode].valley]) is not None:
            psi = psi * np.exp(-1j * k[mode] * (mesh.points @ lean))
        wave = np.exp(1j * k[mode] * z)[:, None] * psi
        swept[f"psi_{number}_real_per_nm"] = wave.real.astype(np.float32).ravel()
        swept[f"psi_{number}_imaginary_per_nm"] = wave.imag.astype(np.float32).ravel()
        swept[f"density_{number}_per_nm2"] = np.tile((np.abs(psi) ** 2).astype(np.float32), len(z))
    kind, cells = (_flat_wedges if linear else _curved_wedges)(mesh.cells, mesh.degree, count, len(mesh.points))
    fields = replace(
        fields,
        points=swept,
        cells={name: np.resize(values, len(cells)) for name, values in _on_parts(fields, linear).items()},
        numbers=_of_modes(still.numbers, modes) | {"k_per_nm": k[modes], "length_nm": np.array([length_nm])},
        texts={
            **fields.texts,
            "valley": [result.subbands[mode].valley for mode in modes],
            "left_out": _left_out(shown, modes, length_nm),
        },
        active=f"density_{numbered(int(modes[0]) + 1, len(k))}_per_nm2" if len(modes) else "layer",
    )
    points = np.column_stack([np.tile(mesh.points, (len(z), 1)), np.repeat(z, len(mesh.points))])
    return assembled(points, cells, kind, fields)


def axial_waves(result: Result, length_nm: float) -> Array:
    """(n,) wave number of each listed mode in 1/nm: that at the Fermi level, or one wave over the length."""
    one = np.full(len(result.subbands), 2 * np.pi / length_nm)
    fermi = result.problem.fermi_level_eV
    if fermi is None:
        return one
    found = wave_numbers(result.spectrum, fermi)
    return np.where(np.isfinite(found), found, one)


def _of_modes(numbers: Mapping[str, NDArray[Any]], modes: Ints) -> dict[str, NDArray[Any]]:
    """Field data of the modes that are there; what belongs to the run stays as it is."""
    return {name: values if name in OF_RUN else values[modes] for name, values in numbers.items()}


def _left_out(shown: NDArray[np.bool_], modes: Ints, length_nm: float) -> list[str]:
    """What is said of modes that are not there."""
    short, rest = np.flatnonzero(~shown), np.setdiff1d(np.flatnonzero(shown), modes)
    reasons = ((short, f"waves too short to be shown over {length_nm:g} nm"), (rest, "the file would be too large"))
    return [
        f"subband{'s' if len(which) > 1 else ''} {', '.join(str(n + 1) for n in which)}: {reason}"
        for which, reason in reasons
        if len(which)
    ]


def _on_parts(fields: Fields, linear: bool) -> dict[str, NDArray[Any]]:
    """Cell data on one sheet of cells, which the others repeat."""
    parts = len(flat_cells(fields.mesh.degree)) if linear else 1
    return {name: np.repeat(values, parts) for name, values in fields.cells.items()}


def _curved_wedges(plane: Ints, degree: int, count: int, points: int) -> tuple[int, Ints]:
    """Lagrange wedges, sheet by sheet, in the node order that VTK itself tells."""
    from vtkmodules.vtkCommonDataModel import VTK_LAGRANGE_WEDGE, vtkHigherOrderWedge

    at = np.rint(triangle(degree).nodes * degree).astype(int)
    nodes = len(at) * (degree + 1)
    order = [degree, degree, degree, nodes]
    in_plane, level = np.empty(nodes, dtype=np.int64), np.empty(nodes, dtype=np.int64)
    for node, (i, j) in enumerate(at):
        for k in range(degree + 1):
            slot = vtkHigherOrderWedge.PointIndexFromIJK(int(i), int(j), k, order)
            in_plane[slot], level[slot] = node, k
    sheet = plane[:, in_plane] + points * level
    starts = points * degree * np.arange(count)
    return VTK_LAGRANGE_WEDGE, (starts[:, None, None] + sheet).reshape(-1, nodes)


def _flat_wedges(plane: Ints, degree: int, count: int, points: int) -> tuple[int, Ints]:
    """Linear wedges through the nodes, sheet by sheet."""
    from vtkmodules.vtkCommonDataModel import VTK_WEDGE

    corners = plane[:, flat_cells(degree)].reshape(-1, 3)
    sheet = np.hstack([corners, corners + points])
    starts = points * np.arange(count * degree)
    return VTK_WEDGE, (starts[:, None, None] + sheet).reshape(-1, 6)
