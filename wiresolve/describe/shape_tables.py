"""Tables of a wire file that give a shape by sizes, points or a file, and files of potentials."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from wiresolve.describe import checks, input_files
from wiresolve.describe.gate_tables import DOPING_KEYS, doping
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import MeshData
from wiresolve.describe.mesh_shape import CAD, ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.potential_file import PotentialFile
from wiresolve.describe.section import Group
from wiresolve.describe.shapes import Circle, Ellipse, Hexagon, Polygon, Rectangle, Shape, Trapezoid, Triangle
from wiresolve.describe.tables import Table
from wiresolve.describe.tables import under as under  # for those who take it from here
from wiresolve.errors import InputError
from wiresolve.units import UNITS, parse_quantity

DrawFile = Callable[[InputFile], MeshData]
"""What meshes a file that holds a geometry and no mesh."""
SHAPES: dict[str, Callable[..., Shape]] = {
    "circle": Circle,
    "ellipse": Ellipse,
    "rectangle": Rectangle,
    "hexagon": Hexagon,
    "triangle": Triangle,
    "trapezoid": Trapezoid,
    "polygon": Polygon,
}
SAMPLE_LENGTHS = {"diameter": '"10 nm"', "width": '"20 nm"', "height": '"10 nm"', "bottom": '"20 nm"', "top": '"10 nm"'}
MESH_KEYS = ("file", "unit", "array", "rotation", "group_materials")
OUTLINE_KEYS = ("file", "unit", "scale", "pixel_size", "y_down", "rotation")
POTENTIAL_FILE_KEYS = ("file", "length_unit", "energy_unit", "array", "origin")
GROUP_KEYS = ("material", "carriers", "offset", *DOPING_KEYS)


@dataclass(frozen=True)
class Files:
    """Where the files lie that a wire file names, and what meshes a geometry."""

    folder: str | Path | None = None
    draw: DrawFile | None = None

    def read(self, table: Table, key: str = "file") -> InputFile:
        """The file that a key names."""
        where = table.at(key)
        path = checks.text(where, table.required(key, '"section.msh"'), 1000)
        if self.folder is None and not Path(path).is_absolute():
            remedy = "give the text's folder, or read the wire file itself"
            raise InputError(where, "names a file, and this text has no folder to look in", path, remedy)
        return input_files.read(where, path, self.folder)


def keys_of(shape: str, others: tuple[str, ...]) -> tuple[str, ...]:
    """The keys of a table with a shape, which has the keys `others` whatever its shape is."""
    if shape == "mesh":
        # What it is made of is said group by group.
        return ("shape", *MESH_KEYS, *(key for key in others if key not in GROUP_KEYS))
    if shape == "outline":
        return ("shape", *OUTLINE_KEYS, *others)
    corners = () if shape in ("circle", "ellipse") else ("corner_radius",)
    points = ("points", "unit") if shape == "polygon" else ()
    return ("shape", *LENGTH_KEYS[shape], *points, *corners, "rotation", *others)


def shape(table: Table, others: tuple[str, ...], files: Files) -> Shape:
    """The shape that a table's keys give; no keys but its own and `others` may stand there."""
    every = {key for keys in LENGTH_KEYS.values() for key in keys} | {"points", "unit", "corner_radius", "rotation"}
    every |= {*MESH_KEYS, *OUTLINE_KEYS}
    unknown = [key for key in table.data if key not in every and key not in others and key != "shape"]
    kind = table.data.get("shape")
    if kind == "mesh":
        return _mesh(table, others, files)
    if kind == "outline":
        return _outline(table, others, files)
    if kind is None and unknown:
        table.only(("shape", *others, *sorted(every)))
    table.required("shape", '"circle"')
    if not isinstance(kind, str) or kind not in SHAPES:
        checks.choice(table.at("shape"), kind, (*SHAPES, "outline", "mesh"), checks.SHAPE_WORDS)
    assert isinstance(kind, str)
    own, allowed = LENGTH_KEYS[kind], keys_of(kind, others)
    if "corner_radius" in table and "corner_radius" not in allowed:
        raise InputError(table.at("corner_radius"), f"a {kind} has no corners to round", remedy="take the key out")
    article = "an" if kind[0] in "aeiou" else "a"
    table.only(allowed, f"{article} {kind}")
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
    return under(table.path, lambda: SHAPES[kind](**values))


def _points(table: Table) -> tuple[tuple[float, float], ...]:
    rows, sample = table.required("points", "[[0, 0], [10, 0], [0, 10]]"), "write points = [[0, 0], [10, 0], [0, 10]]"
    unit = _unit(table)
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


def _mesh(table: Table, others: tuple[str, ...], files: Files) -> ImportedMesh:
    if "group_materials" not in others and "layers" not in others:
        remedy = "use it as the section's shape, and paint patches over it"
        raise InputError(table.at("shape"), "a mesh cannot be a patch", remedy=remedy)
    table.only(keys_of("mesh", others), "a mesh")
    file, unit = files.read(table), _unit(table)
    array = table.text("array", '"region"') if "array" in table else None
    rotation = table.optional_quantity("rotation", "angle") or 0.0
    meshed = None
    if file.suffix in CAD and files.draw is not None:
        draw = files.draw
        meshed = under(table.path, lambda: draw(file))
    return under(table.path, lambda: ImportedMesh(file, unit, array, rotation, meshed))


def groups(table: Table) -> tuple[Group, ...]:
    """What the groups of a mesh are made of."""
    if "group_materials" not in table:
        remedy = "write a table [section.group_materials] with a material for each group"
        raise InputError(
            table.at("group_materials"), "is missing: a mesh has regions, and they have materials", remedy=remedy
        )
    given = table.table("group_materials")
    found = []
    for name, value in given.data.items():
        if not isinstance(value, dict):
            material = checks.text(given.at(name), value)
            found.append(under(given.at(name), lambda n=name, m=material: Group(n, m)))  # type: ignore[misc]
            continue
        one = given.table(name)
        one.only(GROUP_KEYS)
        options: dict[str, Any] = {"material": one.text("material", '"GaAs"')}
        if "carriers" in one:
            options["carriers"] = one.data["carriers"]
        offset = one.optional_quantity("offset", "energy")
        options["offset_eV"] = 0.0 if offset is None else offset
        options["doping"] = doping(one)
        found.append(under(one.path, lambda n=name, o=options: Group(n, **o)))  # type: ignore[misc]
    return tuple(found)


def _outline(table: Table, others: tuple[str, ...], files: Files) -> Outline:
    table.only(keys_of("outline", others), "an outline")
    file = files.read(table)
    if ("unit" in table) == ("scale" in table):
        rule, remedy = "is given beside a unit: an outline needs one of them, not both", "take one of the two out"
        if "scale" not in table:
            rule = "is missing: an outline needs the unit of its numbers, or the scale, the length of one of them"
            remedy = 'write e.g. unit = "nm", or scale = "0.42 nm"'
        raise InputError(table.at("scale"), rule, remedy=remedy)
    values: dict[str, Any] = {}
    if "unit" in table:
        values["scale_nm"] = float(UNITS["length"][_unit(table)])
    else:
        values["scale_nm"] = values["pixel_nm"] = table.quantity("scale", "length")
    if (pixel := table.optional_quantity("pixel_size", "length")) is not None:
        values["pixel_nm"] = pixel
    if "y_down" in table:
        values["y_down"] = table.data["y_down"]
    values["rotation_deg"] = table.optional_quantity("rotation", "angle") or 0.0
    return under(table.path, lambda: Outline(file, **values))


def _unit(table: Table) -> str:
    unit = table.text("unit", '"nm"')
    if unit not in UNITS["length"]:
        raise InputError(table.at("unit"), "must be a unit of length", unit, 'write unit = "nm"')
    return unit


def potential_file(table: Table, files: Files) -> PotentialFile | None:
    """The file that a table of a potential names; None where it names none."""
    if "file" not in table:
        if extra := [key for key in POTENTIAL_FILE_KEYS if key in table]:
            raise InputError(
                table.at(extra[0]), "belongs to a file, and none is given", remedy='write file = "phi.csv"'
            )
        return None
    file = files.read(table)
    length, energy = table.text("length_unit", '"nm"'), table.text("energy_unit", '"eV"')
    array = table.text("array", '"phi"') if "array" in table else None
    origin = table.text("origin", '"section"') if "origin" in table else None
    return under(table.path, lambda: PotentialFile(file, length, energy, array, origin))
