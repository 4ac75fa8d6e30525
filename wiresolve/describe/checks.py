"""Checks of single values that every description shares: a finite number in a range, a whole number, a text."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Iterable, Mapping
from numbers import Integral, Real
from types import MappingProxyType

from wiresolve.errors import InputError

SHORTEST_nm, LONGEST_nm = 0.1, 1e4
"""Lengths of a section outside this range are refused: below an atom's size, or no wire."""
THINNEST_nm = 0.05
"""Layers and corner radii below this are refused."""
ALIKE, SHORTEST_START = 0.7, 4
"""How alike a misspelt word must be to one that is proposed (1: equal), or how many of its first letters must stand."""
NOTHING: Mapping[str, str] = MappingProxyType({})
SHAPE_WORDS: Mapping[str, str] = MappingProxyType(
    dict.fromkeys(("square", "box", "fin", "sheet", "ridge", "rectangular"), "rectangle")
    | dict.fromkeys(("round", "disk", "disc", "circular", "cylinder"), "circle")
    | dict.fromkeys(("oval", "elliptic", "elliptical"), "ellipse")
    | {"hexagonal": "hexagon", "triangular": "triangle", "trapezoidal": "trapezoid", "gate-all-around": "wrap-gate"}
)
"""Other words for shapes."""


def finite(field: str, value: object, remedy: str = "") -> float:
    """`value` as a float; InputError for anything but a finite real number (True and False are no numbers)."""
    if isinstance(value, bool) or not isinstance(value, Real):
        raise InputError(field, "must be a number", value, remedy)
    try:
        number = float(value)
    except (OverflowError, ValueError):
        number = math.inf
    if not math.isfinite(number):
        raise InputError(field, "must be a finite number", value, remedy)
    return number


def in_range(field: str, value: object, low: float, high: float, unit: str = "", remedy: str = "") -> float:
    """`value` as a float within [low, high]; InputError that tells the range otherwise."""
    if unit in _SUFFIXES and isinstance(value, str):
        # Wire files give quantities as texts, which are numbers by now: this is an argument in Python.
        field, remedy = _argument(field, value, unit, remedy)
    number = finite(field, value, remedy)
    if not low <= number <= high:
        space = f" {unit}" if unit else ""
        rule = "must be positive" if number <= 0 < low else f"must lie between {low:g}{space} and {high:g}{space}"
        shown = f"{number:g}{space}" if unit else number
        raise InputError(field, rule, shown, remedy)
    return number


_SUFFIXES = ("nm", "eV", "K", "V", "deg", "ohm")
"""Units of quantities, which wire files give as texts: other numbers stand alone there."""


def _argument(field: str, value: str, unit: str, remedy: str) -> tuple[str, str]:
    """The name of an argument, with its unit as a suffix, and what to write for a text such as "16 nm"."""
    if not field.isidentifier():
        return field, remedy
    name = f"{field}_{unit}"
    number = re.match(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(\S*)\s*$", value, re.ASCII)
    if number is None or number[2] not in ("", unit):
        return name, remedy or f"write a number of {unit}, e.g. {name} = {10.0 if unit == 'nm' else 1.0}"
    return name, f"write {name} = {float(number[1])}"


def optional(field: str, value: object, low: float, high: float, unit: str = "") -> float | None:
    """None, or a number within [low, high]."""
    return None if value is None else in_range(field, value, low, high, unit)


def length(field: str, value: object, low: float = SHORTEST_nm, high: float = LONGEST_nm) -> float:
    """A length in nm that a section can have."""
    return in_range(field, value, low, high, "nm")


def whole(field: str, value: object, low: int, high: int) -> int:
    """`value` as an int within [low, high]; a float or a bool is an error."""
    if isinstance(value, bool) or not isinstance(value, Integral):
        raise InputError(field, f"must be a whole number from {low} to {high}", value)
    number = int(value)
    if not low <= number <= high:
        shown = number if abs(number) < 1e30 else "a huge one"
        raise InputError(field, f"must be a whole number from {low} to {high}", shown)
    return number


def text(field: str, value: object, longest: int = 200) -> str:
    """A printable text that is not empty."""
    if not isinstance(value, str):
        raise InputError(field, "must be a text in quotes", value)
    if not value.strip():
        raise InputError(field, "must not be empty", value)
    if len(value) > longest:
        raise InputError(field, f"must be at most {longest} characters long", value)
    if not value.isprintable():
        raise InputError(field, "must hold printable characters only, on one line", value)
    return value


def choice(field: str, value: object, allowed: Iterable[str], meant: Mapping[str, str] = NOTHING) -> str:
    """One of the allowed words; InputError that proposes the nearest otherwise (see `nearest`)."""
    words = tuple(allowed)
    if not isinstance(value, str) or value not in words:
        raise InputError(
            field, "must be one of " + ", ".join(f'"{w}"' for w in words), value, nearest(value, words, meant=meant)
        )
    return value


def nearest(given: object, allowed: Iterable[str], count: int = 3, meant: Mapping[str, str] = NOTHING) -> str:
    """A remedy that names the allowed words nearest to the given one, or an empty text.

    Near are words that the given one begins ("fermi" of "fermi_level"), and words that differ in few letters. `meant`
    holds other words, in small letters, for allowed ones ("square" for "rectangle").
    """
    words = list(allowed)
    if not isinstance(given, str) or not words:
        return ""
    by_lower, start = {w.lower(): w for w in words}, given[:80].lower()
    if (other := meant.get(start.strip())) in words:
        return did_you_mean([str(other)])
    begun = [w for w in by_lower if len(start) >= SHORTEST_START and w.startswith(start)]
    close = begun[:count] or difflib.get_close_matches(start, by_lower, n=count, cutoff=ALIKE)
    return did_you_mean([by_lower[c] for c in close])


def did_you_mean(words: Iterable[str]) -> str:
    """A question that names the words; an empty text where there are none."""
    named = " or ".join(f"'{word}'" for word in words)
    return f"did you mean {named}?" if named else ""
