"""Rows of an imported mesh's edges as few curves: straight runs as lines, smooth runs of bent edges as one chain."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from wiresolve.describe.curves import Line, Parabolas, Point, Segment
from wiresolve.describe.mesh_data import Array

COLLINEAR = 1e-6
"""Points of one straight run lie this close to its line, as a part of the drawing's size."""
STRAIGHT = 1e-5
"""An edge whose middle departs from its chord by less than this part of its length is straight."""
KINK_rad = 1e-4
"""Bent edges that meet under a smaller angle are one smooth curve: for a circle, 54 edges or more. What this rounds off
is less than what second-order edges miss of the curve that they stand for."""
_EVEN, _TURN_rad = 1.5, 1e-3
"""A chain ends where its curvature jumps by this factor, between edges that turn by more than this angle."""
MOST_ARCS = 64
"""Arcs in a chain that is no whole ring: to make a face of several chains, Gmsh looks at all pairs of their arcs."""
_ROUND_rad = 0.36
"""Straight sides that turn by less at a corner, and alike at the next one, stand for a curve."""


@dataclass(frozen=True)
class Missed:
    """What edges miss of the smooth curve that they seem to stand for: the largest distance, and the area in nm^2."""

    distance_nm: float = 0.0
    area_nm2: float = 0.0

    def and_also(self, other: Missed) -> Missed:
        """Of two parts of a drawing together."""
        return Missed(max(self.distance_nm, other.distance_nm), self.area_nm2 + other.area_nm2)


def curves(nodes: Array, controls: Array, name: str, size: float) -> tuple[list[Segment], Missed]:
    """A row of m edges as curves, in its order.

    Parameters
    ----------
    nodes : (m + 1, 2) ends of the edges; controls : (m, 2) their control points as parabolas.
    size : of the drawing, in nm.
    """
    chord = np.diff(nodes, axis=0)
    long = np.hypot(*chord.T)
    sagitta = np.abs(chord[:, 0] * (controls - nodes[:-1])[:, 1] - chord[:, 1] * (controls - nodes[:-1])[:, 0])
    bent = sagitta / long / 2 > STRAIGHT * long
    leaving = np.where(bent[:, None], controls - nodes[:-1], chord)
    arriving = np.where(bent[:, None], nodes[1:] - controls, chord)
    kink = _angle(arriving[:-1], leaving[1:])
    bend = _angle(leaving, arriving) / long  # of each edge, per length
    turns = np.abs(bend * long)
    uneven = np.abs(bend[1:] - bend[:-1]) > (1 - 1 / _EVEN) * np.maximum(np.abs(bend[1:]), np.abs(bend[:-1]))
    cut = (np.abs(kink) > KINK_rad) | (uneven & (np.maximum(turns[1:], turns[:-1]) > _TURN_rad))
    ends = np.flatnonzero((bent[1:] != bent[:-1]) | (bent[1:] & bent[:-1] & cut)) + 1
    found: list[Segment] = []
    closed = bool((nodes[0] == nodes[-1]).all())
    for first, last in zip([0, *ends.tolist()], [*ends.tolist(), len(chord)], strict=True):
        if bent[first]:
            middles = (nodes[first:last] + 2 * controls[first:last] + nodes[first + 1 : last + 1]) / 4
            row = np.empty((2 * (last - first) + 1, 2))
            row[::2], row[1::2] = nodes[first : last + 1], middles
            whole = closed and last - first == len(chord)
            parts = 1 if whole else -(-(last - first) // MOST_ARCS)
            for a, b in pairwise(np.linspace(0, last - first, parts + 1).round().astype(int).tolist()):
                found.append(Parabolas(_points(row[2 * a : 2 * b + 1]), name))
        else:
            kept = _corners(nodes[first : last + 1], COLLINEAR * size)
            corners = _points(nodes[first : last + 1][kept])
            found += [Line(a, b, name) for a, b in pairwise(corners)]
    smooth = bent[1:] & bent[:-1] & (np.abs(kink) < _ROUND_rad)
    # For a turn a an edge of radius R: kink a^3 / 16, distance R a^4 / 512, of which the mean is 8 / 15.
    missed = np.append(np.where(smooth, kink, 0), 0) * long / 32
    return found, Missed(float(np.abs(missed).max(initial=0.0)), float(8 / 15 * (missed * long).sum()))


def _angle(u: Array, v: Array) -> Array:
    """Angles from u to v, (m,)."""
    return np.asarray(np.arctan2(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0], (u * v).sum(axis=1)))


def _points(rows: Array) -> tuple[Point, ...]:
    return tuple((float(x), float(y)) for x, y in rows)


def _corners(points: Array, near: float) -> list[int]:
    """Indices of the points that a polygon through them needs so as to pass all others by less than `near`."""
    kept, open_ = {0, len(points) - 1}, [(0, len(points) - 1)]
    while open_:
        a, b = open_.pop()
        if b - a < 2:
            continue
        along = points[b] - points[a]
        off = points[a + 1 : b] - points[a]
        long = float(np.hypot(*along))
        away = np.hypot(*off.T) if long < near else np.abs(along[0] * off[:, 1] - along[1] * off[:, 0]) / long
        k = int(np.argmax(away))
        if away[k] > near:
            kept.add(a + 1 + k)
            open_ += [(a, a + 1 + k), (a + 1 + k, b)]
    return sorted(kept)


def missed_by_lines(segments: Sequence[Segment]) -> Missed:
    """What the straight sides of a closed row of curves miss, where they turn little and alike, as a curve's would.

    A side of length L between turns of the angle a belongs to a circle that lies L a / 8 beside its middle.
    """
    if not segments:
        return Missed()
    after = [*segments[1:], segments[0]]
    turns = []
    for one, other in zip(segments, after, strict=True):
        u, v = one.tangent(np.array([1.0])), other.tangent(np.array([0.0]))
        both = isinstance(one, Line) and isinstance(other, Line)
        turns.append(float(_angle(u, v)[0]) if both else 0.0)
    distance = area = 0.0
    for k, segment in enumerate(segments):
        before, here = turns[k - 1], turns[k]
        if not isinstance(segment, Line) or not before * here > 0 or max(abs(before), abs(here)) > _ROUND_rad:
            continue
        if not 1 / 3 < before / here < 3:
            continue
        long = float(np.hypot(*(np.array(segment.end) - np.array(segment.start))))
        away = long * abs(before + here) / 16
        distance = max(distance, away)
        area += 2 / 3 * away * long * (1 if here > 0 else -1)
    return Missed(distance, area)
