"""The parts of a problem as plain nested data in the words of the wire file, for its text and its digest."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from wiresolve.describe.input_files import InputFile
from wiresolve.describe.material import LIMITS, WIRE_FILE, ZONE_CENTRE, Material, Valley
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.plain_device import of_doping
from wiresolve.describe.potential import Potential
from wiresolve.describe.section import HARD_WALL, Group, Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Cornered, Polygon, Shape
from wiresolve.units import format_quantity

NameFile = Callable[[InputFile], str]
"""What stands for a file: its path beside the wire file, or its content's digest."""
LENGTH_KEYS = {
    "circle": ("diameter",),
    "ellipse": ("width", "height"),
    "rectangle": ("width", "height"),
    "hexagon": ("across_flats", "across_corners"),
    "triangle": ("side", "base", "height"),
    "trapezoid": ("bottom", "top", "height"),
    "polygon": (),
    "outline": (),
    "mesh": (),
}
"""The lengths by which each shape is given."""


def of_section(section: Section, lattice_temperature_K: float, named: NameFile) -> dict[str, Any]:
    """A section as nested dicts, lists, texts and numbers; quantities as exact texts with the internal unit."""
    found = _of_shape(section.shape, named)
    if section.groups:
        found["group_materials"] = {g.name: {"material": g.material} | _of_options(g) for g in section.groups}
    else:
        found |= {"material": section.material, "carriers": section.carriers}
        found["offset"] = format_quantity(section.offset_eV, "energy")
        found |= of_doping(section.doping)
    found["outside"] = section.outside or HARD_WALL
    found["lattice_temperature"] = format_quantity(lattice_temperature_K, "temperature")
    if section.layers:
        found["layers"] = [_of_layer(layer) for layer in section.layers]
    if section.patches:
        found["patches"] = [_of_patch(patch, named) for patch in section.patches]
    return found


def _of_shape(shape: Shape, named: NameFile) -> dict[str, Any]:
    found: dict[str, Any] = {"shape": shape.kind}
    if isinstance(shape, ImportedMesh | Outline):
        found["file"] = named(shape.file)
    if isinstance(shape, ImportedMesh):
        found |= {"unit": shape.unit} | ({} if shape.array is None else {"array": shape.array})
    if isinstance(shape, Outline):
        found |= {"scale": format_quantity(shape.scale_nm, "length"), "y_down": shape.y_down}
        found["pixel_size"] = format_quantity(shape.pixel_nm, "length")
    for key in LENGTH_KEYS[shape.kind]:
        value = getattr(shape, f"{key}_nm")
        if value is not None:
            found[key] = format_quantity(value, "length")
    if isinstance(shape, Polygon):
        found |= {"unit": "nm", "points": [list(point) for point in shape.points_nm]}
    if isinstance(shape, Cornered):
        found["corner_radius"] = format_quantity(shape.corner_radius_nm, "length")
    if not isinstance(shape, Circle):
        found["rotation"] = format_quantity(shape.rotation_deg, "angle")
    return found


def _of_layer(layer: Layer) -> dict[str, Any]:
    found: dict[str, Any] = {"material": layer.material}
    if layer.thickness_nm is not None:
        found = {"thickness": format_quantity(layer.thickness_nm, "length"), **found}
    if layer.sides:
        found["sides"] = {name: format_quantity(thickness, "length") for name, thickness in layer.sides}
    return found | _of_options(layer)


def _of_patch(patch: Patch, named: NameFile) -> dict[str, Any]:
    found = _of_shape(patch.shape, named) | {"center": [format_quantity(v, "length") for v in patch.center_nm]}
    return found | {"material": patch.material} | _of_options(patch)


def _of_options(part: Layer | Patch | Group) -> dict[str, Any]:
    found = {"carriers": part.carriers, "offset": format_quantity(part.offset_eV, "energy")}
    return found | of_doping(part.doping)


def of_material(material: Material) -> dict[str, Any]:
    """A user's own material under the keys of its table."""
    found: dict[str, Any] = {}
    if material.extends is not None:
        found["extends"] = material.extends
        for key, value in material.changes:
            found[key] = _of_change(key, value)
    else:
        found |= _of_valleys(material.valleys)
        numbers = {
            "conduction_edge": material.conduction_edge_eV,
            "gap": material.gap_eV,
            "permittivity": material.permittivity,
            "electron_affinity": material.electron_affinity_eV,
            "lattice_constant": material.lattice_constant_nm,
            "lattice_constant_c": material.lattice_constant_c_nm,
        }
        found |= {key: _of_change(key, value) for key, value in numbers.items() if value is not None}
        if material.crystal is not None:
            found["crystal"] = material.crystal
    if material.source:
        found["source"] = material.source
    if material.given_in != WIRE_FILE:
        found["given_in"] = material.given_in
    return found


def _of_change(key: str, value: Any) -> Any:
    """One value of a material as it stands in its table."""
    if key == "valleys":
        return [_of_valley(valley) for valley in value]
    if key == "inverse_mass":
        return [list(row) for row in value]
    unit = LIMITS[key][2] if key in LIMITS else ""
    return format_quantity(value, {"eV": "energy", "nm": "length"}[unit]) if unit else value


def _of_valleys(valleys: tuple[Valley, ...]) -> dict[str, Any]:
    only = valleys[0] if len(valleys) == 1 and valleys[0].name == ZONE_CENTRE and valleys[0].axis is None else None
    if only is None:
        return {"valleys": [_of_valley(valley) for valley in valleys]} if valleys else {}
    found: dict[str, Any] = {}
    if only.inverse_mass:
        found["inverse_mass"] = [list(row) for row in only.inverse_mass]
    else:
        found["electron_mass"] = only.longitudinal_mass
    found["valley_degeneracy"] = only.degeneracy
    if only.nonparabolicity_per_eV is not None:
        found["nonparabolicity"] = only.nonparabolicity_per_eV
    return found


def _of_valley(valley: Valley) -> dict[str, Any]:
    found: dict[str, Any] = {"name": valley.name, "edge": format_quantity(valley.height_eV, "energy")}
    if valley.inverse_mass:
        found["inverse_mass"] = [list(row) for row in valley.inverse_mass]
    else:
        found |= {"longitudinal_mass": valley.longitudinal_mass, "transverse_mass": valley.transverse_mass}
    if valley.axis is not None:
        found |= {"axis": list(valley.axis), "zone_boundary": valley.zone_boundary}
    if valley.degeneracy not in (None, 1):
        found["degeneracy"] = valley.degeneracy
    if valley.nonparabolicity_per_eV is not None:
        found["nonparabolicity"] = valley.nonparabolicity_per_eV
    return found


def of_potential(potential: Potential, named: NameFile) -> dict[str, Any]:
    """The parts of a potential that a wire file can hold; empty for a function alone."""
    found: dict[str, Any] = {}
    if potential.field_V_per_nm is not None:
        found["field"] = [format_quantity(v, "electric field") for v in potential.field_V_per_nm]
    if potential.harmonic_eV is not None:
        x, y = potential.harmonic_eV
        found["harmonic"] = {"x": format_quantity(x, "energy"), "y": format_quantity(y, "energy")}
    if (given := potential.file) is not None:
        found |= {"file": named(given.file), "length_unit": given.length_unit, "energy_unit": given.energy_unit}
        found |= {k: v for k, v in (("array", given.array), ("origin", given.origin)) if v is not None}
    return found
