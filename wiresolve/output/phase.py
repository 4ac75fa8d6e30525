"""The phase of complex modes, without jumps by a whole turn where a mode is not zero."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse import csgraph

from wiresolve.fem.mesh import Mesh
from wiresolve.output.fields import flat_cells

Array = NDArray[np.float64]

_FAINT = 1e-9
"""Below this share of its largest value a mode has no phase of its own: it takes that of a neighbour."""


@dataclass(frozen=True, eq=False)
class Phase:
    """Phases on a mesh.

    Interpolated inside cells, a phase that jumps from pi to -pi runs through all that lies between. So it goes on from
    node to node, from where the mode is largest, along the neighbours that are largest: beyond pi where it turns on.
    """

    mesh: Mesh

    @cached_property
    def _edges(self) -> tuple[NDArray[np.int32], NDArray[np.int32]]:
        corners = self.mesh.cells[:, flat_cells(self.mesh.degree)].reshape(-1, 3)
        ends = np.sort(corners[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1)
        # Graphs of older SciPy take no longer numbers.
        found = np.unique(ends, axis=0).astype(np.int32)
        return found[:, 0], found[:, 1]

    def of(self, psi: NDArray[Any]) -> Array:
        """(points,) the phase of a mode in rad, between -pi and pi where the mode is largest."""
        first, second = self._edges
        size = np.abs(psi) / max(float(np.abs(psi).max(initial=0.0)), 1e-300)
        # A tree of least sums that prefers edges between large values; no weight is zero, which would be no edge.
        weight = 2.0 - np.minimum(size[first], size[second])
        count = len(psi)
        tree = csgraph.minimum_spanning_tree(sparse.csr_array((weight, (first, second)), shape=(count, count)))
        start = int(size.argmax())
        order, before = csgraph.breadth_first_order(tree, start, directed=False)
        own = np.where(size > _FAINT, np.angle(psi), np.nan)
        found = own.tolist()
        turn = 2 * np.pi
        for node, parent in zip(order[1:].tolist(), before[order[1:]].tolist(), strict=True):
            here, there = found[node], found[parent]
            found[node] = there if here != here else here + turn * round((there - here) / turn)
        return np.asarray(np.nan_to_num(np.array(found)), dtype=float)
