"""The folder of a gate curve: tables, figures, and a series of potential, density and modes for ParaView."""

from __future__ import annotations

from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

import numpy as np
from numpy.typing import NDArray

from wiresolve.gate_result import GateCurve, GatePoint
from wiresolve.output import gate_curve_tables, tables, vtk
from wiresolve.output.folder import FIGURES, INPUT, INPUTS, Contents, check_target, filling, write_input

CURVE, SERIES, POINTS = "gate_curve.json", "gate_curve.pvd", "points"
DRAWN = ("levels", "staircase", "density_and_capacitance", "transfer", "output")
"""Names of the figures, known here without loading what draws them."""
CONTENTS = Contents(
    "gate curve",
    CURVE,
    (INPUT, INPUTS, CURVE, "gate_curve.csv", "transistor.csv", SERIES, POINTS, FIGURES),
    DRAWN,
)


def write(
    curve: GateCurve,
    folder: str | Path,
    *,
    replace: bool = False,
    figures: bool = True,
    status: str = tables.DONE,
    field: str = "folder",
) -> Path:
    """Write a gate curve into a folder: `input.toml`, `gate_curve.json`, `gate_curve.csv`, `transistor.csv` (where
    drain voltages were asked for), `gate_curve.pvd` with `points/` and `figures/`.

    It is there whole or not at all; parameters, errors and what is kept of an older one are as for
    `wiresolve.output.folder.write`.
    """
    target = check_target(folder, replace=replace, field=field, contents=CONTENTS)
    with filling(target, CONTENTS, field) as fresh:
        write_input(curve.problem, fresh)
        gate_curve_tables.write_tables(curve, fresh, status)
        write_series(curve, fresh)
        if figures:
            from wiresolve.output.gate_curve_figures import save_all

            (fresh / FIGURES).mkdir()
            save_all(curve, fresh / FIGURES)
    return target


def write_series(curve: GateCurve, folder: Path) -> None:
    """Write `gate_curve.pvd`, whose time is the gate voltage, and a file in `points/` for each point that converged.

    Point data: `potential_V`, `density_per_nm3` and `mode_01_per_nm`, ... on the curved mesh. Field data, one value a
    subband: `energy_eV`, `error_eV`, `level`, `degeneracy`, `axial_mass_m0`, `valley`; and `gate_voltage_V`,
    `input_digest`. The same curve gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    (folder / POINTS).mkdir()
    lines = ['<?xml version="1.0"?>', '<VTKFile type="Collection" version="0.1" byte_order="LittleEndian">']
    lines.append("  <Collection>")
    entries = [(n, p) for n, p in enumerate(curve.points, 1) if p.converged]
    # Readers want times that ascend; a sweep may go down.
    for number, point in sorted(entries, key=lambda entry: entry[1].gate_voltage_V):
        name = f"{POINTS}/point_{number:04d}.vtu"
        vtk.save(_grid(curve, point), folder / name)
        time, file = quoteattr(repr(float(point.gate_voltage_V))), quoteattr(name)
        lines.append(f'    <DataSet timestep={time} group="" part="0" file={file}/>')
    lines += ["  </Collection>", "</VTKFile>"]
    (folder / SERIES).write_text("\n".join(lines) + "\n", encoding="utf-8")


def _grid(curve: GateCurve, point: GatePoint) -> Any:
    count = point.modes.shape[1]
    width = max(2, len(str(count)))
    data: dict[str, NDArray[Any]] = {"potential_V": point.potential_V, "density_per_nm3": point.density_per_nm3}
    data |= {f"mode_{n + 1:0{width}d}_per_nm": point.modes[:, n] for n in range(count)}
    fields: dict[str, NDArray[Any]] = {
        "gate_voltage_V": np.array([point.gate_voltage_V]),
        "energy_eV": point.energy_eV,
        "error_eV": point.error_eV,
        "level": np.asarray(point.level, dtype=np.int32),
        "degeneracy": np.asarray(point.degeneracy, dtype=np.int32),
        "axial_mass_m0": point.axial_mass,
    }
    texts = {"valley": list(point.valley), "input_digest": [curve.problem.digest]}
    return vtk.grid(curve.mesh, data, None, fields, texts)
