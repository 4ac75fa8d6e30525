"""Modes at wave numbers along the wire, solved again on the mesh of a result and followed from its modes at k = 0."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.effective_mass import without_common_shear
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.space import Space
from wiresolve.physics.channel import Channel
from wiresolve.physics.moving_states import Followed, Moving, followed, moving, started
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class AxialModes:
    """Modes at one wave number.

    Attributes
    ----------
    k_per_nm : the wave number.
    energy_eV : (n,) their energies there, in the order of the modes at k = 0.
    states : (mesh points, n) in 1/nm, each normalised to 1 over the section; of complex type where one may be complex.
    complex_ : (n,) which of them are complex away from k = 0.
    """

    k_per_nm: float
    energy_eV: Array
    states: NDArray[Any]
    complex_: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class _Rows:
    """The modes of one channel: which they are, where they are followed, and the slant of their phase."""

    rows: Ints
    channel: Moving
    start: Followed
    tolerance_eV: float
    slant: Array | None


def axial_modes(
    wire: Wire,
    channels: Sequence[Channel],
    mesh: Mesh,
    modes: Array,
    valleys: Sequence[str],
    spectrum: Spectrum,
    k_per_nm: Sequence[float] | Array,
) -> Iterator[AxialModes]:
    """The modes at wave numbers that ascend from 0, one after the other.

    Where one mass tensor holds all over the section a mode is the same at every k, but for the phase exp(-i k s.r) of
    a slanted valley (`bands.effective_mass.without_common_shear`); elsewhere the states are solved for at each k.

    Parameters
    ----------
    channels : of the wire, in the potential that its charge made.
    mesh, modes : the mesh of a result, and its modes (mesh points, n) at k = 0.
    valleys : (n,) label of each mode's group of valleys.
    spectrum : the subbands, the modes' ones listed: E(k) tells which state is which mode's, and energies that are
        closer than two bars are one level.

    Raises
    ------
    InputError
        The wave numbers do not ascend from 0.
    """
    k = np.asarray(k_per_nm, dtype=float)
    if not len(k) or k[0] != 0 or not (np.diff(k) > 0).all() or not np.isfinite(k).all():
        raise InputError("k_per_nm", "must ascend from 0", k.tolist(), "give wave numbers like 0, 0.1, 0.2")
    return _along(wire, channels, mesh, modes, tuple(valleys), spectrum, k)


def _along(
    wire: Wire,
    channels: Sequence[Channel],
    mesh: Mesh,
    modes: Array,
    valleys: tuple[str, ...],
    spectrum: Spectrum,
    k_per_nm: Array,
) -> Iterator[AxialModes]:
    space, by_label = Space(mesh), {channel.label: channel for channel in channels}
    each = []
    for label in dict.fromkeys(valleys):
        rows = np.flatnonzero([own == label for own in valleys])
        channel = moving(space, by_label[label].operator_of(mesh), len(rows))
        start = started(channel, modes[space.nodes][channel.kept][:, rows])
        each.append(_Rows(rows, channel, start, 2 * float(spectrum.error_eV[rows].max()), slant(wire, mesh, label)))
    complex_ = np.zeros(len(valleys), dtype=bool)
    for own in each:
        complex_[own.rows] = own.channel.sheared or own.slant is not None
    now, points = [own.start for own in each], mesh.points[space.nodes]
    for k, band in zip(k_per_nm, spectrum.band_energies(k_per_nm).T, strict=True):
        energy = np.empty(len(valleys))
        states = np.zeros(modes.shape, dtype=complex if complex_.any() else float)
        for number, own in enumerate(each):
            if k > 0:
                now[number] = followed(own.channel, now[number], float(k), band[own.rows], own.tolerance_eV)
            energy[own.rows], found = now[number].energy_eV, now[number].states
            if own.slant is not None:
                found = found * np.exp(-1j * k * (points[own.channel.kept] @ own.slant))[:, None]
            states[np.ix_(space.nodes[own.channel.kept], own.rows)] = found
        yield AxialModes(float(k), energy, states, complex_)


def slant(wire: Wire, mesh: Mesh, label: str) -> Array | None:
    """s of the phase exp(-i k s.r) that the states of a group of valleys were solved without, (2,); None for none.

    See `bands.effective_mass.without_common_shear`.
    """
    group = next(group for group in wire.groups if group.label == label)
    tensors = [group.inverse_mass[region.material] for region in mesh.regions if region.carriers]
    first, plain = tensors[0], without_common_shear(tensors)[0]
    if not first[:2, 2].any() or plain[:2, 2].any():
        return None
    return np.asarray(np.linalg.solve(first[:2, :2], first[:2, 2]))
