"""Exchange and correlation of electrons in the local density approximation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.units import E2_OVER_4PI_EPS0, HBAR2_OVER_2M0

Array = NDArray[np.float64]

_CORRELATION, _LENGTH = 0.7734, 21.0
_ALPHA = (4 / (9 * np.pi)) ** (1 / 3)


def exchange_correlation_eV(density_per_nm3: Array, mass: Array, permittivity: Array) -> Array:
    """The potential energy in eV that exchange and correlation add for an electron in a gas of a given density.

    ``-(1 + 0.7734 x ln(1 + 1/x)) 2 Ry / (pi alpha r_s)`` with x = r_s/21, alpha = (4/9 pi)^(1/3), r_s the radius of the
    sphere that holds one electron in effective Bohr radii, and Ry the effective rydberg (L. Hedin and B. I. Lundqvist,
    J. Phys. C 4, 2064 (1971), in the form of F. Stern and S. Das Sarma, Phys. Rev. B 30, 840 (1984); both from memory).
    For a gas without spin polarisation in one valley with an isotropic mass.

    Parameters
    ----------
    density_per_nm3, mass, permittivity : broadcast; mass in m0.
    """
    bohr = 2 * HBAR2_OVER_2M0 / E2_OVER_4PI_EPS0 * permittivity / mass
    rydberg = E2_OVER_4PI_EPS0 / permittivity / (2 * bohr)
    density = np.maximum(np.asarray(density_per_nm3, dtype=float), 1e-30)
    radius = (3 / (4 * np.pi * density)) ** (1 / 3) / bohr
    x = radius / _LENGTH
    return np.asarray(-(1 + _CORRELATION * x * np.log1p(1 / x)) * 2 * rydberg / (np.pi * _ALPHA * radius))


@dataclass(frozen=True, eq=False)
class LocalDensity:
    """Exchange and correlation on one mesh.

    Attributes
    ----------
    nodes : (n,) mesh points that carriers can reach.
    mass, permittivity : (n,) the density-of-states mass in m0 and the relative permittivity there, means of the
        materials that meet at a point.
    """

    nodes: NDArray[np.int64]
    mass: Array
    permittivity: Array

    def potential_V(self, density_per_nm3: Array) -> Array:
        """(mesh points,) what counts like an electrostatic potential, from the density at the mesh's points."""
        found = np.zeros(len(density_per_nm3))
        found[self.nodes] = -exchange_correlation_eV(density_per_nm3[self.nodes], self.mass, self.permittivity)
        return found
