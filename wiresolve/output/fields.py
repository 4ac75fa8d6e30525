"""Named arrays on a mesh, as files for ParaView hold them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

SEEN = 4.0
SURROUNDINGS = ("below", "above", "beside")


@dataclass(frozen=True, eq=False)
class Fields:
    """A mesh with named arrays.

    Attributes
    ----------
    points, cells : (points,) and (cells,) each.
    inside : (cells, nodes per cell) each: values that may jump where regions meet.
    numbers, texts : what belongs to the whole file.
    active : the array that is shown at first, "" for none.
    """

    mesh: Mesh
    points: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    cells: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    inside: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    numbers: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    texts: Mapping[str, Sequence[str]] = field(default_factory=dict)
    active: str = ""

    def with_regions(self) -> Fields:
        """With `layer` and `material` on the cells, numbers of the texts `layer_names` and `material_names`."""
        mesh = self.mesh
        names = list(dict.fromkeys(region.material for region in mesh.regions))
        of_region = np.array([names.index(region.material) for region in mesh.regions], dtype=np.int32)
        regions = {"layer": np.asarray(mesh.region, dtype=np.int32), "material": of_region[mesh.region]}
        known = {"layer_names": [region.name for region in mesh.regions], "material_names": names}
        return replace(self, cells=regions | dict(self.cells), texts=known | dict(self.texts))

    def with_texts_as_numbers(self) -> Fields:
        """With each text as its UTF-8 codes, lines ended by 10, under a name that ends in `_utf8`."""
        coded = {f"{name}_utf8": "".join(f"{line}\n" for line in lines) for name, lines in self.texts.items()}
        numbers = {name: np.frombuffer(text.encode(), dtype=np.uint8) for name, text in coded.items() if text}
        return replace(self, numbers={**self.numbers, **numbers}, texts={})

    def near(self) -> Fields:
        """Without surroundings farther away than `SEEN` sizes of all else: nothing of the wire would be seen."""
        mesh, far = self.mesh, self._surrounding
        if not far.any():
            return self
        corner = mesh.points[mesh.cells[:, :3]]
        own = corner[~far].reshape(-1, 2)
        low, high = own.min(axis=0), own.max(axis=0)
        reach = SEEN * float((high - low).max())
        seen = ((corner >= low - reach) & (corner <= high + reach)).all(axis=(1, 2))
        return self._of_cells(np.flatnonzero(seen | ~far))

    def without_surroundings(self) -> Fields:
        """Without all that lies around the wire and its gates' insulators."""
        far = self._surrounding
        return self._of_cells(np.flatnonzero(~far)) if far.any() else self

    @property
    def _surrounding(self) -> NDArray[np.bool_]:
        regions = self.mesh.regions
        return np.array([region.name.split()[0] in SURROUNDINGS for region in regions])[self.mesh.region]

    def _of_cells(self, kept: Ints) -> Fields:
        mesh = self.mesh
        used = np.unique(mesh.cells[kept])
        number = np.full(len(mesh.points), -1)
        number[used] = np.arange(len(used))
        return replace(
            self,
            mesh=replace(
                mesh,
                points=mesh.points[used],
                cells=number[mesh.cells[kept]],
                region=mesh.region[kept],
                corners=number[mesh.corners][number[mesh.corners] >= 0],
            ),
            points={name: values[used] for name, values in self.points.items()},
            cells={name: values[kept] for name, values in self.cells.items()},
            inside={name: values[kept] for name, values in self.inside.items()},
        )

    def torn(self) -> Fields:
        """With what is given inside cells as values at points: those where it jumps are there once for each region."""
        if not self.inside:
            return self
        mesh = self.mesh
        jumps = np.zeros(len(mesh.points), dtype=bool)
        for values in self.inside.values():
            low, high = np.full(len(mesh.points), np.inf), np.full(len(mesh.points), -np.inf)
            known = np.isfinite(values)
            np.minimum.at(low, mesh.cells[known], values[known])
            np.maximum.at(high, mesh.cells[known], values[known])
            # Where only some of the cells have a value it jumps too.
            missing = np.zeros(len(mesh.points), dtype=bool)
            missing[mesh.cells[~known]] = True
            jumps |= (high > low) | (missing & np.isfinite(low))
        # A point is told by its number, and where values jump by the region of the cell too.
        key = mesh.cells + len(mesh.points) * np.where(jumps[mesh.cells], mesh.region[:, None], 0)
        found, cells = np.unique(key, return_inverse=True)
        cells, old = cells.reshape(mesh.cells.shape), found % len(mesh.points)
        points = {name: values[old] for name, values in self.points.items()}
        for name, values in self.inside.items():
            points[name] = np.empty(len(old))
            points[name][cells] = values
        corners = np.flatnonzero(np.isin(old, mesh.corners))
        return replace(
            self, mesh=replace(mesh, points=mesh.points[old], cells=cells, corners=corners), points=points, inside={}
        )


def flat_cells(degree: int) -> Ints:
    """(p^2, 3) nodes of the flat triangles into which a cell of degree p falls, in the node order of `fem.lagrange`."""
    from wiresolve.fem.lagrange import triangle

    at = np.rint(triangle(degree).nodes * degree).astype(int)
    place = {(int(i), int(j)): n for n, (i, j) in enumerate(at)}
    upright = [(place[i, j], place[i + 1, j], place[i, j + 1]) for i in range(degree) for j in range(degree - i)]
    turned = [
        (place[i + 1, j], place[i + 1, j + 1], place[i, j + 1])
        for i in range(degree - 1)
        for j in range(degree - 1 - i)
    ]
    return np.array(upright + turned, dtype=np.int64)
