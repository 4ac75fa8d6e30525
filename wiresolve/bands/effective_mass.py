"""One parabolic valley: a constant inverse-mass tensor and a band edge."""

from __future__ import annotations

import numpy as np

from wiresolve.bands.coefficients import Coefficients
from wiresolve.describe.materials import Material
from wiresolve.units import HBAR2_OVER_2M0


def coefficients(material: Material, edge_eV: float) -> Coefficients:
    """Coefficients of a material's valley.

    Parameters
    ----------
    material : its `inverse_mass` is the 3 x 3 tensor in 1/m0 in the wire's frame, axis-plane terms included.
    edge_eV : the band edge from the energy zero, offset included.
    """
    inverse_mass = np.asarray(material.inverse_mass, dtype=float)
    return Coefficients(
        quadratic=HBAR2_OVER_2M0 * inverse_mass[:, :, None, None],
        linear=np.zeros((3, 1, 1)),
        constant=np.array([[edge_eV]]),
    )
