"""The whole problem: one frozen, hashable value that says everything a run depends on."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from wiresolve.describe import checks, crystal, device, input_files, plain, plain_device
from wiresolve.describe.crystal_phase import with_phase_note
from wiresolve.describe.gates import Gate, Surface, Surroundings
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.material import ANY_VALLEY, Material, Valley
from wiresolve.describe.material_changes import resolved
from wiresolve.describe.materials import look_up, table_names, unknown
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.offsets import on_common_scale
from wiresolve.describe.operation import Transport, Voltages
from wiresolve.describe.outline import Outline
from wiresolve.describe.potential import Potential
from wiresolve.describe.section import ADMITTED, VOID, Piece, Section
from wiresolve.describe.setting import setting
from wiresolve.errors import InputError
from wiresolve.units import format_quantity

__all__ = ["Accuracy", "Carriers", "Orientation", "Potential", "Problem"]

MOST_SUBBANDS = 500
MOST_TEMPERATURES = 20
FINEST_ENERGY_eV, COARSEST_ENERGY_eV = 1e-9, 1.0
PARABOLIC, NONPARABOLIC = "parabolic", "nonparabolic"
HARTREE, LOCAL_DENSITY = "hartree", "local density"
_LISTS = {"layer": "layers", "patch": "patches"}
NO_HOLES = "holes cannot be solved yet: their bands mix, and one mass per material would give wrong subbands"


@dataclass(frozen=True)
class Carriers:
    """Which carriers, at which temperatures in K (one or several), and their Fermi level from the energy zero.

    `model` is "nonparabolic" (masses grow with energy wherever it is known how) or "parabolic" (they do not).
    `interaction`: electrons feel their mean field alone ("hartree"), or also exchange and correlation in the local
    density approximation ("local density").
    """

    kind: str = "electrons"
    temperature_K: tuple[float, ...] = field(kw_only=True)
    fermi_level_eV: float | None = None
    model: str = NONPARABOLIC
    interaction: str = HARTREE

    def __post_init__(self) -> None:
        if self.kind == "holes":
            raise InputError("kind", NO_HOLES, remedy='write kind = "electrons"')
        checks.choice("kind", self.kind, ("electrons",))
        checks.choice("model", self.model, (NONPARABOLIC, PARABOLIC))
        checks.choice("interaction", self.interaction, (HARTREE, LOCAL_DENSITY))
        given: Any = self.temperature_K
        row = tuple(given) if isinstance(given, Sequence) and not isinstance(given, str) else (given,)
        if not 1 <= len(row) <= MOST_TEMPERATURES:
            raise InputError("temperature", f"must be one to {MOST_TEMPERATURES} temperatures", f"{len(row)} of them")
        kelvin = tuple(checks.in_range("temperature", t, 0, 2000, "K") for t in row)
        if len(set(kelvin)) != len(kelvin):
            raise InputError("temperature", "the same temperature is given twice", list(kelvin))
        object.__setattr__(self, "temperature_K", kelvin)
        if self.fermi_level_eV is not None:
            level = checks.in_range("fermi_level", self.fermi_level_eV, -100, 100, "eV")
            object.__setattr__(self, "fermi_level_eV", level)


@dataclass(frozen=True)
class Accuracy:
    """How many of the lowest subbands are wanted, and the error in eV that each energy may have."""

    subbands: int = 10
    energy_eV: float = 1e-4

    def __post_init__(self) -> None:
        object.__setattr__(self, "subbands", checks.whole("subbands", self.subbands, 1, MOST_SUBBANDS))
        energy = checks.in_range("energy", self.energy_eV, FINEST_ENERGY_eV, COARSEST_ENERGY_eV, "eV")
        object.__setattr__(self, "energy_eV", energy)


@dataclass(frozen=True)
class Orientation:
    """Crystal directions along the wire (`axis`, z) and along y (`up`), at right angles; x is up x axis.

    Cubic: of the cube's edges. Wurtzite: of the hexagonal lattice, c the third.
    """

    axis: crystal.Direction
    up: crystal.Direction

    def __post_init__(self) -> None:
        object.__setattr__(self, "axis", crystal.direction("axis", self.axis))
        object.__setattr__(self, "up", crystal.direction("up", self.up))


@dataclass(frozen=True)
class Problem:
    """A wire and what is asked of it. `materials` are the user's own; others come from the table by their name.

    Raises `InputError` where a material is unknown, where carriers may be in a material without a mass, or where the
    edges of the materials that admit carriers stand on no common scale.
    """

    title: str
    section: Section
    carriers: Carriers
    accuracy: Accuracy = Accuracy()
    materials: tuple[Material, ...] = ()
    orientation: Orientation | None = None
    potential: Potential | None = None
    gates: tuple[Gate, ...] = ()
    surfaces: tuple[Surface, ...] = ()
    surroundings: Surroundings | None = None
    voltages: Voltages | None = None
    transport: Transport | None = None

    def __post_init__(self) -> None:
        checks.text("title", self.title)
        wanted = {"section": Section, "carriers": Carriers, "accuracy": Accuracy}
        for name, kind in wanted.items():
            if not isinstance(getattr(self, name), kind):
                raise InputError(name, f"must be a {kind.__name__}", getattr(self, name))
        own = tuple(m.as_given() for m in self.materials)
        object.__setattr__(self, "materials", own)
        names = [m.name for m in own]
        for name in names:
            if names.count(name) > 1 or name == VOID:
                raise InputError("materials", "must have names of their own", name)
        gates, surfaces = device.gates_and_surfaces(self.gates, self.surfaces)
        object.__setattr__(self, "gates", gates)
        object.__setattr__(self, "surfaces", surfaces)
        device.check_names(gates, self.surroundings, self.voltages, self.transport)
        self._check_valleys()
        self._check_cover()
        if self.charged:
            self._check_charge()

    def _check_charge(self) -> None:
        """InputError where gates and charge do not fit the section, its materials or the carriers."""
        device.check_states(self.section, self.carriers.fermi_level_eV, self.carriers.temperature_K)
        drawn = setting(self)
        device.check_permittivity(self.resolved_materials())
        for gate in self.gates:
            self.lineup_V(gate)
        device.check_neutral(self.section, self.surfaces, drawn)

    @property
    def charged(self) -> bool:
        """Whether charge moves the states: there is a gate, a surface, a surrounding or a dopant.

        Energies then count from the source's Fermi level.
        """
        around = bool(self.gates or self.surfaces or self.surroundings is not None)
        return around or self.section.doped

    @property
    def fermi_level_eV(self) -> float | None:
        """From the energy zero, which it is itself where charge counts; None where none was given."""
        return 0.0 if self.charged else self.carriers.fermi_level_eV

    def lineup_V(self, gate: Gate) -> float:
        """The gate's voltage in V at which, with no charge anywhere, the band edge lines up with the Fermi level.

        The band edge is that of `edge_zero`. InputError where a work function meets no affinity.
        """
        _, _, name, valley, offset = self._lowest()
        field = f"gates[{self.gates.index(gate) + 1}]" if gate in self.gates else gate.name
        return device.lineup_V(gate, (self.resolved_materials()[name], offset + valley.height_eV), field)

    def at_voltages(self, volts: Mapping[str, float]) -> Problem:
        """The same problem with other voltages in V on the gates named; the sweep is kept."""
        names = [gate.name for gate in self.gates]
        for name in volts:
            if name not in names:
                raise InputError("gates", "there is no gate of this name", name, checks.nearest(name, names))
        gates = tuple(replace(gate, voltage_V=volts.get(gate.name, gate.voltage_V)) for gate in self.gates)
        return replace(self, gates=gates)

    def _check_cover(self) -> None:
        """InputError where a potential's file does not cover the section."""
        if self.potential is not None and self.potential.file is not None:
            try:
                energy = self.potential.file.over(self.section.shape)
                for piece in self.section.pieces():
                    energy(*piece.loop.sample(32 if len(piece.loop.segments) > 4 else 256).T)
            except InputError as error:
                raise error.under("potential") from None

    @property
    def lattice_temperature_K(self) -> float:
        """The section's, or else the first temperature of the carriers."""
        given = self.section.lattice_temperature_K
        return self.carriers.temperature_K[0] if given is None else given

    def resolved_materials(self) -> dict[str, Material]:
        """All materials used, by name, without the void; those that admit carriers have an edge on a common scale.

        A single material that admits carriers needs no edge: it is 0 then.
        """
        own = {m.name: m for m in self.materials}
        section, kelvin = self.section, self.lattice_temperature_K
        if section.groups:
            used = {g.material: f"section.group_materials.{g.name}" for g in reversed(section.groups)}
        else:
            used = {section.material: "section.material"}
        used |= {n: f"section.layers[{k}].material" for k, n in _fresh((p.material for p in section.layers), used)}
        used |= {n: f"section.patches[{k}].material" for k, n in _fresh((p.material for p in section.patches), used)}
        if section.outside is not None:
            used.setdefault(section.outside, "section.outside")
        used |= {n: where for n, where in device.around(self.gates, self.surroundings).items() if n not in used}
        found: dict[str, Material] = {}
        for name, where in used.items():
            if name == VOID:
                continue
            try:
                found[name] = resolved(own[name], kelvin) if name in own else look_up(name, kelvin)
            except InputError as error:
                if error.field == "lattice_temperature":
                    raise error.under("section") from None
                if error.field.startswith("materials."):
                    raise
                if own and name not in table_names() and error.rule.endswith("known material"):
                    error = unknown(name, tuple(own))
                raise InputError(where, error.rule, error.given, error.remedy) from None
        for name in self._admitted():
            if not found[name].valleys:
                rule = "admits carriers, but its material has no mass"
                where = self._place_admitting(name)
                other = 'outside = "hard wall"' if where.endswith("outside") else 'carriers = "excluded" there'
                raise InputError(where, rule, name, f"give it an electron_mass, or write {other}")
        found = on_common_scale(found, self._admitted())
        table = [name for name in found if name not in own]
        return with_phase_note(found, table, section, None if self.orientation is None else self.orientation.axis)

    def _admitted(self) -> list[str]:
        """Names of the materials that admit carriers, from the core outwards."""
        names = [piece.material for piece in self._carrying()]
        names += [material for _, material, _ in self._admitting_insulators()]
        return list(dict.fromkeys(names if self.section.outside is None else [*names, self.section.outside]))

    def _carrying(self) -> list[Piece]:
        """The pieces that admit carriers, from the core outwards, then the patches."""

        def rank(piece: Piece) -> tuple[bool, bool, int]:
            kind, _, number = piece.name.partition(" ")
            layer = int(number) if kind == "layer" and number.isdecimal() else 0
            return kind == "patch", piece.name != "core", layer

        return sorted((piece for piece in self.section.visible() if piece.carriers), key=rank)

    def _admitting_insulators(self) -> list[tuple[str, str, float]]:
        """Insulators that admit carriers: place, material and the shift of its edge in eV."""
        return [
            (f"insulator of {gate.name}", gate.insulator.material, 0.0)
            for gate in self.gates
            if gate.insulator is not None and gate.insulator.carriers == ADMITTED
        ]

    def _place_admitting(self, material: str) -> str:
        """The table or key that puts carriers into a material."""
        section = self.section
        if all(not p.carriers or p.material != material for p in section.visible()):
            for k, gate in enumerate(self.gates, 1):
                if f"insulator of {gate.name}" in [
                    row[0] for row in self._admitting_insulators() if row[1] == material
                ]:
                    return f"gates[{k}].insulator"
        name = next((p.name for p in section.visible() if p.carriers and p.material == material), "outside")
        kind, _, number = name.partition(" ")
        if section.groups and name in [group.name for group in section.groups]:
            return f"section.group_materials.{name}"
        return {"core": "section", "outside": "section.outside"}.get(kind, f"section.{_LISTS.get(kind)}[{number}]")

    def shared_valleys(self) -> tuple[str, ...]:
        """Names of the valleys that every material that admits carriers has.

        A valley named "any" (an insulator's) continues all of its neighbours', and is named only where it is alone.
        """
        materials = self.resolved_materials()
        used = [materials[name] for name in self._admitted()]
        names = dict.fromkeys(v.name for m in used for v in m.valleys)
        shared = tuple(n for n in names if all(m.valley_named(n) is not None for m in used))
        return tuple(n for n in shared if n != ANY_VALLEY) or shared

    def _check_valleys(self) -> None:
        """InputError where no valley is common, or where the crystal's directions in the wire are wanted."""
        materials, shared = self.resolved_materials(), self.shared_valleys()
        used = [materials[name] for name in self._admitted()]
        if not shared:
            each = "; ".join(f"{m.name} has {', '.join(v.name for v in m.valleys)}" for m in used)
            remedy = 'describe one of them under [materials.NAME] with valleys of the same names, or one named "any"'
            raise InputError("section", f"its materials have no valley in common: {each}", remedy=remedy)
        hexagonal = [m for m in used if m.crystal == "wurtzite"]
        valleys = [(m, v) for m in used for name in shared if (v := m.valley_named(name)) is not None]
        cubic = [m for m, v in valleys if v.needs_orientation and m.crystal != "wurtzite"]
        if hexagonal and cubic:
            rule = f"{hexagonal[0].name} is wurtzite and {cubic[0].name} is cubic: one [orientation] cannot place both"
            remedy = "give the valleys of one of them as an inverse_mass, in the wire's frame"
            raise InputError("section", rule, remedy=remedy)
        _, _, name, valley, _ = self._lowest()
        if self.orientation is not None:
            _check_directions(self.orientation, hexagonal)
        elif hexagonal or valley.needs_orientation:
            why = f"the {valley.name} valleys of {name}, its lowest, differ by their direction"
            why = f"{hexagonal[0].name} is wurtzite" if hexagonal else why
            up, axis = ([1, 0, 0], [0, 0, 1]) if hexagonal else ([0, 0, 1], [1, 1, 0])
            remedy = f"write [orientation] with the crystal's directions along the wire and along y: axis = {axis}"
            raise InputError("orientation", f"is missing: {why}", remedy=f"{remedy} and up = {up}, for example")

    def _lowest(self) -> tuple[float, str, str, Valley, float]:
        """The lowest edge over the shared valleys: edge in eV, place, material, valley and the place's offset."""
        materials, section, shared = self.resolved_materials(), self.section, self.shared_valleys()
        places = [(p.name, p.material, p.offset_eV) for p in self._carrying()]
        if section.outside is not None:
            places.append(("outside", section.outside, 0.0))
        places += self._admitting_insulators()
        edges = [
            ((materials[name].conduction_edge_eV or 0.0) + offset + valley.height_eV, place, name, valley, offset)
            for place, name, offset in places
            for valley in materials[name].valleys
            if valley.name in shared or valley.name == ANY_VALLEY
        ]
        return min(edges, key=lambda edge: edge[0])  # of equally low ones the first

    def energy_zero(self) -> tuple[str, float | None]:
        """What energies are counted from, and its value on the scale that the materials share (None: no scale).

        With gates or charge this is the source's Fermi level, which has no place on that scale: the value is that of
        the band edge which lines up with it at the gates' line-up voltages (`edge_zero`).
        """
        text, value = self.edge_zero()
        return (f"Fermi level of the source; at line-up, the {text}" if self.charged else text), value

    def edge_zero(self) -> tuple[str, float | None]:
        """The lowest band edge that carriers meet, and its value on the scale that the materials share."""
        edge, place, name, valley, offset = self._lowest()
        material = self.resolved_materials()[name]
        kind = f"{valley.name} edge" if valley.height_eV else "conduction edge"
        shifted = f", shifted by {offset:g} eV" if offset else ""
        return f"{kind} of {name} ({place}){shifted}", None if material.edge_scale is None else edge

    @property
    def files(self) -> tuple[tuple[str, bytes], ...]:
        """What the problem needs of files: their paths beside the wire file, as `plain` names them, and content."""
        shapes = (self.section.shape, *(patch.shape for patch in self.section.patches))
        found = [shape.file for shape in shapes if isinstance(shape, ImportedMesh | Outline)]
        if self.potential is not None and self.potential.file is not None:
            found.append(self.potential.file.file)
        named = input_files.places(found)
        return tuple((named[file.digest], file.content) for file in dict.fromkeys(found))

    def plain(self, by_content: bool = False) -> dict[str, Any]:
        """The problem in the words of the wire file, defaults filled in, quantities as exact texts.

        `by_content`: with the digests of files in place of their names.
        """
        paths = {hashlib.sha256(content).hexdigest(): path for path, content in self.files}

        def named(file: InputFile) -> str:
            return file.digest if by_content else paths[file.digest]

        found: dict[str, Any] = {"title": self.title}
        found["section"] = plain.of_section(self.section, self.lattice_temperature_K, named)
        if self.orientation is not None:
            found["orientation"] = {"axis": list(self.orientation.axis), "up": list(self.orientation.up)}
        if self.materials:
            found["materials"] = {m.name: plain.of_material(m) for m in self.materials}
        if self.potential is not None and (given := plain.of_potential(self.potential, named)):
            found["potential"] = given
        carriers, accuracy = self.carriers, self.accuracy
        kelvin = [format_quantity(t, "temperature") for t in carriers.temperature_K]
        found["carriers"] = {"kind": carriers.kind, "temperature": kelvin}
        if carriers.fermi_level_eV is not None:
            found["carriers"]["fermi_level"] = format_quantity(carriers.fermi_level_eV, "energy")
        found["carriers"]["model"] = carriers.model
        if carriers.interaction != HARTREE or self.charged:
            found["carriers"]["interaction"] = carriers.interaction
        found["accuracy"] = {"subbands": accuracy.subbands, "energy": format_quantity(accuracy.energy_eV, "energy")}
        found |= plain_device.of_device(self.gates, self.surfaces, self.surroundings, self.voltages, self.transport)
        return found

    @property
    def digest(self) -> str:
        """SHA-256 (hexadecimal) of the resolved input and of the table's values that it uses."""
        own = {m.name for m in self.materials}
        table = {
            name: [[v.quantity, v.value] for v in material.values]
            for name, material in self.resolved_materials().items()
            if name not in own or material.extends
        }
        content: dict[str, Any] = {"input": self.plain(by_content=True), "table": table}
        if self.potential is not None and self.potential.function is not None:
            content["function"] = self.potential.function_digest
        return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _check_directions(given: Orientation, hexagonal: Sequence[Material]) -> None:
    """InputError where the orientation's directions are not at right angles in the wire's crystal."""
    if not hexagonal:
        _under_orientation(given, None, None)
        return
    unknown_c = [m for m in hexagonal if m.c_over_a is None]
    if unknown_c and (crystal.is_slanted(given.axis) or crystal.is_slanted(given.up)):
        missing = "lattice_constant" if unknown_c[0].lattice_constant_nm is None else "lattice_constant_c"
        rule = "is missing: directions that are neither along c nor across it need c/a"
        raise InputError(f"materials.{unknown_c[0].name}.{missing}", rule)
    for material in hexagonal:
        _under_orientation(given, "wurtzite", material.c_over_a)


def _under_orientation(given: Orientation, kind: str | None, c_over_a: float | None) -> None:
    try:
        crystal.orthogonal(given.axis, given.up, kind, c_over_a)
    except InputError as error:
        raise error.under("orientation") from None


def _fresh(names: Any, known: dict[str, str]) -> list[tuple[int, str]]:
    """Names, numbered from 1, that are not known yet; each once."""
    first: dict[str, int] = {}
    for k, name in enumerate(names, 1):
        if name not in known:
            first.setdefault(name, k)
    return [(k, name) for name, k in first.items()]


def require_problem(given: object) -> None:
    """InputError where something else was given in place of a problem: the path of its file, above all."""
    if not isinstance(given, Problem):
        raise InputError("problem", "must be a Problem", given, "wiresolve.load(path) reads one from a wire file")
