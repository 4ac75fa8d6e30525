"""Polygons as corner points: checks, parallel outlines, rounded corners (lengths in nm)."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Arc, CORNER_rad, Line, Loop, Point, Segment
from wiresolve.errors import InputError

MOST_POINTS = 1000
CLOSEST_nm = 1e-3
"""Corner points this close together, or to another side, are one and the same: far below the size of an atom."""
SHARPEST_deg = 3.0
"""Corners sharper than this are refused: no wire has them, and no mesh resolves them."""


def signed_area(points: Sequence[Point]) -> float:
    """Area in nm^2, positive for counter-clockwise points."""
    x, y = np.array(points).T
    x, y = x - x[0], y - y[0]
    return float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2


def crossing(points: Sequence[Point]) -> tuple[int, int] | None:
    """Two sides (from 0; side k runs from point k to k + 1) that cross or touch and are no neighbours, or None."""
    p = np.array(points)
    n = len(p)
    if n < 4:
        return None
    q = np.roll(p, -1, axis=0)
    i, j = np.triu_indices(n, 2)
    apart = ~((i == 0) & (j == n - 1))
    i, j = i[apart], j[apart]
    reach = 1e-9 * float(np.ptp(p, axis=0).max())

    def side_of(a: NDArray[np.float64], b: NDArray[np.float64], c: NDArray[np.float64]) -> NDArray[np.float64]:
        along, off = b - a, c - a
        return np.asarray((along[:, 0] * off[:, 1] - along[:, 1] * off[:, 0]) / np.maximum(np.hypot(*along.T), 1e-300))

    def splits(a: NDArray[np.float64], b: NDArray[np.float64]) -> NDArray[np.bool_]:
        return ~(((a > reach) & (b > reach)) | ((a < -reach) & (b < -reach)))

    def overlap(axis: int) -> NDArray[np.bool_]:
        low, high = np.minimum(p, q)[:, axis], np.maximum(p, q)[:, axis]
        return np.asarray((low[i] <= high[j] + reach) & (low[j] <= high[i] + reach))

    meet = overlap(0) & overlap(1)
    i, j = i[meet], j[meet]
    both = splits(side_of(p[i], q[i], p[j]), side_of(p[i], q[i], q[j]))
    both &= splits(side_of(p[j], q[j], p[i]), side_of(p[j], q[j], q[i]))
    hits = np.flatnonzero(both)
    return (int(i[hits[0]]), int(j[hits[0]])) if hits.size else None


def checked(field: str, points: Sequence[Point]) -> tuple[Point, ...]:
    """The points counter-clockwise; InputError, with the points' numbers from 1, where they are no simple polygon."""
    n = len(points)
    if n < 3:
        raise InputError(field, "a polygon needs at least 3 points", f"{n} points")
    if n > MOST_POINTS:
        raise InputError(field, f"a polygon can have at most {MOST_POINTS} points", f"{n} points")
    p = np.array(points)
    size = float(np.ptp(p, axis=0).max())
    if size == 0:
        raise InputError(field, "all points coincide", points[0])
    gaps = np.hypot(p[:, None, 0] - p[None, :, 0], p[:, None, 1] - p[None, :, 1])
    first, second = np.nonzero(np.triu(gaps < max(1e-7 * size, CLOSEST_nm), 1))
    if first.size:
        a, b = int(first[0]) + 1, int(second[0]) + 1
        closes = (a, b) == (1, n)
        remedy = "the outline closes by itself: leave the last point out" if closes else f"leave point {b} out"
        raise InputError(field, f"points {a} and {b} coincide", points[b - 1], remedy)
    spread = np.linalg.svd(p - p.mean(axis=0), compute_uv=False)
    if spread[1] < 1e-6 * spread[0]:
        raise InputError(field, f"points 1 to {n} lie on one line", remedy="an outline must enclose an area")
    if (hit := crossing(points)) is not None:
        a, b = hit
        rule = f"the side from point {a + 1} to {a + 2} crosses that from point {b + 1} to {(b + 1) % n + 1}"
        raise InputError(field, rule, remedy="list the points in order around the outline")
    ahead = np.roll(p, -1, axis=0) - p
    behind = p - np.roll(p, 1, axis=0)
    turns = np.arctan2(behind[:, 0] * ahead[:, 1] - behind[:, 1] * ahead[:, 0], np.sum(behind * ahead, axis=1))
    sharp = int(np.argmax(np.abs(turns)))
    if abs(turns[sharp]) > math.pi - math.radians(SHARPEST_deg):
        raise InputError(field, f"the outline folds back at point {sharp + 1}", points[sharp], "blunt that corner")
    if (width := smallest_feature(points)) < CLOSEST_nm:
        raise InputError(field, "the outline nearly touches itself", f"a width of {width:.2g} nm")
    return tuple(points) if signed_area(points) > 0 else tuple(reversed(points))


def from_bottom(points: tuple[Point, ...]) -> tuple[Point, ...]:
    """The same counter-clockwise points, listed so that the first side is the bottom one.

    The bottom side is the one with the lowest middle; of equally low ones the flattest, then the leftmost.
    """
    size = max(max(abs(x), abs(y)) for x, y in points)
    best, first = (math.inf, math.inf, math.inf), 0
    for k, (a, b) in enumerate(zip(points, points[1:] + points[:1], strict=True)):
        middle = round((a[1] + b[1]) / 2 / size, 9)
        flat = round(-(b[0] - a[0]) / math.dist(a, b), 9)
        key = (middle, flat, round((a[0] + b[0]) / 2 / size, 9))
        if key < best:
            best, first = key, k
    return points[first:] + points[:first]


def smallest_feature(points: Sequence[Point]) -> float:
    """Shortest distance in nm between a corner and a side that does not touch it (a side's length included)."""
    p = np.array(points)
    along = np.roll(p, -1, axis=0) - p
    lengths = np.hypot(*along.T)
    off = p[:, None, :] - p[None, :, :]
    t = np.clip(np.einsum("ijk,jk->ij", off, along) / lengths**2, 0, 1)
    gap = np.hypot(*np.moveaxis(off - t[:, :, None] * along[None], 2, 0))
    n = len(p)
    gap[np.arange(n), np.arange(n)] = np.inf
    gap[np.arange(n), np.arange(n) - 1] = np.inf
    return float(min(gap.min(), lengths.min()))


def parallel(field: str, points: tuple[Point, ...], distances: Sequence[float]) -> tuple[Point, ...]:
    """Corners of the mitred outline whose side k (from point k on) lies `distances[k]` further out.

    InputError where the sides do not meet in a simple outline with the same sides.
    """
    n = len(points)
    directions = []
    for a, b in zip(points, points[1:] + points[:1], strict=True):
        long = math.dist(a, b)
        directions.append(((b[0] - a[0]) / long, (b[1] - a[1]) / long))
    grown = []
    for k, (x, y) in enumerate(points):
        (ux, uy), (vx, vy) = directions[k - 1], directions[k]
        d, e = distances[k - 1], distances[k]
        sine = ux * vy - uy * vx
        if abs(sine) < 1e-9:
            if d != e:
                rule = f"sides {k or n} and {k + 1} lie in one line, so their coats must be equally thick"
                raise InputError(field, rule)
            grown.append((x + d * (uy + vy) / 2, y - d * (ux + vx) / 2))
        else:
            # The move m has n_u.m = d and n_v.m = e with outward normals n = (u_y, -u_x), so m = (e u - d v) / sine.
            mx, my = (e * ux - d * vx) / sine, (e * uy - d * vy) / sine
            if math.hypot(mx, my) > 40 * max(d, e):
                rule = f"sides {k or n} and {k + 1} are nearly in one line, so their coats must be equally thick"
                raise InputError(field, rule)
            grown.append((x + mx, y + my))
    remedy = "make the layer thinner, or draw its outer outline as a patch of its own"
    for k, (a, b) in enumerate(zip(grown, grown[1:] + grown[:1], strict=True)):
        along = (b[0] - a[0]) * directions[k][0] + (b[1] - a[1]) * directions[k][1]
        if along <= 1e-6 * math.dist(points[k], points[(k + 1) % n]):
            raise InputError(field, f"side {k + 1} of the outline vanishes at this thickness", remedy=remedy)
    if (hit := crossing(grown)) is not None:
        rule = f"at this thickness the outline crosses itself (sides {hit[0] + 1} and {hit[1] + 1})"
        raise InputError(field, rule, remedy=remedy)
    return tuple(grown)


def rounded(
    field: str, points: tuple[Point, ...], radii: Sequence[float], numbers: Sequence[int] | None = None
) -> Loop:
    """Loop of the polygon with corner k rounded by `radii[k]` (0: sharp); sides "side 1".., arcs "corner 1"..

    "corner k" is where side k begins; `numbers` are the sides' numbers where they are not 1, 2, 3 and so on.
    InputError where a radius does not fit.
    """
    n = len(points)
    numbers = range(1, n + 1) if numbers is None else numbers
    directions, lengths = [], []
    for a, b in zip(points, points[1:] + points[:1], strict=True):
        lengths.append(math.dist(a, b))
        directions.append(((b[0] - a[0]) / lengths[-1], (b[1] - a[1]) / lengths[-1]))
    turns, cuts = [], []
    for k in range(n):
        (ux, uy), (vx, vy) = directions[k - 1], directions[k]
        turns.append(math.atan2(ux * vy - uy * vx, ux * vx + uy * vy))
        cuts.append(radii[k] * math.tan(abs(turns[k]) / 2) if abs(turns[k]) > CORNER_rad else 0.0)
    segments: list[Segment] = []
    for k in range(n):
        (ux, uy), (vx, vy), (x, y) = directions[k - 1], directions[k], points[k]
        after = (k + 1) % n
        if cuts[k] > 0:
            side = math.copysign(radii[k], turns[k])
            start = (x - cuts[k] * ux, y - cuts[k] * uy)
            center = (start[0] - side * uy, start[1] + side * ux)
            angle = math.atan2(start[1] - center[1], start[0] - center[0])
            segments.append(Arc(center, radii[k], angle, turns[k], f"corner {numbers[k]}"))
        rest = lengths[k] - cuts[k] - cuts[after]
        if rest < -1e-12 * lengths[k]:
            fits = min(lengths[k] / (cuts[k] + cuts[after]) * max(radii[k], radii[after]), max(radii))
            rule = f"does not fit on side {numbers[k]}, which is {lengths[k]:.6g} nm long"
            raise InputError(field, rule, f"{max(radii[k], radii[after]):g} nm", f"at most {fits:.6g} nm fits there")
        if rest > 1e-12 * lengths[k]:
            if rest < 1e-4 and (cuts[k] or cuts[after]):
                raise InputError(
                    field, f"leaves a side of only {rest:.1g} nm", f"{max(radii):g} nm", "change it a little"
                )
            a = (x + cuts[k] * vx, y + cuts[k] * vy)
            bx, by = points[after]
            segments.append(Line(a, (bx - cuts[after] * vx, by - cuts[after] * vy), f"side {numbers[k]}"))
    loop = Loop(tuple(segments))
    if any(radii) and min(turns) < -CORNER_rad and crossing([(float(x), float(y)) for x, y in loop.sample(6)]):
        raise InputError(field, "makes the outline cross itself", f"{max(radii):g} nm", "make it smaller")
    return loop


def coated_corners(
    field: str, points: Sequence[Point], outer: Sequence[Point], distances: Sequence[float], radius: float
) -> tuple[tuple[Point, ...], list[float], list[int]]:
    """Corners, their radii and the numbers of the sides after them, of a coat on a polygon rounded by `radius`.

    `outer` are the mitred corners of the coat, `distances` its thickness on each side. A coat that thinned out along a
    rounding would end in a cusp, which no mesh resolves: beside a bare side it ends bluntly instead.
    """
    n = len(points)
    found: list[Point] = []
    radii: list[float] = []
    numbers: list[int] = []
    for k, (x, y) in enumerate(points):
        (px, py), (qx, qy) = points[k - 1], points[(k + 1) % n]
        before, after = math.hypot(x - px, y - py), math.hypot(qx - x, qy - y)
        (ux, uy), (vx, vy) = ((x - px) / before, (y - py) / before), ((qx - x) / after, (qy - y) / after)
        turn = math.atan2(ux * vy - uy * vx, ux * vx + uy * vy)
        near, far = sorted((distances[k - 1], distances[k]))
        corner = [(outer[k], radius + near if turn > 0 else max(radius - far, 0.0), k + 1)]
        if near == 0 < far and abs(turn) > CORNER_rad:
            if turn < 0 and far < radius:
                rule = (
                    f"a coat that ends at a rounded inner corner must be at least as thick as its radius, {radius:g} nm"
                )
                raise InputError(field, rule, f"{far:g} nm")
            cut = radius * math.tan(turn / 2)
            if turn > 0 and distances[k] > 0:  # side k is coated: bare rounding, then the coat's end, then the coat
                foot = (x + cut * vx, y + cut * vy)
                end = (foot[0] + far * vy, foot[1] - far * vx)
                corner = [((x, y), radius, k + 1), (foot, 0.0, k + 1), (end, 0.0, k + 1)]
            elif turn > 0:
                foot = (x - cut * ux, y - cut * uy)
                end = (foot[0] + far * uy, foot[1] - far * ux)
                corner = [(end, 0.0, k or n), (foot, 0.0, k or n), ((x, y), radius, k + 1)]
        for point, rounding, number in corner:
            found.append(point)
            radii.append(rounding)
            numbers.append(number)
    return tuple(found), radii, numbers
