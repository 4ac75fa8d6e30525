"""A potential from a file: energies at points, and how well what lies between them is known."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from wiresolve.describe import checks, imported_mesh, point_table
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import Array
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.shapes import Shape
from wiresolve.errors import InputError
from wiresolve.units import UNITS

TABLES, MESHES = (".csv", ".txt", ".dat", ".tsv"), (".vtu", ".vtk")
HIGHEST_eV = 100.0
FEWEST = 16
_BEYOND = 0.6
"""A section may reach this many distances between points beyond the last one: its curves bulge between nodes."""
_SHARE = 0.95
"""Part of the points at which the error of the interpolation is below what is told."""
SECTION, FILE = "section", "file"


@dataclass(frozen=True)
class PotentialFile:
    """Energies at points of the plane: three columns x, y, energy, or a point array of a VTU file.

    On a full grid it is a bicubic spline, otherwise piecewise cubic on the triangles between the points (P. Alfeld,
    Comput. Aided Geom. Des. 1, 169 (1984)). `origin` says what x = y = 0 in this file is: "section", the section's
    origin (the centre of its core, or of an imported mesh's area), or "file", the origin of the file that the section's
    mesh or outline comes from, whose shift, turn and y direction then hold here too. A section from a file needs it.
    """

    file: InputFile
    length_unit: str
    energy_unit: str
    array: str | None = None
    origin: str | None = None

    def __post_init__(self) -> None:
        if not isinstance(self.file, InputFile):
            raise InputError("file", "must be an InputFile", self.file, "use wiresolve.describe.input_files.read")
        checks.choice("length_unit", self.length_unit, UNITS["length"])
        checks.choice("energy_unit", self.energy_unit, UNITS["energy"])
        if self.origin is not None:
            checks.choice("origin", self.origin, (SECTION, FILE))
        if self.file.suffix not in (*TABLES, *MESHES):
            known = ", ".join((*TABLES, *MESHES))
            raise InputError("file", "is of no form that a potential can have", self.file.name, f"known are {known}")
        if (self.array is None) == (self.file.suffix in MESHES):
            if self.array is None:
                raise InputError(
                    "array", "is missing: it names the point data with the energy", remedy='array = "NAME"'
                )
            raise InputError("array", "belongs to a VTU file, and a table has none", self.array, "take the key out")
        _ = self._samples

    @cached_property
    def _samples(self) -> tuple[Array, Array]:
        """Points in nm, shape (n, 2), and energies in eV."""
        if self.file.suffix in TABLES:
            rows, _, _ = point_table.read("file", self.file, 3)
            table = np.array(rows).reshape(-1, 3)
            points, energy = table[:, :2], table[:, 2]
        else:
            assert self.array is not None
            points, energy = imported_mesh.point_values("file", self.file.name, self.file.content, self.array)
        points, energy = (
            points * float(UNITS["length"][self.length_unit]),
            energy * float(UNITS["energy"][self.energy_unit]),
        )
        if len(points) < FEWEST:
            raise InputError("file", f"has too few points for a potential, {len(points)}", remedy=f"at least {FEWEST}")
        if np.abs(energy).max() > HIGHEST_eV:
            rule = f"holds energies beyond {HIGHEST_eV:g} eV"
            raise InputError("energy_unit", rule, f"{np.abs(energy).max():.3g} eV", "is the unit right?")
        spread = np.linalg.svd(points - points.mean(axis=0), compute_uv=False)
        if not np.isfinite(spread).all() or spread[1] < 1e-6 * spread[0]:
            raise InputError("file", "holds points on one line, and a potential needs an area")
        return points, energy

    @cached_property
    def _known(self) -> _Known:
        points, energy = self._samples
        try:
            return _interpolation(points, energy)
        except InputError:
            raise
        except Exception as fault:  # Qhull says in many words what is wrong with points
            reason = " ".join(str(fault).split())[:80]
            raise InputError(
                "file", f"cannot be interpolated ({reason})", remedy="give points that fill the section"
            ) from None

    @cached_property
    def error_eV(self) -> float:
        """How far energies between the points may be off: below it at 19 of 20 points that are left out.

        Points of half and of a quarter of the density predict the others; how fast that improves tells how much better
        the full density is (no better, where noise is what they miss).
        """
        points, energy = self._samples
        half, quarter = (_left_out(points, energy, step) for step in (2, 4))
        if half == 0.0:
            return 0.0
        order = np.clip(np.log2(quarter / half), 0, 4) if np.isfinite(quarter) else 0.0
        return float(half / 2**order)

    def over(self, shape: Shape) -> Callable[[Array, Array], Array]:
        """The energy in eV at (x, y) in nm of a section with this shape as its core.

        Raises `InputError` at once where it is not said which origin is meant, and when called where points lie
        outside.
        """
        imported = shape if isinstance(shape, ImportedMesh | Outline) else None
        if imported is not None and self.origin is None:
            rule = f"is missing: the section comes from a file ({imported.kind}) and was moved to its centre"
            remedy = 'write origin = "file" if this potential has the frame of that file, else origin = "section"'
            raise InputError("origin", rule, remedy=remedy)
        if imported is None and self.origin == FILE:
            remedy = 'write origin = "section": x = y = 0 is the centre of the core'
            raise InputError("origin", f"a {shape.kind} comes from no file", self.origin, remedy)
        known, moved = self._known, self.origin == FILE

        def energy(x: Array, y: Array) -> Array:
            u, v = imported.in_file(x, y) if moved and imported is not None else (x, y)
            shape_, (u, v) = (
                np.shape(u),
                np.broadcast_arrays(np.asarray(u, float).ravel(), np.asarray(v, float).ravel()),
            )
            beyond = known.beyond(u, v)
            if beyond.size and beyond.max() > known.reach:
                far = int(np.argmax(beyond))
                rule = f"does not cover the section: at ({np.ravel(x)[far]:.4g}, {np.ravel(y)[far]:.4g}) nm its nearest"
                rule += f" point is {beyond[far]:.3g} nm away"
                raise InputError("file", rule, remedy="give the potential everywhere in the section, walls included")
            return np.asarray(known(u, v)).reshape(shape_)

        return energy


class _Known:
    """An interpolation, `reach` nm beyond its last points along its slope there."""

    reach: float

    def __call__(self, x: Array, y: Array) -> Array:
        u, v = self.inside(x, y)
        step = 1e-4 * self.reach
        found = self.value(u, v)
        out = (u != x) | (v != y)
        if out.any():
            # A straight line from the edge on: the value there and a step further in.
            away = np.hypot(x - u, y - v)[out]
            far = away > 0
            scale = np.divide(step, away, out=np.zeros_like(away), where=far)
            inner = self.value(u[out] - scale * (x - u)[out], v[out] - scale * (y - v)[out])
            found[out] += np.where(far, (found[out] - inner) / step * away, 0.0)
        return found

    def beyond(self, x: Array, y: Array) -> Array:
        """Distance in nm from where something is known, 0 inside."""
        u, v = self.inside(x, y)
        return np.asarray(np.hypot(x - u, y - v))

    def inside(self, x: Array, y: Array) -> tuple[Array, Array]:
        """The nearest place where something is known."""
        raise NotImplementedError

    def value(self, x: Array, y: Array) -> Array:
        """The energy there."""
        raise NotImplementedError


class _Grid(_Known):
    def __init__(self, x: Array, y: Array, energy: Array) -> None:
        from scipy.interpolate import RectBivariateSpline

        self._x, self._y = x, y
        self._spline = RectBivariateSpline(x, y, energy, kx=min(3, len(x) - 1), ky=min(3, len(y) - 1))
        self.reach = _BEYOND * float(max(np.diff(x).max(), np.diff(y).max()))

    def inside(self, x: Array, y: Array) -> tuple[Array, Array]:
        return np.clip(x, self._x[0], self._x[-1]), np.clip(y, self._y[0], self._y[-1])

    def value(self, x: Array, y: Array) -> Array:
        return np.asarray(self._spline.ev(x, y))


class _Scattered(_Known):
    def __init__(self, points: Array, energy: Array) -> None:
        from scipy.interpolate import CloughTocher2DInterpolator
        from scipy.spatial import ConvexHull, Delaunay, cKDTree

        tree = cKDTree(points)
        if len(twice := tree.query_pairs(1e-9 * float(np.ptp(points, axis=0).max()), output_type="ndarray")):
            a, b = (int(k) + 1 for k in sorted(twice[0]))
            raise InputError("file", f"gives points {a} and {b} at the same place", remedy="give each point once")
        self._center = points.mean(axis=0)
        triangles = Delaunay(points - self._center)
        self._cubic = CloughTocher2DInterpolator(triangles, energy, tol=1e-10, maxiter=2000)
        corners = points[ConvexHull(points - self._center).vertices]
        self._start, self._end = corners, np.roll(corners, -1, axis=0)
        # On the hull itself, rounding would leave points outside of all triangles.
        self._inner = 1 - 1e-9
        spacing = tree.query(points, k=2)[0][:, 1]
        self.reach = _BEYOND * float(max(np.quantile(spacing, 0.9), np.hypot(*(self._end - corners).T).min()))

    def inside(self, x: Array, y: Array) -> tuple[Array, Array]:
        u, v = np.array(x, dtype=float), np.array(y, dtype=float)
        along = self._end - self._start
        normal = np.column_stack([along[:, 1], -along[:, 0]]) / np.hypot(*along.T)[:, None]
        height = np.full(u.shape, -np.inf)
        for a, n in zip(self._start, normal, strict=True):
            np.maximum(height, (u - a[0]) * n[0] + (v - a[1]) * n[1], out=height)
        for k in np.flatnonzero(height > 0):
            off = np.array([u[k], v[k]]) - self._start
            t = np.clip((off * along).sum(axis=1) / (along**2).sum(axis=1), 0, 1)
            feet = self._start + t[:, None] * along
            u[k], v[k] = feet[np.argmin(((feet - (u[k], v[k])) ** 2).sum(axis=1))]
        return u, v

    def value(self, x: Array, y: Array) -> Array:
        places = self._inner * (np.column_stack([x, y]) - self._center)
        found = np.asarray(self._cubic(places))
        if (lost := np.isnan(found)).any():  # a sliver along the hull
            found[lost] = self._cubic(places[lost] * (1 - 1e-6))
        return found


def _interpolation(points: Array, energy: Array) -> _Known:
    grid = _grid(points)
    if grid is None:
        return _Scattered(points, energy)
    x, y, order = grid
    return _Grid(x, y, energy[order].reshape(len(x), len(y)))


def _grid(points: Array) -> tuple[Array, Array, Any] | None:
    """Coordinates along x and y of a full grid, and the points' order in it; None for scattered points."""
    size = float(np.ptp(points, axis=0).max())
    rounded = np.rint(points / (1e-7 * size))
    (x, i), (y, j) = (np.unique(rounded[:, k], return_inverse=True) for k in (0, 1))
    if len(x) * len(y) != len(points) or min(len(x), len(y)) < 4:
        return None
    place = np.ravel(i) * len(y) + np.ravel(j)
    if len(np.unique(place)) < len(points):
        return None
    order = np.argsort(place)
    return (
        np.array([points[np.ravel(i) == k, 0].mean() for k in range(len(x))]),
        np.array([points[np.ravel(j) == k, 1].mean() for k in range(len(y))]),
        order,
    )


def _left_out(points: Array, energy: Array, step: int) -> float:
    """The error, at most points, of what points `step` times as far apart say of the others; infinite for too few."""
    grid = _grid(points)
    if grid is not None:
        x, y, order = grid
        if min(len(x), len(y)) < 3 * step + 1:
            return np.inf
        table = energy[order].reshape(len(x), len(y))
        coarse: _Known = _Grid(x[::step], y[::step], table[::step, ::step])
        u, v = (part.ravel() for part in np.meshgrid(x, y, indexing="ij"))
        wanted, keep = table.ravel(), np.ones(len(u), dtype=bool)
        keep &= (u <= x[::step][-1]) & (v <= y[::step][-1])
    else:
        chosen = np.random.default_rng(1).permutation(len(points))[: len(points) // step**2]
        if len(chosen) < FEWEST:
            return np.inf
        coarse = _Scattered(points[chosen], energy[chosen])
        u, v = points.T
        wanted, keep = energy, np.ones(len(points), dtype=bool)
        keep[chosen] = False
        keep &= coarse.beyond(u, v) == 0
    if not keep.any():
        return np.inf
    return float(np.quantile(np.abs(coarse.value(u[keep], v[keep]) - wanted[keep]), _SHARE))
