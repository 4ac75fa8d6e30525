"""Progress where no terminal is: a plain line at each stage of long work, and one now and then."""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager

FIRST_s, EVERY_s = 10.0, 30.0
"""Runs shorter than the first say nothing; a stage is told when it begins, and again so much later."""
LOOK_s = 1.0


class PlainLines:
    """Says what is being done, once a run has taken `FIRST_s`.

    Parameters
    ----------
    clock : seconds that only grow.
    write : takes a line.
    """

    def __init__(self, clock: Callable[[], float], write: Callable[[str], None]) -> None:
        self._clock, self._write = clock, write
        self._begun, self._told = clock(), -math.inf
        self._stage, self._detail = "", ""
        self._told_of: set[str] = set()
        self._lock = threading.Lock()

    def report(self, stage: str, detail: str) -> None:
        """The work has come to this."""
        with self._lock:
            self._stage, self._detail = stage, detail
        self.look()

    def look(self) -> None:
        """Write a line if it is time for one."""
        from wiresolve.physics.pace import rounded_time

        with self._lock:
            now = self._clock()
            stage, known = self._stage, self._stage in self._told_of
            if not stage or now - self._begun < FIRST_s or (known and now - self._told < EVERY_s):
                return
            self._told_of.add(stage)
            self._told = now
            self._write(
                f"after {rounded_time(now - self._begun)}: {stage}{f', {self._detail}' if self._detail else ''}"
            )


@contextmanager
def watched(lines: PlainLines) -> Iterator[None]:
    """Let lines be written while work goes on that does not report: a thread looks at the clock."""
    over = threading.Event()

    def watch() -> None:
        while not over.wait(LOOK_s):
            lines.look()

    watcher = threading.Thread(target=watch, name="progress", daemon=True)
    watcher.start()
    try:
        yield
    finally:
        over.set()
        watcher.join()
