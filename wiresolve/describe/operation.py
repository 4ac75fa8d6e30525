"""How a device is run: the sweep of a gate's voltage, the drain's voltages, and what scatters on the way."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from wiresolve.describe import checks
from wiresolve.describe.gates import HIGHEST_V
from wiresolve.errors import InputError

MOST_POINTS = 10_000
MOST_DRAINS = 100
MOST_TRANSMISSIONS = 500
LONGEST_CHANNEL_nm = 1e9
LARGEST_RESISTANCE_ohm = 1e12
LARGEST_SADDLE_eV = 1.0


@dataclass(frozen=True)
class Voltages:
    """A sweep of one gate's voltage in equal steps, at each of the drain's voltages."""

    gate: str
    from_V: float
    to_V: float
    count: int
    drain_V: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        checks.text("gate", self.gate, 60)
        for key in ("from", "to"):
            set_(self, f"{key}_V", checks.in_range(key, getattr(self, f"{key}_V"), -HIGHEST_V, HIGHEST_V, "V"))
        set_(self, "count", checks.whole("count", self.count, 2, MOST_POINTS))
        if self.from_V == self.to_V:
            raise InputError("to", "is the voltage at which the sweep begins", f"{self.to_V:g} V", "give another one")
        given: Any = self.drain_V
        row = tuple(given) if isinstance(given, Sequence) and not isinstance(given, str) else (given,)
        if len(row) > MOST_DRAINS:
            raise InputError("drain", f"must be at most {MOST_DRAINS} voltages", f"{len(row)} of them")
        drains = tuple(checks.in_range("drain", v, 0, HIGHEST_V, "V") for v in row)
        if len(set(drains)) < len(drains):
            raise InputError("drain", "the same voltage is given twice", list(drains))
        set_(self, "drain_V", drains)

    @property
    def points(self) -> tuple[float, ...]:
        """The gate's voltages in V, from the first to the last."""
        last, size = self.count - 1, max(abs(self.from_V), abs(self.to_V))
        # Twelve digits: 0.3 V, not 0.29999999999999993 V; and 0 V, not -3e-17 V.
        exact = [(self.from_V * (last - k) + self.to_V * k) / last for k in range(self.count)]
        return tuple(float(f"{v:.12g}") if abs(v) > 1e-12 * size else 0.0 for v in exact)


@dataclass(frozen=True)
class Transport:
    """What an electron meets between source and drain.

    Its transmission is 1, unless it is given (`transmission`: one number for all subbands, or one for each, the last
    for all further ones), follows from `length_nm` and `mean_free_path_nm`, or from a saddle-shaped constriction with
    `saddle_curvature_eV` (hbar omega along the wire). `contact_resistance_ohm` of both contacts together is in series.
    """

    length_nm: float | None = None
    mean_free_path_nm: float | None = None
    transmission: tuple[float, ...] | None = None
    saddle_curvature_eV: float | None = None
    contact_resistance_ohm: float = 0.0

    @property
    def is_open(self) -> bool:
        """Whether everything is transmitted, and contacts add no resistance."""
        ways = (self.mean_free_path_nm, self.transmission, self.saddle_curvature_eV)
        return all(way is None for way in ways) and self.contact_resistance_ohm == 0

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        shortest, far = checks.SHORTEST_nm, LONGEST_CHANNEL_nm
        set_(self, "length_nm", checks.optional("length", self.length_nm, shortest, far, "nm"))
        path = checks.optional("mean_free_path", self.mean_free_path_nm, shortest, far, "nm")
        set_(self, "mean_free_path_nm", path)
        if self.transmission is not None:
            given: Any = self.transmission
            row = tuple(given) if isinstance(given, Sequence) and not isinstance(given, str) else (given,)
            if not 1 <= len(row) <= MOST_TRANSMISSIONS:
                rule = f"must be a number, or a list of one to {MOST_TRANSMISSIONS}"
                raise InputError("transmission", rule, f"{len(row)} of them")
            set_(self, "transmission", tuple(checks.in_range("transmission", t, 0, 1) for t in row))
        saddle = checks.optional("saddle", self.saddle_curvature_eV, 1e-9, LARGEST_SADDLE_eV, "eV")
        set_(self, "saddle_curvature_eV", saddle)
        resistance = checks.in_range(
            "contact_resistance", self.contact_resistance_ohm, 0, LARGEST_RESISTANCE_ohm, "ohm"
        )
        set_(self, "contact_resistance_ohm", resistance)
        ways = {"mean_free_path": path, "transmission": self.transmission, "saddle": saddle}
        used = [name for name, value in ways.items() if value is not None]
        if len(used) > 1:
            rule = f"is given beside {used[0]}: each says what is transmitted"
            raise InputError(used[1], rule, remedy="keep one of them")
        if self.length_nm is not None and path is None and self.transmission is None:
            rule = "is missing: a length alone does not say what is transmitted"
            remedy = 'write e.g. mean_free_path = "200 nm", or transmission = 1 for a ballistic channel'
            raise InputError("mean_free_path", rule, remedy=remedy)
        if path is not None and self.length_nm is None:
            raise InputError("length", "is missing beside a mean free path", remedy='write e.g. length = "100 nm"')
