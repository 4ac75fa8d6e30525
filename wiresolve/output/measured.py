"""Measured conductances to lay a computed staircase over: read from a CSV file, on the axis of a figure."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe import checks, input_files
from wiresolve.errors import InputError
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS

Array = NDArray[np.float64]
GATE_VOLTAGE, FERMI_LEVEL = "gate_voltage_V", "fermi_level_eV"
"""What conductances are measured against."""
MOST_POINTS = 1_000_000
_AXES: Mapping[str, tuple[str, float]] = MappingProxyType(
    {
        "gate_voltage_V": (GATE_VOLTAGE, 1.0),
        "gate_voltage_mV": (GATE_VOLTAGE, 1e-3),
        "fermi_level_eV": (FERMI_LEVEL, 1.0),
        "fermi_level_meV": (FERMI_LEVEL, 1e-3),
    }
)
_CONDUCTANCES: Mapping[str, float] = MappingProxyType(
    {
        "conductance_G0": 1.0,
        "conductance_S": 1 / CONDUCTANCE_QUANTUM_SIEMENS,
        "conductance_uS": 1e-6 / CONDUCTANCE_QUANTUM_SIEMENS,
    }
)
"""Columns of conductances, and how many quanta their unit is."""
_RESISTANCES: Mapping[str, float] = MappingProxyType({"resistance_ohm": 1.0, "resistance_kohm": 1e3})


@dataclass(frozen=True, eq=False)
class Measured:
    """Measured conductances.

    Parameters
    ----------
    quantity : what `x` is, "gate_voltage_V" or "fermi_level_eV" (from the result's energy zero).
    x : (m,) its values in V or eV, in the order in which they were measured.
    conductance_G0 : (m,) conductances in units of 2 e^2/h, contacts and leads in them as measured.
    source : where they come from, for the legend.

    Raises
    ------
    InputError
        Another quantity, columns of different lengths, or numbers that are not finite.
    """

    quantity: str
    x: Array
    conductance_G0: Array
    source: str = "measured"

    def __post_init__(self) -> None:
        checks.choice("quantity", self.quantity, (GATE_VOLTAGE, FERMI_LEVEL))
        for name in ("x", "conductance_G0"):
            values = np.array(getattr(self, name), dtype=float)
            if values.ndim != 1 or not values.size:
                raise InputError(name, "must be a list of numbers", f"shape {values.shape}")
            if not np.isfinite(values).all():
                raise InputError(name, "must be finite")
            values.flags.writeable = False
            object.__setattr__(self, name, values)
        if self.x.shape != self.conductance_G0.shape:
            given = f"{self.x.size} and {self.conductance_G0.size}"
            raise InputError("conductance_G0", "must have one value for each of x", given)

    def on_fermi_axis(self, lever_arm_eV_per_V: float, opens_at_V: float, first_level_eV: float) -> Measured:
        """The same points against the Fermi level: E_F = first level + lever arm x (gate voltage - opening voltage).

        Parameters
        ----------
        lever_arm_eV_per_V : by how much the gate moves the Fermi level from the levels, eV for each V (not zero).
        opens_at_V : the gate voltage at which the first level meets the Fermi level: the middle of the first step.
        first_level_eV : the energy of that level in the result, `result.energies_eV[0]`.

        Raises
        ------
        InputError
            The points are against the Fermi level already, or a number cannot be used.
        """
        self.require(GATE_VOLTAGE)
        lever = checks.finite("lever_arm", lever_arm_eV_per_V)
        if lever == 0:
            raise InputError("lever_arm", "must not be zero: the gate would move nothing", lever)
        opens, first = checks.finite("opens_at", opens_at_V), checks.finite("first_level", first_level_eV)
        return replace(self, quantity=FERMI_LEVEL, x=first + lever * (self.x - opens))

    def require(self, quantity: str) -> None:
        """InputError where `x` is not of the quantity that a figure's axis shows."""
        if self.quantity == quantity:
            return
        if quantity == FERMI_LEVEL:
            rule = "is against a gate voltage, and this staircase is one against the Fermi level"
            remedy = 'give a column "fermi_level_meV", or in Python measured.on_fermi_axis(lever arm, opening, level)'
        else:
            rule = "is against the Fermi level, and this staircase is one against a gate voltage"
            remedy = 'give a column "gate_voltage_V"'
        raise InputError("measured", rule, self.source, remedy)


def read(path: str | Path) -> Measured:
    """Read measured points from a CSV file whose first line names the columns.

    One column is `gate_voltage_V`, `gate_voltage_mV`, `fermi_level_eV` or `fermi_level_meV`, one is `conductance_G0`,
    `conductance_S`, `conductance_uS`, `resistance_ohm` or `resistance_kohm`; other columns are passed over, as are
    lines that begin with #. Columns are separated by commas, semicolons (numbers may then have decimal commas) or tabs.

    Raises
    ------
    InputError
        The file cannot be read, lacks such a column or has several, or a line of it is no row of numbers.
    """
    if not Path(path).exists():
        raise InputError("measured", "there is no such file", str(path))
    file, name = input_files.read("measured", path), Path(path).name
    lines = [(n, text) for n, text in enumerate(file.text("measured").splitlines(), 1) if _counts(text)]
    if not lines:
        raise InputError("measured", "holds no lines", name)
    first = lines[0][1]
    mark = next((m for m in ("\t", ";") if m in first), ",")
    head = [cell.strip() for cell in next(csv.reader([first], delimiter=mark))]
    across, along = _column(head, tuple(_AXES), name), _column(head, (*_CONDUCTANCES, *_RESISTANCES), name)
    rows = [_row(text, mark, (across, along), number) for number, text in lines[1:]]
    if not rows:
        raise InputError("measured", "holds the names of columns and no points", name)
    if len(rows) > MOST_POINTS:
        raise InputError("measured", f"has more than {MOST_POINTS:,} points", remedy="export fewer points")
    x, values = np.array(rows, dtype=float).T
    quantity, unit = _AXES[head[across]]
    # A wire that is pinched off has a resistance without end; nothing else may.
    endless = ~np.isfinite(x) | ((head[along] in _CONDUCTANCES) & ~np.isfinite(values))
    if endless.any():
        place, text = lines[1 + int(np.argmax(endless))]
        raise InputError(
            "measured", f"line {place} holds a number that is not finite", text.strip()[:40], "leave it out"
        )
    if head[along] in _CONDUCTANCES:
        conductance = values * _CONDUCTANCES[head[along]]
    else:
        if (bad := ~(values > 0)).any():
            rule = f"line {lines[1 + int(np.argmax(bad))][0]} holds a resistance that is not positive"
            raise InputError("measured", rule, float(values[bad][0]), "give conductances instead")
        conductance = 1 / (values * _RESISTANCES[head[along]] * CONDUCTANCE_QUANTUM_SIEMENS)
    return Measured(quantity, x * unit, conductance, name)


def write(measured: Measured, path: str | Path) -> None:
    """Write points to a CSV file that `read` understands, where they come from in a comment.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    rows = zip(measured.x.tolist(), measured.conductance_G0.tolist(), strict=True)
    lines = [f"# from {' '.join(measured.source.split())}", f"{measured.quantity},conductance_G0"]
    Path(path).write_text("\n".join([*lines, *(f"{x!r},{y!r}" for x, y in rows)]) + "\n", encoding="utf-8")


def _counts(text: str) -> bool:
    return bool(text.strip()) and not text.lstrip().startswith("#")


def _column(head: Sequence[str], names: Sequence[str], file: str) -> int:
    """The place of the one column that has one of these names."""
    found = [place for place, name in enumerate(head) if name in names]
    if len(found) == 1:
        return found[0]
    if found:
        given = ", ".join(head[place] for place in found)
        raise InputError("measured", "has several columns for one quantity", given, "keep one of them")
    near = next((hint for name in head if (hint := checks.nearest(name, names))), "")
    rule = f"has no column {', '.join(names[:-1])} or {names[-1]} in its first line"
    remedy = near or f"rename the columns in the first line, e.g. {names[0]}"
    raise InputError("measured", rule, ", ".join(head) or file, remedy)


def _row(text: str, mark: str, places: tuple[int, int], number: int) -> tuple[float, float]:
    """The two numbers of a line."""
    cells = next(csv.reader(io.StringIO(text), delimiter=mark))
    try:
        x, value = (_number(cells[place], mark) for place in places)
    except (IndexError, ValueError):
        rule = f"line {number} is no row of numbers under these columns"
        raise InputError("measured", rule, text.strip()[:40], "write e.g. -0.35,1.02") from None
    return x, value


def _number(cell: str, mark: str) -> float:
    """A finite number; the resistance of a wire that is pinched off may be infinite."""
    text = cell.strip()
    if mark == ";" and re.fullmatch(r"[+-]?\d*,\d+(e[+-]?\d+)?", text, re.IGNORECASE):
        text = text.replace(",", ".")
    value = float(text)
    if math.isnan(value):
        raise ValueError
    return value
