"""The command `gate-curve`: a sweep of a gate's voltage that goes on after any stop."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import (
    NOT_CONVERGED,
    complain,
    heed_signals,
    judged,
    measured_points,
    progress,
    read_problem,
    say,
    say_json,
)
from wiresolve.errors import InputError

if TYPE_CHECKING:
    from wiresolve.describe.problem import Problem


@click.command("gate-curve", cls=options.Command, example="wiresolve gate-curve wire.toml --accuracy '0.5 meV'")
@options.file_argument
@options.together(
    options.out("Folder for the curve [default: results/NAME.gate-curve]."),
    options.replace("Replace an older gate curve in --out; other files there stay."),
    click.option("--restart", is_flag=True, help="Throw away the points of an unfinished sweep instead of going on."),
    options.accuracy,
    options.report,
    options.vtk,
    options.measured("gate_voltage_V"),
    options.no_figures,
    options.strict,
    options.as_json("Print gate_curve.json instead of the verdict and the steps."),
    options.quiet,
    options.verbose,
)
def gate_curve(file: Path, out: Path | None, replace: bool, quiet: bool, **given: Any) -> int:
    """Solve a wire at every gate voltage of its [voltages].

    The folder holds input.toml, gate_curve.csv, gate_curve.json, transistor.csv (with drain voltages), gate_curve.pvd
    (for ParaView) and figures. Until all points are done they are kept in a folder beside it that ends in .partial;
    the same command goes on from there.
    """
    from wiresolve.gate_curve import checked
    from wiresolve.output import gate_curve_files, gate_curve_partial
    from wiresolve.output.gate_curve_tables import gate_curve_json, summary
    from wiresolve.output.measured_outside import missed_by_sweep
    from wiresolve.output.tables import DONE
    from wiresolve.output.target import check_target
    from wiresolve.output.writing import write

    problem = read_problem(file, given["accuracy"])
    try:
        checked(problem)
    except InputError as fault:
        raise InputError(f"{file}: {fault.field}", fault.rule, remedy=fault.remedy) from None
    folder = Path("results") / f"{file.stem}.gate-curve" if out is None else out
    target = check_target(folder, replace=replace or out is None, field="--out", contents=gate_curve_files.CONTENTS)
    total = len(problem.voltages.points) if problem.voltages else 0
    extras = {"figures": not given["no_figures"], "report": given["report"], "vtk": given["vtk"]}
    if given["measured"] is not None:
        extras["measured"] = measured_points(given["measured"], "gate_voltage_V")
    _tell_cost(problem, quiet)
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
                    problem, points, restart=given["restart"], on_progress=report, on_start=started
                )
                code, reasons = judged(curve, given["strict"], curve.largest_error_eV)
                if curve.failed:
                    code, reasons = NOT_CONVERGED, [curve.failure, *reasons]
                status = "; ".join(reasons) or DONE
                if report is not None:
                    report("writing", 1.0, str(folder))
                write(curve, folder, replace=replace or out is None, status=status, field="--out", **extras)
        except KeyboardInterrupt as fault:
            done = points.count()
            said = f"{done} of {total} points are kept in {kept}; the same command goes on from there" if done else ""
            raise KeyboardInterrupt(said) from fault
        points.discard()
    if given["as_json"]:
        say_json(gate_curve_json(curve, status))
    elif not quiet:
        say(summary(curve, folder, status))
    if "measured" in extras and not quiet and (said := missed_by_sweep(curve, extras["measured"])):
        complain(said, "warning: ")
    if reasons:
        complain(f"{'; '.join(reasons)}; the results are in {folder}, marked so")
    return code


def _tell_cost(problem: Problem, quiet: bool) -> None:
    """Say before a long sweep what makes it long."""
    from wiresolve.physics.growing_masses import cost_text
    from wiresolve.physics.wire import Wire

    if not quiet and (said := cost_text(Wire(problem))):
        complain(said, "")
