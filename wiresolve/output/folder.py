"""The folder of a result."""

from __future__ import annotations

from pathlib import Path

from wiresolve.describe import wirefile
from wiresolve.describe.problem import Problem
from wiresolve.output import tables, vtk
from wiresolve.output.extras import Extras
from wiresolve.output.target import FIGURES, INPUT, INPUTS, MEASURED, REPORT, Contents, check_target, filling, writing
from wiresolve.result import Result

RESULT, SUBBANDS, MODES = "result.json", "subbands.csv", "modes.vtu"
VOLUME, ALONG_AXIS, POINTS, ELEMENTS = "volume.vtu", "along_axis", "modes.npz", "matrix_elements.csv"
DRAWN = ("section", "modes", "levels", "density_of_states", "dispersion", "conductance", "sensitivity", "charge")
"""Names of the figures, known here without loading what draws them."""
SOLVED = Contents(
    "result",
    RESULT,
    (
        *(INPUT, INPUTS, RESULT, SUBBANDS, MODES, FIGURES, REPORT),
        *(VOLUME, ALONG_AXIS, f"{ALONG_AXIS}.pvd", POINTS, ELEMENTS),
    ),
    DRAWN,
    (ALONG_AXIS,),
)


def write(
    result: Result,
    folder: str | Path,
    extras: Extras,
    *,
    replace: bool = False,
    status: str = tables.DONE,
    field: str = "folder",
) -> Path:
    """Write a result into a folder: `input.toml`, `result.json`, `subbands.csv`, `modes.vtu`, and what `extras` names.

    Files that the wire file names (meshes, outlines, potentials) are copied into `inputs/`, where `input.toml` looks.

    Everything goes into a fresh hidden folder beside the target, which is then renamed; whatever stops it on the way
    leaves no part of a result, and an older one as it was. What else lies in the folder of an older result (notes, a
    script, a picture of one's own under `figures`) goes over into the new one. Parameters and errors are those of
    `wiresolve.output.writing.write`.
    """
    target = check_target(folder, replace=replace, field=field, contents=SOLVED)
    with filling(target, SOLVED, field) as fresh:
        write_input(result.problem, fresh)
        tables.write_json(result, fresh / RESULT, status)
        tables.write_subbands(result, fresh / SUBBANDS, status)
        vtk.write_modes(result, fresh / MODES, linear=extras.linear)
        _write_fields(result, fresh, extras)
        _write_elements(result, fresh, extras)
        write_measured(extras, fresh)
        if extras.figures:
            from wiresolve.output.figures import save_all

            (fresh / FIGURES).mkdir()
            save_all(result, fresh / FIGURES, measured=extras.measured)
    if extras.report:
        add_report(target, field)
    return target


def add_report(target: Path, field: str) -> None:
    """Write the page of a folder that is in its place: should it fail, the result is there."""
    from wiresolve.output.report import write_report

    with writing(target / REPORT, field) as fresh:
        write_report(target, fresh)


def write_input(problem: Problem, fresh: Path) -> None:
    """The exact wire file, and copies of the files that it names."""
    (fresh / INPUT).write_text(wirefile.dump(problem), encoding="utf-8")
    for path, content in problem.files:
        (fresh / path).parent.mkdir(exist_ok=True)
        (fresh / path).write_bytes(content)


def write_measured(extras: Extras, fresh: Path) -> None:
    """The points that are laid over the staircase, where there are."""
    if extras.measured is not None:
        from wiresolve.output.measured import write

        (fresh / MEASURED).parent.mkdir(exist_ok=True)
        write(extras.measured, fresh / MEASURED)


def _write_fields(result: Result, fresh: Path, extras: Extras) -> None:
    """What ParaView opens beside the modes: the wire as a volume, and the modes as they change along the axis."""
    if extras.extrude_nm is not None:
        from wiresolve.output.volume import write_volume

        write_volume(result, fresh / VOLUME, extras.extrude_nm, linear=extras.linear)
    if extras.axial_frames:
        from wiresolve.output.series import write_along_axis

        write_along_axis(result, fresh, extras.axial_frames, name=ALONG_AXIS, linear=extras.linear)


def _write_elements(result: Result, fresh: Path, extras: Extras) -> None:
    """What others compute on."""
    if extras.quadrature:
        from wiresolve.output.quadrature import write_points

        write_points(result, fresh / POINTS)
    if extras.matrix_elements:
        from wiresolve.mode_elements import matrix_elements
        from wiresolve.output.matrix_element_tables import write_matrix_elements

        write_matrix_elements(matrix_elements(result), fresh / ELEMENTS)
