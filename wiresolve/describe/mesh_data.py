"""A mesh as it was read from a file: nodes, cells of a few kinds, and the names of their groups."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

CELLS = {"triangle": (3, 1), "triangle6": (3, 2), "quad": (4, 1), "quad8": (4, 2), "quad9": (4, 2)}
"""Kinds of plane cells that can be used, with their number of corners and their order."""
LINES = {"line": 1, "line3": 2}
"""Kinds of lines with their order."""
MOST_CELLS = 2_000_000
BYTES_A_CELL = 700
"""What one cell takes in memory while a mesh is read and looked through."""


@dataclass(frozen=True, eq=False)
class Block:
    """Cells of one kind (a key of `CELLS` or `LINES`).

    Attributes
    ----------
    nodes : (c, nodes per cell) from 0; corners first, then the middles of the edges in their order.
    group : (c,) index into the mesh's names, or -1 for none.
    """

    kind: str
    nodes: Ints
    group: Ints


@dataclass(frozen=True, eq=False)
class MeshData:
    """A mesh as a file gives it, unchecked: `points`, shape (n, 3), in the file's unit, and blocks of cells.

    `numbers`, shape (n,), are the nodes' numbers in the file, for messages; `array` is the cell data that tells the
    groups, where there is such a thing.
    """

    points: Array
    blocks: tuple[Block, ...]
    names: tuple[str, ...]
    numbers: Ints
    array: str | None = None


def too_many(cells: int) -> tuple[str, str, str]:
    """Rule, what was given and remedy for a mesh of too many cells."""
    need = cells * BYTES_A_CELL / 1e9
    rule = f"has more than the {MOST_CELLS:,} cells that can be read: it would need some {need:.2g} GB of memory"
    remedy = "export a coarser one of second order; the section is meshed anew anyway, as finely as the accuracy asks"
    return rule, f"{cells:,} cells", remedy
