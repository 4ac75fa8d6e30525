"""One way to write whatever a run found."""

from __future__ import annotations

from pathlib import Path

from wiresolve.gate_result import GateCurve
from wiresolve.output import folder as result_folder
from wiresolve.output import gate_curve_files
from wiresolve.output.tables import DONE
from wiresolve.result import Result


def write(
    found: Result | GateCurve,
    folder: str | Path,
    *,
    replace: bool = False,
    figures: bool = True,
    status: str = DONE,
    field: str = "folder",
) -> Path:
    """Write a result or a gate curve into a folder, which is there whole or not at all.

    Parameters
    ----------
    found : what `solve` or `gate_curve` returned.
    folder : the target; folders on the way to it are made.
    replace : whether an older one of the same kind may be replaced.
    figures : whether to draw the figures.
    status : a mark ("done" where nothing is held against it), kept in the files.
    field : what an error calls the target.

    Returns
    -------
    The folder's absolute path.

    Raises
    ------
    InputError
        The target exists (and is not to be or cannot be replaced), cannot be written, or the disk is full.
    """
    if isinstance(found, GateCurve):
        marked = found.failure if status == DONE and found.failure else status
        return gate_curve_files.write(found, folder, replace=replace, figures=figures, status=marked, field=field)
    return result_folder.write(found, folder, replace=replace, figures=figures, status=status, field=field)
