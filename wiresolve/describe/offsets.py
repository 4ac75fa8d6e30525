"""Band edges of several materials on one scale."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence

from wiresolve.describe.material import GIVEN_SCALE, VACUUM_LEVEL, Material
from wiresolve.errors import InputError
from wiresolve.units import format_quantity


def barrier_height_eV(inner: Material, outer: Material, valley: str | None = None) -> tuple[float, str] | None:
    """How far the conduction edge rises from one material into another, and the scale on which both are known.

    Parameters
    ----------
    valley : the valley that is compared; by default the lowest of each.

    Returns
    -------
    The step in eV (negative: down) and the scale's name; None where no scale holds both, or one lacks the valley.
    """
    scale = _shared_scale([inner, outer])
    if scale is None:
        return None
    heights = []
    for material in (inner, outer):
        found = None if valley is None else material.valley_named(valley)
        if valley is not None and found is None:
            return None
        heights.append(dict(material.edges)[scale] + (0.0 if found is None else found.height_eV))
    return heights[1] - heights[0], scale


def _shared_scale(materials: Sequence[Material]) -> str | None:
    """The best scale that holds all edges; the vacuum level only where at most one material is no insulator."""
    first, *others = materials
    for scale, _ in first.edges:
        if scale == VACUUM_LEVEL and sum(not m.insulator for m in materials) > 1:
            continue
        if all(scale in dict(m.edges) for m in others):
            return scale
    return None


def on_common_scale(materials: Mapping[str, Material], admitted: Sequence[str]) -> dict[str, Material]:
    """The materials with the conduction edges of those that admit carriers on one scale.

    One material alone needs no edge: it is 0 then. Semiconductors need a scale of their family; an insulator is set
    beside them by its electron affinity, from the vacuum level of the semiconductor whose edge is the lowest.

    Raises
    ------
    InputError
        An edge is missing, no scale holds all of them, or a user's own edge does not stand on the one that does.
    """
    found, used = dict(materials), [materials[name] for name in admitted]
    if len(used) == 1:
        (only,) = used
        if only.conduction_edge_eV is None:
            found[only.name] = only.on_scale(only.edges[0][0]) if only.edges else only.at_edge(0.0, None)
        return found
    scale = _shared_scale(used)
    if scale is not None:
        _no_edge_is_dropped(used, scale)
        return found | {m.name: m.on_scale(scale) for m in materials.values() if scale in dict(m.edges)}
    conductors = [m for m in used if not m.insulator]
    scale = _shared_scale(conductors) if conductors else None
    insulators = [m for m in used if m.insulator]
    if scale is None or not insulators:
        raise _no_common_scale(used)
    _no_edge_is_dropped(used, scale)
    lowest = min(conductors, key=lambda m: dict(m.edges)[scale])
    vacuum = dict(lowest.edges)[scale] - dict(lowest.edges).get(VACUUM_LEVEL, float("nan"))
    found |= {m.name: m.on_scale(scale) for m in conductors}
    for insulator in insulators:
        depth = dict(insulator.edges).get(VACUUM_LEVEL)
        if depth is None or vacuum != vacuum:
            raise _no_common_scale(used)
        found[insulator.name] = insulator.at_edge(vacuum + depth, scale)
    return found


def _no_edge_is_dropped(materials: Sequence[Material], scale: str) -> None:
    """InputError where a user gave an edge that would not count, since the materials meet on another scale."""
    given = [m for m in materials if GIVEN_SCALE in dict(m.edges)]
    if scale == GIVEN_SCALE or not given:
        return
    others = [m.name for m in materials if m not in given]
    beside = others[0] if len(others) == 1 else ", ".join(others[:-1]) + " and " + others[-1]
    has = "has" if len(others) == 1 else "have"
    rule = f"{given[0].name} gives a conduction_edge, and {beside} beside it {has} none on that scale"
    edge = format_quantity(dict(given[0].edges)[GIVEN_SCALE], "energy")
    remedy = "give one to each of them, or take it out"
    raise InputError(f"materials.{given[0].name}.conduction_edge", rule, edge, remedy)


def _no_common_scale(materials: Sequence[Material]) -> InputError:
    for material in materials:
        if not material.edges:
            others = ", ".join(m.name for m in materials if m is not material)
            rule = f"is missing: {material.name} and {others} admit carriers, so their edges must stand on one scale"
            remedy = "give a conduction_edge to each of them under [materials.NAME]"
            return InputError(f"materials.{material.name}.conduction_edge", rule, remedy=remedy)
    pairs = itertools.combinations(materials, 2)
    first, other = next((p for p in pairs if _shared_scale(p) is None), (materials[0], materials[-1]))
    one, two = ("' or '".join(scale for scale, _ in m.edges) for m in (first, other))
    rule = (
        f"no common offset scale: the edge of {first.name} stands on the scale '{one}', that of {other.name} on '{two}'"
    )
    if VACUUM_LEVEL in dict(first.edges) and VACUUM_LEVEL in dict(other.edges):
        rule += "; electron affinities do not give the step between two semiconductors"
    named = GIVEN_SCALE in (*dict(first.edges), *dict(other.edges))
    remedy = "describe all of them under [materials.NAME], each with a conduction_edge"
    remedy += " (extends = NAME keeps the other values of the table)" if named else ""
    return InputError("section", rule, remedy=remedy)
