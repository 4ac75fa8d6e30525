"""Damped iteration between the density and Poisson's equation: the baseline for the program's own steps."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

MIXINGS = (0.5, 0.3, 0.2, 0.1, 0.05)
"""Shares of the new potential that are tried; the best of them is the baseline."""


def damped_passes(
    density: Callable[[Array], Array],
    potential: Callable[[Array], Array],
    start: Array,
    mixing: float,
    tolerance_V: float = 1e-6,
    most: int = 1000,
) -> int | None:
    """Solves of the states that phi <- phi + mixing (potential(density(phi)) - phi) needs from `start`.

    Counted up to the one whose step, potential(density(phi)) - phi, is at most `tolerance_V` everywhere: the full step
    and not the damped one, as a small share of a step says nothing of the distance to the solution. None if the
    iteration diverges (a step above 1000 V, or not finite) or needs more than `most`.
    """
    phi = np.array(start, dtype=float)
    for number in range(1, most + 1):
        step = potential(density(phi)) - phi
        size = float(np.abs(step).max())
        if not size <= 1e3:
            return None
        if size <= tolerance_V:
            return number
        phi = phi + mixing * step
    return None


def best_damped_passes(
    density: Callable[[Array], Array],
    potential: Callable[[Array], Array],
    start: Array,
    tolerance_V: float = 1e-6,
    most: int = 1000,
) -> tuple[int, float] | None:
    """Fewest passes over `MIXINGS` and the mixing that needs them; None if none of them gets there within `most`.

    A mixing is given up as soon as it needs more passes than the best one so far.
    """
    best: tuple[int, float] | None = None
    for mixing in MIXINGS:
        found = damped_passes(density, potential, start, mixing, tolerance_V, best[0] - 1 if best else most)
        if found is not None:
            best = found, mixing
    return best
