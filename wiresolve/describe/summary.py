"""What a problem was understood to be, as rows of a key and a text with units."""

from __future__ import annotations

import math

from wiresolve.describe import drawing
from wiresolve.describe.materials import Material
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import ADMITTED, VOID, Piece, Section
from wiresolve.describe.shapes import Cornered, Polygon, Shape
from wiresolve.units import KB, format_quantity


def describe(problem: Problem) -> list[tuple[str, str]]:
    """Rows (key, text with units) of everything that a run would use, defaults and table values included."""
    section, carriers, accuracy = problem.section, problem.carriers, problem.accuracy
    pieces = section.pieces()
    by_name = {piece.name: piece for piece in pieces}
    rows = [("title", problem.title), ("section.shape", _shape(section.shape))]
    rows += _whole(section)
    loop = section.shape.loop()
    rows.append(("section.core.area", _area(loop.area)))
    rows.append(("section.core.perimeter", _nm(loop.perimeter)))
    rows.append(("section.core.smallest_feature", _nm(section.shape.smallest_feature_nm)))
    corners = sorted({round(math.degrees(angle), 1) for _, angle in loop.corners()})
    if corners:
        rows.append(("section.core.corners", ", ".join(f"{angle:g}" for angle in corners) + " deg inside"))
    rows.append(("section.core", _piece(by_name["core"])))
    for k, layer in enumerate(section.layers, 1):
        sides = "".join(f", {_nm(t)} on '{edge}'" for edge, t in layer.sides or ())
        rows.append((f"section.layers[{k}]", f"{_nm(layer.thickness_nm)}{sides} of {_piece(by_name[f'layer {k}'])}"))
    for k, patch in enumerate(section.patches, 1):
        at = " and ".join(_nm(v) for v in patch.center_nm)
        rows.append((f"section.patches[{k}]", f"{_shape(patch.shape)} at {at}, {_piece(by_name[f'patch {k}'])}"))
    rows.append(("section.outside", f"{section.outside}, carriers admitted" if section.outside else "hard wall"))
    rows.append(("section.lattice_temperature", f"{problem.lattice_temperature_K:g} K"))
    if problem.orientation is not None:
        axis, up = (" ".join(str(v) for v in d) for d in (problem.orientation.axis, problem.orientation.up))
        rows += [("orientation.axis", axis), ("orientation.up", up)]
    potential = problem.potential
    if potential is not None and potential.field_V_per_nm is not None:
        rows.append(("potential.field", " and ".join(f"{v:g} V/nm" for v in potential.field_V_per_nm)))
    if potential is not None and potential.harmonic_eV is not None:
        rows.append(("potential.harmonic", " and ".join(_meV(v) for v in potential.harmonic_eV)))
    if potential is not None and potential.function is not None:
        rows.append(("potential.function", potential.name or getattr(potential.function, "__name__", "a function")))
    rows.append(("carriers.kind", carriers.kind))
    hot = ", ".join(f"{t:g} K (kT = {KB * t * 1e3:.4g} meV)" for t in carriers.temperature_K)
    rows.append(("carriers.temperature", hot))
    if carriers.fermi_level_eV is not None:
        rows.append(("carriers.fermi_level", _meV(carriers.fermi_level_eV)))
    rows += [("accuracy.subbands", str(accuracy.subbands)), ("accuracy.energy", _meV(accuracy.energy_eV))]
    text, value = problem.energy_zero()
    rows.append(("energy_zero", text if value is None else f"{text}, at {value:.6g} eV on the common scale"))
    for material in problem.resolved_materials().values():
        rows += _material(material)
    return rows


def _whole(section: Section) -> list[tuple[str, str]]:
    """What the core, the layers and the patches are together."""
    pieces = section.pieces()
    width, height = drawing.reach(pieces)
    holes = ", holes included" if any(piece.material == VOID for piece in section.visible()) else ""
    rows = [("section.size", f"{_nm(width)} wide, {_nm(height)} high")]
    rows.append(("section.area", _area(drawing.area(pieces)) + holes))
    coats = [
        (thickness, k)
        for k, layer in enumerate(section.layers, 1)
        for thickness in (layer.thickness_nm, *(t for _, t in layer.sides or ()))
        if thickness > 0
    ]
    if coats:
        thin, k = min(coats)
        rows.append(("section.thinnest_layer", f"{_nm(thin)} (layer {k})"))
    return rows


def _area(value: float) -> str:
    return f"{value:.6g} nm^2, as a circle of {2 * math.sqrt(value / math.pi):.6g} nm diameter"


def _nm(value: float) -> str:
    return format_quantity(value, "length", digits=6)


def _meV(value: float) -> str:
    return format_quantity(value, "energy", "meV", 6)


def _shape(shape: Shape) -> str:
    parts = [(key, getattr(shape, f"{key}_nm")) for key in LENGTH_KEYS[shape.kind]]
    words = [f"{key} {_nm(value)}" for key, value in parts if value is not None]
    if isinstance(shape, Polygon):
        words.append(f"{len(shape.points_nm)} points")
    if isinstance(shape, Cornered) and shape.corner_radius_nm:
        words.append(f"corner_radius {_nm(shape.corner_radius_nm)}")
    if shape.rotation_deg:
        words.append(f"rotation {shape.rotation_deg:g} deg")
    return f"{shape.kind}, " + ", ".join(words)


def _piece(piece: Piece) -> str:
    if piece.material == VOID:
        return "void"
    offset = f", edge shifted by {_meV(piece.offset_eV)}" if piece.offset_eV else ""
    return f"{piece.material}, carriers {ADMITTED if piece.carriers else 'excluded'}{offset}"


def _material(material: Material) -> list[tuple[str, str]]:
    rows = []
    for v in material.values:
        sure = "checked" if v.checked else "not checked"
        cold = f" at {v.temperature_K:g} K" if v.temperature_K is not None else ""
        rows.append(
            (
                f"materials.{material.name}.{v.quantity}",
                f"{v.value:.6g} {v.unit}".rstrip() + f"{cold} ({sure}: {v.source})",
            )
        )
    return rows
