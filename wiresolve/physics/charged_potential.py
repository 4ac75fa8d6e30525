"""The potential energy of an electron: what was given, and minus the electrostatic potential."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Raised:
    """A given potential energy with the charge's on top of it."""

    given: Any
    potential_V: NodalFunction

    def on(self, space: Space) -> Array:
        """(c, q) eV at the quadrature points of a space over the same triangles."""
        at = space.quadrature_points
        return np.asarray(np.asarray(self.given(at[..., 0], at[..., 1]), dtype=float) - self.potential_V.on(space))

    def __call__(self, x: Array, y: Array) -> Array:
        """In eV at any points."""
        return np.asarray(np.asarray(self.given(x, y), dtype=float) - self.potential_V(x, y))


def charged_potential(given: Any, potential_V: NodalFunction) -> Any:
    """The electron's potential energy: what was given, and minus the electrostatic potential."""
    if given is None:
        return NodalFunction(potential_V.mesh, -potential_V.values)
    return Raised(given, potential_V)
