"""Which part of the carriers gets through: open, given, from the mean free path, or a saddle-shaped constriction."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.physics.fermi import occupation
from wiresolve.units import KB

Array = NDArray[np.float64]


class Transmission(Protocol):
    """T_n(E) = part of subband n x 1 / (1 + exp(-(E - opening)/width)); a width of 0 is the step."""

    @property
    def width_eV(self) -> float:
        """Over which energy the opening is smeared by tunnelling."""

    def part(self, index: ArrayLike) -> Array:
        """What is transmitted far above the opening, for subbands numbered from 0."""

    def at(self, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
        """Transmission at an energy of a mode of subband `index` (from 0) that opens at `opening_eV`; broadcast."""


class TransportTable(Protocol):
    """What the input file says of the way along the wire."""

    @property
    def length_nm(self) -> float | None: ...
    @property
    def mean_free_path_nm(self) -> float | None: ...
    @property
    def transmission(self) -> tuple[float, ...] | None: ...
    @property
    def saddle_curvature_eV(self) -> float | None: ...


@dataclass(frozen=True)
class Open:
    """Every mode is transmitted."""

    @property
    def width_eV(self) -> float:
        """No tunnelling."""
        return 0.0

    def part(self, index: ArrayLike) -> Array:
        """1."""
        return np.ones(np.shape(index))

    def at(self, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
        """1 above the opening, 0 below, 1/2 on it; broadcast."""
        return _smeared(self, energy_eV, opening_eV, index)


@dataclass(frozen=True)
class Given:
    """Given transmissions: one for all subbands, or one a subband, of which the last one holds for all further ones.

    Raises
    ------
    InputError : for none, or one outside 0 to 1.
    """

    values: tuple[float, ...]

    def __post_init__(self) -> None:
        values = np.asarray(self.values, dtype=float)
        if values.ndim != 1 or not values.size or not ((values >= 0) & (values <= 1)).all():
            rule = "must be numbers from 0 to 1, one for all subbands or one a subband"
            raise InputError("transmission", rule, self.values, "give e.g. [0.8]")

    @property
    def width_eV(self) -> float:
        """No tunnelling."""
        return 0.0

    def part(self, index: ArrayLike) -> Array:
        """The value given for each subband."""
        return np.take(np.asarray(self.values, dtype=float), np.minimum(index, len(self.values) - 1))

    def at(self, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
        """The value given above the opening, 0 below, half of it there; broadcast."""
        return _smeared(self, energy_eV, opening_eV, index)


@dataclass(frozen=True)
class MeanFreePath:
    """T = l / (l + L) with the mean free path l for scattering backwards and the length L.

    S. Datta, Electronic Transport in Mesoscopic Systems (Cambridge, 1995), section 2.2 (from memory).

    Raises
    ------
    InputError : for a length that is negative or not finite, or a mean free path that is not positive.
    """

    length_nm: float
    mean_free_path_nm: float

    def __post_init__(self) -> None:
        if not (np.isfinite(self.length_nm) and self.length_nm >= 0):
            raise InputError("length", "must be zero or positive", self.length_nm, "give nm")
        if not self.mean_free_path_nm > 0:
            raise InputError("mean_free_path", "must be positive", self.mean_free_path_nm, "give nm")

    @property
    def width_eV(self) -> float:
        """No tunnelling."""
        return 0.0

    def part(self, index: ArrayLike) -> Array:
        """l / (l + L), the same for all subbands; an infinite mean free path is ballistic."""
        return np.full(np.shape(index), 1 / (1 + self.length_nm / self.mean_free_path_nm))

    def at(self, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
        """l / (l + L) above the opening, 0 below, half of it there; broadcast."""
        return _smeared(self, energy_eV, opening_eV, index)


@dataclass(frozen=True)
class Saddle:
    """A saddle-shaped constriction of curvature hbar omega_x along the wire.

    T = 1 / (1 + exp(-2 pi (E - E_n) / hbar omega_x)); M. Buettiker, Phys. Rev. B 41, 7906 (1990), Eqs. (3) to (5).

    Raises
    ------
    InputError : for a curvature that is not positive.
    """

    curvature_eV: float

    def __post_init__(self) -> None:
        if not (np.isfinite(self.curvature_eV) and self.curvature_eV > 0):
            raise InputError("saddle", "must be positive", self.curvature_eV, "give e.g. 1 meV")

    @property
    def width_eV(self) -> float:
        """hbar omega_x / 2 pi: it smears a step just as a thermal energy kT of this size."""
        return self.curvature_eV / (2 * pi)

    def part(self, index: ArrayLike) -> Array:
        """1."""
        return np.ones(np.shape(index))

    def at(self, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
        """Buettiker's closed form; broadcast."""
        return _smeared(self, energy_eV, opening_eV, index)


def transmission_of(transport: TransportTable | None) -> Transmission:
    """The one transmission that a transport table describes; `Open` for none.

    Raises
    ------
    InputError : for a length without a mean free path or the reverse, or two descriptions at once.
    """
    if transport is None:
        return Open()
    length, path = transport.length_nm, transport.mean_free_path_nm
    scattering = length is not None or path is not None
    given, curvature = transport.transmission, transport.saddle_curvature_eV
    if sum((scattering, given is not None, curvature is not None)) > 1:
        rule = "must have only one of mean_free_path with length, transmission, saddle"
        raise InputError("transport", rule, None, "keep the one that describes the wire")
    if given is not None:
        return Given(tuple(given))
    if curvature is not None:
        return Saddle(curvature)
    if not scattering:
        return Open()
    if path is None:
        raise InputError("transport.length", "needs a mean_free_path with it", length, "give mean_free_path too")
    if length is None:
        raise InputError("transport.mean_free_path", "needs a length with it", path, "give length too")
    return MeanFreePath(length, path)


def _smeared(kind: Transmission, energy_eV: ArrayLike, opening_eV: ArrayLike, index: ArrayLike) -> Array:
    distance = np.asarray(energy_eV, dtype=float) - np.asarray(opening_eV, dtype=float)
    # A step rounded by tunnelling is the Fermi function of a temperature width / k_B.
    return np.asarray(kind.part(index) * occupation(-distance, 0.0, kind.width_eV / KB))
