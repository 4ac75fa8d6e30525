"""The subbands of a wire as the measured quantities need them: energies, masses, degeneracies, what lies above."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.nonparabolic import Relation
from wiresolve.errors import InputError
from wiresolve.physics.tabulated_band import TabulatedBand, growing_band, tabulated_band
from wiresolve.physics.tail import Tail, added
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Spectrum:
    """The subbands of a wire, lowest first.

    Parameters
    ----------
    energy_eV : (n,) ascending minima from the energy zero.
    error_eV : (n,) their bars.
    axial_mass : (n,) in m0, positive; NaN where it is not known (E(k) starts linearly; then the subband needs its row
        of `band_eV`).
    degeneracy : (n,) whole, spin times valley.
    level : (n,) whole, from 1, not falling: entries of one number are equal within their bars.
    listed : the first so many entries are the certified ones that are reported; the rest are there for thermal sums.
    k_per_nm, band_eV : (m,) or (n, m) from 0 up and (n, m): axial dispersion, even in k, from the same energy zero. A
        row of NaN stands for the closed form, and k beyond the table for the parabola with the axial mass.
    edge_eV, nonparabolicity_per_eV : (n,) or None: the closed form is e (1 + alpha e) = value + hbar^2 k^2 / 2m, with e
        counted from the band edge; alpha = 0, or None, is the parabola.
    tails : further subbands, counted, one `Tail` a channel; each starts at the last of `energy_eV` or above.
    direction_energy_eV : (n, 2) or None: kinetic plus potential energy in the two confined directions where the
        section separates (rows may be NaN where it is not known).
    direction_names : their names, e.g. ("x", "y").

    Raises
    ------
    InputError : for arrays that do not fit these rules.
    """

    energy_eV: Array
    error_eV: Array
    axial_mass: Array
    degeneracy: NDArray[np.int_]
    level: NDArray[np.int_]
    listed: int
    k_per_nm: Array | None = None
    band_eV: Array | None = None
    edge_eV: Array | None = None
    nonparabolicity_per_eV: Array | None = None
    tails: tuple[Tail, ...] = ()
    direction_energy_eV: Array | None = None
    direction_names: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        given = ("energy_eV", "error_eV", "axial_mass", "k_per_nm", "band_eV", "edge_eV", "nonparabolicity_per_eV")
        for name in given:
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, np.asarray(value, dtype=float))
        for name in ("degeneracy", "level"):
            object.__setattr__(self, name, _whole(name, getattr(self, name)))
        self._check_states()
        self._check_bands()
        for tail in self.tails:
            start = float(tail.energy_eV[0])
            rule = "must start at the last solved state or above, from the same energy zero"
            _require("tails.energy_eV", start >= self.energy_eV[-1] - 1e-9, rule, start)
        if self.direction_energy_eV is not None:
            object.__setattr__(self, "direction_energy_eV", np.asarray(self.direction_energy_eV, dtype=float))
            _require(
                "direction_energy_eV",
                self.direction_energy_eV.shape == (self.energy_eV.size, len(self.direction_names)),
                "must have a row a state and a column a direction name",
                self.direction_energy_eV.shape,
            )

    def _check_states(self) -> None:
        size = self.energy_eV.size
        _require("energy_eV", self.energy_eV.ndim == 1 and size > 0, "must be a list of energies", self.energy_eV.shape)
        _require("energy_eV", bool(np.isfinite(self.energy_eV).all()), "must be finite")
        _require("energy_eV", bool((np.diff(self.energy_eV) >= 0).all()), "must ascend")
        for name in ("error_eV", "axial_mass", "degeneracy", "level"):
            shape = getattr(self, name).shape
            _require(name, shape == (size,), f"must have one value for each of the {size} energies", shape)
        _require("error_eV", bool((self.error_eV >= 0).all()), "must not be negative")
        masses = self.axial_mass[~np.isnan(self.axial_mass)]
        _require("axial_mass", bool(((masses > 0) & np.isfinite(masses)).all()), "must be positive")
        _require("degeneracy", bool((self.degeneracy >= 1).all()), "must be 1 or more")
        steps = np.diff(self.level)
        _require("level", self.level[0] == 1 and bool((steps >= 0).all()), "must start at 1 and not fall")
        _require("listed", 1 <= self.listed <= size, f"must lie between 1 and {size}", self.listed)

    def _check_bands(self) -> None:
        tabulated: NDArray[np.bool_] = np.zeros(self.energy_eV.size, dtype=bool)
        if self.band_eV is not None:
            k = self.k_per_nm
            _require(
                "k_per_nm", k is not None and k.ndim in (1, 2) and k.shape[-1] >= 4, "must have four values or more"
            )
            assert k is not None
            _require("k_per_nm", bool((k[..., 0] == 0).all() and (np.diff(k) > 0).all()), "must ascend from 0")
            expected = (self.energy_eV.size, k.shape[-1])
            if k.ndim == 2:
                _require("k_per_nm", k.shape == expected, f"must have the shape {expected}", k.shape)
            _require("band_eV", self.band_eV.shape == expected, f"must have the shape {expected}", self.band_eV.shape)
            tabulated = np.asarray(np.isfinite(self.band_eV).all(axis=1))
        unknown = np.isnan(self.axial_mass) & ~tabulated
        _require("axial_mass", not unknown.any(), "must be known where there is no table of the band")
        for name in ("edge_eV", "nonparabolicity_per_eV"):
            given = getattr(self, name)
            shape = self.energy_eV.shape
            _require(name, given is None or given.shape == shape, f"must have the shape {shape}")

    @cached_property
    def bands(self) -> tuple[TabulatedBand | None, ...]:
        """For each subband its E(k), or None where it is the parabola with the axial mass."""
        found: list[TabulatedBand | None] = []
        for i, (energy, mass) in enumerate(zip(self.energy_eV, self.axial_mass, strict=True)):
            row = None if self.band_eV is None else self.band_eV[i]
            alpha = 0.0 if self.nonparabolicity_per_eV is None else float(self.nonparabolicity_per_eV[i])
            if row is not None and self.k_per_nm is not None and np.isfinite(row).all():
                k = self.k_per_nm if self.k_per_nm.ndim == 1 else self.k_per_nm[i]
                found.append(tabulated_band(k, row, float(energy), float(mass)))
            elif alpha:
                edge = 0.0 if self.edge_eV is None else float(self.edge_eV[i])
                found.append(growing_band(float(energy), float(mass), Relation(edge, alpha)))
            else:
                found.append(None)
        return tuple(found)

    def band_energies(self, k_per_nm: Array) -> Array:
        """E(k) of the listed subbands, (listed, m), at wave numbers (m,) from 0 up."""
        k = np.asarray(k_per_nm, dtype=float)
        rows = []
        for energy, mass, band in zip(self.energy_eV[: self.listed], self.axial_mass, self.bands, strict=False):
            rows.append(energy + HBAR2_OVER_2M0 / mass * k**2 if band is None else band.energy(k))
        return np.array(rows)

    @cached_property
    def parabolic(self) -> NDArray[np.bool_]:
        """(n,) where the subband is a parabola."""
        return np.array([band is None for band in self.bands])

    @cached_property
    def tail(self) -> Tail | None:
        """All further subbands together."""
        return added(self.tails)

    @property
    def top_eV(self) -> float:
        """Up to which energy the states are known: where the first tail ends, or the last state."""
        return float(min((t.energy_eV[-1] for t in self.tails), default=self.energy_eV[-1]))

    @cached_property
    def thresholds(self) -> tuple[Array, Array]:
        """Energies at which modes open or close, ascending, and by how many each time, spin and valleys counted.

        A parabola opens `degeneracy` modes at its minimum; a band with extrema opens or closes them in pairs. The
        running sum is the number of modes M(E) that run in one direction, spin-resolved.
        """
        energies, modes = [self.energy_eV[self.parabolic]], [self.degeneracy[self.parabolic].astype(float)]
        for band, degeneracy in zip(self.bands, self.degeneracy, strict=True):
            if band is not None:
                energies.append(band.turning_eV)
                modes.append(band.turning_modes * degeneracy)
        energy, change = np.concatenate(energies), np.concatenate(modes)
        order = np.argsort(energy, kind="stable")
        return energy[order], change[order]


def _require(field: str, holds: bool, rule: str, given: object = None) -> None:
    if not holds:
        raise InputError(field, rule, given)


def _whole(field: str, values: Sequence[int] | NDArray[np.int_]) -> NDArray[np.int_]:
    array = np.asarray(values)
    rounded = np.asarray(np.rint(array), dtype=int)
    _require(field, bool((rounded == array).all()), "must be whole numbers", values)
    return rounded
