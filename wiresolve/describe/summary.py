"""What a problem was understood to be, as rows of a key and a text with units."""

from __future__ import annotations

import math

from wiresolve.describe import device_summary, drawing
from wiresolve.describe.material import Material
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline, near_symmetry
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import ADMITTED, VOID, Piece, Section
from wiresolve.describe.setting import setting
from wiresolve.describe.shapes import Cornered, Polygon, Shape
from wiresolve.describe.symmetry import described, symmetries
from wiresolve.units import KB, format_quantity

MOST_CORNERS = 12
"""Different angles of corners that are listed one by one."""


def describe(problem: Problem) -> list[tuple[str, str]]:
    """Rows (key, text with units) of everything that a run would use, defaults and table values included."""
    section, carriers, accuracy = problem.section, problem.carriers, problem.accuracy
    pieces = section.pieces()
    by_name = {piece.name: piece for piece in pieces}
    rows = [("title", problem.title), ("section.shape", _shape(section.shape))]
    rows += _whole(section)
    loop = section.shape.loop()
    part = "section.outline" if section.groups else "section.core"
    rows.append((f"{part}.area", _area(loop.area)))
    rows.append((f"{part}.perimeter", _nm(loop.perimeter)))
    rows.append((f"{part}.smallest_feature", _nm(section.shape.smallest_feature_nm)))
    corners = sorted({round(math.degrees(angle), 1) for _, angle in loop.corners()})
    if 0 < len(corners) <= MOST_CORNERS:
        rows.append((f"{part}.corners", ", ".join(f"{angle:g}" for angle in corners) + " deg inside"))
    elif corners:
        rows.append((f"{part}.corners", f"{len(loop.corners())}, {corners[0]:g} to {corners[-1]:g} deg inside"))
    if section.shape.kind in ("outline", "mesh") and (nearly := near_symmetry(loop)) is not None:
        rows.append((f"{part}.near_symmetry", nearly))
    rows += (
        _of_mesh(section)
        if isinstance(section.shape, ImportedMesh)
        else [("section.core", _piece(by_name["core"], section))]
    )
    for k, layer in enumerate(section.layers, 1):
        sides = "".join(f", {_nm(t)} on '{edge}'" for edge, t in layer.sides or ())
        thick = "to the next curve" if layer.thickness_nm is None else _nm(layer.thickness_nm)
        rows.append((f"section.layers[{k}]", f"{thick}{sides} of {_piece(by_name[f'layer {k}'], section)}"))
    for k, patch in enumerate(section.patches, 1):
        at = " and ".join(_nm(v) for v in patch.center_nm)
        rows.append(
            (f"section.patches[{k}]", f"{_shape(patch.shape)} at {at}, {_piece(by_name[f'patch {k}'], section)}")
        )
    rows.append(("section.outside", f"{section.outside}, carriers admitted" if section.outside else "hard wall"))
    around = setting(problem) if problem.charged else None
    rows.append(("section.symmetry", described(symmetries(section, problem.potential, around))))
    rows.append(("section.lattice_temperature", f"{problem.lattice_temperature_K:g} K"))
    if problem.orientation is not None:
        axis, up = (" ".join(str(v) for v in d) for d in (problem.orientation.axis, problem.orientation.up))
        rows += [("orientation.axis", axis), ("orientation.up", up)]
    potential = problem.potential
    if potential is not None and potential.field_V_per_nm is not None:
        rows.append(("potential.field", " and ".join(f"{v:g} V/nm" for v in potential.field_V_per_nm)))
    if potential is not None and potential.harmonic_eV is not None:
        rows.append(("potential.harmonic", " and ".join(_meV(v) for v in potential.harmonic_eV)))
    if potential is not None and (given := potential.file) is not None:
        error = f", between its points known to {_meV(given.error_eV)}"
        frame = f", origin of the {given.origin}" if given.origin else ""
        rows.append(("potential.file", f"{given.file.name}, {given.length_unit} and {given.energy_unit}{frame}{error}"))
    if potential is not None and potential.function is not None:
        rows.append(("potential.function", potential.name or getattr(potential.function, "__name__", "a function")))
    rows.append(("carriers.kind", carriers.kind))
    hot = ", ".join(f"{t:g} K (kT = {KB * t * 1e3:.4g} meV)" for t in carriers.temperature_K)
    rows.append(("carriers.temperature", hot))
    if carriers.fermi_level_eV is not None:
        rows.append(("carriers.fermi_level", _meV(carriers.fermi_level_eV)))
    rows += device_summary.rows(problem)
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
        if thickness
    ]
    if coats:
        thin, k = min(coats)
        rows.append(("section.thinnest_layer", f"{_nm(thin)} (layer {k})"))
    return rows


def _of_mesh(section: Section) -> list[tuple[str, str]]:
    """The groups of an imported mesh: their parts, where they are, what they are made of."""
    assert isinstance(section.shape, ImportedMesh)
    pieces = {piece.name: piece for piece in section.pieces()}
    rows = []
    if (array := section.shape.region_array) is not None:
        rows.append(("section.array", array if section.shape.array else f"{array}, chosen as it tells the regions"))
    for name in section.shape.group_names:
        faces = [face for face in section.shape.faces() if face.group == name]
        parts = f"{len(faces)} parts, " if len(faces) > 1 else ""
        x, y = faces[0].centroid
        place = f"{parts}{sum(face.area_nm2 for face in faces):.6g} nm^2"
        place += f" around {round(x, 6) + 0:g} and {round(y, 6) + 0:g} nm"
        rows.append((f"section.group_materials.{name}", f"{_piece(pieces[name], section)}; {place}"))
    rows.append(("section.edges", ", ".join(section.shape.edge_names())))
    if (note := section.shape.geometry_note) is not None:
        rows.append(("section.geometry", note))
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
    if isinstance(shape, ImportedMesh):
        words.append(f"{shape.file.name} in {shape.unit}")
    if isinstance(shape, Outline):
        curves = f"{shape.curve_count} curves" if shape.curve_count > 1 else "one curve"
        pixel = f"smoothed over pixels of {_nm(shape.pixel_nm)}" if shape.pixel_nm else "corners kept"
        words.append(f"{shape.file.name}, {curves}, one unit {_nm(shape.scale_nm)}, {pixel}")
        words += ["y turned over"] if shape.y_down else []
    if isinstance(shape, Polygon):
        words.append(f"{len(shape.points_nm)} points")
    if isinstance(shape, Cornered) and shape.corner_radius_nm:
        words.append(f"corner_radius {_nm(shape.corner_radius_nm)}")
    if shape.rotation_deg:
        words.append(f"rotation {shape.rotation_deg:g} deg")
    return f"{shape.kind}, " + ", ".join(words)


def _piece(piece: Piece, section: Section) -> str:
    if piece.material == VOID:
        return "void"
    offset = f", edge shifted by {_meV(piece.offset_eV)}" if piece.offset_eV else ""
    dopants = device_summary.doped(section.doping_of(piece.name))
    return f"{piece.material}, carriers {ADMITTED if piece.carriers else 'excluded'}{offset}{dopants}"


def _material(material: Material) -> list[tuple[str, str]]:
    rows = []
    if material.extends is None and material.valleys:
        each = ", ".join(f"{v.name} at {_meV(v.height_eV)}" for v in material.valleys)
        rows.append((f"materials.{material.name}.valleys", f"{each} above its conduction edge"))
    for v in material.values:
        cold = f" at {v.temperature_K:g} K" if v.temperature_K is not None else ""
        spread = f", {v.low:.6g} to {v.high:.6g}" if v.low is not None and v.high is not None and v.low < v.high else ""
        standing = "" if v.provenance == "given" else f"{v.standing}: "
        text = f"{v.value:.6g} {v.unit}".rstrip() + f"{cold}{spread} ({standing}{v.source})"
        rows.append((f"materials.{material.name}.{v.quantity}", text))
    return rows
