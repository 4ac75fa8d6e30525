"""The one internal system of units (nm, eV, K, V, m0) and its constants, from SciPy's CODATA set."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Mapping
from decimal import Decimal
from types import MappingProxyType

from scipy import constants as _codata

from wiresolve.errors import InputError

HBAR2_OVER_2M0: float = _codata.hbar**2 / (2 * _codata.m_e) / _codata.e * 1e18
"""hbar^2 / (2 m0) in eV nm^2."""
KB: float = _codata.k / _codata.e
"""Boltzmann's constant in eV/K."""
CONDUCTANCE_QUANTUM_SIEMENS: float = 2 * _codata.e**2 / _codata.h
"""G0 = 2 e^2 / h in siemens (both spins)."""
RESISTANCE_QUANTUM_OHM: float = 1 / CONDUCTANCE_QUANTUM_SIEMENS
"""h / (2 e^2) in ohm."""
E2_OVER_4PI_EPS0: float = _codata.e / (4 * _codata.pi * _codata.epsilon_0) * 1e9
"""e^2 / (4 pi eps0) in eV nm."""
EPSILON0_PER_V_NM: float = _codata.epsilon_0 / _codata.e * 1e-9
"""eps0 in elementary charges per V and nm."""
FARAD_PER_M: float = _codata.e * 1e9
"""F/m in one elementary charge per V and nm."""


def _inverse(lengths: Mapping[str, str], power: int) -> dict[str, str]:
    """Spellings "cm^-3", "1/cm^3", "cm-3" and "/cm3" with their factors, from those of the lengths in nm."""
    found = {}
    for name, factor in lengths.items():
        value = str(1 / Decimal(factor) ** power)
        found[f"{name}^-{power}"] = value
        found[f"1/{name}" if power == 1 else f"1/{name}^{power}"] = value
        # As they are typed every day.
        found[f"{name}-{power}"] = found[f"/{name}{power if power > 1 else ''}"] = value
    return found


_LENGTHS = {
    "nm": "1",
    "pm": "1e-3",
    "Angstrom": "0.1",
    "angstrom": "0.1",
    "\u00c5": "0.1",
    "um": "1e3",
    "\u00b5m": "1e3",
}
_LENGTHS |= {"\u212b": "0.1", "\u03bcm": "1e3", "mm": "1e6", "cm": "1e7", "m": "1e9"}
_INVERSE_FROM = {name: _LENGTHS[name] for name in ("nm", "um", "cm", "m")}

UNITS: Mapping[str, Mapping[str, str]] = MappingProxyType(
    {
        "length": _LENGTHS,
        "energy": {"eV": "1", "meV": "1e-3", "ueV": "1e-6", "\u00b5eV": "1e-6", "\u03bceV": "1e-6", "neV": "1e-9"},
        "temperature": {"K": "1", "mK": "1e-3"},
        "angle": {"deg": "1", "rad": str(Decimal(180) / Decimal(math.pi))},
        "electric field": {"V/nm": "1", "V/um": "1e-3", "MV/m": "1e-3", "MV/cm": "0.1", "kV/cm": "1e-4"}
        | {"V/cm": "1e-7", "V/m": "1e-9"},
        "voltage": {"V": "1", "mV": "1e-3"},
        "resistance": {"ohm": "1", "kohm": "1e3", "Mohm": "1e6"},
        "wave number": _inverse(_INVERSE_FROM, 1),
        "line density": _inverse(_INVERSE_FROM, 1),
        "sheet density": _inverse(_INVERSE_FROM, 2),
        "density": _inverse(_INVERSE_FROM, 3),
    }
)
"""Spellings of the units of each dimension, with the factor to the internal unit (the first one; angles in degrees)."""
_SAMPLES = {
    "length": "10 nm", "energy": "0.1 eV", "temperature": "77 K", "angle": "15 deg", "electric field": "0.01 V/nm",
    "voltage": "0.5 V", "wave number": "0.1 nm^-1", "line density": "1e6 cm^-1", "sheet density": "1e12 cm^-2",
    "density": "1e18 cm^-3", "resistance": "500 ohm",
}  # fmt: skip
_USUAL = {"accuracy.energy": "0.1 meV", "--accuracy": "0.1 meV", "harmonic.x": "5 meV", "harmonic.y": "5 meV"}
"""Samples for fields whose usual unit is not that of their dimension."""
LEAST_meV = 1e-2
"""A bare number below it is no energy in meV that anybody asks for."""
_QUANTITY = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,4})?)\s*(1/.*|[^\d\s].*)?", re.ASCII)
_COMMA = re.compile(r"([+-]?\d+),(\d+(?:[eE][+-]?\d{1,4})?)\s*([^\d\s,.].*)?", re.ASCII)


def parse_quantity(text: object, dimension: str, field: str) -> float:
    """Value of a text such as "6 nm" in the internal unit of its dimension (correctly rounded).

    Raises `InputError` for a bare number, a missing or wrong unit, a number that is not finite, or no text at all;
    the message shows the spelling that is wanted, as it has to be typed where `field` is an option ("--accuracy").
    """
    units = UNITS[dimension]
    sample = next((usual for end, usual in _USUAL.items() if field.endswith(end)), _SAMPLES[dimension])
    usual_unit = sample.split()[1]
    spelled, a = _spelled(field, sample), "an" if dimension[0] in "aeiou" else "a"
    if isinstance(text, int | float) and not isinstance(text, bool):
        small = usual_unit == "meV" and 0 < abs(text) < LEAST_meV  # eV are meant
        wanted = f"{1e3 * text:g} meV" if small else f"{text!r} {usual_unit}" if abs(text) < 1e30 else sample
        wanted = _spelled(field, wanted)
        raise InputError(field, "a number needs its unit, as a text in quotes", text, wanted)
    if not isinstance(text, str):
        raise InputError(field, f"must be {a} {dimension} in quotes", text, spelled)
    short = text.strip() if len(text) <= 80 else ""
    if comma := _COMMA.fullmatch(short):
        before, after, unit = comma[1], comma[2], comma[3] if comma[3] in units else usual_unit
        wanted = _spelled(field, f"{before}.{after} {unit}")
        wanted += f' or "{before}{after} {unit}"' if len(after) == 3 else ""  # a comma between thousands, perhaps
        raise InputError(field, "a decimal point is wanted, no comma", text, wanted)
    match = _QUANTITY.fullmatch(short)
    if match is None:
        finite = "must be a finite number with a unit" if re.match(r"\s*[+-]?(nan|inf)", text, re.I) else ""
        raise InputError(field, finite or f"must be {a} {dimension}: a number and a unit", text, spelled)
    number, unit = match[1], match[2]
    if unit is None:
        raise InputError(field, "the unit is missing", text, _spelled(field, f"{number} {usual_unit}"))
    if unit not in units:
        other = next((name for name, known in UNITS.items() if unit in known), None)
        if other is not None:
            raise InputError(field, f"must be {a} {dimension}, but '{unit}' is a unit of {other}", text, spelled)
        names = [name for name in units if name != "angstrom"]
        meant = "Angstrom" if unit == "A" and dimension == "length" else unit[:20]
        near = difflib.get_close_matches(meant, names, n=1 if meant in names else 2, cutoff=0.4)
        known = " or ".join(near) if near else ", ".join(name for name in names if name.isascii())
        raise InputError(field, f"'{unit[:20]}' is no known unit of {dimension}", text, f"use {known}; {spelled}")
    value = float(Decimal(number) * Decimal(units[unit]))
    if not math.isfinite(value):
        raise InputError(field, "must be a finite number with a unit", text, spelled)
    return value


def _spelled(field: str, sample: str) -> str:
    """What to write for a field: its key too in a wire file, as it is typed for an option, alone in a list."""
    if field.startswith("--"):
        return f'write e.g. {field} "{sample}"'
    return f'write e.g. "{sample}"' if field.endswith("]") else f'write e.g. {field.rsplit(".", 1)[-1]} = "{sample}"'


def same_quantity(one: str, other: str) -> bool:
    """Whether two texts give one value to six digits, such as "20 um" and "20000 nm"."""
    for dimension in UNITS:
        try:
            a, b = parse_quantity(one, dimension, ""), parse_quantity(other, dimension, "")
        except InputError:
            continue
        return math.isclose(a, b, rel_tol=1e-5)
    return False


def format_quantity(value: float, dimension: str, unit: str | None = None, digits: int | None = None) -> str:
    """A text that `parse_quantity` reads back: exactly in the internal unit, or with `digits` digits in another one."""
    first = next(iter(UNITS[dimension]))
    if unit is None and digits is None:
        return f"{value + 0.0!r} {first}"  # -0.0 becomes 0.0: equal values have equal texts
    shown = value / float(UNITS[dimension][unit or first])
    return f"{shown:.{digits or 6}g} {unit or first}"
