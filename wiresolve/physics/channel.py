"""A channel: the valleys that one operator describes."""

from __future__ import annotations

from dataclasses import dataclass

from wiresolve.physics.outer_wall import Barrier
from wiresolve.physics.solved import OperatorOf


@dataclass(frozen=True, eq=False)
class Channel:
    """A group of valleys that one operator describes.

    Attributes
    ----------
    valley, label : their kind ("Delta"), and the group's name ("Delta [001]").
    degeneracy : how many valleys it stands for.
    operator_of : the operator over a mesh's regions.
    barrier : the outermost layer where it is a barrier for them.
    """

    valley: str
    label: str
    degeneracy: int
    operator_of: OperatorOf
    barrier: Barrier | None = None
