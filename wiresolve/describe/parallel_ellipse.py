"""The curve at a constant distance outside an ellipse."""

from __future__ import annotations

import math

import numpy as np

from wiresolve.describe.curves import Spline


def parallel_to_ellipse(a: float, b: float, distance: float) -> Spline:
    """The closed curve at `distance` outside an ellipse with semi-axes a, b: point + distance times the unit normal.

    Knots stand at equal steps of a parameter halfway between the ellipse's own and the direction of its normal, so
    that flat and sharp parts are both followed; their number grows until the curve is met between them to 5e-10 of its
    size.
    """
    for count in (32, 64, 128, 256, 512, 1024):
        t = np.linspace(0, np.pi / 2, count + 1)[1:-1]
        s = np.arctan2(math.sqrt(b) * np.sin(t), math.sqrt(a) * np.cos(t))
        cosine, sine = np.cos(s), np.sin(s)
        stretch = np.hypot(b * cosine, a * sine)
        x = np.concatenate([[a + distance], (a + distance * b / stretch) * cosine])
        y = np.concatenate([[0.0], (b + distance * a / stretch) * sine])
        tip = np.array([[0.0, b + distance]])
        quarter = np.column_stack([x, y])
        back = np.vstack([tip, quarter[:0:-1] * (-1, 1)])  # the second quadrant, from its top on
        half = np.vstack([quarter, back])
        nodes = np.vstack([half, -half, half[:1]])
        spline = Spline(tuple((float(p), float(q)) for p, q in nodes), "rim")
        if _misses(spline, a, b, distance, count) < 5e-10 * (a + b):
            break
    return spline


def _misses(spline: Spline, a: float, b: float, distance: float, count: int) -> float:
    """Largest error of the spline's distance from the ellipse, halfway between knots of the first quadrant."""
    chords = np.hypot(*np.diff(np.array(spline.points), axis=0).T)
    knots = np.concatenate([[0.0], np.cumsum(chords)]) / chords.sum()
    x, y = spline.point((knots[:count] + knots[1 : count + 1]) / 2).T
    s = np.arctan2(y * a, x * b)
    for _ in range(12):  # Newton's iteration for the foot of the perpendicular
        cosine, sine = np.cos(s), np.sin(s)
        slope = (x - a * cosine) * a * sine - (y - b * sine) * b * cosine
        bend = (a * sine) ** 2 + (x - a * cosine) * a * cosine + (b * cosine) ** 2 + (y - b * sine) * b * sine
        s = np.clip(s - slope / bend, 0, np.pi / 2)
    return float(np.max(np.abs(np.hypot(x - a * np.cos(s), y - b * np.sin(s)) - distance)))
