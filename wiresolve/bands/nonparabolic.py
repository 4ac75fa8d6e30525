"""A mass that grows with energy: e (1 + alpha e) = parabolic energy, with e from the band edge.

E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957). In a section, m(E) = m (1 + alpha (E - Ec(x, y))), potential included.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Relation:
    """How real energies follow from those of the constant mass, where one edge and one alpha hold everywhere.

    The operator is then K / (1 + alpha (E - edge)) + edge, so every eigenvalue of the constant-mass one, K + edge,
    gives an exact energy; alpha = 0 is the constant mass.
    """

    edge_eV: float
    alpha_per_eV: float

    def energy(self, value_eV: Array) -> Array:
        """Energies of constant-mass eigenvalues."""
        above = np.asarray(value_eV, dtype=float) - self.edge_eV
        # Written so that a small alpha loses no digits.
        root = np.sqrt(np.maximum(1 + 4 * self.alpha_per_eV * above, 0.0))
        return np.asarray(self.edge_eV + 2 * above / (1 + root))

    def value(self, energy_eV: Array) -> Array:
        """The constant-mass eigenvalue of each energy."""
        above = np.asarray(energy_eV, dtype=float) - self.edge_eV
        return np.asarray(self.edge_eV + above * (1 + self.alpha_per_eV * above))

    def slope(self, energy_eV: Array) -> Array:
        """d energy / d value."""
        above = np.asarray(energy_eV, dtype=float) - self.edge_eV
        return np.asarray(1 / (1 + 2 * self.alpha_per_eV * above))
