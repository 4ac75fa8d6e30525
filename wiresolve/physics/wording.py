"""Numbers in sentences and tables, and a verdict in lines."""

from __future__ import annotations

import math
import re


def figures(value: float, digits: int = 3) -> str:
    """A number with so many significant digits, without an exponent where it is of ordinary size."""
    return f"{float(f'{value:.{digits}g}'):.12g}"


def meV(energy_eV: float, digits: int = 3) -> str:
    """An energy in meV."""
    return f"{figures(1e3 * energy_eV, digits)} meV"


def signed_meV(energy_eV: float, digits: int = 2) -> str:
    """A shift in meV, with its sign."""
    return f"{'+' if energy_eV > 0 else ''}{meV(energy_eV, digits)}"


def line_density(per_nm: float) -> str:
    """Carriers for each length of wire, in the unit of the trade: "2.62e6 carriers per cm (0.262 per nm)"."""
    mantissa, exponent = f"{1e7 * per_nm:.2e}".split("e")
    return f"{mantissa}e{int(exponent)} carriers per cm ({per_nm:.3g} per nm)"


def with_bar(value: float, bar: float) -> str:
    """`value ± bar` with as many decimals as the bar deserves: one digit of it, or two where one is too coarse.

    The bar is rounded up, and widened by what rounding moved the value, so that the printed interval holds the whole
    of the given one; it is at most 1.5 times as wide while six decimals are enough for that.
    """
    if not math.isfinite(bar) or bar <= 0:
        return f"{value:.9g}"
    for decimals in range(min(6, max(0, -math.floor(math.log10(bar)))), 7):
        unit = 10.0**-decimals
        shown = round(value, decimals) + 0.0  # no minus sign before a zero
        half = max(1, math.ceil(round((bar + abs(value - shown)) / unit, 6))) * unit
        if half <= 1.5 * bar:
            break
    return f"{shown:.{decimals}f} ± {half:.{decimals}f}"


def significant(value: float, digits: int) -> str:
    """A number rounded to so many significant digits, trailing zeros kept, never with an exponent."""
    if value == 0 or not math.isfinite(value):
        return f"{value:g}"
    # Rounded first, since that may bring a digit more in front: 9.996 is 10.0 and not 10.00.
    rounded = float(f"{value:.{digits - 1}e}")
    decimals = digits - 1 - math.floor(math.log10(abs(rounded)))
    return f"{rounded:.{max(0, decimals)}f}"


def by_temperature(text: str) -> str:
    """The verdict with a line of its own for each temperature, and one for what follows them."""
    broken = re.sub(r" (?=At [-+.\de]+ K \()", "\n", text)
    return re.sub(r" (?=Effective dimension )", "\n", broken, count=1)
