"""The folder of a gate curve: tables, figures, and a series of potential, density and modes for ParaView."""

from __future__ import annotations

from pathlib import Path

from wiresolve.gate_result import GateCurve
from wiresolve.output import gate_curve_tables, series, tables, vtk
from wiresolve.output.extras import Extras
from wiresolve.output.folder import add_report, write_input, write_measured
from wiresolve.output.point_fields import PointFields
from wiresolve.output.target import FIGURES, INPUT, INPUTS, REPORT, Contents, check_target, filling

CURVE, SERIES, POINTS = "gate_curve.json", "gate_curve.pvd", "points"
DRAWN = ("levels", "staircase", "density_and_capacitance", "transfer", "output")
"""Names of the figures, known here without loading what draws them."""
CONTENTS = Contents(
    "gate curve",
    CURVE,
    (INPUT, INPUTS, CURVE, "gate_curve.csv", "transistor.csv", SERIES, POINTS, FIGURES, REPORT),
    DRAWN,
    (POINTS,),
)


def write(
    curve: GateCurve,
    folder: str | Path,
    extras: Extras,
    *,
    replace: bool = False,
    status: str = tables.DONE,
    field: str = "folder",
) -> Path:
    """Write a gate curve into a folder: `input.toml`, `gate_curve.json`, `gate_curve.csv`, `transistor.csv` (where
    drain voltages were asked for), `gate_curve.pvd` with `points/`, and what `extras` names.

    It is there whole or not at all; parameters, errors and what is kept of an older one are as for
    `wiresolve.output.folder.write`.
    """
    target = check_target(folder, replace=replace, field=field, contents=CONTENTS)
    with filling(target, CONTENTS, field) as fresh:
        write_input(curve.problem, fresh)
        gate_curve_tables.write_tables(curve, fresh, status)
        write_series(curve, fresh, linear=extras.linear)
        write_measured(extras, fresh)
        if extras.figures:
            from wiresolve.output.gate_curve_figures import save_all

            (fresh / FIGURES).mkdir()
            save_all(curve, fresh / FIGURES, measured=extras.measured)
    if extras.report:
        add_report(target, field)
    return target


def write_series(curve: GateCurve, folder: Path, *, linear: bool = False) -> None:
    """Write `gate_curve.pvd`, whose time is the gate voltage, and a file in `points/` for each point that converged.

    Each holds what `modes.vtu` holds of a result, and the `gate_voltage_V`. The same curve gives the same bytes.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    fields = PointFields(curve)
    frames = ((p.gate_voltage_V, vtk.plane(fields.of(p), linear=linear) if p.converged else None) for p in curve.points)
    series.write_series(folder, "gate_curve", frames, files=POINTS, stem="point")
