"""Measured points on the axes of a staircase."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from wiresolve.output.canvas import INK, shortened
from wiresolve.output.measured import Measured

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_SHOWN = 1500
"""Points that a figure shows; of more every second, third, ... is drawn."""


def lay_over(axes: Axes, measured: Measured, unit: float = 1.0) -> float:
    """Draw the points that lie within the axes' range, `x` times `unit`; returns the highest of them, 0 where none is.

    The label of what is drawn says where the points come from, and how many of them are in view and drawn.
    """
    low, high = axes.get_xlim()
    x = unit * measured.x
    seen = np.flatnonzero((x >= low) & (x <= high))
    every = max(1, -(-len(seen) // MOST_SHOWN))
    shown = seen[::every]
    among = f"{len(seen):,} of {len(x):,}" if len(seen) < len(x) else f"{len(x):,}"
    label = shortened(measured.source, 22)
    label += f": {among} in view" if len(seen) else f": none of {len(x):,} in view"
    label += f", 1 of {every} drawn" if every > 1 else ""
    axes.plot(
        x[shown], measured.conductance_G0[shown], "o", ms=2.0, mfc="none", mec=INK, mew=0.45, label=label, zorder=1.9
    )
    return float(measured.conductance_G0[seen].max(initial=0.0))
