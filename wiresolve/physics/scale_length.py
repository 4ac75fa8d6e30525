"""How far the drain's field reaches along a gated wire, and which part of its voltage moves the barrier.

Where gates surround the section, a potential without charge falls off along the wire as u(x, y) exp(-z/length) with
``-div(kappa grad u) = kappa u / length^2`` on the whole section, insulators included, u = 0 on the gates and no field
through the rest of the boundary: the slowest mode is the scale length (D. J. Frank, Y. Taur and H.-S. P. Wong, IEEE
Electron Device Lett. 19, 385 (1998), from memory, for a plane channel; here for any section).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.fem.eigen import lowest

Array = NDArray[np.float64]


def scale_length_nm(stiffness: Any, mass: Any, free: NDArray[np.int_]) -> float:
    """The scale length of a section whose gates hold some of its nodes.

    Parameters
    ----------
    stiffness, mass : (n, n) sparse, of kappa grad u . grad v and kappa u v with the same kappa, on all nodes.
    free : numbers (or flags) of the nodes that no gate holds.

    Raises
    ------
    InputError : where no node is held, so that nothing screens the drain.
    """
    number = np.arange(stiffness.shape[0])[free]
    if number.size == stiffness.shape[0]:
        raise InputError(
            "gates", "must hold a part of the boundary: else nothing screens the drain", None, "add a gate"
        )
    rows, weights = (matrix.tocsr()[number][:, number] for matrix in (stiffness, mass))
    values, _ = lowest(rows, weights, 1, 0.0)
    return float(1 / np.sqrt(values[0]))


def drain_coupling(scale_length_nm: ArrayLike, length_nm: ArrayLike, where: float) -> Array:
    """Which part of the drain's voltage reaches a place along the channel in its slowest mode; broadcast.

    sinh(w L/l)/sinh(L/l), written so that nothing overflows: 1/(2 cosh(L/2l)) in the middle.

    Parameters
    ----------
    where : distance from the source over the channel's length, 0 to 1; 0.5 is the middle, where the barrier of a
        symmetric channel is highest at a small drain voltage.

    Raises
    ------
    InputError : for lengths that are not positive, or a place outside the channel.
    """
    scale, length = np.asarray(scale_length_nm, dtype=float), np.asarray(length_nm, dtype=float)
    if not ((scale > 0).all() and (length > 0).all()):
        raise InputError("length", "must be positive, and the scale length too", length_nm, "give nm")
    if not 0 <= where <= 1:
        raise InputError("where", "must lie between 0 (source) and 1 (drain)", where)
    reduced = length / scale
    return np.asarray(np.exp(-(1 - where) * reduced) * np.expm1(-2 * where * reduced) / np.expm1(-2 * reduced))
