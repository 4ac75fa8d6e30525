"""The parts of a problem as plain nested data in the words of the wire file, for its text and its digest."""

from __future__ import annotations

from typing import Any

from wiresolve.describe.materials import Material
from wiresolve.describe.potential import Potential
from wiresolve.describe.section import HARD_WALL, Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Cornered, Polygon, Shape
from wiresolve.units import format_quantity

LENGTH_KEYS = {
    "circle": ("diameter",),
    "ellipse": ("width", "height"),
    "rectangle": ("width", "height"),
    "hexagon": ("across_flats", "across_corners"),
    "triangle": ("side", "base", "height"),
    "trapezoid": ("bottom", "top", "height"),
    "polygon": (),
}
"""The lengths by which each shape is given."""


def of_section(section: Section, lattice_temperature_K: float) -> dict[str, Any]:
    """A section as nested dicts, lists, texts and numbers; quantities as exact texts with the internal unit."""
    found = _of_shape(section.shape) | {"material": section.material, "outside": section.outside or HARD_WALL}
    found |= {"carriers": section.carriers, "offset": format_quantity(section.offset_eV, "energy")}
    found["lattice_temperature"] = format_quantity(lattice_temperature_K, "temperature")
    if section.layers:
        found["layers"] = [_of_layer(layer) for layer in section.layers]
    if section.patches:
        found["patches"] = [_of_patch(patch) for patch in section.patches]
    return found


def _of_shape(shape: Shape) -> dict[str, Any]:
    found: dict[str, Any] = {"shape": shape.kind}
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
    found: dict[str, Any] = {"thickness": format_quantity(layer.thickness_nm, "length"), "material": layer.material}
    if layer.sides:
        found["sides"] = {name: format_quantity(thickness, "length") for name, thickness in layer.sides}
    return found | _of_options(layer)


def _of_patch(patch: Patch) -> dict[str, Any]:
    found = _of_shape(patch.shape) | {"center": [format_quantity(v, "length") for v in patch.center_nm]}
    return found | {"material": patch.material} | _of_options(patch)


def _of_options(part: Layer | Patch) -> dict[str, Any]:
    return {"carriers": part.carriers, "offset": format_quantity(part.offset_eV, "energy")}


def of_material(material: Material) -> dict[str, Any]:
    """A user's own material under the keys of its table."""
    found: dict[str, Any] = {}
    mass = material.electron_mass
    if mass is not None and 1 / mass == material.inverse_mass[0][0]:
        found["electron_mass"] = mass
    elif material.inverse_mass:
        found["inverse_mass"] = [list(row) for row in material.inverse_mass]
    if material.conduction_edge_eV is not None:
        found["conduction_edge"] = format_quantity(material.conduction_edge_eV, "energy")
    if material.permittivity is not None:
        found["permittivity"] = material.permittivity
    if material.electron_affinity_eV is not None:
        found["electron_affinity"] = format_quantity(material.electron_affinity_eV, "energy")
    found["valley_degeneracy"] = material.valley_degeneracy
    if material.source:
        found["source"] = material.source
    return found


def of_potential(potential: Potential) -> dict[str, Any]:
    """The parts of a potential that a wire file can hold; empty for a function alone."""
    found: dict[str, Any] = {}
    if potential.field_V_per_nm is not None:
        found["field"] = [format_quantity(v, "electric field") for v in potential.field_V_per_nm]
    if potential.harmonic_eV is not None:
        x, y = potential.harmonic_eV
        found["harmonic"] = {"x": format_quantity(x, "energy"), "y": format_quantity(y, "energy")}
    return found
