"""A spectrum as plain data, as `result.json` keeps it, and back: another program can go on from there."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.tail import Tail

Array = NDArray[np.float64]


def plain(spectrum: Spectrum) -> dict[str, Any]:
    """Lists, strings, numbers and None under the names of `Spectrum`; a row of a band without a table is None.

    The further subbands that are counted only are one channel, `tail`.
    """
    tabulated = spectrum.band_eV is not None and spectrum.k_per_nm is not None
    rows = range(len(spectrum.energy_eV)) if tabulated else ()
    known = [bool(np.isfinite(_row(spectrum.band_eV, n)).all()) for n in rows]
    tail = spectrum.tail
    return {
        "energy_eV": spectrum.energy_eV.tolist(),
        "error_eV": spectrum.error_eV.tolist(),
        "axial_mass": [m if np.isfinite(m) else None for m in spectrum.axial_mass.tolist()],
        "degeneracy": spectrum.degeneracy.tolist(),
        "level": spectrum.level.tolist(),
        "listed": int(spectrum.listed),
        "edge_eV": None if spectrum.edge_eV is None else spectrum.edge_eV.tolist(),
        "nonparabolicity_per_eV": None
        if spectrum.nonparabolicity_per_eV is None
        else spectrum.nonparabolicity_per_eV.tolist(),
        "k_per_nm": [_row(spectrum.k_per_nm, n).tolist() if k else None for n, k in enumerate(known)],
        "band_eV": [_row(spectrum.band_eV, n).tolist() if k else None for n, k in enumerate(known)],
        "tail": None
        if tail is None
        else {
            "energy_eV": tail.energy_eV.tolist(),
            "modes": tail.modes.tolist(),
            "states_per_nm": tail.states_per_nm.tolist(),
        },
    }


def spectrum_of_plain(data: Mapping[str, Any]) -> Spectrum:
    """The spectrum that `plain` was made from, but for its directions.

    Raises
    ------
    InputError
        The data are none of a spectrum.
    """
    size = len(data["energy_eV"])
    bands, numbers = list(data["band_eV"]), list(data["k_per_nm"])
    points = max((len(row) for row in bands if row is not None), default=0)
    band = k = None
    if points:
        blank = [float("nan")] * points
        # The wave numbers of a row without a table are not used, but must ascend.
        band = np.array([blank if row is None else row for row in bands])
        k = np.array([list(range(points)) if row is None else row for row in numbers], dtype=float)
    tail, mass = data["tail"], data["axial_mass"]
    return Spectrum(
        energy_eV=np.array(data["energy_eV"], dtype=float),
        error_eV=np.array(data["error_eV"], dtype=float),
        axial_mass=np.array([np.nan if m is None else m for m in mass], dtype=float).reshape(size),
        degeneracy=np.array(data["degeneracy"]),
        level=np.array(data["level"]),
        listed=int(data["listed"]),
        k_per_nm=k,
        band_eV=band,
        edge_eV=None if data["edge_eV"] is None else np.array(data["edge_eV"], dtype=float),
        nonparabolicity_per_eV=None
        if data["nonparabolicity_per_eV"] is None
        else np.array(data["nonparabolicity_per_eV"], dtype=float),
        tails=() if tail is None else (Tail(tail["energy_eV"], tail["modes"], tail["states_per_nm"]),),
    )


def _row(table: Array | None, number: int) -> Array:
    """The row of a table that may be one for all."""
    assert table is not None
    return table if table.ndim == 1 else np.asarray(table[number])
