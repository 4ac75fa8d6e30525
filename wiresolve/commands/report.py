"""The command `report`: a result folder as one page to read and pass on."""

from __future__ import annotations

from pathlib import Path

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import say
from wiresolve.errors import InputError

PLACE = "RESULT_DIR"


@click.command(cls=options.Command, example="wiresolve report results/core_shell_gaas --out for_a_colleague.html")
@click.argument("result_dir", type=click.Path(path_type=Path))
@options.together(
    options.out("The page [default: report.html in the folder].", "FILE.html"),
    options.replace("Replace the .html file named by --out."),
    options.quiet,
    options.verbose,
)
def report(result_dir: Path, out: Path | None, replace: bool, quiet: bool) -> None:
    """Write a result folder as one page to read and pass on.

    RESULT_DIR is what solve or gate-curve has written. The page holds everything that it shows, needs no network, and
    prints well.
    """
    from wiresolve.output.target import check_file, writing

    if not result_dir.is_dir():
        rule = "is no folder" if result_dir.exists() else "there is no such folder"
        raise InputError(PLACE, rule, str(result_dir), "give one that solve or gate-curve has written")
    wanted = out or result_dir / "report.html"
    target = check_file(wanted, replace=replace or out is None, field="--out", suffix=".html")
    from wiresolve.output.report import write_report

    with writing(target, "--out") as fresh:
        try:
            write_report(result_dir, fresh)
        except InputError as fault:
            raise InputError(fault.field.replace("folder", PLACE, 1), fault.rule, fault.given, fault.remedy) from None
    if not quiet:
        say(f"File: {wanted}")
