"""Series of files that ParaView plays like time: over a gate voltage, a surveyed parameter, the axial wave number."""

from __future__ import annotations

import os
import re
import shutil
from collections.abc import Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING
from xml.sax.saxutils import quoteattr

import numpy as np

from wiresolve.errors import InputError
from wiresolve.mode_groups import channels_of
from wiresolve.output.mode_fields import mode_fields
from wiresolve.output.target import readable
from wiresolve.output.vtk import plane, save
from wiresolve.physics.axial_modes import axial_modes
from wiresolve.physics.wire import Wire
from wiresolve.result import Result

if TYPE_CHECKING:
    from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid

_FRAME = re.compile(r"frame_\d+\.vtu")


def write_series(
    folder: str | Path,
    name: str,
    frames: Iterable[tuple[float, vtkUnstructuredGrid | None]],
    *,
    files: str | None = None,
    stem: str = "frame",
) -> Path:
    """Write `NAME.pvd`, whose time is the value of each frame, and a `.vtu` file for each in a folder beside it.

    Parameters
    ----------
    folder : an existing folder.
    name : of the series.
    frames : value and grid of each, taken one at a time; None for one that is not there but keeps its number. Values
        may come in any order; the series ascends.
    files, stem : the folder of the frames (NAME if not given), and how their names begin: `STEM_0001.vtu`, ...

    Returns
    -------
    The path of the `.pvd` file.

    Raises
    ------
    InputError
        A value is not finite, or there twice: ParaView would show both at once.
    OSError
        A file cannot be written.
    """
    folder, files = Path(folder), files or name
    (folder / files).mkdir()
    written: dict[float, str] = {}
    for number, (value, grid) in enumerate(frames, 1):
        if grid is None:
            continue
        value = float(value) + 0.0
        if not np.isfinite(value) or value in written:
            rule = "must be finite" if not np.isfinite(value) else "is there twice, and each frame needs its own"
            raise InputError("frames", rule, value)
        written[value] = f"{files}/{stem}_{number:04d}.vtu"
        save(grid, folder / written[value])
    lines = ['<?xml version="1.0"?>', '<VTKFile type="Collection" version="0.1" byte_order="LittleEndian">']
    lines.append("  <Collection>")
    for value, file in sorted(written.items()):
        lines.append(
            f'    <DataSet timestep={quoteattr(repr(value))} group="" part="0" file={quoteattr(file)}/>'
        )  # fmt: skip
    lines += ["  </Collection>", "</VTKFile>"]
    target = folder / f"{name}.pvd"
    target.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return target


def write_survey(
    results: Iterable[tuple[float, Result]],
    folder: str | Path,
    of: str = "section.width",
    *,
    unit: str = "nm",
    name: str = "survey",
    linear: bool = False,
) -> Path:
    """Write the modes of several wires as a series over the parameter in which they differ.

    Each frame holds what `modes.vtu` does, and the value as field data (`section_width_nm` for `section.width`).

    Parameters
    ----------
    results : value and result of each wire. They list as many subbands, so that each frame has the same arrays.
    folder : where `NAME.pvd` and the folder NAME with its frames go, and take the place of an older series; it is made.
    of, unit : what was surveyed, by its path in the wire file, and the unit of the values.
    linear : flat cells, as for `wiresolve.output.vtk.write_modes`.

    Returns
    -------
    The path of the `.pvd` file.

    Raises
    ------
    InputError
        Results list unlike numbers of subbands, a value is there twice, the folder NAME holds something else, or it
        cannot be written.
    """
    target = Path(folder).absolute() / name
    if target.is_dir() and not all(_FRAME.fullmatch(p.name) for p in target.iterdir()):
        rule = "holds files that are no frames of a series, so it is not replaced"
        raise InputError("folder", rule, str(Path(folder) / name), "give another name")
    label = f"{of.replace('.', '_')}_{unit}" if unit else of.replace(".", "_")

    def frames() -> Iterator[tuple[float, vtkUnstructuredGrid]]:
        counts = set()
        for value, result in results:
            counts.add(len(result.subbands))
            if len(counts) > 1:
                rule = "must list as many subbands each"
                raise InputError("results", rule, sorted(counts), "solve with the same [accuracy] subbands")
            own = mode_fields(result)
            numbers = {**own.numbers, label: np.array([float(value)])}
            yield float(value), plane(replace(own, numbers=numbers), linear=linear)

    # Beside its place first: solving the wires takes time, and may be interrupted.
    with readable(target, "folder"):
        target.parent.mkdir(parents=True, exist_ok=True)
        with TemporaryDirectory(prefix=f".{name}.", dir=target.parent) as fresh:
            series = write_series(fresh, name, frames())
            shutil.rmtree(target, ignore_errors=True)
            os.replace(Path(fresh) / name, target)
            return series.replace(target.parent / series.name)


def write_along_axis(
    result: Result, folder: str | Path, count: int, *, name: str = "along_axis", linear: bool = False
) -> Path:
    """Write the listed modes at `count` wave numbers from 0 to the end of `result.dispersion` as a series over k.

    Each frame holds what `modes.vtu` does, with the modes and `energy_eV` at its wave number (`k_per_nm` in the field
    data). A subband keeps its name through crossings, and its phase goes on without jumps. Modes that are complex away
    from k = 0 are written as such in every frame. `carriers_01_per_nm3`, ... and the potential are those of the result.

    Parameters
    ----------
    folder : an existing folder for `NAME.pvd` and the folder NAME.
    linear : flat cells, as for `wiresolve.output.vtk.write_modes`.

    Returns
    -------
    The path of the `.pvd` file.

    Raises
    ------
    InputError
        Fewer than two wave numbers.
    OSError
        A file cannot be written.
    """
    if count < 2:
        raise InputError("count", "must be 2 or more", count, "give 11")
    k = np.linspace(0.0, float(result.dispersion.k_per_nm[-1]), count)
    wire, channels, still = Wire(result.problem), channels_of(result), mode_fields(result)
    valleys = [subband.valley for subband in result.subbands]

    def frames() -> Iterator[tuple[float, vtkUnstructuredGrid]]:
        for found in axial_modes(wire, channels, result.mesh, result.modes, valleys, result.spectrum, k):
            own = mode_fields(result, found.states, found.complex_.tolist())
            carriers = {name: values for name, values in still.points.items() if name.startswith("carriers_")}
            numbers = {**own.numbers, "energy_eV": found.energy_eV, "k_per_nm": np.array([found.k_per_nm])}
            moved = replace(own, points={**own.points, **carriers}, numbers=numbers)
            yield found.k_per_nm, plane(moved, linear=linear)

    return write_series(folder, name, frames(), stem="k")
