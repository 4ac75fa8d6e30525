"""A table of a wire file while it is read: typed access to its keys, with errors that name the key's whole path."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import Any, TypeVar

from wiresolve.describe import checks
from wiresolve.errors import InputError
from wiresolve.units import parse_quantity

_Made = TypeVar("_Made")

SLIPS: Mapping[str, tuple[tuple[str, ...], ...]] = {
    "radius": (("diameter",), ("corner_radius",)),
    "diameter": (("across_flats", "across_corners"), ("side",), ("width", "height")),
    "size": (("diameter",), ("across_flats", "across_corners"), ("side",), ("width", "height")),
    "width": (("diameter",), ("across_flats", "across_corners"), ("base",), ("bottom", "top")),
    "height": (("diameter",), ("across_flats",)),
    "side": (("diameter",), ("across_corners",), ("width", "height"), ("bottom", "top")),
    "angle": (("rotation",),),
    "temp": (("temperature",), ("lattice_temperature",)),
    "mass": (("electron_mass",),),
    "states": (("subbands",),),
    "fermi_energy": (("fermi_level",),),
    "chemical_potential": (("fermi_level",),),
    "doping": (("donors", "acceptors"),),
    "effective_mass": (("electron_mass",),),
}
"""Keys that are written by mistake, and what may be meant: the first row of keys that the table all allows."""
TWICE = {("radius", "diameter"), ("side", "across_corners")}
"""Slips whose length is half of the one meant."""
HOMES: Mapping[str, str] = {
    "layers": "[[section.layers]]",
    "patches": "[[section.patches]]",
    "shape": "[section]",
    "material": "[section]",
    "outside": "[section]",
    "temperature": "[carriers]",
    "fermi_level": "[carriers]",
    "subbands": "[accuracy]",
    "gates": "[[gates]]",
    "surfaces": "[[surfaces]]",
    "surroundings": "[surroundings]",
    "voltages": "[voltages]",
    "transport": "[transport]",
    "donors": "[section]",
    "acceptors": "[section]",
    "insulator": "[[gates]]",
    "beside": "[surroundings]",
    "mean_free_path": "[transport]",
}
"""Where keys belong that stand in another table, or above all tables."""


@dataclass(frozen=True)
class Table:
    """A TOML table with its path in the file ("section.layers[1]"; list entries count from 1)."""

    path: str
    data: Mapping[str, Any]

    def at(self, key: str) -> str:
        """The path of one of its keys."""
        shown = key if key.isprintable() and key else ascii(key)
        return f"{self.path}.{shown}" if self.path else shown

    def only(self, allowed: Iterable[str], of: str = "") -> None:
        """InputError for any other key, with the nearest allowed ones."""
        words = tuple(allowed)
        for key in self.data:
            if key in words:
                continue
            near = self._meant(key, words)
            near += " " if near.endswith("?") else "; " if near else ""
            known = ("allowed are " if near else "its keys are ") + ", ".join(words)
            rule = f"is no key of {of or (f'[{self.path}]' if self.path else 'a wire file')}"
            raise InputError(self.at(key)[:120], rule, remedy=near + known)

    def _meant(self, key: str, allowed: tuple[str, ...]) -> str:
        """What is proposed for a key that may not stand here, or an empty text."""
        if key == "title":
            return "write it above the first table"
        if key in HOMES:
            home = HOMES[key]
            return f"write {home}" if home.startswith("[[") else f"it belongs in {home}"
        for meant in SLIPS.get(key, ()):
            if all(word in allowed for word in meant):
                twice = f" (twice the {key})" if (key, meant[0]) in TWICE else ""
                return checks.did_you_mean(meant) + twice
        return checks.nearest(key, allowed)

    def __contains__(self, key: str) -> bool:
        return key in self.data

    def required(self, key: str, sample: str = "") -> Any:
        """The key's value; InputError where it is missing."""
        if key not in self.data:
            raise InputError(self.at(key), "is missing", remedy=f"write e.g. {key} = {sample}" if sample else "")
        return self.data[key]

    def quantity(self, key: str, dimension: str, sample: str = "") -> float:
        """A required quantity in internal units."""
        return parse_quantity(self.required(key, sample), dimension, self.at(key))

    def optional_quantity(self, key: str, dimension: str) -> float | None:
        """A quantity in internal units, or None where the key is missing."""
        return parse_quantity(self.data[key], dimension, self.at(key)) if key in self.data else None

    def text(self, key: str, sample: str = "", longest: int = 200) -> str:
        """A required text."""
        return checks.text(self.at(key), self.required(key, sample), longest)

    def row(self, key: str, count: int, what: str) -> list[Any]:
        """A required list with `count` entries."""
        value = self.required(key)
        if not isinstance(value, list) or len(value) != count:
            raise InputError(self.at(key), f"must be a list of {what}", value)
        return value

    def table(self, key: str) -> Table:
        """A sub-table."""
        value = self.data[key]
        if not isinstance(value, dict):
            given = "a list of tables" if isinstance(value, list) else value
            # A table in an entry of a list has no [heading] that TOML knows.
            listed = "[" in self.path
            remedy = f"write {key} = {{...}} with its keys inside" if listed else f"write [{self.at(key)}] once"
            raise InputError(self.at(key), "must be one table", given, remedy)
        return Table(self.at(key), value)

    def tables(self, key: str) -> list[Table]:
        """The entries of an array of tables; none where the key is missing."""
        value = self.data.get(key, [])
        if not isinstance(value, list) or not all(isinstance(entry, dict) for entry in value):
            given = "a table" if isinstance(value, dict) else value
            raise InputError(self.at(key), "must be a list of tables", given, f"write [[{self.at(key)}]] for each")
        return [Table(f"{self.at(key)}[{k}]", entry) for k, entry in enumerate(value, 1)]


def under(path: str, build: Callable[[], _Made]) -> _Made:
    """What `build` makes; an InputError that it raises gets the table's path before its field."""
    try:
        return build()
    except InputError as error:
        raise error.under(path) from None
