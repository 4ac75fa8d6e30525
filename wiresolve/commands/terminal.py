"""What commands share at a terminal: lines on stdout and stderr, a bar, signals, the wire file, exit codes."""

from __future__ import annotations

import json
import logging
import os
import signal
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

import click

from wiresolve.commands.plain_lines import PlainLines, watched
from wiresolve.errors import InputError

if TYPE_CHECKING:
    from wiresolve.describe.problem import Problem
    from wiresolve.gate_result import GateCurve
    from wiresolve.output.measured import Measured
    from wiresolve.result import Result

INTERRUPTED, ACCURACY_MISSED, NOT_CONVERGED, REFUSED = 130, 5, 4, 2
EVEN_STAGES = ("fabrication error",)
"""Stages made of like parts. A sweep tells by itself how long its points will take."""
SHORTEST_s = 2.0
"""A stage that has not lasted so long is soon over, or its pace is not known yet."""
_log = logging.getLogger(__name__)


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


def say_json(text: str) -> None:
    """JSON on stdout; it stays JSON where the terminal's encoding lacks a character."""
    try:
        text.encode(sys.stdout.encoding or "ascii")
    except UnicodeEncodeError:
        text = "".join(c if c.isascii() else json.dumps(c)[1:-1] for c in text)
    say(text.rstrip("\n"))


def log_to_stderr() -> Callable[[], None]:
    """Send the program's log to stderr; returns what undoes that."""
    logger, root = logging.getLogger("wiresolve"), logging.getLogger()
    level, own = logger.level, logging.StreamHandler(sys.stderr)
    own.setFormatter(logging.Formatter("wiresolve: %(message)s"))
    logger.setLevel(logging.DEBUG)
    root.addHandler(own)

    def undo() -> None:
        root.removeHandler(own)
        logger.setLevel(level)

    return undo


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
    """A callback that draws a bar on stderr where that is a terminal, or writes to the log that `--verbose` asks for.

    Elsewhere it writes a plain line of long work now and then; None where nobody wants to be told.
    """
    if _log.isEnabledFor(logging.INFO):
        yield _logged
        return
    if not shown:
        yield None
        return
    if not sys.stderr.isatty():
        pace = Pace(time.monotonic)
        lines = PlainLines(time.monotonic, lambda line: complain(line, ""))
        with watched(lines):
            yield lambda stage, fraction, detail: lines.report(stage, _told(detail, pace.left(stage, fraction)))
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn
    from rich.table import Column

    one_line = Column(no_wrap=True, overflow="ellipsis")
    said = TextColumn("{task.fields[detail]}", markup=False, table_column=one_line)
    columns = (TextColumn("{task.description}"), BarColumn(bar_width=20), TimeElapsedColumn(), said)
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task, pace = bar.add_task("mesh", total=1.0, detail=""), Pace(time.monotonic)

        def report(stage: str, fraction: float, detail: str) -> None:
            # A full bar would stop its clock.
            told = _told(detail, pace.left(stage, fraction))
            bar.update(task, description=stage, completed=min(fraction, 0.999), detail=told)

        yield report


def _told(detail: str, left: str) -> str:
    return ", ".join(part for part in (detail, left) if part)


def _logged(stage: str, fraction: float, detail: str) -> None:
    _log.info("%s, %d %%%s", stage, round(100 * fraction), f": {detail}" if detail else "")


class Pace:
    """How long a stage will still take, judged by how fast it went so far.

    Only of stages that are made of like parts, one report before each: of others the fraction says nothing of time.
    """

    def __init__(self, clock: Callable[[], float]) -> None:
        self._clock, self._stage, self._begun, self._first = clock, "", 0.0, 0.0

    def left(self, stage: str, fraction: float) -> str:
        """For example "about 20 s left"; empty where nothing is known or it is not worth telling."""
        now = self._clock()
        if stage != self._stage:
            self._stage, self._begun, self._first = stage, now, fraction
        done, spent = fraction - self._first, now - self._begun
        if stage not in EVEN_STAGES or done <= 0 or spent < SHORTEST_s:
            return ""
        from wiresolve.physics.pace import rounded_time

        return f"about {rounded_time(spent / done * (1 - fraction))} left"


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


def measured_points(path: Path, quantity: str) -> Measured:
    """The points of a file that `--measured` names, which are against the quantity that the staircase has."""
    from wiresolve.output.measured import read

    try:
        points = read(path)
        points.require(quantity)
    except InputError as fault:
        field = "--" + fault.field if fault.field.startswith("measured") else "--measured"
        raise InputError(field, fault.rule, fault.given, fault.remedy) from None
    return points


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
