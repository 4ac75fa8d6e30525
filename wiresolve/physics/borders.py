"""Which regions of a mesh touch each other, and where they end."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from wiresolve.fem.mesh import Mesh


@dataclass(frozen=True)
class Borders:
    """Lengths in nm: `between` two regions, by their names in alphabetical order, and `free` borders of each region.

    A free border faces a hole or lies on the rim; regions of the same name are one. `areas_nm2` are the regions' own.
    """

    between: Mapping[tuple[str, str], float]
    free: Mapping[str, float]
    areas_nm2: Mapping[str, float]

    def around(self, name: str) -> dict[str, float]:
        """The regions that one touches, with the lengths."""
        pairs = ((a if b == name else b, length) for (a, b), length in self.between.items() if name in (a, b))
        return dict(pairs)


def borders_of(mesh: Mesh) -> Borders:
    """The borders of all regions of a mesh, straight between the nodes of its curved edges."""
    inner = mesh.degree - 1
    ends, lengths, rings = [], [], []
    for edge in range(3):
        start, end = mesh.cells[:, edge], mesh.cells[:, (edge + 1) % 3]
        along = mesh.cells[:, 3 + edge * inner + np.arange(inner)]
        nodes = mesh.points[np.column_stack([start, along, end])]
        rings.append(nodes[:, :-1])
        ends.append(np.sort(np.column_stack([start, end]), axis=1))
        lengths.append(np.hypot(*np.moveaxis(np.diff(nodes, axis=1), 2, 0)).sum(axis=1))
    region, length = np.tile(mesh.region, 3), np.concatenate(lengths)
    _, number, count = np.unique(np.vstack(ends), axis=0, return_inverse=True, return_counts=True)
    number = number.ravel()
    names = [r.name for r in mesh.regions]
    x, y = np.moveaxis(np.concatenate(rings, axis=1), 2, 0)
    twice = (x * np.roll(y, -1, axis=1) - y * np.roll(x, -1, axis=1)).sum(axis=1)
    areas = dict.fromkeys(names, 0.0)
    for name, area in zip(names, np.bincount(mesh.region, twice / 2, len(names)), strict=True):
        areas[name] += float(area)
    free: dict[str, float] = {}
    for row in np.flatnonzero(count[number] == 1):
        name = names[region[row]]
        free[name] = free.get(name, 0.0) + float(length[row])
    order = np.argsort(number, kind="stable")
    paired = order[count[number[order]] == 2].reshape(-1, 2)
    between: dict[tuple[str, str], float] = {}
    for first, second in paired[region[paired[:, 0]] != region[paired[:, 1]]]:
        one, two = sorted((names[region[first]], names[region[second]]))
        if one != two:
            between[one, two] = between.get((one, two), 0.0) + float(length[first])
    return Borders(between, free, areas)
