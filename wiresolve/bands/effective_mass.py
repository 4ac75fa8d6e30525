"""One parabolic valley: a constant inverse-mass tensor and a band edge."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.coefficients import Coefficients
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]


def coefficients(inverse_mass: Array, edge_eV: float) -> Coefficients:
    """Coefficients of a material's valley.

    Parameters
    ----------
    inverse_mass : (3, 3) in 1/m0 in the wire's frame, axis-plane terms included.
    edge_eV : the band edge from the energy zero, offset included.
    """
    return Coefficients(
        quadratic=HBAR2_OVER_2M0 * np.asarray(inverse_mass, dtype=float)[:, :, None, None],
        linear=np.zeros((3, 1, 1)),
        constant=np.array([[edge_eV]]),
    )


def without_common_shear(inverse_masses: Sequence[Array]) -> list[Array]:
    """The same tensors without their axis-plane terms, where a phase factor removes these exactly.

    With W the in-plane block and w the axis-plane column, the factor exp(-i k s.r), s = W^-1 w, turns a tensor into one
    with w = 0 and the axial entry W_zz - w.W^-1.w, provided that s is the same everywhere; at k = 0 nothing changes
    (F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967), section II, for a layer). Where s jumps the tensors are
    returned as they are.

    Parameters
    ----------
    inverse_masses : (3, 3) tensors in 1/m0 of all regions that carriers may enter.
    """
    shears = [np.linalg.solve(w[:2, :2], w[:2, 2]) for w in inverse_masses]
    if not shears or any(not np.allclose(s, shears[0], rtol=1e-12, atol=1e-14) for s in shears):
        return list(inverse_masses)
    found = []
    for tensor, shear in zip(inverse_masses, shears, strict=True):
        plain = np.array(tensor)
        plain[2, 2] = tensor[2, 2] - tensor[2, :2] @ shear
        plain[:2, 2] = plain[2, :2] = 0
        found.append(plain)
    return found
