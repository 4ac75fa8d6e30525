"""The command `gate-curve`: a sweep of a gate's voltage that goes on after any stop."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import click

from wiresolve.errors import InputError
from wiresolve.terminal import NOT_CONVERGED, complain, heed_signals, judged, progress, read_problem, say


@click.command("gate-curve")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path), help="Folder for the curve [default: results/NAME.gate-curve].")
@click.option("--replace", is_flag=True, help="Replace an older gate curve in --out; other files there stay.")
@click.option("--restart", is_flag=True, help="Throw away the points of an unfinished sweep instead of going on.")
@click.option("--accuracy", metavar="ENERGY", help='Wanted error of each energy, e.g. "0.1 meV", over the file\'s.')
@click.option("--json", "as_json", is_flag=True, help="Print gate_curve.json instead of the verdict and the steps.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors (and what --json asks for).")
@click.option("--strict", is_flag=True, help="Exit with 2 if there is any warning.")
@click.option("--no-figures", is_flag=True, help="Draw no figures.")
def gate_curve(file: Path, out: Path | None, replace: bool, no_figures: bool, **options: Any) -> int:
    """Solve a wire at every gate voltage of its [voltages].

    The folder holds input.toml, gate_curve.csv, gate_curve.json, transistor.csv (with drain voltages), gate_curve.pvd
    (for ParaView) and figures. Until all points are done they are kept in a folder beside it that ends in .partial;
    the same command goes on from there.
    """
    from wiresolve.gate_curve import checked
    from wiresolve.output import gate_curve_files, gate_curve_partial
    from wiresolve.output.folder import check_target
    from wiresolve.output.gate_curve_tables import gate_curve_json, summary
    from wiresolve.output.tables import DONE

    problem = read_problem(file, options["accuracy"])
    try:
        checked(problem)
    except InputError as fault:
        raise InputError(f"{file}: {fault.field}", fault.rule, remedy=fault.remedy) from None
    folder = Path("results") / f"{file.stem}.gate-curve" if out is None else out
    target = check_target(folder, replace=replace or out is None, field="--out", contents=gate_curve_files.CONTENTS)
    quiet, total = options["quiet"], len(problem.voltages.points) if problem.voltages else 0
    partial = gate_curve_partial.partial_folder(target)
    kept = partial if folder.is_absolute() else os.path.relpath(partial)

    def started(found: int) -> None:
        heed_signals()
        if found and not quiet:
            complain(f"going on from {kept}, {found} of {total} points are done", "")

    with gate_curve_partial.kept_points(target, problem, "--out") as points:
        try:
            with progress(not quiet) as report:
                curve = gate_curve_partial.swept(
                    problem, points, restart=options["restart"], on_progress=report, on_start=started
                )
                code, reasons = judged(curve, options["strict"], curve.largest_error_eV)
                if curve.failed:
                    code, reasons = NOT_CONVERGED, [curve.failure, *reasons]
                status = "; ".join(reasons) or DONE
                if report is not None:
                    report("writing", 1.0, str(folder))
                gate_curve_files.write(
                    curve, folder, replace=replace or out is None, figures=not no_figures, status=status, field="--out"
                )
        except KeyboardInterrupt as fault:
            done = points.count()
            said = f"{done} of {total} points are kept in {kept}; the same command goes on from there" if done else ""
            raise KeyboardInterrupt(said) from fault
        points.discard()
    if options["as_json"]:
        say(gate_curve_json(curve, status).rstrip("\n"))
    elif not quiet:
        say(summary(curve, folder, status))
    if reasons:
        complain(f"{'; '.join(reasons)}; the results are in {folder}, marked so")
    return code
