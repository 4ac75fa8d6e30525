"""One way to write whatever a run found."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from wiresolve.errors import InputError
from wiresolve.gate_result import GateCurve
from wiresolve.output import folder as result_folder
from wiresolve.output import gate_curve_files
from wiresolve.output.extras import Extras
from wiresolve.output.tables import DONE
from wiresolve.result import Result

if TYPE_CHECKING:
    from wiresolve.output.measured import Measured

_OF_RESULTS = ("extrude_nm", "axial_frames", "quadrature", "matrix_elements")


def write(
    found: Result | GateCurve,
    folder: str | Path,
    *,
    replace: bool = False,
    figures: bool = True,
    report: bool = False,
    vtk: str = "curved",
    extrude_nm: float | None = None,
    axial_frames: int = 0,
    quadrature: bool = False,
    matrix_elements: bool = False,
    measured: Measured | None = None,
    status: str = DONE,
    field: str = "folder",
) -> Path:
    """Write a result or a gate curve into a folder, which is there whole or not at all.

    Parameters
    ----------
    found : what `solve` or `gate_curve` returned.
    folder : the target; folders on the way to it are made.
    replace : whether an older one of the same kind may be replaced. Nothing but one of it or an empty folder ever is.
    figures : whether to draw the figures.
    report : whether to write `report.html`.
    vtk : "curved" cells of fourth order in files for ParaView, or "linear" ones for programs that know no others.
    extrude_nm : a length in nm for `volume.vtu`, the wire with its modes as waves along it; of a result only.
    axial_frames : so many wave numbers along the wire for `along_axis.pvd`, 0 for none; of a result only.
    quadrature : whether to write `modes.npz`, the modes at quadrature points with weights; of a result only.
    matrix_elements : whether to write `matrix_elements.csv`; of a result only.
    measured : a measured conductance (`wiresolve.output.measured.read`) to lay over the staircase.
    status : a mark ("done" where nothing is held against it), kept in the files.
    field : what an error calls the target.

    Returns
    -------
    The folder's absolute path.

    Raises
    ------
    InputError
        The target exists (and is not to be or cannot be replaced), cannot be written, or the disk is full; an option
        is none, or is not for a gate curve.
    """
    extras = Extras(figures, report, vtk, extrude_nm, axial_frames, quadrature, matrix_elements, measured)
    if isinstance(found, GateCurve):
        for name in _OF_RESULTS:
            if getattr(extras, name):
                raise InputError(name, "is for a result of `solve`, not for a gate curve", getattr(extras, name))
        marked = found.failure if status == DONE and found.failure else status
        return gate_curve_files.write(found, folder, extras, replace=replace, status=marked, field=field)
    return result_folder.write(found, folder, extras, replace=replace, status=status, field=field)
