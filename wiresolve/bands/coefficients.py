"""The one operator that every band model fills: H = sum_ij k_i A_ij k_j + sum_i {B_i, k_i}/2 + C.

The axes are x, y (in the section) and z (along the wire); k_x and k_y act as -i d/dx and -i d/dy in that order, which
keeps H Hermitian across a jump of the material (for one band: D. J. BenDaniel and C. B. Duke, Phys. Rev. 152, 683
(1966)); k_z is a number.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class Coefficients:
    """A material's coefficients in the wire's frame, for N bands.

    Attributes
    ----------
    quadratic : (3, 3, N, N) A_ij in eV nm^2, with A_ij^H = A_ji.
    linear : (3, N, N) Hermitian B_i in eV nm.
    constant : (N, N) Hermitian C in eV.

    Raises
    ------
    ValueError
        Shapes do not fit, or the operator would not be Hermitian.
    """

    quadratic: NDArray[Any]
    linear: NDArray[Any]
    constant: NDArray[Any]

    def __post_init__(self) -> None:
        n = self.bands
        if self.quadratic.shape != (3, 3, n, n) or self.linear.shape != (3, n, n) or self.constant.shape != (n, n):
            raise ValueError("coefficients must have the shapes (3, 3, N, N), (3, N, N) and (N, N)")
        if not np.allclose(self.quadratic, np.conj(np.transpose(self.quadratic, (1, 0, 3, 2))), rtol=1e-12):
            raise ValueError("quadratic coefficients must obey A_ij^H = A_ji")
        if not np.allclose(self.linear, np.conj(np.swapaxes(self.linear, 1, 2)), rtol=1e-12):
            raise ValueError("linear coefficients must be Hermitian")
        if not np.allclose(self.constant, self.constant.conj().T, rtol=1e-12):
            raise ValueError("the constant coefficient must be Hermitian")

    @property
    def bands(self) -> int:
        """N."""
        return int(self.constant.shape[0])
