"""What a small error of a dimension does to the levels, beside temperature, in words."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.dimensions import dimensions
from wiresolve.describe.section import Section
from wiresolve.physics.sensitivity import PER_LENGTH, Sensitivity
from wiresolve.units import KB

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_MOST = 2
"""Dimensions that the sentence names."""
_SMALL_nm = 5.0
"""Dimensions below this are varied by a tenth of a nanometre instead of half of one."""
_LINEAR = 0.1
"""Motions above this part of the first level are said to be linear estimates."""
_MATTERS_eV = 5e-5
"""Motions below this, in both energies, are not worth a word."""
_WORDS = {"across_flats": "width across flats", "across_corners": "width across corners"}
_WORDS |= {"top": "top width", "bottom": "bottom width"}
_WIDTHS = 4 * np.log(1 + np.sqrt(2)) / np.sqrt(8 * np.log(2))
"""Standard deviations of a normal spread, in kT, that are as wide as -df/dE at half of its height: 1.497."""


def level_motion(sensitivity: Sensitivity, level: Ints) -> Array:
    """How fast the mean of each level moves, (levels,)."""
    level = np.asarray(level)
    return np.array([sensitivity.values[level == number].mean() for number in np.unique(level)])


def same_width_K(spread_eV: float) -> float:
    """The temperature at which -df/dE is as wide at half its height as a normal spread is: 7.75 K per meV."""
    return float(abs(spread_eV) / (_WIDTHS * KB))


def sentence(
    section: Section,
    found: Sequence[Sensitivity],
    level: Ints,
    temperature_K: float,
    first_eV: float | None = None,
) -> str:
    """How far half a nanometre of the dimensions that matter most moves the first level and the first spacing.

    Parameters
    ----------
    found : of the listed subbands, whose levels are `level`.
    temperature_K : what the spread that the first dimension's error makes is compared with.
    first_eV : the first level above its band edge: motions that are no small part of it are said to be linear.
    """
    given = {d.path: d.value_nm for d in dimensions(section) if ".center" not in d.path}
    lengths = {s.of: s for s in found if s.unit == PER_LENGTH}
    # Where nothing is given by a length, the outlines as a whole stand for it.
    chosen = [of for of in lengths if of in given] or [of for of in lengths if of.startswith("growth")]
    rows = [(of, *_moves(lengths[of], level, _step(given, of))) for of in chosen]
    rows = [row for row in rows if max(abs(row[1]), abs(row[2] or 0.0)) > _MATTERS_eV]
    rows.sort(key=lambda row: -(abs(row[1]) + abs(row[2] or 0.0)))
    if not rows:
        return ""
    parts = []
    for number, (of, first, spacing) in enumerate(rows[:_MOST]):
        amount = "half a nanometre" if _step(given, of) == 0.5 else "a tenth of a nanometre"
        words = f"{amount} of {in_words(of)} moves the first level by about {_meV(first)}"
        if spacing is not None:
            words += f" and the first spacing by about {_meV(spacing)}"
        parts.append(words if number == 0 else words.replace(" moves the first level", ""))
    said = "; ".join(parts)
    blurs, first, _ = max(rows[:_MOST], key=lambda row: abs(row[1]))
    like = same_width_K(first)
    beside = ""
    if temperature_K > 0:
        beside = f", {'more' if like > temperature_K else 'less'} than the {temperature_K:.3g} K of the carriers"
    spread = f"such a spread of {in_words(blurs)} (standard deviation)"
    spread += f" blurs the first step as {like:.2g} K would{beside}"
    large = max(abs(moved) for _, moved, _ in rows[:_MOST])
    linear = ""
    if first_eV is not None and large > _LINEAR * abs(first_eV):
        linear = f" These are linear estimates, and {_part(large, first_eV)} of the first level is no small motion."
    return f"{said[0].upper()}{said[1:]}; {spread}.{linear}"


def _step(given: Mapping[str, float], of: str) -> float:
    return 0.5 if given.get(of, _SMALL_nm) >= _SMALL_nm else 0.1


def _moves(sensitivity: Sensitivity, level: Ints, step_nm: float) -> tuple[float, float | None]:
    """How far the first level and the first spacing move in eV; no spacing where only one level is listed."""
    by_level = step_nm * level_motion(sensitivity, level)
    return float(by_level[0]), float(by_level[1] - by_level[0]) if len(by_level) > 1 else None


def _part(moved_eV: float, whole_eV: float) -> str:
    """A part in per cent, or that it is more than all."""
    part = 100 * abs(moved_eV / whole_eV) if whole_eV else np.inf
    return f"{part:.2g} %" if part < 99.5 else "more than the whole"


def grown(of: str) -> str:
    """The growth of an outline in words; pieces that only have the name of their group in a mesh are called groups."""
    piece = of.removeprefix("growth of ")
    return of if re.fullmatch(r"rim|core|outside|(layer|patch|group) \d+", piece) else f"growth of group {piece}"


def in_words(of: str) -> str:
    """A path in words: "diameter", "thickness of layer 1", "width of patch 2", "the insulator's thickness"."""
    if of.startswith("gates["):
        return "the insulator's thickness"
    if of.startswith("growth of "):
        return "outward " + grown(of)
    *parents, key = of.removeprefix("section.").split(".")
    word = _WORDS.get(key, key.replace("_", " "))
    if not parents:
        return word
    kind, _, number = parents[0].partition("[")
    if parents[-1] == "sides":
        word = f"thickness at {key}"
    return f"{word} of {kind.removesuffix('s').replace('patche', 'patch')} {number.rstrip(']')}"


def _meV(energy_eV: float) -> str:
    """Three digits, with a sign."""
    value = 1e3 * energy_eV
    decimals = max(0, 2 - int(np.floor(np.log10(abs(value))))) if value else 0
    return f"{round(value, min(decimals, 3)):+.{min(decimals, 3)}f} meV"
