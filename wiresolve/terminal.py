"""What commands share at a terminal: lines on stdout and stderr, a bar, signals, the wire file, exit codes."""

from __future__ import annotations

import os
import signal
import sys
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

import click

from wiresolve.errors import InputError

if TYPE_CHECKING:
    from wiresolve.describe.problem import Problem
    from wiresolve.gate_result import GateCurve
    from wiresolve.result import Result

INTERRUPTED, ACCURACY_MISSED, NOT_CONVERGED, REFUSED = 130, 5, 4, 2


def complain(text: str, kind: str = "error: ") -> None:
    """One printable line on stderr."""
    line = "".join(c if c.isprintable() else " " if c.isspace() else repr(c)[1:-1] for c in text)
    click.echo(f"wiresolve: {kind}{line}", err=True)


def say(text: str) -> None:
    """Text on stdout in whatever it can encode; a reader that has gone away (`| head`) is no error."""
    encoding = sys.stdout.encoding or "ascii"
    try:
        text.encode(encoding)
    except UnicodeEncodeError:
        text = text.replace("±", "+/-").replace("×", "x").replace("²", "2").replace("µ", "u")
        text = text.encode(encoding, "backslashreplace").decode(encoding)
    try:
        click.echo(text)
    except BrokenPipeError:
        sys.stdout = open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115 - it has to outlive this call


def heed_signals() -> None:
    """Let a closed pipe raise an error, and a termination unwind, so that what is being written gets removed.

    Gmsh sets both back to ending the process on the spot.
    """
    if threading.current_thread() is not threading.main_thread():
        return

    def stop(*_: object) -> NoReturn:
        raise SystemExit(128 + signal.SIGTERM)

    signal.signal(signal.SIGTERM, stop)
    if hasattr(signal, "SIGPIPE"):
        signal.signal(signal.SIGPIPE, signal.SIG_IGN)


@contextmanager
def progress(shown: bool) -> Iterator[Callable[[str, float, str], None] | None]:
    """A callback that draws a bar on stderr where that is a terminal, else None."""
    if not (shown and sys.stderr.isatty()):
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn(), TextColumn("{task.fields[detail]}"))
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("mesh", total=1.0, detail="")

        def report(stage: str, fraction: float, detail: str) -> None:
            bar.update(task, description=stage, completed=fraction, detail=detail)

        yield report


def read_problem(file: Path, accuracy: str | None = None) -> Problem:
    """The problem of a wire file, with the accuracy that an option asks for in place of the file's."""
    from dataclasses import replace

    from wiresolve.loading import load

    problem = load(file)
    if accuracy is not None:
        from wiresolve.units import parse_quantity

        energy_eV = parse_quantity(accuracy, "energy", "--accuracy")
        try:
            problem = replace(problem, accuracy=replace(problem.accuracy, energy_eV=energy_eV))
        except InputError as fault:
            raise InputError("--accuracy", fault.rule, accuracy, fault.remedy) from fault
    return problem


def judged(result: Result | GateCurve, strict: bool, largest_error_eV: float) -> tuple[int, list[str]]:
    """Exit code of a finished run, and what is held against it."""
    code, reasons = 0, []
    if strict and result.warnings:
        codes = ", ".join(dict.fromkeys(w.code for w in result.warnings))
        code, reasons = REFUSED, [f"warnings under --strict: {codes}"]
    if not result.accuracy_met:
        wanted, worst = 1e3 * result.problem.accuracy.energy_eV, 1e3 * largest_error_eV
        code = ACCURACY_MISSED
        reasons.insert(0, f"accuracy missed: wanted {wanted:g} meV, the largest bar is {worst:.2g} meV")
    return code, reasons
