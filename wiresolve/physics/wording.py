"""Numbers in the sentences of remarks."""

from __future__ import annotations


def figures(value: float, digits: int = 3) -> str:
    """A number with so many significant digits, without an exponent where it is of ordinary size."""
    return f"{float(f'{value:.{digits}g}'):.12g}"


def meV(energy_eV: float, digits: int = 3) -> str:
    """An energy in meV."""
    return f"{figures(1e3 * energy_eV, digits)} meV"


def signed_meV(energy_eV: float, digits: int = 2) -> str:
    """A shift in meV, with its sign."""
    return f"{'+' if energy_eV > 0 else ''}{meV(energy_eV, digits)}"
