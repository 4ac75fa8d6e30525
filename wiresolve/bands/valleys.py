"""Valleys of the wire's materials in the wire's frame, grouped where an exact symmetry makes them equal."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe import crystal
from wiresolve.describe.material import ANY_VALLEY, ZONE_CENTRE, Material, Valley
from wiresolve.describe.symmetry import Symmetry
from wiresolve.errors import InputError

Array = NDArray[np.float64]
Directions = tuple[crystal.Direction, crystal.Direction]
"""Crystal directions along the wire and along y."""

_ALIKE = 1e-10
"""Tensors that agree to this part of their largest entry are equal."""


@dataclass(frozen=True, eq=False)
class ValleyGroup:
    """Valleys that one operator describes: one of them, and how many an exact symmetry makes equal to it.

    Attributes
    ----------
    valley : their kind, the same in every material ("Delta").
    label : their kind and crystal directions ("Delta [001]").
    degeneracy : how many valleys it stands for.
    inverse_mass : (3, 3) in 1/m0 in the wire's frame, by material.
    height_eV, nonparabolicity_per_eV : above the material's conduction edge, and 1/eV (0 where none is known), by
        material.
    """

    valley: str
    label: str
    degeneracy: int
    inverse_mass: Mapping[str, Array]
    height_eV: Mapping[str, float]
    nonparabolicity_per_eV: Mapping[str, float]


def valley_groups(
    materials: Sequence[Material], names: Sequence[str], directions: Directions | None, symmetry: Symmetry
) -> tuple[ValleyGroup, ...]:
    """The groups of the named valleys.

    Two valleys are one group where a map of the section onto itself, which all materials share, carries the inverse
    mass of one into that of the other. The axis-plane terms may change their sign, all together: H(-k) is the complex
    conjugate of H(k).

    Parameters
    ----------
    materials : those that admit carriers, each with every valley of `names` (or one that continues any valley).
    directions : the crystal directions along the wire and along y; None where no valley needs them.
    symmetry : the maps that carry the section and the potential onto themselves.

    Raises
    ------
    InputError
        Materials give one valley unlike degeneracies, so that states cannot be counted.
    """
    found = []
    for name in names:
        kinds = {m.name: (m, _kind(m, name)) for m in materials}
        members = _members(kinds, directions)
        while members:
            first = members[0]
            alike = [m for m in members if _equal(first.tensors, m.tensors, symmetry)]
            members = [m for m in members if m not in alike]
            named = " ".join(crystal_name(m.direction) for m in alike if m.direction is not None)
            found.append(
                ValleyGroup(
                    valley=name,
                    label=f"{name} {named}".strip(),
                    degeneracy=sum(m.count for m in alike),
                    inverse_mass=first.tensors,
                    height_eV={material: valley.height_eV for material, (_, valley) in kinds.items()},
                    nonparabolicity_per_eV={m: v.nonparabolicity_per_eV or 0.0 for m, (_, v) in kinds.items()},
                )
            )
    return tuple(found)


def _kind(material: Material, name: str) -> Valley:
    valley = material.valley_named(name)
    assert valley is not None
    return valley


def crystal_name(direction: tuple[int, int, int]) -> str:
    """A crystal direction as it is written: [001], [1-11], or with blanks where a number has two digits."""
    joint = "" if all(abs(v) < 10 for v in direction) else " "
    return "[" + joint.join(str(v) for v in direction) + "]"


@dataclass(frozen=True, eq=False)
class _Member:
    direction: tuple[int, int, int] | None
    count: int
    tensors: Mapping[str, Array]


def _members(kinds: Mapping[str, tuple[Material, Valley]], directions: Directions | None) -> list[_Member]:
    """Every valley of one kind with its tensors in all materials."""
    kept = {name: (m, v) for name, (m, v) in kinds.items() if v.name != ANY_VALLEY}
    _check_alike(kept)
    turned = [(m, v) for m, v in kept.values() if v.axis is not None]
    if not turned or directions is None:
        counts = {v.degeneracy or 1 for _, v in kept.values() if v.axis is None}
        return [_Member(None, counts.pop() if counts else 1, {n: _tensor(*k, None, None) for n, k in kinds.items()})]
    material, valley = turned[0]
    assert valley.axis is not None
    centre = valley.name == ZONE_CENTRE
    equals = crystal.equivalents(valley.axis, valley.zone_boundary or centre, material.crystal)
    return [
        _Member(
            None if centre and len(equals) == 1 else direction,
            count,
            {name: _tensor(*kind, direction, directions) for name, kind in kinds.items()},
        )
        for direction, count in equals
    ]


def _check_alike(kinds: Mapping[str, tuple[Material, Valley]]) -> None:
    """InputError where one name stands for unlike valleys: carriers pass between materials within one valley only."""
    meant = {}
    for name, (_, v) in kinds.items():
        if v.axis is not None:
            across = "" if v.name == ZONE_CENTRE else ", zone boundary" if v.zone_boundary else ""
            meant[name] = f"{sorted((abs(i) for i in v.axis), reverse=True)}{across}"
        else:
            meant[name] = "1 without a direction" if (v.degeneracy or 1) == 1 else f"{v.degeneracy} without a direction"
    if len(set(meant.values())) > 1 and not all(v.name == ZONE_CENTRE for _, v in kinds.values()):
        raise InputError(
            "materials",
            "one valley has unlike directions or numbers in materials that admit carriers, so states cannot be counted",
            "; ".join(f"{name}: {text}" for name, text in meant.items()),
            "give unlike valleys unlike names",
        )
    counts = {name: v.degeneracy for name, (_, v) in kinds.items() if v.axis is None}
    if len(set(counts.values())) > 1:
        raise InputError(
            "materials",
            "valley_degeneracy differs between materials that admit carriers, so states cannot be counted",
            ", ".join(f"{name}: {count}" for name, count in counts.items()),
            "solve each kind of valley by itself",
        )


def _tensor(
    material: Material, valley: Valley, direction: crystal.Direction | None, directions: Directions | None
) -> Array:
    """(3, 3) inverse mass of one valley in the wire's frame."""
    if valley.tensor:
        return np.asarray(valley.tensor, dtype=float)
    assert direction is not None and directions is not None
    assert valley.longitudinal_mass is not None and valley.transverse_mass is not None
    rows = crystal.frame(*directions, material.crystal, material.c_over_a)
    along = crystal.cartesian(direction, material.crystal, material.c_over_a)
    return np.asarray(crystal.inverse_mass_tensor(along, valley.longitudinal_mass, valley.transverse_mass, rows))


def _equal(one: Mapping[str, Array], other: Mapping[str, Array], symmetry: Symmetry) -> bool:
    """Whether a symmetry of the section carries the tensors of all materials into the other ones."""
    first, second = [one[name] for name in one], [other[name] for name in one]
    maps = [np.asarray(m, dtype=float) for m in symmetry.maps]
    if symmetry.continuous:
        maps += _turns(first, second)
    return any(_carries(turn, sign, first, second) for turn in maps for sign in (1.0, -1.0))


def _carries(turn: Array, sign: float, first: Sequence[Array], second: Sequence[Array]) -> bool:
    whole = np.eye(3)
    whole[:2, :2], whole[2, 2] = turn, sign
    return all(
        np.abs(whole @ a @ whole.T - b).max() <= _ALIKE * np.abs(a).max() for a, b in zip(first, second, strict=True)
    )


def _turns(first: Sequence[Array], second: Sequence[Array]) -> list[Array]:
    """Rotations and reflections that may carry one set of tensors into the other, where all of them are allowed."""
    for a, b in zip(first, second, strict=True):
        (low, high), axes = np.linalg.eigh(a[:2, :2])
        if high - low > 1e-9 * high:
            _, others = np.linalg.eigh(b[:2, :2])
            return [others @ np.diag([p, q]) @ axes.T for p in (1.0, -1.0) for q in (1.0, -1.0)]
    for a, b in zip(first, second, strict=True):
        if np.hypot(*a[:2, 2]) > _ALIKE * np.abs(a).max():
            start, end = (np.arctan2(*t[:2, 2][::-1]) for t in (a, b))
            c, s = np.cos(end - start), np.sin(end - start)
            mirror = np.array([[np.cos(2 * start), np.sin(2 * start)], [np.sin(2 * start), -np.cos(2 * start)]])
            turn = np.array([[c, -s], [s, c]])
            return [turn, turn @ mirror]
    return [np.eye(2)]
