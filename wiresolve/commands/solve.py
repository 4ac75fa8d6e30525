"""The command `solve`: a wire's subbands, printed and written."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import (
    complain,
    heed_signals,
    judged,
    measured_points,
    progress,
    read_problem,
    say,
    say_json,
)
from wiresolve.output.extras import MOST_FRAMES


@click.command(cls=options.Command, example="wiresolve solve wire.toml --out results/first --report")
@options.file_argument
@options.together(
    options.out("Folder for the result [default: results/NAME]."),
    options.replace("Replace an older result in --out; other files there stay."),
    options.accuracy,
    options.report,
    options.vtk,
    click.option("--extrude", metavar="LENGTH", help='Also a volume for ParaView, the wire so long: "30 nm".'),
    click.option(
        "--axial-frames",
        type=click.IntRange(min=2, max=MOST_FRAMES),
        metavar="COUNT",
        help="Also a series for ParaView of the modes at so many wave numbers along the wire.",
    ),
    click.option("--quadrature", is_flag=True, help="Also modes.npz: modes at quadrature points with weights."),
    click.option("--matrix-elements", is_flag=True, help="Also matrix_elements.csv: overlaps, dipoles and the like."),
    options.measured("fermi_level_meV"),
    options.no_figures,
    options.strict,
    options.as_json("Print result.json instead of the verdict and the table."),
    options.quiet,
    options.verbose,
)
def solve(file: Path, out: Path | None, replace: bool, quiet: bool, **given: Any) -> int:
    """Find the subbands of a wire and write them out.

    The folder holds input.toml, result.json, subbands.csv, modes.vtu (for ParaView) and figures. Without --out it is
    results/NAME in the current folder and takes the place of the last one; a folder named by --out is never
    overwritten unless --replace is given.
    """
    from wiresolve.output.folder import SOLVED
    from wiresolve.output.measured_outside import missed_by_curves
    from wiresolve.output.tables import DONE, result_json, summary
    from wiresolve.output.target import check_target
    from wiresolve.output.writing import write

    problem = read_problem(file, given["accuracy"])
    extras = _extras(given)
    folder = Path("results") / file.stem if out is None else out
    may_replace = replace or out is None
    check_target(folder, replace=may_replace, field="--out", contents=SOLVED)
    from wiresolve.solve import solve as find

    with progress(not quiet) as report:
        result = find(problem, on_progress=report)
        heed_signals()
        code, reasons = judged(result, given["strict"], float(result.errors_eV.max()))
        status = "; ".join(reasons) or DONE
        if report is not None:
            report("writing", 1.0, str(folder))
        write(result, folder, replace=may_replace, status=status, field="--out", **extras)
    if given["as_json"]:
        say_json(result_json(result, status))
    elif not quiet:
        say(summary(result, folder, status))
    if "measured" in extras and not quiet and (said := missed_by_curves(result, extras["measured"])):
        complain(said, "warning: ")
    if reasons:
        complain(f"{'; '.join(reasons)}; the results are in {folder}, marked so")
    return code


def _extras(given: dict[str, Any]) -> dict[str, Any]:
    """What is written beside the tables, under the names that `write` has for it."""
    found = {name: given[name] for name in ("report", "vtk", "quadrature", "matrix_elements")}
    found |= {"figures": not given["no_figures"], "axial_frames": given["axial_frames"] or 0}
    if given["extrude"] is not None:
        from wiresolve.describe.checks import in_range
        from wiresolve.units import parse_quantity

        length_nm = parse_quantity(given["extrude"], "length", "--extrude")
        found["extrude_nm"] = in_range("--extrude", length_nm, 0.1, 1e6, "nm")
    if given["measured"] is not None:
        found["measured"] = measured_points(given["measured"], "fermi_level_eV")
    return found
