"""A user's own materials as tables of TOML: in the wire file, or in a file of their own."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

from wiresolve.describe import input_files, toml_text
from wiresolve.describe.material import WIRE_FILE, Material, Valley
from wiresolve.describe.section import HARD_WALL, VOID
from wiresolve.describe.tables import Table
from wiresolve.errors import InputError

LARGEST_FILE = 1_000_000
MASS_KEYS = ("electron_mass", "inverse_mass", "valleys", "valley_degeneracy", "nonparabolicity")
VALUE_KEYS = (
    "conduction_edge",
    "permittivity",
    "electron_affinity",
    "lattice_constant",
    "lattice_constant_c",
    "crystal",
)
WHOLE_KEYS = ("valley_degeneracy", "gap")
"""Keys of a material that is described whole: they cannot replace a value of one in the table."""
MATERIAL_KEYS = (*MASS_KEYS, *VALUE_KEYS, "gap", "extends", "source", "given_in")
VALLEY_KEYS: tuple[str, ...] = (
    "name",
    "axis",
    "longitudinal_mass",
    "transverse_mass",
    "edge",
    "nonparabolicity",
    "zone_boundary",
)
VALLEY_KEYS += ("inverse_mass", "degeneracy")

_Made = TypeVar("_Made")


def read(where: str, path: str | Path, folder: str | Path | None = None) -> tuple[Material, ...]:
    """The materials of a TOML file, one table each, every one with its source.

    Raises `InputError` about the key `where`, the file and the key in it.
    """
    file = input_files.read(where, path, folder, LARGEST_FILE)
    try:
        data = toml_text.parse(file.text(""))
        if not data:
            raise InputError("", "holds no material", remedy="write a table [NAME] with its values and their source")
        if isinstance(wrapped := data.get("materials"), dict) and any(isinstance(v, dict) for v in wrapped.values()):
            name = next(name for name, value in wrapped.items() if isinstance(value, dict))
            rule = "in a file of materials each has a table of its own name"
            raise InputError("materials", rule, f"[materials.{name}]", f"write [{name}]")
        return materials(Table("", data), file.name, sourced=True)
    except InputError as error:
        field = f"{where}: {file.name}: {error.field}" if error.field else f"{where}: {file.name}"
        raise InputError(field, error.rule, error.given, error.remedy) from None


def materials(tables: Table, given_in: str = WIRE_FILE, sourced: bool = False) -> tuple[Material, ...]:
    """The materials that the sub-tables of a table describe; with `sourced` each has to name its source."""
    found = []
    for name in tables.data:
        table = tables.table(name)
        table.only(MATERIAL_KEYS, f"[{table.path}], a material")
        if name in (VOID, HARD_WALL):
            raise InputError(table.path, f"'{name}' has a meaning of its own", remedy="choose another name")
        if sourced:
            table.required("source", '"where the values are from"')
        found.append(_material(table, name, given_in))
    return tuple(found)


def _material(table: Table, name: str, given_in: str) -> Material:
    values: dict[str, Any] = {
        "source": table.text("source", longest=500) if "source" in table else "",
        "given_in": table.text("given_in", longest=300) if "given_in" in table else given_in,
        "electron_mass": table.data.get("electron_mass"),
        "inverse_mass": table.data.get("inverse_mass"),
        "nonparabolicity_per_eV": table.data.get("nonparabolicity"),
        "conduction_edge_eV": table.optional_quantity("conduction_edge", "energy"),
        "permittivity": table.data.get("permittivity"),
        "electron_affinity_eV": table.optional_quantity("electron_affinity", "energy"),
        "lattice_constant_nm": table.optional_quantity("lattice_constant", "length"),
        "lattice_constant_c_nm": table.optional_quantity("lattice_constant_c", "length"),
        "crystal": table.data.get("crystal"),
    }
    if "valleys" in table:
        values["valleys"] = [_valley(entry) for entry in table.tables("valleys")]
    if "extends" in table:
        for key in WHOLE_KEYS:
            if key in table:
                rule = "cannot be replaced in a material that extends another"
                raise InputError(table.at(key), rule, remedy="take one of the two out")
        return _under(table.path, partial(Material.extending, name, table.text("extends"), **values))
    values["valley_degeneracy"] = table.data.get("valley_degeneracy")
    values["gap_eV"] = table.optional_quantity("gap", "energy")
    return _under(table.path, partial(Material.given, name, **values))


def _valley(table: Table) -> Valley:
    table.only(VALLEY_KEYS, "a valley")
    edge, axis = table.optional_quantity("edge", "energy"), table.data.get("axis")
    return _under(
        table.path,
        partial(
            Valley,
            table.text("name", '"Delta"'),
            0.0 if edge is None else edge,
            table.data.get("longitudinal_mass"),
            table.data.get("transverse_mass"),
            axis,
            table.data.get("zone_boundary", False),
            table.data.get("inverse_mass", ()),
            table.data.get("degeneracy"),
            table.data.get("nonparabolicity"),
        ),
    )


def _under(path: str, build: Callable[[], _Made]) -> _Made:
    """What `build` makes; an InputError that it raises gets the table's path before its field."""
    try:
        return build()
    except InputError as error:
        raise error.under(path) from None
