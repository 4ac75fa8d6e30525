"""How long work will take, judged by what was done: for those who wait, never for results."""

from __future__ import annotations

import time

SHORT_s = 1.0
"""What takes less is not worth a word."""


class MeshPace:
    """The time that a mesh will take, from that of the one before: it grows about as the number of points does."""

    def __init__(self) -> None:
        self._points, self._begun, self._per_point_s = 0, 0.0, 0.0

    def begin(self, number: int, points: int) -> str:
        """A mesh is about to be solved, the one before is done: for example "mesh 3: 24,100 points, about 12 s"."""
        now = time.perf_counter()
        if self._points:
            self._per_point_s = (now - self._begun) / self._points
        self._points, self._begun = points, now
        seconds = self._per_point_s * points
        return f"mesh {number}: {points:,} points" + (f", about {rounded_time(seconds)}" if seconds > SHORT_s else "")


def rounded_time(seconds: float) -> str:
    """A time as a person would say it: to about one part in ten."""
    for size, most, unit in ((1.0, 100.0, "s"), (60.0, 100.0, "min")):
        if seconds < most * size:
            value = seconds / size
            return f"{max(1, round(value)) if value < 20 else 5 * round(value / 5)} {unit}"
    return f"{seconds / 3600:.1f} h"
