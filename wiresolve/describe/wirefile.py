"""The wire file: TOML text to a `Problem`, and a `Problem` to exact TOML text."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

from wiresolve.describe import checks, gate_tables, material_file, toml_text
from wiresolve.describe.gate_tables import DEVICE_KEYS, DOPING_KEYS
from wiresolve.describe.material import Material
from wiresolve.describe.potential import Potential
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shape_tables import POTENTIAL_FILE_KEYS, DrawFile, Files, groups, potential_file, shape, under
from wiresolve.describe.summary import describe
from wiresolve.describe.tables import Table
from wiresolve.errors import InputError
from wiresolve.units import parse_quantity, same_quantity

__all__ = ["describe", "dump", "parse", "read"]

LARGEST_FILE = 1_000_000
TOP_KEYS = (
    *("title", "materials_file", "section", "orientation", "materials", "potential", "carriers", "accuracy"),
    *DEVICE_KEYS,
)
SECTION_KEYS = ("material", "outside", "layers", "patches", "carriers", "offset", "lattice_temperature", *DOPING_KEYS)
LAYER_KEYS = ("thickness", "material", "sides", "carriers", "offset", *DOPING_KEYS)
PATCH_KEYS = ("material", "center", "carriers", "offset", *DOPING_KEYS)
ORIENTATION_KEYS = ("axis", "up")
POTENTIAL_KEYS = ("field", "harmonic", *POTENTIAL_FILE_KEYS)
HARMONIC_KEYS = ("x", "y")
CARRIER_KEYS = ("kind", "temperature", "fermi_level", "model", "interaction")
ACCURACY_KEYS = ("subbands", "energy")


def read(path: str | Path, draw: DrawFile | None = None) -> Problem:
    """The problem that a wire file describes; `draw` is what meshes a geometry (STEP and the like) that it names.

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
    return parse(text, file.parent, shown, draw)


def parse(
    text: str, folder: str | Path | None = None, name: str = "wire file", draw: DrawFile | None = None
) -> Problem:
    """The problem that the text of a wire file describes.

    `folder` is what paths in the file are relative to; `name` is the file's, for messages and for the title of a file
    without one. Raises `InputError` for anything that cannot be used.
    """
    data: dict[str, Any] = {}
    try:
        if len(text) > LARGEST_FILE:
            raise InputError("", "is too large for a wire file", remedy=f"at most {LARGEST_FILE / 1e6:g} MB")
        if not text.strip():
            raise InputError(
                "", "is empty", remedy='a wire file needs at least [section] and [carriers]; see "geometries"'
            )
        data = toml_text.parse(text)
        return _problem(Table("", data), name, Files(folder, draw))
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


def _problem(top: Table, name: str, files: Files) -> Problem:
    top.only(TOP_KEYS)
    for key in ("section", "carriers"):
        if key not in top:
            raise InputError(key, "is missing", remedy=f"a wire file needs a table [{key}]")
    title = top.text("title") if "title" in top else Path(name).stem or "wire"
    materials = _materials(top, files.folder)
    section = _section(top.table("section"), files)
    orientation = _orientation(top.table("orientation")) if "orientation" in top else None
    potential = _potential(top.table("potential"), files) if "potential" in top else None
    carriers = _carriers(top.table("carriers"))
    accuracy = _accuracy(top.table("accuracy")) if "accuracy" in top else Accuracy()
    device = gate_tables.device(top)
    return Problem(title, section, carriers, accuracy, materials, orientation, potential, **device)


def _section(table: Table, files: Files) -> Section:
    drawn = shape(table, SECTION_KEYS, files)
    layers = tuple(_layer(entry) for entry in table.tables("layers"))
    patches = tuple(_patch(entry, files) for entry in table.tables("patches"))
    options = _options(table)
    if drawn.kind == "mesh":
        material, options["groups"] = "", groups(table)
    else:
        material = _material_name(table)
    options["lattice_temperature_K"] = table.optional_quantity("lattice_temperature", "temperature")
    options["outside"] = table.text("outside") if "outside" in table else None
    return under(table.path, lambda: Section(drawn, material, layers, patches, **options))


def _material_name(table: Table) -> str:
    return table.text("material", '"GaAs"')


def _options(table: Table) -> dict[str, Any]:
    found: dict[str, Any] = {"doping": gate_tables.doping(table)}
    if "carriers" in table:
        found["carriers"] = table.data["carriers"]
    offset = table.optional_quantity("offset", "energy")
    return found if offset is None else found | {"offset_eV": offset}


def _layer(table: Table) -> Layer:
    table.only(LAYER_KEYS)
    sides = None
    if "sides" in table:
        named = table.table("sides")
        sides = tuple((edge, named.quantity(edge, "length")) for edge in named.data)
        if not sides:
            raise InputError(named.path, "is empty", remedy='write e.g. sides = {bottom = "0 nm"}')
    # Without a thickness a layer reaches to the next curve of an outline: the section knows whether there is one.
    thickness, material = table.optional_quantity("thickness", "length"), _material_name(table)
    options = _options(table)
    return under(table.path, lambda: Layer(thickness, material, sides=sides, **options))


def _patch(table: Table, files: Files) -> Patch:
    drawn = shape(table, PATCH_KEYS, files)
    center = (0.0, 0.0)
    if "center" in table:
        x, y = (
            parse_quantity(v, "length", f"{table.at('center')}[{k}]")
            for k, v in enumerate(table.row("center", 2, 'two lengths, e.g. ["2 nm", "0 nm"]'), 1)
        )
        center = (x, y)
    material, options = _material_name(table), _options(table)
    return under(table.path, lambda: Patch(drawn, material, center, **options))


def _materials(top: Table, folder: str | Path | None) -> tuple[Material, ...]:
    """The user's own materials: those of the wire file and those of the files that it names."""
    found = list(material_file.materials(top.table("materials"))) if "materials" in top else []
    given = top.data.get("materials_file", [])
    paths = given if isinstance(given, list) else [given]
    for k, path in enumerate(paths, 1):
        where = f"materials_file[{k}]" if isinstance(given, list) else "materials_file"
        more = material_file.read(where, checks.text(where, path, 1000), folder)
        for material in more:
            twice = next((m for m in found if m.name == material.name), None)
            if twice is not None:
                rule = f"describes '{material.name}', which {twice.given_in} describes too"
                raise InputError(where, rule, path, "take one of the two out, or give one another name")
        found += more
    return tuple(found)


def _orientation(table: Table) -> Orientation:
    table.only(ORIENTATION_KEYS)
    axis, up = table.required("axis", "[1, 1, 0]"), table.required("up", "[0, 0, 1]")
    return under(table.path, lambda: Orientation(axis, up))


def _potential(table: Table, files: Files) -> Potential:
    table.only(POTENTIAL_KEYS)
    along = spacing = None
    if "field" in table:
        row = table.row("field", 2, 'two electric fields, e.g. ["0.01 V/nm", "0 V/nm"]')
        x, y = (parse_quantity(v, "electric field", f"{table.at('field')}[{k}]") for k, v in enumerate(row, 1))
        along = (x, y)
    if "harmonic" in table:
        well = table.table("harmonic")
        well.only(HARMONIC_KEYS)
        spacing = (well.quantity("x", "energy", '"5 meV"'), well.quantity("y", "energy", '"5 meV"'))
    given = potential_file(table, files)
    if along is None and spacing is None and given is None:
        raise InputError(
            table.path, "is empty", remedy="give a field, a harmonic well or a file, or leave the table out"
        )
    return under(table.path, lambda: Potential(along, spacing, file=given))


def _carriers(table: Table) -> Carriers:
    table.only(CARRIER_KEYS)
    given = table.required("temperature", '"300 K"')
    rows = given if isinstance(given, list) else [given]
    where = table.at("temperature")
    places = [f"{where}[{k}]" for k in range(1, len(rows) + 1)] if isinstance(given, list) else [where]
    kelvin = tuple(parse_quantity(t, "temperature", place) for t, place in zip(rows, places, strict=True))
    kind, level = table.data.get("kind", "electrons"), table.optional_quantity("fermi_level", "energy")
    options = {key: table.data[key] for key in ("model", "interaction") if key in table}
    return under(table.path, lambda: Carriers(kind, temperature_K=kelvin, fermi_level_eV=level, **options))


def _accuracy(table: Table) -> Accuracy:
    table.only(ACCURACY_KEYS)
    energy, count = table.optional_quantity("energy", "energy"), table.data.get("subbands", 10)
    return under(table.path, lambda: Accuracy(count, 1e-4 if energy is None else energy))


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
                sure = "" if v.checked else f" ({v.standing})"
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
    """Whether a value needs a table header of its own ("sides", "harmonic", "below" and "above" stand on one line)."""
    if isinstance(value, list):
        return bool(value) and isinstance(value[0], dict) and key not in ("below", "above")
    return isinstance(value, dict) and key not in ("sides", "harmonic")


def _key(key: str) -> str:
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) else _value(key)


def _value(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, dict):
        return "{" + ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(_value(v) for v in value) + "]"
    return repr(value)
