"""The cross-section: a core, layers around it, patches over them, and what lies outside."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from wiresolve.describe import checks, contacts
from wiresolve.describe.curves import Loop, Parabolas, Point, Spline
from wiresolve.describe.doping import UNDOPED, Doping
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.shapes import Shape
from wiresolve.errors import InputError

VOID = "void"
"""The material of a hole."""
GAP = "gap"
"""What lies between the faces of an imported mesh: painted as void."""
ADMITTED, EXCLUDED = "admitted", "excluded"
HARD_WALL = "hard wall"
MOST_LAYERS, MOST_PATCHES = 50, 200
THICKEST = 50.0
"""A layer may be this many times as thick as the core is wide."""
FINEST = 1e-5
"""A layer may be this small a part of the section's size; thinner ones could not be meshed."""
LARGEST_OFFSET_eV = 20.0


def _carriers(value: object) -> str:
    return checks.choice("carriers", value, (ADMITTED, EXCLUDED))


def _offset(value: object) -> float:
    return checks.in_range("offset", value, -LARGEST_OFFSET_eV, LARGEST_OFFSET_eV, "eV")


def _doping(value: object, material: str) -> None:
    if not isinstance(value, Doping):
        raise InputError("doping", "must be a Doping", value)
    if value.any and material == VOID:
        raise InputError("donors" if value.donors_per_nm3 else "acceptors", "cannot be in a void")


@dataclass(frozen=True)
class Layer:
    """A shell of constant thickness; `sides` gives edges of a polygon ("bottom", "side 2") a thickness of their own.

    Without a thickness (None) it reaches to the next curve of an imported outline.
    """

    thickness_nm: float | None
    material: str
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    sides: tuple[tuple[str, float], ...] | None = None
    doping: Doping = UNDOPED

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if self.thickness_nm is not None:
            set_(self, "thickness_nm", checks.length("thickness", self.thickness_nm, checks.THINNEST_nm))
        elif self.sides is not None:
            raise InputError("sides", "needs a thickness for the other sides", remedy='write e.g. thickness = "5 nm"')
        set_(self, "material", checks.text("material", self.material, 60))
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))
        _doping(self.doping, self.material)
        if self.sides is not None:
            coats = []
            for name, value in self.sides.items() if isinstance(self.sides, Mapping) else self.sides:
                coat = checks.finite(f"sides.{name}", value)
                if coat != 0:
                    coat = checks.length(f"sides.{name}", coat, checks.THINNEST_nm)
                coats.append((name, coat))
            set_(self, "sides", tuple(coats) or None)

    def coats(self, shape: Shape) -> dict[str, float]:
        """Thickness in nm of each numbered side that `sides` names, for a core of this shape."""
        found: dict[str, float] = {}
        by: dict[str, str] = {}
        for name, thickness in self.sides or ():
            for side in shape.sides_of(name):
                if found.get(side, thickness) != thickness:
                    raise InputError("sides", f"'{by[side]}' and '{name}' give {side} two thicknesses")
                found[side], by[side] = thickness, name
        return found


@dataclass(frozen=True)
class Patch:
    """A shape painted over what is there, its centroid at `center_nm` (from the core's centroid)."""

    shape: Shape
    material: str
    center_nm: Point = (0.0, 0.0)
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    doping: Doping = UNDOPED

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if not isinstance(self.shape, Shape):
            raise InputError("shape", "must be a shape such as Circle(diameter_nm=10)", self.shape)
        set_(self, "material", checks.text("material", self.material, 60))
        try:
            x, y = self.center_nm
        except (TypeError, ValueError):
            raise InputError("center", "must be two lengths", self.center_nm) from None
        far = checks.LONGEST_nm
        set_(self, "center_nm", tuple(checks.in_range("center", v, -far, far, "nm") for v in (x, y)))
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))
        _doping(self.doping, self.material)


@dataclass(frozen=True)
class Group:
    """What a named group of an imported mesh's cells is made of ("void": a hole)."""

    name: str
    material: str
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    doping: Doping = UNDOPED

    def __post_init__(self) -> None:
        checks.text("group", self.name, 60)
        checks.text("material", self.material, 60)
        _carriers(self.carriers)
        object.__setattr__(self, "offset_eV", _offset(self.offset_eV))
        _doping(self.doping, self.material)


@dataclass(frozen=True)
class Piece:
    """One painted region: its outline, what it is made of, whether carriers may be in it, and its edge's shift.

    Pieces of an imported mesh are faces that share their curves: they know the `holes` that others fill or nothing
    does. Several of them may have one name: they are parts of one group.
    """

    name: str
    loop: Loop
    material: str
    carriers: bool
    offset_eV: float
    holes: tuple[Loop, ...] | None = None


@dataclass(frozen=True)
class Section:
    """A cross-section, from the core's shape outwards.

    `layers` go outwards; `patches` are painted in their order. `outside` is None for a hard wall around everything, or
    a material that goes on. `carriers`, `offset_eV` and `doping` are the core's. An imported mesh has `groups` in place
    of these and of `material` (which then is that of its largest group). Raises `InputError` where parts do not fit.
    """

    shape: Shape
    material: str = ""
    layers: tuple[Layer, ...] = ()
    patches: tuple[Patch, ...] = ()
    outside: str | None = None
    carriers: str = ADMITTED
    offset_eV: float = 0.0
    lattice_temperature_K: float | None = None
    groups: tuple[Group, ...] = ()
    doping: Doping = UNDOPED

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if not isinstance(self.shape, Shape):
            raise InputError("shape", "must be a shape such as Circle(diameter_nm=10)", self.shape)
        if isinstance(self.shape, ImportedMesh):
            self._check_groups(self.shape)
        elif self.groups:
            raise InputError("group_materials", f"belongs to a mesh, and a {self.shape.kind} has no groups")
        set_(self, "material", checks.text("material", self.material, 60))
        for name, kind in (("layers", Layer), ("patches", Patch)):
            given = getattr(self, name)
            if not isinstance(given, Sequence) or not all(isinstance(part, kind) for part in given):
                raise InputError(name, f"must be a list of {kind.__name__}", given)
            set_(self, name, tuple(given))
        _doping(self.doping, self.material)
        if len(self.layers) > MOST_LAYERS:
            raise InputError("layers", f"a section can have at most {MOST_LAYERS} layers", f"{len(self.layers)} layers")
        if len(self.patches) > MOST_PATCHES:
            raise InputError("patches", f"a section can have at most {MOST_PATCHES} patches", f"{len(self.patches)}")
        _carriers(self.carriers)
        set_(self, "offset_eV", _offset(self.offset_eV))
        if self.outside == HARD_WALL:
            set_(self, "outside", None)
        if self.outside is not None:
            checks.text("outside", self.outside, 60)
            if self.outside == VOID:
                raise InputError("outside", "nothing outside is a hard wall", VOID, f'write outside = "{HARD_WALL}"')
        if self.lattice_temperature_K is not None:
            kelvin = checks.in_range("lattice_temperature", self.lattice_temperature_K, 0, 2000, "K")
            set_(self, "lattice_temperature_K", kelvin)
        pieces = self.pieces()
        xs, ys = np.vstack([piece.loop.sample(8) for piece in pieces]).T
        size = float(max(np.ptp(xs), np.ptp(ys)))
        for k, layer in enumerate(self.layers, 1):
            thin = min([t for _, t in (("", layer.thickness_nm), *(layer.sides or ())) if t], default=size)
            if thin < FINEST * size:
                rule = f"is too thin for a section {size:.3g} nm wide"
                raise InputError(f"layers[{k}].thickness", rule, f"{thin:g} nm", f"at least {FINEST * size:.2g} nm")
        self._check_contacts(pieces)
        if not any(piece.carriers for piece in pieces):
            rule = "nothing is left for carriers: every part is void or keeps them out"
            raise InputError("material", rule, remedy="admit carriers in the core, a layer or a patch")
        if not any(piece.carriers for piece in self.visible()):
            rule = "the patches leave nothing for carriers"
            raise InputError("patches", rule, remedy="make them smaller, or admit carriers in one of them")

    def _check_contacts(self, pieces: tuple[Piece, ...]) -> None:
        """InputError for a patch whose outline touches another one without crossing it."""
        begin = len(pieces) - len(self.patches)
        if (hit := contacts.first([piece.loop for piece in pieces], max(begin, 1))) is not None:
            one, other, (x, y) = hit
            k = other - begin + 1
            rule = f"its outline touches that of {pieces[one].name} without crossing it, at ({x:.4g}, {y:.4g}) nm"
            raise InputError(f"patches[{k}]", rule, remedy="move it or change its size by a thousandth of a nm or more")

    def _check_groups(self, mesh: ImportedMesh) -> None:
        """InputError unless each group of the mesh has a material; sets `material`."""
        set_, given, field = object.__setattr__, tuple(self.groups), "group_materials"
        if not all(isinstance(group, Group) for group in given):
            raise InputError("groups", "must be a list of Group", self.groups)
        set_(self, "groups", given)
        by_name = {group.name: group for group in given}
        if len(by_name) < len(given):
            raise InputError(field, "names a group twice")
        for name in by_name:
            if name not in mesh.group_names:
                remedy = checks.nearest(name, mesh.group_names) or f"it has {_named(mesh.group_names)}"
                raise InputError(f"{field}.{name}", "the mesh has no cells in a group of this name", remedy=remedy)
        if missing := [name for name in mesh.group_names if name not in by_name]:
            remedy = f'write "{missing[0]}" = "MATERIAL" there ("void" for a hole)'
            raise InputError(field, f"gives no material to {mesh.listed(missing)}", remedy=remedy)
        taken = {f"layer {k}" for k in range(1, len(self.layers) + 1)} | ({"outside"} if self.outside else set())
        taken |= {f"patch {k}" for k in range(1, len(self.patches) + 1)}
        for name in mesh.group_names:
            if name in taken:
                raise InputError(field, "a group is named like a part of the section", name, "rename the group")
        if self.carriers != ADMITTED or self.offset_eV != 0:
            key = "carriers" if self.carriers != ADMITTED else "offset"
            raise InputError(key, "of a mesh is given group by group", remedy="write it in group_materials")
        if self.doping != UNDOPED:
            raise InputError("donors", "of a mesh are given group by group", remedy="write them in group_materials")
        largest = max(
            (g for g in given if g.material != VOID),
            key=lambda g: (g.carriers == ADMITTED, sum(f.area_nm2 for f in mesh.faces() if f.group == g.name)),
            default=None,
        )
        set_(self, "material", VOID if largest is None else largest.material)

    def _repr_html_(self) -> str:
        from wiresolve.describe.section_picture import svg

        return svg(self.visible(), self.outside)

    def pieces(self) -> tuple[Piece, ...]:
        """What is painted, later over earlier: the outermost layer first, inwards to the core, then the patches."""
        return self._pieces

    @cached_property
    def _pieces(self) -> tuple[Piece, ...]:
        painted = self._core()
        widest = float(np.max(np.ptp(painted[0].loop.sample(8), axis=0))) if self.layers else 0.0
        curves = self.shape.curve_count if isinstance(self.shape, Outline) else 1
        through, coats = 0.0, {side: 0.0 for side in self.shape.edge_names() if side.startswith("side ")}
        single, curve = False, 0
        self._check_curves(curves)
        for k, layer in enumerate(self.layers, 1):
            try:
                if layer.thickness_nm is None:
                    curve, through = curve + 1, 0.0
                    if curve >= curves:
                        rule = "is missing" if curves == 1 else f"is missing: the outline has only {curves} curves"
                        raise InputError("thickness", rule, remedy='write e.g. thickness = "5 nm"')
                    assert isinstance(self.shape, Outline)
                    loop = self.shape.curve(curve)
                else:
                    if layer.thickness_nm > THICKEST * widest:
                        rule = f"is more than {THICKEST:g} times the core's size"
                        given = f"{layer.thickness_nm:g} nm"
                        raise InputError("thickness", rule, given, "a thinner layer confines just as well")
                    through += layer.thickness_nm
                    own = layer.coats(self.shape)
                    if own and coats and not any(own.get(side, layer.thickness_nm) for side in coats):
                        raise InputError("sides", "leaves no thickness on any side")
                    single = single or bool(layer.sides)
                    coats = {side: done + own.get(side, layer.thickness_nm) for side, done in coats.items()}
                    if isinstance(self.shape, Outline):
                        loop = self.shape.grown_from(curve, through)
                        if curve + 1 < curves and any(later.thickness_nm is None for later in self.layers[k:]):
                            rule = "is given between curves of the outline, whose layers have none"
                            raise InputError("thickness", rule, remedy="leave it out, or draw all curves")
                    else:
                        loop = self.shape.coated(through, coats if single else {})
            except InputError as error:
                raise error.under(f"layers[{k}]") from None
            admits = self._admits(layer.material, layer.carriers)
            painted.insert(0, Piece(f"layer {k}", loop, layer.material, admits, layer.offset_eV))
        for k, patch in enumerate(self.patches, 1):
            admits = self._admits(patch.material, patch.carriers)
            loop = patch.shape.loop().moved(*patch.center_nm)
            painted.append(Piece(f"patch {k}", loop, patch.material, admits, patch.offset_eV))
        return tuple(painted)

    def _check_curves(self, curves: int) -> None:
        """InputError where the outline has a curve that no layer uses."""
        using, wanted = sum(layer.thickness_nm is None for layer in self.layers), curves - 1
        if using >= wanted:
            return
        one = "1 layer without a thickness is" if wanted == 1 else f"{wanted} layers without a thickness are"
        rule = f"the outline has {curves} curves, and {one} wanted, one for each shell: a curve is not used"
        for k, layer in enumerate(self.layers, 1):
            if layer.thickness_nm is not None:
                remedy = "leave the thickness out: the layer then reaches to the file's next curve"
                raise InputError(f"layers[{k}].thickness", rule, f"{layer.thickness_nm:g} nm", remedy)
        remedy = (
            'write [[section.layers]] with a material for each shell, or "void", or leave the curve out of the file'
        )
        raise InputError("layers", rule, f"{using or 'none'} of them", remedy)

    def _core(self) -> list[Piece]:
        """The core as one piece, or the faces of a mesh and the gaps between them, larger outlines first."""
        if not isinstance(self.shape, ImportedMesh):
            admits = self._admits(self.material, self.carriers)
            return [Piece("core", self.shape.loop(), self.material, admits, self.offset_eV)]
        by_name = {group.name: group for group in self.groups}
        painted = [Piece(GAP, loop, VOID, False, 0.0, ()) for loop in self.shape.map.gaps]
        for face in self.shape.faces():
            group = by_name[face.group]
            admits = self._admits(group.material, group.carriers)
            painted.append(Piece(face.group, face.outer, group.material, admits, group.offset_eV, face.holes))
        return sorted(painted, key=lambda piece: -piece.loop.area)

    @staticmethod
    def _admits(material: str, carriers: str) -> bool:
        return material != VOID and carriers == ADMITTED

    def visible(self) -> tuple[Piece, ...]:
        """The pieces of which the later ones leave something (judged at points along all outlines)."""
        return self._visible

    @cached_property
    def _visible(self) -> tuple[Piece, ...]:
        pieces = self.pieces()
        if not self.patches:
            return pieces
        size = float(np.ptp(np.vstack([p.loop.sample(8) for p in pieces]), axis=0).max())
        probes = np.vstack([_beside(piece.loop, 1e-6 * size) for piece in pieces])
        seen, free = [], np.ones(len(probes), dtype=bool)
        for piece in reversed(pieces):
            inside = piece.loop.contains(probes)
            if (inside & free).any():
                seen.append(piece)
            free &= ~inside
        return tuple(reversed(seen))

    def doping_of(self, piece: str) -> Doping:
        """The doping of a piece by its name: "core", "layer 2", "patch 1" or a mesh's group; none for other names."""
        for group in self.groups:
            if group.name == piece:
                return group.doping
        kind, _, number = piece.partition(" ")
        rows: dict[str, Sequence[Layer | Patch]] = {"layer": self.layers, "patch": self.patches}
        if kind in rows and number.isdecimal() and 1 <= int(number) <= len(rows[kind]):
            return rows[kind][int(number) - 1].doping
        return self.doping if piece == "core" else UNDOPED

    @property
    def doped(self) -> bool:
        """Whether any part holds donors or acceptors."""
        parts: tuple[Layer | Patch | Group, ...] = (*self.layers, *self.patches, *self.groups)
        return self.doping.any or any(part.doping.any for part in parts)

    @property
    def outermost(self) -> str:
        """Name of the outermost layer: "outside" where a material goes on, else the last layer, else "core".

        Of an imported mesh the group with the longest part of the outer boundary stands for the core.
        """
        if self.outside is not None:
            return "outside"
        if isinstance(self.shape, ImportedMesh) and not self.layers:
            return self.shape.outermost_group
        return f"layer {len(self.layers)}" if self.layers else "core"


def _named(names: Sequence[str]) -> str:
    """The first few names, in quotes."""
    return ", ".join(f"'{name}'" for name in names[:8]) + (", ..." if len(names) > 8 else "")


def _beside(loop: Loop, distance: float) -> np.ndarray:
    """Points close to both sides of an outline, denser towards the ends of its segments, where pockets are left."""
    rows, ends = [], np.array([1e-5, 1e-4, 1e-3, 1e-2])
    for segment in loop.segments:
        whole = isinstance(segment, Spline | Parabolas) or len(loop.segments) < 3
        count = 64 if whole else 16
        t = np.concatenate([(np.arange(count) + 0.5) / count, ends, 1 - ends])
        points, along = segment.point(t), segment.tangent(t)
        outward = np.column_stack([along[:, 1], -along[:, 0]]) / np.hypot(*along.T)[:, None]
        rows += [points - distance * outward, points + distance * outward]
    return np.vstack(rows)
