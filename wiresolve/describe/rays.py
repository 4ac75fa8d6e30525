"""Which rays towards +x cross a curve: what tells the inside of an outline from its outside."""

from __future__ import annotations

import math
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Point = tuple[float, float]


class Sweep(Protocol):
    """An arc of an ellipse: its centre and the part of the parameter's turn."""

    @property
    def center(self) -> Point: ...
    @property
    def start_angle(self) -> float: ...
    @property
    def sweep(self) -> float: ...


def cos_sin(angle: float) -> tuple[float, float]:
    """Cosine and sine, exact at whole quarter turns, so that turned sides stay on top of each other."""
    quarters = angle / (math.pi / 2)
    if abs(quarters - round(quarters)) < 1e-14 * max(1.0, abs(quarters)):
        return ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))[round(quarters) % 4]
    return math.cos(angle), math.sin(angle)


def line(
    x0: float | Array, y0: float | Array, x1: float | Array, y1: float | Array, x: Array, y: Array
) -> NDArray[np.bool_]:
    """Which rays from (x, y) towards +x cross the line (or each of several, by broadcasting)."""
    crosses = (y0 <= y) != (y1 <= y)
    with np.errstate(divide="ignore", invalid="ignore"):
        at = x0 + (y - y0) / (y1 - y0) * (x1 - x0)
    return np.asarray(crosses & (np.where(crosses, at, -np.inf) > x))


def conic(arc: Sweep, axes: tuple[float, float, float], ends: Point, x: Array, y: Array) -> NDArray[np.bool_]:
    """Whether the rays from (x, y) towards +x cross the arc an odd number of times: exact, piece by monotone piece.

    `axes` are its semi-axes and their turn, `ends` the heights of its first and last point.
    """
    a, b, tilt = axes
    cosine, sine = cos_sin(tilt)
    # y(s) = cy + height cos(s - phase) rises or falls between the multiples of pi from the phase.
    height, phase = math.hypot(a * sine, b * cosine), math.atan2(b * cosine, a * sine)
    low, high = sorted((arc.start_angle, arc.start_angle + arc.sweep))
    first, last = math.floor((low - phase) / math.pi), math.ceil((high - phase) / math.pi)
    breaks = [low, *(phase + k * math.pi for k in range(first, last + 1) if low < phase + k * math.pi < high), high]
    heights = [arc.center[1] + height * math.cos(s - phase) for s in breaks]
    heights[0], heights[-1] = ends if arc.sweep > 0 else ends[::-1]
    odd = np.zeros(x.shape, dtype=bool)
    for s0, s1, y0, y1 in zip(breaks, breaks[1:], heights, heights[1:], strict=False):
        crosses = (y0 <= y) != (y1 <= y)
        if not crosses.any():
            continue
        k = math.floor(((s0 + s1) / 2 - phase) / math.pi)
        u = np.clip((y - arc.center[1]) / height * (1 if k % 2 == 0 else -1), -1, 1)
        s = phase + k * math.pi + np.arccos(u)
        at = arc.center[0] + cosine * a * np.cos(s) - sine * b * np.sin(s)
        odd ^= crosses & (at > x)
    return odd


def parabolas(poles: Array, last: Point, x: Array, y: Array) -> NDArray[np.bool_]:
    """Whether the rays from (x, y) towards +x cross a chain of parabolas an odd number of times: exact.

    `poles`, shape (2 m + 1, 2), are its control points; the chain ends at `last`.
    """
    poles = np.vstack([poles[:-1], last])
    a, b, c = poles[:-2:2], poles[1:-1:2], poles[2::2]
    bend = a[:, 1] - 2 * b[:, 1] + c[:, 1]
    with np.errstate(divide="ignore", invalid="ignore"):
        top = (a[:, 1] - b[:, 1]) / bend  # where an arc is highest or lowest: there it is cut
    top = np.where((top > 0) & (top < 1), top, 0.0)
    turned = (1 - top) ** 2 * a[:, 1] + 2 * top * (1 - top) * b[:, 1] + top**2 * c[:, 1]
    odd = np.zeros(x.shape, dtype=bool)
    for low, high, y0, y1 in ((0 * top, top, a[:, 1], turned), (top, 0 * top + 1, turned, c[:, 1])):
        for part in range(0, len(x), 500):
            some = slice(part, part + 500)
            ray, arc = np.nonzero((y0 <= y[some, None]) != (y1 <= y[some, None]))
            rise, level = y1[arc] - y0[arc], y[some][ray] - y0[arc]
            span = high[arc] - low[arc]
            # On a monotone part y0 + slope u + curve u^2 = y has one root in [0, 1].
            curve = bend[arc] * span**2
            slope = rise - curve
            root = np.sqrt(np.maximum(slope**2 + 4 * curve * level, 0))
            u = np.clip(2 * level / (slope + np.copysign(root, rise)), 0, 1)
            s = low[arc] + span * u
            at = (1 - s) ** 2 * a[arc, 0] + 2 * s * (1 - s) * b[arc, 0] + s**2 * c[arc, 0]
            odd[some] ^= np.bincount(ray, at > x[some][ray], minlength=len(x[some])) % 2 == 1
    return odd
