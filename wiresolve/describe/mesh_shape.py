"""A section drawn by a mesh that was made elsewhere."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import ClassVar

import numpy as np

from wiresolve.describe import checks, imported_mesh
from wiresolve.describe.curves import Line, Loop, turn
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import MeshData
from wiresolve.describe.parallel_curve import parallel
from wiresolve.describe.planar_map import Face, PlanarMap, planar_map, undirected
from wiresolve.describe.shapes import SLENDEREST, Shape
from wiresolve.errors import InputError
from wiresolve.units import UNITS, format_quantity

CAD = (".geo", ".step", ".stp", ".brep")
"""Endings of files that hold a geometry and no mesh: Gmsh meshes them when the wire file is read."""
_SAID = 1e-6
"""Parts of the size below which it is not said what edges miss of a curve."""


@dataclass(frozen=True)
class ImportedMesh(Shape):
    """The regions of a mesh: straight edges stay straight, those of second order stay parabolas.

    The section is meshed anew, so it does not matter how fine the mesh is. The centre of its whole area is moved to
    the origin; then it is turned by `rotation_deg`. `unit` is that of its coordinates, `array` the cell data that tells
    the regions, where a file without named groups has several. `meshed` is what a CAD file was meshed into.
    """

    file: InputFile
    unit: str
    array: str | None = None
    rotation_deg: float = 0.0
    meshed: MeshData | None = field(default=None, repr=False, compare=False)
    kind: ClassVar[str] = "mesh"

    def __post_init__(self) -> None:
        if not isinstance(self.file, InputFile):
            raise InputError("file", "must be an InputFile", self.file, "use wiresolve.describe.input_files.read")
        checks.choice("unit", self.unit, UNITS["length"])
        if self.array is not None:
            checks.text("array", self.array, 80)
        rotation = checks.in_range("rotation", self.rotation_deg, -360, 360, "deg")
        object.__setattr__(self, "rotation_deg", rotation)
        for name in self.group_names:
            if len(name) > 60 or not name.strip() or not name.isprintable():
                rule = "names a group with no printable text of 60 characters or less"
                raise InputError("file", rule, name, "rename the group")

    @cached_property
    def _data(self) -> MeshData:
        """The mesh as the file gives it."""
        data = self.meshed
        if data is None:
            if self.file.suffix in CAD:
                remedy = "read the wire file with wiresolve.load"
                raise InputError("file", "holds a geometry that has to be meshed first", self.file.name, remedy)
            data = imported_mesh.read("file", self.file.name, self.file.content, self.array)
        return data

    @property
    def region_array(self) -> str | None:
        """The cell data that tells the regions; None where the file names its groups."""
        return self._data.array

    @cached_property
    def _as_read(self) -> PlanarMap:
        """The drawing at its place in the file, in nm."""
        data = self._data
        scale = float(UNITS["length"][self.unit])
        self._size_is_sane(data, scale)
        return planar_map("file", data, scale)

    def _size_is_sane(self, data: MeshData, scale: float) -> None:
        used = np.unique(np.concatenate([block.nodes.ravel() for block in data.blocks] or [np.zeros(0, dtype=int)]))
        places = data.points[used]
        finite = places[np.isfinite(places).all(axis=1)]
        if len(used) and not len(finite):
            raise InputError("file", "has no node with a finite place", remedy="write the mesh anew")
        spread = np.ptp(finite, axis=0) if len(finite) else np.zeros(3)
        sides = sorted(float(side) for side in spread)[1:]  # of the plane that it lies in
        if not np.isfinite(sides).all():
            raise InputError(
                "file", "has nodes whose coordinates are too large for numbers", remedy="write the mesh anew"
            )
        size = sides[-1] * scale
        if not checks.SHORTEST_nm <= size <= checks.LONGEST_nm:
            fits = [u for u, f in UNITS["length"].items() if u.isascii() and 1 <= sides[-1] * float(f) <= 2000]
            meant = f'is the file in {fits[0]}? then write unit = "{fits[0]}"' if fits else "scale it"
            rule = f"would be {size:.3g} nm large with its numbers in {self.unit}"
            raise InputError("unit", rule, self.unit, f"a section has {checks.SHORTEST_nm:g} nm to 1e4 nm; {meant}")
        if sides[0] * SLENDEREST < sides[1]:
            raise InputError("file", f"holds a mesh more than {SLENDEREST:g} times as long as wide")

    @cached_property
    def map(self) -> PlanarMap:
        """The drawing with the centre of its area at the origin, turned."""
        x, y = self._as_read.centroid
        return self._as_read.placed(-x, -y, math.radians(self.rotation_deg))

    def in_file(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Coordinates in nm in the frame of the file, of points of the section."""
        cosine, sine = turn((1.0, 0.0), math.radians(self.rotation_deg))
        u, v = self._as_read.centroid
        return cosine * x + sine * y + u, -sine * x + cosine * y + v

    @cached_property
    def group_names(self) -> tuple[str, ...]:
        """Names of the groups, those of the largest outlines first."""
        return tuple(dict.fromkeys(face.group for face in self._as_read.faces))

    def listed(self, names: Sequence[str]) -> str:
        """Groups with their area and, in the file's unit, their place: what tells them apart where names do not."""
        scale = float(UNITS["length"][self.unit])
        told = []
        for name in names[:5]:
            faces = [face for face in self._as_read.faces if face.group == name]
            x, y = faces[0].centroid
            area = sum(face.area_nm2 for face in faces) / scale**2
            told.append(f"'{name}' ({area:.4g} {self.unit}^2 around {_shown(x / scale)}, {_shown(y / scale)})")
        return ", ".join(told) + (f" and {len(names) - 5} more" if len(names) > 5 else "")

    def faces(self) -> tuple[Face, ...]:
        """Connected parts of groups, from the largest outer loop to the smallest."""
        return self.map.faces

    @cached_property
    def outermost_group(self) -> str:
        """The group with the longest part of the outer boundary."""
        rim = {undirected(segment) for loop in self.map.outlines for segment in loop.segments}
        length = dict.fromkeys(self.group_names, 0.0)
        for face in self.faces():
            own = [s for s in face.outer.segments if undirected(s) in rim]
            length[face.group] += Loop(tuple(own)).perimeter if own else 0.0
        return max(length, key=lambda name: length[name])

    def loop(self) -> Loop:
        """The outer boundary; the largest where the mesh falls into separate parts."""
        return max(self.map.outlines, key=lambda loop: loop.area)

    def grown(self, thickness_nm: float) -> Loop:
        """The parallel outline, where the mesh has one outer boundary, all straight or all smooth."""
        if len(self.map.outlines) > 1:
            raise InputError("thickness", "no layer can be grown around a mesh of separate parts")
        return parallel("thickness", self.loop(), thickness_nm)

    @property
    def smallest_feature_nm(self) -> float:
        """The shortest straight side, or the width of the narrowest region (4 area / perimeter) where that is less."""
        sides = [math.dist(s.start, s.end) for f in self.faces() for s in f.outer.segments if isinstance(s, Line)]
        widths = [4 * f.area_nm2 / (f.outer.perimeter + sum(hole.perimeter for hole in f.holes)) for f in self.faces()]
        return min(*sides, *widths) if sides else min(widths)

    def edge_names(self) -> tuple[str, ...]:
        """Names of the mesh's groups of lines, and the whole rim."""
        loops = [f.outer for f in self.faces()]
        names = dict.fromkeys(s.name for loop in loops for s in loop.segments)
        return (*(name for name in names if name not in ("rim", "interface")), "rim")

    @property
    def missed_nm(self) -> float:
        """How far edges run beside the smooth curves that they seem to stand for."""
        return self.map.missed.distance_nm

    @property
    def missed_area(self) -> float:
        """The area between edges and these curves, as a part of the whole (positive: the section is too small)."""
        return self.map.missed.area_nm2 / self.map.area_nm2

    @property
    def geometry_note(self) -> str | None:
        """What edges miss of the smooth curves that they seem to stand for, in words; None where that is nothing."""
        if self.missed_nm < _SAID * math.sqrt(self.map.area_nm2):
            return None
        kinds = {type(s) for loop in self.map.outlines for s in loop.segments}
        edges = "straight edges" if kinds == {Line} else "edges"
        away = format_quantity(self.missed_nm, "length", digits=2)
        part = f"{abs(100 * self.missed_area):.2g} %"
        sense = "too small" if self.missed_area > 0 else "too large"
        return f"{edges} stand for curves that they miss by up to {away}; the area is {part} {sense}"


def _shown(value: float) -> str:
    return f"{round(value, 9) + 0:.4g}"
