"""Matrix elements between the states of one group of valleys, each with its error bar.

Values are those of the given states, of degree 4; the same states at degree 6 tell how far they are from the truth. An
element is at home in its block, of all states of one level with all of another: its bar is twice the root of the summed
squares of what the block changes, which no turn of the states inside their levels can hide, and a share of what the
energies change, for parts of an error that cancel in one element.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.outline import OutlineEdges, outline_edges
from wiresolve.physics.carried_modes import CarriedModes, between, plain_overlaps
from wiresolve.physics.corner_motion import corner_velocities
from wiresolve.physics.roughness import OutlineElements, moved, outline_elements, same_motion
from wiresolve.physics.semiclassical import phase_space
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
BAR_FACTOR = 2.0
"""Bars are this times the change from degree 4 to degree 6, as those of energies (`fem.estimate`)."""
HIDDEN = 0.5
"""Parts of an error may cancel between both degrees in one element, but not in the energies: this share of what these
say is added."""
_TORN = 3.0
"""Where a motion tears a corner its elements converge slowly: from degree 4 to degree 6 by a third of the error."""
_ROUNDING = 2e-12
"""No bar is below this times the largest element of its kind."""


@dataclass(frozen=True, eq=False)
class Barred:
    """Numbers and their error bars, of one shape."""

    values: NDArray[Any]
    errors: Array


@dataclass(frozen=True, eq=False)
class GroupElements:
    """Matrix elements of the m states of one group of valleys, as `MatrixElements` has them of all.

    Attributes
    ----------
    overlap, envelope_overlap, dipole_x_nm, dipole_y_nm, oscillator_x, oscillator_y : (m, m).
    sum_rule_x, sum_rule_y : (m,).
    layer_overlap : (regions, m, m).
    roughness_eV_per_nm : (motions, m, m).
    outline : at points of the outlines.
    sums : of the squares of the first four and of both dipoles ("dipole_nm"), over levels, (levels, levels).
    """

    overlap: Barred
    envelope_overlap: Barred
    dipole_x_nm: Barred
    dipole_y_nm: Barred
    oscillator_x: Barred
    oscillator_y: Barred
    sum_rule_x: Barred
    sum_rule_y: Barred
    layer_overlap: Barred
    roughness_eV_per_nm: Barred
    outline: OutlineElements
    sums: Mapping[str, Barred]


def group_elements(
    coarse: CarriedModes,
    fine: CarriedModes,
    level: Ints,
    levels: Ints,
    moving: Mapping[str, Array],
    mixed_eV: Array | None = None,
) -> GroupElements:
    """Matrix elements of states with bars.

    Parameters
    ----------
    coarse, fine : the states at degree 4 and at degree 6, in one frame.
    level : (m,) of each state.
    levels : numbers of the levels over which sums are made.
    moving : motions of the outlines' edges along their normals, (e,) each.
    mixed_eV : (m,) what the potential's own error may do to each energy: it mixes states too. None for none.
    """
    edges, finer = outline_edges(coarse.space.mesh), outline_edges(fine.space.mesh)
    here = _plain(coarse, edges, moving)
    there = _plain(fine, finer, same_motion(moving, edges, finer))
    mixing = None if mixed_eV is None else mixing_of(coarse.energy_eV, level, mixed_eV)

    doubt = doubts(coarse, fine, level)
    scales = _scales(here)

    def barred(name: str) -> Barred:
        bar = block_bars(there[name] - here[name], level, np.abs(here[name]).max(initial=0.0))
        bar = bar + hidden(scales[name], doubt)
        if name == "roughness_eV_per_nm":
            bar = bar * np.where(corner_velocities(edges, moving)[1], _TORN, 1.0)[:, None, None]
        if mixing is not None:
            bar = bar + mixed(np.abs(here[name]), mixing)
        return Barred(here[name], bar)

    found = {name: barred(name) for name in _MATRICES}
    # Orthonormality is not a matter of the mesh, nor of the potential.
    for name in ("overlap", "envelope_overlap"):
        plain = block_bars(there[name] - here[name], level, 1.0)
        found[name] = Barred(here[name], np.maximum(plain, np.abs(here["overlap"] - np.eye(len(level)))))
    for axis in "xy":
        dipole = found[f"dipole_{axis}_nm"]
        found[f"oscillator_{axis}"] = oscillator(dipole, coarse.energy_eV, np.abs(fine.energy_eV - coarse.energy_eV))
        rule = here[f"sum_rule_{axis}"]
        # Shares add up to 1, so only what layers differ by counts.
        lighter = _lighter(coarse, axis)
        change = np.abs(lighter - lighter.mean()) @ np.einsum("rii->ri", found["layer_overlap"].errors)
        found[f"sum_rule_{axis}"] = Barred(rule, change + _ROUNDING * np.abs(rule))
    sums = {}
    for name in SUMMED:
        parts = [f"dipole_{axis}_nm" for axis in "xy"] if name == "dipole_nm" else [name]
        more = [hidden(scales[p], doubt) for p in parts]
        if mixing is not None:
            more = [bar + mixed(np.abs(here[p]), mixing) for p, bar in zip(parts, more, strict=True)]
        each = [level_sums(here[p], there[p], bar, level, levels) for p, bar in zip(parts, more, strict=True)]
        sums[name] = Barred(np.sum([e.values for e in each], axis=0), np.sum([e.errors for e in each], axis=0))
    return GroupElements(**found, outline=here["outline"], sums=sums)


SUMMED = ("overlap", "envelope_overlap", "dipole_x_nm", "dipole_y_nm", "dipole_nm")


_MATRICES = ("overlap", "envelope_overlap", "dipole_x_nm", "dipole_y_nm", "layer_overlap", "roughness_eV_per_nm")


def _plain(modes: CarriedModes, edges: OutlineEdges, moving: Mapping[str, Array]) -> dict[str, Any]:
    """Values without bars."""
    place, inside, squares = between(modes)
    outline = outline_elements(modes, edges)
    made: dict[str, Any] = {
        "overlap": inside.sum(axis=0),
        "envelope_overlap": plain_overlaps(modes),
        "dipole_x_nm": place[0],
        "dipole_y_nm": place[1],
        "layer_overlap": inside,
        "roughness_eV_per_nm": moved(modes, edges, outline, moving),
        "outline": outline,
        "squares": squares,
    }
    share = np.einsum("rii->ri", inside).real
    for axis in "xy":
        rule = _lighter(modes, axis) @ share
        # With the lower bands counted, which hold a part of the sum, upper bands alone have no rule.
        made[f"sum_rule_{axis}"] = np.full(len(rule), np.nan) if modes.operator.nonparabolic else rule
    return made


def _lighter(modes: CarriedModes, axis: str) -> Array:
    """(regions,) m0/m along an axis; that of a region that admits carriers where one does not."""
    k = "xy".index(axis)
    return np.asarray(modes.tensor[:, k, k] / HBAR2_OVER_2M0)


def _scales(found: Mapping[str, Any]) -> dict[str, Array]:
    """(..., m) how much each state's elements of a kind change when the state does."""
    dipoles = [np.diag(found[f"dipole_{axis}_nm"]).real for axis in "xy"]
    spread = np.sqrt(np.maximum(found["squares"] - np.square(dipoles), 0.0))
    share = np.einsum("rii->ri", found["layer_overlap"]).real
    return {
        "overlap": np.zeros(share.shape[1]),
        "envelope_overlap": np.zeros(share.shape[1]),
        "dipole_x_nm": spread[0],
        "dipole_y_nm": spread[1],
        "layer_overlap": np.sqrt(np.clip(share * (1 - share), 0.0, None)),
        "roughness_eV_per_nm": np.abs(np.einsum("kii->ki", found["roughness_eV_per_nm"])),
    }


def doubts(coarse: CarriedModes, fine: CarriedModes, level: Ints) -> Array:
    """(m,) by what part of itself each state's energy above the bottom falls from degree 4 to degree 6."""
    bottom = phase_space(coarse.space, coarse.operator).bottom_eV
    relative = np.abs(fine.energy_eV - coarse.energy_eV) / np.maximum(coarse.energy_eV - bottom, 1e-12)
    return np.array([relative[level == own].max() for own in level])


def hidden(scale: Array, doubt: Array) -> Array:
    """(..., m, m) what changes of both degrees may hide from each other, of elements whose scale is (..., m)."""
    size = np.sqrt(scale[..., :, None] * scale[..., None, :])
    return np.asarray(HIDDEN * size * (doubt[:, None] + doubt))


def block_bars(change: NDArray[Any], level: Ints, largest: float) -> Array:
    """Bars (..., m, m) from changes: of each block of two levels twice the root of its sum of squares."""
    same = (level[:, None] == level).astype(float)
    summed = same @ np.abs(change) ** 2 @ same
    return np.asarray(BAR_FACTOR * np.sqrt(summed) + _ROUNDING * largest)


def mixing_of(energy_eV: Array, level: Ints, mixed_eV: Array) -> Array:
    """(m, m) how much of one state may be in another, of another level: matrix element over distance."""
    apart = np.abs(energy_eV[:, None] - energy_eV)
    other = level[:, None] != level
    strength = np.sqrt(mixed_eV[:, None] * mixed_eV)
    return np.asarray(np.where(other, strength / np.where(other, apart, 1.0), 0.0))


def mixed(size: Array, mixing: Array) -> Array:
    """What mixed states may add to elements of this size (..., m, m)."""
    return np.asarray(mixing @ size + size @ mixing)


def oscillator(dipole: Barred, energy_eV: Array, energy_error_eV: Array) -> Barred:
    """f_ij = (E_j - E_i) |<i|x|j>|^2 2 m0/hbar^2, negative for a lower final state.

    The sum over all j is <i|m0/m_xx|i> (W. Kuhn, Z. Phys. 33, 408 (1925), F. Reiche and W. Thomas, Z. Phys. 34, 510
    (1925), from memory, with a mass that depends on place: for H = -d/dx (hbar^2/2m) d/dx, [x, [H, x]] = hbar^2/m).
    """
    apart = energy_eV - energy_eV[:, None]
    size = np.abs(dipole.values)
    values = apart * size**2 / HBAR2_OVER_2M0
    doubt = BAR_FACTOR * (energy_error_eV + energy_error_eV[:, None])
    off = 2 * size * dipole.errors + dipole.errors**2
    errors = (np.abs(apart) * off + doubt * (size + dipole.errors) ** 2) / HBAR2_OVER_2M0
    np.fill_diagonal(errors, 0.0)
    return Barred(values, errors)


def level_sums(values: NDArray[Any], better: NDArray[Any], mixed_bar: Array | int, level: Ints, levels: Ints) -> Barred:
    """Sums of |<i|f|j>|^2 over i in one level and j in another, (levels, levels), from both degrees.

    They do not depend on how the states of a level are chosen, and their bars know nothing of that choice.
    """
    inside = (level == levels[:, None]).astype(float)
    size = np.abs(values)
    sums, after = (inside @ np.abs(each) ** 2 @ inside.T for each in (values, better))
    bar = BAR_FACTOR * np.abs(after - sums) + _ROUNDING * float(np.max(sums, initial=0.0))
    return Barred(sums, bar + inside @ (2 * size * mixed_bar + np.square(mixed_bar)) @ inside.T)


def without_groups(size: int, kind: Any = float) -> Barred:
    """(size, size) of which no element is known yet."""
    return Barred(np.full((size, size), np.nan, dtype=kind), np.full((size, size), np.nan))


def placed(whole: Barred, part: Barred, rows: Ints) -> Barred:
    """The same with a group's elements at its rows and columns."""
    values, errors = np.array(whole.values), np.array(whole.errors)
    if np.iscomplexobj(part.values) and not np.iscomplexobj(values):
        values = values.astype(complex)
    values[..., rows[:, None], rows], errors[..., rows[:, None], rows] = part.values, part.errors
    return replace(whole, values=values, errors=errors)
