"""The wire file: TOML text to a `Problem`, and a `Problem` to exact TOML text."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

from wiresolve.describe import checks
from wiresolve.describe.materials import Material
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.potential import Potential
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import HARD_WALL, VOID, Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Shape, Trapezoid, Triangle
from wiresolve.describe.summary import describe
from wiresolve.describe.tables import Table
from wiresolve.errors import InputError
from wiresolve.units import UNITS, parse_quantity, same_quantity

__all__ = ["describe", "dump", "parse", "read"]

LARGEST_FILE = 1_000_000
TOP_KEYS = ("title", "section", "orientation", "materials", "potential", "carriers", "accuracy")
SHAPES: dict[str, Callable[..., Shape]] = {
    "circle": Circle,
    "ellipse": Ellipse,
    "rectangle": Rectangle,
    "hexagon": Hexagon,
    "triangle": Triangle,
    "trapezoid": Trapezoid,
    "polygon": Polygon,
}
LATER_SHAPES = ("outline", "mesh")
SAMPLE_LENGTHS = {"diameter": '"10 nm"', "width": '"20 nm"', "height": '"10 nm"', "bottom": '"20 nm"', "top": '"10 nm"'}
SECTION_KEYS = ("material", "outside", "layers", "patches", "carriers", "offset", "lattice_temperature")
LAYER_KEYS = ("thickness", "material", "sides", "carriers", "offset")
PATCH_KEYS = ("material", "center", "carriers", "offset")
MATERIAL_KEYS: tuple[str, ...] = ("electron_mass", "inverse_mass", "valley_degeneracy", "conduction_edge")
MATERIAL_KEYS += ("permittivity", "electron_affinity", "source")
_LONG_KEY = re.compile(r"(?:\.[ \t]*[\w\"'-]+[ \t]*){40}")


def read(path: str | Path) -> Problem:
    """The problem that a wire file describes.

    Raises `InputError`, in one line that names the file and the key, for anything that cannot be used.
    """
    file, shown = Path(path), str(path)
    try:
        if not file.exists():
            raise InputError(shown, "there is no such file")
        if not file.is_file():
            raise InputError(shown, "is no file", remedy="give the path of a wire file (TOML)")
        size = file.stat().st_size
        if size > LARGEST_FILE:
            given = f"{size / 1e6:.1f} MB"
            raise InputError(shown, "is too large for a wire file", given, f"at most {LARGEST_FILE / 1e6:g} MB")
        content = file.read_bytes()
    except (OSError, ValueError) as fault:
        if isinstance(fault, InputError):
            raise
        raise InputError(shown, f"cannot be read: {getattr(fault, 'strerror', None) or fault}") from None
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        raise InputError(shown, f"is not UTF-8 text (byte {fault.start + 1})", remedy="save it as UTF-8") from None
    return parse(text, file.parent, shown)


def parse(text: str, folder: str | Path | None = None, name: str = "wire file") -> Problem:
    """The problem that the text of a wire file describes.

    `folder` is what paths in the file are relative to (no key of this version holds a path); `name` is the file's, for
    messages and for the title of a file without one. Raises `InputError` for anything that cannot be used.
    """
    data: dict[str, Any] = {}
    try:
        if len(text) > LARGEST_FILE:
            raise InputError("", "is too large for a wire file", remedy=f"at most {LARGEST_FILE / 1e6:g} MB")
        if not text.strip():
            raise InputError(
                "", "is empty", remedy='a wire file needs at least [section] and [carriers]; see "geometries"'
            )
        data = _toml(text)
        return _problem(Table("", data), name)
    except InputError as error:
        field = f"{name}: {error.field}" if error.field else name
        given = _as_written(data, error.field, error.given)
        raise InputError(field, _printable(error.rule), given, _printable(error.remedy)) from None


def _as_written(data: Any, field: str, given: object) -> object:
    """The quantity that an error shows, in the unit in which the file gives it."""
    value = data
    for key, number in re.findall(r"([^.\[\]]+)|\[(\d{1,6})\]", field):
        if isinstance(value, dict) and key in value:
            value = value[key]
        elif isinstance(value, list) and number and 1 <= int(number) <= len(value):
            value = value[int(number) - 1]
        else:
            return given
    texts = [text for text in (value if isinstance(value, list) else [value]) if isinstance(text, str)]
    return next((t for t in texts if isinstance(given, str) and same_quantity(t, given)), given)


def _printable(text: str) -> str:
    """A text without the control characters that a file may have brought into a message."""
    return "".join(c if c.isprintable() else "?" for c in text)


def _toml(text: str) -> dict[str, Any]:
    if _LONG_KEY.search(text):  # the time that tomllib needs for a dotted key grows with its square
        raise InputError("", "has a key of more than 40 parts")
    try:
        data = tomllib.loads(text)
    except RecursionError:
        raise InputError("", "is nested too deeply") from None
    except ValueError as fault:
        reason = re.sub(r"\s+", " ", str(fault))[:200]
        raise InputError("", f"is not TOML: {reason}", remedy="texts stand in quotes, tables in [brackets]") from None
    _small_numbers(data)
    return data


def _small_numbers(value: object) -> None:
    if isinstance(value, dict):
        for part in value.values():
            _small_numbers(part)
    elif isinstance(value, list):
        for part in value:
            _small_numbers(part)
    elif isinstance(value, int) and abs(value) >= 2**63:
        raise InputError("", "holds a whole number beyond the 64 bits that TOML allows")


_Made = TypeVar("_Made")


def _under(path: str, build: Callable[[], _Made]) -> _Made:
    """What `build` makes; an InputError that it raises gets the table's path before its field."""
    try:
        return build()
    except InputError as error:
        raise error.under(path) from None


def _problem(top: Table, name: str) -> Problem:
    top.only(TOP_KEYS)
    for key in ("section", "carriers"):
        if key not in top:
            raise InputError(key, "is missing", remedy=f"a wire file needs a table [{key}]")
    title = top.text("title") if "title" in top else Path(name).stem or "wire"
    materials = _materials(top.table("materials")) if "materials" in top else ()
    section = _section(top.table("section"))
    orientation = _orientation(top.table("orientation")) if "orientation" in top else None
    potential = _potential(top.table("potential")) if "potential" in top else None
    carriers = _carriers(top.table("carriers"))
    accuracy = _accuracy(top.table("accuracy")) if "accuracy" in top else Accuracy()
    return Problem(title, section, carriers, accuracy, materials, orientation, potential)


def _section(table: Table) -> Section:
    shape = _shape(table, SECTION_KEYS)
    layers = tuple(_layer(entry) for entry in table.tables("layers"))
    patches = tuple(_patch(entry) for entry in table.tables("patches"))
    material, options = _material_name(table), _options(table)
    options["lattice_temperature_K"] = table.optional_quantity("lattice_temperature", "temperature")
    options["outside"] = table.text("outside") if "outside" in table else None
    return _under(table.path, lambda: Section(shape, material, layers, patches, **options))


def _material_name(table: Table) -> str:
    return table.text("material", '"GaAs"')


def _options(table: Table) -> dict[str, Any]:
    found: dict[str, Any] = {}
    if "carriers" in table:
        found["carriers"] = table.data["carriers"]
    offset = table.optional_quantity("offset", "energy")
    return found if offset is None else found | {"offset_eV": offset}


def _shape(table: Table, others: tuple[str, ...]) -> Shape:
    """The shape that a table's keys give; no keys but its own and `others` may stand there."""
    every = {key for keys in LENGTH_KEYS.values() for key in keys} | {"points", "unit", "corner_radius", "rotation"}
    unknown = [key for key in table.data if key not in every and key not in others and key != "shape"]
    kind = table.data.get("shape")
    if isinstance(kind, str) and kind in LATER_SHAPES:
        remedy = "draw it as a polygon of points"
        raise InputError(table.at("shape"), f'shape = "{kind}" comes in a later version', remedy=remedy)
    if kind is None and unknown:
        table.only(("shape", *others, *sorted(every)))
    table.required("shape", '"circle"')
    if not isinstance(kind, str) or kind not in SHAPES:
        checks.choice(table.at("shape"), kind, SHAPES)
    assert isinstance(kind, str)
    own = LENGTH_KEYS[kind]
    options = ("rotation",) if kind in ("circle", "ellipse") else ("corner_radius", "rotation")
    points = ("points", "unit") if kind == "polygon" else ()
    if "corner_radius" in table and "corner_radius" not in options:
        raise InputError(table.at("corner_radius"), f"a {kind} has no corners to round", remedy="take the key out")
    article = "an" if kind[0] in "aeiou" else "a"
    table.only(("shape", *own, *points, *options, *others), f"{article} {kind}")
    values: dict[str, Any] = {}
    for key in own:
        if key in table:
            values[f"{key}_nm"] = table.quantity(key, "length")
        elif kind not in ("hexagon", "triangle"):
            table.required(key, SAMPLE_LENGTHS[key])
    if kind == "polygon":
        values["points_nm"] = _points(table)
    radius, rotation = table.optional_quantity("corner_radius", "length"), table.optional_quantity("rotation", "angle")
    if radius is not None:
        values["corner_radius_nm"] = radius
    if rotation is not None and kind == "circle":
        checks.in_range(table.at("rotation"), rotation, -360, 360, "deg")  # allowed, and without effect
    elif rotation is not None:
        values["rotation_deg"] = rotation
    return _under(table.path, lambda: SHAPES[kind](**values))


def _points(table: Table) -> tuple[tuple[float, float], ...]:
    rows, sample = table.required("points", "[[0, 0], [10, 0], [0, 10]]"), "write points = [[0, 0], [10, 0], [0, 10]]"
    unit = table.text("unit", '"nm"')
    if unit not in UNITS["length"]:
        raise InputError(table.at("unit"), "must be a unit of length", unit, 'write unit = "nm"')
    if not isinstance(rows, list):
        raise InputError(table.at("points"), "must be a list of number pairs", rows, sample)
    points = []
    for k, row in enumerate(rows, 1):
        where = f"{table.at('points')}[{k}]"
        if not isinstance(row, list) or len(row) != 2:
            raise InputError(where, "must be a pair of numbers", row, sample)
        x, y = (checks.finite(where, v, "points are bare numbers, their unit stands once in 'unit'") for v in row)
        if unit != "nm":
            x, y = (parse_quantity(f"{v!r} {unit}", "length", where) for v in (x, y))
        points.append((x, y))
    return tuple(points)


def _layer(table: Table) -> Layer:
    table.only(LAYER_KEYS)
    sides = None
    if "sides" in table:
        named = table.table("sides")
        sides = tuple((edge, named.quantity(edge, "length")) for edge in named.data)
        if not sides:
            raise InputError(named.path, "is empty", remedy='write e.g. sides = {bottom = "0 nm"}')
    thickness, material = table.quantity("thickness", "length", '"5 nm"'), _material_name(table)
    options = _options(table)
    return _under(table.path, lambda: Layer(thickness, material, sides=sides, **options))


def _patch(table: Table) -> Patch:
    shape = _shape(table, PATCH_KEYS)
    center = (0.0, 0.0)
    if "center" in table:
        x, y = (
            parse_quantity(v, "length", f"{table.at('center')}[{k}]")
            for k, v in enumerate(table.row("center", 2, 'two lengths, e.g. ["2 nm", "0 nm"]'), 1)
        )
        center = (x, y)
    material, options = _material_name(table), _options(table)
    return _under(table.path, lambda: Patch(shape, material, center, **options))


def _materials(tables: Table) -> tuple[Material, ...]:
    found = []
    for name in tables.data:
        table = tables.table(name)
        table.only(MATERIAL_KEYS)
        if name in (VOID, HARD_WALL):
            raise InputError(table.path, f"'{name}' has a meaning of its own", remedy="choose another name")
        values: dict[str, Any] = {
            "source": table.text("source") if "source" in table else "",
            "electron_mass": table.data.get("electron_mass"),
            "inverse_mass": table.data.get("inverse_mass"),
            "conduction_edge_eV": table.optional_quantity("conduction_edge", "energy"),
            "permittivity": table.data.get("permittivity"),
            "electron_affinity_eV": table.optional_quantity("electron_affinity", "energy"),
            "valley_degeneracy": table.data.get("valley_degeneracy", 1),
        }
        found.append(_under(table.path, partial(Material.given, name, **values)))
    return tuple(found)


def _orientation(table: Table) -> Orientation:
    table.only(("axis", "up"))
    axis, up = table.required("axis", "[1, 1, 0]"), table.required("up", "[0, 0, 1]")
    return _under(table.path, lambda: Orientation(axis, up))


def _potential(table: Table) -> Potential:
    table.only(("field", "harmonic"))
    along = spacing = None
    if "field" in table:
        row = table.row("field", 2, 'two electric fields, e.g. ["0.01 V/nm", "0 V/nm"]')
        x, y = (parse_quantity(v, "electric field", f"{table.at('field')}[{k}]") for k, v in enumerate(row, 1))
        along = (x, y)
    if "harmonic" in table:
        well = table.table("harmonic")
        well.only(("x", "y"))
        spacing = (well.quantity("x", "energy", '"5 meV"'), well.quantity("y", "energy", '"5 meV"'))
    if along is None and spacing is None:
        raise InputError(table.path, "is empty", remedy="give a field or a harmonic well, or leave the table out")
    return _under(table.path, lambda: Potential(along, spacing))


def _carriers(table: Table) -> Carriers:
    table.only(("kind", "temperature", "fermi_level"))
    given = table.required("temperature", '"300 K"')
    rows = given if isinstance(given, list) else [given]
    where = table.at("temperature")
    places = [f"{where}[{k}]" for k in range(1, len(rows) + 1)] if isinstance(given, list) else [where]
    kelvin = tuple(parse_quantity(t, "temperature", place) for t, place in zip(rows, places, strict=True))
    kind, level = table.data.get("kind", "electrons"), table.optional_quantity("fermi_level", "energy")
    return _under(table.path, lambda: Carriers(kind, temperature_K=kelvin, fermi_level_eV=level))


def _accuracy(table: Table) -> Accuracy:
    table.only(("subbands", "energy"))
    energy, count = table.optional_quantity("energy", "energy"), table.data.get("subbands", 10)
    return _under(table.path, lambda: Accuracy(count, 1e-4 if energy is None else energy))


def dump(problem: Problem) -> str:
    """The wire file of a problem, defaults filled in and quantities exact: `parse` gives a problem of equal digest.

    The table's values that were used stand there as comments. A Python function as potential cannot be written; a
    comment says so.
    """
    lines: list[str] = []
    function = problem.potential is not None and problem.potential.function is not None
    if function:
        lines += ["# The potential is (also) a Python function, which a wire file cannot hold: this file lacks it.", ""]
    _write(lines, "", problem.plain())
    own = {m.name for m in problem.materials}
    cited = [m for name, m in problem.resolved_materials().items() if name not in own]
    if cited:
        lines += ["", "# Values used from the table, at the lattice temperature:"]
        for material in cited:
            for v in material.values:
                sure = "" if v.checked else " (not checked)"
                lines.append(f"#   {material.name} {v.quantity} = {v.value!r} {v.unit}".rstrip() + sure)
    return "\n".join(lines).strip() + "\n"


def _write(lines: list[str], path: str, table: dict[str, Any]) -> None:
    deeper = [key for key, value in table.items() if _is_deeper(key, value)]
    if path and len(deeper) < len(table):
        lines += ["", f"[{path}]"]
    lines += [f"{_key(key)} = {_value(value)}" for key, value in table.items() if key not in deeper]
    for key in deeper:
        here = f"{path}.{_key(key)}" if path else _key(key)
        if isinstance(table[key], dict):
            _write(lines, here, table[key])
        else:
            for entry in table[key]:
                lines += ["", f"[[{here}]]"]
                lines += [f"{_key(k)} = {_value(v)}" for k, v in entry.items()]


def _is_deeper(key: str, value: object) -> bool:
    """Whether a value needs a table header of its own ("sides" and "harmonic" stand on one line)."""
    if isinstance(value, list):
        return bool(value) and isinstance(value[0], dict)
    return isinstance(value, dict) and key not in ("sides", "harmonic")


def _key(key: str) -> str:
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) else _value(key)


def _value(value: object) -> str:
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, dict):
        return "{" + ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(_value(v) for v in value) + "]"
    return repr(value)
