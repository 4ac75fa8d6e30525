"""A section traced as closed curves of points, with shells around the innermost one."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import ClassVar

import numpy as np

from wiresolve.describe import checks, outline_file, polygons
from wiresolve.describe.curves import Line, Loop, turn
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.parallel_curve import parallel
from wiresolve.describe.shapes import SLENDEREST, Shape
from wiresolve.describe.smoothing import smoothed
from wiresolve.errors import InputError

_NEAR, _FOLDS, _RADII = 0.04, (6, 5, 4, 3, 2), 720
"""An outline is nearly symmetric if turning it moves it by less than this part of its radius."""


@dataclass(frozen=True)
class Outline(Shape):
    """Closed curves from a file of points, one inside the other; the innermost is the core.

    Points are in units of `scale_nm` (a pixel, say), their y downwards where `y_down`. With a `pixel_nm` above zero
    each curve is smoothed as far as pixels have put the points aside, its area kept; without, it is the polygon through
    its points. The core's centre is moved to the origin, then everything is turned by `rotation_deg`.
    """

    file: InputFile
    scale_nm: float
    pixel_nm: float = 0.0
    y_down: bool = False
    rotation_deg: float = 0.0
    kind: ClassVar[str] = "outline"

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if not isinstance(self.file, InputFile):
            raise InputError("file", "must be an InputFile", self.file, "use wiresolve.describe.input_files.read")
        set_(self, "scale_nm", checks.in_range("scale", self.scale_nm, 1e-9, 1e9, "nm"))
        set_(self, "pixel_nm", checks.in_range("pixel_size", self.pixel_nm, 0, checks.LONGEST_nm, "nm"))
        if not isinstance(self.y_down, bool):
            raise InputError("y_down", "must be true or false", self.y_down)
        set_(self, "rotation_deg", checks.in_range("rotation", self.rotation_deg, -360, 360, "deg"))
        if not self._as_read:
            raise InputError("file", "holds no curves")

    @cached_property
    def _as_read(self) -> tuple[Loop, ...]:
        """The curves at their place in the file, in nm, from the innermost outwards."""
        traced = outline_file.read("file", self.file, self.pixel_nm / self.scale_nm)
        flip = np.array([1.0, -1.0 if self.y_down else 1.0]) * self.scale_nm
        drawn = [(self._drawn(one.points[:: -1 if self.y_down else 1] * flip, one.name), one) for one in traced]
        drawn.sort(key=lambda pair: pair[0].area)
        for (inner, one), (outer, other) in pairwise(drawn):
            points = inner.sample(256 if len(inner.segments) < 8 else 8)
            if (outside := ~outer.contains(points)).any():
                x, y = points[np.argmax(outside)] / flip
                rule = f"{other.name} does not go around {one.name}: it lies inside at ({x:.4g}, {y:.4g})"
                raise InputError("file", rule, remedy="curves must lie one inside the other, core and shells")
            gap = _gap(points, outer)
            if gap < checks.THINNEST_nm:
                rule = f"{one.name} and {other.name} come within {gap:.2g} nm of each other"
                raise InputError("file", rule, remedy=f"a shell must be at least {checks.THINNEST_nm:g} nm thick")
        return tuple(loop for loop, _ in drawn)

    def _drawn(self, points: np.ndarray, shown: str) -> Loop:
        wide, high = np.ptp(points, axis=0)
        for word, extent in (("wide", wide), ("high", high)):
            if not checks.SHORTEST_nm <= extent <= checks.LONGEST_nm:
                rule = f"{shown} must be between {checks.SHORTEST_nm:g} nm and {checks.LONGEST_nm:g} nm {word}"
                raise InputError("file", rule, f"{extent:.3g} nm", "is the unit or the scale right?")
        if max(wide, high) > SLENDEREST * min(wide, high):
            raise InputError("file", f"{shown} is more than {SLENDEREST:g} times as long as wide")
        if self.pixel_nm:
            loop = smoothed("file", points, self.pixel_nm, shown)
            if parallel_crosses(loop):
                rule = f"{shown} crosses itself once it is smoothed: it is narrower than its pixels"
                raise InputError("pixel_size", rule, f"{self.pixel_nm:g} nm", "give a smaller one")
            return loop
        if len(points) > polygons.MOST_POINTS:
            remedy = "give the pixel_size: then the outline is smoothed, and the number of points does not matter"
            raise InputError("file", f"{shown} is a polygon of {len(points)} corners", remedy=remedy)
        corners = polygons.checked("file", [(float(x), float(y)) for x, y in points])
        after = corners[1:] + corners[:1]
        return Loop(tuple(Line(a, b, "rim") for a, b in zip(corners, after, strict=True)))

    @cached_property
    def _placed(self) -> tuple[Loop, ...]:
        x, y = self._as_read[0].centroid
        angle = math.radians(self.rotation_deg)
        return tuple(loop.moved(-x, -y).rotated(angle) for loop in self._as_read)

    def in_file(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Coordinates in nm in the frame of the file, of points of the section."""
        cosine, sine = turn((1.0, 0.0), math.radians(self.rotation_deg))
        u, v = self._as_read[0].centroid
        flip = -1.0 if self.y_down else 1.0
        return cosine * x + sine * y + u, flip * (-sine * x + cosine * y + v)

    @property
    def curve_count(self) -> int:
        """How many curves there are, the core's included."""
        return len(self._placed)

    def curve(self, number: int) -> Loop:
        """The outline of a curve, the core's being 0."""
        return self._placed[number]

    def loop(self) -> Loop:
        """The core's outline."""
        return self.curve(0)

    def grown(self, thickness_nm: float) -> Loop:
        """Parallel to the core: a spline around a smoothed outline, mitred around a polygon."""
        return self.grown_from(0, thickness_nm)

    def grown_from(self, number: int, thickness_nm: float) -> Loop:
        """Parallel to one of the curves."""
        return parallel("thickness", self.curve(number), thickness_nm)

    @property
    def smallest_feature_nm(self) -> float:
        """Of a polygon its smallest side or width; of a smoothed outline the smallest width through its centre."""
        core = self.loop()
        if all(isinstance(segment, Line) for segment in core.segments):
            return polygons.smallest_feature([segment.start for segment in core.segments])
        x, y = core.sample(1440).T
        angles = np.arange(180) * math.pi / 180
        across = np.outer(np.cos(angles), x) + np.outer(np.sin(angles), y)
        return float(np.ptp(across, axis=1).min())


def parallel_crosses(loop: Loop) -> bool:
    """Whether a smooth loop crosses itself, looked at between 2000 points."""
    from wiresolve.describe import crossings

    points = loop.sample(2000)
    n = np.arange(len(points))
    return crossings.first(points, np.roll(points, -1, axis=0), np.column_stack([n, (n + 1) % len(n)])) is not None


def _gap(points: np.ndarray, loop: Loop) -> float:
    """About how close points come to a loop."""
    from scipy.spatial import cKDTree

    near, _ = cKDTree(loop.sample(1024 if len(loop.segments) < 8 else 16)).query(points)
    return float(near.min())


def near_symmetry(loop: Loop) -> str | None:
    """In words how nearly an outline is round or comes back after a part of a turn about its centre, or None.

    Told is the largest distance, along the radius, between the outline and its mean over these turns.
    """
    points = loop.sample(max(2, 4096 // len(loop.segments))) - np.array(loop.centroid)
    angle, radius = np.arctan2(points[:, 1], points[:, 0]), np.hypot(*points.T)
    turning = np.mod(np.diff(angle, append=angle[0]) + math.pi, math.tau) - math.pi
    if (turning <= 0).any():  # seen from its centre the outline covers itself: it has no one radius at each angle
        return None
    order = np.argsort(angle)
    even = np.arange(_RADII) * math.tau / _RADII - math.pi
    radii = np.interp(even, angle[order], radius[order], period=math.tau)
    mean = float(radii.mean())
    if (off := float(np.abs(radii - mean).max())) < _NEAR / 2 * mean:
        return f"nearly round (within {round(off, 6):.2g} nm)"
    for fold in _FOLDS:
        off = float(np.abs(radii - radii.reshape(fold, -1).mean(axis=0)[np.arange(_RADII) % (_RADII // fold)]).max())
        if off < _NEAR * mean:
            return f"nearly {_WORDS[fold]} (within {round(off, 6):.2g} nm)"
    return None


_WORDS = {2: "twofold", 3: "threefold", 4: "fourfold", 5: "fivefold", 6: "sixfold"}
