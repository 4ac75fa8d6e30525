"""Figures of a result, drawn headless: each function returns a Matplotlib figure; `save_all` writes PNG, SVG and PDF.

Sizes are those of a printed column (86 mm) or page (178 mm), and text in the vector files stays text. Colours are the
eight of Okabe and Ito (see `describe.appearance`), in order of appearance.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from types import MappingProxyType

from matplotlib.figure import Figure

from wiresolve.output.bands_figure import density_of_states, dispersion
from wiresolve.output.canvas import save
from wiresolve.output.charge_figure import charge
from wiresolve.output.conductance_figure import conductance
from wiresolve.output.levels_figure import levels
from wiresolve.output.measured import Measured
from wiresolve.output.modes_figure import modes
from wiresolve.output.outline_figure import sensitivity
from wiresolve.output.section_figure import section
from wiresolve.result import Result

__all__ = [
    "FIGURES",
    "charge",
    "conductance",
    "density_of_states",
    "dispersion",
    "drawable",
    "levels",
    "modes",
    "save_all",
    "section",
    "sensitivity",
]

FIGURES: MappingProxyType[str, Callable[[Result], Figure]] = MappingProxyType(
    {
        "section": section,
        "modes": modes,
        "levels": levels,
        "density_of_states": density_of_states,
        "dispersion": dispersion,
        "conductance": conductance,
        "sensitivity": sensitivity,
        "charge": charge,
    }
)


def __dir__() -> list[str]:
    return list(__all__)


def drawable(result: Result) -> Sequence[str]:
    """Names of the figures that the result has data for."""
    missing = set() if len(result.outline_sensitivity.segments) else {"sensitivity"}
    missing |= {"charge"} if result.charge is None else set()
    return [name for name in FIGURES if name not in missing]


def save_all(result: Result, folder: str | Path, measured: Measured | None = None) -> list[Path]:
    """Write every figure that the result has data for, as PNG, SVG and PDF, into an existing folder.

    Measured points are laid over the conductance. The same result gives the same bytes.

    Raises
    ------
    InputError
        The measured points are not against the Fermi level.
    OSError
        A file cannot be written.
    """
    made = {name: partial(FIGURES[name], result) for name in drawable(result)}
    return save(made | {"conductance": partial(conductance, result, measured)}, folder)
